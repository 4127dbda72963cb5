//! The faces of the crystals from downstream, and the rings of each beside it.

use nalgebra::Vector3;

use super::camera::ring_pen;
use super::drawing::{Anchor, BLUE, Drawing, Extent, GREY, INK, ORANGE, Pen, dashed, pen};
use super::side::stacked;
use super::standing::{DASH_DOT, SIZE, Standing, height_of, notes};
use crate::job::Setup;
use crate::matching::Cones;

/// The face of every crystal, in the order in which the pump meets them.
#[must_use]
pub fn front(setup: &Setup, cones: &Cones) -> Drawing {
    stacked(setup, front_of, cones)
}

/// One crystal's face from downstream, and its rings beside it.
#[must_use]
pub fn front_of(setup: &Setup, cones: &Cones, index: usize) -> Drawing {
    let s = Standing::of(setup, cones, index);
    let mut words = vec![s.turn_words()];
    words.push(
        "Arrows X, Y, Z: the dielectric axes as they lie across the beam, Z by its downstream end.".into(),
    );
    words.extend(s.pump_words());
    let mut d = Drawing::new(860.0, 470.0 + height_of(&words), "The crystal's face from downstream");
    let seen = "Seen from downstream, back towards the laser: +x right, +y up.";
    d.text((16.0, 24.0), SIZE, Anchor::Start, seen);
    d.text((16.0, 44.0), SIZE, Anchor::Start, &s.cut_words());
    face(&mut d, &s);
    far_field(&mut d, cones, index);
    notes(&mut d, &words, 470.0);
    d
}

fn face(d: &mut Drawing, s: &Standing<'_>) {
    const HALF: f64 = 110.0;
    let middle = (230.0, 255.0);
    let frame = Extent { left: 10.0, top: 60.0, right: 450.0, bottom: 450.0 };
    let to = |v: Vector3<f64>, length: f64| (middle.0 + length * v.x, middle.1 - length * v.y);
    let across = Vector3::new(-s.lean.y, s.lean.x, 0.0);
    let corner = |a: f64, b: f64| to(s.lean * a + across * b, HALF);
    let outline = [corner(1.0, 1.0), corner(1.0, -1.0), corner(-1.0, -1.0), corner(-1.0, 1.0)];
    d.shape(&outline, "#a0c8e0", 0.35);
    d.path(&outline, pen(INK, 1.5), true);
    let turning = [false, true].map(|cross| s.crystal.turning_axis(cross));
    for line in turning {
        d.line(to(line, -150.0), to(line, 150.0), dashed(GREY, 1.2));
    }
    d.reserve(Extent {
        left: middle.0 - 6.0,
        top: middle.1 - 6.0,
        right: middle.0 + 6.0,
        bottom: middle.1 + 6.0,
    });
    for (name, axis) in ["X", "Y", "Z"].into_iter().zip(s.axes) {
        let length = axis.xy().norm();
        if length > 0.03 {
            let line =
                if name == "Z" { Pen { colour: INK, width: 2.2, dash: DASH_DOT } } else { pen(GREY, 1.2) };
            d.arrow(middle, to(axis, 88.0), line);
            d.label(to(axis, 88.0), SIZE, name, line.colour, frame);
        }
    }
    pump_field(d, s, frame);
    d.label(to(turning[0], 150.0), SIZE, "tilt turns about this line", GREY, frame);
    d.label(to(turning[1], -150.0), SIZE, "cross tilt", GREY, frame);
}

/// The pump's field beside the face, and what the crystal takes of it where that differs.
fn pump_field(d: &mut Drawing, s: &Standing<'_>, frame: Extent) {
    const REACH: f64 = 34.0;
    let Some(light) = s.light else { return };
    let middle = (58.0, 392.0);
    let at = |v: Vector3<f64>, length: f64| (middle.0 + length * v.x, middle.1 - length * v.y);
    d.reserve(Extent {
        left: middle.0 - REACH,
        top: middle.1 - REACH,
        right: middle.0 + REACH,
        bottom: middle.1 + REACH,
    });
    if let Some(taken) = s.takes.filter(|t| light.share(*t) < 0.995) {
        let axis = Vector3::new(taken.cos(), taken.sin(), 0.0);
        d.line(at(axis, -REACH), at(axis, REACH), dashed(GREY, 1.4));
        d.label(at(axis, REACH), SIZE, "taken", GREY, frame);
    }
    match light.linear() {
        Some(azimuth) => {
            let axis = Vector3::new(azimuth.cos(), azimuth.sin(), 0.0);
            d.arrow(middle, at(axis, REACH), pen(BLUE, 1.8));
            d.arrow(middle, at(axis, -REACH), pen(BLUE, 1.8));
        }
        None => {
            let turn = |n: i32| std::f64::consts::TAU * f64::from(n) / 48.0;
            let ellipse: Vec<_> = (0..48).map(|n| at(light.field(turn(n)), REACH)).collect();
            d.path(&ellipse, pen(BLUE, 1.8), true);
        }
    }
    d.label((middle.0, middle.1 + REACH), SIZE, "pump E", BLUE, frame);
}

/// Rings in degrees, small.
fn far_field(d: &mut Drawing, cones: &Cones, index: usize) {
    let middle = (650.0, 255.0);
    let frame = Extent { left: 460.0, top: 60.0, right: 850.0, bottom: 450.0 };
    let points = |row: &crate::matching::RingRow| -> Vec<(f64, f64)> {
        let Ok(ring) = &row.ring else { return Vec::new() };
        (0..crate::matching::SAMPLES)
            .map(|j| ring.curve.direction(j))
            .map(|v| (v.h_deg(), v.v_deg()))
            .collect()
    };
    let own = || cones.rings.iter().filter(|row| row.crystal == index);
    if own().next().is_none() {
        return;
    }
    let all: Vec<Vec<(f64, f64)>> = own().map(points).collect();
    let largest = all.iter().flatten().fold(0.0, |m: f64, p| m.max(p.0.abs()).max(p.1.abs()));
    let scale = 145.0 / largest.max(0.05);
    let at = |p: &(f64, f64)| (middle.0 + scale * p.0, middle.1 - scale * p.1);
    d.arrow((middle.0 - 165.0, middle.1), (middle.0 + 175.0, middle.1), pen(GREY, 1.0));
    d.arrow((middle.0, middle.1 + 165.0), (middle.0, middle.1 - 175.0), pen(GREY, 1.0));
    d.label((middle.0 + 175.0, middle.1), SIZE, "+x", GREY, frame);
    d.label((middle.0, middle.1 - 175.0), SIZE, "+y", GREY, frame);
    for (row, ring) in own().zip(&all) {
        let line = ring_pen(row.polarization, 1.6);
        let placed: Vec<_> = ring.iter().map(at).collect();
        if placed.is_empty() {
            continue;
        }
        d.path(&placed, line, true);
        let mean = placed.iter().fold((0.0, 0.0), |m, p| (m.0 + p.0 / 72.0, m.1 + p.1 / 72.0));
        let off = mean.0 - middle.0;
        let outer = placed.iter().max_by(|a, b| {
            let reach =
                |p: &(f64, f64)| if off.abs() > 1.0 { (p.0 - middle.0) * off.signum() } else { p.0 - p.1 };
            reach(a).total_cmp(&reach(b))
        });
        if let Some(outer) = outer {
            let text = format!("{} {:.1} nm", row.polarization, row.wavelength.nm());
            d.label(*outer, SIZE, &text, line.colour, frame);
        }
    }
    let (caption, colour) = if all.iter().all(Vec::is_empty) {
        ("no ring at this setting".into(), ORANGE)
    } else {
        (format!("rings outside the crystal, largest {largest:.2} deg from the pump"), INK)
    };
    d.coloured_text((655.0, 446.0), SIZE - 0.5, Anchor::Middle, &caption, colour);
}
