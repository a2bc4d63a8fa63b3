//! The board on a terminal, drawn over itself.

use std::io;
use std::time::Duration;

use console::{Term, style};
use ratewright_client::{Freshness, Watch};
use tokio::time::MissedTickBehavior;

use super::Ended;
use super::board::{Board, Line};
use crate::out;

/// Time between two looks.
const BEAT: Duration = Duration::from_millis(250);

/// Draws until it is interrupted.
pub(super) async fn run(watch: &mut Watch, term: &Term) -> Ended {
    let mut board = Board::default();
    let mut screen = Screen {
        term,
        shown: Vec::new(),
    };
    let mut beat = tokio::time::interval(BEAT);
    beat.set_missed_tick_behavior(MissedTickBehavior::Delay);
    loop {
        tokio::select! {
            update = watch.next() => match update {
                Ok(update) => board.take(update),
                Err(error) => return Ended::Refused(error),
            },
            _ = beat.tick() => {
                let (rows, columns) = term.size();
                let size = (usize::from(rows), usize::from(columns));
                let lines = board.lines(watch.house_now_ns(), |setting| watch.freshness(setting), size);
                if let Err(fault) = screen.show(lines) {
                    return out::failure(&fault).into();
                }
            }
        }
    }
}

/// The lines that stand on the terminal.
struct Screen<'t> {
    term: &'t Term,
    shown: Vec<Line>,
}

impl Screen<'_> {
    /// Draws over what was shown, if it is not the same.
    fn show(&mut self, lines: Vec<Line>) -> io::Result<()> {
        if lines == self.shown {
            return Ok(());
        }
        self.term.move_cursor_up(self.shown.len())?;
        for line in &lines {
            self.term.clear_line()?;
            self.term.write_line(&coloured(line))?;
        }
        self.term.clear_to_end_of_screen()?;
        self.term.flush()?;
        self.shown = lines;
        Ok(())
    }
}

/// The words say all that a colour says.
fn coloured(line: &Line) -> String {
    let text = style(&line.text);
    let text = match line.freshness {
        Some(Freshness::Expired) => text.red(),
        Some(Freshness::Stale) => text.yellow(),
        Some(Freshness::Current) | None => text,
    };
    text.to_string()
}
