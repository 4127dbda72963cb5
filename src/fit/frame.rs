//! A camera's frame: read, cleaned, sampled, and written with rings over it.

use nalgebra::Vector2;
use png::{BitDepth, ColorType, Transformations};

use super::read::FileError;

/// A grey frame and where it stands.
#[derive(Debug, Clone)]
pub struct Frame {
    width: usize,
    height: usize,
    /// Row by row from the upper left corner, in counts of the file.
    values: Vec<f32>,
    /// Side of a pixel, mm.
    pub pitch: f64,
    /// Where the undeviated pump is, pixels from the upper left corner; the middle of the first pixel is (0.5, 0.5).
    pub centre: [f64; 2],
}

/// A closed line in the picture: mm from the pump, +x right, +y up.
pub type Outline = Vec<Vector2<f64>>;

/// Colours of rings, in turn.
const COLOURS: [[u8; 3]; 4] = [[40, 120, 255], [255, 120, 20], [40, 200, 120], [230, 60, 200]];

impl Frame {
    /// Reads a grey PNG of 8 or 16 bits; of colours the mean is taken. `centre` is the frame's middle unless given.
    ///
    /// # Errors
    /// Bytes that are no PNG, or a frame too small for rings.
    pub fn read(bytes: &[u8], pitch: f64, centre: Option<[f64; 2]>) -> Result<Self, FileError> {
        let fault = |e: png::DecodingError| FileError(format!("no PNG frame: {e}"));
        let mut decoder = png::Decoder::new(std::io::Cursor::new(bytes));
        decoder.set_transformations(Transformations::EXPAND);
        let mut reader = decoder.read_info().map_err(fault)?;
        let size =
            reader.output_buffer_size().ok_or_else(|| FileError("no PNG frame: it is too large".into()))?;
        let mut buffer = vec![0; size];
        let info = reader.next_frame(&mut buffer).map_err(fault)?;
        let (width, height) = (info.width as usize, info.height as usize);
        if width < 32 || height < 32 {
            return Err(FileError(format!("{width} x {height} pixels are too few to find rings in")));
        }
        let samples = info.color_type.samples();
        let colours = match info.color_type {
            ColorType::Grayscale | ColorType::GrayscaleAlpha => 1,
            _ => 3,
        };
        let deep = info.bit_depth == BitDepth::Sixteen;
        let bytes_each = if deep { 2 } else { 1 };
        let value = |at: usize| match deep {
            true => f32::from(u16::from_be_bytes([buffer[2 * at], buffer[2 * at + 1]])),
            false => f32::from(buffer[at]),
        };
        if buffer.len() < width * height * samples * bytes_each {
            return Err(FileError("no PNG frame: it ends early".into()));
        }
        let grey =
            |pixel: usize| (0..colours).map(|c| value(pixel * samples + c)).sum::<f32>() / colours as f32;
        let values = (0..width * height).map(grey).collect();
        let middle = [0.5 * width as f64, 0.5 * height as f64];
        Ok(Self { width, height, values, pitch, centre: centre.unwrap_or(middle) })
    }

    /// Width and height, pixels.
    #[must_use]
    pub fn size(&self) -> (usize, usize) {
        (self.width, self.height)
    }

    /// Without hot pixels and background: pixels far above their neighbours become the median of those, and the median of
    /// the frame is taken off.
    #[must_use]
    pub fn cleaned(&self) -> Self {
        let noise = self.noise();
        let mut values = self.values.clone();
        for row in 0..self.height {
            for column in 0..self.width {
                let middle = self.around(column, row);
                let here = self.values[row * self.width + column];
                if here - middle > 6.0 * noise.max(1e-3 * middle.abs()) {
                    values[row * self.width + column] = middle;
                }
            }
        }
        let background = median(values.clone());
        values.iter_mut().for_each(|v| *v -= background);
        Self { values, ..self.clone() }
    }

    /// Noise of a pixel: 1.4826 times the median of |difference of neighbours| over sqrt 2, which is the standard
    /// deviation of normal noise and takes no notice of slow changes.
    #[must_use]
    pub fn noise(&self) -> f32 {
        let differences: Vec<f32> = self
            .values
            .chunks(self.width)
            .flat_map(|row| row.windows(2).map(|w| (w[0] - w[1]).abs()))
            .collect();
        1.4826 * median(differences) / std::f32::consts::SQRT_2
    }

    /// Median of the up to eight neighbours.
    fn around(&self, column: usize, row: usize) -> f32 {
        let mut all = [0.0f32; 8];
        let mut count = 0;
        for r in row.saturating_sub(1)..=(row + 1).min(self.height - 1) {
            for c in column.saturating_sub(1)..=(column + 1).min(self.width - 1) {
                if (r, c) != (row, column) {
                    all[count] = self.values[r * self.width + c];
                    count += 1;
                }
            }
        }
        let all = &mut all[..count];
        all.sort_by(f32::total_cmp);
        all[count / 2]
    }

    /// Mean over squares of so many pixels on each side of a pixel.
    #[must_use]
    pub fn blurred(&self, reach: usize) -> Self {
        let line = |values: &[f32], length: usize, stride: usize, from: usize, out: &mut [f32]| {
            let at = |i: usize| f64::from(values[from + i * stride]);
            let mut sum: f64 = (0..reach.min(length)).map(at).sum();
            for i in 0..length {
                if i + reach < length {
                    sum += at(i + reach);
                }
                if i > reach {
                    sum -= at(i - reach - 1);
                }
                let count = (i + reach).min(length - 1) - i.saturating_sub(reach) + 1;
                out[from + i * stride] = (sum / count as f64) as f32;
            }
        };
        let mut across = self.values.clone();
        for row in 0..self.height {
            line(&self.values, self.width, 1, row * self.width, &mut across);
        }
        let mut values = across.clone();
        for column in 0..self.width {
            line(&across, self.height, self.width, column, &mut values);
        }
        Self { values, ..self.clone() }
    }

    /// Column and row of a place in the picture.
    fn pixel(&self, place: Vector2<f64>) -> (f64, f64) {
        (self.centre[0] + place.x / self.pitch, self.centre[1] - place.y / self.pitch)
    }

    /// The value at a place in the picture, between pixels by straight lines; `None` beyond the frame.
    #[must_use]
    pub fn at(&self, place: Vector2<f64>) -> Option<f64> {
        let (x, y) = self.pixel(place);
        let (x, y) = (x - 0.5, y - 0.5);
        if !(x >= 0.0 && y >= 0.0 && x < (self.width - 1) as f64 && y < (self.height - 1) as f64) {
            return None;
        }
        let (column, row) = (x as usize, y as usize);
        let (a, b) = (x - column as f64, y - row as f64);
        let value = |c: usize, r: usize| f64::from(self.values[r * self.width + c]);
        let upper = value(column, row) * (1.0 - a) + value(column + 1, row) * a;
        let lower = value(column, row + 1) * (1.0 - a) + value(column + 1, row + 1) * a;
        Some(upper * (1.0 - b) + lower * b)
    }

    /// The frame as a colour PNG with outlines over it and a cross where the pump is.
    ///
    /// # Errors
    /// None in practice: the bytes go to memory.
    pub fn with_outlines(&self, outlines: &[Outline]) -> Result<Vec<u8>, FileError> {
        let (mut low, mut high) = (f32::INFINITY, f32::NEG_INFINITY);
        // hot pixels do not set the scale
        let smooth = self.cleaned();
        smooth.values.iter().for_each(|v| (low, high) = (low.min(*v), high.max(*v)));
        let shade =
            |v: f32| (255.0 * ((v - low) / (high - low).max(f32::MIN_POSITIVE)).clamp(0.0, 1.0)) as u8;
        let mut data: Vec<u8> = smooth.values.iter().flat_map(|v| [shade(*v); 3]).collect();
        let mut dot = |place: Vector2<f64>, colour: [u8; 3]| {
            let (x, y) = self.pixel(place);
            if x >= 0.0 && y >= 0.0 && (x as usize) < self.width && (y as usize) < self.height {
                let at = 3 * (y as usize * self.width + x as usize);
                data[at..at + 3].copy_from_slice(&colour);
            }
        };
        for (outline, colour) in outlines.iter().zip(COLOURS.iter().cycle()) {
            for (n, from) in outline.iter().enumerate() {
                let to = outline[(n + 1) % outline.len()];
                let steps = ((to - from).norm() / (0.5 * self.pitch)).ceil().max(1.0) as usize;
                (0..steps).for_each(|k| dot(from + (to - from) * (k as f64 / steps as f64), *colour));
            }
        }
        for k in -12..=12 {
            let along = 0.5 * f64::from(k) * self.pitch;
            dot(Vector2::new(along, 0.0), [255, 255, 255]);
            dot(Vector2::new(0.0, along), [255, 255, 255]);
        }
        let mut bytes = Vec::new();
        let fault = |e: png::EncodingError| FileError(format!("the frame cannot be written: {e}"));
        let mut encoder = png::Encoder::new(&mut bytes, self.width as u32, self.height as u32);
        encoder.set_color(ColorType::Rgb);
        encoder.set_depth(BitDepth::Eight);
        let mut writer = encoder.write_header().map_err(fault)?;
        writer.write_image_data(&data).map_err(fault)?;
        writer.finish().map_err(fault)?;
        Ok(bytes)
    }
}

fn median(mut values: Vec<f32>) -> f32 {
    if values.is_empty() {
        return 0.0;
    }
    let middle = values.len() / 2;
    *values.select_nth_unstable_by(middle, f32::total_cmp).1
}

#[cfg(test)]
mod tests {
    use super::*;

    fn grey(values: &[u8], width: u32, height: u32) -> Vec<u8> {
        let mut bytes = Vec::new();
        let mut encoder = png::Encoder::new(&mut bytes, width, height);
        encoder.set_color(ColorType::Grayscale);
        encoder.set_depth(BitDepth::Eight);
        encoder.write_header().and_then(|mut w| w.write_image_data(values)).expect("a frame");
        bytes
    }

    #[test]
    fn hot_pixels_and_background_are_taken_off() {
        let mut values: Vec<u8> = (0..1600usize).map(|n| 20 + (n * 7 % 5) as u8).collect();
        values[20 * 40 + 10] = 255;
        let frame = Frame::read(&grey(&values, 40, 40), 0.1, None).expect("a frame").cleaned();
        assert!(frame.values.iter().all(|v| v.abs() <= 3.0));
    }

    /// +x is right and +y up from the middle.
    #[test]
    fn places_are_right_and_up_from_the_pump() {
        let mut values = vec![0u8; 1600];
        values[10 * 40 + 30] = 200;
        let frame = Frame::read(&grey(&values, 40, 40), 0.1, None).expect("a frame");
        // between pixels by straight lines, so a place off by rounding loses that share
        assert!((frame.at(Vector2::new(1.05, 0.95)).expect("inside") - 200.0).abs() < 1e-9);
        assert_eq!(frame.at(Vector2::new(3.0, 0.0)), None);
        let even = frame.blurred(1);
        assert!((even.at(Vector2::new(1.05, 0.95)).expect("inside") - 200.0 / 9.0).abs() < 1e-3);
    }

    #[test]
    fn what_is_no_frame_is_refused() {
        assert!(Frame::read(b"no picture", 0.1, None).is_err());
        assert!(Frame::read(&grey(&[0; 100], 10, 10), 0.1, None).is_err());
    }
}
