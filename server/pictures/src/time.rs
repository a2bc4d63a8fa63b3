//! Marks of axes of time, at the divisions that clocks and calendars have.

/// Divisions between marks, s.
const STEPS_S: [i64; 21] = [
    1, 2, 5, 10, 15, 30, 60, 120, 300, 600, 900, 1_800, 3_600, 7_200, 10_800, 21_600, 43_200,
    86_400, 172_800, 432_000, 864_000,
];
const DAY_S: i64 = 86_400;

/// Marks from `from_s` to `to_s`, at most `most` and one.
pub(crate) fn marks(
    from_s: f64,
    to_s: f64,
    most: f64,
    label: impl Fn(i64) -> String,
) -> Vec<(f64, String)> {
    let span_s = to_s - from_s;
    let fits = |step: &i64| span_s / *step as f64 <= most;
    let longest = STEPS_S[STEPS_S.len() - 1];
    let step_s = STEPS_S.into_iter().find(fits).unwrap_or_else(|| {
        let many = libm::ceil(span_s / most / longest as f64) as i64;
        many.saturating_mul(longest)
    });
    let first = libm::ceil(from_s / step_s as f64) as i64;
    let last = libm::floor(to_s / step_s as f64) as i64;
    (first..=last)
        .map(|i| i.saturating_mul(step_s))
        .map(|at_s| (at_s as f64, label(at_s)))
        .collect()
}

/// `0`, `20 s`, `15 min`, `3 h`, `2 d`, `1 d 12 h`.
pub(crate) fn elapsed(at_s: i64) -> String {
    let units = [(DAY_S, "d"), (3_600, "h"), (60, "min"), (1, "s")];
    let mut left = at_s.abs();
    let mut parts = Vec::new();
    for (unit_s, name) in units {
        if left >= unit_s {
            parts.push(format!("{} {name}", left / unit_s));
            left %= unit_s;
        }
    }
    let sign = if at_s < 0 { "-" } else { "" };
    if parts.is_empty() {
        "0".to_owned()
    } else {
        format!("{sign}{}", parts.join(" "))
    }
}

/// `14:30`, `14:30:05`, and `5 Mar` at midnight.
pub(crate) fn of_day(at_s: i64) -> String {
    let (day, second) = (at_s.div_euclid(DAY_S), at_s.rem_euclid(DAY_S));
    let (h, m, s) = (second / 3_600, second / 60 % 60, second % 60);
    match (h, m, s) {
        (0, 0, 0) => date(day),
        (_, _, 0) => format!("{h:02}:{m:02}"),
        _ => format!("{h:02}:{m:02}:{s:02}"),
    }
}

/// The Gregorian day and month of a count of days since 1970-01-01: years begin in March, so that the
/// leap day is the last of one (Fliegel and Van Flandern's method, 1968, in its usual form).
fn date(day: i64) -> String {
    const MONTHS: [&str; 12] = [
        "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov", "Dec", "Jan", "Feb",
    ];
    let of_era = (day + 719_468).rem_euclid(146_097);
    let year = (of_era - of_era / 1_460 + of_era / 36_524 - of_era / 146_096) / 365;
    let of_year = of_era - (365 * year + year / 4 - year / 100);
    let month = (5 * of_year + 2) / 153;
    let of_month = of_year - (153 * month + 2) / 5 + 1;
    format!("{of_month} {}", MONTHS[month as usize])
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Dates from the calendar.
    #[test]
    fn dates_are_those_of_the_calendar() {
        for (day, text) in [
            (0, "1 Jan"),
            (59, "1 Mar"),
            (11_016, "29 Feb"),
            (11_017, "1 Mar"),
            (20_453, "31 Dec"),
            (-1, "31 Dec"),
        ] {
            assert_eq!(date(day), text, "{day}");
        }
    }

    #[test]
    fn spans_read_well() {
        for (at_s, text) in [
            (0, "0"),
            (90, "1 min 30 s"),
            (5_400, "1 h 30 min"),
            (129_600, "1 d 12 h"),
            (-60, "-1 min"),
        ] {
            assert_eq!(elapsed(at_s), text);
        }
    }

    #[test]
    fn three_years_have_few_marks() {
        let marks = marks(0.0, 9.5e7, 9.0, elapsed);
        assert!((4..=10).contains(&marks.len()), "{marks:?}");
    }
}
