//! The point of a triangle nearest to a given point.

use super::Vec3;

/// The answer of [`closest_point_on_triangle`].
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ClosestPoint {
    /// The nearest point of the triangle.
    pub point: Vec3,
    /// Its barycentric coordinates with respect to the corners a, b, c; they sum to 1.
    pub barycentric: [f64; 3],
}

/// Finds the point of the triangle `abc` nearest to `p` (corner, edge or face region).
///
/// # Source
/// C. Ericson, "Real-Time Collision Detection", 2005, section 5.1.5.
#[must_use]
pub fn closest_point_on_triangle(p: &Vec3, a: &Vec3, b: &Vec3, c: &Vec3) -> ClosestPoint {
    let (ab, ac, ap) = (b - a, c - a, p - a);
    let (d1, d2) = (ab.dot(&ap), ac.dot(&ap));
    let at = |u: f64, v: f64, w: f64| ClosestPoint { point: a * u + b * v + c * w, barycentric: [u, v, w] };
    if d1 <= 0.0 && d2 <= 0.0 {
        return at(1.0, 0.0, 0.0);
    }
    let bp = p - b;
    let (d3, d4) = (ab.dot(&bp), ac.dot(&bp));
    if d3 >= 0.0 && d4 <= d3 {
        return at(0.0, 1.0, 0.0);
    }
    let vc = d1 * d4 - d3 * d2;
    if vc <= 0.0 && d1 >= 0.0 && d3 <= 0.0 {
        let v = d1 / (d1 - d3);
        return at(1.0 - v, v, 0.0);
    }
    let cp = p - c;
    let (d5, d6) = (ab.dot(&cp), ac.dot(&cp));
    if d6 >= 0.0 && d5 <= d6 {
        return at(0.0, 0.0, 1.0);
    }
    let vb = d5 * d2 - d1 * d6;
    if vb <= 0.0 && d2 >= 0.0 && d6 <= 0.0 {
        let w = d2 / (d2 - d6);
        return at(1.0 - w, 0.0, w);
    }
    let va = d3 * d6 - d5 * d4;
    if va <= 0.0 && (d4 - d3) >= 0.0 && (d5 - d6) >= 0.0 {
        let w = (d4 - d3) / ((d4 - d3) + (d5 - d6));
        return at(0.0, 1.0 - w, w);
    }
    let denom = va + vb + vc;
    let (v, w) = (vb / denom, vc / denom);
    at(1.0 - v - w, v, w)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_region_is_found() {
        let (a, b, c) = (Vec3::zeros(), Vec3::new(4.0, 0.0, 0.0), Vec3::new(0.0, 4.0, 0.0));
        let near = |x: f64, y: f64, z: f64| closest_point_on_triangle(&Vec3::new(x, y, z), &a, &b, &c).point;
        assert_eq!(near(1.0, 1.0, 5.0), Vec3::new(1.0, 1.0, 0.0)); // face
        assert_eq!(near(-1.0, -1.0, 0.0), a); // corners
        assert_eq!(near(6.0, -1.0, 0.0), b);
        assert_eq!(near(-1.0, 7.0, 0.0), c);
        assert_eq!(near(1.0, -2.0, 0.0), Vec3::new(1.0, 0.0, 0.0)); // edges
        assert_eq!(near(-2.0, 1.0, 0.0), Vec3::new(0.0, 1.0, 0.0));
        assert_eq!(near(4.0, 4.0, 0.0), Vec3::new(2.0, 2.0, 0.0));
    }
}
