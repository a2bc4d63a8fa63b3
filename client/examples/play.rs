//! Follows a crossing with a handle; a thread that sleeps stands for the sound device. `hall-programme`
//! is a crossing of the sample facility; `ratewright standing` lists those of any other:
//! `cargo run -p ratewright-client --example play -- hall-programme http://127.0.0.1:7420`.
//! More addresses of the same facility may follow. The daemon believes what it reports: the crossing's
//! account of phase error is then that of this thread.
#![allow(clippy::print_stdout, reason = "an example prints")]
#![allow(
    clippy::disallowed_methods,
    reason = "an example reads its arguments, keeps time and starts a thread"
)]

use std::time::{Duration, Instant};

use ratewright_client::{Client, Id, PlayerOptions, Playing, Reader, SinkProbe, Trim, Update};

#[tokio::main]
async fn main() -> Result<(), Box<dyn std::error::Error>> {
    let arguments: Vec<String> = std::env::args().skip(1).collect();
    let (crossing, addresses) = arguments.split_first().ok_or("which crossing?")?;
    let addresses: Vec<&str> = addresses.iter().map(String::as_str).collect();
    // A player starts whether a daemon answers or not.
    let client = Client::connect_later(&addresses)?;
    let options = PlayerOptions {
        trim: Some(Trim::new(5.0)?),
        keep_in: Some(std::env::temp_dir().join("ratewright-play")),
        // Rates of the source and of the sink.
        ..PlayerOptions::new(48_000, 48_000)
    };
    let (mut player, reader, probe) = client.play(&Id::new(crossing)?, options)?;
    std::thread::spawn(move || device(reader, &probe));
    loop {
        match player.next().await? {
            Playing::Heard(Update::Setting(setting)) => {
                println!("{} wants {}", setting.name(), setting.wanted);
            }
            Playing::Heard(Update::Lost(loss)) => println!("{loss}"),
            Playing::Applied(applied) => println!(
                "{} runs from sample {} on",
                applied.number, applied.sink_sample
            ),
            other => println!("{other:?}"),
        }
    }
}

/// Takes 480 samples every 10 ms, and has the resampler make as many.
fn device(mut reader: Reader, probe: &SinkProbe) {
    let start = Instant::now();
    let (mut taken, mut made) = (0u64, 0u64);
    loop {
        std::thread::sleep(Duration::from_millis(10));
        taken = taken.max((start.elapsed().as_secs_f64() * 48_000.0) as u64);
        // A real one does this from another thread, where a send may take its time.
        probe.read(0, taken, Instant::now());
        while made < taken {
            // `made` runs ahead of `taken` by less than this loop makes: the same counter.
            let block = reader.next_block(made);
            // ... make block.outputs outputs, each block.m phases of block.l after the last ...
            made += block.outputs;
        }
        reader.set_level(made as f64 - taken as f64);
    }
}
