//! A daemon that does what a test says, over real gRPC on a port of its own.
//!
//! It runs on a runtime of its own, so that [`FakeServer::crash`] takes its connections along as
//! the end of a process does.
#![allow(
    clippy::disallowed_methods,
    reason = "a server of its own needs threads and a clock to give up by"
)]
#![allow(dead_code, unused_imports, reason = "each test file uses its own part")]

mod declarations;
mod ratios;
mod readings;

use std::collections::BTreeMap;
use std::net::SocketAddr;
use std::sync::{Arc, Mutex, MutexGuard};
use std::time::{Duration, Instant};

use ratewright_proto::v1;
use tokio::runtime::Runtime;
use tokio::sync::broadcast;
use tokio_stream::wrappers::TcpListenerStream;
use tonic::transport::Server;
use v1::clock_service_server::ClockServiceServer;
use v1::crossing_service_server::CrossingServiceServer;
use v1::ratio_service_server::RatioServiceServer;
use v1::reading_service_server::ReadingServiceServer;

pub(crate) use ratios::{cadence_setting, lazy_setting, nearest_setting, stepping_setting};

/// The house time of everything the fake says, ns.
pub(crate) const HOUSE_NS: i64 = 1_800_000_000_000_000_000;

/// What the fake knows and was told.
#[derive(Debug, Default)]
pub(crate) struct Known {
    pub(crate) clocks: BTreeMap<String, v1::Clock>,
    pub(crate) crossings: BTreeMap<String, v1::Crossing>,
    pub(crate) settings: BTreeMap<String, v1::Setting>,
    /// Batches in the order they came, a resent one again.
    pub(crate) batches: Vec<v1::ReportReadingsRequest>,
    /// Batches that still get no receipt.
    pub(crate) silent_batches: usize,
    /// What operators did, oldest first.
    pub(crate) acts: Vec<v1::Act>,
    pub(crate) follower_said: Vec<v1::follow_settings_request::Message>,
    /// What the newest stream of settings resumed from.
    pub(crate) newest_known: Vec<String>,
    /// Streams opened so far, of any kind.
    pub(crate) streams: usize,
}

impl Known {
    /// A crossing with its setting in its status.
    pub(crate) fn crossing(&self, name: &str) -> Option<v1::Crossing> {
        let mut crossing = self.crossings.get(name)?.clone();
        if let Some(status) = &mut crossing.status {
            status.setting = self.settings.get(name).cloned();
        }
        Some(crossing)
    }
}

/// What the services share.
#[derive(Clone, Debug)]
pub(crate) struct Facility {
    known: Arc<Mutex<Known>>,
    changes: broadcast::Sender<v1::Setting>,
}

impl Facility {
    pub(crate) fn known(&self) -> MutexGuard<'_, Known> {
        self.known
            .lock()
            .expect("no test panics while it holds this")
    }

    /// Makes a setting the newest of its crossing and tells the watchers.
    pub(crate) fn publish(&self, setting: v1::Setting) {
        self.known()
            .settings
            .insert(setting.crossing.clone(), setting.clone());
        self.say(setting);
    }

    /// Tells the watchers of a setting and forgets it.
    pub(crate) fn say(&self, setting: v1::Setting) {
        // Nobody may be watching.
        let _ = self.changes.send(setting);
    }

    /// Declares a crossing from `a` to `b` with these bounds.
    pub(crate) fn declare_crossing(&self, id: &str, max_l: u64, max_m: u64) {
        let crossing = declarations::crossing(id, max_l, max_m);
        self.known()
            .crossings
            .insert(crossing.name.clone(), crossing);
    }

    /// Waits until something holds of what the fake was told.
    pub(crate) async fn until(&self, what: &str, holds: impl Fn(&Known) -> bool) {
        let start = Instant::now();
        while !holds(&self.known()) {
            assert!(
                start.elapsed() < Duration::from_secs(20),
                "{what}: {:?}",
                self.known()
            );
            tokio::time::sleep(Duration::from_millis(5)).await;
        }
    }
}

/// The fake daemon.
#[derive(Debug)]
pub(crate) struct FakeServer {
    pub(crate) facility: Facility,
    address: SocketAddr,
    runtime: Option<Runtime>,
}

impl FakeServer {
    /// Starts on a free port.
    pub(crate) fn start() -> Self {
        let facility = Facility {
            known: Arc::default(),
            changes: broadcast::channel(1024).0,
        };
        let mut server = Self {
            facility,
            address: SocketAddr::from(([127, 0, 0, 1], 0)),
            runtime: None,
        };
        server.restart();
        server
    }

    pub(crate) fn address(&self) -> String {
        format!("http://{}", self.address)
    }

    /// Ends it at once; what it knew stays.
    pub(crate) fn crash(&mut self) {
        if let Some(runtime) = self.runtime.take() {
            // On a thread of its own: a runtime must not end within a test's.
            let ending = std::thread::spawn(|| runtime.shutdown_timeout(Duration::from_secs(5)));
            ending.join().expect("it does not panic");
        }
    }

    /// Starts it again at the same address.
    pub(crate) fn restart(&mut self) {
        self.crash();
        let runtime = tokio::runtime::Builder::new_multi_thread()
            .worker_threads(1)
            .enable_all()
            .build()
            .expect("a runtime");
        let wanted = self.address;
        // On a thread of its own: a runtime cannot be entered from within a test's.
        let handle = runtime.handle().clone();
        let listening = std::thread::spawn(move || handle.block_on(listen(wanted)));
        let listener = listening.join().expect("it does not panic");
        self.address = listener.local_addr().expect("it is bound");
        let facility = self.facility.clone();
        runtime.spawn(
            Server::builder()
                .add_service(ClockServiceServer::new(facility.clone()))
                .add_service(CrossingServiceServer::new(facility.clone()))
                .add_service(RatioServiceServer::new(facility.clone()))
                .add_service(ReadingServiceServer::new(facility))
                .serve_with_incoming(TcpListenerStream::new(listener)),
        );
        self.runtime = Some(runtime);
    }
}

/// The port of a crashed fake may be taken for a moment by its dying sockets.
async fn listen(address: SocketAddr) -> tokio::net::TcpListener {
    for _ in 0..200 {
        if let Ok(listener) = tokio::net::TcpListener::bind(address).await {
            return listener;
        }
        tokio::time::sleep(Duration::from_millis(10)).await;
    }
    panic!("{address} stays taken");
}

impl Drop for FakeServer {
    fn drop(&mut self) {
        self.crash();
    }
}
