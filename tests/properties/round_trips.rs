//! A target gives a cut or a turn, and that gives the target back.

use super::crystals::*;
use proptest::prelude::*;
use twincone::frame::{Direction, Orientation};
use twincone::matching::*;
use twincone::material::Optic;
use twincone::optics::Crystal;
use twincone::quantity::Angle;

/// The cuts that bring a target about, in the plane in which the setup has a ring.
fn cuts(setup: &Setup, target: Target) -> Vec<CutSolution> {
    let Some(Source { crystal, photons, interaction, .. }) = setup.source() else { return Vec::new() };
    let find = if in_xy_plane(&crystal) { Find::Phi } else { Find::Theta };
    let question =
        Design { crystal, photons, fixed_signal: None, interaction, target, find, phi_given: true };
    design(&question).expect("a design")
}

/// The emission of a solution, in its crystal.
fn emitted(solution: &CutSolution, interaction: Interaction) -> Cones {
    let photons = solution.photons;
    cones(std::slice::from_ref(&solution.crystal), photons.pump, &[photons.signal], interaction, Want::Both)
        .expect("cones")
}

#[test]
fn cuts_for_a_half_angle_give_it_back() {
    every(24, 22, &setups(BOTH), |setup| {
        let wanted = setup.half_angle_deg;
        let found = cuts(&setup, Target::HalfAngle(wanted.to_radians()));
        for solution in &found {
            let cones = emitted(solution, setup.interaction);
            let signal =
                |row: &&RingRow| row.photon == Landing::Signal && row.polarization == solution.process.signal;
            let halves = cones.rings.iter().filter(signal).filter_map(|row| row.ring.as_ref().ok());
            let off = halves.map(|ring| (ring.half_angle.to_degrees() - wanted).abs());
            within(least(off), 1e-9, "half angle, deg")?;
        }
        Ok(if found.is_empty() { Case::Void } else { Case::Shown })
    });
}

#[test]
fn cuts_for_a_crossing_or_a_separation_give_it_back() {
    every(16, 14, &(setups(CROSSED), any::<bool>()), |(setup, full)| {
        let wanted = setup.half_angle_deg.to_radians();
        let found =
            cuts(&setup, if full { Target::Separation(2.0 * wanted) } else { Target::Crossing(wanted) });
        for solution in &found {
            let cones = emitted(solution, setup.interaction);
            let met: Vec<Crossing> = cones.crossings.iter().filter_map(|row| row.crossing).collect();
            let both = |c: &Crossing| [c.direction, c.partner.expect("a partner")];
            let angle = |c: &Crossing| {
                let [a, b] = both(c);
                let pump = Direction::forward();
                match (full, solution.photons.degenerate()) {
                    (true, _) => 0.5 * a.angle_to(b),
                    // a degenerate pair is one row, its partner the other crossing of the same photon
                    (false, true) => 0.5 * (a.angle_to(pump) + b.angle_to(pump)),
                    (false, false) => a.angle_to(pump),
                }
            };
            let mean = met.iter().map(angle).sum::<f64>() / met.len() as f64;
            within((mean - wanted).abs().to_degrees(), 1e-9, "crossing or half the separation, deg")?;
        }
        Ok(if found.is_empty() { Case::Void } else { Case::Shown })
    });
}

/// A beamlike cut is the border between a small ring and none.
#[test]
fn cuts_for_beamlike_emission_are_where_the_ring_vanishes() {
    const STEP_DEG: f64 = 1e-4;
    every(40, 38, &setups(BOTH), |setup| {
        let found = cuts(&setup, Target::Beamlike);
        for solution in &found {
            let beside = |step_deg: f64| {
                let mut crystal = solution.crystal.clone();
                let angle = if in_xy_plane(&crystal) { &mut crystal.cut.phi } else { &mut crystal.cut.theta };
                *angle = Angle::radians(angle.si() + step_deg.to_radians());
                let (photons, interaction, roles) = (solution.photons, setup.interaction, solution.roles);
                Source { crystal, photons, interaction, roles }.rings()
            };
            let counts = [beside(-STEP_DEG), beside(STEP_DEG)];
            let [none, one] =
                if counts[0].is_empty() { [&counts[0], &counts[1]] } else { [&counts[1], &counts[0]] };
            prop_assert_eq!((none.len(), one.len()), (0, 1), "rings on either side");
            // psi^2 grows with the turn, as by 3 deg for some 0.7 deg
            within(one[0].half_angle.to_degrees(), 0.3, "half angle beside the border, deg")?;
        }
        Ok(if found.is_empty() { Case::Void } else { Case::Shown })
    });
}

/// Exactly at the border the ring is its own centre, whatever the sign that rounding leaves of Delta_k there.
#[test]
fn cuts_for_collinear_type_one_and_beamlike_emission_have_a_point_for_a_ring() {
    every(60, 57, &setups_of(Optic::Uniaxial, BOTH), |setup| {
        let beamlike = setup.interaction == Interaction::Two;
        let setup = Setup { share: 0.5, ..setup };
        let found = cuts(&setup, if beamlike { Target::Beamlike } else { Target::Collinear });
        for solution in &found {
            let crystal = Crystal { orientation: Orientation::default(), ..solution.crystal.clone() };
            let (photons, interaction, roles) = (solution.photons, setup.interaction, solution.roles);
            let rings = Source { crystal, photons, interaction, roles }.rings();
            prop_assert_eq!(rings.len(), 1, "one ring, of no size");
            within(rings[0].half_angle.to_degrees(), 1e-4, "half angle, deg")?;
        }
        Ok(if found.is_empty() { Case::Void } else { Case::Shown })
    });
}

#[test]
fn tilts_for_a_half_angle_give_it_back() {
    every(24, 22, &setups_of(Optic::Uniaxial, BOTH), |setup| {
        let Some(source) = setup.source() else { return Ok(Case::Void) };
        let wanted = setup.half_angle_deg.to_radians();
        let question = Tuning {
            crystal: source.crystal.clone(),
            photons: source.photons,
            fixed_signal: None,
            interaction: setup.interaction,
            target: Target::HalfAngle(wanted),
            actuator: Some(Actuator::Tilt),
        };
        let turns = tune(&question).expect("indices").turns;
        for turn in &turns {
            let measured = turn.measure.half_angle.expect("a ring");
            within((measured - wanted).abs().to_degrees(), 1e-9, "half angle, deg")?;
            let mut tilted = source.with(|crystal| crystal.orientation.tilt = Angle::radians(turn.setting));
            let process = Interaction::Explicit(turn.process);
            tilted.roles = tilted.emission().roles(process).expect("o and e")[0];
            within((tilted.rings()[0].half_angle - measured).abs(), 0.0, "the same crystal")?;
        }
        Ok(if turns.is_empty() { Case::Void } else { Case::Shown })
    });
}
