//! What is seen if something is wrong, what to check then, and the test that decides.

use super::facts::{Facts, capital, deg, mm, plain_deg, ring_name, rings, same_order};
use super::mount::{spot_per_turn, which};
use super::page::Page;
use crate::frame::Reversal;
use crate::matching::{Actuator, Cones, ConesError, Photons, Want, cones, phase_matching_factor};
use crate::optics::Crystal;
use crate::picture::taken;
use crate::quantity::{Angle, Temperature, Wavelength};
use crate::report::angles::{fixed, signed};
use crate::report::{darkness, room_words};

/// The part of the bench sheet.
///
/// # Errors
/// Indices that are not to be had.
pub(super) fn trouble(page: &mut Page, facts: &Facts<'_>) -> Result<(), ConesError> {
    page.heading("If something is wrong");
    let mut rows = vec![no_light(facts)?, wrong_size(facts)?];
    rows.extend(wrong_side(facts)?);
    rows.push(no_coincidences(facts));
    page.table(&["what is seen", "likely, in this order", "the test that decides"], rows);
    page.heading("What moves the rings");
    page.text(format!(
        "A turn by 0.1 deg moves the reflected spot by {} mm on a card 1000 mm before the crystal, by 0.5 deg {} mm, by 1 deg {} mm.",
        fixed(spot_per_turn(0.1), 2),
        fixed(spot_per_turn(0.5), 2),
        fixed(spot_per_turn(1.0), 2)
    ));
    let mut done: Vec<usize> = Vec::new();
    for (index, crystal) in facts.setup.crystals.iter().enumerate() {
        let stands = |other: &usize| alike(crystal, &facts.setup.crystals[*other]);
        match done.iter().find(|other| stands(other)) {
            Some(other) => page.text(format!(
                "{} as {}; sides turned with its roll.",
                capital(&which(facts.setup, index)),
                which(facts.setup, *other)
            )),
            None => {
                if facts.setup.crystals.len() > 1 {
                    page.text(format!("{}:", capital(&which(facts.setup, index))));
                }
                page.table(&["change", "effect"], movers(facts, crystal)?);
                done.push(index);
            }
        }
    }
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

/// Whether two crystals are moved alike by everything but roll.
fn alike(a: &Crystal, b: &Crystal) -> bool {
    same_order(a, b)
        && a.orientation.tilt == b.orientation.tilt
        && a.orientation.cross_tilt == b.orientation.cross_tilt
}

fn no_light(facts: &Facts<'_>) -> Result<Vec<String>, ConesError> {
    let setup = facts.setup;
    let mut likely = String::from(
        "a turn of the wrong sense; cut at the wrong phi; filter centred elsewhere, or a filter in the camera that stops the infrared",
    );
    let mut test = match apart(facts) {
        // sum of cos^2 of the field's angles from directions that differ is nowhere zero
        Some(words) => words,
        None => {
            likely.insert_str(0, "pump polarization a quarter turn off; crystal rolled by 90 deg; ");
            "Turn the pump's half-wave plate: light from pairs rises and falls as sin^2 of twice the plate's angle, background does not.".into()
        }
    };
    let cross = facts.tuning(&setup.crystals[0]) == Actuator::CrossTilt;
    let (key, turn) = match cross {
        true => ("cross tilt", setup.crystals[0].orientation.cross_tilt),
        false => ("tilt", setup.crystals[0].orientation.tilt),
    };
    if turn.degrees().abs() > 0.01 {
        let mut crystals = setup.crystals.clone();
        let turned = &mut crystals[0].orientation;
        *if cross { &mut turned.cross_tilt } else { &mut turned.tilt } = Angle::radians(-turn.si());
        let other = rings(setup, &crystals)?;
        likely.push_str(&format!(
            "; at {key} {} this crystal gives {}",
            deg(-turn.si(), 3),
            words(facts, &other)
        ));
        test.push_str(&format!(" Go through back-reflection to the same {key} on the other side."));
    }
    if let Some(dark) = darkness(setup, &facts.cones) {
        likely.insert_str(0, &format!("{dark} Else: "));
    }
    Ok(vec!["no light above background".into(), likely, test])
}

/// Crystals that take different polarizations of the pump: no turn of its half-wave plate darkens all of them, so what it does
/// to each. `None` where they take the same one.
fn apart(facts: &Facts<'_>) -> Option<String> {
    let setup = facts.setup;
    let axes: Vec<f64> = setup.crystals.iter().filter_map(|c| taken(setup, c)).map(f64::to_degrees).collect();
    let differ = |a: f64, b: f64| {
        let off = (a - b).rem_euclid(180.0);
        off.min(180.0 - off)
    };
    let first = *axes.first()?;
    let other = axes.iter().map(|a| differ(*a, first)).fold(0.0, f64::max);
    if other < 1.0 {
        return None;
    }
    // rings of one field per crystal are parted by a polarizer
    let field = |index: usize| {
        let own: Vec<f64> =
            facts.cones.rings.iter().filter(|r| r.crystal == index).filter_map(|r| r.field_azimuth).collect();
        let one = *own.first()?;
        own.iter().all(|a| differ(*a, one) < 1.0).then_some(one)
    };
    let fields: Vec<Option<f64>> = (0..setup.crystals.len()).map(field).collect();
    let parted = fields[0]
        .filter(|a| fields[1..].iter().all(|b| b.is_some_and(|b| (differ(*a, b) - 90.0).abs() < 1.0)));
    let alone = match parted {
        Some(azimuth) => format!(
            "Put a polarizer before the camera, its axis at {} deg from +x towards +y: it passes the pairs of {} alone",
            fixed(azimuth, 1),
            which(setup, 0)
        ),
        None => format!("Leave {} alone in the beam", which(setup, 0)),
    };
    let whole = if setup.crystals.len() == 2 && (other - 90.0).abs() < 1.0 {
        "the light of one crystal falls as that of the other grows; of equal crystals the sum stays the same"
    } else {
        "it is dark at no setting, since the crystals take different polarizations"
    };
    Some(format!(
        "Turning the pump's half-wave plate does not tell by itself: {whole}. {alone}, and these rise and fall as sin^2 of twice the \
         plate's angle, background does not."
    ))
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
        "Measure the pump with a spectrometer. Then the radius at three lines or more of the table of rings against the turn: an error of the cut shifts all of them by the same turn.".into(),
    ])
}

fn at_pump(facts: &Facts<'_>, pump: Wavelength) -> Result<Cones, ConesError> {
    let setup = facts.setup;
    cones(&setup.crystals, pump, &setup.signals.for_pump(pump), setup.interaction, Want::Rings)
}

/// What tells a crystal that is turned round; nothing where neither its ring nor a turn tells.
fn wrong_side(facts: &Facts<'_>) -> Result<Option<Vec<String>>, ConesError> {
    let setup = facts.setup;
    let mut crystals = setup.crystals.clone();
    crystals[0].reversal = match crystals[0].reversal {
        Reversal::None | Reversal::AboutVertical => Reversal::AboutBeam,
        Reversal::AboutBeam | Reversal::AboutHorizontal => Reversal::None,
    };
    let Some(first) = facts.cones.rings.first().and_then(|r| r.ring.as_ref().ok()) else { return Ok(None) };
    let other = rings(setup, &crystals)?;
    let place = |cones: &Cones| {
        let ring = cones.rings.first().and_then(|r| r.ring.as_ref().ok().map(|ring| (r, ring)));
        ring.map_or("no ring".into(), |(row, ring)| {
            let (c, r) = ring.circle();
            let (c, r) = (c * setup.screen.mm(), r * setup.screen.mm());
            format!(
                "{} of radius {} mm, centred at x {}, y {}",
                ring_name(setup, row),
                fixed(r, 1),
                mm(c.x, 1),
                mm(c.y, 1)
            )
        })
    };
    let centred = first.circle().0.norm() < 0.01 * first.circle().1;
    let (planned, turned) = (place(&facts.cones), place(&other));
    let crystal = &setup.crystals[0];
    let turn = telling_turn(facts, crystal, &crystals[0]);
    if turn.is_none() && planned == turned {
        return Ok(None);
    }
    let rings = if planned == turned {
        "The ring of this setting is the same both ways; only a turn tells.".into()
    } else {
        format!("As planned: {planned}; turned about the beam: {turned}.")
    };
    let test = match turn {
        Some((actuator, half)) => format!(
            "{} by 0.5 deg: the rings must grow. Turned round, they shrink or vanish: turn the crystal by half a turn about the beam.",
            capital(&room_words(crystal, actuator, half).replace(" by 0.5 deg", ""))
        ),
        None => {
            "Compare the ring with both; a turn does not tell, since it changes the ring alike either way."
                .into()
        }
    };
    let seen = match (centred, turn.is_some()) {
        (true, true) => "rings that shrink when they should grow",
        (true, false) => "a ring of the other size",
        (false, true) => "the e ring on the wrong side, or rings that shrink when they should grow",
        (false, false) => "a ring on the wrong side",
    };
    Ok(Some(vec![
        seen.into(),
        format!(
            "crystal turned by half a turn about the beam, or other face first so that its mark leans to the opposite side. {rings}"
        ),
        test,
    ]))
}

/// The turn by half a degree of which the ring grows and its opposite shrinks, while for the crystal that is turned round it
/// is the other way; none where the turn cannot tell.
fn telling_turn(facts: &Facts<'_>, crystal: &Crystal, round: &Crystal) -> Option<(Actuator, Angle)> {
    let actuator = facts.tuning(crystal);
    let cross = actuator == Actuator::CrossTilt;
    let half = |sign: f64| Angle::from_degrees(0.5 * sign);
    let size = |crystal: &Crystal, sign: f64| {
        let mut turned = crystal.clone();
        let turn = if cross { &mut turned.orientation.cross_tilt } else { &mut turned.orientation.tilt };
        *turn = Angle::radians(turn.si() + half(sign).si());
        facts.measure(&turned, facts.photons).half_angle
    };
    let now = size(crystal, 0.0)?;
    // a ring that vanishes has shrunk; a hundredth of its size is not seen
    let grows = |sign: f64| size(crystal, sign).is_some_and(|a| a > 1.01 * now);
    let shrinks = |sign: f64| size(crystal, sign).is_none_or(|a| a < 0.99 * now);
    let sign = [1.0, -1.0].into_iter().find(|sign| grows(*sign) && shrinks(-sign))?;
    // the mount's turn is the same, however the crystal sits in it
    let before = size(round, 0.0);
    let after = size(round, sign);
    let told = before.is_none_or(|before| after.is_none_or(|after| after < 0.99 * before));
    told.then_some((actuator, half(sign)))
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

/// What each change does to the angle that is watched; where there is no ring, to what is missing.
fn movers(facts: &Facts<'_>, crystal: &Crystal) -> Result<Vec<Vec<String>>, ConesError> {
    let setup = facts.setup;
    let watched = facts.watched(crystal);
    let effect = |changed: &Crystal, photons: Photons| -> Result<String, ConesError> {
        let Some(watched) = watched else { return missing(facts, changed, photons) };
        let angle = watched.of(&facts.measure(changed, photons));
        Ok(angle.map_or("no ring or no crossing".into(), |a| {
            let shift = setup.screen.mm() * (a.tan() - watched.angle.tan());
            format!("{} ({} on the screen)", plain_deg(a, 3), mm(shift, 1))
        }))
    };
    let mut rows = vec![vec![
        "as planned".into(),
        match watched {
            Some(watched) => format!("{} {}", watched.name(), plain_deg(watched.angle, 3)),
            None => missing(facts, crystal, facts.photons)?,
        },
    ]];
    let first = facts.tuning(crystal);
    let second = if first == Actuator::Tilt { Actuator::CrossTilt } else { Actuator::Tilt };
    for (actuator, size) in [(first, 0.1), (second, 1.0)] {
        for off in [size, -size] {
            let mut turned = crystal.clone();
            let cross = actuator == Actuator::CrossTilt;
            let turn = if cross { &mut turned.orientation.cross_tilt } else { &mut turned.orientation.tilt };
            *turn = Angle::radians(turn.si() + f64::to_radians(off));
            let way = room_words(crystal, actuator, Angle::from_degrees(off));
            let key = if cross { "cross tilt" } else { "tilt" };
            let stage = setup.stage.filter(|_| !cross && std::ptr::eq(crystal, &raw const setup.crystals[0]));
            let turns = stage.and_then(|s| s.turns(Angle::from_degrees(off)));
            let turns = turns.map_or(String::new(), |t| format!(" ({} turns of the screw)", signed(t, 2)));
            rows.push(vec![format!("{key} {off:+} deg: {way}{turns}"), effect(&turned, facts.photons)?]);
        }
    }
    if crystal.set().has_thermo_optics() {
        for off in [5.0, -5.0] {
            let mut warmer = crystal.clone();
            warmer.temperature = Temperature::celsius(crystal.temperature.degc() + off);
            if let Ok(words) = effect(&warmer, facts.photons) {
                rows.push(vec![format!("temperature {off:+} K"), words]);
            }
        }
    }
    for off in [1.0, -1.0] {
        let pump = Wavelength::from_nm(facts.photons.pump.nm() + off);
        let Some(photons) = Photons::new(pump, setup.signals.for_pump(pump)[0]) else { continue };
        rows.push(vec![format!("pump {off:+} nm"), effect(crystal, photons)?]);
    }
    for (index, set) in crystal.material.sets().iter().enumerate() {
        let other = crystal.with_dataset(index);
        let covers =
            [facts.photons.pump, facts.photons.signal, facts.photons.idler].iter().all(|w| set.covers(*w));
        if index != crystal.dataset && covers {
            rows.push(vec![format!("refractive indices of {}", set.id), effect(&other, facts.photons)?]);
        }
    }
    Ok(rows)
}

/// The first ring of a crystal, or by how much its best direction misses.
pub(super) fn missing(facts: &Facts<'_>, crystal: &Crystal, photons: Photons) -> Result<String, ConesError> {
    let interaction = facts.setup.interaction;
    let found =
        cones(std::slice::from_ref(crystal), photons.pump, &[photons.signal], interaction, Want::Rings)?;
    Ok(match found.rings.first().map(|row| &row.ring) {
        Some(Ok(ring)) => format!(
            "a ring of half angle {} (radius {} mm)",
            plain_deg(ring.half_angle, 3),
            fixed(ring.circle().1 * facts.setup.screen.mm(), 1)
        ),
        Some(Err(fault)) => fault.shortfall.map_or("no ring".into(), |off| {
            format!(
                "no ring; the best direction misses by {} rad/mm (sinc^2 {})",
                fixed(off * 1e-3, 2),
                fixed(phase_matching_factor(off, crystal.hot_length().si()), 2)
            )
        }),
        None => "no ring".into(),
    })
}
