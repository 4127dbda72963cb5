//! What a cut or a turn is to bring about, as a number that is zero when it does.

use super::crossing::{Crossing, Meeting, Traced, meet, reach};
use super::curve::{Curve, curves};
use super::emission::Emission;
use super::interaction::Roles;
use super::mismatch::Mismatch;
use super::ring::half_angle;
use crate::frame::Direction;

/// The wanted emission. Angles in radians, outside the crystal.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Target {
    /// Pairs along the pump.
    Collinear,
    /// Half angle of the cone that fits the signal's ring.
    HalfAngle(f64),
    /// Polar angle of the signal at the crossings, their mean where they differ.
    Crossing(f64),
    /// Full angle between the two photons at a crossing, their mean where they differ.
    Separation(f64),
    /// The signal's ring shrinks to a point.
    Beamlike,
    /// The two rings touch.
    Touching,
}

impl Target {
    /// Whether the target lives on two rings of opposite polarization.
    #[must_use]
    pub fn needs_two_rings(&self) -> bool {
        matches!(self, Self::Crossing(_) | Self::Separation(_) | Self::Touching)
    }
}

/// One process of an emission with its mismatch.
#[derive(Debug, Clone)]
struct History {
    mismatch: Mismatch,
    curve: Option<Curve>,
}

impl History {
    fn of(emission: &Emission, roles: Roles) -> Option<Self> {
        let mismatch = emission.mismatch(roles)?;
        let curve = curves(&mismatch).ok().and_then(|all| all.into_iter().next());
        Some(Self { mismatch, curve })
    }

    fn traced(&self) -> Option<Traced<'_>> {
        Some(Traced { mismatch: &self.mismatch, curve: self.curve.as_ref()? })
    }
}

/// The geometry of one crystal at one setting, as far as targets are concerned. Angles in radians.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct Measure {
    /// Half angle of the signal's ring.
    pub half_angle: Option<f64>,
    /// Mean polar angle of the signal at the crossings.
    pub crossing: Option<f64>,
    /// Mean angle between the two photons at the crossings.
    pub separation: Option<f64>,
    /// Whether the crossing is a single point of contact.
    pub touching: bool,
}

impl Measure {
    /// Half angle of `roles`, and crossings of its ring with that of the exchanged process.
    #[must_use]
    pub fn of(emission: &Emission, roles: Roles) -> Self {
        let half_angle = emission.mismatch(roles).and_then(|m| half_angle(&m));
        let (crossing, separation, touching) = crossings(emission, roles)
            .map_or((None, None, false), |m| (Some(m.polar), m.separation, m.touching));
        Self { half_angle, crossing, separation, touching }
    }
}

struct Met {
    polar: f64,
    separation: Option<f64>,
    touching: bool,
    /// The crossing of larger v.
    upper: Direction,
}

fn crossings(emission: &Emission, roles: Roles) -> Option<Met> {
    if roles.signal == roles.idler {
        return None;
    }
    let (one, two) = (History::of(emission, roles)?, History::of(emission, roles.exchanged())?);
    let traced = one.traced()?;
    two.curve.as_ref()?;
    let met = meet(traced, &two.mismatch);
    let touching = met.iter().all(|(_, how)| *how == Meeting::Touch);
    let all: Vec<Crossing> =
        met.into_iter().filter(|(_, how)| *how != Meeting::Coincide).map(|(c, _)| c).collect();
    if all.is_empty() {
        return None;
    }
    let count = all.len() as f64;
    let polar = all.iter().map(|c| c.direction.angle_to(Direction::forward())).sum::<f64>() / count;
    let separations: Option<Vec<f64>> = all.iter().map(|c| Some(c.direction.angle_to(c.partner?))).collect();
    let upper = all.iter().map(|c| c.direction).max_by(|a, b| a.v_deg().total_cmp(&b.v_deg()))?;
    Some(Met { polar, separation: separations.map(|s| s.iter().sum::<f64>() / count), touching, upper })
}

impl Target {
    /// The angle that the target is about, radians, as it is: half angle, mean polar angle or mean separation of the
    /// crossings; `None` where it does not exist, and for targets that are no angle.
    #[must_use]
    pub fn angle(&self, emission: &Emission, roles: Roles) -> Option<f64> {
        match self {
            Self::HalfAngle(_) => half_angle(&emission.mismatch(roles)?),
            Self::Crossing(_) => crossings(emission, roles).map(|m| m.polar),
            Self::Separation(_) => crossings(emission, roles).and_then(|m| m.separation),
            Self::Collinear | Self::Beamlike | Self::Touching => None,
        }
    }

    /// Continuous function of the setting that is zero where the target is met; `None` where it has no meaning.
    #[must_use]
    pub fn residual(&self, emission: &Emission, roles: Roles) -> Option<f64> {
        match *self {
            Self::Collinear => {
                let mismatch = emission.mismatch(roles)?;
                mismatch.at(mismatch.along_pump()).map(|s| s.value)
            }
            Self::Beamlike => {
                let mismatch = emission.mismatch(roles)?;
                mismatch.stationary(mismatch.along_pump()).map(|s| s.value)
            }
            // squares, because angles grow as the square root of the distance from where they begin
            Self::HalfAngle(wanted) => {
                half_angle(&emission.mismatch(roles)?).map(|a| a.powi(2) - wanted.powi(2))
            }
            Self::Crossing(wanted) => crossings(emission, roles).map(|m| m.polar.powi(2) - wanted.powi(2)),
            Self::Separation(wanted) => {
                crossings(emission, roles).and_then(|m| m.separation).map(|s| s.powi(2) - wanted.powi(2))
            }
            Self::Touching => touching_reach(emission, roles).map(|r| r[0]),
        }
    }

    /// The signal's direction at which fields, delays and acceptances of a solution are given: along the pump, at the
    /// upper crossing, or at the point of the ring straight up from its axis.
    #[must_use]
    pub fn direction(&self, emission: &Emission, roles: Roles) -> Option<Direction> {
        match self {
            Self::Collinear => Some(Direction::forward()),
            Self::Beamlike => {
                let mismatch = emission.mismatch(roles)?;
                mismatch.direction(mismatch.stationary(mismatch.along_pump())?.q)
            }
            Self::HalfAngle(_) => {
                let history = History::of(emission, roles)?;
                history.curve?.at(&history.mismatch, std::f64::consts::FRAC_PI_2)
            }
            Self::Crossing(_) | Self::Separation(_) | Self::Touching => {
                crossings(emission, roles).map(|m| m.upper)
            }
        }
    }
}

/// Least and largest mismatch of the exchanged process along the ring of `roles`; zeros are tangencies.
pub(super) fn touching_reach(emission: &Emission, roles: Roles) -> Option<[f64; 2]> {
    let (one, two) = (History::of(emission, roles)?, History::of(emission, roles.exchanged())?);
    two.curve.as_ref()?;
    reach(one.traced()?, &two.mismatch)
}
