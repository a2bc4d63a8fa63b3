//! A follower that keeps account of what it was handed.

use std::sync::{Arc, Mutex, MutexGuard};

use ratewright_client::{Client, Id, Setting, SettingNumber, Update};
use ratewright_ratio::Bounds;
use tokio::task::JoinHandle;

use super::liar::FORGED_EPOCH;

/// What a follower has seen.
#[derive(Clone, Debug, Default)]
pub struct Seen {
    /// The newest setting it was handed.
    pub newest: Option<SettingNumber>,
    /// Settings it was handed.
    pub settings: u64,
    /// Forged settings that were kept from it.
    pub forged: u64,
    /// Losses of contact.
    pub losses: u64,
    /// What must never be: an older setting after a newer one, one that does not prove itself, a
    /// true one that was refused, an end.
    pub wrongs: Vec<String>,
}

/// A follower of one crossing.
#[derive(Debug)]
pub struct Follower {
    /// What it follows.
    pub crossing: Id,
    seen: Arc<Mutex<Seen>>,
    task: JoinHandle<()>,
}

impl Drop for Follower {
    fn drop(&mut self) {
        self.task.abort();
    }
}

impl Follower {
    /// Begins to follow. `bounds` are the true ones, for a check of its own.
    pub fn begin(client: &Client, crossing: &Id, bounds: Bounds) -> Self {
        let seen = Arc::<Mutex<Seen>>::default();
        let follow = client.follow(std::slice::from_ref(crossing));
        let task = tokio::spawn(follow_on(follow, bounds, Arc::clone(&seen)));
        let crossing = crossing.clone();
        Self {
            crossing,
            seen,
            task,
        }
    }

    /// What it has seen so far.
    pub fn seen(&self) -> Seen {
        lock(&self.seen).clone()
    }

    /// The newest setting it was handed.
    pub fn newest(&self) -> Option<SettingNumber> {
        lock(&self.seen).newest
    }
}

fn lock(seen: &Mutex<Seen>) -> MutexGuard<'_, Seen> {
    seen.lock().expect("nobody panics with it")
}

async fn follow_on(mut follow: ratewright_client::Follow, bounds: Bounds, seen: Arc<Mutex<Seen>>) {
    loop {
        let update = follow.next().await;
        let mut seen = lock(&seen);
        match update {
            Ok(Update::Setting(setting)) => seen.take(&setting, &bounds),
            Ok(Update::Refused { name, error }) => {
                if name.contains(&format!("/{FORGED_EPOCH}-")) {
                    seen.forged += 1;
                } else {
                    seen.wrongs.push(format!("{name} was refused: {error}"));
                }
            }
            Ok(Update::Lost(_)) => seen.losses += 1,
            Ok(_) => {}
            Err(error) => {
                seen.wrongs.push(format!("it ended: {error}"));
                return;
            }
        }
    }
}

impl Seen {
    fn take(&mut self, setting: &Setting, bounds: &Bounds) {
        self.settings += 1;
        if self.newest.is_some_and(|newest| setting.number <= newest) {
            let newest = self.newest;
            self.wrongs
                .push(format!("{} after {newest:?}", setting.name()));
        }
        if setting.number.epoch == FORGED_EPOCH {
            self.wrongs.push(format!("{} is forged", setting.name()));
        }
        if let Err(error) = setting.verify(bounds) {
            self.wrongs.push(format!("{}: {error}", setting.name()));
        }
        self.newest = Some(setting.number);
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The account itself must see what is wrong: nothing else in a storm would.
    #[tokio::test]
    async fn an_older_one_a_forged_one_and_a_bad_proof_are_wrongs() {
        use ratewright_client::{Evidence, Proof, Realised, Reason};
        let fraction = |l, m| ratewright_ratio::Fraction::new(l, m);
        let setting = |epoch, number, wanted| Setting {
            crossing: Id::new("a").expect("a name"),
            number: SettingNumber { epoch, number },
            wanted,
            realised: Realised::Single(fraction(1, 1)),
            residual: 0.0,
            proof: Proof::Uncertified("for the test".to_owned()),
            decided_ns: 0,
            effect_ns: 0,
            review_ns: 0,
            expiry_ns: 0,
            seconds_to_slip: None,
            reason: Reason::Evidence,
            evidence: Evidence {
                target: 1.0,
                target_low: 1.0,
                target_high: 1.0,
                source_drift: 0.0,
                source_deviation: 0.0,
                sink_drift: 0.0,
                sink_deviation: 0.0,
                phase_error_samples: 0.0,
                phase_deviation_samples: 0.0,
                allowed_low: None,
                allowed_high: None,
                expected_hold_seconds: 0.0,
            },
        };
        let bounds = Bounds::new(8, 8).expect("in range");
        let mut seen = Seen::default();
        seen.take(&setting(1, 2, fraction(1, 1)), &bounds);
        seen.take(&setting(1, 3, fraction(1, 1)), &bounds);
        assert_eq!(seen.wrongs, [""; 0]);
        seen.take(&setting(1, 3, fraction(1, 1)), &bounds);
        seen.take(&setting(1, 4, fraction(7, 8)), &bounds);
        seen.take(&setting(FORGED_EPOCH, 1, fraction(1, 1)), &bounds);
        assert_eq!(seen.wrongs.len(), 3, "{:?}", seen.wrongs);
    }
}
