//! Many seeds' answers made into one line of the table.

use ratewright_timing::Event;

use crate::scenarios::Scenario;
use crate::trial::{Answer, Trial};

/// Sums over seeds.
#[derive(Default)]
pub(crate) struct Tally {
    square: f64,
    bound: f64,
    count: f64,
    /// Share covered of each seed: answers along one trace are not independent.
    covered: Vec<f64>,
    covered_start: Vec<f64>,
    covered_first: Vec<f64>,
    /// The same by octaves of the number of readings, from 4 on.
    covered_octaves: [Vec<f64>; OCTAVES],
    times: [Vec<f64>; 3],
    gaps: Vec<(i64, f64, bool)>,
    rivals: [(f64, f64); 3],
    locked: (f64, f64),
    seeds: f64,
    false_calls: f64,
    found: Vec<f64>,
    events: f64,
}

/// Octaves of the number of readings that are looked at: 4 to 8, up to 2048 to 4096.
const OCTAVES: usize = 10;

/// The figures of a row.
pub(crate) struct Figures {
    rmse: f64,
    ratio: f64,
    covered: (f64, f64),
    covered_start: (f64, f64),
    times: [f64; 3],
    rivals: [f64; 3],
    locked: f64,
}

fn share(answers: impl Iterator<Item = Answer>) -> Option<f64> {
    let (mut inside, mut all) = (0.0, 0.0);
    for answer in answers {
        inside += answer.covered as u8 as f64;
        all += 1.0;
    }
    (all > 0.0).then(|| inside / all)
}

fn mean_and_error(shares: &[f64]) -> (f64, f64) {
    let n = shares.len().max(1) as f64;
    let mean = shares.iter().sum::<f64>() / n;
    let square = shares.iter().map(|s| (s - mean) * (s - mean)).sum::<f64>() / n;
    (mean, (square / n).sqrt())
}

fn percentile(values: &mut [f64], share: f64) -> f64 {
    values.sort_unstable_by(f64::total_cmp);
    let rank = (share * values.len() as f64) as usize;
    values
        .get(rank.min(values.len().saturating_sub(1)))
        .copied()
        .unwrap_or(f64::NAN)
}

/// Seconds from the first reading until the error stays below a limit for a minute.
fn settle(trial: &Trial, limit_ppm: f64) -> f64 {
    let mut since = None;
    for answer in trial.answers.iter().filter(|a| a.t_s < trial.first_event_s) {
        if answer.error_ppm.abs() >= limit_ppm {
            since = None;
        } else {
            let begin = *since.get_or_insert(answer.t_s);
            if answer.t_s - begin >= 60.0 {
                return begin - trial.first_t_s;
            }
        }
    }
    f64::INFINITY
}

impl Tally {
    pub(crate) fn add(&mut self, trial: Trial) {
        self.seeds += 1.0;
        for answer in trial.answers.iter().filter(|a| a.steady) {
            self.square += answer.error_ppm * answer.error_ppm;
            self.bound += answer.bound_var_ppm2;
            self.count += 1.0;
            for (sum, error) in self.rivals.iter_mut().zip(answer.rival_errors_ppm) {
                if let Some(error) = error {
                    *sum = (sum.0 + error * error, sum.1 + 1.0);
                }
            }
        }
        for answer in trial
            .answers
            .iter()
            .filter(|a| a.locked && a.gap_s.is_none())
        {
            self.locked.0 += (answer.error_ppm.abs() <= 0.15) as u8 as f64;
            self.locked.1 += 1.0;
        }
        self.covered
            .extend(share(trial.answers.iter().copied().filter(|a| a.steady)));
        self.covered_start
            .extend(share(trial.answers.iter().copied().filter(|a| a.start)));
        let first = |a: &Answer| a.start && a.t_s - trial.first_t_s < 120.0;
        self.covered_first
            .extend(share(trial.answers.iter().copied().filter(first)));
        for (k, octave) in self.covered_octaves.iter_mut().enumerate() {
            let least = f64::from(4 << k);
            let within = |a: &Answer| a.start && (least..2.0 * least).contains(&a.readings);
            octave.extend(share(trial.answers.iter().copied().filter(within)));
        }
        for (times, limit) in self.times.iter_mut().zip([10.0, 1.0, 0.1]) {
            times.push(settle(&trial, limit));
        }
        for answer in trial
            .answers
            .iter()
            .filter(|a| a.half_width_ppm.is_finite())
        {
            if let Some(gap_s) = answer.gap_s {
                self.gaps.push((gap_s, answer.error_ppm, answer.covered));
            }
        }
        self.count_events(&trial);
    }

    fn count_events(&mut self, trial: &Trial) {
        self.events += trial.events.len() as f64;
        let window_s = trial.call_window_s;
        for &event in &trial.events {
            let near = |call: &&(f64, Event)| (event..event + window_s).contains(&call.0);
            self.found
                .extend(trial.calls.iter().find(near).map(|call| call.0 - event));
        }
        let stray = |call: &&(f64, Event)| {
            !trial
                .events
                .iter()
                .any(|&event| (event..event + window_s).contains(&call.0))
        };
        self.false_calls += trial.calls.iter().filter(stray).count() as f64;
    }

    pub(crate) fn join(&mut self, other: Tally) {
        self.square += other.square;
        self.bound += other.bound;
        self.count += other.count;
        self.covered.extend(other.covered);
        self.covered_start.extend(other.covered_start);
        self.covered_first.extend(other.covered_first);
        for (octave, more) in self.covered_octaves.iter_mut().zip(other.covered_octaves) {
            octave.extend(more);
        }
        for (times, more) in self.times.iter_mut().zip(other.times) {
            times.extend(more);
        }
        self.gaps.extend(other.gaps);
        for (sum, more) in self.rivals.iter_mut().zip(other.rivals) {
            *sum = (sum.0 + more.0, sum.1 + more.1);
        }
        self.locked = (
            self.locked.0 + other.locked.0,
            self.locked.1 + other.locked.1,
        );
        self.seeds += other.seeds;
        self.false_calls += other.false_calls;
        self.found.extend(other.found);
        self.events += other.events;
    }

    pub(crate) fn figures(&self) -> Figures {
        let rmse = (self.square / self.count).sqrt();
        Figures {
            rmse,
            ratio: (self.square / self.bound).sqrt(),
            covered: mean_and_error(&self.covered),
            covered_start: mean_and_error(&self.covered_start),
            times: self
                .times
                .clone()
                .map(|mut times| percentile(&mut times, 0.95)),
            rivals: self.rivals.map(|(square, n)| (square / n).sqrt() / rmse),
            locked: self.locked.0 / self.locked.1,
        }
    }

    fn octaves(&self) -> String {
        let mut line = String::from("  by readings:");
        for (k, octave) in self.covered_octaves.iter().enumerate() {
            if octave.is_empty() {
                continue;
            }
            let (covered, error) = mean_and_error(octave);
            let least = 4 << k;
            line += &format!(" from {least} {covered:.3} ± {error:.3},");
        }
        line.trim_end_matches(',').to_owned()
    }

    /// The first minutes; holdover and events, where there are any.
    pub(crate) fn extra_lines(&self) -> Vec<String> {
        let (covered, error) = mean_and_error(&self.covered_first);
        let mut lines = vec![format!(
            "  first two minutes: coverage {covered:.3} ± {error:.3}"
        )];
        lines.push(self.octaves());
        for (length, name) in [(72, "1 min"), (3600, "1 h"), (86_400, "24 h")] {
            let errors: Vec<_> = self.gaps.iter().filter(|gap| gap.0 == length).collect();
            if errors.is_empty() {
                continue;
            }
            let n = errors.len() as f64;
            let rmse = (errors.iter().map(|gap| gap.1 * gap.1).sum::<f64>() / n).sqrt();
            let covered = errors.iter().filter(|gap| gap.2).count() as f64 / n;
            lines.push(format!(
                "  gaps of {name}: RMSE {rmse:.3} ppm, coverage {covered:.3}"
            ));
        }
        if self.events > 0.0 || self.false_calls > 0.0 {
            let mut found = self.found.clone();
            lines.push(format!(
                "  events: {:.3} found, after {:.1} s (median), {:.1} s (95th percentile); false calls {:.3} a trace",
                found.len() as f64 / self.events.max(1.0),
                percentile(&mut found, 0.5),
                percentile(&mut found, 0.95),
                self.false_calls / self.seeds,
            ));
        }
        lines
    }
}

impl Figures {
    /// Head of the table.
    pub(crate) const HEADER: &'static str = "scenario     RMSE ppm (want)    ratio (want)   coverage ± error (want)   at start ± error (want)   t10/t1/t0.1 s (want)              two-point, LS, EW-LS ×RMSE   locked and within 0.15 ppm";

    pub(crate) fn line(&self, scenario: &Scenario) -> String {
        let [rmse, ratio, covered, covered_start] = scenario.wanted;
        let [t10, t1, t01] = scenario.wanted_times;
        let [a, b, c] = self.rivals;
        format!(
            "{:<11} {:>8.4} ({rmse:.4})  {:>6.2} ({ratio:.2})   {:.3} ± {:.3} ({covered:.3})      {:.3} ± {:.3} ({covered_start:.3})      {:>3.0}/{:>3.0}/{:>4.0} ({t10:.0}/{t1:.0}/{t01:.0})      {a:.1}, {b:.1}, {c:.1}   {:.3}",
            scenario.name,
            self.rmse,
            self.ratio,
            self.covered.0,
            self.covered.1,
            self.covered_start.0,
            self.covered_start.1,
            self.times[0],
            self.times[1],
            self.times[2],
            self.locked,
        )
    }
}
