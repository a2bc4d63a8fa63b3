//! Whether a follower runs what it was sent, as its levels tell.
//!
//! A setting that nobody reports is taken to run from its effect on. Levels contest that: against the
//! account as it is stands another, under which the ratio before still runs (or, once that is believed,
//! under which the newest setting has been taken up since). Each level weighs the two by how well they
//! foretold it; the sum of the logarithms of these likelihood ratios decides once it is large enough
//! (Wald's sequential test; for what may have begun at any time, Page's sum, which begins anew at 0).

use serde::{Deserialize, Serialize};

use crate::HouseNs;

/// Evidence at which the other account is believed, or is done with: ln 10⁴.
const SURE: f64 = 9.210_340_371_976_184;
/// The other account must foretell a level to within so many standard deviations to be believed.
const FITS: f64 = 5.0;

/// What levels have said so far.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Contest {
    /// The two accounts have gone apart since then.
    pub(crate) since_ns: HouseNs,
    /// They are carried on up to here.
    at_ns: HouseNs,
    /// The other account less the one that is kept, samples.
    pub(crate) apart: f64,
    /// Logarithm of the likelihood ratio in favour of the other.
    evidence: f64,
}

/// What has become of a contest.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) enum Verdict {
    /// Not enough was heard.
    Open,
    /// The account that is kept is right.
    Kept,
    /// The other one is.
    Other,
}

impl Contest {
    /// The two accounts go apart from then on.
    pub(crate) fn begin(since_ns: HouseNs) -> Self {
        Contest {
            since_ns,
            at_ns: since_ns,
            apart: 0.0,
            evidence: 0.0,
        }
    }

    /// Carries the accounts on to `now`: the other one gains `velocity` samples a second more.
    pub(crate) fn advance(&mut self, now: HouseNs, velocity: f64) {
        self.apart += velocity * (now - self.at_ns) as f64 * 1e-9;
        self.at_ns = now;
    }

    /// For what may have begun at any time since the last level: when it would have, to foretell a
    /// level as well as it can that is off by `innovation` from the account that is kept.
    pub(crate) fn align(&mut self, innovation: f64, velocity: f64) {
        if self.evidence == 0.0 && velocity != 0.0 {
            let aligned = innovation.clamp(self.apart.min(0.0), self.apart.max(0.0));
            self.since_ns = self.at_ns - (aligned / velocity * 1e9) as i64;
            self.apart = aligned;
        }
    }

    /// Weighs a level, which was off by `innovation` of variance `whole` from the account that is
    /// kept.
    pub(crate) fn weigh(&mut self, innovation: f64, whole: f64) -> Verdict {
        let other = innovation - self.apart;
        self.evidence += (innovation * innovation - other * other) / (2.0 * whole);
        if self.evidence >= SURE && other * other <= FITS * FITS * whole {
            Verdict::Other
        } else if self.evidence <= -SURE {
            Verdict::Kept
        } else {
            Verdict::Open
        }
    }

    /// Both accounts were corrected by this share of what they were off by.
    pub(crate) fn corrected(&mut self, gain: f64) {
        self.apart *= 1.0 - gain;
    }

    /// True if nothing speaks for the other account: what it says may still be about to begin.
    pub(crate) fn is_idle(&self) -> bool {
        self.evidence <= 0.0
    }
}
