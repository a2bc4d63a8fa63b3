//! Clock estimation: measurements in, drift with its interval out.

mod config;
mod erfcx_table;
mod estimate;
mod forecast;
mod growth;
mod link;
mod measurement;
mod normal;
mod oscillator;
mod outcome;

pub use config::{ConfigError, LinkConfig};
pub use estimate::{Estimate, Reason, State, compose, exact};
pub use forecast::Forecast;
pub use link::Link;
pub use measurement::Measurement;
pub use oscillator::Oscillator;
pub use outcome::{Event, Outcome, Refusal};
