//! The JSON Schema (draft-07) of the job file, made from the table of keys, so that editors complete and check it.

use serde_json::{Map, Value, json};

use super::keys::{Holds, KEYS, Key, LISTS};

/// The schema, pretty-printed, with a newline at its end.
#[must_use]
pub fn schema() -> String {
    let mut tree = Object::default();
    for key in KEYS {
        let parts: Vec<&str> = key.path.split('.').collect();
        tree.insert(&parts, key);
    }
    let mut properties = Map::new();
    for (name, node) in &tree.0 {
        let own = if name == "sweep" { sweep(node) } else { node.schema() };
        let section = if LISTS.contains(&name.as_str()) {
            json!({ "anyOf": [own, { "type": "array", "items": own }] })
        } else {
            own
        };
        properties.insert(name.clone(), section);
    }
    let schema = json!({
        "$schema": "http://json-schema.org/draft-07/schema#",
        "title": "twincone job",
        "description": "One experiment that makes photon pairs in birefringent crystals; quantities are texts with a unit.",
        "type": "object",
        "additionalProperties": false,
        "properties": properties,
        "definitions": { "axis": axis() },
    });
    let mut text = serde_json::to_string_pretty(&schema).expect("keys are texts");
    text.push('\n');
    text
}

/// Keys by their parts, in the order of the table.
#[derive(Default)]
struct Object(Vec<(String, Node)>);

#[derive(Default)]
struct Node {
    /// What stands here where the path ends.
    key: Option<&'static Key>,
    below: Object,
}

impl Object {
    fn insert(&mut self, parts: &[&str], key: &'static Key) {
        let [first, rest @ ..] = parts else { return };
        let at = self.0.iter().position(|(name, _)| name == first).unwrap_or_else(|| {
            self.0.push(((*first).into(), Node::default()));
            self.0.len() - 1
        });
        match rest {
            [] => self.0[at].1.key = Some(key),
            _ => self.0[at].1.below.insert(rest, key),
        }
    }

    fn properties(&self) -> Map<String, Value> {
        self.0.iter().map(|(name, node)| (name.clone(), node.schema())).collect()
    }
}

impl Node {
    fn schema(&self) -> Value {
        let object = || json!({ "type": "object", "additionalProperties": false, "properties": self.below.properties() });
        match (self.key, self.below.0.is_empty()) {
            (Some(key), true) => value(key),
            (None, _) => object(),
            (Some(key), false) => json!({ "description": key.meaning, "anyOf": [value(key), object()] }),
        }
    }
}

/// One value, with what it means.
fn value(key: &Key) -> Value {
    let mut schema = match key.holds {
        Holds::Flag => json!({ "type": "boolean" }),
        Holds::Number => json!({ "type": "integer", "minimum": 1 }),
        Holds::Word([]) => json!({ "type": "string" }),
        Holds::Word(known) => json!({ "type": "string", "enum": known }),
        quantity => json!({ "type": "string", "pattern": pattern(quantity) }),
    };
    let units = key.holds.units();
    let unit = if units.is_empty() { String::new() } else { format!("; in {}", units.join(", ")) };
    schema["description"] = format!("{}{unit}", key.meaning).into();
    if key.path == "emission.signal" {
        let one =
            json!({ "type": "string", "pattern": format!("{}|^\\s*degenerate\\s*$", pattern(key.holds)) });
        schema = json!({
            "description": format!("{}; or \"degenerate\", which follows the pump; or a list{unit}", key.meaning),
            "anyOf": [one, { "type": "array", "items": one }],
        });
    }
    schema
}

/// A number and one of the units.
fn pattern(holds: Holds) -> String {
    let units = holds.units().join("|");
    let air = if holds == Holds::Wavelength { "(\\s*air)?" } else { "" };
    format!("^\\s*[+\\-\u{2212}]?(\\d+\\.?\\d*|\\.\\d+)([eE][+-]?\\d+)?\\s*({units}){air}\\s*$")
}

/// `[sweep]`, whose axes are no keys of their own.
fn sweep(node: &Node) -> Value {
    let mut schema = node.schema();
    schema["properties"]["axes"] = json!({
        "description": "what is varied; the last axis varies fastest",
        "type": "array",
        "items": { "$ref": "#/definitions/axis" },
    });
    schema
}

fn axis() -> Value {
    let known: Vec<&str> = KEYS.iter().filter(|key| key.can_be_swept()).map(|key| key.path).collect();
    let item = format!("^({})\\.[^.]+\\..+$", LISTS.join("|"));
    let quantity = |what: &str| json!({ "type": "string", "description": format!("{what}, with its unit") });
    json!({
        "description": "a key with a range (from, to, and points or step) or a list of values; or axes that run together",
        "type": "object",
        "additionalProperties": false,
        "properties": {
            "key": {
                "description": "key of this job; in lists with the item's number or name, such as crystal.2.tilt, or * for all",
                "anyOf": [{ "enum": known }, { "type": "string", "pattern": item }],
            },
            "from": quantity("first value"),
            "to": quantity("last value"),
            "points": { "type": "integer", "minimum": 1, "description": "how many values, both ends included" },
            "step": quantity("distance of neighbouring values, which divides the range"),
            "values": { "type": "array", "minItems": 1, "items": { "type": ["string", "boolean"] } },
            "together": {
                "description": "axes with equally many values that run side by side",
                "type": "array",
                "minItems": 1,
                "items": { "$ref": "#/definitions/axis" },
            },
        },
    })
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::job::Document;

    #[test]
    fn the_committed_schema_is_this_one() {
        let path = std::path::Path::new(env!("CARGO_MANIFEST_DIR")).join("examples/job.schema.json");
        let committed = std::fs::read_to_string(path).expect("the file");
        assert!(committed == schema(), "write it anew: twincone schema > examples/job.schema.json");
    }

    /// A value that a key can have.
    fn example(key: &Key) -> String {
        match key.holds {
            Holds::Flag => "true".into(),
            Holds::Number => "1".into(),
            Holds::Word([]) => "\"x\"".into(),
            Holds::Word([first, ..]) => format!("\"{first}\""),
            other => format!("\"1 {}\"", other.units()[0]),
        }
    }

    #[test]
    fn every_key_of_the_table_can_be_written_and_no_key_is_missing() {
        for key in KEYS {
            let (section, rest) = key.path.split_once('.').unwrap_or(("", key.path));
            let path = if section.is_empty() { rest.into() } else { format!("{section}.{rest}") };
            // a direction needs both of its angles
            let more =
                if path.ends_with("direction.h") { "collection.direction.v = \"1 deg\"\n" } else { "" };
            let more =
                if path.ends_with("direction.v") { "collection.direction.h = \"1 deg\"\n" } else { more };
            let text = format!("{path} = {}\n{more}", example(key));
            if let Err(why) = Document::from_file("a job", &text).describe() {
                panic!("{path}: {why}");
            }
        }
        // serde names the keys of each table that it knows: all of them stand in the table of keys
        let places = [
            "",
            "pump.",
            "crystal.",
            "crystal.cut.",
            "mount.",
            "emission.",
            "screen.",
            "stage.",
            "collection.",
            "collection.direction.",
            "filter.",
            "compensator.",
            "compensator.cut.",
            "sweep.",
            "sweep.target.",
        ];
        for place in places {
            let text = format!("{place}nonsense = 1\n");
            let why = Document::from_file("a job", &text).describe().expect_err("an unknown key").to_string();
            let known = why.split("known here: ").nth(1).and_then(|k| k.split(')').next());
            let known = known.unwrap_or_else(|| panic!("no list of keys in {why}"));
            for name in known.split(", ") {
                let path = format!("{place}{name}");
                let there =
                    KEYS.iter().any(|key| key.path == path || key.path.starts_with(&format!("{path}.")));
                let solved = path.starts_with("compensator.cut.") || path == "sweep.axes";
                assert!(there || solved, "`{path}` is read but stands in no table of keys");
            }
        }
    }
}
