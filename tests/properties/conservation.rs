//! Energy and momentum.

use super::crystals::*;
use nalgebra::Vector3;
use proptest::prelude::*;
use twincone::frame::{Direction, Lab, Mount};
use twincone::matching::*;
use twincone::quantity::Wavelength;

/// Tangential wave vector of a photon in the lab, in units of the pump's wavenumber, from its direction outside.
fn across_face(
    direction: Direction,
    wavelength: Wavelength,
    pump: Wavelength,
    normal: &Vector3<f64>,
) -> Vector3<f64> {
    let k = direction.lab().0 * (pump.si() / wavelength.si());
    k - normal * normal.dot(&k)
}

/// Energy and the momentum along the face go from the pump into the pair: to 1e-12 of the pump's.
fn conserved(source: &Source, signal: Direction, idler: Direction) -> Result<(), TestCaseError> {
    let Photons { pump, signal: s, idler: i } = source.photons;
    let energy = pump.si() / s.si() + pump.si() / i.si() - 1.0;
    within(energy.abs(), 1e-12, "energy")?;
    let Lab(normal) = source.crystal.placement().to_lab(Mount(Vector3::z()));
    let momentum = |d, w| across_face(d, w, pump, &normal);
    let missing = momentum(signal, s) + momentum(idler, i) - momentum(Direction::forward(), pump);
    within(missing.norm(), 1e-12, "tangential momentum")
}

#[test]
fn energy_and_tangential_momentum_are_conserved_on_rings() {
    every(200, 190, &setups(BOTH), |setup| {
        let Some(source) = setup.source() else { return Ok(Case::Void) };
        let Some((mismatch, rings)) = source.traced(source.roles) else { return Ok(Case::Void) };
        for signal in rings.iter().flat_map(|ring| (0..SAMPLES).map(|j| ring.curve.direction(j))) {
            let idler = mismatch.partner(signal);
            prop_assert!(idler.is_some(), "a partner that cannot leave");
            conserved(&source, signal, idler.expect("just tested"))?;
        }
        Ok(Case::Shown)
    });
}

#[test]
fn energy_and_tangential_momentum_are_conserved_at_crossings() {
    every(150, 135, &setups(CROSSED), |setup| {
        let Some(source) = setup.source() else { return Ok(Case::Void) };
        let crossings = source.crossings();
        for crossing in &crossings {
            conserved(&source, crossing.direction, crossing.partner.expect("a partner that can leave"))?;
        }
        Ok(if crossings.is_empty() { Case::Void } else { Case::Shown })
    });
}
