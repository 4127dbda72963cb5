//! Plane waves: Maxwell's equations, and exact derivatives against differences.

use super::crystals::*;
use nalgebra::{Matrix3, Vector3};
use proptest::prelude::*;
use std::f64::consts::TAU;
use std::fmt::Debug;
use twincone::frame::{Cut, Direction, Lab, Tangential};
use twincone::material::{Optic, Principal};
use twincone::optics::{Crystal, Medium, Sheet, along_direction};
use twincone::quantity::{Angle, SPEED_OF_LIGHT, Wavelength};

/// A plane wave in a random crystal.
#[derive(Debug, Clone, Copy)]
struct Probe {
    recipe: Recipe,
    cut: Cut,
    um: f64,
    /// Tangential wave vector over the vacuum wavenumber.
    q: [f64; 2],
    sheet: Sheet,
}

fn probes() -> impl Strategy<Value = Probe> {
    prop_oneof![probes_of(Optic::Uniaxial), probes_of(Optic::Biaxial)]
}

fn probes_of(optic: Optic) -> impl Strategy<Value = Probe> {
    let cut = (0.0..180.0, 0.0..360.0)
        .prop_map(|(t, p)| Cut { theta: Angle::from_degrees(t), phi: Angle::from_degrees(p) });
    let q = (0.0..0.95f64, 0.0..TAU).prop_map(|(size, angle)| [size * angle.cos(), size * angle.sin()]);
    let sheet = prop_oneof![Just(Sheet::Fast), Just(Sheet::Slow)];
    (recipes(optic), cut, 0.4..1.6, q, sheet).prop_map(|(recipe, cut, um, q, sheet)| Probe {
        recipe,
        cut,
        um,
        q,
        sheet,
    })
}

impl Probe {
    fn crystal(&self) -> Crystal {
        let crystal = Crystal::new(self.recipe.material(), None).expect("a data set");
        Crystal { cut: self.cut, ..crystal }
    }

    fn wavelength(&self) -> Wavelength {
        Wavelength::metres(self.um * 1e-6)
    }

    fn principal(&self) -> Principal {
        self.crystal().principal(self.wavelength()).expect("indices")
    }

    fn medium(&self) -> Medium {
        Medium::new(&self.principal(), self.cut.dielectric_in_mount())
    }

    fn tangential(&self) -> Tangential {
        let k0 = self.wavelength().wavenumber();
        Tangential { u: k0 * self.q[0], v: k0 * self.q[1] }
    }
}

#[test]
fn waves_obey_maxwells_equations() {
    every(1000, 1000, &probes(), |probe| {
        let medium = probe.medium();
        let wave = medium.wave(probe.sheet, probe.tangential()).expect("a wave");
        let turn = probe.cut.dielectric_in_mount();
        let squares = probe.principal().axes.map(|index| index.n * index.n);
        let eps = turn * Matrix3::from_diagonal(&Vector3::from(squares)) * turn.transpose();
        let (k, e) = (wave.k.0 / medium.k0(), wave.field.0);
        // k x (k x E) + eps E = 0, in units of k0; some ten roundings of terms up to n^2 = 4
        let h = k.cross(&e);
        within((k.cross(&h) + eps * e).norm(), 2e-14, "wave equation")?;
        within((wave.ray.0 - e.cross(&h).normalize()).norm(), 1e-12, "ray and energy flow")?;
        prop_assert!(wave.ray.0.z > 0.0, "energy flows backwards");
        Ok(Case::Shown)
    });
}

#[test]
fn axes_of_biaxial_crystals_may_be_named_in_any_order() {
    let orders = prop::sample::select(vec![[0, 2, 1], [1, 0, 2], [1, 2, 0], [2, 0, 1], [2, 1, 0]]);
    every(300, 300, &(probes_of(Optic::Biaxial), orders), |(probe, order)| {
        let (principal, turn) = (probe.principal(), probe.cut.dielectric_in_mount());
        let renamed = Principal { axes: order.map(|n: usize| principal.axes[n]), ..principal };
        let columns = order.map(|n| turn.column(n).into_owned());
        let other = Medium::new(&renamed, Matrix3::from_columns(&columns));
        let wave = |medium: &Medium| medium.wave(probe.sheet, probe.tangential()).expect("a wave");
        let (one, two) = (wave(&probe.medium()), wave(&other));
        within((one.k.0 - two.k.0).norm() / one.k.0.norm(), 1e-15, "wave vector")?;
        within(one.ray.0.cross(&two.ray.0).norm(), 1e-12, "ray")?;
        within(one.field.0.cross(&two.field.0).norm(), 1e-12, "field")?;
        within((one.delay / two.delay - 1.0).abs(), 1e-12, "delay")?;
        Ok(Case::Shown)
    });
}

/// A central difference and how far it may be off: twice the step shows the error of the step, rounding adds its own.
struct Difference {
    value: f64,
    error: f64,
}

/// Of `f` at 0 with the step `h`; `size` is that of f, for rounding. `None` where f does not exist.
fn difference(f: impl Fn(f64) -> Option<f64>, h: f64, size: f64) -> Option<Difference> {
    let slope = |h: f64| Some((f(h)? - f(-h)?) / (2.0 * h));
    let (value, coarse) = (slope(h)?, slope(2.0 * h)?);
    // D(h) = f' + h^2 f'''/6 + ..., so D(2h) - D(h) is three times the error, left as a margin for higher terms
    Some(Difference { value, error: (coarse - value).abs() + 8.0 * f64::EPSILON * size / h })
}

/// Fails unless `exact` is the derivative; void where the difference is too rough to tell.
fn derivative(exact: f64, difference: Option<Difference>, fine: f64, what: &str) -> Verdict {
    let Some(Difference { value, error }) = difference else { return Ok(Case::Void) };
    within((exact - value).abs(), error, what)?;
    Ok(if error < fine { Case::Shown } else { Case::Void })
}

/// All must hold; shown if all are.
fn all(verdicts: impl IntoIterator<Item = Verdict>) -> Verdict {
    let mut case = Case::Shown;
    for verdict in verdicts {
        if verdict? == Case::Void {
            case = Case::Void;
        }
    }
    Ok(case)
}

#[test]
fn slopes_and_curvatures_of_the_dispersion_surface_are_its_derivatives() {
    const STEP: f64 = 1e-4;
    every(1000, 980, &probes(), |probe| {
        let medium = probe.medium();
        let (surface, k0, q) = (medium.surface(probe.sheet), medium.k0(), probe.tangential());
        let normal = surface.normal(q).expect("a wave");
        let bend = surface.curvature(q, &normal);
        let moved = |u: f64, v: f64| surface.normal(Tangential { u: q.u + u * k0, v: q.v + v * k0 });
        let k_w = |u, v| moved(u, v).map(|n| n.k_w / k0);
        let slope = |u, v, i: usize| moved(u, v).map(|n| n.slope[i]);
        let check = |exact, f: &dyn Fn(f64) -> Option<f64>, what| {
            derivative(exact, difference(f, STEP, 2.0), 1e-6, what)
        };
        all([
            check(normal.slope[0], &|x| k_w(x, 0.0), "dk_w/dq_u"),
            check(normal.slope[1], &|x| k_w(0.0, x), "dk_w/dq_v"),
            check(bend.uu * k0, &|x| slope(x, 0.0, 0), "d2k_w/dq_u2"),
            check(bend.uv * k0, &|x| slope(x, 0.0, 1), "d2k_w/dq_u dq_v"),
            check(bend.uv * k0, &|x| slope(0.0, x, 0), "d2k_w/dq_v dq_u"),
            check(bend.vv * k0, &|x| slope(0.0, x, 1), "d2k_w/dq_v2"),
        ])
    });
}

/// Wavelength at which the frequency is (1 + x) times that of `wavelength`.
fn detuned(wavelength: Wavelength, x: f64) -> Wavelength {
    Wavelength::metres(wavelength.si() / (1.0 + x))
}

#[test]
fn delays_are_derivatives_with_respect_to_frequency() {
    const STEP: f64 = 1e-4;
    every(500, 480, &probes(), |probe| {
        let (crystal, q) = (probe.crystal(), probe.tangential());
        let wave = probe.medium().wave(probe.sheet, q).expect("a wave");
        let k0 = probe.wavelength().wavenumber();
        // k_w/k0 at the detuned frequency and the same q
        let k_w = |x: f64| {
            let principal = crystal.principal(detuned(probe.wavelength(), x)).ok()?;
            let medium = Medium::new(&principal, probe.cut.dielectric_in_mount());
            Some(medium.surface(probe.sheet).normal(q)?.k_w / k0)
        };
        derivative(wave.delay * SPEED_OF_LIGHT, difference(k_w, STEP, 2.0), 1e-6, "group index along w")
    });
}

#[test]
fn group_index_and_dispersion_are_derivatives_with_respect_to_frequency() {
    const STEP: f64 = 1e-4;
    every(500, 480, &probes(), |probe| {
        let crystal = probe.crystal();
        let direction = probe.cut.axes()[2].0;
        let which = usize::from(probe.sheet == Sheet::Slow);
        let at = |x: f64| {
            let principal = crystal.principal(detuned(probe.wavelength(), x)).ok()?;
            Some(along_direction(&principal, direction)[which].1)
        };
        let here = at(0.0).expect("indices");
        let omega = probe.wavelength().angular_frequency();
        let index = |x: f64| at(x).map(|along| along.n * (1.0 + x));
        let group = |x: f64| at(x).map(|along| along.group_index);
        all([
            derivative(here.group_index, difference(index, STEP, 2.0), 1e-6, "group index"),
            derivative(
                here.dispersion * SPEED_OF_LIGHT * omega,
                difference(group, STEP, 2.0),
                1e-6,
                "dispersion",
            ),
        ])
    });
}

#[test]
fn slopes_of_the_mismatch_are_its_derivatives() {
    const STEP: f64 = 1e-4;
    let directions = (0.0..20.0f64, 0.0..TAU);
    every(300, 285, &(setups(BOTH), directions), |(setup, (polar_deg, azimuth))| {
        let Some(source) = setup.source() else { return Ok(Case::Void) };
        let Some(mismatch) = source.emission().mismatch(source.roles) else { return Ok(Case::Void) };
        let (sin, cos) = polar_deg.to_radians().sin_cos();
        let direction = Vector3::new(sin * azimuth.cos(), sin * azimuth.sin(), cos);
        let (q, k0) =
            (mismatch.tangential(Direction::new(Lab(direction))), source.photons.signal.wavenumber());
        let Some(here) = mismatch.at(q) else { return Ok(Case::Void) };
        let value = |u: f64, v: f64| {
            mismatch.at(Tangential { u: q.u + u * k0, v: q.v + v * k0 }).map(|sample| sample.value / k0)
        };
        // the pump's wave vector, some four times the signal's k0, is part of the value
        all([
            derivative(here.slope[0], difference(|x| value(x, 0.0), STEP, 4.0), 1e-6, "along u"),
            derivative(here.slope[1], difference(|x| value(0.0, x), STEP, 4.0), 1e-6, "along v"),
        ])
    });
}
