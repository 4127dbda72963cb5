//! The crystals compiled into the program, and the user's own.

use std::collections::HashMap;
use std::sync::{Arc, Mutex, PoisonError};

use super::file::File;
use super::{Fault, Material, MaterialError};
use crate::places::{nearest, plain_message, point_at};

macro_rules! built_in {
    ($($id:literal),* $(,)?) => {
        &[$(($id, include_str!(concat!("../../data/materials/", $id, ".toml")))),*]
    };
}

/// Ids and texts of the files under data/materials, in the order in which they are listed.
const BUILT_IN: &[(&str, &str)] = built_in![
    "bbo",
    "lbo",
    "bibo",
    "ktp",
    "rtp",
    "nb-rtp",
    "kta",
    "kdp",
    "dkdp",
    "adp",
    "clbo",
    "liio3",
    "linbo3",
    "mgo-linbo3",
    "mgo-sln",
    "litao3",
    "mgo-litao3",
    "mgo-slt",
    "knbo3",
    "aggas2",
    "aggase2",
    "zngep2",
    "cdse",
    "gase",
    "cdgeas2",
    "alpha-bbo",
    "quartz",
    "calcite",
    "yvo4",
    "rutile",
    "mgf2",
    "sapphire",
];

/// Names in use for crystals that have another id here.
const ALIASES: &[(&str, &str)] = &[
    ("beta-bbo", "bbo"),
    ("\u{3b2}-bbo", "bbo"),
    ("a-bbo", "alpha-bbo"),
    ("ppktp", "ktp"),
    ("ppln", "linbo3"),
    ("ln", "linbo3"),
    ("lt", "litao3"),
    ("bib3o6", "bibo"),
    ("lib3o5", "lbo"),
];

/// A commented material file to start from.
pub const TEMPLATE: &str = include_str!("../../data/material-template.toml");

/// Where materials are looked up: those compiled in, then those the user added.
#[derive(Debug, Default)]
pub struct Catalogue {
    added: Vec<(String, Material)>,
    /// Materials that were asked for, by the name they were asked by.
    shared: Mutex<HashMap<String, Arc<Material>>>,
}

impl Catalogue {
    /// Adds a material file of the user. `name` is what errors call it.
    ///
    /// # Errors
    /// A fault of the file with its line and column, or an id that is taken, naming both places.
    pub fn add(&mut self, name: &str, text: &str) -> Result<&Material, MaterialError> {
        let material = read(name, text)?;
        let clash = if BUILT_IN.iter().any(|(id, _)| *id == material.id) {
            Some("a crystal compiled into the program")
        } else {
            self.added.iter().find(|(_, m)| m.id == material.id).map(|(other, _)| other.as_str())
        };
        if let Some(other) = clash {
            return Err(MaterialError::File(format!(
                "{name}: the id `{}` is taken by {other}; choose another id",
                material.id
            )));
        }
        self.added.push((name.into(), material));
        Ok(&self.added[self.added.len() - 1].1)
    }

    /// Adds a material file that is named by its path and used as it is, whatever ids are taken.
    ///
    /// # Errors
    /// A fault of the file with its line and column.
    pub fn add_or_replace(&mut self, name: &str, text: &str) -> Result<&Material, MaterialError> {
        let material = read(name, text)?;
        self.added.retain(|(other, _)| other != name);
        self.shared.get_mut().unwrap_or_else(PoisonError::into_inner).clear();
        self.added.push((name.into(), material));
        Ok(&self.added[self.added.len() - 1].1)
    }

    /// Ids of all materials, compiled-in ones first.
    pub fn ids(&self) -> impl Iterator<Item = &str> {
        BUILT_IN.iter().map(|(id, _)| *id).chain(self.added.iter().map(|(_, m)| m.id.as_str()))
    }

    /// As [`Self::get`], read once and shared from then on.
    ///
    /// # Errors
    /// As [`Self::get`].
    pub fn shared(&self, id: &str) -> Result<Arc<Material>, MaterialError> {
        // a thread that panicked while it held the lock has left a map that is whole
        let mut shared = self.shared.lock().unwrap_or_else(PoisonError::into_inner);
        if let Some(material) = shared.get(id) {
            return Ok(Arc::clone(material));
        }
        let material = Arc::new(self.get(id)?);
        shared.insert(id.into(), Arc::clone(&material));
        Ok(material)
    }

    /// One material, by id or by the name its file was added under. Only this file is read, so that a single answer does not wait for all of them.
    ///
    /// # Errors
    /// [`MaterialError::Unknown`] with the nearest id.
    pub fn get(&self, id: &str) -> Result<Material, MaterialError> {
        if let Some((_, text)) = BUILT_IN.iter().find(|(name, _)| *name == id) {
            return read(&format!("data/materials/{id}.toml"), text);
        }
        if let Some((_, material)) = self.added.iter().find(|(name, m)| m.id == id || name == id) {
            return Ok(material.clone());
        }
        let known_as =
            ALIASES.iter().find(|(other, _)| other.eq_ignore_ascii_case(id)).map(|(_, meant)| *meant);
        let near = known_as.or_else(|| nearest(id, self.ids()));
        let hint = near.map_or(String::new(), |near| format!(", did you mean `{near}`?"));
        Err(MaterialError::Unknown { id: id.into(), hint })
    }
}

/// Reads and validates a material file.
fn read(name: &str, text: &str) -> Result<Material, MaterialError> {
    let file: File = toml::from_str(text).map_err(|e| {
        let message = plain_message(e.message());
        fault_text(name, text, &Fault { span: e.span().unwrap_or(0..0), message })
    })?;
    let material = Material::from_file(file).map_err(|fault| fault_text(name, text, &fault))?;
    Ok(Material { digest: digest(text), ..material })
}

/// FNV-1a, 64 bit (G. Fowler, L. C. Noll, K.-P. Vo; RFC 9923, constants from memory): tells texts apart, keeps no secret.
#[must_use]
pub fn digest(text: &str) -> u64 {
    text.bytes().fold(0xcbf2_9ce4_8422_2325, |hash, byte| {
        (hash ^ u64::from(byte)).wrapping_mul(0x0000_0100_0000_01b3)
    })
}

fn fault_text(name: &str, text: &str, fault: &Fault) -> MaterialError {
    MaterialError::File(point_at(name, text, fault.span.clone(), &fault.message))
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Published vectors of FNV-1a (from memory): the empty text and "a".
    #[test]
    fn digests_tell_texts_apart() {
        assert_eq!(digest(""), 0xcbf2_9ce4_8422_2325);
        assert_eq!(digest("a"), 0xaf63_dc4c_8601_ec8c);
    }

    #[test]
    fn every_file_under_data_is_compiled_in() {
        let dir = std::path::Path::new(env!("CARGO_MANIFEST_DIR")).join("data/materials");
        let mut files: Vec<String> = std::fs::read_dir(dir)
            .expect("data/materials")
            .filter_map(|f| f.ok()?.path().file_stem()?.to_str().map(String::from))
            .collect();
        let mut listed: Vec<String> = BUILT_IN.iter().map(|(id, _)| (*id).into()).collect();
        files.sort();
        listed.sort();
        assert_eq!(files, listed);
    }

    #[test]
    fn every_material_reads_and_reproduces_its_check_values() {
        for id in Catalogue::default().ids() {
            let material = Catalogue::default().get(id).unwrap_or_else(|e| panic!("{e}"));
            assert_eq!(material.id, id);
            material.examine().unwrap_or_else(|why| panic!("{id}: {why}"));
            for set in material.sets() {
                assert!(set.file.check.len() >= 10, "{id}:{} has too few check values", set.id);
            }
        }
    }

    #[test]
    fn the_template_is_a_valid_material() {
        Catalogue::default().add("template", TEMPLATE).unwrap_or_else(|e| panic!("{e}"));
    }

    #[test]
    fn unknown_crystals_get_a_suggestion() {
        let error = Catalogue::default().get("BB0").expect_err("unknown").to_string();
        assert!(error.contains("did you mean `bbo`"), "{error}");
    }

    #[test]
    fn an_id_clash_names_both_places() {
        let text = include_str!("../../data/materials/bbo.toml");
        let error = Catalogue::default().add("mine.toml", text).expect_err("clash").to_string();
        assert!(error.contains("mine.toml") && error.contains("compiled into the program"), "{error}");
    }
}
