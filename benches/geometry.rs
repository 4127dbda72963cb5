//! How long one answer takes, from a single wave to the whole process.

use std::hint::black_box;
use std::process::{Command, Stdio};
use std::sync::Arc;
use std::time::Duration;

use criterion::{Criterion, criterion_group, criterion_main};
use twincone::frame::Tangential;
use twincone::matching::*;
use twincone::material::Catalogue;
use twincone::optics::{Crystal, Indices, Medium, Sheet};
use twincone::quantity::{Angle, Length, Wavelength};

fn crystal(material: &str, theta: f64, phi: f64) -> Crystal {
    let material = Arc::new(Catalogue::default().get(material).expect("a compiled-in crystal"));
    Crystal::new(material, None).expect("the default data set").with_cut(theta, phi)
}

/// The crystal of the README: crossed cones of a 405 nm pump, tilted a little.
fn crossed() -> Crystal {
    let mut crystal = crystal("bbo", 42.35, 0.0);
    crystal.length = Length::metres(2e-3);
    crystal.orientation.tilt = Angle::from_degrees(0.3);
    crystal
}

/// A biaxial crystal that emits crossed cones at the wavelengths of [`photons`], tilted a little.
fn biaxial() -> Crystal {
    let mut crystal = crystal("lbo", 74.0, 90.0);
    crystal.length = Length::metres(2e-3);
    crystal.orientation.tilt = Angle::from_degrees(0.3);
    crystal
}

fn photons() -> Photons {
    let pump = Wavelength::from_nm(405.0);
    Photons::new(pump, pump.doubled()).expect("longer than the pump")
}

/// The two histories of type II pairs.
fn histories(emission: &Emission) -> [Mismatch; 2] {
    let roles = emission.roles(Interaction::Two).expect("two processes");
    [roles[0], roles[1]].map(|r| emission.mismatch(r).expect("the pump enters"))
}

/// A tangential wave vector of a photon that leaves a few degrees off the pump.
fn tangential(medium: &Medium) -> Tangential {
    Tangential { u: 0.05 * medium.k0(), v: 0.03 * medium.k0() }
}

fn waves(c: &mut Criterion) {
    for (kind, crystal) in [("uniaxial", crossed()), ("biaxial", biaxial())] {
        let axes = crystal.placement().dielectric_axes();
        let principal = crystal.principal(photons().signal).expect("an index");
        let medium = Medium::new(&principal, axes);
        let q = tangential(&medium);
        c.bench_function(&format!("medium, {kind}"), |b| {
            b.iter(|| Medium::new(black_box(&principal), axes));
        });
        for sheet in [Sheet::Fast, Sheet::Slow] {
            let surface = medium.surface(sheet);
            c.bench_function(&format!("normal, {kind}, {sheet:?}"), |b| {
                b.iter(|| surface.normal(black_box(q)));
            });
        }
    }
}

fn matching(c: &mut Criterion) {
    for (kind, crystal) in [("uniaxial", crossed()), ("biaxial", biaxial())] {
        let emission = Emission::of(&crystal, photons()).expect("indices");
        let [mismatch, _] = histories(&emission);
        let q = tangential(&emission.media.signal);
        c.bench_function(&format!("mismatch, {kind}"), |b| b.iter(|| mismatch.at(black_box(q))));
    }
    let emission = Emission::of(&crossed(), photons()).expect("indices");
    let [first, second] = histories(&emission);
    c.bench_function("ring", |b| b.iter(|| rings(black_box(&first), emission.length)));
    c.bench_function("ring and circle", |b| b.iter(|| ring_and_circle(black_box(&first), emission.length)));
    let curve = curves(&first).expect("a ring").swap_remove(0);
    let traced = Traced { mismatch: &first, curve: &curve };
    c.bench_function("meeting of two rings", |b| b.iter(|| meet(black_box(traced), &second)));
    c.bench_function("crossing, uniaxial", |b| b.iter(|| crossing(black_box(&first), &second)));
    let emission = Emission::of(&biaxial(), photons()).expect("indices");
    let [first, second] = histories(&emission);
    c.bench_function("ring and circle, biaxial", |b| {
        b.iter(|| ring_and_circle(black_box(&first), emission.length))
    });
    c.bench_function("crossing, biaxial", |b| b.iter(|| crossing(black_box(&first), &second)));
}

fn ring_and_circle(mismatch: &Mismatch, length: f64) -> Option<(Vec<Ring>, f64)> {
    let rings = rings(mismatch, length).ok()?;
    let (_, radius) = rings[0].circle();
    Some((rings, radius))
}

/// Everything from two mismatches to where their rings meet.
fn crossing(first: &Mismatch, second: &Mismatch) -> usize {
    let (Ok(ones), Ok(_)) = (curves(first), curves(second)) else { return 0 };
    ones.iter().map(|curve| meet(Traced { mismatch: first, curve }, second).len()).sum()
}

/// Mismatches worked out for one ring and for one crossing.
#[cfg(feature = "count")]
fn count(_: &mut Criterion) {
    for (kind, crystal) in [("uniaxial", crossed()), ("biaxial", biaxial())] {
        let emission = Emission::of(&crystal, photons()).expect("indices");
        let [first, second] = histories(&emission);
        let counted = |work: &dyn Fn()| {
            let before = evaluations();
            work();
            evaluations() - before
        };
        let ring = counted(&|| drop(ring_and_circle(&first, emission.length)));
        let met = counted(&|| assert!(crossing(&first, &second) < 9));
        println!("{kind}: {ring} mismatches for a ring, {met} for a crossing");
    }
}

#[cfg(not(feature = "count"))]
fn count(_: &mut Criterion) {}

fn answers(c: &mut Criterion) {
    let Photons { pump, signal, .. } = photons();
    let crystals = [crossed()];
    for want in [Want::Rings, Want::Crossings, Want::Both] {
        let mut indices = Indices::default();
        let mut ask = |crystals: &[Crystal]| {
            cones_with(&mut indices, crystals, pump, &[signal], Interaction::Two, want)
        };
        c.bench_function(&format!("cones, {want:?}"), |b| b.iter(|| ask(black_box(&crystals))));
    }
    let question = Design {
        crystal: crossed(),
        photons: photons(),
        fixed_signal: None,
        interaction: Interaction::Two,
        target: Target::Crossing(3f64.to_radians()),
        find: Find::Theta,
        phi_given: false,
    };
    c.bench_function("cut for a crossing", |b| b.iter(|| design(black_box(&question))));
    let questions = collinear(&question);
    c.bench_function("collinear cuts of all materials", |b| {
        b.iter(|| questions.iter().map(design).filter(Result::is_ok).count());
    });
}

/// The question for type I pairs along the pump, for every crystal of the catalogue.
fn collinear(question: &Design) -> Vec<Design> {
    let catalogue = Catalogue::default();
    let of = |id: &str| Design {
        crystal: crystal(id, 0.0, 0.0),
        interaction: Interaction::One,
        target: Target::Collinear,
        ..question.clone()
    };
    catalogue.ids().map(of).collect()
}

/// From start to exit, with the release program.
fn process(c: &mut Criterion) {
    for (name, line) in [
        ("process: cones", "cones --material bbo --theta 42.35deg --phi 0deg --pump 405nm --length 2mm"),
        ("process: cut --all-materials", "cut --all-materials --pump 405nm --type I --quiet"),
    ] {
        let mut command = Command::new(env!("CARGO_BIN_EXE_twincone"));
        command.args(line.split(' ')).stdout(Stdio::null());
        c.bench_function(name, |b| b.iter(|| assert!(command.status().expect("it starts").success())));
    }
}

fn short() -> Criterion {
    Criterion::default()
        .warm_up_time(Duration::from_millis(300))
        .measurement_time(Duration::from_millis(1500))
        .sample_size(20)
        .nresamples(5000)
        .without_plots()
}

criterion_group! { name = all; config = short(); targets = waves, matching, count, answers, process }
criterion_main!(all);
