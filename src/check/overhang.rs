//! Surface that faces down too flatly to be printed without support, and the support it takes.
//!
//! The angle is that between the surface and the HORIZONTAL: 0 for a ceiling, 90 degrees for a plumb wall. The build
//! direction is +z and the build plate is the plane of the lowest point.

use super::body::Body;
use super::{Finding, Verdict};
use crate::geom::Vec3;
use crate::mesh::TriMesh;
use crate::profile::Profile;
use crate::units::{Quantity, Unit};
use rayon::prelude::*;

/// A surface this little below the limit still counts as at the limit, deg: coordinates rounded to f32 turn facets of
/// 0.3 mm at 100 mm by about 0.001 deg.
const TIE_DEG: f64 = 0.01;
/// A triangle with all corners this near to the plate rests on it, mm.
const RESTING_MM: f64 = 1e-3;
/// Fewest columns over the whole overhanging surface, and most in one triangle.
const COLUMNS: (f64, u32) = (40_000.0, 4096);

/// Overhang on one kind of surface.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct OverhangPart {
    /// Its area, mm2.
    pub area_mm2: f64,
    /// Volume straight below it, down to the part below or the plate, mm3.
    pub support_mm3: f64,
    /// Where most support stands: the middle of the triangle with the largest column, mm.
    pub place_mm: Option<Vec3>,
}

/// Overhang of a solid for the build direction +z.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct OverhangFigures {
    /// On the outer surface.
    pub outside: OverhangPart,
    /// On the walls of sealed chambers (and of what floats in them).
    pub inside: OverhangPart,
    /// Area of the whole surface, chambers included, mm2.
    pub surface_mm2: f64,
}

/// Measures the overhang of a solid: triangles that face down at less than `limit_deg` from the horizontal, those
/// resting on the plate left out, and the volume straight below them.
///
/// The volume is the sum over the triangles of the prism between the triangle and what is below it, its upper end
/// exact. Its lower end is exact where it is the plate; where it is another part of the solid it is taken from
/// vertical rays at points spread evenly over the triangle (40,000 or more over the whole overhang, one at
/// least in each triangle), so the error there is that of a mean over these points.
///
/// - `mesh`: closed, outward, free of crossings; otherwise the figures mean nothing (but there are some).
/// - `limit_deg`: above 0, up to 90. A surface exactly at the limit (to 0.01 deg) needs no support.
#[must_use]
pub fn overhang(mesh: &TriMesh, limit_deg: f64) -> OverhangFigures {
    Body::new(mesh).map(|b| of_body(&b, limit_deg)).unwrap_or_default()
}

fn of_body(body: &Body<'_>, limit_deg: f64) -> OverhangFigures {
    let plate = body.mesh.bounds().min.z;
    let mut facets: Vec<(usize, bool)> = Vec::new();
    for (i, part) in body.parts.iter().enumerate() {
        let inside = body.is_inside(i);
        facets.extend(part.triangles.iter().map(|&t| (t as usize, inside)));
    }
    facets.retain(|&(t, _)| needs_support(body, t, plate, limit_deg));
    let shadow: f64 = facets.iter().map(|&(t, _)| -body.normals[t].z * body.areas[t]).sum();
    let cell = shadow / COLUMNS.0;
    let columns: Vec<f64> =
        facets.par_iter().with_min_len(64).map(|&(t, _)| column(body, t, plate, cell)).collect();
    let mut figures = OverhangFigures { surface_mm2: body.area_mm2(), ..OverhangFigures::default() };
    let mut largest = [f64::NEG_INFINITY; 2];
    for (&(t, inside), volume) in facets.iter().zip(columns) {
        let part = if inside { &mut figures.inside } else { &mut figures.outside };
        part.area_mm2 += body.areas[t];
        part.support_mm3 += volume;
        if volume > largest[usize::from(inside)] {
            largest[usize::from(inside)] = volume;
            part.place_mm = Some(body.middle(t));
        }
    }
    figures
}

fn needs_support(body: &Body<'_>, t: usize, plate: f64, limit_deg: f64) -> bool {
    let n = body.normals[t];
    if n.z >= 0.0 {
        return false;
    }
    // From the horizontal part of the normal, too: acos alone loses half the digits near 0.
    let angle = n.xy().norm().atan2(-n.z).to_degrees();
    angle < limit_deg - TIE_DEG && body.mesh.corners(t).iter().any(|p| p.z > plate + RESTING_MM)
}

/// Volume straight below triangle `t`, mm3.
fn column(body: &Body<'_>, t: usize, plate: f64, cell: f64) -> f64 {
    let shadow = -body.normals[t].z * body.areas[t];
    let mut points = Vec::new();
    let number = u32::try_from(t).unwrap_or(u32::MAX);
    super::samples::in_triangle(body.mesh, number, shadow, columns_in(shadow, cell), &mut points);
    let top = body.middle(t).z;
    // The lower end: the plate, raised where a ray meets the part before. Its mean over the points.
    let raised: f64 = points.iter().map(|p| ground(body, &p.point, number, plate) - plate).sum();
    let count = f64::from(u32::try_from(points.len()).unwrap_or(u32::MAX).max(1));
    shadow * (top - plate - raised / count)
}

#[expect(clippy::cast_possible_truncation, reason = "clamped to 1..=4096 before the cast")]
fn columns_in(shadow: f64, cell: f64) -> u32 {
    if cell > 0.0 { (shadow / cell).ceil().clamp(1.0, f64::from(COLUMNS.1)) as u32 } else { 1 }
}

/// Height of the first upward surface straight below `from`, or of the plate.
fn ground(body: &Body<'_>, from: &Vec3, own: u32, plate: f64) -> f64 {
    // Triangles that face down are met only where the ray grazes the surface it starts from: look through them.
    let skip = |t: u32| t == own || body.normals[t as usize].z <= 0.0;
    let hit = body.tree.ray(from, &-Vec3::z(), 0.0, f64::INFINITY, skip);
    hit.map_or(plate, |h| (from.z - h.t).max(plate))
}

/// The findings `overhang-area` and `support-volume`, and the same for chambers (`-inside`) when there are any.
///
/// Overhang is a caution when its area is above the square of the smallest feature: it prints with support.
pub(super) fn findings(body: &Body<'_>, profile: &Profile) -> Vec<Finding> {
    let Some(limit) = &profile.overhang_deg else {
        return vec![Finding::information(
            "overhang-area",
            0.0,
            Unit::Mm2,
            format!(
                "Overhang needs no support: {} carries it in the material around the part.",
                profile.process
            ),
            "common practice, no source".to_owned(),
        )];
    };
    let figures = of_body(body, limit.value);
    let least = profile.feature_mm.value.powi(2);
    let mut out = judged(&figures.outside, &figures, false, limit.value, least, &limit.source);
    if figures.inside.area_mm2 > 0.0 {
        out.extend(judged(&figures.inside, &figures, true, limit.value, least, &limit.source));
    }
    out
}

fn judged(
    part: &OverhangPart,
    figures: &OverhangFigures,
    inside: bool,
    limit_deg: f64,
    least_mm2: f64,
    source: &str,
) -> Vec<Finding> {
    let much = part.area_mm2 > least_mm2;
    let verdict = if much { Verdict::Caution } else { Verdict::Pass };
    let percent = 100.0 * part.area_mm2 / figures.surface_mm2.max(f64::MIN_POSITIVE);
    let place = if inside { "inside sealed chambers, " } else { "" };
    let advice = match (much, inside) {
        (false, _) => "",
        (true, false) => "Print with support, or choose another [build] direction.",
        (true, true) => {
            "Support inside a sealed chamber can't be removed: choose another [build] direction, open the \
             chamber, or print without support there and accept sagging."
        }
    };
    let area = Finding {
        check: if inside { "overhang-area-inside" } else { "overhang-area" },
        verdict,
        value: part.area_mm2,
        limit: Some(least_mm2),
        unit: Unit::Mm2,
        place_mm: part.place_mm,
        message: format!(
            "{}{} ({percent:.1} % of the surface) {place}faces down at less than {limit_deg} deg from the \
             horizontal; up to {} (one smallest feature squared) is let pass.",
            if inside { "Overhang: " } else { "" },
            Quantity::new(part.area_mm2, Unit::Mm2),
            Quantity::new(least_mm2, Unit::Mm2)
        ),
        advice: advice.to_owned(),
        source: source.to_owned(),
    };
    let volume = Finding {
        place_mm: part.place_mm,
        ..Finding::information(
            if inside { "support-volume-inside" } else { "support-volume" },
            part.support_mm3,
            Unit::Mm3,
            format!(
                "Support {place}straight below the overhang, down to the part or the plate, fills {}.",
                Quantity::new(part.support_mm3, Unit::Mm3)
            ),
            source.to_owned(),
        )
    };
    vec![area, volume]
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::mesh::shapes;
    use approx::assert_relative_eq;

    /// Sphere of radius R on the plate, limit a: area 2 pi R^2 (1 - cos a), support straight down to the tangent
    /// plane pi R^3 sin^2 a - (2 pi R^3 / 3)(1 - cos^3 a). The figures are those of the project's reference table.
    #[test]
    fn a_sphere_has_the_exact_overhang_and_support_at_30_45_60_and_90_degrees() {
        let r = 20.0;
        let mesh = shapes::turned(&shapes::icosphere(r, 7), Vec3::new(0.1, 0.2, 0.3));
        let exact = [(30.0, 0.841_787, 0.051_353), (45.0, 1.840_302, 0.216_882)];
        let pi = std::f64::consts::PI;
        for (deg, area, support) in
            exact.into_iter().chain([(60.0, pi, pi / 6.0), (90.0, 2.0 * pi, pi / 3.0)])
        {
            let f = overhang(&mesh, deg);
            // Facets of 0.2 mm: the rim of the overhang is a jagged line that wide.
            assert_relative_eq!(f.outside.area_mm2, area * r * r, max_relative = 2e-3);
            assert_relative_eq!(f.outside.support_mm3, support * r.powi(3), max_relative = 3e-3);
            assert!(f.inside.area_mm2.abs() < f64::EPSILON);
        }
    }

    /// Cone on its tip, r = h = 20: the slope is exactly 45 degrees and 45 needs no support; just above it all of
    /// the lateral surface (1777.1532 mm2) does, with 2/3 pi r^2 h = 16755.1608 mm3 below.
    #[test]
    fn a_cone_of_45_degrees_is_a_tie_and_needs_no_support() {
        let mesh = shapes::cone_on_tip(20.0, 20.0, 512);
        let tie = overhang(&mesh, 45.0);
        assert!(tie.outside.area_mm2.abs() < f64::EPSILON && tie.outside.support_mm3.abs() < f64::EPSILON);
        let f = overhang(&mesh, 45.1);
        assert_relative_eq!(f.outside.area_mm2, 1777.1532, max_relative = 1e-4);
        assert_relative_eq!(f.outside.support_mm3, 16_755.160_8, max_relative = 1e-4);
        // Rounded to f32 and turned about z it stays a tie.
        let turned = shapes::mapped(&shapes::turned(&mesh, Vec3::z() * 0.7), |p| p.map(round));
        assert!(overhang(&turned, 45.0).outside.area_mm2.abs() < f64::EPSILON);
    }

    #[expect(clippy::cast_possible_truncation, reason = "rounding to f32 is the point")]
    fn round(x: f64) -> f64 {
        f64::from(x as f32)
    }

    #[test]
    fn what_rests_on_the_plate_is_no_overhang_and_a_table_top_is() {
        let v = |x: f64, y: f64, z: f64| Vec3::new(x, y, z);
        let block = shapes::cuboid(v(0.0, 0.0, 3.0), v(10.0, 10.0, 8.0));
        assert!(overhang(&block, 45.0).outside.area_mm2.abs() < f64::EPSILON);
        // A second block floats 4 mm above half of the first one: 50 mm2 reach the block, 50 mm2 the plate.
        let high = shapes::cuboid(v(5.0, 0.0, 12.0), v(15.0, 10.0, 14.0));
        let f = overhang(&shapes::joined(&[block, high]), 45.0);
        assert_relative_eq!(f.outside.area_mm2, 100.0, max_relative = 1e-12);
        // Exact: 50 x 4 + 50 x 9 = 650 mm3; rays decide on which half each of the 40,000 columns stands.
        assert_relative_eq!(f.outside.support_mm3, 650.0, max_relative = 2e-3);
        assert!(f.outside.place_mm.is_some_and(|p| (p.z - 12.0).abs() < 1e-12));
    }

    /// Chamber of a shell: its ceiling is a dome that needs support from the chamber's floor. Inner sphere of
    /// radius r, limit 90: the upper half faces down; the columns fill the chamber, 4/3 pi r^3.
    #[test]
    fn overhang_in_a_chamber_is_counted_apart_and_its_support_stands_in_the_chamber() {
        let mesh = shapes::turned(&shapes::sphere_shell(20.0, 18.0, 6), Vec3::new(0.1, 0.2, 0.3));
        let f = overhang(&mesh, 90.0);
        let pi = std::f64::consts::PI;
        assert_relative_eq!(f.inside.area_mm2, 2.0 * pi * 324.0, max_relative = 3e-3);
        assert_relative_eq!(f.inside.support_mm3, 4.0 / 3.0 * pi * 18.0_f64.powi(3), max_relative = 3e-3);
        assert_relative_eq!(f.outside.support_mm3, pi / 3.0 * 8000.0, max_relative = 3e-3);
    }

    #[test]
    fn findings_name_limit_angle_and_plane() {
        let mesh = shapes::sphere_shell(20.0, 18.0, 4);
        let body = Body::new(&mesh).unwrap();
        let all = findings(&body, &Profile::built_in("mex-pla").unwrap());
        let names: Vec<_> = all.iter().map(|f| f.check).collect();
        assert_eq!(
            names,
            ["overhang-area", "support-volume", "overhang-area-inside", "support-volume-inside"]
        );
        assert_eq!(all[0].verdict, Verdict::Caution);
        assert!(all[0].message.contains("less than 45 deg from the horizontal"), "{}", all[0].message);
        assert!(all[2].message.contains("inside sealed chambers"), "{}", all[2].message);
        let powder = findings(&body, &Profile::built_in("pbf-pa12").unwrap());
        assert_eq!(powder.len(), 1);
        assert_eq!(powder[0].verdict, Verdict::Pass);
        assert!(powder[0].message.contains("powder bed fusion carries it"));
    }
}
