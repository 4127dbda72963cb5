//! Rings over a range of turns, in one figure.

use super::camera::{broken, ring_pen};
use super::drawing::{Anchor, Drawing, Extent, GREY, INK, Pen, dashed, nice_step, pen};
use crate::job::Setup;
use crate::matching::{Cones, ConesError, SAMPLES, Want, cones};
use crate::quantity::{Angle, tidy};

/// The turn that is swept.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Axis {
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
    /// One degree either way of the present tilt.
    #[must_use]
    pub fn around(setup: &Setup) -> Self {
        let now = setup.crystals[0].orientation.tilt.degrees();
        Self {
            cross: false,
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
    let form = "write crystal.tilt=-1deg..3deg/5 (or crystal.cross_tilt), with 2 to 25 points";
    let wrong = |why: &str| format!("--axis {text}: {why}; {form}");
    let (key, range) = text.split_once('=').ok_or_else(|| wrong("no `=`"))?;
    let cross = match key.trim() {
        "crystal.tilt" => false,
        "crystal.cross_tilt" => true,
        other => return Err(wrong(&format!("`{other}` is no turn"))),
    };
    let (ends, points) = range.rsplit_once('/').ok_or_else(|| wrong("no number of points"))?;
    let (from, to) = ends.split_once("..").ok_or_else(|| wrong("no range"))?;
    let angle = |t: &str| t.trim().parse::<Angle>().map_err(|e| wrong(&e.to_string()));
    let points: usize = points.trim().parse().map_err(|_| wrong("the number of points is no number"))?;
    if !(2..=25).contains(&points) {
        return Err(wrong("too few or too many points"));
    }
    Ok(Axis { cross, from: angle(from)?, to: angle(to)?, points })
}

/// The figure: rings at each setting, later ones heavier.
///
/// # Errors
/// Indices that are not to be had.
pub fn ring_sweep(setup: &Setup, axis: &Axis) -> Result<Drawing, ConesError> {
    let mut found: Vec<(Angle, Cones)> = Vec::new();
    for setting in axis.settings() {
        let mut crystals = setup.crystals.clone();
        for crystal in &mut crystals {
            let turn = &mut crystal.orientation;
            *if axis.cross { &mut turn.cross_tilt } else { &mut turn.tilt } = setting;
        }
        let rings = cones(&crystals, setup.pump(), &setup.signals(), setup.interaction, Want::Rings)?;
        found.push((setting, rings));
    }
    Ok(figure(setup, axis, &found))
}

fn figure(setup: &Setup, axis: &Axis, found: &[(Angle, Cones)]) -> Drawing {
    let mm = setup.screen.mm();
    let curves = |cones: &Cones| -> Vec<Vec<(f64, f64)>> {
        let rings = cones.rings.iter().filter_map(|r| r.ring.as_ref().ok());
        rings
            .map(|r| (0..SAMPLES).map(|j| r.curve.direction(j).on_screen_mm(setup.screen)).collect())
            .collect()
    };
    let reach = found.iter().flat_map(|(_, c)| curves(c)).flatten();
    let most = reach.fold(0.02 * mm, |m: f64, p| m.max(p.0.abs()).max(p.1.abs())) * 1.15;
    let mut d = Drawing::new(700.0, 770.0, "Rings over a range of turns");
    let frame = Extent { left: 70.0, top: 50.0, right: 670.0, bottom: 650.0 };
    let middle = (370.0, 350.0);
    let scale = 300.0 / most;
    let at = |p: &(f64, f64)| (middle.0 + scale * p.0, middle.1 - scale * p.1);
    axes(&mut d, frame, scale, most, middle);
    let mut entries = Vec::new();
    let mut wavelengths: Vec<f64> =
        found.iter().flat_map(|(_, c)| &c.rings).map(|r| r.wavelength.nm().round()).collect();
    wavelengths.sort_by(f64::total_cmp);
    wavelengths.dedup();
    let colours = wavelengths.len();
    for (n, (setting, cones)) in found.iter().enumerate() {
        let width = 0.6 + 1.8 * n as f64 / (found.len() - 1) as f64;
        let rows = cones.rings.iter().filter(|r| r.ring.is_ok());
        for (row, curve) in rows.zip(curves(cones)) {
            let line = ring_pen(row.polarization, width);
            let placed: Vec<_> = curve.iter().map(at).collect();
            d.path(&placed, line, true);
            let degrees = tidy((setting.degrees() * 1e4).round() * 1e-4);
            let of = if colours > 1 { format!(" {:.0} nm", row.wavelength.nm()) } else { String::new() };
            entries.push((placed, format!("{}{of} at {degrees:+} deg", row.polarization), line));
        }
    }
    keys(&mut d, entries, frame);
    captions(&mut d, setup, axis, found);
    d
}

/// One ring's entry in the key: its curve, text and line.
type Entry = (Vec<(f64, f64)>, String, Pen);

/// A key on either side, the ring that reaches highest first: each ring's line beside its text.
fn keys(d: &mut Drawing, entries: Vec<Entry>, frame: Extent) {
    const SAMPLE: f64 = 26.0;
    let middle = 0.5 * (frame.left + frame.right);
    let (mut left, mut right): (Vec<_>, Vec<_>) = entries.into_iter().partition(|(points, ..)| {
        let mean = points.iter().map(|p| p.0).sum::<f64>() / points.len() as f64;
        mean < middle - 1.0
    });
    let top = |entry: &Entry| entry.0.iter().map(|p| p.1).fold(f64::INFINITY, f64::min);
    for (side, x, towards, anchor) in [
        (&mut left, frame.left + 8.0, 1.0, Anchor::Start),
        (&mut right, frame.right - 8.0, -1.0, Anchor::End),
    ] {
        side.sort_by(|a, b| top(a).total_cmp(&top(b)));
        for (n, (_, text, line)) in side.iter().enumerate() {
            let y = frame.top + 18.0 + 15.0 * n as f64;
            d.line((x, y - 4.0), (x + towards * SAMPLE, y - 4.0), *line);
            d.coloured_text((x + towards * (SAMPLE + 6.0), y), 12.0, anchor, text, line.colour);
        }
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

fn captions(d: &mut Drawing, setup: &Setup, axis: &Axis, found: &[(Angle, Cones)]) {
    let key = if axis.cross { "cross tilt" } else { "tilt" };
    let crystal = &setup.crystals[0];
    d.text(
        (70.0, 22.0),
        13.0,
        Anchor::Start,
        &format!(
            "Rings for {} settings of the {key}; thin lines first, the highest ring first in each key",
            found.len()
        ),
    );
    d.text((16.0, 40.0), 12.0, Anchor::Start, "y in mm");
    let place = format!("x in mm on a screen at {}, seen from downstream: +x right, +y up", setup.screen);
    d.text((370.0, 688.0), 12.0, Anchor::Middle, &place);
    let dark: Vec<String> = found
        .iter()
        .filter(|(_, c)| c.rings.iter().all(|r| r.ring.is_err()))
        .map(|(a, _)| format!("{:+}", tidy((a.degrees() * 1e4).round() * 1e-4)))
        .collect();
    let mut text = format!(
        "{}:{} cut theta {:.3} deg, phi {:.3} deg; {}, pump {:.3} nm. e or slow rings full, o or fast rings dashed.",
        crystal.material.id,
        crystal.set().id,
        crystal.cut.theta.degrees(),
        crystal.cut.phi.degrees(),
        setup.interaction,
        setup.pump().nm()
    );
    if !dark.is_empty() {
        text.push_str(&format!(" No ring at {} deg.", dark.join(", ")));
    }
    for (n, line) in broken(&text, 100).iter().enumerate() {
        d.text((16.0, 712.0 + 17.0 * n as f64), 12.0, Anchor::Start, line);
    }
}
