//! A connection that is cut when its peer does not greet in time, and when it stays beyond its age.

use std::{
    io,
    pin::Pin,
    task::{Context, Poll, ready},
    time::Duration,
};

use tokio::{
    io::{AsyncRead, AsyncWrite, ReadBuf},
    sync::oneshot,
    time::{Instant, Sleep, sleep, sleep_until},
};
use tonic::transport::server::Connected;

/// Within this time a peer must have said that it speaks HTTP/2 …
const GREETING_TIMEOUT: Duration = Duration::from_secs(10);
/// … with as many bytes (RFC 9113, section 3.4).
const GREETING: usize = 24;
/// A connection that was told to go away is cut after this: a stream that does not end by itself
/// must not keep it.
const GRACE: Duration = Duration::from_secs(30);

/// When a connection is old enough to be told to go away; absent if it may get as old as it wants.
/// Every call finds it among its extensions.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Age(pub(super) Option<Instant>);

impl Age {
    /// Waits until the connection is old enough, for ever if it may get as old as it wants.
    pub(crate) async fn reached(self) {
        match self.0 {
            Some(at) => sleep_until(at).await,
            None => std::future::pending().await,
        }
    }
}

/// A connection with its limits.
#[derive(Debug)]
pub(super) struct Connection<S> {
    stream: S,
    age: Age,
    /// Bytes of the greeting that are still to come.
    to_greet: usize,
    /// When it is cut: for want of a greeting first, for its age then.
    cut: Option<Pin<Box<Sleep>>>,
    /// Dropped with the connection, which tells its receiver.
    _closed: oneshot::Sender<()>,
}

impl<S> Connection<S> {
    /// A connection, and what resolves when it is gone.
    pub(super) fn new(stream: S, age: Age) -> (Self, oneshot::Receiver<()>) {
        let (closed, is_closed) = oneshot::channel();
        let connection = Self {
            stream,
            age,
            to_greet: GREETING,
            cut: Some(Box::pin(sleep(GREETING_TIMEOUT))),
            _closed: closed,
        };
        (connection, is_closed)
    }

    fn heard(&mut self, bytes: usize) {
        if self.to_greet == 0 {
            return;
        }
        self.to_greet = self.to_greet.saturating_sub(bytes);
        if self.to_greet == 0 {
            let last = self.age.0.map(|age| age + GRACE);
            self.cut = last.map(|at| Box::pin(sleep_until(at)));
        }
    }
}

impl Connected for Connection<tokio::net::TcpStream> {
    type ConnectInfo = Age;

    fn connect_info(&self) -> Age {
        self.age
    }
}

impl<S: AsyncRead + Unpin> AsyncRead for Connection<S> {
    fn poll_read(
        mut self: Pin<&mut Self>,
        cx: &mut Context<'_>,
        buffer: &mut ReadBuf<'_>,
    ) -> Poll<io::Result<()>> {
        let before = buffer.filled().len();
        if let Poll::Ready(read) = Pin::new(&mut self.stream).poll_read(cx, buffer) {
            self.heard(buffer.filled().len() - before);
            return Poll::Ready(read);
        }
        let Some(cut) = &mut self.cut else {
            return Poll::Pending;
        };
        ready!(cut.as_mut().poll(cx));
        Poll::Ready(Err(io::ErrorKind::TimedOut.into()))
    }
}

impl<S: AsyncWrite + Unpin> AsyncWrite for Connection<S> {
    fn poll_write(
        mut self: Pin<&mut Self>,
        cx: &mut Context<'_>,
        bytes: &[u8],
    ) -> Poll<io::Result<usize>> {
        Pin::new(&mut self.stream).poll_write(cx, bytes)
    }

    fn poll_write_vectored(
        mut self: Pin<&mut Self>,
        cx: &mut Context<'_>,
        pieces: &[io::IoSlice<'_>],
    ) -> Poll<io::Result<usize>> {
        Pin::new(&mut self.stream).poll_write_vectored(cx, pieces)
    }

    fn is_write_vectored(&self) -> bool {
        self.stream.is_write_vectored()
    }

    fn poll_flush(mut self: Pin<&mut Self>, cx: &mut Context<'_>) -> Poll<io::Result<()>> {
        Pin::new(&mut self.stream).poll_flush(cx)
    }

    fn poll_shutdown(mut self: Pin<&mut Self>, cx: &mut Context<'_>) -> Poll<io::Result<()>> {
        Pin::new(&mut self.stream).poll_shutdown(cx)
    }
}

#[cfg(test)]
mod tests {
    use tokio::io::{AsyncReadExt as _, AsyncWriteExt as _, DuplexStream, duplex};

    use super::*;

    fn connection(age: Option<Duration>) -> (Connection<DuplexStream>, DuplexStream) {
        let (near, far) = duplex(1_024);
        let age = Age(age.map(|age| Instant::now() + age));
        (Connection::new(near, age).0, far)
    }

    /// Reads until the connection is cut; the seconds that took.
    async fn cut_after(mut connection: Connection<DuplexStream>) -> u64 {
        let begun = Instant::now();
        let mut buffer = [0; 64];
        loop {
            match connection.read(&mut buffer).await {
                Ok(0) => panic!("the peer is still there"),
                Ok(_) => {}
                Err(fault) => {
                    assert_eq!(fault.kind(), io::ErrorKind::TimedOut);
                    return begun.elapsed().as_secs();
                }
            }
        }
    }

    #[tokio::test(start_paused = true)]
    async fn a_peer_that_does_not_greet_is_cut_however_much_it_dawdles() {
        let (silent, _far) = connection(None);
        assert_eq!(cut_after(silent).await, 10);
        let (slow, mut far) = connection(None);
        let dawdle = async {
            for _ in 0..GREETING - 1 {
                far.write_all(b"P").await.unwrap();
                sleep(Duration::from_millis(100)).await;
            }
            std::future::pending::<()>().await;
        };
        tokio::select! {
            seconds = cut_after(slow) => assert_eq!(seconds, 10),
            () = dawdle => unreachable!("it pends"),
        }
    }

    #[tokio::test(start_paused = true)]
    async fn a_greeted_connection_lives_as_long_as_its_age_and_grace() {
        let (mortal, mut far) = connection(Some(Duration::from_secs(100)));
        far.write_all(&[b'P'; GREETING]).await.unwrap();
        assert_eq!(cut_after(mortal).await, 130);
        let (ageless, mut far) = connection(None);
        far.write_all(&[b'P'; GREETING]).await.unwrap();
        let month = Duration::from_secs(2_592_000);
        let cut = tokio::time::timeout(month, cut_after(ageless)).await;
        assert!(cut.is_err(), "{cut:?}");
    }

    #[tokio::test]
    async fn its_end_is_told() {
        let (near, _far) = duplex(64);
        let (connection, closed) = Connection::new(near, Age(None));
        drop(connection);
        assert!(closed.await.is_err());
    }
}
