//! Whether the part fits the machine, as it stands or turned about the vertical.

use super::{Finding, Verdict};
use crate::mesh::TriMesh;
use crate::profile::Profile;
use crate::units::{Quantity, Unit};

/// Turns about the vertical that are tried over half a turn.
const TURNS: u32 = 360;
/// Rounding allowed before an extent counts as too large, mm.
const ROUNDING_MM: f64 = 1e-3;

/// The finding `envelope`; none for a mesh without a finite extent.
pub(super) fn findings(mesh: &TriMesh, profile: &Profile) -> Option<Finding> {
    let used = mesh.triangles.iter().flatten().filter_map(|&i| mesh.positions.get(i as usize));
    let bounds = crate::geom::Aabb::around(used);
    let extent = bounds.extent();
    if bounds.is_empty() || !extent.iter().all(|x| x.is_finite()) {
        return None;
    }
    let limit = profile.envelope_mm;
    let ratio = |k: usize| extent[k] / limit[k];
    let worst = (0..3).fold(0, |a, k| if ratio(k) > ratio(a) { k } else { a });
    let fits = (0..3).all(|k| extent[k] <= limit[k] + ROUNDING_MM);
    let turn = if fits || extent.z > limit[2] + ROUNDING_MM { None } else { fitting_turn(mesh, limit) };
    let size = format!("{:.1} x {:.1} x {:.1} mm", extent.x, extent.y, extent.z);
    let room = format!("{} x {} x {} mm", limit[0], limit[1], limit[2]);
    let axis = ["x", "y", "z"][worst];
    let (verdict, message, advice) = match (fits, turn) {
        (true, _) => {
            (Verdict::Pass, format!("The part, {size}, fits the build envelope of {room}."), String::new())
        }
        (false, Some(deg)) => (
            Verdict::Caution,
            format!(
                "The part, {size}, fits the build envelope of {room} only when turned by {deg} deg about z."
            ),
            format!("Turn it by {deg} deg about the vertical on the build plate."),
        ),
        (false, None) => {
            let largest = extent.max();
            // Rounded down, so that what is advised does fit.
            let fitting = (largest / ratio(worst) * 10.0).floor() / 10.0;
            (
                Verdict::Fail,
                format!(
                    "The part, {size}, is larger than the build envelope of {room}: {} along {axis}, {} allowed.",
                    Quantity::new(extent[worst], Unit::Mm),
                    Quantity::new(limit[worst], Unit::Mm)
                ),
                format!(
                    "Lower size_mm so that the greatest extent is at most {fitting:.1} mm (now {largest:.1} mm), or \
                     use a profile with your machine's envelope_mm."
                ),
            )
        }
    };
    Some(Finding {
        check: "envelope",
        verdict,
        value: extent[worst],
        limit: Some(limit[worst]),
        unit: Unit::Mm,
        place_mm: None,
        message,
        advice,
        source: profile.envelope_source.clone(),
    })
}

/// The first turn about z, deg in 0..180, at which the footprint fits; widths are those of its convex hull.
fn fitting_turn(mesh: &TriMesh, limit: [f64; 3]) -> Option<f64> {
    let hull = hull(mesh);
    (1..TURNS).map(|i| f64::from(i) * 180.0 / f64::from(TURNS)).find(|deg| {
        let (s, c) = deg.to_radians().sin_cos();
        // A part turned by +deg has along x the width it had along (cos, -sin).
        width(&hull, c, -s) <= limit[0] + ROUNDING_MM && width(&hull, s, c) <= limit[1] + ROUNDING_MM
    })
}

fn width(points: &[[f64; 2]], x: f64, y: f64) -> f64 {
    let mut range = (f64::INFINITY, f64::NEG_INFINITY);
    for p in points {
        let at = p[0] * x + p[1] * y;
        range = (range.0.min(at), range.1.max(at));
    }
    range.1 - range.0
}

/// The convex hull of the footprint (Andrew's monotone chain).
fn hull(mesh: &TriMesh) -> Vec<[f64; 2]> {
    let mut points: Vec<[f64; 2]> = mesh
        .triangles
        .iter()
        .flatten()
        .filter_map(|&i| mesh.positions.get(i as usize))
        .map(|p| [p.x, p.y])
        .collect();
    points.sort_by(|a, b| a[0].total_cmp(&b[0]).then(a[1].total_cmp(&b[1])));
    points.dedup();
    let mut out: Vec<[f64; 2]> = Vec::new();
    for pass in 0..2 {
        let base = out.len() + 1;
        for p in &points {
            while out.len() > base && turn(out[out.len() - 2], out[out.len() - 1], *p) <= 0.0 {
                out.pop();
            }
            out.push(*p);
        }
        out.pop();
        if pass == 0 {
            points.reverse();
        }
    }
    out
}

fn turn(a: [f64; 2], b: [f64; 2], c: [f64; 2]) -> f64 {
    (b[0] - a[0]) * (c[1] - a[1]) - (b[1] - a[1]) * (c[0] - a[0])
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::geom::Vec3;
    use crate::mesh::shapes;

    fn of(x: f64, y: f64, z: f64, turned_deg: f64) -> Finding {
        let mesh = shapes::cuboid(Vec3::zeros(), Vec3::new(x, y, z));
        let mesh = shapes::turned(&mesh, Vec3::z() * turned_deg.to_radians());
        findings(&mesh, &Profile::built_in("mex-pla").unwrap()).unwrap()
    }

    #[test]
    fn the_envelope_is_met_exactly_and_just_missed() {
        assert_eq!(of(200.0, 200.0, 200.0, 0.0).verdict, Verdict::Pass);
        let f = of(100.0, 100.0, 201.0, 0.0);
        assert_eq!(f.verdict, Verdict::Fail);
        assert!((f.value - 201.0).abs() < 1e-9 && f.limit == Some(200.0));
        assert!(f.message.contains("201.00 mm along z, 200.00 mm allowed"), "{}", f.message);
        assert!(f.advice.contains("at most 200.0 mm (now 201.0 mm)"), "{}", f.advice);
        assert!(f.source.contains("Runsom"));
    }

    #[test]
    fn a_long_part_fits_along_the_diagonal() {
        // 240 x 20 at 45 deg needs (240 + 20) / sqrt 2 = 183.8 mm each way.
        let f = of(240.0, 20.0, 50.0, 0.0);
        assert_eq!(f.verdict, Verdict::Caution);
        assert!(f.advice.contains("deg about the vertical"));
        // At 45 deg it fits as it stands; 280 x 20 needs 212 mm and never fits.
        assert_eq!(of(240.0, 20.0, 50.0, 45.0).verdict, Verdict::Pass);
        assert_eq!(of(280.0, 20.0, 50.0, 0.0).verdict, Verdict::Fail);
    }

    #[test]
    fn the_turn_named_does_fit() {
        let mesh = shapes::cuboid(Vec3::zeros(), Vec3::new(240.0, 20.0, 5.0));
        let profile = Profile::built_in("mex-pla").unwrap();
        let deg = fitting_turn(&mesh, profile.envelope_mm).unwrap();
        let turned = shapes::turned(&mesh, Vec3::z() * deg.to_radians());
        assert_eq!(findings(&turned, &profile).unwrap().verdict, Verdict::Pass);
    }

    #[test]
    fn what_has_no_extent_has_no_finding() {
        let profile = Profile::built_in("mex-pla").unwrap();
        assert!(findings(&TriMesh::default(), &profile).is_none());
    }
}
