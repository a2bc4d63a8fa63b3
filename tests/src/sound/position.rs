//! Where a resampler stands, exactly: an integer and a phase.

use ratewright_handle::Block;

/// Where a resampler stands: between input `index` and the next, `phase` of `l` on.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Position {
    /// Whole inputs passed.
    pub index: u64,
    /// Phase, below `l`.
    pub phase: u64,
    /// Phases between two inputs.
    pub l: u64,
}

impl Position {
    /// At an input.
    pub fn at(index: u64) -> Self {
        Self {
            index,
            phase: 0,
            l: 1,
        }
    }

    /// The position in inputs, as a double.
    #[inline]
    pub fn inputs(&self) -> f64 {
        self.index as f64 + self.phase as f64 / self.l as f64
    }

    /// The position after an output of a block. Exact.
    ///
    /// # Panics
    /// If a number of phases is changed between two inputs: whole blocks end at inputs, and a table
    /// that is stepped through does not change its size.
    #[inline]
    pub fn after_output(&self, block: &Block) -> Self {
        self.moved(block, 1)
    }

    /// The position after a whole block. Exact.
    ///
    /// # Panics
    /// As [`Position::after_output`].
    #[inline]
    pub fn after_block(&self, block: &Block) -> Self {
        self.moved(block, block.outputs)
    }

    /// The same after any number of outputs; none begins another number of phases.
    #[inline]
    pub(super) fn moved(&self, block: &Block, outputs: u64) -> Self {
        assert!(
            self.phase == 0 || self.l == block.l,
            "{self:?} takes no {block:?}"
        );
        let phases = self.phase + outputs * block.m;
        Self {
            index: self.index + phases / block.l,
            phase: phases % block.l,
            l: block.l,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_table_is_stepped_through_exactly() {
        let mut position = Position::at(7);
        for m in [940, 941, 941, 940] {
            let block = Block {
                l: 1_024,
                m,
                outputs: 1,
            };
            position = position.after_block(&block);
        }
        assert_eq!((position.index, position.phase), (7 + 3, 3_762 - 3 * 1_024));
    }

    #[test]
    #[should_panic(expected = "takes no")]
    fn a_change_of_phases_between_inputs_is_no_block_end() {
        let position = Position::at(0).after_output(&Block {
            l: 160,
            m: 147,
            outputs: 160,
        });
        let _ = position.after_output(&Block {
            l: 159,
            m: 146,
            outputs: 159,
        });
    }
}
