//! What the crate is compared with.

use std::io::Write;
use std::process::{Command, Stdio};

use num_rational::Ratio;
use ratewright_ratio::{Bounds, Exact, Interval, simplest};

/// The chain of divisions of n/D, `steps` of them, and nothing else.
#[inline(never)]
pub(crate) fn division_chain(target: &Exact, steps: u32) -> u64 {
    let (mut n, mut d) = (*target.numer() as u64, *target.denom() as u64);
    let mut sum = 0u64;
    for _ in 0..steps {
        let quotient = n / d;
        sum = sum.wrapping_add(quotient);
        (n, d) = (d, n - quotient * d);
    }
    sum
}

/// The same chain when nobody tells how long it is: it ends where the remainder is at most D/Q. Its last branch
/// depends on the last division, so the processor mispredicts it and cannot hide that, as it can above.
#[inline(never)]
pub(crate) fn chain_with_end(target: &Exact, bounds: &Bounds) -> u64 {
    let (mut n, mut d) = (*target.numer() as u64, *target.denom() as u64);
    let last = d / bounds.max_m();
    let mut sum = 0u64;
    while d > last {
        sum = sum.wrapping_add(n / d);
        (n, d) = (d, n % d);
    }
    sum.wrapping_add(d)
}

/// The same for an interval: the chain of the lower end for as long as the other end has the same quotients, which a
/// product and a difference tell of each, and one division where they part.
#[inline(never)]
pub(crate) fn chain_of_interval(interval: &Interval) -> u64 {
    let part = |x: &u128| *x as u64;
    let (mut n, mut d) = (part(interval.lo().numer()), part(interval.lo().denom()));
    let (mut other_n, mut other_d) = (part(interval.hi().numer()), part(interval.hi().denom()));
    let mut sum = 0u64;
    loop {
        let (quotient, rest) = (n / d, n % d);
        sum = sum.wrapping_add(quotient);
        let other_rest = other_n.wrapping_sub(quotient.wrapping_mul(other_d));
        if (rest == 0) | (other_rest >= other_d) {
            return sum.wrapping_add(other_n / other_d);
        }
        (n, d, other_n, other_d) = (d, rest, other_d, other_rest);
    }
}

/// Partial quotients a search has to look at: those of all convergents within bounds, and the one that leaves
/// them, if there is one.
pub(crate) fn steps_of_search(targets: &[Exact], bounds: &Bounds) -> Vec<u32> {
    let steps = |target: &Exact| {
        let mut leaves = false;
        partial_quotients(target, |l, m| {
            // The step that leaves the bounds still counts; what follows does not.
            leaves |= l > bounds.max_l() || m > bounds.max_m();
            leaves
        })
    };
    targets.iter().map(steps).collect()
}

/// Partial quotients of the lower end that the simplest fraction needs.
pub(crate) fn steps_of_simplest(intervals: &[Interval]) -> Vec<u32> {
    let steps = |interval: &Interval| {
        let fraction = simplest(interval).expect("within 63 bits").fraction;
        let (p, q) = (*fraction.numer(), *fraction.denom());
        // Every level of the search takes one quotient off both ends; as many as the answer has itself.
        let exact = Exact::new(p.into(), q.into());
        partial_quotients(&exact, |l, m| (l, m) == (p, q))
    };
    intervals.iter().map(steps).collect()
}

/// How many partial quotients there are until a convergent satisfies `is_last`.
fn partial_quotients(target: &Exact, mut is_last: impl FnMut(u64, u64) -> bool) -> u32 {
    let (mut n, mut d) = (*target.numer(), *target.denom());
    let (mut old, mut new) = ((0u64, 1u64), (1u64, 0u64));
    let mut count = 0;
    while d != 0 && !is_last(new.0, new.1) {
        let quotient = (n / d) as u64;
        (n, d) = (d, n % d);
        (old, new) = (new, (old.0 + quotient * new.0, old.1 + quotient * new.1));
        count += 1;
    }
    count
}

/// num-rational's own approximation, which takes no bound but the type's: u16 comes nearest to Q = 1024.
pub(crate) fn num_rational(target: &Exact) -> u64 {
    let value = *target.numer() as u64 as f64 / *target.denom() as u64 as f64;
    Ratio::<u16>::approximate_float_unsigned(value).map_or(0, |ratio| u64::from(*ratio.numer()))
}

/// CPython's limit_denominator(1024) on the same targets, ns each; `None` without a python3.
pub(crate) fn cpython(targets: &[Exact]) -> Option<f64> {
    let program = "
import sys, time
from fractions import Fraction
xs = [Fraction(int(n), int(d)) for n, d in (line.split('/') for line in sys.stdin)]
rounds = []
for _ in range(5):
    start = time.perf_counter_ns()
    for x in xs: x.limit_denominator(1024)
    rounds.append((time.perf_counter_ns() - start) / len(xs))
print(sorted(rounds)[2])
";
    let mut python = Command::new("python3")
        .args(["-c", program])
        .stdin(Stdio::piped())
        .stdout(Stdio::piped())
        .spawn()
        .ok()?;
    let lines: String = targets
        .iter()
        .map(|t| format!("{}/{}\n", t.numer(), t.denom()))
        .collect();
    python.stdin.take()?.write_all(lines.as_bytes()).ok()?;
    String::from_utf8(python.wait_with_output().ok()?.stdout)
        .ok()?
        .trim()
        .parse()
        .ok()
}
