//! The exact audit of a mesh: closed, two-manifold, oriented outward, no triangle crossing another.

use super::shells::{Shell, shells_of};
use crate::geom::Vec3;
use crate::mesh::crossing::{Pair, collinear, pair};
use crate::mesh::{EdgeTable, Fans, NO_TRIANGLE, Tree, TriMesh, first_equal, measure};
use rayon::prelude::*;
use std::fmt;

/// Faults kept per kind; all are counted.
pub const KEPT_PER_KIND: usize = 1000;

/// What can be wrong with a mesh.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum FaultKind {
    /// A triangle names a vertex that does not exist.
    IndexOutOfRange,
    /// A triangle has a corner whose coordinates are not finite numbers.
    NotFinite,
    /// A triangle has two corners at the same place.
    RepeatedCorner,
    /// A triangle has three corners on a line.
    ZeroArea,
    /// Two triangles have the same three corners.
    DuplicateTriangle,
    /// An edge of one triangle only.
    OpenEdge,
    /// An edge of three triangles or more.
    CrowdedEdge,
    /// An edge of two triangles that do not agree which side is outside.
    MisorientedEdge,
    /// A vertex whose triangles form more than one fan: parts that touch in a point.
    PinchedVertex,
    /// Two triangles that meet elsewhere than in common corners; touching counts.
    Crossing,
    /// A closed surface that faces inward where nothing encloses it, or outward inside material.
    InsideOut,
}

impl FaultKind {
    /// All kinds in their fixed order.
    pub const ALL: [Self; 11] = [
        Self::IndexOutOfRange,
        Self::NotFinite,
        Self::RepeatedCorner,
        Self::ZeroArea,
        Self::DuplicateTriangle,
        Self::OpenEdge,
        Self::CrowdedEdge,
        Self::MisorientedEdge,
        Self::PinchedVertex,
        Self::Crossing,
        Self::InsideOut,
    ];

    /// What it is called in messages, for a number of 1 and for any other number.
    #[must_use]
    pub const fn words(self) -> (&'static str, &'static str) {
        match self {
            Self::IndexOutOfRange => {
                ("triangle that names a missing vertex", "triangles that name missing vertices")
            }
            Self::NotFinite => (
                "triangle with a coordinate that is no number",
                "triangles with coordinates that are no numbers",
            ),
            Self::RepeatedCorner => {
                ("triangle with two corners in one place", "triangles with two corners in one place")
            }
            Self::ZeroArea => ("triangle without area", "triangles without area"),
            Self::DuplicateTriangle => ("doubled triangle", "doubled triangles"),
            Self::OpenEdge => ("open edge", "open edges"),
            Self::CrowdedEdge => {
                ("edge shared by more than two triangles", "edges shared by more than two triangles")
            }
            Self::MisorientedEdge => (
                "edge whose two triangles face opposite ways",
                "edges whose two triangles face opposite ways",
            ),
            Self::PinchedVertex => {
                ("vertex where parts touch in a point", "vertices where parts touch in a point")
            }
            Self::Crossing => ("pair of triangles that cross", "pairs of triangles that cross"),
            Self::InsideOut => ("surface turned inside out", "surfaces turned inside out"),
        }
    }

    const fn index(self) -> usize {
        self as usize
    }
}

/// One fault and its place.
#[derive(Clone, Debug, PartialEq)]
pub struct Fault {
    /// What is wrong.
    pub kind: FaultKind,
    /// The triangles concerned, at most four, by their numbers in the audited mesh.
    pub triangles: Vec<u32>,
    /// A point where it can be seen, mm; (0, 0, 0) when the triangle has no finite corner.
    pub place_mm: Vec3,
}

/// What an audit found.
#[derive(Clone, Debug, PartialEq)]
pub struct Audit {
    /// The faults by kind, the first [`KEPT_PER_KIND`] of each.
    pub faults: Vec<Fault>,
    /// Triangles of the mesh.
    pub triangles: usize,
    /// Different points in use.
    pub vertices: usize,
    /// Vertices less edges plus triangles.
    pub euler: i64,
    /// The closed surfaces, in order of their first triangle; empty unless every edge is used exactly twice in
    /// opposite directions.
    pub shells: Vec<Shell>,
    counts: [usize; FaultKind::ALL.len()],
}

impl Audit {
    /// How many faults of this kind there are, kept or not.
    #[must_use]
    pub fn count(&self, kind: FaultKind) -> usize {
        self.counts[kind.index()]
    }

    /// How many faults there are in all.
    #[must_use]
    pub fn total(&self) -> usize {
        self.counts.iter().sum()
    }

    /// Whether the mesh bounds a solid: at least one triangle and no fault.
    #[must_use]
    pub fn is_solid(&self) -> bool {
        self.triangles > 0 && self.total() == 0
    }

    /// Shells that bound air enclosed by material.
    #[must_use]
    pub fn chambers(&self) -> usize {
        self.shells.iter().filter(|s| s.is_chamber).count()
    }
}

impl fmt::Display for Audit {
    /// One line a kind of fault, with its number and the first place in mm; one line for a clean mesh.
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        if self.triangles == 0 {
            return write!(f, "the mesh has no triangles");
        }
        if self.is_solid() {
            return write!(
                f,
                "closed and two-manifold: {} triangles, {} shell{} ({} around chambers), Euler number {}",
                self.triangles,
                self.shells.len(),
                if self.shells.len() == 1 { "" } else { "s" },
                self.chambers(),
                self.euler
            );
        }
        let mut first = true;
        for kind in FaultKind::ALL {
            let n = self.count(kind);
            let Some(fault) = self.faults.iter().find(|x| x.kind == kind) else { continue };
            let (one, many) = kind.words();
            let p = fault.place_mm;
            let list: Vec<String> = fault.triangles.iter().map(u32::to_string).collect();
            write!(
                f,
                "{}{n} {}, {} ({:.3}, {:.3}, {:.3}) mm, triangle{} {}",
                if first { "" } else { "\n" },
                if n == 1 { one } else { many },
                if n == 1 { "at" } else { "the first at" },
                p.x,
                p.y,
                p.z,
                if list.len() == 1 { "" } else { "s" },
                list.join(", ")
            )?;
            first = false;
        }
        Ok(())
    }
}

/// Audits a mesh as a reader of its file sees it: points with equal coordinates are one point, whatever their
/// numbers. (Rounding to f32 is not done here; see [`super::finish`].)
///
/// Triangles with a missing vertex, a coordinate that is not finite or a repeated corner are reported and then left
/// out of the other tests. Shells and their nesting are judged only when every edge is matched.
///
/// # Guarantees
/// Every decision but the signs of the shells' volumes is exact. The result does not depend on the number of threads.
///
/// # Limits
/// About 150 bytes a triangle of working memory; time grows with the number of pairs of triangles whose boxes meet.
#[must_use]
pub fn audit(mesh: &TriMesh) -> Audit {
    let mut book = Book::default();
    let seen = as_read(mesh, &mut book);
    let table = EdgeTable::build(&seen.mesh);
    edges(&seen, &table, &mut book);
    vertices(&seen, &table, &mut book);
    let tree = Tree::build(&seen.mesh);
    crossings(&seen, &tree, &mut book);
    let unmatched = [FaultKind::OpenEdge, FaultKind::CrowdedEdge, FaultKind::MisorientedEdge]
        .iter()
        .any(|k| book.counts[k.index()] > 0);
    let shells = if unmatched { Vec::new() } else { shells_of(&seen.mesh, &tree) };
    // Where surfaces cross, only a surface that faces inward in the open is certainly wrong.
    let crossed = book.counts[FaultKind::Crossing.index()] > 0;
    for s in shells.iter().filter(|s| s.is_inside_out && (!crossed || (s.is_chamber && s.covered == 0))) {
        let t = s.triangles[0];
        book.add(FaultKind::InsideOut, || (vec![seen.number[t as usize]], centroid(&seen.mesh, t)));
    }
    let euler = measure::euler_from(&seen.mesh, &table);
    let mut used = vec![false; seen.mesh.positions.len()];
    for &i in seen.mesh.triangles.iter().flatten() {
        used[i as usize] = true;
    }
    let shells = shells
        .into_iter()
        .map(|s| Shell { triangles: s.triangles.iter().map(|&t| seen.number[t as usize]).collect(), ..s })
        .collect();
    let mut faults = book.faults;
    faults.sort_by_key(|f| f.kind);
    Audit {
        faults,
        triangles: mesh.triangles.len(),
        vertices: used.iter().filter(|&&u| u).count(),
        euler,
        shells,
        counts: book.counts,
    }
}

/// Faults as they are found.
#[derive(Default)]
struct Book {
    faults: Vec<Fault>,
    counts: [usize; FaultKind::ALL.len()],
}

impl Book {
    fn add(&mut self, kind: FaultKind, what: impl FnOnce() -> (Vec<u32>, Vec3)) {
        self.counts[kind.index()] += 1;
        if self.counts[kind.index()] <= KEPT_PER_KIND {
            let (triangles, place_mm) = what();
            self.faults.push(Fault { kind, triangles, place_mm });
        }
    }
}

/// The usable triangles of a mesh with equal points joined.
struct AsRead {
    mesh: TriMesh,
    /// The number of each triangle in the audited mesh.
    number: Vec<u32>,
}

fn as_read(mesh: &TriMesh, book: &mut Book) -> AsRead {
    let first = first_equal(&mesh.positions);
    let mut out = AsRead {
        mesh: TriMesh { positions: mesh.positions.clone(), ..TriMesh::default() },
        number: Vec::with_capacity(mesh.triangles.len()),
    };
    for (number, t) in (0_u32..).zip(&mesh.triangles) {
        let place = || {
            let p = t.iter().filter_map(|&i| mesh.positions.get(i as usize));
            p.copied().find(|p| p.iter().all(|x| x.is_finite())).unwrap_or_default()
        };
        let kind = match t.map(|i| first.get(i as usize).copied()) {
            [Some(a), Some(b), Some(c)] => {
                let p = [a, b, c].map(|i| mesh.positions[i as usize]);
                if !p.iter().flatten().all(|x| x.is_finite()) {
                    FaultKind::NotFinite
                } else if a == b || b == c || c == a {
                    FaultKind::RepeatedCorner
                } else {
                    if collinear(&p[0], &p[1], &p[2]) {
                        book.add(FaultKind::ZeroArea, || (vec![number], place()));
                    }
                    out.mesh.triangles.push([a, b, c]);
                    out.number.push(number);
                    continue;
                }
            }
            _ => FaultKind::IndexOutOfRange,
        };
        book.add(kind, || (vec![number], place()));
    }
    out.mesh.sides = vec![crate::mesh::Side::default(); out.mesh.triangles.len()];
    out
}

fn edges(seen: &AsRead, table: &EdgeTable, book: &mut Book) {
    for e in table.edges().filter(|e| !e.is_manifold()) {
        let kind = match e.uses.len() {
            1 => FaultKind::OpenEdge,
            2 => FaultKind::MisorientedEdge,
            _ => FaultKind::CrowdedEdge,
        };
        book.add(kind, || {
            let at = |i: u32| seen.mesh.positions[i as usize];
            let triangles = e.uses.iter().take(4).map(|u| seen.number[u.triangle as usize]).collect();
            (triangles, 0.5 * (at(e.lo) + at(e.hi)))
        });
    }
}

/// Finds vertices with more than one fan. Vertices on an edge already reported are passed over.
fn vertices(seen: &AsRead, table: &EdgeTable, book: &mut Book) {
    let neighbours = table.neighbours();
    let fans = Fans::build(&seen.mesh);
    let pinched: Vec<(u32, u32)> = (0..u32::try_from(seen.mesh.positions.len()).unwrap_or(u32::MAX))
        .into_par_iter()
        .filter_map(|v| {
            let fan = fans.around(v);
            let corner = |t: u32| seen.mesh.triangles[t as usize].iter().position(|&i| i == v).unwrap_or(0);
            let over = |t: u32, back: usize| neighbours[t as usize][(corner(t) + back) % 3];
            if fan.iter().any(|&t| over(t, 0) == NO_TRIANGLE || over(t, 2) == NO_TRIANGLE) {
                return None;
            }
            let start = *fan.first()?;
            let (mut t, mut steps) = (start, 0);
            loop {
                t = over(t, 0);
                steps += 1;
                if t == start || steps > fan.len() {
                    break;
                }
            }
            let lost = || fan.iter().copied().find(|&u| u != start).unwrap_or(start);
            (steps != fan.len()).then(|| (v, lost()))
        })
        .collect();
    for (v, other) in pinched {
        book.add(FaultKind::PinchedVertex, || {
            let first = fans.around(v)[0];
            let list = vec![seen.number[first as usize], seen.number[other as usize]];
            (list, seen.mesh.positions[v as usize])
        });
    }
}

fn crossings(seen: &AsRead, tree: &Tree, book: &mut Book) {
    let m = &seen.mesh;
    let found = tree.overlapping_pairs(|a, b, out: &mut Vec<(bool, u32, u32)>| {
        match pair(&m.positions, m.triangles[a as usize], m.triangles[b as usize]) {
            Pair::Apart => {}
            Pair::Same => out.push((true, a, b)),
            Pair::Crossing => out.push((false, a, b)),
        }
    });
    for (same, a, b) in found {
        let kind = if same { FaultKind::DuplicateTriangle } else { FaultKind::Crossing };
        book.add(kind, || {
            let (x, y) = (centroid(m, a), centroid(m, b));
            // The middle of the smaller triangle is nearer to the place where they meet.
            let small = measure::doubled_area_vector(&m.corners(a as usize)).norm_squared()
                <= measure::doubled_area_vector(&m.corners(b as usize)).norm_squared();
            (vec![seen.number[a as usize], seen.number[b as usize]], if small { x } else { y })
        });
    }
}

fn centroid(mesh: &TriMesh, t: u32) -> Vec3 {
    let [a, b, c] = mesh.corners(t as usize);
    (a + b + c) / 3.0
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::mesh::shapes;

    fn only(mesh: &TriMesh, kind: FaultKind, n: usize) -> Audit {
        let a = audit(mesh);
        for k in FaultKind::ALL {
            assert_eq!(a.count(k), if k == kind { n } else { 0 }, "{k:?}: {a}");
        }
        assert!(!a.is_solid());
        assert_eq!(a.faults.iter().filter(|f| f.kind == kind).count(), n.min(KEPT_PER_KIND));
        a
    }

    fn cube(at: f64) -> TriMesh {
        shapes::cuboid(Vec3::repeat(at), Vec3::repeat(at + 2.0))
    }

    #[test]
    fn sound_solids_pass_with_their_shells() {
        let ball = audit(&shapes::icosphere(10.0, 4));
        assert!(ball.is_solid() && ball.euler == 2 && ball.shells.len() == 1 && ball.chambers() == 0);
        let ring = audit(&shapes::torus(30.0, 10.0, 48, 24));
        assert!(ring.is_solid() && ring.euler == 0);
        let shell = audit(&shapes::sphere_shell(10.0, 8.0, 3));
        assert!(shell.is_solid() && shell.euler == 4 && shell.chambers() == 1, "{shell}");
        assert_eq!(shell.shells[1].covered, 1);
        assert!(audit(&shapes::cone_on_tip(20.0, 20.0, 32)).is_solid());
        assert!(audit(&shapes::prism(20.0, 5.0, 32)).is_solid());
        // A loose ball inside a chamber, and two balls side by side, are solids.
        let nested = shapes::joined(&[shapes::sphere_shell(10.0, 8.0, 3), shapes::icosphere(5.0, 2)]);
        assert!(audit(&nested).is_solid());
        assert!(audit(&shapes::joined(&[cube(0.0), cube(3.0)])).is_solid());
        assert!(!audit(&TriMesh::default()).is_solid());
    }

    #[test]
    fn a_missing_triangle_leaves_three_open_edges() {
        let mut m = cube(0.0);
        m.triangles.remove(5);
        let a = only(&m, FaultKind::OpenEdge, 3);
        assert!(a.to_string().starts_with("3 open edges, the first at ("), "{a}");
        assert!(a.shells.is_empty());
    }

    #[test]
    fn a_turned_triangle_disagrees_with_its_three_neighbours() {
        let mut m = cube(0.0);
        m.triangles[3].swap(0, 1);
        let a = only(&m, FaultKind::MisorientedEdge, 3);
        assert!(a.faults.iter().all(|f| f.triangles.contains(&3)));
    }

    #[test]
    fn tetrahedra_that_share_an_edge_or_a_vertex() {
        let (o, x, y, z) = (Vec3::zeros(), Vec3::x(), Vec3::y(), Vec3::z());
        let a = shapes::tetrahedron(o, x, y, z);
        let edge = shapes::joined(&[a.clone(), shapes::tetrahedron(o, z, -x, -y)]);
        let found = only(&edge, FaultKind::CrowdedEdge, 1);
        assert_eq!(found.faults[0].triangles.len(), 4);
        assert!((found.faults[0].place_mm - z * 0.5).norm() < 1e-12);
        let vertex = shapes::joined(&[a, shapes::tetrahedron(o, -y, -x, -z)]);
        let found = only(&vertex, FaultKind::PinchedVertex, 1);
        assert_eq!(found.faults[0].place_mm, o);
    }

    #[test]
    fn an_edge_used_four_times_by_index() {
        // Two boxes along one edge: (2, 2, z) is shared.
        let m =
            shapes::joined(&[cube(0.0), shapes::cuboid(Vec3::new(2.0, 2.0, 0.0), Vec3::new(4.0, 4.0, 2.0))]);
        only(&m, FaultKind::CrowdedEdge, 1);
    }

    #[test]
    fn crossing_boxes_are_seen_and_placed() {
        let m = shapes::joined(&[cube(0.0), cube(1.25)]);
        let a = audit(&m);
        assert!(a.count(FaultKind::Crossing) > 0 && a.count(FaultKind::Crossing) == a.total(), "{a}");
        assert!(a.faults.iter().all(|f| f.triangles[0] < 12 && f.triangles[1] >= 12));
    }

    #[test]
    fn boxes_that_touch_in_a_plane_or_at_a_point_are_seen() {
        let on_top = shapes::cuboid(Vec3::new(0.5, 0.5, 2.0), Vec3::new(1.25, 1.0, 3.0));
        let a = audit(&shapes::joined(&[cube(0.0), on_top]));
        assert!(a.count(FaultKind::Crossing) > 0, "{a}");
        // A tip standing on the middle of a face: only the tip touches.
        let tip = shapes::moved(&shapes::cone_on_tip(0.5, 1.0, 8), Vec3::new(1.5, 0.75, 2.0));
        let a = audit(&shapes::joined(&[cube(0.0), tip.clone()]));
        assert_eq!(a.count(FaultKind::Crossing), 8, "{a}");
        let lifted = shapes::moved(&tip, Vec3::new(0.0, 0.0, 4e-16));
        assert!(audit(&shapes::joined(&[cube(0.0), lifted])).is_solid());
    }

    #[test]
    fn doubled_folded_and_flat_triangles() {
        let mut m = cube(0.0);
        m.triangles.push(m.triangles[2]);
        let a = audit(&m);
        assert_eq!(a.count(FaultKind::DuplicateTriangle), 1);
        assert_eq!(a.count(FaultKind::CrowdedEdge), 3);
        // A coin without thickness: each triangle lies on its twin.
        let coin =
            shapes::from_triangles(vec![Vec3::zeros(), Vec3::x(), Vec3::y()], vec![[0, 1, 2], [0, 2, 1]]);
        assert_eq!(audit(&coin).count(FaultKind::DuplicateTriangle), 1);
        // Folded flat: a tetrahedron pressed into its base.
        let flat = shapes::tetrahedron(Vec3::zeros(), Vec3::x(), Vec3::y(), Vec3::new(0.25, 0.25, 0.0));
        assert!(audit(&flat).count(FaultKind::Crossing) >= 3);
        // Three corners on a line.
        let mut line = cube(0.0);
        line.positions.push(Vec3::new(1.0, 0.0, 0.0));
        line.triangles.push([0, 8, 1]);
        assert_eq!(audit(&line).count(FaultKind::ZeroArea), 1);
    }

    #[test]
    fn bad_numbers_are_reported_and_left_out() {
        let mut m = cube(0.0);
        m.positions.push(Vec3::new(f64::NAN, 0.0, 0.0));
        m.triangles.extend([[0, 1, 8], [0, 1, 99], [4, 4, 5]]);
        let a = audit(&m);
        for k in [FaultKind::NotFinite, FaultKind::IndexOutOfRange, FaultKind::RepeatedCorner] {
            assert_eq!(a.count(k), 1, "{a}");
        }
        assert_eq!(a.total(), 3);
    }

    #[test]
    fn points_that_only_their_numbers_keep_apart_are_one() {
        // Every triangle with corners of its own, as a file without indices has it: still a solid.
        let c = cube(0.0);
        let soup = shapes::from_triangles(
            (0..12).flat_map(|t| c.corners(t)).collect(),
            (0..12).map(|t| [3 * t, 3 * t + 1, 3 * t + 2]).collect(),
        );
        let a = audit(&soup);
        assert!(a.is_solid() && a.vertices == 8, "{a}");
        // Two boxes that meet in one corner, numbered apart: pinched.
        only(&shapes::joined(&[cube(0.0), cube(2.0)]), FaultKind::PinchedVertex, 1);
    }

    #[test]
    fn inside_out_and_swapped_shells_are_seen() {
        only(&shapes::flipped(&shapes::icosphere(3.0, 2)), FaultKind::InsideOut, 1);
        let both = shapes::joined(&[shapes::icosphere(3.0, 2), shapes::icosphere(2.0, 2)]);
        only(&both, FaultKind::InsideOut, 1);
        let swapped = shapes::flipped(&shapes::sphere_shell(3.0, 2.0, 2));
        only(&swapped, FaultKind::InsideOut, 2);
        let outside = shapes::joined(&[
            shapes::icosphere(3.0, 2),
            shapes::moved(&shapes::flipped(&shapes::icosphere(2.0, 2)), Vec3::x() * 9.0),
        ]);
        only(&outside, FaultKind::InsideOut, 1);
    }

    #[test]
    fn more_faults_than_are_kept_are_counted() {
        let a = audit(&shapes::sheet(1.0, 1.0, 400));
        assert_eq!(a.count(FaultKind::OpenEdge), 1600);
        assert_eq!(a.faults.len(), KEPT_PER_KIND);
    }

    #[test]
    fn the_audit_does_not_depend_on_the_number_of_threads() {
        let m = shapes::joined(&[shapes::icosphere(10.0, 4), shapes::torus(10.0, 3.0, 60, 30)]);
        let in_pool = |n: usize| {
            let pool = rayon::ThreadPoolBuilder::new().num_threads(n).build().unwrap();
            pool.install(|| audit(&m))
        };
        let one = in_pool(1);
        assert!(one.count(FaultKind::Crossing) > 100);
        assert_eq!(one, in_pool(3));
    }
}
