//! Rates and fractions.

use num_rational::Ratio;
use ratewright_proto::v1;
use ratewright_ratio::Fraction;

use crate::refused::Violation;

const MAX_NUMERATOR: u64 = 1_000_000_000_000;
const MAX_DENOMINATOR: u64 = 1_000_000_000;

/// A rate in Hz, in lowest terms.
pub(crate) fn rate(field: &str, sent: Option<v1::Rate>) -> Result<Ratio<u64>, Violation> {
    let Some(v1::Rate {
        numerator,
        denominator,
    }) = sent
    else {
        return Err(Violation::new(
            field,
            "absent",
            "a rate in Hz, numerator / denominator",
        ));
    };
    let part = |name: &str, value: u64, max: u64| {
        if (1..=max).contains(&value) {
            Ok(value)
        } else {
            Err(Violation::new(
                format!("{field}.{name}"),
                value,
                format!("1 to {max}"),
            ))
        }
    };
    let numerator = part("numerator", numerator, MAX_NUMERATOR)?;
    Ok(Ratio::new(
        numerator,
        part("denominator", denominator, MAX_DENOMINATOR)?,
    ))
}

pub(crate) fn rate_to_wire(rate: &Ratio<u64>) -> v1::Rate {
    v1::Rate {
        numerator: *rate.numer(),
        denominator: *rate.denom(),
    }
}

pub(crate) fn ratio_to_wire(ratio: &Fraction) -> v1::Ratio {
    v1::Ratio {
        l: *ratio.numer(),
        m: *ratio.denom(),
    }
}

pub(crate) fn fraction_to_wire<T: ToString>(fraction: &Ratio<T>) -> v1::Fraction {
    v1::Fraction {
        numerator: fraction.numer().to_string(),
        denominator: fraction.denom().to_string(),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_rate_is_reduced_and_checked() {
        let sent = |numerator, denominator| {
            Some(v1::Rate {
                numerator,
                denominator,
            })
        };
        assert_eq!(
            rate("r", sent(48_000_000, 1000)),
            Ok(Ratio::from_integer(48_000))
        );
        let zero = rate("clock.nominal_rate", sent(48_000, 0)).unwrap_err();
        assert_eq!(zero.field, "clock.nominal_rate.denominator");
        assert_eq!(zero.value, "0");
        assert_eq!(rate("r", sent(0, 1)).unwrap_err().field, "r.numerator");
        assert_eq!(rate("r", None).unwrap_err().value, "absent");
    }
}
