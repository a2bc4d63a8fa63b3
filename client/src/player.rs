//! A follower with an audio thread: settings go to its handle, and what it applied comes back.

use std::collections::BTreeMap;
use std::path::PathBuf;
use std::time::Duration;

use ratewright_handle::{
    Applied, ArmError, Cue, Reader, Realised, SettingNumber, SinkLine, Trim, Writer, handle,
};
use ratewright_ratio::Fraction;
use tokio::sync::mpsc;
use tokio::time::{Instant, Interval, MissedTickBehavior, interval};

use crate::cache::Cache;
use crate::house::{self, HouseClock};
use crate::{CallError, Client, Exchange, Follow, Freshness, Id, Setting, Update};

/// Time between looks at what the audio thread says.
const TICK: Duration = Duration::from_millis(100);

/// Ticks between reports of the buffer's level.
const TICKS_A_LEVEL: u64 = 10;

/// Ticks between trims past expiry.
const TICKS_A_TRIM: u64 = 100;

/// Settings of which the daemon still takes word that they were applied.
const KNOWN: usize = 8;

/// What a player is told at its start.
#[derive(Clone, Debug, PartialEq)]
pub struct PlayerOptions {
    /// What is run until the first setting: the nominal ratio, sink rate over source rate.
    pub nominal: Realised,
    /// Nominal rate of the sink, Hz, above 0.
    pub sink_hz: f64,
    /// Standard deviation of the levels that the audio thread leaves, sink samples, above 0.
    pub level_deviation_samples: f64,
    /// How far to depart from the average by the buffer's own level, past expiry; `None` never does.
    pub trim: Option<Trim>,
    /// Where to keep the newest setting, so that the next start begins with it.
    pub keep_in: Option<PathBuf>,
}

impl PlayerOptions {
    /// One ratio from a source and a sink rate, both in whole Hz and at least 1; levels good to half
    /// a sample, no trim, nothing kept. Where a rate is no whole number, give `nominal` and `sink_hz`
    /// beside it: `Realised::Single(Fraction::new(1001, 1000))` into 48 000 000/1001 Hz from 48 kHz less
    /// 0.2 %.
    pub fn new(source_hz: u64, sink_hz: u64) -> Self {
        Self {
            nominal: Realised::Single(Fraction::new(sink_hz, source_hz)),
            sink_hz: sink_hz as f64,
            level_deviation_samples: 0.5,
            trim: None,
            keep_in: None,
        }
    }
}

/// What a player yields.
#[derive(Clone, Debug, PartialEq)]
#[non_exhaustive]
pub enum Playing {
    /// What the follower heard. A setting has been armed already, and takes effect at the first block
    /// end at or after its instant: `lead_ns` of the crossing, 1 s by default, is the time there is to
    /// make the filter of a new L.
    Heard(Update),
    /// The audio thread runs a setting, and the daemon was told.
    Applied(Applied),
    /// A setting could not be armed; the one before goes on.
    NotArmed(ArmError),
}

/// Where the sink's counter is read: from any thread, as often as is convenient, at least a few
/// times a minute.
#[derive(Clone, Debug)]
pub struct SinkProbe(mpsc::Sender<SinkReading>);

#[derive(Clone, Copy, Debug)]
struct SinkReading {
    counter_epoch: u64,
    sample: u64,
    at: Instant,
}

impl SinkProbe {
    /// At the instant `at` the sink had taken `sample` samples, in the given run of its counter.
    /// Never waits; a reading that finds no room is dropped, for the next is as good.
    pub fn read(&self, counter_epoch: u64, sample: u64, at: std::time::Instant) {
        let at = Instant::from_std(at);
        let _ = self.0.try_send(SinkReading {
            counter_epoch,
            sample,
            at,
        });
    }
}

/// Follows one crossing and keeps an audio thread's [`Reader`] supplied. It tells the daemon what was
/// applied and how full the buffer is; the clocks are measured by [`Reporter`](crate::Reporter)s, not by it.
///
/// # Examples
/// See `examples/play.rs`.
#[derive(Debug)]
pub struct Player {
    crossing: Id,
    options: PlayerOptions,
    follow: Follow,
    writer: Writer,
    line: SinkLine,
    house: HouseClock,
    exchanges: mpsc::Receiver<Exchange>,
    readings: mpsc::Receiver<SinkReading>,
    /// The newest settings, for the words on what was applied.
    settings: BTreeMap<SettingNumber, Setting>,
    ticks: Interval,
    ticked: u64,
    level_sample: Option<u64>,
}

impl Client {
    /// Starts a player for a crossing: the player for a task, the reader for the audio thread, and
    /// the probe for whoever can read the sink's counter. Must be called within a tokio runtime.
    ///
    /// With a setting kept from before, the reader begins with that.
    ///
    /// # Errors
    /// [`ArmError`] if the nominal ratio is a lazy pair whose swing cannot be kept.
    pub fn play(
        &self,
        crossing: &Id,
        options: PlayerOptions,
    ) -> Result<(Player, Reader, SinkProbe), ArmError> {
        let mut follow = self.follow(std::slice::from_ref(crossing));
        let mut initial = options.nominal;
        if let Some(folder) = &options.keep_in {
            if let Some(kept) = Cache::new(folder).read(crossing) {
                initial = kept.setting.realised;
            }
            follow = follow.keep_in(folder);
        }
        let (writer, reader) = handle(&initial)?;
        let origin = Instant::now();
        let (exchanged, exchanges) = mpsc::channel(1);
        tokio::spawn(house::exchange(self.clone(), origin, exchanged));
        let (probe, readings) = mpsc::channel(64);
        let mut ticks = interval(TICK);
        ticks.set_missed_tick_behavior(MissedTickBehavior::Delay);
        let player = Player {
            crossing: crossing.clone(),
            line: SinkLine::new(options.sink_hz),
            options,
            follow,
            writer,
            house: HouseClock::new(origin),
            exchanges,
            readings,
            settings: BTreeMap::new(),
            ticks,
            ticked: 0,
            level_sample: None,
        };
        Ok((player, reader, SinkProbe(probe)))
    }
}

impl Player {
    /// The next thing worth knowing. To be called in a loop: between its returns settings are armed,
    /// the sink's timescale is refreshed, and reports go out. Cancel safe.
    ///
    /// # Errors
    /// As [`Watch::next`](crate::Watch::next).
    pub async fn next(&mut self) -> Result<Playing, CallError> {
        loop {
            tokio::select! {
                heard = self.follow.next() => {
                    let heard = heard?;
                    if let Update::Setting(setting) = &heard
                        && let Err(error) = self.arm(setting)
                    {
                        return Ok(Playing::NotArmed(error));
                    }
                    return Ok(Playing::Heard(heard));
                }
                Some(exchange) = self.exchanges.recv() => self.house.take(exchange),
                Some(reading) = self.readings.recv() => self.refresh(reading),
                _ = self.ticks.tick() => {
                    self.ticked += 1;
                    if let Some(applied) = self.writer.next_applied() {
                        self.report(&applied).await;
                        return Ok(Playing::Applied(applied));
                    }
                    self.report_level().await;
                    self.trim();
                }
            }
        }
    }

    /// Whether the newest setting can still be relied on; `None` before the first. A reader on its own knows
    /// no house time before the first contact, and so cannot call what was kept expired; this can.
    pub fn freshness(&self) -> Option<Freshness> {
        let (_, newest) = self.settings.last_key_value()?;
        Some(self.follow.freshness(newest))
    }

    fn arm(&mut self, setting: &Setting) -> Result<(), ArmError> {
        self.writer.arm(&Cue {
            number: setting.number,
            realised: setting.realised,
            effect_ns: setting.effect_ns,
            expiry_ns: setting.expiry_ns,
        })?;
        self.settings.insert(setting.number, setting.clone());
        if self.settings.len() > KNOWN {
            self.settings.pop_first();
        }
        Ok(())
    }

    /// Before the first exchange nothing ties the sink to house time, and settings wait.
    fn refresh(&mut self, reading: SinkReading) {
        let Some((house_ns, deviation_ns)) = self.house.at(reading.at) else {
            return;
        };
        self.line.read(
            reading.counter_epoch,
            reading.sample,
            house_ns,
            deviation_ns,
        );
        if let Some(timescale) = self.line.timescale() {
            // Only an older run of the counter is refused: a reading that came late.
            let _ = self.writer.set_timescale(&timescale);
        }
    }

    async fn report(&mut self, applied: &Applied) {
        if let Some(setting) = self.settings.get(&applied.number) {
            self.follow
                .applied(setting, applied.house_ns, applied.sink_sample)
                .await;
        }
    }

    async fn report_level(&mut self) {
        let due = self.ticked.is_multiple_of(TICKS_A_LEVEL);
        let (true, Some(level), Some(timescale)) =
            (due, self.writer.level(), self.writer.timescale())
        else {
            return;
        };
        if self.level_sample.replace(level.sink_sample) == Some(level.sink_sample) {
            return;
        }
        self.follow
            .occupancy(
                &self.crossing,
                level.level_samples,
                self.options.level_deviation_samples,
                timescale.house_ns_at(level.sink_sample),
            )
            .await;
    }

    /// Past expiry, and only if it was allowed, the buffer's own level moves the average.
    fn trim(&mut self) {
        let due = self.ticked.is_multiple_of(TICKS_A_TRIM);
        let expired = self.freshness() == Some(Freshness::Expired);
        if let (true, Some(trim), Some(level)) =
            (due && expired, self.options.trim, self.writer.level())
        {
            // What cannot be trimmed keeps its average.
            let ppb = trim.ppb(level.level_samples, self.options.sink_hz);
            let _ = self.writer.trim(ppb);
        }
    }
}
