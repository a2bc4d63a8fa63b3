//! Settings in plain words and numbers.

use ratewright_ratio::{Certificate, Fraction};

use crate::policy::realise::error_of;
use crate::{CrossingDeclaration, Realised, Reason, SLIP_HORIZON_S, Setting};

/// Tells what a setting does, why it was made, what it rests on and how long it is good for.
/// One sentence or two in each line.
pub fn explain(setting: &Setting, crossing: &CrossingDeclaration) -> Vec<String> {
    let mut lines = vec![
        what(setting),
        why(setting, crossing),
        target(setting, crossing),
        phase(setting, crossing),
        choice(setting),
        proof(setting, crossing),
        outlook(setting, crossing),
    ];
    lines.extend(floor(crossing));
    if setting.silent {
        lines.push("It is a trial for the record: nobody is told of it.".to_owned());
    }
    lines
}

fn text(ratio: &Fraction) -> String {
    format!("{}/{}", ratio.numer(), ratio.denom())
}

fn what(setting: &Setting) -> String {
    let Setting {
        epoch,
        number,
        crossing,
        ..
    } = setting;
    let does = match &setting.realised {
        Realised::Single(ratio) => format!("run at the ratio {}", text(ratio)),
        Realised::Cadence(cadence) => format!(
            "alternate between {} ({} blocks) and {} ({} blocks), {} on average",
            text(&cadence.low()),
            cadence.low_blocks(),
            text(&cadence.high()),
            cadence.high_blocks(),
            text(&setting.wanted),
        ),
        Realised::Stepping(stepping) => {
            let (short, long) = stepping.advances();
            format!(
                "step through its {} phases by {short} or {long} for each output, {} on average",
                stepping.phases(),
                text(&setting.wanted),
            )
        }
        Realised::Lazy {
            cadence,
            swing_samples,
        } => format!(
            "hold {} and {} in turn, each until the running error would leave ±{swing_samples} samples, \
             {} on average",
            text(&cadence.low()),
            text(&cadence.high()),
            text(&setting.wanted),
        ),
    };
    let lead_s = seconds(setting.effect_ns - setting.decided_ns);
    format!(
        "Setting {epoch}/{number} of {crossing}: {does}, from {lead_s:.3} s after the decision on."
    )
}

fn why(setting: &Setting, crossing: &CrossingDeclaration) -> String {
    let why = match setting.reason {
        Reason::First => "the crossing was declared and needs a setting".to_owned(),
        Reason::Evidence => {
            "the setting before it would not have kept the phase error in the tube".to_owned()
        }
        Reason::Recovery => {
            "the band of the phase error was out of the tube and had to be brought back".to_owned()
        }
        Reason::Declaration => "what it rests on was declared anew".to_owned(),
        Reason::Group => match &crossing.group {
            Some(group) => format!("another crossing of the group {group} changed"),
            None => "another crossing of its group changed".to_owned(),
        },
        Reason::ChangeOver => "the stream was changed over to another source".to_owned(),
        Reason::Renewal => "nothing changed, and the one before it was due for review".to_owned(),
    };
    format!("It was made because {why}.")
}

fn target(setting: &Setting, crossing: &CrossingDeclaration) -> String {
    let e = &setting.evidence;
    let source = match &crossing.backup {
        Some(backup) if setting.on_backup => format!("{backup}, the backup source,"),
        _ => crossing.source.to_string(),
    };
    format!(
        "{} was {:+.4} ± {:.4} ppm off its nominal rate and {} {:+.4} ± {:.4} ppm, so the target was \
         {:.12} (95 %: {:.12} to {:.12}).",
        source,
        e.source_drift * 1e6,
        e.source_deviation * 1e6,
        crossing.sink,
        e.sink_drift * 1e6,
        e.sink_deviation * 1e6,
        e.target,
        e.target_low,
        e.target_high,
    )
}

fn phase(setting: &Setting, crossing: &CrossingDeclaration) -> String {
    let e = &setting.evidence;
    format!(
        "The phase error was {:+.4} ± {:.4} sink samples, of a headroom of {}; it is brought back by at most \
         {} ppm of pitch. What is run errs by up to {:.4} samples itself.",
        e.phase_error_samples,
        e.phase_deviation_samples,
        crossing.headroom_samples,
        crossing.pitch_limit_ppm,
        error_of(&setting.realised),
    )
}

fn floor(crossing: &CrossingDeclaration) -> Option<String> {
    (crossing.least_hold_ns > 0).then(|| {
        format!(
            "Nothing else is run before {:.1} s after its effect, even if it has to be waited for.",
            seconds(crossing.least_hold_ns)
        )
    })
}

fn choice(setting: &Setting) -> String {
    let e = &setting.evidence;
    if e.allowed_low == e.allowed_high {
        return format!(
            "There was no room for choice: {} was wanted.",
            text(&setting.wanted)
        );
    }
    let (low, high) = (
        ppb(&e.allowed_low, e.target),
        ppb(&e.allowed_high, e.target),
    );
    format!(
        "Ratios from {low:+.2} to {high:+.2} ppb of the target would hold for {:.0} s; {} is the simplest, \
         or the nearest to it that the bounds allow.",
        e.expected_hold_s,
        text(&setting.wanted)
    )
}

fn ppb(ratio: &Fraction, target: f64) -> f64 {
    (crate::timeline::as_double(ratio) / target - 1.0) * 1e9
}

fn proof(setting: &Setting, crossing: &CrossingDeclaration) -> String {
    let (l, m) = (crossing.bounds.max_l(), crossing.bounds.max_m());
    let within = format!("L up to {l} and M up to {m}");
    match &setting.certificate {
        Certificate::Simplest(parents) => format!(
            "Certificate: its parents {} and {} are not in that interval, so nothing simpler is.",
            parents.left, parents.right
        ),
        Certificate::Nearest(bracket) => format!(
            "Certificate: with {within} nothing lies between {} and {}, and it is the nearer end.",
            bracket.below, bracket.above
        ),
        Certificate::NeighbourPair(bracket) => format!(
            "Certificate: with {within} nothing lies between {} and {}.",
            bracket.below, bracket.above
        ),
        Certificate::SteppingPair(pair) => format!(
            "Certificate: with a table of {} phases, {} phases by the output make too much and {} too little \
             or just enough, so the two enclose it.",
            pair.phases,
            pair.advance,
            pair.advance + 1
        ),
        Certificate::Uncertified(reason) => format!("There is no short proof: {reason}."),
    }
}

fn outlook(setting: &Setting, crossing: &CrossingDeclaration) -> String {
    let slip = match setting.seconds_to_slip {
        Some(seconds) => format!("could slip {seconds:.1} s after its effect"),
        None => format!("does not slip within {:.0} h", SLIP_HORIZON_S / 3600.0),
    };
    format!(
        "It makes {:+.3} ppb too much and {slip}, if nothing is measured any more. It is looked at again \
         by {:.0} s after its effect, and is good until {:.0} s after it.",
        setting.residual * 1e9,
        seconds(crossing.review_horizon_ns),
        seconds(setting.expiry_ns - setting.effect_ns),
    )
}

fn seconds(ns: i64) -> f64 {
    ns as f64 * 1e-9
}
