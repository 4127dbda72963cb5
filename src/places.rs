//! Places in a text and what is wrong there: line, column, the line itself and a caret below it; parsers' messages in
//! plain words.

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

/// A parser's message in plain words: one line, the nearest key for an unknown one, what a bare number lacks.
pub(crate) fn plain_message(message: &str) -> String {
    let message = message.lines().filter(|l| !l.trim().is_empty()).collect::<Vec<_>>().join("; ");
    unknown_key(&message).or_else(|| wrong_kind(&message)).unwrap_or(message)
}

/// "unknown field `tlt`, expected one of ..." with the nearest key first.
fn unknown_key(message: &str) -> Option<String> {
    let (wrong, rest) = message.strip_prefix("unknown field `")?.split_once('`')?;
    let known: Vec<&str> = rest.split('`').skip(1).step_by(2).collect();
    let hint = match wrong {
        "theta" | "phi" => "; write cut = { theta = \"42 deg\", phi = \"0 deg\" }".into(),
        _ => {
            nearest(wrong, known.iter().copied()).map_or(String::new(), |n| format!("; did you mean `{n}`?"))
        }
    };
    Some(format!("unknown key `{wrong}`{hint} (known here: {})", known.join(", ")))
}

/// "invalid type: integer `405`, expected a string": a quantity without its unit, or a section of the wrong shape.
fn wrong_kind(message: &str) -> Option<String> {
    let (found, expected) = message.strip_prefix("invalid type: ")?.split_once(", expected ")?;
    let value = found.split('`').nth(1);
    Some(match (value, expected) {
        (Some(number), "a string") if number.parse::<f64>().is_ok() => format!(
            "`{number}` has no unit; write a text with number and unit, such as \"405 nm\", \"0.5 deg\" or \"22 degC\""
        ),
        (Some(flag), "a string") => {
            format!("`{flag}` stands where a text in quotes is due, such as \"about-beam\" or \"2 mm\"")
        }
        (_, "a string") => {
            "a text in quotes is due here, such as \"bbo\" or \"405 nm\"; write a section once, [pump]".into()
        }
        (_, "a sequence") => "a section is due here, such as [crystal]".into(),
        _ => return None,
    })
}

/// The name closest to `wanted`, if one is close enough to be meant.
pub(crate) fn nearest<'a>(wanted: &str, names: impl Iterator<Item = &'a str>) -> Option<&'a str> {
    names
        .map(|name| (strsim::jaro_winkler(&wanted.to_lowercase(), name), name))
        .filter(|(likeness, _)| *likeness > 0.72)
        .max_by(|a, b| a.0.total_cmp(&b.0))
        .map(|(_, name)| name)
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
    fn messages_say_what_to_write() {
        let bare = plain_message("invalid type: integer `405`, expected a string");
        assert!(bare.starts_with("`405` has no unit; write a text"), "{bare}");
        let key = plain_message("unknown field `tlt`, expected one of `tilt`, `roll`");
        assert_eq!(key, "unknown key `tlt`; did you mean `tilt`? (known here: tilt, roll)");
    }

    #[test]
    fn places_outside_the_text_do_not_panic() {
        assert!(point_at("x", "\u{b5}m", 1..900, "odd").starts_with("x:1:1: odd"));
        assert!(point_at("x", "", 7..9, "odd").starts_with("x:1:1: odd"));
    }
}
