//! Whether the mesh bounds a solid: closed, two-manifold, oriented, free of crossings; its shells.

use super::body::Body;
use super::{CheckInput, Fault, Finding, Verdict};
use crate::units::Unit;

/// Where the demands on a mesh come from.
const SOURCE: &str = "3MF core specification 1.4.0, section 4.1: every edge belongs to two triangles that run \
                      through it opposite ways, normals face outward; crossings should not occur";

/// The findings `mesh-data`, `mesh-flat`, `mesh-closed`, `mesh-manifold`, `mesh-oriented`, `mesh-crossings`, then
/// `mesh-shells` and `mesh-euler` for information. An empty mesh has `mesh-data` alone.
pub(super) fn findings(input: &CheckInput<'_>) -> Vec<Finding> {
    let a = &input.audit;
    let bad = own_bad_triangles(input).map_or(a.bad_triangles, |own| own);
    if input.mesh.triangles.is_empty() {
        return vec![Finding {
            check: "mesh-data",
            verdict: Verdict::Fail,
            value: 0.0,
            limit: Some(4.0),
            unit: Unit::Count,
            place_mm: None,
            message: "The mesh has no triangle; a solid has 4 at least.".to_owned(),
            advice: "Give a file that holds a mesh.".to_owned(),
            source: "3MF core specification 1.4.0, section 4.1.3".to_owned(),
        }];
    }
    let manifold = Fault::new(
        a.crowded_edges.count + a.pinched_vertices.count,
        a.crowded_edges.place_mm.or(a.pinched_vertices.place_mm),
    );
    let mut all = vec![
        fault(
            "mesh-data",
            bad,
            "Every triangle has three different, finite corners.",
            ["triangle has", "triangles have"],
            "a corner that does not exist, is not finite or is named twice",
            "Write the file again; the program that wrote it left out or spoiled points.",
        ),
        fault(
            "mesh-flat",
            Fault::new(
                a.flat_triangles.count + a.doubled_triangles.count,
                a.flat_triangles.place_mm.or(a.doubled_triangles.place_mm),
            ),
            "Every triangle has an area and no two have the same corners.",
            ["triangle has", "triangles have"],
            "no area or the same corners as another, so no way to face",
            "Remove these triangles and join what they parted.",
        ),
        fault(
            "mesh-closed",
            a.open_edges,
            "The surface is closed: no edge belongs to one triangle only.",
            ["edge belongs", "edges belong"],
            "to one triangle only, so the surface has holes",
            "Close the holes: add the missing triangles, or give the surface a wall.",
        ),
        fault(
            "mesh-manifold",
            manifold,
            "The surface is a two-manifold: two triangles at every edge, one fan at every vertex.",
            ["edge or vertex is", "edges or vertices are"],
            "shared by more than two triangles or more than one fan, so inside and outside are not told apart there",
            "Part the sheets that touch there, or unite the pieces into one solid.",
        ),
        fault(
            "mesh-oriented",
            a.turned_edges,
            "Neighbouring triangles face the same way.",
            ["edge has", "edges have"],
            "two triangles that face opposite ways",
            "Turn the triangles that face the wrong way.",
        ),
        fault(
            "mesh-crossings",
            a.crossings,
            "No two triangles cross.",
            ["pair of triangles crosses", "pairs of triangles cross"],
            "each other, so what is material is told twice or not at all there",
            "Unite the crossing sheets into one solid before printing.",
        ),
    ];
    all.push(Finding::information(
        "mesh-shells",
        as_number(a.shells),
        Unit::Count,
        format!("The boundary has {} closed shell{}.", a.shells, plural(a.shells)),
        SOURCE.to_owned(),
    ));
    all.push(Finding::information(
        "mesh-euler",
        f64::from(i32::try_from(a.euler).unwrap_or(if a.euler < 0 { i32::MIN } else { i32::MAX })),
        Unit::Count,
        format!("The Euler number of the boundary is {} (2 for every shell that is a sphere).", a.euler),
        "Euler's formula, V - E + F".to_owned(),
    ));
    all
}

/// The finding `mesh-outward`: shells face outward, chambers face into their air.
pub(super) fn outward(body: &Body<'_>) -> Finding {
    let wrong: Vec<usize> = body.misplaced().collect();
    let place =
        wrong.first().and_then(|&i| body.parts[i].triangles.first()).map(|&t| body.middle(t as usize));
    let nested = wrong.iter().any(|&i| body.parts[i].volume_mm3 > 0.0);
    let advice = if nested {
        "Unite the solids that lie inside one another, or turn the inner shell so that it bounds a void."
    } else {
        "Turn the shell inside out so that its normals face away from the material."
    };
    fault(
        "mesh-outward",
        Fault::new(wrong.len(), place),
        "Every shell faces away from the material.",
        ["shell faces", "shells face"],
        "the wrong way for the place it is in, so material and air are exchanged",
        advice,
    )
}

/// Bad triangles found here, whatever the audit said: the other checks index the mesh with these numbers.
fn own_bad_triangles(input: &CheckInput<'_>) -> Option<Fault> {
    let mesh = input.mesh;
    let bad = |t: &&[u32; 3]| {
        t.iter().any(|&i| mesh.positions.get(i as usize).is_none_or(|p| !p.iter().all(|x| x.is_finite())))
    };
    let count = mesh.triangles.iter().filter(bad).count();
    (count > input.audit.bad_triangles.count).then_some(Fault::new(count, None))
}

fn fault(
    check: &'static str,
    fault: Fault,
    good: &str,
    [one, many]: [&str; 2],
    rest: &str,
    advice: &str,
) -> Finding {
    let n = fault.count;
    let clean = n == 0;
    Finding {
        check,
        verdict: if clean { Verdict::Pass } else { Verdict::Fail },
        value: as_number(n),
        limit: Some(0.0),
        unit: Unit::Count,
        place_mm: fault.place_mm.filter(|p| !clean && p.iter().all(|x| x.is_finite())),
        message: if clean {
            good.to_owned()
        } else {
            format!("{n} {} {rest}.", if n == 1 { one } else { many })
        },
        advice: if clean { String::new() } else { advice.to_owned() },
        source: SOURCE.to_owned(),
    }
}

pub(super) const fn plural(n: usize) -> &'static str {
    if n == 1 { "" } else { "s" }
}

/// A count as a number; counts of things in memory are far below 2^53.
pub(super) fn as_number(n: usize) -> f64 {
    u32::try_from(n).map_or(f64::from(u32::MAX), f64::from)
}
