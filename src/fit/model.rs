//! What the bench would show if the unknowns had certain values.

use nalgebra::{Vector2, Vector3};

mod slopes;

use super::measured::{Label, Measurement, Seen, Settings, View};
use super::unknown::{Acts, Bearings, Unknown};
use crate::frame::{Direction, Lab};
use crate::job::Setup;
use crate::matching::phase_matching_factor;
use crate::matching::{
    self, Emission, Foot, Landing, Meeting, Mismatch, Photons, Roles, Triplet, curves, meet, rings,
};
use crate::optics::{Crystal, Indices, Polarization};
use crate::picture::{Light, middle, samples};
use crate::quantity::{Angle, Temperature, Wavelength};

/// A ring that could be the one that was seen.
struct Candidate {
    mismatch: Mismatch,
    /// As the signal has them, whichever photon this is.
    roles: Roles,
    label: (Landing, Polarization),
    length: f64,
}

/// A ring as it is predicted: what a measurement can be compared with.
#[derive(Debug, Clone, Copy)]
struct Predicted {
    axis: Direction,
    /// Radians; negative where there is none, growing with what is missing.
    half_angle: f64,
    /// Circle on the screen, in units of the distance; the radius as `half_angle`.
    centre: Vector2<f64>,
    radius: f64,
}

/// A predicted ring in the picture, mm.
#[derive(Debug, Clone)]
pub struct Traced {
    /// Which photon, and its polarization.
    pub label: (Landing, Polarization),
    /// The signal's wavelength, where filters let another than the nominal one pass.
    pub wavelength: Option<Wavelength>,
    /// Points all round.
    pub outline: Vec<Vector2<f64>>,
    /// Middle of the circle that fits it best.
    pub centre: Vector2<f64>,
    /// Width at half maximum, through the filters.
    pub thickness: f64,
    /// Of the crystal, m.
    length: f64,
    /// Of its face, in the lab.
    normal: Vector3<f64>,
    /// Mismatches at the wavelengths that are seen, with their weights.
    band: Vec<(Mismatch, f64)>,
}

/// Predicts measurements. Holds a copy of the experiment that it turns about.
#[derive(Debug, Clone)]
pub struct Model {
    setup: Setup,
    bearings: Bearings,
    indices: Indices,
    /// The tilt that the job gives each crystal, degrees, for rows that give none.
    tilts: Vec<f64>,
    /// Zero of the scale as the job has it, degrees.
    believed_zero: f64,
    /// -1 where readings fall when the tilt rises.
    sense: f64,
    view: View,
}

/// Differences of one measurement, predicted minus measured, in its unit, and what they are of.
pub type Differences = Vec<(&'static str, f64, f64)>;

impl Model {
    /// For an experiment whose cuts are known. The tilt's scale is that of the first crystal.
    #[must_use]
    pub fn new(setup: &Setup, view: View) -> Self {
        let mut setup = setup.clone();
        // from here on the cut is what the unknowns say
        for given in &mut setup.cut {
            (given.theta, given.phi, given.target) = (true, true, None);
        }
        let zero = setup.stage.and_then(|s| s.zero).map_or(0.0, Angle::degrees);
        let reversed = setup.stage.is_some_and(|s| s.reversed);
        Self {
            tilts: setup.crystals.iter().map(|c| c.orientation.tilt.degrees()).collect(),
            bearings: Bearings { zero, centre: [0.0; 2] },
            believed_zero: zero,
            sense: if reversed { -1.0 } else { 1.0 },
            indices: Indices::default(),
            setup,
            view,
        }
    }

    /// Gives the unknowns values.
    ///
    /// # Errors
    /// A value that the experiment cannot have.
    pub fn set(&mut self, unknowns: &[Unknown], values: &[f64]) -> Result<(), String> {
        for (unknown, value) in unknowns.iter().zip(values) {
            unknown.set(*value, &mut self.setup, &mut self.bearings)?;
            if unknown.acts == Acts::Tilt {
                self.tilts[unknown.crystal] = *value;
            }
        }
        Ok(())
    }

    /// The experiment as it is set now.
    #[must_use]
    pub fn setup(&self) -> &Setup {
        &self.setup
    }

    /// The tilt of a crystal, degrees, when the scales read as a row says.
    fn true_tilt(&self, settings: &Settings, crystal: usize) -> f64 {
        // reading = zero + sense tilt, and a row's tilt is counted from the believed zero
        if let (Some(reading), 0) = (settings.reading, crystal) {
            return self.sense * (reading - self.bearings.zero);
        }
        let off = if crystal == 0 { self.sense * (self.believed_zero - self.bearings.zero) } else { 0.0 };
        settings.tilt.unwrap_or(self.tilts[crystal]) + off
    }

    /// A crystal as the scales say it stands.
    fn turned(&self, settings: &Settings, index: usize) -> Crystal {
        let mut turned = self.setup.crystals[index].clone();
        turned.orientation.tilt = Angle::from_degrees(self.true_tilt(settings, index));
        if let Some(cross) = settings.cross_tilt {
            turned.orientation.cross_tilt = Angle::from_degrees(cross);
        }
        if let Some(temperature) = settings.temperature {
            turned.temperature = Temperature::celsius(temperature);
        }
        turned
    }

    fn emission(&mut self, settings: &Settings, label: &Label) -> Option<(usize, Emission)> {
        let pump = self.setup.pump();
        let index = label.crystal.unwrap_or(0);
        let signal = label.wavelength.or_else(|| self.setup.signals.for_pump(pump).first().copied())?;
        let photons = Photons::new(pump, signal)?;
        let turned = self.turned(settings, index);
        let triplet = Triplet::remembered(&mut self.indices, &turned, &photons).ok()?;
        Some((index, Emission::new(&turned, photons, &triplet)))
    }

    /// The rings that a label does not exclude, each once.
    fn candidates(&self, crystal: usize, emission: &Emission, label: &Label) -> Vec<Candidate> {
        let wanted =
            emission.wanted(&self.setup.crystals[crystal], self.setup.interaction).unwrap_or_default();
        let mut all: Vec<Candidate> = Vec::new();
        let mut names: Vec<(Landing, Polarization, Polarization)> = Vec::new();
        for roles in wanted {
            let (signal, idler) = polarizations(emission, roles);
            for (landing, own, twin) in [(Landing::Signal, signal, idler), (Landing::Idler, idler, signal)] {
                // a stated wavelength is that of the signal; degenerate photons have one ring for each polarization
                let known = names.iter().any(|(other, a, b)| {
                    (*a, *b) == (own, twin) && (*other == landing || emission.photons.degenerate())
                });
                let excluded = label.wavelength.is_some() && landing == Landing::Idler;
                if known || excluded {
                    continue;
                }
                names.push((landing, own, twin));
                let Some(mismatch) = emission.mismatch(roles) else { continue };
                let mismatch = if landing == Landing::Signal { mismatch } else { mismatch.exchanged() };
                all.push(Candidate { mismatch, roles, label: (landing, own), length: emission.length });
            }
        }
        let fits = |c: &Candidate| {
            let photon = label.photon.is_none_or(|p| p == c.label.0);
            match label.polarization {
                Some(polarization) => polarization == c.label.1 && (photon || label.wavelength.is_some()),
                None => photon || label.wavelength.is_some(),
            }
        };
        // degenerate photons share their rings, so the name of the photon says little beside the polarization
        if all.iter().any(fits) {
            all.retain(fits);
        } else if let Some(polarization) = label.polarization {
            all.retain(|c| c.label.1 == polarization);
        }
        all
    }

    /// How many rings a measurement could be of; 1 where its label decides.
    ///
    /// # Errors
    /// Indices that are not to be had, a photon that is not longer than the pump.
    pub fn choices(&mut self, measurement: &Measurement) -> Result<usize, String> {
        let several = self.setup.crystals.len() > 1;
        if several && measurement.label.crystal.is_none() {
            let names: Vec<&str> = self.setup.crystals.iter().map(|c| c.name.as_str()).collect();
            return Err(format!(
                "the job has several crystals: say in a column `crystal` which one shines, {}",
                names.join(" or ")
            ));
        }
        let Some((crystal, emission)) = self.emission(&measurement.settings, &measurement.label) else {
            return Err(self.no_emission(measurement));
        };
        Ok(match measurement.seen {
            Seen::Crossing(_) | Seen::CrossingAngles(_) => 1,
            _ => self.candidates(crystal, &emission, &measurement.label).len(),
        })
    }

    fn no_emission(&self, measurement: &Measurement) -> String {
        let pump = self.setup.pump();
        let signal = measurement.label.wavelength.unwrap_or_else(|| self.setup.signals()[0]);
        let Some(photons) = Photons::new(pump, signal) else {
            return format!("a photon of {signal} is not longer than the pump, {pump}");
        };
        let crystal = self.turned(&measurement.settings, measurement.label.crystal.unwrap_or(0));
        match Triplet::new(&crystal, &photons) {
            Err(error) => error.to_string(),
            Ok(_) => "the pump does not enter the crystal".into(),
        }
    }

    /// Predicted minus measured, for one of the rings it could be of; `None` where there is no such thing.
    pub fn differences(&mut self, measurement: &Measurement, choice: usize) -> Option<Differences> {
        let (crystal, emission) = self.emission(&measurement.settings, &measurement.label)?;
        if let Seen::Crossing(_) | Seen::CrossingAngles(_) = measurement.seen {
            return self.crossing_differences(crystal, &emission, &measurement.seen);
        }
        let candidates = self.candidates(crystal, &emission, &measurement.label);
        let candidate = candidates.get(choice)?;
        let distance = self.setup.screen.mm();
        let mut all = Vec::new();
        match measurement.seen {
            Seen::Ring { centre, radius } => {
                let ring = predicted(candidate)?;
                if let Some(seen) = centre {
                    let place = self.in_picture(ring.centre * distance);
                    all.extend([("x_mm", place.x, seen.x), ("y_mm", place.y, seen.y)]);
                }
                all.extend(radius.map(|seen| ("radius_mm", ring.radius * distance, seen)));
            }
            Seen::Cone { axis, half_angle } => {
                let ring = predicted(candidate)?;
                let signs = self.view.signs();
                if let Some(seen) = axis {
                    all.push(("axis_h_deg", signs.x * ring.axis.h_deg(), seen.x));
                    all.push(("axis_v_deg", signs.y * ring.axis.v_deg(), seen.y));
                }
                all.extend(half_angle.map(|seen| ("half_angle_deg", ring.half_angle.to_degrees(), seen)));
            }
            Seen::Edge(seen) => {
                let place = self.on_screen(seen) / distance;
                let beyond = Foot::of(&candidate.mismatch, place)?.beyond;
                all.push(("edge_mm", distance * beyond, 0.0));
            }
            Seen::Crossing(_) | Seen::CrossingAngles(_) => {}
        }
        Some(all)
    }

    /// All rings as they should stand in the picture, with so many points, and the light they are seen in; those that are
    /// not there are left out.
    #[must_use]
    pub fn traced(&mut self, settings: &Settings, points: usize, light: &Light) -> Vec<Traced> {
        let nominal = self.setup.signals()[0];
        let passed = middle(&light.signal, nominal).filter(|w| (w.nm() - nominal.nm()).abs() > 1e-6);
        let label = Label { wavelength: passed, ..Label::default() };
        let Some((crystal, emission)) = self.emission(settings, &label) else { return Vec::new() };
        let distance = self.setup.screen.mm();
        let [u, v] = emission.placement.face_axes();
        let normal = u.cross(&v);
        let mut all = Vec::new();
        for candidate in self.candidates(crystal, &emission, &label) {
            let band = self.band(settings, light, nominal, &candidate);
            let spread = spread(&band, candidate.length);
            for ring in rings(&candidate.mismatch, candidate.length).unwrap_or_default() {
                let place = |n: usize| {
                    let azimuth = std::f64::consts::TAU * n as f64 / points as f64;
                    let Lab(d) = ring.curve.at(&candidate.mismatch, azimuth)?.lab();
                    Some(self.in_picture(Vector2::new(d.x / d.z, d.y / d.z) * distance))
                };
                let Some(outline) = (0..points).map(place).collect::<Option<Vec<_>>>() else { continue };
                let centre = self.in_picture(ring.circle().0 * distance);
                // a ring whose inside is filled is as thick as it is wide
                let thickness = (ring.thickness.unwrap_or(ring.half_angle) + spread) * distance;
                let (label, length) = (candidate.label, candidate.length);
                let band = band.clone();
                all.push(Traced {
                    label,
                    wavelength: passed,
                    outline,
                    centre,
                    thickness,
                    length,
                    normal,
                    band,
                });
            }
        }
        all
    }

    /// The mismatches of a candidate's photon at all wavelengths that its filters let pass, with their weights.
    fn band(
        &mut self,
        settings: &Settings,
        light: &Light,
        nominal: Wavelength,
        of: &Candidate,
    ) -> Vec<(Mismatch, f64)> {
        // sinc^2 has no Fourier component beyond exp(2i phase): enough for phases that differ by 300 rad across the filter
        const WAVELENGTHS: usize = 101;
        let pump = self.setup.pump();
        let Some(twin) = nominal.partner(pump) else { return Vec::new() };
        let own = of.label.0 == Landing::Signal;
        let (filters, nominal) = if own { (&light.signal, nominal) } else { (&light.idler, twin) };
        let mut all = Vec::new();
        for (wavelength, weight) in samples(filters, nominal, WAVELENGTHS) {
            let Some(partner) = wavelength.partner(pump) else { continue };
            let signal = if own { wavelength } else { partner };
            let label = Label { wavelength: Some(signal), ..Label::default() };
            let Some((_, emission)) = self.emission(settings, &label) else { continue };
            let Some(mismatch) = emission.mismatch(of.roles) else { continue };
            let mismatch = if own { mismatch } else { mismatch.exchanged() };
            // photons are counted per d^2q d omega: k^2/(lambda_s lambda_i), as a camera's picture has it
            let density = 1.0 / (wavelength.si().powi(3) * partner.si());
            all.push((mismatch, weight * density));
        }
        all
    }

    /// How bright a traced ring's photon is at a place in the picture, over all that its filters let pass:
    /// sinc^2(Delta_k L/2) (d.w) (d.z)^3 as a camera's picture has it, with w the face's normal.
    #[must_use]
    pub fn brightness(&self, ring: &Traced, place: Vector2<f64>) -> f64 {
        let place = self.on_screen(place) / self.setup.screen.mm();
        let to = Direction::new(Lab(place.push(1.0)));
        let Lab(d) = to.lab();
        let shine = |(mismatch, weight): &(Mismatch, f64)| {
            let value = mismatch.at(mismatch.tangential(to)).map(|at| at.value);
            value.map_or(0.0, |value| weight * phase_matching_factor(value, ring.length))
        };
        d.dot(&ring.normal) * d.z.powi(3) * ring.band.iter().map(shine).sum::<f64>()
    }

    /// A direction as it is seen: horizontal and vertical angle in degrees, or place in the picture in mm.
    fn shown(&self, direction: Direction, angles: bool) -> Vector2<f64> {
        if angles {
            return Vector2::new(direction.h_deg(), direction.v_deg()).component_mul(&self.view.signs());
        }
        let Lab(d) = direction.lab();
        self.in_picture(d.xy() / d.z * self.setup.screen.mm())
    }

    /// The nearest of the predicted crossings.
    fn crossing_differences(&self, crystal: usize, emission: &Emission, seen: &Seen) -> Option<Differences> {
        let (names, seen, angles) = match seen {
            Seen::Crossing(seen) => (["crossing_x_mm", "crossing_y_mm"], *seen, false),
            Seen::CrossingAngles(seen) => (["crossing_h_deg", "crossing_v_deg"], *seen, true),
            _ => return None,
        };
        let (points, _) = self.crossings(crystal, emission)?;
        let places = points.iter().map(|d| self.shown(*d, angles));
        let away = |p: &Vector2<f64>| (p - seen).norm_squared();
        let nearest = places.min_by(|a, b| away(a).total_cmp(&away(b)))?;
        Some(vec![(names[0], nearest.x, seen.x), (names[1], nearest.y, seen.y)])
    }

    /// Where the rings of opposite polarization of a crystal cross, and the assignment whose ring was traced.
    fn crossings(&self, crystal: usize, emission: &Emission) -> Option<(Vec<Direction>, Roles)> {
        let wanted = emission.wanted(&self.setup.crystals[crystal], self.setup.interaction).ok()?;
        let roles = *wanted.iter().find(|r| r.signal != r.idler)?;
        let (one, two) = (emission.mismatch(roles)?, emission.mismatch(roles.exchanged())?);
        curves(&two).ok()?;
        let curve = curves(&one).ok()?.into_iter().next()?;
        let met = meet(matching::Traced { mismatch: &one, curve: &curve }, &two);
        let points: Vec<Direction> =
            met.into_iter().filter(|(_, how)| *how != Meeting::Coincide).map(|(c, _)| c.direction).collect();
        (!points.is_empty()).then_some((points, roles))
    }

    /// From the screen to the picture, mm.
    fn in_picture(&self, place: Vector2<f64>) -> Vector2<f64> {
        (place + Vector2::from(self.bearings.centre)).component_mul(&self.view.signs())
    }

    /// From the picture to the screen, mm.
    fn on_screen(&self, place: Vector2<f64>) -> Vector2<f64> {
        place.component_mul(&self.view.signs()) - Vector2::from(self.bearings.centre)
    }
}

/// By how much the radii of rings at the ends of a band differ, in units of the distance: where filters let pass at least
/// half of what they do at best.
fn spread(band: &[(Mismatch, f64)], length: f64) -> f64 {
    let most = band.iter().map(|(_, weight)| *weight).fold(0.0, f64::max);
    let lit = || band.iter().filter(|(_, weight)| *weight >= 0.5 * most);
    let radius = |wave: Option<&(Mismatch, f64)>| Some(rings(&wave?.0, length).ok()?.first()?.circle().1);
    match (radius(lit().next()), radius(lit().next_back())) {
        (Some(first), Some(last)) => (last - first).abs(),
        _ => 0.0,
    }
}

fn polarizations(emission: &Emission, roles: Roles) -> (Polarization, Polarization) {
    let media = &emission.media;
    (media.signal.polarization(roles.signal), media.idler.polarization(roles.idler))
}

/// The first ring of a candidate, or what stands for it where there is none.
fn predicted(candidate: &Candidate) -> Option<Predicted> {
    if let Ok(all) = rings(&candidate.mismatch, candidate.length)
        && let Some(ring) = all.first()
    {
        let (centre, radius) = ring.circle();
        return Some(Predicted { axis: ring.axis, half_angle: ring.half_angle, centre, radius });
    }
    absent(&candidate.mismatch)
}

/// A ring that is not there has a negative radius: where Delta_k is least, Delta_0 + H psi^2 k0^2/2 = 0 gives psi^2 < 0,
/// and -sqrt(-psi^2) leads on smoothly enough for a search to find its way back.
fn absent(mismatch: &Mismatch) -> Option<Predicted> {
    let lowest = mismatch.stationary(mismatch.along_pump())?;
    let axis = mismatch.direction(lowest.q)?;
    let [uu, _, vv] = lowest.hessian;
    let bend = 0.5 * (uu + vv) * mismatch.k0_signal().powi(2);
    let psi = (2.0 * lowest.value.max(0.0) / bend.max(f64::MIN_POSITIVE)).sqrt();
    let Lab(d) = axis.lab();
    Some(Predicted { axis, half_angle: -psi, centre: Vector2::new(d.x / d.z, d.y / d.z), radius: -psi })
}
