//! The phase between the two histories of a pair, over wavelength and over the directions of arm a.

use std::f64::consts::PI;
use std::fmt::Write as _;

use super::camera::broken;
use super::contour::Grid;
use super::drawing::{Anchor, BLUE, Drawing, Extent, GREY, INK, ORANGE, Pen, dashed, nice_step, pen};
use super::notes::crystal_words;
use crate::job::Setup;
use crate::matching::Status;
use crate::pairs::{Bench, HistoryBasis, Mixture, Opening, Pair, PairsError, Place, Stack, Vary};
use crate::quantity::{Angle, Wavelength, tidy};

/// Phase of one pair, or why there is none.
type Phase = Result<Smooth, Status>;

/// A phase in two parts: one that goes on smoothly from point to point, and half a turn where the phase matching of one
/// history has changed its sign.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
struct Smooth {
    rad: f64,
    turned: bool,
}

impl Smooth {
    fn total(&self) -> f64 {
        self.rad + if self.turned { PI } else { 0.0 }
    }

    /// The same phase (but for full turns) with the smooth part nearest to that of a neighbour.
    fn beside(&self, neighbour: &Self) -> Self {
        let halves = ((self.total() - neighbour.rad) / PI).round();
        Self { rad: self.total() - PI * halves, turned: halves.rem_euclid(2.0) > 0.5 }
    }
}

/// Wavelengths of the line; odd, so that one stands in the middle.
const COUNT: usize = 401;
/// Directions along each side of the map; odd likewise.
const SIDE: usize = 61;
/// The map is wider than the iris by this factor.
const MARGIN: f64 = 1.15;

/// What is drawn where the job has neither iris nor fibre.
const DEFAULT_VIEW_DEG: f64 = 0.5;

/// Phases with or without the compensators.
#[derive(Debug, Clone)]
struct Panels {
    compensated: bool,
    line: Vec<Phase>,
    map: Vec<Phase>,
}

/// The phase of the first history minus that of the second, behind everything, without jumps of full turns.
#[derive(Debug, Clone)]
pub struct Phases {
    pair: Pair,
    number: Option<usize>,
    extrapolated: bool,
    /// Of photon a, with what the filters leave.
    wavelengths: Vec<(Wavelength, f64)>,
    /// Whether there are filters.
    filtered: bool,
    /// Offsets along each side of the map, degrees.
    offsets: Vec<f64>,
    /// Half the view of arm a, degrees, and what gives it.
    view: (f64, View),
    panels: Vec<Panels>,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum View {
    Iris,
    Fibre,
    Default,
}

impl Phases {
    /// For a pair of crossings, as `cones` numbers them, or the directions that the job fixes.
    ///
    /// # Errors
    /// There is no such pair, or nothing passes.
    pub fn of(setup: &Setup, number: Option<usize>) -> Result<Self, PairsError> {
        let signals = setup.signals();
        let question = setup.pairs(&signals, number, 1e-3);
        let (number, pair, row) = question.pair()?;
        let view = view(&setup.bench, &pair);
        let stack = Stack::new(&setup.crystals, &setup.bench, &pair, setup.interaction)?;
        let mixture = Mixture::new(&stack, &setup.bench, Vary::ALL);
        let filtered = setup.bench.filters.iter().any(|filters| !filters.is_empty());
        let [short, long] = mixture.window()?.map(|w| w.si());
        // a little beyond the filters, to see where they end
        let beyond = if filtered { 0.04 * (long - short) } else { 0.0 };
        let [short, long] = [short - beyond, long + beyond];
        let wavelengths = (0..COUNT).map(|j| {
            let wavelength = Wavelength::metres(short + (long - short) * j as f64 / (COUNT - 1) as f64);
            (wavelength, mixture.passes(wavelength))
        });
        let middle = (SIDE / 2) as f64;
        let offsets = (0..SIDE).map(|j| MARGIN * view.0 * (j as f64 / middle - 1.0));
        let plates = setup.bench.compensators.iter().map(|c| &c.plate);
        let own = [pair.photons.signal, pair.photons.idler];
        let beyond = plates.filter(|plate| own.iter().any(|w| plate.extrapolates(*w))).count() > 0;
        let mut phases = Self {
            pair,
            number,
            extrapolated: row.extrapolated || beyond,
            wavelengths: wavelengths.collect(),
            filtered,
            offsets: offsets.collect(),
            view,
            panels: Vec::new(),
        };
        if !setup.bench.compensators.is_empty() {
            phases.panels.push(phases.panels(setup, &setup.bench, true)?);
        }
        let bare = Bench { compensators: Vec::new(), ..setup.bench.clone() };
        phases.panels.push(phases.panels(setup, &bare, false)?);
        Ok(phases)
    }

    fn panels(&self, setup: &Setup, bench: &Bench, compensated: bool) -> Result<Panels, PairsError> {
        let stack = Stack::new(&setup.crystals, bench, &self.pair, setup.interaction)?;
        let basis = stack.history_basis()?;
        let mixture = Mixture::new(&stack, bench, Vary::ALL);
        let nominal = self.pair.photons.signal.angular_frequency();
        let line = self
            .wavelengths
            .iter()
            .map(|(w, _)| phase_at(&mixture, &basis, [w.angular_frequency() - nominal, 0.0, 0.0, 0.0]));
        let line: Vec<Phase> = line.collect();
        // light from all of an iris meets the plates as it comes, also where the job speaks of points
        let mut seen = bench.clone();
        if self.view.1 == View::Default {
            seen.collection[0].opening = Opening::Iris(Angle::from_degrees(2.0 * self.view.0));
        }
        let mixture = Mixture::new(&stack, &seen, Vary::ALL);
        let sine = |degrees: &f64| degrees.to_radians().sin();
        let places = self.offsets.iter().flat_map(|v| self.offsets.iter().map(move |h| (sine(h), sine(v))));
        let map = places.map(|(x, y)| phase_at(&mixture, &basis, [0.0, x, y, 0.0])).collect();
        let mut panels = Panels { compensated, line, map };
        let nearest = self.nearest();
        unwrap(&mut panels.line, nearest, 1, COUNT);
        unwrap_map(&mut panels.map);
        Ok(panels)
    }

    /// Index of the wavelength nearest to the nominal one.
    fn nearest(&self) -> usize {
        let nominal = self.pair.photons.signal.si();
        let off = |j: &usize| (self.wavelengths[*j].0.si() - nominal).abs();
        (0..COUNT).min_by(|a, b| off(a).total_cmp(&off(b))).unwrap_or(COUNT / 2)
    }

    /// A row for each point of each panel, with and without compensators.
    #[must_use]
    pub fn csv(&self) -> String {
        let mut out = String::from(
            "panel,compensators,wavelength_nm,h_deg,v_deg,phase_rad,transmission,extrapolated,status\n",
        );
        let nominal = self.pair.photons.signal;
        let mut row =
            |panel: &str, with: bool, wavelength: Wavelength, at: [f64; 2], share: f64, phase: &Phase| {
                let value = phase.as_ref().map_or(String::new(), |phase| (phase.total() + 0.0).to_string());
                let status = phase.as_ref().err().copied().unwrap_or(Status::Ok);
                let _ = writeln!(
                    out,
                    "{panel},{},{},{},{},{value},{share},{},{status}",
                    if with { "with" } else { "without" },
                    wavelength.nm(),
                    tidy(at[0]),
                    tidy(at[1]),
                    self.extrapolated
                );
            };
        for panels in &self.panels {
            for ((wavelength, share), phase) in self.wavelengths.iter().zip(&panels.line) {
                row("wavelength", panels.compensated, *wavelength, [0.0, 0.0], *share, phase);
            }
        }
        let nearest = self.wavelengths[self.nearest()].1;
        for panels in &self.panels {
            let places = self.offsets.iter().flat_map(|v| self.offsets.iter().map(move |h| [*h, *v]));
            for (at, phase) in places.zip(&panels.map) {
                row("iris", panels.compensated, nominal, at, nearest, phase);
            }
        }
        out
    }

    /// Smallest and largest phase of all lines.
    fn range(&self) -> (f64, f64) {
        let known = self.panels.iter().flat_map(|p| p.line.iter().flatten()).map(Smooth::total);
        let (low, high) = known.fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), v| (l.min(v), h.max(v)));
        if low > high { (-1.0, 1.0) } else { (low, high) }
    }

    /// Line of the plot over wavelength.
    fn pen(&self, panels: &Panels) -> Pen {
        if self.panels.len() > 1 { style(panels.compensated).0 } else { pen(BLUE, 2.4) }
    }

    /// What the two histories are called.
    fn names(&self) -> [String; 2] {
        let [a, b] = self.pair.polarizations();
        if self.pair.first.crystal != self.pair.second.crystal {
            return [0, 1].map(|j| format!("pairs of crystal {}", a[j]));
        }
        [0, 1].map(|j| match a[j].len() + b[j].len() {
            2 => format!("|{}{}>", a[j], b[j]),
            _ => format!("|{},{}>", a[j], b[j]),
        })
    }
}

fn phase_at(mixture: &Mixture<'_>, basis: &HistoryBasis, off: [f64; 4]) -> Phase {
    let phase = mixture.relative_phase(basis, off).map_err(|error| Status::from(&error))?;
    Ok(Smooth { rad: phase, turned: false })
}

/// Half the view of arm a in degrees; that of b where a has none.
fn view(bench: &Bench, pair: &Pair) -> (f64, View) {
    let photons = [pair.photons.signal, pair.photons.idler];
    let own = |arm: usize| match bench.collection[arm].opening {
        Opening::Iris(full) => Some((0.5 * full.degrees(), View::Iris)),
        // a Gaussian mode falls to 1/e^2 at the angle lambda/(pi w)
        Opening::Fibre(radius) => {
            Some(((photons[arm].si() / (PI * radius.si())).atan().to_degrees(), View::Fibre))
        }
        Opening::All => None,
    };
    own(0).or(own(1)).unwrap_or((0.5 * DEFAULT_VIEW_DEG, View::Default))
}

/// Lets neighbours `step` apart, `count` of them, go on from one another, from `start` on both ways.
fn unwrap(phases: &mut [Phase], start: usize, step: usize, count: usize) {
    let first = start % step;
    let last = first + step * (count - 1);
    for forwards in [true, false] {
        let mut known = phases[start].as_ref().ok().copied();
        let mut at = start;
        while at != if forwards { last } else { first } {
            at = if forwards { at + step } else { at - step };
            if let Ok(phase) = &mut phases[at] {
                if let Some(before) = known {
                    *phase = phase.beside(&before);
                }
                known = Some(*phase);
            }
        }
    }
}

/// The middle row, then every column from it.
fn unwrap_map(map: &mut [Phase]) {
    let row = SIDE / 2 * SIDE;
    unwrap(&mut map[row..row + SIDE], SIDE / 2, 1, SIDE);
    for column in 0..SIDE {
        unwrap(map, row + column, SIDE, SIDE);
    }
}

/// The plot over wavelength, and the maps below it.
const LINE: Extent = Extent { left: 78.0, top: 66.0, right: 700.0, bottom: 306.0 };
const MAP: f64 = 262.0;
const MAPS_TOP: f64 = 400.0;

/// The figure.
#[must_use]
pub fn phase(setup: &Setup, phases: &Phases) -> Drawing {
    let notes = notes(setup, phases);
    let lines: Vec<String> = notes.iter().flat_map(|note| broken(note, 104)).collect();
    let below = MAPS_TOP + MAP + 66.0;
    let height = below + 16.0 * lines.len() as f64 + 6.0;
    let mut d = Drawing::new(760.0, height, "Phase between the two histories of a pair");
    let [first, second] = phases.names();
    let which = phases.number.map_or("fixed directions".into(), |n| format!("pair {n}"));
    d.text(
        (16.0, 24.0),
        13.0,
        Anchor::Start,
        &format!("Phase of {first} minus {second} behind everything, {which}"),
    );
    over_wavelength(&mut d, phases);
    let both = phases.panels.len() == 2;
    for (n, panels) in phases.panels.iter().enumerate() {
        let room = LINE.right - LINE.left - MAP;
        let left = LINE.left + if both { n as f64 * room } else { 0.5 * room };
        let frame = Extent { left, top: MAPS_TOP, right: left + MAP, bottom: MAPS_TOP + MAP };
        over_directions(&mut d, phases, panels, frame);
    }
    for (n, line) in lines.iter().enumerate() {
        d.text((16.0, below + 16.0 * n as f64), 11.5, Anchor::Start, line);
    }
    d
}

fn style(compensated: bool) -> (Pen, &'static str) {
    match compensated {
        true => (pen(BLUE, 2.4), "with compensators"),
        false => (dashed(ORANGE, 1.8), "without compensators"),
    }
}

fn framed(d: &mut Drawing, f: Extent) {
    let corners = [(f.left, f.top), (f.right, f.top), (f.right, f.bottom), (f.left, f.bottom)];
    d.path(&corners, pen(INK, 1.0), true);
}

/// Multiples of a step within a range.
fn multiples(low: f64, high: f64, step: f64) -> impl Iterator<Item = f64> {
    let first = (low / step - 1e-9).ceil() as i64;
    let last = (high / step + 1e-9).floor() as i64;
    (first..=last).map(move |n| n as f64 * step)
}

/// A multiple of a step with the decimals of the step.
fn decimal(value: f64, step: f64) -> String {
    let places = (-(step * 1.0001).log10().floor()).clamp(0.0, 9.0) as usize;
    let text = format!("{value:.places$}");
    if text.trim_matches(['-', '0', '.']).is_empty() { text.trim_start_matches('-').into() } else { text }
}

fn over_wavelength(d: &mut Drawing, phases: &Phases) {
    let f = LINE;
    let ends = [phases.wavelengths[0].0.nm(), phases.wavelengths[COUNT - 1].0.nm()];
    let (low, high) = phases.range();
    let margin = 0.08 * (high - low).max(0.05);
    let (low, high) = (low - margin, high + margin);
    let x = |nm: f64| f.left + (f.right - f.left) * (nm - ends[0]) / (ends[1] - ends[0]);
    let y = |rad: f64| f.bottom - (f.bottom - f.top) * (rad - low) / (high - low);
    if phases.filtered {
        let most = phases.wavelengths.iter().map(|(_, share)| *share).fold(0.0, f64::max);
        let top = |share: f64| f.bottom - (f.bottom - f.top) * share / most;
        let rim = phases.wavelengths.iter().map(|(w, share)| (x(w.nm()), top(*share)));
        let start = std::iter::once((f.left, f.bottom));
        let outline: Vec<_> = start.chain(rim).chain([(f.right, f.bottom)]).collect();
        d.shape(&outline, "#e4e4e4", 1.0);
    }
    let step = nice_step(ends[1] - ends[0], 8.0);
    for nm in multiples(ends[0], ends[1], step) {
        d.line((x(nm), f.top), (x(nm), f.bottom), pen("#c8c8c8", 0.7));
        d.text((x(nm), f.bottom + 18.0), 12.0, Anchor::Middle, &decimal(nm, step));
    }
    let step = nice_step(high - low, 6.0);
    for rad in multiples(low, high, step) {
        d.line((f.left, y(rad)), (f.right, y(rad)), pen("#c8c8c8", 0.7));
        d.text((f.left - 8.0, y(rad) + 4.0), 12.0, Anchor::End, &decimal(rad, step));
    }
    framed(d, f);
    for panels in &phases.panels {
        let mut run: Vec<(f64, f64)> = Vec::new();
        let mut before: Option<Smooth> = None;
        for ((wavelength, _), phase) in phases.wavelengths.iter().zip(&panels.line) {
            let here = phase.as_ref().ok().copied();
            if here.zip(before).is_none_or(|(a, b)| a.turned != b.turned) {
                d.path(&std::mem::take(&mut run), phases.pen(panels), false);
            }
            run.extend(here.map(|phase| (x(wavelength.nm()), y(phase.total()))));
            before = here;
        }
        d.path(&run, phases.pen(panels), false);
    }
    d.text((16.0, f.top - 10.0), 12.0, Anchor::Start, "phase in rad");
    d.text(
        (0.5 * (f.left + f.right), f.bottom + 37.0),
        12.0,
        Anchor::Middle,
        "wavelength of photon a in nm, its direction fixed",
    );
    let mut right = f.right;
    for panels in phases.panels.iter().rev().filter(|_| phases.panels.len() > 1) {
        let (line, words) = style(panels.compensated);
        d.text((right, f.top - 10.0), 12.0, Anchor::End, words);
        right -= 7.0 * words.len() as f64 + 8.0;
        d.line((right - 30.0, f.top - 14.0), (right, f.top - 14.0), line);
        right -= 46.0;
    }
}

fn over_directions(d: &mut Drawing, phases: &Phases, panels: &Panels, f: Extent) {
    let reach = MARGIN * phases.view.0;
    let x = |deg: f64| f.left + 0.5 * (f.right - f.left) * (1.0 + deg / reach);
    let y = |deg: f64| f.bottom - 0.5 * (f.bottom - f.top) * (1.0 + deg / reach);
    let step = nice_step(2.0 * reach, 5.0);
    for deg in multiples(-reach, reach, step) {
        d.line((x(deg), f.bottom), (x(deg), f.bottom + 5.0), pen(INK, 1.0));
        d.text((x(deg), f.bottom + 19.0), 12.0, Anchor::Middle, &decimal(deg, step));
        d.line((f.left - 5.0, y(deg)), (f.left, y(deg)), pen(INK, 1.0));
        d.text((f.left - 8.0, y(deg) + 4.0), 12.0, Anchor::End, &decimal(deg, step));
    }
    let values = panels.map.iter().map(|p| p.as_ref().ok().map(|phase| phase.rad)).collect();
    let grid = Grid { side: SIDE, values };
    let cell = (f.right - f.left) / (SIDE - 1) as f64;
    d.clip(f);
    for (row, run) in turned_runs(&panels.map) {
        let (left, right) =
            (f.left + cell * (run.start as f64 - 0.5), f.left + cell * (run.end as f64 - 0.5));
        let (top, bottom) = (f.bottom - cell * (row as f64 + 0.5), f.bottom - cell * (row as f64 - 0.5));
        d.shape(&[(left, top), (right, top), (right, bottom), (left, bottom)], "#dcdcdc", 1.0);
    }
    d.unclip();
    let range = grid.range();
    let flat = range.is_none_or(|(low, high)| high - low < 1e-6);
    let mut labels = Vec::new();
    if let Some((low, high)) = range.filter(|_| !flat) {
        let step = nice_step(high - low, 7.0);
        for level in multiples(low, high, step) {
            for line in grid.contours(level) {
                // rows of the grid run upwards
                let line: Vec<_> =
                    line.iter().map(|(c, r)| (f.left + cell * c, f.bottom - cell * r)).collect();
                d.path(&line, pen(GREY, 1.1), false);
                labels.push((line, decimal(level, step)));
            }
        }
    }
    d.circle((x(0.0), y(0.0)), 0.5 * (f.right - f.left) / MARGIN, Pen { dash: rim(phases), ..pen(INK, 2.0) });
    d.reserve(Extent { left: x(0.0) - 6.0, top: y(0.0) - 6.0, right: x(0.0) + 6.0, bottom: y(0.0) + 6.0 });
    // labels keep off the circle too
    for j in 0..120 {
        let angle = f64::from(j) * PI / 60.0;
        let at = (x(phases.view.0 * angle.cos()), y(phases.view.0 * angle.sin()));
        d.reserve(Extent { left: at.0 - 1.5, top: at.1 - 1.5, right: at.0 + 1.5, bottom: at.1 + 1.5 });
    }
    d.line((x(0.0) - 5.0, y(0.0)), (x(0.0) + 5.0, y(0.0)), pen(INK, 1.0));
    d.line((x(0.0), y(0.0) - 5.0), (x(0.0), y(0.0) + 5.0), pen(INK, 1.0));
    framed(d, f);
    labels.sort_by_key(|(line, _)| std::cmp::Reverse(line.len()));
    for (line, text) in labels {
        d.label_on(&line, 11.0, &text, f);
    }
    let words = if phases.panels.len() > 1 { style(panels.compensated).1 } else { "over directions" };
    let unit = if flat { "the same everywhere" } else { "lines in rad" };
    d.text((f.left, f.top - 27.0), 12.0, Anchor::Start, &format!("{words}: {unit}"));
    d.text((f.left - 8.0, f.top - 10.0), 12.0, Anchor::Start, "v in deg");
    let middle = 0.5 * (f.left + f.right);
    d.text((middle, f.bottom + 38.0), 12.0, Anchor::Middle, "h in deg about the middle of arm a");
}

/// Runs of points with half a turn added: row and columns.
fn turned_runs(map: &[Phase]) -> Vec<(usize, std::ops::Range<usize>)> {
    let turned = |n: usize| map[n].is_ok_and(|phase| phase.turned);
    let mut runs = Vec::new();
    for row in 0..SIDE {
        let mut column = 0;
        while column < SIDE {
            let from = column;
            while column < SIDE && turned(row * SIDE + column) {
                column += 1;
            }
            if column > from {
                runs.push((row, from..column));
            }
            column += 1;
        }
    }
    runs
}

/// Dashes of the circle: full for an iris of the job.
fn rim(phases: &Phases) -> &'static str {
    if phases.view.1 == View::Iris { "" } else { "7 4" }
}

/// Three decimals, without the sign of a zero.
fn plain(value: f64) -> String {
    decimal(value, 1e-3)
}

/// Sentences below.
fn notes(setup: &Setup, phases: &Phases) -> Vec<String> {
    let middle = |panels: &Panels| {
        panels.map[SIDE * SIDE / 2].as_ref().ok().map(|p| format!("{} rad", plain(p.total())))
    };
    let mut lines = Vec::new();
    let pair = &phases.pair;
    let place =
        |d: crate::frame::Direction| format!("h {} deg, v {} deg", plain(d.h_deg()), plain(d.v_deg()));
    let mut text = format!(
        "Photon a at {:.3} nm towards {}, b at {:.3} nm towards {}, pump {:.3} nm.",
        pair.photons.signal.nm(),
        place(pair.a),
        pair.photons.idler.nm(),
        place(pair.b),
        setup.pump().nm()
    );
    for panels in &phases.panels {
        let words =
            if phases.panels.len() > 1 { format!(" {}", style(panels.compensated).1) } else { String::new() };
        if let Some(phase) = middle(panels) {
            let _ = write!(text, " In the middle{words}: {phase}.");
        }
    }
    lines.push(text);
    let full = tidy((2.0 * phases.view.0 * 1e4).round() * 1e-4);
    let circle = match phases.view.1 {
        View::Iris => format!("Circle: the iris, {full} deg wide."),
        View::Fibre => format!("Dashed circle: where the fibre's mode falls to 1/e^2, {full} deg wide."),
        View::Default => format!("Dashed circle: {full} deg wide; the job has no iris (--iris)."),
    };
    let shade = if phases.filtered {
        " Shaded over wavelength: what the filters of both arms leave, most at the top of the frame."
    } else {
        " Without filters the wavelengths are those of the main lobe of phase matching."
    };
    lines.push(format!(
        "{circle}{shade} Photon b goes where momentum sends it; h along H of the arm and v along V, seen from downstream."
    ));
    let turned = |all: &[Phase]| all.iter().flatten().any(|phase| phase.turned);
    if phases.panels.iter().any(|p| turned(&p.line)) {
        lines.push(
            "The line is half a turn off where the phase matching of one history has changed its sign."
                .into(),
        );
    }
    if phases.panels.iter().any(|p| turned(&p.map)) {
        lines
            .push("Shaded over directions: there, for the same reason, add pi to what the lines say.".into());
    }
    for crystal in &setup.crystals {
        lines.push(format!("{}; {}.", crystal_words(crystal), setup.interaction));
    }
    for compensator in &setup.bench.compensators {
        let arm = match compensator.place {
            Place::Pump => "the pump".into(),
            Place::Both => "both arms".into(),
            place => format!("arm {place}"),
        };
        let between = if compensator.half_wave { ", between half-wave plates" } else { "" };
        lines.push(format!("Compensator in {arm}: {}{between}.", crystal_words(&compensator.plate)));
    }
    if setup.bench.compensators.iter().any(|compensator| compensator.place != Place::Pump) {
        lines.push(match phases.view.1 {
            View::Default => {
                "Plates in the arms: over wavelength they are passed head-on, since points say nothing of how light comes to \
                 them; over directions along the direction each photon has."
                    .into()
            }
            _ => "Plates in the arms are passed along the direction each photon has.".into(),
        });
    }
    lines
}
