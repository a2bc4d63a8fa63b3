//! Reading rows on a thread of its own.

use std::io::Read;

use csv::{Reader, StringRecord};
use tokio::sync::mpsc;

use super::Row;
use super::columns::Columns;

/// Reads rows until the end of the input, or until nobody wants them any more.
pub(super) fn read(mut csv: Reader<impl Read>, columns: &Columns, rows: &mpsc::Sender<Row>) {
    let mut record = StringRecord::new();
    loop {
        let (line, content) = match csv.read_record(&mut record) {
            Ok(false) => return,
            Ok(true) => (
                record.position().map_or(0, csv::Position::line),
                columns.read(&record),
            ),
            Err(error) => (
                error.position().map_or(0, csv::Position::line),
                Err(error.to_string()),
            ),
        };
        let row = Row {
            line,
            end_byte: csv.position().byte(),
            content,
        };
        if rows.blocking_send(row).is_err() {
            return;
        }
    }
}
