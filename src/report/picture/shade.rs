//! The colour of every sample: light past the solid, the two sides' colours, cut faces, lines, shadow on
//! the plate.

use super::camera::{Camera, Section};
use super::image::linear_from_srgb;
use super::normals::CornerNormals;
use super::raster::{Hit, Layer, barycentric, nearest_f32};
use super::sky::{Sky, dot, small};
use crate::geom::Vec3;
use crate::mesh::{Side, TriMesh};
use rayon::prelude::*;

/// The colours of a picture, sRGB.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Look {
    /// Side A.
    pub side_a: [u8; 3],
    /// Side B.
    pub side_b: [u8; 3],
    /// Feet, labels and whatever is neither side.
    pub fixture: [u8; 3],
    /// Cut material, its darker stripes.
    pub cut: [u8; 3],
    /// Outlines.
    pub line: [u8; 3],
    /// What the picture is drawn on.
    pub paper: [u8; 3],
}

impl Look {
    /// Neutral greys on white around the two given side colours.
    #[must_use]
    pub const fn of_sides(side_a: [u8; 3], side_b: [u8; 3]) -> Self {
        Self {
            side_a,
            side_b,
            fixture: [0xb4, 0xb6, 0xb8],
            cut: [0x3a, 0x3f, 0x44],
            line: [0x1c, 0x22, 0x26],
            paper: [0xff, 0xff, 0xff],
        }
    }
}

impl Default for Look {
    /// Side A teal #1f7a7a, side B sand #e3c08f.
    fn default() -> Self {
        Self::of_sides([0x1f, 0x7a, 0x7a], [0xe3, 0xc0, 0x8f])
    }
}

/// One sample, painted.
#[derive(Clone, Copy, Debug)]
pub(super) struct Sample {
    pub(super) linear: [f32; 3],
    /// Untouched paper.
    pub(super) is_paper: bool,
}

/// What is painted.
pub(super) struct Scene<'s> {
    pub(super) mesh: &'s TriMesh,
    pub(super) normals: &'s CornerNormals,
    pub(super) sky: &'s Sky,
    pub(super) section: Option<Section>,
    pub(super) ground: bool,
}

/// The main light in the picture's own frame (right, up, towards the viewer), its spread as a power of the
/// cosine, its strength.
const KEY: ([f64; 3], f64, f64) = ([-0.50, 0.68, 0.54], 7.0, 4.0);
/// A weaker light from the other side.
const FILL: ([f64; 3], f64, f64) = ([0.80, 0.12, 0.58], 5.0, 0.7);
/// Light from all around, and its gain from straight below to straight above.
const AMBIENT: [f64; 2] = [0.22, 0.50];
/// Light that reaches even the bottom of a hollow, as a share of full light.
const FLOOR_LIGHT: f32 = 0.11;
/// How bright a surface facing the main light is drawn; above 1 because few surfaces do.
const EXPOSURE: f64 = 1.32;
/// Strength and spread of the sheen that shows which way a surface bends.
const GLOSS: f32 = 0.05;
/// See [`GLOSS`].
const GLOSS_POWER: i32 = 22;
/// How much of the paper's light a full shadow on the plate takes.
const SHADOW_DEPTH: f32 = 0.62;
/// The light is evened out with spacings up to the width of the picture by this; each sees about twice as far.
/// Wider spacings leave echoes of edges.
const WIDEST_SPACING: usize = 60;
/// The shadow on the plate is evened out less than hollows are, so that it stays dark where the solid stands.
const WIDEST_ON_PLATE: usize = 120;
/// Share of the way from the edge of the picture to its middle in which a shadow fades in.
const SHADOW_FADE: f32 = 0.25;

/// Paints every sample, row by row from the top.
pub(super) fn paint(scene: &Scene, camera: &Camera, layer: &Layer, look: &Look) -> Vec<Sample> {
    let painter = Painter::new(scene, camera, layer, look);
    let mut spots = vec![Spot::PAPER; layer.hits.len()];
    spots.par_chunks_mut(camera.width).enumerate().for_each(|(row, spots)| painter.light_row(row, spots));
    let light = smooth(&spots, camera, scene.sky.radius);
    let mut out = vec![Sample { linear: painter.paper, is_paper: true }; layer.hits.len()];
    out.par_chunks_mut(camera.width).enumerate().for_each(|(row, samples)| {
        for (column, sample) in samples.iter_mut().enumerate() {
            painter.paint(column, row, &spots, &light, sample);
        }
    });
    out
}

/// The middle and one side of the filter that evens out the light: a cubic B-spline.
const TAPS: [f32; 3] = [6.0, 4.0, 1.0];

/// What a sample shows.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Kind {
    /// Nothing.
    Paper,
    /// The plate, seen beside the solid.
    Plate,
    /// The surface of the solid.
    Skin,
    /// Cut material.
    Cut,
}

/// One sample before it is painted.
#[derive(Clone, Copy, Debug)]
struct Spot {
    kind: Kind,
    normal: [f32; 3],
    depth: f32,
    /// Light on a surface, 1 when it faces the main light and stands free; on the plate: light taken away.
    light: f32,
}

impl Spot {
    const PAPER: Self = Self { kind: Kind::Paper, normal: [0.0; 3], depth: 0.0, light: 0.0 };
}

/// Evens out the light over neighbours on the same piece of surface, so that the finite number of light
/// directions leaves no steps.
///
/// A filter with holes: passes along rows and columns with spacing 1, 2, 4, 8, ... samples, each weighing a
/// neighbour by how well its normal and its depth agree. After H. Dammertz et al., "Edge-Avoiding A-Trous
/// Wavelet Transform for fast Global Illumination Filtering", HPG 2010; made separable here.
fn smooth(spots: &[Spot], camera: &Camera, radius: f64) -> Vec<f32> {
    let width = camera.width;
    let mut light: Vec<f32> = spots.iter().map(|s| s.light).collect();
    let mut next = light.clone();
    let reach = nearest_f32(0.012 * radius);
    let widest = (width / WIDEST_SPACING).max(1);
    for spacing in (0..).map(|k| 1 << k).take_while(|&s| s <= widest) {
        for along_rows in [true, false] {
            next.par_chunks_mut(width).enumerate().for_each(|(row, out)| {
                for (column, value) in out.iter_mut().enumerate() {
                    let k = row * width + column;
                    let here = &spots[k];
                    let plate_done = here.kind == Kind::Plate && spacing > width / WIDEST_ON_PLATE;
                    if plate_done || matches!(here.kind, Kind::Paper | Kind::Cut) {
                        *value = light[k];
                        continue;
                    }
                    let (place, length, stride) =
                        if along_rows { (column, width, 1) } else { (row, camera.height, width) };
                    let mut sum = TAPS[0] * light[k];
                    let mut total = TAPS[0];
                    for (steps, tap) in TAPS.iter().enumerate().skip(1) {
                        let away = steps * spacing;
                        let before = (place >= away).then(|| k - away * stride);
                        let after = (place + away < length).then(|| k + away * stride);
                        for other in before.into_iter().chain(after) {
                            let weight = tap * likeness(here, &spots[other], reach, away);
                            sum += weight * light[other];
                            total += weight;
                        }
                    }
                    *value = sum / total;
                }
            });
            std::mem::swap(&mut light, &mut next);
        }
    }
    light
}

/// How much two samples are on one piece of surface, 0..=1.
fn likeness(a: &Spot, b: &Spot, reach: f32, spacing: usize) -> f32 {
    if a.kind != b.kind {
        return 0.0;
    }
    let cosine: f32 = dot(&a.normal, &b.normal);
    // The step in depth that the slopes of the two samples explain is none.
    let step = (a.depth - b.depth).abs() / (reach * spacing as f32);
    let turn = ((cosine - 0.9) * 10.0).clamp(0.0, 1.0);
    if a.kind == Kind::Plate { 1.0 } else { turn * (1.5 - step).clamp(0.0, 1.0) }
}

struct Painter<'s> {
    scene: &'s Scene<'s>,
    camera: &'s Camera,
    layer: &'s Layer,
    /// Light from each direction of the sky; full light on a surface facing the key light sums to `EXPOSURE`.
    light: Vec<f32>,
    /// Light on the plate from each direction, summing to 1.
    plate: Vec<f32>,
    colours: [[f32; 3]; 3],
    /// Half way between the main light and the viewer.
    half: [f32; 3],
    cut: [f32; 3],
    line: [f32; 3],
    paper: [f32; 3],
}

impl<'s> Painter<'s> {
    fn new(scene: &'s Scene<'s>, camera: &'s Camera, layer: &'s Layer, look: &Look) -> Self {
        let in_space =
            |v: [f64; 3]| (camera.right * v[0] + camera.up * v[1] + camera.toward * v[2]).normalize();
        let lamps = [KEY, FILL].map(|(v, power, strength)| (in_space(v), power, strength));
        let mut light: Vec<f64> = scene
            .sky
            .directions()
            .map(|w| {
                let ambient = AMBIENT[0] + AMBIENT[1] * (0.5 + 0.5 * w.dot(&camera.up));
                lamps.iter().fold(ambient, |sum, (v, power, strength)| {
                    sum + strength * w.dot(v).max(0.0).powf(*power)
                })
            })
            .collect();
        let key = lamps[0].0;
        let full: f64 = light.iter().zip(scene.sky.directions()).map(|(l, w)| l * w.dot(&key).max(0.0)).sum();
        let mut plate: Vec<f64> =
            light.iter().zip(scene.sky.directions()).map(|(l, w)| l * w.z.max(0.0)).collect();
        let whole: f64 = plate.iter().sum();
        // Each sample sees one direction in so many.
        let shares = (camera.per_pixel * camera.per_pixel) as f64;
        plate.iter_mut().for_each(|l| *l *= shares / whole.max(1e-12));
        light.iter_mut().for_each(|l| *l *= EXPOSURE * shares / full.max(1e-12));
        let linear = |c: [u8; 3]| c.map(linear_from_srgb);
        Self {
            scene,
            camera,
            layer,
            light: light.into_iter().map(nearest_f32).collect(),
            plate: plate.into_iter().map(nearest_f32).collect(),
            half: small(&(key + camera.toward).normalize()),
            colours: [linear(look.side_a), linear(look.side_b), linear(look.fixture)],
            cut: linear(look.cut),
            line: linear(look.line),
            paper: linear(look.paper),
        }
    }

    /// Whether the cutting plane lies in material at this sample: the first surface behind it is seen from within.
    fn is_cut(&self, hit: &Hit) -> bool {
        hit.back && self.scene.section.is_some_and(|s| s.normal.dot(&self.camera.toward) > 1e-6)
    }

    /// Finds what the samples of a row show and the light on each.
    ///
    /// The samples of one pixel share the sky among them: each takes every n-th direction. Directions are
    /// the outer loop, so that neighbouring samples look at neighbouring texels of one map.
    fn light_row(&self, row: usize, spots: &mut [Spot]) {
        let sky = self.scene.sky;
        let mut points = vec![[0.0_f32; 3]; spots.len()];
        for (column, (spot, point)) in spots.iter_mut().zip(&mut points).enumerate() {
            let (found, lifted) = self.spot(column, row);
            *spot = found;
            *point = sky.local(&lifted);
        }
        let n = self.camera.per_pixel;
        for k in 0..self.light.len() {
            // The place in its pixel of the samples that look in this direction.
            let share = k % (n * n);
            if share / n != row % n {
                continue;
            }
            let beam = sky.beam(k);
            let (light, plate) = (self.light[k], self.plate[k]);
            for column in (share % n..spots.len()).step_by(n) {
                let (spot, point) = (&mut spots[column], &points[column]);
                if spot.kind == Kind::Skin {
                    let facing = dot(&beam.toward, &spot.normal);
                    if facing > 0.0 && beam.reaches(point) {
                        spot.light += light * facing;
                    }
                } else if spot.kind == Kind::Plate && plate > 0.0 && !beam.reaches(point) {
                    spot.light += plate;
                }
            }
        }
    }

    /// What a sample shows, unlit, and the place to ask the sky about.
    fn spot(&self, column: usize, row: usize) -> (Spot, Vec3) {
        let sky = self.scene.sky;
        let hit = &self.layer.hits[row * self.camera.width + column];
        if hit.is_empty() {
            let plate = self.plate_point(column, row);
            let normal = [0.0, 0.0, 1.0];
            return plate.map_or((Spot::PAPER, Vec3::zeros()), |p| {
                (Spot { kind: Kind::Plate, normal, ..Spot::PAPER }, p + Vec3::z() * (0.5 * sky.lift()))
            });
        }
        let p = self.camera.point(column, row, f64::from(hit.depth));
        if let Some(section) = self.scene.section.filter(|_| self.is_cut(hit)) {
            let normal = small(&section.normal);
            return (Spot { kind: Kind::Cut, normal, depth: hit.depth, light: 0.0 }, p);
        }
        let t = hit.triangle as usize;
        let at = barycentric(&self.scene.mesh.corners(t), &p, &self.camera.toward);
        let n = self.scene.normals.at(t, at);
        let normal = if hit.back { -n } else { n };
        let spot = Spot { kind: Kind::Skin, normal: small(&normal), depth: hit.depth, light: 0.0 };
        (spot, p + normal * sky.lift())
    }

    /// Where the plate is seen beside the solid.
    fn plate_point(&self, column: usize, row: usize) -> Option<Vec3> {
        let (camera, sky) = (self.camera, self.scene.sky);
        if !self.scene.ground || camera.toward.z < 0.05 || self.shadow_depth(column, row) <= 0.0 {
            return None;
        }
        let eye = camera.point(column, row, 0.0);
        let p = eye + camera.toward * ((sky.floor - eye.z) / camera.toward.z);
        ((p - sky.centre).xy().norm() < 2.5 * sky.radius).then_some(p)
    }

    fn paint(&self, column: usize, row: usize, spots: &[Spot], light: &[f32], sample: &mut Sample) {
        let k = row * self.camera.width + column;
        let painted = match spots[k].kind {
            Kind::Paper => None,
            Kind::Plate => {
                let keep = 1.0 - self.shadow_depth(column, row) * light[k];
                (light[k] > 0.0).then(|| self.paper.map(|c| c * keep))
            }
            Kind::Cut => {
                let stripe = (column + row) / self.camera.per_pixel % CUT_STRIPE_PX < CUT_STRIPE_PX / 3;
                let lift = if stripe { CUT_STRIPE_LIFT } else { 0.0 };
                Some(self.cut.map(|c| c + lift))
            }
            Kind::Skin => {
                Some(self.surface(self.layer.hits[k].triangle as usize, &spots[k].normal, light[k]))
            }
        };
        if let Some(linear) = painted {
            *sample = Sample { linear, is_paper: false };
        }
        let strength = self.line_at(column, row, spots);
        if strength > 0.0 {
            for (c, line) in sample.linear.iter_mut().zip(self.line) {
                *c += (line - *c) * strength;
            }
            sample.is_paper = false;
        }
    }

    fn surface(&self, triangle: usize, normal: &[f32; 3], light: f32) -> [f32; 3] {
        let colour = match self.scene.mesh.sides[triangle] {
            Side::A => self.colours[0],
            Side::B => self.colours[1],
            Side::Fixture => self.colours[2],
        };
        let half: f32 = dot(normal, &self.half);
        let gloss = GLOSS * half.max(0.0).powi(GLOSS_POWER) * light;
        colour.map(|c| c * (FLOOR_LIGHT + (1.0 - FLOOR_LIGHT) * light) + gloss)
    }

    /// How much of the paper's light a full shadow takes here: nothing near the edge of the picture.
    fn shadow_depth(&self, column: usize, row: usize) -> f32 {
        let from_middle = |place: usize, length: usize| (2 * place + 1) as f32 / length as f32 - 1.0;
        let camera = self.camera;
        let away = from_middle(column, camera.width).hypot(from_middle(row, camera.height));
        let t = ((1.0 - away) / SHADOW_FADE).clamp(0.0, 1.0);
        SHADOW_DEPTH * t * t * (3.0 - 2.0 * t)
    }

    /// How dark a line at this sample is, 0..=1: outlines, edges of cut material, then creases.
    fn line_at(&self, column: usize, row: usize, spots: &[Spot]) -> f32 {
        let camera = self.camera;
        let k = row * camera.width + column;
        let left = (column > 0).then(|| k - 1);
        let right = (column + 1 < camera.width).then(|| k + 1);
        let above = (row > 0).then(|| k - camera.width);
        let below = (row + 1 < camera.height).then(|| k + camera.width);
        let mut strength = 0.0_f32;
        for other in [left, right, above, below].into_iter().flatten() {
            strength = strength.max(self.line_between(&spots[k], &spots[other]));
        }
        strength
    }

    fn line_between(&self, here: &Spot, there: &Spot) -> f32 {
        let outside = |s: &Spot| matches!(s.kind, Kind::Paper | Kind::Plate);
        if outside(here) != outside(there) || (here.kind == Kind::Cut) != (there.kind == Kind::Cut) {
            return OUTLINE;
        }
        if here.kind != Kind::Skin {
            return 0.0;
        }
        // The step in depth that a flat surface of this slope would make is no line.
        let toward = small(&self.camera.toward);
        let flat = |n: &[f32; 3]| {
            let z = dot(n, &toward).abs().max(0.05);
            (1.0 / (z * z) - 1.0).max(0.0).sqrt() * nearest_f32(self.camera.step)
        };
        let jump = nearest_f32(self.scene.sky.radius) * STEP_SHARE;
        if (here.depth - there.depth).abs() > jump + 2.0 * flat(&here.normal).max(flat(&there.normal)) {
            return OUTLINE;
        }
        let cosine: f32 = dot(&here.normal, &there.normal);
        if cosine < CREASE_COSINE { CREASE } else { 0.0 }
    }
}

/// Strength of outlines and of steps in depth.
const OUTLINE: f32 = 0.75;
/// Strength of creases.
const CREASE: f32 = 0.42;
/// Normals that differ by more than 35 degrees from sample to sample make a crease.
const CREASE_COSINE: f32 = 0.82;
/// A step in depth larger than this share of the solid's radius is drawn as a line.
const STEP_SHARE: f32 = 0.02;
/// Distance between the stripes of cut material, pixels.
const CUT_STRIPE_PX: usize = 6;
/// How much lighter the stripes are, linear light.
const CUT_STRIPE_LIFT: f32 = 0.10;
