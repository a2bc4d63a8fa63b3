//! The frame that all pictures share: title, axes with units, grid, and room to draw in.

use plotters::{
    chart::{ChartBuilder, ChartContext},
    coord::{
        Shift,
        combinators::{BindKeyPoints, WithKeyPoints},
        types::RangedCoordf64,
    },
    prelude::{Cartesian2d, DrawingArea, IntoDrawingArea, PathElement, SVGBackend, Text},
    style::{
        FontStyle, TextStyle,
        text_anchor::{HPos, VPos},
    },
};

use crate::{
    Axis, Ink, Picture,
    brush::{Unpaintable, stroke, words},
};

/// Units of the drawing a pixel: the library works in whole ones.
pub(crate) const SCALE: u32 = 10;

const WIDTH: u32 = 760;
const HEIGHT: u32 = 320;
/// Room around the plot, px: above for title and label, left for marks, and so on.
const ABOVE: u32 = 62;
const LEFT: u32 = 62;
const RIGHT: u32 = 18;
const BELOW: u32 = 44;

const TITLE_PX: u32 = 16;
const LABEL_PX: u32 = 12;
/// What a letter of a label takes on average, px.
const LETTER_PX: f64 = 7.6;
/// Length of the strokes in the key, px.
const STROKE_PX: f64 = 20.0;

/// Where a painter draws: coordinates are those of [`Axis::place`].
pub type Chart<'a> = ChartContext<
    'a,
    SVGBackend<'a>,
    Cartesian2d<WithKeyPoints<RangedCoordf64>, WithKeyPoints<RangedCoordf64>>,
>;

type Area<'a> = DrawingArea<SVGBackend<'a>, Shift>;

/// A picture to be.
#[derive(Clone, Debug, PartialEq)]
pub struct Frame {
    /// What it shows; stands above it, and is its name for screen readers.
    pub title: String,
    /// What a reader sees in it, for those who cannot.
    pub description: String,
    /// Names of the curves, shown above on the right.
    pub key: Vec<(Ink, &'static str)>,
    /// The axis below.
    pub across: Axis,
    /// The axis on the left.
    pub up: Axis,
}

impl Frame {
    /// Draws the frame, and lets `paint` draw in it.
    pub fn draw(self, paint: impl FnOnce(&mut Chart<'_>) -> Result<(), Unpaintable>) -> Picture {
        let mut drawing = String::new();
        self.paint_all(&mut drawing, paint)
            .expect("drawing into a string does not fail");
        // The library's own svg element gives way to the picture's.
        let inner = drawing.split_once('>').map_or("", |(_, rest)| rest);
        let inner = inner.trim_end().trim_end_matches("</svg>").trim_start();
        Picture {
            width: WIDTH,
            height: HEIGHT,
            title: self.title,
            description: self.description,
            drawing: inner.to_owned(),
            scale: SCALE,
        }
    }

    fn paint_all(
        &self,
        drawing: &mut String,
        paint: impl FnOnce(&mut Chart<'_>) -> Result<(), Unpaintable>,
    ) -> Result<(), Unpaintable> {
        let size = (WIDTH * SCALE, HEIGHT * SCALE);
        let area = SVGBackend::with_string(drawing, size).into_drawing_area();
        area.fill(&Ink::Paper.color())?;
        let [above, left, right, below] = [ABOVE, LEFT, RIGHT, BELOW].map(|px| (px * SCALE) as i32);
        let plot = area.margin(above, below, left, right);
        let mut chart = ChartBuilder::on(&plot)
            .build_cartesian_2d(self.across.coordinate(), self.up.coordinate())?;
        self.grid(&chart)?;
        paint(&mut chart)?;
        self.words(&area, &chart)?;
        self.key(&area)?;
        drop(chart);
        drop(plot);
        area.present()?;
        Ok(())
    }

    fn grid(&self, chart: &Chart<'_>) -> Result<(), Unpaintable> {
        let area = chart.plotting_area();
        let thin = stroke(Ink::Grid, 1.0);
        let (across, up) = (&self.across, &self.up);
        for (at, _) in &across.marks {
            area.draw(&PathElement::new([(*at, up.from), (*at, up.to)], thin))?;
        }
        for (at, _) in &up.marks {
            area.draw(&PathElement::new(
                [(across.from, *at), (across.to, *at)],
                thin,
            ))?;
        }
        Ok(())
    }

    fn words(&self, area: &Area<'_>, chart: &Chart<'_>) -> Result<(), Unpaintable> {
        let say = |text: &str, (x, y): (i32, i32), style: TextStyle<'_>| {
            area.draw(&Text::new(text.to_owned(), (x, y), style))
        };
        let px = |px: u32| (px * SCALE) as i32;
        let title = words(Ink::Text, TITLE_PX, HPos::Left, VPos::Top);
        let title = TextStyle {
            font: title.font.clone().style(FontStyle::Bold),
            ..title
        };
        say(&self.title, (px(14), px(12)), title)?;
        say(
            &self.up.label,
            (px(14), px(40)),
            words(Ink::Quiet, LABEL_PX, HPos::Left, VPos::Top),
        )?;
        let bottom = px(HEIGHT - BELOW);
        for (at, label) in &self.across.marks {
            let (x, _) = chart.backend_coord(&(*at, self.up.from));
            let style = words(Ink::Text, LABEL_PX, HPos::Center, VPos::Top);
            say(label, (x, bottom + px(6)), style)?;
        }
        for (at, label) in &self.up.marks {
            let (_, y) = chart.backend_coord(&(self.across.from, *at));
            let style = words(Ink::Text, LABEL_PX, HPos::Right, VPos::Center);
            say(label, (px(LEFT - 7), y), style)?;
        }
        let style = words(Ink::Quiet, LABEL_PX, HPos::Right, VPos::Bottom);
        say(
            &self.across.label,
            (px(WIDTH - RIGHT), px(HEIGHT - 7)),
            style,
        )?;
        Ok(())
    }

    /// A short stroke of each ink with the name of its curve, on the right.
    fn key(&self, area: &Area<'_>) -> Result<(), Unpaintable> {
        let px = |px: f64| (px * f64::from(SCALE)) as i32;
        let width = |name: &str| STROKE_PX + name.chars().count() as f64 * LETTER_PX + 14.0;
        let whole: f64 = self.key.iter().map(|(_, name)| width(name)).sum();
        let mut left = f64::from(WIDTH - RIGHT) - whole;
        for &(ink, name) in &self.key {
            let ends = [left, left + STROKE_PX].map(|x| (px(x), px(46.0)));
            area.draw(&PathElement::new(ends, stroke(ink, 3.0)))?;
            let style = words(Ink::Text, LABEL_PX, HPos::Left, VPos::Center);
            let at = (px(left + STROKE_PX + 6.0), px(46.0));
            area.draw(&Text::new(name.to_owned(), at, style))?;
            left += width(name);
        }
        Ok(())
    }
}

impl Axis {
    fn coordinate(&self) -> WithKeyPoints<RangedCoordf64> {
        (self.from..self.to).with_key_points(Vec::new())
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::brush::line;

    fn picture() -> Picture {
        let frame = Frame {
            title: "a < b & c".to_owned(),
            description: "nothing > all".to_owned(),
            key: vec![(Ink::Plum, "curve")],
            across: Axis::elapsed(0.0, 3_600.0),
            up: Axis::even("level, samples", -1.0, 1.0),
        };
        frame.draw(|chart| line(chart, [(0.0, -1.0), (3_600.0, 1.0)], stroke(Ink::Plum, 1.0)))
    }

    #[test]
    fn it_says_what_it_is_to_those_who_cannot_see_it() {
        let svg = picture().inline();
        assert!(svg.starts_with("<svg ") && svg.trim_end().ends_with("</svg>"));
        assert_eq!(svg.matches("<svg").count(), 1);
        assert!(svg.contains("<title>a &lt; b &amp; c</title>"));
        assert!(svg.contains("<desc>nothing &gt; all</desc>"));
        assert!(svg.contains("role=\"img\""));
    }

    /// The line runs from corner to corner of the plot: left 62, right 760 - 18, top 62, bottom 320 - 44 px.
    #[test]
    fn values_lie_where_the_axes_say() {
        let corner_to_corner = "points=\"620,2759 7419,620 \"";
        let svg = picture().inline();
        assert!(svg.contains(corner_to_corner), "{svg}");
    }

    #[test]
    fn every_colour_is_an_ink() {
        let svg = picture().inline();
        let inks: Vec<_> = Ink::ALL
            .iter()
            .map(|ink| format!("#{:06X}", ink.light()))
            .collect();
        for colour in svg.split('"').filter(|part| part.starts_with('#')) {
            assert!(inks.iter().any(|ink| ink == colour), "{colour}");
        }
    }

    #[test]
    fn only_a_file_carries_the_style_sheet() {
        let picture = picture();
        assert!(picture.file().contains(crate::STYLE));
        assert!(!picture.inline().contains("<style>"));
    }
}
