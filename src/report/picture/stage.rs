//! The pictures of one stage on the sheet.

use super::camera::{Frame, Section, View, upright};
use super::{Easel, Look, PictureError};
use crate::geom::Vec3;
use crate::mesh::TriMesh;

/// One picture of a stage.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Picture {
    /// Name of the view, one of [`VIEWS`].
    pub name: &'static str,
    /// Width and height, pixels.
    pub size_px: [u32; 2],
    /// The picture, PNG.
    pub png: Vec<u8>,
}

/// All pictures of one stage, in the order of [`VIEWS`].
#[derive(Clone, Debug, PartialEq)]
pub struct StagePictures {
    /// The pictures.
    pub all: Vec<Picture>,
    /// Width of every picture, mm.
    pub width_mm: f64,
}

/// The views of a stage, name and caption.
pub const VIEWS: [(&str, &str); 6] = [
    ("portrait", "from the front, right and above"),
    ("opened", "the same, front half taken away"),
    ("front", "seen along +y"),
    ("side", "the right side, seen along -x"),
    ("top", "seen along -z"),
    ("section", "cut through the middle, seen along +y"),
];

impl StagePictures {
    /// Names and PNG bytes, as [`crate::report::sheet_html`] takes them.
    #[must_use]
    pub fn into_named(self) -> Vec<(String, Vec<u8>)> {
        self.all.into_iter().map(|p| (p.name.to_owned(), p.png)).collect()
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
    let mut all = Vec::with_capacity(VIEWS.len());
    for (name, _) in VIEWS {
        let (easel, direction, side, ground) = match name {
            "opened" => (&cut, PORTRAIT, LARGE_PX, true),
            "front" => (&whole, -Vec3::y(), PLAIN_PX, false),
            "side" => (&whole, Vec3::x(), PLAIN_PX, false),
            "top" => (&whole, Vec3::z(), PLAIN_PX, true),
            "section" => (&cut, -Vec3::y(), PLAIN_PX, false),
            _ => (&whole, PORTRAIT, LARGE_PX, true),
        };
        let view = View {
            direction,
            up: if name == "top" { Vec3::y() } else { Vec3::z() },
            frame: frame(mesh, width_mm),
            size_px: [side; 2],
            section: None,
            supersample: 2,
            ground,
        };
        all.push(Picture { name, size_px: [side; 2], png: easel.draw(&view, look)?.to_png()? });
    }
    Ok(StagePictures { all, width_mm })
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
