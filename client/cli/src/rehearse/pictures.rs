//! A picture of each crossing's phase error.

use std::fs;
use std::path::Path;

use ratewright_control::Id;
use ratewright_pictures::{Moment, PhaseStory, Stretch};
use ratewright_rehearsal::{CrossingReport, Plan, TracePoint};

use super::Played;
use crate::failure::Failure;

/// Draws the crossings of the first report, each into a file with its name.
pub(super) fn draw(played: &Played, folder: &Path) -> Result<(), Failure> {
    let report = &played.reports[0];
    for crossing in &report.crossings {
        let path = folder.join(format!("{}.svg", crossing.crossing));
        let story = story(&played.script.plan, crossing, report.length_s);
        fs::write(&path, story.draw().file()).map_err(|error| {
            Failure::Failed(format!("{} cannot be written: {error}", path.display()))
        })?;
    }
    Ok(())
}

fn story(plan: &Plan, crossing: &CrossingReport, length_s: f64) -> PhaseStory {
    let curve = |value: fn(&TracePoint) -> f64| {
        let moment = |point: &TracePoint| Moment {
            at_s: point.at_s,
            value: value(point),
        };
        crossing.trace.phase.iter().map(moment).collect()
    };
    PhaseStory {
        crossing: crossing.crossing.to_string(),
        headroom_samples: crossing.headroom_samples,
        truth: curve(|point| point.truth),
        account: curve(|point| point.believed),
        changes_s: crossing.trace.changes_s.clone(),
        without_readings: outages(plan, &crossing.crossing, length_s),
        length_s,
    }
}

/// When a clock of the crossing was not read because a link was down.
fn outages(plan: &Plan, crossing: &Id, length_s: f64) -> Vec<Stretch> {
    let Some(declared) = plan
        .crossings
        .iter()
        .find(|declared| declared.id == *crossing)
    else {
        return Vec::new();
    };
    let read = |id: &Id| *id == declared.source || *id == declared.sink;
    let readers: Vec<&Id> = plan
        .devices
        .iter()
        .filter(|device| read(&device.clock.id))
        .map(|device| &device.host)
        .collect();
    let hosts = plan
        .hosts
        .iter()
        .filter(|host| readers.contains(&&host.clock.id) || read(&host.clock.id));
    let outages = hosts.flat_map(|host| &host.link.outages);
    let stretches = outages.map(|outage| Stretch {
        from_s: (outage.from_ns as f64 * 1e-9).min(length_s),
        to_s: (outage.to_ns as f64 * 1e-9).min(length_s),
    });
    stretches
        .filter(|stretch| stretch.from_s < stretch.to_s)
        .collect()
}
