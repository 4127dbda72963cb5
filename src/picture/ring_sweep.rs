//! Rings over a range of turns, in one figure.

use super::camera::{broken, ring_pen};
use super::cut_curve::tuning;
use super::drawing::{Anchor, Drawing, Extent, GREY, INK, Pen, dashed, nice_step, pen};
use crate::job::Setup;
use crate::matching::{Actuator, Cones, ConesError, SAMPLES, Want, cones};
use crate::quantity::{Angle, tidy};

/// The turn that is swept.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Axis {
    /// Index of the crystal that is turned; all of them without one.
    pub crystal: Option<usize>,
    /// Cross tilt instead of tilt.
    pub cross: bool,
    /// First setting.
    pub from: Angle,
    /// Last setting.
    pub to: Angle,
    /// Number of settings, 2 to 25.
    pub points: usize,
}

impl Axis {
    /// One degree either way of the present tilt, or cross tilt where that is what tunes the first crystal.
    #[must_use]
    pub fn around(setup: &Setup) -> Self {
        let cross = tuning(setup, &setup.crystals[0]) == Some(Actuator::CrossTilt);
        let turns = setup.crystals[0].orientation;
        let now = if cross { turns.cross_tilt } else { turns.tilt }.degrees();
        Self {
            crystal: None,
            cross,
            from: Angle::from_degrees(now - 1.0),
            to: Angle::from_degrees(now + 1.0),
            points: 5,
        }
    }

    fn settings(&self) -> Vec<Angle> {
        let step = (self.to.si() - self.from.si()) / (self.points - 1) as f64;
        (0..self.points).map(|n| Angle::radians(self.from.si() + step * n as f64)).collect()
    }
}

/// `crystal.tilt=-1deg..3deg/5`
///
/// # Errors
/// A sentence that says how to write it.
pub fn parse_axis(text: &str) -> Result<Axis, String> {
    let form = "write crystal.tilt=-1deg..3deg/5 (or crystal.cross_tilt, or crystal.2.tilt in a stack), with 2 to 25 points";
    let wrong = |why: &str| format!("--axis {text}: {why}; {form}");
    let (key, range) = text.split_once('=').ok_or_else(|| wrong("no `=`"))?;
    let no_turn = || wrong(&format!("`{}` is no turn", key.trim()));
    let turn = key.trim().strip_prefix("crystal.").ok_or_else(no_turn)?;
    let (crystal, turn) = match turn.split_once('.') {
        None => (None, turn),
        Some((number, turn)) => {
            let number = number.parse::<usize>().ok().and_then(|n| n.checked_sub(1));
            (Some(number.ok_or_else(no_turn)?), turn)
        }
    };
    let cross = match turn {
        "tilt" => false,
        "cross_tilt" => true,
        _ => return Err(no_turn()),
    };
    let (ends, points) = range.rsplit_once('/').ok_or_else(|| wrong("no number of points"))?;
    let (from, to) = ends.split_once("..").ok_or_else(|| wrong("no range"))?;
    let angle = |t: &str| t.trim().parse::<Angle>().map_err(|e| wrong(&e.to_string()));
    let points: usize = points.trim().parse().map_err(|_| wrong("the number of points is no number"))?;
    if !(2..=25).contains(&points) {
        return Err(wrong("too few or too many points"));
    }
    Ok(Axis { crystal, cross, from: angle(from)?, to: angle(to)?, points })
}

/// The figure: rings at each setting, later ones heavier. `dark` says why there is no ring at the job's own setting; it is
/// shown where no setting has one.
///
/// # Errors
/// Indices that are not to be had.
pub fn ring_sweep(setup: &Setup, axis: &Axis, dark: Option<&str>) -> Result<Drawing, ConesError> {
    let mut found: Vec<(Angle, Cones)> = Vec::new();
    for setting in axis.settings() {
        let mut crystals = setup.crystals.clone();
        let turned = |n: usize| axis.crystal.is_none_or(|only| only == n);
        for (_, crystal) in crystals.iter_mut().enumerate().filter(|(n, _)| turned(*n)) {
            let turn = &mut crystal.orientation;
            *if axis.cross { &mut turn.cross_tilt } else { &mut turn.tilt } = setting;
        }
        let rings = cones(&crystals, setup.pump(), &setup.signals(), setup.interaction, Want::Rings)?;
        found.push((setting, rings));
    }
    Ok(figure(setup, axis, &found, dark))
}

fn figure(setup: &Setup, axis: &Axis, found: &[(Angle, Cones)], dark: Option<&str>) -> Drawing {
    let mm = setup.screen.mm();
    let curves = |cones: &Cones| -> Vec<Vec<(f64, f64)>> {
        let rings = cones.rings.iter().filter_map(|r| r.ring.as_ref().ok());
        rings
            .map(|r| (0..SAMPLES).map(|j| r.curve.direction(j).on_screen_mm(setup.screen)).collect())
            .collect()
    };
    let reach = found.iter().flat_map(|(_, c)| curves(c)).flatten();
    let most = reach.fold(0.02 * mm, |m: f64, p| m.max(p.0.abs()).max(p.1.abs())) * 1.15;
    let entries = entries(setup, found);
    let words = words(setup, found, dark);
    let columns = entries.len().div_ceil(ROWS) as f64;
    let height = (720.0 + 17.0 * words.len() as f64).max(770.0);
    let mut d = Drawing::new(700.0 + COLUMN * columns, height, "Rings over a range of turns");
    let frame = Extent { left: 70.0, top: 50.0, right: 670.0, bottom: 650.0 };
    let middle = (370.0, 350.0);
    let scale = 300.0 / most;
    let at = |p: &(f64, f64)| (middle.0 + scale * p.0, middle.1 - scale * p.1);
    axes(&mut d, frame, scale, most, middle);
    for (curve, _, line) in &entries {
        let placed: Vec<_> = curve.iter().map(at).collect();
        d.path(&placed, *line, true);
    }
    if entries.is_empty() {
        d.text((middle.0, 250.0), 14.0, Anchor::Middle, "no ring at any of these settings");
    }
    key(&mut d, &entries, frame);
    captions(&mut d, setup, axis, found.len(), &words);
    d
}

/// One ring's curve in mm, its text in the key and its line.
type Entry = (Vec<(f64, f64)>, String, Pen);

/// Entries of the key in a column.
const ROWS: usize = 40;
/// Width of a column of the key.
const COLUMN: f64 = 230.0;

/// In the order of the settings.
fn entries(setup: &Setup, found: &[(Angle, Cones)]) -> Vec<Entry> {
    let mut wavelengths: Vec<f64> =
        found.iter().flat_map(|(_, c)| &c.rings).map(|r| r.wavelength.nm().round()).collect();
    wavelengths.sort_by(f64::total_cmp);
    wavelengths.dedup();
    let mut all = Vec::new();
    for (n, (setting, cones)) in found.iter().enumerate() {
        let width = 0.6 + 1.8 * n as f64 / (found.len() - 1) as f64;
        for row in &cones.rings {
            let Ok(ring) = &row.ring else { continue };
            let curve = (0..SAMPLES).map(|j| ring.curve.direction(j).on_screen_mm(setup.screen)).collect();
            let degrees = tidy((setting.degrees() * 1e4).round() * 1e-4);
            let colour =
                if wavelengths.len() > 1 { format!(" {:.0} nm", row.wavelength.nm()) } else { String::new() };
            let of = if setup.crystals.len() > 1 {
                format!(" of crystal {}", row.crystal + 1)
            } else {
                String::new()
            };
            let text = format!("{}{colour}{of} at {degrees:+} deg", row.polarization);
            all.push((curve, text, ring_pen(row.polarization, width)));
        }
    }
    all
}

/// Each ring's line beside its text, right of the frame.
fn key(d: &mut Drawing, entries: &[Entry], frame: Extent) {
    const SAMPLE: f64 = 26.0;
    for (n, (_, text, line)) in entries.iter().enumerate() {
        let x = frame.right + 18.0 + COLUMN * (n / ROWS) as f64;
        let y = frame.top + 12.0 + 15.0 * (n % ROWS) as f64;
        d.line((x, y - 4.0), (x + SAMPLE, y - 4.0), *line);
        d.coloured_text((x + SAMPLE + 6.0, y), 12.0, Anchor::Start, text, line.colour);
    }
}

fn axes(d: &mut Drawing, f: Extent, scale: f64, most: f64, middle: (f64, f64)) {
    d.path(
        &[(f.left, f.top), (f.right, f.top), (f.right, f.bottom), (f.left, f.bottom)],
        pen(INK, 1.0),
        true,
    );
    d.line((f.left, middle.1), (f.right, middle.1), dashed(GREY, 0.7));
    d.line((middle.0, f.top), (middle.0, f.bottom), dashed(GREY, 0.7));
    let step = nice_step(2.0 * most, 7.0);
    let last = (most / step).floor() as i64;
    for n in -last..=last {
        let value = n as f64 * step;
        let text = format!("{}", tidy(value));
        d.line(
            (middle.0 + scale * value, f.bottom),
            (middle.0 + scale * value, f.bottom + 5.0),
            pen(INK, 1.0),
        );
        d.text((middle.0 + scale * value, f.bottom + 19.0), 12.0, Anchor::Middle, &text);
        d.line((f.left - 5.0, middle.1 - scale * value), (f.left, middle.1 - scale * value), pen(INK, 1.0));
        d.text((f.left - 9.0, middle.1 - scale * value + 4.0), 12.0, Anchor::End, &text);
    }
}

fn captions(d: &mut Drawing, setup: &Setup, axis: &Axis, settings: usize, words: &[String]) {
    let turn = if axis.cross { "cross tilt" } else { "tilt" };
    let whose = match axis.crystal {
        Some(n) => format!(" of crystal {}", n + 1),
        None if setup.crystals.len() > 1 => " of all crystals".into(),
        None => String::new(),
    };
    let title =
        format!("Rings for {settings} settings of the {turn}{whose}, the first with the thinnest lines");
    d.text((70.0, 22.0), 13.0, Anchor::Start, &title);
    d.text((16.0, 40.0), 12.0, Anchor::Start, "y in mm");
    let place = format!("x in mm on a screen at {}, seen from downstream: +x right, +y up", setup.screen);
    d.text((370.0, 688.0), 12.0, Anchor::Middle, &place);
    for (n, line) in words.iter().enumerate() {
        d.text((16.0, 712.0 + 17.0 * n as f64), 12.0, Anchor::Start, line);
    }
}

/// What stands below the figure, in lines.
fn words(setup: &Setup, found: &[(Angle, Cones)], why: Option<&str>) -> Vec<String> {
    let crystal = &setup.crystals[0];
    let mut text = format!(
        "{}:{} cut theta {:.3} deg, phi {:.3} deg; {}, pump {:.3} nm. e or slow rings full, o or fast rings dashed.",
        crystal.material.id,
        crystal.set().id,
        crystal.cut.theta.degrees(),
        crystal.cut.phi.degrees(),
        setup.interaction,
        setup.pump().nm()
    );
    let dark: Vec<String> = found
        .iter()
        .filter(|(_, c)| c.rings.iter().all(|r| r.ring.is_err()))
        .map(|(a, _)| format!("{:+}", tidy((a.degrees() * 1e4).round() * 1e-4)))
        .collect();
    if !dark.is_empty() {
        text.push_str(&format!(" No ring at {} deg.", dark.join(", ")));
    }
    if let Some(why) = why.filter(|_| dark.len() == found.len()) {
        text.push_str(&format!(" The job's own setting: {why}"));
    }
    broken(&text, 100)
}
