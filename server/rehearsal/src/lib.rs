//! Rehearsals: seeded clocks, links, faults and whole facilities in simulated time, driving the very
//! engine that serves real ones.
//!
//! A [`Plan`] says as plain data what there is: hosts, devices, crossings, and what goes wrong when. (The
//! clocks are those of [`ratewright_timing::sim`].)
//! With a seed and an origin it becomes a [`Facility`], which hands out, in order of arrival, the readings
//! that its reporters would have sent: to the engine directly with [`rehearse`], or to whoever carries
//! them to a daemon. Same plan, seed and origin, same bytes.
//!
//! A [`Run`] plays the whole: followers apply the settings at their block ends and report, and a
//! [`Report`] tells how it went. [`file`](mod@file) reads a plan from TOML.
//!
//! Every draw is addressed rather than taken in turn, so that a facility can be resumed in the middle of
//! its life ([`Facility::skip_to`]) and nothing depends on how often it is asked.
//!
//! [`TrueClock`] and [`TruePhase`] tell the truth, which no reporter knows.

mod dice;
mod drive;
mod facility;
pub mod file;
mod follower;
mod link;
mod phase;
mod plan;
mod played;
mod probe;
mod report;
mod run;
pub mod sample;
mod tally;
mod ticks;

pub use drive::{Occasion, declare, rehearse};
pub use facility::{Facility, TrueClock, Truth};
pub use follower::{Follower, Levels};
pub use link::{Delay, Link};
pub use phase::TruePhase;
pub use plan::{Device, DeviceReading, Host, Plan, PlanError};
pub use probe::Delivered;
pub use report::{ClockReport, CrossingReport, Report, Trace, TracePoint};
pub use run::{Run, RunError};
pub use tally::Tenure;
