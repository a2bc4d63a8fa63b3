//! Clock estimation: measurements in, drift with its interval out.

mod acquire;
mod bank;
mod blocks;
mod config;
mod direction;
mod drift_filter;
mod erfcx_table;
mod estimate;
mod filter;
mod forecast;
mod growth;
mod history;
mod holdover;
mod intake;
mod learner;
mod link;
mod lock;
mod measurement;
mod mode;
mod noise;
mod normal;
mod oscillator;
mod outcome;
mod predict;
pub mod sim;
pub mod stability;
mod start;

pub use config::{ConfigError, LatencyTail, LinkConfig};
pub use estimate::{Estimate, Reason, State, compose, exact};
pub use forecast::Forecast;
pub use history::{EventCounts, History, Transition};
pub use link::{Link, hot_state_bytes};
pub use measurement::Measurement;
pub use oscillator::Oscillator;
pub use outcome::{Event, Outcome, Refusal};
