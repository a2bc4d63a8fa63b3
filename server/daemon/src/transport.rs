//! Everything that is particular to the gRPC library's transport, in one place.

use std::{io, time::Duration};

use tokio::{
    net::{TcpListener, TcpStream},
    sync::mpsc,
    time::sleep,
};
use tokio_stream::wrappers::ReceiverStream;
use tonic::{service::Routes, transport::Server};

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
/// Connections that wait to be taken over by the server.
const ACCEPTED: usize = 64;

/// Serves until `shutdown`, then until the last open stream has ended: bound it from outside.
pub(crate) async fn serve(
    listener: TcpListener,
    routes: Routes,
    max_streams: usize,
    shutdown: impl Future<Output = ()>,
) -> Result<(), tonic::transport::Error> {
    // A call beyond this would wait in silence: it must reach the daemon to be told why not.
    let calls = max_streams.saturating_add(SHORT_CALLS);
    Server::builder()
        .initial_connection_window_size(CONNECTION_WINDOW)
        .initial_stream_window_size(STREAM_WINDOW)
        .max_concurrent_streams(u32::try_from(calls).unwrap_or(u32::MAX))
        .http2_keepalive_interval(Some(KEEPALIVE_INTERVAL))
        .http2_keepalive_timeout(Some(KEEPALIVE_TIMEOUT))
        .add_routes(routes)
        .serve_with_incoming_shutdown(accept(listener), shutdown)
        .await
}

fn accept(listener: TcpListener) -> ReceiverStream<io::Result<TcpStream>> {
    let (sender, accepted) = mpsc::channel(ACCEPTED);
    tokio::spawn(async move {
        loop {
            let connection = tokio::select! {
                connection = listener.accept() => connection,
                () = sender.closed() => return,
            };
            match connection {
                Ok((stream, _)) => {
                    // A socket that cannot be told so is only slower.
                    let _ = stream.set_nodelay(true);
                    if sender.send(Ok(stream)).await.is_err() {
                        return;
                    }
                }
                Err(fault) => {
                    tracing::warn!(%fault, "no connection can be accepted");
                    sleep(ACCEPT_PAUSE).await;
                }
            }
        }
    });
    ReceiverStream::new(accepted)
}
