//! Two single-mode fibres: amplitudes add over directions before they are squared.
//!
//! A Gaussian mode of 1/e^2 radius w at the crystals has the amplitude exp(-s^2 x^2), s = k0 w/2, in the direction x, and the
//! pump exp(-w_p^2 q^2/4). With x_b = q/k_b - r x, r = k_a/k_b, their product is a Gaussian in (x, q):
//!
//! s_a^2 x^2 + s_b^2 (q/k_b - r x)^2 + w_p^2 q^2/4
//!   = S^2 (x - s_b^2 r q/(k_b S^2))^2 + [w_p^2/4 + s_a^2 s_b^2/(k_b^2 S^2)] q^2,   S^2 = s_a^2 + r^2 s_b^2,
//!
//! which gives the nodes; exact modes are evaluated there. The fibres look at where the two histories come from on average:
//! the slope of the mean phase of the amplitudes with direction, which is that displacement, is taken out.

use nalgebra::{Complex, Vector2, Vector4};

use super::mixture::{Sum, tilted};
use super::quadrature::Rule;
use super::stack::PUMP;
use super::state::Amplitude;

/// The Gaussian above, per axis.
struct Shape {
    /// s_a^2 and s_b^2.
    modes: [f64; 2],
    /// S.
    narrowed: f64,
    /// x at the crest for q = 1.
    crest: f64,
    /// Square root of the bracket; `None` for a plane pump.
    pump: Option<f64>,
    /// w_p^2/4.
    beam: f64,
}

impl Shape {
    fn new(k0: &[f64; 3], radii: [f64; 2], waist: Option<f64>) -> Self {
        let modes = [0, 1].map(|arm: usize| (0.5 * k0[arm] * radii[arm]).powi(2));
        let r = k0[0] / k0[1];
        let narrowed = modes[0] + r * r * modes[1];
        let beam = waist.map_or(0.0, |w| 0.25 * w * w);
        let bracket = beam + modes[0] * modes[1] / (k0[1] * k0[1] * narrowed);
        Self {
            modes,
            narrowed: narrowed.sqrt(),
            crest: modes[1] * r / (k0[1] * narrowed),
            pump: waist.map(|_| bracket.sqrt()),
            beam,
        }
    }
}

/// A place in the plane of a quadrature with its weight, without the Gaussian the rule is made for.
type Node = (Vector2<f64>, f64);

/// All pairs of nodes, scaled; weights are freed of exp(-x^2).
fn plane(rule: &Rule, scale: f64) -> Vec<Node> {
    let free = |x: f64, w: f64| w * (x * x).exp() * scale;
    let row = |[x, wx]: [f64; 2]| {
        rule.0.iter().map(move |[y, wy]| (Vector2::new(x, *y) * scale, free(x, wx) * free(*y, *wy)))
    };
    rule.0.iter().copied().flat_map(row).collect()
}

impl Sum<'_, '_> {
    /// Adds what two fibres of these mode radii collect at one set of frequencies.
    pub(super) fn over_modes(&mut self, radii: [f64; 2], weight: f64, order: usize) {
        let k0 = self.tuned.k0;
        let shape = Shape::new(&k0, radii, self.mixture.waist);
        let Some(slope) = self.slope() else { return };
        let rule = Rule::hermite(order);
        let pumps = shape.pump.map_or(vec![(Vector2::zeros(), 1.0)], |width| plane(&rule, 1.0 / width));
        let modes = plane(&rule, 1.0 / shape.narrowed);
        let mut sum = Vector4::zeros();
        for (q, driven) in &pumps {
            let tilt = q / k0[PUMP];
            let pump = tilted(tilt.x, tilt.y);
            let gauss = (-shape.beam * q.norm_squared()).exp() * driven;
            for (x, share) in &modes {
                let at = x + self.crest(q) * shape.crest;
                let Some(at_b) = self.mixture.followed(&pump, &k0, at) else { continue };
                let Some(field) = self.field(&pump, &self.mixture.frames[0].direction(at)) else { continue };
                let seen = (-shape.modes[0] * at.norm_squared() - shape.modes[1] * at_b.norm_squared()).exp();
                let aligned = Complex::cis(-slope[0].dot(&at) - slope[1].dot(&tilt));
                sum += field * (aligned * (gauss * seen * share));
            }
        }
        self.total += sum * sum.adjoint() * Complex::from(weight);
    }

    /// The pump's tangential wave vector (lab x, y) along H and V of arm a.
    fn crest(&self, q: &Vector2<f64>) -> Vector2<f64> {
        self.mixture.frames[0].place(&nalgebra::Vector3::new(q.x, q.y, 0.0))
    }

    /// Mean slope of the phase with the direction of a at a fixed pump, and with that of the pump at a fixed a, rad per unit
    /// of sine.
    fn slope(&mut self) -> Option<[Vector2<f64>; 2]> {
        const STEP: f64 = 1e-5;
        let axes = [Vector2::new(STEP, 0.0), Vector2::new(0.0, STEP)];
        let still = Vector2::zeros();
        let mut of_a = Vector2::zeros();
        let mut of_pump = Vector2::zeros();
        for (i, axis) in axes.into_iter().enumerate() {
            of_a[i] = self.turn([axis, still], [-axis, still])? / (2.0 * STEP);
            of_pump[i] = self.turn([still, axis], [still, -axis])? / (2.0 * STEP);
        }
        Some([of_a, of_pump])
    }

    /// Change of the phase between two places (of a, of the pump), averaged over the two histories.
    fn turn(&mut self, to: [Vector2<f64>; 2], from: [Vector2<f64>; 2]) -> Option<f64> {
        let (to, from) = (self.named_fields(to)?, self.named_fields(from)?);
        let change = |i: usize| from[i].dotc(&to[i]).arg();
        Some(0.5 * (change(0) + change(1)))
    }

    fn named_fields(&mut self, [at, tilt]: [Vector2<f64>; 2]) -> Option<[Vector4<Amplitude>; 2]> {
        let pump = tilted(tilt.x, tilt.y);
        self.field(&pump, &self.mixture.frames[0].direction(at))?;
        let born = self.last_born();
        Some(self.mixture.stack.named.map(|index| born[index].field()))
    }
}
