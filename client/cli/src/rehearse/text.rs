//! How a rehearsal went, for people.

use std::fmt::Write as _;

use ratewright_control::CrossingState;
use ratewright_rehearsal::{Report, Tenure};
use ratewright_timing::State;

use super::Played;
use super::spread::{Spread, least, most};
use crate::{layout, show, terminal};

const DAY_S: f64 = 86_400.0;

/// Two tables and a last word.
pub(super) fn text(played: &Played) -> String {
    let mut text = format!("{}\n\n", heading(played));
    let width = terminal::width();
    text += &layout::fitted(&crossings(&played.reports), width);
    text.push('\n');
    text += &layout::fitted(&clocks(&played.reports), width);
    let _ = writeln!(text, "\n{}", verdict(&played.reports));
    if let Some(refused) = refused(&played.reports) {
        let _ = writeln!(text, "{refused}");
    }
    text
}

fn heading(played: &Played) -> String {
    let (first, seeds) = (played.script.seed, played.reports.len());
    let days: f64 = played
        .reports
        .iter()
        .map(|report| report.length_s / DAY_S)
        .sum();
    let with = match seeds {
        1 => format!("seed {first}"),
        _ => format!("{seeds} seeds from {first} on (median / worst)"),
    };
    let length = show::duration(played.script.days * DAY_S);
    format!(
        "{}: {length} with {with}, played in {} ({:.2} days a second)",
        played.file,
        show::duration(played.took_s),
        days / played.took_s
    )
}

fn crossings(reports: &[Report]) -> Vec<Vec<String>> {
    let heading = [
        "crossing",
        "changes a day",
        "worst phase error",
        "as believed",
        "headroom",
        "slips",
        "states",
    ];
    let mut rows = vec![heading.map(str::to_owned).to_vec()];
    for (i, crossing) in reports[0].crossings.iter().enumerate() {
        let of = |figure: fn(&ratewright_rehearsal::CrossingReport) -> f64| {
            most(reports, |report| Some(figure(&report.crossings[i])))
        };
        let changes = most(reports, |report| {
            Some(report.crossings[i].changes as f64 / (report.length_s / DAY_S))
        });
        rows.push(vec![
            crossing.crossing.to_string(),
            figures(reports, changes, 0),
            figures(reports, of(|c| c.worst_samples), 3),
            figures(reports, of(|c| c.worst_believed_samples), 3),
            format!("±{}", crossing.headroom_samples),
            figures(reports, of(|c| c.slips as f64), 0),
            shares(
                reports,
                |report| &report.crossings[i].states,
                &CROSSING_STATES,
            ),
        ]);
    }
    rows
}

fn clocks(reports: &[Report]) -> Vec<Vec<String>> {
    let heading = ["clock", "in 95 % interval, %", "locked after", "states"];
    let mut rows = vec![heading.map(str::to_owned).to_vec()];
    for (i, clock) in reports[0].clocks.iter().enumerate() {
        let coverage = least(reports, |report| {
            report.clocks[i].coverage.map(|share| 100.0 * share)
        });
        let locked = most(reports, |report| {
            Some(report.clocks[i].locked_after_s.unwrap_or(f64::INFINITY))
        });
        rows.push(vec![
            clock.clock.to_string(),
            coverage.map_or("-".to_owned(), |spread| figures(reports, Some(spread), 1)),
            locked.map_or(String::new(), |spread| both(reports, spread, after)),
            shares(reports, |report| &report.clocks[i].states, &CLOCK_STATES),
        ]);
    }
    rows
}

fn after(seconds: f64) -> String {
    if seconds.is_finite() {
        show::duration(seconds)
    } else {
        "never".to_owned()
    }
}

/// `12.3`, or `12.3 / 14.0` of several seeds.
fn figures(reports: &[Report], spread: Option<Spread>, places: usize) -> String {
    spread.map_or(String::new(), |spread| {
        both(reports, spread, |value| format!("{value:.places$}"))
    })
}

fn both(reports: &[Report], spread: Spread, show: impl Fn(f64) -> String) -> String {
    match reports.len() {
        1 => show(spread.worst),
        _ => format!("{} / {}", show(spread.median), show(spread.worst)),
    }
}

const CROSSING_STATES: [(CrossingState, &str); 4] = [
    (CrossingState::Holding, "holding"),
    (CrossingState::Degraded, "degraded"),
    (CrossingState::OutOfBounds, "out of bounds"),
    (CrossingState::Waiting, "waiting"),
];

const CLOCK_STATES: [(State, &str); 4] = [
    (State::Locked, "locked"),
    (State::Holdover, "holdover"),
    (State::Acquiring, "acquiring"),
    (State::FreeRunning, "free-running"),
];

/// Shares of the whole time of all seeds; what would read as 0.0 % is left out.
fn shares<'r, S: Copy + PartialEq + 'r>(
    reports: &'r [Report],
    states: impl Fn(&'r Report) -> &'r Tenure<S>,
    words: &[(S, &str)],
) -> String {
    let whole_s: f64 = reports.iter().map(|report| report.length_s).sum();
    let share = |state: S| {
        let seconds: f64 = reports
            .iter()
            .map(|report| states(report).seconds_in(state))
            .sum();
        100.0 * seconds / whole_s
    };
    let parts: Vec<String> = words
        .iter()
        .map(|(state, word)| (share(*state), word))
        .filter(|(share, _)| *share >= 0.05)
        .map(|(share, word)| format!("{word} {share:.1} %"))
        .collect();
    parts.join(", ")
}

fn verdict(reports: &[Report]) -> String {
    let mut lines = Vec::new();
    for (i, crossing) in reports[0].crossings.iter().enumerate() {
        let of = |report: &Report| {
            report.crossings[i]
                .first_slip_s
                .map(|at_s| (at_s, report.seed))
        };
        let slipped: Vec<_> = reports.iter().filter_map(of).collect();
        let first = slipped.iter().copied().min_by(|a, b| a.0.total_cmp(&b.0));
        if let Some((at_s, seed)) = first {
            let (id, many, all) = (&crossing.crossing, slipped.len(), reports.len());
            let when = show::duration(at_s);
            lines.push(match all {
                1 => format!("{id} slipped, first after {when}."),
                _ => format!(
                    "{id} slipped with {many} of {all} seeds, first after {when} (seed {seed})."
                ),
            });
        }
    }
    if lines.is_empty() {
        "Nothing slipped.".to_owned()
    } else {
        lines.join("\n")
    }
}

fn refused(reports: &[Report]) -> Option<String> {
    let refused: u64 = reports.iter().map(|report| report.refused).sum();
    let why = reports
        .iter()
        .find_map(|report| report.first_refusal.as_deref())?;
    Some(format!(
        "The engine refused {refused} events, the first because {why}."
    ))
}
