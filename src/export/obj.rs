//! Wavefront OBJ and its material file, written through `obj-exporter`.
//!
//! `obj-exporter` writes no comment, `mtllib` or `usemtl` line and wants the whole file in memory, about 240
//! bytes a triangle. [`LineAdapter`] adds the missing lines; the triangles are handed over in chunks (see
//! [`write_obj`]), so memory is 24 bytes a vertex whatever the number of triangles.

use super::colours::SideColours;
use super::printed::{Rounding, WriteError, printed_positions};
use crate::mesh::{Side, TriMesh};
use obj_exporter::{Geometry, ObjSet, Object, Primitive, Shape, Vertex};
use std::io::{self, BufWriter, Write};

/// Triangles handed to `obj-exporter` at a time: about 4 MB of shapes.
const CHUNK: usize = 16_384;

/// What an OBJ file says besides the mesh.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct ObjInfo {
    /// Name of the object; blanks, control characters, `#` and `\` become `_`.
    pub object: String,
    /// File name of the material file, relative to the OBJ file; `None` leaves colours out.
    pub material_file: Option<String>,
    /// Comment lines for the top of the file; control characters become blanks.
    pub comments: Vec<String>,
}

/// Writes `mesh` as OBJ, coordinates in mm with six decimals (1 nm), counter-clockwise triangles.
///
/// Groups `side-a`, `side-b`, `fixture` (those that occur, in this order) hold the triangles in the order of
/// the mesh; with a material file each is followed by `usemtl` with the same name. Vertices keep their order.
///
/// # Errors
/// [`WriteError`]: the mesh cannot be represented, the material file name would break its line, or the
/// stream failed. Nothing is written in the first two cases.
///
/// # Limits
/// OBJ has no unit; a comment says that it is millimetres.
pub fn write_obj<W: Write>(mesh: &TriMesh, info: &ObjInfo, w: W) -> Result<(), WriteError> {
    let positions = printed_positions(mesh, Rounding::Micro, "OBJ")?;
    if let Some(name) = &info.material_file {
        check_material_file(name)?;
    }
    write_lines(mesh, &positions, info, w).map_err(|source| WriteError::Stream { format: "OBJ", source })
}

/// Writes the material file for the groups of [`write_obj`]: one material a side, diffuse colour only.
///
/// `Kd` is the sRGB value over 255, as programs that show OBJ files commonly take it (common practice, the
/// format names no colour space).
///
/// # Errors
/// [`WriteError::Stream`] when the stream failed.
pub fn write_mtl<W: Write>(colours: &SideColours, mut w: W) -> Result<(), WriteError> {
    let mut lines = || -> io::Result<()> {
        writeln!(w, "# colours of the two sides of the skin and of fixtures")?;
        for side in Side::ALL {
            let [r, g, b] = colours.of(side).map(|c| f64::from(c) / 255.0);
            writeln!(w, "newmtl {}\nKd {r:.4} {g:.4} {b:.4}\nd 1.0\nillum 1", side.name())?;
        }
        w.flush()
    };
    lines().map_err(|source| WriteError::Stream { format: "MTL", source })
}

fn check_material_file(name: &str) -> Result<(), WriteError> {
    let breaks = |c: char| c.is_whitespace() || c.is_control() || matches!(c, '/' | '\\' | '#');
    if name.is_empty() || name.chars().any(breaks) {
        return Err(WriteError::MaterialFileName { name: name.to_owned() });
    }
    Ok(())
}

/// The object name as one word.
fn one_word(name: &str) -> String {
    let word: String = name
        .chars()
        .map(|c| if c.is_whitespace() || c.is_control() || matches!(c, '#' | '\\') { '_' } else { c })
        .collect();
    if word.is_empty() { "solid".to_owned() } else { word }
}

fn write_lines<W: Write>(mesh: &TriMesh, positions: &[[f32; 3]], info: &ObjInfo, w: W) -> io::Result<()> {
    let mut out = BufWriter::with_capacity(1 << 16, w);
    for comment in &info.comments {
        let plain: String = comment.chars().map(|c| if c.is_control() { ' ' } else { c }).collect();
        writeln!(out, "# {}", plain.trim_end_matches('\\'))?;
    }
    writeln!(out, "# units: millimetre")?;
    if let Some(name) = &info.material_file {
        writeln!(out, "mtllib {name}")?;
    }
    let mut adapter = LineAdapter::new(&mut out, info.material_file.is_some());
    let name = one_word(&info.object);
    let vertices = positions.iter().map(|p| vertex(*p)).collect();
    export(&mut adapter, &name, vertices, Vec::new())?;
    for side in Side::ALL {
        let of_side = mesh.triangles.iter().zip(&mesh.sides).filter(|&(_, s)| *s == side).map(|(t, _)| *t);
        let mut shapes = Vec::with_capacity(CHUNK);
        for t in of_side {
            shapes.push(shape(t, side));
            if shapes.len() == CHUNK {
                export(&mut adapter, &name, Vec::new(), std::mem::take(&mut shapes))?;
            }
        }
        export(&mut adapter, &name, Vec::new(), shapes)?;
    }
    adapter.flush()?;
    out.flush()
}

/// One call of `obj-exporter`. Each call counts vertices from 1 again, so a later call that brings no
/// vertices of its own may name those of the first call by their place in it.
fn export<W: Write>(
    adapter: &mut LineAdapter<W>,
    name: &str,
    vertices: Vec<Vertex>,
    shapes: Vec<Shape>,
) -> io::Result<()> {
    let object = Object {
        name: name.to_owned(),
        vertices,
        tex_vertices: Vec::new(),
        normals: Vec::new(),
        geometry: vec![Geometry { material_name: None, shapes }],
    };
    obj_exporter::export(&ObjSet { material_library: None, objects: vec![object] }, adapter)
}

fn shape(t: [u32; 3], side: Side) -> Shape {
    let [a, b, c] = t.map(|i| (i as usize, None, None));
    Shape {
        primitive: Primitive::Triangle(a, b, c),
        groups: vec![side.name().to_owned()],
        smoothing_groups: Vec::new(),
    }
}

/// A vertex that never prints as `-0.000000`: what six decimals round to zero is zero.
fn vertex(p: [f32; 3]) -> Vertex {
    let [x, y, z] = p.map(|c| if f64::from(c).abs() <= 0.5e-6 { 0.0 } else { f64::from(c) });
    Vertex { x, y, z }
}

/// Passes lines on, dropping repeated `o` and `g` lines and following each `g NAME` by `usemtl NAME`.
struct LineAdapter<W: Write> {
    out: W,
    materials: bool,
    line: Vec<u8>,
    last_object: Vec<u8>,
    last_group: Vec<u8>,
}

impl<W: Write> LineAdapter<W> {
    fn new(out: W, materials: bool) -> Self {
        Self { out, materials, line: Vec::new(), last_object: Vec::new(), last_group: Vec::new() }
    }

    /// Handles the complete line in `self.line`, its line feed included.
    fn pass(&mut self) -> io::Result<()> {
        let line = std::mem::take(&mut self.line);
        if line.starts_with(b"o ") {
            if self.last_object != line {
                self.out.write_all(&line)?;
                self.last_object = line;
            }
        } else if line.starts_with(b"g ") {
            if self.last_group != line {
                self.out.write_all(&line)?;
                if self.materials {
                    self.out.write_all(b"usemtl ")?;
                    self.out.write_all(&line[2..])?;
                }
                self.last_group = line;
            }
        } else {
            self.out.write_all(&line)?;
            self.line = line; // keep the allocation
            self.line.clear();
        }
        Ok(())
    }
}

impl<W: Write> Write for LineAdapter<W> {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        for piece in bytes.split_inclusive(|&b| b == b'\n') {
            self.line.extend_from_slice(piece);
            if piece.ends_with(b"\n") {
                self.pass()?;
            }
        }
        Ok(bytes.len())
    }

    fn flush(&mut self) -> io::Result<()> {
        if !self.line.is_empty() {
            self.pass()?;
        }
        self.out.flush()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_adapter_names_a_material_for_every_group_once() {
        let mut a = LineAdapter::new(Vec::new(), true);
        for piece in ["o x\nv 1", " 2 3\no x\ng si", "de-a\nf 1 2 3\n", "o x\ng side-a\nf 1 3 2\ng side-b\nf"]
        {
            a.write_all(piece.as_bytes()).unwrap();
        }
        a.flush().unwrap();
        let expected = "o x\nv 1 2 3\ng side-a\nusemtl side-a\nf 1 2 3\nf 1 3 2\ng side-b\nusemtl side-b\nf";
        assert_eq!(String::from_utf8(a.out).unwrap(), expected);
    }

    #[test]
    fn coordinates_next_to_zero_never_print_a_minus_zero() {
        for c in [-0.0, -1e-9, -4.9e-7, -5.0e-7, -5.05e-7, 1e-30] {
            let v = vertex([c, c, c]);
            assert_ne!(format!("{:.6}", v.x), "-0.000000", "{c}");
        }
        assert_eq!(format!("{:.6}", vertex([-6e-7, 0.0, 0.0]).x), "-0.000001");
    }

    #[test]
    fn names_that_would_break_a_line_are_refused_or_made_one_word() {
        assert_eq!(one_word("stage 2\n#1\\"), "stage_2__1_");
        assert_eq!(one_word(""), "solid");
        for bad in ["", "a b.mtl", "../a.mtl", "a\n.mtl", "a#.mtl"] {
            assert!(matches!(check_material_file(bad), Err(WriteError::MaterialFileName { .. })), "{bad:?}");
        }
        assert!(check_material_file("01-tau-0.410.mtl").is_ok());
    }
}
