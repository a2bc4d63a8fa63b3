//! Two-way rows by blocks of four: the least delayed out and back of each block.
//!
//! Queues only ever add, so the earliest of four is far better than the mean of four where
//! tails are long. The first 64 rows are taken singly, and then once more as 16 blocks (see `early`).

use serde::{Deserialize, Serialize};

use crate::start::{START_ROWS, Start, StartRow};

const BLOCK: usize = 4;

/// Single rows before the first block.
const SINGLE_ROWS: usize = BLOCK * START_ROWS;

/// Whether rows are taken by blocks yet, and the block under way.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(crate) struct Blocks {
    by_blocks: bool,
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
    /// Takes a row; what the filter is to take of it, with whether that ends a gap: singly at
    /// first, then a block's best when it is done.
    pub(crate) fn gather(
        &mut self,
        row: StartRow,
        in_gap: bool,
        drift: f64,
    ) -> Option<(StartRow, bool)> {
        if !self.by_blocks {
            return Some((row, in_gap));
        }
        let Some(block) = &mut self.block else {
            self.block = Some(Block::new(&row, in_gap));
            return None;
        };
        if in_gap {
            let done = *block;
            *block = Block::new(&row, true);
            return Some((done.row(), done.in_gap));
        }
        block.add(&row, drift);
        if usize::from(block.rows) < BLOCK {
            return None;
        }
        let done = *block;
        self.block = None;
        Some((done.row(), done.in_gap))
    }

    /// Once there are enough single rows, the same ones by blocks: from now on all are.
    pub(crate) fn begin(
        &mut self,
        singly: &[StartRow],
        prior_var: f64,
        drift: f64,
    ) -> Option<Start> {
        if self.by_blocks || singly.len() < SINGLE_ROWS {
            return None;
        }
        self.by_blocks = true;
        let mut start = Start::new(prior_var);
        for rows in singly.chunks(BLOCK) {
            let mut block = Block::new(&rows[0], false);
            rows[1..].iter().for_each(|row| block.add(row, drift));
            start.push(block.row());
        }
        Some(start)
    }
}
