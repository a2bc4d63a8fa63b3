//! What a block costs the audio thread: `cargo bench -p ratewright-handle`.
//!
//! Each row is the best of many short interleaved rounds in this run, with the median beside it: on a
//! machine with other work the best is what the code takes, the median what the machine leaves of it. The floor is the sequence alone, without
//! anyone to change it; the rivals keep it behind an uncontended lock, or look for a new one through
//! an `ArcSwap` as the handle does through its cells.
#![allow(clippy::print_stdout, reason = "a benchmark prints")]
#![allow(clippy::disallowed_methods, reason = "a benchmark reads the clock")]

use std::hint::black_box;
use std::sync::{Arc, Mutex};
use std::time::Instant;

use arc_swap::ArcSwap;
use ratewright_handle::{Cue, Reader, Realised, SettingNumber, Timescale, Writer, handle};
use ratewright_ratio::{Bounds, Cadence, Exact, Fraction, Stepping};

const ROUNDS: usize = 501;
const CALLS: u64 = 10_000;

fn main() {
    println!("ns a call, best and median of {ROUNDS} interleaved rounds of {CALLS}\n");
    nothing_changed();
    changes();
}

fn cadence(add: u64) -> Cadence {
    let bounds = Bounds::new(256, 256).expect("in range");
    let wanted = Exact::new(1_000_037 + u128::from(add), 1_000_000);
    Cadence::new(&wanted, &bounds).expect("between two ratios")
}

/// A handle that runs this, with a timescale and an expiry far away.
fn running(realised: Realised) -> (Writer, Reader) {
    let (mut writer, mut reader) = handle(&realised).expect("a good one");
    writer.set_timescale(&timescale(0)).expect("a good one");
    let number = SettingNumber {
        epoch: 1,
        number: 1,
    };
    writer.arm(&cue(number, realised)).expect("newer");
    reader.next_block(0);
    (writer, reader)
}

fn timescale(sample: u64) -> Timescale {
    Timescale {
        counter_epoch: 0,
        sample,
        house_ns: 0,
        rate_hz: 48_000.0,
        deviation_ns: 0.0,
    }
}

fn cue(number: SettingNumber, realised: Realised) -> Cue {
    Cue {
        number,
        realised,
        effect_ns: i64::MIN,
        expiry_ns: i64::MAX,
    }
}

/// Takes the numbers one by one, as a resampler does. Taken as one piece of memory, they would wait
/// for each other's stores.
#[inline]
fn use_up(l: u64, m: u64) {
    black_box(l);
    black_box(m);
}

#[inline]
fn use_up_ratio(ratio: Fraction) {
    use_up(*ratio.numer(), *ratio.denom());
}

/// A row: what is measured, and a round of it.
type Row<'a> = (&'static str, Box<dyn FnMut() + 'a>);

/// A round of blocks from a handle.
fn blocks(mut pair: (Writer, Reader)) -> Box<dyn FnMut()> {
    let mut begun = 0u64;
    Box::new(move || {
        let mut sink_sample = begun;
        for _ in 0..CALLS {
            let block = pair.1.next_block(sink_sample);
            sink_sample += block.outputs;
            use_up(block.l, block.m);
        }
        begun = sink_sample;
    })
}

fn nothing_changed() {
    let pair = cadence(0);
    let mut alone = pair.start();
    let behind_a_lock = Mutex::new(pair.start());
    let swapped = ArcSwap::new(Arc::new((1u64, pair)));
    let (mut number, mut looked_up) = (1, pair.start());
    let stepping = Stepping::new(&Exact::new(1_000_037, 1_000_000), 512).expect("enough phases");
    let lazy = Realised::Lazy {
        cadence: pair,
        swing_samples: 2.0,
    };
    let rows: Vec<Row<'_>> = vec![
        (
            "floor: the cadence alone",
            Box::new(|| {
                for _ in 0..CALLS {
                    use_up_ratio(alone.next_block());
                }
            }),
        ),
        ("handle, cadence", blocks(running(Realised::Cadence(pair)))),
        ("handle, lazy", blocks(running(lazy))),
        (
            "handle, stepping",
            blocks(running(Realised::Stepping(stepping))),
        ),
        (
            "handle, single",
            blocks(running(Realised::Single(Fraction::new(160, 147)))),
        ),
        (
            "uncontended Mutex, cadence",
            Box::new(|| {
                for _ in 0..CALLS {
                    let mut state = behind_a_lock.lock().expect("nobody panics");
                    use_up_ratio(state.next_block());
                }
            }),
        ),
        (
            "ArcSwap, cadence",
            Box::new(|| {
                for _ in 0..CALLS {
                    let newest = swapped.load();
                    if newest.0 != number {
                        (number, looked_up) = (newest.0, newest.1.start());
                    }
                    use_up_ratio(looked_up.next_block());
                }
            }),
        ),
    ];
    let timings = timings(rows);
    let handle_ns = timings[1].best;
    println!(
        "nothing changed{:>29}  median  best over the handle's",
        "best"
    );
    for Timing { name, best, median } in timings {
        println!(
            "  {name:<34}{best:>8.2}{median:>8.2}{:>10.2}",
            best / handle_ns
        );
    }
}

fn changes() {
    let mut sending = running(Realised::Cadence(cadence(0)));
    let mut hearing = running(Realised::Cadence(cadence(0)));
    let mut arming = running(Realised::Cadence(cadence(0)));
    let mut changing = running(Realised::Cadence(cadence(0)));
    let cues: Vec<Realised> = (0..64).map(|add| Realised::Cadence(cadence(add))).collect();
    let arm = |writer: &mut Writer, number: &mut u64| {
        *number += 1;
        let realised = cues[*number as usize % cues.len()];
        let number = SettingNumber {
            epoch: 1,
            number: *number,
        };
        writer.arm(&cue(number, realised)).expect("newer");
    };
    let (mut armed, mut changed) = (1, 1);
    let rows: Vec<Row<'_>> = vec![
        (
            "set_timescale",
            Box::new(|| {
                for sample in 0..CALLS {
                    let sent = sending.0.set_timescale(black_box(&timescale(sample)));
                    sent.expect("a good one");
                }
            }),
        ),
        (
            "set_timescale, next_block",
            Box::new(|| {
                for sample in 0..CALLS {
                    let sent = hearing.0.set_timescale(black_box(&timescale(sample)));
                    sent.expect("a good one");
                    black_box(hearing.1.next_block(sample));
                }
            }),
        ),
        (
            "arm, next_applied",
            Box::new(|| {
                for _ in 0..CALLS {
                    arm(&mut arming.0, &mut armed);
                    black_box(arming.0.next_applied());
                }
            }),
        ),
        (
            "arm, next_block, next_applied",
            Box::new(|| {
                for sample in 0..CALLS {
                    arm(&mut changing.0, &mut changed);
                    black_box(changing.1.next_block(sample));
                    assert!(changing.0.next_applied().is_some());
                }
            }),
        ),
    ];
    let timings = timings(rows);
    println!("\nsomething changed{:>27}  median", "best");
    for Timing { name, best, median } in &timings {
        println!("  {name:<34}{best:>8.2}{median:>8.2}");
    }
    println!("so of next_block");
    let hears = timings[1].best - timings[0].best;
    let changes = timings[3].best - timings[2].best;
    println!("  that hears a timescale{hears:>20.2}");
    println!("  that changes the cadence{changes:>18.2}");
}

/// A row's ns a call.
struct Timing {
    name: &'static str,
    best: f64,
    median: f64,
}

/// Runs all rows in turn, and again.
fn timings(mut rows: Vec<Row<'_>>) -> Vec<Timing> {
    let mut rounds: Vec<Vec<f64>> = vec![Vec::new(); rows.len()];
    for _ in 0..ROUNDS {
        for (row, rounds) in rows.iter_mut().zip(&mut rounds) {
            let start = Instant::now();
            (row.1)();
            rounds.push(start.elapsed().as_nanos() as f64 / CALLS as f64);
        }
    }
    let timing = |(row, mut rounds): (&Row<'_>, Vec<f64>)| {
        rounds.sort_by(f64::total_cmp);
        Timing {
            name: row.0,
            best: rounds[0],
            median: rounds[rounds.len() / 2],
        }
    };
    rows.iter().zip(rounds).map(timing).collect()
}
