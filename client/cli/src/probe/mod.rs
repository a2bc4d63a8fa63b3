//! `ratewright probe`: measuring a clock of this machine and reporting it.

mod host;
mod kernel;

use clap::{Args, Subcommand};

use crate::failure::Failure;

/// Measures a clock of this machine and reports it
#[derive(Debug, Args)]
pub(crate) struct Arguments {
    #[command(subcommand)]
    what: What,
}

#[derive(Debug, Subcommand)]
enum What {
    Host(host::Arguments),
}

/// Measures until it is done or interrupted.
pub(crate) async fn run(arguments: &Arguments) -> Result<(), Failure> {
    match &arguments.what {
        What::Host(arguments) => host::run(arguments).await,
    }
}
