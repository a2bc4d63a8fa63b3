//! Hearing of settings, applying them, and saying so.

use std::collections::BTreeMap;
use std::path::Path;

use ratewright_proto::v1;
use tokio::sync::mpsc;
use tokio_stream::wrappers::ReceiverStream;
use v1::follow_settings_request::Message;

use crate::feed::Feed;
use crate::wire::crossing_name;
use crate::{CallError, Client, Freshness, Id, Setting, Update};

/// Reports on their way to the daemon.
const REPORTS: usize = 64;

/// As [`Watch`](crate::Watch), for the one who applies the settings of the crossings and says when
/// they took effect and how full the buffer is.
///
/// # Examples
/// ```no_run
/// # async fn example(client: ratewright_client::Client) -> Result<(), Box<dyn std::error::Error>> {
/// use ratewright_client::{Id, Update};
/// let mut follow = client.follow(&[Id::new("film")?]);
/// while let Update::Setting(setting) = follow.next().await? {
///     // ... run it from the first block end at or after setting.effect_ns, then:
///     let (block_end_ns, sink_sample) = (setting.effect_ns + 2_000, 48_000);
///     follow.applied(&setting, block_end_ns, sink_sample).await;
/// }
/// # Ok(())
/// # }
/// ```
#[derive(Debug)]
pub struct Follow {
    feed: Feed,
}

impl Follow {
    pub(crate) fn new(client: Client, crossings: &[Id]) -> Self {
        Self {
            feed: Feed::new(client, crossings, Some(Outbound::default())),
        }
    }

    /// As [`Watch::next`](crate::Watch::next).
    ///
    /// # Errors
    /// As [`Watch::next`](crate::Watch::next).
    pub async fn next(&mut self) -> Result<Update, CallError> {
        self.feed.next().await
    }

    /// Says that a setting took effect at the block end of house time `house_ns`, at which the
    /// sink's own count of samples was `sink_sample`. Without contact it is said when contact is
    /// back; of several for a crossing, the last.
    pub async fn applied(&mut self, setting: &Setting, house_ns: i64, sink_sample: u64) {
        let applied = v1::Applied {
            setting: setting.name(),
            house_ns,
            sink_sample,
        };
        if let Some(outbound) = self.feed.outbound() {
            outbound
                .applied
                .insert(setting.crossing.clone(), applied.clone());
            outbound.send(Message::Applied(applied)).await;
        }
    }

    /// Says how full the buffer was at house time `house_ns`: `level_samples` from its centre, in
    /// sink samples, positive is fuller, with a standard deviation above 0. Without contact it is
    /// dropped: an old level is of no use.
    pub async fn occupancy(
        &mut self,
        crossing: &Id,
        level_samples: f64,
        deviation_samples: f64,
        house_ns: i64,
    ) {
        let crossing = crossing_name(crossing);
        let occupancy = v1::Occupancy {
            crossing,
            level_samples,
            deviation_samples,
            house_ns,
        };
        if let Some(outbound) = self.feed.outbound() {
            outbound.send(Message::Occupancy(occupancy)).await;
        }
    }

    /// As [`Watch::keep_in`](crate::Watch::keep_in).
    #[must_use]
    pub fn keep_in(mut self, folder: &Path) -> Self {
        self.feed.keep_in(folder);
        self
    }

    /// As [`Watch::freshness`](crate::Watch::freshness).
    pub fn freshness(&self, setting: &Setting) -> Freshness {
        self.feed.freshness(setting)
    }

    /// As [`Watch::house_now_ns`](crate::Watch::house_now_ns).
    pub fn house_now_ns(&self) -> Option<i64> {
        self.feed.house_now_ns()
    }
}

/// The follower's own half of the stream.
#[derive(Debug, Default)]
pub(crate) struct Outbound {
    sender: Option<mpsc::Sender<v1::FollowSettingsRequest>>,
    /// The last word on each crossing, said again after a reconnection because nothing tells
    /// whether the daemon heard it.
    applied: BTreeMap<Id, v1::Applied>,
}

impl Outbound {
    /// A new stream that begins with the selection and what was applied so far.
    pub(crate) fn open(
        &mut self,
        select: v1::WatchSettingsRequest,
    ) -> ReceiverStream<v1::FollowSettingsRequest> {
        let (sender, receiver) = mpsc::channel(REPORTS + self.applied.len());
        let applied = self.applied.values().cloned().map(Message::Applied);
        for message in std::iter::once(Message::Select(select)).chain(applied) {
            let room = sender.try_send(v1::FollowSettingsRequest {
                message: Some(message),
            });
            room.expect("the channel is longer than what was applied, and its receiver is here");
        }
        self.sender = Some(sender);
        ReceiverStream::new(receiver)
    }

    pub(crate) fn close(&mut self) {
        self.sender = None;
    }

    async fn send(&mut self, message: Message) {
        if let Some(sender) = &self.sender {
            // A closed channel is a lost stream, which `next` will find.
            let request = v1::FollowSettingsRequest {
                message: Some(message),
            };
            if sender.send(request).await.is_err() {
                self.sender = None;
            }
        }
    }
}
