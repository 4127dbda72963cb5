//! What the bench would show if the unknowns had certain values.

use nalgebra::{Vector2, Vector3};

use super::measured::{Label, Measurement, Seen, Settings, View};
use super::unknown::{Bearings, Unknown};
use crate::frame::{Direction, Lab};
use crate::job::Setup;
use crate::matching::{
    self, Emission, Landing, Meeting, Mismatch, Photons, Roles, Triplet, curves, meet, rings,
};
use crate::optics::{Indices, Polarization};
use crate::quantity::{Angle, Temperature, Wavelength};

/// A ring that could be the one that was seen.
struct Candidate {
    mismatch: Mismatch,
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
    /// Points all round.
    pub outline: Vec<Vector2<f64>>,
    /// Middle of the circle that fits it best.
    pub centre: Vector2<f64>,
    /// Width at half maximum.
    pub thickness: f64,
}

/// Predicts measurements. Holds a copy of the experiment that it turns about.
#[derive(Debug, Clone)]
pub struct Model {
    setup: Setup,
    bearings: Bearings,
    indices: Indices,
    /// The tilt that the job has, degrees, for rows that give none.
    tilt: f64,
    /// Zero of the scale as the job has it, degrees.
    believed_zero: f64,
    /// -1 where readings fall when the tilt rises.
    sense: f64,
    view: View,
}

/// Differences of one measurement, predicted minus measured, in its unit, and what they are of.
pub type Differences = Vec<(&'static str, f64, f64)>;

impl Model {
    /// For an experiment with one crystal whose cut is known.
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
            tilt: setup.crystals[0].orientation.tilt.degrees(),
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
            if unknown.name.ends_with("crystal.tilt") {
                self.tilt = *value;
            }
        }
        Ok(())
    }

    /// The experiment as it is set now.
    #[must_use]
    pub fn setup(&self) -> &Setup {
        &self.setup
    }

    /// The tilt of the crystal, degrees, when the scale reads as a row says.
    fn true_tilt(&self, settings: &Settings) -> f64 {
        // reading = zero + sense tilt, and a row's tilt is counted from the believed zero
        if let Some(reading) = settings.reading {
            return self.sense * (reading - self.bearings.zero);
        }
        settings.tilt.unwrap_or(self.tilt) + self.sense * (self.believed_zero - self.bearings.zero)
    }

    fn emission(&mut self, settings: &Settings, wavelength: Option<Wavelength>) -> Option<Emission> {
        let pump = self.setup.pump();
        let signal = wavelength.or_else(|| self.setup.signals.for_pump(pump).first().copied())?;
        let photons = Photons::new(pump, signal)?;
        let tilt = self.true_tilt(settings);
        let crystal = &mut self.setup.crystals[0];
        let mut turned = crystal.clone();
        turned.orientation.tilt = Angle::from_degrees(tilt);
        if let Some(cross) = settings.cross_tilt {
            turned.orientation.cross_tilt = Angle::from_degrees(cross);
        }
        if let Some(temperature) = settings.temperature {
            turned.temperature = Temperature::celsius(temperature);
        }
        let triplet = Triplet::remembered(&mut self.indices, &turned, &photons).ok()?;
        Some(Emission::new(&turned, photons, &triplet))
    }

    /// The rings that a label does not exclude, each once.
    fn candidates(&self, emission: &Emission, label: &Label) -> Vec<Candidate> {
        let wanted = emission.wanted(&self.setup.crystals[0], self.setup.interaction).unwrap_or_default();
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
                all.push(Candidate { mismatch, label: (landing, own), length: emission.length });
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
        let Some(emission) = self.emission(&measurement.settings, measurement.label.wavelength) else {
            return Err(self.no_emission(measurement));
        };
        Ok(match measurement.seen {
            Seen::Crossing(_) | Seen::CrossingAngles(_) => 1,
            _ => self.candidates(&emission, &measurement.label).len(),
        })
    }

    fn no_emission(&self, measurement: &Measurement) -> String {
        let pump = self.setup.pump();
        let signal = measurement.label.wavelength.unwrap_or_else(|| self.setup.signals()[0]);
        let Some(photons) = Photons::new(pump, signal) else {
            return format!("a photon of {signal} is not longer than the pump, {pump}");
        };
        let mut crystal = self.setup.crystals[0].clone();
        if let Some(degc) = measurement.settings.temperature {
            crystal.temperature = Temperature::celsius(degc);
        }
        match Triplet::new(&crystal, &photons) {
            Err(error) => error.to_string(),
            Ok(_) => "the pump does not enter the crystal".into(),
        }
    }

    /// Predicted minus measured, for one of the rings it could be of; `None` where there is no such thing.
    pub fn differences(&mut self, measurement: &Measurement, choice: usize) -> Option<Differences> {
        let emission = self.emission(&measurement.settings, measurement.label.wavelength)?;
        if let Seen::Crossing(_) | Seen::CrossingAngles(_) = measurement.seen {
            return self.crossing_differences(&emission, &measurement.seen);
        }
        let candidates = self.candidates(&emission, &measurement.label);
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
                all.push(("edge_mm", distance * beside(&candidate.mismatch, place)?, 0.0));
            }
            Seen::Crossing(_) | Seen::CrossingAngles(_) => {}
        }
        Some(all)
    }

    /// All rings as they should stand in the picture, with so many points; those that are not there are left out.
    #[must_use]
    pub fn traced(&mut self, settings: &Settings, points: usize) -> Vec<Traced> {
        let Some(emission) = self.emission(settings, None) else { return Vec::new() };
        let distance = self.setup.screen.mm();
        let mut all = Vec::new();
        for candidate in self.candidates(&emission, &Label::default()) {
            for ring in rings(&candidate.mismatch, candidate.length).unwrap_or_default() {
                let place = |n: usize| {
                    let azimuth = std::f64::consts::TAU * n as f64 / points as f64;
                    let Lab(d) = ring.curve.at(&candidate.mismatch, azimuth)?.lab();
                    Some(self.in_picture(Vector2::new(d.x / d.z, d.y / d.z) * distance))
                };
                let Some(outline) = (0..points).map(place).collect::<Option<Vec<_>>>() else { continue };
                let centre = self.in_picture(ring.circle().0 * distance);
                // a ring whose inside is filled is as thick as it is wide
                let thickness = ring.thickness.unwrap_or(ring.half_angle) * distance;
                all.push(Traced { label: candidate.label, outline, centre, thickness });
            }
        }
        all
    }

    /// The nearest of the predicted crossings.
    fn crossing_differences(&self, emission: &Emission, seen: &Seen) -> Option<Differences> {
        let points = crossings(emission, self)?;
        let distance = self.setup.screen.mm();
        let signs = self.view.signs();
        let (names, seen, places): ([&'static str; 2], Vector2<f64>, Vec<Vector2<f64>>) = match seen {
            Seen::Crossing(seen) => {
                let place = |d: &Direction| {
                    let Lab(d) = d.lab();
                    self.in_picture(Vector2::new(d.x / d.z, d.y / d.z) * distance)
                };
                (["crossing_x_mm", "crossing_y_mm"], *seen, points.iter().map(place).collect())
            }
            Seen::CrossingAngles(seen) => {
                let place = |d: &Direction| Vector2::new(signs.x * d.h_deg(), signs.y * d.v_deg());
                (["crossing_h_deg", "crossing_v_deg"], *seen, points.iter().map(place).collect())
            }
            _ => return None,
        };
        let away = |p: &&Vector2<f64>| (*p - seen).norm_squared();
        let nearest = places.iter().min_by(|a, b| away(a).total_cmp(&away(b)))?;
        Some(vec![(names[0], nearest.x, seen.x), (names[1], nearest.y, seen.y)])
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

/// How far a place on the screen lies outside a ring (negative inside), in units of the distance: by steps along the
/// gradient of Delta_k until it is zero.
fn beside(mismatch: &Mismatch, place: Vector2<f64>) -> Option<f64> {
    const STEPS: usize = 6;
    let start = Vector3::new(place.x, place.y, 1.0).normalize();
    let mut d = start;
    let mut outside = true;
    for step in 0..STEPS {
        let there = mismatch.towards(d)?;
        if step == 0 {
            outside = there.value > 0.0;
        }
        let across = there.gradient - d * there.gradient.dot(&d);
        let square = across.norm_squared();
        if square == 0.0 {
            return None;
        }
        let mut by = across * (-there.value / square);
        // a point near the middle of a ring is sent far away by its small gradient
        let longest = 0.1;
        if by.norm() > longest {
            by *= longest / by.norm();
        }
        d = (d + by).normalize();
        if by.norm() < 1e-9 {
            break;
        }
    }
    let there = Vector2::new(d.x / d.z, d.y / d.z);
    let distance = (there - place).norm();
    Some(if outside { distance } else { -distance })
}

/// Where the rings of opposite polarization cross.
fn crossings(emission: &Emission, model: &Model) -> Option<Vec<Direction>> {
    let wanted = emission.wanted(&model.setup.crystals[0], model.setup.interaction).ok()?;
    let roles = *wanted.iter().find(|r| r.signal != r.idler)?;
    let (one, two) = (emission.mismatch(roles)?, emission.mismatch(roles.exchanged())?);
    curves(&two).ok()?;
    let curve = curves(&one).ok()?.into_iter().next()?;
    let met = meet(matching::Traced { mismatch: &one, curve: &curve }, &two);
    let points: Vec<Direction> =
        met.into_iter().filter(|(_, how)| *how != Meeting::Coincide).map(|(c, _)| c.direction).collect();
    (!points.is_empty()).then_some(points)
}
