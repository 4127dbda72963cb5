//! Meridians about an axis: polar coordinates (psi, phi) of directions, and the way along them to a value of Delta_k.
//!
//! A meridian is followed by t = tan(psi/2), in which directions are rational.

use std::f64::consts::TAU;
use std::sync::LazyLock;

use nalgebra::Vector3;

use super::count;
use super::mismatch::{Field, Mismatch};
use crate::frame::Tangential;

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
pub(super) fn polar(t: f64) -> (f64, f64) {
    let w = 2.0 / (1.0 + t * t);
    (w - 1.0, t * w)
}

/// Meridians on a face: tangential wave vectors of the signal (rad/m) and the component along the normal.
#[derive(Debug, Clone, Copy)]
pub(super) struct Fan {
    pub axis: Vector3<f64>,
    pub across: [Vector3<f64>; 2],
}

/// A place on a meridian.
pub(super) struct Place {
    pub q: Tangential,
    /// dq/dpsi
    pub out: Tangential,
    /// dq/dphi divided by sin psi
    pub round: Tangential,
    pub sin: f64,
    /// Component of the direction along the exit normal.
    pub forward: f64,
}

impl Fan {
    #[inline(always)]
    pub(super) fn place(&self, t: f64, (cos, sin): (f64, f64)) -> Place {
        let ([a, b], axis) = (&self.across, &self.axis);
        let (along, out) = polar(t);
        // the direction across the axis, towards the azimuth
        let (u, v, w) = (a.x * cos + b.x * sin, a.y * cos + b.y * sin, a.z * cos + b.z * sin);
        Place {
            q: Tangential { u: axis.x * along + u * out, v: axis.y * along + v * out },
            out: Tangential { u: u * along - axis.x * out, v: v * along - axis.y * out },
            round: Tangential { u: b.x * cos - a.x * sin, v: b.y * cos - a.y * sin },
            sin: out,
            forward: axis.z * along + w * out,
        }
    }

    /// One step towards Delta_k = `level` on each meridian, where Delta_k = `middle` on the axis. Steps are relative,
    /// and not a number where the way out does not lead upwards.
    #[inline(always)]
    fn step(&self, field: &impl Field, [level, middle]: [f64; 2], curve: Advance<'_>) {
        let count = curve.t.len();
        let (cos, sin) = azimuths(count);
        let (cos, sin, turns, steps) =
            (&cos[..count], &sin[..count], &mut curve.turns[..count], &mut curve.steps[..count]);
        for j in 0..count {
            let t = curve.t[j];
            let place = self.place(t, (cos[j], sin[j]));
            let here = field.sample(place.q);
            let rise = here.slope[0] * place.out.u + here.slope[1] * place.out.v;
            let swing = here.slope[0] * place.round.u + here.slope[1] * place.round.v;
            // t f' = sin psi df/dpsi
            let inverse = 1.0 / (rise * place.sin);
            // Newton with the bend of the parabola through the value on the axis, t -> t - (f/f')(1 + f f''/(2 f'^2)):
            // with y = f/(t f') and y_0 = (f(0) - f)/(t f'),  f f''/(2 f'^2) = y (1 + y_0)
            let y = (here.value - level) * inverse;
            let y0 = (middle - here.value) * inverse;
            let step = y * (1.0 + y * (1.0 + y0));
            let upwards = rise > 0.0 && place.forward > 0.0;
            steps[j] = if upwards { step } else { f64::NAN };
            curve.t[j] = t - t * step;
            // Delta_k stays: psi' = -(dDelta_k/dphi)/(dDelta_k/dpsi)
            turns[j] = -swing * place.sin * inverse;
        }
        count::add(count);
    }
}

/// What [`Fan::step`] moves.
struct Advance<'a> {
    t: &'a mut [f64],
    turns: &'a mut [f64],
    steps: &'a mut [f64],
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

/// Steps on all meridians until none moves by more than `tolerance`; false where that does not come about at once.
pub(super) fn settle(
    mismatch: &Mismatch,
    fan: &Fan,
    level: f64,
    t: &mut [f64],
    turns: &mut [f64],
    tolerance: f64,
) -> bool {
    const STEPS: usize = 8;
    // relative steps that need a bracket
    const TOO_FAR: f64 = 0.5;
    let axis = Tangential { u: fan.axis.x, v: fan.axis.y };
    let Some(middle) = mismatch.at(axis).map(|at| at.value) else { return false };
    let mut steps = [0.0; SAMPLES];
    let steps = &mut steps[..t.len()];
    for _ in 0..STEPS {
        let advance = Advance { t: &mut *t, turns: &mut *turns, steps: &mut *steps };
        match mismatch.quadrics() {
            Some(quadrics) => fan.step(&quadrics, [level, middle], advance),
            None => fan.step(mismatch, [level, middle], advance),
        }
        // written so that what is not a number is neither
        let within = |limit: f64| steps.iter().all(|step| step.abs() <= limit);
        if within(tolerance) {
            return t.iter().all(|t| *t > 0.0);
        }
        if !within(TOO_FAR) {
            return false;
        }
    }
    false
}

/// Cosine and sine of an azimuth.
pub(super) fn cos_sin(phi: f64) -> (f64, f64) {
    let (sin, cos) = phi.sin_cos();
    (cos, sin)
}
