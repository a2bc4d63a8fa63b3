//! Marks and the words beside them: four shapes that stay apart without their colour.

use plotters::{
    element::{Circle, EmptyElement, PathElement, Polygon, Text},
    style::text_anchor::{HPos, VPos},
};

use crate::{
    Chart, Ink,
    brush::{Unpaintable, stroke, wash, words},
    frame::SCALE,
};

/// How something stands. Each has a shape and an ink of its own, which the words of a page repeat.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Standing {
    /// As it should be: a disc.
    Sound,
    /// On its way there: a triangle that points up.
    Nearing,
    /// On its way from there: a triangle that points down.
    Fading,
    /// Not at all: a lozenge.
    Adrift,
}

impl Standing {
    /// Its ink.
    pub fn ink(self) -> Ink {
        match self {
            Self::Sound => Ink::Slate,
            Self::Nearing => Ink::Plum,
            Self::Fading => Ink::Amber,
            Self::Adrift => Ink::Brick,
        }
    }

    /// Corners around a middle, for a radius of 1; none for a disc.
    fn corners(self) -> &'static [(f64, f64)] {
        match self {
            Self::Sound => &[],
            Self::Nearing => &[(0.0, -1.2), (1.1, 0.8), (-1.1, 0.8)],
            Self::Fading => &[(0.0, 1.2), (1.1, -0.8), (-1.1, -0.8)],
            Self::Adrift => &[(0.0, -1.3), (1.0, 0.0), (0.0, 1.3), (-1.0, 0.0)],
        }
    }
}

/// A mark of so many px radius at a place of the chart.
pub(crate) fn mark(
    chart: &Chart<'_>,
    at: (f64, f64),
    standing: Standing,
    px: f64,
) -> Result<(), Unpaintable> {
    let radius = px * f64::from(SCALE);
    let fill = wash(standing.ink(), 1.0);
    let area = chart.plotting_area();
    if standing.corners().is_empty() {
        area.draw(&Circle::new(at, radius as i32, fill))?;
        return Ok(());
    }
    let corner = |&(x, y): &(f64, f64)| ((x * radius) as i32, (y * radius) as i32);
    let corners: Vec<_> = standing.corners().iter().map(corner).collect();
    area.draw(&(EmptyElement::at(at) + Polygon::new(corners, fill)))?;
    Ok(())
}

/// A ring of so many px radius.
pub(crate) fn ring(
    chart: &Chart<'_>,
    at: (f64, f64),
    ink: Ink,
    px: f64,
) -> Result<(), Unpaintable> {
    let radius = (px * f64::from(SCALE)) as i32;
    let element = Circle::new(at, radius, stroke(ink, 2.0));
    Ok(chart.plotting_area().draw(&element)?)
}

/// Words beside a place, so many px to the right of it and below; to the left of it, ending there,
/// if the px to the right are negative.
pub(crate) fn beside(
    chart: &Chart<'_>,
    at: (f64, f64),
    text: &str,
    (right, below): (f64, f64),
    ink: Ink,
) -> Result<(), Unpaintable> {
    let hang = if right < 0.0 { HPos::Right } else { HPos::Left };
    let style = words(ink, 12, hang, VPos::Center);
    let by = [right, below].map(|px| (px * f64::from(SCALE)) as i32);
    let text = Text::new(text.to_owned(), (by[0], by[1]), style);
    Ok(chart.plotting_area().draw(&(EmptyElement::at(at) + text))?)
}

/// A line through places of the chart.
pub(crate) fn path(
    chart: &Chart<'_>,
    places: Vec<(f64, f64)>,
    ink: Ink,
    px: f64,
) -> Result<(), Unpaintable> {
    let element = PathElement::new(places, stroke(ink, px));
    Ok(chart.plotting_area().draw(&element)?)
}

/// A shape through places of the chart, filled so that the ground shows through.
pub(crate) fn shape(
    chart: &Chart<'_>,
    places: Vec<(f64, f64)>,
    ink: Ink,
    strength: f64,
) -> Result<(), Unpaintable> {
    let element = Polygon::new(places, wash(ink, strength));
    Ok(chart.plotting_area().draw(&element)?)
}

/// Places that already bear words, so that no others are put upon them.
#[derive(Debug, Default)]
pub(crate) struct Taken(Vec<(f64, f64, f64)>);

impl Taken {
    /// True if `text` fits beside this place of the drawing, which is taken then.
    pub(crate) fn take(&mut self, chart: &Chart<'_>, at: (f64, f64), text: &str) -> bool {
        let (x, y) = chart.backend_coord(&at);
        let (x, y) = (f64::from(x), f64::from(y));
        let scale = f64::from(SCALE);
        let width = 7.2 * scale * text.chars().count() as f64 + 12.0 * scale;
        let free = self.0.iter().all(|&(left, right, level)| {
            x + width < left || right < x || (y - level).abs() > 14.0 * scale
        });
        if free {
            self.0.push((x, x + width, y));
        }
        free
    }
}
