//! Pictures of solids, drawn on the CPU: what a maker sees first.
//!
//! One picture is made in four steps, each in its own file: `raster` finds the triangle seen in each
//! sample, `sky` how much light reaches it past the rest of the solid, `shade` its colour and the
//! lines, `image` the average of the samples and the PNG. Every sample is computed on its
//! own, so the bytes don't depend on the number of threads.

mod camera;
mod image;
mod normals;
mod raster;
mod shade;
mod sky;
mod stage;

pub use camera::{Frame, Section, View};
pub use image::Image;
pub use shade::Look;
pub use stage::{Picture, StagePictures, VIEWS, stage_pictures};

use crate::mesh::TriMesh;
use camera::Camera;
use normals::CornerNormals;
use raster::Layer;
use sky::Sky;

/// Longest side of a picture, pixels: 64 times that of the sheet's, and still under 1 GiB of samples.
pub const LONGEST_PX: u32 = 8192;

/// Why a picture could not be made.
#[derive(Debug, thiserror::Error)]
pub enum PictureError {
    /// A side is zero or longer than [`LONGEST_PX`].
    #[error("a picture of {0} x {1} px was asked for; each side must be 1 to {LONGEST_PX} px")]
    Size(u32, u32),
    /// The PNG writer refused the picture.
    #[error("the picture could not be written as PNG: {0}")]
    Encode(#[from] png::EncodingError),
}

/// Draws a solid and writes it as PNG with at most 256 colours.
///
/// - `mesh`: a closed solid, mm; a mesh with holes is drawn too, its back faces in the colours of its sides.
///   Triangles with a corner that is not finite are left out; an empty mesh gives empty paper.
/// - `view`: from where, how large, cut by which plane.
/// - `look`: the colours.
///
/// # Errors
/// [`PictureError::Size`] for a side of 0 or more than [`LONGEST_PX`] pixels.
pub fn render(mesh: &TriMesh, view: &View, look: &Look) -> Result<Vec<u8>, PictureError> {
    Easel::new(mesh, view.section).draw(view, look)?.to_png()
}

/// A mesh made ready to be drawn from many directions, uncut or cut by one plane.
pub(super) struct Easel<'m> {
    mesh: &'m TriMesh,
    normals: CornerNormals,
    sky: Sky,
    section: Option<Section>,
}

impl<'m> Easel<'m> {
    /// Finds the normals and the light from all around; the costly part that all views share.
    pub(super) fn new(mesh: &'m TriMesh, section: Option<Section>) -> Self {
        Self { mesh, normals: CornerNormals::of(mesh), sky: Sky::around(mesh, section.as_ref()), section }
    }

    /// Draws the view; its own section is replaced by the one the easel was made for.
    pub(super) fn draw(&self, view: &View, look: &Look) -> Result<Image, PictureError> {
        let [width, height] = view.size_px;
        if [width, height].iter().any(|side| !(1..=LONGEST_PX).contains(side)) {
            return Err(PictureError::Size(width, height));
        }
        let camera = Camera::new(view, &self.mesh.bounds());
        let layer = Layer::of(self.mesh, &camera, self.section.as_ref());
        let scene = shade::Scene {
            mesh: self.mesh,
            normals: &self.normals,
            sky: &self.sky,
            section: self.section,
            ground: view.ground,
        };
        let samples = shade::paint(&scene, &camera, &layer, look);
        Ok(Image::averaged(&samples, &camera, look.paper))
    }
}
