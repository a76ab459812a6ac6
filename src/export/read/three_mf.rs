//! 3MF: the objects of the build section, placed and converted to mm.

use super::COUNT_MAX;
use super::build::{checked_point, compacted};
use super::error::{Place, ReadError};
use super::format::MeshFormat;
use super::model::{Kind, Model, Object, Transform, Use, read_model};
use super::note::{Imported, ReadNote};
use super::package::Package;
use crate::geom::Vec3;
use rustc_hash::FxHashMap;

/// Most placed copies of objects and components, all together.
const COPIES_MAX: u64 = 1_000_000;
/// Deepest nesting of components.
const NESTING_MAX: u32 = 64;

/// Reads 3MF.
pub(super) fn read(bytes: &[u8]) -> Result<Imported, ReadError> {
    let mut package = Package::open(bytes)?;
    let root = package.model_part()?;
    let (parts, root) = read_parts(&mut package, root)?;
    let scene = Scene::new(parts)?;
    scene.place(root)
}

/// Every model part that is needed, those named by the root before the root, with their names.
fn read_parts(package: &mut Package<'_>, root: String) -> Result<(Vec<(String, Model)>, usize), ReadError> {
    let model = read_model(package, &root)?;
    let uses = model.objects.iter().flat_map(|o| &o.components).chain(&model.items);
    let mut names: Vec<String> = Vec::new();
    for name in uses.filter_map(|u| u.part.as_deref()) {
        let name = key(name);
        if name != key(&root) && !names.contains(&name) {
            names.push(name);
        }
    }
    let mut parts = Vec::with_capacity(names.len() + 1);
    for name in names {
        let part = read_model(package, &name)?;
        parts.push((name, part));
    }
    let last = parts.len();
    parts.push((key(&root), model));
    Ok((parts, last))
}

/// A part's name as it is compared.
fn key(name: &str) -> String {
    name.trim_start_matches('/').to_ascii_lowercase()
}

/// What an object comes to when all its components are written out.
#[derive(Clone, Copy, Default)]
struct Weight {
    vertices: u64,
    triangles: u64,
    copies: u64,
    nesting: u32,
}

impl Weight {
    fn add(&mut self, other: Self) {
        self.vertices = self.vertices.saturating_add(other.vertices);
        self.triangles = self.triangles.saturating_add(other.triangles);
        self.copies = self.copies.saturating_add(other.copies);
        self.nesting = self.nesting.max(other.nesting);
    }

    fn check(&self, place: &Place) -> Result<(), ReadError> {
        let too_many = |what| Err(ReadError::TooMany { what, place: place.clone() });
        if self.vertices > COUNT_MAX as u64 {
            return too_many("vertices");
        }
        if self.triangles > COUNT_MAX as u64 {
            return too_many("triangles");
        }
        if self.copies > COPIES_MAX {
            let problem = "components are used more than 1000000 times in all";
            return Err(ReadError::Syntax { place: place.clone(), problem, found: String::new() });
        }
        if self.nesting > NESTING_MAX {
            let problem = "components are nested deeper than 64";
            return Err(ReadError::Syntax { place: place.clone(), problem, found: String::new() });
        }
        Ok(())
    }
}

/// All parts with every use resolved.
struct Scene {
    parts: Vec<(String, Model)>,
    /// (part, id) to the place of the object in its part.
    objects: FxHashMap<(usize, u32), usize>,
    /// Weights by part and place in it.
    weights: Vec<Vec<Weight>>,
}

/// The mesh being put together.
#[derive(Default)]
struct Placed {
    /// mm per unit of the root part.
    to_mm: f64,
    positions: Vec<Vec3>,
    triangles: Vec<[u32; 3]>,
    bodies: usize,
    mirrored: usize,
    left_out: [usize; 3],
}

impl Scene {
    /// Numbers the objects and weighs them. A component must name an object defined before it, as the
    /// specification asks (section 4.2), so nothing can contain itself.
    fn new(parts: Vec<(String, Model)>) -> Result<Self, ReadError> {
        let mut scene = Self { parts, objects: FxHashMap::default(), weights: Vec::new() };
        for p in 0..scene.parts.len() {
            scene.weights.push(Vec::new());
            for k in 0..scene.parts[p].1.objects.len() {
                let object = &scene.parts[p].1.objects[k];
                let mut weight = Weight {
                    vertices: object.vertices.len() as u64,
                    triangles: object.triangles.len() as u64,
                    copies: 1,
                    nesting: 0,
                };
                for component in &object.components {
                    let (q, j) = scene.resolve(component, p)?;
                    let mut inner = scene.weights[q][j];
                    inner.nesting += 1;
                    weight.add(inner);
                    weight.check(&component.place)?;
                }
                let id = object.id;
                scene.weights[p].push(weight);
                scene.objects.entry((p, id)).or_insert(k);
            }
        }
        Ok(scene)
    }

    /// The part and place of the object a use in part `p` names.
    fn resolve(&self, named: &Use, p: usize) -> Result<(usize, usize), ReadError> {
        let part = match &named.part {
            None => Some(p),
            Some(name) => self.parts.iter().position(|(n, _)| *n == key(name)),
        };
        let found = part.and_then(|q| self.objects.get(&(q, named.id)).map(|&k| (q, k)));
        found.ok_or_else(|| ReadError::Syntax {
            place: named.place.clone(),
            problem: "no object with this id is defined before it is used",
            found: named.id.to_string(),
        })
    }

    fn place(&self, root: usize) -> Result<Imported, ReadError> {
        let model = &self.parts[root].1;
        let mut total = Weight::default();
        let mut items = Vec::with_capacity(model.items.len());
        for item in &model.items {
            let (p, k) = self.resolve(item, root)?;
            total.add(self.weights[p][k]);
            total.check(&item.place)?;
            items.push((p, k, item));
        }
        let (unit, factor) = model.unit;
        let mut placed = Placed { to_mm: factor, ..Placed::default() };
        for (p, k, item) in items {
            self.place_object((p, k), &self.in_units_of(root, p, &item.transform), item, &mut placed)?;
        }
        let mut notes = vec![ReadNote::UnitGiven { unit, factor }];
        for (kind, count) in ["support", "surface", "other"].into_iter().zip(placed.left_out) {
            if count > 0 {
                notes.push(ReadNote::LeftOut { kind, count });
            }
        }
        if placed.mirrored > 0 {
            notes.push(ReadNote::Mirrored(placed.mirrored));
        }
        let mut extensions: Vec<&str> = Vec::new();
        for name in self.parts.iter().flat_map(|(_, m)| &m.extensions) {
            if !extensions.contains(&name.as_str()) {
                extensions.push(name);
            }
        }
        if !extensions.is_empty() {
            notes.push(ReadNote::Extensions(extensions.join(", ")));
        }
        let mesh = compacted(placed.positions, placed.triangles);
        Ok(Imported { mesh, format: MeshFormat::ThreeMf, bodies: placed.bodies.max(1), notes })
    }

    /// A transform written in the unit of part `outer`, applied to an object in the unit of part `inner`.
    fn in_units_of(&self, outer: usize, inner: usize, m: &Transform) -> Transform {
        let ratio = self.parts[inner].1.unit.1 / self.parts[outer].1.unit.1;
        let mut m = *m;
        m.fixed_columns_mut::<3>(0).scale_mut(ratio);
        m
    }

    /// Adds an object and its components, at most [`NESTING_MAX`] deep.
    fn place_object(
        &self,
        (p, k): (usize, usize),
        transform: &Transform,
        item: &Use,
        placed: &mut Placed,
    ) -> Result<(), ReadError> {
        let (_, model) = &self.parts[p];
        let object = &model.objects[k];
        match object.kind {
            Kind::Model => {}
            Kind::Support => placed.left_out[0] += 1,
            Kind::Surface => placed.left_out[1] += 1,
            Kind::Other => placed.left_out[2] += 1,
        }
        if object.kind != Kind::Model {
            return Ok(());
        }
        if !object.triangles.is_empty() {
            placed.add(object, transform, &item.place)?;
        }
        for component in &object.components {
            let inner = self.resolve(component, p)?;
            let within = self.in_units_of(p, inner.0, &component.transform);
            self.place_object(inner, &compose(transform, &within), item, placed)?;
        }
        Ok(())
    }
}

impl Placed {
    fn add(&mut self, object: &Object, m: &Transform, place: &Place) -> Result<(), ReadError> {
        let index = |i: usize| u32::try_from(i).unwrap_or(u32::MAX);
        let base = index(self.positions.len()); // weighed before: below COUNT_MAX
        for v in &object.vertices {
            let p = (m * v.push(1.0)) * self.to_mm;
            self.positions.push(checked_point(p, || place.clone())?);
        }
        let mirrors = m.fixed_columns::<3>(0).determinant() < 0.0;
        for &[a, b, c] in &object.triangles {
            let t = if mirrors { [a, c, b] } else { [a, b, c] };
            self.triangles.push(t.map(|i| base + i));
        }
        self.mirrored += usize::from(mirrors);
        self.bodies += 1;
        Ok(())
    }
}

/// First `inner`, then `outer`.
fn compose(outer: &Transform, inner: &Transform) -> Transform {
    let mut homogeneous = nalgebra::Matrix4::identity();
    homogeneous.fixed_rows_mut::<3>(0).copy_from(inner);
    outer * homogeneous
}
