//! Taking the readings of `probe host` and sending them.

use num_rational::Ratio;
use ratewright_client::{
    Answer, Client, Id, Measurement, Reading, Receipts, Reference, RefusedReadings, Reporter,
};
use serde_json::json;
use tokio::time::{Instant, MissedTickBehavior};

use super::host::{Arguments, Worth, worth};
use super::kernel;
use crate::failure::Failure;
use crate::out::say;
use crate::{declare, json, show};

/// Ticks of both clocks: they are read in ns.
const TICKS_HZ: u64 = 1_000_000_000;

/// What is measured.
#[derive(Debug)]
struct Clocks {
    system: Id,
    /// `None` if the oscillator cannot be told from the system clock.
    raw: Option<Id>,
    /// Carries CLOCK_MONOTONIC onto the epoch of CLOCK_REALTIME, so that it grows over a restart of
    /// the machine.
    epoch_ns: i64,
}

impl Clocks {
    fn all(&self) -> impl Iterator<Item = &Id> {
        std::iter::once(&self.system).chain(&self.raw)
    }
}

/// Declares the clocks, measures, and prints what was found.
pub(super) async fn run(arguments: &Arguments) -> Result<(), Failure> {
    let with_raw = match worth(&kernel::discipline(), arguments.server.is_local()) {
        Worth::Both => true,
        Worth::Nothing(why) => return Err(Failure::Failed(why)),
        Worth::SystemOnly(why) => {
            eprintln!("ratewright: {why}");
            false
        }
        Worth::BothInDoubt(why) => {
            eprintln!("ratewright: {why}");
            true
        }
    };
    let system = arguments.name.clone();
    let raw = with_raw
        .then(|| Id::new(&format!("{system}-raw")))
        .transpose();
    let raw = raw.map_err(|error| Failure::Usage(format!("{error}; type a shorter NAME")))?;
    let clocks = Clocks {
        system,
        raw,
        epoch_ns: kernel::system_epoch_ns(),
    };
    let client = arguments.server.connect().await?;
    let refused = measure(&client, arguments, &clocks).await?;
    print(&client, arguments, &clocks).await?;
    if refused == 0 {
        Ok(())
    } else {
        Err(Failure::Quiet)
    }
}

/// Measures until the time is over or someone interrupts; returns how many readings were refused.
async fn measure(client: &Client, arguments: &Arguments, clocks: &Clocks) -> Result<u64, Failure> {
    for id in clocks.all() {
        declare::ensure(client, id, Ratio::from_integer(TICKS_HZ), false).await?;
    }
    let (reporter, receipts) = client.report(Default::default());
    let receipts = tokio::spawn(take(receipts));
    let end = arguments.duration.map(|duration| Instant::now() + duration);
    let mut ticks = tokio::time::interval(arguments.every);
    ticks.set_missed_tick_behavior(MissedTickBehavior::Delay);
    loop {
        tokio::select! {
            now = ticks.tick() => if end.is_some_and(|end| now >= end) { break },
            interrupted = tokio::signal::ctrl_c() => {
                interrupted.map_err(|error| Failure::Failed(error.to_string()))?;
                break;
            }
        }
        look(client, clocks, &reporter).await?;
    }
    drop(reporter);
    receipts
        .await
        .map_err(|error| Failure::Failed(error.to_string()))?
}

/// One reading of each clock.
async fn look(client: &Client, clocks: &Clocks, reporter: &Reporter) -> Result<(), Failure> {
    let epoch_ns = clocks.epoch_ns;
    if let Some(raw) = &clocks.raw {
        let look = kernel::look();
        let counter = Measurement::Counter {
            count: look.raw_ns.unsigned_abs(),
            bits: 64,
            reference_ns: look.system_ns + epoch_ns,
        };
        let reference = Reference::Clock(clocks.system.clone());
        reporter.report(reading(raw, reference, counter))?;
    }
    // An exchange that fails is a reading less: contact comes back, or the receipts say why.
    if let Ok(exchange) = client
        .exchange_time(|| kernel::system_ns() + epoch_ns)
        .await
    {
        let exchange = Measurement::Exchange(exchange);
        reporter.report(reading(&clocks.system, Reference::House, exchange))?;
    }
    Ok(())
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
                for RefusedReadings {
                    readings,
                    field,
                    value,
                    accepted,
                } in receipt.refused
                {
                    refused += readings.end - readings.start;
                    eprintln!("ratewright: refused: {field} is {value}; accepted: {accepted}");
                }
            }
            Answer::Dropped(readings) => eprintln!(
                "ratewright: {} readings were dropped: contact was lost for too long",
                readings.end - readings.start
            ),
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
        let raw = raw.as_ref().map(json::clock);
        say!(
            "{:#}",
            json!({ "system": json::clock(&system), "raw": raw })
        )?;
        return Ok(());
    }
    for clock in std::iter::once(&system).chain(&raw) {
        let (drift, state) = show::clock(clock);
        say!("{}: drift {drift}, {state}", clock.declaration.id)?;
    }
    Ok(())
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::fake_server::FakeServer;
    use clap::Parser;
    use ratewright_proto::v1::reading::Measurement as Wire;

    #[derive(Parser)]
    struct Line {
        #[command(flatten)]
        arguments: Arguments,
    }

    #[tokio::test]
    async fn the_oscillator_is_read_against_the_system_clock_and_that_against_the_house() {
        let server = FakeServer::start();
        let line = ["probe", "van", "--every", "0.02", "--duration", "0.1"];
        let line = Line::parse_from(line.into_iter().chain(["--server", &server.address()]));
        let id = |text| Id::new(text).expect("an id");
        let clocks = Clocks {
            system: id("van"),
            raw: Some(id("van-raw")),
            epoch_ns: 1_000_000_000_000,
        };
        let client = Client::connect(&server.address())
            .await
            .expect("it listens");
        let refused = measure(&client, &line.arguments, &clocks)
            .await
            .expect("it measures");
        assert_eq!(refused, 0);

        let known = server.facility.known();
        let readings: Vec<_> = known
            .batches
            .iter()
            .flat_map(|batch| &batch.readings)
            .collect();
        assert!(readings.len() >= 4, "two readings a look");
        for reading in readings {
            match (
                reading.clock.as_str(),
                reading.reference.as_str(),
                &reading.measurement,
            ) {
                ("clocks/van-raw", "clocks/van", Some(Wire::Counter(counter))) => {
                    assert!(counter.count > 0 && counter.reference_ns > clocks.epoch_ns);
                }
                ("clocks/van", "house", Some(Wire::Exchange(exchange))) => {
                    assert!(clocks.epoch_ns < exchange.t1_ns && exchange.t1_ns <= exchange.t4_ns);
                }
                other => panic!("nothing else is measured: {other:?}"),
            }
        }
    }
}
