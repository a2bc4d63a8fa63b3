//! The summary of the sample facility as text.

use std::fmt::{self, Display, Formatter};

use ratewright_client::{Clock, Crossing, CrossingState, EstimateState, Realised};
use ratewright_ratio::{Cadence, Fraction};

/// The facility at an instant; displays as the summary.
pub(super) struct Snapshot<'a> {
    /// Seconds since the facility began.
    pub(super) age_s: f64,
    /// Where the page is.
    pub(super) page: &'a str,
    pub(super) clocks: &'a [Clock],
    pub(super) crossings: &'a [Crossing],
}

impl Snapshot<'_> {
    /// True once every clock that is measured is past free-running and every crossing has a setting.
    pub(super) fn settled(&self) -> bool {
        let free = |clock: &Clock| clock.estimate.state == EstimateState::FreeRunning;
        let waiting = |crossing: &Crossing| crossing.status.setting.is_none();
        !self.clocks.iter().any(free) && !self.crossings.iter().any(waiting)
    }

    /// Clocks that are measured: an exact one is not.
    fn measured(&self) -> impl Iterator<Item = &Clock> {
        self.clocks.iter().filter(|clock| !clock.declaration.exact)
    }

    fn clock_lines(&self, f: &mut Formatter<'_>) -> fmt::Result {
        writeln!(
            f,
            "{:16} {:13} {:>20}   locked",
            "clock", "state", "drift, ppm"
        )?;
        let mut clocks: Vec<_> = self.clocks.iter().collect();
        clocks.sort_by_key(|clock| clock_rank(clock.estimate.state));
        for clock in clocks {
            let estimate = &clock.estimate;
            let (drift, half) = (estimate.drift * 1e6, estimate.half_width() * 1e6);
            let drift = match clock.declaration.exact {
                true => "0 by definition".to_owned(),
                false => format!("{drift:+.4} ± {half:.4}"),
            };
            let (id, state) = (clock.declaration.id.as_str(), clock_state(estimate.state));
            writeln!(f, "{id:16} {state:13} {drift:>20}   {}", locked(clock))?;
        }
        Ok(())
    }

    fn crossing_lines(&self, f: &mut Formatter<'_>) -> fmt::Result {
        let (head, off, phase) = ("crossing", "off, ppb", "phase error");
        writeln!(
            f,
            "{head:16} {:13} {:40} {off:>9}  {phase:>18}  slip if left alone",
            "state", "runs"
        )?;
        let mut crossings: Vec<_> = self.crossings.iter().collect();
        crossings.sort_by_key(|crossing| crossing_rank(crossing.status.state));
        for crossing in crossings {
            let (id, status) = (crossing.declaration.id.as_str(), &crossing.status);
            let state = crossing_state(status.state);
            let (runs, off) = match &status.setting {
                Some(setting) => (
                    runs(&setting.realised),
                    format!("{:+.1}", status.residual * 1e9),
                ),
                None => ("nothing yet".to_owned(), String::new()),
            };
            let headroom = crossing.declaration.headroom_samples;
            let phase = format!("{:+.2} of ±{headroom}", status.phase_error_samples);
            let slip = status
                .seconds_to_slip
                .map_or("not in sight".to_owned(), |s| format!("in {}", span(s)));
            writeln!(
                f,
                "{id:16} {state:13} {runs:40} {off:>9}  {phase:>18}  {slip}"
            )?;
        }
        Ok(())
    }

    fn outlook(&self, f: &mut Formatter<'_>) -> fmt::Result {
        let is_locked = |clock: &&Clock| clock.estimate.state == EstimateState::Locked;
        let all = self.measured().count();
        let locked = self.measured().filter(is_locked).count();
        write!(f, "{locked} of {all} measured clocks are locked")?;
        let rest: Vec<_> = self.measured().filter(|clock| !is_locked(clock)).collect();
        let latest = rest
            .iter()
            .filter_map(|clock| clock.estimate.lock_expected_seconds);
        if let Some(latest) = latest.reduce(f64::max) {
            write!(
                f,
                ", the last that can be foreseen in about {}",
                span(latest)
            )?;
        }
        let unforeseen = rest
            .iter()
            .filter(|clock| clock.estimate.lock_expected_seconds.is_none());
        match unforeseen.count() {
            0 => {}
            count => write!(f, "; {count} cannot be foreseen yet")?,
        }
        let set = self
            .crossings
            .iter()
            .filter(|crossing| crossing.status.setting.is_some());
        writeln!(
            f,
            ".\n{} of {} crossings have a setting.",
            set.count(),
            self.crossings.len()
        )
    }
}

impl Display for Snapshot<'_> {
    fn fmt(&self, f: &mut Formatter<'_>) -> fmt::Result {
        writeln!(
            f,
            "Radio Lanternsea after {} of house time; page: {}\n",
            span(self.age_s),
            self.page
        )?;
        self.clock_lines(f)?;
        writeln!(f)?;
        self.crossing_lines(f)?;
        writeln!(f)?;
        self.outlook(f)
    }
}

fn locked(clock: &Clock) -> String {
    match (clock.estimate.state, clock.estimate.lock_expected_seconds) {
        (EstimateState::Locked, _) => "yes".to_owned(),
        (_, Some(seconds)) => format!("in about {}", span(seconds)),
        (EstimateState::Holdover, None) => "when readings return".to_owned(),
        (_, None) => "cannot be foreseen yet".to_owned(),
    }
}

fn runs(realised: &Realised) -> String {
    match realised {
        Realised::Single(ratio) => format!("{}/{}", ratio.numer(), ratio.denom()),
        Realised::Cadence(cadence) => pair(cadence),
        Realised::Lazy {
            cadence,
            swing_samples,
        } => format!("{} within ±{swing_samples:.1}", pair(cadence)),
        Realised::Stepping(stepping) => {
            let (advance, longer) = stepping.advances();
            format!("{} phases by {advance} or {longer}", stepping.phases())
        }
    }
}

fn pair(cadence: &Cadence) -> String {
    let part = |ratio: Fraction, blocks| format!("{blocks} × {}/{}", ratio.numer(), ratio.denom());
    format!(
        "{} + {}",
        part(cadence.low(), cadence.low_blocks()),
        part(cadence.high(), cadence.high_blocks())
    )
}

/// A span of time in the two largest units that say something.
pub(super) fn span(seconds: f64) -> String {
    let whole = seconds.max(0.0).round() as u64;
    match whole {
        0..60 => format!("{whole} s"),
        60..3_600 => format!("{} min {:02} s", whole / 60, whole % 60),
        3_600..86_400 => format!("{} h {:02} min", whole / 3_600, whole % 3_600 / 60),
        _ => format!("{} d {:02} h", whole / 86_400, whole % 86_400 / 3_600),
    }
}

pub(super) fn clock_state(state: EstimateState) -> &'static str {
    match state {
        EstimateState::FreeRunning => "free-running",
        EstimateState::Acquiring => "acquiring",
        EstimateState::Locked => "locked",
        EstimateState::Holdover => "holdover",
    }
}

/// Worst first.
fn clock_rank(state: EstimateState) -> u8 {
    match state {
        EstimateState::FreeRunning => 0,
        EstimateState::Holdover => 1,
        EstimateState::Acquiring => 2,
        EstimateState::Locked => 3,
    }
}

pub(super) fn crossing_state(state: CrossingState) -> &'static str {
    match state {
        CrossingState::Waiting => "waiting",
        CrossingState::Holding => "holding",
        CrossingState::Degraded => "degraded",
        CrossingState::OutOfBounds => "out of bounds",
    }
}

/// Worst first.
fn crossing_rank(state: CrossingState) -> u8 {
    match state {
        CrossingState::OutOfBounds => 0,
        CrossingState::Degraded => 1,
        CrossingState::Waiting => 2,
        CrossingState::Holding => 3,
    }
}
