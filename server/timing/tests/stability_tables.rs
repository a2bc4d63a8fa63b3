//! Stability statistics against values computed outside this project; sources in
//! `tests/tables/README.md`.

use ratewright_timing::stability::{Kind, deviation, mtie, tie_rms};

fn rows(table: &'static str) -> impl Iterator<Item = Vec<&'static str>> {
    table.lines().skip(1).map(|line| line.split(',').collect())
}

/// The 1000-point data: n ← 16807·n mod (2³¹ − 1) from 1234567890, y = n/(2³¹ − 1) (SP 1065, 12.4).
fn generated_frequency() -> Vec<f64> {
    let mut n: u64 = 1_234_567_890;
    (0..1000)
        .map(|_| {
            let y = n as f64 / 2_147_483_647.0;
            n = 16_807 * n % 2_147_483_647;
            y
        })
        .collect()
}

/// The nine values of NBS Monograph 140, annex 8.E (SP 1065, 12.3).
const NBS14: [f64; 9] = [
    892.0, 809.0, 823.0, 798.0, 671.0, 644.0, 883.0, 903.0, 677.0,
];

fn phase_of(frequency: &[f64]) -> Vec<f64> {
    let mut phase = vec![0.0];
    for y in frequency {
        phase.push(phase[phase.len() - 1] + y);
    }
    phase
}

fn data_set(name: &str) -> Vec<f64> {
    let count = 256;
    match name {
        "lcg_1000" | "lcg_1000_phase" => phase_of(&generated_frequency()),
        "lcg_1000_phase_detrended" => {
            let frequency = generated_frequency();
            let mean = frequency.iter().sum::<f64>() / 1000.0;
            let phase = phase_of(&frequency);
            phase
                .iter()
                .enumerate()
                .map(|(k, x)| x - k as f64 * mean)
                .collect()
        }
        "nbs14_10" | "nbs14_10_phase" => phase_of(&NBS14),
        "ramp_25ppm" => (0..count).map(|k| k as f64 * 25e-6).collect(),
        "sine_100ns_T64" => (0..count)
            .map(|k| 100e-9 * libm::sin(core::f64::consts::TAU * k as f64 / 64.0))
            .collect(),
        "step_1us_at_128" => (0..count)
            .map(|k| if k >= 128 { 1e-6 } else { 0.0 })
            .collect(),
        "impulse_1us_at_100" => (0..count)
            .map(|k| if k == 100 { 1e-6 } else { 0.0 })
            .collect(),
        "sawtooth_int" => (0..count).map(|k| ((37 * k) % 100) as f64 * 1e-9).collect(),
        "node_clock" => include_str!("../../../tests/data/node_clock_at_gps_pps_1h.csv")
            .lines()
            .skip(1)
            .enumerate()
            .map(|(k, line)| {
                let us: f64 = line.split(',').nth(1).unwrap().parse().unwrap();
                (us - 1e6 * k as f64) * 1e-6
            })
            .collect(),
        other => panic!("no data set {other}"),
    }
}

fn kind(statistic: &str) -> Kind {
    match statistic {
        "oadev" => Kind::Allan,
        "mdev" => Kind::ModifiedAllan,
        "ohdev" => Kind::Hadamard,
        "tdev" => Kind::Time,
        other => panic!("no statistic {other}"),
    }
}

fn assert_near(what: &str, value: f64, expected: f64) {
    let off = (value - expected).abs();
    assert!(
        off <= 2e-9 * expected.abs() + 1e-21,
        "{what}: {value} against {expected}"
    );
}

#[test]
fn deviations_of_the_published_data_sets() {
    let mut count = 0;
    for row in rows(include_str!("tables/deviations.csv")) {
        let [name, statistic, m, terms, value] = row[..] else {
            panic!("{row:?}")
        };
        let phase = data_set(name);
        let got = deviation(kind(statistic), &phase, 1.0, m.parse().unwrap()).unwrap();
        assert_near(&row.join(","), got.value, value.parse().unwrap());
        assert_eq!(got.terms, terms.parse::<usize>().unwrap(), "{row:?}");
        count += 1;
    }
    assert!(count >= 40, "{count}");
}

#[test]
fn interval_errors_of_the_defined_data_sets() {
    let mut count = 0;
    for row in rows(include_str!("tables/mtie_tierms.csv")) {
        let [name, statistic, n, value] = row[..] else {
            panic!("{row:?}")
        };
        let phase = data_set(name);
        let n = n.parse().unwrap();
        let got = if statistic == "mtie" {
            mtie(&phase, n)
        } else {
            tie_rms(&phase, n)
        };
        assert_near(&row.join(","), got.unwrap(), value.parse().unwrap());
        count += 1;
    }
    assert_eq!(count, 176);
}

#[test]
fn statistics_of_the_recorded_microcontroller_clock() {
    let phase = data_set("node_clock");
    for row in rows(include_str!("tables/node_clock.csv")) {
        let [_, statistic, m, _, value] = row[..] else {
            panic!("{row:?}")
        };
        let (m, expected) = (m.parse().unwrap(), value.parse::<f64>().unwrap());
        if statistic == "mtie_us" {
            let us = mtie(&phase, m).unwrap() * 1e6;
            assert!((us - expected).abs() < 1e-4, "{row:?}: {us}");
        } else {
            let got = deviation(kind(statistic), &phase, 1.0, m).unwrap().value;
            assert!((got - expected).abs() < 1e-6 * expected, "{row:?}: {got}");
        }
    }
}

#[test]
fn too_short_a_record_has_no_figures() {
    assert_eq!(deviation(Kind::Allan, &[0.0, 1.0], 1.0, 1), None);
    assert_eq!(deviation(Kind::ModifiedAllan, &[], 1.0, 1), None);
    assert_eq!(deviation(Kind::Hadamard, &[0.0; 9], 1.0, 0), None);
    assert_eq!(mtie(&[0.0; 4], 4), None);
    assert_eq!(tie_rms(&[0.0; 4], 0), None);
}
