//! `ratewright rehearse`: a facility that could be, tried without a daemon.

mod document;
mod pictures;
mod play;
mod spread;
mod text;

use std::fs;
use std::path::{Path, PathBuf};
use std::time::Instant;

use clap::Args;
use ratewright_declarations::{Fault, Faults};
use ratewright_rehearsal::Report;
use ratewright_rehearsal::file::{Script, parse};

use crate::failure::Failure;
use crate::out;
use crate::out::say;

/// Plays a facility written in TOML to the real engine, days in seconds, and tells how it went
///
/// Exit status: 0 nothing slipped; 3 a crossing slipped; 78 the file is at fault, every fault of it
/// told with its line; 1 something else failed. `deploy/rehearsal.example.toml` shows every key.
#[derive(Debug, Args)]
pub(crate) struct Arguments {
    /// The facility, in TOML
    #[arg(value_name = "FILE")]
    file: PathBuf,
    /// Days to play, in place of the file's: 0.001 to 366
    #[arg(long, value_name = "DAYS", value_parser = days)]
    days: Option<f64>,
    /// Play it with so many seeds, from the file's on, on all cores
    #[arg(long, value_name = "COUNT", default_value_t = 1, value_parser = clap::value_parser!(u32).range(1..=10_000))]
    seeds: u32,
    /// Draw every crossing's phase error with the first seed, as SVG, in this folder
    #[arg(long, value_name = "FOLDER")]
    pictures: Option<PathBuf>,
    /// Print JSON for a machine
    #[arg(long)]
    json: bool,
}

fn days(text: &str) -> Result<f64, String> {
    let days = text
        .parse()
        .ok()
        .filter(|days| (0.001..=366.0).contains(days));
    days.ok_or_else(|| "accepted are days from 0.001 to 366, such as 7 or 0.5".to_owned())
}

/// What was played.
#[derive(Debug)]
struct Played {
    file: String,
    script: Script,
    reports: Vec<Report>,
    took_s: f64,
}

/// Plays the file and prints how it went.
pub(crate) fn run(arguments: &Arguments) -> Result<(), Failure> {
    let mut script = read(&arguments.file)?;
    script.days = arguments.days.unwrap_or(script.days);
    if let Some(folder) = &arguments.pictures {
        make(folder)?;
    }
    let began = Instant::now();
    let reports = play::all(&script, arguments.seeds, arguments.pictures.is_some())?;
    let played = Played {
        file: arguments.file.display().to_string(),
        script,
        reports,
        took_s: began.elapsed().as_secs_f64(),
    };
    if let Some(folder) = &arguments.pictures {
        pictures::draw(&played, folder)?;
    }
    if arguments.json {
        say!("{:#}", document::document(&played))?;
    } else {
        out::prose(&text::text(&played))?;
    }
    if played.reports.iter().any(|report| report.slips() > 0) {
        return Err(Failure::Slipped);
    }
    Ok(())
}

fn read(path: &Path) -> Result<Script, Failure> {
    let content = fs::read_to_string(path).map_err(|error| vec![Fault::unreadable(&error)]);
    content
        .and_then(|content| parse(&content))
        .map_err(|faults| {
            let file = path.display().to_string();
            Failure::File(Faults { file, faults })
        })
}

fn make(folder: &Path) -> Result<(), Failure> {
    fs::create_dir_all(folder).map_err(|error| {
        Failure::Failed(format!(
            "the folder {} cannot be made: {error}",
            folder.display()
        ))
    })
}
