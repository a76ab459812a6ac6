//! Wavefront OBJ: vertices and faces; everything else is counted or passed over.

use super::build::{Welder, checked_point, compacted, next_index};
use super::error::{Place, ReadError, clipped};
use super::format::MeshFormat;
use super::note::{Imported, ReadNote};
use super::parse::{number, words};
use crate::geom::Vec3;

/// Reads OBJ. A face may name vertices of later lines; negative indices count back from the face's own line.
pub(super) fn read(bytes: &[u8]) -> Result<Imported, ReadError> {
    let mut file = ObjFile::default();
    let bytes = bytes.strip_prefix(b"\xef\xbb\xbf").unwrap_or(bytes);
    let mut joined_line = Vec::new();
    for (k, raw) in bytes.split(|&b| b == b'\n').enumerate() {
        let raw = raw.strip_suffix(b"\r").unwrap_or(raw);
        if let Some(part) = raw.strip_suffix(b"\\") {
            joined_line.extend_from_slice(part);
            joined_line.push(b' ');
        } else if joined_line.is_empty() {
            file.line(raw, k + 1)?;
        } else {
            joined_line.extend_from_slice(raw);
            file.line(&joined_line, k + 1)?;
            joined_line.clear();
        }
    }
    if !joined_line.is_empty() {
        file.line(&joined_line, bytes.split(|&b| b == b'\n').count())?;
    }
    file.finish()
}

#[derive(Default)]
struct ObjFile {
    vertices: Vec<Vec3>,
    triangles: Vec<[u32; 3]>,
    corners: Vec<u32>,
    /// The largest index named before its vertex came, with its line.
    ahead: Option<(u32, usize)>,
    polygons: usize,
    not_faces: usize,
    objects: usize,
    object_has_faces: bool,
}

impl ObjFile {
    fn line(&mut self, line: &[u8], number: usize) -> Result<(), ReadError> {
        let mut rest = words(line);
        match rest.next().unwrap_or_default() {
            b"v" => self.vertex(rest, number),
            b"f" | b"fo" => self.face(rest, number),
            b"o" => {
                self.object_has_faces = false;
                Ok(())
            }
            b"l" | b"p" | b"curv" | b"curv2" | b"surf" => {
                self.not_faces += 1;
                Ok(())
            }
            _ => Ok(()),
        }
    }

    /// x y z; a weight or a colour after them is not used.
    fn vertex<'w>(
        &mut self,
        mut words: impl Iterator<Item = &'w [u8]>,
        line: usize,
    ) -> Result<(), ReadError> {
        let place = || Place::Line(line);
        let mut next = || number::<f64>(words.next(), "a vertex needs three numbers", place);
        let p = Vec3::new(next()?, next()?, next()?);
        next_index(self.vertices.len(), "vertices", place)?;
        self.vertices.push(checked_point(p, place)?);
        Ok(())
    }

    fn face<'w>(&mut self, words: impl Iterator<Item = &'w [u8]>, line: usize) -> Result<(), ReadError> {
        self.corners.clear();
        for word in words.take_while(|w| !w.starts_with(b"#")) {
            let index = self.index(word, line)?;
            self.corners.push(index);
        }
        let [first, rest @ ..] = self.corners.as_slice() else { return Err(short_face(0, line)) };
        if rest.len() < 2 {
            return Err(short_face(self.corners.len(), line));
        }
        for pair in rest.windows(2) {
            next_index(self.triangles.len(), "triangles", || Place::Line(line))?;
            self.triangles.push([*first, pair[0], pair[1]]);
        }
        self.polygons += usize::from(rest.len() > 2);
        if !self.object_has_faces {
            self.object_has_faces = true;
            self.objects += 1;
        }
        Ok(())
    }

    /// The vertex named by `12`, `12/3`, `12//4`, `-1/-1`, from 0.
    fn index(&mut self, word: &[u8], line: usize) -> Result<u32, ReadError> {
        let place = || Place::Line(line);
        let vertex = word.split(|&b| b == b'/').next();
        let index: i64 = number(vertex, "a corner of a face begins with the number of a vertex", place)?;
        let count = self.vertices.len();
        let from_zero = if index < 0 { i64::try_from(count).unwrap_or(i64::MAX) + index } else { index - 1 };
        match u32::try_from(from_zero) {
            Ok(i) if (i as usize) < count => Ok(i),
            Ok(i) if index > 0 => {
                if self.ahead.is_none_or(|(far, _)| i > far) {
                    self.ahead = Some((i, line));
                }
                Ok(i)
            }
            _ => Err(ReadError::Index { place: place(), index, count, first: 1 }),
        }
    }

    fn finish(self) -> Result<Imported, ReadError> {
        let count = self.vertices.len();
        if let Some((far, line)) = self.ahead.filter(|&(far, _)| far as usize >= count) {
            return Err(ReadError::Index {
                place: Place::Line(line),
                index: i64::from(far) + 1,
                count,
                first: 1,
            });
        }
        let mut welder = Welder::default();
        let mut renumbered = Vec::with_capacity(count);
        for p in self.vertices {
            renumbered.push(welder.index(p, || Place::Line(0))?);
        }
        let joined = count - welder.positions.len();
        let triangles = self.triangles.into_iter().map(|t| t.map(|i| renumbered[i as usize])).collect();
        let mut notes = vec![ReadNote::UnitAssumed(MeshFormat::Obj)];
        for (n, note) in [
            (self.polygons, ReadNote::Polygons as fn(usize) -> ReadNote),
            (joined, ReadNote::Joined),
            (self.not_faces, ReadNote::NotFaces),
        ] {
            if n > 0 {
                notes.push(note(n));
            }
        }
        let mesh = compacted(welder.positions, triangles);
        Ok(Imported { mesh, format: MeshFormat::Obj, bodies: self.objects.max(1), notes })
    }
}

fn short_face(corners: usize, line: usize) -> ReadError {
    ReadError::Syntax {
        place: Place::Line(line),
        problem: "a face needs three corners or more",
        found: clipped(format!("{corners} corners").as_bytes()),
    }
}
