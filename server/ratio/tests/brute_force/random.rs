//! Seeded numbers (SplitMix64), so that every run sees the same cases.

use ratewright_ratio::{Bounds, Exact};

pub(crate) struct Random(u64);

impl Random {
    pub(crate) fn new(seed: u64) -> Self {
        Self(seed.wrapping_mul(0xd134_2543_de82_ef95))
    }

    pub(crate) fn next(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let z = (self.0 ^ (self.0 >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        let z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        z ^ (z >> 31)
    }

    /// A number from `low` to `high`.
    pub(crate) fn range(&mut self, low: u64, high: u64) -> u64 {
        low + self.next() % (high - low + 1)
    }

    /// Small bounds.
    pub(crate) fn bounds(&mut self) -> Bounds {
        let (max_l, max_m) = (self.range(1, 24), self.range(1, 24));
        Bounds::new(max_l, max_m).expect("in range")
    }

    /// A target that is often in or next to a small box: a small fraction, one a little off a small
    /// fraction (also the midpoint of two), or any of up to 100 bits.
    pub(crate) fn target(&mut self) -> Exact {
        let (n, d) = (u128::from(self.range(1, 40)), u128::from(self.range(1, 40)));
        match self.range(0, 3) {
            0 => Exact::new_raw(n, d),
            1 => {
                let scale = u128::from(self.range(1, 1 << 40)) + 1;
                let shift = u128::from(self.range(0, 2));
                Exact::new_raw(n * scale + shift - 1, d * scale)
            }
            2 => {
                let (c, e) = (u128::from(self.range(1, 24)), u128::from(self.range(1, 24)));
                Exact::new_raw(n * e + c * d, 2 * d * e)
            }
            _ => {
                let bits = self.range(1, 100);
                let n = (u128::from(self.next()) << 64 | u128::from(self.next())) >> (128 - bits);
                Exact::new_raw(n + 1, (1 << self.range(0, 99)) + n / 3)
            }
        }
    }
}
