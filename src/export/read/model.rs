//! One model part of a 3MF file as data: objects, components and build items, nothing placed yet.

use super::build::next_index;
use super::error::{Place, ReadError, clipped};
use super::package::{Package, Step, Tag};
use super::parse::{number, words};
use crate::geom::Vec3;

/// x -> linear part times x plus shift: rows of a 3 x 4 matrix acting on columns.
pub(super) type Transform = nalgebra::Matrix3x4<f64>;

/// A use of an object: by a build item or as a component.
pub(super) struct Use {
    /// The part that holds the object; `None` for the part of the use itself.
    pub(super) part: Option<String>,
    /// Its id there.
    pub(super) id: u32,
    /// Where it goes.
    pub(super) transform: Transform,
    /// Where the use is written.
    pub(super) place: Place,
}

/// An object of the resources.
#[derive(Default)]
pub(super) struct Object {
    /// Its id.
    pub(super) id: u32,
    /// Its type: `model`, `solidsupport`, `support`, `surface`, `other`.
    pub(super) kind: Kind,
    /// Its vertices, in the unit of the part.
    pub(super) vertices: Vec<Vec3>,
    /// Its triangles, indices in range.
    pub(super) triangles: Vec<[u32; 3]>,
    /// The objects it is put together from.
    pub(super) components: Vec<Use>,
}

/// The type of an object.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub(super) enum Kind {
    /// A solid to print; also solid supports.
    #[default]
    Model,
    /// Support structure.
    Support,
    /// A surface without inside.
    Surface,
    /// Something else.
    Other,
}

/// A model part.
pub(super) struct Model {
    /// The unit's name and its mm.
    pub(super) unit: (&'static str, f64),
    /// Prefixes of the extensions it requires and that are not read.
    pub(super) extensions: Vec<String>,
    /// Objects in the order of the file.
    pub(super) objects: Vec<Object>,
    /// Build items in the order of the file.
    pub(super) items: Vec<Use>,
}

/// Units of the core specification (section 3.4) in mm.
const UNITS: [(&str, f64); 6] = [
    ("micron", 0.001),
    ("millimeter", 1.0),
    ("centimeter", 10.0),
    ("inch", 25.4),
    ("foot", 304.8),
    ("meter", 1000.0),
];

/// Reads a model part.
pub(super) fn read_model(package: &mut Package<'_>, part: &str) -> Result<Model, ReadError> {
    let model = Model { unit: UNITS[1], extensions: Vec::new(), objects: Vec::new(), items: Vec::new() };
    let mut parser = Parser { model, core: None, stack: Vec::new(), elements: 0 };
    package.visit(part, |step| match step {
        Step::Open(tag) => parser.open(&tag),
        Step::Close(spot) => parser.close(|| spot.place()),
    })?;
    if parser.core.is_none() {
        let place = Place::Byte { part: part.chars().take(80).collect(), byte: 0 };
        return Err(ReadError::Syntax {
            place,
            problem: "the part has no `model` tag",
            found: String::new(),
        });
    }
    Ok(parser.model)
}

/// The tags whose children matter.
#[derive(Clone, Copy, PartialEq, Eq)]
enum Within {
    Model,
    Resources,
    Object,
    Mesh,
    Vertices,
    Triangles,
    Components,
    Build,
    /// Anything whose children are passed over.
    Else,
}

struct Parser {
    model: Model,
    /// The namespace of the root, taken as that of the core specification.
    core: Option<String>,
    stack: Vec<Within>,
    /// Vertices and triangles of the part.
    elements: usize,
}

impl Parser {
    fn open(&mut self, tag: &Tag<'_>) -> Result<(), ReadError> {
        let within = match (self.stack.last(), &self.core) {
            (None, None) => self.root(tag)?,
            (Some(parent), Some(core)) if tag.namespace == core => self.child(*parent, tag)?,
            _ => Within::Else,
        };
        self.stack.push(within);
        Ok(())
    }

    fn root(&mut self, tag: &Tag<'_>) -> Result<Within, ReadError> {
        if tag.name != "model" {
            return Err(syntax(tag, "the first tag must be `model`", tag.name));
        }
        self.core = Some(tag.namespace.to_owned());
        let model = &mut self.model;
        tag.attributes(|name, value| {
            match name {
                "unit" => {
                    let known = UNITS.into_iter().find(|(unit, _)| *unit == value.trim());
                    let problem = "the unit must be micron, millimeter, centimeter, inch, foot or meter";
                    model.unit = known.ok_or_else(|| syntax(tag, problem, value))?;
                }
                "requiredextensions" => {
                    let unread = value.split_whitespace().filter(|p| *p != "p").take(20);
                    model.extensions = unread.map(|p| p.chars().take(20).collect()).collect();
                }
                _ => {}
            }
            Ok(())
        })?;
        Ok(Within::Model)
    }

    fn child(&mut self, parent: Within, tag: &Tag<'_>) -> Result<Within, ReadError> {
        Ok(match (parent, tag.name) {
            (Within::Model, "resources") => Within::Resources,
            (Within::Model, "build") => Within::Build,
            (Within::Resources, "object") => {
                self.object(tag)?;
                Within::Object
            }
            (Within::Object, "mesh") => Within::Mesh,
            (Within::Object, "components") => Within::Components,
            (Within::Mesh, "vertices") => Within::Vertices,
            (Within::Mesh, "triangles") => Within::Triangles,
            (Within::Vertices, "vertex") => {
                self.vertex(tag)?;
                Within::Else
            }
            (Within::Triangles, "triangle") => {
                self.triangle(tag)?;
                Within::Else
            }
            (Within::Components, "component") => {
                let component = self.used(tag)?;
                if let Some(object) = self.model.objects.last_mut() {
                    object.components.push(component);
                }
                Within::Else
            }
            (Within::Build, "item") => {
                let item = self.used(tag)?;
                self.model.items.push(item);
                Within::Else
            }
            _ => Within::Else,
        })
    }

    fn object(&mut self, tag: &Tag<'_>) -> Result<(), ReadError> {
        let mut id = None;
        let mut kind = Kind::Model;
        tag.attributes(|name, value| {
            match name {
                "id" => id = Some(count(value, tag)?),
                "type" => {
                    kind = match value.trim() {
                        "model" | "solidsupport" => Kind::Model,
                        "support" => Kind::Support,
                        "surface" => Kind::Surface,
                        _ => Kind::Other,
                    }
                }
                _ => {}
            }
            Ok(())
        })?;
        let id = id.ok_or_else(|| syntax(tag, "an object needs an id", ""))?;
        self.model.objects.push(Object { id, kind, ..Object::default() });
        Ok(())
    }

    fn vertex(&mut self, tag: &Tag<'_>) -> Result<(), ReadError> {
        let mut p = [None; 3];
        tag.attributes(|name, value| {
            let axis = match name {
                "x" => 0,
                "y" => 1,
                "z" => 2,
                _ => return Ok(()),
            };
            let word = Some(value.trim().as_bytes());
            p[axis] = Some(number(word, "a coordinate must be a number", || tag.place())?);
            Ok(())
        })?;
        let [Some(x), Some(y), Some(z)] = p else { return Err(syntax(tag, "a vertex needs x, y and z", "")) };
        next_index(self.elements, "vertices and triangles", || tag.place())?;
        self.elements += 1;
        if let Some(object) = self.model.objects.last_mut() {
            object.vertices.push(Vec3::new(x, y, z));
        }
        Ok(())
    }

    fn triangle(&mut self, tag: &Tag<'_>) -> Result<(), ReadError> {
        let mut t = [None; 3];
        tag.attributes(|name, value| {
            let corner = match name {
                "v1" => 0,
                "v2" => 1,
                "v3" => 2,
                _ => return Ok(()),
            };
            t[corner] = Some(count(value, tag)?);
            Ok(())
        })?;
        let [Some(a), Some(b), Some(c)] = t else {
            return Err(syntax(tag, "a triangle needs v1, v2 and v3", ""));
        };
        next_index(self.elements, "vertices and triangles", || tag.place())?;
        self.elements += 1;
        if let Some(object) = self.model.objects.last_mut() {
            object.triangles.push([a, b, c]);
        }
        Ok(())
    }

    fn used(&mut self, tag: &Tag<'_>) -> Result<Use, ReadError> {
        let (mut id, mut part, mut transform) = (None, None, Transform::identity());
        tag.attributes(|name, value| {
            match name {
                "objectid" => id = Some(count(value, tag)?),
                "transform" => transform = matrix(value, tag)?,
                _ if name.ends_with(":path") => part = Some(value.to_owned()),
                _ => {}
            }
            Ok(())
        })?;
        let id = id.ok_or_else(|| syntax(tag, "an item or component needs an objectid", ""))?;
        next_index(self.elements, "vertices, triangles and components", || tag.place())?;
        self.elements += 1;
        Ok(Use { part, id, transform, place: tag.place() })
    }

    fn close(&mut self, place: impl Fn() -> Place) -> Result<(), ReadError> {
        // A mesh is whole only now: indices may be looked at.
        if self.stack.pop() == Some(Within::Mesh)
            && let Some(object) = self.model.objects.last()
        {
            let count = object.vertices.len();
            let wrong = object.triangles.iter().flatten().find(|&&i| i as usize >= count);
            if let Some(&index) = wrong {
                return Err(ReadError::Index { place: place(), index: index.into(), count, first: 0 });
            }
        }
        Ok(())
    }
}

fn syntax(tag: &Tag<'_>, problem: &'static str, found: &str) -> ReadError {
    ReadError::Syntax { place: tag.place(), problem, found: clipped(found.as_bytes()) }
}

fn count(value: &str, tag: &Tag<'_>) -> Result<u32, ReadError> {
    number(Some(value.trim().as_bytes()), "a whole number from 0 to 4294967295 is expected", || tag.place())
}

/// The 12 numbers of a transform: the specification multiplies row vectors, so they are our columns.
fn matrix(value: &str, tag: &Tag<'_>) -> Result<Transform, ReadError> {
    let mut numbers = [0.0; 12];
    let mut given = words(value.as_bytes());
    for n in &mut numbers {
        *n = number(given.next(), "a transform has 12 numbers", || tag.place())?;
    }
    let m = Transform::from_column_slice(&numbers);
    let determinant = m.fixed_columns::<3>(0).determinant();
    if given.next().is_some()
        || !m.iter().all(|n| n.is_finite())
        || determinant == 0.0
        || determinant.is_nan()
    {
        return Err(syntax(tag, "a transform has 12 finite numbers and must not flatten", value));
    }
    Ok(m)
}
