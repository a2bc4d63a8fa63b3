//! `ratewright probe host`: this machine's oscillator and its system clock.

use std::time::Duration;

use clap::Args;
use ratewright_client::Id;

use super::kernel::Discipline;
use crate::server::{self, Server};

/// Measures this machine's oscillator against its system clock, and that against house time
///
/// Two clocks of 1 GHz (ticks of 1 ns) are declared unless they are there already:
///
///   NAME      the system clock: CLOCK_MONOTONIC, which is steered in rate and never stepped, on
///             the epoch of CLOCK_REALTIME. It is measured against house time by two-way
///             exchanges. Whoever stamps readings on this machine names it as their reference.
///   NAME-raw  the oscillator itself: CLOCK_MONOTONIC_RAW, which nobody steers. It is measured
///             against NAME as a counter, if the system clock is disciplined.
///
/// On a machine whose system clock nobody disciplines the two tick alike, and their difference of
/// zero would say nothing of the oscillator: it is then not measured, and the command says so. If
/// the daemon is on the same machine, house time is that same clock, nothing is left to measure,
/// and the command fails.
#[derive(Debug, Args)]
#[command(verbatim_doc_comment)]
pub(crate) struct Arguments {
    /// Name of this machine's system clock
    #[arg(value_name = "NAME", value_parser = server::clock)]
    pub(super) name: Id,
    /// Seconds between readings
    #[arg(long, value_name = "SECONDS", default_value = "1", value_parser = seconds)]
    pub(super) every: Duration,
    /// Seconds to measure; without it until interrupted
    #[arg(long, value_name = "SECONDS", value_parser = seconds)]
    pub(super) duration: Option<Duration>,
    /// Print JSON for a machine
    #[arg(long)]
    pub(super) json: bool,
    #[command(flatten)]
    pub(super) server: Server,
}

fn seconds(text: &str) -> Result<Duration, String> {
    match text.parse::<f64>() {
        Ok(seconds) if (0.01..=1e9).contains(&seconds) => Ok(Duration::from_secs_f64(seconds)),
        _ => Err("accepted are seconds from 0.01, such as 1 or 0.25".to_owned()),
    }
}

/// What can be measured here with meaning.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(super) enum Worth {
    /// The oscillator against the system clock, and that against house time.
    Both,
    /// The same, with a word of doubt.
    BothInDoubt(String),
    /// The system clock against house time only, for this reason.
    SystemOnly(String),
    /// Nothing, for this reason.
    Nothing(String),
}

/// Decides what is worth measuring.
pub(super) fn worth(discipline: &Discipline, daemon_is_here: bool) -> Worth {
    match discipline {
        Discipline::Steered => Worth::Both,
        Discipline::Unknown(reason) => Worth::BothInDoubt(format!(
            "the kernel does not say whether its clock is disciplined ({reason}); if nobody \
             disciplines it, a drift of 0 below says nothing of the oscillator"
        )),
        Discipline::Nobody if daemon_is_here => Worth::Nothing(
            "nobody disciplines the system clock of this machine, so its oscillator and its system \
             clock are one and the same, and the daemon here keeps house time by it too: any drift \
             between them would be a meaningless zero. Start a time service on this machine, or \
             name a daemon on another with --server http://HOST:PORT"
                .to_owned(),
        ),
        Discipline::Nobody => Worth::SystemOnly(
            "nobody disciplines the system clock of this machine, so its oscillator is not measured \
             against it: the zero would be meaningless. Only the system clock is measured, against \
             house time"
                .to_owned(),
        ),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_meaningless_zero_is_never_measured() {
        assert_eq!(worth(&Discipline::Steered, true), Worth::Both);
        let here = worth(&Discipline::Nobody, true);
        assert!(
            matches!(&here, Worth::Nothing(why) if why.contains("meaningless")),
            "{here:?}"
        );
        let there = worth(&Discipline::Nobody, false);
        assert!(matches!(&there, Worth::SystemOnly(why) if why.contains("not measured")));
        let doubt = worth(&Discipline::Unknown("denied".to_owned()), true);
        assert!(matches!(&doubt, Worth::BothInDoubt(why) if why.contains("denied")));
    }
}
