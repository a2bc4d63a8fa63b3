//! One seed of one scenario: the estimator fed and asked, its errors noted.

use ratewright_timing::{Event, Link, Measurement, Outcome, State};

use crate::bound::{Bound, information};
use crate::rivals::Rivals;
use crate::scenarios::{NS, Scenario, World};

/// What one answer was worth.
#[derive(Clone, Copy)]
pub(crate) struct Answer {
    pub(crate) t_s: f64,
    /// Readings so far, lost ones left out.
    pub(crate) readings: f64,
    pub(crate) error_ppm: f64,
    pub(crate) covered: bool,
    pub(crate) steady: bool,
    pub(crate) start: bool,
    /// Length of the gap it was asked near the end of, s.
    pub(crate) gap_s: Option<i64>,
    pub(crate) locked: bool,
    pub(crate) half_width_ppm: f64,
    pub bound_var_ppm2: f64,
    pub(crate) rival_errors_ppm: [Option<f64>; 3],
}

/// Everything one seed gave.
pub(crate) struct Trial {
    pub(crate) answers: Vec<Answer>,
    pub(crate) first_t_s: f64,
    /// Readings so far, lost ones left out.
    pub(crate) readings: u64,
    pub(crate) first_event_s: f64,
    /// When events of the world can be seen, and when the estimator called some, s.
    pub(crate) events: Vec<f64>,
    pub(crate) calls: Vec<(f64, Event)>,
    /// A call within 600 readings after an event, and 600 s at least, is of that event, s.
    pub(crate) call_window_s: f64,
}

pub(crate) fn run(scenario: &Scenario, seed: u64) -> Trial {
    let mut world = World::new(scenario, seed);
    let mut link = Link::new(world.config()).expect("scenarios declare what links accept");
    let mut bound = Bound::new(&world.model);
    let mut per_row = information(&world.paths[0].delay, world.tick_s());
    if scenario.kind == crate::scenarios::Kind::Exchange {
        per_row += information(&world.paths[1].delay, world.tick_s());
    }
    let mut rivals = Rivals::default();
    let mut trial = Trial {
        answers: Vec::new(),
        first_t_s: 0.0,
        readings: 0,
        first_event_s: world
            .events
            .first()
            .map_or(f64::INFINITY, |&ns| ns as f64 / 1e9),
        events: world.events.iter().map(|&ns| seen_s(&world, ns)).collect(),
        calls: Vec::new(),
        call_window_s: 600.0 * scenario.interval_s.max(1.0),
    };
    let mut query_ns = NS / 2;
    while let Some((at_ns, m)) = world.next() {
        while query_ns < at_ns {
            if trial.readings > 0 {
                let answer = ask(
                    scenario, &mut world, &link, &mut bound, &rivals, query_ns, &trial,
                );
                trial.answers.push(answer);
            }
            query_ns += query_step(query_ns);
        }
        let Some(m) = m else { continue };
        if trial.readings == 0 {
            trial.first_t_s = at_ns as f64 / 1e9;
        }
        let outcome = link.observe(trial.readings, &m);
        trial.readings += 1;
        if let Ok(Outcome::Event(event)) = outcome {
            trial.calls.push((at_ns as f64 / 1e9, event));
        }
        bound.advance(at_ns);
        match world.reading_deviation() {
            Some(deviation) => bound.read_drift(deviation),
            None => bound.read_phase(per_row),
        }
        if let Some((t, z)) = plain(&m, &mut world, at_ns) {
            rivals.read(t, z);
        }
    }
    trial
}

/// When an event can be seen, s: at once, or at the end of the gap that it falls into.
fn seen_s(world: &World, event_ns: i64) -> f64 {
    let gap = world.gaps.iter().find(|gap| gap.holds(event_ns));
    gap.map_or(event_ns, |gap| gap.to_ns) as f64 / 1e9
}

/// Clock minus reference as a user would compute it, s; the counter's wraps given for free.
fn plain(m: &Measurement, world: &mut World, at_ns: i64) -> Option<(f64, f64)> {
    match *m {
        Measurement::Exchange {
            t1_ns,
            t2_ns,
            t3_ns,
            t4_ns,
        } => {
            let z = 0.5 * ((t1_ns - t2_ns) as f64 + (t4_ns - t3_ns) as f64) * 1e-9;
            Some((t3_ns as f64 * 1e-9, z))
        }
        Measurement::Frequency { .. } => None,
        _ => {
            let t = m.reference_ns() as f64 * 1e-9;
            let latched = at_ns as f64 * 1e-9;
            let tick = world.tick_s();
            let shown = libm::floor((latched + world.clock.phase_s(at_ns)) / tick) * tick;
            Some((t, shown - t))
        }
    }
}

fn query_step(query_ns: i64) -> i64 {
    match query_ns / NS {
        0..120 => NS,
        120..3600 => 10 * NS,
        _ => 60 * NS,
    }
}

fn ask(
    scenario: &Scenario,
    world: &mut World,
    link: &Link,
    bound: &mut Bound,
    rivals: &Rivals,
    at_ns: i64,
    trial: &Trial,
) -> Answer {
    let t_s = at_ns as f64 / 1e9;
    let truth = world.clock.drift(at_ns);
    let e = link.estimate(at_ns);
    bound.advance(at_ns);
    let in_gap = world.gaps.iter().find(|gap| gap.holds(at_ns));
    let near_gap = world
        .gaps
        .iter()
        .any(|gap| (gap.from_ns..gap.to_ns + 900 * NS).contains(&at_ns));
    let near_event = trial
        .events
        .iter()
        .any(|&event| (event..event + 600.0).contains(&t_s));
    let duration = scenario.duration_s as f64;
    let settled = if duration > 28_800.0 {
        7200.0
    } else {
        0.35 * duration
    };
    let ending = |gap: &&ratewright_timing::sim::Period| {
        gap.to_ns - at_ns < (60 * NS).min((gap.to_ns - gap.from_ns) / 3)
    };
    let ppm = |drift: f64| (drift - truth) * 1e6;
    Answer {
        t_s,
        readings: trial.readings as f64,
        error_ppm: ppm(e.drift),
        covered: e.low <= truth && truth <= e.high,
        steady: t_s > settled && !near_gap && !near_event,
        start: t_s - trial.first_t_s > 3.0 && t_s < settled.min(7200.0) && !near_gap && !near_event,
        gap_s: in_gap
            .filter(ending)
            .map(|gap| (gap.to_ns - gap.from_ns) / NS),
        locked: e.state == State::Locked,
        half_width_ppm: e.half_width() * 1e6,
        bound_var_ppm2: bound.drift_variance() * 1e12,
        rival_errors_ppm: rivals.drifts().map(|drift| drift.map(ppm)),
    }
}
