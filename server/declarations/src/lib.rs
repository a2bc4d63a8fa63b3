//! TOML files with clocks and crossings in them: read key by key, every fault noted with its line.
//!
//! A reader makes a [`Sheet`] of the text, asks the root [`Section`] for its keys and tables, closes it,
//! and finishes the sheet, which gives the result or all faults. What was not asked for is unknown, and a
//! fault. [`Declarations`] reads the keys of clocks and crossings that every such file shares; a file with
//! more keys asks the same section for them.
//!
//! ```
//! # use ratewright_declarations::{Section, Sheet, integer};
//! let sheet = Sheet::new("[store]\nkeep_days = 400\nfolder = 'x'\n");
//! let table = sheet.table().unwrap();
//! let root = Section::root(&sheet, &table);
//! let mut keep_days = 30;
//! root.section("store", |store| {
//!     store.set("keep_days", "1 to 366 days", &mut keep_days, |value| integer(value, 1, 366));
//! });
//! root.close();
//! let faults: Vec<_> = sheet.finish(()).unwrap_err().iter().map(|f| format!("{}: {f}", f.line)).collect();
//! assert_eq!(faults[0], "2: store.keep_days is 400; accepted: 1 to 366 days");
//! assert_eq!(faults[1], "3: store.folder is no key here; accepted: keep_days");
//! ```

mod declarations;
mod expected;
mod faults;
mod running;
mod section;

pub use declarations::{Declarations, as_id};
pub use faults::{Fault, Faults};
pub use section::{Section, Sheet, flag, integer, number, seconds, text};
