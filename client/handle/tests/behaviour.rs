//! What the two threads see of each other.
#![cfg(not(loom))]

use ratewright_handle::{Cue, Reader, Realised, SettingNumber, Timescale, Writer, handle};
use ratewright_ratio::{Bounds, Cadence, Exact, Fraction, Stepping};

const SECOND_NS: i64 = 1_000_000_000;

fn single(l: u64, m: u64) -> Realised {
    Realised::Single(Fraction::new(l, m))
}

fn cadence(n: u128, d: u128) -> Cadence {
    let bounds = Bounds::new(256, 256).expect("in range");
    Cadence::new(&Exact::new(n, d), &bounds).expect("between two ratios")
}

/// A sink at exactly 48 kHz whose count was 0 at house time 0.
fn timescale(counter_epoch: u64) -> Timescale {
    Timescale {
        counter_epoch,
        sample: 0,
        house_ns: 0,
        rate_hz: 48_000.0,
        deviation_ns: 250.0,
    }
}

fn pair() -> (Writer, Reader) {
    let (mut writer, reader) = handle(&single(1, 1)).expect("no swing");
    writer.set_timescale(&timescale(0)).expect("a good one");
    (writer, reader)
}

fn cue(number: u64, realised: Realised, effect_s: i64) -> Cue {
    Cue {
        number: SettingNumber { epoch: 1, number },
        realised,
        effect_ns: effect_s * SECOND_NS,
        expiry_ns: (effect_s + 100) * SECOND_NS,
    }
}

#[test]
fn a_setting_takes_effect_at_the_first_block_end_at_or_after_its_instant() {
    let (mut writer, mut reader) = pair();
    writer.arm(&cue(1, single(3, 2), 2)).expect("newer");
    for before in [0, 48_000, 95_999] {
        assert_eq!(reader.next_block(before).l, 1);
    }
    assert_eq!((reader.setting(), writer.next_applied()), (None, None));
    assert_eq!(reader.next_block(96_007).l, 3);
    let applied = writer.next_applied().expect("it took effect");
    assert_eq!((applied.number.number, applied.sink_sample), (1, 96_007));
    assert_eq!(applied.house_ns, 2_000_145_833);
    assert_eq!((applied.counter_epoch, applied.deviation_ns), (0, 250.0));
    assert_eq!(writer.next_applied(), None);
}

#[test]
fn a_late_setting_takes_effect_at_the_next_block_end_and_says_when() {
    let (mut writer, mut reader) = pair();
    reader.next_block(480_000);
    writer.arm(&cue(1, single(3, 2), 2)).expect("newer");
    assert_eq!(reader.next_block(480_001).l, 3);
    let applied = writer.next_applied().expect("it took effect");
    assert_eq!(applied.sink_sample, 480_001);
}

#[test]
fn each_of_several_that_wait_comes_at_its_own_instant() {
    let (mut writer, mut reader) = pair();
    for number in 1..=4 {
        let run = single(number + 1, 1);
        writer.arm(&cue(number, run, number as i64)).expect("newer");
    }
    let run: Vec<u64> = (0..6).map(|s| reader.next_block(s * 48_000).l).collect();
    assert_eq!(run, [1, 2, 3, 4, 5, 5]);
    let applied: Vec<u64> = std::iter::from_fn(|| writer.next_applied())
        .map(|applied| applied.number.number)
        .collect();
    assert_eq!(applied, [1, 2, 3, 4]);
}

#[test]
fn of_two_that_are_due_the_newer_is_run_and_the_older_never() {
    let (mut writer, mut reader) = pair();
    writer.arm(&cue(1, single(2, 1), 5)).expect("newer");
    writer.arm(&cue(2, single(3, 1), 4)).expect("newer");
    assert_eq!(reader.next_block(4 * 48_000).l, 3);
    assert_eq!(reader.next_block(5 * 48_000).l, 3);
    let refused = writer.arm(&cue(2, single(4, 1), 6)).expect_err("not newer");
    assert!(refused.to_string().contains("newer than 1-2"), "{refused}");
    let new_epoch = SettingNumber {
        epoch: 2,
        number: 1,
    };
    let restored = Cue {
        number: new_epoch,
        ..cue(1, single(5, 1), 6)
    };
    writer.arm(&restored).expect("a later epoch is newer");
    assert_eq!(reader.next_block(6 * 48_000).l, 5);
    assert_eq!(reader.setting(), Some(new_epoch));
}

#[test]
fn a_timescale_that_moves_back_takes_nothing_back() {
    let (mut writer, mut reader) = pair();
    writer.arm(&cue(1, single(2, 1), 1)).expect("newer");
    assert_eq!(reader.next_block(48_000).l, 2);
    let moved = Timescale {
        sample: 10_000,
        ..timescale(0)
    };
    writer.set_timescale(&moved).expect("a good one");
    assert_eq!(reader.next_block(48_001).l, 2);
    writer.arm(&cue(2, single(3, 1), 2)).expect("newer");
    assert_eq!(reader.next_block(96_000).l, 2, "2 s is sample 106 000 now");
    assert_eq!(reader.next_block(106_000).l, 3);
}

#[test]
fn past_expiry_the_average_is_kept_and_the_reader_says_so() {
    let (mut writer, mut reader) = pair();
    let wanted = cadence(1_000_037, 1_000_000);
    writer
        .arm(&cue(1, Realised::Cadence(wanted), 0))
        .expect("newer");
    let mut sink_sample = 0;
    while sink_sample <= 100 * 48_000 {
        assert!(!reader.is_expired(), "{sink_sample}");
        sink_sample += reader.next_block(sink_sample).outputs;
    }
    let (mut outputs, mut inputs) = (0u64, 0u64);
    for _ in 0..1_000_000 {
        let block = reader.next_block(sink_sample + outputs);
        assert!(reader.is_expired());
        outputs += block.outputs;
        inputs += block.m;
    }
    let wanted_outputs = inputs as f64 * 1.000_037;
    assert!((outputs as f64 - wanted_outputs).abs() < 2.0);

    let renewal = Cue {
        expiry_ns: i64::MAX,
        ..cue(2, Realised::Cadence(wanted), 0)
    };
    writer.arm(&renewal).expect("newer");
    reader.next_block(sink_sample + outputs);
    assert!(!reader.is_expired());
}

#[test]
fn settings_wait_while_the_count_of_the_sink_is_not_known() {
    let (mut writer, mut reader) = handle(&single(1, 1)).expect("no swing");
    writer.arm(&cue(1, single(2, 1), 0)).expect("newer");
    assert_eq!(reader.next_block(1 << 40).l, 1);
    writer.set_timescale(&timescale(0)).expect("a good one");
    assert_eq!(reader.next_block(1).l, 2);

    reader.restart(1);
    writer.arm(&cue(2, single(3, 1), 0)).expect("newer");
    assert_eq!(reader.next_block(5).l, 2, "the timescale is of another run");
    writer.set_timescale(&timescale(1)).expect("a good one");
    assert_eq!(reader.next_block(6).l, 3);
    let applied: Vec<u64> = std::iter::from_fn(|| writer.next_applied())
        .map(|applied| applied.counter_epoch)
        .collect();
    assert_eq!(applied, [0, 1]);
    let refused = writer.set_timescale(&timescale(0)).expect_err("an old run");
    assert!(
        refused.to_string().starts_with("counter_epoch"),
        "{refused}"
    );
}

#[test]
fn reports_that_find_no_room_come_later_and_the_newest_is_never_lost() {
    let (mut writer, mut reader) = pair();
    for number in 1..=40 {
        writer
            .arm(&cue(number, single(number, 1), 0))
            .expect("newer");
        reader.next_block(number);
    }
    let mut applied: Vec<u64> = std::iter::from_fn(|| writer.next_applied())
        .map(|applied| applied.number.number)
        .collect();
    assert_eq!(applied, (1..=16).collect::<Vec<u64>>());
    writer.set_timescale(&timescale(0)).expect("a good one");
    reader.next_block(41);
    applied.extend(writer.next_applied().map(|applied| applied.number.number));
    assert_eq!(applied.last(), Some(&40));
}

#[test]
fn a_trim_moves_the_average_until_the_next_setting_and_is_no_change_of_setting() {
    let (mut writer, mut reader) = pair();
    assert!(writer.trim(5).is_err(), "there is nothing to trim");
    let stepping = Stepping::new(&Exact::new(1_000_037, 1_000_000), 512).expect("enough phases");
    writer
        .arm(&cue(1, Realised::Stepping(stepping), 0))
        .expect("newer");
    let advanced = |reader: &mut Reader, outputs: u64| -> u64 {
        (0..outputs).map(|_| reader.next_block(1).m).sum()
    };
    let outputs = 10_000_000;
    let plain = advanced(&mut reader, outputs) as f64;
    writer.trim(20_000).expect("in reach");
    let trimmed = advanced(&mut reader, outputs) as f64;
    assert!(
        ((plain / trimmed - 1.0) * 1e6 - 20.0).abs() < 0.01,
        "{plain} {trimmed}"
    );
    assert_eq!(
        reader.setting(),
        Some(SettingNumber {
            epoch: 1,
            number: 1
        })
    );
    assert!(writer.next_applied().is_some() && writer.next_applied().is_none());
    writer
        .arm(&cue(2, Realised::Stepping(stepping), 0))
        .expect("newer");
    assert!((advanced(&mut reader, outputs) as f64 - plain).abs() <= 1.0);
    assert_eq!(reader.setting().map(|setting| setting.number), Some(2));
}

#[test]
fn the_level_that_was_left_last_is_read() {
    let (mut writer, mut reader) = pair();
    assert_eq!(writer.level(), None);
    reader.next_block(7);
    reader.set_level(-1.5);
    reader.set_level(2.25);
    for _ in 0..2 {
        let level = writer.level().expect("it was left");
        assert_eq!((level.level_samples, level.sink_sample), (2.25, 7));
    }
}

#[test]
fn two_threads_at_full_speed_never_mix_settings_nor_go_back() {
    const SETTINGS: u64 = 20_000;
    let (mut writer, mut reader) = pair();
    let start = std::sync::Arc::new(std::sync::Barrier::new(2));
    let both = start.clone();
    let writing = std::thread::Builder::new().spawn(move || {
        both.wait();
        let mut reports = 0;
        let mut newest = 0;
        for number in 1..=SETTINGS {
            // The number is in the ratio, so that a mixture of two settings shows.
            writer
                .arm(&cue(number, single(number, 1), 0))
                .expect("newer");
            while let Some(applied) = writer.next_applied() {
                assert!(applied.number.number > newest);
                newest = applied.number.number;
                reports += 1;
            }
        }
        (writer, reports)
    });
    let writing = writing.expect("a thread");
    start.wait();
    let (mut newest, mut changes) = (1, 0);
    let mut sink_sample = 0;
    while newest < SETTINGS {
        sink_sample += 1;
        let block = reader.next_block(sink_sample);
        assert!(block.l >= newest, "{} after {newest}", block.l);
        if let Some(setting) = reader.setting() {
            assert_eq!((block.l, block.outputs), (setting.number, setting.number));
        }
        changes += u64::from(block.l > newest);
        newest = block.l;
    }
    let (_, reports) = writing.join().expect("it does not panic");
    assert!(changes > 0 && reports <= changes + 1, "{changes} {reports}");
}
