//! Why a mesh could not be read.

use super::format::MeshFormat;
use super::{COUNT_MAX, UNPACKED_MAX};
use crate::export::COORDINATE_MAX_MM;
use std::fmt;

/// Where in a file reading stopped.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Place {
    /// A line of a text file, from 1.
    Line(usize),
    /// A facet of a binary STL file, from 1.
    Facet(usize),
    /// A byte of an unpacked part of a container.
    Byte {
        /// Name of the part.
        part: String,
        /// Bytes from its beginning.
        byte: u64,
    },
}

impl fmt::Display for Place {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Line(n) => write!(f, "line {n}"),
            Self::Facet(n) => write!(f, "facet {n}"),
            Self::Byte { part, byte } => write!(f, "{part}, byte {byte}"),
        }
    }
}

/// Everything [`super::read_mesh`] and [`super::detect_format`] can return.
#[derive(Debug, thiserror::Error)]
pub enum ReadError {
    /// No byte at all.
    #[error("the file is empty")]
    Empty,
    /// Neither the bytes nor the name tell the format.
    #[error(
        "the file is neither STL, OBJ nor 3MF by its content, and its extension {extension:?} does not tell"
    )]
    UnknownFormat {
        /// The extension, cut to 20 characters.
        extension: String,
    },
    /// A file without a triangle.
    #[error("the {} file holds no triangle", format.name())]
    NoTriangles {
        /// The format it was read as.
        format: MeshFormat,
    },
    /// A 3MF file whose shapes are all in extensions that are not read.
    #[error(
        "the 3MF file holds no triangle mesh; its shape is in the extensions {names}, which are not read"
    )]
    OnlyExtensions {
        /// Their prefixes in the file.
        names: String,
    },
    /// More than can be handled.
    #[error("{place}: the file holds more than {limit} {what}, the most that is read", limit = COUNT_MAX)]
    TooMany {
        /// `vertices`, `triangles` or `placed copies of objects`.
        what: &'static str,
        /// Where the limit was passed.
        place: Place,
    },
    /// A binary STL file shorter than its own count of facets.
    #[error(
        "the binary STL file has {found} bytes but its header counts {facets} facets, which need {needed}: \
         it was cut off, or it is not STL"
    )]
    Truncated {
        /// Facets by the header.
        facets: u32,
        /// Bytes needed for them.
        needed: u64,
        /// Bytes there are.
        found: u64,
    },
    /// A text that does not follow its format.
    #[error("{place}: {problem}, found {found:?}")]
    Syntax {
        /// Where.
        place: Place,
        /// What was expected or is wrong.
        problem: &'static str,
        /// The offending text, cut to 40 characters.
        found: String,
    },
    /// A coordinate that is not a number, infinite or absurdly large.
    #[error("{place}: the coordinate {value} mm is not within +-{limit} mm", limit = COORDINATE_MAX_MM)]
    Coordinate {
        /// Where.
        place: Place,
        /// The value, mm.
        value: f64,
    },
    /// A face that names a vertex the file does not have.
    #[error("{place}: vertex {index} is named, but there are {count} vertices (counted from {first})")]
    Index {
        /// Where.
        place: Place,
        /// The index as written.
        index: i64,
        /// Vertices there are.
        count: usize,
        /// Index of the first vertex: 0 in 3MF, 1 in OBJ.
        first: u8,
    },
    /// Not a container, a damaged one, or one packed in a way that is not understood.
    #[error("the 3MF container cannot be read: {0}")]
    Container(#[from] zip::result::ZipError),
    /// A part of the container that should be there is missing.
    #[error("the 3MF container has no part {part:?}")]
    MissingPart {
        /// Its name.
        part: String,
    },
    /// The unpacked parts are too large.
    #[error("{part}: the 3MF container unpacks to more than {limit} bytes, the most that is read", limit = UNPACKED_MAX)]
    Unpacked {
        /// The part being read.
        part: String,
    },
    /// XML that is not well formed, or bytes that do not unpack.
    #[error("{place}: {source}")]
    Xml {
        /// Where.
        place: Place,
        /// What the parser said.
        source: quick_xml::Error,
    },
}

/// The first 40 characters of a piece of a file, for messages.
pub(super) fn clipped(text: &[u8]) -> String {
    String::from_utf8_lossy(&text[..text.len().min(160)]).chars().take(40).collect()
}
