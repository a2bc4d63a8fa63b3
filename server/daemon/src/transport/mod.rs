//! Everything that is particular to the gRPC library's transport, in one place.
//!
//! Each connection is served by itself, so that each can be told to go away by itself: when it is
//! old enough, and when the daemon drains. Its open streams end with a word why (`service::leave`
//! looks up the instant in [`Age`]), then the connection closes.

mod connection;

use std::{io, time::Duration};

use tokio::{
    net::{TcpListener, TcpStream},
    task::JoinSet,
    time::{Instant, sleep},
};
use tokio_stream::StreamExt as _;
use tonic::{
    service::Routes,
    transport::{Server, server::Router},
};

use crate::{config::Config, metrics, readiness::Readiness};

pub(crate) use connection::Age;
use connection::Connection;

/// A connection's window: unread small frames are charged to half of it, and one that is used up
/// ends the connection with all its streams.
const CONNECTION_WINDOW: u32 = 8 << 20;
/// A stream's window.
const STREAM_WINDOW: u32 = 1 << 20;
/// A silent peer is asked for a sign of life this often …
const KEEPALIVE_INTERVAL: Duration = Duration::from_secs(10);
/// … and is taken for dead if there is none within this.
const KEEPALIVE_TIMEOUT: Duration = Duration::from_secs(5);
/// Calls that one connection may have open besides as many streams as the daemon serves.
const SHORT_CALLS: usize = 1_000;
/// Pause after a failed accept, which mostly means that file descriptors have run out: without
/// it the loop would spin.
const ACCEPT_PAUSE: Duration = Duration::from_millis(100);
/// How much the ages of connections that came together are spread, up and down.
const SPREAD: f64 = 0.1;

/// What connections may take.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Limits {
    max_streams: usize,
    max_connections: usize,
    max_age: Option<Duration>,
}

impl Limits {
    pub(crate) fn of(config: &Config) -> Self {
        Self {
            max_streams: config.max_streams,
            max_connections: config.max_connections,
            max_age: config.max_connection_age,
        }
    }

    /// How old a connection gets that comes now: those that came together must not leave together.
    fn age(&self) -> Option<Duration> {
        let spread = 1.0 + SPREAD * (2.0 * fastrand::f64() - 1.0);
        self.max_age.map(|age| age.mul_f64(spread))
    }
}

/// Serves until the daemon drains, then until the last open stream has ended: bound it from
/// outside.
pub(crate) async fn serve(
    listener: TcpListener,
    routes: Routes,
    limits: Limits,
    readiness: Readiness,
) {
    let routes = routes.prepare();
    let mut open = JoinSet::new();
    let mut draining = std::pin::pin!(readiness.draining());
    loop {
        tokio::select! {
            accepted = listener.accept() => match accepted {
                Ok(_) if open.len() >= limits.max_connections => turned_away(&limits),
                Ok((stream, _)) => {
                    open.spawn(serve_one(stream, routes.clone(), limits, readiness.clone()));
                }
                Err(fault) => {
                    tracing::warn!(%fault, "no connection can be accepted");
                    sleep(ACCEPT_PAUSE).await;
                }
            },
            Some(_) = open.join_next() => {}
            () = &mut draining => break,
        }
        metrics::connections(open.len());
    }
    drop(listener);
    while open.join_next().await.is_some() {}
    metrics::connections(0);
}

/// The connection is closed by being dropped: its client looks for another daemon, or comes back.
fn turned_away(limits: &Limits) {
    metrics::turned_away();
    tracing::debug!(
        limit = limits.max_connections,
        "a connection was turned away"
    );
}

async fn serve_one(stream: TcpStream, routes: Routes, limits: Limits, readiness: Readiness) {
    // A socket that cannot be told so is only slower.
    let _ = stream.set_nodelay(true);
    let age = Age(limits.age().map(|age| Instant::now() + age));
    let (connection, closed) = Connection::new(stream, age);
    let leave = async move {
        tokio::select! {
            // Either way of ending says that the connection is gone.
            _ = closed => {}
            () = readiness.draining() => {}
            () = age.reached() => {}
        }
    };
    // One connection, and none after it; an end of the stream would be taken for a drain.
    let sole = tokio_stream::once(Ok::<_, io::Error>(connection)).chain(tokio_stream::pending());
    let served = router(routes, &limits)
        .serve_with_incoming_shutdown(sole, leave)
        .await;
    if let Err(fault) = served {
        tracing::debug!(%fault, "a connection was not served");
    }
}

fn router(routes: Routes, limits: &Limits) -> Router {
    // A call beyond this would wait in silence: it must reach the daemon to be told why not.
    let calls = limits.max_streams.saturating_add(SHORT_CALLS);
    Server::builder()
        .initial_connection_window_size(CONNECTION_WINDOW)
        .initial_stream_window_size(STREAM_WINDOW)
        .max_concurrent_streams(u32::try_from(calls).unwrap_or(u32::MAX))
        .http2_keepalive_interval(Some(KEEPALIVE_INTERVAL))
        .http2_keepalive_timeout(Some(KEEPALIVE_TIMEOUT))
        .add_routes(routes)
}
