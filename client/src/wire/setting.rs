//! Settings in.

use ratewright_proto::v1;
use ratewright_ratio::{
    Cadence, Fraction, Interval, Lazy, Parents, Stepping, SteppingPair, exact, target_from_f64,
};
use v1::setting::Realisation;

use super::fraction::{bracket, exact as exact_end, fraction, node, ratio};
use super::name::id_of;
use super::{WireError, required};
use crate::{Evidence, Proof, Realised, Reason, Setting, SettingNumber};

/// Largest headroom of a crossing, sink samples, and so the largest swing.
const LARGEST_SWING: f64 = 1e9;

impl TryFrom<v1::Setting> for Setting {
    type Error = WireError;

    fn try_from(wire: v1::Setting) -> Result<Self, WireError> {
        let wanted = fraction("setting.wanted", wire.wanted.as_ref())?;
        Ok(Self {
            reason: reason(&wire)?,
            crossing: id_of("setting.crossing", "crossings", &wire.crossing)?,
            number: SettingNumber {
                epoch: wire.epoch,
                number: wire.number,
            },
            wanted,
            realised: realised(wanted, wire.realisation)?,
            residual: wire.residual,
            proof: required("setting.certificate", wire.certificate)?.try_into()?,
            decided_ns: wire.decided_ns,
            effect_ns: wire.effect_ns,
            review_ns: wire.review_ns,
            expiry_ns: wire.expiry_ns,
            seconds_to_slip: wire.seconds_to_slip,
            evidence: required("setting.evidence", wire.evidence)?.try_into()?,
        })
    }
}

fn realised(wanted: Fraction, wire: Option<Realisation>) -> Result<Realised, WireError> {
    match required("setting.realisation", wire)? {
        Realisation::Single(single) => Ok(Realised::Single(ratio("setting.single", Some(single))?)),
        Realisation::Cadence(wire) => cadence(wanted, &wire).map(Realised::Cadence),
        Realisation::Stepping(wire) => stepping(wanted, &wire).map(Realised::Stepping),
        Realisation::Lazy(wire) => lazy(wanted, wire),
    }
}

/// The cadence is worked out anew from its two ratios; the counts that came must agree.
fn cadence(wanted: Fraction, wire: &v1::Cadence) -> Result<Cadence, WireError> {
    let low = ratio("setting.cadence.low", wire.low)?;
    let high = ratio("setting.cadence.high", wire.high)?;
    let cadence = Cadence::of_pair(&exact(&wanted), low, high)
        .map_err(|_| WireError::new("setting.cadence", wire, "two ratios around the wanted one"))?;
    if (cadence.low_blocks(), cadence.high_blocks()) != (wire.low_blocks, wire.high_blocks) {
        let counts = (wire.low_blocks, wire.high_blocks);
        return Err(WireError::new(
            "setting.cadence.low_blocks, high_blocks",
            counts,
            "the counts whose average is the wanted ratio",
        ));
    }
    Ok(cadence)
}

/// Worked out anew from the table's size; the advances that came must agree.
fn stepping(wanted: Fraction, wire: &v1::Stepping) -> Result<Stepping, WireError> {
    let field = "setting.stepping";
    let stepping = Stepping::new(&exact(&wanted), wire.phases)
        .map_err(|_| WireError::new(field, wire, "at least as many phases as outputs an input"))?;
    let advances = (wire.advance, wire.longer_advance);
    if stepping.advances() != advances {
        return Err(WireError::new(
            "setting.stepping.advance, longer_advance",
            advances,
            "the advances on either side of the wanted one",
        ));
    }
    Ok(stepping)
}

/// A swing that the two ratios cannot keep is refused.
fn lazy(wanted: Fraction, wire: v1::Lazy) -> Result<Realised, WireError> {
    let pair = required("setting.lazy.cadence", wire.cadence)?;
    let cadence = cadence(wanted, &pair)?;
    let swing_samples = wire.swing_samples;
    let kept = target_from_f64(swing_samples)
        .is_ok_and(|swing| swing_samples <= LARGEST_SWING && Lazy::new(cadence, &swing).is_ok());
    if !kept {
        return Err(WireError::new(
            "setting.lazy.swing_samples",
            swing_samples,
            "the error bound of the cadence to 10^9",
        ));
    }
    Ok(Realised::Lazy {
        cadence,
        swing_samples,
    })
}

fn reason(wire: &v1::Setting) -> Result<Reason, WireError> {
    match wire.reason() {
        v1::SettingReason::First => Ok(Reason::First),
        v1::SettingReason::Evidence => Ok(Reason::Evidence),
        v1::SettingReason::Recovery => Ok(Reason::Recovery),
        v1::SettingReason::Declaration => Ok(Reason::Declaration),
        v1::SettingReason::Group => Ok(Reason::Group),
        v1::SettingReason::Renewal => Ok(Reason::Renewal),
        v1::SettingReason::ChangeOver => Ok(Reason::ChangeOver),
        v1::SettingReason::Unspecified => Err(WireError::new(
            "setting.reason",
            wire.reason,
            "a known reason",
        )),
    }
}

impl TryFrom<v1::Certificate> for Proof {
    type Error = WireError;

    fn try_from(wire: v1::Certificate) -> Result<Self, WireError> {
        use v1::certificate::Proof as Wire;
        match required("certificate.proof", wire.proof)? {
            Wire::Nearest(ends) => Ok(Self::Nearest(bracket("certificate.nearest", &ends)?)),
            Wire::Neighbours(ends) => {
                Ok(Self::Neighbours(bracket("certificate.neighbours", &ends)?))
            }
            Wire::Stepping(v1::SteppingPair { phases, advance }) => {
                Ok(Self::Stepping(SteppingPair { phases, advance }))
            }
            Wire::Uncertified(reason) => Ok(Self::Uncertified(reason)),
            Wire::Simplest(simplest) => {
                let low = exact_end("certificate.simplest.low", simplest.low.as_ref())?;
                let high = exact_end("certificate.simplest.high", simplest.high.as_ref())?;
                let interval = Interval::closed(low, high).map_err(|_| {
                    WireError::new("certificate.simplest", (low, high), "low at most high")
                })?;
                let left = node(
                    "certificate.simplest.left_parent",
                    simplest.left_parent.as_ref(),
                )?;
                let right = node(
                    "certificate.simplest.right_parent",
                    simplest.right_parent.as_ref(),
                )?;
                Ok(Self::Simplest {
                    interval,
                    parents: Parents { left, right },
                })
            }
        }
    }
}

impl TryFrom<v1::Evidence> for Evidence {
    type Error = WireError;

    fn try_from(wire: v1::Evidence) -> Result<Self, WireError> {
        let optional = |field: &str, end: Option<v1::Fraction>| {
            end.as_ref()
                .map(|end| fraction(field, Some(end)))
                .transpose()
        };
        Ok(Self {
            target: wire.target,
            target_low: wire.target_low,
            target_high: wire.target_high,
            source_drift: wire.source_drift,
            source_deviation: wire.source_deviation,
            sink_drift: wire.sink_drift,
            sink_deviation: wire.sink_deviation,
            phase_error_samples: wire.phase_error_samples,
            phase_deviation_samples: wire.phase_deviation_samples,
            allowed_low: optional("evidence.allowed_low", wire.allowed_low)?,
            allowed_high: optional("evidence.allowed_high", wire.allowed_high)?,
            expected_hold_seconds: wire.expected_hold_seconds,
        })
    }
}
