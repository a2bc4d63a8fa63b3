//! `ratewright probe`: measuring a clock of this machine and reporting it.

mod host;
mod kernel;
#[cfg(target_os = "linux")]
mod measure;

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
        #[cfg(target_os = "linux")]
        What::Host(arguments) => measure::run(arguments).await,
        #[cfg(not(target_os = "linux"))]
        What::Host(_) => Err(Failure::Failed(
            "probe host reads the clocks of a Linux kernel, and this is another".to_owned(),
        )),
    }
}
