//! From the server to the very sample, for a quarter of an hour of stream time; `cargo run --release
//! -p ratewright-tests --example sound` plays hours.

use ratewright_tests::sound::performance::{Part, Performance, perform};
use ratewright_tests::sound::programme::{Programme, TONES_HZ};

const PROGRAMME: Programme = Programme {
    settle_s: 600,
    stream_s: 900,
    pace: 100.0,
    headroom_samples: 0.5,
    phases: 13,
    spectrum_outputs: 1 << 16,
    seed: 7,
};

#[tokio::test(flavor = "multi_thread")]
async fn sound_crosses_between_two_clocks_within_the_headroom_and_in_tune() {
    let performance = perform(&PROGRAMME).await.expect("it plays");
    assert_eq!(performance.parts.len(), 3);
    for part in &performance.parts {
        stays_within_the_headroom(part, &performance);
        switches_at_the_first_block_end(part, &performance);
        is_in_tune(part);
        has_the_spurs_of_its_switching(part);
    }
}

fn stays_within_the_headroom(part: &Part, performance: &Performance) {
    let (name, played) = (part.name, &part.played);
    let headroom = PROGRAMME.headroom_samples;
    assert!(part.worst_phase() <= headroom, "{name}: {:?}", played.phase);
    // Whole samples: the headroom, and the one of which a part is taken.
    let fifo = &played.fifo;
    assert!(fifo.least >= -2 && fifo.most <= 2, "{name}: {fifo:?}");
    let least = u64::from(PROGRAMME.stream_s) * 48_000 - 10_000;
    assert!(played.taken > least, "{name}: {}", played.taken);
    // Lazy switching swings by a quarter of the headroom around what the account follows.
    let account = part.worst_account(&performance.world);
    assert!(account < 0.4 * headroom, "{name}: account off by {account}");
}

fn switches_at_the_first_block_end(part: &Part, performance: &Performance) {
    let switching = part.switching(&performance.world);
    assert!(switching.changed > 1, "{}: {switching:?}", part.name);
    assert_eq!(
        switching.at_first_block_end, switching.took_effect,
        "{}: {switching:?}",
        part.name
    );
    // Within a setting: the two ratios in turn, or the steps of the table; lazy switching holds each
    // of its two for longer than is recorded.
    let switches = part.longest().switches;
    assert!(part.name == "lazy" || switches > 0, "{}", part.name);
}

fn is_in_tune(part: &Part) {
    let frequencies = part.frequencies();
    assert_eq!(frequencies.len(), 2);
    for frequency in frequencies {
        let limit = Performance::limit_ppb(PROGRAMME.headroom_samples, frequency.over_s);
        // The slope of a line through phases within ±b is at most 3 b over the time.
        assert!(
            frequency.end_to_end_ppb.abs() <= limit && frequency.fitted_ppb.abs() <= 1.5 * limit,
            "{}: {frequency:?}, limit {limit} ppb",
            part.name
        );
    }
}

/// Nothing else is in the spectrum, as far from the tone as so short a recording tells.
fn has_the_spurs_of_its_switching(part: &Part) {
    for (tone, hz) in TONES_HZ.into_iter().enumerate() {
        let spur = part.spectrum(tone).worst_spur(0.0);
        match (part.name, part.sawtooth_spur_db(hz)) {
            ("stepping", Some(expected)) => {
                assert!(
                    (spur.level_db - expected).abs() < 0.5,
                    "{hz} Hz: {spur:?}, not {expected}"
                );
            }
            ("cadence", Some(most)) => {
                assert!(
                    spur.level_db < most + 0.5,
                    "{hz} Hz: {spur:?}, above {most}"
                );
            }
            ("lazy", None) => {}
            (name, expected) => panic!("{name}: {expected:?}"),
        }
    }
}
