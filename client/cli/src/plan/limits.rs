//! Limits as they are typed: how large L and M may be, and of what kind.

use clap::Args;
use ratewright_ratio::{Bounds, MAX_BOUND, Multiple, MultipleError};

use crate::failure::Failure;
use ratewright_ratio::allowed::{Allowed, NotAllowed};

/// Bounds of L and M where none is given.
const COMMON_BOUND: u64 = 1024;

/// What the filter bank takes. Of the limits other than --max-l and --max-m one may be given.
#[derive(Debug, Args)]
#[command(next_help_heading = "Limits of L and M")]
pub(crate) struct Limits {
    /// Largest L the filter bank holds (output samples of a block) [default: 1024]
    #[arg(long, value_name = "COUNT")]
    max_l: Option<u64>,
    /// Largest M the filter bank holds (input samples of a block) [default: 1024]
    #[arg(long, value_name = "COUNT")]
    max_m: Option<u64>,
    /// Largest prime factor of L and of M
    #[arg(long, value_name = "PRIME")]
    largest_prime: Option<u64>,
    /// Largest product of L and M, in place of --max-l and --max-m
    #[arg(long, value_name = "COUNT")]
    max_product: Option<u64>,
    /// Largest weighted sum of L and M, in place of --max-l and --max-m
    #[arg(long, value_name = "COUNT")]
    max_cost: Option<u64>,
    /// What one of L counts in --max-cost
    #[arg(long, value_name = "COUNT", default_value_t = 1, requires = "max_cost")]
    weight_l: u64,
    /// What one of M counts in --max-cost
    #[arg(long, value_name = "COUNT", default_value_t = 1, requires = "max_cost")]
    weight_m: u64,
    /// L is a multiple of this
    #[arg(long, value_name = "COUNT")]
    l_multiple_of: Option<u64>,
    /// M is a multiple of this
    #[arg(long, value_name = "COUNT")]
    m_multiple_of: Option<u64>,
    /// M is this and nothing else, as in a phase accumulator; L is limited by --max-l only if that
    /// is given
    #[arg(long, value_name = "COUNT")]
    fixed_m: Option<u64>,
    /// M is a power of two; L is limited by --max-l only if that is given
    #[arg(long)]
    power_of_two_m: bool,
}

impl Limits {
    /// What they allow.
    pub(crate) fn allowed(&self) -> Result<Allowed, Failure> {
        let kind = self.kind()?;
        self.without_what_it_replaces(kind)?;
        match kind {
            Some(("--max-product", max_product)) => Ok(Allowed::Product { max_product }),
            Some(("--max-cost", max_cost)) => Ok(Allowed::Cost {
                weight_l: self.weight_l,
                weight_m: self.weight_m,
                max_cost,
            }),
            Some(("--l-multiple-of", k)) => {
                Ok(Allowed::Multiple(Multiple::OfL(k), self.bounds(None)?))
            }
            Some(("--m-multiple-of", k)) => {
                Ok(Allowed::Multiple(Multiple::OfM(k), self.bounds(None)?))
            }
            Some(("--fixed-m", m)) => {
                let max_l = counted("--max-l", self.max_l.unwrap_or(MAX_BOUND))?;
                let m = counted("--fixed-m", m)?;
                Ok(Allowed::FixedM { m, max_l })
            }
            Some(_) => self.bounds(Some(MAX_BOUND)).map(Allowed::PowerOfTwoM),
            None => self.with_prime(self.bounds(None)?).map(Allowed::Bounded),
        }
    }

    /// The one limit besides the box, with its value.
    fn kind(&self) -> Result<Option<(&'static str, u64)>, Failure> {
        let given = [
            ("--max-product", self.max_product),
            ("--max-cost", self.max_cost),
            ("--l-multiple-of", self.l_multiple_of),
            ("--m-multiple-of", self.m_multiple_of),
            ("--fixed-m", self.fixed_m),
            ("--power-of-two-m", self.power_of_two_m.then_some(1)),
        ];
        let mut given = given
            .into_iter()
            .filter_map(|(name, value)| Some((name, value?)));
        match (given.next(), given.next()) {
            (Some((first, _)), Some((second, value))) => Err(not_together(second, value, first)),
            (kind, _) => Ok(kind),
        }
    }

    fn without_what_it_replaces(&self, kind: Option<(&'static str, u64)>) -> Result<(), Failure> {
        let Some((kind, _)) = kind else {
            return Ok(());
        };
        let is_region = matches!(kind, "--max-product" | "--max-cost");
        let replaced = [
            ("--largest-prime", self.largest_prime),
            ("--max-l", self.max_l.filter(|_| is_region)),
            (
                "--max-m",
                self.max_m.filter(|_| is_region || kind == "--fixed-m"),
            ),
        ];
        for (name, value) in replaced {
            if let Some(value) = value {
                return Err(not_together(name, value, kind));
            }
        }
        Ok(())
    }

    fn bounds(&self, max_l: Option<u64>) -> Result<Bounds, Failure> {
        let max_l = self.max_l.or(max_l).unwrap_or(COMMON_BOUND);
        Bounds::new(max_l, self.max_m.unwrap_or(COMMON_BOUND)).map_err(refused)
    }

    fn with_prime(&self, bounds: Bounds) -> Result<Bounds, Failure> {
        match self.largest_prime {
            Some(prime) => bounds.with_largest_prime(prime).map_err(refused),
            None => Ok(bounds),
        }
    }
}

/// Why there is no such ratio, as options are typed.
pub(crate) fn not_allowed(error: NotAllowed) -> Failure {
    match error {
        NotAllowed::Multiple(MultipleError::BeyondBound { field, k, bound }) => {
            Failure::Usage(format!(
                "--{field}-multiple-of is {k}; accepted are 1 to --max-{field}, which is {bound}"
            ))
        }
        other => refused(other),
    }
}

fn counted(name: &str, value: u64) -> Result<u64, Failure> {
    if (1..=MAX_BOUND).contains(&value) {
        Ok(value)
    } else {
        let accepted = format!("{name} is {value}; accepted are 1 to {MAX_BOUND}");
        Err(Failure::Usage(accepted))
    }
}

fn not_together(name: &str, value: u64, with: &str) -> Failure {
    let given = match name {
        "--power-of-two-m" => format!("{name} is given"),
        _ => format!("{name} is {value}"),
    };
    Failure::Usage(format!("{given}; accepted is none beside {with}"))
}

/// An error of the ratio crate with its field's name as the option is typed.
fn refused(error: impl std::fmt::Display) -> Failure {
    let names = [
        "max_l",
        "max_m",
        "largest_prime",
        "max_product",
        "max_cost",
        "weight_l",
        "weight_m",
    ];
    let text = names.iter().fold(error.to_string(), |text, name| {
        text.replace(name, &format!("--{}", name.replace('_', "-")))
    });
    Failure::Usage(text)
}
