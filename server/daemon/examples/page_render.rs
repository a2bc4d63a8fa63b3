//! How long the pages take with 10,000 clocks and 5,000 crossings, beside a trivial handler.
//!
//! `cargo run --release -p ratewright-server --example page_render`
//!
//! A whole daemon with a store of its own is asked over HTTP, one request after the other on one
//! connection, as it stands after its start: nothing is measured, so that every clock needs a look.
#![allow(
    clippy::disallowed_methods,
    clippy::disallowed_types,
    clippy::print_stdout,
    reason = "it measures: it reads clocks, opens sockets and prints"
)]

use std::{
    error::Error,
    io::{BufRead, BufReader, Read, Write},
    net::{SocketAddr, TcpStream},
    time::Instant,
};

use num_rational::Ratio;
use ratewright_control::{ClockDeclaration, CrossingDeclaration, Id, Realisation};
use ratewright_ratio::Bounds;
use ratewright_server::{Daemon, config::Config};

const CLOCKS: usize = 10_000;
const REQUESTS: usize = 100;
const TRIVIAL: &str = "/livez";
const PAGES: [&str; 8] = [
    "/",
    "/clocks",
    "/clocks?q=rack+77",
    "/clocks?page=200",
    "/crossings",
    "/clocks/rack-5000",
    "/crossings/into-5000",
    "/plan?from=44.1k&to=48k&from_drift=12.5&passband=20000",
];

type Fallible<T> = Result<T, Box<dyn Error>>;

#[tokio::main]
async fn main() -> Fallible<()> {
    let folder = tempfile::tempdir()?;
    let any_port = SocketAddr::from(([127, 0, 0, 1], 0));
    let config = Config {
        store: folder.path().to_owned(),
        grpc: any_port,
        people: any_port,
        clocks: clocks()?,
        crossings: crossings()?,
        ..Config::default()
    };
    let daemon = Daemon::builder(config).start().await?;
    let people = daemon.people();
    let measured = tokio::task::spawn_blocking(move || measure(people).map_err(|e| e.to_string()));
    let outcome = measured.await?;
    daemon.drain().await?;
    Ok(outcome?)
}

fn clocks() -> Fallible<Vec<ClockDeclaration>> {
    let named = |i: usize| {
        let id = Id::new(&format!("rack-{i}"))?;
        let display_name = format!("Rack {i}, converter");
        let clock = ClockDeclaration::new(id, Ratio::from_integer(48_000));
        Ok(ClockDeclaration {
            display_name,
            ..clock
        })
    };
    (0..CLOCKS).map(named).collect()
}

/// One from each clock of an even number to the next one.
fn crossings() -> Fallible<Vec<CrossingDeclaration>> {
    let between = |i: usize| {
        Ok(CrossingDeclaration {
            id: Id::new(&format!("into-{i}"))?,
            display_name: format!("Rack {i} into the next"),
            source: Id::new(&format!("rack-{i}"))?,
            sink: Id::new(&format!("rack-{}", i + 1))?,
            bounds: Bounds::new(1024, 1024)?,
            headroom_samples: 48.0,
            realisation: Realisation::Cadence,
            group: None,
            lead_ns: 1_000_000_000,
            review_horizon_ns: 3_600_000_000_000,
            least_hold_ns: 0,
            pitch_limit_ppm: 20.0,
            silent: false,
            backup: None,
        })
    };
    (0..CLOCKS).step_by(2).map(between).collect()
}

fn measure(people: SocketAddr) -> Fallible<()> {
    let stream = TcpStream::connect(people)?;
    stream.set_nodelay(true)?;
    let mut connection = BufReader::new(stream);
    let (trivial_ms, ..) = times(&mut connection, TRIVIAL)?;
    println!(
        "{CLOCKS} clocks, {} crossings, {REQUESTS} requests each",
        CLOCKS / 2
    );
    println!(
        "{:<58}{:>10}{:>10}{:>10}{:>10}",
        "", "median ms", "95 % ms", "x trivial", "KiB"
    );
    println!("{TRIVIAL:<58}{trivial_ms:>10.3}");
    for page in PAGES {
        let (median_ms, late_ms, bytes) = times(&mut connection, page)?;
        let (ratio, kib) = (median_ms / trivial_ms, bytes / 1024);
        println!("{page:<58}{median_ms:>10.2}{late_ms:>10.2}{ratio:>10.0}{kib:>10}");
    }
    Ok(())
}

/// Median and 95th percentile, ms, and the bytes of the last answer.
fn times(connection: &mut BufReader<TcpStream>, path: &str) -> Fallible<(f64, f64, usize)> {
    let mut bytes = get(connection, path)?;
    let mut ms = Vec::with_capacity(REQUESTS);
    for _ in 0..REQUESTS {
        let began = Instant::now();
        bytes = get(connection, path)?;
        ms.push(began.elapsed().as_secs_f64() * 1e3);
    }
    ms.sort_by(f64::total_cmp);
    Ok((ms[REQUESTS / 2], ms[REQUESTS * 95 / 100], bytes))
}

/// Asks, and reads the whole answer.
fn get(connection: &mut BufReader<TcpStream>, path: &str) -> Fallible<usize> {
    // In one piece, so that the server does not wait for the rest of it.
    let question = format!("GET {path} HTTP/1.1\r\nhost: facility\r\n\r\n");
    connection.get_mut().write_all(question.as_bytes())?;
    let mut length = 0;
    let mut line = String::new();
    loop {
        line.clear();
        connection.read_line(&mut line)?;
        match line.trim_end().split_once(": ") {
            Some((name, value)) if name.eq_ignore_ascii_case("content-length") => {
                length = value.parse()?
            }
            Some(_) => {}
            None if line.starts_with("HTTP/1.1 200") => {}
            None if line.trim_end().is_empty() => break,
            None => return Err(format!("{path}: {line}").into()),
        }
    }
    let mut body = vec![0; length];
    connection.read_exact(&mut body)?;
    Ok(length)
}
