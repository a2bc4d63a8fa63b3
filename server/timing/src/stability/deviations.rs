//! Allan, modified Allan, Hadamard and time deviation of a record (NIST SP 1065, section 5.2).

/// Which deviation.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Kind {
    /// Overlapping Allan deviation, dimensionless (SP 1065 eq. 11).
    Allan,
    /// Modified Allan deviation, dimensionless (SP 1065 eq. 14).
    ModifiedAllan,
    /// Overlapping Hadamard deviation, dimensionless (SP 1065 eq. 18): blind to linear drift
    /// of the frequency.
    Hadamard,
    /// Time deviation, s: τ/√3 times the modified Allan deviation (SP 1065 eq. 15).
    Time,
}

/// A deviation, and of how many terms it is the root mean square.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Deviation {
    /// Value: dimensionless, or s for [`Kind::Time`].
    pub value: f64,
    /// Terms summed; they overlap.
    pub terms: usize,
}

/// Deviation of a record at the interval `m`·`tau0_s`. None when the record is too short or
/// an argument is zero.
pub fn deviation(kind: Kind, phase_s: &[f64], tau0_s: f64, m: usize) -> Option<Deviation> {
    if m == 0 || tau0_s.is_nan() || tau0_s <= 0.0 {
        return None;
    }
    let tau_s = m as f64 * tau0_s;
    match kind {
        Kind::Allan => {
            let square = |i: usize| phase_s[i + 2 * m] - 2.0 * phase_s[i + m] + phase_s[i];
            rms(
                phase_s.len().checked_sub(2 * m)?,
                square,
                2.0 * tau_s * tau_s,
            )
        }
        Kind::Hadamard => {
            let third = |i: usize| {
                phase_s[i + 3 * m] - 3.0 * (phase_s[i + 2 * m] - phase_s[i + m]) - phase_s[i]
            };
            rms(
                phase_s.len().checked_sub(3 * m)?,
                third,
                6.0 * tau_s * tau_s,
            )
        }
        Kind::ModifiedAllan => modified(phase_s, tau_s, m),
        Kind::Time => {
            let modified = modified(phase_s, tau_s, m)?;
            let value = modified.value * tau_s / 3.0_f64.sqrt();
            Some(Deviation { value, ..modified })
        }
    }
}

fn rms(terms: usize, term: impl Fn(usize) -> f64, divisor: f64) -> Option<Deviation> {
    if terms == 0 {
        return None;
    }
    let sum: f64 = (0..terms).map(|i| term(i) * term(i)).sum();
    Some(Deviation {
        value: (sum / (divisor * terms as f64)).sqrt(),
        terms,
    })
}

/// The inner mean over m second differences moves along by one term at a time.
fn modified(phase_s: &[f64], tau_s: f64, m: usize) -> Option<Deviation> {
    let terms = (phase_s.len() + 1).checked_sub(3 * m)?;
    if terms == 0 {
        return None;
    }
    let second = |i: usize| phase_s[i + 2 * m] - 2.0 * phase_s[i + m] + phase_s[i];
    let mut inner: f64 = (0..m).map(second).sum();
    let mut sum = inner * inner;
    for j in 1..terms {
        inner += second(j + m - 1) - second(j - 1);
        sum += inner * inner;
    }
    let mean_square = sum / (terms as f64 * (m * m) as f64);
    Some(Deviation {
        value: (mean_square / (2.0 * tau_s * tau_s)).sqrt(),
        terms,
    })
}
