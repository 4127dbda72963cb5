//! The crystals in their mounts from the side, each in the plane to which its Z leans, and their order along the pump.

use super::camera::ring_pen;
use super::drawing::{Anchor, BLUE, Drawing, Extent, GREY, INK, Pen, dashed, pen};
use super::standing::{DASH_DOT, SIZE, Standing, gap_words, height_of, named, notes};
use crate::job::Setup;
use crate::matching::{Cones, RingRow};

use nalgebra::Vector3;

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

/// Every crystal from the side, in the order in which the pump meets them.
#[must_use]
pub fn side(setup: &Setup, cones: &Cones) -> Drawing {
    stacked(setup, side_of, cones)
}

/// One crystal's drawing, or the row of them and then each below the other.
pub(super) fn stacked(
    setup: &Setup,
    one: impl Fn(&Setup, &Cones, usize) -> Drawing,
    cones: &Cones,
) -> Drawing {
    match setup.crystals.len() {
        1 => one(setup, cones, 0),
        count => (0..count).fold(line_up(setup), |all, index| all.above(&one(setup, cones, index))),
    }
}

/// The crystals in a row along the pump, with the air between them.
#[must_use]
pub fn line_up(setup: &Setup) -> Drawing {
    const MIDDLE: f64 = 96.0;
    let mut d = Drawing::new(860.0, 160.0, "The crystals along the pump");
    let head = "The crystals in the order in which the pump meets them (not to scale); each is drawn by itself below.";
    d.text((16.0, 24.0), SIZE, Anchor::Start, head);
    let step = (720.0 / setup.crystals.len() as f64).min(240.0);
    d.line((20.0, MIDDLE), (70.0, MIDDLE), pen(INK, 2.2));
    d.text((16.0, MIDDLE - 10.0), SIZE, Anchor::Start, "pump");
    for (index, crystal) in setup.crystals.iter().enumerate() {
        let x = 120.0 + step * index as f64;
        let from = if index == 0 { 70.0 } else { x - step + 20.0 };
        d.arrow((from, MIDDLE), (x - 20.0, MIDDLE), pen(INK, 2.2));
        let outline = [-1.0, 1.0].map(|side| [x + 20.0 * side, MIDDLE]);
        let corners = [
            (outline[0][0], MIDDLE - 34.0),
            (outline[1][0], MIDDLE - 34.0),
            (outline[1][0], MIDDLE + 34.0),
            (outline[0][0], MIDDLE + 34.0),
        ];
        d.shape(&corners, "#a0c8e0", 0.35);
        d.path(&corners, pen(INK, 1.5), true);
        d.text((x, MIDDLE + 5.0), SIZE, Anchor::Middle, &(index + 1).to_string());
        if step > 150.0 {
            d.text((x, MIDDLE - 42.0), SIZE, Anchor::Middle, &named(setup, index));
            let words = format!(
                "{}, {}, roll {:+.1} deg",
                crystal.material.id,
                crystal.length,
                crystal.orientation.roll.degrees() + 0.0
            );
            d.text((x, MIDDLE + 52.0), SIZE, Anchor::Middle, &words);
        }
        if index > 0 && step > 110.0 {
            d.text((x - 0.5 * step, MIDDLE - 8.0), SIZE - 1.5, Anchor::Middle, &gap_words(setup, index));
        }
    }
    let last = 140.0 + step * (setup.crystals.len() - 1) as f64;
    d.line((last, MIDDLE), (last + 60.0, MIDDLE), Pen { colour: INK, width: 1.0, dash: "2 4" });
    d
}

/// One crystal from the side.
#[must_use]
pub fn side_of(setup: &Setup, cones: &Cones, index: usize) -> Drawing {
    let s = Standing::of(setup, cones, index);
    let mut words = vec![s.turn_words()];
    words.extend(s.pump_words());
    if let Some(p) = &s.pairing {
        words.push(format!(
            "Dashed inside: the pump's ray, {:.2} deg off its wave vector (walk-off). Cone angles are outside.",
            p.pump.walkoff().to_degrees()
        ));
    }
    let mut d = Drawing::new(860.0, 470.0 + height_of(&words), "The crystal from the side");
    let middle = (300.0, 270.0);
    let frame = Extent { left: 10.0, top: 60.0, right: 850.0, bottom: 450.0 };
    d.text((16.0, 24.0), SIZE, Anchor::Start, &viewpoint(s.lean));
    d.text((16.0, 44.0), SIZE, Anchor::Start, &s.cut_words());
    let flat = |v: Vector3<f64>| {
        let (along, up) = (v.z, v.dot(&s.lean));
        let size = along.hypot(up).max(1e-12);
        (along / size, up / size)
    };
    let at = |from: (f64, f64), v: (f64, f64), length: f64| (from.0 + length * v.0, from.1 - length * v.1);
    let angle = |v: (f64, f64)| v.1.atan2(v.0);
    let (w, z, counted) = (flat(s.normal), flat(s.axes[2]), flat(s.counted));
    let exit = slab(&mut d, middle, w);
    emitted(&mut d, cones, exit, &s, frame);
    pump(&mut d, &s, middle, exit);
    d.line(at(middle, w, -95.0), at(middle, w, 150.0), dashed(GREY, 1.0));
    let axis = Pen { colour: INK, width: 1.8, dash: DASH_DOT };
    d.line(at(middle, z, -150.0), at(middle, z, 165.0), axis);
    d.arc(middle, 105.0, (angle(w), angle(counted)), pen(INK, 1.2), true);
    let between = 0.5 * (angle(w) + angle(counted));
    let on_arc = (middle.0 + 105.0 * between.cos(), middle.1 - 105.0 * between.sin());
    d.arc(middle, 128.0, (1.95, 2.5), pen(INK, 1.2), true);
    let sense = (middle.0 + 128.0 * 2.25f64.cos(), middle.1 - 128.0 * 2.25f64.sin());
    d.label(at(middle, z, 165.0), SIZE, "Z", INK, frame);
    d.label(on_arc, SIZE, &format!("theta {:.3} deg", s.crystal.cut.theta.degrees()), INK, frame);
    d.label(at(middle, w, -95.0), SIZE, "face normal", GREY, frame);
    d.label(sense, SIZE, "more tilt", INK, frame);
    notes(&mut d, &words, 470.0);
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
fn pump(d: &mut Drawing, s: &Standing<'_>, middle: (f64, f64), exit: (f64, f64)) {
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
    polarization(d, s, (80.0, y));
}

/// Arrows for what lies in the plane, a circle with a dot for what lies across it; their sizes go with the fields.
fn polarization(d: &mut Drawing, s: &Standing<'_>, at: (f64, f64)) {
    let Some(light) = s.light else { return };
    let plane = s.lean.y.atan2(s.lean.x);
    let [within, across] =
        [plane, plane + std::f64::consts::FRAC_PI_2].map(|a| light.share(a).max(0.0).sqrt());
    if within > 0.05 {
        let reach = 34.0 * within;
        d.arrow(at, (at.0, at.1 - reach), pen(BLUE, 1.8));
        d.arrow(at, (at.0, at.1 + reach), pen(BLUE, 1.8));
        d.reserve(Extent { left: at.0 - 5.0, top: at.1 - reach, right: at.0 + 5.0, bottom: at.1 + reach });
    }
    if across > 0.05 {
        let round = (at.0 + if within > 0.05 { 22.0 } else { 0.0 }, at.1);
        d.circle(round, 7.0 * across, pen(BLUE, 1.8));
        d.circle(round, 1.5 * across, pen(BLUE, 2.0));
        d.reserve(Extent { left: round.0 - 8.0, top: at.1 - 8.0, right: round.0 + 8.0, bottom: at.1 + 8.0 });
    }
    let text = if across <= 0.05 {
        "pump E in this plane".to_string()
    } else if within <= 0.05 {
        "pump E across this plane".into()
    } else {
        format!("pump E {:.0} % in this plane", 100.0 * within * within)
    };
    d.coloured_text((14.0, at.1 + 52.0), SIZE - 1.0, Anchor::Start, &text, BLUE);
}

/// Edges of the cones in the plane of the drawing; their words stand above and below all of them.
fn emitted(d: &mut Drawing, cones: &Cones, exit: (f64, f64), s: &Standing<'_>, frame: Extent) {
    const LINE: f64 = 17.0;
    let rows: Vec<_> = cones.rings.iter().filter(|row| row.crystal == s.index).collect();
    if !rows.is_empty() && rows.iter().all(|row| row.ring.is_err()) {
        d.text((840.0, exit.1 - 20.0), SIZE, Anchor::End, "no ring at this setting");
    }
    let run = 790.0 - exit.0;
    let room = exit.1 - frame.top - 20.0 - LINE * rows.len() as f64;
    let mut words: [Vec<(String, &'static str)>; 2] = Default::default();
    let mut edges = [exit.1, exit.1];
    for row in &rows {
        let Ok(ring) = &row.ring else { continue };
        let slopes = (0..crate::matching::SAMPLES).map(|j| {
            let v = ring.curve.direction(j).lab().0;
            v.dot(&s.lean) / v.z
        });
        let (low, high) = slopes.fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), t| (l.min(t), h.max(t)));
        let end = |slope: f64| {
            let reach = run.min(room / slope.abs().max(1e-9));
            (exit.0 + reach, exit.1 - slope * reach)
        };
        let line = ring_pen(row.polarization, 1.5);
        d.shape(&[exit, end(high), end(low)], line.colour, 0.1);
        d.line(exit, end(high), line);
        d.line(exit, end(low), line);
        edges = [edges[0].min(end(high).1), edges[1].max(end(low).1)];
        let lean = (ring.axis.lab().0.dot(&s.lean) / ring.axis.lab().0.z).atan().to_degrees();
        let below = usize::from(lean < -1e-6);
        words[below].push((cone_words(row, ring.half_angle, lean), line.colour));
    }
    for (below, lines) in words.iter().enumerate() {
        for (n, (text, colour)) in lines.iter().enumerate() {
            let away = LINE * (n as f64 + if below == 1 { 1.0 } else { 0.5 });
            let y = if below == 1 { edges[1] + away } else { edges[0] - away };
            d.coloured_text((840.0, y), SIZE, Anchor::End, text, colour);
        }
    }
}

fn cone_words(row: &RingRow, half_angle: f64, lean: f64) -> String {
    let mut text = format!(
        "{} {:.1} nm: half angle {:.3} deg",
        row.polarization,
        row.wavelength.nm(),
        half_angle.to_degrees()
    );
    if lean.abs() > 5e-4 {
        text.push_str(&format!(", axis {lean:+.3} deg"));
    }
    text
}
