//! Principal indices that were asked for lately: a sweep asks for the same ones at every setting.

use std::sync::Arc;

use super::crystal::Crystal;
use crate::material::{Material, MaterialError, Principal, Reach};
use crate::quantity::Wavelength;

/// Remembers principal indices by material, data set, wavelength and temperature. Answers do not depend on what is
/// remembered, only how long they take.
#[derive(Debug, Clone, Default)]
pub struct Indices {
    recent: Vec<Entry>,
    /// Where the next entry goes.
    oldest: usize,
}

#[derive(Debug, Clone)]
struct Entry {
    material: Arc<Material>,
    key: Key,
    principal: Principal,
}

#[derive(Debug, Clone, Copy, PartialEq)]
struct Key {
    dataset: usize,
    wavelength: u64,
    temperature: u64,
    reach: Reach,
}

impl Indices {
    /// Entries kept; a few crystals at three wavelengths each.
    const KEPT: usize = 24;

    /// Principal indices at a wavelength and the crystal's temperature.
    ///
    /// # Errors
    /// As [`Crystal::principal`].
    pub fn principal(
        &mut self,
        crystal: &Crystal,
        wavelength: Wavelength,
    ) -> Result<Principal, MaterialError> {
        let key = Key {
            dataset: crystal.dataset,
            wavelength: wavelength.si().to_bits(),
            temperature: crystal.temperature.degc().to_bits(),
            reach: crystal.reach,
        };
        let same = |entry: &&Entry| entry.key == key && Arc::ptr_eq(&entry.material, &crystal.material);
        if let Some(entry) = self.recent.iter().find(same) {
            return Ok(entry.principal);
        }
        let principal = crystal.principal(wavelength)?;
        let entry = Entry { material: Arc::clone(&crystal.material), key, principal };
        if self.recent.len() < Self::KEPT {
            self.recent.push(entry);
        } else {
            self.recent[self.oldest] = entry;
            self.oldest = (self.oldest + 1) % Self::KEPT;
        }
        Ok(principal)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::material::Catalogue;
    use crate::quantity::Temperature;

    #[test]
    fn what_is_remembered_is_what_the_crystal_says() {
        let material = |id: &str| Arc::new(Catalogue::default().get(id).expect("a compiled-in crystal"));
        let mut indices = Indices::default();
        let mut crystals = ["bbo", "ktp", "ppln"]
            .into_iter()
            .filter_map(|id| Catalogue::default().get(id).ok())
            .map(|m| Crystal::new(Arc::new(m), None).expect("the default data set"))
            .collect::<Vec<_>>();
        // another copy of a material is another material
        crystals.push(Crystal::new(material("bbo"), Some("kato-1986")).expect("a data set"));
        // more wavelengths than are kept, each asked for twice, and once more when it is forgotten
        for _ in 0..2 {
            for n in 0..2 * Indices::KEPT {
                for crystal in &crystals {
                    let wavelength = Wavelength::from_nm(600.0 + n as f64);
                    for _ in 0..2 {
                        let found = indices.principal(crystal, wavelength).expect("indices");
                        let own = crystal.principal(wavelength).expect("indices");
                        assert_eq!(found.axes, own.axes);
                        assert_eq!(found.wavelength, own.wavelength);
                    }
                }
            }
        }
        assert_eq!(indices.recent.len(), Indices::KEPT);
    }

    #[test]
    fn errors_are_not_remembered_as_answers() {
        let mut indices = Indices::default();
        let bbo = Arc::new(Catalogue::default().get("bbo").expect("a compiled-in crystal"));
        let mut crystal = Crystal::new(bbo, Some("kato-1986")).expect("a data set");
        let wavelength = Wavelength::from_nm(600.0);
        assert!(indices.principal(&crystal, wavelength).is_ok());
        crystal.temperature = Temperature::celsius(crystal.temperature.degc() + 1.0);
        assert_eq!(indices.principal(&crystal, wavelength).is_ok(), crystal.principal(wavelength).is_ok());
    }
}
