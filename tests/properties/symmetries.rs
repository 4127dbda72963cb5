//! Symmetries and limits.

use super::crossings::all_rings;
use super::crystals::*;
use nalgebra::{Rotation3, Vector3};
use twincone::frame::{Orientation, Reversal};
use twincone::matching::*;
use twincone::material::Optic;
use twincone::quantity::Angle;

#[test]
fn roll_turns_the_pattern_rigidly() {
    every(120, 115, &(setups(BOTH), -180.0..180.0), |(mut setup, roll_deg)| {
        // the mount's own turns come after the roll
        (setup.orientation.about_x, setup.orientation.about_y) = Default::default();
        let Some(source) = setup.source() else { return Ok(Case::Void) };
        let before = source.pattern();
        let rolled = source.with(|crystal| {
            let roll = crystal.orientation.roll.si() + f64::to_radians(roll_deg);
            crystal.orientation.roll = Angle::radians(roll);
        });
        let turn = Rotation3::from_axis_angle(&Vector3::z_axis(), f64::to_radians(roll_deg));
        rolled.pattern().same_as(&before.turned(turn.matrix()), 1e-9)?;
        Ok(if before.is_empty() { Case::Void } else { Case::Shown })
    });
}

#[test]
fn patterns_of_uniaxial_crystals_tilted_in_the_plane_of_the_axis_are_mirror_symmetric() {
    every(120, 115, &(setups_of(Optic::Uniaxial, BOTH), -5.0..5.0), |(setup, tilt_deg)| {
        let upright = setup.upright();
        let tilt = Angle::from_degrees(tilt_deg);
        let tilted = Setup { orientation: Orientation { tilt, ..Orientation::default() }, ..upright.clone() };
        let mut case = Case::Void;
        for source in [upright.source(), tilted.source()].into_iter().flatten() {
            let pattern = source.pattern();
            pattern.same_as(&pattern.turned(&mirror(1.0, -1.0)), 1e-9)?;
            for (axis, _) in &pattern.rings {
                within(axis.v_deg().abs(), 1e-9, "axis off the plane, deg")?;
                case = Case::Shown;
            }
        }
        Ok(case)
    });
}

/// Of the uniaxial crystal; of the biaxial one cut in a principal plane, where the axis across that plane counts.
#[test]
fn reversal_about_the_axis_across_the_plane_of_z_changes_nothing() {
    every(120, 115, &setups(BOTH), |mut setup| {
        setup.phi_deg = 90.0 * (setup.phi_deg / 90.0).floor();
        let Some(source) = setup.source() else { return Ok(Case::Void) };
        let uniaxial = source.crystal.material.file.optic == Optic::Uniaxial;
        // across the XY plane is Z, which is u in such a cut
        let across = if in_xy_plane(&source.crystal) && !uniaxial {
            Reversal::AboutHorizontal
        } else {
            Reversal::AboutVertical
        };
        let before = source.pattern();
        source.with(|crystal| crystal.reversal = across).pattern().same_as(&before, 1e-9)?;
        Ok(if before.is_empty() { Case::Void } else { Case::Shown })
    });
}

#[test]
fn reversal_about_the_beam_turns_the_pattern_by_half_a_turn() {
    every(120, 115, &setups(BOTH), |mut setup| {
        (setup.orientation.about_x, setup.orientation.about_y) = Default::default();
        let Some(source) = setup.source() else { return Ok(Case::Void) };
        let before = source.pattern();
        // half a turn of crystal and tilts is half a turn of everything
        let reversed = source.with(|crystal| {
            crystal.reversal = Reversal::AboutBeam;
            crystal.orientation.tilt = Angle::radians(-crystal.orientation.tilt.si());
            crystal.orientation.cross_tilt = Angle::radians(-crystal.orientation.cross_tilt.si());
        });
        reversed.pattern().same_as(&before.turned(&mirror(-1.0, -1.0)), 1e-9)?;
        Ok(if before.is_empty() { Case::Void } else { Case::Shown })
    });
}

#[test]
fn reversal_about_the_beam_mirrors_the_pattern_of_an_untilted_uniaxial_crystal() {
    every(120, 115, &setups_of(Optic::Uniaxial, BOTH), |setup| {
        let Some(source) = setup.upright().source() else { return Ok(Case::Void) };
        let before = source.pattern();
        let mirrored = before.turned(&mirror(-1.0, 1.0));
        for reversal in [Reversal::AboutBeam, Reversal::AboutHorizontal] {
            source.with(|crystal| crystal.reversal = reversal).pattern().same_as(&mirrored, 1e-9)?;
        }
        Ok(if before.is_empty() { Case::Void } else { Case::Shown })
    });
}

#[test]
fn biaxial_crystals_with_two_equal_indices_are_uniaxial() {
    let made = (recipes(Optic::Uniaxial), setups_of(Optic::Uniaxial, BOTH), 380.0..450.0);
    every(120, 115, &made, |(recipe, setup, pump_nm)| {
        let setup = Setup { substance: Substance::Made(recipe), pump_nm, ..setup };
        let Some(source) = setup.source() else { return Ok(Case::Void) };
        // both are asked by sheet: o and e have no meaning in the biaxial one
        let biaxial = source.with(|crystal| crystal.material = recipe.as_biaxial());
        let before = source.pattern();
        biaxial.pattern().same_as(&before, 1e-9)?;
        Ok(if before.is_empty() { Case::Void } else { Case::Shown })
    });
}

/// As above through the whole of `cones`, where the order of rows may differ with the names of the sheets.
#[test]
fn cones_of_biaxial_crystals_with_two_equal_indices_are_those_of_uniaxial_ones() {
    let made = (recipes(Optic::Uniaxial), setups_of(Optic::Uniaxial, CROSSED));
    every(40, 38, &made, |(recipe, setup)| {
        let setup = Setup { substance: Substance::Made(recipe), pump_nm: 405.0, share: 0.5, ..setup };
        let Some(source) = setup.source() else { return Ok(Case::Void) };
        let biaxial = source.with(|crystal| crystal.material = recipe.as_biaxial());
        let pattern = |cones: &Cones| Pattern {
            // a degenerate pair is listed once, by either of its photons
            crossings: cones
                .crossings
                .iter()
                .filter_map(|row| row.crossing)
                .flat_map(|c| [c.direction, c.partner.expect("a partner")])
                .collect(),
            ..all_rings(cones)
        };
        let (one, two) = (pattern(&source.cones()), pattern(&biaxial.cones()));
        one.same_as(&two, 1e-9)?;
        Ok(if one.rings.len() == 2 && one.crossings.len() == 2 { Case::Shown } else { Case::Void })
    });
}
