//! Rings in a frame: first where the light agrees with rings that the priors allow, then their crests all round.

use nalgebra::{Matrix3, Vector2, Vector3};

use super::frame::{Frame, Outline};
use super::measured::{Label, Measurement, Seen, Settings};
use super::model::{Model, Traced};
use super::solve::{FitError, Fitted, Question, fit};
use crate::picture::Light;

/// Azimuths at which a crest is looked for.
const BINS: usize = 72;
/// Rays that are averaged for each.
const RAYS: usize = 5;

/// A frame and how the mount stood.
#[derive(Debug, Clone)]
pub struct Exposure {
    /// The frame.
    pub frame: Frame,
    /// How the mount stood.
    pub settings: Settings,
}

/// What was found in frames.
#[derive(Debug, Clone)]
pub struct Found {
    /// The fit.
    pub fitted: Fitted,
    /// The question with the crests as its data.
    pub question: Question,
    /// Rings as fitted, for each frame.
    pub outlines: Vec<Vec<Outline>>,
}

/// Finds the rings of a question without data in frames, and fits. The distance in the question's setup must be that of the
/// sensor or the focal length of its lens.
///
/// # Errors
/// Frames without rings where the priors allow them.
pub fn fit_frames(question: &Question, exposures: &[Exposure]) -> Result<Found, FitError> {
    const PASSES: usize = 3;
    if question.setup.crystals.len() > 1 {
        return Err(FitError(
            "a frame does not say which crystal a ring is of: block one crystal's light or turn it away, and fit a job with \
             the other alone; or measure the rings and name the crystals in a table (column crystal)"
                .into(),
        ));
    }
    let light = Light::of(&question.setup);
    let clean: Vec<Exposure> =
        exposures.iter().map(|e| Exposure { frame: e.frame.cleaned(), ..e.clone() }).collect();
    let mut model = Model::new(&question.setup, question.view);
    let mut values = brightest(question, &clean, &mut model, &light)?;
    let mut answer = None;
    for pass in 0..PASSES {
        // the first look is wide, for what the scan does not turn
        let widen = if pass == 0 { 1.5 } else { 0.8 };
        model.set(&question.unknowns, &values).map_err(FitError)?;
        let data: Vec<Measurement> =
            clean.iter().enumerate().flat_map(|(n, e)| crests(&mut model, e, n, widen, &light)).collect();
        if data.len() < BINS / 6 {
            return Err(FitError(format!(
                "no ring stands out in the frame: {} of {} places show a crest; expose longer, or look at --pixel-pitch, \
                 --distance or --focal-length, --beam-centre and the job's cut",
                data.len(),
                BINS
            )));
        }
        let again = Question { data, robust: true, ..question.clone() };
        let fitted = fit(&again)?;
        values.clone_from(&fitted.values);
        answer = Some((fitted, again));
    }
    let (fitted, question) = answer.ok_or_else(|| FitError("no pass was made".into()))?;
    model.set(&question.unknowns, &values).map_err(FitError)?;
    let outlines = clean
        .iter()
        .map(|e| model.traced(&e.settings, 4 * BINS, &light).into_iter().map(|ring| ring.outline).collect())
        .collect();
    Ok(Found { fitted, question, outlines })
}

/// Values of the unknowns at which the rings lie on most light: the unknown that tunes is scanned over its prior.
fn brightest(
    question: &Question,
    exposures: &[Exposure],
    model: &mut Model,
    light: &Light,
) -> Result<Vec<f64>, FitError> {
    const REACH: i32 = 40;
    let priors: Vec<f64> = question.unknowns.iter().map(|u| u.prior).collect();
    let Some(tuner) = question.tuner() else { return Ok(priors) };
    let mut best: Option<(f64, Vec<f64>)> = None;
    let mut blurred: Vec<Frame> = Vec::new();
    for n in -REACH..=REACH {
        let unknown = &question.unknowns[tuner];
        let mut values = priors.clone();
        values[tuner] += 3.0 * unknown.scale * f64::from(n) / f64::from(REACH);
        if model.set(&question.unknowns, &values).is_err() {
            continue;
        }
        let mut shine = 0.0;
        for (k, exposure) in exposures.iter().enumerate() {
            let rings = model.traced(&exposure.settings, BINS, light);
            if blurred.len() <= k {
                let thick = rings.first().map_or(5.0 * exposure.frame.pitch, |r| r.thickness);
                let reach = (0.25 * thick / exposure.frame.pitch).round().clamp(1.0, 40.0);
                blurred.push(exposure.frame.blurred(reach as usize));
            }
            shine += rings.iter().map(|ring| mean_light(&blurred[k], &ring.outline)).sum::<f64>();
        }
        if best.as_ref().is_none_or(|(most, _)| shine > *most) {
            best = Some((shine, values));
        }
    }
    let found = best.filter(|(shine, _)| *shine > 0.0).map(|(_, values)| values);
    found.ok_or_else(|| FitError("no light lies where the priors allow rings: is the frame empty?".into()))
}

/// Mean value along an outline; what lies beyond the frame counts as dark.
fn mean_light(frame: &Frame, outline: &Outline) -> f64 {
    outline.iter().filter_map(|place| frame.at(*place)).sum::<f64>() / outline.len().max(1) as f64
}

/// The crests of all rings of a frame, as points on rings.
fn crests(
    model: &mut Model,
    exposure: &Exposure,
    number: usize,
    widen: f64,
    light: &Light,
) -> Vec<Measurement> {
    let rings = model.traced(&exposure.settings, BINS * RAYS, light);
    let noise = f64::from(exposure.frame.noise());
    let mut all = Vec::new();
    for (index, ring) in rings.iter().enumerate() {
        let others: Vec<&Traced> =
            rings.iter().enumerate().filter(|(i, _)| *i != index).map(|(_, r)| r).collect();
        for rays in ring.outline.chunks_exact(RAYS) {
            let middle = rays[RAYS / 2];
            let reach = (widen * ring.thickness).min(0.5 * (middle - ring.centre).norm());
            // where another ring is near, its light moves the crest
            let near = |p: &Vector2<f64>| (p - middle).norm() < 1.5 * ring.thickness;
            if others.iter().any(|other| other.outline.iter().any(near)) {
                continue;
            }
            let Some(seen) = crest(&exposure.frame, ring.centre, rays, reach, noise) else { continue };
            if let Some(place) = matched(model, ring, middle, reach, seen) {
                all.push(Measurement {
                    line: number + 1,
                    settings: exposure.settings,
                    label: Label {
                        photon: Some(ring.label.0),
                        polarization: Some(ring.label.1),
                        wavelength: ring.wavelength,
                        crystal: None,
                    },
                    seen: Seen::Edge(place),
                    sigma: None,
                });
            }
        }
    }
    all
}

/// Where the light is brightest across a ring.
fn crest(
    frame: &Frame,
    centre: Vector2<f64>,
    rays: &[Vector2<f64>],
    reach: f64,
    noise: f64,
) -> Option<Vector2<f64>> {
    let steps = (2.0 * reach / (0.5 * frame.pitch)).ceil().clamp(16.0, 2000.0) as usize;
    let mut profile: Vec<(f64, f64)> = Vec::with_capacity(steps + 1);
    let middle = rays[rays.len() / 2] - centre;
    for n in 0..=steps {
        let off = reach * (2.0 * n as f64 / steps as f64 - 1.0);
        let value = |ray: &Vector2<f64>| {
            let out = ray - centre;
            frame.at(centre + out * ((out.norm() + off) / out.norm()))
        };
        let all: Option<Vec<f64>> = rays.iter().map(value).collect();
        let mean = all?.iter().sum::<f64>() / rays.len() as f64;
        profile.push(((middle.norm() + off).powi(2), mean));
    }
    // neighbouring samples are half a pixel apart and share their noise
    let averaged = (rays.len() * window(steps)).max(1) as f64;
    let square = summit(&profile, 5.0 * noise / averaged.sqrt())?;
    Some(centre + middle.normalize() * square.sqrt())
}

/// The crest as a ring of one wavelength has it. A filter's band widens rings unevenly, since their radius is no straight
/// line of the wavelength: the same summit is looked for in the light that the model expects along the ray, and what it
/// is off its own ring, in the square of the radius, is taken off the crest that was seen.
fn matched(
    model: &Model,
    ring: &Traced,
    middle: Vector2<f64>,
    reach: f64,
    seen: Vector2<f64>,
) -> Option<Vector2<f64>> {
    const STEPS: usize = 96;
    let out = middle - ring.centre;
    let (radius, along) = (out.norm(), out.normalize());
    let expected = |n: usize| {
        let at = radius + reach * (2.0 * n as f64 / STEPS as f64 - 1.0);
        (at * at, model.brightness(ring, ring.centre + along * at))
    };
    let profile: Vec<(f64, f64)> = (0..=STEPS).map(expected).collect();
    let off = summit(&profile, 0.0)? - radius * radius;
    let square = (seen - ring.centre).norm_squared() - off;
    (square > 0.0).then(|| ring.centre + along * square.sqrt())
}

/// On how many samples on each side a profile is averaged.
fn window(steps: usize) -> usize {
    (steps / 12).max(1)
}

/// Place of a profile's summit: a parabola through what is above half of the maximum, over the square of the distance from
/// the centre, in which sinc^2 is symmetric about its crest. `None` where it stands out by less than `least`.
fn summit(profile: &[(f64, f64)], least: f64) -> Option<f64> {
    let window = window(profile.len() - 1);
    let smooth: Vec<f64> = (0..profile.len())
        .map(|n| {
            let part = &profile[n.saturating_sub(window)..(n + window + 1).min(profile.len())];
            part.iter().map(|p| p.1).sum::<f64>() / part.len() as f64
        })
        .collect();
    let top = (0..smooth.len()).max_by(|a, b| smooth[*a].total_cmp(&smooth[*b]))?;
    let low = smooth.iter().copied().fold(f64::INFINITY, f64::min);
    let half = 0.5 * (smooth[top] + low);
    if smooth[top] - low < least {
        return None;
    }
    let first = (0..=top).rev().find(|n| smooth[*n] < half)?;
    let last = (top..smooth.len()).find(|n| smooth[*n] < half)?;
    let square = vertex(&profile[first + 1..last])?;
    (square > profile[first].0 && square < profile[last].0).then_some(square)
}

/// Place of the maximum of the parabola that fits points best.
fn vertex(points: &[(f64, f64)]) -> Option<f64> {
    let (from, to) = (points.first()?.0, points.last()?.0);
    let (shift, scale) = (0.5 * (from + to), 0.5 * (to - from));
    if points.len() < 5 || scale <= 0.0 {
        return None;
    }
    let (mut normal, mut right) = (Matrix3::zeros(), Vector3::zeros());
    for (x, y) in points {
        let u = (x - shift) / scale;
        let powers = Vector3::new(1.0, u, u * u);
        normal += powers * powers.transpose();
        right += powers * *y;
    }
    let c = normal.cholesky()?.solve(&right);
    (c.z < 0.0).then(|| shift - scale * 0.5 * c.y / c.z)
}
