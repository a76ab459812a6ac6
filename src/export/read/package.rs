//! The container of a 3MF file: finding parts and reading their XML under the limits.

use super::UNPACKED_MAX;
use super::bounded::{Bounded, Stop, stop_of};
use super::error::{Place, ReadError, clipped};
use quick_xml::NsReader;
use quick_xml::events::{BytesStart, Event};
use quick_xml::name::ResolveResult;
use std::io::{BufReader, Cursor};
use zip::ZipArchive;

/// Type of the relationship that names the model part (core specification, appendix C).
const MODEL_RELATIONSHIP: &str = "http://schemas.microsoft.com/3dmanufacturing/2013/01/3dmodel";
/// Where the model part is by custom.
const MODEL_PART: &str = "3D/3dmodel.model";
/// Where the relationships of the package are.
const RELATIONSHIPS: &str = "_rels/.rels";
/// Deepest nesting of tags that is followed; a core model needs 6.
const DEPTH_MAX: usize = 64;

/// A tag as the visitor of [`Package::visit`] sees it.
pub(super) struct Tag<'e> {
    /// Its namespace, empty when it has none.
    pub(super) namespace: &'e str,
    /// Its name without prefix.
    pub(super) name: &'e str,
    start: &'e BytesStart<'e>,
    spot: Spot<'e>,
}

impl Tag<'_> {
    /// Calls `f` with the name (prefix kept) and the raw value of each attribute.
    pub(super) fn attributes(
        &self,
        mut f: impl FnMut(&str, &str) -> Result<(), ReadError>,
    ) -> Result<(), ReadError> {
        // Without the check for doubles, which takes quadratic time.
        for attribute in self.start.attributes().with_checks(false) {
            let a = attribute.map_err(|e| ReadError::Xml { place: self.spot.place(), source: e.into() })?;
            f(a.key.as_ref(), &a.value)?;
        }
        Ok(())
    }

    /// Where the tag ends.
    pub(super) fn place(&self) -> Place {
        self.spot.place()
    }
}

/// A byte of a part.
#[derive(Clone, Copy)]
pub(super) struct Spot<'e> {
    part: &'e str,
    byte: u64,
}

impl Spot<'_> {
    /// The same, to keep.
    pub(super) fn place(self) -> Place {
        Place::Byte { part: self.part.chars().take(80).collect(), byte: self.byte }
    }
}

/// What a visitor is told; the tags of a part open and close in pairs, empty ones too.
pub(super) enum Step<'e> {
    /// A tag opens.
    Open(Tag<'e>),
    /// The tag opened last, and not yet closed, closes.
    Close(Spot<'e>),
}

/// An open container.
pub(super) struct Package<'b> {
    archive: ZipArchive<Cursor<&'b [u8]>>,
    left: u64,
}

impl<'b> Package<'b> {
    /// Reads the directory of the container.
    pub(super) fn open(bytes: &'b [u8]) -> Result<Self, ReadError> {
        Ok(Self { archive: ZipArchive::new(Cursor::new(bytes))?, left: UNPACKED_MAX })
    }

    /// The name of the model part, from the relationships of the package or by custom.
    pub(super) fn model_part(&mut self) -> Result<String, ReadError> {
        let mut target = None;
        if self.index_of(RELATIONSHIPS).is_some() {
            self.visit(RELATIONSHIPS, |step| {
                let Step::Open(tag) = step else { return Ok(()) };
                let (mut kind, mut to) = (String::new(), String::new());
                tag.attributes(|name, value| {
                    match name {
                        "Type" => value.clone_into(&mut kind),
                        "Target" => value.clone_into(&mut to),
                        _ => {}
                    }
                    Ok(())
                })?;
                if tag.name == "Relationship" && kind == MODEL_RELATIONSHIP && target.is_none() {
                    target = Some(to);
                }
                Ok(())
            })?;
        }
        Ok(target.unwrap_or_else(|| MODEL_PART.to_owned()))
    }

    /// The place of a part in the directory; names are compared as the package conventions ask, without case.
    fn index_of(&self, part: &str) -> Option<usize> {
        let wanted = part.trim_start_matches('/');
        self.archive
            .file_names_raw()
            .position(|name| name.strip_prefix(b"/").unwrap_or(name).eq_ignore_ascii_case(wanted.as_bytes()))
    }

    /// Reads a part tag by tag.
    pub(super) fn visit(
        &mut self,
        part: &str,
        mut visitor: impl FnMut(Step<'_>) -> Result<(), ReadError>,
    ) -> Result<(), ReadError> {
        let missing = || ReadError::MissingPart { part: part.chars().take(80).collect() };
        let entry = self.archive.by_index(self.index_of(part).ok_or_else(missing)?)?;
        let mut reader =
            NsReader::from_reader(Bounded::new(BufReader::with_capacity(1 << 16, entry), self.left));
        let mut buffer = Vec::new();
        let mut depth = 0_usize;
        loop {
            buffer.clear();
            reader.get_mut().mark();
            let event = match reader.read_event_into(&mut buffer) {
                Ok(event) => event,
                Err(source) => return Err(xml_error(source, Spot { part, byte: reader.error_position() })),
            };
            let spot = Spot { part, byte: reader.buffer_position() };
            match &event {
                Event::Start(start) | Event::Empty(start) => {
                    let (namespace, local) = reader.resolver().resolve_element(start.name());
                    let namespace = match namespace {
                        ResolveResult::Bound(n) => n.0,
                        _ => "",
                    };
                    let name = local.into_inner();
                    visitor(Step::Open(Tag { namespace, name, start, spot }))?;
                    if matches!(event, Event::Empty(_)) {
                        visitor(Step::Close(spot))?;
                    } else {
                        depth += 1;
                    }
                }
                Event::End(_) => {
                    depth = depth.saturating_sub(1);
                    visitor(Step::Close(spot))?;
                }
                Event::DocType(text) => {
                    let problem = "a document type is not allowed in 3MF";
                    let found = clipped(text.as_bytes());
                    return Err(ReadError::Syntax { place: spot.place(), problem, found });
                }
                Event::Eof => break,
                _ => {}
            }
            if depth > DEPTH_MAX {
                let problem = "tags are nested deeper than 64";
                return Err(ReadError::Syntax { place: spot.place(), problem, found: String::new() });
            }
        }
        if depth > 0 {
            let problem = "the part ends before its last tag is closed";
            let place = Spot { part, byte: reader.buffer_position() }.place();
            return Err(ReadError::Syntax { place, problem, found: String::new() });
        }
        self.left = reader.get_ref().left();
        Ok(())
    }
}

fn xml_error(source: quick_xml::Error, spot: Spot<'_>) -> ReadError {
    let stop = match &source {
        quick_xml::Error::Io(e) => stop_of(e),
        _ => None,
    };
    match stop {
        Some(Stop::Total) => ReadError::Unpacked { part: spot.part.chars().take(80).collect() },
        _ => ReadError::Xml { place: spot.place(), source },
    }
}
