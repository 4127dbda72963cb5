//! The phase-matching curve: cut angle against signal wavelength, for all data sets of the crystal.

use std::f64::consts::FRAC_PI_2;
use std::fmt::Write as _;

use rayon::prelude::*;

use super::camera::broken;
use super::drawing::{Anchor, BLUE, Drawing, Extent, GREY, INK, ORANGE, Pen, nice_step, pen};
use crate::frame::{Cut, Orientation};
use crate::job::Setup;
use crate::matching::{
    Actuator, ConesError, Emission, Interaction, Photons, Process, Roles, Scan, Status, Target, Triplet,
    roots, tuning_turn,
};
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
    /// theta, or phi where that decides: from the smallest on, radians; empty where nothing matches.
    pub angles: Vec<f64>,
}

/// All of them.
#[derive(Debug, Clone)]
pub struct Curves {
    crystal: Crystal,
    targets: [Target; 2],
    /// Whether phi decides the phase matching and not theta, as in XY cuts.
    by_phi: bool,
    points: Vec<CutPoint>,
}

/// Number of wavelengths.
const COUNT: usize = 73;

impl Curves {
    /// For signals from 1.61 to 2.63 pump wavelengths (shares of the energy 0.62 to 0.38), collinear and at the angle
    /// that the job's cut is made for, 3 deg without one; normal incidence, along the job's phi (or at its theta against phi
    /// where a change of theta does nothing in first order).
    ///
    /// # Errors
    /// Several crystals, the job's wavelengths outside its data set's range, or polarizations that the crystal does not have.
    pub fn of(setup: &Setup) -> Result<Self, ConesError> {
        let crystal = setup.only_crystal("picture --view cut").map_err(ConesError::Description)?.clone();
        let crystal = Crystal { orientation: Orientation::default(), ..crystal };
        Triplet::new(&crystal, &setup.photons())?;
        // the crossings of biaxial crystals cost too much for a curve that nobody asked for
        let two =
            matches!(setup.interaction, Interaction::Two) && crystal.material.file.optic == Optic::Uniaxial;
        let three = 3f64.to_radians();
        let wanted = setup.cut.first().and_then(|c| c.target).filter(|t| *t != Target::Collinear);
        let open = wanted.unwrap_or(if two { Target::Crossing(three) } else { Target::HalfAngle(three) });
        let targets = [Target::Collinear, open];
        let shares: Vec<f64> = (0..COUNT).map(|n| 0.62 - 0.24 * n as f64 / (COUNT - 1) as f64).collect();
        let pump = setup.pump();
        let by_phi = tunes_by_phi(setup, &crystal);
        let signals: Vec<Wavelength> =
            shares.iter().map(|share| Wavelength::metres(pump.si() / share)).collect();
        let tracks = tracks((&crystal, by_phi), (pump, &signals), setup.interaction, targets)?;
        let mut points: Vec<(usize, usize, CutPoint)> =
            tracks.par_iter().enumerate().flat_map_iter(|(n, track)| track.points(n)).collect();
        points.sort_by_key(|(place, track, _)| (*place, *track));
        Ok(Self { crystal, targets, by_phi, points: points.into_iter().map(|(.., p)| p).collect() })
    }

    /// A row per data set, process, target and wavelength.
    #[must_use]
    pub fn csv(&self) -> String {
        let angle = self.name();
        let mut out = format!("signal_nm,dataset,process,target,{angle}_deg,extrapolated,status\n");
        for p in &self.points {
            let set = &self.crystal.material.sets()[p.dataset].id;
            let mut row = |theta: String, status: Status| {
                let target = target_words(p.target);
                let _ =
                    writeln!(out, "{},{set},{},{target},{theta},false,{status}", p.signal.nm(), p.process);
            };
            if p.angles.is_empty() {
                row(String::new(), Status::NoPhaseMatching);
            }
            p.angles.iter().for_each(|t| row(tidy(t.to_degrees()).to_string(), Status::Ok));
        }
        out
    }

    fn name(&self) -> &'static str {
        if self.by_phi { "phi" } else { "theta" }
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

/// As [`crate::matching::tuning_turn`] finds it; theta where no cut is given.
fn tunes_by_phi(setup: &Setup, crystal: &Crystal) -> bool {
    if !setup.cut.first().is_some_and(|cut| cut.theta) || crystal.material.file.optic == Optic::Uniaxial {
        return false;
    }
    tuning(setup, crystal) == Some(Actuator::CrossTilt)
}

/// The turn with the larger effect; `None` where indices are not to be had.
pub(super) fn tuning(setup: &Setup, crystal: &Crystal) -> Option<Actuator> {
    let photons = setup.photons();
    let triplet = Triplet::new(crystal, &photons).ok()?;
    let emission = Emission::new(crystal, photons, &triplet);
    let roles = *emission.wanted(crystal, setup.interaction).ok()?.first()?;
    Some(tuning_turn(crystal, photons, &triplet, roles))
}

/// One wavelength of a track.
struct Stop {
    /// Index of the wavelength.
    place: usize,
    photons: Photons,
    triplet: Triplet,
    process: Process,
}

/// The curve of one data set, process and target: its wavelengths in order, as far as the data set is valid.
struct Track {
    crystal: Crystal,
    by_phi: bool,
    roles: Roles,
    target: Target,
    stops: Vec<Stop>,
}

/// Wavelengths between those at which the whole range of angles is searched; between them each solution is followed.
const STRIDE: usize = 6;
/// Half width of the search about the angle expected at the next wavelength, beside the step itself, radians.
const AROUND: f64 = 0.3 * std::f64::consts::PI / 180.0;

/// Ordered by data set, process, target.
fn tracks(
    (crystal, by_phi): (&Crystal, bool),
    (pump, signals): (Wavelength, &[Wavelength]),
    interaction: Interaction,
    targets: [Target; 2],
) -> Result<Vec<Track>, ConesError> {
    let mut all: Vec<Track> = Vec::new();
    for dataset in 0..crystal.material.sets().len() {
        let crystal =
            if dataset == crystal.dataset { crystal.clone() } else { crystal.with_dataset(dataset) };
        let first = all.len();
        for (place, signal) in signals.iter().enumerate() {
            let Some(photons) = Photons::new(pump, *signal) else { continue };
            let Ok(triplet) = Triplet::new(&crystal, &photons) else { continue };
            let start = emission((&crystal, by_phi), photons, &triplet, 0.5);
            for roles in start.wanted(&crystal, interaction).map_err(ConesError::Description)? {
                for target in targets {
                    let stop = Stop { place, photons, triplet, process: start.process(roles) };
                    let own = all[first..].iter_mut().find(|t| t.roles == roles && t.target == target);
                    match own {
                        Some(track) => track.stops.push(stop),
                        None => {
                            let crystal = crystal.clone();
                            let stops = vec![stop];
                            all.push(Track { crystal, by_phi, roles, target, stops });
                        }
                    }
                }
            }
        }
    }
    Ok(all)
}

fn emission(
    (crystal, by_phi): (&Crystal, bool),
    photons: Photons,
    triplet: &Triplet,
    angle: f64,
) -> Emission {
    let cut = match by_phi {
        true => Cut { phi: Angle::radians(angle), ..crystal.cut },
        false => Cut { theta: Angle::radians(angle), ..crystal.cut },
    };
    Emission::new(&Crystal { cut, ..crystal.clone() }, photons, triplet)
}

impl Track {
    /// The points with the index of their wavelength and that of the track.
    fn points(&self, track: usize) -> Vec<(usize, usize, CutPoint)> {
        let point = |(stop, angles): (&Stop, Vec<f64>)| {
            let (signal, dataset) = (stop.photons.signal, self.crystal.dataset);
            let point = CutPoint { signal, dataset, process: stop.process, target: self.target, angles };
            (stop.place, track, point)
        };
        self.stops.iter().zip(self.solved()).map(point).collect()
    }

    /// Solutions at every stop. The whole range is searched at some; between two of them that have equally many
    /// solutions these are followed, and where the number differs the stretch is halved.
    fn solved(&self) -> Vec<Vec<f64>> {
        let last = self.stops.len() - 1;
        let mut places: Vec<usize> = (0..last).step_by(STRIDE).collect();
        places.push(last);
        let searched: Vec<Vec<f64>> = places.par_iter().map(|n| self.search(*n)).collect();
        let stretches: Vec<(usize, usize)> = (1..places.len()).map(|n| (n - 1, n)).collect();
        let between: Vec<Vec<Vec<f64>>> = stretches
            .par_iter()
            .map(|(a, b)| self.between((places[*a], &searched[*a]), (places[*b], &searched[*b])))
            .collect();
        let mut all = vec![searched[0].clone()];
        for (inside, end) in between.into_iter().zip(&searched[1..]) {
            all.extend(inside);
            all.push(end.clone());
        }
        all
    }

    /// Solutions at the stops between two, which are left out.
    fn between(&self, (from, first): (usize, &[f64]), (to, last): (usize, &[f64])) -> Vec<Vec<f64>> {
        if to <= from + 1 {
            return Vec::new();
        }
        let (middle, here) = if first.len() == last.len() {
            let followed = self.followed(from + 1, first, last, (to - from) as f64);
            (from + 1, followed.unwrap_or_else(|| self.search(from + 1)))
        } else {
            let middle = from.midpoint(to);
            (middle, self.search(middle))
        };
        let mut all = self.between((from, first), (middle, &here));
        let after = self.between((middle, &here), (to, last));
        all.push(here);
        all.extend(after);
        all
    }

    /// Solutions beside those of the stop before, on the way to those `steps` stops on; `None` where they are lost.
    fn followed(&self, stop: usize, before: &[f64], ahead: &[f64], steps: f64) -> Option<Vec<f64>> {
        let mut found: Vec<f64> = Vec::new();
        for (a, b) in before.iter().zip(ahead) {
            let step = (b - a) / steps;
            let half = AROUND + step.abs();
            let scan =
                Scan { from: (a + step - half).max(0.0), to: (a + step + half).min(FRAC_PI_2), intervals: 2 };
            let [root] = self.roots(stop, scan)[..] else { return None };
            if found.last().is_some_and(|last| root - last < 1e-9) {
                return None;
            }
            found.push(root);
        }
        Some(found)
    }

    fn search(&self, stop: usize) -> Vec<f64> {
        let intervals = if self.target == Target::Collinear { 180 } else { 90 };
        self.roots(stop, Scan { from: 0.0, to: FRAC_PI_2, intervals })
    }

    fn roots(&self, stop: usize, scan: Scan) -> Vec<f64> {
        let Stop { photons, triplet, .. } = &self.stops[stop];
        let at = |angle: f64| emission((&self.crystal, self.by_phi), *photons, triplet, angle);
        let found = roots(&mut |angle| self.target.residual(&at(angle), self.roles), scan);
        found.into_iter().map(|r| r.x).collect()
    }
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

/// A branch of the curve: at each wavelength (nm) the angle of the job's set and the least and largest of all sets, deg.
#[derive(Debug, Default, Clone)]
struct Branch {
    own: Vec<(f64, f64)>,
    band: Vec<(f64, f64, f64)>,
}

/// Neighbouring solutions belong together when they are no farther apart than this, deg.
const NEXT: f64 = 2.5;
/// Solutions of two data sets are the same one when they are no farther apart than this, deg.
const ALIKE: f64 = 6.0;

impl Curves {
    /// All branches of a process and target, in the order in which they begin.
    fn branches(&self, process: Process, target: Target) -> Vec<Branch> {
        let points = || self.points.iter().filter(|p| p.process == process && p.target == target);
        let mut wavelengths: Vec<f64> = points().map(|p| p.signal.nm()).collect();
        wavelengths.dedup();
        let mut all: Vec<Branch> = Vec::new();
        for nm in wavelengths {
            let here: Vec<&CutPoint> = points().filter(|p| p.signal.nm() == nm).collect();
            let own = here.iter().find(|p| p.dataset == self.crystal.dataset && !p.angles.is_empty());
            let Some(lead) = own.or_else(|| here.iter().find(|p| !p.angles.is_empty())) else { continue };
            let mut taken: Vec<usize> = Vec::new();
            for angle in lead.angles.iter().map(|a| a.to_degrees()) {
                let nearest = |p: &&&CutPoint| {
                    let others = p.angles.iter().map(|a| a.to_degrees());
                    others.min_by(|a, b| (a - angle).abs().total_cmp(&(b - angle).abs()))
                };
                let alike = here.iter().filter_map(|p| nearest(&p)).filter(|a| (a - angle).abs() < ALIKE);
                let (low, high) = alike.fold((angle, angle), |(low, high), a| (low.min(a), high.max(a)));
                let ends = |branch: &Branch| {
                    let (last, low, high) = *branch.band.last()?;
                    let gone = (nm - last).abs() > 3.0 * (nm / COUNT as f64);
                    (!gone).then(|| {
                        (low - angle)
                            .abs()
                            .min((high - angle).abs())
                            .min(branch.own.last().map_or(f64::INFINITY, |o| (o.1 - angle).abs()))
                    })
                };
                let next = (0..all.len())
                    .filter(|n| !taken.contains(n))
                    .filter_map(|n| Some((n, ends(&all[n])?)))
                    .min_by(|a, b| a.1.total_cmp(&b.1))
                    .filter(|(_, away)| *away < NEXT);
                let at = next.map_or(all.len(), |(n, _)| n);
                if at == all.len() {
                    all.push(Branch::default());
                }
                taken.push(at);
                all[at].band.push((nm, low, high));
                if own.is_some() {
                    all[at].own.push((nm, angle));
                }
            }
        }
        all
    }
}

/// The figure.
#[must_use]
pub fn cut_curve(setup: &Setup, curves: &Curves) -> Drawing {
    let mut d = Drawing::new(760.0, 640.0, "Cut angle against signal wavelength");
    let mut lines = Vec::new();
    for (n, process) in curves.processes().into_iter().enumerate() {
        for target in curves.targets {
            // crossings belong to both processes
            if !(target.needs_two_rings() && n > 0) {
                lines.push((n, process, target, curves.branches(process, target)));
            }
        }
    }
    let (mut nm, mut deg) = ([f64::INFINITY, f64::NEG_INFINITY], [f64::INFINITY, f64::NEG_INFINITY]);
    for (at, low, high) in lines.iter().flat_map(|l| &l.3).flat_map(|branch| branch.band.iter().copied()) {
        nm = [nm[0].min(at), nm[1].max(at)];
        deg = [deg[0].min(low), deg[1].max(high)];
    }
    let pump = setup.pump().nm();
    if nm[0] >= nm[1] {
        nm = [pump / 0.62, pump / 0.38];
    }
    if deg[0] > deg[1] {
        deg = [0.0, 90.0];
    }
    let margin = 0.08 * (deg[1] - deg[0]).max(1.0);
    let frame = Extent { left: 70.0, top: 40.0, right: 730.0, bottom: 520.0 };
    let plot = Plot { frame, nm: (nm[0], nm[1]), deg: (deg[0] - margin, deg[1] + margin) };
    axes(&mut d, &plot, curves.name(), 2.0 * pump);
    d.clip(frame);
    let mut labels = Vec::new();
    for (n, process, target, branches) in &lines {
        let collinear = *target == Target::Collinear;
        let colour = if collinear { BLUE } else { ORANGE };
        let dash = match (collinear, n) {
            (true, 0) => "",
            (true, _) => "12 4",
            (false, 0) => "6 3",
            (false, _) => "2 3",
        };
        for branch in branches {
            let low = branch.band.iter().map(|b| plot.at(b.0, b.1));
            let high = branch.band.iter().rev().map(|b| plot.at(b.0, b.2));
            let outline: Vec<_> = low.chain(high).collect();
            if outline.len() > 3 {
                d.shape(&outline, colour, 0.18);
            }
            let placed: Vec<_> = branch.own.iter().map(|(nm, deg)| plot.at(*nm, *deg)).collect();
            if placed.len() > 1 {
                d.path(&placed, Pen { colour, width: 2.0, dash }, false);
            }
        }
        // the longest line carries the words
        let longest = branches.iter().map(|branch| &branch.own).max_by_key(|own| own.len());
        if let Some(own) = longest.filter(|own| own.len() > 1) {
            let share = if *n == 0 { 0.2 } else { 0.8 };
            let (nm, deg) = own[(share * own.len() as f64) as usize];
            labels.push((plot.at(nm, deg), format!("{process}, {}", target_words(*target)), colour));
        }
    }
    let cut = if curves.by_phi { curves.crystal.cut.phi } else { curves.crystal.cut.theta }.degrees();
    let here = plot.at(setup.photons().signal.nm(), cut);
    let given = setup.cut.first().is_some_and(|c| c.theta);
    let marked =
        given && (frame.left..=frame.right).contains(&here.0) && (frame.top..=frame.bottom).contains(&here.1);
    if marked {
        d.circle(here, 5.0, pen(INK, 1.8));
    }
    d.unclip();
    for (point, text, colour) in labels {
        d.label(point, 12.0, &text, colour, frame);
    }
    if marked {
        d.label(here, 12.0, "the job's cut", INK, frame);
    }
    if lines.iter().all(|l| l.3.is_empty()) {
        d.text((400.0, 280.0), 14.0, Anchor::Middle, "nothing is phase matched here at any angle");
    }
    captions(&mut d, setup, curves);
    d
}

fn axes(d: &mut Drawing, plot: &Plot, angle: &str, degenerate: f64) {
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
    let meaning = if angle == "phi" { "azimuth of the face normal from X" } else { "face normal to Z" };
    d.text((12.0, 24.0), 12.0, Anchor::Start, &format!("{angle} in deg ({meaning}, normal incidence)"));
    let (x, _) = plot.at(degenerate, plot.deg.0);
    if (f.left..=f.right).contains(&x) {
        d.line((x, f.top), (x, f.bottom), pen(GREY, 1.2));
        d.label((x, f.bottom - 4.0), 11.5, "degenerate", GREY, f);
    }
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
        "{}: lines for data set {own}; {spread}. Pump {:.3} nm, {} {:.3} deg. Each set is shown where it is valid.",
        material.id,
        setup.pump().nm(),
        if curves.by_phi { "theta" } else { "phi" },
        if curves.by_phi { curves.crystal.cut.theta } else { curves.crystal.cut.phi }.degrees()
    );
    for (n, line) in broken(&text, 108).iter().enumerate() {
        d.text((12.0, 586.0 + 17.0 * n as f64), 12.0, Anchor::Start, line);
    }
}
