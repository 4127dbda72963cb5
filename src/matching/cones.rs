//! Where the light goes: all rings of an experiment and all their crossings.

use super::Status;
use super::crossing::{Contact, Crossing, GapKind, Meeting, Miss, Traced, meet, miss};
use super::curve::{Curve, RingFault, curves};
use super::emission::{Emission, Photons, Triplet};
use super::interaction::{Interaction, Process, Roles};
use super::mismatch::Mismatch;
use super::ring::{Ring, partner_rings, rings};
use super::tuning::{Actuator, nearest_touch, tuning_turn};
use crate::frame::Direction;
use crate::material::MaterialError;
use crate::optics::{Crystal, Indices, Polarization};
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

/// A possible origin of a pair: crystal and process.
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
    /// Number of the pair from 1, where they meet: of its directions and wavelengths, so that more histories that meet in
    /// the same pair have the same number. Its directions are 1a and 1b.
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

/// What is wanted of [`cones`].
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Want {
    /// Rings alone.
    Rings,
    /// Crossings alone.
    Crossings,
    /// Both.
    Both,
}

/// A crystal emitting one pair of wavelengths.
struct Source<'a> {
    index: usize,
    crystal: &'a Crystal,
    emission: Emission,
    triplet: Triplet,
    extrapolated: bool,
}

/// A process of one crystal, seen from the photon of the listed wavelength.
struct History<'a> {
    source: &'a Source<'a>,
    name: HistoryName,
    roles: Roles,
    mismatch: Option<Mismatch>,
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
    want: Want,
) -> Result<Cones, ConesError> {
    cones_with(&mut Indices::default(), crystals, pump, signals, interaction, want)
}

/// [`cones`] with indices that may be remembered from other settings of the same crystals.
///
/// # Errors
/// As [`cones`].
pub fn cones_with(
    indices: &mut Indices,
    crystals: &[Crystal],
    pump: Wavelength,
    signals: &[Wavelength],
    interaction: Interaction,
    want: Want,
) -> Result<Cones, ConesError> {
    let mut found = Cones::default();
    for signal in signals {
        let photons = Photons::new(pump, *signal).ok_or_else(|| {
            ConesError::Description(format!("the signal, {signal}, must be longer than the pump, {pump}"))
        })?;
        let sources: Result<Vec<Source<'_>>, MaterialError> = crystals
            .iter()
            .enumerate()
            .map(|(index, crystal)| Source::new(indices, index, crystal, photons))
            .collect();
        let sources = sources?;
        let mut histories = Vec::new();
        for source in &sources {
            histories.extend(source.histories(interaction)?);
        }
        if want != Want::Crossings {
            histories.iter().for_each(|history| ring_rows(history, &mut found.rings));
        }
        if want != Want::Rings {
            for (i, first) in histories.iter().enumerate() {
                histories[i + 1..]
                    .iter()
                    .for_each(|second| crossing_rows(first, second, &mut found.crossings));
            }
        }
    }
    found.crossings = each_once(std::mem::take(&mut found.crossings));
    Ok(found)
}

impl Cones {
    /// Pairs of directions, each once: rows in which histories meet, in the order of their numbers.
    pub fn pairs(&self) -> impl Iterator<Item = &CrossingRow> {
        let mut last = 0;
        self.crossings.iter().filter(move |row| {
            let is_next = row.pair.is_some_and(|number| number > last);
            last = row.pair.unwrap_or(0).max(last);
            is_next
        })
    }
}

/// How near directions are one, radians.
const SAME: f64 = 1e-7;

impl CrossingRow {
    /// What an arm of the pair is called: 1a, 1b; `None` where the rings do not meet.
    #[must_use]
    pub fn arm(&self, photon: char) -> Option<String> {
        self.pair.map(|number| format!("{number}{photon}"))
    }

    fn partner(&self) -> Option<Direction> {
        self.crossing.as_ref()?.partner
    }

    /// Whether both are one pair with its photons renamed.
    fn is_renamed(&self, other: &Self) -> bool {
        let same = |a: Wavelength, b: Wavelength| (a.si() / b.si() - 1.0).abs() < 1e-9;
        let renamed = |one: HistoryName, two: HistoryName| {
            let (p, q) = (one.process, two.process);
            one.crystal == two.crystal && (p.pump, p.signal, p.idler) == (q.pump, q.idler, q.signal)
        };
        let histories = renamed(self.first, other.first) && renamed(self.second, other.second)
            || renamed(self.first, other.second) && renamed(self.second, other.first);
        if !histories
            || !same(self.a_wavelength, other.b_wavelength)
            || !same(self.b_wavelength, other.a_wavelength)
        {
            return false;
        }
        let (Some(own), Some(others)) = (&self.crossing, &other.crossing) else {
            return self.crossing.is_none() && other.crossing.is_none();
        };
        if [self, other].iter().all(|row| row.status == Status::Coincident) {
            return true;
        }
        let meets = |partner: Option<Direction>, there: Direction| {
            partner.is_some_and(|partner| partner.angle_to(there) < SAME)
        };
        meets(own.partner, others.direction) && meets(others.partner, own.direction)
    }

    fn is_at(&self, other: &Self) -> bool {
        let near = |one: Option<Direction>, two: Option<Direction>| match (one, two) {
            (Some(one), Some(two)) => one.angle_to(two) < SAME,
            (one, two) => one.is_none() && two.is_none(),
        };
        let of = |row: &Self| row.crossing.as_ref().map(|crossing| crossing.direction);
        self.a_wavelength == other.a_wavelength
            && near(of(self), of(other))
            && near(self.partner(), other.partner())
    }

    /// Whether a of a degenerate pair lies above b, or level with it and at larger h.
    fn is_upright(&self) -> bool {
        let Some((a, b)) = self.crossing.as_ref().map(|c| c.direction).zip(self.partner()) else {
            return true;
        };
        let level = (a.v_deg() - b.v_deg()).abs() <= 1e-6;
        if level { a.h_deg() > b.h_deg() } else { a.v_deg() > b.v_deg() }
    }
}

/// Every pair once, however its photons are named, and numbered.
fn each_once(rows: Vec<CrossingRow>) -> Vec<CrossingRow> {
    let mut kept: Vec<CrossingRow> = Vec::with_capacity(rows.len());
    for row in rows {
        match kept.iter().position(|other| other.is_renamed(&row)) {
            None => kept.push(row),
            Some(twin) => {
                let degenerate = row.a_wavelength == row.b_wavelength;
                if degenerate && !kept[twin].is_upright() && row.is_upright() {
                    kept[twin] = row;
                }
            }
        }
    }
    let mut last = 0;
    for i in 0..kept.len() {
        if kept[i].crossing.is_none() {
            continue;
        }
        let same = kept[..i].iter().find(|other| other.pair.is_some() && other.is_at(&kept[i]));
        kept[i].pair = same.and_then(|other| other.pair).or_else(|| {
            last += 1;
            Some(last)
        });
    }
    kept
}

impl<'a> Source<'a> {
    fn new(
        indices: &mut Indices,
        index: usize,
        crystal: &'a Crystal,
        photons: Photons,
    ) -> Result<Self, MaterialError> {
        let triplet = Triplet::remembered(indices, crystal, &photons)?;
        let emission = Emission::new(crystal, photons, &triplet);
        let extrapolated =
            [photons.pump, photons.signal, photons.idler].iter().any(|w| crystal.extrapolates(*w));
        Ok(Self { index, crystal, emission, triplet, extrapolated })
    }

    fn histories(&'a self, interaction: Interaction) -> Result<Vec<History<'a>>, ConesError> {
        let all = self.emission.wanted(self.crystal, interaction).map_err(ConesError::Description)?;
        let history = |roles: Roles| History {
            source: self,
            name: HistoryName { crystal: self.index, process: self.emission.process(roles) },
            roles,
            mismatch: self.emission.mismatch(roles),
        };
        Ok(all.into_iter().map(history).collect())
    }
}

/// What stands for rings where the pump cannot enter.
const SHUT_OUT: RingFault = RingFault { status: Status::TotalReflection, shortfall: None };

/// Whether symmetry forbids the pairs all round the curves: d_eff is looked at in four places, unless the first is bright.
fn is_dark<'c>(history: &History<'_>, curves: impl Iterator<Item = &'c Curve>) -> bool {
    let Source { crystal, emission, .. } = history.source;
    let Some(mismatch) = &history.mismatch else { return false };
    let dark = |direction: Direction| {
        emission.is_dark_with(crystal, history.roles, mismatch, direction) == Some(true)
    };
    let mut curves = curves.peekable();
    curves.peek().is_some() && curves.all(|curve| curve.quarters().all(dark))
}

/// Adds the rings of both photons of a history, unless they are there already.
fn ring_rows(history: &History<'_>, rows: &mut Vec<RingRow>) {
    let Source { emission, extrapolated, .. } = history.source;
    let (photons, roles, media) = (emission.photons, history.roles, &emission.media);
    let signal = (Landing::Signal, photons.signal, media.signal.polarization(roles.signal));
    let idler = (Landing::Idler, photons.idler, media.idler.polarization(roles.idler));
    let from = rows.len();
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
        let found = history.mismatch.as_ref().ok_or(SHUT_OUT).and_then(|m| match photon {
            Landing::Signal => rings(m, emission.length),
            Landing::Idler => partner_rings(m, only_ring(&rows[from..]), emission.length),
        });
        let (found, fault) = match found {
            Ok(found) => (found, None),
            Err(fault) => (Vec::new(), Some(Err(fault))),
        };
        for ring in found.into_iter().map(Ok).chain(fault) {
            let status = match &ring {
                Ok(found) if photon == Landing::Signal && is_dark(history, std::iter::once(&found.curve)) => {
                    Status::NoNonlinearity
                }
                Ok(_) if photon == Landing::Idler && rows.last().is_some_and(|r| r.is_dark_twin(history)) => {
                    Status::NoNonlinearity
                }
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
                extrapolated: *extrapolated,
                status,
            });
        }
    }
}

/// The ring of some rows, if it is the only one.
fn only_ring(rows: &[RingRow]) -> Option<&Ring> {
    match rows {
        [row] => row.ring.as_ref().ok(),
        _ => None,
    }
}

impl RingRow {
    /// Whether this is the dark signal ring of a history, so that the idler's ring is dark too.
    fn is_dark_twin(&self, history: &History<'_>) -> bool {
        self.status == Status::NoNonlinearity && self.process == history.name.process
    }
}

/// Field azimuth of a photon on its ring's axis.
fn field(history: &History<'_>, photon: Landing, ring: &Ring) -> Option<f64> {
    let emission = &history.source.emission;
    match photon {
        Landing::Signal => emission.field_azimuth(history.roles, ring.axis),
        Landing::Idler => emission.idler_field_azimuth(history.roles, ring.axis),
    }
}

/// Whether two histories give photons of opposite polarization in both arms: the other sheets of one crystal, or fields
/// more than 45 deg apart.
fn opposed(first: &History<'_>, second: &History<'_>) -> bool {
    if first.name.crystal == second.name.crystal {
        return first.roles.signal != second.roles.signal && first.roles.idler != second.roles.idler;
    }
    let across = |a: Option<f64>, b: Option<f64>| {
        a.zip(b).is_some_and(|(a, b)| {
            let apart = (a - b).rem_euclid(180.0);
            apart.min(180.0 - apart) > 45.0
        })
    };
    let of = |h: &History<'_>| {
        let forward = Direction::forward();
        let emission = &h.source.emission;
        (emission.field_azimuth(h.roles, forward), emission.idler_field_azimuth(h.roles, forward))
    };
    let ((a1, b1), (a2, b2)) = (of(first), of(second));
    across(a1, a2) && across(b1, b2)
}

fn crossing_rows(first: &History<'_>, second: &History<'_>, rows: &mut Vec<CrossingRow>) {
    if !opposed(first, second) {
        return;
    }
    let ones = curves_of(first);
    // the same pairs with their photons renamed: the second ring is that of the first one's partners, and as bright
    let renamed = first.name.crystal == second.name.crystal
        && first.source.emission.photons.degenerate()
        && second.roles == first.roles.exchanged();
    if let (true, Ok([one]), Some(m1), Some(m2)) =
        (renamed, ones.as_deref(), &first.mismatch, &second.mismatch)
        && one.partners_stay_near(m1)
    {
        let points = crossings((m1, std::slice::from_ref(one)), m2);
        if !points.is_empty() {
            let dark = is_dark(first, std::iter::once(one));
            meeting_rows(first, second, points, dark, rows);
            return;
        }
    }
    let twos = curves_of(second);
    let (Ok(ones), Ok(twos), Some(m1), Some(m2)) = (&ones, &twos, &first.mismatch, &second.mismatch) else {
        let fault = ones.as_ref().err().or(twos.as_ref().err());
        rows.push(blank_row(first, second, fault.map_or(Status::NoPhaseMatching, |f| f.status)));
        return;
    };
    let mut points = crossings((m1, ones), m2);
    if points.is_empty() {
        points = contacts((m1, ones), (m2, twos));
    }
    if points.is_empty() {
        rows.push(missing_row(first, second, (m1, ones), (m2, twos)));
        return;
    }
    let dark = is_dark(first, ones.iter()) || !renamed && is_dark(second, twos.iter());
    meeting_rows(first, second, points, dark, rows);
}

/// Rows for rings that meet.
fn meeting_rows(
    first: &History<'_>,
    second: &History<'_>,
    mut points: Vec<(Crossing, Status)>,
    dark: bool,
    rows: &mut Vec<CrossingRow>,
) {
    order(&mut points);
    let from = rows.len();
    for (crossing, status) in points {
        if first.source.emission.photons.degenerate() && is_twin_of_earlier(&rows[from..], &crossing) {
            continue;
        }
        let status = match status {
            Status::Ok if crossing.partner.is_none() => Status::TotalReflection,
            Status::Ok if dark => Status::NoNonlinearity,
            other => other,
        };
        let blank = blank_row(first, second, status);
        rows.push(CrossingRow { crossing: Some(crossing), ..blank });
    }
}

fn curves_of(history: &History<'_>) -> Result<Vec<Curve>, RingFault> {
    history.mismatch.as_ref().ok_or(SHUT_OUT).and_then(curves)
}

type Curves<'a> = (&'a Mismatch, &'a [Curve]);

/// Where the rings of one history cross or touch that of another.
fn crossings((m1, ones): Curves<'_>, m2: &Mismatch) -> Vec<(Crossing, Status)> {
    let mut points = Vec::new();
    for curve in ones {
        points.extend(meet(Traced { mismatch: m1, curve }, m2).into_iter().map(|(crossing, how)| {
            let status = match how {
                Meeting::Cross => Status::Ok,
                Meeting::Touch => Status::Touching,
                Meeting::Coincide => Status::Coincident,
            };
            (crossing, status)
        }));
    }
    points
}

/// Where rings that do not cross touch after all.
fn contacts((m1, ones): Curves<'_>, (m2, twos): Curves<'_>) -> Vec<(Crossing, Status)> {
    let mut points = Vec::new();
    for (one, two) in ones.iter().flat_map(|one| twos.iter().map(move |two| (one, two))) {
        let (first, second) = (Traced { mismatch: m1, curve: one }, Traced { mismatch: m2, curve: two });
        if let Some(Miss::Touch(point)) = miss(first, second) {
            points.push((point, Status::Touching));
        }
    }
    points
}

fn blank_row(first: &History<'_>, second: &History<'_>, status: Status) -> CrossingRow {
    CrossingRow {
        pair: None,
        first: first.name,
        second: second.name,
        a_wavelength: first.source.emission.photons.signal,
        b_wavelength: first.source.emission.photons.idler,
        crossing: None,
        contact: None,
        tilt_to_touch: None,
        turn: None,
        extrapolated: first.source.extrapolated || second.source.extrapolated,
        status,
    }
}

/// A row for rings that miss each other: by how much, and the turn that makes them touch.
fn missing_row(
    first: &History<'_>,
    second: &History<'_>,
    (m1, ones): Curves<'_>,
    (m2, twos): Curves<'_>,
) -> CrossingRow {
    let mut nearest: Option<Contact> = None;
    for (one, two) in ones.iter().flat_map(|one| twos.iter().map(move |two| (one, two))) {
        let (one, two) = (Traced { mismatch: m1, curve: one }, Traced { mismatch: m2, curve: two });
        if let Some(Miss::By(contact)) = miss(one, two)
            && nearest.is_none_or(|n| contact.gap < n.gap)
        {
            nearest = Some(contact);
        }
    }
    let Source { crystal, emission, triplet, .. } = first.source;
    let turn = tuning_turn(crystal, emission.photons, triplet, first.roles);
    // touching is sought between a process and the one with the photons exchanged
    let exchanged = first.name.crystal == second.name.crystal && first.roles.exchanged() == second.roles;
    let touch = (exchanged && nearest.is_some())
        .then(|| nearest_touch(crystal, emission.photons, *triplet, first.roles, turn))
        .flatten();
    let status = if nearest.is_some() { Status::Apart } else { Status::NotConverged };
    CrossingRow {
        contact: nearest,
        tilt_to_touch: touch,
        turn: Some(turn),
        ..blank_row(first, second, status)
    }
}

/// Upper crossings first; those at one height (to 1e-6 deg) by falling h.
fn order(meetings: &mut [(Crossing, Status)]) {
    meetings.sort_by(|(a, _), (b, _)| b.direction.v_deg().total_cmp(&a.direction.v_deg()));
    let level = |pair: &[(Crossing, Status)]| {
        (pair[0].0.direction.v_deg() - pair[1].0.direction.v_deg()).abs() <= 1e-6
    };
    let mut from = 0;
    while from < meetings.len() {
        let mut to = from + 1;
        while to < meetings.len() && level(&meetings[to - 1..=to]) {
            to += 1;
        }
        meetings[from..to].sort_by(|(a, _), (b, _)| b.direction.h_deg().total_cmp(&a.direction.h_deg()));
        from = to;
    }
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
