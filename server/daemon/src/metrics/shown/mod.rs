//! What the board shows, written at each scrape.

mod clocks;
mod crossings;
mod facility;
mod steadiness;
mod text;

use ratewright_control::{HouseNs, Id};

pub use self::steadiness::Steadiness;
use self::text::Text;
use super::counted;
use crate::board::Board;

const NS_PER_S: f64 = 1e9;

/// Clocks, and crossings, that have series of their own: the first by name. What watches over a larger
/// facility reads the figures of the whole, which count everyone.
pub const MOST_SUBJECTS: usize = 2_000;

/// The clocks whose stability figures are written: those with series of their own, if they are declared
/// to have statistics.
pub fn steadied(board: &Board) -> Vec<Id> {
    let clocks = board.clocks(None, MOST_SUBJECTS);
    let kept = clocks.iter().filter(|view| view.declaration.statistics);
    kept.map(|view| view.declaration.id.clone()).collect()
}

/// Everything there is to scrape: what was counted, what `board` shows at `house_ns`, and how steady
/// the clocks are.
pub fn render(board: &Board, house_ns: HouseNs, steadiness: &[Steadiness]) -> String {
    let mut text = Text(counted::render());
    text.one(
        "ratewright_house_time_seconds",
        "House time, seconds since 1970-01-01 on a TAI-like scale.",
        house_ns as f64 / NS_PER_S,
    );
    let clocks = board.clocks(None, usize::MAX);
    let crossings = board.crossings(None, usize::MAX);
    facility::write(&mut text, &clocks, &crossings);
    let shown = |all: usize| all.min(MOST_SUBJECTS);
    clocks::write(&mut text, &clocks[..shown(clocks.len())], house_ns);
    steadiness::write(&mut text, steadiness);
    crossings::write(
        &mut text,
        board,
        &crossings[..shown(crossings.len())],
        house_ns,
    );
    text.0
}
