//! Every ordered pair of the trade's rates gives its lowest terms through the command itself.

use std::process::Command;

use num_rational::Ratio;
use serde_json::Value;

const HZ: [u64; 13] = [
    8_000, 11_025, 12_000, 16_000, 22_050, 24_000, 32_000, 44_100, 48_000, 88_200, 96_000, 176_400,
    192_000,
];

/// A rate as it is typed, and exactly.
fn rates() -> Vec<(String, Ratio<u64>)> {
    let plain = HZ.map(|hz| (hz.to_string(), Ratio::from_integer(hz)));
    let pulled = HZ.map(|hz| (format!("{hz}*1000/1001"), Ratio::new(hz * 1_000, 1_001)));
    plain.into_iter().chain(pulled).collect()
}

fn plan(from: &str, to: &str) -> Value {
    // Large enough for every pair: 1000/1001 of the worst of them.
    let bounds = ["--max-l", "10000000", "--max-m", "10000000"];
    let output = Command::new(env!("CARGO_BIN_EXE_ratewright"))
        .args(["plan", "--json", "--from", from, "--to", to])
        .args(bounds)
        .output()
        .expect("it starts");
    assert!(output.status.success(), "{from} to {to}: {output:?}");
    serde_json::from_slice(&output.stdout).expect("JSON")
}

/// The value wanted is exact arithmetic: sink rate over source rate, reduced.
#[test]
fn pairs_and_their_pulls_are_in_lowest_terms() {
    let rates = rates();
    for (from, from_hz) in &rates {
        for (to, to_hz) in &rates {
            let (plan, wanted) = (plan(from, to), to_hz / from_hz);
            let (l, m) = (&plan["best"]["l"], &plan["best"]["m"]);
            assert_eq!(l.as_u64(), Some(*wanted.numer()), "L from {from} to {to}");
            assert_eq!(m.as_u64(), Some(*wanted.denom()), "M from {from} to {to}");
            assert_eq!(plan["best"]["exact"], true, "{from} to {to}");
        }
    }
}

/// The same against a table that was made elsewhere; its source stands in its first lines.
#[test]
fn pairs_agree_with_the_table() {
    let table = include_str!("data/rate_pairs.csv");
    let mut checked = 0;
    for line in table.lines().filter(|line| !line.starts_with('#')).skip(1) {
        let fields: Vec<&str> = line.split(',').collect();
        let [from, to, l, m] = fields[..] else {
            panic!("four fields: {line}")
        };
        let plan = plan(from, to);
        assert_eq!(plan["best"]["l"].to_string(), l, "L from {from} to {to}");
        assert_eq!(plan["best"]["m"].to_string(), m, "M from {from} to {to}");
        checked += 1;
    }
    assert_eq!(checked, CHECKED, "rows of the table");
}

/// 16 rates that the table and this test share, each with each other.
const CHECKED: usize = 240;
