//! The bench sheet: alignment in order, each step with the number to set or to see.

use super::arms::arm_steps;
use super::caution::safety;
use super::facts::{Facts, Watched, azimuth, deg, field_words, mm, nm, ring_name, rings, side_words};
use super::page::{Block, Page};
use super::trouble::trouble;
use crate::frame::{Direction, Lab, Mount};
use crate::job::Setup;
use crate::matching::{Actuator, ConesError, RingRow};
use crate::optics::Crystal;
use crate::pairs::{Filter, Pair, PumpPolarization, Stack, most_even};
use crate::picture::{Backdrop, Optics, Seen, Sensor};
use crate::quantity::{Angle, Length, Wavelength};
use crate::report::angles::{fixed, rounded, signed};
use crate::report::room_words;

/// The sheet.
///
/// # Errors
/// Indices that are not to be had.
pub fn bench(setup: &Setup) -> Result<Page, ConesError> {
    let facts = Facts::of(setup)?;
    let name = setup.title.as_deref().unwrap_or("pair source");
    let mut page = Page { title: format!("Bench sheet: {name}"), ..Page::default() };
    safety(&mut page, &facts);
    page.heading("Frame");
    page.text(format!(
        "x is horizontal and positive to the left of who stands behind the laser and looks along the beam, y is up; both \
         count from where the undeviated pump hits. The screen stands across the beam at {} from the crystal. Angles are \
         outside the crystal. Indices: {}.",
        setup.screen,
        setup.crystals.iter().map(Facts::id).collect::<Vec<_>>().join(", ")
    ));
    figures(&mut page, &facts);
    page.heading("Pump and crystal");
    pump_steps(&mut page, &facts);
    for (index, crystal) in setup.crystals.iter().enumerate() {
        crystal_steps(&mut page, &facts, index, crystal);
    }
    page.heading("Rings");
    ring_steps(&mut page, &facts)?;
    page.heading("Arms");
    arm_steps(&mut page, &facts);
    trouble(&mut page, &facts)?;
    Ok(page)
}

/// Where the entrance face's reflection hits a card at `distance` back towards the laser, mm.
pub(super) fn reflection(crystal: &Crystal, distance: Length) -> (f64, f64) {
    let r = crystal.reflection();
    (-r.x / r.z * distance.mm() + 0.0, -r.y / r.z * distance.mm() + 0.0)
}

fn figures(page: &mut Page, facts: &Facts<'_>) {
    let setup = facts.setup;
    page.blocks.push(Block::Figure(
        crate::picture::side(setup, &facts.cones),
        "twincone picture --view side".into(),
    ));
    let optics = Optics::Screen(setup.screen);
    let field = Sensor::field_for(&facts.cones, optics);
    let sensor = Sensor { optics, field, pixels: 240, seen: Seen::default() };
    let sampling = crate::picture::Sampling { wavelengths: None };
    let exposure = crate::picture::Exposure::new(setup, &crate::picture::Light::of(setup), sensor, sampling);
    let Some(image) = exposure.ok().and_then(|e| e.take().png(crate::picture::Depth::Eight, false).ok())
    else {
        return;
    };
    let backdrop = Backdrop { png: &image, size: (240, 240), pump: (120.0, 120.0) };
    let notes = ["Dark is bright. Seen from downstream: +x right, +y up.".to_string()];
    let figure = crate::picture::camera(setup, &facts.cones, &sensor, backdrop, &notes);
    page.blocks.push(Block::Figure(figure, "twincone picture --view camera".into()));
}

fn pump_steps(page: &mut Page, facts: &Facts<'_>) {
    page.step(
        format!(
            "Level the pump: the beam keeps its height from the crystal to the screen at {}.",
            facts.setup.screen
        ),
        vec!["Mark where it hits: that is x = 0, y = 0.".into()],
    );
    polarization_step(page, facts);
    page.step(
        format!("Measure the pump's wavelength: these numbers are for {}.", nm(facts.photons.pump)),
        vec!["A nanometre moves the rings by what the last table of this sheet says.".into()],
    );
}

/// The pump's polarization: that of the job, else the one that drives all crystals as evenly as can be.
fn polarization_step(page: &mut Page, facts: &Facts<'_>) {
    let setup = facts.setup;
    let field = |crystal: &Crystal| {
        let pairing = facts.pairing(crystal, Direction::forward())?;
        let Lab(field) = crystal.placement().to_lab(pairing.pump.field);
        Some(azimuth(field))
    };
    let fields: Vec<f64> = setup.crystals.iter().filter_map(field).collect();
    let needs = |(n, field): (usize, &f64)| match fields.len() {
        1 => format!("The crystal takes most at {}.", field_words(*field)),
        _ => format!("Crystal {} by itself takes most at {}.", n + 1, field_words(*field)),
    };
    let each = fields.iter().enumerate().map(needs);
    if let PumpPolarization::Given { angle, phase } = setup.bench.polarization {
        page.step(
            format!("Set the pump's polarization as the job gives it: {}.", given_words(angle, phase)),
            each.collect(),
        );
        return;
    }
    let alike = fields.windows(2).all(|f| axes_apart(f[0], f[1]) < 0.05);
    match fields.as_slice() {
        [] => {}
        [first, ..] if alike => page.step(
            format!("Set the pump's polarization: {}.", field_words(*first)),
            vec!["Check with a polarizer before the crystal: it passes most there and least a quarter turn from there.".into()],
        ),
        all => {
            let even = as_the_pairs(facts).unwrap_or_else(|| between(all));
            let mut see = vec!["That drives the crystals as evenly as can be.".to_string()];
            see.extend(each);
            page.step(format!("Set the pump's polarization: {}.", field_words(even)), see);
        }
    }
}

/// Angle between two axes across the beam, degrees in [0, 90].
fn axes_apart(a: f64, b: f64) -> f64 {
    ((a - b + 90.0).rem_euclid(180.0) - 90.0).abs()
}

/// The azimuth, degrees in [0, 180), at which the product of the shares cos^2 of these axes is largest.
fn between(axes: &[f64]) -> f64 {
    let share = |at: f64, axis: &f64| (at - axis.to_radians()).cos().powi(2);
    let even = most_even(|at| axes.iter().map(|axis| share(at, axis)).product());
    azimuth(nalgebra::Vector3::new(even.cos(), even.sin(), 0.0))
}

/// The azimuth that `state` takes, degrees in [0, 180): with all that the pump meets before each crystal. `None` where the
/// job has no pair to look at.
fn as_the_pairs(facts: &Facts<'_>) -> Option<f64> {
    let setup = facts.setup;
    let pair = facts.cones.crossings.iter().find_map(|row| Pair::at(row, setup.pump()))?;
    let stack = Stack::new(&setup.crystals, &setup.bench, &pair, setup.interaction).ok()?;
    Some(azimuth(nalgebra::Vector3::new(stack.polarization.x.re, stack.polarization.y.re, 0.0)))
}

/// E = (cos angle, e^(i phase) sin angle) in words.
fn given_words(angle: Angle, phase: Angle) -> String {
    let (sin, cos) = angle.si().sin_cos();
    let (quadrature, in_phase) = phase.si().sin_cos();
    if (sin * cos * quadrature).abs() < 1e-6 {
        // linear: along one axis, or both fields in step or against each other
        field_words(azimuth(nalgebra::Vector3::new(cos, sin * in_phase.signum(), 0.0)))
    } else {
        format!(
            "elliptical, {} of the power vertical and the vertical field {} deg ahead of the horizontal one",
            percent(sin * sin),
            fixed(phase.degrees(), 1)
        )
    }
}

fn percent(share: f64) -> String {
    format!("{} %", fixed(100.0 * share, 1))
}

fn crystal_steps(page: &mut Page, facts: &Facts<'_>, index: usize, crystal: &Crystal) {
    let which =
        if facts.setup.crystals.len() > 1 { format!("crystal {}", index + 1) } else { "the crystal".into() };
    let placement = crystal.placement();
    let z = placement.to_lab(Mount(placement.dielectric_axes().column(2).into_owned())).0;
    let lean = if z.z < 0.0 { -z } else { z };
    page.step(
        format!(
            "Mount {which} ({}, {} long), roll {} deg.",
            Facts::id(crystal),
            crystal.length,
            signed(crystal.orientation.roll.degrees(), 1)
        ),
        vec![
            format!(
                "The end of Z that points downstream leans {}, looking along the beam.",
                side_words(nalgebra::Vector3::new(lean.x, lean.y, 0.0))
            ),
            "Roll right: between crossed polarizers and without tilt, the pump is extinguished.".into(),
        ],
    );
    let stage = facts.setup.stage.filter(|_| index == 0);
    let zero = stage.and_then(|s| s.zero);
    page.step(
        format!("Turn {which} until the reflection of its face goes back into the laser: tilt zero."),
        vec![match zero {
            Some(zero) => format!("Stage reading there: {} deg. If yours differs, correct [stage] zero in the job and print again.", fixed(zero.degrees(), 3)),
            None => "Write the reading down: ________ deg. Print this sheet again with your reading, `--set stage.zero=3.2deg`, and it names the reading to set.".into(),
        }],
    );
    let tilt = crystal.orientation.tilt;
    let cross = crystal.orientation.cross_tilt;
    let mut see = vec![format!("In words: {}.", room_words(crystal, Actuator::Tilt, tilt))];
    if let Some(stage) = stage {
        if let Some(reading) = stage.reading(tilt) {
            see.push(format!("Stage reading to set: {} deg.", fixed(reading.degrees(), 3)));
        }
        if let Some(turns) = stage.turns(tilt) {
            let sense = if turns < 0.0 { "falls" } else { "rises" };
            see.push(format!("Screw: {} turns, so that the reading {sense}.", fixed(turns.abs(), 2)));
        }
    }
    if cross.si() != 0.0 {
        see.push(format!(
            "Cross tilt {}: {}.",
            deg(cross.si(), 3),
            room_words(crystal, Actuator::CrossTilt, cross)
        ));
    }
    page.step(format!("Tilt {which} by {} from there.", deg(tilt.si(), 3)), see);
    let places = [0.1, 0.2, 0.3, 0.5, 1.0].map(Length::metres);
    let rows = places
        .into_iter()
        .map(|distance| {
            let (x, y) = reflection(crystal, distance);
            vec![distance.to_string(), mm(x, 2), mm(y, 2)]
        })
        .collect();
    page.text(format!(
        "Where the reflection of {which} lands at that tilt, on a card beside the incoming pump:"
    ));
    page.table(&["card before the crystal", "x", "y"], rows);
}

fn ring_steps(page: &mut Page, facts: &Facts<'_>) -> Result<(), ConesError> {
    let setup = facts.setup;
    let filter = filter_words(facts);
    page.step(
        format!("Put the filter in: {filter}."),
        vec!["A long-pass filter that stops the pump comes first.".into()],
    );
    page.step(
        format!("Find the rings on a camera or with a detector that is moved across at {}.", setup.screen),
        facts.cones.rings.iter().map(|row| ring_words(setup, row)).collect(),
    );
    let ring_row = |row: &RingRow| {
        let ring = row.ring.as_ref().ok()?;
        let (c, r) = ring.circle();
        let (x, y, r) = (c.x * setup.screen.mm(), c.y * setup.screen.mm(), r * setup.screen.mm());
        let thick = ring
            .thickness
            .map_or("filled".into(), |t| format!("{} mm", fixed(t.tan() * setup.screen.mm(), 1)));
        let edge = |a: f64, b: f64| format!("{} to {}", signed(a, 1), signed(b, 1));
        Some(vec![
            ring_name(setup, row),
            format!("x {}, y {}", signed(x, 1), signed(y, 1)),
            fixed(r, 1),
            edge(x - r, x + r),
            edge(y - r, y + r),
            thick,
        ])
    };
    let rows = facts.cones.rings.iter().filter_map(ring_row).collect();
    page.table(
        &[
            "ring",
            "centre in mm",
            "radius in mm",
            "x from, to in mm",
            "y from, to in mm",
            "thickness (FWHM), one wavelength, plane pump",
        ],
        rows,
    );
    let differ = |a: &RingRow, b: &RingRow| {
        let off = a.field_azimuth.zip(b.field_azimuth).map(|(a, b)| (a - b).abs());
        off.is_some_and(|off| (1.0..179.0).contains(&off))
    };
    let mixed = facts.cones.rings.windows(2).any(|r| differ(&r[0], &r[1]));
    page.step(
        if mixed {
            "Tell the rings apart with a polarizer before the camera."
        } else {
            "Check the polarization with a polarizer before the camera."
        },
        facts
            .cones
            .rings
            .iter()
            .filter_map(|row| {
                let a = row.field_azimuth?;
                let across = (a + 90.0).rem_euclid(180.0);
                Some(format!(
                    "{} stays with the polarizer's axis at {} deg from +x towards +y and goes at {} deg.",
                    ring_name(setup, row),
                    fixed(a, 1),
                    fixed(across, 1)
                ))
            })
            .collect(),
    );
    tilt_table(page, facts)
}

/// Side and polarization of a ring, or that there is none.
fn ring_words(setup: &Setup, row: &RingRow) -> String {
    let name = ring_name(setup, row);
    match &row.ring {
        Err(_) => format!("{name}: no ring at this setting ({}).", row.status),
        Ok(ring) => {
            let (c, r) = ring.circle();
            if c.norm() < 0.01 * r {
                format!("{name}: centred on the pump.")
            } else {
                let side = side_words(nalgebra::Vector3::new(c.x, c.y, 0.0));
                format!("{name}: off the pump, {side}, looking along the beam.")
            }
        }
    }
}

fn filter_words(facts: &Facts<'_>) -> String {
    let light = crate::picture::Light::of(facts.setup);
    let photons = facts.photons;
    let one = |filters: &[Filter], nominal: Wavelength| {
        let words = |f: &Filter| {
            let width = rounded(f.width.si() * 1e9, 3);
            format!("{width} nm wide (FWHM) at {}", nm(f.centre.unwrap_or(nominal)))
        };
        match filters {
            [] => format!("centred at {} (no width is given in the job)", nm(nominal)),
            all => all.iter().map(words).collect::<Vec<_>>().join(" behind one "),
        }
    };
    if photons.degenerate() {
        one(&light.signal, photons.signal)
    } else {
        format!(
            "{}, and for the partner {}",
            one(&light.signal, photons.signal),
            one(&light.idler, photons.idler)
        )
    }
}

/// Rings against tilt: what to compare a measured ring with.
fn tilt_table(page: &mut Page, facts: &Facts<'_>) -> Result<(), ConesError> {
    let setup = facts.setup;
    let now = setup.crystals[0].orientation.tilt.degrees();
    let stage = setup.stage;
    let mut header = vec!["tilt of crystal 1".to_string()];
    if stage.is_some_and(|s| s.zero.is_some()) {
        header.push("stage reading".into());
    }
    header.extend(facts.cones.rings.iter().map(|r| format!("{}: radius in mm", ring_name(setup, r))));
    let mut rows = Vec::new();
    for step in -4..=4 {
        let tilt = Angle::from_degrees(now + 0.25 * f64::from(step));
        let mut crystals = setup.crystals.clone();
        crystals[0].orientation.tilt = tilt;
        let found = rings(setup, &crystals)?;
        let mut row = vec![deg(tilt.si(), 2)];
        if let Some(reading) = stage.and_then(|s| s.reading(tilt)) {
            row.push(format!("{} deg", fixed(reading.degrees(), 2)));
        }
        row.extend(found.rings.iter().map(|r| match &r.ring {
            Ok(ring) => fixed(ring.circle().1 * setup.screen.mm(), 1),
            Err(_) => "none".into(),
        }));
        rows.push(row);
    }
    page.text("Rings against tilt: a ring that fits another line tells by how much tilt, cut or wavelength are off.");
    page.blocks.push(Block::Table(header, rows));
    Ok(())
}

/// The angle that both sheets watch, for the first crystal.
pub(super) fn watched(facts: &Facts<'_>) -> Option<Watched> {
    facts.watched(&facts.setup.crystals[0])
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;

    #[test]
    fn polarizations_are_axes() {
        // the middle of 0 deg and 179.4 deg is 179.7 deg, not 89.7 deg
        assert_abs_diff_eq!(between(&[0.0, 179.4]), 179.7, epsilon = 1e-6);
        assert_abs_diff_eq!(between(&[10.0, 30.0]), 20.0, epsilon = 1e-6);
        // of two that are as good, the smaller
        assert_abs_diff_eq!(between(&[90.0, 0.0]), 45.0, epsilon = 1e-6);
        assert_abs_diff_eq!(axes_apart(0.02, 179.99), 0.03, epsilon = 1e-9);
    }

    #[test]
    fn a_given_polarization_is_told() {
        let words =
            |angle: f64, phase: f64| given_words(Angle::from_degrees(angle), Angle::from_degrees(phase));
        assert_eq!(words(30.0, 0.0), "30.0 deg from +x towards +y");
        assert_eq!(words(30.0, 180.0), "150.0 deg from +x towards +y");
        assert_eq!(words(90.0, 90.0), "vertical, 90.0 deg from +x towards +y");
        assert!(words(45.0, 90.0).starts_with("elliptical, 50.0 % of the power vertical"));
    }
}
