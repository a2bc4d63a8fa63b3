//! Client of a ratewright daemon: report readings, get, watch and follow settings, verify them.
//!
//! Everything starts at [`Client::connect`].
//!
//! | to | use |
//! | --- | --- |
//! | send measurements | [`Client::report`]: a [`Reporter`] for readings and its [`Receipts`] |
//! | hear of settings | [`Client::watch`]: a [`Watch`] |
//! | apply settings and say so | [`Client::follow`]: a [`Follow`] |
//! | have an audio thread run them | [`Client::play`]: a [`Player`] and its [`Reader`] |
//! | look once | [`Client::clock`], [`Client::crossing`], [`Client::setting`], [`Client::explain`] |
//! | keep a crossing as it runs, or change its source | [`Client::pin`], [`Client::release`], [`Client::change_over`], [`Client::acts`] |
//! | compare a clock with house time | [`Client::exchange_time`] |
//!
//! Streams reconnect by themselves with a jittered back-off, to the next address if
//! [`Client::connect_any`] was given several, and resume from what they have. No setting is handed on whose
//! certificate does not prove it, and none that is older than one handed on before.
//!
//! # Units and signs
//! Times end in `_ns`. House time is the daemon's: ns since 1970-01-01 on a TAI-like scale, which is Unix
//! time plus 37 s; [`Client::exchange_time`] compares any clock with it. Drifts and residuals are dimensionless, and a
//! positive drift runs fast: true rate = nominal · (1 + drift). Rates are exact, as
//! `num_rational::Ratio<u64>` in Hz, and ratios are [`Fraction`]s; both are re-exported here.
//!
//! # Depending on it
//! It is on no registry. A program depends on it by path or by git, such as
//! `ratewright-client = { path = "../ratewright/client" }`, and needs tokio.
//!
//! # Examples
//! Hold a crossing at whatever the daemon decides:
//! ```no_run
//! use ratewright_client::{Client, Id, Update};
//! # async fn example() -> Result<(), Box<dyn std::error::Error>> {
//! let client = Client::connect("http://127.0.0.1:7420").await?;
//! let mut watch = client.watch(&[Id::new("film")?]);
//! loop {
//!     match watch.next().await? {
//!         Update::Setting(setting) => println!("{}: {}", setting.crossing, setting.wanted),
//!         Update::Refused { name, error } => eprintln!("{name} is not to be run: {error}"),
//!         Update::Lost(loss) => eprintln!("{loss}"),
//!         _ => {}
//!     }
//! }
//! # }
//! ```
#![allow(
    clippy::disallowed_methods,
    clippy::disallowed_types,
    reason = "the client is a shell crate: it reads clocks, opens sockets and keeps files"
)]

mod act;
mod backoff;
mod batch;
mod cache;
mod client;
mod error;
mod facility;
mod feed;
mod follow;
mod hosts;
mod house;
mod id;
mod line;
mod newest;
mod player;
mod reading;
mod report;
mod setting;
mod transport;
mod verify;
mod watch;
mod wire;

pub use act::{Act, ActKind};
pub use client::Client;
pub use error::{CallError, Refusal, RefusalKind, Violation};
pub use facility::{
    Clock, ClockDeclaration, Crossing, CrossingDeclaration, CrossingState, CrossingStatus,
    Estimate, EstimateState, LatencyTail, Oscillator, Pin, Realisation,
};
pub use feed::{Freshness, Loss, Update};
pub use follow::Follow;
pub use id::{Id, IdError};
pub use num_rational::Ratio;
pub use player::{Player, PlayerOptions, Playing, SinkProbe};
pub use ratewright_handle::{Applied, ArmError, Block, Reader, Realised, SettingNumber, Trim};
pub use ratewright_ratio::{Bounds, Fraction};
pub use reading::{Exchange, Measurement, Reading, Reference};
pub use report::{
    Answer, Closed, Promise, Receipt, Receipts, RefusedReadings, ReportOptions, Reporter,
};
pub use setting::{Evidence, Proof, Reason, Setting};
pub use verify::VerifyError;
pub use watch::Watch;
pub use wire::WireError;
