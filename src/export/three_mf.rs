//! 3MF, core specification 1.4.0, streamed by hand into a `zip` container.
//!
//! By hand because no crate tried wrote a file that the consortium's reference library reads without a
//! warning, and none wrote colours per triangle. Memory: 12 bytes a vertex besides the mesh.

use super::colours::SideColours;
use super::printed::{Rounding, WriteError, printed_positions};
use super::xml::Escaped;
use crate::mesh::{Side, TriMesh};
use std::cell::RefCell;
use std::io::{self, BufWriter, Seek, SeekFrom, Write};
use zip::write::SimpleFileOptions;
use zip::{CompressionMethod, DateTime, System, ZipWriter};

/// Namespace of the core specification.
const CORE: &str = "http://schemas.microsoft.com/3dmanufacturing/core/2015/02";
/// Namespace of metadata names that the core specification does not define.
const OWN: &str = "urn:stagewright:metadata:1";
/// Metadata names the core specification defines (section 3.4.1); all others need a namespace.
const WELL_KNOWN: [&str; 9] = [
    "Title",
    "Designer",
    "Description",
    "Copyright",
    "LicenseTerms",
    "Rating",
    "CreationDate",
    "ModificationDate",
    "Application",
];
/// Resource id of the side colours; objects follow from 2.
const COLOURS_ID: usize = 1;
/// Deflate level: 13.9 MB for a million triangles in 1.3 s; level 9 takes five times longer for 4 % less.
const LEVEL: i64 = 6;

/// One solid of a 3MF file.
#[derive(Clone, Copy, Debug)]
pub struct ThreeMfObject<'a> {
    /// Name shown to people; any text.
    pub name: &'a str,
    /// Part number; any text, left out when empty.
    pub part_number: &'a str,
    /// The solid, mm: closed, oriented outwards (the specification asks for it; not checked here).
    pub mesh: &'a TriMesh,
    /// Rows of the 3 x 4 matrix that puts the solid on the plate, mm; `None` leaves it where it is.
    pub placement: Option<[[f64; 4]; 3]>,
}

/// What a 3MF file holds.
#[derive(Clone, Copy, Debug)]
pub struct ThreeMf<'a> {
    /// Title of the model; any text.
    pub title: &'a str,
    /// Further metadata, in this order: (name, value). Names of the core specification (`Description`,
    /// `Designer`, ...) are written as they are, others in a namespace of their own. `Title` and
    /// `Application` are written by themselves. A date would make equal jobs give different bytes.
    pub metadata: &'a [(String, String)],
    /// The solids, each placed once.
    pub objects: &'a [ThreeMfObject<'a>],
    /// Colours of the sides, written as base materials.
    pub colours: SideColours,
}

/// Writes `model` as a 3MF file: unit millimetre, sides as base materials, one property a triangle.
///
/// Parts in order: `[Content_Types].xml`, `_rels/.rels`, `3D/3dmodel.model`, deflated, with a fixed time
/// stamp (1980-01-01), so equal models give equal bytes. Coordinates are the shortest decimals that read back
/// as the same 32-bit number. Text is escaped ([`WriteError`] refuses only what cannot be).
///
/// # Errors
/// [`WriteError`]: no object, a mesh that cannot be represented, a placement that flattens or mirrors, a
/// metadata name that is no name or given twice; or the stream failed. Nothing is written but in the last case.
///
/// # Source
/// 3MF Consortium, 3D Manufacturing Format Core Specification 1.4.0, 2025.
pub fn write_3mf<W: Write + Seek>(model: &ThreeMf<'_>, w: W) -> Result<(), WriteError> {
    let names = metadata_names(model)?;
    let mut printed = Vec::with_capacity(model.objects.len());
    for object in model.objects {
        check_placement(object)?;
        printed.push(printed_positions(object.mesh, Rounding::Single, "3MF")?);
    }
    if printed.is_empty() {
        return Err(WriteError::NoObject);
    }
    let failure = RefCell::new(None);
    let result =
        write_package(model, &names, &printed, Guarded { inner: w, failure: &failure, at: 0, end: 0 });
    match (failure.into_inner(), result) {
        (Some(source), _) | (None, Err(source)) => Err(WriteError::Stream { format: "3MF", source }),
        (None, Ok(())) => Ok(()),
    }
}

/// Keeps the first failure of a stream and lets everything after it pass into nothing: a container that is
/// dropped half-written tries to finish itself, and would print to the terminal if that failed again.
struct Guarded<'f, W> {
    inner: W,
    failure: &'f RefCell<Option<io::Error>>,
    /// Where the stream stands and ends, or would if it had not failed.
    at: u64,
    end: u64,
}

impl<W> Guarded<'_, W> {
    /// Does `act` unless the stream has failed; then gives `lost`.
    fn attempt<T>(&mut self, lost: T, act: impl FnOnce(&mut W) -> io::Result<T>) -> io::Result<T> {
        let mut failure = self.failure.borrow_mut();
        if failure.is_some() {
            return Ok(lost);
        }
        act(&mut self.inner).map_err(|e| {
            if e.kind() == io::ErrorKind::Interrupted {
                return e;
            }
            let copy = io::Error::new(e.kind(), "the stream failed");
            *failure = Some(e);
            copy
        })
    }
}

impl<W: Write> Write for Guarded<'_, W> {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        let n = self.attempt(bytes.len(), |w| w.write(bytes))?;
        self.at += n as u64;
        self.end = self.end.max(self.at);
        Ok(n)
    }

    fn flush(&mut self) -> io::Result<()> {
        self.attempt((), Write::flush)
    }
}

impl<W: Seek> Seek for Guarded<'_, W> {
    fn seek(&mut self, to: SeekFrom) -> io::Result<u64> {
        let lost = match to {
            SeekFrom::Start(at) => at,
            SeekFrom::Current(by) => self.at.saturating_add_signed(by),
            SeekFrom::End(by) => self.end.saturating_add_signed(by),
        };
        self.at = self.attempt(lost, |w| w.seek(to))?;
        Ok(self.at)
    }
}

/// The metadata names as written, prefixed where needed.
fn metadata_names(model: &ThreeMf<'_>) -> Result<Vec<String>, WriteError> {
    let mut given = vec!["Title", "Application"];
    let mut names = Vec::with_capacity(model.metadata.len());
    for (name, _) in model.metadata {
        let mut chars = name.chars();
        let word = chars.next().is_some_and(|c| c.is_ascii_alphabetic())
            && chars.all(|c| c.is_ascii_alphanumeric() || matches!(c, '-' | '_'));
        if !word || given.contains(&name.as_str()) {
            return Err(WriteError::MetadataName { name: name.clone() });
        }
        given.push(name);
        names.push(if WELL_KNOWN.contains(&name.as_str()) { name.clone() } else { format!("sw:{name}") });
    }
    Ok(names)
}

fn check_placement(object: &ThreeMfObject<'_>) -> Result<(), WriteError> {
    let Some(m) = object.placement else { return Ok(()) };
    let determinant = nalgebra::Matrix3::from_fn(|r, c| m[r][c]).determinant();
    let finite = m.iter().flatten().all(|v| v.is_finite());
    if finite && determinant > 0.0 && determinant.is_finite() {
        return Ok(());
    }
    Err(WriteError::Placement { object: object.name.to_owned(), determinant })
}

fn write_package<W: Write + Seek>(
    model: &ThreeMf<'_>,
    names: &[String],
    printed: &[Vec<[f32; 3]>],
    w: W,
) -> io::Result<()> {
    // About 60 bytes a vertex and 64 a triangle; above 4 GiB the container needs its 64-bit form.
    let bytes: usize =
        model.objects.iter().map(|o| 60 * o.mesh.positions.len() + 64 * o.mesh.triangles.len()).sum();
    let options = SimpleFileOptions::default()
        .compression_method(CompressionMethod::Deflated)
        .compression_level(Some(LEVEL))
        .last_modified_time(DateTime::default())
        .system(System::Unix)
        .unix_permissions(0o644);
    let mut zip = ZipWriter::new(w);
    zip.start_file("[Content_Types].xml", options)?;
    zip.write_all(
        concat!(
            r#"<?xml version="1.0" encoding="UTF-8"?>"#,
            "\n",
            r#"<Types xmlns="http://schemas.openxmlformats.org/package/2006/content-types">"#,
            r#"<Default Extension="rels" ContentType="application/vnd.openxmlformats-package.relationships+xml"/>"#,
            r#"<Default Extension="model" ContentType="application/vnd.ms-package.3dmanufacturing-3dmodel+xml"/>"#,
            "</Types>\n"
        )
        .as_bytes(),
    )?;
    zip.start_file("_rels/.rels", options)?;
    zip.write_all(
        concat!(
            r#"<?xml version="1.0" encoding="UTF-8"?>"#,
            "\n",
            r#"<Relationships xmlns="http://schemas.openxmlformats.org/package/2006/relationships">"#,
            r#"<Relationship Target="/3D/3dmodel.model" Id="rel0" "#,
            r#"Type="http://schemas.microsoft.com/3dmanufacturing/2013/01/3dmodel"/>"#,
            "</Relationships>\n"
        )
        .as_bytes(),
    )?;
    zip.start_file("3D/3dmodel.model", options.large_file(bytes > 0xf000_0000))?;
    let mut out = BufWriter::with_capacity(1 << 16, &mut zip);
    write_model(model, names, printed, &mut out)?;
    out.flush()?;
    drop(out);
    zip.finish()?.flush()
}

fn write_model<W: Write>(
    model: &ThreeMf<'_>,
    names: &[String],
    printed: &[Vec<[f32; 3]>],
    out: &mut W,
) -> io::Result<()> {
    write!(out, "<?xml version=\"1.0\" encoding=\"UTF-8\"?>\n<model unit=\"millimeter\" xml:lang=\"en\" ")?;
    writeln!(out, "xmlns=\"{CORE}\" xmlns:sw=\"{OWN}\">")?;
    metadata(out, "Title", model.title)?;
    for (name, (_, value)) in names.iter().zip(model.metadata) {
        metadata(out, name, value)?;
    }
    metadata(out, "Application", concat!("stagewright ", env!("CARGO_PKG_VERSION")))?;
    writeln!(out, "<resources>\n<basematerials id=\"{COLOURS_ID}\">")?;
    for side in Side::ALL {
        let [r, g, b] = model.colours.of(side);
        writeln!(out, "<base name=\"{}\" displaycolor=\"#{r:02X}{g:02X}{b:02X}FF\"/>", side.name())?;
    }
    writeln!(out, "</basematerials>")?;
    for (k, (object, positions)) in model.objects.iter().zip(printed).enumerate() {
        write_object(object, positions, COLOURS_ID + 1 + k, out)?;
    }
    writeln!(out, "</resources>\n<build>")?;
    for (k, object) in model.objects.iter().enumerate() {
        write_item(object, COLOURS_ID + 1 + k, out)?;
    }
    writeln!(out, "</build>\n</model>")
}

fn metadata<W: Write>(out: &mut W, name: &str, value: &str) -> io::Result<()> {
    writeln!(out, "<metadata name=\"{name}\">{}</metadata>", Escaped(value))
}

fn write_object<W: Write>(
    object: &ThreeMfObject<'_>,
    positions: &[[f32; 3]],
    id: usize,
    out: &mut W,
) -> io::Result<()> {
    write!(out, "<object id=\"{id}\" name=\"{}\" ", Escaped(object.name))?;
    part_number(object, out)?;
    // The object's own property is what the specification asks for beside properties of triangles.
    writeln!(out, "type=\"model\" pid=\"{COLOURS_ID}\" pindex=\"0\">\n<mesh>\n<vertices>")?;
    for [x, y, z] in positions {
        writeln!(out, "<vertex x=\"{x}\" y=\"{y}\" z=\"{z}\"/>")?;
    }
    writeln!(out, "</vertices>\n<triangles>")?;
    for ([a, b, c], side) in object.mesh.triangles.iter().zip(&object.mesh.sides) {
        let p = *side as u8;
        writeln!(out, "<triangle v1=\"{a}\" v2=\"{b}\" v3=\"{c}\" pid=\"{COLOURS_ID}\" p1=\"{p}\"/>")?;
    }
    writeln!(out, "</triangles>\n</mesh>\n</object>")
}

fn write_item<W: Write>(object: &ThreeMfObject<'_>, id: usize, out: &mut W) -> io::Result<()> {
    write!(out, "<item objectid=\"{id}\" ")?;
    part_number(object, out)?;
    if let Some(m) = object.placement {
        // The specification multiplies row vectors: its 12 numbers are our columns, one after another.
        write!(out, "transform=\"")?;
        for c in 0..4 {
            for (r, row) in m.iter().enumerate() {
                let gap = if (c, r) == (0, 0) { "" } else { " " };
                write!(out, "{gap}{}", row[c] + 0.0)?;
            }
        }
        write!(out, "\" ")?;
    }
    writeln!(out, "/>")
}

fn part_number<W: Write>(object: &ThreeMfObject<'_>, out: &mut W) -> io::Result<()> {
    if object.part_number.is_empty() {
        return Ok(());
    }
    write!(out, "partnumber=\"{}\" ", Escaped(object.part_number))
}
