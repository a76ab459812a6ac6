//! The mesh as a file will carry it: every coordinate rounded, and refused when rounding would break it.

use crate::geom::Vec3;
use crate::mesh::TriMesh;
use rustc_hash::FxHashMap;

/// Largest coordinate a file may hold, mm (one kilometre). The step of a 32-bit number there is 0.06 mm,
/// so anything farther out is a fault upstream, not a print.
pub const COORDINATE_MAX_MM: f64 = 1.0e6;

/// Most vertices or triangles a file may hold: below 2^31, as 3MF core 1.4.0 section 4.1.3 asks.
const COUNT_MAX: usize = 0x7fff_ffff;

/// Why a mesh file was not written: everything the writers of this room can return.
#[derive(Debug, thiserror::Error)]
pub enum WriteError {
    /// The mesh has no triangle, or fewer than the format can hold.
    #[error("the mesh has {found} triangles; a {format} file needs at least {needed}")]
    TooFewTriangles {
        /// Triangles in the mesh.
        found: usize,
        /// Fewest triangles the format takes.
        needed: usize,
        /// Name of the format.
        format: &'static str,
    },
    /// More vertices or triangles than a file can count.
    #[error("the mesh has {found} {what}; a file holds at most {limit}: use a larger tolerance")]
    TooMany {
        /// `vertices` or `triangles`.
        what: &'static str,
        /// How many there are.
        found: usize,
        /// How many a file can hold.
        limit: usize,
    },
    /// `sides` has not one entry a triangle.
    #[error("the mesh has {triangles} triangles but {sides} side marks; each triangle needs one")]
    SideCount {
        /// Triangles in the mesh.
        triangles: usize,
        /// Entries of `sides`.
        sides: usize,
    },
    /// A corner names a vertex that does not exist.
    #[error("triangle {triangle} names vertex {index}, but the mesh has {vertices} vertices")]
    IndexOutOfRange {
        /// The triangle, from 0.
        triangle: usize,
        /// The index it names.
        index: u32,
        /// Vertices in the mesh.
        vertices: usize,
    },
    /// A triangle names the same vertex twice.
    #[error("triangle {triangle} names vertex {index} twice, so it has no area")]
    RepeatedCorner {
        /// The triangle, from 0.
        triangle: usize,
        /// The repeated index.
        index: u32,
    },
    /// A coordinate is not a number, infinite or absurdly large.
    #[error("vertex {vertex} has {axis} = {value} mm; files hold finite coordinates up to {limit} mm", limit = COORDINATE_MAX_MM)]
    Coordinate {
        /// The vertex, from 0.
        vertex: usize,
        /// `x`, `y` or `z`.
        axis: char,
        /// The value, mm.
        value: f64,
    },
    /// Two vertices become one point when written, so a reader would join what the mesh keeps apart.
    #[error(
        "vertices {first} and {second} fall on one point ({x}, {y}, {z}) mm when rounded for a {format} file; \
         merge the vertices of the mesh at that precision before writing",
        x = place.x, y = place.y, z = place.z
    )]
    Coincident {
        /// The earlier vertex, from 0.
        first: usize,
        /// The later vertex.
        second: usize,
        /// Where, mm.
        place: Vec3,
        /// Name of the format.
        format: &'static str,
    },
    /// A file name that would break the line it stands on.
    #[error("the material file name {name:?} holds a blank, a control character or a path separator")]
    MaterialFileName {
        /// The name.
        name: String,
    },
    /// A 3MF file without an object.
    #[error("a 3MF file needs at least one object")]
    NoObject,
    /// A metadata name that is empty, given twice, or not a plain word.
    #[error(
        "metadata name {name:?} is given twice, or is not a word of letters, digits, '-' and '_' that begins with a letter"
    )]
    MetadataName {
        /// The name.
        name: String,
    },
    /// A placement of a 3MF object that is not finite or flattens or mirrors it.
    #[error(
        "the placement of object {object:?} has determinant {determinant}; it must be finite and above 0"
    )]
    Placement {
        /// Name of the object.
        object: String,
        /// Determinant of the 3 x 3 part.
        determinant: f64,
    },
    /// The stream refused the bytes (disk full, closed pipe).
    #[error("could not write the {format} data: {source}")]
    Stream {
        /// Name of the format.
        format: &'static str,
        /// What the system said.
        source: std::io::Error,
    },
}

/// How a format rounds coordinates.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Rounding {
    /// To the nearest 32-bit number (STL, 3MF).
    Single,
    /// To 32 bits, then to six decimals (OBJ): 1 nm.
    Micro,
}

/// Checks everything that every format needs and returns the coordinates as the file will hold them, mm.
///
/// No coordinate is `-0.0`: readers that join points by their bits would take it for another point than `0.0`.
///
/// # Errors
/// Every [`WriteError`] but those about names, placements and streams.
pub(super) fn printed_positions(
    mesh: &TriMesh,
    rounding: Rounding,
    format: &'static str,
) -> Result<Vec<[f32; 3]>, WriteError> {
    check_counts(mesh, format)?;
    check_triangles(mesh)?;
    let mut printed = Vec::with_capacity(mesh.positions.len());
    let mut seen = FxHashMap::default();
    seen.reserve(mesh.positions.len());
    for (vertex, p) in mesh.positions.iter().enumerate() {
        for (axis, &value) in ['x', 'y', 'z'].into_iter().zip(p.iter()) {
            if value.is_nan() || value.abs() > COORDINATE_MAX_MM {
                return Err(WriteError::Coordinate { vertex, axis, value });
            }
        }
        let q = [single(p.x), single(p.y), single(p.z)];
        let key = match rounding {
            Rounding::Single => q.map(|c| i64::from(c.to_bits())),
            Rounding::Micro => q.map(micro),
        };
        if let Some(first) = seen.insert(key, vertex) {
            return Err(WriteError::Coincident { first, second: vertex, place: *p, format });
        }
        printed.push(q);
    }
    Ok(printed)
}

/// Rounds to 32 bits; minus zero becomes zero.
#[expect(
    clippy::cast_possible_truncation,
    reason = "rounding to the 32 bits of the file is what this is for"
)]
pub(super) fn single(c: f64) -> f32 {
    c as f32 + 0.0
}

/// The coordinate in units of 1e-6 mm.
#[expect(
    clippy::cast_possible_truncation,
    reason = "coordinates are at most 1e6 mm, so the result is at most 1e12"
)]
fn micro(c: f32) -> i64 {
    (f64::from(c) * 1e6).round() as i64
}

fn check_counts(mesh: &TriMesh, format: &'static str) -> Result<(), WriteError> {
    // A closed surface has at least four triangles (3MF core 1.4.0, 4.1.3); one is enough for the others.
    let needed = if format == "3MF" { 4 } else { 1 };
    let found = mesh.triangles.len();
    if found < needed {
        return Err(WriteError::TooFewTriangles { found, needed, format });
    }
    for (what, found) in [("triangles", found), ("vertices", mesh.positions.len())] {
        if found > COUNT_MAX {
            return Err(WriteError::TooMany { what, found, limit: COUNT_MAX });
        }
    }
    if mesh.sides.len() != found {
        return Err(WriteError::SideCount { triangles: found, sides: mesh.sides.len() });
    }
    Ok(())
}

fn check_triangles(mesh: &TriMesh) -> Result<(), WriteError> {
    let vertices = mesh.positions.len();
    for (triangle, corners) in mesh.triangles.iter().enumerate() {
        if let Some(&index) = corners.iter().find(|&&i| i as usize >= vertices) {
            return Err(WriteError::IndexOutOfRange { triangle, index, vertices });
        }
        let [a, b, c] = *corners;
        if a == b || a == c || b == c {
            return Err(WriteError::RepeatedCorner { triangle, index: if b == c { b } else { a } });
        }
    }
    Ok(())
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::mesh::Side;

    fn tetrahedron() -> TriMesh {
        TriMesh {
            positions: vec![Vec3::zeros(), 6.0 * Vec3::x(), 6.0 * Vec3::y(), 6.0 * Vec3::z()],
            triangles: vec![[0, 2, 1], [0, 1, 3], [0, 3, 2], [1, 2, 3]],
            sides: vec![Side::A; 4],
        }
    }

    #[test]
    fn minus_zero_is_written_as_zero() {
        let mut m = tetrahedron();
        m.positions[0] = Vec3::new(-0.0, -0.0, -1e-60);
        let q = printed_positions(&m, Rounding::Single, "STL").unwrap();
        assert_eq!(q[0].map(f32::to_bits), [0; 3]);
    }

    #[test]
    fn points_that_meet_only_in_the_file_are_refused() {
        let mut m = tetrahedron();
        m.positions.push(Vec3::new(6.0 + 1e-9, 0.0, 0.0)); // the 32-bit step at 6 mm is 4.8e-7 mm
        assert!(matches!(
            printed_positions(&m, Rounding::Single, "STL"),
            Err(WriteError::Coincident { first: 1, second: 4, .. })
        ));
        m.positions[4] = Vec3::new(1e-7, 0.0, 0.0); // apart as 32-bit numbers, one point at six decimals
        assert!(printed_positions(&m, Rounding::Single, "STL").is_ok());
        assert!(matches!(
            printed_positions(&m, Rounding::Micro, "OBJ"),
            Err(WriteError::Coincident { first: 0, second: 4, .. })
        ));
    }

    #[test]
    fn what_no_file_can_hold_is_refused_with_its_place() {
        let bad = |change: fn(&mut TriMesh)| {
            let mut m = tetrahedron();
            change(&mut m);
            printed_positions(&m, Rounding::Single, "3MF").unwrap_err().to_string()
        };
        assert!(bad(|m| m.positions[2].y = f64::NAN).contains("vertex 2 has y = NaN mm"));
        assert!(bad(|m| m.positions[2].y = f64::INFINITY).contains("vertex 2 has y = inf mm"));
        assert!(bad(|m| m.positions[3].z = -2e6).contains("vertex 3 has z = -2000000 mm"));
        assert!(bad(|m| m.triangles[1][2] = 9).contains("triangle 1 names vertex 9"));
        assert!(bad(|m| m.triangles[1] = [2, 1, 2]).contains("triangle 1 names vertex 2 twice"));
        assert!(bad(|m| m.sides.truncate(3)).contains("4 triangles but 3 side marks"));
        assert!(
            bad(|m| {
                m.triangles.pop();
                m.sides.pop();
            })
            .contains("3 triangles; a 3MF file needs at least 4")
        );
    }
}
