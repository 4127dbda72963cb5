//! Where arms, irises and a seed laser go.

use super::facts::{Facts, nm, plain_deg};
use super::page::Page;
use crate::frame::Direction;
use crate::matching::{CrossingRow, Emission, Photons};
use crate::quantity::{Length, Wavelength};
use crate::report::angles::{fixed, signed};

/// The steps of the bench sheet about the arms.
pub(super) fn arm_steps(page: &mut Page, facts: &Facts<'_>) {
    let setup = facts.setup;
    let crossings: Vec<&CrossingRow> = facts.cones.pairs().collect();
    let mut rows = Vec::new();
    let mut angles = Vec::new();
    for row in &crossings {
        let Some(crossing) = &row.crossing else { continue };
        for (name, direction, wavelength) in
            [('a', Some(crossing.direction), row.a_wavelength), ('b', crossing.partner, row.b_wavelength)]
        {
            let Some(d) = direction else { continue };
            let label = format!("{} ({})", row.arm(name).unwrap_or_default(), nm(wavelength));
            angles.push(arm_angles(&label, d));
            rows.extend(arm_places(&label, d, setup.screen));
        }
    }
    if crossings.is_empty() {
        let Some((label, d, partner)) = ring_pair(facts) else {
            page.text("There is no ring at this setting, so there is nowhere to put an arm: first change what the caution above names, in the job too, and print again.");
            return;
        };
        page.text(
            "No two rings cross here: the arms go to opposite points of the ring. This is one such pair.",
        );
        for (name, d) in [("a", d), ("b", partner)] {
            angles.push(arm_angles(&format!("{name} ({label})"), d));
            rows.extend(arm_places(&format!("{name} ({label})"), d, setup.screen));
        }
    }
    page.step("Set the arms to these angles from the pump, with the pivot under the crystal.", Vec::new());
    page.table(
        &["arm", "h (to +x)", "v (up)", "from the pump", "about the pump, from +x towards +y"],
        angles,
    );
    page.step("Check with a ruler: places on a plane across the pump.", Vec::new());
    page.table(&["arm", "plane at", "x in mm", "y in mm", "from the pump in mm"], rows);
    iris_step(page, facts);
    seeds(page, facts);
    let screen = setup.screen;
    // a ring that is filled gives no iris: its own size is what there is to step by
    let radius = || facts.cones.rings.iter().find_map(|r| r.ring.as_ref().ok()).map(|ring| ring.circle().1);
    let step = match iris(facts) {
        Some((full, _)) => {
            format!("half an iris: {} mm at {screen}", fixed(screen.mm() * (0.5 * full).tan(), 1))
        }
        None => radius().map_or("half an iris".into(), |radius| {
            format!("half the ring's radius: {} mm at {screen}", fixed(0.5 * radius * screen.mm(), 1))
        }),
    };
    page.step(
        "Look for coincidences: irises open first, window wide, delays of both arms equal.",
        vec![format!(
            "If there are none, leave arm a and move arm b over a grid about its place in steps of {step}."
        )],
    );
}

/// Full angle of the irises, and why: the job's, or as wide as the thinnest ring.
fn iris(facts: &Facts<'_>) -> Option<(f64, &'static str)> {
    if let Some(full) = facts.iris() {
        return Some((full, "as the job says"));
    }
    let thin = facts.widths.iter().flatten().copied().fold(f64::INFINITY, f64::min);
    thin.is_finite()
        .then_some((2.0 * (0.5 * thin).atan(), "as wide as the ring is thick, since the job gives no iris"))
}

fn arm_angles(label: &str, d: Direction) -> Vec<String> {
    let turned = |v: f64| format!("{} deg", signed(v, 3));
    vec![
        label.into(),
        turned(d.h_deg()),
        turned(d.v_deg()),
        format!("{} deg", fixed(d.polar_deg(), 3)),
        format!("{} deg", fixed(d.azimuth_deg().rem_euclid(360.0), 2)),
    ]
}

/// Planes across the pump where places are told, nearest first; the screen among them.
fn planes(screen: Length) -> Vec<Length> {
    let mut planes = vec![Length::metres(0.25), Length::metres(0.5), Length::metres(1.0)];
    if planes.iter().all(|p| (p.si() - screen.si()).abs() > 1e-9) {
        planes.push(screen);
        planes.sort_by(|a, b| a.si().total_cmp(&b.si()));
    }
    planes
}

fn arm_places(label: &str, d: Direction, screen: Length) -> Vec<Vec<String>> {
    planes(screen)
        .into_iter()
        .map(|plane| {
            let (x, y) = d.on_screen_mm(plane);
            vec![label.into(), plane.to_string(), signed(x, 2), signed(y, 2), fixed(x.hypot(y), 2)]
        })
        .collect()
}

/// A photon straight up from the first ring's axis, and its partner.
pub(super) fn ring_pair(facts: &Facts<'_>) -> Option<(String, Direction, Direction)> {
    let row = facts.cones.rings.iter().find(|r| r.ring.is_ok())?;
    let ring = row.ring.as_ref().ok()?;
    let d = ring.curve.direction(crate::matching::SAMPLES / 4);
    let crystal = &facts.setup.crystals[row.crystal];
    let partner = Emission::of(crystal, row.photons).ok()?.pairing(row.roles, d)?.idler_outside?;
    Some((nm(row.wavelength), d, partner))
}

fn iris_step(page: &mut Page, facts: &Facts<'_>) {
    let at = |full: f64, distance: Length| 2.0 * distance.mm() * (0.5 * full).tan();
    let Some((full, why)) = iris(facts) else { return };
    let rows = planes(facts.setup.screen)
        .into_iter()
        .map(|d| vec![d.to_string(), format!("{} mm", fixed(at(full, d), 2))])
        .collect();
    page.step(
        format!("Set the irises: full angle {} seen from the crystal, {why}.", plain_deg(full, 3)),
        Vec::new(),
    );
    page.table(&["iris at", "diameter"], rows);
}

/// Where a seed laser in the first arm shows its partner.
fn seeds(page: &mut Page, facts: &Facts<'_>) {
    let crossing = facts
        .cones
        .pairs()
        .find_map(|row| Some((row.arm('a').unwrap_or_default(), row.crossing.as_ref()?.direction)));
    let Some((arm, direction)) = crossing.or_else(|| ring_pair(facts).map(|p| ("a".into(), p.1))) else {
        return;
    };
    let crystal = &facts.setup.crystals[0];
    let Some(roles) = facts.roles(crystal) else { return };
    let mut rows = Vec::new();
    let at = |off: f64| {
        let seed = Wavelength::from_nm(facts.photons.signal.nm() + off);
        let photons = Photons::new(facts.photons.pump, seed)?;
        let pairing = Emission::of(crystal, photons).ok()?.pairing(roles, direction)?;
        Some((seed, photons, pairing, pairing.phase_matching_factor(crystal.hot_length().si())))
    };
    let step = seed_step(facts.photons.signal.nm(), |off| at(off).map(|found| found.3));
    for off in [-2.0, -1.0, 0.0, 1.0, 2.0] {
        let row = at(off * step).and_then(|(seed, photons, pairing, factor)| {
            let partner = pairing.idler_outside?;
            let (x, y) = partner.on_screen_mm(facts.setup.screen);
            Some(vec![nm(seed), nm(photons.idler), signed(x, 2), signed(y, 2), fixed(factor, 2)])
        });
        rows.extend(row);
    }
    page.step(
        format!(
            "If a laser near the signal's wavelength is at hand, send it through the crystal to arm {arm}: its partner lights up here."
        ),
        vec![format!(
            "Seed at h {} deg, v {} deg; places on the screen at {}.",
            signed(direction.h_deg(), 3),
            signed(direction.v_deg(), 3),
            facts.setup.screen
        )],
    );
    page.table(&["seed", "partner", "partner x in mm", "partner y in mm", "sinc^2"], rows);
}

/// A round step, nm, two of which take sinc^2 to about one half; a twentieth of the wavelength where nothing does.
fn seed_step(nm: f64, factor: impl Fn(f64) -> Option<f64>) -> f64 {
    let largest = 0.05 * nm;
    let dim = |off: f64| [off, -off].iter().all(|o| factor(*o).is_none_or(|f| f < 0.5));
    let mut half = 1e-3;
    while half < largest && !dim(half) {
        half *= 1.1;
    }
    let power = 10f64.powf((0.5 * half).log10().floor());
    let lead = 0.5 * half / power;
    power * [5.0, 2.0, 1.0].into_iter().find(|nice| *nice <= lead + 1e-9).unwrap_or(1.0)
}
