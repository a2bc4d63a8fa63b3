//! What followers report: when a setting took effect, and how full the buffer is.

use crate::engine::Engine;
use crate::ledger::{Level, Levelled};
use crate::record::Ends;
use crate::timeline::KEPT;
use crate::{Effects, HouseNs, Id, Refusal, Transition};

/// A report may be ahead of house time by this much, ns: followers map time with an error (1 s).
const AHEAD_NS: i64 = 1_000_000_000;
/// An occupancy older than this, ns, says nothing of now (60 s).
const OLDEST_LEVEL_NS: i64 = 60_000_000_000;

impl Engine {
    /// The two ends of a crossing at `now`.
    pub(crate) fn ends(&self, crossing: &Id, now: HouseNs) -> Option<Ends> {
        let record = self.crossings.get(crossing)?;
        let (source, sink) = (record.source(), &record.declaration.sink);
        let rate = |id: &Id| {
            self.clocks
                .get(id)
                .map(|record| record.declaration.nominal_hz)
        };
        Some(Ends::new(
            (rate(source)?, self.clocks.estimate(source, now)?),
            (rate(sink)?, self.clocks.estimate(sink, now)?),
        ))
    }

    pub(crate) fn known_ends(&self, crossing: &Id, now: HouseNs) -> Result<Ends, Refusal> {
        let unknown = || Refusal::not_found("crossing", crossing, "a crossing that was declared");
        self.ends(crossing, now).ok_or_else(unknown)
    }

    /// Refuses what a follower cannot know: nobody is to run the settings of a trial.
    fn check_on_air(&self, crossing: &Id) -> Result<(), Refusal> {
        if self
            .crossings
            .get(crossing)
            .is_some_and(|record| record.declaration.silent)
        {
            let accepted = "a crossing that is not silent: nobody runs the settings of a trial";
            return Err(Refusal::precondition("crossing", crossing, accepted));
        }
        Ok(())
    }

    pub(crate) fn applied(
        &mut self,
        crossing: &Id,
        (epoch, number): (u64, u64),
        house_ns: HouseNs,
        now: HouseNs,
    ) -> Result<(), Refusal> {
        let ends = self.known_ends(crossing, now)?;
        self.check_on_air(crossing)?;
        let record = self
            .crossings
            .get_mut(crossing)
            .expect("its ends were found");
        let Some(entry) = record.ledger.timeline.entry(epoch, number) else {
            let accepted = format!(
                "one of the last {KEPT} settings of the crossing, the newest of which is number {}",
                record.last_number
            );
            return Err(Refusal::not_found(
                "number",
                format!("{epoch}/{number}"),
                accepted,
            ));
        };
        let (earliest_ns, latest_ns) = (entry.decided_ns, now.saturating_add(AHEAD_NS));
        if !(earliest_ns..=latest_ns).contains(&house_ns) {
            let accepted = format!("{earliest_ns}, when it was decided, to {latest_ns}");
            return Err(Refusal::invalid("house_ns", house_ns, accepted));
        }
        record.ledger.advance(now, &ends.source, &ends.sink);
        record
            .ledger
            .applied(number, house_ns, &ends.source, &ends.sink);
        Ok(())
    }

    pub(crate) fn occupied(
        &mut self,
        crossing: &Id,
        (level, deviation): (f64, f64),
        house_ns: HouseNs,
        now: HouseNs,
        effects: &mut Effects,
    ) -> Result<(), Refusal> {
        let ends = self.known_ends(crossing, now)?;
        self.check_on_air(crossing)?;
        check_level(level, deviation)?;
        let (oldest_ns, latest_ns) = (
            now.saturating_sub(OLDEST_LEVEL_NS),
            now.saturating_add(AHEAD_NS),
        );
        if !(oldest_ns..=latest_ns).contains(&house_ns) {
            return Err(Refusal::invalid(
                "house_ns",
                house_ns,
                format!("{oldest_ns} to {latest_ns}"),
            ));
        }
        let record = self
            .crossings
            .get_mut(crossing)
            .expect("its ends were found");
        record.ledger.advance(now, &ends.source, &ends.sink);
        let taken = Level {
            samples: level,
            variance: deviation * deviation,
            age_s: (now - house_ns) as f64 * 1e-9,
        };
        let levelled = record.ledger.level(taken, &ends.source, &ends.sink);
        let is_news = !matches!(
            levelled,
            None | Some(Levelled::Corrected | Levelled::SetAside)
        );
        if levelled == Some(Levelled::Moved) {
            effects.transitions.push(Transition::Centred {
                crossing: crossing.clone(),
                phase_error_samples: record.ledger.phase_samples(),
                reason: format!("the follower's buffer stands at {level:.3} samples: it was moved"),
            });
        }
        if is_news {
            self.due_crossing(crossing, now);
        }
        Ok(())
    }
}

fn check_level(level: f64, deviation: f64) -> Result<(), Refusal> {
    if !(level.is_finite() && level.abs() <= 1e12) {
        return Err(Refusal::invalid(
            "level_samples",
            level,
            "a number within ±1e12",
        ));
    }
    if !(deviation > 0.0 && deviation <= 1e12) {
        return Err(Refusal::invalid(
            "deviation_samples",
            deviation,
            "above 0, at most 1e12",
        ));
    }
    Ok(())
}
