//! Settings as they arrive: connecting, checking, ordering. What `Watch` and `Follow` share.

use std::collections::{BTreeMap, VecDeque};
use std::fmt;
use std::path::Path;
use std::time::Duration;

use ratewright_proto::v1;
use ratewright_ratio::Bounds;
use tokio::task::spawn_blocking;
use tokio::time::{Instant, sleep_until};
use tonic::{Status, Streaming};
use v1::follow_settings_response::Message;

use crate::backoff::Backoff;
use crate::cache::{Cache, Moment, system_now_ns};
use crate::follow::Outbound;
use crate::hosts::Place;
use crate::newest::Newest;
use crate::wire::{crossing_name, crossing_of};
use crate::{CallError, Client, Id, RefusalKind, Setting, SettingNumber, VerifyError};

/// What a watch or a follow yields.
#[derive(Clone, Debug, PartialEq)]
#[non_exhaustive]
pub enum Update {
    /// A verified setting, newer than all before it for its crossing.
    Setting(Box<Setting>),
    /// A setting that must not be run; the one before stays.
    Refused {
        /// Its name.
        name: String,
        /// What does not hold.
        error: VerifyError,
    },
    /// A setting that is older than one heard before, and was passed over. The daemon's store was lost, and
    /// it has to be started once with a new epoch; or one of several daemons lags behind.
    Older {
        /// Its name.
        name: String,
        /// The newest heard.
        newest: SettingNumber,
    },
    /// Contact was lost. Settings stay in force, and are [stale](Freshness::Stale) until
    /// [`Update::Regained`].
    Lost(Loss),
    /// Contact is back; newer settings follow, if there are any.
    Regained,
    /// The daemon refused something this follower reported.
    ReportRefused {
        /// Path of the field at fault.
        field: String,
        /// The value that was sent.
        value: String,
        /// What would have been accepted.
        accepted: String,
        /// The crossing that the report spoke of; `None` if the daemon does not say.
        crossing: Option<Id>,
    },
}

/// A loss of contact. The stream tries again by itself.
#[derive(Clone, Debug, PartialEq)]
pub struct Loss {
    /// What the transport said.
    pub reason: String,
    /// Time until the next try.
    pub retry_in: Duration,
}

impl fmt::Display for Loss {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let Self { reason, retry_in } = self;
        write!(
            f,
            "no contact: {reason}; next try in {:.1} s",
            retry_in.as_secs_f64()
        )
    }
}

/// Whether a setting can still be relied on. None of these stops a stream.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Freshness {
    /// In contact with the daemon, which has not said anything newer.
    Current,
    /// Without contact; the setting is within its expiry.
    Stale,
    /// House time is past the setting's expiry. Until the first contact, a setting that was kept on disk is
    /// judged by this machine's system clock, unless that is behind the time at which it was kept.
    Expired,
}

/// A house time and when it was heard.
#[derive(Clone, Copy, Debug)]
struct Heard {
    house_ns: i64,
    at: Instant,
}

/// The stream of one call, of either kind.
#[derive(Debug)]
enum Inbound {
    Watch(Streaming<v1::WatchSettingsResponse>),
    Follow(Streaming<v1::FollowSettingsResponse>),
}

impl Inbound {
    /// The next message, in the form of the richer of the two kinds.
    async fn message(&mut self) -> Result<Option<v1::FollowSettingsResponse>, Status> {
        match self {
            Self::Follow(stream) => stream.message().await,
            Self::Watch(stream) => Ok(stream.message().await?.map(|response| {
                let house_ns = response.house_ns;
                v1::FollowSettingsResponse {
                    message: response.setting.map(Message::Setting),
                    house_ns,
                }
            })),
        }
    }
}

/// A subscription that mends itself.
#[derive(Debug)]
pub(crate) struct Feed {
    client: Client,
    crossings: Vec<Id>,
    /// Present if this is a follower.
    outbound: Option<Outbound>,
    inbound: Option<Inbound>,
    /// Where the call was made.
    place: Place,
    lost: bool,
    retry_at: Option<Instant>,
    backoff: Backoff,
    /// A setting on its way through the checks; kept here so that a cancelled `next` loses nothing.
    held: Option<(Setting, v1::Setting)>,
    cache: Option<Cache>,
    /// Settings of the cache that were not handed on yet.
    cached: VecDeque<Setting>,
    /// When the last of them was kept.
    kept: Option<Moment>,
    bounds: BTreeMap<Id, Bounds>,
    newest: Newest,
    heard: Option<Heard>,
}

impl Feed {
    pub(crate) fn new(client: Client, crossings: &[Id], outbound: Option<Outbound>) -> Self {
        Self {
            place: client.hosts().place(),
            client,
            crossings: crossings.to_vec(),
            outbound,
            inbound: None,
            lost: false,
            retry_at: None,
            backoff: Backoff::default(),
            held: None,
            cache: None,
            cached: VecDeque::new(),
            kept: None,
            bounds: BTreeMap::new(),
            newest: Newest::default(),
            heard: None,
        }
    }

    /// Begins with the settings that a folder holds of the selected crossings, and keeps those that
    /// come there.
    pub(crate) fn keep_in(&mut self, folder: &Path) {
        let cache = Cache::new(folder);
        for crossing in &self.crossings {
            if let Some(kept) = cache.read(crossing) {
                self.bounds.insert(crossing.clone(), kept.bounds);
                self.newest.handed_on(crossing, kept.setting.number);
                self.cached.push_back(kept.setting);
                let latest = self.kept.into_iter().chain([kept.moment]);
                self.kept = latest.max_by_key(|moment| moment.house_ns);
            }
        }
        self.cache = Some(cache);
    }

    pub(crate) fn outbound(&mut self) -> Option<&mut Outbound> {
        self.outbound.as_mut()
    }

    /// House time now, carried on from the newest message by this machine's monotonic clock.
    pub(crate) fn house_now_ns(&self) -> Option<i64> {
        let heard = self.heard?;
        let since = i64::try_from(heard.at.elapsed().as_nanos()).unwrap_or(i64::MAX);
        Some(heard.house_ns.saturating_add(since))
    }

    pub(crate) fn freshness(&self, setting: &Setting) -> Freshness {
        let by_the_system = || self.kept?.house_ns_at(system_now_ns());
        let now_ns = self.house_now_ns().or_else(by_the_system);
        if now_ns.is_some_and(|now_ns| now_ns > setting.expiry_ns) {
            Freshness::Expired
        } else if self.inbound.is_none() {
            Freshness::Stale
        } else {
            Freshness::Current
        }
    }

    /// The next update. Cancel safe. An error is final for the selection: trying the same again
    /// would be refused again.
    pub(crate) async fn next(&mut self) -> Result<Update, CallError> {
        if let Some(setting) = self.cached.pop_front() {
            return Ok(Update::Setting(Box::new(setting)));
        }
        loop {
            if let Some((setting, wire)) = self.held.clone() {
                let checked = self.check(&setting, &wire).await;
                self.held = None;
                match checked {
                    Ok(update) => return Ok(update),
                    Err(error) => return self.lose(error),
                }
            }
            let Some(inbound) = &mut self.inbound else {
                match self.open().await {
                    Ok(()) if !std::mem::take(&mut self.lost) => continue,
                    Ok(()) => return Ok(Update::Regained),
                    Err(error) => return self.lose(error),
                }
            };
            match inbound.message().await {
                Ok(Some(response)) => {
                    if let Some(update) = self.take_in(response) {
                        return Ok(update);
                    }
                }
                Ok(None) => {
                    let ended = Status::unavailable("the daemon ended the stream");
                    return self.lose(self.client.hosts().error(self.place, &ended));
                }
                Err(status) => return self.lose(self.client.hosts().error(self.place, &status)),
            }
        }
    }

    /// Contact is lost, or the call was refused, which is final.
    fn lose(&mut self, error: CallError) -> Result<Update, CallError> {
        self.inbound = None;
        if let Some(outbound) = &mut self.outbound {
            outbound.close();
        }
        let CallError::Unreachable { reason, .. } = error else {
            return Err(error);
        };
        self.lost = true;
        let retry_in = self.backoff.next_delay();
        self.retry_at = Some(Instant::now() + retry_in);
        Ok(Update::Lost(Loss { reason, retry_in }))
    }

    /// Waits for the time of the next try, and opens the stream.
    async fn open(&mut self) -> Result<(), CallError> {
        if let Some(retry_at) = self.retry_at {
            sleep_until(retry_at).await;
        }
        let crossings = self.crossings.iter().map(crossing_name).collect();
        let newest_known = self.newest.names();
        let select = v1::WatchSettingsRequest {
            crossings,
            newest_known,
        };
        self.place = self.client.hosts().place();
        let mut stub = self.client.ratio_stub();
        let opened = match &mut self.outbound {
            None => {
                let response = stub.watch_settings(select).await;
                response.map(|response| Inbound::Watch(response.into_inner()))
            }
            Some(outbound) => {
                let response = stub.follow_settings(outbound.open(select)).await;
                response.map(|response| Inbound::Follow(response.into_inner()))
            }
        };
        let place = self.place;
        self.inbound = Some(opened.map_err(|status| self.client.hosts().error(place, &status))?);
        Ok(())
    }

    /// Takes a message in; settings are held for the checks that need an await.
    fn take_in(&mut self, response: v1::FollowSettingsResponse) -> Option<Update> {
        self.backoff.reset();
        self.heard = Some(Heard {
            house_ns: response.house_ns,
            at: Instant::now(),
        });
        match response.message? {
            Message::Refused(v1::FollowRefusal {
                field,
                value,
                accepted,
                crossing,
                report: _,
            }) => Some(Update::ReportRefused {
                field,
                value,
                accepted,
                crossing: crossing_of(&crossing),
            }),
            Message::Setting(wire) => {
                let name = wire.name.clone();
                match Setting::try_from(wire.clone()) {
                    Ok(setting) if self.newest.is_newer(&setting.crossing, setting.number) => {
                        self.held = Some((setting, wire));
                        None
                    }
                    Ok(setting) => self.older(name, &setting),
                    Err(error) => Some(Update::Refused {
                        name,
                        error: error.into(),
                    }),
                }
            }
        }
    }

    /// What to say of a setting that is not newer; nothing if it is the same again.
    fn older(&self, name: String, setting: &Setting) -> Option<Update> {
        let newest = self.newest.of(&setting.crossing)?;
        (setting.number < newest).then_some(Update::Older { name, newest })
    }

    /// Verifies a setting against the crossing's bounds, which may have been declared anew since
    /// they were last asked for.
    async fn check(&mut self, setting: &Setting, wire: &v1::Setting) -> Result<Update, CallError> {
        let known = self.bounds.get(&setting.crossing);
        if known.is_none_or(|bounds| setting.verify(bounds).is_err()) {
            match self.client.bounds(&setting.crossing).await {
                Ok(bounds) => self.bounds.insert(setting.crossing.clone(), bounds),
                Err(error) if error.is(RefusalKind::NotFound) => {
                    self.bounds.remove(&setting.crossing)
                }
                Err(error) => return Err(error),
            };
        }
        let verified = match self.bounds.get(&setting.crossing) {
            Some(bounds) => setting.verify(bounds),
            None => Err(VerifyError::NoBounds),
        };
        if let Err(error) = verified {
            return Ok(Update::Refused {
                name: setting.name(),
                error,
            });
        }
        if let (Some(cache), Some(bounds), Some(house_ns)) = (
            &self.cache,
            self.bounds.get(&setting.crossing),
            self.house_now_ns(),
        ) {
            let (cache, crossing) = (cache.clone(), setting.crossing.clone());
            let (wire, bounds) = (wire.clone(), *bounds);
            let moment = Moment {
                house_ns,
                system_ns: system_now_ns(),
            };
            let writing = spawn_blocking(move || cache.write(&crossing, &wire, &bounds, moment));
            // A full or missing disk must not keep a setting from being run.
            let _ = writing.await;
        }
        self.newest.handed_on(&setting.crossing, setting.number);
        Ok(Update::Setting(Box::new(setting.clone())))
    }
}
