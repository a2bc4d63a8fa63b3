//! Exact numbers: rates, ratios, fractions and the ends of brackets.

use num_rational::Ratio;
use ratewright_proto::v1;
use ratewright_ratio::{Bracket, Exact, Fraction, Node};

use super::{WireError, required};

const RATE: &str = "a rate with numerator and denominator of at least 1";
const POSITIVE: &str = "a positive fraction with parts below 2^64, as decimal digits";
const PART: &str = "decimal digits below 2^64";

/// A rate in Hz.
pub(super) fn rate(field: &str, rate: Option<v1::Rate>) -> Result<Ratio<u64>, WireError> {
    let rate = required(field, rate)?;
    if rate.numerator == 0 || rate.denominator == 0 {
        return Err(WireError::new(field, rate, RATE));
    }
    Ok(Ratio::new(rate.numerator, rate.denominator))
}

/// A rate in Hz, for the wire.
pub(super) fn to_rate(rate: Ratio<u64>) -> v1::Rate {
    v1::Rate {
        numerator: *rate.numer(),
        denominator: *rate.denom(),
    }
}

/// L/M, in lowest terms as it stands.
pub(super) fn ratio(field: &str, ratio: Option<v1::Ratio>) -> Result<Fraction, WireError> {
    let ratio = required(field, ratio)?;
    if ratio.l == 0 || ratio.m == 0 {
        return Err(WireError::new(
            field,
            ratio,
            "a ratio with l and m of at least 1",
        ));
    }
    let lowest = Fraction::new(ratio.l, ratio.m);
    if (*lowest.numer(), *lowest.denom()) != (ratio.l, ratio.m) {
        return Err(WireError::new(field, ratio, "a ratio in lowest terms"));
    }
    Ok(lowest)
}

/// A positive fraction.
pub(super) fn fraction(
    field: &str,
    fraction: Option<&v1::Fraction>,
) -> Result<Fraction, WireError> {
    let wire = required(field, fraction)?;
    let parts = (
        wire.numerator.parse::<u64>(),
        wire.denominator.parse::<u64>(),
    );
    match parts {
        (Ok(numerator @ 1..), Ok(denominator @ 1..)) => Ok(Fraction::new(numerator, denominator)),
        _ => Err(WireError::new(field, wire, POSITIVE)),
    }
}

/// A positive fraction of up to 128 bits, as an end of an interval.
pub(super) fn exact(field: &str, fraction: Option<&v1::Fraction>) -> Result<Exact, WireError> {
    let wire = required(field, fraction)?;
    match (
        wire.numerator.parse::<u128>(),
        wire.denominator.parse::<u128>(),
    ) {
        (Ok(numerator @ 1..), Ok(denominator @ 1..)) => Ok(Exact::new(numerator, denominator)),
        _ => Err(WireError::new(
            field,
            wire,
            "a positive fraction with parts below 2^128",
        )),
    }
}

/// A node of the Stern–Brocot tree, the sentinels 0/1 and 1/0 included, as it stands.
pub(super) fn node(field: &str, fraction: Option<&v1::Fraction>) -> Result<Node, WireError> {
    let wire = required(field, fraction)?;
    match (wire.numerator.parse(), wire.denominator.parse()) {
        (Ok(l), Ok(m)) => Ok(Node { l, m }),
        _ => Err(WireError::new(field, wire, PART)),
    }
}

/// A bracket.
pub(super) fn bracket(field: &str, bracket: &v1::Bracket) -> Result<Bracket, WireError> {
    Ok(Bracket {
        below: node(&format!("{field}.below"), bracket.below.as_ref())?,
        above: node(&format!("{field}.above"), bracket.above.as_ref())?,
    })
}
