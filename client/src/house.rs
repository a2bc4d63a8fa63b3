//! House time on this machine, by exchanges of timestamps with the daemon.

use std::collections::VecDeque;
use std::time::Duration;

use tokio::sync::mpsc;
use tokio::time::{Instant, sleep};

use crate::{Client, Exchange};

/// Time between exchanges.
const INTERVAL: Duration = Duration::from_secs(2);

/// Exchanges of which the quickest counts: half a minute, in which an ordinary oscillator gains or
/// loses 3 µs.
const KEPT: usize = 16;

/// This machine's monotonic clock against house time.
#[derive(Debug)]
pub(crate) struct HouseClock {
    origin: Instant,
    exchanges: VecDeque<Exchange>,
}

impl HouseClock {
    pub(crate) fn new(origin: Instant) -> Self {
        Self {
            origin,
            exchanges: VecDeque::with_capacity(KEPT),
        }
    }

    pub(crate) fn take(&mut self, exchange: Exchange) {
        if self.exchanges.len() == KEPT {
            self.exchanges.pop_front();
        }
        self.exchanges.push_back(exchange);
    }

    /// House time at an instant and its standard deviation, ns; `None` before the first exchange.
    pub(crate) fn at(&self, instant: Instant) -> Option<(i64, f64)> {
        let quickest = self.exchanges.iter().min_by_key(|e| e.round_trip_ns())?;
        let house_ns = local_ns(self.origin, instant).saturating_sub(quickest.ahead_ns());
        // However the way is split, the error is within half the round trip.
        let deviation_ns = quickest.round_trip_ns().max(0) as f64 / 12f64.sqrt();
        Some((house_ns, deviation_ns))
    }
}

/// Nanoseconds from `origin`, negative before it.
fn local_ns(origin: Instant, instant: Instant) -> i64 {
    let ns = |span: Duration| i64::try_from(span.as_nanos()).unwrap_or(i64::MAX);
    ns(instant.saturating_duration_since(origin)) - ns(origin.saturating_duration_since(instant))
}

/// Exchanges timestamps until nobody wants them any more. A failed one is tried again with the next.
pub(crate) async fn exchange(client: Client, origin: Instant, exchanges: mpsc::Sender<Exchange>) {
    loop {
        let local = || local_ns(origin, Instant::now());
        if let Ok(exchange) = client.exchange_time(local).await
            && exchanges.send(exchange).await.is_err()
        {
            return;
        }
        tokio::select! {
            () = sleep(INTERVAL) => {}
            () = exchanges.closed() => return,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_quickest_exchange_counts_and_others_may_be_lopsided() {
        let origin = Instant::now();
        let mut house = HouseClock::new(origin);
        assert_eq!(house.at(origin), None);
        // House time is 5 s ahead; one way takes 40 µs, the other 60, or 10 ms.
        for (there_ns, back_ns) in [(10_000_000, 60_000), (40_000, 60_000), (40_000, 9_000_000)] {
            let t1_ns = 1_000;
            let t2_ns = t1_ns + 5_000_000_000 + there_ns;
            let t4_ns = t1_ns + there_ns + back_ns;
            house.take(Exchange {
                t1_ns,
                t2_ns,
                t3_ns: t2_ns,
                t4_ns,
            });
        }
        let (house_ns, deviation_ns) = house.at(origin + Duration::from_secs(1)).expect("read");
        assert_eq!(house_ns, 6_000_000_000 - 10_000);
        assert!((deviation_ns - 28_868.0).abs() < 1.0, "{deviation_ns}");
    }
}
