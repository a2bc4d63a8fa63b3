//! The terminal: how wide it is, and text that keeps within it.

use console::Term;

/// Narrower than this nothing is folded any more.
const NARROWEST: usize = 40;
/// A label ends before this column, or it is none.
const LABEL: usize = 24;

/// Columns of the terminal that standard output is; `None` if it is none.
pub(crate) fn width() -> Option<usize> {
    columns(&Term::stdout())
}

/// The same of standard error.
pub(crate) fn error_width() -> Option<usize> {
    columns(&Term::stderr())
}

fn columns(term: &Term) -> Option<usize> {
    term.is_term()
        .then(|| usize::from(term.size().1).max(NARROWEST))
}

/// Folds each line that is too long between two words. What follows is aligned with the text after
/// the line's label, or indented a little more than the line. A word that is too long stays whole.
pub(crate) fn folded(text: &str, width: usize) -> String {
    let mut out = String::with_capacity(text.len());
    for line in text.lines() {
        fold(&mut out, line, width);
    }
    out
}

fn fold(out: &mut String, line: &str, width: usize) {
    let indent = hanging(line).min(width / 2);
    let (mut rest, mut column) = (line, 0);
    while column + rest.chars().count() > width {
        let Some(cut) = break_in(rest, indent - column, width - column) else {
            break;
        };
        out.push_str(rest[..cut].trim_end());
        out.push('\n');
        rest = rest[cut..].trim_start();
        column = indent;
        out.extend(std::iter::repeat_n(' ', indent));
    }
    out.push_str(rest);
    out.push('\n');
}

/// The byte before which to break: the last space within the room, else the first beyond it; never
/// within the first `label` columns.
fn break_in(text: &str, label: usize, room: usize) -> Option<usize> {
    let mut last = None;
    for (column, (byte, char)) in text.char_indices().enumerate() {
        if char != ' ' || column <= label {
            continue;
        }
        if column > room {
            return last.or(Some(byte));
        }
        last = Some(byte);
    }
    last
}

/// Where the text begins that stands behind a label and two spaces or more.
fn hanging(line: &str) -> usize {
    let leading = line.len() - line.trim_start_matches(' ').len();
    let labelled = line[leading..].find("  ").map(|gap| {
        let rest = &line[leading + gap..];
        let spaces = rest.len() - rest.trim_start_matches(' ').len();
        line[..leading + gap].chars().count() + spaces
    });
    match labelled {
        Some(column) if column <= LABEL => column,
        _ => leading + 2,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_long_line_is_folded_between_words_and_aligned_with_its_text() {
        let text = "best      1/1, -5.48 ppm: makes too little for a buffer\n  short one\n";
        assert_eq!(
            folded(text, 40),
            "best      1/1, -5.48 ppm: makes too\n          little for a buffer\n  short one\n"
        );
        let sentence = "  One sentence that goes on for longer than forty columns allow.";
        assert_eq!(
            folded(sentence, 40),
            "  One sentence that goes on for longer\n    than forty columns allow.\n"
        );
    }

    #[test]
    fn no_line_is_beyond_the_width_unless_one_word_is() {
        let word = "1234567890123456789012345678901234567890123/7";
        let text = format!("target    {word} = 1.000 and more words behind it, so many of them");
        let folded = folded(&text, 40);
        for line in folded.lines() {
            assert!(
                line.chars().count() <= 40 || line.contains(word),
                "{line:?} of\n{folded}"
            );
        }
        let words = |text: &str| {
            text.split_whitespace()
                .map(str::to_owned)
                .collect::<Vec<_>>()
        };
        assert_eq!(words(&folded), words(&text), "no word is lost");
    }
}
