//! `[[event]]`: what goes wrong, and when.

use ratewright_control::Id;
use ratewright_declarations::{Section, as_id, number, seconds, text};
use ratewright_timing::sim::{ClockModel, Disturbance, Period, Upset};

use super::scalar;
use crate::plan::Plan;

const AT: &str = "0 to 31622400 seconds";
const KINDS: &str = "\"link-outage\", \"reference-outage\", \"congestion\", \"step\", \"frequency-jump\", \
                     \"counter-reset\" or \"follower-stuck\"";

/// Kinds of events.
#[derive(Clone, Copy)]
enum Kind {
    LinkOutage,
    ReferenceOutage,
    Congestion,
    Step,
    FrequencyJump,
    CounterReset,
    FollowerStuck,
}

/// Reads an event into the plan; one with a fault is noted and left out.
pub(super) fn event(section: &Section<'_>, plan: &mut Plan) {
    let kind = section.need("what", KINDS, |value| kind(text(value)?));
    let at_ns = section.need("at_s", AT, |value| seconds(value, 0.0, 31_622_400.0));
    let Some(kind) = kind else {
        // What the other keys should be is not known: no word about them.
        for key in [
            "host", "clock", "crossing", "for_s", "factor", "by_ms", "by_ppm",
        ] {
            section.set(key, "", &mut (), |_| Some(()));
        }
        return;
    };
    let at_ns = at_ns.unwrap_or_default();
    match kind {
        Kind::LinkOutage => link_outage(section, plan, at_ns),
        Kind::ReferenceOutage => {
            let period = period(section, at_ns);
            for host in &mut plan.hosts {
                host.link.outages.extend(period);
            }
        }
        Kind::Congestion => congestion(section, plan, at_ns),
        Kind::Step => upset(section, plan, at_ns, |section| {
            let by_ms = by(section, "by_ms", "-1000000 to 1000000 ms", 1e6)?;
            Some(Disturbance::PhaseStep(by_ms * 1e-3))
        }),
        Kind::FrequencyJump => upset(section, plan, at_ns, |section| {
            let by_ppm = by(section, "by_ppm", "-10000 to 10000 ppm", 1e4)?;
            Some(Disturbance::DriftJump(by_ppm * 1e-6))
        }),
        Kind::CounterReset => counter_reset(section, plan, at_ns),
        Kind::FollowerStuck => follower_stuck(section, plan, at_ns),
    }
}

fn kind(name: &str) -> Option<Kind> {
    Some(match name {
        "link-outage" => Kind::LinkOutage,
        "reference-outage" => Kind::ReferenceOutage,
        "congestion" => Kind::Congestion,
        "step" => Kind::Step,
        "frequency-jump" => Kind::FrequencyJump,
        "counter-reset" => Kind::CounterReset,
        "follower-stuck" => Kind::FollowerStuck,
        _ => return None,
    })
}

fn link_outage(section: &Section<'_>, plan: &mut Plan, at_ns: i64) {
    let period = period(section, at_ns);
    let host = find(section, "host", "the id of a [[host]] of this file", |id| {
        plan.hosts.iter_mut().find(|host| host.clock.id == *id)
    });
    if let Some(host) = host {
        host.link.outages.extend(period);
    }
}

fn congestion(section: &Section<'_>, plan: &mut Plan, at_ns: i64) {
    let period = period(section, at_ns);
    let factor = scalar(section, "factor", "1 to 10000", (1.0, 1e4), 10.0);
    let host = find(section, "host", "the id of a [[host]] of this file", |id| {
        plan.hosts.iter_mut().find(|host| host.clock.id == *id)
    });
    if let (Some(host), Some(period)) = (host, period) {
        host.link.congestions.push((period, factor));
    }
}

fn upset(
    section: &Section<'_>,
    plan: &mut Plan,
    at_ns: i64,
    what: impl FnOnce(&Section<'_>) -> Option<Disturbance>,
) {
    let what = what(section);
    let accepted = "the id of a [[host]] or of a measured [[clock]] of this file";
    let model = find(section, "clock", accepted, |id| model_of(plan, id));
    if let (Some(model), Some(what)) = (model, what) {
        model.upsets.push(Upset { at_ns, what });
    }
}

fn model_of<'p>(plan: &'p mut Plan, id: &Id) -> Option<&'p mut ClockModel> {
    let hosts = plan
        .hosts
        .iter_mut()
        .map(|host| (&host.clock.id, &mut host.oscillator));
    let devices = plan
        .devices
        .iter_mut()
        .map(|device| (&device.clock.id, &mut device.oscillator));
    hosts
        .chain(devices)
        .find(|(clock, _)| *clock == id)
        .map(|(_, model)| model)
}

fn counter_reset(section: &Section<'_>, plan: &mut Plan, at_ns: i64) {
    let device = find(
        section,
        "clock",
        "the id of a measured [[clock]] of this file",
        |id| {
            plan.devices
                .iter_mut()
                .find(|device| device.clock.id == *id)
        },
    );
    if let Some(device) = device {
        device.resets_ns.push(at_ns);
        device.resets_ns.sort_unstable();
    }
}

/// Without `for_s` it is for ever.
fn follower_stuck(section: &Section<'_>, plan: &mut Plan, at_ns: i64) {
    let mut to_ns = i64::MAX;
    section.set("for_s", AT, &mut to_ns, |value| {
        Some(at_ns + seconds(value, 0.0, 31_622_400.0)?)
    });
    let follower = find(
        section,
        "crossing",
        "the id of a [[crossing]] of this file",
        |id| {
            plan.followers
                .iter_mut()
                .find(|follower| follower.crossing == *id)
        },
    );
    if let Some(follower) = follower {
        follower.stuck.push(Period {
            from_ns: at_ns,
            to_ns,
        });
    }
}

fn period(section: &Section<'_>, from_ns: i64) -> Option<Period> {
    let for_ns = section.need("for_s", AT, |value| seconds(value, 0.0, 31_622_400.0))?;
    Some(Period {
        from_ns,
        to_ns: from_ns + for_ns,
    })
}

fn by(section: &Section<'_>, key: &'static str, accepted: &str, most: f64) -> Option<f64> {
    section.need(key, accepted, |value| number(value, -most, most))
}

/// What the id under `key` names; an id that names nothing is a fault.
fn find<'p, T>(
    section: &Section<'_>,
    key: &'static str,
    accepted: &str,
    find: impl FnOnce(&Id) -> Option<&'p mut T>,
) -> Option<&'p mut T> {
    let id = section.need(key, accepted, as_id)?;
    let found = find(&id);
    if found.is_none() {
        section.fault(key, &format!("\"{id}\""), accepted);
    }
    found
}
