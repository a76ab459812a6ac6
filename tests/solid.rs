//! The mesher on fields and stages whose volume and topology are known beforehand.
#![allow(clippy::unwrap_used, missing_docs, reason = "test code")]

use proptest::prelude::*;
use stagewright::field::{Field, LocalField, Sample, SheetField};
use stagewright::geom::{Aabb, Placed, Placement, Vec3};
use stagewright::mesh::{Side, TriMesh, measure};
use stagewright::skin;
use stagewright::solid::{Audit, GridError, GridSettings, audit, finish, solidify};
use std::f64::consts::PI;

/// A wall around a sphere or a torus, or a slab: value and gradient.
#[derive(Clone, Copy, Debug)]
enum Piece {
    Sphere { centre: Vec3, radius: f64, half_wall: f64 },
    Torus { centre: Vec3, axis: Vec3, major: f64, minor: f64, half_wall: f64 },
    Ball { centre: Vec3, radius: f64 },
    Slab { normal: Vec3, at: f64, half_wall: f64 },
}

impl Piece {
    fn at(&self, p: &Vec3) -> (f64, Vec3) {
        let unit = |v: Vec3| v.try_normalize(1e-300).unwrap_or_else(Vec3::z);
        match *self {
            Self::Sphere { centre, radius, half_wall } => {
                let d = p - centre;
                let h = d.norm() - radius;
                (h.abs() - half_wall, unit(d) * h.signum())
            }
            Self::Torus { centre, axis, major, minor, half_wall } => {
                let d = p - centre;
                let z = d.dot(&axis);
                let ring = unit(d - axis * z) * major;
                let e = d - ring;
                let h = e.norm() - minor;
                (h.abs() - half_wall, unit(e) * h.signum())
            }
            Self::Ball { centre, radius } => ((p - centre).norm() - radius, unit(p - centre)),
            Self::Slab { normal, at, half_wall } => {
                let h = p.dot(&normal) - at;
                (h.abs() - half_wall, normal * h.signum())
            }
        }
    }
}

/// The union of pieces, cut to a ball so that slabs end.
struct Union {
    pieces: Vec<Piece>,
    bounds: Aabb,
    cut: Option<(Vec3, f64)>,
}

impl Union {
    fn of(pieces: &[Piece]) -> Self {
        let mut bounds = Aabb::EMPTY;
        for p in pieces {
            let (c, r) = match *p {
                Piece::Sphere { centre, radius, half_wall } => (centre, radius + half_wall),
                Piece::Torus { centre, major, minor, half_wall, .. } => (centre, major + minor + half_wall),
                Piece::Ball { centre, radius } => (centre, radius),
                Piece::Slab { .. } => (Vec3::zeros(), 0.0),
            };
            bounds.include(&(c + Vec3::repeat(r)));
            bounds.include(&(c - Vec3::repeat(r)));
        }
        Self { pieces: pieces.to_vec(), bounds, cut: None }
    }

    fn cut_to(mut self, centre: Vec3, radius: f64) -> Self {
        self.bounds = Aabb { min: centre, max: centre }.grown(radius);
        self.cut = Some((centre, radius));
        self
    }

    fn sample_piece(&self, k: u32, p: &Vec3) -> Sample {
        let (value, gradient) = match (self.pieces.get(k as usize), self.cut) {
            (Some(piece), _) => piece.at(p),
            (None, Some((centre, radius))) => Piece::Ball { centre, radius }.at(p),
            (None, None) => (f64::INFINITY, Vec3::z()),
        };
        Sample { value, gradient, side: Side::A, piece: k }
    }

    fn all(&self, p: &Vec3) -> Sample {
        let least = |a: Sample, b: Sample| if b.value < a.value { b } else { a };
        let n = u32::try_from(self.pieces.len()).unwrap();
        let union = (0..n).map(|k| self.sample_piece(k, p)).reduce(least).unwrap();
        match self.cut {
            Some(_) => {
                let ball = self.sample_piece(n, p);
                if ball.value > union.value { ball } else { union }
            }
            None => union,
        }
    }
}

impl Field for Union {
    fn bounds(&self) -> Aabb {
        self.bounds
    }

    fn within(&self, _: &Aabb) -> Box<dyn LocalField<'_> + '_> {
        Box::new(Near(self))
    }

    fn accuracy_mm(&self) -> f64 {
        1e-9
    }
}

struct Near<'f>(&'f Union);

impl<'f> LocalField<'f> for Near<'f> {
    fn narrowed(&self, _: &Aabb) -> Box<dyn LocalField<'f> + 'f> {
        Box::new(Near(self.0))
    }

    fn range(&self, region: &Aabb) -> (f64, f64) {
        let (v, r) = (self.value(&region.centre()), 0.5 * region.extent().norm());
        (v - r, v + r)
    }

    fn value(&self, p: &Vec3) -> f64 {
        self.0.all(p).value
    }

    fn sample(&self, p: &Vec3) -> Sample {
        self.0.all(p)
    }

    fn piece(&self, piece: u32, p: &Vec3) -> Sample {
        self.0.sample_piece(piece, p)
    }

    fn facing(&self, p: &Vec3, gradient: &Vec3) -> f64 {
        (0..self.0.pieces.len())
            .map(|k| self.0.pieces[k].at(p))
            .filter(|(_, g)| g.dot(gradient) < -0.5)
            .map(|(v, _)| v)
            .fold(f64::INFINITY, f64::min)
    }
}

fn mesh_of(field: &dyn Field, cell_mm: f64) -> (TriMesh, Audit) {
    let meshed = solidify(field, &GridSettings { cell_mm, crumb_mm3: 0.5 }).unwrap();
    let report = audit(&meshed.mesh);
    assert!(report.is_solid(), "{report}");
    // What is written is what was audited: rounding and welding change nothing.
    assert_eq!(finish(&meshed.mesh).triangles.len(), meshed.mesh.triangles.len());
    (meshed.mesh, report)
}

fn assert_close(value: f64, exact: f64, relative: f64) {
    assert!(
        (value / exact - 1.0).abs() < relative,
        "{value} against {exact}: off by {:e}",
        value / exact - 1.0
    );
}

/// Generic and grid-aligned positions: aligned puts centres on nodes and makes radii whole cells.
fn shifts() -> [Vec3; 2] {
    [Vec3::new(0.137, -0.291, 0.419), Vec3::zeros()]
}

/// Weyl's tube formula, 2 a A + (4 pi / 3) chi a^3 (H. Weyl, Amer. J. Math. 61, 1939).
#[test]
fn a_sphere_shell_has_the_volume_of_weyls_formula_and_two_shells() {
    let exact = 22_627.844_686; // R = 30, a = 1
    assert_close(8.0 * PI * 900.0 + 4.0 * PI / 3.0 * 2.0, exact, 1e-9);
    for shift in shifts() {
        let field = Union::of(&[Piece::Sphere { centre: shift, radius: 30.0, half_wall: 1.0 }]);
        let (mesh, report) = mesh_of(&field, 0.5);
        assert_eq!((report.shells.len(), report.chambers(), report.euler), (2, 1, 4));
        assert_close(measure::enclosed_volume(&mesh).unwrap(), exact, 1e-4);
    }
}

#[test]
fn a_torus_shell_has_the_volume_of_weyls_formula_and_euler_number_zero() {
    let exact = 23_687.050_563; // R = 30, r = 10, a = 1: chi = 0
    assert_close(2.0 * 4.0 * PI * PI * 300.0, exact, 1e-9);
    for (shift, axis) in [(shifts()[0], Vec3::new(2.0, 1.0, 2.0) / 3.0), (Vec3::zeros(), Vec3::z())] {
        let torus = Piece::Torus { centre: shift, axis, major: 30.0, minor: 10.0, half_wall: 1.0 };
        let (mesh, report) = mesh_of(&Union::of(&[torus]), 0.5);
        assert_eq!((report.shells.len(), report.chambers(), report.euler), (2, 1, 0));
        assert_close(measure::enclosed_volume(&mesh).unwrap(), exact, 2e-4);
    }
}

/// The overlap of two crossing walls is 8 pi a^2 R^2 / d exactly (lens formulas; derived for this project).
/// Euler number of the image = 2 + number of triple points (Izumiya & Marar, Proc. AMS 118, 1993, from
/// memory), here summed over two spheres joined in a circle: 2 + 2 - 0.
#[test]
fn two_crossing_spheres_have_the_exact_union_volume_and_four_shells() {
    let (r, a, d) = (30.0, 1.0, 30.0);
    let exact = 2.0 * (8.0 * PI * a * r * r + 8.0 * PI / 3.0 * a * a * a) - 8.0 * PI * a * a * r * r / d;
    assert_close(exact, 44_501.707_1, 1e-8);
    for (shift, along) in [(shifts()[0], Vec3::new(6.0, 2.0, 3.0) / 7.0), (Vec3::zeros(), Vec3::x())] {
        let sphere = |centre| Piece::Sphere { centre, radius: r, half_wall: a };
        let (mesh, report) = mesh_of(&Union::of(&[sphere(shift), sphere(shift + along * d)]), 0.5);
        assert_eq!((report.shells.len(), report.chambers(), report.euler), (4, 3, 8));
        assert_close(measure::enclosed_volume(&mesh).unwrap(), exact, 5e-4);
    }
}

/// Three spheres with two triple points: 8 regions, Euler number of the solid 8, of its boundary 16.
#[test]
fn three_crossing_spheres_have_eight_shells() {
    let turned = nalgebra::Rotation3::from_euler_angles(0.3, 0.5, 0.7);
    for rotation in [turned, nalgebra::Rotation3::identity()] {
        let at =
            |k: f64| rotation * Vec3::new((k * 2.0 * PI / 3.0).cos(), (k * 2.0 * PI / 3.0).sin(), 0.0) * 14.0;
        let sphere = |k| Piece::Sphere { centre: at(k), radius: 24.0, half_wall: 0.9 };
        for cell in [0.45, 0.8] {
            let (_, report) = mesh_of(&Union::of(&[sphere(0.0), sphere(1.0), sphere(2.0)]), cell);
            assert_eq!((report.shells.len(), report.chambers(), report.euler), (8, 7, 16), "cell {cell}");
        }
    }
}

/// Faces of slabs that run exactly through nodes, and exact zeros at nodes.
#[test]
fn planes_through_nodes_make_clean_slabs() {
    let slab = |normal, at, half_wall| Piece::Slab { normal, at, half_wall };
    let crossed = [slab(Vec3::x(), 0.0, 1.0), slab(Vec3::y(), 0.0, 1.0), slab(Vec3::z(), 3.0, 0.5)];
    let field = Union::of(&crossed).cut_to(Vec3::zeros(), 10.0);
    let (mesh, _) = mesh_of(&field, 0.5);
    let flat = mesh.positions.iter().filter(|p| p.norm() < 9.0 && p.z.abs() < 2.0);
    // On the flat faces every vertex sits on its node, a thousandth of a cell away at most.
    assert!(flat.map(|p| field.all(p).value.abs()).fold(0.0, f64::max) < 1e-3 * 0.5 + 1e-6);
}

/// Where walls cross, the mesh follows the crease in the cells it can be drawn in (about half of them) and
/// cuts it off in the others by less than half a cell, as marching cubes does everywhere.
#[test]
fn creases_are_cut_off_by_less_than_half_a_cell() {
    let sphere = |x| Piece::Sphere { centre: Vec3::new(x, 0.1, 0.2), radius: 20.0, half_wall: 1.2 };
    let field = Union::of(&[sphere(-9.3), sphere(11.2)]);
    let (mesh, _) = mesh_of(&field, 0.6);
    let off = |p: &Vec3| field.all(p).value.abs();
    let middle = |t: usize| mesh.corners(t).iter().sum::<Vec3>() / 3.0;
    let worst = (0..mesh.triangles.len()).map(|t| off(&middle(t))).fold(0.0, f64::max);
    let mut all: Vec<f64> = (0..mesh.triangles.len()).map(|t| off(&middle(t))).collect();
    all.sort_by(f64::total_cmp);
    println!("centroids: worst {worst:.4} mm, 99.9 % {:.4} mm", all[all.len() * 999 / 1000]);
    assert!(worst < 0.45 * 0.6, "{worst} mm");
    // The smooth parts: a triangle with edges up to sqrt(2) h leaves radius r by less than h^2 / (2 r).
    let smooth = all[all.len() * 95 / 100];
    assert!(smooth < 0.6 * 0.6 / (2.0 * 18.8), "{smooth} mm");
}

fn stage_solid(order: u32, tau: f64, cell: f64) -> (TriMesh, Audit, f64) {
    let family = skin::family("ruled", order).unwrap();
    let stage = family.stage(tau);
    let bounds = skin::extent(stage.as_ref());
    let scale = (120.0 - 2.4) / bounds.extent().amax();
    let shift = -bounds.min * scale + Vec3::repeat(1.2);
    let placed = Placed::new(stage.as_ref(), Placement { scale, shift, ..Placement::identity() });
    let skin_mesh = skin::sample(&placed, 0.1 * cell, 1_000_000).unwrap();
    let field = SheetField::new(&skin_mesh, Some(&placed), 2.4).unwrap();
    let meshed = solidify(&field, &GridSettings { cell_mm: cell, crumb_mm3: 0.5 }).unwrap();
    let mut off: Vec<f64> =
        meshed.mesh.positions.iter().step_by(7).map(|p| meshed.probe.sample(p).value.abs()).collect();
    off.sort_by(f64::total_cmp);
    let report = audit(&meshed.mesh);
    assert!(report.is_solid(), "{report}");
    (meshed.mesh, report, off[off.len() * 99 / 100])
}

/// chi(boundary) = 4 + 2 T (Izumiya & Marar 1993): T = 4 at order 2, tau 0.41; T = 20 at order 3, tau 0.4. The
/// halfway model of order 2 with its quadruple point has 9 chambers and Euler number 20, as every grid from
/// 0.3 to 1 mm and two other libraries at some of theirs agree.
#[test]
fn stages_at_120_mm_have_the_shells_of_their_crossings() {
    for (order, tau, cell, shells, euler) in
        [(2, 0.5, 1.0, 10, 20), (2, 0.41, 0.8, 7, 12), (3, 0.4, 0.6, 22, 44), (2, 0.0, 1.0, 2, 4)]
    {
        let (mesh, report, off) = stage_solid(order, tau, cell);
        assert_eq!((report.shells.len(), report.euler), (shells, euler), "order {order}, tau {tau}");
        assert!(off < 2e-3, "order {order}, tau {tau}: {off} mm at 99 % of the vertices");
        let extent = mesh.bounds().extent().amax();
        assert!((extent - 120.0).abs() < 0.05, "{extent} mm");
    }
}

#[test]
fn the_mesh_does_not_depend_on_the_number_of_threads() {
    let make = |threads| {
        let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().unwrap();
        pool.install(|| stage_solid(2, 0.31, 1.2).0)
    };
    let one = make(1);
    assert!(one == make(2) && one == make(4));
}

#[test]
fn impossible_grids_are_refused() {
    let ball = Union::of(&[Piece::Ball { centre: Vec3::zeros(), radius: 5.0 }]);
    let ask =
        |cell_mm| solidify(&ball, &GridSettings { cell_mm, crumb_mm3: 0.0 }).map(|m| m.mesh.triangles.len());
    for cell in [0.0, -1.0, f64::NAN, f64::INFINITY] {
        assert!(matches!(ask(cell), Err(GridError::Cell(_))), "{cell}");
    }
    assert!(matches!(ask(1e-4), Err(GridError::TooFine { .. })));
    let nothing = Union::of(&[Piece::Ball { centre: Vec3::repeat(0.4), radius: 1e-3 }]);
    let empty = solidify(&nothing, &GridSettings { cell_mm: 1.0, crumb_mm3: 0.0 });
    assert!(matches!(empty.map(|_| ()), Err(GridError::Empty(_))));
}

fn any_piece() -> impl Strategy<Value = Piece> {
    // Small integers: planes through nodes, tangent spheres and coincident pieces come up often.
    let point = (-4i8..=4, -4i8..=4, -4i8..=4).prop_map(|(x, y, z)| Vec3::new(x.into(), y.into(), z.into()));
    let wall = prop_oneof![Just(0.5), Just(1.0), Just(1e-310), Just(0.0), 0.3..1.5];
    let axis = prop_oneof![Just(Vec3::x()), Just(Vec3::z()), Just(Vec3::new(2.0, 1.0, 2.0) / 3.0)];
    prop_oneof![
        (point.clone(), 1i8..6, wall.clone()).prop_map(|(centre, r, half_wall)| Piece::Sphere {
            centre,
            radius: r.into(),
            half_wall
        }),
        (point.clone(), 1i8..4).prop_map(|(centre, r)| Piece::Ball { centre, radius: r.into() }),
        (point, axis.clone(), 3i8..6, 1i8..3, wall.clone()).prop_map(
            |(centre, axis, major, minor, half_wall)| {
                Piece::Torus { centre, axis, major: major.into(), minor: minor.into(), half_wall }
            }
        ),
        (axis, -3i8..3, wall).prop_map(|(normal, at, half_wall)| Piece::Slab {
            normal,
            at: at.into(),
            half_wall
        }),
    ]
}

proptest! {
    #![proptest_config(ProptestConfig { failure_persistence: None, ..ProptestConfig::with_cases(150) })]
    /// Whatever the field, what comes out is a solid.
    #[test]
    fn every_union_of_pieces_meshes_to_a_solid(
        pieces in prop::collection::vec(any_piece(), 1..5),
        cell in prop_oneof![Just(0.5), Just(1.0), 0.4..1.1],
    ) {
        let field = Union::of(&pieces).cut_to(Vec3::zeros(), 9.0);
        if let Ok(meshed) = solidify(&field, &GridSettings { cell_mm: cell, crumb_mm3: 0.0 }) {
            let report = audit(&meshed.mesh);
            prop_assert!(report.is_solid(), "{}", report);
        }
    }
}
