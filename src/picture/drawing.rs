//! A small writer of SVG: shapes, texts in the viewer's own fonts, and labels that keep out of each other's way.

use std::fmt::Write as _;

/// A drawing under construction; lengths in its own units, y downwards.
#[derive(Debug, Clone)]
pub struct Drawing {
    width: f64,
    height: f64,
    title: String,
    body: String,
    taken: Vec<Extent>,
    /// Middles of short pieces of the lines drawn so far: labels keep off them where they can.
    lines: Vec<(f64, f64)>,
}

/// A rectangle.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Extent {
    /// Left edge.
    pub left: f64,
    /// Upper edge.
    pub top: f64,
    /// Right edge.
    pub right: f64,
    /// Lower edge.
    pub bottom: f64,
}

impl Extent {
    /// Common area.
    #[must_use]
    pub fn overlap(&self, other: &Self) -> f64 {
        let across = self.right.min(other.right) - self.left.max(other.left);
        let along = self.bottom.min(other.bottom) - self.top.max(other.top);
        across.max(0.0) * along.max(0.0)
    }

    fn holds(&self, (x, y): (f64, f64)) -> bool {
        (self.left - 2.0..=self.right + 2.0).contains(&x) && (self.top..=self.bottom).contains(&y)
    }

    /// Area outside another rectangle.
    fn outside(&self, frame: &Self) -> f64 {
        (self.right - self.left) * (self.bottom - self.top) - self.overlap(frame)
    }
}

/// How a line is drawn.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Pen {
    /// Colour.
    pub colour: &'static str,
    /// Width.
    pub width: f64,
    /// Lengths of dashes and gaps; empty for a full line.
    pub dash: &'static str,
}

/// Black.
pub const INK: &str = "#000000";
/// A blue that colour-blind readers tell from [`ORANGE`], and darker in grey.
pub const BLUE: &str = "#0050a0";
/// An orange that colour-blind readers tell from [`BLUE`], and lighter in grey.
pub const ORANGE: &str = "#c85000";
/// For grids and what stands back.
pub const GREY: &str = "#707070";

/// A full line.
#[must_use]
pub const fn pen(colour: &'static str, width: f64) -> Pen {
    Pen { colour, width, dash: "" }
}

/// A dashed line.
#[must_use]
pub const fn dashed(colour: &'static str, width: f64) -> Pen {
    Pen { colour, width, dash: "6 4" }
}

/// Where a text stands against its point.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Anchor {
    /// The text begins there.
    Start,
    /// Its middle is there.
    Middle,
    /// It ends there.
    End,
}

impl Drawing {
    /// An empty sheet.
    #[must_use]
    pub fn new(width: f64, height: f64, title: &str) -> Self {
        Self { width, height, title: title.into(), body: String::new(), taken: Vec::new(), lines: Vec::new() }
    }

    /// The whole sheet.
    #[must_use]
    pub fn extent(&self) -> Extent {
        Extent { left: 0.0, top: 0.0, right: self.width, bottom: self.height }
    }

    /// What texts and reserved places take up.
    #[must_use]
    pub fn taken(&self) -> &[Extent] {
        &self.taken
    }

    fn stroke(pen: Pen) -> String {
        let dash =
            if pen.dash.is_empty() { String::new() } else { format!(" stroke-dasharray=\"{}\"", pen.dash) };
        format!("fill=\"none\" stroke=\"{}\" stroke-width=\"{}\"{dash}", pen.colour, short(pen.width))
    }

    /// A straight line.
    pub fn line(&mut self, from: (f64, f64), to: (f64, f64), pen: Pen) {
        self.path(&[from, to], pen, false);
    }

    /// A line through points, closed or not.
    pub fn path(&mut self, points: &[(f64, f64)], pen: Pen, closed: bool) {
        const PIECE: f64 = 5.0;
        let ends = points.iter().skip(1).chain(points.first().filter(|_| closed));
        for (a, b) in points.iter().zip(ends) {
            let pieces = ((b.0 - a.0).hypot(b.1 - a.1) / PIECE).ceil().min(500.0) as usize;
            let at = |n: usize| (n as f64 + 0.5) / pieces as f64;
            self.lines.extend((0..pieces).map(|n| (a.0 + (b.0 - a.0) * at(n), a.1 + (b.1 - a.1) * at(n))));
        }
        let _ = writeln!(self.body, "<path d=\"{}\" {}/>", steps(points, closed), Self::stroke(pen));
    }

    /// A filled shape.
    pub fn shape(&mut self, points: &[(f64, f64)], fill: &str, opacity: f64) {
        let _ = writeln!(
            self.body,
            "<path d=\"{}\" fill=\"{fill}\" fill-opacity=\"{}\"/>",
            steps(points, true),
            short(opacity)
        );
    }

    /// A circle.
    pub fn circle(&mut self, centre: (f64, f64), radius: f64, pen: Pen) {
        let (x, y) = (short(centre.0), short(centre.1));
        let _ = writeln!(
            self.body,
            "<circle cx=\"{x}\" cy=\"{y}\" r=\"{}\" {}/>",
            short(radius),
            Self::stroke(pen)
        );
    }

    /// A line with an arrowhead at its end.
    pub fn arrow(&mut self, from: (f64, f64), to: (f64, f64), pen: Pen) {
        self.line(from, to, pen);
        self.head(from, to, pen);
    }

    /// An arc about a centre with an arrowhead at its end; angles from +x (right) towards up, radians.
    pub fn arc(&mut self, centre: (f64, f64), radius: f64, (from, to): (f64, f64), pen: Pen, head: bool) {
        let at = |t: f64| {
            let a = from + (to - from) * t;
            (centre.0 + radius * a.cos(), centre.1 - radius * a.sin())
        };
        let points: Vec<_> = (0..=24).map(|j| at(f64::from(j) / 24.0)).collect();
        self.path(&points, pen, false);
        if head {
            self.head(points[23], points[24], pen);
        }
    }

    fn head(&mut self, from: (f64, f64), to: (f64, f64), pen: Pen) {
        let length = (to.0 - from.0).hypot(to.1 - from.1).max(1e-9);
        let (dx, dy) = ((to.0 - from.0) / length, (to.1 - from.1) / length);
        let size = 4.0 + 2.5 * pen.width;
        let back = |side: f64| {
            (to.0 - size * dx - 0.45 * size * side * dy, to.1 - size * dy + 0.45 * size * side * dx)
        };
        self.shape(&[to, back(1.0), back(-1.0)], pen.colour, 1.0);
    }

    /// A PNG image over a rectangle.
    pub fn image(&mut self, png: &[u8], place: Extent) {
        let _ = writeln!(
            self.body,
            "<image x=\"{}\" y=\"{}\" width=\"{}\" height=\"{}\" preserveAspectRatio=\"none\" href=\"data:image/png;base64,{}\"/>",
            short(place.left),
            short(place.top),
            short(place.right - place.left),
            short(place.bottom - place.top),
            base64(png)
        );
    }

    /// What follows shows only within a rectangle, until [`Self::unclip`].
    pub fn clip(&mut self, e: Extent) {
        let [x, y, w, h] = [e.left, e.top, e.right - e.left, e.bottom - e.top].map(short);
        let _ = writeln!(
            self.body,
            "<svg x=\"{x}\" y=\"{y}\" width=\"{w}\" height=\"{h}\" viewBox=\"{x} {y} {w} {h}\" overflow=\"hidden\">"
        );
    }

    /// Ends [`Self::clip`].
    pub fn unclip(&mut self) {
        self.body.push_str("</svg>\n");
    }

    /// Keeps labels out of a rectangle.
    pub fn reserve(&mut self, extent: Extent) {
        self.taken.push(extent);
    }

    /// A text, wherever it falls.
    pub fn text(&mut self, at: (f64, f64), size: f64, anchor: Anchor, text: &str) {
        self.coloured_text(at, size, anchor, text, INK);
    }

    /// A text in a colour.
    pub fn coloured_text(&mut self, at: (f64, f64), size: f64, anchor: Anchor, text: &str, colour: &str) {
        self.taken.push(box_of(at, size, anchor, text));
        let place = match anchor {
            Anchor::Start => "start",
            Anchor::Middle => "middle",
            Anchor::End => "end",
        };
        let _ = writeln!(
            self.body,
            "<text x=\"{}\" y=\"{}\" font-size=\"{}\" text-anchor=\"{place}\" fill=\"{colour}\" stroke=\"#ffffff\" stroke-width=\"{}\" paint-order=\"stroke\">{}</text>",
            short(at.0),
            short(at.1),
            short(size),
            short(0.22 * size),
            escaped(text)
        );
    }

    /// A label near a point, at the first of many places about it that is free within `frame`; where none is, the one
    /// that covers least. A thin line leads to labels that stand off; what lies under a label shines through faintly.
    pub fn label(&mut self, point: (f64, f64), size: f64, text: &str, colour: &'static str, frame: Extent) {
        self.tag(point, (size, 0.75), text, colour, frame);
    }

    /// A label with a size and a background of this opacity.
    pub fn tag(
        &mut self,
        point: (f64, f64),
        (size, opacity): (f64, f64),
        text: &str,
        colour: &'static str,
        frame: Extent,
    ) {
        let mut best: Option<(f64, (f64, f64), Anchor, f64)> = None;
        for ring in 0..12 {
            let away = size * (0.9 + 0.9 * f64::from(ring));
            for spoke in 0..16 {
                let angle = std::f64::consts::TAU * f64::from(spoke) / 16.0;
                let (c, s) = (angle.cos(), angle.sin());
                let anchor = if c > 0.3 {
                    Anchor::Start
                } else if c < -0.3 {
                    Anchor::End
                } else {
                    Anchor::Middle
                };
                let at = (point.0 + away * c, point.1 - away * s + 0.35 * size);
                let extent = box_of(at, size, anchor, text);
                let covered: f64 = self.taken.iter().map(|t| t.overlap(&extent)).sum();
                let crossed = self.lines.iter().filter(|p| extent.holds(**p)).count() as f64;
                let cost = 10.0 * covered + 40.0 * extent.outside(&frame) + 12.0 * crossed + 0.2 * away;
                if best.as_ref().is_none_or(|b| cost < b.0 - 1e-9) {
                    best = Some((cost, at, anchor, away));
                }
            }
            if best.as_ref().is_some_and(|b| b.0 <= 0.2 * away) {
                break;
            }
        }
        let Some((_, at, anchor, away)) = best else { return };
        if away > 2.5 * size {
            self.line(point, (at.0, at.1 - 0.35 * size), pen(colour, 0.6));
        }
        // letters have a white edge of their own: the background need not reach as far as the widest font would
        let b = box_of(at, size, anchor, text);
        let spare = 0.12 * (b.right - b.left);
        let (left, right) = match anchor {
            Anchor::Start => (b.left, b.right - spare),
            Anchor::Middle => (b.left + 0.5 * spare, b.right - 0.5 * spare),
            Anchor::End => (b.left + spare, b.right),
        };
        self.shape(&[(left, b.top), (right, b.top), (right, b.bottom), (left, b.bottom)], "#ffffff", opacity);
        self.coloured_text(at, size, anchor, text, colour);
    }

    /// A label on a line, as near its middle as a place is free; none where all are taken.
    pub fn label_on(&mut self, line: &[(f64, f64)], size: f64, text: &str, frame: Extent) {
        let middle = line.len() / 2;
        let places = (0..=middle).flat_map(|off| [middle + off, middle.wrapping_sub(off)]);
        for (x, y) in places.filter_map(|place| line.get(place)) {
            let at = (*x, y + 0.35 * size);
            let extent = box_of(at, size, Anchor::Middle, text);
            let free = self.taken.iter().all(|taken| taken.overlap(&extent) <= 0.0);
            if free && extent.outside(&frame) <= 0.0 {
                self.text(at, size, Anchor::Middle, text);
                return;
            }
        }
    }

    /// Another drawing below this one, as one; labels of both keep where they are.
    #[must_use]
    pub fn above(mut self, other: &Self) -> Self {
        let _ =
            write!(self.body, "<g transform=\"translate(0 {})\">\n{}</g>\n", short(self.height), other.body);
        self.height += other.height;
        self.width = self.width.max(other.width);
        self
    }

    /// The drawing as an element that stands in a page by itself or within HTML.
    #[must_use]
    pub fn element(&self) -> String {
        format!(
            "<svg xmlns=\"http://www.w3.org/2000/svg\" viewBox=\"0 0 {w} {h}\" width=\"{w}\" height=\"{h}\" role=\"img\" \
             aria-label=\"{t}\" font-family=\"sans-serif\">\n<title>{t}</title>\n<rect width=\"{w}\" height=\"{h}\" \
             fill=\"#ffffff\"/>\n{}</svg>\n",
            self.body,
            w = short(self.width),
            h = short(self.height),
            t = escaped(&self.title)
        )
    }
}

/// Where a text of this size stands; widths are those of common sans-serif fonts, rounded up.
fn box_of(at: (f64, f64), size: f64, anchor: Anchor, text: &str) -> Extent {
    let width = 0.58 * size * text.chars().count() as f64;
    let left = match anchor {
        Anchor::Start => at.0,
        Anchor::Middle => at.0 - 0.5 * width,
        Anchor::End => at.0 - width,
    };
    Extent { left, top: at.1 - 0.85 * size, right: left + width, bottom: at.1 + 0.25 * size }
}

fn steps(points: &[(f64, f64)], closed: bool) -> String {
    let mut out = String::new();
    for (n, (x, y)) in points.iter().enumerate() {
        let _ = write!(out, "{}{} {}", if n == 0 { "M" } else { "L" }, short(*x), short(*y));
    }
    if closed {
        out.push('Z');
    }
    out
}

/// At most two decimals.
fn short(value: f64) -> String {
    let text = format!("{value:.2}");
    let text = text.trim_end_matches('0').trim_end_matches('.');
    if text == "-0" { "0".into() } else { text.into() }
}

/// Text with the characters that markup takes for its own written out.
#[must_use]
pub fn escaped(text: &str) -> String {
    text.replace('&', "&amp;").replace('<', "&lt;").replace('>', "&gt;").replace('"', "&quot;")
}

/// Bytes in base 64 (RFC 4648, section 4).
fn base64(bytes: &[u8]) -> String {
    const DIGITS: &[u8; 64] = b"ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789+/";
    let mut out = String::with_capacity(bytes.len().div_ceil(3) * 4);
    for group in bytes.chunks(3) {
        let mut word = [0u8; 3];
        word[..group.len()].copy_from_slice(group);
        let all = u32::from(word[0]) << 16 | u32::from(word[1]) << 8 | u32::from(word[2]);
        for digit in 0..4 {
            let index = (all >> (18 - 6 * digit)) as usize & 63;
            out.push(if digit <= group.len() { DIGITS[index] as char } else { '=' });
        }
    }
    out
}

/// The step of a scale with about `wanted` ticks over `span`: 1, 2 or 5 times a power of ten.
#[must_use]
pub fn nice_step(span: f64, wanted: f64) -> f64 {
    let raw = span / wanted;
    let power = 10f64.powf(raw.log10().floor());
    let lead = raw / power;
    let nice = if lead < 1.5 {
        1.0
    } else if lead < 3.5 {
        2.0
    } else if lead < 7.5 {
        5.0
    } else {
        10.0
    };
    nice * power
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn base64_as_in_the_standard() {
        // RFC 4648, section 10
        for (plain, coded) in
            [("", ""), ("f", "Zg=="), ("fo", "Zm8="), ("foo", "Zm9v"), ("foobar", "Zm9vYmFy")]
        {
            assert_eq!(base64(plain.as_bytes()), coded);
        }
    }

    #[test]
    fn labels_at_one_point_do_not_overlap() {
        let mut drawing = Drawing::new(400.0, 400.0, "test");
        let frame = drawing.extent();
        for n in 0..12 {
            drawing.label((200.0, 200.0), 12.0, &format!("label {n}"), INK, frame);
        }
        let taken = drawing.taken();
        for (n, a) in taken.iter().enumerate() {
            assert!(taken[..n].iter().all(|b| a.overlap(b) == 0.0), "{n}");
        }
    }

    #[test]
    fn steps_are_nice() {
        for (span, step) in [(300.0, 50.0), (1.0, 0.2), (17.0, 2.0), (0.034, 0.005)] {
            assert!((nice_step(span, 6.0) / step - 1.0).abs() < 1e-9, "{span}");
        }
    }
}
