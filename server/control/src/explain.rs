//! Settings in plain words and numbers.

use ratewright_ratio::{Certificate, Fraction};

use crate::policy::{TUBE, realise::double};
use crate::{CrossingDeclaration, Realised, Reason, SLIP_HORIZON_S, Setting};

/// Tells what a setting does, why it was made, what it rests on and how long it is good for.
/// One sentence or two in each line.
pub fn explain(setting: &Setting, crossing: &CrossingDeclaration) -> Vec<String> {
    let mut lines = vec![
        what(setting),
        why(setting, crossing),
        target(setting, crossing),
        phase(setting, crossing),
        choice(setting, crossing),
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

fn blocks(count: u64) -> String {
    match count {
        1 => "1 block".to_owned(),
        more => format!("{more} blocks"),
    }
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
            "alternate between {} ({}) and {} ({}), {} on average",
            text(&cadence.low()),
            blocks(cadence.low_blocks()),
            text(&cadence.high()),
            blocks(cadence.high_blocks()),
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
        "Setting {epoch}-{number} of {crossing}: {does}, from {lead_s:.3} s after the decision on."
    )
}

fn why(setting: &Setting, crossing: &CrossingDeclaration) -> String {
    let why = match setting.reason {
        Reason::First => "the crossing was declared and needs a setting".to_owned(),
        Reason::Evidence => format!(
            "the setting before it would not have kept the phase error within {}",
            usable(crossing)
        ),
        Reason::Recovery => format!(
            "the phase error, with what is uncertain of it, was beyond {} and had to be brought back",
            usable(crossing)
        ),
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

/// The tube in words.
fn usable(crossing: &CrossingDeclaration) -> String {
    format!(
        "the {:.0} % of the headroom of {} that planning uses",
        TUBE * 100.0,
        crossing.headroom_samples
    )
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
         {} ppm of pitch.{}",
        e.phase_error_samples,
        e.phase_deviation_samples,
        crossing.headroom_samples,
        crossing.pitch_limit_ppm,
        own_error(&setting.realised),
    )
}

fn own_error(realised: &Realised) -> String {
    let bound = match realised {
        Realised::Single(_) => return String::new(),
        Realised::Cadence(cadence) => up(double(&cadence.error_bound())),
        Realised::Stepping(stepping) => up(double(&stepping.error_bound())),
        Realised::Lazy { swing_samples, .. } => swing_samples.to_string(),
    };
    format!(" What is run errs by up to {bound} samples itself.")
}

/// A bound on an error with three figures, rounded up.
fn up(error: f64) -> String {
    let (mut places, mut scale) = (0, 1.0);
    while error > 0.0 && error * scale < 100.0 && places < 9 {
        (places, scale) = (places + 1, scale * 10.0);
    }
    format!("{:.places$}", (error * scale).ceil() / scale)
}

fn floor(crossing: &CrossingDeclaration) -> Option<String> {
    (crossing.least_hold_ns > 0).then(|| {
        format!(
            "Nothing else is run before {:.1} s after its effect, even if it has to be waited for.",
            seconds(crossing.least_hold_ns)
        )
    })
}

fn choice(setting: &Setting, crossing: &CrossingDeclaration) -> String {
    let e = &setting.evidence;
    if e.allowed_low == e.allowed_high {
        let wanted = text(&setting.wanted);
        return if e.target_low == e.target_high {
            format!("Both clocks are exact: {wanted} was wanted.")
        } else {
            format!("No range of ratios could be vouched for; {wanted} was the best guess.")
        };
    }
    let (low, high) = (
        ppb(&e.allowed_low, e.target),
        ppb(&e.allowed_high, e.target),
    );
    format!(
        "Every ratio from {low:+.2} to {high:+.2} ppb off the target would hold for {}; {} is {}.",
        span(e.expected_hold_s),
        text(&setting.wanted),
        match crossing.bounds.largest_prime() {
            None => "the simplest of them",
            Some(_) => "the simplest of them, or the nearest to that within the bounds",
        }
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
        Some(seconds) => format!("could slip {} after its effect", span(seconds)),
        None => format!("does not slip within {}", span(SLIP_HORIZON_S)),
    };
    format!(
        "It makes {} and {slip}, if it is left alone. It is looked at again as soon as the readings ask for \
         it, by {} after its effect at the latest, and is good until {} after it.",
        off(setting.residual * 1e9),
        span(seconds(crossing.review_horizon_ns)),
        span(seconds(setting.expiry_ns - setting.effect_ns)),
    )
}

/// What a residual means.
fn off(ppb: f64) -> String {
    let size = ppb.abs();
    match ppb {
        _ if size < 0.0005 => "the target to within 0.001 ppb".to_owned(),
        ppb if ppb > 0.0 => format!("{size:.3} ppb too much"),
        _ => format!("{size:.3} ppb too little"),
    }
}

/// A time in the unit that suits it.
fn span(seconds: f64) -> String {
    let (value, unit) = match seconds {
        s if s < 120.0 => (s, "s"),
        s if s < 7_200.0 => (s / 60.0, "min"),
        s if s < 172_800.0 => (s / 3_600.0, "h"),
        s => (s / 86_400.0, "d"),
    };
    let text = format!("{value:.1}");
    format!("{} {unit}", text.strip_suffix(".0").unwrap_or(&text))
}

fn seconds(ns: i64) -> f64 {
    ns as f64 * 1e-9
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_bound_is_rounded_up() {
        let bounds = [0.000_636_54, 0.001_702_3, 0.5, 12.001_3, 1234.2, 0.0].map(up);
        assert_eq!(
            bounds,
            ["0.000637", "0.00171", "0.500", "12.1", "1235", "0"]
        );
    }

    #[test]
    fn residuals_and_times_read_well() {
        let said = [116.785, -116.785, -1e-5].map(off);
        let expected = [
            "116.785 ppb too much",
            "116.785 ppb too little",
            "the target to within 0.001 ppb",
        ];
        assert_eq!(said, expected);
        let said = [0.0, 50.0, 442.0, 86_400.0, 172_800.0, 9.9e4].map(span);
        assert_eq!(said, ["0 s", "50 s", "7.4 min", "24 h", "2 d", "27.5 h"]);
    }
}
