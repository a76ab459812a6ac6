//! Where two sheets of a skin lie so close that one wall swallows both.

use super::extent::enclosing_ball;
use super::family::Family;
use super::sample::{SampleError, sample};
use super::sphere::SphereGrid;
use crate::geom::{Placed, Placement, Surface, Vec3, gauss_legendre, tangent_frame};
use crate::mesh::{SkinMesh, Tree, TriMesh};
use rayon::prelude::*;

/// Two sheets count as parallel when their normals' lines are within this angle: cosine of 20 degrees.
const COS_PARALLEL: f64 = 0.939_692_620_785_908_4;
/// The skin is sampled to this share of the wall, or of the ball's radius if that is more.
const CHORD_OF_WALL: f64 = 1.0 / 16.0;
const CHORD_OF_RADIUS: f64 = 1.0 / 2000.0;
/// Enough for the finest chord above; a skin that needs more is refused.
const MAX_TRIANGLES: usize = 2_000_000;
/// Nodes of the mean distance: the absolute value limits it to about 1e-3 of its value.
const MEAN_NODES: usize = 32;
const MEAN_LONGITUDES: u32 = 90;
/// Steps of tau in the search for a better time.
const TAU_STEP: f64 = 0.005;

/// How much of a skin runs along another sheet of itself.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SheetOverlap {
    /// The wall it was measured for, mm.
    pub wall_mm: f64,
    /// Share of the area, 0..=1, with another sheet within 20 degrees of parallel less than a wall away
    /// along the normal. A few per cent is the rule near tangencies; near 1 the two sides cannot both be seen.
    pub share: f64,
    /// Whether every point of the skin is the image of two opposite points of the sphere, to 1e-9 of the size.
    pub double_cover: bool,
    /// For a family whose halfway stage is a double cover: mean distance of the two sheets along the normal, mm.
    pub mean_distance_mm: Option<f64>,
    /// The point of the unit sphere where the overlapping sheet is nearest.
    pub nearest_at: Option<Vec3>,
    /// The times before and after 1/2 at which the two sheets are a wall apart on average, at the same
    /// scale; `None` when they already are, or the family has no double cover, or no time would do.
    pub suggested_times: Option<[f64; 2]>,
}

/// Measures how much of a stage runs along another sheet.
///
/// - `tau`: time, 0..=1.
/// - `mm_per_unit`: scale from the family's own coordinates, > 0.
/// - `wall_mm`: the wall, > 0.
///
/// Lines along the normal at triangle centres of a sampled skin (chord wall / 16, or radius / 2000 if
/// that is more) are followed for a wall to both sides; triangles that touch the own one do not count.
///
/// # Errors
/// As [`sample`]; a wall or scale that is not positive appears as its chord bound.
pub fn sheet_overlap(
    family: &dyn Family,
    tau: f64,
    mm_per_unit: f64,
    wall_mm: f64,
) -> Result<SheetOverlap, SampleError> {
    let stage = family.stage(tau);
    let surface = Placed::new(stage.as_ref(), Placement { scale: mm_per_unit, ..Placement::identity() });
    let size = enclosing_ball(stage.as_ref()).radius * mm_per_unit;
    let chord = if wall_mm > 0.0 { (wall_mm * CHORD_OF_WALL).max(size * CHORD_OF_RADIUS) } else { wall_mm };
    let skin = sample(&surface, chord, MAX_TRIANGLES)?;
    let (share, nearest_at) = share_near_another_sheet(&skin, wall_mm);
    let grid = SphereGrid::new(4);
    let apart = grid.map(|p| (surface.position(*p) - surface.position(-p)).norm());
    let double_cover = apart.iter().all(|d| *d <= 1e-9 * size);
    let mut overlap = SheetOverlap {
        wall_mm,
        share,
        double_cover,
        mean_distance_mm: None,
        nearest_at,
        suggested_times: None,
    };
    if family.halfway_is_double_cover() {
        let mean = |tau: f64| mm_per_unit * mean_distance(family.stage(tau).as_ref());
        let now = mean(tau);
        overlap.mean_distance_mm = Some(now);
        if now < wall_mm {
            overlap.suggested_times = time_with_distance(mean, wall_mm).map(|t| [t, 1.0 - t]);
        }
    }
    Ok(overlap)
}

/// The share of the area with a parallel sheet within `wall`, and the parameter of the nearest such place.
fn share_near_another_sheet(skin: &SkinMesh, wall: f64) -> (f64, Option<Vec3>) {
    let mesh = TriMesh {
        positions: skin.positions.clone(),
        triangles: skin.triangles.clone(),
        sides: vec![crate::mesh::Side::A; skin.triangles.len()],
    };
    let tree = Tree::build(&mesh);
    let flat: Vec<(Vec3, Vec3)> = (0..mesh.triangles.len())
        .map(|t| {
            let [a, b, c] = mesh.corners(t);
            ((a + b + c) / 3.0, 0.5 * (b - a).cross(&(c - a)))
        })
        .collect();
    let found: Vec<Option<f64>> = (0..flat.len())
        .into_par_iter()
        .map(|t| {
            let (centre, area) = &flat[t];
            let normal = area / area.norm();
            let own = mesh.triangles[t];
            tree.ray_all(&(centre - normal * wall), &normal, 0.0, 2.0 * wall)
                .iter()
                .filter(|hit| {
                    let other = hit.triangle as usize;
                    let n = flat[other].1;
                    !mesh.triangles[other].iter().any(|v| own.contains(v))
                        && n.dot(&normal).abs() > COS_PARALLEL * n.norm()
                })
                .map(|hit| (hit.t - wall).abs())
                .min_by(f64::total_cmp)
        })
        .collect();
    let (mut near, mut all) = (0.0, 0.0);
    let mut nearest: Option<(f64, usize)> = None;
    for (t, distance) in found.iter().enumerate() {
        let area = flat[t].1.norm();
        all += area;
        if let Some(d) = *distance {
            near += area;
            if nearest.is_none_or(|(least, _)| d < least) {
                nearest = Some((d, t));
            }
        }
    }
    let parameter = |t: usize| {
        let [p, q, r] = mesh.triangles[t].map(|v| skin.parameters[v as usize]);
        (p + q + r).normalize()
    };
    (near / all, nearest.map(|(_, t)| parameter(t)))
}

/// Mean over the area of |(F(p) - F(-p)) . N(p)|, family coordinates. The two images of opposite points
/// also slide along the sheets, so their plain distance is about 1.4 times as much.
fn mean_distance(surface: &dyn Surface) -> f64 {
    let (mut sum, mut all) = (0.0, 0.0);
    for (z, weight) in gauss_legendre(MEAN_NODES) {
        let rho = (1.0 - z * z).sqrt();
        for k in 0..MEAN_LONGITUDES {
            let (s, c) = (std::f64::consts::TAU * f64::from(k) / f64::from(MEAN_LONGITUDES)).sin_cos();
            let p = Vec3::new(rho * c, rho * s, z);
            let (e1, e2) = tangent_frame(&p);
            let jet = surface.first(p, e1, e2);
            let area = jet.d1.cross(&jet.d2);
            sum += weight * (jet.position - surface.position(-p)).dot(&area).abs();
            all += weight * area.norm();
        }
    }
    sum / all
}

/// The largest time below 1/2 at which `mean` reaches `wall`.
fn time_with_distance(mean: impl Fn(f64) -> f64, wall: f64) -> Option<f64> {
    let mut steps = 1.0;
    while mean(0.5 - steps * TAU_STEP) < wall {
        steps += 1.0;
        if steps * TAU_STEP > 0.5 {
            return None;
        }
    }
    let (mut enough, mut short) = (0.5 - steps * TAU_STEP, 0.5 - (steps - 1.0) * TAU_STEP);
    for _ in 0..20 {
        let middle = 0.5 * (enough + short);
        if mean(middle) < wall {
            short = middle;
        } else {
            enough = middle;
        }
    }
    Some(enough)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::skin::Ruled;

    #[test]
    fn the_order_3_halfway_stage_lies_on_itself_everywhere() {
        let family = Ruled::new(3).unwrap();
        let o = sheet_overlap(&family, 0.5, 60.0 / 0.6202, 2.4).unwrap();
        assert!(o.double_cover && o.share > 0.999, "{o:?}");
        assert!(o.mean_distance_mm.unwrap() < 1e-9);
        // the distance grows by 0.974 D for each unit of tau (measured with 100 x 200 nodes at tau = 0.49)
        let [before, after] = o.suggested_times.unwrap();
        let expected = 2.4 / (0.974 * 120.0);
        assert!(((0.5 - before) / expected - 1.0).abs() < 0.03, "{before} against {}", 0.5 - expected);
        assert!((before + after - 1.0).abs() < 1e-15);
    }

    #[test]
    fn the_round_sphere_has_no_second_sheet() {
        let o = sheet_overlap(&Ruled::new(3).unwrap(), 0.0, 60.0, 2.4).unwrap();
        assert!(!o.double_cover && o.share <= 0.0 && o.nearest_at.is_none() && o.suggested_times.is_none());
    }

    #[test]
    fn order_2_halfway_overlaps_near_its_tangencies_only() {
        let o = sheet_overlap(&Ruled::new(2).unwrap(), 0.5, 60.0 / 0.8134, 2.4).unwrap();
        println!("{o:?}");
        assert!(!o.double_cover && o.share > 0.001 && o.share < 0.2, "{o:?}");
        assert!(o.mean_distance_mm.is_none());
    }

    #[test]
    fn the_suggested_time_helps() {
        let family = Ruled::new(5).unwrap();
        let scale = 60.0 / 0.714;
        let close = sheet_overlap(&family, 0.499, scale, 2.0).unwrap();
        let [better, _] = close.suggested_times.unwrap();
        let apart = sheet_overlap(&family, better, scale, 2.0).unwrap();
        println!("{close:?} {apart:?}");
        assert!(close.share > 0.9 && apart.share < 0.75 * close.share, "{} {}", close.share, apart.share);
        assert!((apart.mean_distance_mm.unwrap() - 2.0).abs() < 1e-3);
        assert!(!close.double_cover);
    }

    #[test]
    fn a_wall_that_is_no_length_is_refused() {
        let family = Ruled::new(3).unwrap();
        for wall in [0.0, -2.0, f64::NAN] {
            assert!(matches!(sheet_overlap(&family, 0.4, 60.0, wall), Err(SampleError::Chord { .. })));
        }
    }
}
