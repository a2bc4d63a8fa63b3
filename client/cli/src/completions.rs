//! `ratewright completions`: what shells need to complete its commands.

use clap::{Args, CommandFactory as _};
use clap_complete::{Shell, generate};

use crate::failure::Failure;
use crate::out;

/// Prints the script by which a shell completes commands and options
///
/// Put it where completions are looked for, such as
///
///   bash   ~/.local/share/bash-completion/completions/ratewright
///   zsh    _ratewright in a folder of $fpath
///   fish   ~/.config/fish/completions/ratewright.fish
///
/// once that folder is there (mkdir -p): `ratewright completions bash > FILE`
#[derive(Debug, Args)]
#[command(verbatim_doc_comment)]
pub(crate) struct Arguments {
    /// The shell
    shell: Shell,
}

/// Prints the script.
pub(crate) fn run(arguments: &Arguments) -> Result<(), Failure> {
    let mut script = Vec::new();
    let mut command = crate::Arguments::command();
    generate(arguments.shell, &mut command, "ratewright", &mut script);
    out::text(format_args!("{}", String::from_utf8_lossy(&script)))
}
