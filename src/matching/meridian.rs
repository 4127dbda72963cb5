//! Meridians about an axis: polar coordinates (psi, phi) of directions, and the way along them to a value of Delta_k.
//!
//! A meridian is followed by t = tan(psi/2), in which directions are rational.

use std::f64::consts::TAU;
use std::sync::LazyLock;

use fearless_simd::dispatch;
use fearless_simd::prelude::*;
use nalgebra::Vector3;

use super::count;
use super::mismatch::{Mismatch, Quadrics, Sample};
use crate::frame::Tangential;
use crate::number::{self, LANES, Number, Wide};

/// Samples on a ring, equally spaced in azimuth about its axis.
pub const SAMPLES: usize = 72;

/// Samples on a convex curve where a ring is not known yet, or is only asked where another meets it: between them slopes
/// at both ends tell whether the other ring comes and goes.
pub(super) const FEW_SAMPLES: usize = SAMPLES / 3;

/// Cosines and sines of equally spaced azimuths.
struct Azimuths<const N: usize> {
    cos: [f64; N],
    sin: [f64; N],
}

impl<const N: usize> Azimuths<N> {
    fn new() -> Self {
        let azimuth = |j: usize| TAU * j as f64 / N as f64;
        Self {
            cos: std::array::from_fn(|j| azimuth(j).cos()),
            sin: std::array::from_fn(|j| azimuth(j).sin()),
        }
    }
}

static ALL: LazyLock<Azimuths<SAMPLES>> = LazyLock::new(Azimuths::new);
static FEW: LazyLock<Azimuths<FEW_SAMPLES>> = LazyLock::new(Azimuths::new);

/// Cosines and sines of `count` azimuths, [`SAMPLES`] or [`FEW_SAMPLES`].
pub(super) fn azimuths(count: usize) -> (&'static [f64], &'static [f64]) {
    if count == SAMPLES { (&ALL.cos, &ALL.sin) } else { (&FEW.cos, &FEW.sin) }
}

/// Axis and two directions across it: polar coordinates (psi, phi) of directions.
#[derive(Debug, Clone, Copy)]
pub(super) struct Meridians {
    pub axis: Vector3<f64>,
    pub across: [Vector3<f64>; 2],
}

impl Meridians {
    /// Azimuth 0 lies towards lab +x as seen from the axis, 90 deg towards +y.
    pub(super) fn about(axis: Vector3<f64>) -> Self {
        let first = (Vector3::x() - axis * axis.x).normalize();
        Self { axis, across: [first, axis.cross(&first)] }
    }

    /// The unit vector with these components along the two directions across and the axis, up to their length.
    pub(super) fn turned(&self, local: &Vector3<f64>) -> Vector3<f64> {
        let Self { axis, across: [first, second] } = self;
        (first * local.x + second * local.y + axis * local.z).normalize()
    }

    /// As the face of a crystal sees them.
    pub(super) fn on_face(&self, mismatch: &Mismatch) -> Fan {
        let [first, second] = &self.across;
        Fan {
            axis: mismatch.on_face(&self.axis),
            across: [mismatch.on_face(first), mismatch.on_face(second)],
        }
    }

    pub(super) fn point(&self, t: f64, (cos, sin): (f64, f64)) -> Vector3<f64> {
        let (along, out) = polar(t);
        self.axis * along + (self.across[0] * cos + self.across[1] * sin) * out
    }
}

/// cos psi and sin psi of t = tan(psi/2).
#[inline(always)]
pub(super) fn polar<T: Number>(t: T) -> (T, T) {
    let w = (t * t + 1.0).reciprocal() * 2.0;
    (w - 1.0, t * w)
}

/// Meridians on a face: tangential wave vectors of the signal (rad/m) and the component along the normal.
#[derive(Debug, Clone, Copy)]
pub(super) struct Fan {
    pub axis: Vector3<f64>,
    pub across: [Vector3<f64>; 2],
}

/// A place on a meridian.
pub(super) struct Place<T = f64> {
    pub q: Tangential<T>,
    /// dq/dpsi
    pub out: Tangential<T>,
    /// dq/dphi divided by sin psi
    pub round: Tangential<T>,
    pub sin: T,
    /// Component of the direction along the exit normal.
    pub forward: T,
}

impl Fan {
    #[inline(always)]
    pub(super) fn place<T: Number>(&self, t: T, (cos, sin): (T, T)) -> Place<T> {
        let ([a, b], axis) = (&self.across, &self.axis);
        let (along, out) = polar(t);
        // the direction across the axis, towards the azimuth
        let (u, v, w) = (cos * a.x + sin * b.x, cos * a.y + sin * b.y, cos * a.z + sin * b.z);
        Place {
            q: Tangential { u: along * axis.x + u * out, v: along * axis.y + v * out },
            out: Tangential { u: u * along - out * axis.x, v: v * along - out * axis.y },
            round: Tangential { u: cos * b.x - sin * a.x, v: cos * b.y - sin * a.y },
            sin: out,
            forward: along * axis.z + w * out,
        }
    }
}

/// A step along a meridian.
struct Step<T> {
    /// t becomes t (1 - step).
    step: T,
    /// (d psi/d phi)/sin psi of the curve.
    turn: T,
    /// d Delta_k/d psi.
    rise: T,
}

/// Newton with the bend of the parabola through the value on the axis, towards Delta_k = `level`, where Delta_k =
/// `middle` on the axis:
///
/// t -> t - (f/f')(1 + f f''/(2 f'^2)),   with y = f/(t f') and y_0 = (f(0) - f)/(t f'),  f f''/(2 f'^2) = y (1 + y_0).
#[inline(always)]
fn newton<T: Number>(place: &Place<T>, here: &Sample<T>, [level, middle]: [f64; 2]) -> Step<T> {
    let rise = here.slope[0] * place.out.u + here.slope[1] * place.out.v;
    let swing = here.slope[0] * place.round.u + here.slope[1] * place.round.v;
    // t f' = sin psi df/dpsi
    let inverse = (rise * place.sin).reciprocal();
    let y = (here.value - level) * inverse;
    let y0 = (-here.value + middle) * inverse;
    Step {
        step: y * (y * (y0 + 1.0) + 1.0),
        // Delta_k stays: psi' = -(dDelta_k/dphi)/(dDelta_k/dpsi)
        turn: -swing * place.sin * inverse,
        rise,
    }
}

/// What a step on all meridians came to.
#[derive(Clone, Copy, PartialEq)]
enum Moved {
    /// No meridian by more than the tolerance.
    Hardly,
    Further,
    /// One by so much that it needs a bracket, or its way out does not lead upwards.
    TooFar,
}

/// Relative steps that need a bracket.
const TOO_FAR: f64 = 0.5;

/// The meridians that are followed together: t and turns.
struct Front<'a> {
    t: &'a mut [f64],
    turns: &'a mut [f64],
}

impl Front<'_> {
    /// A step on all meridians, four side by side.
    #[inline(always)]
    fn step_wide<S: Simd>(
        &mut self,
        simd: S,
        fan: &Fan,
        field: &Quadrics,
        levels: [f64; 2],
        tolerance: f64,
    ) -> Moved {
        let count = self.t.len();
        let (cos, sin) = azimuths(count);
        let azimuths = cos.as_chunks::<LANES>().0.iter().zip(sin.as_chunks::<LANES>().0);
        let (t, turns) = (self.t.as_chunks_mut::<LANES>().0, self.turns.as_chunks_mut::<LANES>().0);
        let none = Wide::splat(simd, 0.0);
        let mut near = none.simd_eq(none);
        let mut settled = near;
        for ((t, turn), (cos, sin)) in t.iter_mut().zip(turns).zip(azimuths) {
            let here = Wide::simd_from(simd, *t);
            let place = fan.place(here, (Wide::simd_from(simd, *cos), Wide::simd_from(simd, *sin)));
            let step = newton(&place, &field.sample(place.q), levels);
            let there = here - here * step.step;
            let size = step.step.abs();
            let upwards = step.rise.simd_gt(none) & place.forward.simd_gt(none);
            near = near & upwards & size.simd_le(Wide::splat(simd, TOO_FAR));
            settled = settled & there.simd_gt(none) & size.simd_le(Wide::splat(simd, tolerance));
            *t = there.into();
            *turn = step.turn.into();
        }
        count::add(count);
        Moved::by(near.all_true(), settled.all_true())
    }

    /// The same one by one.
    fn step_singly(&mut self, fan: &Fan, field: &Mismatch, levels: [f64; 2], tolerance: f64) -> Moved {
        let count = self.t.len();
        let (cos, sin) = azimuths(count);
        let (mut near, mut settled) = (true, true);
        for (j, (t, turn)) in self.t.iter_mut().zip(&mut *self.turns).enumerate() {
            let place = fan.place(*t, (cos[j], sin[j]));
            let step = newton(&place, &field.sample(place.q), levels);
            *t -= *t * step.step;
            *turn = step.turn;
            // written so that what is not a number is neither
            near &= step.rise > 0.0 && place.forward > 0.0 && step.step.abs() <= TOO_FAR;
            settled &= *t > 0.0 && step.step.abs() <= tolerance;
        }
        count::add(count);
        Moved::by(near, settled)
    }
}

impl Moved {
    fn by(near: bool, settled: bool) -> Self {
        match (near, settled) {
            (false, _) => Self::TooFar,
            (true, true) => Self::Hardly,
            (true, false) => Self::Further,
        }
    }
}

/// Where a meridian meets Delta_k = level.
#[derive(Debug, Clone, Copy)]
pub(super) enum Hit {
    At {
        t: f64,
        turn: f64,
    },
    /// At this t the exit face, or the angle at which the partner is evanescent, comes first.
    Face(f64),
    Lost,
}

impl Mismatch {
    /// Where a meridian meets Delta_k = `level`, from a guess; Delta_k must be below it at psi = 0.
    pub(super) fn meet(&self, fan: &Fan, azimuth: (f64, f64), level: f64, guess: f64) -> Hit {
        const STEPS: usize = 80;
        let (mut low, mut high) = (0.0, f64::INFINITY);
        let mut t = if guess.is_finite() && guess > 0.0 { guess } else { 1e-3 };
        let (mut blocked, mut turn) = (false, 0.0);
        for _ in 0..STEPS {
            let place = fan.place(t, azimuth);
            let mut next = f64::NAN;
            match (place.forward > 0.0).then(|| self.at(place.q)).flatten() {
                Some(here) => {
                    let value = here.value - level;
                    if value >= 0.0 {
                        (high, blocked) = (t, false);
                    } else {
                        low = t;
                    }
                    let rise = here.slope[0] * place.out.u + here.slope[1] * place.out.v;
                    turn = -(here.slope[0] * place.round.u + here.slope[1] * place.round.v) / rise;
                    // dpsi/dt = sin psi/t
                    next = t - value * t / (rise * place.sin);
                    // Newton squares the relative error: after a step this small the next would be below rounding
                    if (next - t).abs() <= 1e-8 * t {
                        return Hit::At { t: next, turn };
                    }
                }
                None => (high, blocked) = (t, true),
            }
            if !(next > low && next < high) {
                next = if high.is_finite() { 0.5 * (low + high) } else { 2.0 * t };
            }
            if (next - t).abs() <= 2.0 * f64::EPSILON * t {
                return if blocked { Hit::Face(high) } else { Hit::At { t: next, turn } };
            }
            t = next;
        }
        if blocked {
            Hit::Face(high)
        } else if high - low < 1e-9 {
            Hit::At { t, turn }
        } else {
            Hit::Lost
        }
    }
}

/// Steps on all meridians until none moves by more than `tolerance`, towards the first of `levels`, where the mismatch on
/// the axis is the second; false where that does not come about at once.
pub(super) fn settle(
    mismatch: &Mismatch,
    fan: &Fan,
    levels: [f64; 2],
    t: &mut [f64],
    turns: &mut [f64],
    tolerance: f64,
) -> bool {
    let mut front = Front { t, turns };
    match mismatch.quadrics() {
        Some(field) => dispatch!(number::level(), simd => {
            settles(#[inline(always)] || front.step_wide(simd, fan, &field, levels, tolerance))
        }),
        None => settles(|| front.step_singly(fan, mismatch, levels, tolerance)),
    }
}

/// Steps until nothing moves.
#[inline(always)]
fn settles(mut step: impl FnMut() -> Moved) -> bool {
    const STEPS: usize = 8;
    for _ in 0..STEPS {
        match step() {
            Moved::Hardly => return true,
            Moved::TooFar => return false,
            Moved::Further => {}
        }
    }
    false
}

/// Cosine and sine of an azimuth.
pub(super) fn cos_sin(phi: f64) -> (f64, f64) {
    let (sin, cos) = phi.sin_cos();
    (cos, sin)
}
