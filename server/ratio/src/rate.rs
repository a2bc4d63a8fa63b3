//! Reading rates and targets from text, exactly: 44.1k is 44100 Hz, and 0.1 is 1/10.
//!
//! **Cost.** A greatest common divisor.
//!
//! **Corner cases.** Decimal digits are taken as they stand, never by way of a double. What does not fit the
//! exact type is refused, as are signs, zero and denominators of zero.

use num_integer::Integer;
use num_rational::Ratio;
use thiserror::Error;

use crate::Exact;

const ACCEPTED: &str = "accepted are positive numbers such as 44100, 44.1k or 44.1 kHz, joined by * and / \
                        as in 48000*1000/1001 or 30000/1001";

/// Why a text is not a rate.
#[derive(Clone, Debug, PartialEq, Eq, Error)]
pub enum RateError {
    /// Something other than a number where a number should be.
    #[error("rate {text:?}: {part:?} is not a number; {ACCEPTED}")]
    NotANumber {
        /// The whole text.
        text: String,
        /// The part that was refused.
        part: String,
    },
    /// Zero, or a division by zero.
    #[error("rate {text:?} is zero or divides by zero; {ACCEPTED}")]
    Zero {
        /// The whole text.
        text: String,
    },
    /// Numerator or denominator beyond the 64 bits of a rate or the 128 bits of a target.
    #[error(
        "rate {text:?} needs more than {bits} bits above or below the line in lowest terms; {ACCEPTED}"
    )]
    TooLarge {
        /// The whole text.
        text: String,
        /// 64 or 128.
        bits: u32,
    },
}

/// Reads an exact rate in Hz: numbers (`44100`, `44.1k`, `1.536M`) joined by `*` and `/` from left to right,
/// with an optional `Hz` at the end. `k` is 1000 and `M` 1,000,000; decimals are exact.
///
/// # Errors
/// [`RateError`] names the part that was refused and what is accepted.
///
/// # Examples
/// ```
/// use num_rational::Ratio;
/// use ratewright_ratio::parse_rate;
/// assert_eq!(parse_rate("44.1k")?, Ratio::from_integer(44_100));
/// assert_eq!(parse_rate("44.1 kHz")?, parse_rate("44100")?);
/// assert_eq!(parse_rate("48000*1000/1001")?, Ratio::new(48_000_000, 1_001));
/// assert!(parse_rate("fast").unwrap_err().to_string().contains("44100"));
/// # Ok::<(), ratewright_ratio::RateError>(())
/// ```
pub fn parse_rate(text: &str) -> Result<Ratio<u64>, RateError> {
    let rate = parse_target(text)?;
    let part = |x: u128| {
        u64::try_from(x).map_err(|_| RateError::TooLarge {
            text: text.to_owned(),
            bits: 64,
        })
    };
    Ok(Ratio::new_raw(part(*rate.numer())?, part(*rate.denom())?))
}

/// Reads an exact positive target: `N/D`, a decimal, or anything [`parse_rate`] takes, with 128-bit parts.
///
/// # Errors
/// As [`parse_rate`].
///
/// # Examples
/// ```
/// use ratewright_ratio::{Exact, parse_target};
/// assert_eq!(parse_target("160/147")?, Exact::new(160, 147));
/// assert_eq!(parse_target("1.0000373")?, Exact::new(10_000_373, 10_000_000));
/// # Ok::<(), ratewright_ratio::RateError>(())
/// ```
pub fn parse_target(text: &str) -> Result<Exact, RateError> {
    let body = text.trim();
    let body = body.strip_suffix("Hz").unwrap_or(body);
    let mut value = Exact::new_raw(1, 1);
    let mut rest = body;
    let mut dividing = false;
    loop {
        let end = rest.find(['*', '/']).unwrap_or(rest.len());
        let factor = parse_factor(text, rest[..end].trim())?;
        if *factor.numer() == 0 {
            return Err(RateError::Zero {
                text: text.to_owned(),
            });
        }
        let factor = if dividing { factor.recip() } else { factor };
        value = times(value, factor).ok_or(RateError::TooLarge {
            text: text.to_owned(),
            bits: 128,
        })?;
        let Some(operator) = rest[end..].chars().next() else {
            return Ok(value);
        };
        dividing = operator == '/';
        rest = &rest[end + 1..];
    }
}

/// One number with an optional multiplier letter.
fn parse_factor(text: &str, part: &str) -> Result<Exact, RateError> {
    let not_a_number = || RateError::NotANumber {
        text: text.to_owned(),
        part: part.to_owned(),
    };
    let too_large = || RateError::TooLarge {
        text: text.to_owned(),
        bits: 128,
    };
    let (digits, scale) = match part.strip_suffix('k') {
        Some(digits) => (digits, 1_000),
        None => part
            .strip_suffix('M')
            .map_or((part, 1), |digits| (digits, 1_000_000)),
    };
    let digits = digits.trim_end();
    let (whole, decimals) = digits.split_once('.').unwrap_or((digits, ""));
    let only_digits = whole
        .bytes()
        .chain(decimals.bytes())
        .all(|byte| byte.is_ascii_digit());
    if whole.is_empty() || !only_digits || digits.ends_with('.') {
        return Err(not_a_number());
    }
    let decimals = decimals.trim_end_matches('0');
    let numerator = format!("{whole}{decimals}")
        .parse()
        .map_err(|_| too_large())?;
    let denominator = u32::try_from(decimals.len())
        .ok()
        .and_then(|places| 10u128.checked_pow(places));
    times(
        Exact::new(numerator, denominator.ok_or_else(too_large)?),
        Exact::new_raw(scale, 1),
    )
    .ok_or_else(too_large)
}

/// The exact product in lowest terms, if it fits.
fn times(a: Exact, b: Exact) -> Option<Exact> {
    let (g, h) = (a.numer().gcd(b.denom()), b.numer().gcd(a.denom()));
    let numerator = (a.numer() / g).checked_mul(b.numer() / h)?;
    let denominator = (a.denom() / h).checked_mul(b.denom() / g)?;
    Some(Exact::new_raw(numerator, denominator))
}
