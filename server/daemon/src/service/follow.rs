//! The two streams of settings: watch, and follow with the follower's reports.

use ratewright_proto::v1::{
    self, follow_settings_request::Message as Heard, follow_settings_response::Message as Said,
};
use tokio::sync::mpsc;
use tokio_stream::wrappers::ReceiverStream;
use tonic::{Status, Streaming};

use super::{Access, Answers, Slot, feed::Feed, leave::Leave};
use crate::{
    convert::{report, setting::setting_to_wire},
    refused::{Refused, Violation},
    scribe::Promise,
};

type Sender<T> = mpsc::Sender<Result<T, Status>>;

/// Starts a watch. One answer is on its way at most: what is made while a reader is slow
/// replaces what was made before.
pub(super) fn watch(
    access: Access,
    mut feed: Feed,
    slot: Slot,
    leave: Leave,
) -> Answers<v1::WatchSettingsResponse> {
    let (sender, answers) = mpsc::channel(1);
    tokio::spawn(async move {
        let _slot = slot;
        if feed.resumes()
            && greet(&sender, watched(None, access.house.now()))
                .await
                .is_err()
        {
            return;
        }
        loop {
            tokio::select! {
                sent = send_next(&access, &mut feed, &sender, watched) => {
                    if sent.is_err() { return }
                }
                why = leave.due() => return say_goodbye(&sender, why).await,
                () = sender.closed() => return,
            }
        }
    });
    Box::pin(ReceiverStream::new(answers))
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
        loop {
            tokio::select! {
                sent = send_next(&access, &mut feed, &sender, followed) => {
                    if sent.is_err() { return }
                }
                heard = reports.message(), if reporting => match heard {
                    Ok(Some(heard)) => {
                        if hear(&access, heard, &sender).await.is_err() { return }
                    }
                    // The follower has no more to say, but still listens.
                    Ok(None) => reporting = false,
                    Err(status) => return drop(sender.send(Err(status)).await),
                },
                why = leave.due() => return say_goodbye(&sender, why).await,
                () = sender.closed() => return,
            }
        }
    });
    Box::pin(ReceiverStream::new(answers))
}

fn followed(setting: Option<v1::Setting>, house_ns: i64) -> v1::FollowSettingsResponse {
    v1::FollowSettingsResponse {
        message: setting.map(Said::Setting),
        house_ns,
    }
}

/// Tells whoever resumes that it is heard, and the house time: there may be no setting to tell.
async fn greet<T>(to: &Sender<T>, greeting: T) -> Result<(), mpsc::error::SendError<()>> {
    to.reserve().await?.send(Ok(greeting));
    Ok(())
}

/// Waits for room first, so that the setting is the newest at the moment of sending.
async fn send_next<T>(
    access: &Access,
    feed: &mut Feed,
    to: &Sender<T>,
    wrap: impl Fn(Option<v1::Setting>, i64) -> T,
) -> Result<(), mpsc::error::SendError<()>> {
    let room = to.reserve().await?;
    let setting = feed.next().await;
    let setting = Some(setting_to_wire(&setting));
    room.send(Ok(wrap(setting, access.house.now())));
    Ok(())
}

/// Takes a report in; one that is refused is answered, and the stream goes on.
async fn hear(
    access: &Access,
    heard: v1::FollowSettingsRequest,
    to: &Sender<v1::FollowSettingsResponse>,
) -> Result<(), mpsc::error::SendError<Result<v1::FollowSettingsResponse, Status>>> {
    let violation = match take_in(access, heard).await {
        Ok(()) => return Ok(()),
        Err(Refused::Invalid(violations)) => violations.into_iter().next(),
        Err(other) => return to.send(Err(other.into())).await,
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
    });
    let house_ns = access.house.now();
    to.send(Ok(v1::FollowSettingsResponse {
        message: Some(refused),
        house_ns,
    }))
    .await
}

async fn take_in(access: &Access, heard: v1::FollowSettingsRequest) -> Result<(), Refused> {
    let event = match heard.message {
        Some(Heard::Applied(applied)) => report::applied(&applied)?,
        Some(Heard::Occupancy(occupancy)) => report::occupancy(&occupancy)?,
        Some(Heard::Select(_)) => {
            let accepted = "applied or occupancy: only the first message selects";
            return Err(Violation::new("message", "select", accepted).into());
        }
        None => {
            return Err(Violation::new("message", "absent", "applied or occupancy").into());
        }
    };
    let done = access
        .desk
        .hand_in(vec![event.clone()], Promise::Durable)
        .await
        .answer()
        .await?;
    done.sole()
        .map_err(|refusal| report::refusal_by_engine(&event, refusal).into())
}

async fn say_goodbye<T>(to: &Sender<T>, why: Refused) {
    // Whoever has gone already needs no goodbye.
    let _ = to.send(Err(why.into())).await;
}
