//! The exact slopes of a fit are those of its predictions.

use nalgebra::Vector2;
use proptest::prelude::*;
use twincone::fit::{Label, Measurement, Model, Seen, Settings, Unknown, View, unknowns};
use twincone::job::setup::Needs;
use twincone::job::{Document, Setup, resolve};
use twincone::matching::Landing;
use twincone::material::Catalogue;

use crate::crystals::{Case, every};

/// Uniaxial and biaxial, poled and turned round, degenerate with the pump and at a signal that stands alone, stacked.
const BENCHES: [(&str, &str); 6] = [
    (
        "bbo, crossed cones",
        "[pump]\nwavelength = \"405 nm\"\n[crystal]\nmaterial = \"bbo\"\ndataset = \"kato-1986\"\n\
         cut = { theta = \"42.6 deg\", phi = \"0 deg\" }\n[emission]\nsignal = [\"810 nm\"]\n",
    ),
    (
        "bbo, one cone that follows the pump",
        "[pump]\nwavelength = \"405 nm\"\n[crystal]\nmaterial = \"bbo\"\nreversed = \"about-vertical\"\n\
         cut = { theta = \"29.9 deg\", phi = \"90 deg\" }\n[emission]\ntype = \"I\"\n",
    ),
    (
        "bbo, apart in wavelength",
        "[pump]\nwavelength = \"405 nm\"\n[crystal]\nmaterial = \"bbo\"\n\
         cut = { theta = \"43.5 deg\", phi = \"0 deg\" }\n[emission]\nsignal = [\"780 nm\"]\n",
    ),
    (
        "lbo",
        "[pump]\nwavelength = \"405 nm\"\n[crystal]\nmaterial = \"lbo\"\n\
         cut = { theta = \"89 deg\", phi = \"34 deg\" }\n[emission]\ntype = \"I\"\n",
    ),
    (
        "poled ktp, warm",
        "[pump]\nwavelength = \"405 nm\"\n[crystal]\nmaterial = \"ktp\"\npoling = \"9.9 um\"\ntemperature = \"35 degC\"\n\
         cut = { theta = \"86 deg\", phi = \"3 deg\" }\n[emission]\ntype = \"II\"\n",
    ),
    (
        "two crystals",
        "[pump]\nwavelength = \"405 nm\"\n[[crystal]]\nmaterial = \"bbo\"\ncut = { theta = \"29.9 deg\", phi = \"90 deg\" }\n\
         [[crystal]]\nmaterial = \"bbo\"\nroll = \"90 deg\"\ncut = { theta = \"29.8 deg\", phi = \"90 deg\" }\n\
         [emission]\ntype = \"I\"\n",
    ),
];

/// Keys, and the steps of the differences that they are compared with, in their units.
const FREE: [(&str, f64); 11] = [
    ("crystal.cut.theta", 0.005),
    ("crystal.cut.phi", 0.005),
    ("crystal.roll", 0.02),
    ("crystal.tilt", 0.005),
    ("crystal.cross_tilt", 0.005),
    ("crystal.temperature", 0.2),
    ("crystal.poling", 5e-5),
    ("pump.wavelength", 0.004),
    ("stage.zero", 0.005),
    ("screen.distance", 1.0),
    ("screen.centre", 0.5),
];

fn setup(job: &str) -> Setup {
    resolve(&Document::from_file("job.toml", job), &Catalogue::default(), Needs::ALL).expect("a job")
}

/// The unknowns of a bench, with their steps.
fn free(setup: &Setup) -> Vec<(Unknown, f64)> {
    let stacked = setup.crystals.len() > 1;
    let mut all = Vec::new();
    for (key, step) in FREE {
        if key == "crystal.poling" && setup.crystals[0].poling.is_none() {
            continue;
        }
        let names: Vec<String> = match key.strip_prefix("crystal.").filter(|_| stacked) {
            Some(rest) => (1..=2).map(|n| format!("crystal.{n}.{rest}")).collect(),
            None => vec![key.into()],
        };
        all.extend(unknowns(&names, &[], setup).expect("unknowns").into_iter().map(|u| (u, step)));
    }
    all
}

/// What could have been measured of a ring that is there: all of it, its cone, a point outside it and one inside; and where
/// rings cross.
fn measured(model: &mut Model, settings: Settings, label: Label) -> Vec<Measurement> {
    let of = |seen: Seen| Measurement { line: 1, settings, label, seen, sigma: None };
    let zero = Vector2::zeros();
    let mut all = vec![of(Seen::Cone { axis: Some(zero), half_angle: Some(1.0) })];
    let ring = of(Seen::Ring { centre: Some(zero), radius: Some(1.0) });
    if let Some(found) = model.differences(&ring, 0)
        && found[2].1 > 5.0
    {
        let centre = Vector2::new(found[0].1, found[1].1);
        for (off, azimuth) in [(3.0, 0.4), (-2.0, 2.5), (0.0, 4.0)] {
            let out = Vector2::new(f64::cos(azimuth), f64::sin(azimuth));
            all.push(of(Seen::Edge(centre + out * (found[2].1 + off))));
        }
    }
    all.push(ring);
    all.push(of(Seen::Crossing(Vector2::new(1.0, 40.0))));
    all.push(of(Seen::CrossingAngles(Vector2::new(0.1, -2.0))));
    all
}

/// Central differences over one step and over half of it, which leaves errors of the fourth order of the step; a value is
/// traced to 1e-9 deg, so differences know a slope to about 1e-7 of what changes a ring most.
#[test]
fn slopes_of_predictions_are_exact() {
    let values = (0..BENCHES.len(), prop::array::uniform11(-1.0..1.0f64), any::<[bool; 4]>());
    every(96, 90, &values, |(bench, random, [mirrored, turned, idler, second])| {
        let (name, job) = BENCHES[bench];
        let setup = setup(job);
        let free = free(&setup);
        let mut model = Model::new(&setup, View { turned, mirrored });
        let unknowns: Vec<Unknown> = free.iter().map(|(u, _)| u.clone()).collect();
        let at: Vec<f64> =
            unknowns.iter().zip(random.iter().cycle()).map(|(u, r)| u.prior + 0.3 * u.scale * r).collect();
        model.set(&unknowns, &at).expect("an experiment");
        let settings = Settings { tilt: mirrored.then_some(0.3), ..Settings::default() };
        let crystal = (setup.crystals.len() > 1).then_some(usize::from(second));
        let photon = if idler { Landing::Idler } else { Landing::Signal };
        let label = Label { crystal, photon: Some(photon), ..Label::default() };
        // a cone grows as a square root where it opens: no step changes it by more than a hundredth of itself
        let cone = Measurement {
            line: 1,
            settings,
            label,
            seen: Seen::Cone { axis: None, half_angle: Some(1.0) },
            sigma: None,
        };
        let (Some(size), Some(rates)) = (model.differences(&cone, 0), model.slopes(&cone, 0, &unknowns))
        else {
            return Ok(Case::Void);
        };
        let gentle = |column: usize, step: f64| step.min(0.01 * size[0].1 / rates[(0, column)].abs());
        let mut shown = Case::Void;
        for measurement in measured(&mut model, settings, label) {
            let Some(slopes) = model.slopes(&measurement, 0, &unknowns) else { continue };
            shown = Case::Shown;
            let mut values = |column: usize, step: f64| -> Vec<f64> {
                let mut there = at.clone();
                there[column] += step;
                model.set(&unknowns, &there).expect("an experiment");
                let all = model.differences(&measurement, 0).expect("what was there is near");
                model.set(&unknowns, &at).expect("an experiment");
                all.iter().map(|(_, fitted, _)| *fitted).collect()
            };
            for (column, (unknown, step)) in free.iter().enumerate() {
                let mut across = |h: f64| -> Vec<f64> {
                    values(column, h)
                        .iter()
                        .zip(values(column, -h))
                        .map(|(up, down)| (up - down) / (2.0 * h))
                        .collect()
                };
                let step = gentle(column, *step);
                let (whole, half) = (across(step), across(0.5 * step));
                for row in 0..slopes.nrows() {
                    let difference = (4.0 * half[row] - whole[row]) / 3.0;
                    let exact = slopes[(row, column)];
                    // what this number changes by for a step of the unknown that changes it most
                    let most = free
                        .iter()
                        .enumerate()
                        .map(|(j, (_, s))| (slopes[(row, j)] * s).abs())
                        .fold(0.0, f64::max);
                    let allowed = 1e-6 * exact.abs() + 1e-7 * most / step;
                    prop_assert!(
                        (exact - difference).abs() <= allowed,
                        "{}: {} row {row} of {:?}: {exact} against {difference}",
                        name,
                        unknown.name,
                        measurement.seen
                    );
                }
            }
        }
        Ok(shown)
    });
}
