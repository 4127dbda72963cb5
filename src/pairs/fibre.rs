//! Single-mode fibres: amplitudes add over directions before they are squared.
//!
//! *Two fibres.*//!
//! A Gaussian mode of 1/e^2 radius w at the crystals has the amplitude exp(-s^2 x^2), s = k0 w/2, in the direction x, and the
//! pump exp(-w_p^2 q^2/4). With x_b = q/k_b - r x, r = k_a/k_b, their product is a Gaussian in (x, q):
//!
//! s_a^2 x^2 + s_b^2 (q/k_b - r x)^2 + w_p^2 q^2/4
//!   = S^2 (x - s_b^2 r q/(k_b S^2))^2 + [w_p^2/4 + s_a^2 s_b^2/(k_b^2 S^2)] q^2,   S^2 = s_a^2 + r^2 s_b^2,
//!
//! which gives the nodes; exact modes are evaluated there. The fibres look at where the two histories come from on average:
//! the slope of the mean phase of the amplitudes with direction, which is that displacement, is taken out.
//!
//! *One fibre and a focused pump.* For each direction y of the other photon amplitudes add over those of the fibre's, x, and
//! what they give adds as intensity over y. With q = k x + k' y the exponent
//!
//! s^2 x^2 + w_p^2 q^2/4 = S^2 (x + w_p^2 k k' y/(4 S^2))^2 + [w_p^2 s^2/(4 S^2)] k'^2 y^2,   S^2 = s^2 + w_p^2 k^2/4,
//!
//! is a Gaussian in x about a place that goes with y, and in y (counted from where the pump's axis sends the photon whose twin
//! goes along the fibre's, which moves with the wavelength). A plane pump leaves one x for each y, so that nothing adds
//! coherently: directions are then weighed with |u(x)|^2.

use nalgebra::{Complex, Vector2, Vector4};

use super::disc::Passage;
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

    /// Adds what a fibre of this mode radius in one arm collects with all photons that the other arm lets through, at one set of
    /// frequencies. Orders: of x; of y; of the azimuth of y behind an iris.
    pub(super) fn over_one_mode(
        &mut self,
        arm: usize,
        radius: f64,
        waist: f64,
        weight: f64,
        orders: [usize; 3],
    ) {
        let k0 = self.tuned.k0;
        let other = 1 - arm;
        let mode = (0.5 * k0[arm] * radius).powi(2);
        let beam = 0.25 * waist * waist;
        let narrowed = mode + beam * k0[arm] * k0[arm];
        // |exp|^2 in y
        let spread = (2.0 * beam * mode / narrowed).sqrt() * k0[other];
        let Some(slope) = self.slope_of(arm) else { return };
        let frames = self.mixture.frames;
        let nominal = frames.map(|frame| frame.direction(Vector2::zeros()));
        // the pump's q for both nominal directions, and where y makes it vanish
        let left = (nominal[0] * k0[0] + nominal[1] * k0[1]).xy();
        let Some(centre) = frames[other].across(&(left / -k0[other])) else { return };
        let mut outer = Vec::new();
        if self.mixture.radii[other].is_finite() {
            // all but 1e-8 of the Gaussian
            let near = |at: Vector2<f64>| Some(at - centre);
            let disc = Passage { a: self.mixture.radii[other], b: 4.3 / spread, follow: &near };
            disc.nodes(&Rule::legendre(orders[1]), orders[2], &mut outer);
        } else {
            outer.extend(
                plane(&Rule::hermite(orders[1]), 1.0 / spread).into_iter().map(|(y, s)| (y + centre, s)),
            );
        }
        let inner = plane(&Rule::hermite(orders[0]), narrowed.sqrt().recip());
        for (y, share_y) in &outer {
            let there = frames[other].direction(*y);
            let q = left + (there - nominal[other]).xy() * k0[other];
            let Some(crest) = frames[arm].across(&(q * (-beam * k0[arm] / narrowed))) else { continue };
            let mut sum = Vector4::zeros();
            for (off, share_x) in &inner {
                let x = crest + off;
                let here = frames[arm].direction(x);
                let [a, b] = if arm == 0 { [here, there] } else { [there, here] };
                let Some(field) = self.pair_field(&a, &b) else { continue };
                let q = (a * k0[0] + b * k0[1]).xy();
                let seen = (-mode * x.norm_squared() - beam * q.norm_squared()).exp();
                sum += field * Complex::from_polar(seen * share_x, -slope.dot(&x));
            }
            self.total += sum * sum.adjoint() * Complex::from(weight * share_y);
        }
    }

    /// Mean slope of the phase with the direction of one arm, the other arm's direction standing, rad per unit of sine.
    fn slope_of(&mut self, arm: usize) -> Option<Vector2<f64>> {
        const STEP: f64 = 1e-5;
        let mut slope = Vector2::zeros();
        for (i, step) in [Vector2::new(STEP, 0.0), Vector2::new(0.0, STEP)].into_iter().enumerate() {
            let (to, from) = (self.named_towards(arm, step)?, self.named_towards(arm, -step)?);
            let change = |i: usize| from[i].dotc(&to[i]).arg();
            slope[i] = 0.5 * (change(0) + change(1)) / (2.0 * STEP);
        }
        Some(slope)
    }

    fn named_towards(&mut self, arm: usize, at: Vector2<f64>) -> Option<[Vector4<Amplitude>; 2]> {
        let mut directions = self.mixture.frames.map(|frame| frame.direction(Vector2::zeros()));
        directions[arm] = self.mixture.frames[arm].direction(at);
        self.pair_field(&directions[0], &directions[1])?;
        let born = self.last_born();
        Some(self.mixture.stack.named.map(|index| born[index].field()))
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

#[cfg(test)]
mod tests {
    use std::sync::Arc;

    use super::super::bench::{Bench, Collection, Opening};
    use super::super::state::DensityMatrix;
    use super::super::{Mixture, Pair, Stack, Vary};
    use super::*;
    use crate::matching::{Interaction, Want, cones};
    use crate::material::Catalogue;
    use crate::optics::Crystal;
    use crate::quantity::{Angle, Length, Wavelength};

    fn crystal() -> Crystal {
        let bbo = Arc::new(Catalogue::default().get("bbo").expect("bbo"));
        let mut crystal = Crystal::new(bbo, Some("kato-1986")).expect("a set").with_cut(42.541, 0.0);
        crystal.length = Length::metres(1e-3);
        crystal
    }

    fn pair(crystal: &Crystal) -> Pair {
        let pump = Wavelength::from_nm(405.0);
        let one = std::slice::from_ref(crystal);
        let found = cones(one, pump, &[pump.doubled()], Interaction::Two, Want::Crossings).expect("cones");
        found.crossings.iter().find_map(|row| Pair::at(row, pump)).expect("a crossing")
    }

    fn bench(arm: usize, other: Opening, waist: f64) -> Bench {
        let mut collection = [Collection { opening: other, direction: None }; 2];
        collection[arm].opening = Opening::Fibre(Length::metres(60e-6));
        Bench { waist: Some(Length::metres(waist)), collection, ..Default::default() }
    }

    const DIRECTIONS: Vary = Vary { direction: true, ..Vary::NOTHING };

    /// One fibre and a focused pump against plain sums over grids of both photons' directions, with and without an iris in the
    /// other arm.
    #[test]
    fn one_fibre_agrees_with_sums_over_grids() {
        let crystal = crystal();
        let pair = pair(&crystal);
        let iris = Opening::Iris(Angle::from_degrees(0.4));
        for (arm, opening, side) in [(0, Opening::All, f64::INFINITY), (1, iris, 0.2f64.to_radians().sin())] {
            let bench = bench(arm, opening, 50e-6);
            let stack =
                Stack::new(std::slice::from_ref(&crystal), &bench, &pair, Interaction::Two).expect("a stack");
            let mixture = Mixture::new(&stack, &bench, DIRECTIONS);
            let found = mixture.estimate(1e-4).expect("a state");
            let mut sum = Sum::new(&mixture);
            let [a, _, pump] = stack.nominal();
            stack.tune(&mut sum.tuned, a, pump).expect("indices");
            let k0 = sum.tuned.k0;
            let slope = sum.slope_of(arm).expect("a slope");
            // to where mode and pump have fallen below 1e-4; a disc's rim wants a finer grid
            let count = if side.is_finite() { 24 } else { 9 };
            let reach = 0.011_f64.min(side);
            let grid = |count: i32, reach: f64| {
                let at = move |j: i32| f64::from(j) * reach / f64::from(count);
                (-count..=count).flat_map(move |i| (-count..=count).map(move |j| Vector2::new(at(i), at(j))))
            };
            let frames = mixture.frames;
            let mut total = nalgebra::Matrix4::zeros();
            for y in grid(count, reach).filter(|y| y.norm() <= side) {
                let mut field = Vector4::zeros();
                let there = frames[1 - arm].direction(y);
                for x in grid(9, 0.011) {
                    let here = frames[arm].direction(x);
                    let [a, b] = if arm == 0 { [here, there] } else { [there, here] };
                    let q = (a * k0[0] + b * k0[1]).xy();
                    let mode = (0.5 * k0[arm] * 60e-6).powi(2) * x.norm_squared();
                    let seen = (-mode - 0.25 * 50e-6 * 50e-6 * q.norm_squared()).exp();
                    if seen > 1e-9 {
                        field += sum.pair_field(&a, &b).expect("a field")
                            * Complex::from_polar(seen, -slope.dot(&x));
                    }
                }
                total += field * field.adjoint();
            }
            let summed = DensityMatrix::new(&total).expect("pairs");
            let off = (summed.0 - found.lab.0).camax();
            assert!(off < 2e-3, "fibre in arm {arm}: {off}");
            assert!(found.lab.purity() < 0.98, "{}", found.lab.purity());
        }
    }

    /// A wide pump is as good as a plane wave: each direction has one partner.
    #[test]
    fn one_fibre_with_a_wide_pump_is_that_with_a_plane_wave() {
        let crystal = crystal();
        let pair = pair(&crystal);
        let state = |waist: Option<f64>| {
            let bench = bench(0, Opening::All, waist.unwrap_or(1.0));
            let bench = Bench { waist: waist.map(Length::metres), ..bench };
            let stack =
                Stack::new(std::slice::from_ref(&crystal), &bench, &pair, Interaction::Two).expect("a stack");
            Mixture::new(&stack, &bench, DIRECTIONS).estimate(1e-4).expect("a state").lab
        };
        let off = (state(Some(5e-3)).0 - state(None).0).camax();
        assert!(off < 1e-3, "{off}");
        let off = (state(Some(30e-6)).0 - state(None).0).camax();
        assert!(off > 1e-3, "a focused pump changes nothing: {off}");
    }
}
