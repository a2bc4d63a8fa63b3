//! The ladder: what a larger filter bank buys.

use crate::{
    Axis, Chart, Frame, Ink, Neighbour, Picture,
    brush::Unpaintable,
    mark::{Standing, Taken, beside, mark, path, ring},
};

/// Draws a ladder, from the simplest ratio to the nearest: how far each is off against its size. A
/// ratio that is exact lies on the bottom; the nearest has a ring.
pub fn ladder(rungs: &[Neighbour]) -> Picture {
    let errors = rungs
        .iter()
        .map(|rung| rung.residual.abs())
        .filter(|&error| error > 0.0);
    let (least, most) = errors.fold((1.0_f64, 1e-15_f64), |(least, most), error| {
        (least.min(error), most.max(error))
    });
    let largest = rungs.iter().map(|rung| rung.m).max().unwrap_or(1) as f64;
    let across = Axis::decades("size: input samples of a block, M", 0.9, largest * 1.5);
    let up = Axis::decades(
        "off the target, parts per million",
        least * 0.4e6,
        most * 2e6,
    );
    let frame = Frame {
        title: "The ladder: what a larger filter bank buys".to_owned(),
        description: description(rungs),
        key: Vec::new(),
        across: across.clone(),
        up: up.clone(),
    };
    frame.draw(|chart| paint(chart, rungs, &across, &up))
}

fn description(rungs: &[Neighbour]) -> String {
    match (rungs.first(), rungs.last()) {
        (Some(first), Some(last)) => format!(
            "From {}/{}, {:.3e} off the target, to {}/{}, {:.3e} off, in {} steps.",
            first.l,
            first.m,
            first.residual.abs(),
            last.l,
            last.m,
            last.residual.abs(),
            rungs.len()
        ),
        _ => "There is no ratio.".to_owned(),
    }
}

fn paint(
    chart: &mut Chart<'_>,
    rungs: &[Neighbour],
    across: &Axis,
    up: &Axis,
) -> Result<(), Unpaintable> {
    let place = |rung: &Neighbour| {
        let error = rung.residual.abs() * 1e6;
        (across.place(rung.m as f64), up.place(error.max(1e-30)))
    };
    // Between two sizes the simpler ratio is the best there is: a stair.
    let mut stair = Vec::new();
    for pair in rungs.windows(2) {
        let (one, next) = (place(&pair[0]), place(&pair[1]));
        stair.extend([one, (next.0, one.1), next]);
    }
    path(chart, stair, Ink::Quiet, 1.2)?;
    let mut taken = Taken::default();
    let last = rungs.len().saturating_sub(1);
    for (i, rung) in rungs.iter().enumerate().rev() {
        let at = place(rung);
        mark(chart, at, Standing::Sound, 4.0)?;
        if i == last {
            ring(chart, at, Ink::Amber, 8.0)?;
        }
        let text = match rung.residual {
            0.0 => format!("{}/{}, exact", rung.l, rung.m),
            _ => format!("{}/{}", rung.l, rung.m),
        };
        if taken.take(chart, at, &text) {
            let beyond = i == last && rungs.len() > 1;
            let aside = if beyond { -8.0 } else { 8.0 };
            beside(chart, at, &text, (aside, -9.0), Ink::Text)?;
        }
    }
    Ok(())
}
