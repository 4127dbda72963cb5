//! Tables as CSV and JSON.

use std::fmt::{Display, Write as _};

use serde_json::{Map, Value, json};

use super::table::{Cell, Rows, Table};
use super::{Answer, Conventions};
use crate::matching::Status;

/// Rows of CSV, written as they come: numbers that read back exactly, nothing for what does not exist, no comments.
///
/// Every row begins with the same fields until [`Lines::lead`] changes them.
pub struct Lines {
    rows: Records,
    digits: zmij::Buffer,
    text: String,
    status: Status,
}

/// Rows whose first fields repeat; fields are quoted where commas, quotes or line breaks stand in them (RFC 4180).
#[derive(Default)]
struct Records {
    bytes: Vec<u8>,
    /// The first fields as they are written.
    lead: Vec<u8>,
    begun: bool,
}

impl Records {
    /// Digits, or words that need no quotes.
    fn plain(&mut self, field: &[u8]) {
        self.next();
        self.bytes.extend_from_slice(field);
    }

    fn words(&mut self, field: &str) {
        self.next();
        push_quoted(&mut self.bytes, field);
    }

    fn next(&mut self) {
        if self.begun {
            self.bytes.push(b',');
        } else {
            self.begun = true;
            self.bytes.extend_from_slice(&self.lead);
        }
    }

    fn end(&mut self) {
        self.bytes.push(b'\n');
        self.begun = false;
    }
}

fn push_quoted(bytes: &mut Vec<u8>, field: &str) {
    if field.bytes().any(|b| matches!(b, b',' | b'"' | b'\n' | b'\r')) {
        bytes.push(b'"');
        bytes.extend_from_slice(field.replace('"', "\"\"").as_bytes());
        bytes.push(b'"');
    } else {
        bytes.extend_from_slice(field.as_bytes());
    }
}

impl Default for Lines {
    fn default() -> Self {
        Self {
            rows: Records::default(),
            digits: zmij::Buffer::new(),
            text: String::new(),
            status: Status::Ok,
        }
    }
}

impl Lines {
    /// The names of columns, as a row.
    pub fn header<'c>(&mut self, columns: impl IntoIterator<Item = &'c str>) {
        self.rows.lead.clear();
        columns.into_iter().for_each(|name| self.rows.words(name));
        self.rows.end();
    }

    /// Every row begins with these values from now on.
    pub fn lead<'c>(&mut self, values: impl IntoIterator<Item = Lead<'c>>) {
        self.rows.lead.clear();
        self.status = Status::Ok;
        for value in values {
            match value {
                Lead::Number(value) => {
                    self.rows.lead.extend_from_slice(digits(&mut self.digits, value).as_bytes());
                }
                Lead::Text(text) => push_quoted(&mut self.rows.lead, text),
            }
            self.rows.lead.push(b',');
        }
    }

    /// The first status but `ok` of the rows since the last [`Lines::lead`].
    #[must_use]
    pub fn status(&self) -> Status {
        self.status
    }

    /// The bytes so far, which are taken out.
    #[must_use]
    pub fn take(&mut self) -> Vec<u8> {
        std::mem::take(&mut self.rows.bytes)
    }

    /// Goes on at the end of other bytes; what there is so far is lost.
    pub fn go_on(&mut self, bytes: Vec<u8>) {
        self.rows = Records { bytes, ..Records::default() };
    }
}

/// A value that rows begin with.
#[derive(Debug, Clone, Copy)]
pub enum Lead<'a> {
    /// Finite.
    Number(f64),
    /// Words.
    Text(&'a str),
}

impl Rows for Lines {
    fn number(&mut self, value: f64) {
        if value.is_finite() {
            self.rows.plain(digits(&mut self.digits, value).as_bytes());
        } else {
            self.empty();
        }
    }

    fn count(&mut self, value: usize) {
        self.words(value);
    }

    fn words(&mut self, text: impl Display) {
        self.text.clear();
        // a String takes every character
        let _ = write!(self.text, "{text}");
        self.rows.words(&self.text);
    }

    fn flag(&mut self, flag: bool) {
        self.rows.plain(if flag { b"true" } else { b"false" });
    }

    fn empty(&mut self) {
        self.rows.plain(b"");
    }

    fn end(&mut self, extrapolated: bool, status: Status) {
        self.flag(extrapolated);
        self.rows.plain(status.name().as_bytes());
        self.rows.end();
        if self.status == Status::Ok {
            self.status = status;
        }
    }
}

/// The shortest digits that read back as the same double, with an exponent where plain digits would be long; -0 is 0.
fn digits(buffer: &mut zmij::Buffer, value: f64) -> &str {
    let text = buffer.format_finite(value + 0.0);
    text.strip_suffix(".0").unwrap_or(text)
}

/// One header line, then the rows.
#[must_use]
pub fn csv(table: &Table) -> String {
    let mut lines = Lines::default();
    lines.header(table.columns.iter().map(|c| c.name));
    for row in &table.rows {
        row.iter().for_each(|cell| lines.cell(cell));
        lines.rows.end();
    }
    String::from_utf8(lines.take()).expect("every field is UTF-8")
}

/// One object: version, command, job, conventions, datasets, warnings, and each table as a list of rows.
#[must_use]
pub fn json(answer: &Answer) -> String {
    let Conventions { lines, datasets, .. } = &answer.conventions;
    let mut object = Map::new();
    object.insert("version".into(), env!("CARGO_PKG_VERSION").into());
    object.insert("command".into(), answer.command.into());
    object.insert("job".into(), answer.job.clone());
    object.insert("conventions".into(), json!(lines));
    object.insert("datasets".into(), json!(datasets));
    object.insert("warnings".into(), json!(answer.conventions.warnings));
    for table in &answer.tables {
        object.insert(
            table.name.into(),
            Value::Array(table.rows.iter().map(|row| entry(table, row)).collect()),
        );
    }
    let mut text = serde_json::to_string_pretty(&Value::Object(object)).expect("keys are texts");
    text.push('\n');
    text
}

fn entry(table: &Table, row: &[Cell]) -> Value {
    let pairs = table.columns.iter().zip(row).map(|(column, cell)| (column.name.to_string(), value(cell)));
    Value::Object(pairs.collect())
}

fn value(cell: &Cell) -> Value {
    match cell {
        Cell::Empty => Value::Null,
        Cell::Number(number) => json!(number),
        Cell::Integer(integer) => json!(integer),
        Cell::Text(text) => json!(text),
        Cell::Flag(flag) => json!(flag),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn words_are_quoted_where_they_must_be() {
        let mut lines = Lines::default();
        lines.lead([Lead::Number(3.0), Lead::Text("a,b")]);
        for text in ["plain -> text", "with \"quotes\"", "two\nlines", ""] {
            lines.words(text);
        }
        lines.end(false, Status::Ok);
        let bytes = lines.take();
        let mut reader = csv::ReaderBuilder::new().has_headers(false).from_reader(bytes.as_slice());
        let row = reader.records().next().expect("a row").expect("CSV");
        let fields: Vec<&str> = row.iter().collect();
        let expected = ["3", "a,b", "plain -> text", "with \"quotes\"", "two\nlines", "", "false", "ok"];
        assert_eq!(fields, expected);
    }

    #[test]
    fn numbers_read_back_exactly() {
        for value in [0.1, 1.0 / 3.0, 1e-9, 6.02e23, -2.5, 405.0, 1e-5, 123_456_789.123_456_7] {
            assert_eq!(digits(&mut zmij::Buffer::new(), value).parse::<f64>(), Ok(value));
        }
        for (value, text) in
            [(405.0, "405"), (1e-9, "1e-9"), (-0.0, "0"), (0.001, "0.001"), (-2.5e-7, "-2.5e-7")]
        {
            assert_eq!(digits(&mut zmij::Buffer::new(), value), text);
        }
    }
}
