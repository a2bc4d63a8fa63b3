//! Somebody who answers in the daemon's place: with settings that are forged, and with real ones
//! that are long past.
//!
//! Whoever holds the far end of a connection without TLS can say anything that is consistent in
//! itself, false bounds included; what certificates keep out is a setting that is not the answer to
//! the crossing's own question. So the liar tells true bounds, and forges what is to be run.

use std::collections::BTreeMap;
use std::convert::Infallible;
use std::future::{Ready, ready};
use std::io;
use std::net::SocketAddr;
use std::pin::Pin;
use std::sync::Arc;
use std::task::{Context, Poll};
use std::time::Duration;

use ratewright_proto::v1;
use tokio::net::TcpListener;
use tokio::sync::mpsc;
use tokio_stream::wrappers::{ReceiverStream, TcpListenerStream};
use tonic::body::Body;
use tonic::codegen::http;
use tonic::server::{Grpc, NamedService, StreamingService, UnaryService};
use tonic::transport::Server;
use tonic::{Request, Response, Status, Streaming};
use tonic_prost::ProstCodec;
use v1::follow_settings_request::Message as Said;
use v1::follow_settings_response::Message;

/// Epoch of what is forged: newer than anything that is true.
pub const FORGED_EPOCH: u64 = 1 << 40;

/// Time between two rounds of lies on a stream.
const PAUSE: Duration = Duration::from_millis(100);

/// True crossings, each with an old setting in its status, by name.
type Known = Arc<BTreeMap<String, v1::Crossing>>;

/// Starts a liar on a free port; it goes on until the runtime ends.
///
/// # Errors
/// If there is no port.
pub async fn start(crossings: Vec<v1::Crossing>) -> io::Result<SocketAddr> {
    let by_name = |crossing: v1::Crossing| (crossing.name.clone(), crossing);
    let known: Known = Arc::new(crossings.into_iter().map(by_name).collect());
    let listener = TcpListener::bind(("127.0.0.1", 0)).await?;
    let address = listener.local_addr()?;
    let serving = Server::builder()
        .add_service(Settings(Arc::clone(&known)))
        .add_service(Crossings(known))
        .serve_with_incoming(TcpListenerStream::new(listener));
    tokio::spawn(serving);
    Ok(address)
}

/// What is told on a stream in one round: something old that is true, and three lies.
fn lies(crossing: &v1::Crossing, round: u64) -> Vec<v1::Setting> {
    let Some(old) = crossing.status.as_ref().and_then(|s| s.setting.clone()) else {
        return Vec::new();
    };
    let forged = |place: u64| {
        let number = 4 * round + place;
        v1::Setting {
            name: format!("{}/settings/{FORGED_EPOCH}-{number}", crossing.name),
            epoch: FORGED_EPOCH,
            number,
            ..old.clone()
        }
    };
    let single = |l, m| Some(v1::setting::Realisation::Single(v1::Ratio { l, m }));
    let other_ratio = v1::Setting {
        realisation: single(1, 1),
        ..forged(1)
    };
    let outside_bounds = v1::Setting {
        realisation: single(crossing.max_l + 1, crossing.max_m),
        certificate: None,
        ..forged(2)
    };
    let other_wish = v1::Setting {
        wanted: Some(v1::Fraction {
            numerator: "1".to_owned(),
            denominator: "3".to_owned(),
        }),
        ..forged(3)
    };
    vec![old, other_ratio, outside_bounds, other_wish]
}

#[derive(Clone, Debug)]
struct Settings(Known);

#[derive(Clone, Debug)]
struct Crossings(Known);

impl NamedService for Settings {
    const NAME: &'static str = "ratewright.v1.RatioService";
}

impl NamedService for Crossings {
    const NAME: &'static str = "ratewright.v1.CrossingService";
}

type Answer = Pin<Box<dyn Future<Output = Result<http::Response<Body>, Infallible>> + Send>>;

impl tonic::codegen::Service<http::Request<Body>> for Settings {
    type Response = http::Response<Body>;
    type Error = Infallible;
    type Future = Answer;

    fn poll_ready(&mut self, _: &mut Context<'_>) -> Poll<Result<(), Infallible>> {
        Poll::Ready(Ok(()))
    }

    fn call(&mut self, request: http::Request<Body>) -> Answer {
        let service = self.clone();
        Box::pin(async move {
            Ok(match request.uri().path() {
                "/ratewright.v1.RatioService/FollowSettings" => {
                    Grpc::new(ProstCodec::default())
                        .streaming(service, request)
                        .await
                }
                _ => Status::unimplemented("it only lies to followers").into_http(),
            })
        })
    }
}

impl tonic::codegen::Service<http::Request<Body>> for Crossings {
    type Response = http::Response<Body>;
    type Error = Infallible;
    type Future = Answer;

    fn poll_ready(&mut self, _: &mut Context<'_>) -> Poll<Result<(), Infallible>> {
        Poll::Ready(Ok(()))
    }

    fn call(&mut self, request: http::Request<Body>) -> Answer {
        let service = self.clone();
        Box::pin(async move {
            Ok(match request.uri().path() {
                "/ratewright.v1.CrossingService/GetCrossing" => {
                    Grpc::new(ProstCodec::default())
                        .unary(service, request)
                        .await
                }
                _ => Status::unimplemented("it only tells bounds").into_http(),
            })
        })
    }
}

impl UnaryService<v1::GetCrossingRequest> for Crossings {
    type Response = v1::Crossing;
    type Future = Ready<Result<Response<v1::Crossing>, Status>>;

    fn call(&mut self, request: Request<v1::GetCrossingRequest>) -> Self::Future {
        let found = self.0.get(&request.get_ref().name).cloned();
        ready(
            found
                .map(Response::new)
                .ok_or_else(|| Status::not_found("")),
        )
    }
}

type Told = Result<v1::FollowSettingsResponse, Status>;

impl StreamingService<v1::FollowSettingsRequest> for Settings {
    type Response = v1::FollowSettingsResponse;
    type ResponseStream = ReceiverStream<Told>;
    type Future =
        Pin<Box<dyn Future<Output = Result<Response<Self::ResponseStream>, Status>> + Send>>;

    fn call(&mut self, request: Request<Streaming<v1::FollowSettingsRequest>>) -> Self::Future {
        let known = Arc::clone(&self.0);
        Box::pin(async move {
            let mut said = request.into_inner();
            let first = said.message().await?.and_then(|request| request.message);
            let Some(Said::Select(select)) = first else {
                return Err(Status::invalid_argument("the first message selects"));
            };
            let (sender, receiver) = mpsc::channel(4);
            tokio::spawn(lie(known, select.crossings, sender));
            Ok(Response::new(ReceiverStream::new(receiver)))
        })
    }
}

async fn lie(known: Known, selected: Vec<String>, sender: mpsc::Sender<Told>) {
    for round in 1.. {
        for setting in selected
            .iter()
            .filter_map(|name| known.get(name))
            .flat_map(|crossing| lies(crossing, round))
        {
            let house_ns = setting.decided_ns;
            let message = Some(Message::Setting(setting));
            let told = v1::FollowSettingsResponse { message, house_ns };
            if sender.send(Ok(told)).await.is_err() {
                return;
            }
        }
        tokio::time::sleep(PAUSE).await;
    }
}
