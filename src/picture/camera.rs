//! The figure of `--view camera`: the picture, or a recorded frame, with scales, rings and marks.

use super::drawing::{Anchor, BLUE, Drawing, Extent, GREY, INK, ORANGE, Pen, dashed, nice_step, pen};
use super::sensor::{Optics, Sensor};
use crate::frame::Direction;
use crate::job::Setup;
use crate::matching::{Cones, RingRow, Status};
use crate::optics::Polarization;
use crate::quantity::tidy;

/// What lies behind the marks.
#[derive(Debug, Clone, Copy)]
pub struct Backdrop<'a> {
    /// A PNG image.
    pub png: &'a [u8],
    /// Its width and height, pixels.
    pub size: (u32, u32),
    /// Where the undeviated pump is on it, pixels from the upper left corner.
    pub pump: (f64, f64),
}

/// Side of the plot, in units of the drawing.
const SIDE: f64 = 560.0;
const LEFT: f64 = 70.0;
const TOP: f64 = 62.0;
/// Size of texts.
const SIZE: f64 = 12.0;

/// From millimetres on the sensor to the drawing.
struct Plot {
    frame: Extent,
    scale: f64,
    pump: (f64, f64),
    signs: (f64, f64),
    distance: f64,
}

impl Plot {
    fn new(sensor: &Sensor, backdrop: &Backdrop<'_>) -> Self {
        let (w, h) = (f64::from(backdrop.size.0), f64::from(backdrop.size.1));
        let per_pixel = SIDE / w;
        Self {
            frame: Extent { left: LEFT, top: TOP, right: LEFT + SIDE, bottom: TOP + per_pixel * h },
            scale: SIDE / (sensor.field.si() * 1e3),
            pump: (LEFT + per_pixel * backdrop.pump.0, TOP + per_pixel * backdrop.pump.1),
            signs: sensor.seen.signs(),
            distance: sensor.optics.scale().si() * 1e3,
        }
    }

    fn place(&self, x: f64, y: f64) -> (f64, f64) {
        (self.pump.0 + self.signs.0 * x * self.scale, self.pump.1 - self.signs.1 * y * self.scale)
    }

    fn towards(&self, direction: Direction) -> (f64, f64) {
        let (x, y) = direction.on_screen_mm(crate::quantity::Length::metres(self.distance * 1e-3));
        self.place(x, y)
    }

    fn holds(&self, (x, y): (f64, f64)) -> bool {
        let f = &self.frame;
        (f.left..=f.right).contains(&x) && (f.top..=f.bottom).contains(&y)
    }

    /// Ends of the horizontal (0) or vertical (1) axis, mm.
    fn range(&self, axis: usize) -> (f64, f64) {
        let (sign, ends) = match axis {
            0 => (self.signs.0, [self.frame.left - self.pump.0, self.frame.right - self.pump.0]),
            _ => (self.signs.1, [self.pump.1 - self.frame.bottom, self.pump.1 - self.frame.top]),
        };
        let [a, b] = ends.map(|e| sign * e / self.scale);
        (a.min(b), a.max(b))
    }
}

/// Line of a ring by its polarization: what vibrates like the pump in a full line, the other dashed.
pub(super) fn ring_pen(polarization: Polarization, width: f64) -> Pen {
    match polarization {
        Polarization::Extraordinary | Polarization::Slow => pen(BLUE, width),
        Polarization::Ordinary | Polarization::Fast => dashed(ORANGE, width),
    }
}

/// The figure; `notes` are sentences below it.
#[must_use]
pub fn camera(
    setup: &Setup,
    cones: &Cones,
    sensor: &Sensor,
    backdrop: Backdrop<'_>,
    notes: &[String],
) -> Drawing {
    let plot = Plot::new(sensor, &backdrop);
    let lines: Vec<String> = notes.iter().flat_map(|note| broken(note, 100)).collect();
    let below = plot.frame.bottom + 62.0;
    let height = below + 16.0 * lines.len() as f64 + 8.0;
    let mut drawing = Drawing::new(LEFT + SIDE + 70.0, height, "Rings of photon pairs in the far field");
    drawing.image(backdrop.png, plot.frame);
    scales(&mut drawing, &plot, sensor);
    drawing.clip(plot.frame);
    for row in &cones.rings {
        if let Ok(ring) = &row.ring {
            let points: Vec<_> =
                (0..crate::matching::SAMPLES).map(|j| plot.towards(ring.curve.direction(j))).collect();
            drawing.path(&points, pen("#ffffff", 3.2), true);
            drawing.path(&points, ring_pen(row.polarization, 1.4), true);
        }
    }
    drawing.unclip();
    marks(&mut drawing, &plot, setup, cones);
    for row in &cones.rings {
        ring_label(&mut drawing, &plot, row, setup.crystals.len());
    }
    for (n, line) in lines.iter().enumerate() {
        drawing.text((LEFT, below + 16.0 * n as f64), SIZE - 1.0, Anchor::Start, line);
    }
    drawing
}

/// Frame, scales in mm and degrees, scale bar.
fn scales(drawing: &mut Drawing, plot: &Plot, sensor: &Sensor) {
    let f = plot.frame;
    let corners = [(f.left, f.top), (f.right, f.top), (f.right, f.bottom), (f.left, f.bottom)];
    drawing.path(&corners, pen(INK, 1.0), true);
    for axis in [0, 1] {
        let (low, high) = plot.range(axis);
        let step = nice_step(high - low, 7.0);
        for value in multiples(low, high, step) {
            tick(drawing, plot, axis, false, value, &format!("{}", tidy(value)));
        }
        let degrees = |mm: f64| (mm / plot.distance).atan().to_degrees();
        let step = nice_step(degrees(high) - degrees(low), 8.0);
        for value in multiples(degrees(low), degrees(high), step) {
            let mm = plot.distance * value.to_radians().tan();
            tick(drawing, plot, axis, true, mm, &format!("{}", tidy((value * 1e6).round() * 1e-6)));
        }
    }
    let what = match sensor.optics {
        Optics::Screen(distance) => format!("on a screen at {distance}"),
        Optics::Lens(focal) => format!("behind a lens of focal length {focal}"),
    };
    let middle = 0.5 * (f.left + f.right);
    drawing.text((middle, f.bottom + 36.0), SIZE, Anchor::Middle, &format!("x in mm {what}"));
    drawing.text((middle, f.top - 34.0), SIZE, Anchor::Middle, "h in deg outside the crystal");
    drawing.text((6.0, f.top - 34.0), SIZE, Anchor::Start, "y in mm");
    drawing.text((f.right + 64.0, f.top - 34.0), SIZE, Anchor::End, "v in deg");
    let length = nice_step(SIDE / plot.scale, 5.0);
    let (from, to) = (f.right - 16.0 - length * plot.scale, f.right - 16.0);
    let y = f.bottom - 14.0;
    let white = Pen { colour: "#ffffff", width: 6.0, dash: "" };
    drawing.line((from - 2.0, y), (to + 2.0, y), white);
    drawing.line((from, y), (to, y), pen(INK, 3.0));
    drawing.text((0.5 * (from + to), y - 7.0), SIZE, Anchor::Middle, &format!("{} mm", tidy(length)));
}

fn multiples(low: f64, high: f64, step: f64) -> Vec<f64> {
    let (from, to) = ((low / step - 1e-9).ceil() as i64, (high / step + 1e-9).floor() as i64);
    (from..=to).map(|n| n as f64 * step).collect()
}

/// A tick at `mm` on the near (mm) or far (degrees) side of an axis.
fn tick(drawing: &mut Drawing, plot: &Plot, axis: usize, far: bool, mm: f64, text: &str) {
    let f = plot.frame;
    match axis {
        0 => {
            let (x, _) = plot.place(mm, 0.0);
            let (y, out) = if far { (f.top, -1.0) } else { (f.bottom, 1.0) };
            drawing.line((x, y), (x, y + 5.0 * out), pen(INK, 1.0));
            drawing.text((x, if far { y - 9.0 } else { y + 18.0 }), SIZE, Anchor::Middle, text);
        }
        _ => {
            let (_, y) = plot.place(0.0, mm);
            let (x, out, anchor) =
                if far { (f.right, 1.0, Anchor::Start) } else { (f.left, -1.0, Anchor::End) };
            drawing.line((x, y), (x + 5.0 * out, y), pen(INK, 1.0));
            drawing.text((x + 9.0 * out, y + 4.0), SIZE, anchor, text);
        }
    }
}

/// The pump, the crossings, and where the faces send the pump back.
fn marks(drawing: &mut Drawing, plot: &Plot, setup: &Setup, cones: &Cones) {
    let spot = |drawing: &mut Drawing,
                at: (f64, f64),
                label: &str,
                arms: &[(f64, f64)],
                colour: &'static str| {
        if !plot.holds(at) {
            return;
        }
        for (dx, dy) in arms {
            let white = Pen { colour: "#ffffff", width: 4.5, dash: "" };
            drawing.line((at.0 - dx, at.1 - dy), (at.0 + dx, at.1 + dy), white);
        }
        for (dx, dy) in arms {
            drawing.line((at.0 - dx, at.1 - dy), (at.0 + dx, at.1 + dy), pen(colour, 2.0));
        }
        drawing.reserve(Extent { left: at.0 - 7.0, top: at.1 - 7.0, right: at.0 + 7.0, bottom: at.1 + 7.0 });
        // marks stand on the brightest places
        let look = if label.len() < 4 { (SIZE + 3.0, 1.0) } else { (SIZE, 0.75) };
        drawing.tag(at, look, label, colour, plot.frame);
    };
    let upright = [(7.0, 0.0), (0.0, 7.0)];
    spot(drawing, plot.place(0.0, 0.0), "pump", &upright, INK);
    for row in cones.pairs() {
        let Some(crossing) = &row.crossing else { continue };
        let arm = |photon: char| row.arm(photon).unwrap_or_default();
        let oblique = [(5.5, 5.5), (5.5, -5.5)];
        spot(drawing, plot.towards(crossing.direction), &arm('a'), &oblique, INK);
        if let Some(partner) = crossing.partner {
            spot(drawing, plot.towards(partner), &arm('b'), &oblique, INK);
        }
    }
    for (n, crystal) in setup.crystals.iter().enumerate() {
        let r = crystal.reflection();
        let (x, y) = (-r.x / r.z * plot.distance, -r.y / r.z * plot.distance);
        if x.hypot(y) > 0.5 {
            let of = if setup.crystals.len() > 1 { format!(" {}", n + 1) } else { String::new() };
            let label = format!("reflection of face{of}, laser side");
            spot(drawing, plot.place(x, y), &label, &[(7.0, 0.0)], GREY);
        }
    }
}

/// "e 810 nm" beside the point of the ring that lies farthest out and within the frame.
fn ring_label(drawing: &mut Drawing, plot: &Plot, row: &RingRow, crystals: usize) {
    let Ok(ring) = &row.ring else { return };
    if row.status == Status::NoNonlinearity {
        return;
    }
    let (centre, radius) = ring.circle();
    let side = if centre.norm() < 0.02 * radius { (0.8, 0.6) } else { (centre.x, centre.y) };
    let inside = |(x, y): (f64, f64)| {
        let f = plot.frame;
        (f.left + 8.0..=f.right - 8.0).contains(&x) && (f.top + 8.0..=f.bottom - 8.0).contains(&y)
    };
    let reach = |d: Direction| {
        let (x, y) = d.on_screen_mm(crate::quantity::Length::metres(1.0));
        x * side.0 + y * side.1
    };
    let points = (0..crate::matching::SAMPLES).map(|j| ring.curve.direction(j));
    let outermost =
        points.filter(|d| inside(plot.towards(*d))).max_by(|a, b| reach(*a).total_cmp(&reach(*b)));
    let Some(point) = outermost else { return };
    let of = if crystals > 1 { format!(" of crystal {}", row.crystal + 1) } else { String::new() };
    let text = format!("{} {:.1} nm{of}", row.polarization, row.wavelength.nm());
    // beyond the bright band
    let (x, y) = point.on_screen_mm(crate::quantity::Length::metres(1e-3));
    let (dx, dy) = (x - centre.x, y - centre.y);
    let out = 0.7 * ring.thickness.unwrap_or(0.0) * plot.distance / dx.hypot(dy).max(1e-12);
    let beyond = plot.place(x * plot.distance + dx * out, y * plot.distance + dy * out);
    drawing.label(
        if inside(beyond) { beyond } else { plot.towards(point) },
        SIZE,
        &text.replace(".0 nm", " nm"),
        ring_pen(row.polarization, 1.0).colour,
        plot.frame,
    );
}

/// A sentence in lines of at most so many characters.
pub(super) fn broken(text: &str, width: usize) -> Vec<String> {
    let mut lines = vec![String::new()];
    for word in text.split_whitespace() {
        let last = lines.last_mut().expect("there is one from the start");
        if !last.is_empty() && last.chars().count() + 1 + word.chars().count() > width {
            lines.push(word.into());
        } else {
            if !last.is_empty() {
                last.push(' ');
            }
            last.push_str(word);
        }
    }
    lines
}
