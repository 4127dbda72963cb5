//! Tables: one list of columns (name, unit, meaning) gives the header, the documentation and the JSON keys.

use std::fmt::Display;

use crate::matching::Status;

/// One column.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Column {
    /// Name with its unit as a suffix.
    pub name: &'static str,
    /// Unit, or empty.
    pub unit: &'static str,
    /// What stands in it.
    pub meaning: &'static str,
}

/// Shorthand for a column.
#[must_use]
pub const fn column(name: &'static str, unit: &'static str, meaning: &'static str) -> Column {
    Column { name, unit, meaning }
}

/// The column every table has next to last.
pub const EXTRAPOLATED: Column =
    column("extrapolated", "", "an index was taken from outside the data set's range");
/// The column every table has last.
pub const STATUS: Column = column("status", "", "ok, or why a value is missing");

/// One value.
#[derive(Debug, Clone, PartialEq)]
pub enum Cell {
    /// Does not exist; the status says why.
    Empty,
    /// A finite number.
    Number(f64),
    /// A count.
    Integer(i64),
    /// Words.
    Text(String),
    /// true or false.
    Flag(bool),
}

impl From<f64> for Cell {
    /// NaN and infinities do not exist; -0 is 0.
    fn from(value: f64) -> Self {
        if value.is_finite() { Self::Number(value + 0.0) } else { Self::Empty }
    }
}

impl Cell {
    /// An angle in degrees, without the rounding noise of one that is zero by symmetry.
    #[must_use]
    pub fn degrees(value: f64) -> Self {
        Self::from(if value.abs() < 1e-12 { 0.0 } else { value })
    }
}

impl From<Option<f64>> for Cell {
    fn from(value: Option<f64>) -> Self {
        value.map_or(Self::Empty, Self::from)
    }
}

impl From<usize> for Cell {
    fn from(value: usize) -> Self {
        Self::Integer(value as i64)
    }
}

impl From<bool> for Cell {
    fn from(value: bool) -> Self {
        Self::Flag(value)
    }
}

impl From<&str> for Cell {
    fn from(value: &str) -> Self {
        Self::Text(value.into())
    }
}

impl From<String> for Cell {
    fn from(value: String) -> Self {
        Self::Text(value)
    }
}

impl From<Option<&str>> for Cell {
    fn from(value: Option<&str>) -> Self {
        value.map_or(Self::Empty, Self::from)
    }
}

impl From<Status> for Cell {
    fn from(value: Status) -> Self {
        Self::Text(value.to_string())
    }
}

/// Takes rows value by value. A [`Table`] keeps them; [`Lines`](super::Lines) writes them as CSV at once, so that a
/// sweep needs no memory for its rows.
pub trait Rows {
    /// A finite number; anything else does not exist.
    fn number(&mut self, value: f64);
    /// A count.
    fn count(&mut self, value: usize);
    /// A text.
    fn words(&mut self, text: impl Display);
    /// true or false.
    fn flag(&mut self, flag: bool);
    /// A value that does not exist.
    fn empty(&mut self);
    /// The last two values of a row.
    fn end(&mut self, extrapolated: bool, status: Status);

    /// A number that may not exist.
    fn maybe(&mut self, value: Option<f64>) {
        match value {
            Some(value) => self.number(value),
            None => self.empty(),
        }
    }

    /// An angle in degrees, or a length, without the rounding noise of one that is zero by symmetry.
    fn clean(&mut self, value: f64) {
        self.number(if value.abs() < 1e-12 { 0.0 } else { value });
    }

    /// Several values that do not exist.
    fn blank(&mut self, count: usize) {
        (0..count).for_each(|_| self.empty());
    }

    /// A whole row: the values of its columns, then the last two.
    fn push(&mut self, values: &[Cell], extrapolated: bool, status: Status) {
        values.iter().for_each(|cell| self.cell(cell));
        self.end(extrapolated, status);
    }

    /// A value that is kept as a cell.
    fn cell(&mut self, cell: &Cell) {
        match cell {
            Cell::Empty => self.empty(),
            Cell::Number(value) => self.number(*value),
            Cell::Integer(value) => self.words(value),
            Cell::Text(text) => self.words(text),
            Cell::Flag(flag) => self.flag(*flag),
        }
    }
}

/// Rows under columns.
#[derive(Debug, Clone, PartialEq)]
pub struct Table {
    /// Name in JSON.
    pub name: &'static str,
    /// In order.
    pub columns: Vec<Column>,
    /// Each as long as `columns`.
    pub rows: Vec<Vec<Cell>>,
    /// The row that is being put together.
    open: Vec<Cell>,
}

impl Table {
    /// An empty table whose last two columns are `extrapolated` and `status`.
    #[must_use]
    pub fn new(name: &'static str, columns: &[Column]) -> Self {
        let columns = columns.iter().copied().chain([EXTRAPOLATED, STATUS]).collect();
        Self { name, columns, rows: Vec::new(), open: Vec::new() }
    }
}

impl Rows for Table {
    fn number(&mut self, value: f64) {
        self.open.push(value.into());
    }

    fn count(&mut self, value: usize) {
        self.open.push(value.into());
    }

    fn words(&mut self, text: impl Display) {
        self.open.push(text.to_string().into());
    }

    fn flag(&mut self, flag: bool) {
        self.open.push(flag.into());
    }

    fn empty(&mut self) {
        self.open.push(Cell::Empty);
    }

    fn cell(&mut self, cell: &Cell) {
        self.open.push(cell.clone());
    }

    /// # Panics
    /// If the row has more or fewer values than the table has columns.
    fn end(&mut self, extrapolated: bool, status: Status) {
        self.flag(extrapolated);
        self.words(status);
        assert_eq!(self.open.len(), self.columns.len(), "a row of {} has one value per column", self.name);
        self.rows.push(std::mem::take(&mut self.open));
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn numbers_that_do_not_exist_are_empty() {
        assert_eq!(Cell::from(f64::NAN), Cell::Empty);
        assert_eq!(Cell::from(f64::INFINITY), Cell::Empty);
        let Cell::Number(zero) = Cell::from(-0.0) else { panic!("a number") };
        assert!(zero.is_sign_positive());
    }
}
