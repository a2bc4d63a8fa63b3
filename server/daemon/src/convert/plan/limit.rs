//! Limits of L and M as they are sent.

use ratewright_proto::v1::{self, plan_ratio_request::Limit};
use ratewright_ratio::{Bounds, MAX_BOUND, Multiple, MultipleError, RegionError};

use crate::refused::Violation;
use ratewright_ratio::allowed::{Allowed, NotAllowed};

/// Largest L and M that may be sent.
const MOST: u64 = 1 << 31;

/// What the limits of a question allow.
pub(super) fn allowed(sent: &v1::PlanRatioRequest) -> Result<Allowed, Violation> {
    let Some(limit) = &sent.limit else {
        return Ok(Allowed::Bounded(with_prime(sent, bounds(sent, 1024)?)?));
    };
    without_what_it_replaces(sent, limit)?;
    Ok(match *limit {
        Limit::MaxProduct(max_product) => Allowed::Product { max_product },
        Limit::MaxCost(cost) => Allowed::Cost {
            weight_l: cost.weight_l.max(1),
            weight_m: cost.weight_m.max(1),
            max_cost: cost.max_cost,
        },
        Limit::LMultipleOf(k) => Allowed::Multiple(Multiple::OfL(k), bounds(sent, 1024)?),
        Limit::MMultipleOf(k) => Allowed::Multiple(Multiple::OfM(k), bounds(sent, 1024)?),
        Limit::FixedM(m) => {
            if !(1..=MOST).contains(&m) {
                return Err(Violation::new("fixed_m", m, format!("1 to {MOST}")));
            }
            let max_l = bound("max_l", sent.max_l, MAX_BOUND)?;
            Allowed::FixedM { m, max_l }
        }
        Limit::PowerOfTwoM(true) => Allowed::PowerOfTwoM(bounds(sent, MAX_BOUND)?),
        Limit::PowerOfTwoM(false) => {
            let accepted = "true, or another limit, or none";
            return Err(Violation::new("power_of_two_m", false, accepted));
        }
    })
}

/// A limit stands alone, except beside the bounds it leaves something to.
fn without_what_it_replaces(sent: &v1::PlanRatioRequest, limit: &Limit) -> Result<(), Violation> {
    let (name, replaces_l, replaces_m) = match limit {
        Limit::MaxProduct(_) => ("max_product", true, true),
        Limit::MaxCost(_) => ("max_cost", true, true),
        Limit::LMultipleOf(_) => ("l_multiple_of", false, false),
        Limit::MMultipleOf(_) => ("m_multiple_of", false, false),
        Limit::FixedM(_) => ("fixed_m", false, true),
        Limit::PowerOfTwoM(_) => ("power_of_two_m", false, false),
    };
    let fields = [
        ("largest_prime", sent.largest_prime, true),
        ("max_l", sent.max_l, replaces_l),
        ("max_m", sent.max_m, replaces_m),
    ];
    match fields
        .into_iter()
        .find(|&(_, value, is_replaced)| is_replaced && value != 0)
    {
        Some((field, value, _)) => Err(Violation::new(field, value, format!("0 beside {name}"))),
        None => Ok(()),
    }
}

fn bounds(sent: &v1::PlanRatioRequest, any_l: u64) -> Result<Bounds, Violation> {
    let max_l = bound("max_l", sent.max_l, any_l)?;
    let max_m = bound("max_m", sent.max_m, 1024)?;
    Ok(Bounds::new(max_l, max_m).expect("checked bounds are within what the ratio crate takes"))
}

fn bound(field: &str, value: u64, if_zero: u64) -> Result<u64, Violation> {
    match value {
        0 => Ok(if_zero),
        1..=MOST => Ok(value),
        _ => {
            let accepted = match if_zero {
                MAX_BOUND => format!("1 to {MOST}, or 0 for any"),
                _ => format!("1 to {MOST}, or 0 for {if_zero}"),
            };
            Err(Violation::new(field, value, accepted))
        }
    }
}

fn with_prime(sent: &v1::PlanRatioRequest, bounds: Bounds) -> Result<Bounds, Violation> {
    if sent.largest_prime == 0 {
        return Ok(bounds);
    }
    bounds
        .with_largest_prime(sent.largest_prime)
        .map_err(|why| Violation::new("largest_prime", sent.largest_prime, why.to_string()))
}

/// Why nothing is allowed, by the fields as they were sent.
pub(super) fn not_allowed(why: NotAllowed) -> Violation {
    match why {
        NotAllowed::Region(RegionError::OutOfRange { field, value }) => {
            let path = match field {
                "max_product" => field.to_owned(),
                _ => format!("max_cost.{field}"),
            };
            Violation::new(path, value, format!("1 to {MAX_BOUND}"))
        }
        NotAllowed::Region(RegionError::Empty { max_cost, least }) => {
            let accepted = format!("at least {least}, the sum of the weights");
            Violation::new("max_cost.max_cost", max_cost, accepted)
        }
        NotAllowed::Multiple(MultipleError::BeyondBound { field, k, bound }) => {
            let accepted = format!("1 to {bound}, which is max_{field}");
            Violation::new(format!("{field}_multiple_of"), k, accepted)
        }
        NotAllowed::Multiple(MultipleError::TooWide { target, k }) => {
            let accepted = format!("a target that fits 128 bits when divided by the multiple {k}");
            Violation::new("target", target, accepted)
        }
        NotAllowed::Multiple(MultipleError::Smooth { largest_prime }) => {
            Violation::new("largest_prime", largest_prime, "0 beside a multiple")
        }
    }
}
