//! Sound from the server to the very sample, for hours of stream time:
//! `cargo run --release -p ratewright-tests --example sound -- [HOURS] [--pictures DIR]`.
//!
//! A daemon in accelerated time decides three crossings from 44.1 kHz to 48 kHz between the same two
//! wandering clocks, one for each way of making a ratio that the bank does not hold.
//!
//! Every block of the whole time is counted, in integers, as are the FIFO's samples. The filters run
//! only in 61 stretches spread evenly over it, of 0.17 s each, and of 350 s in the middle, whose
//! spectrum is taken: tones that are known at any instant need no more to have their phases measured.
#![allow(clippy::print_stdout, reason = "it prints what came of it")]
#![allow(
    clippy::disallowed_methods,
    reason = "a whole system, and pictures in files"
)]

mod pictures;

use std::error::Error;
use std::path::PathBuf;

use clap::Parser;
use ratewright_tests::sound::performance::{Part, Performance, perform};
use ratewright_tests::sound::programme::{Programme, TONES_HZ};
use ratewright_tests::sound::tone::Spectrum;

/// Outputs of the recording whose spectrum is taken: 350 s.
const SPECTRUM_OUTPUTS: usize = 1 << 24;

/// A spur this far from its tone is heard beside it; a nearer one as a slow swing of its pitch, Hz.
const BESIDE_HZ: f64 = 20.0;

/// What to play.
#[derive(Debug, Parser)]
struct Arguments {
    /// Stream time, hours; at 6 the average frequency is good to 1 ppb whatever happens within the
    /// headroom.
    #[arg(default_value_t = 6.0)]
    hours: f64,
    /// House seconds for a real one.
    #[arg(long, default_value_t = 100.0)]
    pace: f64,
    /// Headroom of each crossing, sink samples, up to 0.6.
    #[arg(long, default_value_t = 0.5, value_parser = headroom)]
    headroom: f64,
    /// Seed of the clocks.
    #[arg(long, default_value_t = 1)]
    seed: u64,
    /// Folder for pictures of the FIFO's level and of the spectra.
    #[arg(long)]
    pictures: Option<PathBuf>,
}

fn headroom(text: &str) -> Result<f64, String> {
    let samples: f64 = text.parse().map_err(|_| "not a number".to_owned())?;
    if samples > 0.0 && samples <= 0.6 {
        Ok(samples)
    } else {
        Err(
            "accepted is above 0, up to 0.6: beyond that the phase of 19 kHz is ambiguous"
                .to_owned(),
        )
    }
}

#[tokio::main]
async fn main() -> Result<(), Box<dyn Error>> {
    let arguments = Arguments::parse();
    let programme = Programme {
        settle_s: 1_200,
        stream_s: (arguments.hours * 3_600.0) as u32,
        pace: arguments.pace,
        headroom_samples: arguments.headroom,
        phases: 61,
        spectrum_outputs: SPECTRUM_OUTPUTS,
        seed: arguments.seed,
    };
    println!(
        "44.1 kHz to 48 kHz, L and M up to 1024, headroom {} samples; {} s of stream after {} s of readings, {} house seconds a second",
        programme.headroom_samples, programme.stream_s, programme.settle_s, programme.pace
    );
    let performance = perform(&programme).await?;
    println!(
        "{} readings taken in; {} reports of when a setting took effect refused{}",
        performance.readings,
        performance.refused.len(),
        performance
            .refused
            .first()
            .map_or(String::new(), |first| format!(", the first: {first}"))
    );
    for part in &performance.parts {
        tell(&performance, part, programme.headroom_samples);
    }
    if let Some(folder) = arguments.pictures {
        pictures::draw(&performance, programme.headroom_samples, &folder)?;
        println!("\npictures in {}", folder.display());
    }
    Ok(())
}

fn tell(performance: &Performance, part: &Part, headroom: f64) {
    let played = &part.played;
    println!("\n{}", part.name);
    println!(
        "  outputs made {}, samples taken {}; FIFO from centre {:+} to {:+} samples",
        played.made, played.taken, played.fifo.least, played.fifo.most
    );
    println!(
        "  phase error {:+.3} to {:+.3} of ±{headroom} samples; the daemon's account off by up to {:.3}",
        played.phase.least,
        played.phase.most,
        part.worst_account(&performance.world)
    );
    let switching = part.switching(&performance.world);
    println!(
        "  {} settings took effect, {} changed what is run; {} at the first block end at or after their instant, {} heard late, {} wrong",
        switching.took_effect,
        switching.changed,
        switching.at_first_block_end,
        switching.late,
        switching.wrong
    );
    let mut reasons = std::collections::BTreeMap::<String, u32>::new();
    for (setting, _) in &part.settings {
        *reasons.entry(format!("{:?}", setting.reason)).or_default() += 1;
    }
    println!("  reasons: {reasons:?}");
    for frequency in part.frequencies() {
        println!(
            "  {} Hz in house time over {:.0} s: {:+.4} ppb end to end, {:+.4} ppb fitted (limit of the headroom {:.3} ppb)",
            frequency.hz,
            frequency.over_s,
            frequency.end_to_end_ppb,
            frequency.fitted_ppb,
            Performance::limit_ppb(headroom, frequency.over_s)
        );
    }
    let longest = part.longest();
    println!(
        "  spectra of {:.1} s with {} changes of L/M, Kaiser window with beta 22:",
        longest.len() as f64 / 48_000.0,
        longest.switches
    );
    for (tone, hz) in TONES_HZ.into_iter().enumerate() {
        tell_spurs(hz, &part.spectrum(tone));
        if let Some(most_db) = part.sawtooth_spur_db(hz) {
            println!("    by theory {most_db:.1} dB at most");
        }
    }
}

fn tell_spurs(hz: f64, spectrum: &Spectrum) {
    let (near, beside) = (spectrum.worst_spur(0.0), spectrum.worst_spur(BESIDE_HZ));
    println!(
        "  {hz} Hz: worst spur {:.1} dB at {:+.3} Hz (told from the tone from {:.3} Hz on), from {BESIDE_HZ} Hz on {:.1} dB at {:+.1} Hz",
        near.level_db,
        near.offset_hz,
        spectrum.resolution_hz(),
        beside.level_db,
        beside.offset_hz
    );
}
