//! What is watched, as lines that fit a terminal: a line a crossing.

use std::collections::BTreeMap;

use ratewright_client::{Freshness, Id, Setting, Update};

use crate::show;

/// Columns between two cells.
const GAP: usize = 3;
/// What is run may be cut down to this width before other columns are given up.
const RUNS_AT_LEAST: usize = 12;
/// Lines besides those of the crossings: what is said of contact, the heading, what is left out,
/// and the one the cursor is on.
const OTHER_LINES: usize = 4;

const HEADING: [&str; COLUMNS] = [
    "crossing",
    "setting",
    "runs",
    "off by",
    "in effect",
    "freshness",
];
const COLUMNS: usize = 6;
const RUNS: usize = 2;
/// Columns that are given up one by one where the terminal is narrow.
const GIVEN_UP: [usize; 3] = [4, 3, 1];

/// The newest of every crossing.
#[derive(Debug, Default)]
pub(super) struct Board {
    settings: BTreeMap<Id, Box<Setting>>,
    /// What is said of each crossing whose newest setting must not be run.
    refused: BTreeMap<String, String>,
    /// What is said of lost contact.
    lost: Option<String>,
}

/// A line, and how fresh the setting on it is.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct Line {
    pub(super) text: String,
    pub(super) freshness: Option<Freshness>,
}

/// The crossing of a setting's name, or what stands for it.
fn crossing_of(name: &str) -> String {
    let of = name.trim_start_matches("crossings/");
    of.split('/').next().unwrap_or(of).to_owned()
}

impl Board {
    /// Takes in what was heard.
    pub(super) fn take(&mut self, update: Update) {
        match update {
            Update::Setting(setting) => {
                self.refused.remove(setting.crossing.as_str());
                self.settings.insert(setting.crossing.clone(), setting);
            }
            Update::Refused { name, error } => {
                self.refused.insert(
                    crossing_of(&name),
                    format!("{name} must not be run: {error}"),
                );
            }
            Update::Older { name, newest } => {
                self.refused
                    .insert(crossing_of(&name), super::passed_over(&name, newest));
            }
            Update::Lost(loss) => self.lost = Some(format!("{loss}; settings stay in force")),
            Update::Regained => self.lost = None,
            _ => {}
        }
    }

    /// The lines at this house time, within so many rows and columns; the least fresh first.
    pub(super) fn lines(
        &self,
        now_ns: Option<i64>,
        freshness: impl Fn(&Setting) -> Freshness,
        (rows, columns): (usize, usize),
    ) -> Vec<Line> {
        let mut settings: Vec<(Freshness, &Setting)> = self
            .settings
            .values()
            .map(|setting| (freshness(setting), setting.as_ref()))
            .collect();
        settings.sort_by_key(|(freshness, _)| match freshness {
            Freshness::Expired => 0,
            Freshness::Stale => 1,
            Freshness::Current => 2,
        });
        let room = rows.saturating_sub(OTHER_LINES + self.refused.len()).max(1);
        let left_out = settings.len().saturating_sub(room);
        settings.truncate(room);

        let mut table = vec![HEADING.map(str::to_owned)];
        table.extend(settings.iter().map(|&(freshness, setting)| {
            cells(setting, freshness, now_ns.unwrap_or(setting.decided_ns))
        }));
        let said = self.lost.clone().unwrap_or_else(|| self.contact());
        let mut lines = vec![plain(said)];
        let freshnesses = settings.iter().map(|(freshness, _)| Some(*freshness));
        if !settings.is_empty() {
            let texts = fitted(&table, columns).into_iter();
            lines.extend(
                texts
                    .zip(std::iter::once(None).chain(freshnesses))
                    .map(|(text, freshness)| Line { text, freshness }),
            );
        }
        if left_out > 0 {
            lines.push(plain(format!(
                "and {left_out} more; name crossings to watch only these"
            )));
        }
        lines.extend(self.refused.values().cloned().map(plain));
        for line in &mut lines {
            line.text = cut(&line.text, columns);
        }
        lines
    }

    fn contact(&self) -> String {
        match self.settings.len() {
            0 => "in contact; no setting yet".to_owned(),
            1 => "in contact; 1 crossing has a setting".to_owned(),
            many => format!("in contact; {many} crossings have a setting"),
        }
    }
}

fn plain(text: String) -> Line {
    Line {
        text,
        freshness: None,
    }
}

fn cells(setting: &Setting, freshness: Freshness, now_ns: i64) -> [String; COLUMNS] {
    let until_s = |at_ns: i64| (at_ns - now_ns) as f64 / 1e9;
    [
        setting.crossing.to_string(),
        setting.number.to_string(),
        show::realised(&setting.realised),
        show::offset(setting.residual),
        when(until_s(setting.effect_ns)),
        fresh(freshness, until_s(setting.expiry_ns)),
    ]
}

/// `in 12 s`, `12 s ago`. Whole seconds, so that the lines don't change with every beat.
fn when(seconds: f64) -> String {
    let whole = whole(seconds.abs());
    if seconds > 0.0 {
        format!("in {whole}")
    } else {
        format!("{whole} ago")
    }
}

fn whole(seconds: f64) -> String {
    match seconds {
        seconds if seconds < 120.0 => format!("{seconds:.0} s"),
        seconds => show::duration(seconds),
    }
}

fn fresh(freshness: Freshness, left_s: f64) -> String {
    match freshness {
        Freshness::Current => format!("current, {} left", whole(left_s.max(0.0))),
        Freshness::Stale => format!("stale, {} left", whole(left_s.max(0.0))),
        Freshness::Expired => format!("expired {} ago", whole((-left_s).max(0.0))),
    }
}

/// The rows as lines that keep within `columns`: at first what is run is cut, then columns are
/// given up.
fn fitted(table: &[[String; COLUMNS]], columns: usize) -> Vec<String> {
    let mut widths: [usize; COLUMNS] = std::array::from_fn(|column| {
        let cells = table.iter().map(|row| row[column].chars().count());
        cells.max().unwrap_or(0)
    });
    let runs = widths[RUNS];
    let mut kept: Vec<usize> = (0..COLUMNS).collect();
    for given_up in GIVEN_UP.into_iter().map(Some).chain([None]) {
        let others = kept.iter().filter(|&&column| column != RUNS);
        let used: usize = others.map(|&column| widths[column] + GAP).sum();
        widths[RUNS] = runs.min(columns.saturating_sub(used));
        if widths[RUNS] >= RUNS_AT_LEAST.min(runs) {
            break;
        }
        kept.retain(|&column| Some(column) != given_up);
    }
    table
        .iter()
        .map(|row| joined(row, &kept, &widths))
        .collect()
}

fn joined(row: &[String; COLUMNS], kept: &[usize], widths: &[usize; COLUMNS]) -> String {
    let mut line = String::new();
    for &column in kept {
        let (cell, width) = (cut(&row[column], widths[column]), widths[column]);
        line += &format!("{cell:<width$}{:GAP$}", "");
    }
    line.trim_end().to_owned()
}

/// The text, its end replaced by a mark if it is too wide.
fn cut(text: &str, width: usize) -> String {
    if text.chars().count() <= width {
        return text.to_owned();
    }
    let kept = text.chars().take(width.saturating_sub(1));
    kept.chain(['…']).collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::fake_server::{FakeServer, HOUSE_NS, cadence_setting, nearest_setting};
    use ratewright_client::Client;
    use ratewright_ratio::Fraction;

    /// Three crossings, one of which was then told to run what it must not.
    async fn board() -> Board {
        let server = FakeServer::start();
        for id in ["film", "hall-to-van", "programme-return"] {
            server.facility.declare_crossing(id, 1024, 1024);
        }
        let pair = Fraction::new(99_999_213, 100_000_000);
        for setting in [
            nearest_setting("film", (1, 12), 1.000_970, (1024, 1024)),
            nearest_setting("hall-to-van", (1, 7), 1.088_435, (1024, 1024)),
            cadence_setting("programme-return", (2, 3), pair, (1024, 1024)),
        ] {
            server.facility.publish(setting);
        }
        let client = Client::connect(&server.address())
            .await
            .expect("it listens");
        let mut watch = client.watch(&[]);
        let mut board = Board::default();
        for _ in 0..3 {
            board.take(watch.next().await.expect("a setting"));
        }
        let mut bad = nearest_setting("film", (1, 13), 1.000_970, (1024, 1024));
        bad.certificate = nearest_setting("film", (1, 13), 0.7, (1024, 1024)).certificate;
        server.facility.say(bad);
        board.take(watch.next().await.expect("a refusal"));
        board
    }

    /// 20 s after the settings were made; one has expired, as far as this test says.
    fn drawn(board: &Board, size: (usize, usize)) -> Vec<String> {
        let freshness = |setting: &Setting| match setting.crossing.as_str() {
            "hall-to-van" => Freshness::Expired,
            "film" => Freshness::Stale,
            _ => Freshness::Current,
        };
        let lines = board.lines(Some(HOUSE_NS + 20_000_000_000), freshness, size);
        lines.into_iter().map(|line| line.text).collect()
    }

    #[tokio::test]
    async fn the_least_fresh_come_first_and_what_must_not_be_run_is_named() {
        let board = board().await;
        let lines = drawn(&board, (24, 140));
        assert_eq!(lines[0], "in contact; 3 crossings have a setting");
        let starts = ["crossing ", "hall-to-van ", "film ", "programme-return "];
        for (line, start) in lines[1..].iter().zip(starts) {
            assert!(line.starts_with(start), "{lines:#?}");
        }
        assert!(lines[3].contains("stale, 100 s left"), "{lines:#?}");
        assert!(lines[4].contains("19 s ago"), "{lines:#?}");
        assert!(
            lines[5].starts_with("crossings/film/settings/1-13 must not be run"),
            "{lines:#?}"
        );
    }

    #[tokio::test]
    async fn the_board_keeps_within_the_terminal() {
        let board = board().await;
        for columns in [40, 60, 80, 120, 200] {
            for line in drawn(&board, (24, columns)) {
                assert!(line.chars().count() <= columns, "{columns}: {line:?}");
            }
        }
        let narrow = drawn(&board, (24, 80));
        assert!(
            narrow[1].contains("setting") && narrow[1].ends_with("freshness"),
            "{narrow:#?}"
        );
        let low = drawn(&board, (6, 80));
        assert_eq!(low.len(), 5, "{low:#?}");
        assert!(low[3].starts_with("and 2 more"), "{low:#?}");
    }

    #[tokio::test]
    async fn lost_contact_is_said_until_it_is_back() {
        let mut board = Board::default();
        board.take(Update::Lost(ratewright_client::Loss {
            reason: "the daemon is away".to_owned(),
            retry_in: std::time::Duration::from_secs(2),
        }));
        let said = drawn(&board, (24, 120));
        assert_eq!(
            said,
            ["no contact: the daemon is away; next try in 2.0 s; settings stay in force"]
        );
        board.take(Update::Regained);
        assert_eq!(drawn(&board, (24, 120)), ["in contact; no setting yet"]);
    }
}
