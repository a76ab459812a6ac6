//! The thinnest wall, held against the profile and against what was asked for.

use super::body::Body;
use super::wall_measure::{WallFigures, WallPlace, of_body};
use super::{AskedWall, CheckInput, Finding, Verdict};
use crate::profile::Profile;
use crate::units::{Quantity, Unit};

/// The findings `wall-ball` and `wall-ray` against the profile, `wall-asked` against the wall asked for, and
/// `wall-edges` for information when there are edges thinner than either.
///
/// Below the limit of a supported wall: fail. Between it and the limit of an unsupported wall: caution.
/// Thinner than asked, less twice the tolerance: caution.
pub(super) fn findings(body: &Body<'_>, input: &CheckInput<'_>) -> Vec<Finding> {
    let asked = input.asked.as_ref().map_or(0.0, least_asked);
    let limit = input.profile.wall_unsupported_mm.value.max(asked);
    let figures = of_body(body, limit);
    let mut out = Vec::new();
    for (check, how, place) in
        [("wall-ball", "inscribed balls", figures.ball), ("wall-ray", "rays", figures.ray)]
    {
        out.push(match place {
            Some(place) => against_profile(check, how, &place, &figures, input),
            None => Finding::information(
                check,
                0.0,
                Unit::Count,
                format!("No wall was found by {how}: no two parts of the surface face each other."),
                Finding::OWN_RULE.to_owned(),
            ),
        });
    }
    if let (Some(asked), Some(ball)) = (&input.asked, &figures.ball) {
        out.push(against_asked(asked, ball));
    }
    if let Some(edge) = &figures.edge {
        out.push(edges(edge, &figures, limit));
    }
    out
}

fn edges(edge: &WallPlace, figures: &WallFigures, limit: f64) -> Finding {
    Finding {
        place_mm: Some(edge.place_mm),
        ..Finding::information(
            "wall-edges",
            edge.thickness_mm,
            Unit::Mm,
            format!(
                "Edges and teeth thinner than {} that stand on thicker material take {:.2} % of the surface, the \
                 thinnest {:.4} mm; they are not counted as walls and print blunt or not at all.",
                Quantity::new(limit, Unit::Mm),
                100.0 * figures.edge_share,
                edge.thickness_mm
            ),
            Finding::OWN_RULE.to_owned(),
        )
    }
}

fn against_profile(
    check: &'static str,
    how: &str,
    place: &WallPlace,
    figures: &WallFigures,
    input: &CheckInput<'_>,
) -> Finding {
    let profile = input.profile;
    let (supported, unsupported) = (&profile.wall_supported_mm, &profile.wall_unsupported_mm);
    let thickness = place.thickness_mm;
    let (verdict, limit, meaning) = if thickness < supported.value {
        (Verdict::Fail, supported, "below the limit for a wall attached on two sides or more")
    } else if thickness < unsupported.value {
        (Verdict::Caution, unsupported, "below the limit for a wall attached on fewer than two sides")
    } else {
        (Verdict::Pass, supported, "not below the limit")
    };
    let share = figures.thin_share;
    let spread = if verdict == Verdict::Pass {
        String::new()
    } else if share > 0.0 {
        format!(" {:.2} % of the surface lies over walls below the limits.", 100.0 * share)
    } else {
        " It is a small place.".to_owned()
    };
    Finding {
        check,
        verdict,
        value: thickness,
        limit: Some(limit.value),
        unit: Unit::Mm,
        place_mm: Some(place.place_mm),
        message: format!(
            "The thinnest wall by {how} is {}, {meaning}, {}.{spread}",
            Quantity::new(thickness, Unit::Mm),
            Quantity::new(limit.value, Unit::Mm)
        ),
        advice: if verdict == Verdict::Pass { String::new() } else { advice(thickness, limit.value, input) },
        source: limit.source.clone(),
    }
}

fn advice(thickness: f64, limit: f64, input: &CheckInput<'_>) -> String {
    let other = other_process(thickness, input.profile);
    let change = match &input.asked {
        // What is missing is added to the wall asked for, rounded up to 0.1 mm.
        Some(a) => format!(
            "Raise wall_mm to at least {:.1}",
            ((a.wall_mm + limit - thickness).max(limit) * 10.0 - 1e-6).ceil() / 10.0
        ),
        None => format!("Make the wall at least {limit:.1} mm thick there"),
    };
    let size = if thickness > 0.0 && limit / thickness < 10.0 {
        format!(", or scale the part by {:.2}", (limit / thickness * 100.0).ceil() / 100.0)
    } else {
        String::new()
    };
    match other {
        Some(name) if input.asked.is_none() => format!("{change}{size}, or choose profile {name}."),
        Some(name) => format!("{change}, or choose profile {name}."),
        None if input.asked.is_none() => format!("{change}{size}."),
        None => format!("{change}."),
    }
}

/// The first embedded profile whose limits this thickness meets.
fn other_process(thickness: f64, profile: &Profile) -> Option<&'static str> {
    crate::profile::built_in_names().into_iter().find(|name| {
        *name != profile.name
            && Profile::built_in(name).is_some_and(|p| thickness >= p.wall_unsupported_mm.value)
    })
}

/// The thinnest wall that still counts as the one asked for, mm.
fn least_asked(asked: &AskedWall) -> f64 {
    (asked.wall_mm - 2.0 * asked.tolerance_mm).max(0.0)
}

fn against_asked(asked: &AskedWall, ball: &WallPlace) -> Finding {
    let limit = least_asked(asked);
    let thin = ball.thickness_mm < limit;
    let relation = if thin { "thinner" } else { "not thinner" };
    Finding {
        check: "wall-asked",
        verdict: if thin { Verdict::Caution } else { Verdict::Pass },
        value: ball.thickness_mm,
        limit: Some(limit),
        unit: Unit::Mm,
        place_mm: Some(ball.place_mm),
        message: format!(
            "The thinnest wall, {}, is {relation} than the wall asked for, {}, less twice the tolerance of {}.",
            Quantity::new(ball.thickness_mm, Unit::Mm),
            Quantity::new(asked.wall_mm, Unit::Mm),
            Quantity::new(asked.tolerance_mm, Unit::Mm)
        ),
        advice: if thin {
            "Lower grid_mm or tolerance_mm, so that the solid follows the exact one more closely.".to_owned()
        } else {
            String::new()
        },
        source: Finding::OWN_RULE.to_owned(),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::check::AuditFigures;
    use crate::mesh::{TriMesh, shapes};

    fn of(mesh: &TriMesh, name: &str, asked: Option<AskedWall>) -> Vec<Finding> {
        let profile = Profile::built_in(name).unwrap();
        let input =
            CheckInput { asked, ..CheckInput::from_elsewhere(mesh, AuditFigures::default(), &profile) };
        findings(&Body::new(mesh).unwrap(), &input)
    }

    #[test]
    fn a_wall_is_judged_by_both_limits_of_the_profile() {
        let shell = |t: f64| shapes::sphere_shell(20.0, 20.0 - t, 4);
        let all = of(&shell(2.4), "bjt-sand-or-gypsum", None);
        assert_eq!(all.len(), 2);
        assert!(all.iter().all(|f| f.verdict == Verdict::Caution && f.limit == Some(3.0)), "{all:?}");
        let all = of(&shell(1.8), "bjt-sand-or-gypsum", None);
        assert!(all.iter().all(|f| f.verdict == Verdict::Fail && f.limit == Some(2.0)), "{all:?}");
        assert!(all[0].advice.contains("2.0 mm thick there, or scale the part by 1.1"), "{}", all[0].advice);
        assert!(all[0].advice.contains("or choose profile mex-pla"), "{}", all[0].advice);
        assert!(all[0].source.contains("Neway"));
        assert!(all[0].message.contains("100.00 % of the surface"), "{}", all[0].message);
        assert!(of(&shell(2.4), "mex-pla", None).iter().all(|f| f.verdict == Verdict::Pass));
    }

    #[test]
    fn a_thin_wall_asked_for_is_told_what_to_raise() {
        let mesh = shapes::sphere_shell(20.0, 19.2, 5);
        let all = of(&mesh, "mex-pla", Some(AskedWall { wall_mm: 0.8, tolerance_mm: 0.05 }));
        assert_eq!(all.iter().map(|f| f.check).collect::<Vec<_>>(), ["wall-ball", "wall-ray", "wall-asked"]);
        assert_eq!(all[0].verdict, Verdict::Fail);
        assert!(all[0].advice.starts_with("Raise wall_mm to at least 1.3"), "{}", all[0].advice);
        assert_eq!(all[2].verdict, Verdict::Pass);
        let all = of(&mesh, "mex-pla", Some(AskedWall { wall_mm: 1.6, tolerance_mm: 0.05 }));
        assert_eq!(all[2].verdict, Verdict::Caution);
        assert_eq!(all[2].limit, Some(1.5));
    }

    #[test]
    fn a_solid_without_facing_parts_is_no_fault() {
        // The regular tetrahedron: outward normals are 109.5 degrees apart.
        let v = |x: f64, y: f64, z: f64| crate::geom::Vec3::new(x, y, z);
        let mesh =
            shapes::tetrahedron(v(1.0, 1.0, 1.0), v(-1.0, 1.0, -1.0), v(1.0, -1.0, -1.0), v(-1.0, -1.0, 1.0));
        let all = of(&mesh, "mex-pla", None);
        assert!(all.iter().all(|f| f.verdict == Verdict::Pass && f.limit.is_none()), "{all:?}");
    }
}
