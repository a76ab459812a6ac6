//! A finished picture: averaged from its samples, reduced to 256 colours, written as PNG.

use super::PictureError;
use super::camera::Camera;
use super::shade::Sample;
use rayon::prelude::*;
use std::collections::BTreeMap;

/// A picture of 8-bit sRGB colours, row by row from the top.
#[derive(Clone, Debug, PartialEq)]
pub struct Image {
    width: u32,
    height: u32,
    paper: [u8; 3],
    pixels: Vec<[u8; 3]>,
    /// mm a pixel, written into the PNG.
    scale_mm: f64,
}

impl Image {
    /// Averages the samples of each pixel, in linear light.
    pub(super) fn averaged(samples: &[Sample], camera: &Camera, paper: [u8; 3]) -> Self {
        let n = camera.per_pixel;
        let (width, height) = (camera.width / n, camera.height / n);
        let mut pixels = vec![paper; width * height];
        pixels.par_chunks_mut(width).enumerate().for_each(|(row, out)| {
            for (column, pixel) in out.iter_mut().enumerate() {
                let mut sum = [0.0_f32; 3];
                let mut blank = true;
                for y in row * n..(row + 1) * n {
                    for sample in &samples[y * camera.width + column * n..][..n] {
                        blank &= sample.is_paper;
                        for (total, part) in sum.iter_mut().zip(sample.linear) {
                            *total += part;
                        }
                    }
                }
                if !blank {
                    *pixel = sum.map(|s| srgb_from_linear(s / (n * n) as f32));
                }
            }
        });
        let side = |x: usize| u32::try_from(x).unwrap_or(u32::MAX);
        let scale_mm = camera.step * n as f64;
        Self { width: side(width), height: side(height), paper, pixels, scale_mm }
    }

    /// Width, pixels.
    #[must_use]
    pub fn width(&self) -> u32 {
        self.width
    }

    /// Height, pixels.
    #[must_use]
    pub fn height(&self) -> u32 {
        self.height
    }

    /// The colours, row by row from the top.
    #[must_use]
    pub fn pixels(&self) -> &[[u8; 3]] {
        &self.pixels
    }

    /// Writes the picture as PNG with at most 256 colours. Its resolution entry (pHYs) is the scale of the
    /// drawing: shown at that resolution the solid has its own size.
    ///
    /// # Errors
    /// [`PictureError::Encode`] when the PNG writer refuses; it has no reason to.
    pub fn to_png(&self) -> Result<Vec<u8>, PictureError> {
        let (palette, indices) = self.reduced();
        let colours: Vec<u8> = palette.iter().flatten().copied().collect();
        let per_metre = pixels_per_metre(self.scale_mm);
        let resolution = png::PixelDimensions { xppu: per_metre, yppu: per_metre, unit: png::Unit::Meter };
        let mut best: Option<Vec<u8>> = None;
        // Which filter packs an indexed picture best depends on the picture.
        for filter in [png::Filter::NoFilter, png::Filter::Adaptive] {
            let mut bytes = Vec::new();
            let mut encoder = png::Encoder::new(&mut bytes, self.width, self.height);
            encoder.set_color(png::ColorType::Indexed);
            encoder.set_depth(png::BitDepth::Eight);
            encoder.set_palette(colours.as_slice());
            encoder.set_compression(png::Compression::High);
            encoder.set_filter(filter);
            encoder.set_pixel_dims(Some(resolution));
            let mut writer = encoder.write_header()?;
            writer.write_image_data(&indices)?;
            writer.finish()?;
            if best.as_ref().is_none_or(|b| bytes.len() < b.len()) {
                best = Some(bytes);
            }
        }
        Ok(best.unwrap_or_default())
    }

    /// A palette of at most 256 colours and one index a pixel: median cut, after P. Heckbert, "Color Image
    /// Quantization for Frame Buffer Display", SIGGRAPH 1982; the paper keeps a colour of its own.
    fn reduced(&self) -> (Vec<[u8; 3]>, Vec<u8>) {
        let mut counts: BTreeMap<[u8; 3], usize> = BTreeMap::new();
        for pixel in &self.pixels {
            *counts.entry(*pixel).or_default() += 1;
        }
        counts.remove(&self.paper);
        let mut groups: Vec<Group> = Vec::new();
        if !counts.is_empty() {
            groups.push(Group::of(counts.into_iter().collect()));
        }
        while groups.len() < 255 {
            // The widest group is cut; among equals the first.
            let widest = (0..groups.len()).rev().max_by_key(|&k| groups[k].weight());
            let Some(k) = widest.filter(|&k| groups[k].weight() > 0) else { break };
            let (low, high) = groups.swap_remove(k).split();
            groups.extend([low, high]);
        }
        // Like colours next to each other, which packs better.
        let mut entries: Vec<([u8; 3], Group)> = groups.into_iter().map(|g| (g.mean(), g)).collect();
        entries.sort_by_key(|(mean, _)| {
            let [r, g, b] = mean.map(i32::from);
            (r > b, r + g + b, r, g)
        });
        let mut palette = vec![self.paper];
        let mut lookup: BTreeMap<[u8; 3], u8> = BTreeMap::from([(self.paper, 0)]);
        for (index, (mean, group)) in (1_u8..=255).zip(entries) {
            palette.push(mean);
            lookup.extend(group.colours.into_iter().map(|(colour, _)| (colour, index)));
        }
        let indices = self.pixels.iter().map(|pixel| lookup.get(pixel).copied().unwrap_or(0)).collect();
        (palette, indices)
    }
}

/// Colours that will share a palette entry.
struct Group {
    colours: Vec<([u8; 3], usize)>,
    /// The channel with the greatest range.
    channel: usize,
    range: usize,
    count: usize,
}

impl Group {
    fn of(colours: Vec<([u8; 3], usize)>) -> Self {
        let mut best = (0, 0);
        for channel in 0..3 {
            let values = || colours.iter().map(|(c, _)| c[channel]);
            let range = values().max().unwrap_or(0) - values().min().unwrap_or(0);
            if range > best.1 {
                best = (channel, range);
            }
        }
        let count = colours.iter().map(|(_, n)| n).sum();
        Self { colours, channel: best.0, range: usize::from(best.1), count }
    }

    /// What cutting this group gains, as the squared error it takes away. 0 when it holds one colour.
    fn weight(&self) -> usize {
        self.range * self.range * self.count
    }

    /// Cuts at the middle of the range, so that no entry covers far-apart colours; each half has a colour.
    fn split(self) -> (Self, Self) {
        let channel = self.channel;
        let value = |c: &([u8; 3], usize)| usize::from(c.0[channel]);
        let low = self.colours.iter().map(value).min().unwrap_or(0);
        let middle = low + self.range / 2;
        let (lower, upper) = self.colours.into_iter().partition(|c| value(c) <= middle);
        (Self::of(lower), Self::of(upper))
    }

    /// The mean of the colours, weighted by how often they occur.
    fn mean(&self) -> [u8; 3] {
        std::array::from_fn(|k| {
            let sum: usize = self.colours.iter().map(|(c, n)| usize::from(c[k]) * n).sum();
            let count = self.count.max(1);
            u8::try_from((sum + count / 2) / count).unwrap_or(u8::MAX)
        })
    }
}

#[expect(clippy::cast_possible_truncation, clippy::cast_sign_loss, reason = "float casts saturate")]
fn pixels_per_metre(scale_mm: f64) -> u32 {
    (1000.0 / scale_mm).round() as u32
}

/// sRGB code of a linear intensity (IEC 61966-2-1), clamped to 0..=1.
#[expect(
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss,
    reason = "clamped to 0..=255 before the cast"
)]
pub(super) fn srgb_from_linear(x: f32) -> u8 {
    let x = x.clamp(0.0, 1.0);
    let code = if x <= 0.003_130_8 { 12.92 * x } else { 1.055 * x.powf(1.0 / 2.4) - 0.055 };
    (code * 255.0 + 0.5) as u8
}

/// Linear intensity of an sRGB code (IEC 61966-2-1), 0..=1.
pub(super) fn linear_from_srgb(code: u8) -> f32 {
    let x = f32::from(code) / 255.0;
    if x <= 0.040_45 { x / 12.92 } else { ((x + 0.055) / 1.055).powf(2.4) }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn srgb_codes_come_back() {
        for code in 0..=255 {
            assert_eq!(srgb_from_linear(linear_from_srgb(code)), code);
        }
        assert_eq!(srgb_from_linear(f32::NAN), 0);
    }

    #[test]
    fn few_colours_are_kept_exactly_and_many_nearly() {
        let mut image =
            Image { width: 64, height: 64, paper: [255; 3], pixels: vec![[255; 3]; 64 * 64], scale_mm: 1.0 };
        for (k, pixel) in (0_u8..200).zip(image.pixels.iter_mut()) {
            *pixel = [k, 255 - k, 17];
        }
        let (palette, indices) = image.reduced();
        for (pixel, index) in image.pixels.iter().zip(&indices) {
            assert_eq!(*pixel, palette[usize::from(*index)]);
        }
        for (k, pixel) in (0_u32..).zip(image.pixels.iter_mut()) {
            let [r, g, b, _] = (k * 4099).to_le_bytes();
            *pixel = [r, g, b];
        }
        let (palette, indices) = image.reduced();
        assert_eq!(palette.len(), 256);
        for (pixel, index) in image.pixels.iter().zip(&indices) {
            for (x, y) in pixel.iter().zip(palette[usize::from(*index)]) {
                assert!(x.abs_diff(y) < 64, "{pixel:?}");
            }
        }
    }
}
