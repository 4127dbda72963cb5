//! Where the light goes: all rings of an experiment and all their crossings.

use super::Status;
use super::crossing::{Contact, Crossing, GapKind, Meeting, Miss, Traced, meet, miss};
use super::emission::{Emission, Photons, Triplet};
use super::interaction::{Interaction, Process, Roles};
use super::mismatch::Mismatch;
use super::ring::{Ring, RingFault, rings};
use super::tuning::{Actuator, nearest_touch, tuning_turn};
use crate::frame::Direction;
use crate::material::{MaterialError, tensor::is_centrosymmetric};
use crate::optics::{Crystal, Polarization};
use crate::quantity::Wavelength;

use thiserror::Error;

/// Why there are no cones at all.
#[derive(Debug, Clone, Error)]
pub enum ConesError {
    /// Indices are not to be had.
    #[error(transparent)]
    Material(#[from] MaterialError),
    /// The interaction does not fit the crystal, or a signal is not longer than the pump.
    #[error("{0}")]
    Description(String),
}

/// Which photon of a pair a ring belongs to.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Landing {
    /// The photon of the listed wavelength.
    Signal,
    /// Its twin.
    Idler,
}

/// One distinct ring.
#[derive(Debug, Clone)]
pub struct RingRow {
    /// Index of the crystal, from 0.
    pub crystal: usize,
    /// Process it belongs to.
    pub process: Process,
    /// Sheets of that process.
    pub roles: Roles,
    /// Wavelengths of that process.
    pub photons: Photons,
    /// Which photon of it.
    pub photon: Landing,
    /// Of that photon.
    pub wavelength: Wavelength,
    /// Of that photon.
    pub polarization: Polarization,
    /// Of the photon's electric field outside, from +x towards +y, degrees in [0, 180), at the ring's axis.
    pub field_azimuth: Option<f64>,
    /// The ring, or why there is none.
    pub ring: Result<Ring, RingFault>,
    /// Whether an index was taken from outside the data set's range.
    pub extrapolated: bool,
    /// Of the row.
    pub status: Status,
}

/// One way a pair can have been made.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct HistoryName {
    /// Index of the crystal, from 0.
    pub crystal: usize,
    /// The process, with the photon of the listed wavelength as signal.
    pub process: Process,
}

/// Two histories that meet, or miss.
#[derive(Debug, Clone)]
pub struct CrossingRow {
    /// Number of the pair from 1, where they meet.
    pub pair: Option<usize>,
    /// One history.
    pub first: HistoryName,
    /// The other.
    pub second: HistoryName,
    /// Of the photon of a listed wavelength.
    pub a_wavelength: Wavelength,
    /// Of its twin.
    pub b_wavelength: Wavelength,
    /// Where they meet.
    pub crossing: Option<Crossing>,
    /// How they miss.
    pub contact: Option<Contact>,
    /// Setting of the tuning turn, radians, at which they touch.
    pub tilt_to_touch: Option<f64>,
    /// The turn that `tilt_to_touch` sets.
    pub turn: Option<Actuator>,
    /// Whether an index was taken from outside the data set's range.
    pub extrapolated: bool,
    /// Of the row.
    pub status: Status,
}

/// Rings and crossings.
#[derive(Debug, Clone, Default)]
pub struct Cones {
    /// One for each distinct ring.
    pub rings: Vec<RingRow>,
    /// One for each pair of directions, or for each two histories that miss.
    pub crossings: Vec<CrossingRow>,
}

/// A process of one crystal with its rings, seen from the photon of the listed wavelength.
struct History {
    name: HistoryName,
    roles: Roles,
    emission: Emission,
    triplet: Triplet,
    mismatch: Option<Mismatch>,
    rings: Result<Vec<Ring>, RingFault>,
    extrapolated: bool,
    dark: bool,
}

/// Rings and crossings of crystals pumped along z, for the listed signal wavelengths.
///
/// # Errors
/// A wavelength outside a data set's range, a signal shorter than the pump, o and e asked of a biaxial crystal.
pub fn cones(
    crystals: &[Crystal],
    pump: Wavelength,
    signals: &[Wavelength],
    interaction: Interaction,
) -> Result<Cones, ConesError> {
    let mut found = Cones::default();
    for signal in signals {
        let photons = Photons::new(pump, *signal).ok_or_else(|| {
            ConesError::Description(format!("the signal, {signal}, must be longer than the pump, {pump}"))
        })?;
        let mut histories = Vec::new();
        for (index, crystal) in crystals.iter().enumerate() {
            histories.extend(of_crystal(index, crystal, photons, interaction)?);
        }
        for history in &histories {
            ring_rows(history, &mut found.rings);
        }
        for (i, first) in histories.iter().enumerate() {
            for second in &histories[i + 1..] {
                crossing_rows(crystals, first, second, &mut found.crossings);
            }
        }
    }
    Ok(found)
}

fn of_crystal(
    index: usize,
    crystal: &Crystal,
    photons: Photons,
    interaction: Interaction,
) -> Result<Vec<History>, ConesError> {
    let triplet = Triplet::new(crystal, &photons)?;
    let emission = Emission::new(crystal, photons, &triplet);
    let mut all = emission.roles(interaction).map_err(ConesError::Description)?;
    if interaction == Interaction::Zero {
        all = vec![brightest(crystal, &emission, &all)];
    }
    // one process of a degenerate pair is its own twin with the names of the photons exchanged
    if let (Interaction::Explicit(_), [only], true) = (interaction, all.as_slice(), photons.degenerate())
        && only.signal != only.idler
    {
        all.push(only.exchanged());
    }
    let extrapolated = [photons.pump, photons.signal, photons.idler].iter().any(|w| crystal.extrapolates(*w));
    Ok(all
        .into_iter()
        .map(|roles| {
            let mismatch = emission.mismatch(roles);
            let none = RingFault { status: Status::TotalReflection, shortfall: None };
            let rings = mismatch.as_ref().map_or(Err(none), |m| rings(m, emission.length));
            History {
                name: HistoryName { crystal: index, process: emission.process(roles) },
                roles,
                dark: is_dark(crystal, &emission, roles, &rings),
                emission: emission.clone(),
                triplet,
                mismatch,
                rings,
                extrapolated,
            }
        })
        .collect())
}

/// The assignment with the largest |d_eff| along the pump.
pub(super) fn brightest(crystal: &Crystal, emission: &Emission, all: &[Roles]) -> Roles {
    let d_eff = |roles: &Roles| {
        let tensor = crystal.material.tensor.as_ref()?;
        Some(emission.pairing(*roles, Direction::forward())?.d_eff(emission, tensor))
    };
    let mut best = all[0];
    for roles in &all[1..] {
        if d_eff(roles) > d_eff(&best) {
            best = *roles;
        }
    }
    best
}

/// Whether symmetry forbids the pairs all round the ring.
fn is_dark(
    crystal: &Crystal,
    emission: &Emission,
    roles: Roles,
    rings: &Result<Vec<Ring>, RingFault>,
) -> bool {
    let Some(tensor) = &crystal.material.tensor else {
        return is_centrosymmetric(crystal.material.file.point_group.get_ref());
    };
    let dark = |direction: Direction| {
        let pairing = emission.pairing(roles, direction);
        pairing.is_some_and(|p| p.d_eff(emission, tensor) < 1e-6 * tensor.largest())
    };
    rings
        .as_ref()
        .is_ok_and(|all| all.iter().all(|ring| (0..4).all(|n| dark(ring.curve.direction(18 * n + 5)))))
}

/// Adds the rings of both photons of a history, unless they are there already.
fn ring_rows(history: &History, rows: &mut Vec<RingRow>) {
    let photons = history.emission.photons;
    let roles = history.roles;
    let media = &history.emission.media;
    let signal = (Landing::Signal, photons.signal, media.signal.polarization(roles.signal));
    let idler = (Landing::Idler, photons.idler, media.idler.polarization(roles.idler));
    for ((photon, wavelength, polarization), twin) in [(signal, idler.2), (idler, signal.2)] {
        let same = |row: &RingRow| {
            let own = match row.photon {
                Landing::Signal => row.process.idler,
                Landing::Idler => row.process.signal,
            };
            row.crystal == history.name.crystal
                && row.polarization == polarization
                && own == twin
                && (row.wavelength.si() / wavelength.si() - 1.0).abs() < 1e-9
        };
        if rows.iter().any(same) {
            continue;
        }
        let traced = match (photon, &history.mismatch) {
            (Landing::Signal, _) | (_, None) => history.rings.clone(),
            (Landing::Idler, Some(mismatch)) => rings(&mismatch.exchanged(), history.emission.length),
        };
        let outcomes: Vec<Result<Ring, RingFault>> = match traced {
            Ok(all) => all.into_iter().map(Ok).collect(),
            Err(fault) => vec![Err(fault)],
        };
        for ring in outcomes {
            let status = match &ring {
                Ok(_) if history.dark => Status::NoNonlinearity,
                Ok(ring) => ring.status,
                Err(fault) => fault.status,
            };
            rows.push(RingRow {
                crystal: history.name.crystal,
                process: history.name.process,
                roles,
                photons,
                photon,
                wavelength,
                polarization,
                field_azimuth: ring.as_ref().ok().and_then(|r| field(history, photon, r)),
                ring,
                extrapolated: history.extrapolated,
                status,
            });
        }
    }
}

/// Field azimuth of a photon on its ring's axis.
fn field(history: &History, photon: Landing, ring: &Ring) -> Option<f64> {
    match photon {
        Landing::Signal => history.emission.field_azimuth(history.roles, ring.axis),
        Landing::Idler => {
            let seen_from_idler = history.emission.exchanged();
            seen_from_idler.field_azimuth(history.roles.exchanged(), ring.axis)
        }
    }
}

/// Whether two histories give photons of opposite polarization in both arms: fields more than 45 deg apart.
fn opposed(first: &History, second: &History) -> bool {
    let across = |a: Option<f64>, b: Option<f64>| {
        a.zip(b).is_some_and(|(a, b)| {
            let apart = (a - b).rem_euclid(180.0);
            apart.min(180.0 - apart) > 45.0
        })
    };
    let of = |h: &History| {
        let forward = Direction::forward();
        let exchanged = h.emission.exchanged();
        (h.emission.field_azimuth(h.roles, forward), exchanged.field_azimuth(h.roles.exchanged(), forward))
    };
    let ((a1, b1), (a2, b2)) = (of(first), of(second));
    across(a1, a2) && across(b1, b2)
}

fn crossing_rows(crystals: &[Crystal], first: &History, second: &History, rows: &mut Vec<CrossingRow>) {
    if !opposed(first, second) {
        return;
    }
    let Some(meetings) = meetings(first, second) else {
        let faults = [&first.rings, &second.rings].into_iter().find_map(|r| r.as_ref().err());
        rows.push(blank_row(first, second, faults.map_or(Status::NoPhaseMatching, |fault| fault.status)));
        return;
    };
    if meetings.points.is_empty() {
        rows.push(missing_row(crystals, first, second, meetings.nearest));
        return;
    }
    let from = rows.len();
    let mut number = rows.iter().filter_map(|r| r.pair).max().unwrap_or(0);
    for (crossing, status) in meetings.points {
        if first.emission.photons.degenerate() && is_twin_of_earlier(&rows[from..], &crossing) {
            continue;
        }
        number += 1;
        let status = match status {
            Status::Ok if crossing.partner.is_none() => Status::TotalReflection,
            Status::Ok if first.dark || second.dark => Status::NoNonlinearity,
            other => other,
        };
        let blank = blank_row(first, second, status);
        rows.push(CrossingRow { pair: Some(number), crossing: Some(crossing), ..blank });
    }
}

/// Where the rings of two histories meet, in the order of the table; and how near they come where they do not.
struct Meetings {
    points: Vec<(Crossing, Status)>,
    nearest: Option<Contact>,
}

/// `None` where a ring is missing.
fn meetings(first: &History, second: &History) -> Option<Meetings> {
    let (ones, twos) = (first.rings.as_ref().ok()?, second.rings.as_ref().ok()?);
    let (m1, m2) = (first.mismatch.as_ref()?, second.mismatch.as_ref()?);
    let mut all = Meetings { points: Vec::new(), nearest: None };
    for one in ones {
        for two in twos {
            let (one, two) = (&one.curve, &two.curve);
            let (first, second) = (Traced { mismatch: m1, curve: one }, Traced { mismatch: m2, curve: two });
            match meet(first, m2) {
                Some(Meeting::Cross(points)) => {
                    all.points.extend(points.into_iter().map(|c| (c, Status::Ok)))
                }
                Some(Meeting::Touch(point)) => all.points.push((point, Status::Touching)),
                Some(Meeting::Coincide(point)) => all.points.push((point, Status::Coincident)),
                Some(Meeting::Miss) => match miss(first, second) {
                    Some(Miss::Touch(point)) => all.points.push((point, Status::Touching)),
                    Some(Miss::By(contact)) if all.nearest.is_none_or(|n| contact.gap < n.gap) => {
                        all.nearest = Some(contact);
                    }
                    Some(Miss::By(_)) | None => {}
                },
                None => {}
            }
        }
    }
    order(&mut all.points);
    Some(all)
}

fn blank_row(first: &History, second: &History, status: Status) -> CrossingRow {
    CrossingRow {
        pair: None,
        first: first.name,
        second: second.name,
        a_wavelength: first.emission.photons.signal,
        b_wavelength: first.emission.photons.idler,
        crossing: None,
        contact: None,
        tilt_to_touch: None,
        turn: None,
        extrapolated: first.extrapolated || second.extrapolated,
        status,
    }
}

/// A row for rings that miss each other: by how much, and the turn that makes them touch.
fn missing_row(
    crystals: &[Crystal],
    first: &History,
    second: &History,
    nearest: Option<Contact>,
) -> CrossingRow {
    let crystal = &crystals[first.name.crystal];
    let photons = first.emission.photons;
    let turn = tuning_turn(crystal, photons, &first.triplet, first.roles);
    let one_crystal = first.name.crystal == second.name.crystal;
    let touch = (one_crystal && nearest.is_some())
        .then(|| nearest_touch(crystal, photons, first.triplet, first.roles, turn))
        .flatten();
    let status = if nearest.is_some() { Status::Apart } else { Status::NotConverged };
    CrossingRow {
        contact: nearest,
        tilt_to_touch: touch,
        turn: Some(turn),
        ..blank_row(first, second, status)
    }
}

/// Larger v first where they differ by more than 1e-6 deg, else larger h.
fn order(meetings: &mut [(Crossing, Status)]) {
    meetings.sort_by(|(a, _), (b, _)| {
        let (a, b) = (a.direction, b.direction);
        if (a.v_deg() - b.v_deg()).abs() > 1e-6 {
            b.v_deg().total_cmp(&a.v_deg())
        } else {
            b.h_deg().total_cmp(&a.h_deg())
        }
    });
}

fn is_twin_of_earlier(rows: &[CrossingRow], crossing: &Crossing) -> bool {
    let earlier = rows.iter().filter_map(|r| r.crossing.as_ref()?.partner);
    earlier.into_iter().any(|partner| partner.angle_to(crossing.direction) < 1e-8)
}

impl GapKind {
    /// As it stands in tables.
    #[must_use]
    pub fn name(self) -> &'static str {
        match self {
            Self::Outside => "outside",
            Self::Inside => "inside",
        }
    }
}
