//! The audio thread allocates nothing, whatever the writer does.
#![cfg(not(loom))]

use ratewright_handle::{Cue, Realised, SettingNumber, Timescale, handle};
use ratewright_ratio::{Bounds, Cadence, Exact, Fraction, Stepping};

/// Each kind of realisation, with another average for each number.
fn realised(number: u64) -> Realised {
    let bounds = Bounds::new(256, 256).expect("in range");
    let wanted = Exact::new(1_000_037 + u128::from(number), 1_000_000);
    let cadence = Cadence::new(&wanted, &bounds).expect("between two ratios");
    match number % 4 {
        0 => Realised::Single(Fraction::new(160, 147)),
        1 => Realised::Cadence(cadence),
        2 => Realised::Stepping(Stepping::new(&wanted, 512).expect("enough phases")),
        _ => Realised::Lazy {
            cadence,
            swing_samples: 2.0,
        },
    }
}

#[test]
fn no_block_allocates_when_nothing_changes_nor_when_everything_does() {
    let (mut writer, mut reader) = handle(&realised(0)).expect("a good one");
    let mut sink_sample = 0u64;
    let mut blocks = 0u64;
    for number in 1..=2_000 {
        let house_ns = number as i64 * 1_000_000;
        writer
            .set_timescale(&Timescale {
                counter_epoch: 0,
                sample: sink_sample,
                house_ns,
                rate_hz: 48_000.0,
                deviation_ns: 100.0,
            })
            .expect("a good one");
        writer
            .arm(&Cue {
                number: SettingNumber { epoch: 1, number },
                realised: realised(number),
                effect_ns: house_ns,
                expiry_ns: house_ns + 100_000,
            })
            .expect("newer");
        let counted = allocation_counter::measure(|| {
            for _ in 0..100 {
                sink_sample += reader.next_block(sink_sample).outputs;
                reader.set_level(0.25);
                blocks += u64::from(!reader.is_expired());
            }
        });
        assert_eq!(counted.count_total, 0, "setting {number}: {counted:?}");
        assert_eq!(reader.setting().map(|setting| setting.number), Some(number));
        while writer.next_applied().is_some() {}
    }
    assert!(blocks > 0);
    // The counter counts.
    let counted = allocation_counter::measure(|| drop(std::hint::black_box(Box::new(blocks))));
    assert_eq!(counted.count_total, 1);
}
