//! The ladder as a small picture of characters: how far off the best ratio is up to each size.

use ratewright_ratio::allowed::Answer;
use ratewright_ratio::{Exact, Fraction, Rung, residual};

use super::Parts;

/// Columns of the picture proper.
const COLUMNS: usize = 48;
/// Rows for what is not exact, at most.
const ROWS: i32 = 8;
/// Columns for what stands at the left of the axis, and for the best's name at the right.
const LABEL: usize = 10;
const NAME: usize = 17;

/// The picture; `None` where there is nothing to compare.
pub(super) fn sketch(answer: &Answer) -> Option<String> {
    let stair = Stair::new(answer)?;
    let mut text = format!(
        "{:LABEL$}error against size, which is the larger of L and M\n",
        ""
    );
    for (row, line) in stair.drawn().into_iter().enumerate() {
        let line: String = line.into_iter().collect();
        let line = format!("{:>LABEL$} │{line}", stair.label(row));
        text += line.trim_end();
        if row == stair.row(answer.residual.abs()) {
            text += &stair.name(answer, &line);
        }
        text.push('\n');
    }
    text += &format!("{:LABEL$} └{}\n", "", "─".repeat(COLUMNS));
    text += &format!("{:LABEL$}  {}\n", "", stair.sizes());
    Some(text)
}

/// The least error of all ratios up to each size.
struct Stair<'a> {
    answer: &'a Answer,
    least_size: u64,
    largest_size: u64,
    /// In each column, of all ratios up to its size.
    errors: Vec<f64>,
    /// Powers of ten of the first row, and of a step of one row.
    first_decade: i32,
    decades_a_row: i32,
    /// Rows of errors that are not 0.
    rows: usize,
}

impl<'a> Stair<'a> {
    fn new(answer: &'a Answer) -> Option<Self> {
        let first = answer.ladder.iter().map(|rung| size(&rung.first));
        let last = answer.ladder.iter().map(|rung| size(&rung.last()));
        let (least_size, largest_size) = (first.min()?, last.max()?);
        if least_size == largest_size {
            return None;
        }
        let mut stair = Self {
            answer,
            least_size,
            largest_size,
            errors: Vec::new(),
            first_decade: 0,
            decades_a_row: 1,
            rows: 0,
        };
        stair.errors = (0..COLUMNS)
            .map(|column| least_error(answer, stair.size_up_to(column)))
            .collect();
        let decades = stair.errors.iter().filter(|&&error| error > 0.0);
        let decades: Vec<i32> = decades.map(|error| decade(*error)).collect();
        let (lowest, highest) = (decades.iter().min()?, decades.iter().max()?);
        let count = highest - lowest + 1;
        stair.first_decade = *highest;
        stair.decades_a_row = (count + ROWS - 1) / ROWS;
        stair.rows = stair.row_of_decade(*lowest) + 1;
        Some(stair)
    }

    /// The largest size that belongs to a column; sizes are spread evenly by their logarithm.
    fn size_up_to(&self, column: usize) -> u64 {
        if column + 1 >= COLUMNS {
            return self.largest_size;
        }
        let span = self.largest_size as f64 / self.least_size as f64;
        let part = (column as f64 + 0.5) / (COLUMNS - 1) as f64;
        (self.least_size as f64 * span.powf(part)) as u64
    }

    fn column(&self, size: u64) -> usize {
        (0..COLUMNS)
            .find(|&column| size <= self.size_up_to(column))
            .unwrap_or(COLUMNS - 1)
    }

    /// The row of an error; what is exact has the last one, below the others.
    fn row(&self, error: f64) -> usize {
        match error {
            0.0 => self.rows,
            error => self.row_of_decade(decade(error)),
        }
    }

    fn row_of_decade(&self, decade: i32) -> usize {
        usize::try_from((self.first_decade - decade) / self.decades_a_row).unwrap_or(0)
    }

    fn label(&self, row: usize) -> String {
        if row == self.rows {
            return "exact".to_owned();
        }
        power_of_ten(self.first_decade - row as i32 * self.decades_a_row)
    }

    /// The stair, a ring at each step of the ladder and a block at the best.
    fn drawn(&self) -> Vec<Vec<char>> {
        let is_exact = self.errors.last() == Some(&0.0);
        let mut grid = vec![vec![' '; COLUMNS]; self.rows + usize::from(is_exact)];
        let rows: Vec<usize> = self.errors.iter().map(|&error| self.row(error)).collect();
        for (column, &row) in rows.iter().enumerate() {
            let above = rows[column.saturating_sub(1)];
            grid[row][column] = '─';
            if above != row {
                grid[above][column] = '┐';
                for between in &mut grid[above + 1..row] {
                    between[column] = '│';
                }
                grid[row][column] = '└';
            }
        }
        for rung in &self.answer.ladder {
            let row = self.row(rung.last_residual.abs());
            let column = self.column(size(&rung.last()));
            // A ratio that a smaller one of another rung beats would hang in the air.
            if rows[column] == row {
                grid[row][column] = '○';
            }
        }
        let best = &self.answer.best;
        grid[self.row(self.answer.residual.abs())][self.column(size(best))] = '■';
        grid
    }

    /// The best's name, behind its mark, if there is room.
    fn name(&self, answer: &Answer, line: &str) -> String {
        let name = Parts::from(&answer.best).to_string();
        if name.len() > NAME {
            return String::new();
        }
        let at = LABEL + 2 + self.column(size(&answer.best));
        let drawn = line.trim_end().chars().count();
        format!("{:1$} {name}", "", (at + 1).saturating_sub(drawn))
    }

    /// The sizes below the axis: the ends, and the powers of ten between them.
    fn sizes(&self) -> String {
        let last = self.largest_size.to_string();
        let last_at = COLUMNS.saturating_sub(last.len());
        let mut line = self.least_size.to_string();
        let powers = (0..19).map(|power| 10_u64.pow(power));
        for size in powers.filter(|size| (self.least_size + 1..self.largest_size).contains(size)) {
            let (at, text) = (self.column(size), size.to_string());
            if at > line.len() + 1 && at + text.len() + 1 < last_at {
                line = format!("{line:<at$}{text}");
            }
        }
        format!("{line:<last_at$}{last}")
    }
}

fn size(ratio: &Fraction) -> u64 {
    *ratio.numer().max(ratio.denom())
}

/// The least error of the ratios of a ladder up to a size.
fn least_error(answer: &Answer, up_to: u64) -> f64 {
    let errors = answer
        .ladder
        .iter()
        .filter_map(|rung| nearest_of(rung, up_to, &answer.target));
    errors.fold(f64::INFINITY, f64::min)
}

/// The error of a run's nearest ratio up to a size: its last, for a run only comes nearer.
fn nearest_of(rung: &Rung, up_to: u64, target: &Exact) -> Option<f64> {
    let steps = |first: u64, step: u64| match step {
        0 => Some(u64::MAX).filter(|_| first <= up_to),
        step => Some(up_to.checked_sub(first)? / step),
    };
    let within = steps(*rung.first.numer(), rung.step.l)?
        .min(steps(*rung.first.denom(), rung.step.m)?)
        .min(rung.count - 1);
    Some(residual(&rung.ratio(within)?, target).abs())
}

fn decade(error: f64) -> i32 {
    error.log10().round() as i32
}

/// `10 %`, `100 ppm`, `1 ppb`, `0.001 ppb`, `1e-13`.
fn power_of_ten(power: i32) -> String {
    let (unit_power, unit) = match power {
        -3.. => (-2, "%"),
        -6..=-4 => (-6, "ppm"),
        -12..=-7 => (-9, "ppb"),
        _ => return format!("1e{power}"),
    };
    match power - unit_power {
        places @ 0.. => format!("1{:0<1$} {unit}", "", places as usize),
        places => format!("0.{:0>1$} {unit}", "1", places.unsigned_abs() as usize),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn powers_of_ten_have_the_units_of_offsets() {
        for (power, said) in [
            (1, "1000 %"),
            (-1, "10 %"),
            (-3, "0.1 %"),
            (-4, "100 ppm"),
            (-6, "1 ppm"),
            (-7, "100 ppb"),
            (-9, "1 ppb"),
            (-12, "0.001 ppb"),
            (-13, "1e-13"),
        ] {
            assert_eq!(power_of_ten(power), said);
        }
    }

    /// The stair is what trying every ratio finds.
    #[test]
    fn the_stair_is_the_least_error_of_all_ratios_up_to_each_size() {
        use ratewright_ratio::{Bounds, allowed::Allowed};
        let target = Exact::new(10_007, 9_000);
        let bounds = Bounds::new(90, 80).expect("bounds");
        let answer = Allowed::Bounded(bounds).answer(&target);
        let answer = answer.expect("there is a ratio");
        let stair = Stair::new(&answer).expect("a stair");
        for (column, &error) in stair.errors.iter().enumerate() {
            let up_to = stair.size_up_to(column);
            let all = (1..=up_to.min(90)).flat_map(|l| (1..=up_to.min(80)).map(move |m| (l, m)));
            let errors = all.map(|(l, m)| residual(&Fraction::new_raw(l, m), &target).abs());
            let least = errors.fold(f64::INFINITY, f64::min);
            assert!(
                (error - least).abs() <= 1e-12 * least,
                "column {column}, up to {up_to}: {error} for {least}"
            );
        }
    }
}
