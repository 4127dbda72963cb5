//! The bench sheet: alignment in order, each step with the number to set or to see.

use super::arms::arm_steps;
use super::caution::safety;
use super::facts::{Facts, field_words, nm, ring_name, side_words};
use super::mount::{common_mount, mount_steps, temperature_steps, tuning_tables, which};
use super::page::{Block, Page};
use super::trouble::trouble;
use crate::job::Setup;
use crate::matching::{ConesError, RingRow, SAMPLES};
use crate::optics::Crystal;
use crate::pairs::Filter;
use crate::picture::{Backdrop, Optics, PumpLight, Seen, Sensor, taken};
use crate::quantity::Wavelength;
use crate::report::angles::{fixed, rounded, signed};
use crate::report::darkness;

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
         count from where the undeviated pump hits. Angles from +x towards +y run clockwise for who looks along the beam (0 deg \
         left, 90 deg up) and counterclockwise for who looks back at the laser (0 deg right, 90 deg up). The screen stands across the beam at {} from the crystal. Angles are \
         outside the crystal. Indices: {}.",
        setup.screen,
        setup.crystals.iter().map(Facts::id).collect::<Vec<_>>().join(", ")
    ));
    if let Some(words) = darkness(setup, &facts.cones) {
        page.blocks.push(Block::Warning(words));
    }
    figures(&mut page, &facts);
    page.heading("Pump and crystal");
    pump_steps(&mut page, &facts);
    for index in 0..setup.crystals.len() {
        mount_steps(&mut page, &facts, index);
    }
    common_mount(&mut page, setup);
    temperature_steps(&mut page, &facts);
    page.heading("Rings");
    ring_steps(&mut page, &facts)?;
    page.heading("Arms");
    arm_steps(&mut page, &facts);
    trouble(&mut page, &facts)?;
    Ok(page)
}

fn figures(page: &mut Page, facts: &Facts<'_>) {
    let setup = facts.setup;
    let command = || "twincone picture --view side --job job.toml".to_string();
    if setup.crystals.len() > 1 {
        page.blocks.push(Block::Figure(crate::picture::line_up(setup), command()));
    }
    for index in 0..setup.crystals.len() {
        let drawing = crate::picture::side_of(setup, &facts.cones, index);
        page.blocks.push(Block::Figure(drawing, command()));
    }
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
    page.blocks.push(Block::Figure(figure, "twincone picture --view camera --job job.toml".into()));
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
    let Some(light) = PumpLight::of(setup, &facts.cones) else { return };
    let words = light.linear().map_or_else(|| elliptical_words(&light), |a| field_words(degrees(a)));
    let several = setup.crystals.len() > 1;
    let takes = |(index, crystal): (usize, &Crystal)| {
        let azimuth = taken(setup, crystal)?;
        let who = if several { which(setup, index) } else { "the crystal".into() };
        Some(format!(
            "{}{} takes most at {}; of the polarization above it takes {}.",
            who[..1].to_uppercase(),
            &who[1..],
            field_words(degrees(azimuth)),
            percent(light.share(azimuth))
        ))
    };
    let each: Vec<String> = setup.crystals.iter().enumerate().filter_map(takes).collect();
    if light.given {
        page.step(format!("Set the pump's polarization as the job gives it: {words}."), each);
        return;
    }
    let mut see = if several && each.len() > 1 {
        let mut see = vec!["That drives the crystals as evenly as can be.".to_string()];
        see.extend(each);
        see
    } else {
        Vec::new()
    };
    if let Some(azimuth) = light.linear() {
        let across = (degrees(azimuth) + 90.0).rem_euclid(180.0);
        see.push(format!(
            "Check with a polarizer before the crystal: it passes most with its axis there and least at {}.",
            field_words(across)
        ));
    }
    page.step(format!("Set the pump's polarization: {words}."), see);
}

/// Of an axis, in [0, 180) and free of rounding next to 180.
fn degrees(azimuth: f64) -> f64 {
    let degrees = azimuth.to_degrees();
    if degrees > 179.95 { 0.0 } else { degrees }
}

/// E = (cos angle, e^(i phase) sin angle) in words.
fn elliptical_words(light: &PumpLight) -> String {
    format!(
        "elliptical, {} of the power vertical and the vertical field {} deg ahead of the horizontal one",
        percent(light.share(std::f64::consts::FRAC_PI_2)),
        fixed(light.phase.to_degrees(), 1)
    )
}

fn percent(share: f64) -> String {
    format!("{} %", fixed(100.0 * share, 1))
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
    let ring_row = |(row, width): (&RingRow, &Option<f64>)| {
        let ring = row.ring.as_ref().ok()?;
        let (c, r) = ring.circle();
        let (x, y, r) = (c.x * setup.screen.mm(), c.y * setup.screen.mm(), r * setup.screen.mm());
        let thick = width.map_or("filled".into(), |t| format!("{} mm", fixed(t * setup.screen.mm(), 1)));
        // of the ring itself, which need not be the circle that fits it
        let spots: Vec<(f64, f64)> =
            (0..SAMPLES).map(|j| ring.curve.direction(j).on_screen_mm(setup.screen)).collect();
        let edge = |of: fn(&(f64, f64)) -> f64| {
            let low = spots.iter().map(of).fold(f64::INFINITY, f64::min);
            let high = spots.iter().map(of).fold(f64::NEG_INFINITY, f64::max);
            format!("{} to {}", signed(low, 1), signed(high, 1))
        };
        Some(vec![
            ring_name(setup, row),
            format!("x {}, y {}", signed(x, 1), signed(y, 1)),
            fixed(r, 1),
            edge(|spot| spot.0),
            edge(|spot| spot.1),
            thick,
        ])
    };
    let rows = facts.cones.rings.iter().zip(&facts.widths).filter_map(ring_row).collect();
    page.table(
        &[
            "ring",
            "centre in mm",
            "radius in mm",
            "x from, to in mm",
            "y from, to in mm",
            &format!("thickness (FWHM), {}", facts.light_words()),
        ],
        rows,
    );
    let differ = |a: &RingRow, b: &RingRow| {
        let off = a.field_azimuth.zip(b.field_azimuth).map(|(a, b)| (a - b).abs());
        off.is_some_and(|off| (1.0..179.0).contains(&off))
    };
    let mixed = facts.cones.rings.windows(2).any(|r| differ(&r[0], &r[1]));
    let apart: Vec<String> = facts
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
        .collect();
    if !apart.is_empty() {
        let head = if mixed { "Tell the rings apart" } else { "Check the polarization" };
        page.step(format!("{head} with a polarizer before the camera."), apart);
    }
    (0..setup.crystals.len()).try_for_each(|index| tuning_tables(page, facts, index))
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

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_given_polarization_is_told() {
        let words = |angle: f64, phase: f64| {
            let light = PumpLight { angle: angle.to_radians(), phase: phase.to_radians(), given: true };
            light.linear().map_or_else(|| elliptical_words(&light), |a| field_words(degrees(a)))
        };
        assert_eq!(words(30.0, 0.0), "30.0 deg from +x towards +y");
        assert_eq!(words(30.0, 180.0), "150.0 deg from +x towards +y");
        assert_eq!(words(90.0, 90.0), "vertical, 90.0 deg from +x towards +y");
        assert!(words(45.0, 90.0).starts_with("elliptical, 50.0 % of the power vertical"));
    }
}
