//! How near each crossing is to a slip: the time that is left, against the room that is used.

use crate::{
    Axis, Chart, Frame, Picture,
    brush::{Unpaintable, dashed, stroke},
    ink::Ink,
    mark::{Standing, Taken, beside, mark},
};

/// Crossings that are drawn at most; those after the first so many are as good as on top of others.
const DRAWN: usize = 600;
/// Crossings that bear their names because they are the nearest, however well they stand.
const NAMED: usize = 3;
/// The time shown, s: what is farther off lies on the right edge.
const SHOWN_S: (f64, f64) = (1.0, 86_400.0);

/// One crossing.
#[derive(Clone, Debug, PartialEq)]
pub struct Nearness {
    /// What it is called.
    pub name: String,
    /// How it stands.
    pub standing: Standing,
    /// Seconds until the band of its phase error leaves the headroom; absent if not in sight.
    pub seconds_to_slip: Option<f64>,
    /// The phase error with its 95 % band as a part of the headroom, 0 and more.
    pub used: f64,
}

impl Nearness {
    /// Draws crossings that are in order, the worst first; those that do not stand well, and the
    /// nearest, bear their names as far as there is room.
    pub fn draw(crossings: &[Self]) -> Picture {
        let across = Axis::ahead(
            "time to a slip, if nothing is set anew",
            SHOWN_S.0,
            SHOWN_S.1,
        );
        let up = Axis::even("headroom used, %", 0.0, 110.0);
        let frame = Frame {
            title: "How near to a slip".to_owned(),
            description: description(crossings),
            key: Vec::new(),
            across: across.clone(),
            up: up.clone(),
        };
        frame.draw(|chart| paint(chart, crossings, &across, &up))
    }

    fn left_s(&self) -> f64 {
        self.seconds_to_slip.unwrap_or(SHOWN_S.1)
    }

    fn is_in_sight(&self) -> bool {
        self.seconds_to_slip
            .is_some_and(|seconds| seconds < SHOWN_S.1)
    }
}

fn description(crossings: &[Nearness]) -> String {
    let near = crossings.iter().filter(|c| c.is_in_sight()).count();
    let soonest = crossings
        .iter()
        .filter_map(|c| Some((c.seconds_to_slip?, c.name.as_str())))
        .min_by(|a, b| a.0.total_cmp(&b.0));
    let soonest = soonest.map_or_else(String::new, |(seconds, name)| {
        format!(" The nearest is {name}, in {seconds:.0} seconds.")
    });
    format!(
        "{} crossings by the time that is left and the room that is used; for {near} of them a slip \
         is in sight within a day if nothing is set anew.{soonest}",
        crossings.len()
    )
}

fn paint(
    chart: &mut Chart<'_>,
    crossings: &[Nearness],
    across: &Axis,
    up: &Axis,
) -> Result<(), Unpaintable> {
    let full = [SHOWN_S.0, SHOWN_S.1].map(|at_s| (across.place(at_s), up.place(100.0)));
    dashed(chart, full, stroke(Ink::Brick, 1.4))?;
    let place = |c: &Nearness| (across.place(c.left_s()), up.place(100.0 * c.used));
    let drawn = &crossings[..crossings.len().min(DRAWN)];
    // The worst are drawn last, and so lie on top.
    for crossing in drawn.iter().rev() {
        mark(chart, place(crossing), crossing.standing, 5.0)?;
    }
    let mut taken = Taken::default();
    let troubled = |c: &&Nearness| matches!(c.standing, Standing::Adrift | Standing::Fading);
    let mut nearest: Vec<&Nearness> = drawn.iter().filter(|c| c.is_in_sight()).collect();
    nearest.sort_by(|a, b| a.left_s().total_cmp(&b.left_s()));
    for crossing in drawn
        .iter()
        .filter(troubled)
        .chain(nearest.into_iter().take(NAMED))
    {
        let at = place(crossing);
        if taken.take(chart, at, &crossing.name) {
            let right_half = at.0 > across.place(3_600.0);
            let aside = if right_half { -10.0 } else { 10.0 };
            beside(chart, at, &crossing.name, (aside, 0.0), Ink::Text)?;
        }
    }
    Ok(())
}
