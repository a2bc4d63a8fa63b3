//! What nobody can beat: the fewest changes that could have kept a phase error within bounds, for
//! someone who knew the whole truth beforehand.

/// A lower bound of the changes of ratio that keep |phase error| within `room` samples.
///
/// `curve` is the phase error at equal steps under one constant ratio. Every setting adds a
/// straight line, so the settings must approximate the negative of the curve by straight pieces
/// within ±`room`. Taking the longest pieces one after the other, each free to begin anywhere in
/// the band, gives the least number of pieces; real settings must even join up.
pub(crate) fn least_changes(curve: &[f64], room: f64) -> usize {
    let (mut from, mut pieces) = (0, 0);
    while from < curve.len() {
        from += longest_piece(&curve[from..], room);
        pieces += 1;
    }
    pieces - 1
}

/// Points that one straight line approximates within ±`room`, from the first on.
fn longest_piece(curve: &[f64], room: f64) -> usize {
    let fits = |count: usize| least_spread(&curve[..count]) <= 2.0 * room;
    let mut above = 2;
    while above < curve.len() && fits(above) {
        above *= 2;
    }
    let (mut good, mut bad) = (above / 2, above.min(curve.len()) + 1);
    while bad - good > 1 {
        let middle = good.midpoint(bad);
        if fits(middle) {
            good = middle
        } else {
            bad = middle
        }
    }
    good
}

/// Height of the narrowest band of any slope that holds all points: convex in the slope, so a
/// ternary search finds it.
fn least_spread(curve: &[f64]) -> f64 {
    let spread = |slope: f64| {
        let level = curve.iter().enumerate().map(|(i, y)| y - slope * i as f64);
        let (low, high) = level.fold((f64::MAX, f64::MIN), |(low, high), y| {
            (low.min(y), high.max(y))
        });
        high - low
    };
    let steepest = curve
        .windows(2)
        .map(|w| (w[1] - w[0]).abs())
        .fold(0.0, f64::max);
    let (mut low, mut high) = (-steepest, steepest);
    for _ in 0..60 {
        let (a, b) = (low + (high - low) / 3.0, high - (high - low) / 3.0);
        if spread(a) < spread(b) {
            high = b
        } else {
            low = a
        }
    }
    spread(low.midpoint(high))
}
