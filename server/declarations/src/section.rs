//! Reads tables of a TOML file key by key, and notes every fault with its line instead of stopping at
//! the first. (Deserialising into a struct stops there.)

use std::{cell::RefCell, ops::Range};

use toml::{
    Spanned,
    de::{DeTable, DeValue},
};

use crate::Fault;

/// Longest piece of the file that a fault quotes, characters.
const QUOTE: usize = 60;

/// The text of a file, and the faults found in it so far.
#[derive(Debug)]
pub struct Sheet<'t> {
    text: &'t str,
    faults: RefCell<Vec<Fault>>,
}

impl<'t> Sheet<'t> {
    /// A sheet without faults.
    pub fn new(text: &'t str) -> Self {
        Self {
            text,
            faults: RefCell::default(),
        }
    }

    /// The file's table.
    ///
    /// # Errors
    /// All faults of syntax.
    pub fn table(&self) -> Result<DeTable<'t>, Vec<Fault>> {
        let (table, errors) = DeTable::parse_recoverable(self.text);
        if errors.is_empty() {
            return Ok(table.into_inner());
        }
        let fault = |error: &toml::de::Error| Fault {
            line: error.span().map_or(0, |span| self.line(&span)),
            key: String::new(),
            problem: format!("not TOML ({})", error.message().trim()),
            accepted: "TOML 1.0".to_owned(),
        };
        self.faults.borrow_mut().extend(errors.iter().map(fault));
        Err(self.sorted())
    }

    /// The result, if nothing is at fault.
    ///
    /// # Errors
    /// All faults in the order of their lines.
    pub fn finish<T>(self, result: T) -> Result<T, Vec<Fault>> {
        let faults = self.sorted();
        if faults.is_empty() {
            Ok(result)
        } else {
            Err(faults)
        }
    }

    fn sorted(&self) -> Vec<Fault> {
        let mut faults = self.faults.take();
        faults.sort_by_key(|fault| fault.line);
        faults
    }

    fn line(&self, span: &Range<usize>) -> usize {
        let before = self.text.get(..span.start).unwrap_or(self.text);
        before.matches('\n').count() + 1
    }

    fn quote(&self, span: &Range<usize>) -> String {
        let written = self.text.get(span.clone()).unwrap_or_default();
        let first_line = written.lines().next().unwrap_or_default();
        let mut quote: String = first_line.chars().take(QUOTE).collect();
        if quote.len() < written.trim_end().len() {
            quote.push('…');
        }
        quote
    }

    fn note(&self, line: usize, key: String, problem: String, accepted: &str) {
        self.faults.borrow_mut().push(Fault {
            line,
            key,
            problem,
            accepted: accepted.to_owned(),
        });
    }
}

/// A table of the file.
#[derive(Debug)]
pub struct Section<'t> {
    sheet: &'t Sheet<'t>,
    table: &'t DeTable<'t>,
    /// Path of the keys below, with a dot at its end; empty for the root.
    prefix: String,
    line: usize,
    /// Keys asked for: what else is there is unknown.
    known: RefCell<Vec<&'static str>>,
}

impl<'t> Section<'t> {
    /// The table of the whole file, from [`Sheet::table`].
    pub fn root(sheet: &'t Sheet<'t>, table: &'t DeTable<'t>) -> Self {
        Self {
            sheet,
            table,
            prefix: String::new(),
            line: 1,
            known: RefCell::default(),
        }
    }

    /// Reads the table `key`, if it is there.
    pub fn section(&self, key: &'static str, read: impl FnOnce(&Section<'t>)) {
        let Some(value) = self.find(key) else { return };
        match value.get_ref() {
            DeValue::Table(table) => {
                let section = self.below(format!("{key}."), value, table);
                read(&section);
                section.close();
            }
            _ => self.mistaken(key, value, &format!("a table, written [{key}]")),
        }
    }

    /// Reads every table of the array `key`; those that have a fault give `None`.
    pub fn each<T>(
        &self,
        key: &'static str,
        mut read: impl FnMut(&Section<'t>) -> Option<T>,
    ) -> Vec<Option<T>> {
        let Some(value) = self.find(key) else {
            return Vec::new();
        };
        let Some(items) = value.get_ref().as_array() else {
            self.mistaken(key, value, &format!("tables, each written [[{key}]]"));
            return Vec::new();
        };
        let mut results = Vec::new();
        for (i, item) in items.iter().enumerate() {
            let DeValue::Table(table) = item.get_ref() else {
                self.mistaken(key, item, &format!("tables, each written [[{key}]]"));
                continue;
            };
            let section = self.below(format!("{key}[{i}]."), item, table);
            results.push(read(&section));
            section.close();
        }
        results
    }

    /// Reads `key` into `place`, which keeps its default if the key is absent or wrong. `accepted` says
    /// what `read` takes; it gives `None` for anything else.
    pub fn set<T>(
        &self,
        key: &'static str,
        accepted: &str,
        place: &mut T,
        read: impl FnOnce(&DeValue<'t>) -> Option<T>,
    ) {
        let Some(value) = self.find(key) else { return };
        match read(value.get_ref()) {
            Some(result) => *place = result,
            None => self.mistaken(key, value, accepted),
        }
    }

    /// Reads `key`, which must be there. `None` notes a fault.
    pub fn need<T>(
        &self,
        key: &'static str,
        accepted: &str,
        read: impl FnOnce(&DeValue<'t>) -> Option<T>,
    ) -> Option<T> {
        let mut place = None;
        self.set(key, accepted, &mut place, |value| read(value).map(Some));
        if self.table.get(key).is_none() {
            let path = format!("{}{key}", self.prefix);
            self.sheet
                .note(self.line, path, "is missing".to_owned(), accepted);
        }
        place
    }

    /// Notes that the value of `key` will not do beside others.
    pub fn fault(&self, key: &'static str, value: &str, accepted: &str) {
        let line = self
            .table
            .get(key)
            .map_or(self.line, |found| self.sheet.line(&found.span()));
        self.sheet.note(
            line,
            format!("{}{key}", self.prefix),
            format!("is {value}"),
            accepted,
        );
    }

    /// Notes every key that nothing asked for.
    pub fn close(&self) {
        let known = self.known.borrow();
        for key in self
            .table
            .keys()
            .filter(|key| !known.contains(&key.get_ref().as_ref()))
        {
            let line = self.sheet.line(&key.span());
            let path = format!("{}{}", self.prefix, key.get_ref());
            self.sheet
                .note(line, path, "is no key here".to_owned(), &known.join(", "));
        }
    }

    fn find(&self, key: &'static str) -> Option<&'t Spanned<DeValue<'t>>> {
        self.known.borrow_mut().push(key);
        self.table.get(key)
    }

    fn below(&self, path: String, value: &Spanned<DeValue<'t>>, table: &'t DeTable<'t>) -> Self {
        let line = self.sheet.line(&value.span());
        let prefix = format!("{}{path}", self.prefix);
        Self {
            sheet: self.sheet,
            table,
            prefix,
            line,
            known: RefCell::default(),
        }
    }

    fn mistaken(&self, key: &str, value: &Spanned<DeValue<'t>>, accepted: &str) {
        let span = value.span();
        let problem = format!("is {}", self.sheet.quote(&span));
        self.sheet.note(
            self.sheet.line(&span),
            format!("{}{key}", self.prefix),
            problem,
            accepted,
        );
    }
}

/// A string.
pub fn text<'v>(value: &'v DeValue<'_>) -> Option<&'v str> {
    value.as_str()
}

/// `true` or `false`.
pub fn flag(value: &DeValue<'_>) -> Option<bool> {
    value.as_bool()
}

/// An integer in `low..=high`.
pub fn integer(value: &DeValue<'_>, low: i64, high: i64) -> Option<i64> {
    let digits = value.as_integer()?;
    let integer = i64::from_str_radix(digits.as_str(), digits.radix()).ok()?;
    (low..=high).contains(&integer).then_some(integer)
}

/// An integer or a float in `low..=high`.
pub fn number(value: &DeValue<'_>, low: f64, high: f64) -> Option<f64> {
    let number = match value {
        DeValue::Float(float) => float.as_str().parse().ok()?,
        _ => integer(value, i64::MIN, i64::MAX)? as f64,
    };
    (low..=high).contains(&number).then_some(number)
}

/// Seconds in `low..=high`, as nanoseconds.
pub fn seconds(value: &DeValue<'_>, low: f64, high: f64) -> Option<i64> {
    number(value, low, high).map(|s| (s * 1e9).round() as i64)
}
