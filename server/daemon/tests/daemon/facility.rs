//! A daemon with a temporary store, its clients, and a few declarations.

use ratewright_proto::v1::{
    self, clock_service_client::ClockServiceClient, crossing_service_client::CrossingServiceClient,
    ratio_service_client::RatioServiceClient, reading_service_client::ReadingServiceClient,
};
use ratewright_server::{Daemon, Opening, board::Board, config::Config};
use tempfile::TempDir;
use tokio::sync::mpsc;
use tokio_stream::wrappers::ReceiverStream;
use tonic::{Status, Streaming, transport::Channel};
use tonic_types::StatusExt as _;

/// Clients of one daemon.
#[derive(Clone)]
pub(crate) struct Clients {
    pub(crate) channel: Channel,
    pub(crate) clocks: ClockServiceClient<Channel>,
    pub(crate) crossings: CrossingServiceClient<Channel>,
    pub(crate) readings: ReadingServiceClient<Channel>,
    pub(crate) ratios: RatioServiceClient<Channel>,
}

/// A daemon in this process.
pub(crate) struct Facility {
    pub(crate) folder: TempDir,
    pub(crate) daemon: Daemon,
    pub(crate) clients: Clients,
}

impl Clients {
    pub(crate) async fn connect(address: impl std::fmt::Display) -> Self {
        Self::connect_narrow(address, 1 << 20).await
    }

    /// With a window of so many bytes for each stream.
    pub(crate) async fn connect_narrow(address: impl std::fmt::Display, window: u32) -> Self {
        let endpoint = Channel::from_shared(format!("http://{address}")).unwrap();
        let channel = endpoint
            .initial_stream_window_size(window)
            .connect()
            .await
            .unwrap();
        Self {
            clocks: ClockServiceClient::new(channel.clone()),
            crossings: CrossingServiceClient::new(channel.clone()),
            readings: ReadingServiceClient::new(channel.clone()),
            ratios: RatioServiceClient::new(channel.clone()),
            channel,
        }
    }

    pub(crate) async fn declare_clock(&mut self, id: &str) -> Result<v1::Clock, Status> {
        let clock = Some(clock(id));
        Ok(self
            .clocks
            .create_clock(v1::CreateClockRequest { clock })
            .await?
            .into_inner())
    }

    pub(crate) async fn declare_crossing(
        &mut self,
        id: &str,
        source: &str,
        sink: &str,
    ) -> Result<v1::Crossing, Status> {
        let crossing = Some(crossing(id, source, sink));
        let request = v1::CreateCrossingRequest { crossing };
        Ok(self.crossings.create_crossing(request).await?.into_inner())
    }

    /// Two clocks and the crossing `desk-to-stage` between them.
    pub(crate) async fn declare_pair(&mut self) {
        self.declare_clock("desk").await.unwrap();
        self.declare_clock("stage").await.unwrap();
        self.declare_crossing("desk-to-stage", "desk", "stage")
            .await
            .unwrap();
    }

    pub(crate) async fn report(&self) -> Report {
        let (batches, to_send) = mpsc::channel(64);
        let mut readings = self.readings.clone();
        let receipts = readings
            .report_readings(ReceiverStream::new(to_send))
            .await
            .unwrap();
        Report {
            batches,
            receipts: receipts.into_inner(),
        }
    }
}

/// An open stream of readings.
pub(crate) struct Report {
    pub(crate) batches: mpsc::Sender<v1::ReportReadingsRequest>,
    pub(crate) receipts: Streaming<v1::ReportReadingsResponse>,
}

impl Report {
    /// Sends a batch and waits for its receipt.
    pub(crate) async fn batch(&mut self, readings: Vec<v1::Reading>) -> v1::ReportReadingsResponse {
        self.send(v1::ReportReadingsRequest {
            batch: 1,
            readings,
            receipt: 0,
        })
        .await
    }

    pub(crate) async fn send(
        &mut self,
        batch: v1::ReportReadingsRequest,
    ) -> v1::ReportReadingsResponse {
        self.batches.send(batch).await.unwrap();
        self.receipts.message().await.unwrap().unwrap()
    }
}

impl Facility {
    pub(crate) async fn start() -> Self {
        Self::start_with(|_| {}).await
    }

    pub(crate) async fn start_with(change: impl FnOnce(&mut Config)) -> Self {
        Self::start_in(tempfile::tempdir().unwrap(), Opening::Continue, change).await
    }

    pub(crate) async fn start_in(
        folder: TempDir,
        opening: Opening,
        change: impl FnOnce(&mut Config),
    ) -> Self {
        let any = "127.0.0.1:0".parse().unwrap();
        let store = folder.path().to_path_buf();
        let mut config = Config {
            grpc: any,
            people: any,
            store,
            ..Config::default()
        };
        change(&mut config);
        let daemon = Daemon::builder(config)
            .opening(opening)
            .start()
            .await
            .unwrap();
        let clients = Clients::connect(daemon.grpc()).await;
        Self {
            folder,
            daemon,
            clients,
        }
    }

    /// Drains the daemon, and starts another one from its store.
    pub(crate) async fn restart(self, opening: Opening) -> Self {
        let Self {
            folder,
            daemon,
            clients,
        } = self;
        drop(clients);
        daemon.drain().await.unwrap();
        Self::start_in(folder, opening, |_| {}).await
    }
}

pub(crate) fn clock(id: &str) -> v1::Clock {
    v1::Clock {
        name: format!("clocks/{id}"),
        display_name: id.to_uppercase(),
        nominal_rate: Some(v1::Rate {
            numerator: 48_000,
            denominator: 1,
        }),
        tolerance_ppm: 50.0,
        ..Default::default()
    }
}

pub(crate) fn crossing(id: &str, source: &str, sink: &str) -> v1::Crossing {
    v1::Crossing {
        name: format!("crossings/{id}"),
        source_clock: format!("clocks/{source}"),
        sink_clock: format!("clocks/{sink}"),
        max_l: 1024,
        max_m: 1024,
        headroom_samples: 64.0,
        ..Default::default()
    }
}

/// A direct reading of a clock's drift against house time, at `house_s` seconds.
pub(crate) fn drift(clock: &str, drift: f64, house_s: i64) -> v1::Reading {
    let frequency = v1::FrequencyReading {
        drift,
        deviation: 1e-8,
        reference_ns: house_s * 1_000_000_000,
    };
    v1::Reading {
        clock: format!("clocks/{clock}"),
        reference: "house".into(),
        probe: "bench".into(),
        sequence: 0,
        measurement: Some(v1::reading::Measurement::Frequency(frequency)),
    }
}

/// The fields at fault, with what is said of each, out of a status.
pub(crate) fn violations(status: &Status) -> Vec<(String, String)> {
    let details = status.get_error_details();
    let bad_request = details.bad_request().expect("a field violation is told");
    let violations = bad_request.field_violations.iter();
    violations
        .map(|v| (v.field.clone(), v.description.clone()))
        .collect()
}

/// What a counter of the daemon's metrics has come to; daemons of one process share them.
pub(crate) fn counted(name: &str) -> u64 {
    let text = ratewright_server::metrics::render(&Board::new(), 0, &[]);
    let value = text
        .lines()
        .find_map(|line| line.strip_prefix(name)?.strip_prefix(' '));
    value.map_or(0, |value| value.parse().unwrap())
}

/// The reason that programs may rely on.
pub(crate) fn reason(status: &Status) -> String {
    status
        .get_error_details()
        .error_info()
        .expect("every status has a reason")
        .reason
        .clone()
}
