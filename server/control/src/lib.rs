//! The engine: clocks, crossings, their accounts of phase error, the policy, and settings.
//!
//! It is a value with one door, [`Engine::apply`]: events go in with the house time at which they
//! happen, effects come out. The same events at the same times give the same bytes, in the state
//! and in the effects. There is no clock, no randomness and no input or output here.
//!
//! **Order of use.** Declare clocks, declare crossings (a setting is there at once), feed
//! readings; apply [`Event::Tick`] whenever [`Engine::next_due`] says so. House times must not go
//! back; one that does counts as the latest seen. What [`Effects`] holds must be made durable
//! before it is published; a silent setting is published to nobody.
//!
//! **The operator's hand.** [`Event::Pin`], [`Event::Release`] and [`Event::ChangeOver`] say who acts
//! and why; each leaves an [`Act`] in the effects. A pin, and the floor between changes, keep a
//! crossing and its whole group from changing; what would be done is still worked out, and said.
//!
//! **Signs** are derived in [`signs`] and used from there everywhere.

mod clocks;
mod decide;
mod declaration;
mod declare;
mod doubt;
mod effects;
mod engine;
mod event;
mod explain;
mod fault;
mod hand;
mod heard;
mod heed;
mod id;
mod inspect;
mod intake;
mod issue;
mod ledger;
mod link;
mod newest;
mod passage;
mod policy;
mod query;
mod record;
mod refusal;
mod report;
mod restraint;
mod schedule;
mod setting;
pub mod signs;
mod sink_count;
mod statistics;
mod status;
mod target;
mod timeline;

pub use declaration::{
    ClockDeclaration, CrossingDeclaration, DEFAULT_PITCH_LIMIT_PPM, Realisation,
};
pub use effects::{Act, ActKind, Effects, Transition};
pub use engine::Engine;
pub use event::{Event, Reading, Reference};
pub use explain::explain;
pub use id::{Id, IdError};
pub use inspect::{LinkView, PhaseForecast, PhasePoint};
pub use policy::SWING_SHARE;
pub use refusal::{Refusal, RefusalKind};
pub use setting::{Evidence, Realised, Reason, Setting};
pub use status::{ClockEstimate, ClockFault, CrossingState, CrossingStatus, Pin};

/// House time, ns: the facility's one timescale, monotonic.
pub type HouseNs = i64;

/// Version of the engine: the same journal replays to the same bytes within one version only.
pub const ENGINE_VERSION: u32 = 3;

/// How far ahead a slip is forecast, seconds.
pub const SLIP_HORIZON_S: f64 = 86_400.0;
