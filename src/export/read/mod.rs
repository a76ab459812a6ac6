//! Mesh files from elsewhere: STL (binary and ASCII), OBJ and 3MF, whatever state they are in.
//!
//! The readers are written by hand rather than on `stl_io` and `tobj`, which serve as independent readers in
//! the tests instead: `stl_io` takes a binary file that begins `solid ` for text and drops every solid after
//! the first; `tobj` keeps 32 bits, joins nothing across groups, gives no line numbers, and overflows on
//! hostile texture indices. No input makes these readers panic; memory is bounded by the limits below.

mod bounded;
mod build;
mod error;
mod format;
mod model;
mod note;
mod obj;
mod package;
mod parse;
mod stl;
mod three_mf;

pub use error::{Place, ReadError};
pub use format::{MeshFormat, detect_format};
pub use note::{Imported, ReadNote};

/// Most vertices and most triangles a file may hold, each; 50 million triangles are a 2.5 GB STL file.
pub const COUNT_MAX: usize = 50_000_000;

/// Most bytes the parts of a 3MF file may unpack to, all together (4 GiB).
pub const UNPACKED_MAX: u64 = 1 << 32;

/// Reads a mesh, mm; every triangle gets [`crate::mesh::Side::Fixture`].
///
/// - STL: facets of every solid of the file; corners with equal coordinates become one vertex.
/// - OBJ: all objects and groups together; faces with more than three corners are cut into fans; vertices with
///   equal coordinates become one, as programs that write OBJ split them for texture and normals.
/// - 3MF: the objects of the build section with their components and transforms, converted to mm; vertices
///   stay apart as the file has them, since the specification judges a mesh by index. Parts named by the
///   production extension are followed.
///
/// Vertices no triangle uses are dropped; triangles are kept as they are, degenerate ones too, so that checks
/// can tell of them. `format` is best found with [`detect_format`].
///
/// # Errors
/// [`ReadError`], with the line, the facet or the byte where reading stopped.
///
/// # Limits
/// [`COUNT_MAX`] vertices and triangles, [`UNPACKED_MAX`] bytes unpacked, coordinates up to
/// [`super::COORDINATE_MAX_MM`].
pub fn read_mesh(bytes: &[u8], format: MeshFormat) -> Result<Imported, ReadError> {
    if bytes.is_empty() {
        return Err(ReadError::Empty);
    }
    let imported = match format {
        MeshFormat::Stl => stl::read(bytes)?,
        MeshFormat::Obj => obj::read(bytes)?,
        MeshFormat::ThreeMf => three_mf::read(bytes)?,
    };
    if imported.mesh.triangles.is_empty() {
        if let Some(ReadNote::Extensions(names)) = imported.notes.last() {
            return Err(ReadError::OnlyExtensions { names: names.clone() });
        }
        return Err(ReadError::NoTriangles { format });
    }
    Ok(imported)
}
