//! Estimates every trace of a folder, causally: `estimate_traces DIR OUT`.
//!
//! Reads each `ID.csv.gz` with `ID.meta.json` and `ID.queries.csv.gz`, and writes `OUT/ID.csv`
//! with `t_s,rate_ppm,lo_ppm,hi_ppm`. A query is answered from rows that arrived before it.
#![allow(
    clippy::disallowed_methods,
    clippy::disallowed_types,
    clippy::print_stdout,
    reason = "an example is a shell around the pure crate: it reads and writes files"
)]

use std::error::Error;
use std::fmt::Write as _;
use std::fs::{self, File};
use std::io::Read;
use std::path::Path;

use flate2::read::GzDecoder;
use num_rational::Ratio;
use ratewright_timing::{Link, LinkConfig, Measurement};
use serde::Deserialize;

#[derive(Deserialize)]
struct Meta {
    clock_hz: Option<u64>,
    counter_bits: Option<u32>,
}

fn main() -> Result<(), Box<dyn Error>> {
    let arguments: Vec<String> = std::env::args().skip(1).collect();
    let [dir, out] = arguments.as_slice() else {
        return Err("usage: estimate_traces DIR OUT".into());
    };
    let (dir, out) = (Path::new(dir), Path::new(out));
    fs::create_dir_all(out)?;
    let mut ids: Vec<String> = fs::read_dir(dir)?
        .filter_map(|entry| entry.ok()?.file_name().into_string().ok())
        .filter_map(|name| name.strip_suffix(".meta.json").map(str::to_owned))
        .collect();
    ids.sort();
    for id in ids {
        let estimates = estimate(dir, &id).map_err(|e| format!("trace {id}: {e}"))?;
        fs::write(out.join(format!("{id}.csv")), estimates)?;
        println!("{id}");
    }
    Ok(())
}

fn unpack(path: &Path) -> Result<String, Box<dyn Error>> {
    let file = File::open(path).map_err(|e| format!("{}: {e}", path.display()))?;
    let mut text = String::new();
    GzDecoder::new(file).read_to_string(&mut text)?;
    Ok(text)
}

fn estimate(dir: &Path, id: &str) -> Result<String, Box<dyn Error>> {
    let meta: Meta =
        serde_json::from_str(&fs::read_to_string(dir.join(format!("{id}.meta.json")))?)?;
    let rows = unpack(&dir.join(format!("{id}.csv.gz")))?;
    let queries = unpack(&dir.join(format!("{id}.queries.csv.gz")))?;
    let nominal_hz = Ratio::from_integer(meta.clock_hz.unwrap_or(1_000_000_000));
    let bits = meta.counter_bits.unwrap_or(64);
    let mut link = Link::new(LinkConfig::new(nominal_hz))?;
    let mut rows = rows.lines().skip(1).peekable();
    let mut text = String::from("t_s,rate_ppm,lo_ppm,hi_ppm\n");
    for query in queries.lines().skip(1) {
        let t_s: f64 = query.trim().parse()?;
        let at_ns = (t_s * 1e9) as i64;
        while let Some(row) = rows.peek() {
            let (arrival_ns, sequence, measurement) = parse(row, bits)?;
            if arrival_ns >= at_ns {
                break;
            }
            // Rows out of order are refused or stale; either way they are not used.
            let _ = link.observe(sequence, &measurement);
            rows.next();
        }
        let e = link.estimate(at_ns);
        let ppm = [e.drift, e.low, e.high].map(|value| value * 1e6);
        writeln!(text, "{t_s},{:.9},{:.9},{:.9}", ppm[0], ppm[1], ppm[2])?;
    }
    Ok(text)
}

fn parse(row: &str, bits: u32) -> Result<(i64, u64, Measurement), Box<dyn Error>> {
    let fields: Vec<&str> = row.split(',').collect();
    let number = |i: usize| -> Result<i64, Box<dyn Error>> {
        let field = fields
            .get(i)
            .ok_or_else(|| format!("row {row} has no field {i}"))?;
        Ok(field.parse()?)
    };
    let arrival_ns = number(1)?;
    let measurement = match fields[0] {
        "C" => Measurement::Counter {
            count: number(3)? as u64,
            bits,
            reference_ns: number(4)?,
        },
        "T" => Measurement::Exchange {
            t1_ns: number(3)?,
            t2_ns: number(4)?,
            t3_ns: number(5)?,
            t4_ns: number(6)?,
        },
        "R" => Measurement::SenderReport {
            media_timestamp: number(3)? as u64,
            bits,
            reference_ns: arrival_ns,
        },
        kind => return Err(format!("kind {kind}: accepted is C, T or R").into()),
    };
    Ok((arrival_ns, number(2)? as u64, measurement))
}
