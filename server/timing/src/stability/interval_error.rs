//! Maximum and root-mean-square time interval error (ITU-T G.810, appendix II).

use std::collections::VecDeque;

/// MTIE: the largest peak-to-peak phase within any window of `n` + 1 samples, s. None when the
/// record is shorter than that or `n` is zero.
pub fn mtie(phase_s: &[f64], n: usize) -> Option<f64> {
    if n == 0 || phase_s.len() <= n {
        return None;
    }
    let mut highest = Extremes::default();
    let mut lowest = Extremes::default();
    let mut largest = 0.0_f64;
    for (i, &x) in phase_s.iter().enumerate() {
        let high = highest.push(i, x, n);
        let low = -lowest.push(i, -x, n);
        if i >= n {
            largest = largest.max(high - low);
        }
    }
    Some(largest)
}

/// Running maximum of a window: candidates in falling order.
#[derive(Default)]
struct Extremes(VecDeque<(usize, f64)>);

impl Extremes {
    fn push(&mut self, i: usize, x: f64, n: usize) -> f64 {
        while self.0.back().is_some_and(|&(_, smaller)| smaller <= x) {
            self.0.pop_back();
        }
        self.0.push_back((i, x));
        while self.0.front().is_some_and(|&(old, _)| old + n < i) {
            self.0.pop_front();
        }
        self.0.front().map_or(x, |&(_, largest)| largest)
    }
}

/// TIErms: root mean square of the phase gained over `n` samples, s. None when the record is
/// too short or `n` is zero.
pub fn tie_rms(phase_s: &[f64], n: usize) -> Option<f64> {
    if n == 0 || phase_s.len() <= n {
        return None;
    }
    let terms = phase_s.len() - n;
    let sum: f64 = (0..terms)
        .map(|i| {
            let gained = phase_s[i + n] - phase_s[i];
            gained * gained
        })
        .sum();
    Some((sum / terms as f64).sqrt())
}
