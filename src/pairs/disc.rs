//! Directions of a for which both photons pass their irises: a disc about a's nominal direction, cut by the disc of b as
//! seen from a.
//!
//! Directions of an arm are written as their components (x, y) along H and V of the nominal direction, so that an iris of
//! full angle A is the disc of radius sin(A/2). b's disc seen from a is very nearly a disc too; its rim is found for each
//! azimuth, so that the integrand ends where both do.

use nalgebra::{Matrix2, Vector2, Vector3};

use super::quadrature::Rule;
use super::slab::Ray;

/// The frame of an arm.
#[derive(Debug, Clone, Copy)]
pub struct ArmFrame {
    h: Vector3<f64>,
    v: Vector3<f64>,
    d: Vector3<f64>,
}

impl ArmFrame {
    pub fn new(direction: Vector3<f64>) -> Self {
        let ray = Ray::new(1.0, direction);
        Self { h: ray.h, v: ray.v, d: ray.d }
    }

    pub fn direction(&self, at: Vector2<f64>) -> Vector3<f64> {
        self.h * at.x + self.v * at.y + self.d * (1.0 - at.norm_squared()).max(0.0).sqrt()
    }

    /// The place whose direction, to first order, has these components across the pump more than the nominal one.
    pub fn across(&self, tangential: &Vector2<f64>) -> Option<Vector2<f64>> {
        Some(Matrix2::from_columns(&[self.h.xy(), self.v.xy()]).try_inverse()? * tangential)
    }

    pub fn place(&self, direction: &Vector3<f64>) -> Vector2<f64> {
        Vector2::new(self.h.dot(direction), self.v.dot(direction))
    }
}

/// What both irises let through, for given frequencies. Radii are infinite where an arm has no iris.
pub struct Passage<'a> {
    /// Radius of a's disc.
    pub a: f64,
    /// Radius of b's disc.
    pub b: f64,
    /// Place of b for a place of a.
    pub follow: &'a dyn Fn(Vector2<f64>) -> Option<Vector2<f64>>,
}

/// Both discs as a sees them, b's taken for a disc.
struct Lens {
    /// A point inside both.
    inside: Vector2<f64>,
    /// Centre and radius of b's disc.
    centre: Vector2<f64>,
    radius: f64,
}

/// Samples of the azimuth in which corners of the rim are looked for.
const SPOKES: usize = 48;

impl Passage<'_> {
    /// Whether any pair passes.
    pub fn is_open(&self) -> bool {
        self.lens().is_some()
    }

    /// By how much the discs miss each other, in units of b's radius seen from a: below 0 where they overlap.
    pub fn miss(&self) -> Option<f64> {
        let (centre, radius) = self.other()?;
        Some((centre.norm() - self.a - radius) / radius.min(1.0))
    }

    /// Nodes (x, y) and weights; `radial` and `azimuthal` count the points of each quadrature.
    pub fn nodes(&self, radial: &Rule, azimuthal: usize, out: &mut Vec<(Vector2<f64>, f64)>) {
        out.clear();
        let Some(lens) = self.lens() else { return };
        let corners = self.corners(&lens);
        let mut spoke = |angle: f64, weight: f64| {
            let length = self.rim(&lens, angle);
            let along = Vector2::new(angle.cos(), angle.sin());
            out.extend(radial.on([0.0, length]).map(|[r, w]| (lens.inside + along * r, r * w * weight)));
        };
        let turn = std::f64::consts::TAU;
        if corners.is_empty() {
            let weight = turn / azimuthal as f64;
            (0..azimuthal).for_each(|j| spoke((j as f64 + 0.5) * weight, weight));
            return;
        }
        for (j, from) in corners.iter().enumerate() {
            let to = corners.get(j + 1).copied().unwrap_or(corners[0] + turn);
            let share = (azimuthal as f64 * (to - from) / turn).ceil() as usize;
            let rule = Rule::legendre(share.max(azimuthal / 2).max(3));
            rule.on([*from, to]).for_each(|[angle, weight]| spoke(angle, weight));
        }
    }

    /// Centre and radius of b's disc seen from a.
    fn other(&self) -> Option<(Vector2<f64>, f64)> {
        if !self.b.is_finite() {
            return Some((Vector2::zeros(), f64::INFINITY));
        }
        let mut centre = Vector2::zeros();
        let mut scale = 1.0;
        for _ in 0..3 {
            let jacobian = self.jacobian(centre)?;
            scale = jacobian.determinant().abs().sqrt();
            centre -= jacobian.try_inverse()? * (self.follow)(centre)?;
            if centre.norm() > 0.5 {
                return None;
            }
        }
        Some((centre, self.b / scale))
    }

    fn jacobian(&self, at: Vector2<f64>) -> Option<Matrix2<f64>> {
        const STEP: f64 = 1e-6;
        let here = (self.follow)(at)?;
        let x = ((self.follow)(at + Vector2::new(STEP, 0.0))? - here) / STEP;
        let y = ((self.follow)(at + Vector2::new(0.0, STEP))? - here) / STEP;
        Some(Matrix2::from_columns(&[x, y]))
    }

    fn lens(&self) -> Option<Lens> {
        let (centre, radius) = self.other()?;
        let distance = centre.norm();
        if distance >= self.a + radius {
            return None;
        }
        let along = centre.try_normalize(1e-15).unwrap_or(Vector2::x());
        let middle = if distance + radius.min(self.a) <= radius.max(self.a) {
            // one within the other: the centre of the smaller
            if self.a <= radius { 0.0 } else { distance }
        } else {
            0.5 * ((distance - radius) + self.a)
        };
        Some(Lens { inside: along * middle, centre, radius })
    }

    /// Distance from the inner point to a's rim.
    fn rim_a(&self, lens: &Lens, angle: f64) -> f64 {
        reach(lens.inside, self.a, angle)
    }

    /// Distance from the inner point to b's rim: that of the disc, then put right where b really goes.
    fn rim_b(&self, lens: &Lens, angle: f64) -> f64 {
        if !self.b.is_finite() {
            return f64::INFINITY;
        }
        let along = Vector2::new(angle.cos(), angle.sin());
        let mut length = reach(lens.inside - lens.centre, lens.radius, angle);
        // |b(r)| - radius by Newton, d|b|/dr from a difference
        let off = |r: f64| Some((self.follow)(lens.inside + along * r)?.norm() - self.b);
        for _ in 0..2 {
            let step = 1e-3 * lens.radius;
            let Some((here, there)) = off(length).zip(off(length - step)) else { break };
            if (here - there).abs() < 0.1 * step * self.b / lens.radius {
                break;
            }
            length -= step * here / (here - there);
        }
        length.max(0.0)
    }

    fn rim(&self, lens: &Lens, angle: f64) -> f64 {
        self.rim_a(lens, angle).min(self.rim_b(lens, angle))
    }

    /// Azimuths at which the rim goes from one disc to the other, in rising order.
    fn corners(&self, lens: &Lens) -> Vec<f64> {
        if !self.a.is_finite() || !self.b.is_finite() {
            return Vec::new();
        }
        let difference = |angle: f64| self.rim_a(lens, angle) - self.rim_b(lens, angle);
        let start = lens.centre.y.atan2(lens.centre.x);
        let at = |j: usize| start + std::f64::consts::TAU * j as f64 / SPOKES as f64;
        let noise = 1e-7 * self.a;
        let mut corners = Vec::new();
        let mut before = difference(at(0));
        for j in 1..=SPOKES {
            let here = difference(at(j));
            if before.is_sign_negative() != here.is_sign_negative() && before.abs().max(here.abs()) > noise {
                let [mut low, mut high] = [at(j - 1), at(j)];
                for _ in 0..30 {
                    let middle = 0.5 * (low + high);
                    let same = difference(middle).is_sign_negative() == before.is_sign_negative();
                    if same { low = middle } else { high = middle }
                }
                corners.push(0.5 * (low + high));
            }
            before = here;
        }
        corners
    }
}

/// Distance to the rim of a disc about the origin from a point inside it.
fn reach(from: Vector2<f64>, radius: f64, angle: f64) -> f64 {
    if !radius.is_finite() {
        return f64::INFINITY;
    }
    let along = from.x * angle.cos() + from.y * angle.sin();
    (along * along + radius * radius - from.norm_squared()).max(0.0).sqrt() - along
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_relative_eq;

    fn area(a: f64, b: f64, follow: &dyn Fn(Vector2<f64>) -> Option<Vector2<f64>>) -> f64 {
        let mut nodes = Vec::new();
        Passage { a, b, follow }.nodes(&Rule::legendre(6), 24, &mut nodes);
        nodes.iter().map(|(_, weight)| weight).sum()
    }

    /// Two equal discs of radius r at a distance d: 2 r^2 acos(d/2r) - d/2 sqrt(4 r^2 - d^2).
    #[test]
    fn the_overlap_of_two_discs_has_the_area_of_a_lens() {
        let (r, d): (f64, f64) = (0.01, 0.006);
        let found = area(r, r, &|at| Some(-(at - Vector2::new(d, 0.0))));
        let lens = 2.0 * r * r * (d / (2.0 * r)).acos() - 0.5 * d * (4.0 * r * r - d * d).sqrt();
        assert_relative_eq!(found, lens, max_relative = 1e-5);
    }

    #[test]
    fn a_disc_within_the_other_is_whole() {
        let disc = std::f64::consts::PI * 1e-4;
        let found = area(0.03, 0.01, &|at| Some(Vector2::new(0.004, 0.0) - at));
        assert_relative_eq!(found, disc, max_relative = 1e-12);
        assert_relative_eq!(area(0.01, f64::INFINITY, &|at| Some(-at)), disc, max_relative = 1e-12);
        assert_eq!(area(0.01, 0.01, &|at| Some(Vector2::new(0.03, 0.0) - at)), 0.0);
    }
}
