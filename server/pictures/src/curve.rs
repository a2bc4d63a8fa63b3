//! Values over time, and what of them a picture can show.

/// A value at a time.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Moment {
    /// When, s.
    pub at_s: f64,
    /// The value.
    pub value: f64,
}

/// A stretch of time, s.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Stretch {
    /// Beginning.
    pub from_s: f64,
    /// End.
    pub to_s: f64,
}

/// Columns that a curve has at most: more than a picture has pixels.
const COLUMNS: usize = 1_000;

/// The moments that a picture can show, in order: of each of a thousand columns the first, the least,
/// the greatest and the last. Peaks stay, whatever is left out.
///
/// ```
/// # use ratewright_pictures::{Moment, thinned};
/// let peak = |i: u32| if i == 54_321 { 9.0 } else { 0.0 };
/// let moments: Vec<_> = (0..100_000).map(|i| Moment { at_s: f64::from(i), value: peak(i) }).collect();
/// let thin = thinned(&moments);
/// assert!(thin.len() <= 4_000);
/// assert!(thin.contains(&Moment { at_s: 54_321.0, value: 9.0 }));
/// ```
pub fn thinned(moments: &[Moment]) -> Vec<Moment> {
    if moments.len() <= 4 * COLUMNS {
        return moments.to_vec();
    }
    moments
        .chunks(moments.len().div_ceil(COLUMNS))
        .flat_map(corners)
        .collect()
}

fn corners(column: &[Moment]) -> Vec<Moment> {
    let place_of = |better: fn(f64, f64) -> bool| {
        (1..column.len()).fold(0, |best, i| {
            if better(column[i].value, column[best].value) {
                i
            } else {
                best
            }
        })
    };
    let mut places = vec![
        0,
        place_of(|a, b| a < b),
        place_of(|a, b| a > b),
        column.len() - 1,
    ];
    places.sort_unstable();
    places.dedup();
    places.into_iter().map(|i| column[i]).collect()
}
