//! A crossing while it is played.

use std::collections::VecDeque;

use ratewright_client::{Follow, Id, Realised as Told, Setting};
use ratewright_handle::{Cue, Realised, SettingNumber};

use super::player::{Player, PlayerError};
use super::recording::Tape;
use super::resampler::Filter;
use super::world::{SLOT_NS, World};

/// A crossing while it is played.
#[derive(Debug)]
pub(super) struct Seat {
    pub(super) name: &'static str,
    pub(super) id: Id,
    pub(super) filter: Filter,
    pub(super) player: Option<Player>,
    /// Heard of, their decision still to come in the player's time.
    pub(super) ahead: VecDeque<Setting>,
    pub(super) settings: Vec<(Setting, i64)>,
    pub(super) account: Vec<(i64, f64)>,
    /// House time up to which all decisions have been heard, ns.
    pub(super) known_ns: i64,
}

impl Seat {
    pub(super) fn new(name: &'static str, filter: Filter) -> Self {
        Self {
            name,
            id: Id::new(name).expect("a good name"),
            filter,
            player: None,
            ahead: VecDeque::new(),
            settings: Vec::new(),
            account: Vec::new(),
            known_ns: 0,
        }
    }

    /// The newest setting that was heard of.
    pub(super) fn newest(&self) -> Option<ratewright_client::SettingNumber> {
        let armed = self.settings.last().map(|(setting, _)| setting);
        self.ahead.back().or(armed).map(|setting| setting.number)
    }

    pub(super) fn has_heard(&self) -> bool {
        self.newest().is_some()
    }

    /// The slot in which the stream begins; none yet before its first setting.
    fn first_slot(&self, world: &World) -> Option<usize> {
        let armed = self.settings.first().map(|(setting, _)| setting);
        let first = armed.or(self.ahead.front())?;
        Some(world.slot_at(first.effect_ns))
    }

    /// The slot in which a stream of so many seconds ends.
    pub(super) fn end_slot(&self, world: &World, stream_s: u32) -> usize {
        let first = self.first_slot(world);
        first.map_or(usize::MAX, |first| first + stream_s as usize * 10)
    }

    /// The slot up to whose beginning it has played.
    pub(super) fn slot(&self, world: &World) -> usize {
        let played = self.player.as_ref().map(Player::slot);
        played.or(self.first_slot(world)).unwrap_or(0)
    }

    /// Plays on to a slot; settings are armed when their decision comes.
    pub(super) async fn play_to(
        &mut self,
        world: &World,
        target: usize,
        tape: impl Fn() -> Tape,
        follow: &mut Follow,
    ) -> Result<(), PlayerError> {
        let mut slot = self.player.as_ref().map_or(0, Player::slot);
        while slot < target {
            if self.player.is_none() {
                // The stream starts with its first setting.
                let Some(first) = self.ahead.front() else {
                    return Ok(());
                };
                if world.slot_at(first.effect_ns) + 1 > target {
                    return Ok(());
                }
                let first = self.ahead.pop_front().expect("it was looked at");
                let player = Player::start(world, &cue(&first), tape())?;
                slot = player.slot();
                self.player = Some(player);
                let armed_ns = first.decided_ns;
                self.settings.push((first, armed_ns));
            }
            let Some(player) = &mut self.player else {
                return Ok(());
            };
            let now_ns = world.origin_ns + slot as i64 * SLOT_NS;
            while let Some(setting) = self.ahead.pop_front_if(|s| s.decided_ns <= now_ns) {
                player.arm(&cue(&setting))?;
                self.settings.push((setting, now_ns));
            }
            slot += 1;
            for change in player.play_to(world, slot)? {
                let by_number =
                    |(setting, _): &&(Setting, i64)| handle_number(setting) == change.number;
                let setting = self.settings.iter().rev().find(by_number);
                let (setting, _) = setting.expect("it was armed");
                follow.applied(setting, change.said_ns, change.at).await;
            }
        }
        Ok(())
    }
}

/// The number as the handle has it.
pub(super) fn handle_number(setting: &Setting) -> SettingNumber {
    SettingNumber {
        epoch: setting.number.epoch,
        number: setting.number.number,
    }
}

fn cue(setting: &Setting) -> Cue {
    let realised = match setting.realised {
        Told::Single(ratio) => Realised::Single(ratio),
        Told::Cadence(cadence) => Realised::Cadence(cadence),
        Told::Stepping(stepping) => Realised::Stepping(stepping),
        Told::Lazy {
            cadence,
            swing_samples,
        } => Realised::Lazy {
            cadence,
            swing_samples,
        },
    };
    Cue {
        number: handle_number(setting),
        realised,
        effect_ns: setting.effect_ns,
        expiry_ns: setting.expiry_ns,
    }
}
