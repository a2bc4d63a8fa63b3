//! Waiting longer after each failure, never all at once.

use std::time::Duration;

/// First wait, before jitter.
const FIRST: Duration = Duration::from_millis(100);

/// Longest wait, before jitter.
const LONGEST: Duration = Duration::from_secs(10);

/// Delays between attempts: doubling from 100 ms to 10 s, each drawn evenly from its upper half.
///
/// Half of the delay is jitter so that followers of a restarted daemon don't come back as one
/// wave; the other half is kept so that no attempt ever follows its failure at once.
#[derive(Debug, Default)]
pub(crate) struct Backoff {
    failures: u32,
}

impl Backoff {
    /// The delay before the next attempt.
    pub(crate) fn next_delay(&mut self) -> Duration {
        let longest = FIRST
            .saturating_mul(1 << self.failures.min(16))
            .min(LONGEST);
        self.failures = self.failures.saturating_add(1);
        longest.mul_f64(0.5 + 0.5 * fastrand::f64())
    }

    /// To be called when contact has proved good: the next failure waits the shortest delay again.
    pub(crate) fn reset(&mut self) {
        self.failures = 0;
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn delays_double_up_to_the_longest_and_never_fall_below_half() {
        let mut backoff = Backoff::default();
        for failure in 0..40 {
            let whole = FIRST.saturating_mul(1 << failure.min(16)).min(LONGEST);
            let delay = backoff.next_delay();
            assert!(
                delay >= whole / 2 && delay <= whole,
                "{failure}: {delay:?} of {whole:?}"
            );
        }
        backoff.reset();
        assert!(backoff.next_delay() <= FIRST);
    }

    #[test]
    fn delays_of_many_clients_are_spread() {
        let delays: Vec<_> = (0..200).map(|_| Backoff::default().next_delay()).collect();
        let early = delays
            .iter()
            .filter(|delay| **delay < FIRST.mul_f64(0.75))
            .count();
        assert!(
            (40..=160).contains(&early),
            "{early} of 200 in the lower half"
        );
    }
}
