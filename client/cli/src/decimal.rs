//! Exact decimals: times and drifts as they are typed, without a rounding in between.

/// A decimal number `digits · 10^-places`.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) struct Decimal {
    pub(crate) digits: i128,
    pub(crate) places: u32,
}

impl Decimal {
    /// Reads `12`, `-0.5`, `+3.25`. No exponent, at most 30 digits.
    pub(crate) fn parse(text: &str) -> Option<Self> {
        let (negative, body) = match text.strip_prefix('-') {
            Some(body) => (true, body),
            None => (false, text.strip_prefix('+').unwrap_or(text)),
        };
        let (whole, decimals) = body.split_once('.').unwrap_or((body, ""));
        let only_digits = whole
            .bytes()
            .chain(decimals.bytes())
            .all(|byte| byte.is_ascii_digit());
        if whole.is_empty() || !only_digits || body.ends_with('.') || body.len() > 31 {
            return None;
        }
        let digits: i128 = format!("{whole}{decimals}").parse().ok()?;
        let places = u32::try_from(decimals.len()).ok()?;
        Some(Self {
            digits: if negative { -digits } else { digits },
            places,
        })
    }

    /// The nearest double.
    pub(crate) fn to_f64(self) -> f64 {
        // Both are exact up to 2^53 and 10^22, so the quotient is rounded once for typed numbers.
        self.digits as f64 / 10_f64.powi(self.places.cast_signed())
    }

    /// This times `scale`, rounded to the nearest whole number; `None` beyond 64 bits.
    pub(crate) fn scaled(self, scale: i128) -> Option<i64> {
        let divisor = 10_i128.checked_pow(self.places)?;
        let product = self.digits.checked_mul(scale)?;
        let rounded = product.checked_add(divisor / 2)?.div_euclid(divisor);
        i64::try_from(rounded).ok()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn seconds_become_nanoseconds_exactly() {
        let ns = |text: &str| Decimal::parse(text).and_then(|x| x.scaled(1_000_000_000));
        assert_eq!(ns("1.000000001"), Some(1_000_000_001));
        assert_eq!(ns("-3599"), Some(-3_599_000_000_000));
        assert_eq!(ns("0.0000000006"), Some(1));
        assert_eq!(ns("99999999999999"), None);
    }

    #[test]
    fn only_plain_decimals_are_read() {
        for text in ["", "1e3", "1.", ".5", "--1", "1 2", "nan", "0x10", "1.2.3"] {
            assert_eq!(Decimal::parse(text), None, "{text:?}");
        }
        assert_eq!(
            Decimal::parse("-12.50"),
            Some(Decimal {
                digits: -1_250,
                places: 2
            })
        );
        assert_eq!(Decimal::parse("12.5").map(Decimal::to_f64), Some(12.5));
    }
}
