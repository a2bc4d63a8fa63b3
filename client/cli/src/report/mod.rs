//! `ratewright report`: sending recorded or piped readings.

mod columns;
mod house;
mod rows;
mod summary;

use std::fs::File;
use std::io::Read;
use std::path::{Path, PathBuf};

use clap::{Args, ValueEnum};
use indicatif::ProgressBar;
use num_rational::Ratio;
use ratewright_client::{
    Answer, Client, Id, Measurement, Promise, Reading, Receipts, Reference, ReportOptions,
};
use ratewright_ratio::parse_rate;
use tokio::sync::mpsc;

use crate::declare;
use crate::failure::Failure;
use crate::out;
use crate::out::say;
use crate::progress;
use crate::server::{self, Server};
use columns::Columns;
use summary::Summary;

/// Ticks of a record's time base: it is read in ns.
const TIME_BASE_HZ: u64 = 1_000_000_000;

/// Rows read ahead of what is sent.
const ROWS: usize = 4096;

/// Reports readings of a clock from a CSV file or from standard input
///
/// The first line names the columns, and they tell what was measured:
///
///   count,reference_ns               a tick counter read against the reference
///   t1_ns,t2_ns,t3_ns,t4_ns          two-way exchanges: sent and received again on the clock (t1,
///                                    t4), received and answered on the reference (t2, t3)
///   media_timestamp,reference_ns     media timestamps of sender reports against their arrival
///   drift_ppm,deviation_ppm,reference_ns
///                                    drifts measured by other means, positive runs fast
///
/// Unless --reference names a clock, times on the reference are house time: nanoseconds since
/// 1970-01-01 on the TAI scale, 37 s ahead of Unix time. In a shell on a host that keeps time:
///
///   echo $(( $(date +%s%N) + 37000000000 ))
///
/// A column `sequence` (growing from 1) is used if there is one; other columns are left alone.
/// With --count-column, --reference-column and --reference-unit a record of another make is read
/// as it stands. A record with a time base of its own is reported against a clock that stands for
/// it: see --declare-reference.
#[derive(Debug, Args)]
#[command(verbatim_doc_comment)]
pub(crate) struct Arguments {
    /// The measured clock
    #[arg(value_parser = server::clock)]
    clock: Id,
    /// CSV file; standard input if there is none, or for -
    file: Option<PathBuf>,
    /// What the clock was read against: house, or a clock
    #[arg(long, value_name = "house|CLOCK", default_value = "house", value_parser = reference)]
    reference: Reference,
    /// Which probe measured, if there are several
    #[arg(long, value_name = "ID")]
    probe: Option<Id>,
    /// Width at which the counter or the media timestamp wraps; 64 and 32 unless it is given
    #[arg(long, value_name = "BITS", value_parser = clap::value_parser!(u32).range(1..=64))]
    bits: Option<u32>,
    /// Column that holds the counter
    #[arg(long, value_name = "COLUMN", default_value = "count")]
    count_column: String,
    /// Column that holds the reference's time
    #[arg(long, value_name = "COLUMN", default_value = "reference_ns")]
    reference_column: String,
    /// Unit of the reference's time
    #[arg(long, value_name = "UNIT", default_value = "ns")]
    reference_unit: Unit,
    /// Declare the clock first, with this nominal rate, unless it is declared already
    #[arg(long, value_name = "RATE", value_parser = rate)]
    declare: Option<Ratio<u64>>,
    /// Declare the reference first, as an exact clock: the time base of a record
    #[arg(long)]
    declare_reference: bool,
    /// What receipts must promise
    #[arg(long, value_name = "PROMISE", default_value = "durable")]
    receipt: Receipt,
    /// Print JSON for a machine
    #[arg(long)]
    json: bool,
    #[command(flatten)]
    server: Server,
}

/// Units of time.
#[derive(Clone, Copy, Debug, ValueEnum)]
enum Unit {
    Ns,
    Us,
    Ms,
    S,
}

impl Unit {
    fn ns(self) -> i128 {
        match self {
            Self::Ns => 1,
            Self::Us => 1_000,
            Self::Ms => 1_000_000,
            Self::S => 1_000_000_000,
        }
    }
}

/// What a receipt promises.
#[derive(Clone, Copy, Debug, ValueEnum)]
enum Receipt {
    /// The readings are on disk
    Durable,
    /// The readings have changed the estimates
    Applied,
}

fn rate(text: &str) -> Result<Ratio<u64>, String> {
    parse_rate(text).map_err(|error| error.to_string())
}

fn reference(text: &str) -> Result<Reference, String> {
    match text {
        "house" => Ok(Reference::House),
        text => server::clock(text).map(Reference::Clock),
    }
}

/// A row of the file: a measurement, or what is wrong with it.
struct Row {
    line: u64,
    /// Where it ends in the file, bytes.
    end_byte: u64,
    content: Result<(Option<u64>, Measurement), String>,
}

/// Sends the readings and prints what became of them.
pub(crate) async fn run(arguments: &Arguments) -> Result<(), Failure> {
    let (mut rows, length_bytes) = open(arguments)?;
    let client = arguments.server.connect().await?;
    declare_clocks(&client, arguments).await?;
    let promise = match arguments.receipt {
        Receipt::Durable => Promise::Durable,
        Receipt::Applied => Promise::Applied,
    };
    let (mut reporter, receipts) = client.report(ReportOptions {
        promise,
        ..ReportOptions::default()
    });
    let bar = match length_bytes {
        Some(bytes) => progress::bar(bytes, "sent"),
        None => ProgressBar::hidden(),
    };
    let receipts = tokio::spawn(take(receipts, bar.clone()));

    let mut summary = Summary::default();
    let mut newest_ns = None;
    while let Some(row) = rows.recv().await {
        bar.set_position(row.end_byte);
        match row.content {
            Ok((sequence, measurement)) => {
                newest_ns = newest_ns.max(Some(house::reference_ns(&measurement)));
                let reading = Reading {
                    clock: arguments.clock.clone(),
                    reference: arguments.reference.clone(),
                    probe: arguments.probe.clone(),
                    sequence,
                    measurement,
                };
                if reporter.report_when_room(reading).await.is_err() {
                    break; // The receipts say why.
                }
                summary.sent(row.line);
            }
            Err(reason) => summary.unreadable(row.line, reason),
        }
    }
    drop(reporter);
    let receipts = receipts.await;
    bar.finish_and_clear();
    summary.receipts(receipts.map_err(|error| Failure::Failed(error.to_string()))??);
    if let (Reference::House, Some(newest_ns)) = (&arguments.reference, newest_ns) {
        house::warn_if_far(&client, newest_ns).await;
    }
    finish(&client, arguments, &summary).await
}

/// Declares what was asked for, and makes sure that the rest is there.
async fn declare_clocks(client: &Client, arguments: &Arguments) -> Result<(), Failure> {
    match (&arguments.reference, arguments.declare_reference) {
        (Reference::Clock(id), true) => {
            declare::ensure(client, id, Ratio::from_integer(TIME_BASE_HZ), true).await?;
        }
        (Reference::Clock(id), false) => {
            let advice = "if it is the time base of a record, add --declare-reference";
            declare::expect(client, id, advice).await?;
        }
        (Reference::House, true) => {
            return Err(Failure::Usage(
                "--declare-reference declares a clock, but the reference is house; name the record's \
                 time base, such as --reference gps"
                    .to_owned(),
            ));
        }
        (Reference::House, false) => {}
    }
    match arguments.declare {
        Some(nominal_hz) => declare::ensure(client, &arguments.clock, nominal_hz, false).await,
        None => {
            let advice = "add --declare RATE, such as --declare 48k";
            declare::expect(client, &arguments.clock, advice).await
        }
    }
}

/// Takes receipts until the last; losses of contact are told as they happen.
async fn take(
    mut receipts: Receipts,
    bar: ProgressBar,
) -> Result<Vec<ratewright_client::Receipt>, Failure> {
    let mut taken = Vec::new();
    let say = |text: String| bar.suspend(|| eprintln!("ratewright: {text}"));
    while let Some(answer) = receipts.next().await? {
        match answer {
            Answer::Receipt(receipt) => taken.push(receipt),
            Answer::Lost(loss) => say(loss.to_string()),
            Answer::Regained => say("contact is back".to_owned()),
            _ => {}
        }
    }
    Ok(taken)
}

async fn finish(client: &Client, arguments: &Arguments, summary: &Summary) -> Result<(), Failure> {
    let clock = client.clock(&arguments.clock).await?;
    if arguments.json {
        say!("{:#}", summary.json(&clock))?;
    } else {
        out::prose(&summary.text(&clock))?;
    }
    if summary.is_clean() {
        Ok(())
    } else {
        Err(Failure::Quiet)
    }
}

/// Opens the file, reads its heading, and starts reading rows. Tells its length in bytes, if it has one.
fn open(arguments: &Arguments) -> Result<(mpsc::Receiver<Row>, Option<u64>), Failure> {
    let name = arguments
        .file
        .as_deref()
        .filter(|file| *file != Path::new("-"));
    let (input, length_bytes): (Box<dyn Read + Send>, _) = match name {
        None => (Box::new(std::io::stdin()), None),
        Some(file) => {
            let input = File::open(file).map_err(|error| {
                Failure::Failed(format!("cannot open {}: {error}", file.display()))
            })?;
            let about = input.metadata().ok().filter(std::fs::Metadata::is_file);
            (Box::new(input), about.map(|about| about.len()))
        }
    };
    let mut csv = csv::ReaderBuilder::new()
        .flexible(true)
        .trim(csv::Trim::All)
        .comment(Some(b'#'))
        .from_reader(input);
    let header = csv
        .headers()
        .map_err(|error| Failure::Failed(error.to_string()))?;
    let columns = Columns::find(header, arguments).map_err(Failure::Usage)?;
    let (sender, rows) = mpsc::channel(ROWS);
    // A thread of its own, because a read of standard input may never return.
    std::thread::spawn(move || rows::read(csv, &columns, &sender));
    Ok((rows, length_bytes))
}
