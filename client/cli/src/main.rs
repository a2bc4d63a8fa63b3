//! The command line of ratewright.
#![allow(
    clippy::disallowed_methods,
    clippy::disallowed_types,
    reason = "a shell crate: it reads clocks, files and standard input"
)]
#![allow(
    clippy::print_stderr,
    reason = "errors and losses go to standard error"
)]

mod acts;
mod completions;
mod decimal;
mod declare;
mod explain;
mod failure;
mod hand;
mod json;
mod layout;
mod manual;
mod names;
mod out;
mod plan;
mod probe;
mod progress;
mod rehearse;
mod report;
mod server;
mod show;
mod standing;
mod terminal;
mod watch;

#[cfg(test)]
#[path = "../../tests/fake_server/mod.rs"]
mod fake_server;

use std::process::ExitCode;

use clap::{Parser, Subcommand};

use crate::failure::Failure;

/// Finds, hands out and explains exact resampling ratios for clocks that drift.
///
/// Exit status: 0 all went well; 1 something was refused or failed; 2 the command was not
/// understood; 3 a crossing of a rehearsal slipped; 78 a file is at fault.
#[derive(Debug, Parser)]
#[command(name = "ratewright", version, max_term_width = 100)]
struct Arguments {
    #[command(subcommand)]
    command: Command,
}

#[derive(Debug, Subcommand)]
enum Command {
    Plan(plan::Arguments),
    Report(report::Arguments),
    Standing(standing::Arguments),
    Watch(watch::Arguments),
    Explain(explain::Arguments),
    Pin(hand::Pin),
    Release(hand::Release),
    Changeover(hand::Changeover),
    Acts(acts::Arguments),
    Probe(probe::Arguments),
    Rehearse(rehearse::Arguments),
    Completions(completions::Arguments),
    Manual(manual::Arguments),
}

#[tokio::main]
async fn main() -> ExitCode {
    let done = match Arguments::parse().command {
        Command::Plan(arguments) => plan::run(&arguments),
        Command::Report(arguments) => report::run(&arguments).await,
        Command::Standing(arguments) => standing::run(&arguments).await,
        Command::Watch(arguments) => watch::run(&arguments).await,
        Command::Explain(arguments) => explain::run(&arguments).await,
        Command::Pin(arguments) => hand::pin(&arguments).await,
        Command::Release(arguments) => hand::release(&arguments).await,
        Command::Changeover(arguments) => hand::changeover(&arguments).await,
        Command::Acts(arguments) => acts::run(&arguments).await,
        Command::Probe(arguments) => probe::run(&arguments).await,
        Command::Rehearse(arguments) => rehearse::run(&arguments),
        Command::Completions(arguments) => completions::run(&arguments),
        Command::Manual(arguments) => manual::run(&arguments),
    };
    match done {
        Ok(()) | Err(Failure::ReaderGone) => ExitCode::SUCCESS,
        Err(failure @ (Failure::Quiet | Failure::Slipped)) => ExitCode::from(failure.status()),
        Err(failure) => {
            let said = format!("ratewright: {failure}");
            match terminal::error_width() {
                Some(width) => eprint!("{}", terminal::folded(&said, width)),
                None => eprintln!("{said}"),
            }
            ExitCode::from(failure.status())
        }
    }
}
