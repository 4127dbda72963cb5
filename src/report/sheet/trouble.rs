//! What is seen if something is wrong, what to check then, and the test that decides.

use super::bench::watched;
use super::facts::{Facts, deg, mm, plain_deg, ring_name, rings};
use super::page::Page;
use crate::frame::Reversal;
use crate::matching::{Cones, ConesError, Photons, Want, cones};
use crate::quantity::{Angle, Wavelength};
use crate::report::angles::fixed;

/// The part of the bench sheet.
///
/// # Errors
/// Indices that are not to be had.
pub(super) fn trouble(page: &mut Page, facts: &Facts<'_>) -> Result<(), ConesError> {
    page.heading("If something is wrong");
    let rows = [no_light(facts)?, wrong_size(facts)?, wrong_side(facts)?, no_coincidences(facts)];
    page.table(&["what is seen", "likely, in this order", "the test that decides"], rows.into());
    page.heading("What moves the rings");
    page.table(&["change", "effect"], movers(facts)?);
    Ok(())
}

fn words(facts: &Facts<'_>, cones: &Cones) -> String {
    let setup = facts.setup;
    let radius = |r: &crate::matching::RingRow| match &r.ring {
        Ok(ring) => {
            format!("{}: radius {} mm", ring_name(setup, r), fixed(ring.circle().1 * setup.screen.mm(), 1))
        }
        Err(_) => format!("{}: none", ring_name(setup, r)),
    };
    cones.rings.iter().map(radius).collect::<Vec<_>>().join("; ")
}

fn no_light(facts: &Facts<'_>) -> Result<Vec<String>, ConesError> {
    let setup = facts.setup;
    let tilt = setup.crystals[0].orientation.tilt;
    let mut likely = String::from(
        "pump polarization a quarter turn off; crystal rolled by 90 deg; tilt of the wrong sense; cut at the wrong phi; filter centred elsewhere, or a filter in the camera that stops the infrared",
    );
    let mut test = String::from(
        "Turn the pump's half-wave plate: light from pairs rises and falls as sin^2 of twice the plate's angle, background does not.",
    );
    if tilt.degrees().abs() > 0.01 {
        let mut crystals = setup.crystals.clone();
        crystals[0].orientation.tilt = Angle::radians(-tilt.si());
        let other = rings(setup, &crystals)?;
        likely.push_str(&format!(
            "; at tilt {} this crystal gives {}",
            deg(-tilt.si(), 3),
            words(facts, &other)
        ));
        test.push_str(" Go through back-reflection to the same tilt on the other side.");
    }
    Ok(vec!["no light above background".into(), likely, test])
}

fn wrong_size(facts: &Facts<'_>) -> Result<Vec<String>, ConesError> {
    let radii = |pump: f64| -> Result<Option<f64>, ConesError> {
        let pump = Wavelength::from_nm(facts.photons.pump.nm() + pump);
        let found = at_pump(facts, pump)?;
        Ok(found
            .rings
            .first()
            .and_then(|r| r.ring.as_ref().ok())
            .map(|r| r.circle().1 * facts.setup.screen.mm()))
    };
    let change = match (radii(1.0)?, radii(-1.0)?) {
        (Some(up), Some(down)) => format!("{} per nm of pump on the first ring", mm(0.5 * (up - down), 1)),
        _ => "a nanometre of pump makes or ends a ring".into(),
    };
    Ok(vec![
        "rings of the wrong size".into(),
        format!("pump wavelength ({change}); tilt zero; error of the cut; choice of refractive indices"),
        "Measure the pump with a spectrometer. Then the radius at three tilts or more: with the table of rings against tilt, an error of the cut shifts all of them by the same tilt.".into(),
    ])
}

fn at_pump(facts: &Facts<'_>, pump: Wavelength) -> Result<Cones, ConesError> {
    let setup = facts.setup;
    cones(&setup.crystals, pump, &setup.signals.for_pump(pump), setup.interaction, Want::Rings)
}

fn wrong_side(facts: &Facts<'_>) -> Result<Vec<String>, ConesError> {
    let setup = facts.setup;
    let mut crystals = setup.crystals.clone();
    crystals[0].reversal = match crystals[0].reversal {
        Reversal::None | Reversal::AboutVertical => Reversal::AboutBeam,
        Reversal::AboutBeam | Reversal::AboutHorizontal => Reversal::None,
    };
    let other = rings(setup, &crystals)?;
    let place = |cones: &Cones| {
        let ring = cones.rings.first().and_then(|r| r.ring.as_ref().ok().map(|ring| (r, ring)));
        ring.map_or("no ring".into(), |(row, ring)| {
            let c = ring.circle().0 * setup.screen.mm();
            format!("{} centred at x {}, y {}", ring_name(setup, row), mm(c.x, 1), mm(c.y, 1))
        })
    };
    Ok(vec![
        "the e ring on the wrong side, or rings that shrink with tilt".into(),
        format!(
            "crystal turned by half a turn about the beam, or other face first with Z up. As planned: {}; turned about the beam: {}",
            place(&facts.cones),
            place(&other)
        ),
        "Tilt a little: turned round, the sense of tilt that makes the rings grow is the other one. Turn the crystal about the beam.".into(),
    ])
}

fn no_coincidences(facts: &Facts<'_>) -> Vec<String> {
    let photons = facts.photons;
    let pairs = super::facts::nm(photons.signal);
    vec![
        "singles but no coincidences".into(),
        format!(
            "arms not conjugate; delay of cables; filters not conjugate ({pairs} needs {} in the other arm)",
            super::facts::nm(photons.idler)
        ),
        "Leave arm a, move arm b over a grid about its place, window wide, in the steps that the last step names; coincidences that come tell which arm was off.".into(),
    ]
}

fn movers(facts: &Facts<'_>) -> Result<Vec<Vec<String>>, ConesError> {
    let setup = facts.setup;
    let Some(watched) = watched(facts) else { return Ok(Vec::new()) };
    let crystal = &setup.crystals[0];
    let mut rows =
        vec![vec!["as planned".into(), format!("{} {}", watched.name(), plain_deg(watched.angle, 3))]];
    let mut row = |change: String, angle: Option<f64>| {
        let effect = angle.map_or("no ring or no crossing".into(), |a| {
            let shift = setup.screen.mm() * (a.tan() - watched.angle.tan());
            format!("{} ({} on the screen)", plain_deg(a, 3), mm(shift, 1))
        });
        rows.push(vec![change, effect]);
    };
    for off in [0.1, -0.1] {
        let mut turned = crystal.clone();
        turned.orientation.tilt = Angle::radians(crystal.orientation.tilt.si() + f64::to_radians(off));
        row(format!("tilt {off:+} deg"), watched.of(&facts.measure(&turned, facts.photons)));
    }
    for off in [1.0, -1.0] {
        let pump = Wavelength::from_nm(facts.photons.pump.nm() + off);
        let Some(photons) = Photons::new(pump, setup.signals.for_pump(pump)[0]) else { continue };
        row(format!("pump {off:+} nm"), watched.of(&facts.measure(crystal, photons)));
    }
    for (index, set) in crystal.material.sets().iter().enumerate() {
        let other = crystal.with_dataset(index);
        let covers =
            [facts.photons.pump, facts.photons.signal, facts.photons.idler].iter().all(|w| set.covers(*w));
        if index != crystal.dataset && covers {
            row(
                format!("refractive indices of {}", set.id),
                watched.of(&facts.measure(&other, facts.photons)),
            );
        }
    }
    Ok(rows)
}
