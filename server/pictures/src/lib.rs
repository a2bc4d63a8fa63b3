//! Pictures as SVG: one look for the page, the command line and rehearsals.
//!
//! Every picture is made by [`Frame::draw`], which gives it its size, its fonts, its axes with units,
//! a title and a description for those who cannot see it. What is drawn in it takes its colours from
//! [`Ink`] and nowhere else: the light colours stand in the picture itself, so that it looks right
//! wherever it is opened, and [`STYLE`] turns them into the dark ones where dark is preferred.
//!
//! One file for each kind of picture; they take plain numbers, not the engine's types.

mod axis;
mod brush;
mod course;
mod curve;
mod fractions;
mod frame;
mod ink;
mod ladder;
mod mark;
mod nearness;
mod phase;
mod picture;
mod spectrum;
mod stability;
mod time;
mod turns;

pub use axis::Axis;
pub use brush::Unpaintable;
pub use course::{Banded, Course};
pub use curve::{Moment, Stretch, thinned};
pub use fractions::{Fractions, Neighbour};
pub use frame::{Chart, Frame};
pub use ink::{Ink, STYLE};
pub use ladder::ladder;
pub use mark::Standing;
pub use nearness::Nearness;
pub use phase::PhaseStory;
pub use picture::Picture;
pub use spectrum::SpectrumStory;
pub use stability::{Limit, Steadiness};
pub use turns::Turns;
