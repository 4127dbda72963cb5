//! Places in a text, for messages: line, column, the line itself and a caret below it.

use std::fmt::Write as _;
use std::ops::Range;

/// `name:line:column: message`, the line, and a caret under the place.
pub(crate) fn point_at(name: &str, text: &str, span: Range<usize>, message: &str) -> String {
    let start = floor_boundary(text, span.start);
    let before = &text[..start];
    let number = before.matches('\n').count() + 1;
    let line_start = before.rfind('\n').map_or(0, |n| n + 1);
    let line = text[line_start..].lines().next().unwrap_or("");
    let column = text[line_start..start].chars().count();
    let end = floor_boundary(text, span.end.max(start));
    let width = text[start..end].lines().next().unwrap_or("").chars().count().max(1);
    let mut out = format!("{name}:{number}:{}: {message}", column + 1);
    let gutter = number.to_string();
    let blank = " ".repeat(gutter.len());
    let indent: String = line.chars().take(column).map(|c| if c == '\t' { '\t' } else { ' ' }).collect();
    let _ = write!(out, "\n{blank} |\n{gutter} | {line}\n{blank} | {indent}{}", "^".repeat(width));
    out
}

fn floor_boundary(text: &str, at: usize) -> usize {
    let mut at = at.min(text.len());
    while !text.is_char_boundary(at) {
        at -= 1;
    }
    at
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_caret_stands_under_the_value() {
        let text = "[pump]\nwavelength = \"405\"\n";
        let at = text.find("\"405\"").expect("there");
        assert_eq!(
            point_at("job.toml", text, at..at + 5, "no unit"),
            "job.toml:2:14: no unit\n  |\n2 | wavelength = \"405\"\n  |              ^^^^^"
        );
    }

    #[test]
    fn places_outside_the_text_do_not_panic() {
        assert!(point_at("x", "\u{b5}m", 1..900, "odd").starts_with("x:1:1: odd"));
        assert!(point_at("x", "", 7..9, "odd").starts_with("x:1:1: odd"));
    }
}
