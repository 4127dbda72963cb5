//! Where two rings meet: Delta_k1(d) = Delta_k2(d) = 0 for the external direction d of one photon; and how far they
//! miss where they do not.

use std::f64::consts::{FRAC_PI_2, TAU};

use nalgebra::{Matrix2, Vector2, Vector3};

use super::curve::{Curve, cubic};
use super::mismatch::Mismatch;
use super::root::bracketed;
use super::survey::Along;
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

/// Finds where a ring meets that of another process, for a photon of one wavelength: nothing where they miss each other.
#[must_use]
pub fn meet(first: Traced<'_>, other: &Mismatch) -> Vec<(Crossing, Meeting)> {
    let count = first.curve.count();
    let samples = first.curve.survey(other);
    let samples = &samples[..count];
    if samples.iter().any(|s| s.value.is_nan()) {
        return Vec::new();
    }
    if samples.iter().all(|s| s.within(CONTACT)) {
        let up = crossing(first, other, FRAC_PI_2);
        return up.map(|point| (point, Meeting::Coincide)).into_iter().collect();
    }
    let mut found = Found::default();
    // by symmetry rings often touch right at a sample, whose sign and slope then mean nothing
    let touches = |j: usize| {
        let (before, after) = (&samples[(j + count - 1) % count], &samples[(j + 1) % count]);
        samples[j].within(CONTACT)
            && before.value.is_sign_negative() == after.value.is_sign_negative()
            && !before.within(CONTACT)
            && !after.within(CONTACT)
    };
    for j in 0..count {
        let next = (j + 1) % count;
        if touches(j) {
            found.touched.push(first.curve.azimuth(j));
        } else if !touches(next) {
            found.between(first, other, j, [samples[j], samples[next]]);
        }
    }
    found.merge_grazing(first, other);
    let crossed = found.crossed.into_iter().map(|met| (met.crossing, Meeting::Cross));
    let touched =
        found.touched.into_iter().filter_map(|phi| Some((crossing(first, other, phi)?, Meeting::Touch)));
    crossed.chain(touched).collect()
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

/// Where the other ring is met: crossings, and azimuths of contacts.
#[derive(Default)]
struct Found {
    crossed: Vec<Met>,
    touched: Vec<f64>,
}

/// A crossing and its azimuth on the first ring.
struct Met {
    phi: f64,
    crossing: Crossing,
}

/// Least and largest Delta_k of the other process along a ring, rad/m: a tangency from outside is a zero of the first,
/// from inside a zero of the second (or of the first, where the other ring is the inner one).
#[must_use]
pub fn reach(first: Traced<'_>, other: &Mismatch) -> Option<[f64; 2]> {
    let count = first.curve.count();
    let samples = first.curve.survey(other);
    let mut reach = [f64::INFINITY, f64::NEG_INFINITY];
    let mut stretch = |value: f64| reach = [reach[0].min(value), reach[1].max(value)];
    for j in 0..count {
        let (here, there) = (samples[j], samples[(j + 1) % count]);
        if here.value.is_nan() {
            return None;
        }
        stretch(here.value);
        if here.slope.is_sign_negative() != there.slope.is_sign_negative() {
            stretch(turning(first, other, interval(first.curve, j), [here.slope, there.slope])?);
        }
    }
    Some(reach)
}

/// The stationary value between two azimuths at which the slopes have opposite signs: by the line through the slopes of
/// a bracket that shrinks. An azimuth off by e costs the value e squared.
fn turning(
    first: Traced<'_>,
    other: &Mismatch,
    (mut a, mut b): (f64, f64),
    [mut at_a, mut at_b]: [f64; 2],
) -> Option<f64> {
    const STEPS: usize = 12;
    let near = 1e-8 * (b - a);
    let mut last = f64::NAN;
    for _ in 0..STEPS {
        let phi = (a - at_a * (b - a) / (at_b - at_a)).clamp(a, b);
        let here = along(first, other, phi)?;
        let still = (phi - last).abs() <= near || (phi - a).min(b - phi) <= near;
        last = phi;
        if still {
            return Some(here.value);
        }
        // the end that stays counts half, so that it does not stay for ever
        if here.slope.is_sign_negative() == at_a.is_sign_negative() {
            (a, at_a, at_b) = (phi, here.slope, 0.5 * at_b);
        } else {
            (b, at_b, at_a) = (phi, here.slope, 0.5 * at_a);
        }
    }
    along(first, other, last).map(|there| there.value)
}

/// Azimuths of sample j and the next.
fn interval(curve: &Curve, j: usize) -> (f64, f64) {
    (curve.azimuth(j), curve.azimuth(j + 1))
}

impl Found {
    /// Crossings between samples j and j + 1, by sign change or around an extremum of equal sign that reaches zero.
    fn between(&mut self, first: Traced<'_>, other: &Mismatch, j: usize, [here, there]: [Along; 2]) {
        let (a, b) = interval(first.curve, j);
        if here.value.is_sign_negative() != there.value.is_sign_negative() {
            let met = crossing_at_once(first, other, [a, b], [here, there]);
            self.crossed.extend(met.or_else(|| crossing_in(first, other, [a, b], [here, there])));
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
        if nearest.within(CONTACT) {
            self.touched.push(turning);
        } else if nearest.value.is_sign_negative() != here.value.is_sign_negative() {
            self.crossed.extend(crossing_in(first, other, [a, turning], [here, nearest]));
            self.crossed.extend(crossing_in(first, other, [turning, b], [nearest, there]));
        }
    }

    /// Two crossings between which the rings part by less than [`CONTACT`] are one contact.
    fn merge_grazing(&mut self, first: Traced<'_>, other: &Mismatch) {
        let step = TAU / first.curve.count() as f64;
        let mut i = 0;
        while i < self.crossed.len() && self.crossed.len() > 1 {
            let next = (i + 1) % self.crossed.len();
            let (a, b) = (self.crossed[i].phi, self.crossed[next].phi);
            let middle = if b >= a { 0.5 * (a + b) } else { 0.5 * (a + b + TAU) };
            let near = (b - a).rem_euclid(TAU) < step;
            if near && along(first, other, middle).is_some_and(|s| s.within(CONTACT)) {
                self.crossed.retain(|met| met.phi != a && met.phi != b);
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
    let there = other.towards(d)?;
    let across = there.gradient - d * there.gradient.dot(&d);
    Some(Along { value: there.value, slope: there.gradient.dot(&tangent), scale: across.norm() })
}

/// The crossing between azimuths at which the other mismatch has opposite signs, straight from where its cubic is zero;
/// `None` where that leads elsewhere.
fn crossing_at_once(first: Traced<'_>, other: &Mismatch, [a, b]: [f64; 2], ends: [Along; 2]) -> Option<Met> {
    const MARGIN: f64 = 1e-9;
    let start = a + (b - a) * zero_of_cubic(ends, b - a);
    let from = first.curve.between_samples(start);
    let pair = polished(first, other, from)?;
    let (phi, turned) = first.curve.azimuth_of(&pair.d);
    let phi = if phi < a - MARGIN { phi + TAU } else { phi };
    let inside = phi >= a - MARGIN && phi <= b + MARGIN && (pair.d - from).norm() < turned * (b - a);
    inside.then(|| Met { phi, crossing: pair.crossing(first) })
}

/// The same by a search inside the bracket. Where rounding decides the sign at an end, that end is the crossing.
fn crossing_in(
    first: Traced<'_>,
    other: &Mismatch,
    [a, b]: [f64; 2],
    [here, there]: [Along; 2],
) -> Option<Met> {
    let value = |phi: f64| along(first, other, phi).map(|s| s.value);
    let end = || here.within(CONTACT).then_some(a).or(there.within(CONTACT).then_some(b));
    let phi = bracketed(value, a, b, here.value).or_else(end)?;
    Some(Met { phi, crossing: crossing(first, other, phi)? })
}

/// Share of a step at which the cubic through values of opposite signs and slopes at its ends is zero, roughly.
fn zero_of_cubic([here, there]: [Along; 2], step: f64) -> f64 {
    let ends = [[here.value, here.slope], [there.value, there.slope]];
    let secant = |x: f64, y: f64, fx: f64, fy: f64| (x - fx * (y - x) / (fy - fx)).clamp(0.0, 1.0);
    let first = secant(0.0, 1.0, here.value, there.value);
    let value = cubic(ends, step, first);
    // the line from there to the end of the other sign
    if value.is_sign_negative() == here.value.is_sign_negative() {
        secant(first, 1.0, value, there.value)
    } else {
        secant(0.0, first, here.value, value)
    }
}

/// A direction matched by both processes, with the gradients of their mismatches.
struct Matched {
    d: Vector3<f64>,
    gradients: [Vector3<f64>; 2],
}

impl Matched {
    fn crossing(&self, first: Traced<'_>) -> Crossing {
        let direction = Direction::new(Lab(self.d));
        Crossing {
            direction,
            partner: first.mismatch.partner(direction),
            angle: screen_angle(self.d, self.gradients[0], self.gradients[1]),
        }
    }
}

/// Newton in both equations; `None` where it does not settle, or where the curves hardly cross.
fn polished(first: Traced<'_>, other: &Mismatch, from: Vector3<f64>) -> Option<Matched> {
    const STEPS: usize = 8;
    let mut d = from;
    for _ in 0..STEPS {
        let (one, two) = (first.mismatch.towards(d)?, other.towards(d)?);
        let gradients = [one.gradient, two.gradient];
        let step = step_to_both(d, gradients, [one.value, two.value])?;
        d = (d + step).normalize();
        // what is left is the square of this
        if step.norm_squared() <= 1e-26 {
            return Some(Matched { d, gradients });
        }
    }
    None
}

/// The change of a direction that takes both mismatches to zero; `None` where the curves are all but parallel.
fn step_to_both(d: Vector3<f64>, [g1, g2]: [Vector3<f64>; 2], [f1, f2]: [f64; 2]) -> Option<Vector3<f64>> {
    // g1.x = -f1, g2.x = -f2, d.x = 0:  x = -(f1 (g2 x d) + f2 (d x g1)) / (g1.(g2 x d))
    let (across1, across2) = (d.cross(&g1), g2.cross(&d));
    let determinant = g1.dot(&across2);
    let parallel = determinant * determinant < 1e-12 * across1.norm_squared() * across2.norm_squared();
    (!parallel).then(|| (across2 * f1 + across1 * f2) / -determinant)
}

/// The crossing near an azimuth of the first ring; curves that touch leave the second equation to the first.
fn crossing(first: Traced<'_>, other: &Mismatch, phi: f64) -> Option<Crossing> {
    let Lab(d) = first.curve.at(first.mismatch, phi)?.lab();
    let matched =
        polished(first, other, d).filter(|m| (m.d - d).norm() < 1e-3 * first.curve.size()).or_else(|| {
            let gradients = [first.mismatch.towards(d)?.gradient, other.towards(d)?.gradient];
            Some(Matched { d, gradients })
        })?;
    Some(matched.crossing(first))
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
