//! A plan for people.

use std::fmt::Write as _;

use ratewright_ratio::stages::{Chain, Cost, Stage};
use ratewright_ratio::{
    Bounds, Cadence, Certificate, Exact, FrameCadence, Lazy, MAX_BOUND, Multiple, Node, Rung,
    Stepping, residual,
};

use super::Parts;
use super::filter::{self, Filter};
use super::findings::{Findings, Width, as_f64};
use super::frames::{self, Frames};
use super::question::Question;
use super::sketch;
use super::sound;
use crate::{layout, show, terminal};
use ratewright_ratio::allowed::{Allowed, Answer, Proof, ROUNDED, multiplied};

/// Most frames that are listed; the shares of the period tell the rest.
const LISTED_FRAMES: u64 = 15;

/// Chains of stages that cost no more than this in excess of another are not listed.
const SAME_PERCENT: f64 = 10.0;

/// The plan, a paragraph a finding.
pub(crate) fn text(question: &Question, findings: &Findings) -> String {
    let mut out = String::new();
    let answer = &findings.answer;
    head(&mut out, question, answer);
    best(&mut out, question, answer);
    line(&mut out, "proof", &proof(&answer.proof, &question.allowed));
    sides(&mut out, answer);
    if let Some(width) = &findings.width {
        interval(&mut out, question, width);
    }
    cadence(&mut out, question, findings);
    sound(&mut out, question, findings);
    ladder(&mut out, question, answer);
    if let Some((filter, chains)) = question.filter.as_ref().zip(findings.chains.as_ref()) {
        stages(&mut out, filter, chains);
    }
    if let Some(frames) = &findings.frames {
        frame_samples(&mut out, frames);
    }
    out
}

fn line(out: &mut String, label: &str, text: &str) {
    // Writing to a String cannot fail.
    let _ = writeln!(out, "{label:<10}{text}");
}

fn head(out: &mut String, question: &Question, answer: &Answer) {
    if let Some((from, to)) = question.rates {
        line(
            out,
            "source",
            &format!("{}{}", show::rate(from), question.from_drift),
        );
        line(
            out,
            "sink",
            &format!("{}{}", show::rate(to), question.to_drift),
        );
    }
    let value = *answer.target.numer() as f64 / *answer.target.denom() as f64;
    line(
        out,
        "target",
        &format!("{} = {value:.12}", Parts::from(&answer.target)),
    );
    let bounds = match question.phases {
        Some(phases) => format!(
            "{}; one table of {phases} phases",
            allowed(&question.allowed)
        ),
        None => allowed(&question.allowed),
    };
    line(out, "bounds", &bounds);
    out.push('\n');
}

fn allowed(allowed: &Allowed) -> String {
    let up_to = |part: &str, bound: u64| match bound {
        MAX_BOUND => format!("any {part}"),
        _ => format!("{part} up to {bound}"),
    };
    let both = |bounds: &Bounds| {
        let (l, m) = (up_to("L", bounds.max_l()), up_to("M", bounds.max_m()));
        format!("{l}, {m}")
    };
    match allowed {
        Allowed::Bounded(bounds) => match bounds.largest_prime() {
            Some(prime) => format!("{}, no prime factor above {prime}", both(bounds)),
            None => both(bounds),
        },
        Allowed::Product { max_product } => format!("L·M up to {max_product}"),
        Allowed::Cost {
            weight_l,
            weight_m,
            max_cost,
        } => format!("{weight_l}·L + {weight_m}·M up to {max_cost}"),
        Allowed::Multiple(multiple, bounds) => format!("{}, {}", both(bounds), wanted(*multiple)),
        Allowed::FixedM { m, max_l } => format!("{}, M = {m}", up_to("L", *max_l)),
        Allowed::PowerOfTwoM(bounds) => format!("{}, M a power of two", both(bounds)),
    }
}

fn wanted(multiple: Multiple) -> String {
    match multiple {
        Multiple::OfL(k) => format!("L a multiple of {k}"),
        Multiple::OfM(k) => format!("M a multiple of {k}"),
    }
}

fn best(out: &mut String, question: &Question, answer: &Answer) {
    let (ratio, residual) = (Parts::from(&answer.best), answer.residual);
    if residual == 0.0 {
        line(out, "best", &format!("{ratio}, exact"));
        return;
    }
    let makes = if residual > 0.0 {
        "makes too much"
    } else {
        "makes too little"
    };
    line(
        out,
        "best",
        &format!("{ratio}, {}: {makes}", show::offset(residual)),
    );
    let headroom = headroom(question);
    let lasts = match question.seconds_to_slip(residual) {
        Some(seconds) => format!("a headroom of {headroom} lasts {}", show::duration(seconds)),
        None => "give --from and --to to learn how long the headroom lasts".to_owned(),
    };
    line(out, "", &lasts);
}

fn headroom(question: &Question) -> String {
    match question.headroom_samples {
        1.0 => "1 sink sample".to_owned(),
        samples => format!("{samples} sink samples"),
    }
}

/// The nearest ratio on either side, for a stream that must never make too much, or too little.
fn sides(out: &mut String, answer: &Answer) {
    let (Some(below), Some(above)) = (answer.below(), answer.above()) else {
        return;
    };
    if answer.residual == 0.0 {
        return;
    }
    let [most, least] = [below, above].map(|ratio| {
        let off = show::offset(residual(&ratio, &answer.target));
        format!("{}, {off}", Parts::from(&ratio))
    });
    line(out, "sides", &format!("at most the target: {most}"));
    line(out, "", &format!("at least the target: {least}"));
}

fn proof(proof: &Proof, allowed: &Allowed) -> String {
    let multiple = match allowed {
        Allowed::Multiple(multiple, _) => Some(*multiple),
        _ => None,
    };
    match proof {
        Proof::Direct(certificate) => certified(certificate, multiple),
        Proof::Reduced(found) => certified(&found.reduced.certificate, multiple),
        Proof::Rounded => ROUNDED.to_owned(),
    }
}

fn certified(certificate: &Certificate, multiple: Option<Multiple>) -> String {
    match certificate {
        Certificate::Nearest(bracket) => {
            let end = |node: Node| match (node, multiple) {
                (Node::ZERO, _) => "0".to_owned(),
                (Node::INFINITY, _) => "infinity".to_owned(),
                (node, Some(multiple)) => multiplied(multiple, node).to_string(),
                (node, None) => node.to_string(),
            };
            let (below, above) = (end(bracket.below), end(bracket.above));
            format!("no other ratio within the bounds lies between {below} and {above}")
        }
        Certificate::Uncertified(reason) => format!("none: {reason}"),
        other => format!("none of this kind is expected here: {other:?}"),
    }
}

fn interval(out: &mut String, question: &Question, width: &Width) {
    out.push('\n');
    let (low, high) = (as_f64(&width.low), as_f64(&width.high));
    line(
        out,
        "interval",
        &format!("the target is between {low:.12} and {high:.12}"),
    );
    if let Some(lasts) = width.best_lasts_s.map(show::duration) {
        let more = [
            (width.average_lasts_s, "on average"),
            (width.lazy_lasts_s, "lazy"),
        ];
        let more = more.into_iter().filter_map(|(seconds, how)| {
            let seconds = seconds?;
            Some(format!(", {} {how}", show::duration(seconds)))
        });
        let more: String = more.collect();
        let until = "until the drifts are measured better";
        line(
            out,
            "",
            &format!(
                "at the worse end the headroom lasts {lasts} with the best ratio{more}, {until}"
            ),
        );
    }
    if let Some(simplest) = &width.simplest {
        let beyond = match question.allowed.allows(simplest) {
            true => "",
            false => ", which is beyond the bounds",
        };
        let simplest = Parts::from(simplest);
        line(
            out,
            "",
            &format!("the simplest ratio inside is {simplest}{beyond}"),
        );
    }
}

fn cadence(out: &mut String, question: &Question, findings: &Findings) {
    let Some(cadence) = &findings.answer.cadence else {
        if let Some(stepping) = &findings.stepping {
            out.push('\n');
            self::stepping(out, stepping);
        }
        return;
    };
    out.push('\n');
    let (low, high) = (cadence.low(), cadence.high());
    let counts = format!(
        "{} of {} and {} of {} average the target exactly",
        cadence.low_blocks(),
        Parts::from(&low),
        cadence.high_blocks(),
        Parts::from(&high),
    );
    line(out, "cadence", &counts);
    let samples = show_bound(cadence.error_bound());
    line(
        out,
        "",
        &format!("and are never off by more than {samples} samples at a block's end"),
    );
    if let Some(source_hz) = question.source_rate_hz() {
        let every = show::duration(1.0 / cadence.switches_per_second(source_hz));
        line(
            out,
            "",
            &format!("in the order that keeps so close, which changes every {every}"),
        );
    }
    // The two steps of an accumulator go through the same table.
    if !matches!(findings.answer.proof, Proof::Rounded) {
        let both = low.numer().saturating_add(*high.numer());
        line(
            out,
            "",
            &format!("both tables are in memory: {both} phases"),
        );
    }
    if let Some(source_hz) = question.source_rate_hz() {
        lazy(out, question, findings.lazy.as_ref(), source_hz);
    }
    if let Some(stepping) = &findings.stepping {
        self::stepping(out, stepping);
    }
}

/// The same two ratios in the order with the fewest changes.
fn lazy(out: &mut String, question: &Question, lazy: Option<&Lazy>, source_hz: f64) {
    let held = match lazy {
        Some(lazy) => format!(
            "off by up to {} samples, as the daemon runs them, the same two change every {}",
            show_bound(lazy.swing()),
            show::duration(1.0 / lazy.switches_per_second(source_hz))
        ),
        None => format!(
            "none: a headroom of {} is less than the cadence's own error",
            headroom(question)
        ),
    };
    line(out, "lazy", &held);
}

fn stepping(out: &mut String, stepping: &Stepping) {
    let phases = stepping.phases();
    let advances = match stepping.advances() {
        (one, other) if one == other => format!("{phases} phases, advancing by {one}, exact"),
        (short, long) => {
            let samples = show_bound(stepping.error_bound());
            format!(
                "{phases} phases, advancing by {short} or {long}: never off by more than {samples} \
                 samples"
            )
        }
    };
    line(out, "stepping", &advances);
}

/// What the errors of averages are in time, and how loud that is.
fn sound(out: &mut String, question: &Question, findings: &Findings) {
    let cadence = findings.answer.cadence.as_ref().map(Cadence::error_bound);
    let stepping = findings.stepping.as_ref().map(Stepping::error_bound);
    let averages = [("cadence", cadence), ("stepping", stepping)];
    let averages = averages.into_iter().filter_map(|(name, bound)| {
        let jitter = sound::jitter(question, &bound.filter(|bound| *bound.numer() > 0)?)?;
        let [low_db, high_db] = jitter.sidebands_db;
        let peak = show::duration(jitter.peak_s);
        Some(format!(
            "{name:<9} {peak} at most: sidebands of {low_db:.0} dB at 1 kHz, {high_db:.0} dB at 20 kHz"
        ))
    });
    let step = sound::pitch_step(findings).filter(|_| question.rates.is_some());
    let lazy = step.map(|step| format!("{:<9} the pitch steps by {}", "lazy", show::offset(step)));
    let lines: Vec<String> = averages.chain(lazy).collect();
    if lines.is_empty() {
        return;
    }
    out.push('\n');
    let by = "by narrowband phase modulation: 20 log10(pi f tau) dB of a tone of f, at a time error of tau";
    line(out, "sound", by);
    for text in lines {
        line(out, "", &text);
    }
}

/// A bound in samples to three digits, never shown smaller than it is.
fn show_bound(bound: Exact) -> String {
    let samples = as_f64(&bound);
    let places = (2.0 - samples.log10().floor()).clamp(0.0, 30.0) as usize;
    let nearest = format!("{samples:.places$}");
    if nearest.parse().is_ok_and(|shown: f64| shown >= samples) {
        return nearest;
    }
    format!("{:.places$}", samples + 10_f64.powi(-(places as i32)))
}

fn ladder(out: &mut String, question: &Question, answer: &Answer) {
    out.push_str("\nladder    what a larger filter bank buys\n");
    if let Some(sketch) = sketch::sketch(answer) {
        out.push_str(&sketch);
        out.push('\n');
    }
    let mut heading = vec!["L/M", "off by", "headroom lasts"];
    heading.extend(question.filter.as_ref().map(|_| "coefficients"));
    heading.push("steps");
    let mut rows = vec![heading.into_iter().map(str::to_owned).collect()];
    rows.extend(answer.ladder.iter().map(|rung| row(question, rung)));
    out.push_str(&layout::fitted(&rows, terminal::width()));
}

fn row(question: &Question, rung: &Rung) -> Vec<String> {
    let (off, lasts) = if rung.last_residual == 0.0 {
        ("exact".to_owned(), "for ever".to_owned())
    } else {
        let slip = question.seconds_to_slip(rung.last_residual);
        (
            show::offset(rung.last_residual),
            slip.map_or("-".to_owned(), show::duration),
        )
    };
    let last = rung.last();
    let mut row = vec![Parts::from(&last).to_string(), off, lasts];
    let filter = question.filter.as_ref();
    row.extend(filter.map(|filter| filter.coefficients(&last).to_string()));
    row.push(if rung.count > 1 {
        format!("{} from {}", rung.count, Parts::from(&rung.first))
    } else {
        String::new()
    });
    row
}

fn stages(out: &mut String, filter: &Filter, chains: &[Chain]) {
    let (passband, attenuation) = (show::rate(filter.passband), filter.spec.stopband_db);
    let head = format!("the best ratio in stages that pass {passband} and stop {attenuation} dB");
    out.push('\n');
    line(out, "stages", &head);
    line(out, "", &format!("lengths by {}", filter::ESTIMATE));
    let shown = distinct(chains);
    if shown.len() < chains.len() {
        let left_out = chains.len() - shown.len();
        let hint =
            format!("{left_out} more are within {SAME_PERCENT} % of one of these; --json has all");
        line(out, "", &hint);
    }
    let heading = [
        "stages",
        "multiply-adds",
        "coefficients",
        "delay",
        "taps a phase",
    ];
    let mut rows = vec![heading.map(str::to_owned).to_vec()];
    rows.extend(shown.into_iter().map(chain_row));
    out.push_str(&layout::fitted(&rows, terminal::width()));
}

/// The chains, without those that cost nearly the same as one before, or more.
fn distinct(chains: &[Chain]) -> Vec<&Chain> {
    let allowance = 1.0 + SAME_PERCENT / 100.0;
    let covers = |shown: &Cost, cost: &Cost| {
        shown.multiply_adds <= cost.multiply_adds * allowance
            && shown.coefficients as f64 <= cost.coefficients as f64 * allowance
            && shown.delay_s <= cost.delay_s * allowance
    };
    let mut shown: Vec<&Chain> = Vec::new();
    for chain in chains {
        if !shown
            .iter()
            .any(|earlier| covers(&earlier.cost, &chain.cost))
        {
            shown.push(chain);
        }
    }
    shown
}

fn chain_row(chain: &Chain) -> Vec<String> {
    let joined = |part: fn(&Stage) -> String, by: &str| {
        chain.stages.iter().map(part).collect::<Vec<_>>().join(by)
    };
    let stages = joined(|stage| format!("{}/{}", stage.l, stage.m), " · ");
    vec![
        if stages.is_empty() {
            "none".to_owned()
        } else {
            stages
        },
        format!("{:.1}", chain.cost.multiply_adds),
        chain.cost.coefficients.to_string(),
        show::duration(chain.cost.delay_s),
        joined(|stage| stage.taps_per_phase.to_string(), " + "),
    ]
}

fn frame_samples(out: &mut String, frames: &Frames) {
    out.push('\n');
    let rate = show::rate(frames.rate);
    line(
        out,
        "frames",
        &format!("samples a frame at {rate}, in broadcast order"),
    );
    for (end, cadence) in [("source", &frames.source), ("sink", &frames.sink)] {
        line(out, &format!("  {end}"), &frame_row(cadence));
    }
}

fn frame_row(cadence: &FrameCadence) -> String {
    let period = cadence.period_frames();
    if period == 1 {
        return format!("{} in every frame", cadence.samples_in(0));
    }
    let listed: Vec<String> = frames::listed(cadence, LISTED_FRAMES)
        .map(|samples| samples.to_string())
        .collect();
    let more = if period > LISTED_FRAMES { " ..." } else { "" };
    let shares: Vec<String> = frames::shares(cadence)
        .iter()
        .map(|(frames, samples)| format!("{frames} of {samples}"))
        .collect();
    format!(
        "{}{more}\n{:10}{period} frames, {}",
        listed.join(" "),
        "",
        shares.join(" and "),
    )
}
