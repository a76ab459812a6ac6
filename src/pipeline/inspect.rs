//! Every check on a mesh, wherever it comes from.

use super::audit_figures;
use crate::check::{self, CheckInput, Finding};
use crate::mesh::{TriMesh, components};
use crate::profile::Profile;
use crate::solid::audit;

/// Audits `mesh` and makes every check against `profile`; +z is the build direction.
///
/// The mesh may be anything: what is wrong with it is told by the findings.
#[must_use]
pub fn inspect(mesh: &TriMesh, profile: &Profile) -> Vec<Finding> {
    let mut figures = audit_figures(&audit(mesh));
    if figures.shells == 0 {
        // The audit tells shells only where every edge is matched.
        figures.shells = components(mesh).len();
    }
    check::run(&CheckInput::from_elsewhere(mesh, figures, profile))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::check::Verdict;
    use crate::geom::Vec3;
    use crate::mesh::Side;

    /// A corner cut off a cube, 10 mm along each axis.
    fn corner() -> TriMesh {
        TriMesh {
            positions: vec![Vec3::zeros(), Vec3::x() * 10.0, Vec3::y() * 10.0, Vec3::z() * 10.0],
            triangles: vec![[0, 2, 1], [0, 1, 3], [0, 3, 2], [1, 2, 3]],
            sides: vec![Side::Fixture; 4],
        }
    }

    fn failed(mesh: &TriMesh) -> Vec<&'static str> {
        let findings = inspect(mesh, &Profile::built_in("mex-pla").unwrap());
        findings.iter().filter(|f| f.verdict == Verdict::Fail).map(|f| f.check).collect()
    }

    #[test]
    fn broken_meshes_are_told_what_is_wrong() {
        assert!(failed(&corner()).iter().all(|c| !c.starts_with("mesh-")), "{:?}", failed(&corner()));
        let mut open = corner();
        open.triangles.pop();
        open.sides.pop();
        assert!(failed(&open).contains(&"mesh-closed"));
        let mut turned = corner();
        turned.triangles[3] = [1, 3, 2];
        assert!(failed(&turned).contains(&"mesh-oriented"));
        let mut spoiled = corner();
        spoiled.positions[1].x = f64::NAN;
        assert!(failed(&spoiled).contains(&"mesh-data"));
        let mut missing = corner();
        missing.triangles[0][0] = 99;
        assert!(failed(&missing).contains(&"mesh-data"));
        let mut crossing = corner();
        let second: Vec<Vec3> = crossing.positions.iter().map(|p| p + Vec3::repeat(1.0)).collect();
        crossing.positions.extend(second);
        crossing.triangles.extend(corner().triangles.iter().map(|t| t.map(|i| i + 4)));
        crossing.sides.extend(corner().sides);
        assert!(failed(&crossing).contains(&"mesh-crossings"));
        let mut inward = corner();
        inward.triangles.iter_mut().for_each(|t| t.swap(0, 1));
        assert!(!failed(&inward).is_empty());
        assert!(!failed(&TriMesh::default()).is_empty());
    }
}
