//! Two-way rows by blocks of four: the least delayed out and back of each block.
//!
//! Queues only ever add, so the earliest of four is far better than the mean of four where
//! tails are long. The first 64 rows are taken singly, and then once more as 16 blocks.

use serde::{Deserialize, Serialize};

use crate::filter::{Filter, Setup};
use crate::outcome::Outcome;
use crate::start::{START_ROWS, Start, StartRow};

const BLOCK: usize = 4;

/// Rows gathered, and the block under way.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Blocks {
    /// The first rows, until there are 64; empty afterwards.
    early: Vec<StartRow>,
    block: Option<Block>,
}

/// A block under way, its best values referred to the time of its last row.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Block {
    best: [f64; 2],
    last_s: f64,
    rows: u8,
    in_gap: bool,
}

impl Block {
    fn new(row: &StartRow, in_gap: bool) -> Self {
        Block {
            best: row.z,
            last_s: row.t_s,
            rows: 1,
            in_gap,
        }
    }

    /// Going out, delay makes z smaller; coming back, larger.
    fn add(&mut self, row: &StartRow, drift: f64) {
        let trend = drift * (row.t_s - self.last_s);
        self.best[0] = (self.best[0] + trend).max(row.z[0]);
        self.best[1] = (self.best[1] + trend).min(row.z[1]);
        self.last_s = row.t_s;
        self.rows += 1;
    }

    fn row(&self) -> StartRow {
        StartRow {
            t_s: self.last_s,
            z: self.best,
        }
    }
}

impl Blocks {
    /// Begins with the rows that the filter has begun with.
    pub(crate) fn new(rows: &[StartRow]) -> Self {
        let mut early = Vec::with_capacity(BLOCK * START_ROWS);
        early.extend_from_slice(rows);
        Blocks { early, block: None }
    }

    /// Takes a row into the filter, singly at first, then by blocks.
    pub(crate) fn take(
        &mut self,
        filter: &mut Filter,
        row: StartRow,
        in_gap: bool,
        setup: &Setup,
    ) -> Outcome {
        if self.early.is_empty() {
            return self.gather(filter, row, in_gap);
        }
        let outcome = filter.take(&row, in_gap);
        self.early.push(row);
        if self.early.len() < BLOCK * START_ROWS {
            return outcome;
        }
        *filter = self.begin_again(filter.latest.y, setup);
        outcome
    }

    fn begin_again(&mut self, drift: f64, setup: &Setup) -> Filter {
        let mut start = Start::new(setup.prior_var);
        for rows in self.early.chunks(BLOCK) {
            let mut block = Block::new(&rows[0], false);
            rows[1..].iter().for_each(|row| block.add(row, drift));
            start.push(block.row());
        }
        self.early = Vec::new();
        Filter::begin(&start, true, setup)
    }

    fn gather(&mut self, filter: &mut Filter, row: StartRow, in_gap: bool) -> Outcome {
        let drift = filter.latest.y;
        let Some(block) = &mut self.block else {
            self.block = Some(Block::new(&row, in_gap));
            return Outcome::Used;
        };
        if in_gap {
            let done = *block;
            *block = Block::new(&row, true);
            return filter.take(&done.row(), done.in_gap);
        }
        block.add(&row, drift);
        if usize::from(block.rows) < BLOCK {
            return Outcome::Used;
        }
        let done = *block;
        self.block = None;
        filter.take(&done.row(), done.in_gap)
    }
}
