//! Tables: one list of columns (name, unit, meaning) gives the header, the documentation and the JSON keys.

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

/// Rows under columns.
#[derive(Debug, Clone, PartialEq)]
pub struct Table {
    /// Name in JSON.
    pub name: &'static str,
    /// In order.
    pub columns: Vec<Column>,
    /// Each as long as `columns`.
    pub rows: Vec<Vec<Cell>>,
}

impl Table {
    /// An empty table whose last two columns are `extrapolated` and `status`.
    #[must_use]
    pub fn new(name: &'static str, columns: &[Column]) -> Self {
        let columns = columns.iter().copied().chain([EXTRAPOLATED, STATUS]).collect();
        Self { name, columns, rows: Vec::new() }
    }

    /// Adds a row: the values of the columns, then `extrapolated` and `status`.
    ///
    /// # Panics
    /// If there are more or fewer values than columns.
    pub fn push(&mut self, values: Vec<Cell>, extrapolated: bool, status: Status) {
        let mut row = values;
        row.push(extrapolated.into());
        row.push(status.into());
        assert_eq!(row.len(), self.columns.len(), "a row of {} has one value per column", self.name);
        self.rows.push(row);
    }

    /// Puts a column in front; `values` has one cell per row.
    pub fn lead(&mut self, column: Column, values: Vec<Cell>) {
        self.columns.insert(0, column);
        for (row, value) in self.rows.iter_mut().zip(values) {
            row.insert(0, value);
        }
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
