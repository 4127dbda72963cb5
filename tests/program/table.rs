//! CSV and JSON as scripts read them: every cell checked, both forms compared.

use std::collections::HashSet;

use serde_json::Value;

/// A CSV table whose header and cells are sound.
#[derive(Debug)]
pub struct Table {
    columns: Vec<String>,
    rows: Vec<Vec<String>>,
}

/// Columns that hold words.
const WORDS: [&str; 31] = [
    "panel",
    "compensators",
    "crystal_process",
    "crystal_material",
    "crystal_dataset",
    "material",
    "dataset",
    "process",
    "plane",
    "photon",
    "polarization",
    "first_process",
    "second_process",
    "gap_kind",
    "partner_polarization",
    "formula",
    "point_group",
    "optic_sign",
    "default_dataset",
    "datasets",
    "basis",
    "arm",
    "contribution",
    "error_unit",
    "quantity",
    "parameter",
    "at_bound",
    "outlier",
    "unit",
    "status",
    "extrapolated",
];

const STATUSES: [&str; 13] = [
    "ok",
    "touching",
    "coincident",
    "apart",
    "no_phase_matching",
    "no_nonlinearity",
    "out_of_range",
    "opaque",
    "total_reflection",
    "open_ring",
    "optic_axis",
    "invalid",
    "not_converged",
];

impl Table {
    /// Reads a table and checks all that holds for every table.
    #[track_caller]
    pub fn read(text: &str) -> Self {
        let mut reader = csv::Reader::from_reader(text.as_bytes());
        let columns: Vec<String> = reader.headers().expect("a header").iter().map(String::from).collect();
        let rows = reader
            .records()
            .map(|record| record.expect("as many cells as columns").iter().map(String::from).collect())
            .collect();
        let table = Self { columns, rows };
        table.check();
        table
    }

    #[track_caller]
    fn check(&self) {
        let distinct: HashSet<&String> = self.columns.iter().collect();
        assert_eq!(distinct.len(), self.columns.len(), "a column stands twice in {:?}", self.columns);
        assert_eq!(self.columns[self.columns.len() - 2..], ["extrapolated", "status"]);
        for (n, row) in self.rows.iter().enumerate() {
            for (column, cell) in self.columns.iter().zip(row) {
                match column.as_str() {
                    "status" => assert!(STATUSES.contains(&cell.as_str()), "{n}: {cell}"),
                    "extrapolated" => assert!(["true", "false"].contains(&cell.as_str()), "{n}: {cell}"),
                    name if WORDS.contains(&name) => {}
                    name if !cell.is_empty() => check_number(cell, name),
                    _ => {}
                }
            }
        }
    }

    /// The columns of the specification, in order; the two that end every table follow.
    #[track_caller]
    pub fn assert_columns(&self, specified: &str) {
        let specified: Vec<&str> =
            specified.split(", ").map(str::trim).chain(["extrapolated", "status"]).collect();
        assert_eq!(self.columns, specified);
    }

    /// How many rows.
    pub fn len(&self) -> usize {
        self.rows.len()
    }

    /// A cell as it stands.
    #[track_caller]
    pub fn cell(&self, row: usize, column: &str) -> &str {
        let at = self.columns.iter().position(|c| c == column);
        &self.rows[row][at.unwrap_or_else(|| panic!("no column {column} in {:?}", self.columns))]
    }

    /// A cell as a number.
    #[track_caller]
    pub fn number(&self, row: usize, column: &str) -> f64 {
        let cell = self.cell(row, column);
        cell.parse().unwrap_or_else(|_| panic!("{column} of row {row} is no number: `{cell}`"))
    }

    /// All cells of a column.
    #[track_caller]
    pub fn column(&self, column: &str) -> Vec<&str> {
        (0..self.len()).map(|row| self.cell(row, column)).collect()
    }

    /// These cells are empty, and no others.
    #[track_caller]
    pub fn assert_empty(&self, row: usize, columns: &[&str]) {
        let empty: Vec<&str> =
            self.columns.iter().map(String::as_str).filter(|c| self.cell(row, c).is_empty()).collect();
        assert_eq!(empty, columns, "empty cells of row {row}");
    }
}

/// Shortest digits that read back as the same double, and no NaN, infinity or negative zero.
#[track_caller]
fn check_number(cell: &str, column: &str) {
    let number: f64 = cell.parse().unwrap_or_else(|_| panic!("{column}: `{cell}` is no number"));
    assert!(number.is_finite(), "{column}: {cell}");
    assert!(number != 0.0 || number.is_sign_positive(), "{column}: {cell}");
    let shortest = [format!("{number}"), format!("{number:e}")];
    assert!(shortest.contains(&cell.to_string()), "{column}: {cell} is written as {shortest:?}");
}

/// The JSON of a command has the promised keys, and its tables say the same as the CSV ones.
#[track_caller]
pub fn assert_json(text: &str, command: &str, tables: &[(&str, &Table)]) -> Value {
    let json: Value = serde_json::from_str(text).expect("valid JSON");
    let object = json.as_object().expect("one object");
    let keys: Vec<&str> = object.keys().map(String::as_str).collect();
    let mut expected = vec!["version", "command", "job", "conventions", "datasets", "warnings"];
    expected.extend(tables.iter().map(|(name, _)| name));
    assert_eq!(keys, expected);
    assert_eq!(json["version"], env!("CARGO_PKG_VERSION"));
    assert_eq!(json["command"], command);
    for key in ["conventions", "datasets", "warnings"] {
        let list = json[key].as_array().unwrap_or_else(|| panic!("{key} is a list"));
        assert!(list.iter().all(Value::is_string), "{key}: {list:?}");
    }
    for (name, table) in tables {
        assert_same(json[name].as_array().expect("a list of rows"), table);
        assert_same_digits(text, table);
    }
    json
}

#[track_caller]
fn assert_same(rows: &[Value], table: &Table) {
    assert_eq!(rows.len(), table.len());
    for (n, row) in rows.iter().enumerate() {
        let row = row.as_object().expect("a row is an object");
        let keys: Vec<&String> = row.keys().collect();
        assert_eq!(keys, table.columns.iter().collect::<Vec<_>>());
        for (column, value) in row {
            let cell = table.cell(n, column);
            let same = match value {
                Value::Null => cell.is_empty(),
                Value::Bool(flag) => cell == flag.to_string(),
                // serde_json may miss the last bit when it reads; `assert_same_digits` does not
                Value::Number(number) => number.as_f64().zip(cell.parse().ok()).is_some_and(nearly_equal),
                Value::String(words) => cell == words,
                Value::Array(_) | Value::Object(_) => false,
            };
            assert!(same, "{column} of row {n}: {value} in JSON, `{cell}` in CSV");
        }
    }
}

fn nearly_equal((a, b): (f64, f64)) -> bool {
    (a - b).abs() <= 2.0 * f64::EPSILON * b.abs()
}

/// Each number of the JSON, one key a line, reads back as exactly what CSV says.
#[track_caller]
fn assert_same_digits(text: &str, table: &Table) {
    for column in table.columns.iter().filter(|c| !WORDS.contains(&c.as_str())) {
        let key = format!("\"{column}\": ");
        let written = text.lines().filter_map(|line| line.trim().strip_prefix(&key));
        let in_json: Vec<f64> = written.filter_map(|v| v.trim_end_matches(',').parse().ok()).collect();
        let in_csv: Vec<f64> = table.column(column).iter().filter_map(|cell| cell.parse().ok()).collect();
        assert_eq!(in_json, in_csv, "{column}");
    }
}
