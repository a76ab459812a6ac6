//! Where a picture is taken from: parallel projection, so that mm can be measured on it.

use crate::geom::{Aabb, Vec3};

/// What a picture shows of space.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Frame {
    /// All of the mesh, with a margin of 4 %.
    Fit,
    /// This much of space.
    Fixed {
        /// The point in the middle of the picture, mm.
        centre: Vec3,
        /// Width of the picture, mm, > 0.
        width_mm: f64,
    },
}

/// A plane that cuts the solid open.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Section {
    /// A point of the plane, mm.
    pub point: Vec3,
    /// Unit normal; the half it points into is taken away.
    pub normal: Vec3,
}

impl Section {
    /// Signed distance from the plane, mm; positive in the half that is taken away.
    pub(super) fn height(&self, p: &Vec3) -> f64 {
        self.normal.dot(&(p - self.point))
    }
}

/// One picture to take.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct View {
    /// From the solid towards the viewer; any length but zero.
    pub direction: Vec3,
    /// What is up in the picture; not along `direction`.
    pub up: Vec3,
    /// What is shown.
    pub frame: Frame,
    /// Width and height, pixels.
    pub size_px: [u32; 2],
    /// The plane that cuts the solid open, if any.
    pub section: Option<Section>,
    /// Samples along each side of a pixel, 1 to 4.
    pub supersample: u32,
    /// Whether the solid stands on a plate at its lowest point and throws a soft shadow on it.
    pub ground: bool,
}

/// A view worked out: an orthonormal frame and the size of a sample.
#[derive(Clone, Copy, Debug)]
pub(super) struct Camera {
    /// To the right in the picture.
    pub(super) right: Vec3,
    /// Up in the picture.
    pub(super) up: Vec3,
    /// Towards the viewer.
    pub(super) toward: Vec3,
    /// The point in the middle.
    pub(super) centre: Vec3,
    /// mm a sample.
    pub(super) step: f64,
    /// Samples along each side of a pixel.
    pub(super) per_pixel: usize,
    /// Samples in a row.
    pub(super) width: usize,
    /// Rows of samples.
    pub(super) height: usize,
}

/// Share of the picture kept empty around a fitted mesh, on each side.
const MARGIN: f64 = 0.04;

impl Camera {
    pub(super) fn new(view: &View, bounds: &Aabb) -> Self {
        let toward = view.direction.try_normalize(1e-12).unwrap_or_else(Vec3::y);
        let (right, up) = upright(&toward, &view.up);
        let per_pixel = view.supersample.clamp(1, 4) as usize;
        let [width, height] = view.size_px.map(|side| side as usize);
        let (centre, step) = match view.frame {
            Frame::Fixed { centre, width_mm } => (centre, width_mm.max(1e-9) / width as f64),
            Frame::Fit if bounds.is_empty() => (Vec3::zeros(), 1.0),
            Frame::Fit => {
                let half = 0.5 * bounds.extent();
                // The widest a box can look along an axis; exact for views along x, y and z.
                let reach = |axis: &Vec3| half.abs().dot(&axis.abs());
                let room = 1.0 - 2.0 * MARGIN;
                let step = (2.0 * reach(&right) / (width as f64 * room))
                    .max(2.0 * reach(&up) / (height as f64 * room));
                (bounds.centre(), step.max(1e-9))
            }
        };
        Self {
            right,
            up,
            toward,
            centre,
            step: step / per_pixel as f64,
            per_pixel,
            width: width * per_pixel,
            height: height * per_pixel,
        }
    }

    /// Column and row of a point, in samples, and its distance towards the viewer from the middle, mm.
    pub(super) fn project(&self, p: &Vec3) -> [f64; 3] {
        let q = p - self.centre;
        [
            0.5 * self.width as f64 + q.dot(&self.right) / self.step,
            0.5 * self.height as f64 - q.dot(&self.up) / self.step,
            q.dot(&self.toward),
        ]
    }

    /// The point in the middle of a sample at the given depth.
    pub(super) fn point(&self, column: usize, row: usize, depth: f64) -> Vec3 {
        let x = (column as f64 + 0.5 - 0.5 * self.width as f64) * self.step;
        let y = (0.5 * self.height as f64 - row as f64 - 0.5) * self.step;
        self.centre + self.right * x + self.up * y + self.toward * depth
    }
}

/// The right and up vectors of a picture seen against `toward`, with `up` as near to `wanted` as it can be.
pub(super) fn upright(toward: &Vec3, wanted: &Vec3) -> (Vec3, Vec3) {
    let right =
        wanted.cross(toward).try_normalize(1e-9).unwrap_or_else(|| crate::geom::tangent_frame(toward).0);
    (right, toward.cross(&right))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_point_comes_back_from_its_sample() {
        let view = View {
            direction: Vec3::new(1.0, -2.0, 0.5),
            up: Vec3::z(),
            frame: Frame::Fixed { centre: Vec3::new(1.0, 2.0, 3.0), width_mm: 50.0 },
            size_px: [100, 80],
            section: None,
            supersample: 2,
            ground: false,
        };
        let camera = Camera::new(&view, &Aabb::EMPTY);
        let p = camera.point(31, 77, 4.0);
        let [x, y, depth] = camera.project(&p);
        assert!((x - 31.5).abs() < 1e-9 && (y - 77.5).abs() < 1e-9 && (depth - 4.0).abs() < 1e-9);
        assert!((camera.right.cross(&camera.up) - camera.toward).norm() < 1e-12);
    }
}
