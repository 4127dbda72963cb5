//! Exact slopes of predictions with respect to the unknowns.
//!
//! Directions are measured by angle or on a screen: x = D d_x/d_z + c_x. What happens to rings and crossings follows from
//! how Delta_k answers ([`Change`], [`Response`]); screen, centre and scale are straight lines.

use nalgebra::{DMatrix, Vector2, Vector3};

use super::{Model, rings};
use crate::fit::measured::{Label, Measurement, Seen, Settings};
use crate::fit::unknown::{Acts, Unknown};
use crate::frame::{Direction, Lab};
use crate::job::setup::Signals;
use crate::matching::{Change, Emission, Foot, Landing, Response, crossing_changes};
use crate::optics::Crystal;

/// One degree in radians.
const DEGREE: f64 = std::f64::consts::PI / 180.0;

/// How a crystal that emits stands, and what was said of the row.
struct Row<'a> {
    index: usize,
    crystal: &'a Crystal,
    emission: &'a Emission,
    settings: &'a Settings,
    label: &'a Label,
}

impl Model {
    /// How the differences of [`Model::differences`] change with each unknown, in its unit: a row for each number, a column
    /// for each unknown. `None` where there is no ring to move (its stand-in has no exact slopes), and where rings touch.
    #[must_use]
    pub fn slopes(
        &mut self,
        measurement: &Measurement,
        choice: usize,
        unknowns: &[Unknown],
    ) -> Option<DMatrix<f64>> {
        let Measurement { settings, label, .. } = measurement;
        let (index, emission) = self.emission(settings, label)?;
        let crystal = self.turned(settings, index);
        let row = Row { index, crystal: &crystal, emission: &emission, settings, label };
        let changes: Vec<Change> = unknowns.iter().map(|u| self.change(u, &row)).collect();
        let rows = match measurement.seen {
            Seen::Crossing(seen) => self.crossing_slopes(&row, seen, false, unknowns, &changes)?,
            Seen::CrossingAngles(seen) => self.crossing_slopes(&row, seen, true, unknowns, &changes)?,
            _ => self.ring_slopes(&row, &measurement.seen, choice, unknowns, &changes)?,
        };
        Some(DMatrix::from_fn(rows.len(), unknowns.len(), |i, j| rows[i][j]))
    }

    /// What a unit of an unknown does to the crystal that emits.
    fn change(&self, unknown: &Unknown, row: &Row<'_>) -> Change {
        let (crystal, settings) = (row.crystal, row.settings);
        let axes = crystal.orientation.turning_axes();
        let turn = |axis: Vector3<f64>| Change::turn(axis).times(DEGREE);
        let scale_is_read = settings.tilt.is_some() || settings.reading.is_some() && row.index == 0;
        let own = unknown.crystal == row.index;
        let degenerate = row.label.wavelength.is_none() && self.setup.signals == Signals::Degenerate;
        match unknown.acts {
            Acts::Theta if own => Change::cut(crystal, row.emission, false).times(DEGREE),
            Acts::Phi if own => Change::cut(crystal, row.emission, true).times(DEGREE),
            Acts::Tilt if own && !scale_is_read => turn(axes.tilt),
            Acts::CrossTilt if own && settings.cross_tilt.is_none() => turn(axes.cross_tilt),
            Acts::Roll if own => turn(axes.roll),
            Acts::Temperature if own && settings.temperature.is_none() => {
                Change::temperature(crystal, row.emission)
            }
            Acts::Poling if own => Change::poling(crystal, row.emission).times(1e-6),
            // the tilt is what the scale reads less its zero
            Acts::Zero if row.index == 0 => turn(axes.tilt * -self.sense),
            Acts::Pump => Change::pump(row.emission, degenerate).times(1e-9),
            _ => Change::default(),
        }
    }

    fn ring_slopes(
        &self,
        row: &Row<'_>,
        seen: &Seen,
        choice: usize,
        unknowns: &[Unknown],
        changes: &[Change],
    ) -> Option<Vec<Vec<f64>>> {
        let candidates = self.candidates(row.index, row.emission, row.label);
        let candidate = candidates.get(choice)?;
        let (mismatch, distance) = (&candidate.mismatch, self.setup.screen.mm());
        let response = Response::new(row.emission, candidate.roles, candidate.label.0)?;
        if let Seen::Edge(seen) = seen {
            let place = self.on_screen(*seen) / distance;
            let foot = Foot::of(mismatch, place)?;
            let moved = foot.changes(&response, changes)?;
            // D beyond(place), place = (seen - c)/D
            let slope = |(unknown, ring): (&Unknown, f64)| match unknown.acts {
                Acts::Distance => foot.beyond - foot.outwards.dot(&place),
                Acts::Centre(axis) => -foot.outwards[axis],
                _ => distance * ring,
            };
            return Some(vec![unknowns.iter().zip(moved).map(slope).collect()]);
        }
        let ring = rings(mismatch, candidate.length).ok()?.into_iter().next()?;
        let moved = ring.changes(mismatch, &response, changes)?;
        let mut rows = Vec::new();
        match seen {
            Seen::Ring { centre, radius } => {
                let (middle, size) = ring.circle();
                if centre.is_some() {
                    let centres: Vec<Vector2<f64>> = moved.iter().map(|m| m.centre).collect();
                    rows.extend(self.place_slopes(middle, &centres, unknowns));
                }
                if radius.is_some() {
                    let slope = |(unknown, radius): (&Unknown, f64)| match unknown.acts {
                        Acts::Distance => size,
                        _ => distance * radius,
                    };
                    rows.push(unknowns.iter().zip(moved.iter().map(|m| m.radius)).map(slope).collect());
                }
            }
            Seen::Cone { axis, half_angle } => {
                if axis.is_some() {
                    let turns: Vec<Vector3<f64>> = moved.iter().map(|m| m.axis).collect();
                    rows.extend(self.angle_slopes(ring.axis, &turns));
                }
                if half_angle.is_some() {
                    rows.push(moved.iter().map(|m| m.half_angle / DEGREE).collect());
                }
            }
            Seen::Edge(_) | Seen::Crossing(_) | Seen::CrossingAngles(_) => {}
        }
        Some(rows)
    }

    fn crossing_slopes(
        &self,
        row: &Row<'_>,
        seen: Vector2<f64>,
        angles: bool,
        unknowns: &[Unknown],
        changes: &[Change],
    ) -> Option<Vec<Vec<f64>>> {
        let (points, roles) = self.crossings(row.index, row.emission)?;
        let places: Vec<Vector2<f64>> = points.iter().map(|d| self.shown(*d, angles)).collect();
        let away = |n: &usize| (places[*n] - seen).norm_squared();
        let nearest = (0..places.len()).min_by(|a, b| away(a).total_cmp(&away(b)))?;
        let direction = points[nearest];
        let both = [roles, roles.exchanged()];
        let responses = [
            Response::new(row.emission, both[0], Landing::Signal)?,
            Response::new(row.emission, both[1], Landing::Signal)?,
        ];
        let mismatches = [row.emission.mismatch(both[0])?, row.emission.mismatch(both[1])?];
        let [one, two] = &mismatches;
        let moved = crossing_changes(direction, [one, two], [&responses[0], &responses[1]], changes)?;
        if angles {
            return Some(self.angle_slopes(direction, &moved).to_vec());
        }
        let Lab(d) = direction.lab();
        let place = d.xy() / d.z;
        // d(x/z) = (dx - x/z dz)/z
        let places: Vec<Vector2<f64>> = moved.iter().map(|m| (m.xy() - place * m.z) / d.z).collect();
        Some(self.place_slopes(place, &places, unknowns).to_vec())
    }

    /// x and y in the picture of a place P (in units of the distance) that moves by `moved`: s (D P + c).
    fn place_slopes(
        &self,
        place: Vector2<f64>,
        moved: &[Vector2<f64>],
        unknowns: &[Unknown],
    ) -> [Vec<f64>; 2] {
        let (distance, signs) = (self.setup.screen.mm(), self.view.signs());
        [0, 1].map(|axis| {
            let slope = |(unknown, moved): (&Unknown, &Vector2<f64>)| match unknown.acts {
                Acts::Distance => place[axis],
                Acts::Centre(along) => f64::from(u8::from(along == axis)),
                _ => distance * moved[axis],
            };
            unknowns.iter().zip(moved).map(|pair| signs[axis] * slope(pair)).collect()
        })
    }

    /// Horizontal and vertical angle of a direction that moves, degrees: h = atan2(x, z), dh = (z dx - x dz)/(x^2 + z^2).
    fn angle_slopes(&self, direction: Direction, moved: &[Vector3<f64>]) -> [Vec<f64>; 2] {
        let (Lab(d), signs) = (direction.lab(), self.view.signs());
        [0, 1].map(|axis| {
            let square = d[axis] * d[axis] + d.z * d.z;
            let slope = |m: &Vector3<f64>| signs[axis] * (d.z * m[axis] - d[axis] * m.z) / square / DEGREE;
            moved.iter().map(slope).collect()
        })
    }
}
