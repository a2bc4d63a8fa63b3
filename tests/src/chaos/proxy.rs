//! A network that goes wrong: a TCP proxy that draws the fate of each connection.

use std::io;
use std::net::SocketAddr;
use std::sync::atomic::{AtomicU64, Ordering};
use std::sync::{Arc, Mutex};
use std::time::Duration;

use ratewright_timing::sim::Random;
use tokio::io::{AsyncRead, AsyncReadExt as _, AsyncWrite, AsyncWriteExt as _};
use tokio::net::{TcpListener, TcpStream};
use tokio::sync::watch;
use tokio::task::JoinSet;
use tokio::time::sleep;

/// How long a connection that fell silent stays open: longer than anybody should wait for it.
const SILENCE: Duration = Duration::from_secs(120);

/// What becomes of a connection, after it has worked for a while.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Fate {
    /// It is closed.
    Cut,
    /// Each piece of data is late, then it is closed.
    Slow,
    /// Nothing passes either way, and neither side is told.
    HalfOpen,
    /// What the daemon sends is lost, what the follower sends arrives.
    Swallowed,
    /// It never reaches the daemon, but somebody who lies; then it is closed.
    Lied,
    /// It is closed at once.
    Refused,
}

/// The fates, in the order in which they are counted.
pub const FATES: [Fate; 6] = [
    Fate::Cut,
    Fate::Slow,
    Fate::HalfOpen,
    Fate::Swallowed,
    Fate::Lied,
    Fate::Refused,
];

impl Fate {
    fn draw(random: &mut Random) -> Self {
        match random.uniform() {
            p if p < 0.40 => Self::Cut,
            p if p < 0.65 => Self::Slow,
            p if p < 0.72 => Self::HalfOpen,
            p if p < 0.78 => Self::Swallowed,
            p if p < 0.90 => Self::Lied,
            _ => Self::Refused,
        }
    }
}

#[derive(Debug)]
struct Network {
    /// Where the daemon serves now.
    daemon: Mutex<Option<SocketAddr>>,
    liar: SocketAddr,
    random: Mutex<Random>,
    counts: [AtomicU64; FATES.len()],
    is_calm: watch::Sender<bool>,
}

/// The proxy. Dropping it closes everything.
#[derive(Debug)]
pub struct Proxy {
    address: SocketAddr,
    network: Arc<Network>,
    _accepting: JoinSet<()>,
}

impl Proxy {
    /// Opens it on a free port.
    ///
    /// # Errors
    /// If there is none.
    pub async fn open(daemon: SocketAddr, liar: SocketAddr, seed: u64) -> io::Result<Self> {
        let listener = TcpListener::bind(("127.0.0.1", 0)).await?;
        let address = listener.local_addr()?;
        let network = Arc::new(Network {
            daemon: Mutex::new(Some(daemon)),
            liar,
            random: Mutex::new(Random::new(seed)),
            counts: Default::default(),
            is_calm: watch::Sender::new(false),
        });
        let mut accepting = JoinSet::new();
        accepting.spawn(accept(listener, Arc::clone(&network)));
        Ok(Self {
            address,
            network,
            _accepting: accepting,
        })
    }

    /// Where followers connect to.
    pub fn address(&self) -> SocketAddr {
        self.address
    }

    /// Where the daemon is from now on; `None` while it is away.
    pub fn lead_to(&self, daemon: Option<SocketAddr>) {
        *self.network.daemon.lock().expect("nobody panics with it") = daemon;
    }

    /// From now on connections live, and those to the liar are closed. What fell silent stays so.
    pub fn calm(&self) {
        self.network.is_calm.send_replace(true);
    }

    /// Connections by their [`FATES`].
    pub fn counts(&self) -> [u64; FATES.len()] {
        let counts = &self.network.counts;
        std::array::from_fn(|i| counts[i].load(Ordering::Relaxed))
    }
}

async fn accept(listener: TcpListener, network: Arc<Network>) {
    let mut connections = JoinSet::new();
    loop {
        tokio::select! {
            accepted = listener.accept() => match accepted {
                Ok((follower, _)) => {
                    connections.spawn(serve(follower, Arc::clone(&network)));
                }
                // Out of descriptors: others will close theirs.
                Err(_) => sleep(Duration::from_millis(50)).await,
            },
            Some(_) = connections.join_next() => {}
        }
    }
}

/// Serves a connection to its end, whatever that is.
async fn serve(follower: TcpStream, network: Arc<Network>) {
    let mut calm = network.is_calm.subscribe();
    if *calm.borrow() {
        let daemon = *network.daemon.lock().expect("nobody panics with it");
        let _ = pass(follower, daemon, Duration::ZERO).await;
        return;
    }
    let (fate, life, late) = {
        let mut random = network.random.lock().expect("nobody panics with it");
        let fate = Fate::draw(&mut random);
        let life = Duration::from_secs_f64(random.between(0.3, 6.0));
        (
            fate,
            life,
            Duration::from_secs_f64(random.between(0.0, 0.15)),
        )
    };
    let place = FATES
        .iter()
        .position(|f| *f == fate)
        .expect("all are listed");
    network.counts[place].fetch_add(1, Ordering::Relaxed);
    let daemon = *network.daemon.lock().expect("nobody panics with it");
    // Ends come by themselves too, when a side closes; errors are ends as well.
    match fate {
        Fate::Refused => {}
        Fate::Cut | Fate::Slow => {
            let late = if fate == Fate::Slow {
                late
            } else {
                Duration::ZERO
            };
            let passing = pass(follower, daemon, late);
            tokio::pin!(passing);
            tokio::select! {
                _ = &mut passing => {}
                () = sleep(life) => {}
                // From now on it lives.
                () = calmed(&mut calm) => { let _ = passing.await; }
            }
        }
        Fate::HalfOpen => half_open(follower, daemon, life).await,
        Fate::Swallowed => swallow(follower, daemon, life).await,
        Fate::Lied => tokio::select! {
            _ = pass(follower, Some(network.liar), Duration::ZERO) => {}
            () = sleep(life) => {}
            () = calmed(&mut calm) => {}
        },
    }
}

async fn calmed(calm: &mut watch::Receiver<bool>) {
    // An error says that the proxy is gone, which ends everything as well.
    let _ = calm.wait_for(|calm| *calm).await;
}

/// Passes all data both ways, each piece so much late, until a side closes.
async fn pass(follower: TcpStream, to: Option<SocketAddr>, late: Duration) -> io::Result<()> {
    let daemon = connect(to).await?;
    let (mut from_follower, mut to_follower) = follower.into_split();
    let (mut from_daemon, mut to_daemon) = daemon.into_split();
    tokio::select! {
        ended = pump(&mut from_follower, &mut to_daemon, late) => ended,
        ended = pump(&mut from_daemon, &mut to_follower, late) => ended,
    }
}

/// Works for a while, and then holds both ends without passing anything.
async fn half_open(mut follower: TcpStream, to: Option<SocketAddr>, life: Duration) {
    let Ok(mut daemon) = connect(to).await else {
        return;
    };
    let working = tokio::io::copy_bidirectional(&mut follower, &mut daemon);
    if tokio::time::timeout(life, working).await.is_err() {
        sleep(SILENCE).await;
    }
}

/// Works for a while, and then loses what the daemon sends.
async fn swallow(mut follower: TcpStream, to: Option<SocketAddr>, life: Duration) {
    let Ok(mut daemon) = connect(to).await else {
        return;
    };
    let working = tokio::io::copy_bidirectional(&mut follower, &mut daemon);
    if tokio::time::timeout(life, working).await.is_ok() {
        return;
    }
    let (mut from_follower, _to_follower) = follower.into_split();
    let (mut from_daemon, mut to_daemon) = daemon.into_split();
    let mut nowhere = tokio::io::sink();
    let lost = tokio::io::copy(&mut from_daemon, &mut nowhere);
    tokio::select! {
        _ = pump(&mut from_follower, &mut to_daemon, Duration::ZERO) => {}
        _ = async { let _ = lost.await; sleep(SILENCE).await } => {}
    }
}

async fn connect(to: Option<SocketAddr>) -> io::Result<TcpStream> {
    match to {
        Some(address) => TcpStream::connect(address).await,
        None => Err(io::ErrorKind::ConnectionRefused.into()),
    }
}

async fn pump(
    from: &mut (impl AsyncRead + Unpin),
    to: &mut (impl AsyncWrite + Unpin),
    late: Duration,
) -> io::Result<()> {
    let mut piece = vec![0; 16 << 10];
    loop {
        let length = from.read(&mut piece).await?;
        if length == 0 {
            return to.shutdown().await;
        }
        if late > Duration::ZERO {
            sleep(late).await;
        }
        to.write_all(&piece[..length]).await?;
    }
}
