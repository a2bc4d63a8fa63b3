//! Axes: a range, a label with its unit, and marks at round values.

use crate::time;

/// Marks that an axis has at most.
const MOST_MARKS: f64 = 9.0;

/// An axis of a picture.
#[derive(Clone, Debug, PartialEq)]
pub struct Axis {
    /// What it shows, with its unit: `phase error, sink samples`.
    pub(crate) label: String,
    pub(crate) from: f64,
    pub(crate) to: f64,
    /// Where the marks are, and what stands beside them.
    pub(crate) marks: Vec<(f64, String)>,
    logarithmic: bool,
}

impl Axis {
    /// An even axis from `from` to `to`. Ends that are equal or the wrong way round are moved apart;
    /// ends that are no numbers count as 0.
    ///
    /// ```
    /// # use ratewright_pictures::Axis;
    /// let axis = Axis::even("phase error, sink samples", -48.0, 48.0);
    /// assert_eq!(axis.mark_labels().collect::<Vec<_>>(), ["-40", "-20", "0", "20", "40"]);
    /// ```
    pub fn even(label: &str, from: f64, to: f64) -> Self {
        let (from, to) = apart(from, to);
        let step = round_step((to - from) / MOST_MARKS);
        // Enough places to tell the marks apart.
        let places = (-libm::floor(libm::log10(step) + 1e-9)).max(0.0) as usize;
        let first = libm::ceil(from / step - 1e-9) as i64;
        let last = libm::floor(to / step + 1e-9) as i64;
        let mark = |i: i64| {
            let value = i as f64 * step;
            (value, format!("{:.places$}", value + 0.0))
        };
        Self {
            label: label.to_owned(),
            from,
            to,
            marks: (first..=last).map(mark).collect(),
            logarithmic: false,
        }
    }

    /// An axis whose marks are powers of ten, from `from` to `to`, both above 0.
    ///
    /// ```
    /// # use ratewright_pictures::Axis;
    /// let axis = Axis::decades("Allan deviation", 2e-9, 3e-7);
    /// assert_eq!(axis.mark_labels().collect::<Vec<_>>(), ["1e-8", "1e-7"]);
    /// ```
    pub fn decades(label: &str, from: f64, to: f64) -> Self {
        let exponent = |value: f64| libm::log10(value.max(f64::MIN_POSITIVE));
        let (from, to) = apart(exponent(from), exponent(to));
        let decades = libm::ceil(from - 1e-9) as i64..=libm::floor(to + 1e-9) as i64;
        let step = ((to - from) / MOST_MARKS).ceil().max(1.0) as usize;
        let marks = decades
            .step_by(step)
            .map(|n| (n as f64, decade(n)))
            .collect();
        Self {
            label: label.to_owned(),
            from,
            to,
            marks,
            logarithmic: true,
        }
    }

    /// An axis of the time that is left, s, from `from_s` above 0 to `to_s`: near times have more
    /// room than far ones.
    ///
    /// ```
    /// # use ratewright_pictures::Axis;
    /// let axis = Axis::ahead("time left", 1.0, 86_400.0);
    /// let labels: Vec<_> = axis.mark_labels().collect();
    /// assert_eq!(labels, ["1 s", "10 s", "1 min", "10 min", "1 h", "6 h", "1 d"]);
    /// ```
    pub fn ahead(label: &str, from_s: f64, to_s: f64) -> Self {
        const MARKS_S: [i64; 7] = [1, 10, 60, 600, 3_600, 21_600, 86_400];
        let marks = MARKS_S
            .into_iter()
            .filter(|&at_s| (from_s..=to_s).contains(&(at_s as f64)))
            .map(|at_s| (libm::log10(at_s as f64), time::elapsed(at_s)));
        Self {
            marks: marks.collect(),
            ..Self::decades(label, from_s, to_s)
        }
    }

    /// An axis of the time that has passed, s.
    ///
    /// ```
    /// # use ratewright_pictures::Axis;
    /// let axis = Axis::elapsed(0.0, 86_400.0);
    /// assert_eq!(axis.mark_labels().collect::<Vec<_>>(), ["0", "3 h", "6 h", "9 h", "12 h", "15 h", "18 h", "21 h", "1 d"]);
    /// ```
    pub fn elapsed(from_s: f64, to_s: f64) -> Self {
        let (from, to) = apart(from_s, to_s);
        let marks = time::marks(from, to, MOST_MARKS, time::elapsed);
        Self {
            label: "time passed".to_owned(),
            from,
            to,
            marks,
            logarithmic: false,
        }
    }

    /// An axis of house time, s of the TAI-like scale; marks show the time of day, and the date at
    /// midnight.
    ///
    /// ```
    /// # use ratewright_pictures::Axis;
    /// let axis = Axis::house(951_868_800.0 - 7_200.0, 951_868_800.0 + 3_600.0);
    /// let labels: Vec<_> = axis.mark_labels().collect();
    /// assert_eq!(labels, ["22:00", "22:30", "23:00", "23:30", "1 Mar", "00:30", "01:00"]);
    /// ```
    pub fn house(from_s: f64, to_s: f64) -> Self {
        let (from, to) = apart(from_s, to_s);
        let marks = time::marks(from, to, MOST_MARKS, time::of_day);
        Self {
            label: "house time (TAI)".to_owned(),
            from,
            to,
            marks,
            logarithmic: false,
        }
    }

    /// What stands beside the marks.
    pub fn mark_labels(&self) -> impl Iterator<Item = &str> {
        self.marks.iter().map(|(_, label)| label.as_str())
    }

    /// Where a value lies, in the units that [`Frame::draw`](crate::Frame::draw) hands to its painter.
    /// Values beyond the ends lie on them.
    pub fn place(&self, value: f64) -> f64 {
        let place = if self.logarithmic {
            libm::log10(value.max(f64::MIN_POSITIVE))
        } else {
            value
        };
        place.clamp(self.from, self.to)
    }
}

/// Ends that are numbers, in order and apart.
fn apart(from: f64, to: f64) -> (f64, f64) {
    let number = |end: f64| if end.is_finite() { end } else { 0.0 };
    let (from, to) = (number(from), number(to));
    let (from, to) = (from.min(to), from.max(to));
    let least = 1e-9 * from.abs().max(to.abs()).max(1e-6);
    if to - from > least {
        (from, to)
    } else {
        (from - least, to + least)
    }
}

/// The least of 1, 2 and 5 times a power of ten that is not below `least`.
fn round_step(least: f64) -> f64 {
    let power = libm::pow(10.0, libm::floor(libm::log10(least)));
    let steps = [1.0, 2.0, 5.0, 10.0].map(|step| step * power);
    steps
        .into_iter()
        .find(|&step| step >= least * (1.0 - 1e-9))
        .unwrap_or(steps[3])
}

fn decade(n: i64) -> String {
    match n {
        0..=4 => 10_i64.pow(n as u32).to_string(),
        -2..=-1 => format!("{}", libm::pow(10.0, n as f64)),
        _ => format!("1e{n}"),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn steps_are_round() {
        for (least, step) in [
            (0.13, 0.2),
            (0.2, 0.2),
            (3.4, 5.0),
            (51.0, 100.0),
            (1e-9, 1e-9),
        ] {
            assert!((round_step(least) / step - 1.0).abs() < 1e-9, "{least}");
        }
    }

    #[test]
    fn an_axis_without_extent_still_has_one() {
        for (from, to) in [
            (0.0, 0.0),
            (5.0, 5.0),
            (f64::NAN, f64::INFINITY),
            (3.0, 1.0),
        ] {
            let axis = Axis::even("", from, to);
            assert!(axis.from < axis.to, "{from} to {to}: {axis:?}");
            assert!(axis.marks.len() < 20);
        }
    }

    #[test]
    fn marks_lie_within_and_are_not_many() {
        for i in 0..200 {
            let (from, to) = (-0.37 * f64::from(i), 1.3 * f64::from(i * i) + 0.01);
            let axis = Axis::even("", from, to);
            assert!(
                axis.marks.len() >= 2 && axis.marks.len() <= 10,
                "{from} to {to}: {:?}",
                axis.marks
            );
            let slack = 1e-6 * (to - from);
            assert!(
                axis.marks
                    .iter()
                    .all(|(at, _)| (from - slack..=to + slack).contains(at))
            );
        }
    }
}
