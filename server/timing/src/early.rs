//! The first rows, taken again whenever they have doubled.
//!
//! A noise guessed from sixteen rows is wrong by a third or so, and where the errors of the
//! first rows are located moves as it is learned. So at 32, 64, 128 and 256 rows the filter
//! begins anew from the first row, with the noise that it has learned by then.

use serde::{Deserialize, Serialize};

use crate::blocks::Blocks;
use crate::filter::{Filter, Setup};
use crate::outcome::Outcome;
use crate::start::StartRow;

/// The first rows of a filter.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Early {
    rows: Vec<StartRow>,
    /// No event and no gap so far: all rows are of one world.
    undisturbed: bool,
}

impl Early {
    /// Rows after which the noise is known well enough to go on with.
    pub(crate) const MOST: u16 = 256;

    /// Begins with the rows that a filter has begun with.
    pub(crate) fn new(rows: &[StartRow]) -> Self {
        let mut kept = Vec::with_capacity(usize::from(Self::MOST));
        kept.extend_from_slice(rows);
        Early {
            rows: kept,
            undisturbed: true,
        }
    }

    /// Whether there are enough of them.
    pub(crate) fn is_full(&self) -> bool {
        self.rows.len() >= usize::from(Self::MOST)
    }

    /// Takes a row into the filter, which may begin anew; where `blocks` begin, by blocks.
    pub(crate) fn take(
        &mut self,
        filter: &mut Filter,
        blocks: Option<&mut Blocks>,
        (row, in_gap): (StartRow, bool),
        setup: &Setup,
    ) -> Outcome {
        let outcome = filter.take(&row, in_gap);
        self.rows.push(row);
        self.undisturbed &= !in_gap && !matches!(outcome, Outcome::Event(_));
        let drift = filter.latest.y;
        let begun = blocks.and_then(|blocks| blocks.begin(&self.rows, setup.prior_var, drift));
        if let Some(start) = begun {
            *filter = Filter::begin(&start, true, setup);
            self.rows.clear();
            self.rows.extend_from_slice(start.rows());
        } else if self.undisturbed && self.rows.len().is_power_of_two() {
            *filter = filter.begun_again(&self.rows, setup);
        }
        outcome
    }
}
