//! Tables with a line of names that instruments and spreadsheets write: commas, or semicolons or tabs with decimal commas;
//! lines that begin with # are passed over.

/// A table whose names are read; names in lower case.
pub(crate) struct Columns<'t> {
    pub names: Vec<String>,
    /// Whether numbers may have a comma for a point.
    pub decimal_comma: bool,
    reader: csv::Reader<&'t [u8]>,
}

/// A row and its line in the file.
pub(crate) type Record = (usize, csv::StringRecord);

impl<'t> Columns<'t> {
    /// # Errors
    /// A first line that cannot be read.
    pub fn open(text: &'t str) -> Result<Self, String> {
        let text = text.trim_start_matches('\u{feff}');
        let is_content = |line: &&str| !line.trim().is_empty() && !line.starts_with('#');
        let first = text.lines().find(is_content).unwrap_or_default();
        let delimiter = match (first.contains(';'), first.contains('\t')) {
            (true, _) => b';',
            (_, true) => b'\t',
            _ => b',',
        };
        let mut reader = csv::ReaderBuilder::new()
            .delimiter(delimiter)
            .comment(Some(b'#'))
            .trim(csv::Trim::All)
            .from_reader(text.as_bytes());
        let headers = reader.headers().map_err(|e| unreadable(&e))?;
        let names = headers.iter().map(str::to_ascii_lowercase).collect();
        Ok(Self { names, decimal_comma: delimiter != b',', reader })
    }

    /// Rows with their lines; errors say which line cannot be read.
    pub fn records(&mut self) -> impl Iterator<Item = Result<Record, String>> {
        self.reader.records().map(|record| {
            let record = record.map_err(|e| unreadable(&e))?;
            Ok((record.position().map_or(0, |p| p.line() as usize), record))
        })
    }
}

fn unreadable(error: &csv::Error) -> String {
    match error.kind() {
        csv::ErrorKind::UnequalLengths { pos, expected_len, len } => format!(
            "line {}: {len} cells where the first line names {expected_len} columns",
            pos.as_ref().map_or(0, csv::Position::line)
        ),
        _ => format!("the table cannot be read: {error}"),
    }
}
