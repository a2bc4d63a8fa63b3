//! What ends a command early.

use ratewright_client::{CallError, Closed};
use ratewright_declarations::Faults;
use thiserror::Error;

/// The status of a configuration that is at fault, as in sysexits.h (and in `ratewrightd check`).
const EX_CONFIG: u8 = 78;

/// Why a command failed.
#[derive(Debug, Error)]
pub(crate) enum Failure {
    /// The command makes no sense as it was typed; the text says what would.
    #[error("{0}")]
    Usage(String),
    /// Something outside could not be done.
    #[error("{0}")]
    Failed(String),
    /// What went wrong was already said in the command's own output.
    #[error("see above")]
    Quiet,
    /// A crossing of a rehearsal slipped, as was said.
    #[error("a crossing slipped")]
    Slipped,
    /// A file is at fault.
    #[error("{0}")]
    File(Faults),
    /// Who read standard output has seen enough.
    #[error("standard output was closed")]
    ReaderGone,
}

impl Failure {
    /// The exit status.
    pub(crate) fn status(&self) -> u8 {
        match self {
            Self::Usage(_) => 2,
            Self::Failed(_) | Self::Quiet => 1,
            Self::Slipped => 3,
            Self::File(_) => EX_CONFIG,
            Self::ReaderGone => 0,
        }
    }
}

impl From<CallError> for Failure {
    fn from(error: CallError) -> Self {
        match error {
            CallError::Unreachable { address, reason } => Self::Failed(format!(
                "nobody answers at {address} ({reason}); start ratewrightd there, with \
                 `ratewrightd run FILE` or, to try it, `ratewrightd sample`, or name another place \
                 with --server http://HOST:PORT"
            )),
            other => Self::Failed(other.to_string()),
        }
    }
}

impl From<Closed> for Failure {
    fn from(closed: Closed) -> Self {
        Self::Failed(closed.to_string())
    }
}
