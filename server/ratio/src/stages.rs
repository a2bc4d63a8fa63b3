//! Stages: L/M as a product of smaller stages, each a polyphase filter of its own.
//!
//! **Rule.** No rate between the stages falls below the smaller of the two end rates, so nothing of the
//! band is lost on the way. A stage from rate f to f·l/m runs its prototype at f·l. It passes the wanted
//! passband, and it stops from `min(f, f·l/m) − s` on, where s is half the smaller end rate: what folds or
//! images from there lands above s, outside the wanted band. For a single stage that is s itself.
//!
//! **Length.** Kaiser's estimate ([`crate::kaiser`]) at the wanted stopband plus 20·log₁₀ K dB for K stages,
//! since the ripples of the stages add up. It is an estimate, not a design: measure the filter.
//!
//! **Method.** Dynamic programming over (l used, m used), divisors of L and M: [`least_work`] keeps one plan a
//! state and number of stages, [`front`] keeps all that nothing else beats.
//!
//! **Cost.** 20 to 100 µs for the least work of the standard pairs, about ten times that for the whole front.
//!
//! **Corner cases.** A prime L and M leave one stage. Near 1 stages save memory, but never multiply-adds.

use serde::{Deserialize, Serialize};
use thiserror::Error;

use crate::{Fraction, kaiser};

/// Most stages considered: more never pay for the allowance and the delay they bring.
pub const MAX_STAGES: usize = 4;

/// What the whole chain has to do.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct FilterSpec {
    /// Source rate, Hz.
    pub source_rate_hz: f64,
    /// Band to be passed, from 0 to this, Hz; below half of the smaller end rate.
    pub passband_hz: f64,
    /// Attenuation outside and ripple inside, dB, 21 to 240.
    pub stopband_db: f64,
}

/// Largest L and M that are split into stages.
pub const MAX_PART: u64 = 1 << 16;

/// Why stages were refused.
#[derive(Clone, Copy, Debug, PartialEq, Error)]
pub enum StageError {
    /// A part out of range.
    #[error("{field} is {value}; accepted are 1 to {MAX_PART}")]
    Part {
        /// `l` or `m`.
        field: &'static str,
        /// The refused value.
        value: u64,
    },
    /// A source rate that is not a positive number.
    #[error("source_rate_hz is {value}; accepted are positive finite rates")]
    SourceRate {
        /// The refused value.
        value: f64,
    },
    /// A passband that leaves no room for a transition.
    #[error(
        "passband_hz is {value}; accepted are values above 0 and below {limit}, half the smaller rate"
    )]
    Passband {
        /// The refused value.
        value: f64,
        /// Half the smaller end rate, Hz.
        limit: f64,
    },
    /// A stopband out of the estimate's range.
    #[error("stopband_db is {value}; accepted are 21 to 240 dB")]
    Stopband {
        /// The refused value.
        value: f64,
    },
}

/// One polyphase filter.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Stage {
    /// Output samples a block.
    pub l: u64,
    /// Input samples a block.
    pub m: u64,
    /// Coefficients of a phase: the multiply-adds for one output of this stage.
    pub taps_per_phase: u64,
}

/// What a chain costs.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Cost {
    /// Multiply-adds for one sink sample.
    pub multiply_adds: f64,
    /// Coefficients to be held, all stages.
    pub coefficients: u64,
    /// Delay of the linear-phase filters, seconds.
    pub delay_s: f64,
}

impl Cost {
    /// True if this is at least as good in everything.
    fn beats(&self, other: &Self) -> bool {
        self.multiply_adds <= other.multiply_adds
            && self.coefficients <= other.coefficients
            && self.delay_s <= other.delay_s
    }
}

/// A chain of stages with what it costs.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Chain {
    /// The stages from source to sink; none for a ratio of 1/1.
    pub stages: Vec<Stage>,
    /// What they cost together.
    pub cost: Cost,
}

/// The chain with the fewest multiply-adds a sink sample; on a tie the fewer stages.
///
/// # Errors
/// [`StageError`].
///
/// # Examples
/// ```
/// use ratewright_ratio::{Fraction, stages::{FilterSpec, least_work}};
/// // 192 -> 44.1 kHz: three stages need less than half of the work of one.
/// let spec = FilterSpec { source_rate_hz: 192_000.0, passband_hz: 20_000.0, stopband_db: 120.0 };
/// let chain = least_work(Fraction::new(147, 640), &spec)?;
/// assert!(chain.stages.len() > 1 && chain.cost.multiply_adds < 400.0);
/// # Ok::<(), ratewright_ratio::stages::StageError>(())
/// ```
pub fn least_work(ratio: Fraction, spec: &FilterSpec) -> Result<Chain, StageError> {
    // With one number to beat, all but one are beaten; the fewer stages come first and win a tie.
    let plans = search(ratio, spec, |a, b| a.multiply_adds <= b.multiply_adds)?;
    Ok(plans
        .first()
        .expect("the single stage is always a plan")
        .chain())
}

/// All chains that no other beats in multiply-adds, coefficients and delay together, by multiply-adds.
///
/// # Errors
/// [`StageError`].
pub fn front(ratio: Fraction, spec: &FilterSpec) -> Result<Vec<Chain>, StageError> {
    let mut kept = search(ratio, spec, Cost::beats)?;
    kept.sort_by(|a, b| a.cost.multiply_adds.total_cmp(&b.cost.multiply_adds));
    Ok(kept.iter().map(Partial::chain).collect())
}

/// A chain under construction.
#[derive(Clone, Copy, Debug, Default)]
struct Partial {
    stages: [Stage; MAX_STAGES],
    count: usize,
    cost: Cost,
}

impl Partial {
    fn chain(&self) -> Chain {
        Chain {
            stages: self.stages[..self.count].to_vec(),
            cost: self.cost,
        }
    }

    /// This chain with one more stage.
    fn then(mut self, step: &Step, stopband_db: f64) -> Self {
        let taps = kaiser::taps_estimate(stopband_db, step.width);
        // Rounded up by integers: `ceil` is a call on processors without an instruction for it.
        let exact = taps / step.l as f64;
        let whole = exact as u64;
        let stage = Stage {
            l: step.l,
            m: step.m,
            taps_per_phase: whole + u64::from(whole as f64 != exact),
        };
        let taps_per_phase = stage.taps_per_phase as f64;
        self.stages[self.count] = stage;
        self.count += 1;
        self.cost.multiply_adds += taps_per_phase * step.outputs_per_sink_sample;
        self.cost.coefficients += stage.taps_per_phase * step.l;
        self.cost.delay_s += (taps_per_phase * step.l as f64 - 1.0) / (2.0 * step.filter_rate_hz);
        self
    }
}

/// A possible stage between two states.
#[derive(Debug)]
struct Step {
    from: usize,
    to: usize,
    l: u64,
    m: u64,
    /// Transition band as a part of the Nyquist frequency at the filter's rate.
    width: f64,
    /// The filter's rate: l times the rate before it, Hz.
    filter_rate_hz: f64,
    outputs_per_sink_sample: f64,
}

/// All complete chains that no other beats, the fewer stages first. What beats a chain must beat every chain
/// that goes on from it, so a chain that a complete one beats is not followed.
fn search(
    ratio: Fraction,
    spec: &FilterSpec,
    beats: impl Fn(&Cost, &Cost) -> bool,
) -> Result<Vec<Partial>, StageError> {
    check(ratio, spec)?;
    if ratio == Fraction::new_raw(1, 1) {
        return Ok(vec![Partial::default()]);
    }
    let states = states(ratio);
    let last = states.len() - 1;
    // The last stage, and no other, completes the ratio.
    let (ends, others): (Vec<Step>, Vec<Step>) = steps(ratio, spec, &states)
        .into_iter()
        .partition(|step| step.to == last);
    let keep_unbeaten = |kept: &mut Vec<Partial>, new: Partial| {
        if !kept.iter().any(|old| beats(&old.cost, &new.cost)) {
            kept.retain(|old| !beats(&new.cost, &old.cost));
            kept.push(new);
        }
    };
    let mut complete: Vec<Partial> = Vec::new();
    for count in 1..=MAX_STAGES {
        let stopband_db = spec.stopband_db + 20.0 * libm::log10(count as f64);
        let mut layer = vec![Vec::new(); states.len()];
        layer[0].push(Partial::default());
        for _ in 1..count {
            let mut next = vec![Vec::new(); states.len()];
            for step in &others {
                for partial in &layer[step.from] {
                    let longer = partial.then(step, stopband_db);
                    if !complete.iter().any(|done| beats(&done.cost, &longer.cost)) {
                        keep_unbeaten(&mut next[step.to], longer);
                    }
                }
            }
            layer = next;
        }
        for step in &ends {
            for partial in &layer[step.from] {
                keep_unbeaten(&mut complete, partial.then(step, stopband_db));
            }
        }
    }
    Ok(complete)
}

/// (l, m) used so far, in an order in which the last is (L, M); rates below the smaller end are left out.
fn states(ratio: Fraction) -> Vec<(u64, u64)> {
    let (l_end, m_end) = (*ratio.numer(), *ratio.denom());
    let is_high_enough = |l: u64, m: u64| {
        if l_end >= m_end {
            l >= m
        } else {
            l * m_end >= l_end * m
        }
    };
    let columns = divisors(m_end);
    let pairs = divisors(l_end)
        .into_iter()
        .flat_map(|l| columns.iter().map(move |&m| (l, m)));
    pairs.filter(|&(l, m)| is_high_enough(l, m)).collect()
}

fn steps(ratio: Fraction, spec: &FilterSpec, states: &[(u64, u64)]) -> Vec<Step> {
    let source = spec.source_rate_hz;
    let sink = source * *ratio.numer() as f64 / *ratio.denom() as f64;
    let stop_edge = source.min(sink) / 2.0;
    let rate_at = |(l, m): (u64, u64)| source * l as f64 / m as f64;
    let mut steps = Vec::new();
    for (from, &before) in states.iter().enumerate() {
        for (to, &after) in states.iter().enumerate().skip(from + 1) {
            if after.0 % before.0 != 0 || after.1 % before.1 != 0 {
                continue;
            }
            let (l, m) = (after.0 / before.0, after.1 / before.1);
            let (rate_in, rate_out) = (rate_at(before), rate_at(after));
            let filter_rate_hz = rate_in * l as f64;
            let transition_hz = rate_in.min(rate_out) - stop_edge - spec.passband_hz;
            let width = 2.0 * transition_hz / filter_rate_hz;
            let outputs_per_sink_sample = rate_out / sink;
            steps.push(Step {
                from,
                to,
                l,
                m,
                width,
                filter_rate_hz,
                outputs_per_sink_sample,
            });
        }
    }
    steps
}

/// All divisors of `n`, ascending.
fn divisors(n: u64) -> Vec<u64> {
    let small: Vec<u64> = (1..)
        .take_while(|d| d * d <= n)
        .filter(|d| n.is_multiple_of(*d))
        .collect();
    let large = small.iter().rev().map(|d| n / d).skip_while(|d| d * d == n);
    small.iter().copied().chain(large).collect()
}

fn check(ratio: Fraction, spec: &FilterSpec) -> Result<(), StageError> {
    for (field, value) in [("l", *ratio.numer()), ("m", *ratio.denom())] {
        if !(1..=MAX_PART).contains(&value) {
            return Err(StageError::Part { field, value });
        }
    }
    let source = spec.source_rate_hz;
    if !(source.is_finite() && source > 0.0) {
        return Err(StageError::SourceRate { value: source });
    }
    let limit = source * (*ratio.numer() as f64 / *ratio.denom() as f64).min(1.0) / 2.0;
    if !(spec.passband_hz > 0.0 && spec.passband_hz < limit) {
        return Err(StageError::Passband {
            value: spec.passband_hz,
            limit,
        });
    }
    if !(21.0..=240.0).contains(&spec.stopband_db) {
        return Err(StageError::Stopband {
            value: spec.stopband_db,
        });
    }
    Ok(())
}
