//! A daemon from start to drain.

use std::{net::SocketAddr, sync::Arc};

use axum::serve::ListenerExt as _;
use tokio::{net::TcpListener, task::JoinSet, time::timeout};
use tonic::service::RoutesBuilder;

use crate::{
    board::Board,
    config::Config,
    health,
    house::HouseClock,
    metrics, page,
    readiness::{Phase, Readiness},
    scribe::{Declared, Desk, RecoverFault, Scribe, Stopped},
    service::{self, Access, Slots},
    store::{Opened, Opening, Store, StoreError},
    transport::{self, Limits},
};

/// How a daemon is to be started.
#[derive(Clone, Debug)]
pub struct Builder {
    config: Config,
    opening: Opening,
    pace: f64,
}

/// A daemon that serves.
#[derive(Debug)]
pub struct Daemon {
    grpc: SocketAddr,
    people: SocketAddr,
    board: Arc<Board>,
    house: HouseClock,
    readiness: Readiness,
    desk: Desk,
    /// Absent once its word was taken.
    stopped: Option<Stopped>,
    servers: JoinSet<()>,
    grace: std::time::Duration,
}

/// Why a daemon did not start.
#[derive(Debug, thiserror::Error)]
pub enum StartFault {
    /// An address cannot be served.
    #[error("{address} cannot be served: {source}")]
    Listen {
        /// The address.
        address: SocketAddr,
        /// What the system said.
        source: std::io::Error,
    },
    /// The store or what is in it.
    #[error(transparent)]
    Recover(#[from] RecoverFault),
    /// The contract's descriptors were not understood by the reflection service.
    #[error("reflection cannot be served: {0}")]
    Reflection(#[from] tonic_reflection::server::Error),
}

/// Why a configuration was not taken by a daemon that serves already.
#[derive(Debug, thiserror::Error)]
#[error("nothing of it was taken: {0}")]
pub struct RedeclareFault(String);

/// Why a daemon stopped by itself.
#[derive(Debug, thiserror::Error)]
pub enum Failed {
    /// The store could not be written.
    #[error(transparent)]
    Store(#[from] StoreError),
    /// The engine stopped within an event: a fault of this program.
    #[error("the engine stopped within an event; the log tells where")]
    Engine,
}

impl From<StoreError> for StartFault {
    fn from(fault: StoreError) -> Self {
        Self::Recover(fault.into())
    }
}

impl Builder {
    /// Opens the store in another way than going on.
    pub fn opening(self, opening: Opening) -> Self {
        Self { opening, ..self }
    }

    /// House seconds for a real second, above 0; 1 unless house time is to be accelerated.
    pub fn pace(self, pace: f64) -> Self {
        Self { pace, ..self }
    }

    /// Starts the daemon, and returns when it serves. Must be called within a tokio runtime.
    ///
    /// # Errors
    /// [`StartFault`]; nothing is left running then.
    pub async fn start(self) -> Result<Daemon, StartFault> {
        let Self {
            config,
            opening,
            pace,
        } = self;
        metrics::install();
        let grpc = listen(config.grpc).await?;
        let people = listen(config.people).await?;
        let system_ns = HouseClock::start(config.tai_minus_utc_s, 0, 1.0).now();
        let Opened {
            store,
            history,
            floor_ns,
            begin,
        } = Store::open(&config.store, opening, system_ns, config.keep_settings)?;
        let house = HouseClock::start(config.tai_minus_utc_s, floor_ns, pace);
        let board = Arc::new(Board::new());
        let readiness = Readiness::new();
        let limits = Limits::of(&config);
        let Config {
            clocks, crossings, ..
        } = config;
        let declared = Declared { clocks, crossings };
        let scribe = Scribe {
            store,
            begin,
            declared,
            house,
            board: Arc::clone(&board),
        };
        let (desk, recovered, stopped) = scribe.start();
        let mut daemon = Daemon {
            grpc: address(&grpc, config.grpc)?,
            people: address(&people, config.people)?,
            board: Arc::clone(&board),
            house,
            readiness: readiness.clone(),
            desk: desk.clone(),
            stopped: Some(stopped),
            servers: JoinSet::new(),
            grace: config.drain_grace,
        };
        let slots = Slots::new(config.max_streams);
        daemon.serve_people(
            people,
            page::Sources {
                board: Arc::clone(&board),
                house,
                readiness: readiness.clone(),
                desk: desk.clone(),
                history: history.clone(),
            },
        );
        let access = Access {
            desk,
            board,
            history,
            house,
            readiness,
            slots,
        };
        daemon.serve_grpc(grpc, &access, limits).await?;
        // The thread says how it went before it ends, unless it panicked.
        recovered.await.unwrap_or(Err(RecoverFault::Panicked))?;
        daemon.readiness.enter(Phase::Serving);
        tracing::info!(grpc = %daemon.grpc, people = %daemon.people, "serving");
        Ok(daemon)
    }
}

impl Daemon {
    /// A daemon with this configuration.
    pub fn builder(config: Config) -> Builder {
        Builder {
            config,
            opening: Opening::Continue,
            pace: 1.0,
        }
    }

    /// Where gRPC is served.
    pub fn grpc(&self) -> SocketAddr {
        self.grpc
    }

    /// Where people and Prometheus are served.
    pub fn people(&self) -> SocketAddr {
        self.people
    }

    /// What the daemon shows.
    pub fn board(&self) -> &Arc<Board> {
        &self.board
    }

    /// The daemon's house time.
    pub fn house(&self) -> HouseClock {
        self.house
    }

    /// Declares what `config` declares otherwise than it stands, all of it or nothing, and tells how much
    /// that was. Streams go on. What the file no longer declares stays until it is deleted over gRPC.
    ///
    /// # Errors
    /// [`RedeclareFault`] names the declaration and the field that the engine does not take.
    pub async fn redeclare(&self, config: Config) -> Result<usize, RedeclareFault> {
        let Config {
            clocks, crossings, ..
        } = config;
        let declared = Declared { clocks, crossings };
        let done = self.desk.declare(declared).await;
        done.map_err(|refused| RedeclareFault(refused.to_string()))
    }

    /// Waits until the daemon fails by itself. [`Daemon::drain`] it then all the same.
    pub async fn failed(&mut self) -> Failed {
        let Some(stopped) = &mut self.stopped else {
            return std::future::pending().await;
        };
        let word = stopped.await;
        self.stopped = None;
        match word {
            Ok(Err(fault)) => fault.into(),
            // It ends without a fault only when it is told to, which takes this daemon.
            Ok(Ok(())) | Err(_) => Failed::Engine,
        }
    }

    /// Stops in good order: new calls are refused, open streams are told to end and have the
    /// grace time to do so, a last snapshot is written.
    ///
    /// # Errors
    /// [`Failed`] if the snapshot could not be written, or the engine had stopped by itself.
    /// Nothing durable is lost then.
    pub async fn drain(mut self) -> Result<(), Failed> {
        tracing::info!(grace_s = self.grace.as_secs_f64(), "draining");
        self.readiness.enter(Phase::Draining);
        let ended = async { while self.servers.join_next().await.is_some() {} };
        if timeout(self.grace, ended).await.is_err() {
            tracing::warn!("connections were still open when the grace time was over");
            self.servers.abort_all();
        }
        self.desk.stop().await;
        match self.stopped.take() {
            Some(stopped) => stopped.await.map_err(|_| Failed::Engine)??,
            None => return Ok(()),
        }
        tracing::info!("stopped");
        Ok(())
    }

    async fn serve_grpc(
        &mut self,
        listener: TcpListener,
        access: &Access,
        limits: Limits,
    ) -> Result<(), StartFault> {
        let mut routes = RoutesBuilder::default();
        service::add_to(&mut routes, access);
        health::serve(&mut routes, self.readiness.clone()).await;
        routes.add_service(reflection().build_v1()?);
        // Many tools still ask by the older name.
        routes.add_service(reflection().build_v1alpha()?);
        let readiness = self.readiness.clone();
        let served = transport::serve(listener, routes.routes(), limits, readiness);
        self.servers.spawn(served);
        Ok(())
    }

    fn serve_people(&mut self, listener: TcpListener, sources: page::Sources) {
        let router = page::router(sources);
        let readiness = self.readiness.clone();
        self.servers.spawn(async move {
            let drained = async move { readiness.draining().await };
            let served = axum::serve(listener.tap_io(without_delay), router)
                .with_graceful_shutdown(drained)
                .await;
            if let Err(fault) = served {
                tracing::error!(%fault, "the page is no longer served");
            }
        });
    }
}

/// A page goes out in several writes: the last of them is not to wait for the reader's word on the first.
fn without_delay(connection: &mut tokio::net::TcpStream) {
    // A socket that cannot be told so is only slower.
    let _ = connection.set_nodelay(true);
}

async fn listen(address: SocketAddr) -> Result<TcpListener, StartFault> {
    let bound = TcpListener::bind(address).await;
    bound.map_err(|source| StartFault::Listen { address, source })
}

fn address(listener: &TcpListener, asked: SocketAddr) -> Result<SocketAddr, StartFault> {
    listener.local_addr().map_err(|source| StartFault::Listen {
        address: asked,
        source,
    })
}

/// Reflection of the contract and of health.
fn reflection() -> tonic_reflection::server::Builder<'static> {
    tonic_reflection::server::Builder::configure()
        .register_encoded_file_descriptor_set(ratewright_proto::DESCRIPTORS)
        .register_encoded_file_descriptor_set(tonic_health::pb::FILE_DESCRIPTOR_SET)
}
