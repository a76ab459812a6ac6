//! The pictures of one stage on the sheet.

use super::camera::{Frame, Section, View, upright};
use super::{Easel, Look, PictureError};
use crate::geom::Vec3;
use crate::mesh::TriMesh;

/// One picture with the words that go with it.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Picture {
    /// Name of the view: `portrait`, `opened`, `front`, `side`, `top`, `section`.
    pub name: &'static str,
    /// What is seen, for the caption.
    pub caption: &'static str,
    /// Width and height, pixels.
    pub size_px: [u32; 2],
    /// The picture, PNG.
    pub png: Vec<u8>,
}

/// All pictures of one stage.
#[derive(Clone, Debug, PartialEq)]
pub struct StagePictures {
    /// From the front, right and above.
    pub portrait: Picture,
    /// The same, with the front half taken away.
    pub opened: Picture,
    /// Seen along +y, along -x and along -z, then the cut through the middle seen along +y.
    pub plain: [Picture; 4],
    /// Width of every picture, mm.
    pub width_mm: f64,
}

impl StagePictures {
    /// All pictures in the order of the sheet.
    pub fn all(&self) -> impl Iterator<Item = &Picture> {
        [&self.portrait, &self.opened].into_iter().chain(&self.plain)
    }
}

/// Side of the two large pictures, pixels.
const LARGE_PX: u32 = 640;
/// Side of the four plain views, pixels.
const PLAIN_PX: u32 = 360;
/// From the solid to the viewer of the portraits.
pub(super) const PORTRAIT: Vec3 = Vec3::new(0.42, -0.80, 0.44);
/// Room around a solid of the set's size, as a share of that size.
const ROOM: f64 = 1.16;

/// Least room around what is seen of a solid in the portrait.
const TIGHT: f64 = 1.03;

/// Draws all pictures of a stage at one scale.
///
/// - `mesh`: the solid as written, standing on z = 0.
/// - `size_mm`: greatest extent of any stage of the set, so that all stages are drawn at one scale.
/// - `look`: the colours.
///
/// # Errors
/// As [`super::render`]; the sizes are fixed, so there is no reason to expect one.
pub fn stage_pictures(mesh: &TriMesh, size_mm: f64, look: &Look) -> Result<StagePictures, PictureError> {
    let width_mm = common_width(mesh, size_mm);
    let section = middle_section(mesh);
    let whole = Easel::new(mesh, None);
    let cut = Easel::new(mesh, Some(section));
    let take = |easel: &Easel, name, caption, direction: Vec3, up: Vec3, side: u32, ground: bool| {
        let view = View {
            direction,
            up,
            frame: frame(mesh, width_mm),
            size_px: [side; 2],
            section: None,
            supersample: 2,
            ground,
        };
        let png = easel.draw(&view, look)?.to_png()?;
        Ok::<_, PictureError>(Picture { name, caption, size_px: [side; 2], png })
    };
    let z = Vec3::z();
    Ok(StagePictures {
        portrait: take(&whole, "portrait", "from the front, right and above", PORTRAIT, z, LARGE_PX, true)?,
        opened: take(&cut, "opened", "the same, front half taken away", PORTRAIT, z, LARGE_PX, true)?,
        plain: [
            take(&whole, "front", "front, seen along +y", -Vec3::y(), z, PLAIN_PX, false)?,
            take(&whole, "side", "right side, seen along -x", Vec3::x(), z, PLAIN_PX, false)?,
            take(&whole, "top", "top, seen along -z", z, Vec3::y(), PLAIN_PX, true)?,
            take(&cut, "section", "cut through the middle, seen along +y", -Vec3::y(), z, PLAIN_PX, false)?,
        ],
        width_mm,
    })
}

/// The plane through the middle of the solid that faces the front.
pub(super) fn middle_section(mesh: &TriMesh) -> Section {
    let bounds = mesh.bounds();
    let point = if bounds.is_empty() { Vec3::zeros() } else { bounds.centre() };
    Section { point, normal: -Vec3::y() }
}

/// Width of a picture that shows the mesh, and any other of the set's size, from every side, mm.
pub(super) fn common_width(mesh: &TriMesh, size_mm: f64) -> f64 {
    let bounds = mesh.bounds();
    if bounds.is_empty() || !bounds.extent().norm().is_finite() {
        return if size_mm.is_finite() { size_mm.max(1e-6) } else { 1.0 };
    }
    let size = if size_mm.is_finite() { size_mm } else { 0.0 };
    // Seen at an angle a box is wider than its edges: the portrait must hold what is really there.
    let (right, up) = upright(&PORTRAIT.normalize(), &Vec3::z());
    let centre = bounds.centre();
    let reach = mesh.positions.iter().fold(0.0, |most: f64, p| {
        let q = p - centre;
        most.max(q.dot(&right).abs()).max(q.dot(&up).abs())
    });
    (ROOM * bounds.extent().max().max(size)).max(2.0 * TIGHT * reach).max(1e-6)
}

pub(super) fn frame(mesh: &TriMesh, width_mm: f64) -> Frame {
    let bounds = mesh.bounds();
    let centre = if bounds.is_empty() { Vec3::zeros() } else { bounds.centre() };
    Frame::Fixed { centre, width_mm }
}
