//! Job files and command-line overrides merged into one TOML tree that remembers where every value was written.
//!
//! All sources stand behind one another in one buffer: the file first, then one line per override. A span in that
//! buffer says which source a value came from, so a message can point at file, line and column, or name the option.

use std::collections::BTreeMap;
use std::ops::Range;
use std::sync::Arc;

use serde::Deserialize;
use thiserror::Error;
use toml::Spanned;
use toml::de::{DeArray, DeTable, DeValue};

use super::description::Description;
use super::keys::LISTS;
use crate::places::{plain_message, point_at};

/// A description that cannot be used. The text points at the place and says what to do.
#[derive(Debug, Clone, PartialEq, Eq, Error)]
#[error("{0}")]
pub struct JobError(pub String);

/// One source of values in the buffer.
#[derive(Debug, Clone)]
struct Source {
    /// File name, or option as typed.
    name: String,
    is_file: bool,
    range: Range<usize>,
}

/// A job file and overrides, in the order in which they count: later ones win.
#[derive(Debug, Clone, Default)]
pub struct Document {
    buffer: String,
    sources: Vec<Source>,
    /// Texts of files that values name, by the name as written.
    attached: BTreeMap<String, Arc<str>>,
}

impl Document {
    /// Starts from a job file's text.
    #[must_use]
    pub fn from_file(name: &str, text: &str) -> Self {
        let mut document = Self::default();
        document.push(name, true, text);
        document
    }

    fn push(&mut self, name: &str, is_file: bool, text: &str) {
        let start = self.buffer.len();
        self.buffer.push_str(text);
        self.sources.push(Source { name: name.into(), is_file, range: start..self.buffer.len() });
        self.buffer.push('\n');
    }

    /// Adds the text of a file that a value names so.
    pub fn attach(&mut self, name: &str, text: &str) {
        self.attached.insert(name.into(), text.into());
    }

    /// The text of a file that a value names so.
    #[must_use]
    pub fn attachment(&self, name: &str) -> Option<&str> {
        self.attached.get(name).map(|text| &**text)
    }

    /// Names and texts of all files that values name.
    pub fn attachments(&self) -> impl Iterator<Item = (&str, &str)> {
        self.attached.iter().map(|(name, text)| (name.as_str(), &**text))
    }

    /// Adds the sources of another document after those of this one.
    pub fn append(&mut self, other: &Self) {
        self.attached.extend(other.attached.clone());
        for source in &other.sources {
            self.push(&source.name, source.is_file, &other.buffer[source.range.clone()]);
        }
    }

    /// Overrides one key with a text. `option` is what messages call it (`--tilt`).
    pub fn set(&mut self, option: &str, key: &str, value: &str) {
        self.push(option, false, &format!("{} = {}", dotted(key), toml::Value::String(value.into())));
    }

    /// Overrides one key with a list of texts.
    pub fn set_list(&mut self, option: &str, key: &str, values: &[String]) {
        let list = toml::Value::Array(values.iter().map(|v| toml::Value::String(v.clone())).collect());
        self.push(option, false, &format!("{} = {list}", dotted(key)));
    }

    /// Overrides one key with a value in TOML syntax; a text that is no TOML value stands for itself.
    pub fn set_raw(&mut self, option: &str, key: &str, value: &str) {
        let line = format!("{} = {value}", dotted(key));
        if DeTable::parse(&line).is_ok() {
            self.push(option, false, &line);
        } else {
            self.set(option, key, value);
        }
    }

    /// Reads the merged tree as a description.
    ///
    /// # Errors
    /// Syntax, unknown keys and values of the wrong kind, each with its place.
    pub fn describe(&self) -> Result<Description, JobError> {
        let mut tree = DeTable::new();
        for source in &self.sources {
            let text = &self.buffer[source.range.clone()];
            let parsed = DeTable::parse(text).map_err(|e| {
                let span = e.span().unwrap_or(0..0);
                self.fault(shift(&span, source.range.start), &plain_message(e.message()))
            })?;
            let mut table = parsed.into_inner();
            shift_table(&mut table, source.range.start);
            if source.is_file {
                tree = table;
            } else {
                merge(&mut tree, table).map_err(|(span, message)| self.fault(span, &message))?;
            }
        }
        normalise(&mut tree);
        let whole = Spanned::new(0..self.buffer.len(), tree);
        Description::deserialize(toml::de::Deserializer::from(whole)).map_err(|e| {
            let message = plain_message(e.message());
            self.fault(e.span().unwrap_or(0..0), &message)
        })
    }

    /// The message with its place: file, line and column with the line and a caret, or the option as typed.
    #[must_use]
    pub fn fault(&self, span: Range<usize>, message: &str) -> JobError {
        let source = self.sources.iter().find(|s| s.range.start <= span.start && span.start <= s.range.end);
        JobError(match source {
            Some(source) if source.is_file => {
                let start = span.start - source.range.start;
                let end = span.end.saturating_sub(source.range.start);
                point_at(&source.name, &self.buffer[source.range.clone()], start..end, message)
            }
            Some(source) => format!("{}: {message}", source.name),
            None => message.into(),
        })
    }
}

/// A key path with each part quoted where TOML wants it.
fn dotted(key: &str) -> String {
    let bare = |part: &str| {
        !part.is_empty() && part.bytes().all(|b| b.is_ascii_alphanumeric() || b == b'_' || b == b'-')
    };
    let parts = key
        .split('.')
        .map(|p| if bare(p) { p.to_string() } else { toml::Value::String(p.into()).to_string() });
    parts.collect::<Vec<_>>().join(".")
}

fn shift(span: &Range<usize>, by: usize) -> Range<usize> {
    span.start + by..span.end + by
}

/// Moves all spans of a table by the place of its source in the buffer.
fn shift_table(table: &mut DeTable<'_>, by: usize) {
    let old = std::mem::take(table);
    for (key, mut value) in old {
        shift_value(&mut value, by);
        table.insert(Spanned::new(shift(&key.span(), by), key.into_inner()), value);
    }
}

fn shift_value(value: &mut Spanned<DeValue<'_>>, by: usize) {
    let span = shift(&value.span(), by);
    match value.get_mut() {
        DeValue::Array(items) => {
            let shifted = std::mem::replace(items, DeArray::from_iter([])).into_iter().map(|mut item| {
                shift_value(&mut item, by);
                item
            });
            *items = shifted.collect();
        }
        DeValue::Table(table) => shift_table(table, by),
        _ => {}
    }
    let inner = std::mem::replace(value.get_mut(), DeValue::Boolean(false));
    *value = Spanned::new(span, inner);
}

type MergeFault = (Range<usize>, String);

/// Lets the values of `over` win; key paths through several crystals are told apart by number, name or `*`.
fn merge<'a>(base: &mut DeTable<'a>, over: DeTable<'a>) -> Result<(), MergeFault> {
    for (key, value) in over {
        let name = key.get_ref().to_string();
        match base.get_mut(name.as_str()) {
            Some(there) => merge_value(there, value, &name)?,
            // `crystal.*.key` where no crystal is there yet, or only one
            None if LISTS.contains(&name.as_str()) => {
                let mut empty = Spanned::new(value.span(), DeValue::Table(DeTable::new()));
                merge_value(&mut empty, value, &name)?;
                base.insert(key, empty);
            }
            None => {
                base.insert(key, value);
            }
        }
    }
    Ok(())
}

fn merge_value<'a>(
    there: &mut Spanned<DeValue<'a>>,
    value: Spanned<DeValue<'a>>,
    key: &str,
) -> Result<(), MergeFault> {
    let span = value.span();
    match (there.get_mut(), value.into_inner()) {
        (DeValue::Table(old), DeValue::Table(new)) => {
            let new = if LISTS.contains(&key) { for_the_only_one(old, new, key, &span)? } else { new };
            drop_rivals(old, &new, key);
            merge(old, new)
        }
        (DeValue::Array(items), DeValue::Table(new)) if is_tables(items) => {
            let list = std::mem::replace(items, DeArray::from_iter([]));
            *items = merge_into_list(list, new, key, &span)?;
            Ok(())
        }
        (_, new) => {
            *there = Spanned::new(span, new);
            Ok(())
        }
    }
}

/// Where there is one table, `*`, `1` and its name stand for it.
fn for_the_only_one<'a>(
    old: &DeTable<'a>,
    new: DeTable<'a>,
    key: &str,
    span: &Range<usize>,
) -> Result<DeTable<'a>, MergeFault> {
    let name = old.get("name").and_then(|n| n.get_ref().as_str());
    let mut table = DeTable::new();
    for (part, value) in new {
        let text = part.get_ref().as_ref();
        let chosen = text == "*" || text == "1" || (name == Some(text) && value.get_ref().is_table());
        match (chosen, value.into_inner()) {
            (true, DeValue::Table(all)) => table.extend(all),
            (false, _) if text.parse::<usize>().is_ok() => {
                return Err((span.clone(), format!("there is no {key} {text}; there is only one, {key} 1")));
            }
            (_, other) => {
                table.insert(part, Spanned::new(span.clone(), other));
            }
        }
    }
    Ok(table)
}

/// Keys of a section that exclude one another: a new one replaces its rivals. A new material drops the old data set.
const RIVALS: [(&str, &[&str], &[&str]); 8] = [
    ("cut", &["theta"], &CUT_TARGETS),
    ("cut", &CUT_TARGETS, &["theta"]),
    ("cut", &CUT_TARGETS, &CUT_TARGETS),
    ("crystal", &["material"], &["dataset"]),
    ("emission", &["type"], &["process"]),
    ("emission", &["process"], &["type"]),
    ("emission", &["signal"], &["idler"]),
    ("emission", &["idler"], &["signal"]),
];
const CUT_TARGETS: [&str; 5] = ["crossing", "half-angle", "separation", "collinear", "beamlike"];

fn drop_rivals(old: &mut DeTable<'_>, new: &DeTable<'_>, section: &str) {
    if section == "crystal" && new.contains_key("dataset") {
        drop_set_of_material(old);
    }
    for (of, chosen, dropped) in RIVALS {
        if of == section && chosen.iter().any(|key| new.contains_key(*key)) {
            for key in dropped {
                old.remove(*key);
            }
        }
    }
}

/// A new data set drops the one that was named after the material's colon.
fn drop_set_of_material(crystal: &mut DeTable<'_>) {
    let Some(material) = crystal.get_mut("material") else { return };
    let Some(text) = material.get_ref().as_str() else { return };
    // a path may hold colons of its own
    let path = text.find(".toml").map_or(0, |at| at + ".toml".len());
    let Some(colon) = text[path..].find(':') else { return };
    let bare = text[..path + colon].to_string();
    *material.get_mut() = DeValue::String(bare.into());
}

fn is_tables(items: &DeArray<'_>) -> bool {
    items.iter().all(|item| item.get_ref().is_table())
}

/// `crystal.2.tilt`, `crystal.NAME.tilt`, `crystal.*.tilt`; a bare `crystal.tilt` where there is only one.
fn merge_into_list<'a>(
    list: DeArray<'a>,
    new: DeTable<'a>,
    key: &str,
    span: &Range<usize>,
) -> Result<DeArray<'a>, MergeFault> {
    let mut items: Vec<Spanned<DeValue<'a>>> = list.into_iter().collect();
    let names: Vec<Option<String>> = items.iter().map(name_of).collect();
    for (part, value) in new {
        let text = part.get_ref().to_string();
        let names_item = value.get_ref().is_table() && text != "cut";
        let chosen =
            chosen_items(&text, &names, key, names_item).map_err(|message| (span.clone(), message))?;
        match chosen {
            Some(indices) => {
                for index in indices {
                    merge_value(&mut items[index], value.clone(), key)?;
                }
            }
            None => {
                let bare = DeTable::from_iter([(part, value)]);
                merge_value(&mut items[0], Spanned::new(span.clone(), DeValue::Table(bare)), key)?;
            }
        }
    }
    Ok(items.into_iter().collect())
}

fn name_of(item: &Spanned<DeValue<'_>>) -> Option<String> {
    item.get_ref().get("name").and_then(|n| n.get_ref().as_str()).map(String::from)
}

/// Which items a part of a key path names; `None` where it is a key of the only item.
fn chosen_items(
    text: &str,
    names: &[Option<String>],
    key: &str,
    names_item: bool,
) -> Result<Option<Vec<usize>>, String> {
    let count = names.len();
    if text == "*" {
        return Ok(Some((0..count).collect()));
    }
    if let Ok(number) = text.parse::<usize>() {
        let known = (1..=count).contains(&number);
        let unknown = || format!("there is no {key} {number}; they are numbered 1 to {count}");
        return known.then(|| Some(vec![number - 1])).ok_or_else(unknown);
    }
    if let Some(at) = names.iter().position(|n| n.as_deref() == Some(text)) {
        return Ok(Some(vec![at]));
    }
    if count == 1 {
        return Ok(None);
    }
    if names_item {
        let known: Vec<&str> = names.iter().flatten().map(String::as_str).collect();
        let named =
            if known.is_empty() { String::new() } else { format!(" or by name: {}", known.join(", ")) };
        return Err(format!("there is no {key} `{text}`; they are numbered 1 to {count}{named}"));
    }
    let numbered = |(i, name): (usize, &Option<String>)| match name {
        Some(name) => format!("{key}.{name}.{text}"),
        None => format!("{key}.{}.{text}", i + 1),
    };
    let list: Vec<String> = names.iter().enumerate().map(numbered).collect();
    Err(format!("there are {count}: say which with --set {}=..., or {key}.*.{text} for all", list.join(", ")))
}

/// One table becomes a list of one; one signal becomes a list of one.
fn normalise(tree: &mut DeTable<'_>) {
    for key in LISTS {
        if let Some(value) = tree.get_mut(key)
            && value.get_ref().is_table()
        {
            wrap(value);
        }
    }
    if let Some(DeValue::Table(emission)) = tree.get_mut("emission").map(Spanned::get_mut)
        && let Some(signal) = emission.get_mut("signal")
        && !signal.get_ref().is_array()
    {
        wrap(signal);
    }
}

fn wrap(value: &mut Spanned<DeValue<'_>>) {
    let span = value.span();
    let inner = std::mem::replace(value.get_mut(), DeValue::Boolean(false));
    let list = DeArray::from_iter([Spanned::new(span.clone(), inner)]);
    *value = Spanned::new(span, DeValue::Array(list));
}
