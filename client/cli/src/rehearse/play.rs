//! Playing a script with many seeds, on all cores, with a bar that shows how far it is.

use std::sync::atomic::{AtomicBool, AtomicU32, AtomicU64, Ordering};
use std::thread;
use std::time::Duration;

use ratewright_rehearsal::file::Script;
use ratewright_rehearsal::{Report, Run, RunError};

use crate::failure::Failure;
use crate::progress;

/// Played in one go between two looks at the others, s.
const STRIDE_S: f64 = 600.0;

/// The reports of `seeds` seeds from the script's on, in their order; the first is traced if wanted.
pub(super) fn all(script: &Script, seeds: u32, traced: bool) -> Result<Vec<Report>, Failure> {
    let work = Work {
        script,
        seeds,
        traced,
        next: AtomicU32::new(0),
        played_s: AtomicU64::new(0),
        over: AtomicBool::new(false),
    };
    let cores = thread::available_parallelism()
        .map_or(1, usize::from)
        .min(seeds as usize);
    let mut reports = thread::scope(|scope| {
        let workers: Vec<_> = (0..cores).map(|_| scope.spawn(|| work.some())).collect();
        let bar = scope.spawn(|| work.show());
        // The bar ends whatever became of the workers, or nobody would hear of it.
        let parts: Vec<_> = workers.into_iter().map(|worker| worker.join()).collect();
        work.over.store(true, Ordering::Relaxed);
        bar.thread().unpark();
        let parts = parts
            .into_iter()
            .map(|part| part.expect("a rehearsal does not panic"));
        parts.collect::<Result<Vec<_>, _>>()
    })
    .map_err(|error| Failure::Failed(format!("the rehearsal cannot begin: {error}")))?
    .concat();
    reports.sort_by_key(|(place, _)| *place);
    Ok(reports.into_iter().map(|(_, report)| report).collect())
}

/// What the workers share.
struct Work<'s> {
    script: &'s Script,
    seeds: u32,
    traced: bool,
    next: AtomicU32,
    played_s: AtomicU64,
    over: AtomicBool,
}

impl Work<'_> {
    /// Plays seeds until none is left.
    fn some(&self) -> Result<Vec<(u32, Report)>, RunError> {
        let mut reports = Vec::new();
        loop {
            let place = self.next.fetch_add(1, Ordering::Relaxed);
            if place >= self.seeds {
                return Ok(reports);
            }
            reports.push((place, self.one(place)?));
        }
    }

    fn one(&self, place: u32) -> Result<Report, RunError> {
        let seed = self.script.seed.wrapping_add(u64::from(place));
        let plan = self.script.plan.clone();
        let mut run = if self.traced && place == 0 {
            Run::traced(plan, seed)?
        } else {
            Run::new(plan, seed)?
        };
        let length_s = self.length_s();
        let mut at_s = 0.0;
        while at_s < length_s {
            let until_s = length_s.min(at_s + STRIDE_S);
            run.until(until_s);
            self.played_s
                .fetch_add((until_s - at_s) as u64, Ordering::Relaxed);
            at_s = until_s;
        }
        Ok(run.report())
    }

    fn length_s(&self) -> f64 {
        self.script.days * 86_400.0
    }

    /// Shows how far it is.
    fn show(&self) {
        let whole_s = (self.length_s() * f64::from(self.seeds)) as u64;
        let bar = progress::bar(whole_s, "played");
        while !self.over.load(Ordering::Relaxed) {
            bar.set_position(self.played_s.load(Ordering::Relaxed));
            thread::park_timeout(Duration::from_millis(100));
        }
        bar.finish_and_clear();
    }
}
