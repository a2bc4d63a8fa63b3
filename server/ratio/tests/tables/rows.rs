//! Reading tables, and counting what is left out.

use std::collections::BTreeMap;

use num_bigint::BigUint;
use num_rational::Ratio;
use ratewright_ratio::Exact;

/// One line of a table by column name.
pub(crate) type Row = BTreeMap<String, String>;

/// All rows of a CSV table; there must be `count` of them.
pub(crate) fn csv(text: &str, count: usize) -> Vec<Row> {
    let mut reader = csv::Reader::from_reader(text.as_bytes());
    let rows: Vec<Row> = reader
        .deserialize()
        .map(|row| row.expect("a well-formed row"))
        .collect();
    assert_eq!(rows.len(), count);
    rows
}

/// All records of a JSON table; there must be `count` of them.
pub(crate) fn json(text: &str, count: usize) -> Vec<serde_json::Value> {
    let table: serde_json::Value = serde_json::from_str(text).expect("well-formed JSON");
    let records = table["records"]
        .as_array()
        .expect("a list of records")
        .clone();
    assert_eq!(records.len(), count);
    records
}

/// `p/q` or `p`, unsigned, of any size, reduced.
pub(crate) fn big(text: &str) -> Ratio<BigUint> {
    let (p, q) = text.split_once('/').unwrap_or((text, "1"));
    Ratio::new(p.parse().expect("digits"), q.parse().expect("digits"))
}

/// The same if it fits 128 bits, as written.
pub(crate) fn exact(text: &str) -> Option<Exact> {
    let (p, q) = text.split_once('/').unwrap_or((text, "1"));
    Some(Exact::new_raw(p.parse().ok()?, q.parse().ok()?))
}

/// The number itself, or 128-bit fractions just below and just above it.
pub(crate) fn enclosure(text: &str) -> Vec<Exact> {
    if let Some(exact) = exact(text) {
        return vec![exact];
    }
    let denominator = 1u128 << 96;
    let scaled = (big(text) * BigUint::from(denominator)).to_integer();
    let numerator = u128::try_from(scaled).expect("below 2^32");
    vec![
        Exact::new(numerator, denominator),
        Exact::new(numerator + 1, denominator),
    ]
}

/// A whole number in a column.
pub(crate) fn whole(row: &Row, column: &str) -> u64 {
    row[column]
        .parse()
        .unwrap_or_else(|_| panic!("{column} of {row:?}"))
}

/// Rows left out, by reason.
#[derive(Default)]
pub(crate) struct Skips(BTreeMap<&'static str, usize>);

impl Skips {
    pub(crate) fn note(&mut self, reason: &'static str) {
        *self.0.entry(reason).or_default() += 1;
    }

    /// Prints the counts and checks them, so that no row is left out unnoticed.
    pub(crate) fn close(self, table: &str, checked: usize, expected: &[(&'static str, usize)]) {
        println!("{table}: {checked} rows checked, skipped {:?}", self.0);
        assert_eq!(self.0.into_iter().collect::<Vec<_>>(), expected, "{table}");
    }
}
