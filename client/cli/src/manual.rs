//! `ratewright manual`: its man pages.

use std::fs;
use std::path::PathBuf;

use clap::{Args, CommandFactory as _};

use crate::failure::Failure;
use crate::out::say;

/// Writes the man pages, one for each command, into a folder
///
/// In `~/.local/share/man/man1` they are found by `man ratewright` and `man ratewright-plan`.
#[derive(Debug, Args)]
pub(crate) struct Arguments {
    /// The folder; it is made if it is not there
    #[arg(value_name = "DIR")]
    folder: PathBuf,
}

/// Writes the pages and says where.
pub(crate) fn run(arguments: &Arguments) -> Result<(), Failure> {
    let folder = &arguments.folder;
    let failed = |error: std::io::Error| {
        Failure::Failed(format!(
            "the man pages cannot be written to {}: {error}",
            folder.display()
        ))
    };
    fs::create_dir_all(folder).map_err(failed)?;
    clap_mangen::generate_to(crate::Arguments::command(), folder).map_err(failed)?;
    say!(
        "read them by: man {}",
        folder.join("ratewright.1").display()
    )
}
