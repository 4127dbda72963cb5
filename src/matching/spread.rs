//! What the other data sets of a material give for the same question: how sure an angle is.

use super::emission::{Photons, Triplet};
use crate::material::MaterialError;
use crate::optics::Crystal;

/// What one other data set says.
#[derive(Debug, Clone)]
pub struct Opinion<T> {
    /// Id of the data set.
    pub dataset: String,
    /// Whether it was used outside its range.
    pub extrapolated: bool,
    /// Its answer, or why it cannot serve these wavelengths.
    pub answer: Result<T, MaterialError>,
}

impl<T> Opinion<T> {
    /// The same opinion about something that follows from it.
    pub fn map<U>(self, f: impl FnOnce(T) -> U) -> Opinion<U> {
        Opinion { dataset: self.dataset, extrapolated: self.extrapolated, answer: self.answer.map(f) }
    }
}

/// Asks every other data set of the crystal's material that covers the wavelengths, or all where the crystal may
/// extrapolate.
pub fn opinions<T>(
    crystal: &Crystal,
    photons: &Photons,
    mut ask: impl FnMut(&Crystal) -> T,
) -> Vec<Opinion<T>> {
    let sets = crystal.material.sets().iter().enumerate().filter(|(index, _)| *index != crystal.dataset);
    sets.map(|(index, set)| {
        let other = crystal.with_dataset(index);
        let all = [photons.pump, photons.signal, photons.idler];
        let answer = Triplet::new(&other, photons).map(|_| ask(&other));
        Opinion { dataset: set.id.clone(), extrapolated: all.iter().any(|w| other.extrapolates(*w)), answer }
    })
    .collect()
}
