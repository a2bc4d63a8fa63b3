//! `ratewright probe host`: this machine's oscillator and its system clock.

use std::time::Duration;

use clap::Args;
use ratewright_client::Id;

use crate::server::{self, Server};

/// Measures this machine's oscillator against its system clock, and its system clock against
/// house time
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
    name: Id,
    /// Seconds between readings
    #[arg(long, value_name = "SECONDS", default_value = "1", value_parser = seconds)]
    every: Duration,
    /// Seconds to measure; without it until interrupted
    #[arg(long, value_name = "SECONDS", value_parser = seconds)]
    duration: Option<Duration>,
    /// Print JSON for a machine
    #[arg(long)]
    json: bool,
    #[command(flatten)]
    server: Server,
}

fn seconds(text: &str) -> Result<Duration, String> {
    match text.parse::<f64>() {
        Ok(seconds) if (0.01..=1e9).contains(&seconds) => Ok(Duration::from_secs_f64(seconds)),
        _ => Err("accepted are seconds from 0.01, such as 1 or 0.25".to_owned()),
    }
}

/// Other kernels name and steer their clocks differently.
#[cfg(not(target_os = "linux"))]
pub(crate) async fn run(_: &Arguments) -> Result<(), crate::failure::Failure> {
    Err(crate::failure::Failure::Failed(
        "probe host reads the clocks of a Linux kernel; there is none here".into(),
    ))
}

#[cfg(target_os = "linux")]
pub(crate) use measure::run;

#[cfg(target_os = "linux")]
mod measure {
    use num_rational::Ratio;
    use ratewright_client::{
        Answer, Client, Id, Measurement, Reading, Receipts, Reference, Reporter,
    };
    use serde_json::json;
    use tokio::time::{Instant, MissedTickBehavior};

    use super::Arguments;
    use crate::failure::Failure;
    use crate::probe::kernel::{self, Discipline};
    use crate::report::ensure;
    use crate::{json, show};

    /// Ticks of both clocks: they are read in ns.
    const TICKS_HZ: u64 = 1_000_000_000;

    /// What is measured.
    struct Clocks {
        system: Id,
        /// `None` if the oscillator cannot be told from the system clock.
        raw: Option<Id>,
        /// Carries CLOCK_MONOTONIC onto the epoch of CLOCK_REALTIME, so that it grows over a restart
        /// of the machine.
        epoch_ns: i64,
    }

    /// Declares the clocks, measures, and prints what was found.
    pub(crate) async fn run(arguments: &Arguments) -> Result<(), Failure> {
        let raw = raw_clock(arguments)?;
        let client = arguments.server.connect().await?;
        let epoch_ns = kernel::system_epoch_ns();
        let clocks = Clocks {
            system: arguments.name.clone(),
            raw,
            epoch_ns,
        };
        for id in std::iter::once(&clocks.system).chain(&clocks.raw) {
            ensure(&client, id, Ratio::from_integer(TICKS_HZ), false).await?;
        }
        let (reporter, receipts) = client.report(Default::default());
        let receipts = tokio::spawn(take(receipts));
        measure(&client, arguments, &clocks, reporter).await?;
        let refused = receipts
            .await
            .map_err(|error| Failure::Failed(error.to_string()))??;
        print(&client, arguments, &clocks).await?;
        if refused == 0 {
            Ok(())
        } else {
            Err(Failure::Quiet)
        }
    }

    /// The clock for the oscillator, or `None` with a word why.
    fn raw_clock(arguments: &Arguments) -> Result<Option<Id>, Failure> {
        let raw = || {
            Id::new(&format!("{}-raw", arguments.name))
                .map(Some)
                .map_err(|error| Failure::Usage(format!("{error}; type a shorter NAME")))
        };
        match kernel::discipline() {
            Discipline::Steered => raw(),
            Discipline::Unknown(reason) => {
                eprintln!(
                    "ratewright: the kernel does not say whether its clock is disciplined ({reason}); if \
                     nobody disciplines it, a drift of 0 below says nothing of the oscillator"
                );
                raw()
            }
            Discipline::Nobody if arguments.server.is_local() => Err(Failure::Failed(
                "nobody disciplines the system clock of this machine, so its oscillator and its system \
                 clock are one and the same, and the daemon here keeps house time by it too: any drift \
                 between them would be a meaningless zero. Start a time service on this machine, or \
                 name a daemon on another with --server http://HOST:PORT"
                    .to_owned(),
            )),
            Discipline::Nobody => {
                eprintln!(
                    "ratewright: nobody disciplines the system clock of this machine, so its oscillator is \
                     not measured against it: the zero would be meaningless. Measuring {} against \
                     house time only",
                    arguments.name
                );
                Ok(None)
            }
        }
    }

    async fn measure(
        client: &Client,
        arguments: &Arguments,
        clocks: &Clocks,
        mut reporter: Reporter,
    ) -> Result<(), Failure> {
        let end = arguments.duration.map(|duration| Instant::now() + duration);
        let mut ticks = tokio::time::interval(arguments.every);
        ticks.set_missed_tick_behavior(MissedTickBehavior::Delay);
        loop {
            tokio::select! {
                now = ticks.tick() => if end.is_some_and(|end| now >= end) { return Ok(()) },
                interrupted = tokio::signal::ctrl_c() => {
                    return interrupted.map_err(|error| Failure::Failed(error.to_string()));
                }
            }
            let epoch_ns = clocks.epoch_ns;
            if let Some(raw) = &clocks.raw {
                let look = kernel::look();
                let counter = Measurement::Counter {
                    count: look.raw_ns.unsigned_abs(),
                    bits: 64,
                    reference_ns: look.system_ns + epoch_ns,
                };
                reporter
                    .report(reading(
                        raw,
                        Reference::Clock(clocks.system.clone()),
                        counter,
                    ))
                    .await?;
            }
            // An exchange that fails is a reading less: contact comes back or the receipts say why.
            if let Ok(exchange) = client
                .exchange_time(|| kernel::system_ns() + epoch_ns)
                .await
            {
                let exchange = Measurement::Exchange(exchange);
                reporter
                    .report(reading(&clocks.system, Reference::House, exchange))
                    .await?;
            }
        }
    }

    fn reading(clock: &Id, reference: Reference, measurement: Measurement) -> Reading {
        Reading {
            clock: clock.clone(),
            reference,
            probe: None,
            sequence: None,
            measurement,
        }
    }

    /// Takes receipts until the last; returns how many readings were refused.
    async fn take(mut receipts: Receipts) -> Result<u64, Failure> {
        let mut refused = 0;
        while let Some(answer) = receipts.next().await? {
            match answer {
                Answer::Receipt(receipt) => {
                    for refusal in receipt.refused {
                        refused += refusal.readings.end - refusal.readings.start;
                        let ratewright_client::RefusedReadings {
                            field,
                            value,
                            accepted,
                            ..
                        } = refusal;
                        eprintln!("ratewright: refused: {field} is {value}; accepted: {accepted}");
                    }
                }
                Answer::Lost(loss) => eprintln!("ratewright: {loss}"),
                Answer::Regained => eprintln!("ratewright: contact is back"),
                _ => {}
            }
        }
        Ok(refused)
    }

    async fn print(client: &Client, arguments: &Arguments, clocks: &Clocks) -> Result<(), Failure> {
        let system = client.clock(&clocks.system).await?;
        let raw = match &clocks.raw {
            Some(raw) => Some(client.clock(raw).await?),
            None => None,
        };
        if arguments.json {
            let document =
                json!({ "system": json::clock(&system), "raw": raw.as_ref().map(json::clock) });
            println!("{document:#}");
            return Ok(());
        }
        for clock in std::iter::once(&system).chain(&raw) {
            let (id, estimate) = (&clock.declaration.id, &clock.estimate);
            let drift = show::drift(estimate.drift, estimate.half_width());
            println!(
                "{id}  drift {drift} (95 %), {}",
                show::estimate_state(estimate)
            );
        }
        Ok(())
    }
}
