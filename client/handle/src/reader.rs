//! The audio thread's side.

use crate::SettingNumber;
use crate::block::{Block, Running};
use crate::latest;
use crate::queue;
use crate::report::{APPLIED_WORDS, Applied, LEVEL_WORDS, Level};
use crate::table::{Entry, TABLE_WORDS, Table, Version};
use crate::timescale::{TIMESCALE_WORDS, Timescale};

/// The audio thread's side of a handle. No method waits, allocates or calls the system.
#[derive(Debug)]
pub struct Reader {
    tables: latest::Receiver<Table, TABLE_WORDS>,
    timescales: latest::Receiver<Timescale, TIMESCALE_WORDS>,
    /// From this sample on, a setting that waits takes effect.
    due_sample: u64,
    /// From this sample on, the running setting is expired.
    expiry_sample: u64,
    /// The sample of the newest block end.
    sample: u64,
    running: Running,
    version: Option<Version>,
    expiry_ns: i64,
    table: Table,
    timescale: Option<Timescale>,
    counter_epoch: u64,
    applied: queue::Sender<Applied, APPLIED_WORDS>,
    /// What the queue had no room for.
    unsaid: Option<Applied>,
    levels: latest::Sender<Level, LEVEL_WORDS>,
}

impl Reader {
    pub(crate) fn new(
        running: Running,
        tables: latest::Receiver<Table, TABLE_WORDS>,
        timescales: latest::Receiver<Timescale, TIMESCALE_WORDS>,
        applied: queue::Sender<Applied, APPLIED_WORDS>,
        levels: latest::Sender<Level, LEVEL_WORDS>,
    ) -> Self {
        Self {
            tables,
            timescales,
            due_sample: u64::MAX,
            expiry_sample: u64::MAX,
            sample: 0,
            running,
            version: None,
            expiry_ns: i64::MAX,
            table: Table::default(),
            timescale: None,
            counter_epoch: 0,
            applied,
            unsaid: None,
            levels,
        }
    }

    /// What to run next. To be called at every block end, with the sink's count of samples there: of
    /// the samples that the sink has taken, on the counter that the timescale speaks of.
    ///
    /// A setting whose instant has come takes effect with this block.
    // Inlined, the block stays in registers: a return by memory would cost a third of the whole.
    #[inline(always)]
    pub fn next_block(&mut self, sink_sample: u64) -> Block {
        self.sample = sink_sample;
        if self.tables.is_fresh() || self.timescales.is_fresh() || sink_sample >= self.due_sample {
            return self.block_after_news();
        }
        self.running.next_block()
    }

    /// The setting that is running; `None` before the first.
    pub fn setting(&self) -> Option<SettingNumber> {
        self.version.map(|version| version.setting())
    }

    /// True if the running setting was past its expiry at the newest block end. It goes on being run.
    pub fn is_expired(&self) -> bool {
        self.sample >= self.expiry_sample
    }

    /// Says that the sink counts anew. Settings wait until the writer has a timescale of the same
    /// counter epoch; what is running goes on.
    pub fn restart(&mut self, counter_epoch: u64) {
        self.counter_epoch = counter_epoch;
        self.sample = 0;
        self.schedule();
    }

    /// Leaves word of how full the buffer is, in sink samples from its centre; positive is fuller.
    pub fn set_level(&mut self, level_samples: f64) {
        self.levels.send(&Level {
            level_samples,
            sink_sample: self.sample,
        });
    }

    /// Apart from the common case, which then needs no registers saved.
    #[cold]
    #[inline(never)]
    fn block_after_news(&mut self) -> Block {
        if self.tables.is_fresh() || self.timescales.is_fresh() {
            self.hear();
        }
        if self.sample >= self.due_sample {
            self.change();
        }
        self.running.next_block()
    }

    fn hear(&mut self) {
        if let Some(table) = self.tables.take() {
            self.table = table;
        }
        if let Some(timescale) = self.timescales.take() {
            self.timescale = Some(timescale);
        }
        self.schedule();
        self.say(None);
    }

    /// The timescale, if it speaks of the counter as it runs now.
    fn present(&self) -> Option<Timescale> {
        self.timescale
            .filter(|timescale| timescale.counter_epoch == self.counter_epoch)
    }

    /// Works out at which samples something is to happen.
    fn schedule(&mut self) {
        (self.due_sample, self.expiry_sample) = (u64::MAX, u64::MAX);
        let Some(timescale) = self.present() else {
            return;
        };
        let newer = self
            .table
            .entries()
            .filter(|e| Some(e.version) > self.version);
        let due = newer
            .map(|entry| timescale.sample_at(entry.effect_ns))
            .min();
        self.due_sample = due.unwrap_or(u64::MAX);
        if self.version.is_some() {
            // Expired is after the expiry, not at it.
            self.expiry_sample = timescale.sample_at(self.expiry_ns.saturating_add(1));
        }
    }

    /// Goes over to the newest setting whose instant has come.
    fn change(&mut self) {
        let Some(timescale) = self.present() else {
            return;
        };
        let due = |entry: &&Entry| timescale.sample_at(entry.effect_ns) <= self.sample;
        let newest = self.table.entries().filter(due).max_by_key(|e| e.version);
        let Some(entry) = newest
            .filter(|entry| Some(entry.version) > self.version)
            .copied()
        else {
            return self.schedule();
        };
        // The writer arms nothing whose words could not be read back.
        if let Some(realised) = entry.plan.realised() {
            self.running.change_to(&realised);
        }
        let number = entry.version.setting();
        let is_trim = self.setting() == Some(number);
        (self.version, self.expiry_ns) = (Some(entry.version), entry.expiry_ns);
        self.schedule();
        if !is_trim {
            self.say(Some(Applied {
                number,
                sink_sample: self.sample,
                counter_epoch: self.counter_epoch,
                house_ns: timescale.house_ns_at(self.sample),
                deviation_ns: timescale.deviation_ns,
            }));
        }
    }

    /// Reports, after what could not be reported before; what finds no room waits for the next
    /// word of the writer or the next change.
    fn say(&mut self, applied: Option<Applied>) {
        for report in [self.unsaid.take(), applied].into_iter().flatten() {
            if !self.applied.send(&report) {
                self.unsaid = Some(report);
            }
        }
    }
}
