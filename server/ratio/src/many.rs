//! Many targets at once, in lanes of doubles that the compiler turns into vector instructions.
//!
//! **Why doubles are exact here.** Euclid on (x, 1) for a double x ≥ 1/2 only meets multiples of x's last binary
//! digit, below 2^53 of them once the whole part is off, so products and differences are exact. A rounded quotient
//! may be one above its floor; a negative remainder tells. The parts of the answer are below 2^31.
//! Only the last choice between the two ends multiplies numbers too long for a double: if the two
//! products are within a few roundings of each other, or after a negative remainder, or for an x below 1/2, the
//! exact search decides instead.
//!
//! **Method.** All lanes step until each has met its bound. No lane branches: one that is done takes steps of the
//! quotient zero, which swap its two ends, and in the end the one with the smaller distance is the newer.
//! Cost: about half of one by one, on processors with vectors of four doubles. The longest of the 16 chains
//! decides for all.

use thiserror::Error;

use crate::{Bounds, Fraction, TargetError, best, smooth, target_from_f64};

/// Lanes that run side by side: four vectors, so that one divides while the others multiply.
const LANES: usize = 16;

/// Larger bounds are served one by one.
const MAX_BOUND_OF_LANES: u64 = 1 << 26;

/// Why a batch was refused.
#[derive(Clone, Copy, Debug, PartialEq, Error)]
pub enum BatchError {
    /// Not as many places as targets.
    #[error("answers has {answers} places for {targets} targets; accepted is the same number")]
    Length {
        /// The number of targets.
        targets: usize,
        /// The number of places.
        answers: usize,
    },
    /// A value that is no target.
    #[error("target number {index}: {error}")]
    Target {
        /// Its index.
        index: usize,
        /// What is wrong with it.
        error: TargetError,
    },
}

/// The nearest ratio to each of many doubles, as [`best`] gives it (which also gives the certificate).
///
/// # Errors
/// [`BatchError`]; the answers are untouched then.
///
/// # Examples
/// ```
/// use ratewright_ratio::{Bounds, Fraction, best_of_many};
/// let mut answers = [Fraction::new(1, 1); 3];
/// best_of_many(&[1.0884, 0.9187, 1.0000373], &Bounds::new(1024, 1024)?, &mut answers)?;
/// assert_eq!(answers[2], Fraction::new(1, 1));
/// # Ok::<(), Box<dyn std::error::Error>>(())
/// ```
pub fn best_of_many(
    targets: &[f64],
    bounds: &Bounds,
    answers: &mut [Fraction],
) -> Result<(), BatchError> {
    if targets.len() != answers.len() {
        return Err(BatchError::Length {
            targets: targets.len(),
            answers: answers.len(),
        });
    }
    for (index, &value) in targets.iter().enumerate() {
        if !(value.is_finite() && value > 0.0) {
            let error = TargetError::NotPositive { value };
            return Err(BatchError::Target { index, error });
        }
    }
    let has_lanes = bounds.largest_prime().is_none()
        && bounds.max_l().max(bounds.max_m()) <= MAX_BOUND_OF_LANES;
    if has_lanes {
        in_lanes(targets, bounds, answers);
    } else {
        for (target, answer) in targets.iter().zip(answers) {
            *answer = exactly(*target, bounds);
        }
    }
    Ok(())
}

/// The exact answer for one value, of any exponent.
fn exactly(value: f64, bounds: &Bounds) -> Fraction {
    match target_from_f64(value) {
        Ok(target) => best(&target, bounds).ratio,
        // Beyond 128 bits a value is above every ratio, or below half of the least one.
        Err(_) if value > 1.0 => smooth::extremes(bounds).1,
        Err(_) => smooth::extremes(bounds).0,
    }
}

#[cfg(target_arch = "x86_64")]
fn in_lanes(targets: &[f64], bounds: &Bounds, answers: &mut [Fraction]) {
    /// The same code, compiled for vectors of four doubles and a vector floor.
    #[target_feature(enable = "avx2")]
    fn with_avx2(targets: &[f64], bounds: &Bounds, answers: &mut [Fraction]) {
        chunks(targets, bounds, answers);
    }
    if is_x86_feature_detected!("avx2") {
        #[allow(
            unsafe_code,
            reason = "the processor was asked for the feature in the line above"
        )]
        unsafe {
            with_avx2(targets, bounds, answers);
        }
    } else {
        for (target, answer) in targets.iter().zip(answers) {
            *answer = exactly(*target, bounds);
        }
    }
}

#[cfg(not(target_arch = "x86_64"))]
fn in_lanes(targets: &[f64], bounds: &Bounds, answers: &mut [Fraction]) {
    chunks(targets, bounds, answers);
}

#[inline(always)]
fn chunks(targets: &[f64], bounds: &Bounds, answers: &mut [Fraction]) {
    for (targets, answers) in targets.chunks(LANES).zip(answers.chunks_mut(LANES)) {
        let mut values = [1.0; LANES];
        values[..targets.len()].copy_from_slice(targets);
        let found = nearest(&values, bounds.max_l() as f64, bounds.max_m() as f64);
        for (lane, (target, answer)) in targets.iter().zip(answers).enumerate() {
            *answer = if found.is_sure[lane] {
                Fraction::new_raw(found.l[lane], found.m[lane])
            } else {
                exactly(*target, bounds)
            };
        }
    }
}

/// The answers of all lanes, and whether the doubles could tell.
struct Found {
    l: [u64; LANES],
    m: [u64; LANES],
    is_sure: [bool; LANES],
}

/// Euclid in every lane; the names are those of the narrow search.
#[inline(always)]
fn nearest(values: &[f64; LANES], max_l: f64, max_m: f64) -> Found {
    // The first quotient is the whole part. After it the old distance is the larger one.
    let whole = values.map(f64::floor);
    let (mut old_l, mut old_m, mut old_distance) = ([1.0; LANES], [0.0; LANES], [1.0; LANES]);
    let (mut new_l, mut new_m, mut new_distance) = (whole, [1.0; LANES], *values);
    // What L may be; nothing once a lane is done.
    let mut limit = [max_l; LANES];
    for i in 0..LANES {
        new_distance[i] -= whole[i];
    }
    loop {
        let mut moving = 0;
        for i in 0..LANES {
            let quotient = (old_distance[i] / new_distance[i]).floor();
            let distance = old_distance[i] - quotient * new_distance[i];
            let l = old_l[i] + quotient * new_l[i];
            let m = old_m[i] + quotient * new_m[i];
            // False also for the infinity and NaN of a division by zero.
            let goes_on = (l <= limit[i]) & (m <= max_m) & (distance >= 0.0);
            limit[i] = if goes_on { limit[i] } else { -1.0 };
            moving |= u64::from(goes_on);
            // A lane that stands still swaps its two ends, which is less work than to keep them.
            let pick = |next: f64, now: f64| if goes_on { next } else { now };
            (old_l[i], new_l[i]) = (new_l[i], pick(l, old_l[i]));
            (old_m[i], new_m[i]) = (new_m[i], pick(m, old_m[i]));
            (old_distance[i], new_distance[i]) = (new_distance[i], pick(distance, old_distance[i]));
        }
        if moving == 0 {
            break;
        }
    }
    for i in 0..LANES {
        let is_swapped = old_distance[i] < new_distance[i];
        let order = |old: f64, new: f64| if is_swapped { (new, old) } else { (old, new) };
        (old_l[i], new_l[i]) = order(old_l[i], new_l[i]);
        (old_m[i], new_m[i]) = order(old_m[i], new_m[i]);
        (old_distance[i], new_distance[i]) = order(old_distance[i], new_distance[i]);
    }
    let mut found = Found {
        l: [0; LANES],
        m: [0; LANES],
        is_sure: [false; LANES],
    };
    for i in 0..LANES {
        // Division by a zero part gives infinity, which the other part is below.
        let run = ((max_m - old_m[i]) / new_m[i])
            .min((max_l - old_l[i]) / new_l[i])
            .floor();
        let (l, m) = (old_l[i] + run * new_l[i], old_m[i] + run * new_m[i]);
        let far_distance = old_distance[i] - run * new_distance[i];
        let far = far_distance * new_m[i];
        let near = new_distance[i] * m;
        let is_far_only = (new_l[i] == 0.0) | (new_m[i] == 0.0);
        let is_near_only = l == 0.0;
        let is_far = (is_far_only | (far < near)) & !is_near_only;
        let is_told = (far - near).abs() > (far + near) * 2f64.powi(-50);
        found.l[i] = integer(if is_far { l } else { new_l[i] });
        found.m[i] = integer(if is_far { m } else { new_m[i] });
        let is_exact = (values[i] >= 0.5) & (whole[i] <= max_l) & (far_distance >= 0.0);
        found.is_sure[i] = (is_told | is_far_only | is_near_only) & is_exact;
    }
    found
}

/// A whole double from 0 to below 2^52 as an integer: added to 2^52, its last digits are the number's.
#[inline(always)]
fn integer(x: f64) -> u64 {
    (x + 2f64.powi(52)).to_bits() & ((1 << 52) - 1)
}
