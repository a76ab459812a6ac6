//! Writers and readers of mesh files, on streams; they open no file themselves.
//!
//! | format | written by | read by |
//! | --- | --- | --- |
//! | STL, binary | [`write_stl`] | [`read_mesh`] (binary and ASCII) |
//! | OBJ with its material file | [`write_obj`], [`write_mtl`] | [`read_mesh`] |
//! | 3MF, core specification 1.4.0 | [`write_3mf`] | [`read_mesh`] |
//!
//! Every writer checks the whole mesh before its first byte ([`WriteError`] says what is wrong and where),
//! and gives the same bytes for the same input on every machine.

mod colours;
mod obj;
mod printed;
mod read;
mod stl;
mod three_mf;
mod xml;

pub use colours::SideColours;
pub use obj::{ObjInfo, write_mtl, write_obj};
pub use printed::{COORDINATE_MAX_MM, WriteError};
pub use read::{
    COUNT_MAX, Imported, MeshFormat, Place, ReadError, ReadNote, UNPACKED_MAX, detect_format, read_mesh,
};
pub use stl::write_stl;
pub use three_mf::{ThreeMf, ThreeMfObject, write_3mf};
