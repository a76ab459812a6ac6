//! Sealed chambers: how many, how large, where, and what they keep for the process.

use super::body::Body;
use super::mesh_audit::{as_number, plural};
use super::{Finding, Verdict};
use crate::geom::Vec3;
use crate::mesh::TriMesh;
use crate::profile::{Profile, Trapped};
use crate::units::{Quantity, Unit};

/// Most chambers that get a finding of their own.
const MOST_LISTED: usize = 24;
/// Triangles of a chamber tried for a point well inside it.
const TRIES: usize = 64;

/// A bounded region of air inside the solid.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Chamber {
    /// Volume of its air, mm3: material floating inside is not counted.
    pub volume_mm3: f64,
    /// A point in its air, away from the walls, mm.
    pub inside_mm: Vec3,
}

/// Finds the sealed chambers of a solid, largest first.
///
/// A chamber is a shell that lies inside an odd number of other shells. The inside point is the middle of
/// the free path from one of up to 64 triangles across the chamber, the one farthest from any wall.
///
/// - `mesh`: closed, oriented, free of crossings; otherwise the answer means nothing (but there is one).
#[must_use]
pub fn chambers(mesh: &TriMesh) -> Vec<Chamber> {
    Body::new(mesh).map(|b| of_body(&b)).unwrap_or_default()
}

fn of_body(body: &Body<'_>) -> Vec<Chamber> {
    let mut all: Vec<Chamber> = (0..body.parts.len())
        .filter(|&i| body.nests[i].depth % 2 == 1)
        .map(|i| {
            let floating: f64 = (0..body.parts.len())
                .filter(|&j| body.nests[j].parent == Some(i))
                .map(|j| body.parts[j].volume_mm3.abs())
                .sum();
            Chamber { volume_mm3: body.parts[i].volume_mm3.abs() - floating, inside_mm: inside(body, i) }
        })
        .collect();
    all.sort_by(|a, b| b.volume_mm3.total_cmp(&a.volume_mm3));
    all
}

fn inside(body: &Body<'_>, part: usize) -> Vec3 {
    let triangles = &body.parts[part].triangles;
    let step = triangles.len().div_ceil(TRIES).max(1);
    let mut best = (f64::NEG_INFINITY, body.middle(triangles[0] as usize));
    for &t in triangles.iter().step_by(step) {
        let (from, normal) = (body.middle(t as usize), body.normals[t as usize]);
        let Some(hit) = body.tree.ray(&from, &normal, 0.0, f64::INFINITY, |s| s == t) else { continue };
        let middle = from + normal * (0.5 * hit.t);
        let free = body.tree.closest(&middle, f64::INFINITY).map_or(0.0, |h| h.distance);
        if free > best.0 {
            best = (free, middle);
        }
    }
    best.1
}

/// The findings `chambers-sealed` (their number), then `chamber-volume` for each, largest first.
pub(super) fn findings(body: &Body<'_>, profile: &Profile) -> Vec<Finding> {
    let all = of_body(body);
    let (verdict, meaning, advice) = judged(profile);
    let source = profile
        .drain_mm
        .as_ref()
        .map_or_else(|| "common practice, no source".to_owned(), |d| format!("escape hole: {}", d.source));
    let total: f64 = all.iter().map(|c| c.volume_mm3).sum();
    let n = all.len();
    let mut out = vec![Finding {
        check: "chambers-sealed",
        verdict: if n == 0 { Verdict::Pass } else { verdict },
        value: as_number(n),
        limit: Some(0.0),
        unit: Unit::Count,
        place_mm: all.first().map(|c| c.inside_mm),
        message: if n == 0 {
            "No chamber is sealed: all air inside reaches the outside.".to_owned()
        } else {
            let seals = if n == 1 { "is" } else { "are" };
            format!(
                "{n} chamber{}, {} together, {seals} sealed; {meaning}.",
                plural(n),
                Quantity::new(total, Unit::Mm3)
            )
        },
        advice: if n == 0 { String::new() } else { advice },
        source: source.clone(),
    }];
    for (i, c) in all.iter().take(MOST_LISTED).enumerate() {
        let more = if i + 1 == MOST_LISTED && n > MOST_LISTED {
            format!(" ({} smaller ones are not listed)", n - MOST_LISTED)
        } else {
            String::new()
        };
        out.push(Finding {
            check: "chamber-volume",
            verdict,
            value: c.volume_mm3,
            limit: None,
            unit: Unit::Mm3,
            place_mm: Some(c.inside_mm),
            message: format!(
                "Sealed chamber {} of {n} holds {}{more}.",
                i + 1,
                Quantity::new(c.volume_mm3, Unit::Mm3)
            ),
            advice: String::new(),
            source: source.clone(),
        });
    }
    out
}

/// Verdict on a sealed chamber, what it keeps, and what to change.
fn judged(profile: &Profile) -> (Verdict, &'static str, String) {
    let hole = match (&profile.drain_mm, &profile.drain_count) {
        (Some(d), Some(c)) => format!("{} opening(s) of {} each", c.value, Quantity::new(d.value, Unit::Mm)),
        (Some(d), None) => format!("an opening of {}", Quantity::new(d.value, Unit::Mm)),
        (None, _) => "an opening".to_owned(),
    };
    let open =
        format!("Give every chamber {hole}, or choose a process that keeps only air, such as mex-pla.");
    match profile.trapped {
        Trapped::Air => (
            Verdict::Caution,
            "air and every support built inside stay there, and nobody can see in",
            format!("Give every chamber {hole} if its inside is to be seen or its supports removed."),
        ),
        Trapped::Powder => (Verdict::Fail, "loose powder cannot leave", open),
        Trapped::Resin => (Verdict::Fail, "uncured resin cannot leave", open),
        Trapped::Support => (Verdict::Fail, "support material cannot be washed out", open),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::mesh::shapes;
    use approx::assert_relative_eq;

    fn profile(name: &str) -> Profile {
        Profile::built_in(name).unwrap()
    }

    #[test]
    fn a_shell_has_one_chamber_of_its_inner_ball_with_the_centre_inside() {
        let mesh = shapes::sphere_shell(41.0, 39.0, 5);
        let all = chambers(&mesh);
        assert_eq!(all.len(), 1);
        let ball = 4.0 / 3.0 * std::f64::consts::PI * 39.0_f64.powi(3);
        assert_relative_eq!(all[0].volume_mm3, ball, max_relative = 1e-3);
        assert!(all[0].inside_mm.norm() < 1.0, "{}", all[0].inside_mm);
    }

    #[test]
    fn two_boxes_in_a_box_and_one_with_a_floating_core() {
        let v = |x: f64, y: f64, z: f64| Vec3::new(x, y, z);
        let void = |a: Vec3, b: Vec3| shapes::flipped(&shapes::cuboid(a, b));
        let mesh = shapes::joined(&[
            shapes::cuboid(v(0.0, 0.0, 0.0), v(30.0, 12.0, 12.0)),
            void(v(2.0, 2.0, 2.0), v(4.0, 4.0, 4.0)),
            void(v(10.0, 1.0, 1.0), v(20.0, 11.0, 11.0)),
            shapes::cuboid(v(14.0, 5.0, 5.0), v(15.0, 6.0, 6.0)),
        ]);
        let all = chambers(&mesh);
        assert_eq!(all.len(), 2);
        assert_relative_eq!(all[0].volume_mm3, 999.0, max_relative = 1e-12);
        assert_relative_eq!(all[1].volume_mm3, 8.0, max_relative = 1e-12);
        let p = all[1].inside_mm;
        assert!((0..3).all(|k| p[k] > 2.0 && p[k] < 4.0), "{p}");
        let p = all[0].inside_mm;
        assert!(
            p.x > 10.0
                && p.x < 20.0
                && (0..3).any(|k| p[k] < [14.0, 5.0, 5.0][k] || p[k] > [15.0, 6.0, 6.0][k])
        );
    }

    #[test]
    fn powder_resin_and_support_fail_and_air_is_a_caution() {
        let mesh = shapes::sphere_shell(10.0, 8.0, 2);
        let body = Body::new(&mesh).unwrap();
        let first = |name: &str| findings(&body, &profile(name)).remove(0);
        assert_eq!(first("mex-pla").verdict, Verdict::Caution);
        for (name, what) in [
            ("pbf-pa12", "powder"),
            ("vpp-resin", "resin"),
            ("mjt-resin", "support"),
            ("bjt-sand-or-gypsum", "powder"),
        ] {
            let f = first(name);
            assert_eq!(f.verdict, Verdict::Fail, "{name}");
            assert!(f.message.starts_with("1 chamber, ") && f.message.contains(what), "{}", f.message);
        }
        let f = first("pbf-pa12");
        assert!(f.advice.contains("2 opening(s) of 5.00 mm each") && f.source.contains("PL 3DP"), "{f:?}");
        assert_eq!(findings(&body, &profile("mex-pla")).len(), 2);
    }

    #[test]
    fn an_open_solid_has_no_chamber() {
        let mesh = shapes::torus(20.0, 5.0, 24, 12);
        let f = findings(&Body::new(&mesh).unwrap(), &profile("pbf-pa12"));
        assert_eq!(f.len(), 1);
        assert_eq!(f[0].verdict, Verdict::Pass);
        assert!(chambers(&TriMesh::default()).is_empty());
    }

    #[test]
    fn many_chambers_are_listed_up_to_a_number() {
        let mut all = vec![shapes::cuboid(Vec3::zeros(), Vec3::new(62.0, 2.0, 2.0))];
        for i in 0..30 {
            let low = Vec3::new(1.0 + 2.0 * f64::from(i), 0.5, 0.5);
            all.push(shapes::flipped(&shapes::cuboid(low, low + Vec3::repeat(1.0))));
        }
        let mesh = shapes::joined(&all);
        let f = findings(&Body::new(&mesh).unwrap(), &profile("mex-pla"));
        assert_eq!(f.len(), 25);
        assert!((f[0].value - 30.0).abs() < f64::EPSILON);
        assert!(f[24].message.contains("6 smaller ones are not listed"));
    }
}
