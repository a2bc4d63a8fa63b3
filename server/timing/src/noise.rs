//! Density of one direction's measurement error, and its scores.
//!
//! The error e has its tail to the right. With S² = σ² + P the variance of the normal part
//! (P is the filter's own), the density is
//! .98·[w₀N(0, S²) + w₁EMG(S, τ₁) + w₂EMG(S, τ₂) + w_B·EMG(S, τ_B)] +
//! .02·(1 − w_F)·N(0, (4(σ + τ₁))² + P) + w_F·flat,
//! flat meaning 1 over 2 s, and EMG the exponentially modified normal: normal plus exponential.
//! The part B is that of bursts of queueing, on two-way paths alone.
//! With u = e/S − S/τ and h = φ(u)/Φ(u): ln g = −ln τ + S²/2τ² − e/τ + ln Φ(u),
//! g′/g = h/S − 1/τ, (ln g)″ = −h(u + h)/S². Times in µs.

use serde::{Deserialize, Serialize};

use crate::exponential::exp;
use crate::normal::erfcx;

const FRAC_1_SQRT_TAU: f64 = 0.398_942_280_401_432_7;
const FRAC_1_SQRT_2: f64 = core::f64::consts::FRAC_1_SQRT_2;
/// Density of the flat part: 1 over 2 s.
const FLAT: f64 = 0.5e-6;
/// Share of the normal and tailed parts against the wide one.
const CORE: f64 = 0.98;

/// Parameters of the error density of one direction.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Noise {
    /// Deviation of the normal part, µs.
    pub(crate) sigma: f64,
    /// Mean of the two exponential tails, µs.
    pub(crate) tau: [f64; 2],
    /// Weights of normal, first tail, second tail; with `flat` they sum to one.
    pub(crate) weights: [f64; 3],
    /// Weight of the flat part.
    pub(crate) flat: f64,
    /// What a burst of queueing adds.
    pub(crate) burst: Burst,
}

/// A third tail: that of a burst of queueing, in which every row is late.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Burst {
    /// Probability of being in one.
    pub(crate) weight: f64,
    /// Mean of the tail, µs.
    pub(crate) tau: f64,
}

impl Burst {
    /// No burst.
    pub(crate) const NONE: Burst = Burst {
        weight: 0.0,
        tau: 1.0,
    };
}

/// A density as it is kept between rows: σ, both τ, the weights of tails and flat part; that of
/// the normal part is what they leave.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct PackedNoise([f32; 6]);

impl From<&Noise> for PackedNoise {
    fn from(n: &Noise) -> Self {
        let [_, first, second] = n.weights;
        let figures = [n.sigma, n.tau[0], n.tau[1], first, second, n.flat];
        PackedNoise(figures.map(|figure| figure as f32))
    }
}

impl PackedNoise {
    pub(crate) fn unpacked(&self) -> Noise {
        let [sigma, short, long, first, second, flat] = self.0.map(f64::from);
        Noise {
            sigma,
            tau: [short, long],
            weights: [1.0 - first - second - flat, first, second],
            flat,
            burst: Burst::NONE,
        }
    }
}

/// Log density and its first two derivatives in e.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Score {
    pub(crate) log: f64,
    pub(crate) first: f64,
    pub(crate) second: f64,
}

/// Score with what each part had to do with it.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Detail {
    pub(crate) score: Score,
    /// Responsibilities of normal, first and second tail, wide, flat, burst.
    pub(crate) shares: [f64; 6],
    /// Expected exponential part of either tail, µs.
    pub(crate) excess: [f64; 2],
    /// Expected square of the normal part (noise and filter together), µs²: normal, tails.
    pub(crate) normal_square: [f64; 3],
    /// S², µs².
    pub(crate) variance: f64,
}

/// One exponentially modified part: density over the common normal factor, h and u.
#[derive(Clone, Copy)]
struct Tail {
    density: f64,
    ratio: f64,
    u: f64,
}

impl Tail {
    const NONE: Tail = Tail {
        density: 0.0,
        ratio: 0.0,
        u: 0.0,
    };
}

#[inline]
fn tail(e: f64, s: f64, tau: f64, kernel: f64) -> Tail {
    let rate = 1.0 / tau;
    let u = e / s - s * rate;
    if u < 0.0 {
        let scaled = erfcx(-u * FRAC_1_SQRT_2);
        let density = 0.5 * rate * kernel * scaled;
        return Tail {
            density,
            ratio: 2.0 * FRAC_1_SQRT_TAU / scaled,
            u,
        };
    }
    let q = exp(-0.5 * u * u);
    let cdf = 1.0 - 0.5 * q * erfcx(u * FRAC_1_SQRT_2);
    let exponential = if q > 1e-100 && kernel > 1e-100 {
        kernel / q
    } else {
        exp((0.5 * s * s * rate - e) * rate)
    };
    Tail {
        density: exponential * cdf * rate,
        ratio: FRAC_1_SQRT_TAU * q / cdf,
        u,
    }
}

impl Noise {
    /// Scale beyond which an error is no longer ordinary, µs.
    pub(crate) fn reach(&self) -> f64 {
        4.0 * (self.sigma + self.tau[0])
    }

    /// Mean lateness beyond the least, µs: spread of the normal part and mean of the tails.
    pub(crate) fn mean_lateness(&self) -> f64 {
        self.sigma + self.weights[1] * self.tau[0] + self.weights[2] * self.tau[1]
    }

    /// The density while the path may be in a burst.
    pub(crate) fn with_burst(&self, burst: Burst) -> Noise {
        let calm = 1.0 - burst.weight;
        Noise {
            weights: self.weights.map(|w| w * calm),
            flat: self.flat * calm,
            burst,
            ..*self
        }
    }

    /// Log density and derivatives of error `e` seen by a state of phase variance `p`.
    #[inline]
    pub(crate) fn score(&self, e: f64, p: f64) -> Score {
        self.detail(e, p).score
    }

    /// The same with responsibilities and expectations.
    #[inline]
    pub(crate) fn detail(&self, e: f64, p: f64) -> Detail {
        let variance = self.sigma * self.sigma + p;
        let s = variance.sqrt();
        let inverse = 1.0 / variance;
        let kernel = exp(-0.5 * e * e * inverse);
        let reach = self.reach();
        let wide_inverse = 1.0 / (reach * reach + p);
        let wide_kernel = exp(-0.5 * e * e * wide_inverse);
        let tails = [
            tail(e, s, self.tau[0], kernel),
            tail(e, s, self.tau[1], kernel),
        ];
        let burst = if self.burst.weight > 0.0 {
            tail(e, s, self.burst.tau, kernel)
        } else {
            Tail::NONE
        };
        let late = CORE * self.burst.weight * burst.density;
        let parts = [
            CORE * self.weights[0] * FRAC_1_SQRT_TAU / s * kernel,
            CORE * self.weights[1] * tails[0].density,
            CORE * self.weights[2] * tails[1].density,
            (1.0 - CORE) * (1.0 - self.flat) * FRAC_1_SQRT_TAU * wide_inverse.sqrt() * wide_kernel,
            self.flat * FLAT,
        ];
        let total = parts.iter().sum::<f64>() + late;
        let whole = 1.0 / total;
        let [normal, first_tail, second_tail, wide, flat] = parts.map(|part| part * whole);
        let shares = [normal, first_tail, second_tail, wide, flat, late * whole];
        let steep = |t: &Tail, tau: f64| t.ratio / s - 1.0 / tau;
        let bent = |t: &Tail| -t.ratio * (t.u + t.ratio) * inverse;
        let slope = [
            -e * inverse,
            steep(&tails[0], self.tau[0]),
            steep(&tails[1], self.tau[1]),
            -e * wide_inverse,
        ];
        let curve = [-inverse, bent(&tails[0]), bent(&tails[1]), -wide_inverse];
        let (mut first, mut second) = (0.0, 0.0);
        for k in 0..4 {
            first += shares[k] * slope[k];
            second += shares[k] * (curve[k] + slope[k] * slope[k]);
        }
        if self.burst.weight > 0.0 {
            let slope = steep(&burst, self.burst.tau);
            first += shares[5] * slope;
            second += shares[5] * (bent(&burst) + slope * slope);
        }
        let excess = tails.map(|t| s * (t.u + t.ratio));
        let square = |k: usize| {
            let t = tails[k];
            e * e - 2.0 * e * excess[k] + variance * (1.0 + t.u * t.u + t.u * t.ratio)
        };
        Detail {
            score: Score {
                log: libm::log(total),
                first,
                second: second - first * first,
            },
            shares,
            excess,
            normal_square: [e * e, square(0), square(1)],
            variance,
        }
    }

    /// Distance by which the location that scores of `self` settle at lies off, when errors
    /// are distributed as `truth`: (E[ℓ′] − E[ℓ′ of truth]) / E[−ℓ″], by a 40-node
    /// trapezoidal rule in v with e = σ sinh v.
    pub(crate) fn displacement(&self, truth: &Noise, p: f64) -> f64 {
        const NODES: usize = 40;
        let reach = 8.0 * (truth.tau[1].max(self.tau[1]) + self.sigma);
        let v_max = libm::asinh(reach / self.sigma);
        let v_min = -libm::asinh(reach.min(12.0 * (truth.sigma + truth.tau[0])) / self.sigma);
        let step = (v_max - v_min) / (NODES - 1) as f64;
        let (mut own, mut reference, mut information) = (0.0, 0.0, 0.0);
        for i in 0..NODES {
            let v = v_min + step * i as f64;
            let grown = exp(v);
            let (sinh, cosh) = (0.5 * (grown - 1.0 / grown), 0.5 * (grown + 1.0 / grown));
            let e = self.sigma * sinh;
            let old = self.score(e, p);
            let new = truth.score(e, p);
            let mass = exp(new.log) * cosh;
            own += mass * old.first;
            reference += mass * new.first;
            information -= mass * old.second;
        }
        if information > 0.0 {
            (own - reference) / information
        } else {
            0.0
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const NOISE: Noise = Noise {
        sigma: 6.0,
        tau: [20.0, 110.0],
        weights: [0.6, 0.25, 0.14],
        flat: 0.01,
        burst: Burst::NONE,
    };

    #[test]
    fn derivatives_agree_with_differences_of_the_log_density() {
        let congested = NOISE.with_burst(Burst {
            weight: 0.3,
            tau: 300.0,
        });
        for noise in [NOISE, congested] {
            for p in [0.0, 3.0, 400.0] {
                assert_derivatives(&noise, p);
            }
        }
    }

    fn assert_derivatives(noise: &Noise, p: f64) {
        for i in -400..900 {
            let e = i as f64 * 0.5;
            let h = 1e-3;
            let (a, b, c) = (
                noise.score(e - h, p),
                noise.score(e, p),
                noise.score(e + h, p),
            );
            let first = (c.log - a.log) / (2.0 * h);
            let second = (c.first - a.first) / (2.0 * h);
            assert!(
                (b.first - first).abs() < 1e-5,
                "e {e} p {p}: {} {first}",
                b.first
            );
            assert!(
                (b.second - second).abs() < 1e-5,
                "e {e} p {p}: {} {second}",
                b.second
            );
        }
    }

    #[test]
    fn density_has_mass_one_without_its_flat_part() {
        let mut mass = 0.0;
        for i in -4000..40000 {
            mass += libm::exp(NOISE.score(i as f64 * 0.1, 2.0).log) - NOISE.flat * FLAT;
        }
        assert!((mass * 0.1 - 0.99).abs() < 1e-3, "{}", mass * 0.1);
    }

    #[test]
    fn displacement_is_nought_for_the_same_density() {
        assert!(NOISE.displacement(&NOISE, 0.5).abs() < 1e-12);
        let mut heavier = NOISE;
        heavier.tau[0] = 40.0;
        assert!(
            NOISE.displacement(&heavier, 0.5) > 0.1,
            "more tail settles later"
        );
    }
}
