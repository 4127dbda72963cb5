//! Tables as CSV and JSON.

use serde_json::{Map, Value, json};

use super::table::{Cell, Table};
use super::{Answer, Conventions};

/// One header line, no comment lines, numbers that read back exactly, empty cells for what does not exist.
///
/// # Errors
/// None in practice: the text goes to memory.
pub fn csv(table: &Table) -> Result<String, csv::Error> {
    let mut writer = csv::WriterBuilder::new().from_writer(Vec::new());
    writer.write_record(table.columns.iter().map(|c| c.name))?;
    for row in &table.rows {
        writer.write_record(row.iter().map(field))?;
    }
    let bytes = writer.into_inner().map_err(|e| e.into_error())?;
    Ok(String::from_utf8(bytes).expect("every field is UTF-8"))
}

fn field(cell: &Cell) -> String {
    match cell {
        Cell::Empty => String::new(),
        Cell::Number(value) => number(*value),
        Cell::Integer(value) => value.to_string(),
        Cell::Text(text) => text.clone(),
        Cell::Flag(flag) => flag.to_string(),
    }
}

/// The shortest text that reads back as the same double; exponents where plain digits would be long.
fn number(value: f64) -> String {
    let size = value.abs();
    if value != 0.0 && !(1e-5..1e16).contains(&size) { format!("{value:e}") } else { value.to_string() }
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
    fn numbers_read_back_exactly() {
        for value in [0.1, 1.0 / 3.0, 1e-9, 6.02e23, -2.5, 405.0, 1e-5, 123_456_789.123_456_7] {
            assert_eq!(number(value).parse::<f64>(), Ok(value));
        }
        assert_eq!(number(405.0), "405");
        assert_eq!(number(1e-9), "1e-9");
    }
}
