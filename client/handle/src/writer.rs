//! The side of whoever hears of settings.

use crate::latest;
use crate::plan::Plan;
use crate::queue;
use crate::report::{APPLIED_WORDS, Applied, LEVEL_WORDS, Level};
use crate::table::{Entry, TABLE_WORDS, Table, Version};
use crate::timescale::{TIMESCALE_WORDS, Timescale, TimescaleError};
use crate::trim::{TrimError, trimmed};
use crate::{ArmError, Cue, Realised};

/// Reports that can wait to be taken; a power of two.
pub(crate) const REPORTS: usize = 16;

/// The other side of a [`Reader`](crate::Reader). Its methods don't wait either, but some allocate.
#[derive(Debug)]
pub struct Writer {
    tables: latest::Sender<Table, TABLE_WORDS>,
    timescales: latest::Sender<Timescale, TIMESCALE_WORDS>,
    reports: queue::Receiver<Applied, APPLIED_WORDS>,
    levels: latest::Receiver<Level, LEVEL_WORDS>,
    table: Table,
    /// What the newest setting asks for, untrimmed.
    newest: Option<Realised>,
    timescale: Option<Timescale>,
    level: Option<Level>,
}

impl Writer {
    pub(crate) fn new(
        tables: latest::Sender<Table, TABLE_WORDS>,
        timescales: latest::Sender<Timescale, TIMESCALE_WORDS>,
        reports: queue::Receiver<Applied, APPLIED_WORDS>,
        levels: latest::Receiver<Level, LEVEL_WORDS>,
    ) -> Self {
        Self {
            tables,
            timescales,
            reports,
            levels,
            table: Table::default(),
            newest: None,
            timescale: None,
            level: None,
        }
    }

    /// Arms a setting. Up to four can wait for their instants; of more the oldest is given up.
    ///
    /// # Errors
    /// [`ArmError`]; what was armed before stays.
    pub fn arm(&mut self, cue: &Cue) -> Result<(), ArmError> {
        let version = Version::of(cue.number);
        if let Some(newest) = self.table.newest().map(|entry| entry.version.setting())
            && cue.number <= newest
        {
            let number = cue.number;
            return Err(ArmError::NotNewer { number, newest });
        }
        self.table.push(Entry {
            version,
            effect_ns: cue.effect_ns,
            expiry_ns: cue.expiry_ns,
            plan: Plan::new(&cue.realised)?,
        });
        self.newest = Some(cue.realised);
        self.tables.send(&self.table);
        Ok(())
    }

    /// Tells where the sink's count stands. To be refreshed a few times a second: the reader
    /// carries the newest on at its rate.
    ///
    /// # Errors
    /// [`TimescaleError`]; the one before stays.
    pub fn set_timescale(&mut self, timescale: &Timescale) -> Result<(), TimescaleError> {
        timescale.check(self.timescale.map(|newest| newest.counter_epoch))?;
        self.timescale = Some(*timescale);
        self.timescales.send(timescale);
        Ok(())
    }

    /// The timescale that was set last.
    pub fn timescale(&self) -> Option<Timescale> {
        self.timescale
    }

    /// Runs the newest setting's pair or table at its average times 1 + `ppb`/10^9 from the next
    /// block end on, or from its own instant if that is still to come; 0 undoes it. The next setting
    /// that takes effect ends it. It is not reported as applied.
    ///
    /// # Errors
    /// [`TrimError`]; what is running goes on.
    pub fn trim(&mut self, ppb: i64) -> Result<(), TrimError> {
        let (Some(entry), Some(realised)) = (self.table.newest(), &self.newest) else {
            return Err(TrimError::NoSetting);
        };
        let realised = trimmed(realised, ppb)?;
        let mut entry = *entry;
        entry.plan = Plan::new(&realised).map_err(|_| TrimError::OutOfReach { ppb })?;
        entry.version.trims += 1;
        self.table.replace_newest(entry);
        self.tables.send(&self.table);
        Ok(())
    }

    /// The oldest report of a setting that took effect, once each. Sixteen can wait.
    pub fn next_applied(&mut self) -> Option<Applied> {
        self.reports.take()
    }

    /// The level that the audio thread left last.
    pub fn level(&mut self) -> Option<Level> {
        if let Some(level) = self.levels.take() {
            self.level = Some(level);
        }
        self.level
    }
}
