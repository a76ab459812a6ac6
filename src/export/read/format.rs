//! Which format a file is in, by what it holds first and by its name second.

use super::error::ReadError;
use super::parse::first_word;
use super::stl::{binary_size, looks_like_text};

/// A format that can be read.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum MeshFormat {
    /// STL, binary or ASCII.
    Stl,
    /// Wavefront OBJ.
    Obj,
    /// 3MF.
    ThreeMf,
}

impl MeshFormat {
    /// What people call it: `STL`, `OBJ`, `3MF`.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::Stl => "STL",
            Self::Obj => "OBJ",
            Self::ThreeMf => "3MF",
        }
    }
}

/// Lines looked at to recognise an OBJ file, which has no mark of its own.
const OBJ_LINES: usize = 200;

/// Finds the format of a file from its bytes and, when they do not tell, its extension (without the dot).
///
/// The bytes win over the extension: a container is 3MF, a size of exactly 84 + 50 n bytes or a text that
/// begins `solid` is STL, a text whose first lines begin with `v`, `f`, `o`, `g` and the like is OBJ.
///
/// # Errors
/// [`ReadError::Empty`], or [`ReadError::UnknownFormat`] when neither tells.
pub fn detect_format(bytes: &[u8], extension: Option<&str>) -> Result<MeshFormat, ReadError> {
    if bytes.is_empty() {
        return Err(ReadError::Empty);
    }
    if bytes.starts_with(b"PK\x03\x04") || bytes.starts_with(b"PK\x05\x06") {
        return Ok(MeshFormat::ThreeMf);
    }
    if binary_size(bytes) == Some(bytes.len() as u64) || looks_like_text(bytes) {
        return Ok(MeshFormat::Stl);
    }
    if looks_like_obj(bytes) {
        return Ok(MeshFormat::Obj);
    }
    let extension = extension.unwrap_or_default();
    match extension.to_ascii_lowercase().as_str() {
        "stl" => Ok(MeshFormat::Stl),
        "obj" => Ok(MeshFormat::Obj),
        "3mf" => Ok(MeshFormat::ThreeMf),
        _ => Err(ReadError::UnknownFormat { extension: extension.chars().take(20).collect() }),
    }
}

fn looks_like_obj(bytes: &[u8]) -> bool {
    let head = &bytes[..bytes.len().min(1 << 14)];
    if head.contains(&0) {
        return false;
    }
    let known =
        |word: &[u8]| matches!(word, b"v" | b"vn" | b"vt" | b"f" | b"o" | b"g" | b"mtllib" | b"usemtl");
    head.split(|&b| b == b'\n').take(OBJ_LINES).any(|line| known(first_word(line)))
}
