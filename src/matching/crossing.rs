//! Where two rings meet: Delta_k1(d) = Delta_k2(d) = 0 for the external direction d of one photon; and how far they
//! miss where they do not.

use std::f64::consts::{FRAC_PI_2, TAU};

use nalgebra::{Matrix2, Vector2, Vector3};

use super::curve::{Curve, SAMPLES};
use super::mismatch::Mismatch;
use super::root::bracketed;
use crate::frame::{Direction, Lab};

/// Rings this close (radians) count as touching, or as lying on each other.
const CONTACT: f64 = 1e-6 * std::f64::consts::PI / 180.0;

/// A direction in which a photon is phase matched in two histories.
#[derive(Debug, Clone, Copy)]
pub struct Crossing {
    /// Of the photon.
    pub direction: Direction,
    /// Of its twin, as the first history has it; `None` where it is totally reflected.
    pub partner: Option<Direction>,
    /// Angle between the curves on the screen, radians, 0 to pi/2.
    pub angle: f64,
}

/// Which way rings miss each other.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum GapKind {
    /// Side by side.
    Outside,
    /// One within the other.
    Inside,
}

/// Least distance between two rings.
#[derive(Debug, Clone, Copy)]
pub struct Contact {
    /// Angle between the two nearest points, radians.
    pub gap: f64,
    /// Which way they miss.
    pub kind: GapKind,
}

/// How a direction in which two rings meet is met.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Meeting {
    /// They cross there.
    Cross,
    /// They touch there.
    Touch,
    /// They lie on each other all the way round; this is the point straight up from the axis.
    Coincide,
}

/// One ring with the mismatch it was traced with.
#[derive(Debug, Clone, Copy)]
pub struct Traced<'a> {
    /// Its mismatch.
    pub mismatch: &'a Mismatch,
    /// The ring's curve.
    pub curve: &'a Curve,
}

/// The other ring's mismatch along a ring.
#[derive(Debug, Clone, Copy)]
struct Along {
    /// Delta_k of the other process, rad/m: negative inside the other ring.
    value: f64,
    /// Its change per radian of azimuth.
    slope: f64,
    /// Size of its gradient, rad/m per radian of direction: near the other ring, value/scale is the angle off it.
    scale: f64,
}

impl Along {
    fn at(other: &Mismatch, d: Vector3<f64>, tangent: Vector3<f64>) -> Option<Self> {
        let there = other.towards(d)?;
        let across = there.gradient - d * there.gradient.dot(&d);
        let scale = across.norm().max(f64::MIN_POSITIVE);
        Some(Self { value: there.value, slope: there.gradient.dot(&tangent), scale })
    }

    fn off(&self) -> f64 {
        self.value / self.scale
    }
}

/// Finds where a ring meets that of another process, for a photon of one wavelength: nothing where they miss each other.
#[must_use]
pub fn meet(first: Traced<'_>, other: &Mismatch) -> Vec<(Crossing, Meeting)> {
    let Some(samples) = sample(first, other) else { return Vec::new() };
    let samples = &samples[..=first.curve.count()];
    if samples.iter().all(|s| s.off().abs() < CONTACT) {
        let up = crossing(first, other, FRAC_PI_2);
        return up.map(|point| (point, Meeting::Coincide)).into_iter().collect();
    }
    let mut found = Found::default();
    let count = first.curve.count();
    // by symmetry rings often touch right at a sample, whose sign and slope then mean nothing
    let touches = |j: usize| {
        let (before, after) = (&samples[(j + count - 1) % count], &samples[(j + 1) % count]);
        samples[j].off().abs() < CONTACT
            && before.value.is_sign_negative() == after.value.is_sign_negative()
            && before.off().abs().min(after.off().abs()) > CONTACT
    };
    for (j, pair) in samples.windows(2).enumerate() {
        if touches(j) {
            found.touched.push(first.curve.azimuth(j));
        } else if !touches((j + 1) % count) {
            found.between(first, other, j, [pair[0], pair[1]]);
        }
    }
    found.merge_grazing(first, other);
    let crossed = found.crossed.into_iter().map(|phi| (phi, Meeting::Cross));
    let touched = found.touched.into_iter().map(|phi| (phi, Meeting::Touch));
    crossed.chain(touched).filter_map(|(phi, how)| Some((crossing(first, other, phi)?, how))).collect()
}

/// How two rings that do not cross lie to each other: they touch after all, or miss.
#[must_use]
pub fn miss(first: Traced<'_>, second: Traced<'_>) -> Option<Miss> {
    let (contact, phi) = contact(first, second)?;
    Some(match contact.gap < CONTACT {
        true => Miss::Touch(crossing(first, second.mismatch, phi)?),
        false => Miss::By(contact),
    })
}

/// Two rings that do not cross.
#[derive(Debug, Clone, Copy)]
pub enum Miss {
    /// Closer than 1e-6 deg.
    Touch(Crossing),
    /// By this much.
    By(Contact),
}

/// Azimuths at which the other ring is met.
#[derive(Default)]
struct Found {
    crossed: Vec<f64>,
    touched: Vec<f64>,
}

/// Least and largest Delta_k of the other process along a ring, rad/m: a tangency from outside is a zero of the first,
/// from inside a zero of the second (or of the first, where the other ring is the inner one).
#[must_use]
pub fn reach(first: Traced<'_>, other: &Mismatch) -> Option<[f64; 2]> {
    let samples = sample(first, other)?;
    let samples = &samples[..=first.curve.count()];
    let mut reach = [f64::INFINITY, f64::NEG_INFINITY];
    for (j, pair) in samples.windows(2).enumerate() {
        let mut stretch = |value: f64| reach = [reach[0].min(value), reach[1].max(value)];
        stretch(pair[0].value);
        if pair[0].slope.is_sign_negative() != pair[1].slope.is_sign_negative() {
            let slope = |phi: f64| along(first, other, phi).map(|s| s.slope);
            if let Some(phi) =
                bracketed(slope, first.curve.azimuth(j), first.curve.azimuth(j + 1), pair[0].slope)
            {
                stretch(along(first, other, phi)?.value);
            }
        }
    }
    Some(reach)
}

/// At the samples of a curve, and once more at the first one.
fn sample(first: Traced<'_>, other: &Mismatch) -> Option<[Along; SAMPLES + 1]> {
    let mut samples = [Along { value: 0.0, slope: 0.0, scale: 1.0 }; SAMPLES + 1];
    let count = first.curve.count();
    for (j, slot) in samples.iter_mut().enumerate().take(count) {
        let (d, tangent) = first.curve.sample(j);
        *slot = Along::at(other, d, tangent)?;
    }
    samples[count] = samples[0];
    Some(samples)
}

impl Found {
    /// Crossings between samples j and j + 1, by sign change or around an extremum of equal sign that reaches zero.
    fn between(&mut self, first: Traced<'_>, other: &Mismatch, j: usize, [here, there]: [Along; 2]) {
        let (a, b) = (first.curve.azimuth(j), first.curve.azimuth(j + 1));
        let value = |phi: f64| along(first, other, phi).map(|s| s.value);
        if here.value.is_sign_negative() != there.value.is_sign_negative() {
            self.crossed.extend(bracketed(value, a, b, here.value));
            return;
        }
        // towards zero at a, away from it at b
        let approaches = here.slope * here.value < 0.0 && there.slope * there.value > 0.0;
        if !approaches || !comes_near(here, there, b - a) {
            return;
        }
        let slope = |phi: f64| along(first, other, phi).map(|s| s.slope);
        let Some(turning) = bracketed(slope, a, b, here.slope) else { return };
        let Some(nearest) = along(first, other, turning) else { return };
        if nearest.off().abs() < CONTACT {
            self.touched.push(turning);
        } else if nearest.value.is_sign_negative() != here.value.is_sign_negative() {
            self.crossed.extend(bracketed(value, a, turning, here.value));
            self.crossed.extend(bracketed(value, b, turning, there.value));
        }
    }

    /// Two crossings between which the rings part by less than [`CONTACT`] are one contact.
    fn merge_grazing(&mut self, first: Traced<'_>, other: &Mismatch) {
        let step = TAU / first.curve.count() as f64;
        let mut i = 0;
        while i < self.crossed.len() && self.crossed.len() > 1 {
            let next = (i + 1) % self.crossed.len();
            let (a, b) = (self.crossed[i], self.crossed[next]);
            let middle = if b >= a { 0.5 * (a + b) } else { 0.5 * (a + b + TAU) };
            let near = (b - a).rem_euclid(TAU) < step;
            if near && along(first, other, middle).is_some_and(|s| s.off().abs() < CONTACT) {
                self.crossed.retain(|phi| *phi != a && *phi != b);
                self.touched.push(middle);
            } else {
                i += 1;
            }
        }
    }
}

/// Whether an extremum between two samples may reach zero. Where the function is bent one way it stays beyond the point
/// at which the tangents of both ends meet; a quarter of the nearer value is left as a margin for where it is not.
fn comes_near(here: Along, there: Along, step: f64) -> bool {
    // here.value + here.slope x = there.value - there.slope (step - x)
    let x = (there.value - here.value - there.slope * step) / (here.slope - there.slope);
    let tangents_meet = here.value + here.slope * x;
    tangents_meet * here.value.signum() < 0.25 * here.value.abs().min(there.value.abs())
}

fn along(first: Traced<'_>, other: &Mismatch, phi: f64) -> Option<Along> {
    let (d, tangent) = first.curve.point_and_tangent(first.mismatch, phi)?;
    Along::at(other, d, tangent)
}

/// The crossing near an azimuth of the first ring, polished by Newton in both equations.
fn crossing(first: Traced<'_>, other: &Mismatch, phi: f64) -> Option<Crossing> {
    let mut d = first.curve.at(first.mismatch, phi)?.lab().0;
    for _ in 0..4 {
        let (one, two) = (first.mismatch.towards(d)?, other.towards(d)?);
        let e1 = d.cross(&Vector3::x()).normalize();
        let e2 = d.cross(&e1);
        let jacobian = Matrix2::new(
            one.gradient.dot(&e1),
            one.gradient.dot(&e2),
            two.gradient.dot(&e1),
            two.gradient.dot(&e2),
        );
        // curves that touch leave the second equation to the first
        let size = jacobian.row(0).norm() * jacobian.row(1).norm();
        if jacobian.determinant().abs() < 1e-6 * size {
            break;
        }
        let step = jacobian.try_inverse()? * Vector2::new(-one.value, -two.value);
        d = (d + e1 * step.x + e2 * step.y).normalize();
    }
    let direction = Direction::new(Lab(d));
    Some(Crossing {
        direction,
        partner: first.mismatch.partner(direction),
        angle: screen_angle(d, first.mismatch.towards(d)?.gradient, other.towards(d)?.gradient),
    })
}

/// Angle on the screen between two curves through d with the given gradients, 0 to pi/2.
fn screen_angle(d: Vector3<f64>, one: Vector3<f64>, two: Vector3<f64>) -> f64 {
    let on_screen = |gradient: Vector3<f64>| {
        let tangent = d.cross(&gradient);
        // d(x/z) = (t_x - x t_z/z)/z
        Vector2::new(tangent.x - d.x * tangent.z / d.z, tangent.y - d.y * tangent.z / d.z)
    };
    let (a, b) = (on_screen(one), on_screen(two));
    a.perp(&b).abs().atan2(a.dot(&b).abs())
}

/// Least angle between two rings that do not meet, and the first ring's azimuth where it is found.
fn contact(first: Traced<'_>, second: Traced<'_>) -> Option<(Contact, f64)> {
    let inside_second = second.mismatch.towards(first.curve.vector(0)).is_some_and(|t| t.value < 0.0);
    let around_second = || first.mismatch.towards(second.curve.vector(0)).is_some_and(|t| t.value < 0.0);
    let kind = if inside_second || around_second() { GapKind::Inside } else { GapKind::Outside };
    let mut nearest = (f64::INFINITY, 0, 0);
    for i in 0..first.curve.count() {
        let d = first.curve.vector(i);
        for j in 0..second.curve.count() {
            let distance = (d - second.curve.vector(j)).norm_squared();
            if distance < nearest.0 {
                nearest = (distance, i, j);
            }
        }
    }
    let mut at = Vector2::new(first.curve.azimuth(nearest.1), second.curve.azimuth(nearest.2));
    // the chord stands on both curves: (d1 - d2).t1 = (d1 - d2).t2 = 0, by Newton with differences for the Jacobian
    let standing = |at: Vector2<f64>| {
        let (d1, t1) = first.curve.point_and_tangent(first.mismatch, at.x)?;
        let (d2, t2) = second.curve.point_and_tangent(second.mismatch, at.y)?;
        Some((d1, d2, Vector2::new((d1 - d2).dot(&t1.normalize()), (d1 - d2).dot(&t2.normalize()))))
    };
    let angle = |d1: Vector3<f64>, d2: Vector3<f64>| d1.cross(&d2).norm().atan2(d1.dot(&d2));
    let (d1, d2, _) = standing(at)?;
    let mut gap = angle(d1, d2);
    for _ in 0..20 {
        const STEP: f64 = 1e-5;
        let (_, _, here) = standing(at)?;
        let (_, _, du) = standing(at + Vector2::new(STEP, 0.0))?;
        let (_, _, dv) = standing(at + Vector2::new(0.0, STEP))?;
        let jacobian = Matrix2::from_columns(&[(du - here) / STEP, (dv - here) / STEP]);
        let Some(inverse) = jacobian.try_inverse() else { break };
        let mut step = inverse * -here;
        let longest = step.amax();
        let limit = TAU / first.curve.count() as f64;
        if longest > limit {
            step *= limit / longest;
        }
        let (d1, d2, _) = standing(at + step)?;
        let closer = angle(d1, d2);
        if closer >= gap {
            break;
        }
        at += step;
        let done = gap - closer < 1e-15;
        gap = closer;
        if done {
            break;
        }
    }
    Some((Contact { gap, kind }, at.x))
}
