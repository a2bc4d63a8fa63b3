//! Drifts as they are typed: a centre and perhaps an interval.

use ratewright_ratio::Exact;

use crate::decimal::Decimal;

/// Largest drift, either way: the 1 % of the contract.
const LARGEST_PPM: f64 = 10_000.0;

/// A drift in ppm, exact, with the half-width of its interval.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) struct Drift {
    centre_ppm: Decimal,
    half_width_ppm: Decimal,
}

impl Drift {
    /// Reads `12.5`, `-3`, `12.5±0.3` or `12.5+-0.3`.
    pub(crate) fn parse(text: &str) -> Result<Self, String> {
        let body = text.trim();
        let body = body.strip_suffix("ppm").unwrap_or(body);
        let (centre, half) = match body.split_once('±').or_else(|| body.split_once("+-")) {
            Some((centre, half)) => (centre.trim(), half.trim()),
            None => (body.trim(), "0"),
        };
        let drift = Decimal::parse(centre).zip(Decimal::parse(half));
        let accepted = drift.filter(|(centre, half)| {
            half.digits >= 0 && centre.to_f64().abs() + half.to_f64() <= LARGEST_PPM
        });
        let (centre_ppm, half_width_ppm) = accepted.ok_or_else(|| {
            "accepted are parts per million within -10000 and 10000, such as 12.5, -3, 12.5±0.3 or \
             12.5+-0.3"
                .to_owned()
        })?;
        Ok(Self {
            centre_ppm,
            half_width_ppm,
        })
    }

    /// True if there is an interval around the centre.
    pub(crate) fn has_width(&self) -> bool {
        self.half_width_ppm.digits != 0
    }

    /// 1 + y for the centre, or for an end of the interval: `side` is −1, 0 or +1 half-widths.
    /// `None` if it needs more than 128 bits.
    pub(crate) fn factor(&self, side: i128) -> Option<Exact> {
        let places = self.centre_ppm.places.max(self.half_width_ppm.places);
        let at = |x: Decimal| {
            x.digits
                .checked_mul(10_i128.checked_pow(places - x.places)?)
        };
        let one = 1_000_000_i128.checked_mul(10_i128.checked_pow(places)?)?;
        let drift =
            at(self.centre_ppm)?.checked_add(side.checked_mul(at(self.half_width_ppm)?)?)?;
        let numerator = u128::try_from(one.checked_add(drift)?).ok()?;
        Some(Exact::new(numerator, one.unsigned_abs()))
    }
}

/// What stands behind a rate: nothing, or `, +12.5 ± 0.3 ppm`.
impl std::fmt::Display for Drift {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        if self.centre_ppm.digits == 0 && !self.has_width() {
            return Ok(());
        }
        write!(f, ", {:+}", self.centre_ppm.to_f64())?;
        if self.has_width() {
            write!(f, " ± {}", self.half_width_ppm.to_f64())?;
        }
        write!(f, " ppm")
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_drift_becomes_an_exact_factor() {
        let drift = Drift::parse("12.5").expect("a drift");
        assert_eq!(drift.factor(0), Some(Exact::new(10_000_125, 10_000_000)));
        for text in ["-12.5±0.25", "-12.5+-0.25", " -12.5 ± 0.25 ppm"] {
            let drift = Drift::parse(text).expect(text);
            assert!(drift.has_width());
            assert_eq!(
                drift.factor(-1),
                Some(Exact::new(99_998_725, 100_000_000)),
                "{text}"
            );
            assert_eq!(
                drift.factor(1),
                Some(Exact::new(99_998_775, 100_000_000)),
                "{text}"
            );
        }
    }

    #[test]
    fn other_texts_are_refused_with_what_is_accepted() {
        for text in [
            "", "fast", "1e3", "12.5±", "12.5±-1", "10001", "9999±2", "±3",
        ] {
            let error = Drift::parse(text).expect_err(text);
            assert!(error.contains("12.5+-0.3"), "{text}: {error}");
        }
    }
}
