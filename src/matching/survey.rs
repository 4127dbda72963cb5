//! Another mismatch along a curve: where its ring meets that one.

use fearless_simd::dispatch;
use fearless_simd::prelude::*;

use super::count;
use super::curve::Curve;
use super::meridian::{Fan, Place, SAMPLES, azimuths};
use super::mismatch::{Mismatch, Quadrics, Sample};
use crate::number::{self, LANES, Number, Wide, wide};

/// Another mismatch along a curve.
#[derive(Debug, Clone, Copy, Default)]
pub(super) struct Along<T = f64> {
    /// Delta_k of the other process, rad/m: negative inside the other ring.
    pub value: T,
    /// Its change per radian of azimuth.
    pub slope: T,
    /// Size of its gradient, rad/m per radian of direction: near the other ring, value/scale is the angle off it.
    pub scale: T,
}

impl<T: Number> Along<T> {
    /// On a curve that turns outwards by `turn` from a circle about the axis.
    #[inline(always)]
    fn new(place: &Place<T>, here: &Sample<T>, k0: f64, turn: T) -> Self {
        let [gu, gv] = here.slope;
        let swing = gu * place.round.u + gv * place.round.v;
        let rise = gu * place.out.u + gv * place.out.v;
        // the gradient k0 (g_u u + g_v v) less its part along the direction, d.gradient = g.q
        let inward = gu * place.q.u + gv * place.q.v;
        let across = (gu * gu + gv * gv) * (k0 * k0) - inward * inward;
        Self { value: here.value, slope: (swing + turn * rise) * place.sin, scale: across.root() }
    }
}

impl Along {
    /// Whether the other ring is nearer than an angle (radians).
    pub fn within(&self, angle: f64) -> bool {
        self.value.abs() < angle * self.scale
    }
}

impl Curve {
    /// What another mismatch is at the samples.
    pub(super) fn survey(&self, other: &Mismatch) -> [Along; SAMPLES] {
        let mut all = [Along::default(); SAMPLES];
        let fan = self.frame.on_face(other);
        let k0 = other.k0_signal();
        match other.quadrics() {
            Some(field) => dispatch!(number::level(), simd => {
                self.look_wide(simd, &fan, &field, k0, &mut all[..self.count()]);
            }),
            None => {
                let (cos, sin) = azimuths(self.count());
                for (j, slot) in all[..self.count()].iter_mut().enumerate() {
                    let place = fan.place(self.samples[j], (cos[j], sin[j]));
                    *slot = Along::new(&place, &other.sample(place.q), k0, self.turns[j]);
                    if place.forward <= 0.0 {
                        slot.value = f64::NAN;
                    }
                }
            }
        }
        count::add(self.count());
        all
    }

    #[inline(always)]
    fn look_wide<S: Simd>(&self, simd: S, fan: &Fan, field: &Quadrics, k0: f64, all: &mut [Along]) {
        let (cos, sin) = azimuths(self.count());
        let (nowhere, none) = (Wide::splat(simd, f64::NAN), Wide::splat(simd, 0.0));
        for (n, slots) in all.as_chunks_mut::<LANES>().0.iter_mut().enumerate() {
            let j = n * LANES;
            let place = fan.place(wide(simd, &self.samples, j), (wide(simd, cos, j), wide(simd, sin, j)));
            let along = Along::new(&place, &field.sample(place.q), k0, wide(simd, &self.turns, j));
            let value = place.forward.simd_gt(none).select(along.value, nowhere);
            for (l, slot) in slots.iter_mut().enumerate() {
                *slot = Along { value: value[l], slope: along.slope[l], scale: along.scale[l] };
            }
        }
    }
}
