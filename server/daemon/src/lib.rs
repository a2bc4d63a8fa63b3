//! The daemon: the only room of the server that knows sockets, files and clocks.
//!
//! ```text
//! gRPC ──► service ──► convert ──► scribe ──► engine (ratewright-control)
//!             ▲                      │
//!             │                      ├──► store   one transaction for each group of commands
//!             └────── board ◄────────┘
//! people ──► page ──────▲
//! ```
//!
//! - `scribe`: the one thread that owns the engine and the store. A setting is on disk before
//!   the board shows it.
//! - [`board`]: what the rest of the daemon may see, without ever making the scribe wait; with the
//!   [`chronicle`]: how it went lately.
//! - `service`: the calls of `ratewright.v1`; they decide nothing.
//! - `convert`: the one place where wire types and domain types meet.
//!
//! [`Daemon`] ties them together; the binary `ratewrightd` is a thin shell around it.
#![allow(
    clippy::disallowed_methods,
    clippy::disallowed_types,
    reason = "this is the shell: it reads clocks, opens files and sockets, and starts threads"
)]

pub mod board;
pub mod chronicle;
pub mod config;
mod convert;
mod daemon;
mod digest;
mod health;
pub mod house;
pub mod metrics;
mod page;
pub mod readiness;
mod refused;
pub mod sample;
mod scribe;
mod service;
mod store;
mod transport;

pub use daemon::{Builder, Daemon, Failed, RedeclareFault, StartFault};
pub use scribe::RecoverFault;
pub use store::{Opening, StoreError};
