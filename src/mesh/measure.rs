//! Area, volume, centre and Euler number of a mesh.

use super::{EdgeTable, TriMesh};
use crate::geom::Vec3;
use rayon::prelude::*;

/// Triangles summed in one piece; the pieces are then summed in order, so that the sum does not
/// depend on the number of threads.
const PIECE: usize = 4096;

/// Why a mesh encloses no volume.
#[derive(Clone, Copy, Debug, PartialEq, Eq, thiserror::Error)]
pub enum VolumeError {
    /// The surface has a hole at the edge between these two vertices.
    #[error(
        "edge {0}->{1} is not matched by an edge {1}->{0}, so the mesh encloses no volume; close the mesh first"
    )]
    OpenEdge(u32, u32),
}

/// Volume and centre of mass of the solid a mesh bounds.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Mass {
    /// Enclosed volume, mm3; negative for a mesh turned inside out.
    pub volume_mm3: f64,
    /// Centre of mass of the solid, mm; the middle of the bounding box when the volume is 0.
    pub centre_mm: Vec3,
}

/// The normal of a triangle, its length twice the triangle's area (mm2).
#[must_use]
pub fn doubled_area_vector([a, b, c]: &[Vec3; 3]) -> Vec3 {
    (b - a).cross(&(c - a))
}

/// The area of a mesh, mm2.
#[must_use]
pub fn area(mesh: &TriMesh) -> f64 {
    let sums: Vec<f64> = mesh
        .triangles
        .par_chunks(PIECE)
        .map(|ts| {
            ts.iter().map(|t| doubled_area_vector(&t.map(|i| mesh.positions[i as usize])).norm()).sum::<f64>()
        })
        .collect();
    0.5 * sums.iter().sum::<f64>()
}

/// The signed volume under a mesh, mm3, and its centre, whether or not the mesh is closed: for an open mesh
/// the figures depend on where the mesh stands (tetrahedra are spanned from the middle of its bounding box).
///
/// # Source
/// B. Mirtich, "Fast and Accurate Computation of Polyhedral Mass Properties", Journal of Graphics Tools 1(2), 1996;
/// only the terms of order 0 and 1.
#[must_use]
pub fn signed_mass(mesh: &TriMesh) -> Mass {
    let o = if mesh.positions.is_empty() { Vec3::zeros() } else { mesh.bounds().centre() };
    let sums: Vec<(f64, Vec3)> = mesh
        .triangles
        .par_chunks(PIECE)
        .map(|ts| {
            let (mut v, mut m) = (0.0, Vec3::zeros());
            for t in ts {
                let [a, b, c] = t.map(|i| mesh.positions[i as usize] - o);
                let six = a.dot(&b.cross(&c));
                v += six;
                m += (a + b + c) * six;
            }
            (v, m)
        })
        .collect();
    let (six, moment) = sums.iter().fold((0.0, Vec3::zeros()), |(v, m), (w, n)| (v + w, m + n));
    let shift = moment / (4.0 * six);
    let centre_mm = if shift.iter().all(|x| x.is_finite()) { o + shift } else { o };
    Mass { volume_mm3: six / 6.0, centre_mm }
}

/// Computes volume and centre of mass of the solid bounded by a closed, outward-oriented mesh.
///
/// - `mesh`: counter-clockwise seen from outside; indices in range.
/// - returns: no tolerance; a mesh turned inside out gives a negative volume.
///
/// # Errors
/// [`VolumeError::OpenEdge`] if some directed edge is not matched by its opposite, naming the first one.
///
/// # Example
/// ```
/// # use stagewright::mesh::{measure::enclosed_mass, shapes};
/// let corner = shapes::corner(6.0); // a corner cut off a cube, 6 mm along each axis
/// let mass = enclosed_mass(&corner)?;
/// assert!((mass.volume_mm3 - 36.0).abs() < 1e-12); // 6^3 / 6 mm3
/// assert!((mass.centre_mm.x - 1.5).abs() < 1e-12);
/// # Ok::<(), Box<dyn std::error::Error>>(())
/// ```
pub fn enclosed_mass(mesh: &TriMesh) -> Result<Mass, VolumeError> {
    match first_unmatched_edge(&EdgeTable::build(mesh)) {
        Some((a, b)) => Err(VolumeError::OpenEdge(a, b)),
        None => Ok(signed_mass(mesh)),
    }
}

/// Computes the volume enclosed by a closed mesh, mm3; see [`enclosed_mass`].
///
/// # Errors
/// As [`enclosed_mass`].
pub fn enclosed_volume(mesh: &TriMesh) -> Result<f64, VolumeError> {
    enclosed_mass(mesh).map(|m| m.volume_mm3)
}

/// The first directed edge, in the order of the table, that is used more often than its opposite.
#[must_use]
pub fn first_unmatched_edge(table: &EdgeTable) -> Option<(u32, u32)> {
    table.edges().find_map(|e| {
        let forward = e.uses.iter().filter(|u| u.forward).count();
        let back = e.uses.len() - forward;
        match forward.cmp(&back) {
            _ if e.lo == e.hi => None,
            std::cmp::Ordering::Greater => Some((e.lo, e.hi)),
            std::cmp::Ordering::Less => Some((e.hi, e.lo)),
            std::cmp::Ordering::Equal => None,
        }
    })
}

/// The Euler number: vertices in use, less edges, plus triangles.
#[must_use]
pub fn euler_number(mesh: &TriMesh) -> i64 {
    euler_from(mesh, &EdgeTable::build(mesh))
}

/// [`euler_number`] when the edge table is at hand.
#[must_use]
pub fn euler_from(mesh: &TriMesh, table: &EdgeTable) -> i64 {
    let mut used = vec![false; mesh.positions.len()];
    for &i in mesh.triangles.iter().flatten() {
        if let Some(u) = used.get_mut(i as usize) {
            *u = true;
        }
    }
    let count = |n: usize| i64::try_from(n).unwrap_or(i64::MAX);
    count(used.iter().filter(|&&u| u).count()) - count(table.edges().count()) + count(mesh.triangles.len())
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::mesh::shapes;
    use std::f64::consts::{PI, TAU};

    /// Area of the regular n-gon at radius r.
    fn polygon(r: f64, n: u32) -> f64 {
        0.5 * f64::from(n) * r * r * (TAU / f64::from(n)).sin()
    }

    #[test]
    fn planted_volumes_and_areas() {
        let close = |a: f64, b: f64| assert!((a - b).abs() <= 1e-12 * b.abs().max(1.0), "{a} is not {b}");
        let c = shapes::corner(6.0);
        close(enclosed_volume(&c).unwrap(), 36.0);
        close(area(&c), 18.0 * (3.0 + 3.0_f64.sqrt()));
        let b = shapes::moved(
            &shapes::cuboid(Vec3::zeros(), Vec3::new(2.0, 3.0, 4.0)),
            Vec3::new(100.0, -50.0, 7.0),
        );
        let m = enclosed_mass(&b).unwrap();
        close(m.volume_mm3, 24.0);
        close(area(&b), 52.0);
        assert!((m.centre_mm - Vec3::new(101.0, -48.5, 9.0)).norm() < 1e-12);
        close(enclosed_volume(&shapes::prism(20.0, 5.0, 128)).unwrap(), 5.0 * polygon(20.0, 128));
        let cone = enclosed_mass(&shapes::cone_on_tip(20.0, 20.0, 64)).unwrap();
        close(cone.volume_mm3, 20.0 * polygon(20.0, 64) / 3.0);
        // A cone's centre of mass lies at a quarter of its height from the lid.
        assert!((cone.centre_mm - Vec3::new(0.0, 0.0, 15.0)).norm() < 1e-12);
        close(area(&shapes::sheet(3.0, 5.0, 9)), 15.0);
    }

    #[test]
    fn inside_out_is_negative_and_a_hole_is_named() {
        let s = shapes::icosphere(10.0, 3);
        let v = enclosed_volume(&s).unwrap();
        let w = enclosed_volume(&shapes::flipped(&s)).unwrap();
        assert!((v + w).abs() < 1e-9 && v > 0.0);
        let mut open = s;
        let gone = open.triangles.pop().unwrap();
        open.sides.pop();
        let Err(VolumeError::OpenEdge(a, b)) = enclosed_volume(&open) else {
            panic!("the hole was not seen")
        };
        assert!(gone.contains(&a) && gone.contains(&b));
    }

    #[test]
    fn the_sphere_is_approached_quadratically_from_below() {
        let exact = 4.0 / 3.0 * PI * 1000.0;
        let err = |level| exact - enclosed_volume(&shapes::icosphere(10.0, level)).unwrap();
        let (e3, e4) = (err(3), err(4));
        assert!(e4 > 0.0 && (e3 / e4 - 4.0).abs() < 0.05, "{e3} {e4}");
    }

    #[test]
    fn euler_numbers_of_sphere_torus_shell_and_disc() {
        assert_eq!(euler_number(&shapes::icosphere(1.0, 2)), 2);
        assert_eq!(euler_number(&shapes::torus(30.0, 10.0, 24, 12)), 0);
        assert_eq!(euler_number(&shapes::sphere_shell(3.0, 2.0, 1)), 4);
        assert_eq!(euler_number(&shapes::sheet(1.0, 1.0, 4)), 1);
    }

    #[test]
    fn torus_volume_converges_to_pappus() {
        let exact = 2.0 * PI * PI * 30.0 * 100.0;
        let err = |n| (exact - enclosed_volume(&shapes::torus(30.0, 10.0, n, n)).unwrap()).abs();
        assert!((err(64) / err(128) - 4.0).abs() < 0.1);
    }

    #[test]
    fn sums_do_not_depend_on_the_number_of_threads() {
        let s = shapes::icosphere(10.0, 5);
        let in_pool = |n: usize| {
            let pool = rayon::ThreadPoolBuilder::new().num_threads(n).build().unwrap();
            pool.install(|| (area(&s), signed_mass(&s)))
        };
        assert_eq!(in_pool(1), in_pool(3));
    }
}
