//! The phase-matching curve: cut angle against signal wavelength, for all data sets of the crystal.

use std::f64::consts::FRAC_PI_2;
use std::fmt::Write as _;

use rayon::prelude::*;

use super::camera::broken;
use super::drawing::{Anchor, BLUE, Drawing, Extent, GREY, INK, ORANGE, Pen, nice_step, pen};
use crate::frame::{Cut, Orientation};
use crate::job::Setup;
use crate::matching::{Emission, Interaction, Photons, Process, Scan, Status, Target, Triplet, roots};
use crate::material::Optic;
use crate::optics::Crystal;
use crate::quantity::{Angle, Wavelength, tidy};

/// theta of one data set, process and target at one wavelength.
#[derive(Debug, Clone)]
pub struct CutPoint {
    /// Of the photon called signal.
    pub signal: Wavelength,
    /// Index of the data set.
    pub dataset: usize,
    /// Polarizations.
    pub process: Process,
    /// Collinear, or the angle asked for.
    pub target: Target,
    /// From the smallest on, radians; empty where nothing matches.
    pub thetas: Vec<f64>,
}

/// All of them.
#[derive(Debug, Clone)]
pub struct Curves {
    crystal: Crystal,
    targets: [Target; 2],
    points: Vec<CutPoint>,
}

/// Number of wavelengths.
const COUNT: usize = 73;

impl Curves {
    /// For signals from 1.61 to 2.63 pump wavelengths (shares of the energy 0.62 to 0.38), collinear and at the angle
    /// that the job's cut is made for, 3 deg without one; normal incidence, along the job's phi.
    ///
    /// # Errors
    /// A sentence: several crystals, or polarizations that the crystal does not have.
    pub fn of(setup: &Setup) -> Result<Self, String> {
        let crystal = setup.only_crystal("picture --view cut")?.clone();
        let crystal = Crystal { orientation: Orientation::default(), ..crystal };
        // the crossings of biaxial crystals cost too much for a curve that nobody asked for
        let two =
            matches!(setup.interaction, Interaction::Two) && crystal.material.file.optic == Optic::Uniaxial;
        let three = 3f64.to_radians();
        let wanted = setup.cut.first().and_then(|c| c.target).filter(|t| *t != Target::Collinear);
        let open = wanted.unwrap_or(if two { Target::Crossing(three) } else { Target::HalfAngle(three) });
        let targets = [Target::Collinear, open];
        let shares: Vec<f64> = (0..COUNT).map(|n| 0.62 - 0.24 * n as f64 / (COUNT - 1) as f64).collect();
        let pump = setup.pump();
        let at = |share: &f64| {
            points(&crystal, pump, Wavelength::metres(pump.si() / share), setup.interaction, targets)
        };
        let all: Result<Vec<Vec<CutPoint>>, String> = shares.par_iter().map(at).collect();
        Ok(Self { crystal, targets, points: all?.into_iter().flatten().collect() })
    }

    /// A row per data set, process, target and wavelength.
    #[must_use]
    pub fn csv(&self) -> String {
        let mut out = String::from("signal_nm,dataset,process,target,theta_deg,extrapolated,status\n");
        for p in &self.points {
            let set = &self.crystal.material.sets()[p.dataset].id;
            let mut row = |theta: String, status: Status| {
                let target = target_words(p.target);
                let _ =
                    writeln!(out, "{},{set},{},{target},{theta},false,{status}", p.signal.nm(), p.process);
            };
            if p.thetas.is_empty() {
                row(String::new(), Status::NoPhaseMatching);
            }
            p.thetas.iter().for_each(|t| row(tidy(t.to_degrees()).to_string(), Status::Ok));
        }
        out
    }

    /// Processes in the order in which they appear.
    fn processes(&self) -> Vec<Process> {
        let mut all: Vec<Process> = Vec::new();
        for p in &self.points {
            if !all.contains(&p.process) {
                all.push(p.process);
            }
        }
        all
    }
}

fn points(
    crystal: &Crystal,
    pump: Wavelength,
    signal: Wavelength,
    interaction: Interaction,
    targets: [Target; 2],
) -> Result<Vec<CutPoint>, String> {
    let Some(photons) = Photons::new(pump, signal) else { return Ok(Vec::new()) };
    let mut all = Vec::new();
    for dataset in 0..crystal.material.sets().len() {
        let crystal =
            if dataset == crystal.dataset { crystal.clone() } else { crystal.with_dataset(dataset) };
        let Ok(triplet) = Triplet::new(&crystal, &photons) else { continue };
        let emission = |theta: f64| {
            let cut = Cut { theta: Angle::radians(theta), ..crystal.cut };
            Emission::new(&Crystal { cut, ..crystal.clone() }, photons, &triplet)
        };
        let start = emission(0.5);
        for roles in start.wanted(&crystal, interaction)? {
            for target in targets {
                let intervals = if target == Target::Collinear { 180 } else { 90 };
                let scan = Scan { from: 0.0, to: FRAC_PI_2, intervals };
                let found = roots(&mut |theta| target.residual(&emission(theta), roles), scan);
                let thetas = found.into_iter().map(|r| r.x).collect();
                all.push(CutPoint { signal, dataset, process: start.process(roles), target, thetas });
            }
        }
    }
    Ok(all)
}

fn target_words(target: Target) -> String {
    let deg = |a: f64| format!("{} deg", tidy((a.to_degrees() * 1e6).round() * 1e-6));
    match target {
        Target::Collinear => "collinear".into(),
        Target::HalfAngle(a) => format!("half angle {}", deg(a)),
        Target::Crossing(a) => format!("crossing at {}", deg(a)),
        Target::Separation(a) => format!("separation {}", deg(a)),
        Target::Beamlike => "beamlike".into(),
        Target::Touching => "touching rings".into(),
    }
}

/// From wavelength and theta to the drawing.
struct Plot {
    frame: Extent,
    nm: (f64, f64),
    deg: (f64, f64),
}

impl Plot {
    fn at(&self, nm: f64, deg: f64) -> (f64, f64) {
        let f = &self.frame;
        let part = |v: f64, (a, b): (f64, f64)| (v - a) / (b - a);
        (f.left + (f.right - f.left) * part(nm, self.nm), f.bottom - (f.bottom - f.top) * part(deg, self.deg))
    }
}

/// The figure.
#[must_use]
pub fn cut_curve(setup: &Setup, curves: &Curves) -> Drawing {
    let mut d = Drawing::new(760.0, 640.0, "Cut angle against signal wavelength");
    let thetas = || curves.points.iter().flat_map(|p| p.thetas.iter().map(|t| t.to_degrees()));
    let (low, high) = thetas().fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), t| (l.min(t), h.max(t)));
    let (low, high) = if low <= high { (low, high) } else { (0.0, 90.0) };
    let margin = 0.08 * (high - low).max(1.0);
    let pump = setup.pump().nm();
    let frame = Extent { left: 70.0, top: 40.0, right: 730.0, bottom: 520.0 };
    let plot = Plot { frame, nm: (pump / 0.62, pump / 0.38), deg: (low - margin, high + margin) };
    axes(&mut d, &plot);
    d.clip(frame);
    let mut labels = Vec::new();
    for (n, process) in curves.processes().into_iter().enumerate() {
        for target in curves.targets {
            let colour = if target == Target::Collinear { BLUE } else { ORANGE };
            let dash = match (target == Target::Collinear, n) {
                (true, 0) => "",
                (true, _) => "12 4",
                (false, 0) => "6 3",
                (false, _) => "2 3",
            };
            if target.needs_two_rings() && n > 0 {
                // crossings belong to both processes
                continue;
            }
            band(&mut d, &plot, curves, process, target, colour);
            let own = own_line(curves, process, target);
            let placed: Vec<_> = own.iter().map(|(nm, deg)| plot.at(*nm, *deg)).collect();
            if placed.len() > 1 {
                d.path(&placed, Pen { colour, width: 2.0, dash }, false);
                let share = if n == 0 { 0.2 } else { 0.8 };
                let point = placed[(share * placed.len() as f64) as usize];
                labels.push((point, format!("{process}, {}", target_words(target)), colour));
            }
        }
    }
    d.unclip();
    for (point, text, colour) in labels {
        d.label(point, 12.0, &text, colour, frame);
    }
    captions(&mut d, setup, curves);
    d
}

/// First theta of the job's own data set at each wavelength.
fn own_line(curves: &Curves, process: Process, target: Target) -> Vec<(f64, f64)> {
    let own =
        |p: &&CutPoint| p.dataset == curves.crystal.dataset && p.process == process && p.target == target;
    let points = curves.points.iter().filter(own);
    points.filter_map(|p| Some((p.signal.nm(), p.thetas.first()?.to_degrees()))).collect()
}

/// From the least to the largest first theta of all data sets.
fn band(
    d: &mut Drawing,
    plot: &Plot,
    curves: &Curves,
    process: Process,
    target: Target,
    colour: &'static str,
) {
    let mut rows: Vec<(f64, f64, f64)> = Vec::new();
    for p in curves.points.iter().filter(|p| p.process == process && p.target == target) {
        let Some(theta) = p.thetas.first().map(|t| t.to_degrees()) else { continue };
        match rows.last_mut() {
            Some(last) if last.0 == p.signal.nm() => {
                (last.1, last.2) = (last.1.min(theta), last.2.max(theta))
            }
            _ => rows.push((p.signal.nm(), theta, theta)),
        }
    }
    let low = rows.iter().map(|r| plot.at(r.0, r.1));
    let high = rows.iter().rev().map(|r| plot.at(r.0, r.2));
    let outline: Vec<_> = low.chain(high).collect();
    if outline.len() > 3 {
        d.shape(&outline, colour, 0.18);
    }
}

fn axes(d: &mut Drawing, plot: &Plot) {
    let f = plot.frame;
    let step = nice_step(plot.nm.1 - plot.nm.0, 8.0);
    let mut nm = (plot.nm.0 / step).ceil() * step;
    while nm <= plot.nm.1 {
        let (x, _) = plot.at(nm, plot.deg.0);
        d.line((x, f.top), (x, f.bottom), pen("#d8d8d8", 0.8));
        d.text((x, f.bottom + 18.0), 12.0, Anchor::Middle, &format!("{}", tidy(nm)));
        nm += step;
    }
    let step = nice_step(plot.deg.1 - plot.deg.0, 8.0);
    let mut deg = (plot.deg.0 / step).ceil() * step;
    while deg <= plot.deg.1 {
        let (_, y) = plot.at(plot.nm.0, deg);
        d.line((f.left, y), (f.right, y), pen("#d8d8d8", 0.8));
        d.text((f.left - 8.0, y + 4.0), 12.0, Anchor::End, &format!("{}", tidy((deg * 1e6).round() * 1e-6)));
        deg += step;
    }
    d.path(
        &[(f.left, f.top), (f.right, f.top), (f.right, f.bottom), (f.left, f.bottom)],
        pen(INK, 1.0),
        true,
    );
    d.text((0.5 * (f.left + f.right), f.bottom + 38.0), 12.0, Anchor::Middle, "signal wavelength in nm");
    d.text((12.0, 24.0), 12.0, Anchor::Start, "theta in deg (face normal to Z, normal incidence)");
    let (x, _) = plot.at(2.0 * plot.nm.0 * 0.62, plot.deg.0);
    d.line((x, f.top), (x, f.bottom), pen(GREY, 1.2));
    d.label((x, f.bottom - 4.0), 11.5, "degenerate", GREY, f);
}

fn captions(d: &mut Drawing, setup: &Setup, curves: &Curves) {
    let material = &curves.crystal.material;
    let mut used: Vec<&str> = Vec::new();
    for p in &curves.points {
        let id = material.sets()[p.dataset].id.as_str();
        if p.dataset != curves.crystal.dataset && !used.contains(&id) {
            used.push(id);
        }
    }
    let own = &curves.crystal.set().id;
    let spread = if used.is_empty() {
        "no other data set covers these wavelengths".to_string()
    } else {
        format!("bands: from the lowest to the highest of all sets ({own}, {})", used.join(", "))
    };
    let text = format!(
        "{}: lines for data set {own}; {spread}. Pump {:.3} nm, phi {:.3} deg. Each set is shown where it is valid.",
        material.id,
        setup.pump().nm(),
        curves.crystal.cut.phi.degrees()
    );
    for (n, line) in broken(&text, 108).iter().enumerate() {
        d.text((12.0, 586.0 + 17.0 * n as f64), 12.0, Anchor::Start, line);
    }
}
