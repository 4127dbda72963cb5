//! How long a camera picture takes, against the same work in vectorised NumPy (benches/camera_numpy.py) on as many
//! threads in the same run, and how far the two pictures differ.
//!
//! `cargo bench --bench camera`

use std::process::Command;
use std::sync::Arc;
use std::time::Instant;

use twincone::job::setup::{Needs, Setup};
use twincone::job::{Document, resolve};
use twincone::material::Catalogue;
use twincone::picture::{Exposure, Light, Optics, Sampling, Seen, Sensor};
use twincone::quantity::Length;

const PIXELS: usize = 1024;
const WAVELENGTHS: usize = 41;
const THREADS: usize = 2;

const JOB: &str = r#"
pump = { wavelength = "405 nm" }
crystal = { material = "bbo:kato-1986", cut = { theta = "42.54 deg", phi = "0 deg" }, length = "2 mm", tilt = "0.4 deg", thermal_expansion = false }
emission = { type = "II" }
filter = [{ shape = "rectangular", width = "10 nm" }]
"#;

/// The crystal, with the same |d_eff| everywhere.
fn setup() -> Setup {
    let document = Document::from_file("job", JOB);
    let mut setup = resolve(&document, &Catalogue::default(), Needs::ALL).expect("a job");
    let mut material = (*setup.crystals[0].material).clone();
    material.tensor = None;
    setup.crystals[0].material = Arc::new(material);
    setup
}

/// Picture and the best of three times, s.
fn ours() -> (Vec<f64>, f64) {
    let setup = setup();
    let sensor = Sensor {
        optics: Optics::Screen(Length::metres(1.0)),
        field: Length::metres(0.3),
        pixels: PIXELS,
        seen: Seen::default(),
    };
    let light = Light::of(&setup);
    let sampling = Sampling { wavelengths: Some(WAVELENGTHS) };
    let mut best = f64::INFINITY;
    let mut values = Vec::new();
    for _ in 0..3 {
        let start = Instant::now();
        let exposure = Exposure::new(&setup, &light, sensor, sampling).expect("indices");
        let picture = exposure.take();
        best = best.min(start.elapsed().as_secs_f64());
        assert_eq!((exposure.waves(), exposure.samples_per_side()), (2 * WAVELENGTHS, 1));
        values = picture.values.into_iter().map(f64::from).collect();
    }
    (values, best)
}

/// Picture and the best of three times, s; `None` where there is no NumPy.
fn numpy() -> Option<(Vec<f64>, f64)> {
    let folder = tempfile::tempdir().expect("a folder for the picture");
    let image = folder.path().join("image.f64");
    let script = concat!(env!("CARGO_MANIFEST_DIR"), "/benches/camera_numpy.py");
    let mut best = f64::INFINITY;
    for _ in 0..3 {
        let numbers = [PIXELS, WAVELENGTHS, THREADS].map(|n| n.to_string());
        let output = Command::new("python3").arg(script).args(numbers).arg(&image).output().ok()?;
        let seconds: f64 = String::from_utf8_lossy(&output.stdout).trim().parse().ok()?;
        best = best.min(seconds);
    }
    let bytes = std::fs::read(&image).ok()?;
    let values = bytes.chunks_exact(8).map(|b| f64::from_ne_bytes(b.try_into().expect("eight bytes")));
    Some((values.collect(), best))
}

fn main() {
    let pool = rayon::ThreadPoolBuilder::new().num_threads(THREADS).build().expect("threads");
    let (picture, seconds) = pool.install(ours);
    println!("{PIXELS} x {PIXELS} pixels, {WAVELENGTHS} wavelengths, 2 processes, {THREADS} threads");
    println!("twincone  {seconds:.3} s");
    let Some((theirs, slower)) = numpy() else {
        println!("NumPy     not there: nothing to compare with");
        return;
    };
    println!("NumPy     {slower:.3} s, {:.1} times as long", slower / seconds);
    let top = |values: &[f64]| values.iter().copied().fold(0.0, f64::max);
    let (ours, his) = (top(&picture), top(&theirs));
    let worst = picture.iter().zip(&theirs).map(|(a, b)| (a / ours - b / his).abs()).fold(0.0, f64::max);
    println!("largest difference of a pixel, in units of the brightest: {worst:.1e}");
}
