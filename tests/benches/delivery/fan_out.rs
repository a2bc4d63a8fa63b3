//! A change that reaches 10,000 watchers on 100 connections, and what an idle one costs.

use std::time::Instant;

use ratewright_proto::v1::{
    self, crossing_service_client::CrossingServiceClient, ratio_service_client::RatioServiceClient,
};
use tokio::sync::mpsc;
use tonic::transport::Channel;

use crate::{
    line, median,
    side::{Kind, Side},
};

const CONNECTIONS: usize = 100;
const WATCHERS: usize = 10_000;
const CHANGES: usize = 15;

pub(crate) async fn compare(sides: [&Side; 2]) {
    let mut bytes = [0.0; 2];
    let mut crowds = Vec::new();
    for (side, bytes) in sides.iter().zip(&mut bytes) {
        let before = side.resident_bytes();
        crowds.push(Crowd::gather(side).await);
        *bytes = (side.resident_bytes() - before) / WATCHERS as f64;
    }
    let mut from_call = [Vec::new(), Vec::new()];
    let mut from_first = [Vec::new(), Vec::new()];
    for change in 0..CHANGES {
        for (i, (side, crowd)) in sides.iter().zip(&mut crowds).enumerate() {
            let began = Instant::now();
            let (first, last) = crowd.change(side.kind, change).await;
            from_call[i].push((last - began).as_secs_f64() * 1e3);
            from_first[i].push((last - first).as_secs_f64() * 1e3);
        }
    }
    line(
        "a change, from the call to the last of 10,000",
        "ms",
        from_call.map(median),
        "wanted 1.3 or less; ratewright syncs it to disk first",
    );
    line(
        "a change, from the first of them to the last",
        "ms",
        from_first.map(median),
        "",
    );
    line(
        "memory of an idle watcher",
        "bytes",
        bytes,
        "wanted 1.3 or less",
    );
}

/// Watchers that say when they heard of a change, and a connection to make one.
struct Crowd {
    heard: mpsc::UnboundedReceiver<Instant>,
    changes: Channel,
}

impl Crowd {
    async fn gather(side: &Side) -> Self {
        let (sender, mut heard) = mpsc::unbounded_channel();
        for _ in 0..CONNECTIONS {
            let ratios = side.ratios().await;
            for _ in 0..WATCHERS / CONNECTIONS {
                let (mut ratios, sender) = (ratios.clone(), sender.clone());
                tokio::spawn(async move {
                    let crossings = vec!["crossings/line".into()];
                    let request = v1::WatchSettingsRequest {
                        crossings,
                        ..Default::default()
                    };
                    let watch = ratios.watch_settings(request).await;
                    let mut watch = watch.expect("it is served").into_inner();
                    while let Ok(Some(_)) = watch.message().await {
                        let _ = sender.send(Instant::now());
                    }
                });
            }
        }
        for _ in 0..WATCHERS {
            heard.recv().await.expect("each hears the newest at once");
        }
        let changes = side.connect().await;
        Self { heard, changes }
    }

    /// Makes a change; when the first and the last heard of it.
    async fn change(&mut self, kind: Kind, change: usize) -> (Instant, Instant) {
        match kind {
            Kind::Bare => {
                let mut ratios = RatioServiceClient::new(self.changes.clone());
                let request = v1::ListSettingsRequest {
                    page_size: change as i32 + 2,
                    ..Default::default()
                };
                ratios.list_settings(request).await.expect("a change");
            }
            Kind::Ratewright => {
                let mut crossings = CrossingServiceClient::new(self.changes.clone());
                let crossing = v1::Crossing {
                    name: "crossings/line".into(),
                    max_l: 1_000 + change as u64,
                    ..Default::default()
                };
                let request = v1::UpdateCrossingRequest {
                    crossing: Some(crossing),
                    update_mask: Some(prost_types::FieldMask {
                        paths: vec!["max_l".into()],
                    }),
                };
                crossings.update_crossing(request).await.expect("a change");
            }
        }
        let mut ends: Option<(Instant, Instant)> = None;
        for _ in 0..WATCHERS {
            let at = self.heard.recv().await.expect("each hears of it");
            let (first, last) = ends.unwrap_or((at, at));
            ends = Some((first.min(at), last.max(at)));
        }
        ends.expect("there are watchers")
    }
}
