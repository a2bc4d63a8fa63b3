//! `ratewright plan`: choosing a ratio without a daemon.

mod document;
mod drift;
mod filter;
mod findings;
mod frames;
mod limits;
mod picture;
mod question;
mod sketch;
mod sound;
mod text;

use std::fmt;

use clap::Args;
use num_rational::Ratio;
use ratewright_ratio::{Exact, parse_rate, parse_target};

use crate::failure::Failure;
use crate::out;
use crate::out::say;
use drift::Drift;
use filter::FilterWish;
use findings::Findings;
use limits::Limits;
use picture::PictureWish;
use question::Question;

/// Plans the ratio between two rates, without a daemon
///
/// Rates are exact: 44100, 44.1k, 48000*1000/1001, 30000/1001.
#[derive(Debug, Args)]
pub(crate) struct Arguments {
    /// Rate of the source: what enters the resampler
    #[arg(long, value_name = "RATE", value_parser = rate, requires = "to", required_unless_present = "target")]
    from: Option<Ratio<u64>>,
    /// Rate of the sink: what leaves it
    #[arg(long, value_name = "RATE", value_parser = rate, requires = "from", required_unless_present = "target")]
    to: Option<Ratio<u64>>,
    /// Sink rate over source rate, in place of --from and --to
    #[arg(long, value_name = "N/D|DECIMAL", value_parser = target, conflicts_with_all = ["from", "to"])]
    target: Option<Exact>,
    /// Drift of the source from its rate, positive runs fast: 12.5, 12.5±0.3 or 12.5+-0.3
    #[arg(long, value_name = "PPM", allow_hyphen_values = true, value_parser = Drift::parse, default_value = "0")]
    from_drift: Drift,
    /// Drift of the sink, as --from-drift
    #[arg(long, value_name = "PPM", allow_hyphen_values = true, value_parser = Drift::parse, default_value = "0")]
    to_drift: Drift,
    /// Room for phase error either way, in sink samples
    #[arg(long, value_name = "SAMPLES", default_value_t = 1.0, value_parser = headroom)]
    headroom: f64,
    /// Phases of the table, for a resampler that steps through one at every output
    #[arg(long, value_name = "COUNT")]
    phases: Option<u64>,
    /// Video frame rate, such as 25 or 30000/1001: shows how many samples each frame takes
    #[arg(long, value_name = "RATE", value_parser = rate)]
    frames: Option<Ratio<u64>>,
    /// Print JSON for a machine
    #[arg(long)]
    json: bool,
    #[command(flatten)]
    limits: Box<Limits>,
    #[command(flatten)]
    filter: FilterWish,
    #[command(flatten)]
    picture: PictureWish,
}

fn rate(text: &str) -> Result<Ratio<u64>, String> {
    parse_rate(text).map_err(|error| error.to_string())
}

fn target(text: &str) -> Result<Exact, String> {
    parse_target(text).map_err(|error| error.to_string())
}

fn headroom(text: &str) -> Result<f64, String> {
    match text.parse::<f64>() {
        Ok(samples) if samples.is_finite() && samples > 0.0 && samples <= 1e9 => Ok(samples),
        _ => {
            Err("accepted are sink samples above 0, up to 1000000000, such as 1 or 0.5".to_owned())
        }
    }
}

/// Prints the plan.
pub(crate) fn run(arguments: &Arguments) -> Result<(), Failure> {
    let question = Question::new(arguments)?;
    let findings = Findings::new(&question)?;
    arguments.picture.draw(&question, &findings)?;
    if arguments.json {
        say!("{:#}", document::document(&question, &findings))
    } else {
        out::prose(&text::text(&question, &findings))
    }
}

/// `n/d`, whole numbers too.
struct Parts<T>(T, T);

impl<T: fmt::Display> fmt::Display for Parts<T> {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.pad(&format!("{}/{}", self.0, self.1))
    }
}

impl<T: Copy> From<&Ratio<T>> for Parts<T> {
    fn from(ratio: &Ratio<T>) -> Self {
        Self(*ratio.numer(), *ratio.denom())
    }
}
