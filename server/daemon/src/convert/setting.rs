//! Settings with their certificates and evidence.

use ratewright_control::{Evidence, Realised, Reason, Setting};
use ratewright_proto::v1::{self, certificate::Proof, setting::Realisation};
use ratewright_ratio::{self as ratio, Bracket, Certificate, Fraction, Node};

use super::{
    names,
    rate::{fraction_to_wire, ratio_to_wire},
};

pub(crate) fn setting_to_wire(setting: &Setting) -> v1::Setting {
    let interval = (
        &setting.evidence.allowed_low,
        &setting.evidence.allowed_high,
    );
    v1::Setting {
        name: names::setting(setting),
        crossing: names::crossing(&setting.crossing),
        epoch: setting.epoch,
        number: setting.number,
        wanted: Some(fraction_to_wire(&setting.wanted)),
        realisation: Some(match &setting.realised {
            Realised::Single(ratio) => Realisation::Single(ratio_to_wire(ratio)),
            Realised::Cadence(cadence) => Realisation::Cadence(cadence_to_wire(cadence)),
            Realised::Stepping(stepping) => Realisation::Stepping(stepping_to_wire(stepping)),
            Realised::Lazy {
                cadence,
                swing_samples,
            } => Realisation::Lazy(v1::Lazy {
                cadence: Some(cadence_to_wire(cadence)),
                swing_samples: *swing_samples,
            }),
        }),
        residual: setting.residual,
        certificate: Some(certificate_to_wire(&setting.certificate, interval)),
        decided_ns: setting.decided_ns,
        effect_ns: setting.effect_ns,
        review_ns: setting.review_ns,
        expiry_ns: setting.expiry_ns,
        seconds_to_slip: setting.seconds_to_slip,
        reason: reason_to_wire(setting.reason).into(),
        evidence: Some(evidence_to_wire(&setting.evidence)),
    }
}

pub(crate) fn cadence_to_wire(cadence: &ratio::Cadence) -> v1::Cadence {
    let bound = cadence.error_bound();
    v1::Cadence {
        low: Some(ratio_to_wire(&cadence.low())),
        high: Some(ratio_to_wire(&cadence.high())),
        low_blocks: cadence.low_blocks(),
        high_blocks: cadence.high_blocks(),
        error_bound_samples: *bound.numer() as f64 / *bound.denom() as f64,
    }
}

pub(crate) fn stepping_to_wire(stepping: &ratio::Stepping) -> v1::Stepping {
    let (advance, longer_advance) = stepping.advances();
    let bound = stepping.error_bound();
    v1::Stepping {
        phases: stepping.phases(),
        advance,
        longer_advance,
        error_bound_samples: *bound.numer() as f64 / *bound.denom() as f64,
    }
}

/// A certificate; `interval` is what a "simplest" speaks of.
pub(crate) fn certificate_to_wire(
    certificate: &Certificate,
    interval: (&Fraction, &Fraction),
) -> v1::Certificate {
    let proof = match certificate {
        Certificate::Nearest(bracket) => Proof::Nearest(bracket_to_wire(bracket)),
        Certificate::NeighbourPair(bracket) => Proof::Neighbours(bracket_to_wire(bracket)),
        Certificate::Simplest(parents) => Proof::Simplest(v1::Simplest {
            low: Some(fraction_to_wire(interval.0)),
            high: Some(fraction_to_wire(interval.1)),
            left_parent: Some(node_to_wire(parents.left)),
            right_parent: Some(node_to_wire(parents.right)),
        }),
        Certificate::SteppingPair(pair) => Proof::Stepping(v1::SteppingPair {
            phases: pair.phases,
            advance: pair.advance,
        }),
        Certificate::Uncertified(reason) => Proof::Uncertified(reason.to_string()),
    };
    v1::Certificate { proof: Some(proof) }
}

fn bracket_to_wire(bracket: &Bracket) -> v1::Bracket {
    v1::Bracket {
        below: Some(node_to_wire(bracket.below)),
        above: Some(node_to_wire(bracket.above)),
    }
}

fn node_to_wire(node: Node) -> v1::Fraction {
    v1::Fraction {
        numerator: node.l.to_string(),
        denominator: node.m.to_string(),
    }
}

fn reason_to_wire(reason: Reason) -> v1::SettingReason {
    match reason {
        Reason::First => v1::SettingReason::First,
        Reason::Evidence => v1::SettingReason::Evidence,
        Reason::Recovery => v1::SettingReason::Recovery,
        Reason::Declaration => v1::SettingReason::Declaration,
        Reason::Group => v1::SettingReason::Group,
        Reason::Renewal => v1::SettingReason::Renewal,
        Reason::ChangeOver => v1::SettingReason::ChangeOver,
    }
}

fn evidence_to_wire(evidence: &Evidence) -> v1::Evidence {
    v1::Evidence {
        target: evidence.target,
        target_low: evidence.target_low,
        target_high: evidence.target_high,
        source_drift: evidence.source_drift,
        source_deviation: evidence.source_deviation,
        sink_drift: evidence.sink_drift,
        sink_deviation: evidence.sink_deviation,
        phase_error_samples: evidence.phase_error_samples,
        phase_deviation_samples: evidence.phase_deviation_samples,
        allowed_low: Some(fraction_to_wire(&evidence.allowed_low)),
        allowed_high: Some(fraction_to_wire(&evidence.allowed_high)),
        expected_hold_seconds: evidence.expected_hold_s,
    }
}
