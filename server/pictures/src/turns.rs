//! Two ratios in turn: how far the outputs made are off the outputs wanted, block by block.

use crate::{
    Axis, Chart, Frame, Ink, Picture,
    brush::{Unpaintable, dashed, line, stroke},
    mark::path,
};

/// What the picture is made from.
#[derive(Clone, Debug, PartialEq)]
pub struct Turns {
    /// For each block from the start: whether it is of the higher ratio, and the error at its end,
    /// output samples.
    pub blocks: Vec<(bool, f64)>,
    /// The error's exact bound, output samples.
    pub bound_samples: f64,
    /// The two ratios, the lower first.
    pub ratios: [String; 2],
}

impl Turns {
    /// Draws it.
    pub fn draw(&self) -> Picture {
        let [low, high] = &self.ratios;
        let bound = self.bound_samples;
        let higher = self.blocks.iter().filter(|(is_high, _)| *is_high).count();
        let across = Axis::even("blocks from the start", 0.0, self.blocks.len() as f64);
        let up = Axis::even("off by, output samples", -1.5 * bound, 1.3 * bound);
        let frame = Frame {
            title: format!("Two ratios in turn: {low} and {high}"),
            description: format!(
                "Of the first {} blocks {higher} are of {high}, the others of {low}; the error at a \
                 block's end never passes {bound:.4} output samples.",
                self.blocks.len()
            ),
            key: vec![
                (Ink::Slate, "error"),
                (Ink::Brick, "its bound"),
                (Ink::Amber, "blocks of the higher ratio, ticks below"),
            ],
            across,
            up,
        };
        frame.draw(|chart| self.paint(chart))
    }

    fn paint(&self, chart: &mut Chart<'_>) -> Result<(), Unpaintable> {
        let end = self.blocks.len() as f64;
        for bound in [-self.bound_samples, self.bound_samples] {
            dashed(chart, [(0.0, bound), (end, bound)], stroke(Ink::Brick, 1.4))?;
        }
        let bottom = chart.y_range().start;
        let tick = 0.06 * (chart.y_range().end - bottom);
        for (i, _) in self
            .blocks
            .iter()
            .enumerate()
            .filter(|(_, (is_high, _))| *is_high)
        {
            let x = i as f64 + 0.5;
            line(
                chart,
                [(x, bottom), (x, bottom + tick)],
                stroke(Ink::Amber, 2.0),
            )?;
        }
        let mut stair = vec![(0.0, 0.0)];
        for (i, (_, error)) in self.blocks.iter().enumerate() {
            stair.push((i as f64 + 1.0, *error));
        }
        path(chart, stair, Ink::Slate, 1.4)
    }
}
