//! One error at a time, at both of its ends.

use nalgebra::Vector2;

use super::bench::{Bench, RingPlace, Seen};
use super::errors::{CAUSES, Cause, Errors};
use crate::frame::{Direction, Lab};
use crate::matching::{Status, Target};
use crate::material::MaterialError;
use crate::optics::Indices;

/// What a contribution comes from.
#[derive(Debug, Clone, PartialEq)]
pub enum Origin {
    /// Nothing: the geometry as it was ordered and set.
    AsOrdered,
    /// A stated error.
    Cause(Cause),
    /// Another of the material's data sets.
    Dataset(String),
}

/// The geometry at one end of an error.
#[derive(Debug, Clone, PartialEq)]
pub struct End {
    /// As it stands.
    pub seen: Seen,
    /// Turn from the setting that brings the target back, radians.
    pub turn: Option<f64>,
    /// Largest angle between where light is wanted and where it goes after that turn, radians.
    pub left_over: Option<f64>,
    /// How far light moves from where it was.
    pub moved: Moved,
}

/// How far something moves.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Shift {
    /// Outside, radians: of a ring's axis, and what its half angle changes by on top.
    pub angle: f64,
    /// On the screen, m: of a ring's centre, and what its radius changes by on top.
    pub screen: f64,
}

/// How far rings and crossings move; `None` what is not there at one of both times.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Moved {
    /// The signal's ring, then that of the exchanged process where it differs.
    pub rings: Vec<Option<Shift>>,
    /// The crossing that moves most, each to the nearest one.
    pub crossing: Option<Shift>,
    /// Whether a ring that was there is gone.
    pub lost: bool,
}

/// What one error does.
#[derive(Debug, Clone)]
pub struct Contribution {
    /// What is off.
    pub origin: Origin,
    /// By how much, SI; `None` where there is no number for it.
    pub error: Option<f64>,
    /// At minus and plus the error; both the same where it has no ends.
    pub ends: [Result<End, MaterialError>; 2],
}

impl Contribution {
    /// Why something is missing at one of the ends.
    #[must_use]
    pub fn status(&self) -> Status {
        let of = |end: &Result<End, MaterialError>| match end {
            Ok(end) => end.seen.status,
            Err(error) => error.into(),
        };
        let [low, high] = [of(&self.ends[0]), of(&self.ends[1])];
        if low == Status::Ok { high } else { low }
    }

    /// Change of the crossing (of the half angle, where there are no crossings) from end to end per unit of the error,
    /// radians per SI unit; `None` where an end has none.
    #[must_use]
    pub fn sensitivity(&self, target: Target) -> Option<f64> {
        let error = self.error.filter(|e| *e > 0.0)?;
        let [low, high] = self.ends.each_ref().map(|end| end.as_ref().ok().and_then(|e| e.angle(target)));
        Some((high? - low?) / (2.0 * error))
    }
}

impl End {
    /// The angle that a target is about, radians.
    #[must_use]
    pub fn angle(&self, target: Target) -> Option<f64> {
        match target.needs_two_rings() {
            true => self.seen.crossing,
            false => self.seen.rings.first().copied().flatten().map(|r| r.half_angle),
        }
    }
}

/// The geometry as ordered, each error at both ends, and each other data set of the material.
///
/// # Errors
/// Indices that are not to be had even as ordered.
pub fn contributions(bench: &Bench, errors: &Errors) -> Result<Vec<Contribution>, MaterialError> {
    let mut indices = Indices::default();
    let own = bench.crystal.dataset;
    let mut end =
        |off: &Errors, dataset: usize, from: Option<&Seen>| end(bench, off, dataset, from, &mut indices);
    let ordered = end(&Errors::default(), own, None)?;
    let nominal = ordered.seen.clone();
    let mut all = vec![Contribution {
        origin: Origin::AsOrdered,
        error: None,
        ends: [Ok(ordered.clone()), Ok(ordered)],
    }];
    for cause in CAUSES {
        let error = errors.of(cause);
        let ends = [-error, error].map(|e| end(&Errors::only(cause, e), own, Some(&nominal)));
        all.push(Contribution { origin: Origin::Cause(cause), error: Some(error), ends });
    }
    for (index, set) in bench.crystal.material.sets().iter().enumerate().filter(|(i, _)| *i != own) {
        let there = end(&Errors::default(), index, Some(&nominal));
        all.push(Contribution {
            origin: Origin::Dataset(set.id.clone()),
            error: None,
            ends: [there.clone(), there],
        });
    }
    Ok(all)
}

fn end(
    bench: &Bench,
    off: &Errors,
    dataset: usize,
    from: Option<&Seen>,
    indices: &mut Indices,
) -> Result<End, MaterialError> {
    let Some(stand) = bench.stand(off, dataset, indices)? else {
        let seen = Seen { rings: vec![None], crossing: None, points: Vec::new(), status: Status::Invalid };
        return Ok(End {
            seen,
            turn: None,
            left_over: None,
            moved: Moved { lost: true, ..Moved::default() },
        });
    };
    let seen = bench.seen(&stand, 0.0);
    let turn = bench.repair(&stand);
    let left_over = turn.and_then(|turn| left_over(bench, &bench.seen(&stand, turn), off));
    let moved = Moved::between(from.unwrap_or(&seen), &seen, bench.screen.si());
    Ok(End { seen, turn, left_over, moved })
}

/// Largest angle between where light is wanted and where it goes.
fn left_over(bench: &Bench, seen: &Seen, off: &Errors) -> Option<f64> {
    let largest = |angles: Vec<f64>| angles.into_iter().reduce(f64::max);
    match bench.target {
        Target::Crossing(_) | Target::Separation(_) => {
            let nearest =
                |wanted: &Direction| seen.points.iter().map(|p| p.angle_to(*wanted)).reduce(f64::min);
            largest(bench.aims().iter().map(nearest).collect::<Option<Vec<_>>>()?)
        }
        // a cone of the wanted half angle is off by no more than its axis
        Target::HalfAngle(wanted) => {
            let ring = seen.rings.first().copied().flatten()?;
            Some((ring.half_angle - wanted).abs() + ring.axis.angle_to(bench.axis()))
        }
        _ => {
            let [h, v] = off.aim();
            let pump = Direction::new(Lab(nalgebra::Vector3::new(h.tan(), v.tan(), 1.0)));
            Some(pump.angle_to(Direction::forward()))
        }
    }
}

impl Moved {
    /// On a screen at a distance (m).
    fn between(from: &Seen, to: &Seen, distance: f64) -> Self {
        let pairs = || from.rings.iter().zip(&to.rings);
        let ring = |(old, new): (&Option<RingPlace>, &Option<RingPlace>)| {
            let (old, new) = ((*old)?, (*new)?);
            let screen = (new.centre - old.centre).norm() + (new.radius - old.radius).abs();
            let angle = new.axis.angle_to(old.axis) + (new.half_angle - old.half_angle).abs();
            Some(Shift { angle, screen: screen * distance })
        };
        let place = |d: &Direction| {
            let Lab(d) = d.lab();
            Vector2::new(d.x / d.z, d.y / d.z)
        };
        let nearest = |old: &Direction| {
            let each = to.points.iter().map(|new| Shift {
                angle: new.angle_to(*old),
                screen: (place(new) - place(old)).norm() * distance,
            });
            each.reduce(|a, b| if b.angle < a.angle { b } else { a })
        };
        Self {
            rings: pairs().map(ring).collect(),
            crossing: from
                .points
                .iter()
                .filter_map(nearest)
                .reduce(|a, b| if b.angle > a.angle { b } else { a }),
            lost: pairs().any(|(old, new)| old.is_some() && new.is_none()),
        }
    }

    /// Most that anything moves on the screen, m; `None` where a ring is gone, or nothing was there.
    #[must_use]
    pub fn most(&self) -> Option<f64> {
        let all = self.rings.iter().flatten().chain(&self.crossing);
        all.map(|shift| shift.screen).reduce(f64::max).filter(|_| !self.lost)
    }
}
