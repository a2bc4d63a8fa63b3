//! What others would do with the same estimates.

use ratewright_ratio::{Bounds, Exact, Fraction, best, target_from_f64};

/// Always the ratio nearest to the target. It bounds nothing.
#[derive(Debug, Default)]
pub(crate) struct Nearest {
    ratio: Option<Fraction>,
    pub(crate) changes: usize,
}

impl Nearest {
    /// Looks at a new target, within bounds that allow a fine choice.
    pub(crate) fn look(&mut self, target: f64) {
        let target = target_from_f64(target).expect("a target is positive");
        let bounds = Bounds::new(65_535, 65_535).expect("in range");
        let ratio = best(&target, &bounds).ratio;
        self.changes += usize::from(self.ratio.replace(ratio) != Some(ratio));
    }
}

/// The two neighbours of the target within a crossing's bounds, the one until the phase error
/// reaches the edge of the tube, then the other. It is told the true phase error, and what it
/// decides takes effect at once.
#[derive(Debug)]
pub(crate) struct Pair {
    tube: f64,
    /// Lower and upper neighbour; empty before the first target.
    neighbours: Option<(f64, f64)>,
    runs_upper: bool,
    phase: f64,
    pub(crate) changes: usize,
}

impl Pair {
    pub(crate) fn new(headroom: f64) -> Self {
        Pair {
            tube: 0.8 * headroom,
            neighbours: None,
            runs_upper: false,
            phase: 0.0,
            changes: 0,
        }
    }

    /// Takes the neighbours of a new target.
    pub(crate) fn look(&mut self, target: f64, bounds: &Bounds) {
        if self
            .neighbours
            .is_some_and(|(low, high)| low < target && target < high)
        {
            return;
        }
        let target = target_from_f64(target).expect("a target is positive");
        self.neighbours = Some(neighbours(&target, bounds));
        self.changes += 1;
    }

    /// A second in which the source and the sink ticked so often has passed.
    pub(crate) fn advance(&mut self, source_ticks: f64, sink_ticks: f64) {
        let Some((low, high)) = self.neighbours else {
            return;
        };
        let ratio = if self.runs_upper { high } else { low };
        self.phase += ratio * source_ticks - sink_ticks;
        let turns = if self.runs_upper {
            self.phase >= self.tube
        } else {
            self.phase <= -self.tube
        };
        if turns {
            self.runs_upper = !self.runs_upper;
            self.changes += 1;
        }
    }
}

/// The fractions next to a target within bounds, below and above it; the target itself counts as
/// below.
fn neighbours(target: &Exact, bounds: &Bounds) -> (f64, f64) {
    let value = |numer: u128, denom: u128| numer as f64 / denom as f64;
    // The walk to the target by mediants, in runs: an interval whose mediant the bounds forbid.
    let (mut low, mut high) = ((0_u128, 1_u128), (1_u128, 0_u128));
    let allows = |(numer, denom): (u128, u128)| {
        numer <= u128::from(bounds.max_l()) && denom <= u128::from(bounds.max_m())
    };
    loop {
        let middle = (low.0 + high.0, low.1 + high.1);
        if !allows(middle) {
            return (value(low.0, low.1), value(high.0, high.1));
        }
        if Exact::new(middle.0, middle.1) <= *target {
            low = middle;
        } else {
            high = middle;
        }
    }
}
