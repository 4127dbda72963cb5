//! Fits of synthetic benches. What is measured on them comes from `cones`, not from the fit's own predictions.

use std::f64::consts::TAU;

use nalgebra::{Vector2, Vector3};
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::{Rng, SeedableRng};
use rayon::prelude::*;
use twincone::fit::{
    Exposure, Fitted, Frame, Label, Measurement, Question, Seen, Settings, View, doubts, fit, fit_frames,
    unknowns,
};
use twincone::frame::{Direction, Lab};
use twincone::job::setup::Needs;
use twincone::job::{Document, Setup, resolve};
use twincone::matching::{Emission, Mismatch, Want, cones};
use twincone::material::Catalogue;
use twincone::quantity::{Angle, Wavelength};

/// Noise of each number on the screen, mm.
const NOISE: f64 = 0.5;
const FREE: [&str; 4] = ["theta", "zero", "roll", "pump"];
/// How far the truth may be from what is believed, in the same order: deg, deg, deg, nm.
const LIMITS: [f64; 4] = [0.5, 1.0, 3.0, 2.0];

fn believed() -> Setup {
    let job = "[pump]\nwavelength = \"405 nm\"\n[crystal]\nmaterial = \"bbo\"\ndataset = \"kato-1986\"\n\
               cut = { theta = \"42.541 deg\", phi = \"0 deg\" }\n[emission]\nsignal = [\"810 nm\"]\n";
    let document = Document::from_file("job.toml", job);
    resolve(&document, &Catalogue::default(), Needs::ALL).expect("a job")
}

struct Chance(ChaCha8Rng);

impl Chance {
    fn of(seed: u64) -> Self {
        Self(ChaCha8Rng::seed_from_u64(seed))
    }

    fn uniform(&mut self) -> f64 {
        (self.0.next_u64() >> 11) as f64 / (1u64 << 53) as f64
    }

    fn within(&mut self, limit: f64) -> f64 {
        limit * (2.0 * self.uniform() - 1.0)
    }

    fn normal(&mut self) -> f64 {
        (-2.0 * (1.0 - self.uniform()).ln()).sqrt() * (TAU * self.uniform()).cos()
    }
}

/// Values of [`FREE`] that a bench has, and what is seen on it at some readings of the tilt.
fn measured(truth: [f64; 4], readings: &[f64], chance: &mut Chance) -> Vec<Measurement> {
    let setup = believed();
    let mut crystal = setup.crystals[0].clone();
    crystal.cut.theta = Angle::from_degrees(truth[0]);
    crystal.orientation.roll = Angle::from_degrees(truth[2]);
    let mut all = Vec::new();
    for (line, reading) in readings.iter().enumerate() {
        crystal.orientation.tilt = Angle::from_degrees(reading - truth[1]);
        let found = cones(
            std::slice::from_ref(&crystal),
            Wavelength::from_nm(truth[3]),
            &[Wavelength::from_nm(810.0)],
            setup.interaction,
            Want::Rings,
        )
        .expect("rings");
        // a filter passes one wavelength
        for row in found.rings.iter().filter(|row| (row.wavelength.nm() - 810.0).abs() < 1e-6) {
            let Ok(ring) = &row.ring else { continue };
            let (centre, radius) = ring.circle();
            let mut noisy = |value: f64| 1000.0 * value + NOISE * chance.normal();
            all.push(Measurement {
                line: line + 2,
                settings: Settings { tilt: Some(*reading), ..Settings::default() },
                label: Label {
                    polarization: Some(row.polarization),
                    wavelength: Some(row.wavelength),
                    ..Label::default()
                },
                seen: Seen::Ring {
                    centre: Some(Vector2::new(noisy(centre.x), noisy(centre.y))),
                    radius: Some(noisy(radius)),
                },
                sigma: Some(NOISE),
            });
        }
    }
    all
}

fn question(data: Vec<Measurement>, free: &[&str]) -> Question {
    let setup = believed();
    let names: Vec<String> = free.iter().map(ToString::to_string).collect();
    let unknowns = unknowns(&names, &[], &setup).expect("unknowns");
    Question { setup, unknowns, data, view: View::default(), robust: false }
}

fn bench(seed: u64) -> ([f64; 4], Fitted) {
    let mut chance = Chance::of(seed);
    let around = [42.541, 0.0, 0.0, 405.0];
    let truth = std::array::from_fn(|i| around[i] + chance.within(LIMITS[i]));
    let data = measured(truth, &[-1.0, 0.0, 1.0, 2.0, 3.0], &mut chance);
    let fitted = fit(&question(data, &FREE)).unwrap_or_else(|e| panic!("bench {seed}: {e}"));
    (truth, fitted)
}

/// 200 benches: 99 % of the fitted values lie within three of their stated standard deviations, and those are honest. The
/// mean square of 200 pulls scatters by 0.1, of uniform truths that the priors hold by 0.06; the band is 0.8 to 1.25.
#[test]
fn two_hundred_benches_are_read_within_their_uncertainties() {
    let all: Vec<([f64; 4], Fitted)> = (0..200u64).into_par_iter().map(bench).collect();
    let mut far = 0;
    for (i, name) in FREE.iter().enumerate() {
        let pulls: Vec<f64> = all.iter().map(|(t, f)| (f.values[i] - t[i]) / f.sigmas[i]).collect();
        far += pulls.iter().filter(|p| p.abs() > 3.0).count();
        let square = pulls.iter().map(|p| p * p).sum::<f64>() / pulls.len() as f64;
        println!("{name}: mean square pull {square:.3}, sigma of the first {:.4}", all[0].1.sigmas[i]);
        assert!((0.8..=1.25).contains(&square), "{name}: mean square pull {square}");
    }
    assert!(far * 100 <= 200 * FREE.len(), "{far} values beyond 3 sigma");
    let reduced: f64 = all.iter().filter_map(|(_, f)| f.reduced()).sum::<f64>() / 200.0;
    assert!((reduced - 1.0).abs() < 0.05, "chi-square per degree of freedom {reduced}");
    assert!(all.iter().all(|(_, f)| f.settled && !f.at_bound.contains(&true) && f.absent.is_empty()));
}

/// With the zero read at the back-reflection and the pump measured the cut follows to a hundredth of a degree.
#[test]
fn a_known_zero_and_pump_leave_the_cut_sharp() {
    let mut chance = Chance::of(1);
    let data = measured([42.11, 0.0, 1.0, 405.0], &[0.0, 1.0, 2.0], &mut chance);
    let fitted = fit(&question(data, &["theta", "roll"])).expect("a fit");
    assert!((fitted.values[0] - 42.11).abs() < 0.02, "{}", fitted.values[0]);
    assert!(fitted.sigmas[0] < 0.01);
}

/// What tilting does to the rings depends on cut plus zero: the data know the sum, and the report says what else to read.
#[test]
fn unknowns_that_only_act_together_are_named() {
    let mut chance = Chance::of(2);
    let data = measured([42.3, 0.4, 0.0, 405.0], &[0.0, 1.0, 2.0], &mut chance);
    let question = question(data, &FREE);
    let fitted = fit(&question).expect("a fit");
    let doubts = doubts(&question, &fitted);
    let doubt = doubts.first().expect("a doubt");
    assert!(
        doubt.names.contains(&"crystal.cut.theta".into()) && doubt.names.contains(&"stage.zero".into()),
        "{doubt:?}"
    );
    assert!(doubt.remedy.contains("reflection"), "{doubt:?}");
    assert!(fitted.correlations[(0, 1)] < -0.9 || fitted.correlations[(0, 1)] > 0.9);
}

/// Rings without labels are told apart by where they lie.
#[test]
fn rings_without_labels_are_assigned() {
    let mut chance = Chance::of(3);
    let mut data = measured([42.3, 0.0, 1.0, 405.0], &[0.0, 1.0, 2.0], &mut chance);
    data.iter_mut().for_each(|m| m.label.polarization = None);
    let fitted = fit(&question(data, &["theta", "roll"])).expect("a fit");
    assert!((fitted.values[0] - 42.3).abs() < 0.03, "{}", fitted.values[0]);
    assert!(fitted.other_way.is_some_and(|other| other > fitted.chi_square + 100.0));
}

/// A line that is far off is shown, and drags the answer less where the loss is robust.
#[test]
fn an_outlier_is_shown_and_can_be_weighed_less() {
    let mut chance = Chance::of(4);
    let mut data = measured([42.3, 0.0, 0.0, 405.0], &[0.0, 0.5, 1.0, 1.5, 2.0], &mut chance);
    if let Seen::Ring { radius: Some(radius), .. } = &mut data[0].seen {
        *radius += 15.0;
    }
    let plain = question(data, &["theta"]);
    let off = |q: &Question| (fit(q).expect("a fit").values[0] - 42.3).abs();
    let robust = Question { robust: true, ..plain.clone() };
    assert!(off(&robust) < 0.5 * off(&plain), "{} {}", off(&robust), off(&plain));
    let fitted = fit(&plain).expect("a fit");
    assert!(fitted.residuals.iter().any(|r| r.is_outlier() && r.line == 2));
}

#[test]
fn too_few_numbers_and_impossible_places_are_refused() {
    let mut chance = Chance::of(5);
    let data = measured([42.3, 0.0, 0.0, 405.0], &[0.0], &mut chance);
    let one = vec![Measurement { seen: Seen::Ring { centre: None, radius: Some(80.0) }, ..data[0].clone() }];
    let said = fit(&question(one, &FREE)).expect_err("one number").to_string();
    assert!(said.contains("1 measured number for 4 unknowns"), "{said}");
    let far = vec![Measurement { seen: Seen::Ring { centre: None, radius: Some(8e4) }, ..data[0].clone() }];
    let said = fit(&question(far, &["theta"])).expect_err("out of the world").to_string();
    assert!(said.contains("unit"), "{said}");
}

/// Pixels along each side of a frame, and their side on the screen in mm.
const PIXELS: usize = 400;
const PITCH: f64 = 0.6;

/// A frame of 8 bits as a camera counts it: sinc^2(Delta_k L/2) of both processes at each pixel, photons that arrive by
/// chance, background and hot pixels. Nothing in it traces a ring.
fn frame(theta: f64, roll: f64, chance: &mut Chance) -> Vec<u8> {
    let setup = believed();
    let mut crystal = setup.crystals[0].clone();
    crystal.cut.theta = Angle::from_degrees(theta);
    crystal.orientation.roll = Angle::from_degrees(roll);
    let emission = Emission::of(&crystal, setup.photons()).expect("indices");
    let roles = emission.wanted(&crystal, setup.interaction).expect("two processes");
    let mismatches: Vec<Mismatch> = roles.iter().filter_map(|r| emission.mismatch(*r)).collect();
    let mut data = Vec::with_capacity(PIXELS * PIXELS);
    for row in 0..PIXELS {
        for column in 0..PIXELS {
            let place = |n: usize| (n as f64 + 0.5 - 0.5 * PIXELS as f64) * PITCH;
            let to = Direction::new(Lab(Vector3::new(place(column), -place(row), 1000.0)));
            let light = |m: &Mismatch| {
                let half = m.at(m.tangential(to)).map_or(0.0, |s| 0.5 * s.value * emission.length);
                if half == 0.0 { 1.0 } else { (half.sin() / half).powi(2) }
            };
            let photons = 15.0 * mismatches.iter().map(light).sum::<f64>() + 10.0;
            let counted = photons + photons.sqrt() * chance.normal();
            let hot = chance.uniform() < 1e-3;
            data.push(if hot { 255 } else { (4.0 * counted).clamp(0.0, 255.0) as u8 });
        }
    }
    let mut bytes = Vec::new();
    let mut encoder = png::Encoder::new(&mut bytes, PIXELS as u32, PIXELS as u32);
    encoder.set_color(png::ColorType::Grayscale);
    encoder.set_depth(png::BitDepth::Eight);
    encoder.write_header().and_then(|mut w| w.write_image_data(&data)).expect("a frame");
    bytes
}

/// Frames of crystals anywhere within a catalogue's tolerance give the cut to 0.02 deg.
#[test]
fn frames_give_the_cut() {
    let mut chance = Chance::of(6);
    for (theta, roll) in [(42.15, 1.5), (42.45, 0.0), (42.9, -2.0)] {
        let bytes = frame(theta, roll, &mut chance);
        let exposure = Exposure {
            frame: Frame::read(&bytes, PITCH, None).expect("a frame"),
            settings: Settings::default(),
        };
        let found = fit_frames(&question(Vec::new(), &["theta", "roll"]), std::slice::from_ref(&exposure))
            .expect("rings");
        let off = found.fitted.values[0] - theta;
        assert!(off.abs() < 0.02, "theta {theta}: off by {off}");
        let off = found.fitted.values[1] - roll;
        assert!(off.abs() < 0.3, "roll {roll}: off by {off}");
        let over = exposure.frame.with_outlines(&found.outlines[0]).expect("a frame");
        assert_eq!(Frame::read(&over, PITCH, None).expect("a frame").size(), (PIXELS, PIXELS));
    }
}

/// Noise alone is no ring.
#[test]
fn an_empty_frame_has_no_rings() {
    let mut chance = Chance::of(7);
    let bytes = frame(38.0, 0.0, &mut chance);
    let exposure =
        Exposure { frame: Frame::read(&bytes, PITCH, None).expect("a frame"), settings: Settings::default() };
    let said = fit_frames(&question(Vec::new(), &["theta"]), &[exposure]).expect_err("no ring").to_string();
    assert!(said.contains("no ring stands out") || said.contains("no light"), "{said}");
}
