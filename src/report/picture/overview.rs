//! All stages of a set in one picture.

use super::camera::View;
use super::stage::{PORTRAIT, common_width, frame, middle_section};
use super::{Easel, Image, Look, PictureError};
use crate::geom::Vec3;
use crate::mesh::TriMesh;

/// Draws all stages side by side at one scale: above from the outside, below with the front half taken away.
///
/// - `meshes`: the solids in their order; none gives one empty cell.
/// - `cell_px`: side of the square each picture has, pixels.
///
/// # Errors
/// [`PictureError::Size`] when the row would be longer than [`super::LONGEST_PX`].
pub fn overview(meshes: &[&TriMesh], cell_px: u32, look: &Look) -> Result<Image, PictureError> {
    let columns = u32::try_from(meshes.len().max(1)).unwrap_or(u32::MAX);
    let (width, height) = (cell_px.saturating_mul(columns), cell_px.saturating_mul(2));
    if [width, height].iter().any(|side| !(1..=super::LONGEST_PX).contains(side)) {
        return Err(PictureError::Size(width, height));
    }
    let width_mm = meshes.iter().map(|m| common_width(m, 0.0)).fold(1e-6, f64::max);
    let mut sheet = Image::blank(width, height, look.paper, width_mm / f64::from(cell_px));
    for (column, mesh) in (0_u32..).zip(meshes) {
        for (row, section) in [(0, None), (1, Some(middle_section(mesh)))] {
            let view = View {
                direction: PORTRAIT,
                up: Vec3::z(),
                frame: frame(mesh, width_mm),
                size_px: [cell_px; 2],
                section,
                supersample: 2,
                ground: true,
            };
            let image = Easel::new(mesh, section).draw(&view, look)?;
            sheet.paste(&image, column * cell_px, row * cell_px);
        }
    }
    Ok(sheet)
}
