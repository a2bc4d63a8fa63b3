//! The two streams of settings: watch, and follow with the follower's reports.

use futures_util::stream;
use ratewright_control::Event;
use ratewright_proto::v1::{
    self, follow_settings_request::Message as Heard, follow_settings_response::Message as Said,
};
use tokio::sync::mpsc;
use tokio_stream::{StreamExt as _, wrappers::ReceiverStream};
use tonic::{Status, Streaming};

use super::{Access, Answers, Slot, feed::Feed, leave::Leave};
use crate::{
    convert::{report, setting::setting_to_wire},
    refused::{Refused, Violation},
    scribe::Promise,
};

/// What a follower is sent. Boxed: a channel has room for many from its beginning, and never uses it.
type Answer = Box<Result<v1::FollowSettingsResponse, Status>>;
type Sender = mpsc::Sender<Answer>;

/// A watch between two answers.
struct Watching {
    access: Access,
    feed: Feed,
    leave: Leave,
    _slot: Slot,
    /// It resumes, and is to hear at once that it is heard.
    greets: bool,
    ended: bool,
}

/// Starts a watch. The transport asks for the next answer when it has room for one, so that what is made
/// while a reader is slow replaces what was made before. A watch has no task and no queue: there are many.
pub(super) fn watch(
    access: Access,
    feed: Feed,
    slot: Slot,
    leave: Leave,
) -> Answers<v1::WatchSettingsResponse> {
    let watching = Watching {
        greets: feed.resumes(),
        access,
        feed,
        leave,
        _slot: slot,
        ended: false,
    };
    Box::pin(stream::unfold(watching, |mut watching| async move {
        let said = watching.next().await?;
        Some((said, watching))
    }))
}

impl Watching {
    /// The next answer; none after an error. May be dropped while it waits.
    async fn next(&mut self) -> Option<Result<v1::WatchSettingsResponse, Status>> {
        if self.ended {
            return None;
        }
        if std::mem::take(&mut self.greets) {
            return Some(Ok(watched(None, self.access.house.now())));
        }
        Some(tokio::select! {
            setting = self.feed.next() => {
                let setting = Some(setting_to_wire(&setting));
                Ok(watched(setting, self.access.house.now()))
            }
            why = self.leave.due() => {
                self.ended = true;
                Err(why.into())
            }
        })
    }
}

fn watched(setting: Option<v1::Setting>, house_ns: i64) -> v1::WatchSettingsResponse {
    v1::WatchSettingsResponse { setting, house_ns }
}

/// Starts a follow, after its first message.
pub(super) fn follow(
    access: Access,
    mut feed: Feed,
    mut reports: Streaming<v1::FollowSettingsRequest>,
    slot: Slot,
    leave: Leave,
) -> Answers<v1::FollowSettingsResponse> {
    let (sender, answers) = mpsc::channel(1);
    tokio::spawn(async move {
        let _slot = slot;
        if feed.resumes()
            && greet(&sender, followed(None, access.house.now()))
                .await
                .is_err()
        {
            return;
        }
        let mut reporting = true;
        let mut heard_reports = 0;
        loop {
            tokio::select! {
                sent = send_next(&access, &mut feed, &sender) => {
                    if sent.is_err() { return }
                }
                heard = reports.message(), if reporting => match heard {
                    Ok(Some(heard)) => {
                        heard_reports += 1;
                        let report = Report { nth: heard_reports, said: heard.message };
                        if hear(&access, &feed, report, &sender).await.is_err() { return }
                    }
                    // The follower has no more to say, but still listens.
                    Ok(None) => reporting = false,
                    Err(status) => return drop(sender.send(Box::new(Err(status))).await),
                },
                why = leave.due() => return say_goodbye(&sender, why).await,
                () = sender.closed() => return,
            }
        }
    });
    Box::pin(ReceiverStream::new(answers).map(|answer| *answer))
}

fn followed(setting: Option<v1::Setting>, house_ns: i64) -> v1::FollowSettingsResponse {
    v1::FollowSettingsResponse {
        message: setting.map(Said::Setting),
        house_ns,
    }
}

/// Tells whoever resumes that it is heard, and the house time: there may be no setting to tell.
async fn greet(
    to: &Sender,
    greeting: v1::FollowSettingsResponse,
) -> Result<(), mpsc::error::SendError<()>> {
    to.reserve().await?.send(Box::new(Ok(greeting)));
    Ok(())
}

/// Waits for room first, so that the setting is the newest at the moment of sending.
async fn send_next(
    access: &Access,
    feed: &mut Feed,
    to: &Sender,
) -> Result<(), mpsc::error::SendError<()>> {
    let room = to.reserve().await?;
    let setting = feed.next().await;
    let setting = Some(setting_to_wire(&setting));
    room.send(Box::new(Ok(followed(setting, access.house.now()))));
    Ok(())
}

/// What a follower said after its selection.
struct Report {
    /// Which it was, from 1.
    nth: u64,
    said: Option<Heard>,
}

impl Report {
    /// The crossing that it names, as it was sent; empty if it names none.
    fn crossing(&self) -> &str {
        match &self.said {
            Some(Heard::Applied(applied)) => {
                let parent = applied.setting.split_once("/settings/");
                parent.map_or("", |(crossing, _)| crossing)
            }
            Some(Heard::Occupancy(occupancy)) => &occupancy.crossing,
            Some(Heard::Select(_)) | None => "",
        }
    }

    /// The event that it is, if the stream's selection has its crossing.
    fn event(&self, feed: &Feed) -> Result<Event, Refused> {
        let (event, field, value) = match &self.said {
            Some(Heard::Applied(applied)) => (
                report::applied(applied)?,
                "applied.setting",
                &applied.setting,
            ),
            Some(Heard::Occupancy(occupancy)) => (
                report::occupancy(occupancy)?,
                "occupancy.crossing",
                &occupancy.crossing,
            ),
            Some(Heard::Select(_)) => {
                let accepted = "applied or occupancy: only the first message selects";
                return Err(Violation::new("message", "select", accepted).into());
            }
            None => {
                return Err(Violation::new("message", "absent", "applied or occupancy").into());
            }
        };
        match &event {
            Event::Applied { crossing, .. } | Event::Occupancy { crossing, .. }
                if !feed.selects(crossing) =>
            {
                let accepted =
                    "a crossing that this stream selected: who does not run it has no word on it";
                Err(Violation::new(field, value, accepted).into())
            }
            _ => Ok(event),
        }
    }
}

/// Takes a report in; one that is refused is answered, and the stream goes on.
async fn hear(
    access: &Access,
    feed: &Feed,
    report: Report,
    to: &Sender,
) -> Result<(), mpsc::error::SendError<Answer>> {
    let violation = match take_in(access, feed, &report).await {
        Ok(()) => return Ok(()),
        Err(Refused::Invalid(violations)) => violations.into_iter().next(),
        Err(other) => return to.send(Box::new(Err(other.into()))).await,
    };
    let Some(Violation {
        field,
        value,
        accepted,
    }) = violation
    else {
        return Ok(());
    };
    let refused = Said::Refused(v1::FollowRefusal {
        field,
        value,
        accepted,
        crossing: report.crossing().to_owned(),
        report: report.nth,
    });
    let house_ns = access.house.now();
    to.send(Box::new(Ok(v1::FollowSettingsResponse {
        message: Some(refused),
        house_ns,
    })))
    .await
}

async fn take_in(access: &Access, feed: &Feed, report: &Report) -> Result<(), Refused> {
    let event = report.event(feed)?;
    let done = access
        .desk
        .hand_in(vec![event.clone()], Promise::Durable)
        .await
        .answer()
        .await?;
    done.sole()
        .map_err(|refusal| report::refusal_by_engine(&event, refusal).into())
}

async fn say_goodbye(to: &Sender, why: Refused) {
    // Whoever has gone already needs no goodbye.
    let _ = to.send(Box::new(Err(why.into()))).await;
}
