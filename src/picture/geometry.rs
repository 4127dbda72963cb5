//! The crystal in its mount: from the side, in the plane that holds Z, and its face from downstream.

use nalgebra::Vector3;

use super::camera::{broken, ring_pen};
use super::drawing::{Anchor, BLUE, Drawing, Extent, GREY, INK, ORANGE, Pen, dashed, pen};
use crate::frame::{Direction, Lab, Mount};
use crate::job::Setup;
use crate::matching::{Actuator, Cones, Emission, Pairing};
use crate::optics::Crystal;
use crate::quantity::Angle;
use crate::report::room_words;

const SIZE: f64 = 12.5;
const DASH_DOT: &str = "14 4 2 4";

/// The crystal's vectors in the lab.
struct Standing {
    normal: Vector3<f64>,
    /// X, Y, Z; Z by its downstream end.
    axes: [Vector3<f64>; 3],
    /// Unit vector across the beam towards which Z leans at zero tilt.
    lean: Vector3<f64>,
    pairing: Option<Pairing>,
    pump_field: Option<Vector3<f64>>,
    pump_ray: Option<Vector3<f64>>,
}

impl Standing {
    fn of(setup: &Setup, crystal: &Crystal) -> Self {
        let placement = crystal.placement();
        let lab = |v: Vector3<f64>| placement.to_lab(Mount(v)).0;
        let dielectric = placement.dielectric_axes();
        let mut axes = [0, 1, 2].map(|n| lab(dielectric.column(n).into_owned()));
        if axes[2].z < 0.0 {
            axes[2] = -axes[2];
        }
        let (sin, cos) = crystal.orientation.roll.si().sin_cos();
        let pairing = Emission::of(crystal, setup.photons()).ok().and_then(|emission| {
            let roles = *emission.wanted(crystal, setup.interaction).ok()?.first()?;
            emission.pairing(roles, Direction::forward())
        });
        let of_pump = |v: Option<Mount>| v.map(|v| placement.to_lab(v).0);
        Self {
            normal: lab(Vector3::z()),
            axes,
            lean: Vector3::new(cos, sin, 0.0),
            pump_field: of_pump(pairing.map(|p| p.pump.field)),
            pump_ray: of_pump(pairing.map(|p| p.pump.ray)),
            pairing,
        }
    }
}

fn cut_words(crystal: &Crystal) -> String {
    format!(
        "{}:{}  theta {:.3} deg, phi {:.3} deg, length {} (lengths not to scale, angles true)",
        crystal.material.id,
        crystal.set().id,
        crystal.cut.theta.degrees(),
        crystal.cut.phi.degrees(),
        crystal.length
    )
}

fn turn_words(crystal: &Crystal) -> String {
    let o = &crystal.orientation;
    format!(
        "tilt {:+.3} deg, cross tilt {:+.3} deg, roll {:+.1} deg. For more tilt, {}.",
        o.tilt.degrees() + 0.0,
        o.cross_tilt.degrees() + 0.0,
        o.roll.degrees() + 0.0,
        room_words(crystal, Actuator::Tilt, Angle::from_degrees(1.0)).replace(" by 1 deg", "")
    )
}

/// From where the side view is seen: the beam runs to the right, `up` upwards.
fn viewpoint(up: Vector3<f64>) -> String {
    let seen = if up.x > 0.999 {
        "+x is up: seen from above".into()
    } else if up.x < -0.999 {
        "-x is up: seen from below".into()
    } else if up.y > 0.999 {
        "+y is up: seen from the right of who looks along the beam".into()
    } else if up.y < -0.999 {
        "-y is up: seen from the left of who looks along the beam".into()
    } else {
        format!("up is {:.1} deg from +x towards +y", up.y.atan2(up.x).to_degrees())
    };
    format!("Side view in the plane to which Z leans. The pump runs to the right; {seen}.")
}

/// The first crystal from the side.
#[must_use]
pub fn side(setup: &Setup, cones: &Cones) -> Drawing {
    let crystal = &setup.crystals[0];
    let s = Standing::of(setup, crystal);
    let mut d = Drawing::new(860.0, 530.0, "The crystal from the side");
    let middle = (300.0, 270.0);
    let frame = Extent { left: 10.0, top: 60.0, right: 850.0, bottom: 450.0 };
    d.text((16.0, 24.0), SIZE, Anchor::Start, &viewpoint(s.lean));
    d.text((16.0, 44.0), SIZE, Anchor::Start, &cut_words(crystal));
    let flat = |v: Vector3<f64>| {
        let (along, up) = (v.z, v.dot(&s.lean));
        let size = along.hypot(up).max(1e-12);
        (along / size, up / size)
    };
    let at = |from: (f64, f64), v: (f64, f64), length: f64| (from.0 + length * v.0, from.1 - length * v.1);
    let angle = |v: (f64, f64)| v.1.atan2(v.0);
    let (w, z) = (flat(s.normal), flat(s.axes[2]));
    let exit = slab(&mut d, middle, w);
    emitted(&mut d, cones, exit, &s, frame);
    pump(&mut d, &s, middle, exit);
    d.line(at(middle, w, -95.0), at(middle, w, 150.0), dashed(GREY, 1.0));
    let axis = Pen { colour: INK, width: 1.8, dash: DASH_DOT };
    d.line(at(middle, z, -150.0), at(middle, z, 165.0), axis);
    d.arc(middle, 105.0, (angle(w), angle(z)), pen(INK, 1.2), true);
    let between = 0.5 * (angle(w) + angle(z));
    let on_arc = (middle.0 + 105.0 * between.cos(), middle.1 - 105.0 * between.sin());
    d.arc(middle, 128.0, (1.95, 2.5), pen(INK, 1.2), true);
    let sense = (middle.0 + 128.0 * 2.25f64.cos(), middle.1 - 128.0 * 2.25f64.sin());
    d.label(at(middle, z, 165.0), SIZE, "Z", INK, frame);
    d.label(on_arc, SIZE, &format!("theta {:.3} deg", crystal.cut.theta.degrees()), INK, frame);
    d.label(at(middle, w, -95.0), SIZE, "face normal", GREY, frame);
    d.label(sense, SIZE, "more tilt", INK, frame);
    notes(&mut d, &side_notes(crystal, &s), 470.0);
    d
}

/// The crystal's outline; the middle of its exit face.
fn slab(d: &mut Drawing, middle: (f64, f64), w: (f64, f64)) -> (f64, f64) {
    const HALF: (f64, f64) = (45.0, 80.0);
    let corner = |a: f64, b: f64| {
        (middle.0 + a * HALF.0 * w.0 - b * HALF.1 * w.1, middle.1 - a * HALF.0 * w.1 - b * HALF.1 * w.0)
    };
    let outline = [corner(-1.0, -1.0), corner(1.0, -1.0), corner(1.0, 1.0), corner(-1.0, 1.0)];
    d.shape(&outline, "#a0c8e0", 0.35);
    d.path(&outline, pen(INK, 1.5), true);
    corner(1.0, 0.0)
}

/// Beam, polarization and walk-off of the pump.
fn pump(d: &mut Drawing, s: &Standing, middle: (f64, f64), exit: (f64, f64)) {
    let y = middle.1;
    let entrance = 2.0 * middle.0 - exit.0;
    d.arrow((20.0, y), (entrance, y), pen(INK, 2.2));
    d.line((entrance, y), (exit.0, y), pen(INK, 1.0));
    d.line((exit.0, y), (840.0, y), Pen { colour: INK, width: 1.0, dash: "2 4" });
    d.reserve(Extent { left: 20.0, top: y - 3.0, right: 840.0, bottom: y + 3.0 });
    if let Some(ray) = s.pump_ray {
        let slope = ray.dot(&s.lean) / ray.z;
        let run = exit.0 - entrance;
        d.line((entrance, y), (exit.0, y - slope * run), dashed(BLUE, 1.6));
    }
    let Some(field) = s.pump_field else { return };
    let along = field.dot(&s.lean).abs();
    let frame = Extent { left: 14.0, top: 60.0, right: 180.0, bottom: 450.0 };
    let at = (80.0, y);
    let text = if along > 0.7 {
        d.arrow((at.0, y), (at.0, y - 34.0), pen(BLUE, 1.8));
        d.arrow((at.0, y), (at.0, y + 34.0), pen(BLUE, 1.8));
        d.reserve(Extent { left: at.0 - 5.0, top: y - 36.0, right: at.0 + 5.0, bottom: y + 36.0 });
        "pump E in this plane"
    } else {
        d.circle(at, 7.0, pen(BLUE, 1.8));
        d.circle(at, 1.5, pen(BLUE, 2.0));
        "pump E across this plane"
    };
    d.label((at.0, y + 44.0), SIZE, text, BLUE, frame);
}

/// Edges of the cones in the plane of the drawing.
fn emitted(d: &mut Drawing, cones: &Cones, exit: (f64, f64), s: &Standing, frame: Extent) {
    let run = 790.0 - exit.0;
    for row in &cones.rings {
        let Ok(ring) = &row.ring else { continue };
        let slopes = (0..crate::matching::SAMPLES).map(|j| {
            let Lab(v) = ring.curve.direction(j).lab();
            v.dot(&s.lean) / v.z
        });
        let (low, high) = slopes.fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), t| (l.min(t), h.max(t)));
        let end = |slope: f64| {
            let reach = run.min((exit.1 - frame.top - 20.0) / slope.abs().max(1e-9));
            (exit.0 + reach, exit.1 - slope * reach)
        };
        let line = ring_pen(row.polarization, 1.5);
        d.shape(&[exit, end(high), end(low)], line.colour, 0.1);
        d.line(exit, end(high), line);
        d.line(exit, end(low), line);
        let axis = ring.axis.lab().0;
        let lean = (axis.dot(&s.lean) / axis.z).atan().to_degrees();
        let text = format!(
            "{} {:.1} nm: half angle {:.3} deg, axis {:+.3} deg",
            row.polarization,
            row.wavelength.nm(),
            ring.half_angle.to_degrees(),
            lean
        );
        let outer = if lean >= -1e-6 { end(high) } else { end(low) };
        d.label((outer.0 - 120.0, outer.1), SIZE, &text, line.colour, frame);
    }
}

fn side_notes(crystal: &Crystal, s: &Standing) -> Vec<String> {
    let mut lines = vec![turn_words(crystal)];
    if let Some(p) = &s.pairing {
        lines.push(format!(
            "Dashed inside: the pump's ray, {:.2} deg off its wave vector (walk-off). Cone angles are outside.",
            p.pump.walkoff().to_degrees()
        ));
    }
    lines
}

fn notes(d: &mut Drawing, sentences: &[String], from: f64) {
    let lines = sentences.iter().flat_map(|s| broken(s, 125));
    for (n, line) in lines.enumerate() {
        d.text((16.0, from + 17.0 * n as f64), SIZE - 0.5, Anchor::Start, &line);
    }
}

/// The first crystal's face from downstream, and the rings beside it.
#[must_use]
pub fn front(setup: &Setup, cones: &Cones) -> Drawing {
    let crystal = &setup.crystals[0];
    let s = Standing::of(setup, crystal);
    let mut d = Drawing::new(860.0, 530.0, "The crystal's face from downstream");
    d.text(
        (16.0, 24.0),
        SIZE,
        Anchor::Start,
        "Seen from downstream, back towards the laser: +x right, +y up.",
    );
    d.text((16.0, 44.0), SIZE, Anchor::Start, &cut_words(crystal));
    face(&mut d, &s, crystal);
    far_field(&mut d, cones);
    notes(&mut d, &[turn_words(crystal), front_words(&s)], 470.0);
    d
}

fn front_words(s: &Standing) -> String {
    let field = s.pump_field.map(|f| f.y.atan2(f.x).to_degrees().rem_euclid(180.0));
    let field = field.map_or(String::new(), |a| {
        let a = if a > 179.95 { 0.0 } else { a };
        format!(" The pump's field stands at {a:.1} deg from +x towards +y.")
    });
    format!(
        "Arrows X, Y, Z: the dielectric axes as they lie across the beam, Z by its downstream end.{field}"
    )
}

fn face(d: &mut Drawing, s: &Standing, crystal: &Crystal) {
    const HALF: f64 = 110.0;
    let middle = (230.0, 255.0);
    let frame = Extent { left: 10.0, top: 60.0, right: 450.0, bottom: 450.0 };
    let to = |v: Vector3<f64>, length: f64| (middle.0 + length * v.x, middle.1 - length * v.y);
    let across = Vector3::new(-s.lean.y, s.lean.x, 0.0);
    let corner = |a: f64, b: f64| to(s.lean * a + across * b, HALF);
    let outline = [corner(1.0, 1.0), corner(1.0, -1.0), corner(-1.0, -1.0), corner(-1.0, 1.0)];
    d.shape(&outline, "#a0c8e0", 0.35);
    d.path(&outline, pen(INK, 1.5), true);
    let turning = crystal.turning_axis(false);
    d.line(to(turning, -150.0), to(turning, 150.0), dashed(GREY, 1.2));
    d.reserve(Extent {
        left: middle.0 - 6.0,
        top: middle.1 - 6.0,
        right: middle.0 + 6.0,
        bottom: middle.1 + 6.0,
    });
    if let Some(field) = s.pump_field {
        let e = Vector3::new(field.x, field.y, 0.0).normalize();
        let shift = Vector3::new(-e.y, e.x, 0.0) * 16.0;
        let from = |length: f64| (to(e, length).0 + shift.x, to(e, length).1 - shift.y);
        d.arrow(from(0.0), from(62.0), pen(BLUE, 1.8));
        d.arrow(from(0.0), from(-62.0), pen(BLUE, 1.8));
        d.label(from(-62.0), SIZE, "pump E", BLUE, frame);
    }
    for (name, axis) in ["X", "Y", "Z"].into_iter().zip(s.axes) {
        let length = axis.xy().norm();
        if length > 0.03 {
            let line =
                if name == "Z" { Pen { colour: INK, width: 2.2, dash: DASH_DOT } } else { pen(GREY, 1.2) };
            d.arrow(middle, to(axis, 88.0), line);
            d.label(to(axis, 88.0), SIZE, name, line.colour, frame);
        }
    }
    d.label(to(turning, 150.0), SIZE, "tilt turns about this line", GREY, frame);
}

/// Rings in degrees, small.
fn far_field(d: &mut Drawing, cones: &Cones) {
    let middle = (650.0, 255.0);
    let frame = Extent { left: 460.0, top: 60.0, right: 850.0, bottom: 450.0 };
    let points = |row: &crate::matching::RingRow| -> Vec<(f64, f64)> {
        let Ok(ring) = &row.ring else { return Vec::new() };
        (0..crate::matching::SAMPLES)
            .map(|j| ring.curve.direction(j))
            .map(|v| (v.h_deg(), v.v_deg()))
            .collect()
    };
    let all: Vec<Vec<(f64, f64)>> = cones.rings.iter().map(points).collect();
    let most = all.iter().flatten().fold(0.5, |m: f64, p| m.max(p.0.abs()).max(p.1.abs()));
    let scale = 145.0 / most;
    let at = |p: &(f64, f64)| (middle.0 + scale * p.0, middle.1 - scale * p.1);
    d.arrow((middle.0 - 165.0, middle.1), (middle.0 + 175.0, middle.1), pen(GREY, 1.0));
    d.arrow((middle.0, middle.1 + 165.0), (middle.0, middle.1 - 175.0), pen(GREY, 1.0));
    d.label((middle.0 + 175.0, middle.1), SIZE, "+x", GREY, frame);
    d.label((middle.0, middle.1 - 175.0), SIZE, "+y", GREY, frame);
    for (row, ring) in cones.rings.iter().zip(&all) {
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
            d.label(
                *outer,
                SIZE,
                &format!("{} {:.1} nm", row.polarization, row.wavelength.nm()),
                line.colour,
                frame,
            );
        }
    }
    let caption = format!("rings outside the crystal, largest {most:.2} deg from the pump");
    d.coloured_text(
        (655.0, 446.0),
        SIZE - 0.5,
        Anchor::Middle,
        &caption,
        if all.is_empty() { ORANGE } else { INK },
    );
}
