//! A small set with planted figures, for `tests/reference/check_set.py`: spherical shells in all three formats.
//!
//! `check_set.py target/tmp/reference-set` must pass, with `--self-test` too, and so must `check_measures.py`.

use super::{corner, three_mf};
use serde_json::json;
use sha2::{Digest, Sha256};
use stagewright::check::{self, AuditFigures, CheckInput};
use stagewright::export::{ObjInfo, SideColours, write_mtl, write_obj, write_stl};
use stagewright::mesh::shapes::{flipped, icosphere, joined, on_side};
use stagewright::mesh::{Side, TriMesh, measure};
use stagewright::profile::Profile;
use std::fs::{self, File};
use std::path::Path;

const TITLE: &str = "Planted <shells> & \"corner\"";

fn profile() -> Profile {
    Profile::built_in("mex-pla").unwrap()
}

fn hex(path: &Path) -> String {
    Sha256::digest(fs::read(path).unwrap()).iter().map(|b| format!("{b:02x}")).collect()
}

fn stage(folder: &Path, index: usize, mesh: &TriMesh, shells: usize, chambers: usize) -> serde_json::Value {
    let name = format!("{index:02}-tau-0.410");
    let file = |extension: &str| folder.join(format!("{name}.{extension}"));
    write_stl(mesh, File::create(file("stl")).unwrap()).unwrap();
    let info = ObjInfo {
        object: name.clone(),
        material_file: Some(format!("{name}.mtl")),
        comments: vec![TITLE.to_owned()],
    };
    write_obj(mesh, &info, File::create(file("obj")).unwrap()).unwrap();
    write_mtl(&SideColours::default(), File::create(file("mtl")).unwrap()).unwrap();
    fs::write(file("3mf"), three_mf(mesh, TITLE)).unwrap();
    let bounds = mesh.bounds();
    let profile = profile();
    let audit = AuditFigures::clean(shells, i64::try_from(2 * shells).unwrap());
    let findings: Vec<_> = check::run(&CheckInput::from_elsewhere(mesh, audit, &profile))
        .iter()
        .map(|f| {
            json!({"check": f.check, "verdict": f.verdict.word(), "value": f.value, "limit": f.limit,
                "unit": f.unit.symbol(), "place_mm": f.place_mm.map(|p| [p.x, p.y, p.z]), "source": f.source})
        })
        .collect();
    let volume = measure::enclosed_volume(mesh).unwrap();
    let each = |f: &dyn Fn(&str) -> String| json!({"stl": f("stl"), "obj": f("obj"), "3mf": f("3mf")});
    json!({
        "index": index,
        "tau": 0.41,
        "files": each(&|e| format!("{name}.{e}")),
        "sha256": each(&|e| hex(&file(e))),
        "placement": [[0.0, -2.0, 0.0, 1.0], [2.0, 0.0, 0.0, 2.0], [0.0, 0.0, 2.0, 3.0]],
        "solid": {
            "triangles": mesh.triangles.len(),
            "vertices": mesh.positions.len(),
            "volume_mm3": volume,
            "area_mm2": measure::area(mesh),
            "bbox_mm": [[bounds.min.x, bounds.min.y, bounds.min.z], [bounds.max.x, bounds.max.y, bounds.max.z]],
            "shells": shells,
            "chambers": chambers,
            "euler": 2 * shells,
            "mass_g": volume * profile.density_g_cm3.value / 1000.0,
        },
        "findings": findings,
    })
}

#[test]
fn a_planted_set_is_written_for_the_reference_checks() {
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join("reference-set");
    fs::create_dir_all(&folder).unwrap();
    let outer = |r, level| on_side(&icosphere(r, level), Side::A);
    let inner = |r, level| on_side(&flipped(&icosphere(r, level)), Side::B);
    let shell = joined(&[outer(20.0, 4), inner(18.0, 4)]);
    let nested = joined(&[
        outer(20.0, 4),
        inner(18.0, 4),
        outer(10.0, 3),
        inner(8.0, 3),
        on_side(&icosphere(2.0, 1), Side::Fixture),
    ]);
    let stages = [
        stage(&folder, 1, &corner(), 1, 0),
        stage(&folder, 2, &nested, 5, 2),
        stage(&folder, 3, &shell, 2, 1),
    ];
    let set = json!({"schema": 1, "title": TITLE, "failures": [], "stages": stages, "verdict": "pass",
        "profile": {"name": "mex-pla", "density_g_cm3": profile().density_g_cm3.value}});
    fs::write(folder.join("set.json"), serde_json::to_string_pretty(&set).unwrap()).unwrap();
    let volume = set["stages"][2]["solid"]["volume_mm3"].as_f64().unwrap();
    // (4 pi / 3) (20^3 - 18^3) = 9080.0 mm3; level 4 of the icosphere loses 0.4 %.
    assert!((volume / 9080.0 - 1.0).abs() < 0.01, "{volume}");
}
