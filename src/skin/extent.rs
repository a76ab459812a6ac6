//! Exact extents and the smallest enclosing ball of a skin.

use super::sphere::{SphereGrid, distance2, height, maximum_near};
use crate::geom::{Aabb, Surface, Vec3, golden_section_minimum};

/// Quarterings of the octahedron: 4098 samples, about 0.03 radians apart.
const LEVEL: u32 = 5;
/// Local maxima followed up for each direction: more than twice the copies an order-5 symmetry makes.
const FOLLOWED: usize = 24;

/// The smallest box around the image of `surface`, in the units of its positions.
///
/// Support points are found among 4098 samples and followed up by Newton's method: each face of the box is
/// right to about 1e-12 of the size, unless a bulge narrower than the 0.03 radians between samples stands
/// out alone (no stage of a built-in family has one).
#[must_use]
pub fn extent(surface: &dyn Surface) -> Aabb {
    let grid = SphereGrid::new(LEVEL);
    let places = grid.map(|p| surface.position(*p));
    let mut bounds = Aabb::around(&places);
    for axis in 0..3 {
        for sign in [-1.0, 1.0] {
            let mut direction = Vec3::zeros();
            direction[axis] = sign;
            let depths: Vec<f64> = places.iter().map(|x| -x.dot(&direction)).collect();
            for k in grid.local_minima(&depths, FOLLOWED) {
                let top = maximum_near(height(surface, direction), grid.points[k], grid.spacing);
                bounds.include(&surface.position(top.at));
            }
        }
    }
    bounds
}

/// A ball with its centre on the z axis, in the units of a surface's positions.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct AxisBall {
    /// Its radius.
    pub radius: f64,
    /// The z coordinate of its centre.
    pub z: f64,
}

/// The smallest ball around the image of `surface` among those with the centre on the z axis; for a
/// surface with a rotational symmetry about z that is the smallest of all balls.
///
/// Exchange: minimise over the points known, follow the farthest samples from that centre up to the true
/// farthest points, add these, and repeat until the radius no longer grows (1e-13 relative).
#[must_use]
pub fn enclosing_ball(surface: &dyn Surface) -> AxisBall {
    let grid = SphereGrid::new(LEVEL);
    let places = grid.map(|p| surface.position(*p));
    let mut known = places.clone();
    let mut ball = smallest(&known);
    for _ in 0..20 {
        let centre = Vec3::new(0.0, 0.0, ball.z);
        let nearness: Vec<f64> = places.iter().map(|x| -(x - centre).norm_squared()).collect();
        for k in grid.local_minima(&nearness, FOLLOWED) {
            let far = maximum_near(distance2(surface, centre), grid.points[k], grid.spacing);
            known.push(surface.position(far.at));
        }
        let next = smallest(&known);
        let grown = next.radius - ball.radius;
        ball = next;
        if grown <= 1e-13 * ball.radius {
            break;
        }
    }
    ball
}

fn smallest(points: &[Vec3]) -> AxisBall {
    let radius2 = |z: f64| {
        let r = |x: &Vec3| x.x * x.x + x.y * x.y + (x.z - z) * (x.z - z);
        points.iter().fold(0.0_f64, |m, x| m.max(r(x)))
    };
    let bounds = Aabb::around(points);
    let (z, radius2) = golden_section_minimum(radius2, bounds.min.z, bounds.max.z);
    AxisBall { radius: radius2.sqrt(), z }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::geom::{Placed, Placement};
    use crate::skin::Ruled;
    use nalgebra::Rotation3;

    #[test]
    fn a_turned_round_sphere_has_its_diameter_everywhere() {
        let stage = Ruled::new(3).unwrap().stage_at(0.0);
        let rotation = Rotation3::from_euler_angles(0.3, -1.1, 2.0);
        let shift = Vec3::new(5.0, -7.0, 11.0);
        let b = extent(&Placed::new(&stage, Placement { scale: 40.0, rotation, shift }));
        assert!((b.min - (shift - Vec3::repeat(40.0))).amax() < 1e-9, "{b:?}");
        assert!((b.max - (shift + Vec3::repeat(40.0))).amax() < 1e-9, "{b:?}");
        let ball = enclosing_ball(&stage);
        assert!((ball.radius - 1.0).abs() < 1e-12 && ball.z.abs() < 1e-6);
    }

    #[test]
    fn no_point_of_a_fine_grid_lies_outside_box_or_ball() {
        for (order, tau) in [(2, 0.5), (3, 0.3), (5, 0.28), (5, 0.1)] {
            let stage = Ruled::new(order).unwrap().stage_at(tau);
            let (b, ball) = (extent(&stage), enclosing_ball(&stage));
            let fine = SphereGrid::new(8);
            let points = fine.map(|p| stage.position(*p));
            let inner = Aabb::around(&points);
            let over = (inner.max - b.max).max().max((b.min - inner.min).max());
            assert!(over < 1e-9, "{over}");
            // nor does the box stand off: a quadratic top is sampled within spacing^2
            assert!((b.max - inner.max).amax().max((inner.min - b.min).amax()) < 3e-3);
            let far = points.iter().fold(0.0_f64, |m, x| m.max((x - Vec3::new(0.0, 0.0, ball.z)).norm()));
            assert!(far <= ball.radius * (1.0 + 1e-9) && far > ball.radius * 0.999);
        }
    }
}
