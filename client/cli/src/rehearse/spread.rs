//! One figure over many seeds.

use ratewright_rehearsal::Report;

/// The figure of most seeds, and that of the worst one.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Spread {
    /// The middle one; of an even number the upper of the two in the middle.
    pub(super) median: f64,
    /// The worst.
    pub(super) worst: f64,
}

/// Over the reports, where more is worse; `None` if no report has the figure.
pub(super) fn most(reports: &[Report], figure: impl Fn(&Report) -> Option<f64>) -> Option<Spread> {
    spread(reports, figure, |values| values.last())
}

/// As [`most`], where less is worse.
pub(super) fn least(reports: &[Report], figure: impl Fn(&Report) -> Option<f64>) -> Option<Spread> {
    spread(reports, figure, |values| values.first())
}

fn spread(
    reports: &[Report],
    figure: impl Fn(&Report) -> Option<f64>,
    worst: impl Fn(&[f64]) -> Option<&f64>,
) -> Option<Spread> {
    let mut values: Vec<f64> = reports.iter().filter_map(figure).collect();
    values.sort_by(f64::total_cmp);
    Some(Spread {
        median: *values.get(values.len() / 2)?,
        worst: *worst(&values)?,
    })
}
