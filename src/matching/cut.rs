//! Which cut, poling period, temperature or pump wavelength brings about the wanted emission at normal incidence.

use std::f64::consts::{FRAC_PI_2, PI};

use nalgebra::{Rotation3, Vector3};

use super::Status;
use super::acceptance::{Acceptance, acceptances};
use super::cones::ConesError;
use super::emission::{Emission, Photons, Triplet};
use super::interaction::{Interaction, Process, Roles};
use super::partner::Pairing;
use super::rig::{Knob, Rig};
use super::root::{Root, Scan, roots};
use super::target::Target;
use crate::frame::{Cut, Dielectric, Direction, Orientation, Reversal};
use crate::material::{Optic, tensor::Tensor, tensor::is_centrosymmetric};
use crate::optics::Crystal;
use crate::quantity::{Angle, Wavelength};

/// What is sought.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Find {
    /// The polar angle of the cut.
    Theta,
    /// The azimuth of the cut, at given theta.
    Phi,
    /// The poling period, at given cut.
    Poling,
    /// The temperature, at given cut.
    Temperature,
    /// The pump wavelength, at given cut.
    Pump,
}

/// The question.
#[derive(Debug, Clone)]
pub struct Design {
    /// Everything but what is sought; its orientation does not count.
    pub crystal: Crystal,
    /// Wavelengths.
    pub photons: Photons,
    /// A signal wavelength that stays when the pump is sought; else both photons keep their frequency ratio.
    pub fixed_signal: Option<Wavelength>,
    /// Polarizations.
    pub interaction: Interaction,
    /// Wanted emission.
    pub target: Target,
    /// What is sought.
    pub find: Find,
    /// Whether phi is given (else it is chosen).
    pub phi_given: bool,
}

/// Principal plane that the face normal lies in.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Plane {
    /// theta = 90 deg.
    Xy,
    /// phi = 90 deg.
    Yz,
    /// phi = 0.
    Xz,
    /// None, or a uniaxial crystal, where all planes through Z are alike.
    None,
}

impl Plane {
    /// As it stands in tables.
    #[must_use]
    pub fn name(self) -> Option<&'static str> {
        match self {
            Self::Xy => Some("XY"),
            Self::Yz => Some("YZ"),
            Self::Xz => Some("XZ"),
            Self::None => None,
        }
    }
}

/// One answer.
#[derive(Debug, Clone)]
pub struct CutSolution {
    /// The crystal with what was sought filled in.
    pub crystal: Crystal,
    /// Wavelengths.
    pub photons: Photons,
    /// Sheets of the three waves.
    pub roles: Roles,
    /// In words.
    pub process: Process,
    /// Of the face normal.
    pub plane: Plane,
    /// Waves at the target direction.
    pub pairing: Option<Pairing>,
    /// |d_eff| in pm/V; `None` where the tensor is not known.
    pub d_eff: Option<f64>,
    /// Sign of the grating's term in the mismatch; `None` without poling.
    pub grating_sign: Option<f64>,
    /// Tolerances of the conditions.
    pub acceptance: Acceptance,
    /// Whether an index was taken from outside the data set's range.
    pub extrapolated: bool,
    /// `Ok`, `Touching`, `NoNonlinearity` or `OpticAxis`.
    pub status: Status,
}

/// How far from a solution the nearest setting is.
#[derive(Debug, Clone, Copy)]
pub struct Shortfall {
    /// Least |Delta_k| of a collinear pair over the range searched, rad/m.
    pub mismatch: f64,
    /// Cut where it is found.
    pub cut: Cut,
}

/// One line along which a setting is sought.
struct Line<'a> {
    design: &'a Design,
    rig: Rig,
    plane: Plane,
}

impl Line<'_> {
    fn scan(&self) -> Scan {
        let pump = self.design.photons.pump.si();
        match self.rig.knob {
            // rings change slowly with the cut and cost more than a collinear mismatch
            Knob::Theta | Knob::Phi => {
                let intervals = if self.design.target == Target::Collinear { 180 } else { 90 };
                Scan { from: 0.0, to: FRAC_PI_2, intervals }
            }
            // the shortest period sought is 0.5 um
            Knob::InversePeriod => Scan { from: 0.0, to: 1.0 / 0.5e-6, intervals: 800 },
            Knob::Temperature => Scan { from: -50.0, to: 300.0, intervals: 175 },
            Knob::Pump => Scan { from: 0.5 * pump, to: 2.0 * pump, intervals: 450 },
            Knob::Tilt | Knob::CrossTilt => unreachable!("a cut is sought at normal incidence"),
        }
    }

    fn roots(&self, roles: Roles) -> Vec<Root> {
        roots(&mut self.rig.along(|emission| self.design.target.residual(emission, roles)), self.scan())
    }
}

impl Find {
    fn knob(self) -> Knob {
        match self {
            Self::Theta => Knob::Theta,
            Self::Phi => Knob::Phi,
            Self::Poling => Knob::InversePeriod,
            Self::Temperature => Knob::Temperature,
            Self::Pump => Knob::Pump,
        }
    }
}

/// All solutions, one row per process; in order of plane and angle, or by falling |d_eff| where every assignment is
/// tried.
///
/// # Errors
/// A wavelength or temperature outside the data set's range, o and e asked of a biaxial crystal.
pub fn design(design: &Design) -> Result<Vec<CutSolution>, ConesError> {
    let mut crystal = design.crystal.clone();
    crystal.orientation = Orientation::default();
    crystal.reversal = Reversal::None;
    let triplet = Triplet::new(&crystal, &design.photons)?;
    let emission = Emission::new(&crystal, design.photons, &triplet);
    let wanted = wanted_roles(design, &emission)?;
    let mut found = Vec::new();
    for line in lines(design, &crystal, triplet) {
        for roles in &wanted {
            for root in line.roots(*roles) {
                found.extend(solution(&line, *roles, root));
            }
        }
    }
    if design.interaction == Interaction::Any {
        found.sort_by(|a, b| b.d_eff.unwrap_or(0.0).total_cmp(&a.d_eff.unwrap_or(0.0)));
    }
    if design.interaction == Interaction::Zero {
        let best = emission.brightest(&crystal, &wanted);
        found.retain(|s| s.roles == best);
    }
    Ok(found)
}

/// The processes of a design that none of its solutions is of; nothing where every assignment or the brightest was
/// looked for.
///
/// # Errors
/// As [`design`].
pub fn unmatched(design: &Design, found: &[CutSolution]) -> Result<Vec<Process>, ConesError> {
    if matches!(design.interaction, Interaction::Any | Interaction::Zero) {
        return Ok(Vec::new());
    }
    let crystal = Crystal { orientation: Orientation::default(), ..design.crystal.clone() };
    let emission = Emission::of(&crystal, design.photons)?;
    let wanted = wanted_roles(design, &emission)?;
    let missing = wanted.into_iter().filter(|roles| found.iter().all(|s| s.roles != *roles));
    Ok(missing.map(|roles| emission.process(roles)).collect())
}

/// Assignments to solve for: one of each two that are the same pair with the photons exchanged.
fn wanted_roles(design: &Design, emission: &Emission) -> Result<Vec<Roles>, ConesError> {
    let mut roles = emission.roles(design.interaction).map_err(ConesError::Description)?;
    if design.photons.degenerate() {
        let mut distinct: Vec<Roles> = Vec::new();
        for r in roles {
            if !distinct.contains(&r.exchanged()) {
                distinct.push(r);
            }
        }
        roles = distinct;
    }
    if design.target.needs_two_rings() {
        roles.retain(|r| r.signal != r.idler);
        if roles.is_empty() {
            return Err(ConesError::Description(
                "crossings need two photons of opposite polarization: use type II, or ask for a half angle"
                    .into(),
            ));
        }
    }
    Ok(roles)
}

fn lines<'a>(design: &'a Design, crystal: &Crystal, triplet: Triplet) -> Vec<Line<'a>> {
    let line = |find: Find, cut: Cut, plane: Plane| {
        let crystal = Crystal { cut, ..crystal.clone() };
        let (photons, fixed_signal) = (design.photons, design.fixed_signal);
        Line { design, rig: Rig { crystal, photons, fixed_signal, triplet, knob: find.knob() }, plane }
    };
    let (zero, right) = (Angle::default(), Angle::radians(FRAC_PI_2));
    let biaxial = crystal.material.file.optic == Optic::Biaxial;
    match design.find {
        Find::Theta if biaxial && !design.phi_given => vec![
            line(Find::Phi, Cut { theta: right, phi: zero }, Plane::Xy),
            line(Find::Theta, Cut { theta: zero, phi: right }, Plane::Yz),
            line(Find::Theta, Cut { theta: zero, phi: zero }, Plane::Xz),
        ],
        find => vec![line(find, crystal.cut, plane_of(crystal, find))],
    }
}

fn plane_of(crystal: &Crystal, find: Find) -> Plane {
    let (theta, phi) = (crystal.cut.theta.degrees(), crystal.cut.phi.degrees().rem_euclid(180.0));
    match crystal.material.file.optic {
        Optic::Uniaxial => Plane::None,
        Optic::Biaxial if find != Find::Theta && (theta - 90.0).abs() < 1e-9 => Plane::Xy,
        Optic::Biaxial if find != Find::Phi && phi.abs() < 1e-9 => Plane::Xz,
        Optic::Biaxial if find != Find::Phi && (phi - 90.0).abs() < 1e-9 => Plane::Yz,
        Optic::Biaxial => Plane::None,
    }
}

/// The solution at a root; also its mirror image theta -> 180 deg - theta where the point group makes them differ.
fn solution(line: &Line<'_>, roles: Roles, root: Root) -> Vec<CutSolution> {
    let Some((mut crystal, photons, emission)) = line.rig.at(root.x) else { return Vec::new() };
    let uniaxial = crystal.material.file.optic == Optic::Uniaxial;
    if uniaxial
        && line.rig.knob != Knob::Phi
        && !line.design.phi_given
        && let Some(tensor) = &crystal.material.tensor
    {
        crystal.cut.phi = best_phi(&emission, roles, tensor).unwrap_or_default();
    }
    let here = describe(line, roles, root, crystal.clone(), photons);
    let mut all = vec![here];
    if line.rig.knob == Knob::Theta && !uniaxial {
        crystal.cut.theta = Angle::radians(PI - crystal.cut.theta.si());
        let mirrored = describe(line, roles, root, crystal, photons);
        let largest = mirrored.crystal.material.tensor.as_ref().map_or(1.0, Tensor::largest);
        let differ = all[0].d_eff.zip(mirrored.d_eff).is_some_and(|(a, b)| (a - b).abs() > 1e-9 * largest);
        if differ && root.x > 1e-9 {
            all.push(mirrored);
        }
    }
    all
}

fn describe(line: &Line<'_>, roles: Roles, root: Root, crystal: Crystal, photons: Photons) -> CutSolution {
    let emission = Emission::of(&crystal, photons).ok();
    let direction = emission.as_ref().and_then(|e| line.design.target.direction(e, roles));
    let pairing = emission.as_ref().zip(direction).and_then(|(e, d)| e.pairing(roles, d));
    let tensor = crystal.material.tensor.as_ref();
    let d_eff = match (tensor, &emission, &pairing) {
        (Some(tensor), Some(emission), Some(pairing)) => Some(pairing.d_eff(emission, tensor)),
        (None, ..) if is_centrosymmetric(crystal.material.file.point_group.get_ref()) => Some(0.0),
        _ => None,
    };
    let dark = d_eff.is_some_and(|d| d < 1e-6 * tensor.map_or(1.0, Tensor::largest));
    let status = match &pairing {
        Some(pairing) if pairing.on_optic_axis() => Status::OpticAxis,
        _ if dark => Status::NoNonlinearity,
        _ if root.tangent => Status::Touching,
        _ => Status::Ok,
    };
    let extrapolated = [photons.pump, photons.signal, photons.idler].iter().any(|w| crystal.extrapolates(*w));
    let process = emission.as_ref().map_or_else(|| roles_in_words(line, roles), |e| e.process(roles));
    CutSolution {
        acceptance: direction.map_or(Acceptance::default(), |d| acceptances(&crystal, photons, roles, d)),
        grating_sign: emission
            .as_ref()
            .filter(|_| crystal.poling.is_some())
            .and_then(|e| e.grating_sign(roles)),
        process,
        plane: line.plane,
        crystal,
        photons,
        roles,
        pairing,
        d_eff,
        extrapolated,
        status,
    }
}

fn roles_in_words(line: &Line<'_>, roles: Roles) -> Process {
    Emission::new(&line.rig.crystal, line.rig.photons, &line.rig.triplet).process(roles)
}

/// The azimuth of largest |d_eff| of a collinear pair in a uniaxial crystal; the smallest in [0, 360 deg) of those that
/// agree within 1e-9. `emission` must stand at phi = its crystal's own; `None` where |d_eff| is zero at every phi.
///
/// d_eff is a trigonometric polynomial of third degree in phi, so eight samples give it exactly.
#[must_use]
pub fn best_phi(emission: &Emission, roles: Roles, tensor: &Tensor) -> Option<Angle> {
    const N: usize = 8;
    let pairing = emission.pairing(roles, Direction::forward())?;
    let fields =
        [pairing.pump, pairing.signal, pairing.idler].map(|w| emission.placement.to_dielectric(w.field));
    let Dielectric(w) = emission.placement.to_dielectric(crate::frame::Mount(Vector3::z()));
    let own_phi = w.y.atan2(w.x);
    let at = |phi: f64| {
        let turn = Rotation3::from_axis_angle(&Vector3::z_axis(), phi - own_phi);
        let [p, s, i] = fields.map(|f| Dielectric(turn * f.0));
        tensor.contract(p, s, i)
    };
    let samples: [f64; N] = std::array::from_fn(|n| at(2.0 * PI * n as f64 / N as f64));
    let coefficient = |m: usize, shape: fn(f64) -> f64| {
        let sum: f64 = (0..N).map(|n| samples[n] * shape(2.0 * PI * (m * n) as f64 / N as f64)).sum();
        2.0 * sum / N as f64
    };
    let harmonics: [(f64, f64); 3] =
        std::array::from_fn(|m| (coefficient(m + 1, f64::cos), coefficient(m + 1, f64::sin)));
    let mut slope = |phi: f64| {
        let terms = harmonics.iter().enumerate().map(|(m, (a, b))| {
            let order = (m + 1) as f64;
            order * (b * (order * phi).cos() - a * (order * phi).sin())
        });
        Some(terms.sum::<f64>())
    };
    // from just below 0, so that a maximum at 0 lies inside the range
    let turning = roots(&mut slope, Scan { from: -0.01, to: 2.0 * PI - 0.01, intervals: 360 });
    let clean = |phi: f64| {
        let degrees = (phi.to_degrees() * 1e9).round() / 1e9;
        degrees.rem_euclid(360.0)
    };
    let mut all: Vec<(f64, f64)> =
        turning.iter().map(|r| (clean(r.x), at(r.x).abs())).chain([(0.0, at(0.0).abs())]).collect();
    let best = all.iter().map(|(_, d)| *d).fold(0.0, f64::max);
    all.retain(|(_, d)| *d >= best - 1e-9 * best);
    let smallest = all.iter().map(|(phi, _)| *phi).fold(f64::INFINITY, f64::min);
    (best > 1e-6 * tensor.largest()).then(|| Angle::from_degrees(smallest))
}

/// |d_eff| of a collinear pair at a crystal's own phi, and the largest that another phi of the same theta would give.
#[derive(Debug, Clone, Copy)]
pub struct Brightness {
    /// At the crystal's phi, pm/V.
    pub own: f64,
    /// At the best phi, pm/V.
    pub best: f64,
    /// The best phi.
    pub best_phi: Angle,
}

/// How bright the first process of an interaction is at normal incidence; `None` in biaxial crystals, whose phi is part
/// of the geometry, and where the tensor is not known.
#[must_use]
pub fn brightness(crystal: &Crystal, photons: Photons, interaction: Interaction) -> Option<Brightness> {
    let tensor = crystal.material.tensor.as_ref()?;
    if crystal.material.file.optic != Optic::Uniaxial {
        return None;
    }
    let upright =
        Crystal { orientation: Orientation::default(), reversal: Reversal::None, ..crystal.clone() };
    let at = |phi: Angle| {
        let crystal = Crystal { cut: Cut { phi, ..upright.cut }, ..upright.clone() };
        let emission = Emission::of(&crystal, photons).ok()?;
        let roles = *emission.wanted(&crystal, interaction).ok()?.first()?;
        let d_eff = emission.pairing(roles, Direction::forward())?.d_eff(&emission, tensor);
        Some((d_eff, best_phi(&emission, roles, tensor)))
    };
    let (own, best_phi) = at(crystal.cut.phi)?;
    let best_phi = best_phi?;
    Some(Brightness { own, best: at(best_phi)?.0, best_phi })
}

/// The nearest that a collinear pair comes to phase matching over the range of cuts searched.
///
/// # Errors
/// As [`design`].
pub fn shortfall(design: &Design) -> Result<Option<Shortfall>, ConesError> {
    let crystal = Crystal { orientation: Orientation::default(), ..design.crystal.clone() };
    let triplet = Triplet::new(&crystal, &design.photons)?;
    let wanted = wanted_roles(design, &Emission::new(&crystal, design.photons, &triplet))?;
    let mut nearest: Option<Shortfall> = None;
    for line in lines(design, &crystal, triplet) {
        let scan = line.scan();
        for n in 0..=scan.intervals {
            let x = scan.from + (scan.to - scan.from) * n as f64 / scan.intervals as f64;
            let Some((there, _, emission)) = line.rig.at(x) else { continue };
            for roles in &wanted {
                let Some(value) = Target::Collinear.residual(&emission, *roles) else { continue };
                if nearest.is_none_or(|best| value.abs() < best.mismatch) {
                    nearest = Some(Shortfall { mismatch: value.abs(), cut: there.cut });
                }
            }
        }
    }
    Ok(nearest)
}

/// Other ways to meet the target that do have a solution, in words: another type, another pump wavelength.
#[must_use]
pub fn alternatives(asked: &Design, nearest: Option<Shortfall>) -> Vec<String> {
    let mut found = Vec::new();
    if asked.find == Find::Theta {
        for interaction in [Interaction::One, Interaction::Two] {
            let other = Design { interaction, ..asked.clone() };
            if interaction != asked.interaction && design(&other).is_ok_and(|all| !all.is_empty()) {
                found.push(interaction.to_string());
            }
        }
    }
    // a pump that matches pairs along it says nothing about rings
    let Some(nearest) = nearest.filter(|_| asked.target == Target::Collinear) else { return found };
    let crystal = Crystal { cut: nearest.cut, ..asked.crystal.clone() };
    let pump = Design { crystal, find: Find::Pump, target: Target::Collinear, ..asked.clone() };
    let now = asked.photons.pump.si();
    let pumps = design(&pump).unwrap_or_default();
    let closest = pumps.iter().min_by(|a, b| {
        let away = |s: &CutSolution| (s.photons.pump.si() - now).abs();
        away(a).total_cmp(&away(b))
    });
    if let Some(s) = closest {
        let (nm, theta) = (s.photons.pump.nm(), nearest.cut.theta.degrees());
        found.push(format!("a pump of {nm:.1} nm at theta {theta:.1} deg"));
    }
    found
}
