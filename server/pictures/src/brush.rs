//! Strokes, washes and words in the inks of the house; curves and dashed lines.

use plotters::{
    element::PathElement,
    series::{DashedLineSeries, LineSeries},
    style::{
        Color, IntoFont, ShapeStyle, TextStyle,
        text_anchor::{HPos, Pos, VPos},
    },
};

use crate::{Chart, Ink, Moment, frame::SCALE, thinned};

/// Why the library could not draw. Nothing that is drawn in memory fails: a painter passes it on, and
/// nobody else meets it.
pub type Unpaintable = Box<dyn std::error::Error>;

const FONT: &str = "system-ui, 'DejaVu Sans', sans-serif";

/// A stroke of so many px.
pub(crate) fn stroke(ink: Ink, px: f64) -> ShapeStyle {
    ink.color().stroke_width((px * f64::from(SCALE)) as u32)
}

/// A fill through which the ground shows: `strength` 0 shows all of it, 1 nothing.
pub(crate) fn wash(ink: Ink, strength: f64) -> ShapeStyle {
    ink.color().mix(strength).filled()
}

/// What the library takes for the size of a letter, beside what is written into the picture.
const FONT_FACTOR: f64 = 1.24;

/// Words of so many px, hung by a corner or the middle of a side.
pub(crate) fn words<'a>(ink: Ink, px: u32, h: HPos, v: VPos) -> TextStyle<'a> {
    let style: TextStyle<'_> = (FONT, f64::from(px * SCALE) * FONT_FACTOR)
        .into_font()
        .color(&ink.color());
    style.pos(Pos::new(h, v))
}

/// A curve through moments, which are in order of time.
pub(crate) fn curve(
    chart: &mut Chart<'_>,
    moments: &[Moment],
    ink: Ink,
    px: f64,
) -> Result<(), Unpaintable> {
    let points = thinned(moments)
        .into_iter()
        .map(|moment| (moment.at_s, moment.value));
    chart.draw_series(LineSeries::new(points, stroke(ink, px)))?;
    Ok(())
}

/// A straight line in dashes.
pub(crate) fn dashed(
    chart: &mut Chart<'_>,
    ends: [(f64, f64); 2],
    style: ShapeStyle,
) -> Result<(), Unpaintable> {
    let (dash, gap) = (7 * SCALE, 5 * SCALE);
    chart.draw_series(DashedLineSeries::new(ends, dash, gap, style))?;
    Ok(())
}

/// A straight line.
pub(crate) fn line(
    chart: &Chart<'_>,
    ends: [(f64, f64); 2],
    style: ShapeStyle,
) -> Result<(), Unpaintable> {
    chart.plotting_area().draw(&PathElement::new(ends, style))?;
    Ok(())
}
