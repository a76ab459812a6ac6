//! Placement for a given build direction.

use crate::geom::{Aabb, Placement, Vec3};
use nalgebra::{Rotation3, Unit};

/// Why a stage can't be placed.
#[derive(Clone, Copy, Debug, PartialEq, thiserror::Error)]
pub enum OrientError {
    /// The build direction has no direction.
    #[error("direction [{0}, {1}, {2}] is no direction; give three finite numbers that are not all 0")]
    NoDirection(f64, f64, f64),
    /// No material would be left between the two halves of the wall.
    #[error(
        "size_mm {size_mm} mm is not larger than the wall, {wall_mm} mm, so nothing is left of the skin; raise \
         size_mm or lower wall_mm"
    )]
    SmallerThanWall {
        /// Greatest extent asked for, mm.
        size_mm: f64,
        /// Wall thickness, mm.
        wall_mm: f64,
    },
    /// The skin has no extent to scale.
    #[error("the skin has an extent of {0} units, which can't be scaled to a size")]
    NoExtent(f64),
}

/// The smallest rotation that takes `direction` to +z.
///
/// The angle about z that a direction leaves open is decided so: turn about the axis direction x z, by the angle between
/// the two and no more. So +z gives exactly the identity, and -z, for which every horizontal axis would do,
/// the half turn about x. The length of `direction` does not matter.
///
/// # Errors
/// [`OrientError::NoDirection`] when it is zero or not finite.
///
/// # Example
/// ```
/// # use stagewright::{geom::Vec3, orient::rotation_to_z};
/// let r = rotation_to_z(&Vec3::new(0.0, 3.0, 4.0))?;
/// assert!((r * Vec3::new(0.0, 0.6, 0.8) - Vec3::z()).norm() < 1e-15);
/// # Ok::<(), stagewright::orient::OrientError>(())
/// ```
pub fn rotation_to_z(direction: &Vec3) -> Result<Rotation3<f64>, OrientError> {
    let d = direction;
    // Scaled by the largest coordinate first: squares of very large or small numbers leave the range.
    let largest = d.amax();
    if !d.iter().all(|x| x.is_finite()) || largest <= 0.0 {
        return Err(OrientError::NoDirection(d.x, d.y, d.z));
    }
    let d = (d / largest).normalize();
    let across = d.xy().norm();
    if across <= f64::EPSILON {
        let half = Rotation3::from_axis_angle(&Vec3::x_axis(), std::f64::consts::PI);
        return Ok(if d.z > 0.0 { Rotation3::identity() } else { half });
    }
    let axis = Unit::new_normalize(Vec3::new(d.y, -d.x, 0.0));
    Ok(Rotation3::from_axis_angle(&axis, across.atan2(d.z)))
}

/// The scale, mm a unit, at which a skin of greatest extent `extent` (own units) becomes a solid of greatest
/// extent `size_mm`, wall included: the wall adds half its thickness at each end.
///
/// # Errors
/// [`OrientError::SmallerThanWall`] when the wall alone takes the size, [`OrientError::NoExtent`] when `extent` is not
/// a finite number above 0.
pub fn scale_for_extent(extent: f64, size_mm: f64, wall_mm: f64) -> Result<f64, OrientError> {
    if !extent.is_finite() || extent <= 0.0 {
        return Err(OrientError::NoExtent(extent));
    }
    if size_mm.is_nan() || size_mm <= wall_mm {
        return Err(OrientError::SmallerThanWall { size_mm, wall_mm });
    }
    Ok((size_mm - wall_mm) / extent)
}

/// Places a skin so that its solid stands on the plate z = 0 with its box in the corner x >= 0, y >= 0.
///
/// - `rotation`: to the printing frame, from [`rotation_to_z`].
/// - `scale`: mm a unit, above 0.
/// - `turned`: the box of the skin after `rotation`, in its own units.
/// - `wall_mm`: thickness of the wall; the solid reaches half of it beyond the skin on every side.
///
/// # Source
/// 3MF core specification 1.4.0, section 3.3: a model should lie in the positive octant.
#[must_use]
pub fn place(rotation: Rotation3<f64>, scale: f64, turned: &Aabb, wall_mm: f64) -> Placement {
    let shift =
        if turned.is_empty() { Vec3::zeros() } else { Vec3::repeat(0.5 * wall_mm) - turned.min * scale };
    Placement { scale, rotation, shift }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_direction_goes_to_z_by_a_proper_rotation() {
        let directions = [
            Vec3::x(),
            -Vec3::y(),
            Vec3::new(1.0, 2.0, -3.0),
            Vec3::new(1e-9, 0.0, -1.0),
            Vec3::new(-1e-200, 1e-200, 0.0),
            Vec3::new(1e200, 1e200, 1e200),
        ];
        for d in directions {
            let r = rotation_to_z(&d).unwrap();
            assert!((r * (d / d.amax()).normalize() - Vec3::z()).norm() < 1e-14, "{d}");
            assert!((r.matrix().determinant() - 1.0).abs() < 1e-14);
        }
    }

    #[test]
    fn up_stays_and_down_turns_about_x() {
        assert_eq!(rotation_to_z(&(Vec3::z() * 7.0)).unwrap(), Rotation3::identity());
        let down = rotation_to_z(&-Vec3::z()).unwrap();
        assert!((down * Vec3::x() - Vec3::x()).norm() < 1e-15);
        assert!((down * Vec3::y() + Vec3::y()).norm() < 1e-15);
    }

    #[test]
    fn the_turn_is_the_smallest() {
        let d = Vec3::new(0.3, -0.2, 0.5);
        let r = rotation_to_z(&d).unwrap();
        assert!((r.angle() - d.angle(&Vec3::z())).abs() < 1e-14);
        // The axis is horizontal: what lies along it stays.
        let axis = Vec3::new(d.y, -d.x, 0.0);
        assert!((r * axis - axis).norm() < 1e-15);
    }

    #[test]
    fn what_is_no_direction_is_refused() {
        for d in [Vec3::zeros(), Vec3::new(f64::NAN, 0.0, 1.0), Vec3::new(0.0, f64::INFINITY, 1.0)] {
            assert!(matches!(rotation_to_z(&d), Err(OrientError::NoDirection(..))));
        }
    }

    #[test]
    fn the_solid_stands_in_the_corner_of_the_plate_with_the_size_asked_for() {
        let skin = Aabb { min: Vec3::new(-1.0, -0.5, 2.0), max: Vec3::new(1.0, 0.5, 3.0) };
        let scale = scale_for_extent(skin.extent().max(), 80.0, 2.0).unwrap();
        assert!((scale - 39.0).abs() < 1e-12);
        let p = place(Rotation3::identity(), scale, &skin, 2.0);
        assert!((p.point(&skin.min) - Vec3::repeat(1.0)).norm() < 1e-12);
        assert!((p.point(&skin.max).x - 79.0).abs() < 1e-12);
    }

    #[test]
    fn sizes_that_the_wall_takes_are_refused() {
        assert!(matches!(scale_for_extent(2.0, 2.0, 2.4), Err(OrientError::SmallerThanWall { .. })));
        assert!(matches!(scale_for_extent(2.0, f64::NAN, 2.4), Err(OrientError::SmallerThanWall { .. })));
        assert!(matches!(scale_for_extent(0.0, 80.0, 2.4), Err(OrientError::NoExtent(_))));
        assert!(matches!(scale_for_extent(f64::INFINITY, 80.0, 2.4), Err(OrientError::NoExtent(_))));
        let text = scale_for_extent(2.0, 2.0, 2.4).unwrap_err().to_string();
        assert!(text.contains("size_mm 2 mm") && text.contains("2.4 mm") && text.contains("raise"));
    }
}
