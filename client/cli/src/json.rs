//! Clocks, crossings and settings for machines. Field names are those of the contract; exact
//! fractions are texts `n/d`.

use ratewright_client::{Clock, Crossing, Estimate, Id, Pin, Proof, Realised, Reference, Setting};
use ratewright_ratio::{Cadence, Fraction};
use serde_json::{Value, json};

use crate::show;

fn fraction(fraction: &Fraction) -> String {
    format!("{}/{}", fraction.numer(), fraction.denom())
}

/// A clock with its estimate.
pub(crate) fn clock(clock: &Clock) -> Value {
    json!({
        "clock": clock.declaration.id.as_str(),
        "nominal_hz": fraction(&clock.declaration.nominal_hz),
        "exact": clock.declaration.exact,
        "tolerance_ppm": clock.declaration.tolerance_ppm,
        "oscillator": clock.declaration.oscillator.map(show::oscillator_word),
        "tail": clock.declaration.tail.map(show::tail_word),
        "quantum_ns": clock.declaration.quantum_ns,
        "statistics": clock.declaration.statistics,
        "fault": clock.fault,
        "estimate": estimate(&clock.estimate),
    })
}

fn estimate(estimate: &Estimate) -> Value {
    json!({
        "state": show::state_word(estimate.state),
        "drift_ppm": estimate.drift * 1e6,
        "drift_low_ppm": estimate.drift_low * 1e6,
        "drift_high_ppm": estimate.drift_high * 1e6,
        "deviation_ppm": estimate.deviation * 1e6,
        "as_of_ns": estimate.as_of_ns,
        "last_reading_ns": estimate.last_reading_ns,
        "readings_used": estimate.readings_used,
        "readings_set_aside": estimate.readings_set_aside,
        "lock_expected_seconds": estimate.lock_expected_seconds,
        "reference": estimate.reference.as_ref().map(|reference| match reference {
            Reference::House => "house",
            Reference::Clock(id) => id.as_str(),
        }),
    })
}

/// A crossing with its status.
pub(crate) fn crossing(crossing: &Crossing) -> Value {
    let (declaration, status) = (&crossing.declaration, &crossing.status);
    json!({
        "crossing": declaration.id.as_str(),
        "source": declaration.source.as_str(),
        "sink": declaration.sink.as_str(),
        "backup": declaration.backup.as_ref().map(Id::as_str),
        "source_in_use": status.source.as_str(),
        "max_l": declaration.bounds.max_l(),
        "max_m": declaration.bounds.max_m(),
        "headroom_samples": declaration.headroom_samples,
        "realisation": show::realisation_word(declaration.realisation),
        "group": declaration.group.as_ref().map(Id::as_str),
        "least_hold_ns": declaration.least_hold_ns,
        "pitch_limit_ppm": declaration.pitch_limit_ppm,
        "silent": declaration.silent,
        "state": show::crossing_word(status.state),
        "reason": status.reason,
        "target": status.target,
        "target_low": status.target_low,
        "target_high": status.target_high,
        "residual_ppb": status.residual * 1e9,
        "phase_error_samples": status.phase_error_samples,
        "phase_deviation_samples": status.phase_deviation_samples,
        "seconds_to_slip": status.seconds_to_slip,
        "seconds_vouched": status.seconds_vouched,
        "pin": status.pin.as_ref().map(pin),
        "needed": status
            .needed
            .as_ref()
            .map(|bounds| json!({ "max_l": bounds.max_l(), "max_m": bounds.max_m() })),
        "setting": status.setting.as_ref().map(setting),
        "settings_made": status.settings_made,
    })
}

fn pin(pin: &Pin) -> Value {
    json!({ "by": pin.by, "since_ns": pin.since_ns, "note": pin.note })
}

/// A setting.
pub(crate) fn setting(setting: &Setting) -> Value {
    json!({
        "setting": setting.name(),
        "crossing": setting.crossing.as_str(),
        "epoch": setting.number.epoch,
        "number": setting.number.number,
        "wanted": fraction(&setting.wanted),
        "realisation": kind(&setting.realised),
        "realised": realised(&setting.realised),
        "residual_ppb": setting.residual * 1e9,
        "certificate": proof(&setting.proof),
        "decided_ns": setting.decided_ns,
        "effect_ns": setting.effect_ns,
        "review_ns": setting.review_ns,
        "expiry_ns": setting.expiry_ns,
        "seconds_to_slip": setting.seconds_to_slip,
        "reason": show::reason_word(setting.reason),
        "target": setting.evidence.target,
        "target_low": setting.evidence.target_low,
        "target_high": setting.evidence.target_high,
    })
}

/// As the realisation of a crossing is spelled.
fn kind(realised: &Realised) -> &'static str {
    match realised {
        Realised::Single(_) => "single",
        Realised::Cadence(_) => "cadence",
        Realised::Stepping(_) => "stepping",
        Realised::Lazy { .. } => "lazy",
    }
}

fn realised(realised: &Realised) -> Value {
    match realised {
        Realised::Single(ratio) => json!({ "l": ratio.numer(), "m": ratio.denom() }),
        Realised::Cadence(cadence) => pair(cadence),
        Realised::Stepping(stepping) => {
            let (advance, longer) = stepping.advances();
            json!({ "phases": stepping.phases(), "advance": advance, "longer_advance": longer })
        }
        Realised::Lazy {
            cadence,
            swing_samples,
        } => {
            let mut lazy = pair(cadence);
            lazy["swing_samples"] = json!(swing_samples);
            lazy
        }
    }
}

fn pair(cadence: &Cadence) -> Value {
    let block = |ratio: Fraction, count: u64| json!({ "l": ratio.numer(), "m": ratio.denom(), "count": count });
    json!({
        "low": block(cadence.low(), cadence.low_blocks()),
        "high": block(cadence.high(), cadence.high_blocks()),
    })
}

fn proof(proof: &Proof) -> Value {
    let ends = |below: String, above: String| json!({ "below": below, "above": above });
    match proof {
        Proof::Nearest(bracket) => {
            json!({ "nearest": ends(bracket.below.to_string(), bracket.above.to_string()) })
        }
        Proof::Neighbours(bracket) => {
            json!({ "neighbours": ends(bracket.below.to_string(), bracket.above.to_string()) })
        }
        Proof::Simplest { interval, parents } => json!({ "simplest": {
            "low": format!("{}/{}", interval.lo().numer(), interval.lo().denom()),
            "high": format!("{}/{}", interval.hi().numer(), interval.hi().denom()),
            "left_parent": parents.left.to_string(),
            "right_parent": parents.right.to_string(),
        }}),
        Proof::Stepping(pair) => {
            json!({ "stepping": { "phases": pair.phases, "advance": pair.advance } })
        }
        Proof::Uncertified(reason) => json!({ "uncertified": reason }),
    }
}
