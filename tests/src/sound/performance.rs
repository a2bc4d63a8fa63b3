//! A performance: a daemon in accelerated time over real gRPC, a reporter that reads two clocks, and
//! three players that follow three crossings between the very same clocks: one by cadences, one by
//! steppings, one by lazy switching.
//!
//! Players play up to where the daemon has said what is to be run, and hear of a setting when their
//! own time reaches its decision: a stall of the machine then makes no setting late.

use std::time::Duration;

use ratewright_client::{
    Answer, CallError, Client, Follow, Id, Measurement, Reading, Receipts, Reference,
    ReportOptions, Reporter, Setting, Update,
};
use ratewright_server::{Daemon, StartFault, config::Config, house::HouseClock};
use ratewright_timing::sim::Random;
use thiserror::Error;
use tokio::time::{MissedTickBehavior, interval};

use super::player::{Played, PlayerError};
use super::programme::{PARTS, Programme};
use super::seat::Seat;
use super::world::{SLOT_NS, World};

/// Real time between two rounds of the reporter and the players.
const BEAT: Duration = Duration::from_millis(10);

/// House time between two readings of a clock.
const READING_NS: i64 = 1_000_000_000;

/// Slots that a player plays at most between two rounds of the reporter, 10 s: who has fallen behind
/// catches up without keeping readings back.
const MOST_SLOTS: usize = 100;

/// Standard deviation of a reading, ns.
const NOISE_NS: f64 = 1_000.0;

/// Why a performance broke off.
#[derive(Debug, Error)]
pub enum PerformanceError {
    /// The daemon.
    #[error("the daemon did not start: {0}")]
    Start(#[from] StartFault),
    /// A call.
    #[error(transparent)]
    Call(#[from] CallError),
    /// A player.
    #[error(transparent)]
    Player(#[from] PlayerError),
    /// Anything else that should not be.
    #[error("{0}")]
    Unexpected(String),
}

/// What came of one crossing.
#[derive(Debug)]
pub struct Part {
    /// Its name.
    pub name: &'static str,
    /// What the player did.
    pub played: Played,
    /// Settings in their order, and the player's time at which each was armed, ns.
    pub settings: Vec<(Setting, i64)>,
    /// The daemon's own account of the phase error: house time in ns, sink samples.
    pub account: Vec<(i64, f64)>,
}

/// What came of it all.
#[derive(Debug)]
pub struct Performance {
    /// The truth.
    pub world: World,
    /// The parts.
    pub parts: Vec<Part>,
    /// Readings that were taken in.
    pub readings: u64,
    /// Reports of what was applied that the daemon refused, in its words.
    pub refused: Vec<String>,
}

/// Plays a programme.
///
/// # Errors
/// [`PerformanceError`].
pub async fn perform(programme: &Programme) -> Result<Performance, PerformanceError> {
    let store = tempfile::tempdir().map_err(|e| PerformanceError::Unexpected(e.to_string()))?;
    let config = programme.configuration(store.path());
    let silent = Config {
        crossings: Vec::new(),
        ..config.clone()
    };
    let daemon = Daemon::builder(silent).pace(programme.pace).start().await?;
    let client = Client::connect(&format!("http://{}", daemon.grpc())).await?;
    let mut stage = Stage::new(client, daemon.house(), programme);
    stage.settle().await?;
    let declared = daemon.redeclare(config).await;
    declared.map_err(|fault| PerformanceError::Unexpected(fault.to_string()))?;
    stage.play().await?;
    let performance = stage.finish().await?;
    let drained = daemon.drain().await;
    drained.map_err(|fault| PerformanceError::Unexpected(fault.to_string()))?;
    Ok(performance)
}

/// Everybody but the daemon.
struct Stage {
    client: Client,
    house: HouseClock,
    programme: Programme,
    world: World,
    reporter: Reporter,
    taken_in: tokio::task::JoinHandle<Result<u64, PerformanceError>>,
    noise: Random,
    next_reading_ns: i64,
    follow: Follow,
    seats: Vec<Seat>,
    refused: Vec<String>,
}

impl Stage {
    fn new(client: Client, house: HouseClock, programme: &Programme) -> Self {
        let options = ReportOptions {
            linger: Duration::from_millis(1),
            ..ReportOptions::default()
        };
        let (reporter, receipts) = client.report(options);
        let seat = |(name, _, filter)| Seat::new(name, filter);
        let seats: Vec<Seat> = PARTS.into_iter().map(seat).collect();
        let ids: Vec<Id> = seats.iter().map(|seat| seat.id.clone()).collect();
        Self {
            follow: client.follow(&ids),
            client,
            house,
            programme: *programme,
            world: World::new(house.now(), programme.seed),
            reporter,
            taken_in: tokio::spawn(take(receipts)),
            noise: Random::new(programme.seed + 2),
            next_reading_ns: READING_NS,
            seats,
            refused: Vec::new(),
        }
    }

    /// ns since the origin.
    fn now_ns(&self) -> i64 {
        self.house.now() - self.world.origin_ns
    }

    /// Readings alone, until the clocks are known.
    async fn settle(&mut self) -> Result<(), PerformanceError> {
        let settled_ns = i64::from(self.programme.settle_s) * 1_000_000_000;
        while self.now_ns() < settled_ns {
            self.report().await?;
            tokio::time::sleep(BEAT).await;
        }
        Ok(())
    }

    /// The readings that have become due.
    async fn report(&mut self) -> Result<(), PerformanceError> {
        let now_ns = self.now_ns();
        self.world.extend_to((now_ns / SLOT_NS) as usize);
        while self.next_reading_ns <= now_ns {
            for clock in ["source", "sink"] {
                let reading = self.reading(clock);
                let sent = self.reporter.report_when_room(reading).await;
                sent.map_err(|closed| PerformanceError::Unexpected(closed.to_string()))?;
            }
            self.next_reading_ns += READING_NS;
        }
        Ok(())
    }

    /// A counter latched at its own tick, and a timestamp that is off by some noise.
    fn reading(&mut self, clock: &str) -> Reading {
        let track = match clock {
            "source" => &self.world.source,
            _ => &self.world.sink,
        };
        let tick = track.at_ns(self.next_reading_ns).floor();
        let exact_ns = track.when(tick).ns();
        let noise_ns = NOISE_NS * self.noise.normal();
        Reading {
            clock: Id::new(clock).expect("a good name"),
            reference: Reference::House,
            probe: None,
            sequence: None,
            measurement: Measurement::Counter {
                count: tick as u64,
                bits: 64,
                reference_ns: self.world.origin_ns + (exact_ns + noise_ns).round() as i64,
            },
        }
    }

    async fn play(&mut self) -> Result<(), PerformanceError> {
        let mut beat = interval(BEAT);
        beat.set_missed_tick_behavior(MissedTickBehavior::Delay);
        while !self.is_over() {
            tokio::select! {
                update = self.follow.next() => self.hear(update?)?,
                _ = beat.tick() => {
                    self.report().await?;
                    self.ask().await?;
                    self.play_on().await?;
                }
            }
        }
        Ok(())
    }

    fn is_over(&self) -> bool {
        let stream_s = self.programme.stream_s;
        self.seats.iter().all(|seat| {
            let end = seat.end_slot(&self.world, stream_s);
            seat.player
                .as_ref()
                .is_some_and(|player| player.slot() >= end)
        })
    }

    fn hear(&mut self, update: Update) -> Result<(), PerformanceError> {
        match update {
            Update::Setting(setting) => {
                let seat = self.seats.iter_mut().find(|s| s.id == setting.crossing);
                let seat = seat.expect("only these are followed");
                seat.ahead.push_back(*setting);
                Ok(())
            }
            // A stall of this machine is minutes of house time: the daemon no longer remembers.
            Update::ReportRefused {
                field,
                value,
                accepted,
                ..
            } => {
                let refused = format!("{field} {value}, accepted is {accepted}");
                self.refused.push(refused);
                Ok(())
            }
            other => Err(PerformanceError::Unexpected(format!("{other:?}"))),
        }
    }

    async fn play_on(&mut self) -> Result<(), PerformanceError> {
        for seat in &mut self.seats {
            let known = self.world.slot_at(seat.known_ns);
            let end = seat.end_slot(&self.world, self.programme.stream_s);
            let most = seat.slot(&self.world).saturating_add(MOST_SLOTS);
            let target = known.min(end).min(most);
            // Two seconds more: filters look ahead.
            self.world.extend_to(target + 20);
            let (programme, filter) = (self.programme, seat.filter);
            let tape = || programme.tape(filter);
            seat.play_to(&self.world, target, tape, &mut self.follow)
                .await?;
        }
        Ok(())
    }

    /// Asks how the crossings stand: what was decided by then is known when the newest setting of
    /// that standing has been heard.
    async fn ask(&mut self) -> Result<(), PerformanceError> {
        for seat in self.seats.iter_mut().filter(|seat| seat.has_heard()) {
            let status = self.client.crossing(&seat.id).await?.status;
            if status.setting.map(|setting| setting.number) == seat.newest() {
                seat.known_ns = status.as_of_ns;
            }
            let account = (status.as_of_ns, status.phase_error_samples);
            seat.account.push(account);
        }
        Ok(())
    }

    async fn finish(self) -> Result<Performance, PerformanceError> {
        drop(self.reporter);
        let taken_in = self.taken_in.await;
        let readings =
            taken_in.map_err(|error| PerformanceError::Unexpected(error.to_string()))??;
        let world = self.world;
        let part = |seat: Seat| Part {
            name: seat.name,
            played: seat
                .player
                .expect("it is over when all have played")
                .finish(&world),
            settings: seat.settings,
            account: seat.account,
        };
        let parts = self.seats.into_iter().map(part).collect();
        Ok(Performance {
            world,
            parts,
            readings,
            refused: self.refused,
        })
    }
}

/// Readings taken in; a refused one is a fault.
async fn take(mut receipts: Receipts) -> Result<u64, PerformanceError> {
    let mut readings = 0;
    while let Some(answer) = receipts.next().await? {
        match answer {
            Answer::Receipt(receipt) if receipt.refused.is_empty() => readings += receipt.accepted,
            other => return Err(PerformanceError::Unexpected(format!("{other:?}"))),
        }
    }
    Ok(readings)
}
