//! STL, binary and ASCII.

use super::build::{Welder, checked_point, compacted, next_index};
use super::error::{Place, ReadError, clipped};
use super::format::MeshFormat;
use super::note::{Imported, ReadNote};
use super::parse::{first_word, number};
use crate::geom::Vec3;

/// Bytes before the first facet of a binary file: header and count.
const HEAD: usize = 84;
/// Bytes of a facet: 12 numbers of 32 bits and two more bytes.
const FACET: usize = 50;

/// Reads STL: binary when the size fits the count exactly, else ASCII when it begins `solid`, else binary.
pub(super) fn read(bytes: &[u8]) -> Result<Imported, ReadError> {
    if binary_size(bytes) != Some(bytes.len() as u64) && looks_like_text(bytes) {
        return read_text(bytes);
    }
    read_binary(bytes)
}

/// The size a binary STL file with this header must have; `None` when it is too short for a header.
pub(super) fn binary_size(bytes: &[u8]) -> Option<u64> {
    facet_count(bytes).map(|n| HEAD as u64 + FACET as u64 * u64::from(n))
}

/// Whether the file begins with the word `solid` in any case and holds no zero byte near its beginning.
pub(super) fn looks_like_text(bytes: &[u8]) -> bool {
    let bytes = without_mark(bytes);
    let head = &bytes[..bytes.len().min(1024)];
    first_word(head).eq_ignore_ascii_case(b"solid") && !head.contains(&0)
}

fn without_mark(bytes: &[u8]) -> &[u8] {
    bytes.strip_prefix(b"\xef\xbb\xbf").unwrap_or(bytes)
}

fn facet_count(bytes: &[u8]) -> Option<u32> {
    let count = bytes.get(HEAD - 4..HEAD)?;
    Some(u32::from_le_bytes(count.try_into().ok()?))
}

fn read_binary(bytes: &[u8]) -> Result<Imported, ReadError> {
    let found = bytes.len() as u64;
    let (Some(facets), Some(needed)) = (facet_count(bytes), binary_size(bytes)) else {
        return Err(ReadError::Truncated { facets: 0, needed: HEAD as u64, found });
    };
    if found < needed {
        return Err(ReadError::Truncated { facets, needed, found });
    }
    let mut solid = Facets::default();
    let coordinate = |c: &[u8]| f64::from(c.try_into().map_or(f32::NAN, f32::from_le_bytes));
    for (k, facet) in bytes[HEAD..].chunks_exact(FACET).take(facets as usize).enumerate() {
        let place = || Place::Facet(k + 1);
        let mut corners = [Vec3::zeros(); 3];
        for (corner, raw) in corners.iter_mut().zip(facet[12..48].chunks_exact(12)) {
            *corner = Vec3::from_iterator(raw.chunks_exact(4).map(coordinate));
        }
        solid.push(corners, place)?;
    }
    let mut notes = vec![ReadNote::UnitAssumed(MeshFormat::Stl)];
    if found > needed {
        notes.push(ReadNote::TrailingBytes(found - needed));
    }
    Ok(solid.into_imported(1, notes))
}

#[derive(Default)]
struct Facets {
    welder: Welder,
    triangles: Vec<[u32; 3]>,
}

impl Facets {
    fn push(&mut self, corners: [Vec3; 3], place: impl Fn() -> Place) -> Result<(), ReadError> {
        next_index(self.triangles.len(), "triangles", &place)?;
        let mut t = [0; 3];
        for (index, p) in t.iter_mut().zip(corners) {
            *index = self.welder.index(checked_point(p, &place)?, &place)?;
        }
        self.triangles.push(t);
        Ok(())
    }

    fn into_imported(self, bodies: usize, notes: Vec<ReadNote>) -> Imported {
        let mesh = compacted(self.welder.positions, self.triangles);
        Imported { mesh, format: MeshFormat::Stl, bodies: bodies.max(1), notes }
    }
}

/// The words of a text with the number of the line each stands on.
struct Tokens<'a> {
    bytes: &'a [u8],
    line: usize,
}

impl<'a> Tokens<'a> {
    fn next(&mut self) -> Option<&'a [u8]> {
        let blank = self.bytes.iter().position(|b| !b.is_ascii_whitespace()).unwrap_or(self.bytes.len());
        self.line += self.bytes[..blank].iter().filter(|&&b| b == b'\n').count();
        self.bytes = &self.bytes[blank..];
        let end = self.bytes.iter().position(u8::is_ascii_whitespace).unwrap_or(self.bytes.len());
        let (word, rest) = self.bytes.split_at(end);
        self.bytes = rest;
        (!word.is_empty()).then_some(word)
    }

    fn skip_line(&mut self) {
        let end = self.bytes.iter().position(|&b| b == b'\n').unwrap_or(self.bytes.len());
        self.bytes = &self.bytes[end..];
    }

    fn expect(&mut self, keyword: &'static str, problem: &'static str) -> Result<(), ReadError> {
        let word = self.next().unwrap_or_default();
        if word.eq_ignore_ascii_case(keyword.as_bytes()) {
            return Ok(());
        }
        Err(ReadError::Syntax { place: Place::Line(self.line), problem, found: clipped(word) })
    }

    fn coordinate(&mut self) -> Result<f64, ReadError> {
        let word = self.next();
        let line = self.line;
        number(word, "a number is expected here", || Place::Line(line))
    }
}

fn read_text(bytes: &[u8]) -> Result<Imported, ReadError> {
    let mut tokens = Tokens { bytes: without_mark(bytes), line: 1 };
    let mut solid = Facets::default();
    let mut bodies = 0;
    let mut open = false;
    while let Some(word) = tokens.next() {
        if word.eq_ignore_ascii_case(b"facet") && open {
            let corners = read_facet(&mut tokens)?;
            let line = tokens.line;
            solid.push(corners, || Place::Line(line))?;
        } else if word.eq_ignore_ascii_case(b"endsolid") && open {
            open = false;
            tokens.skip_line();
        } else if word.eq_ignore_ascii_case(b"solid") && !open {
            open = true;
            bodies += 1;
            tokens.skip_line();
        } else {
            let problem =
                if open { "`facet` or `endsolid` is expected here" } else { "`solid` is expected here" };
            return Err(ReadError::Syntax { place: Place::Line(tokens.line), problem, found: clipped(word) });
        }
    }
    let mut notes = vec![ReadNote::UnitAssumed(MeshFormat::Stl)];
    if open {
        notes.push(ReadNote::NoEndSolid);
    }
    Ok(solid.into_imported(bodies, notes))
}

/// The corners of a facet, its keyword already read. The normal is not looked at: many files hold a wrong one.
fn read_facet(tokens: &mut Tokens<'_>) -> Result<[Vec3; 3], ReadError> {
    tokens.expect("normal", "`normal` is expected here")?;
    for _ in 0..3 {
        tokens.next();
    }
    tokens.expect("outer", "`outer loop` is expected here")?;
    tokens.expect("loop", "`outer loop` is expected here")?;
    let mut corners = [Vec3::zeros(); 3];
    for corner in &mut corners {
        tokens.expect("vertex", "`vertex` is expected here")?;
        *corner = Vec3::new(tokens.coordinate()?, tokens.coordinate()?, tokens.coordinate()?);
    }
    tokens.expect("endloop", "`endloop` is expected after three vertices")?;
    tokens.expect("endfacet", "`endfacet` is expected here")?;
    Ok(corners)
}
