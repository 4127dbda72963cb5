//! Numbers, columns and sentences as people read them.

/// Degrees with three decimals, sign always shown where it matters.
pub(super) fn degrees(radians: f64) -> String {
    fixed(radians.to_degrees(), 3)
}

/// Degrees with a sign.
pub(super) fn signed(degrees: f64, decimals: usize) -> String {
    let text = fixed(degrees, decimals);
    if text.starts_with('-') { text } else { format!("+{text}") }
}

/// At most so many decimals, without trailing zeros or a negative zero.
pub(super) fn rounded(value: f64, decimals: usize) -> String {
    let text = fixed(value, decimals);
    if text.contains('.') { text.trim_end_matches('0').trim_end_matches('.').into() } else { text }
}

/// So many decimals, without a negative zero.
pub(super) fn fixed(value: f64, decimals: usize) -> String {
    let text = format!("{value:.decimals$}");
    let zero = text.bytes().all(|b| matches!(b, b'0' | b'.' | b'-'));
    if zero { text.trim_start_matches('-').into() } else { text }
}

/// A missing number is a dash.
pub(super) fn or_dash(value: Option<f64>, decimals: usize) -> String {
    value.map_or_else(|| "-".into(), |v| fixed(v, decimals))
}

/// Columns of text, right-aligned but for the first.
pub(super) fn grid(header: &[&str], rows: &[Vec<String>]) -> String {
    let width = |column: usize| {
        let cells = rows.iter().filter_map(|row| row.get(column)).map(|cell| cell.chars().count());
        cells.chain([header[column].chars().count()]).max().unwrap_or(0)
    };
    let widths: Vec<usize> = (0..header.len()).map(width).collect();
    let mut out = String::new();
    let mut line = |cells: Vec<&str>| {
        let mut text = String::from(" ");
        for (column, cell) in cells.iter().enumerate() {
            let pad = " ".repeat(widths[column].saturating_sub(cell.chars().count()));
            let aligned = if column == 0 { format!(" {cell}{pad}") } else { format!("  {pad}{cell}") };
            text.push_str(&aligned);
        }
        out.push_str(text.trim_end());
        out.push('\n');
    };
    line(header.to_vec());
    for row in rows {
        line(row.iter().map(String::as_str).collect());
    }
    out
}

/// Sentences broken at spaces before column 100; what follows the first line is set in by two more spaces.
pub(super) fn prose(text: &str) -> String {
    const WIDTH: usize = 100;
    let mut out = String::new();
    for line in text.lines() {
        let indent = line.len() - line.trim_start().len();
        let mut column = indent;
        out.push_str(&line[..indent]);
        for (index, word) in line.trim_start().split(' ').enumerate() {
            let length = word.chars().count();
            if index > 0 && column + 1 + length > WIDTH {
                out.push('\n');
                out.push_str(&" ".repeat(indent + 2));
                column = indent + 2;
            } else if index > 0 {
                out.push(' ');
                column += 1;
            }
            out.push_str(word);
            column += length;
        }
        out.push('\n');
    }
    out
}
