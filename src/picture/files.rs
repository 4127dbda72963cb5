//! A picture as PNG and as a table.

use std::fmt::Write as _;

use super::exposure::Picture;
use super::sensor::Optics;

/// Bits per pixel.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Depth {
    /// 256 shades.
    Eight,
    /// 65536 shades.
    Sixteen,
}

impl Picture {
    /// What the numbers and the pixels mean, in a sentence or two.
    #[must_use]
    pub fn words(&self) -> String {
        let sensor = &self.sensor;
        let pitch = sensor.pitch() * 1e3;
        let place = match sensor.optics {
            Optics::Screen(distance) => format!("on a screen at {distance}"),
            Optics::Lens(focal) => format!("in the focal plane of a lens of {focal}"),
        };
        format!(
            "{n} x {n} pixels of {pitch:.4} mm {place}, the undeviated pump in the middle; seen {}",
            sensor.seen.words(),
            n = sensor.pixels
        )
    }

    /// Grey PNG: black is no light, white the brightest pixel, in proportion. `bright` on dark, or the other way round
    /// for paper.
    ///
    /// # Errors
    /// None in practice: the bytes go to memory.
    pub fn png(&self, depth: Depth, bright: bool) -> Result<Vec<u8>, png::EncodingError> {
        let top = self.brightest();
        let full = match depth {
            Depth::Eight => 255.0,
            Depth::Sixteen => 65535.0,
        };
        let shade = |value: &f32| {
            let share = if top > 0.0 { (f64::from(*value) / top).clamp(0.0, 1.0) } else { 0.0 };
            (full * if bright { share } else { 1.0 - share }).round() as u16
        };
        let pixels = self.sensor.pixels as u32;
        let mut bytes = Vec::new();
        let mut encoder = png::Encoder::new(&mut bytes, pixels, pixels);
        encoder.set_color(png::ColorType::Grayscale);
        encoder.set_depth(match depth {
            Depth::Eight => png::BitDepth::Eight,
            Depth::Sixteen => png::BitDepth::Sixteen,
        });
        encoder.add_text_chunk("Description".into(), format!("{}; white = {top:.6e}", self.words()))?;
        let mut writer = encoder.write_header()?;
        let data: Vec<u8> = match depth {
            Depth::Eight => self.values.iter().map(|v| shade(v) as u8).collect(),
            Depth::Sixteen => self.values.iter().flat_map(|v| shade(v).to_be_bytes()).collect(),
        };
        writer.write_image_data(&data)?;
        writer.finish()?;
        Ok(bytes)
    }

    /// One row per pixel: its middle in the lab, and its intensity.
    #[must_use]
    pub fn csv(&self, extrapolated: bool) -> String {
        let mut out = String::from("x_mm,y_mm,intensity,extrapolated,status\n");
        for (n, value) in self.values.iter().enumerate() {
            let (column, row) = (n % self.sensor.pixels, n / self.sensor.pixels);
            let (x, y) = self.sensor.place(column as f64 + 0.5, row as f64 + 0.5);
            let mm = |metres: f64| crate::quantity::tidy((metres * 1e12).round() * 1e-9);
            let _ = writeln!(out, "{},{},{},{extrapolated},ok", mm(x), mm(y), value.max(0.0) + 0.0);
        }
        out
    }
}

/// Width and height of a PNG, from its header; `None` where the bytes are none.
#[must_use]
pub fn png_size(bytes: &[u8]) -> Option<(u32, u32)> {
    let header = bytes.strip_prefix(b"\x89PNG\r\n\x1a\n")?.get(8..16)?;
    let number = |b: &[u8]| Some(u32::from_be_bytes(b.try_into().ok()?));
    let (width, height) = (number(&header[..4])?, number(&header[4..])?);
    (width > 0 && height > 0).then_some((width, height))
}
