//! What is varied: how a source clock wanders and is read, and what its crossings may do.

use ratewright_timing::sim::{Delay, PathModel, Period};

use crate::world::{DAY, HOUR};

/// A source clock with its readings, and the crossings that all rest on them.
#[derive(Clone, Debug)]
pub(crate) struct Scene {
    pub(crate) source_hz: u64,
    /// Random-walk frequency noise, 1/√s.
    pub(crate) walk: f64,
    pub(crate) label: &'static str,
    pub(crate) path: PathModel,
    pub(crate) lines: Vec<Line>,
}

/// One crossing.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Line {
    pub(crate) headroom: f64,
    /// Its follower reports its level.
    pub(crate) levels: bool,
}

/// Half of the seeds run a source that is off by the first of these, the others the second.
pub(crate) const DRIFTS: [f64; 2] = [2e-6, 37.3e-6];

/// Random-walk frequency noise of a good and a poor crystal, 1/√s.
const WALKS: [f64; 2] = [1e-10, 1e-9];

fn lines(of: &[(f64, bool)]) -> Vec<Line> {
    let line = |&(headroom, levels)| Line { headroom, levels };
    of.iter().map(line).collect()
}

fn white(deviation_s: f64) -> PathModel {
    PathModel::new(Delay::Normal { deviation_s })
}

/// A third of the readings with an exponential tail of 20 µs, three in a thousand 1 to 20 ms late.
fn tailed() -> PathModel {
    PathModel::new(Delay::Tailed {
        deviation_s: 1e-6,
        share: 0.3,
        tail_s: 20e-6,
        outliers: 0.003,
    })
}

/// No readings for an hour each day, but the first.
fn with_gaps(path: PathModel) -> PathModel {
    let gap = |day: i64| Period {
        from_ns: day * DAY + 9 * HOUR,
        to_ns: day * DAY + 10 * HOUR,
    };
    PathModel {
        outages: (1..365).map(gap).collect(),
        ..path
    }
}

/// All that is measured. Crossings of one scene share its clock and its readings.
pub(crate) fn scenes() -> Vec<Scene> {
    let levelled = [(0.5, false), (0.5, true), (4.0, false), (4.0, true)];
    let plain = [(0.5, false), (4.0, false)];
    let kinds = [
        (44_100, "1 µs", white(1e-6), lines(&levelled)),
        (44_100, "5 µs", white(5e-6), lines(&levelled)),
        // At equal rates a cadence's blocks err by half a sample: a headroom of that is refused.
        (48_000, "1 µs", white(1e-6), lines(&[(4.0, false)])),
        (48_000, "5 µs", white(5e-6), lines(&[(4.0, false)])),
        (44_100, "1 µs, tails", tailed(), lines(&plain)),
        (
            44_100,
            "1 µs, an hour's gap a day",
            with_gaps(white(1e-6)),
            lines(&[(4.0, false), (40.0, false)]),
        ),
    ];
    let with_walk = |walk: f64| {
        move |(source_hz, label, path, lines): (u64, &'static str, PathModel, Vec<Line>)| Scene {
            source_hz,
            walk,
            label,
            path,
            lines,
        }
    };
    let scenes = kinds
        .into_iter()
        .flat_map(|kind| WALKS.map(|walk| with_walk(walk)(kind.clone())));
    scenes.collect()
}
