//! The bare service: the contract on the same transport settings, with handlers that do as good as nothing.
//!
//! A receipt that has to be durable waits until as many bytes as the daemon's journal takes for the batch
//! are in the same kind of database, committed in groups as they come: a row for each batch, or, where no
//! level is asked for, a row for each reading. The daemon's journal has a row for each group.

use std::{pin::Pin, sync::Arc};

use ratewright_proto::v1::{
    self,
    ratio_service_server::{RatioService, RatioServiceServer},
    reading_service_server::{ReadingService, ReadingServiceServer},
};
use tokio::sync::{mpsc, oneshot, watch};
use tokio_stream::{Stream, StreamExt as _, wrappers::ReceiverStream, wrappers::WatchStream};
use tonic::{Request, Response, Status, Streaming, transport::Server};

/// What the daemon's journal takes for a reading of the load; the load compares.
pub(crate) const JOURNAL_BYTES: usize = 41;
/// The thread that writes has the name that the daemon's has.
pub(crate) const WRITING: &str = "scribe";
/// As the daemon's.
const CONNECTION_WINDOW: u32 = 8 << 20;
const STREAM_WINDOW: u32 = 1 << 20;

type Answers<T> = Pin<Box<dyn Stream<Item = Result<T, Status>> + Send>>;
/// Rows to be written, with the bytes of each, and who waits for them.
struct ToWrite {
    rows: usize,
    bytes: usize,
    done: oneshot::Sender<()>,
}

struct Bare {
    newest: Arc<watch::Sender<v1::Setting>>,
    writer: std::sync::mpsc::Sender<ToWrite>,
}

/// Serves until it is killed.
pub(crate) async fn serve(folder: &str) {
    let listener = tokio::net::TcpListener::bind("127.0.0.1:0")
        .await
        .expect("a free port");
    println!("{}", listener.local_addr().expect("it is bound"));
    let (writer, to_write) = std::sync::mpsc::channel();
    let path = format!("{folder}/bare.sqlite3");
    std::thread::Builder::new()
        .name(WRITING.into())
        .spawn(move || write(&path, &to_write))
        .expect("a thread");
    let newest = Arc::new(watch::Sender::new(setting(1)));
    let bare = |newest: &Arc<_>| Bare {
        newest: Arc::clone(newest),
        writer: writer.clone(),
    };
    let accepted = tonic::transport::server::TcpIncoming::from(listener).with_nodelay(Some(true));
    Server::builder()
        .initial_connection_window_size(CONNECTION_WINDOW)
        .initial_stream_window_size(STREAM_WINDOW)
        .max_concurrent_streams(100_000)
        .add_service(RatioServiceServer::new(bare(&newest)))
        .add_service(ReadingServiceServer::new(bare(&newest)))
        .serve_with_incoming(accepted)
        .await
        .expect("it serves");
}

/// Group commit: what has come meanwhile is one transaction.
fn write(path: &str, to_write: &std::sync::mpsc::Receiver<ToWrite>) {
    let mut db = rusqlite::Connection::open(path).expect("a database");
    db.execute_batch(
        "PRAGMA journal_mode = WAL; PRAGMA synchronous = FULL; \
         CREATE TABLE journal (seq INTEGER PRIMARY KEY, house_ns INTEGER NOT NULL, event BLOB NOT NULL) STRICT;",
    )
    .expect("a table");
    let bytes = vec![7_u8; JOURNAL_BYTES * 4096];
    while let Ok(first) = to_write.recv() {
        let group: Vec<_> = std::iter::once(first).chain(to_write.try_iter()).collect();
        let transaction = db.transaction().expect("a transaction");
        {
            let mut insert = transaction
                .prepare_cached("INSERT INTO journal (house_ns, event) VALUES (?, ?)")
                .expect("a statement");
            for batch in &group {
                for _ in 0..batch.rows {
                    let row = (1_i64, &bytes[..batch.bytes]);
                    insert.execute(row).expect("a row");
                }
            }
        }
        transaction.commit().expect("a commit");
        for batch in group {
            let _ = batch.done.send(());
        }
    }
}

/// A setting of about the size of the daemon's.
fn setting(number: u64) -> v1::Setting {
    let fraction = |numerator: &str, denominator: &str| v1::Fraction {
        numerator: numerator.into(),
        denominator: denominator.into(),
    };
    let ratio = |l, m| v1::Ratio { l, m };
    v1::Setting {
        name: format!("crossings/line/settings/1-{number}"),
        crossing: "crossings/line".into(),
        epoch: 1,
        number,
        wanted: Some(fraction("1000012", "1000000")),
        realisation: Some(v1::setting::Realisation::Cadence(v1::Cadence {
            low: Some(ratio(1, 1)),
            high: Some(ratio(1024, 1023)),
            low_blocks: 987_724,
            high_blocks: 12,
            error_bound_samples: 0.499,
        })),
        certificate: Some(v1::Certificate {
            proof: Some(v1::certificate::Proof::Neighbours(v1::Bracket {
                below: Some(fraction("1", "1")),
                above: Some(fraction("1024", "1023")),
            })),
        }),
        evidence: Some(v1::Evidence {
            target: 1.000_012,
            allowed_low: Some(fraction("100001", "100000")),
            allowed_high: Some(fraction("100002", "100000")),
            expected_hold_seconds: 1_000.0,
            ..Default::default()
        }),
        decided_ns: 1_800_000_000_000_000_000,
        effect_ns: 1_800_000_001_000_000_000,
        review_ns: 1_800_000_002_000_000_000,
        expiry_ns: 1_800_000_003_000_000_000,
        ..Default::default()
    }
}

fn never<T>() -> Result<Response<T>, Status> {
    Err(Status::unimplemented("the load does not ask for it"))
}

#[tonic::async_trait]
impl RatioService for Bare {
    type WatchSettingsStream = Answers<v1::WatchSettingsResponse>;
    type FollowSettingsStream = Answers<v1::FollowSettingsResponse>;

    async fn get_setting(
        &self,
        _: Request<v1::GetSettingRequest>,
    ) -> Result<Response<v1::Setting>, Status> {
        Ok(Response::new(setting(1)))
    }

    /// A change is a number that the load makes up.
    async fn list_settings(
        &self,
        request: Request<v1::ListSettingsRequest>,
    ) -> Result<Response<v1::ListSettingsResponse>, Status> {
        let number = request.get_ref().page_size.unsigned_abs().into();
        self.newest.send_replace(setting(number));
        Ok(Response::new(v1::ListSettingsResponse::default()))
    }

    async fn watch_settings(
        &self,
        _: Request<v1::WatchSettingsRequest>,
    ) -> Result<Response<Self::WatchSettingsStream>, Status> {
        let changes = WatchStream::new(self.newest.subscribe());
        Ok(Response::new(Box::pin(changes.map(|setting| {
            Ok(v1::WatchSettingsResponse {
                setting: Some(setting),
                house_ns: 1,
            })
        }))))
    }

    async fn plan_ratio(
        &self,
        _: Request<v1::PlanRatioRequest>,
    ) -> Result<Response<v1::PlanRatioResponse>, Status> {
        never()
    }

    async fn follow_settings(
        &self,
        _: Request<Streaming<v1::FollowSettingsRequest>>,
    ) -> Result<Response<Self::FollowSettingsStream>, Status> {
        never()
    }

    async fn explain_setting(
        &self,
        _: Request<v1::ExplainSettingRequest>,
    ) -> Result<Response<v1::ExplainSettingResponse>, Status> {
        never()
    }
}

#[tonic::async_trait]
impl ReadingService for Bare {
    type ReportReadingsStream = Answers<v1::ReportReadingsResponse>;

    async fn report_readings(
        &self,
        request: Request<Streaming<v1::ReportReadingsRequest>>,
    ) -> Result<Response<Self::ReportReadingsStream>, Status> {
        let mut batches = request.into_inner();
        let (sender, waiting) = mpsc::channel::<(u64, u64, Option<oneshot::Receiver<()>>)>(16);
        let writer = self.writer.clone();
        tokio::spawn(async move {
            while let Ok(Some(batch)) = batches.message().await {
                let readings = batch.readings.len();
                let row = match v1::ReceiptLevel::try_from(batch.receipt) {
                    Ok(v1::ReceiptLevel::Durable) => Some((1, readings * JOURNAL_BYTES)),
                    Ok(v1::ReceiptLevel::Unspecified) => Some((readings, JOURNAL_BYTES)),
                    _ => None,
                };
                let written = row.map(|(rows, bytes)| {
                    let (done, written) = oneshot::channel();
                    let _ = writer.send(ToWrite { rows, bytes, done });
                    written
                });
                if sender
                    .send((batch.batch, readings as u64, written))
                    .await
                    .is_err()
                {
                    return;
                }
            }
        });
        let receipts = ReceiverStream::new(waiting).then(|(batch, accepted, written)| async move {
            if let Some(written) = written {
                let _ = written.await;
            }
            Ok(v1::ReportReadingsResponse {
                batch,
                accepted,
                ..Default::default()
            })
        });
        Ok(Response::new(Box::pin(receipts)))
    }

    async fn exchange_time(
        &self,
        _: Request<v1::ExchangeTimeRequest>,
    ) -> Result<Response<v1::ExchangeTimeResponse>, Status> {
        never()
    }
}
