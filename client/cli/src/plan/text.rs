//! A plan for people.

use std::fmt::Write as _;

use ratewright_ratio::plan::{Candidate, Plan, seconds_to_slip};
use ratewright_ratio::{Certificate, Node, Rung};

use super::Parts;
use super::question::{Question, Width};
use crate::show;

/// The plan, a paragraph a finding.
pub(crate) fn text(question: &Question, plan: &Plan, width: Option<&Width>) -> String {
    let mut out = String::new();
    head(&mut out, question, plan);
    best(&mut out, question, &plan.best);
    proof(&mut out, &plan.best);
    if let Some(width) = width {
        interval(&mut out, width);
    }
    cadence(&mut out, plan);
    ladder(&mut out, question, plan);
    out
}

fn line(out: &mut String, label: &str, text: &str) {
    // Writing to a String cannot fail.
    let _ = writeln!(out, "{label:<10}{text}");
}

fn head(out: &mut String, question: &Question, plan: &Plan) {
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
    let value = *plan.target.numer() as f64 / *plan.target.denom() as f64;
    line(
        out,
        "target",
        &format!("{} = {value:.12}", Parts::from(&plan.target)),
    );
    let bounds = &question.query.bounds;
    let mut allowed = format!("L up to {}, M up to {}", bounds.max_l(), bounds.max_m());
    if let Some(prime) = bounds.largest_prime() {
        let _ = write!(allowed, ", no prime factor above {prime}");
    }
    line(out, "bounds", &allowed);
    out.push('\n');
}

fn best(out: &mut String, question: &Question, best: &Candidate) {
    let ratio = Parts::from(&best.ratio);
    if best.residual == 0.0 {
        line(out, "best", &format!("{ratio}, exact"));
        return;
    }
    let makes = if best.residual > 0.0 {
        "makes too much"
    } else {
        "makes too little"
    };
    line(
        out,
        "best",
        &format!("{ratio}, {}: {makes}", show::offset(best.residual)),
    );
    let headroom = match question.query.headroom_samples {
        1.0 => "1 sink sample".to_owned(),
        samples => format!("{samples} sink samples"),
    };
    let lasts = match best.seconds_to_slip {
        Some(seconds) => format!("a headroom of {headroom} lasts {}", show::duration(seconds)),
        None => "give --from and --to to learn how long the headroom lasts".to_owned(),
    };
    line(out, "", &lasts);
}

fn proof(out: &mut String, best: &Candidate) {
    let why = match &best.certificate {
        Certificate::Nearest(bracket) => {
            let end = |node: Node| match node {
                Node::ZERO => "0".to_owned(),
                Node::INFINITY => "infinity".to_owned(),
                node => node.to_string(),
            };
            let (below, above) = (end(bracket.below), end(bracket.above));
            format!("no other ratio within the bounds lies between {below} and {above}")
        }
        Certificate::Uncertified(reason) => format!("none: {reason}"),
        other => format!("none of this kind is expected here: {other:?}"),
    };
    line(out, "proof", &why);
}

fn interval(out: &mut String, width: &Width) {
    out.push('\n');
    let value = |end: &ratewright_ratio::Exact| *end.numer() as f64 / *end.denom() as f64;
    let (low, high) = (value(&width.low), value(&width.high));
    line(
        out,
        "interval",
        &format!("the target is between {low:.12} and {high:.12}"),
    );
    if let Some(seconds) = width.seconds_to_slip_at_worst {
        let lasts = show::duration(seconds);
        line(
            out,
            "",
            &format!("at the worse end the headroom lasts {lasts} with the best ratio"),
        );
    }
    if let Some(simplest) = &width.simplest {
        line(
            out,
            "",
            &format!("the simplest ratio inside is {}", Parts::from(simplest)),
        );
    }
}

fn cadence(out: &mut String, plan: &Plan) {
    let Some(cadence) = &plan.cadence else {
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
    let bound = cadence.error_bound();
    let samples = *bound.numer() as f64 / *bound.denom() as f64;
    line(
        out,
        "",
        &format!("and are never off by more than {samples:.4} samples at a block's end"),
    );
}

fn ladder(out: &mut String, question: &Question, plan: &Plan) {
    out.push_str("\nladder    what a larger filter bank buys\n");
    let heading = ["L/M", "off by", "headroom lasts", "steps"]
        .map(str::to_owned)
        .to_vec();
    let mut rows = vec![heading];
    rows.extend(plan.ladder.iter().map(|rung| row(question, rung)));
    out.push_str(&show::table(&rows));
}

fn row(question: &Question, rung: &Rung) -> Vec<String> {
    let query = &question.query;
    let slip = seconds_to_slip(
        rung.last_residual,
        query.headroom_samples,
        query.sink_rate_hz,
    );
    let (off, lasts) = if rung.last_residual == 0.0 {
        ("exact".to_owned(), "for ever".to_owned())
    } else {
        (
            show::offset(rung.last_residual),
            slip.map_or("-".to_owned(), show::duration),
        )
    };
    let last = rung.last();
    let steps = if rung.count > 1 {
        format!("{} from {}", rung.count, Parts::from(&rung.first))
    } else {
        String::new()
    };
    vec![Parts::from(&last).to_string(), off, lasts, steps]
}
