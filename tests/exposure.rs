//! What a camera counts, against the rings that are traced: place, radius, width and brightness.

use std::f64::consts::TAU;

use twincone::job::setup::{Needs, Setup};
use twincone::job::{Document, resolve};
use twincone::matching::{Cones, Emission, Roles, Want, cones};
use twincone::material::Catalogue;
use twincone::picture::{Exposure, Light, Optics, Picture, Sampling, Seen, Sensor};
use twincone::quantity::Length;

fn setup(job: &str) -> Setup {
    resolve(&Document::from_file("job", job), &Catalogue::default(), Needs::ALL).expect("a job")
}

fn sensor(field_mm: f64, pixels: usize) -> Sensor {
    Sensor {
        optics: Optics::Screen(Length::metres(1.0)),
        field: Length::metres(field_mm * 1e-3),
        pixels,
        seen: Seen::default(),
    }
}

fn exposure(setup: &Setup, sensor: Sensor) -> Exposure {
    let light = Light::of(setup);
    Exposure::new(setup, &light, sensor, Sampling { wavelengths: None }).expect("indices")
}

fn take(setup: &Setup, sensor: Sensor) -> Picture {
    exposure(setup, sensor).take()
}

fn traced(setup: &Setup) -> Cones {
    cones(&setup.crystals, setup.pump(), &setup.signals(), setup.interaction, Want::Rings).expect("rings")
}

const CROSSED: &str = r#"
pump = { wavelength = "405 nm" }
crystal = { material = "bbo:kato-1986", cut = { theta = "42.54 deg", phi = "0 deg" }, length = "2 mm", tilt = "0.4 deg", roll = "20 deg" }
emission = { type = "II" }
"#;

const ONE_CONE: &str = r#"
pump = { wavelength = "405 nm" }
crystal = { material = "bbo:kato-1986", cut = { theta = "28.8 deg", phi = "90 deg" }, length = "2 mm", tilt = "0.73 deg" }
emission = { type = "I" }
"#;

const BIAXIAL: &str = r#"
pump = { wavelength = "532 nm" }
crystal = { material = "bibo:umemura-2007", cut = { theta = "11.5 deg", phi = "90 deg" }, length = "2 mm" }
emission = { type = "I" }
"#;

/// Bright pixels along the ring's radii: brightness-weighted mean radius within one half width, in pixels, for each
/// azimuth at which no other ring is near.
fn ridge(
    picture: &Picture,
    centre: (f64, f64),
    radius: f64,
    others: &[((f64, f64), f64)],
) -> Vec<(f64, f64)> {
    let pixels = picture.sensor.pixels;
    let value = |x: f64, y: f64| {
        // bilinear between pixel centres
        let (c, r) = picture.sensor.pixel(x, y);
        let (c, r) = (c - 0.5, r - 0.5);
        let (i, j) = (c.floor() as usize, r.floor() as usize);
        let v =
            |i: usize, j: usize| f64::from(picture.values[j.min(pixels - 1) * pixels + i.min(pixels - 1)]);
        let (s, t) = (c.fract(), r.fract());
        (v(i, j) * (1.0 - s) + v(i + 1, j) * s) * (1.0 - t)
            + (v(i, j + 1) * (1.0 - s) + v(i + 1, j + 1) * s) * t
    };
    let pitch = picture.sensor.pitch();
    let mut points = Vec::new();
    for n in 0..180 {
        let (sin, cos) = (TAU * f64::from(n) / 180.0).sin_cos();
        let at = |rho: f64| (centre.0 + rho * cos, centre.1 + rho * sin);
        let (x, y) = at(radius);
        let clear = others.iter().all(|(c, r)| ((x - c.0).hypot(y - c.1) - r).abs() > 12e-3);
        if !clear {
            continue;
        }
        let samples: Vec<(f64, f64)> = (-60..=60)
            .map(|k| {
                let rho = radius + 0.25 * pitch * f64::from(k);
                (rho, value(at(rho).0, at(rho).1))
            })
            .collect();
        let top = samples.iter().fold(0.0, |m: f64, s| m.max(s.1));
        // the ridge: mean radius of what is brighter than 0.8 of the top
        let bright = samples.iter().filter(|s| s.1 > 0.8 * top);
        let (sum, moment) =
            bright.fold((0.0, 0.0), |(w, m), s| (w + s.1 - 0.8 * top, m + (s.1 - 0.8 * top) * s.0));
        points.push(at(moment / sum));
    }
    points
}

/// Circle of least algebraic squares: centre and radius.
fn fit(points: &[(f64, f64)]) -> (f64, f64, f64) {
    let n = points.len() as f64;
    let (mx, my) = points.iter().fold((0.0, 0.0), |(a, b), p| (a + p.0 / n, b + p.1 / n));
    let mut m = nalgebra::Matrix3::<f64>::zeros();
    let mut b = nalgebra::Vector3::<f64>::zeros();
    for (x, y) in points {
        let row = nalgebra::Vector3::new(x - mx, y - my, 1.0);
        m += row * row.transpose();
        b += row * row.xy().norm_squared();
    }
    let s = m.try_inverse().expect("points on a circle") * b;
    (mx + 0.5 * s.x, my + 0.5 * s.y, (s.z + 0.25 * (s.x * s.x + s.y * s.y)).sqrt())
}

/// Issue: half a pixel. The crests of thick rings lie off the curve of perfect matching by much less.
#[test]
fn bright_pixels_lie_on_the_traced_circles() {
    for job in [CROSSED, ONE_CONE, BIAXIAL] {
        let setup = setup(job);
        let sensor = sensor(300.0, 512);
        let picture = take(&setup, sensor);
        let rings: Vec<((f64, f64), f64)> = traced(&setup)
            .rings
            .iter()
            .map(|row| {
                let (c, r) = row.ring.as_ref().expect("a ring").circle();
                ((c.x, c.y), r)
            })
            .collect();
        for (n, (centre, radius)) in rings.iter().enumerate() {
            let others: Vec<_> = rings.iter().enumerate().filter(|(m, _)| *m != n).map(|(_, r)| *r).collect();
            let points = ridge(&picture, *centre, *radius, &others);
            assert!(points.len() > 80, "{}", points.len());
            let (x, y, r) = fit(&points);
            let half = 0.5 * sensor.pitch();
            assert!((x - centre.0).abs() < half && (y - centre.1).abs() < half, "{x} {y} {centre:?}");
            assert!((r - radius).abs() < half, "{r} {radius}");
        }
    }
}

/// sinc^2 has no Fourier component beyond exp(2i phase), so sums over pixels are integrals as long as the phase changes
/// by less than pi between samples: what remains is what the field's border cuts (10^-3 of the whole).
#[test]
fn brightness_does_not_depend_on_the_grid() {
    for job in [CROSSED, ONE_CONE, BIAXIAL] {
        let setup = setup(job);
        let totals: Vec<f64> =
            [64, 157, 512].iter().map(|n| take(&setup, sensor(300.0, *n)).total()).collect();
        for total in &totals {
            assert!((total / totals[2] - 1.0).abs() < 1e-3, "{totals:?}");
        }
    }
}

/// A pixel of a coarse grid is the mean of the pixels of a fine one that it covers.
#[test]
fn coarse_pixels_are_means_of_fine_ones() {
    let setup = setup(CROSSED);
    let (coarse, fine) = (take(&setup, sensor(300.0, 64)), take(&setup, sensor(300.0, 512)));
    let top = coarse.brightest();
    for row in 0..64 {
        for column in 0..64 {
            let inside = (0..64).map(|k| fine.values[(row * 8 + k / 8) * 512 + column * 8 + k % 8]);
            let mean = inside.map(f64::from).sum::<f64>() / 64.0;
            let pixel = f64::from(coarse.values[row * 64 + column]);
            assert!((pixel - mean).abs() < 2e-4 * top, "{row} {column}: {pixel} {mean}");
        }
    }
}

/// Seen through a rectangular filter much wider than the ring is thick, brightness is even between the rings of the
/// filter's edges and falls to one half on them.
#[test]
fn a_wide_filter_widens_the_ring_as_the_ring_equation_says() {
    let job = r#"
pump = { wavelength = "405 nm" }
crystal = { material = "bbo:kato-1986", cut = { theta = "42.54 deg", phi = "0 deg" }, length = "10 mm" }
emission = { type = "II" }
filter = [{ shape = "rectangular", width = "20 nm" }]
"#;
    let setup = setup(job);
    let sensor = sensor(340.0, 1000);
    let picture = take(&setup, sensor);
    let edge = |nm: f64| {
        let signals = [twincone::quantity::Wavelength::from_nm(nm)];
        let found =
            cones(&setup.crystals, setup.pump(), &signals, setup.interaction, Want::Rings).expect("rings");
        // the e photon of the listed wavelength, at the azimuth of +x: crystal upright, so on the line y = 0
        let ring = found.rings[0].ring.as_ref().expect("a ring").curve.direction(0);
        ring.on_screen_mm(Length::metres(1.0)).0
    };
    let (near, far) = (edge(800.0), edge(820.0));
    let row = |x_mm: f64| {
        let (column, row) = sensor.pixel(x_mm * 1e-3, 0.5 * sensor.pitch());
        f64::from(picture.values[row as usize * 1000 + column as usize])
    };
    let plateau = row(0.5 * (near + far));
    let bright: Vec<f64> = (0..1000)
        .map(|column| sensor.place(f64::from(column) + 0.5, 0.0).0 * 1e3)
        .filter(|x| (x - 0.5 * (near + far)).abs() < 15.0 && row(*x) > 0.5 * plateau)
        .collect();
    let (low, high) =
        bright.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), x| (l.min(*x), h.max(*x)));
    let width = high - low + sensor.pitch() * 1e3;
    let expected = (far - near).abs();
    assert!(expected > 5.0, "{expected}");
    // a pixel at either end
    assert!((width - expected).abs() < 2.0 * sensor.pitch() * 1e3, "{width} {expected}");
}

/// The pump's waist blurs: each ring is the mean over pump directions, of the same total brightness.
#[test]
fn a_focused_pump_blurs_and_keeps_the_total() {
    let plane = take(&setup(CROSSED), sensor(400.0, 256));
    let focused = CROSSED.replace("\"405 nm\"", "\"405 nm\", waist = \"40 um\"");
    let focused = take(&setup(&focused), sensor(400.0, 256));
    assert!(focused.brightest() < 0.9 * plane.brightest());
    // light moves across the border of the field and |d_eff| and the solid angle change a little along the way
    assert!((focused.total() / plane.total() - 1.0).abs() < 0.01, "{} {}", focused.total(), plane.total());
}

/// Pixels against the sum that the documentation states, written out in double precision: phase, |d_eff|^2, solid angle.
#[test]
fn pixels_hold_the_stated_sum() {
    let setup = setup(CROSSED);
    let sensor = sensor(300.0, 600);
    let picture = take(&setup, sensor);
    let crystal = &setup.crystals[0];
    let emission = Emission::of(crystal, setup.photons()).expect("indices");
    let tensor = crystal.material.tensor.as_ref().expect("a tensor");
    let roles = emission.wanted(crystal, setup.interaction).expect("two processes");
    let normal = crystal.orientation.rotation() * nalgebra::Vector3::z();
    let stated = |x: f64, y: f64| {
        let direction = sensor.direction(x, y);
        let d = direction.lab().0;
        let of = |roles: &Roles| {
            let pairing = emission.pairing(*roles, direction).expect("waves");
            pairing.d_eff(&emission, tensor).powi(2) * pairing.phase_matching_factor(emission.length)
        };
        roles.iter().map(of).sum::<f64>() * d.dot(&normal) * d.z.powi(3)
    };
    let step = sensor.pitch();
    let mut ratios = Vec::new();
    for row in (3..600).step_by(13) {
        for column in (5..600).step_by(17) {
            let (x, y) = sensor.place(f64::from(column) + 0.5, f64::from(row) + 0.5);
            // mean over the pixel by Gauss's two points in each direction
            let g = step / 12f64.sqrt();
            let mean =
                [(g, g), (g, -g), (-g, g), (-g, -g)].iter().map(|o| stated(x + o.0, y + o.1)).sum::<f64>()
                    / 4.0;
            ratios.push((f64::from(picture.values[row as usize * 600 + column as usize]), mean));
        }
    }
    let (mut top, mut scale) = (0.0, 0.0);
    for (pixel, mean) in &ratios {
        if *mean > top {
            (top, scale) = (*mean, pixel / mean);
        }
    }
    for (pixel, mean) in ratios {
        // |d_eff|^2 is interpolated on a grid of 17 x 17 places
        assert!((pixel / scale - mean).abs() < 2e-4 * top, "{pixel} {mean} {top}");
    }
}

/// The same numbers on any number of threads.
#[test]
fn threads_do_not_change_a_bit() {
    let exposure = exposure(&setup(CROSSED), sensor(300.0, 100));
    let on = |threads| {
        let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().expect("threads");
        pool.install(|| exposure.take())
    };
    assert_eq!(on(1), on(3));
}
