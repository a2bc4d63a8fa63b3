//! Tables that keep within a width.

use crate::show;

/// A table, its first row the heading; or, where that is wider than `width`, a short paragraph a
/// row, in which each cell stands behind its heading.
pub(crate) fn fitted(rows: &[Vec<String>], width: Option<usize>) -> String {
    let table = show::table(rows);
    match width {
        Some(width) if table.lines().any(|line| line.chars().count() > width) => {
            paragraphs(rows, width)
        }
        _ => table,
    }
}

fn paragraphs(rows: &[Vec<String>], width: usize) -> String {
    let Some((heading, rows)) = rows.split_first() else {
        return String::new();
    };
    let mut text = String::new();
    for row in rows {
        let named = heading.iter().zip(row).skip(1);
        let items = named
            .filter(|(_, cell)| !cell.is_empty())
            .map(|(name, cell)| format!("{name} {cell}"));
        let first = row.first().map_or("", String::as_str);
        text += &format!("  {first}\n");
        let mut line = String::new();
        for item in items {
            let used = line.chars().count();
            if used > 0 && used + 3 + item.chars().count() > width {
                text += &line;
                text.push('\n');
                line.clear();
            }
            line += if line.is_empty() { "    " } else { "   " };
            line += &item;
        }
        text += &line;
        text.push('\n');
    }
    text
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_table_too_wide_becomes_a_paragraph_a_row() {
        let row = |cells: [&str; 4]| cells.map(str::to_owned).to_vec();
        let rows = [
            row(["crossing", "from", "runs", "state"]),
            row(["hall-to-van", "hall", "1031/1030", "holding"]),
            row(["film", "projector", "", "waiting"]),
        ];
        let table = fitted(&rows, None);
        assert_eq!(table, fitted(&rows, Some(80)));
        assert!(table.starts_with("  crossing      from        runs        state\n"));
        assert_eq!(
            fitted(&rows, Some(40)),
            "  hall-to-van\n    from hall   runs 1031/1030\n    state holding\n\
             \x20 film\n    from projector   state waiting\n"
        );
    }
}
