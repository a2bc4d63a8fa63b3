//! Down-closed sets of (L, M): with a pair they hold every smaller pair.
//!
//! The bracket theorem (see [`crate::bracket`]) needs nothing else of a constraint, so one search and one
//! verifier serve all three shapes: a box, L·M up to a limit, and
//! a weighted sum. Each limit does not fall when L or M grows, so a smaller pair keeps it too.
//!
//! **Cost.** Up to two products a look. A run of the search takes two divisions in the box; elsewhere it gallops, with
//! O(log j) looks for a run of j.
//!
//! **Corner case.** A product beyond 64 bits is outside, as every limit is below 2^63.

use serde::{Deserialize, Serialize};
use thiserror::Error;

use crate::Bounds;
use crate::bounds::MAX_BOUND;

/// A down-closed set of pairs (L, M), L and M from 1.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(try_from = "Shape", into = "Shape")]
pub struct Region(Shape);

#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
enum Shape {
    Box {
        max_l: u64,
        max_m: u64,
    },
    Product {
        max_product: u64,
    },
    Weighted {
        weight_l: u64,
        weight_m: u64,
        max_cost: u64,
    },
}

/// Why a region was refused.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Error)]
pub enum RegionError {
    /// A value of zero, or beyond [`MAX_BOUND`].
    #[error("{field} is {value}; accepted are 1 to {MAX_BOUND}")]
    OutOfRange {
        /// The field's name.
        field: &'static str,
        /// The refused value.
        value: u64,
    },
    /// Not even 1/1 costs little enough.
    #[error(
        "max_cost is {max_cost}; accepted is at least weight_l + weight_m = {least}, the cost of 1/1"
    )]
    Empty {
        /// The refused value.
        max_cost: u64,
        /// The cost of 1/1.
        least: u64,
    },
}

impl Region {
    /// All pairs with `L·M ≤ max_product`.
    ///
    /// # Errors
    /// [`RegionError::OutOfRange`] unless 1 ≤ `max_product` ≤ [`MAX_BOUND`].
    ///
    /// # Examples
    /// ```
    /// use ratewright_ratio::Region;
    /// let region = Region::product(1_000)?;
    /// assert!(region.contains(25, 40) && !region.contains(26, 40));
    /// # Ok::<(), ratewright_ratio::RegionError>(())
    /// ```
    pub fn product(max_product: u64) -> Result<Self, RegionError> {
        check("max_product", max_product)?;
        Ok(Self(Shape::Product { max_product }))
    }

    /// All pairs with `weight_l·L + weight_m·M ≤ max_cost`.
    ///
    /// # Errors
    /// [`RegionError::OutOfRange`] for a value not in 1 to [`MAX_BOUND`]; [`RegionError::Empty`] if 1/1 is outside.
    pub fn weighted(weight_l: u64, weight_m: u64, max_cost: u64) -> Result<Self, RegionError> {
        check("weight_l", weight_l)?;
        check("weight_m", weight_m)?;
        check("max_cost", max_cost)?;
        let least = weight_l + weight_m;
        if max_cost < least {
            return Err(RegionError::Empty { max_cost, least });
        }
        Ok(Self(Shape::Weighted {
            weight_l,
            weight_m,
            max_cost,
        }))
    }

    /// True if the pair is inside. Zero parts (the sentinels 0/1 and 1/0) count like any other number.
    #[inline]
    pub fn contains(&self, l: u64, m: u64) -> bool {
        match self.0 {
            Shape::Box { max_l, max_m } => l <= max_l && m <= max_m,
            Shape::Product { max_product } => {
                u128::from(l) * u128::from(m) <= u128::from(max_product)
            }
            Shape::Weighted {
                weight_l,
                weight_m,
                max_cost,
            } => {
                let Some(cost_l) = weight_l.checked_mul(l) else {
                    return false;
                };
                let Some(cost_m) = weight_m.checked_mul(m) else {
                    return false;
                };
                cost_l
                    .checked_add(cost_m)
                    .is_some_and(|cost| cost <= max_cost)
            }
        }
    }

    /// True if both pairs are inside and their sum is not. For parts below 2^31.
    #[inline]
    pub(crate) fn separates(&self, low: (u64, u64), high: (u64, u64)) -> bool {
        let (l, m) = (low.0 + high.0, low.1 + high.1);
        match self.0 {
            Shape::Box { max_l, max_m } => {
                (low.0.max(high.0) <= max_l)
                    & (low.1.max(high.1) <= max_m)
                    & ((l > max_l) | (m > max_m))
            }
            _ => self.contains_both_only(low, high, (l, m)),
        }
    }

    /// Out of line, so that the box, which is nearly every call, keeps the registers to itself.
    #[cold]
    fn contains_both_only(&self, low: (u64, u64), high: (u64, u64), sum: (u64, u64)) -> bool {
        self.contains(low.0, low.1) && self.contains(high.0, high.1) && !self.contains(sum.0, sum.1)
    }
}

fn check(field: &'static str, value: u64) -> Result<(), RegionError> {
    if (1..=MAX_BOUND).contains(&value) {
        Ok(())
    } else {
        Err(RegionError::OutOfRange { field, value })
    }
}

/// The box of `max_l` and `max_m`; a bound on prime factors is not part of it.
impl From<&Bounds> for Region {
    fn from(bounds: &Bounds) -> Self {
        Self(Shape::Box {
            max_l: bounds.max_l(),
            max_m: bounds.max_m(),
        })
    }
}

impl From<Region> for Shape {
    fn from(region: Region) -> Self {
        region.0
    }
}

impl TryFrom<Shape> for Region {
    type Error = RegionError;

    fn try_from(shape: Shape) -> Result<Self, RegionError> {
        match shape {
            Shape::Box { max_l, max_m } => {
                check("max_l", max_l)?;
                check("max_m", max_m)?;
                Ok(Self(shape))
            }
            Shape::Product { max_product } => Self::product(max_product),
            Shape::Weighted {
                weight_l,
                weight_m,
                max_cost,
            } => Self::weighted(weight_l, weight_m, max_cost),
        }
    }
}

/// What the Euclidean search asks of a constraint.
pub(crate) trait DownClosed {
    /// The largest j ≤ `limit` with (p0 + j·p1, q0 + j·q1) inside, given that (p0, q0) is inside or a sentinel
    /// and that (p1, q1) ≠ (0, 0). Finite: no infinite run stays inside.
    fn longest_run(&self, p0: u64, q0: u64, p1: u64, q1: u64, limit: u64) -> u64;
}

impl DownClosed for Bounds {
    #[inline]
    fn longest_run(&self, p0: u64, q0: u64, p1: u64, q1: u64, limit: u64) -> u64 {
        let room =
            |bound: u64, from: u64, step: u64| (bound - from).checked_div(step).unwrap_or(u64::MAX);
        let fits = |bound: u64, from: u64, step: u64| {
            u128::from(limit) * u128::from(step) + u128::from(from) <= u128::from(bound)
        };
        if fits(self.max_m(), q0, q1) && fits(self.max_l(), p0, p1) {
            return limit;
        }
        limit
            .min(room(self.max_m(), q0, q1))
            .min(room(self.max_l(), p0, p1))
    }
}

impl DownClosed for Region {
    /// Gallops to the first power of two outside, then halves: O(log j) multiplications, no division.
    fn longest_run(&self, p0: u64, q0: u64, p1: u64, q1: u64, limit: u64) -> u64 {
        let inside = |j: u64| {
            let l = j.checked_mul(p1).and_then(|x| x.checked_add(p0));
            let m = j.checked_mul(q1).and_then(|x| x.checked_add(q0));
            matches!((l, m), (Some(l), Some(m)) if self.contains(l, m))
        };
        // No region holds a part of 2^63, so doubling stops before it could overflow.
        let mut outside = 1;
        while outside <= limit && inside(outside) {
            outside *= 2;
        }
        let (mut low, mut high) = (outside / 2, outside.min(limit.saturating_add(1)));
        while high - low > 1 {
            let middle = low + (high - low) / 2;
            if inside(middle) {
                low = middle
            } else {
                high = middle
            }
        }
        low
    }
}
