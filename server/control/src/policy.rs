//! The policy: hold as long as the evidence allows, then the simplest ratio that holds longest.
//!
//! Two layers. The first picks a *virtual* rate, a fraction with a denominator up to 2³¹, from the
//! interval of rates that keep the phase error's band in the tube longest ([`funnel`]); the second
//! realises it within the crossing's bounds ([`realise`]).

use crate::CrossingDeclaration;

pub(crate) mod choose;
pub(crate) mod funnel;
pub(crate) mod keep;
pub(crate) mod outlook;
pub(crate) mod realise;
pub(crate) mod slip;
pub(crate) mod standing;

/// Standard deviations that planning and keeping leave room for, of what lasts (the phase at the
/// stream's beginning: if that is wrong it is wrong for good) and of what later readings tell.
/// Planning and keeping use the same: with a smaller margin for the growth than for what is
/// uncertain now, the plan ends at an edge where keeping refuses at once (measured: twice the
/// changes at half a sample of headroom). The tube's own reserve stands behind them, so more
/// deviations only cost changes (`examples/hold_table`).
pub(crate) const LASTING_DEVIATIONS: f64 = 2.25;
pub(crate) const PASSING_DEVIATIONS: f64 = 2.0;
/// The tube: the share of the headroom that planning may use.
pub(crate) const TUBE: f64 = 0.8;
/// Recovery may take at least so long, seconds.
pub(crate) const RECOVERY_S: f64 = 120.0;
/// How far ahead a hold is planned, seconds.
pub(crate) const PLAN_HORIZON_S: f64 = 40_000.0;
/// Of the longest possible hold, the share that is planned for, to the gain of simplicity.
pub(crate) const HOLD_SHARE: f64 = 0.95;
/// Of a velocity's standard deviation, the share that a ratio may be off without being any worse:
/// it adds half a per cent to the uncertainty.
pub(crate) const SAID_NOTHING: f64 = 0.1;
/// Largest denominator of a virtual rate.
pub(crate) const MAX_VIRTUAL: u64 = 1 << 31;
/// The share of the headroom that the running error of lazy switching may take: each hold of one
/// of the two ratios runs across it, so that a wider one switches less often but leaves less of
/// the tube for what is uncertain.
pub const SWING_SHARE: f64 = 0.25;
/// Error in output samples that a change from one pair of ratios to another carries over.
pub(crate) const CARRIED_SAMPLES: f64 = 0.0013;

/// Velocity that recovery may have at a sink's rate, samples/s.
pub(crate) fn pitch_limit(declaration: &CrossingDeclaration, sink_hz: f64) -> f64 {
    declaration.pitch_limit_ppm * 1e-6 * sink_hz
}

/// Seconds that the recovery of so many samples may take.
pub(crate) fn recovery_s(excess: f64, limits: &Limits) -> f64 {
    RECOVERY_S.max(excess / (0.8 * limits.pitch))
}

/// The limits of the phase error that planning and keeping go by, sink samples and samples/s.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Limits {
    /// The tube, less what is run errs by itself.
    pub(crate) tube: f64,
    /// Velocity that recovery may have.
    pub(crate) pitch: f64,
}

impl Limits {
    /// The limits of a crossing, if what is run errs by up to `own_error` samples itself.
    /// An error that fills the tube cannot be planned away: then its average is kept to the tube.
    pub(crate) fn new(declaration: &CrossingDeclaration, own_error: f64, sink_hz: f64) -> Self {
        let headroom = declaration.headroom_samples;
        let error = if own_error < TUBE * headroom {
            own_error
        } else {
            0.0
        };
        Limits {
            tube: TUBE * headroom - error,
            pitch: pitch_limit(declaration, sink_hz),
        }
    }
}
