//! An invented set with everything in it that a report can hold.

use stagewright::check::{Finding, Verdict};
use stagewright::geom::Vec3;
use stagewright::job::{Format, Job, Scale};
use stagewright::profile::{Limit, Profile, Trapped};
use stagewright::report::{RegularityRecord, SetRecord, SkinRecord, SolidRecord, StageRecord};
use stagewright::units::Unit;
use std::collections::BTreeMap;

fn limit(value: f64) -> Limit {
    Limit { value, source: "demo value".into() }
}

/// An invented profile.
pub(crate) fn profile() -> Profile {
    Profile {
        name: "demo".into(),
        title: "Demo extrusion".into(),
        process: "material extrusion".into(),
        process_code: "MEX".into(),
        material: "demo plastic".into(),
        trapped: Trapped::Air,
        wall_supported_mm: limit(1.2),
        wall_unsupported_mm: limit(1.6),
        clearance_mm: limit(0.4),
        feature_mm: limit(1.0),
        overhang_deg: Some(limit(45.0)),
        bridge_mm: Some(limit(10.0)),
        drain_mm: None,
        drain_count: None,
        text_stroke_mm: limit(0.6),
        layer_mm: limit(0.2),
        envelope_mm: [200.0; 3],
        envelope_source: "demo value".into(),
        density_g_cm3: limit(1.25),
        cautions: vec!["Ventilate the room while it prints.".into()],
    }
}

fn finding(check: &'static str, verdict: Verdict, value: f64, limit: Option<f64>, unit: Unit) -> Finding {
    Finding {
        check,
        verdict,
        value,
        limit,
        unit,
        place_mm: None,
        message: format!("{check}: measured {value}."),
        advice: if verdict == Verdict::Pass {
            String::new()
        } else {
            format!("Change what {check} asks for.")
        },
        source: "common practice, no source".into(),
    }
}

/// An invented stage: a sphere shell of radius 40 mm and wall 2 mm.
pub(crate) fn stage(index: usize, tau: f64) -> StageRecord {
    let name = |ext: &str| format!("{index:02}-tau-{tau:.3}.{ext}");
    let files: BTreeMap<_, _> = [("stl", name("stl")), ("3mf", name("3mf"))]
        .into_iter()
        .map(|(format, path)| (format.to_string(), path))
        .collect();
    let sha256 = files.keys().map(|format| (format.clone(), "0f".repeat(32))).collect();
    StageRecord {
        index,
        tau,
        files,
        sha256,
        placement: [[40.0, 0.0, -0.0, 0.0], [0.0, 40.0, 0.0, 0.0], [0.0, 0.0, 40.0, 41.0]],
        skin: SkinRecord {
            area_mm2: 20_106.193,
            signed_volume_mm3: 268_082.573,
            min_radius_mm: 40.0,
            regularity: RegularityRecord { fold_margin: Some(0.99), sigma_min: 0.174 },
        },
        solid: SolidRecord {
            triangles: 12_800,
            vertices: 6_404,
            volume_mm3: 40_220.8,
            area_mm2: 40_237.5,
            bbox_mm: [[-41.0, -41.0, 0.0], [41.0, 41.0, 82.0]],
            shells: 2,
            chambers: 1,
            euler: 4,
            mass_g: 50.276,
            deviation_mm: 0.012,
            grid_mm: 0.8,
        },
        findings: vec![
            finding("closed", Verdict::Pass, 0.0, Some(0.0), Unit::Count),
            finding("wall-ball", Verdict::Pass, 2.0, Some(1.2), Unit::Mm),
            Finding {
                place_mm: Some(Vec3::new(0.0, -0.0, 41.5)),
                ..finding("chambers-sealed", Verdict::Caution, 1.0, Some(0.0), Unit::Count)
            },
            finding("symmetry", Verdict::Pass, 0.5, None, Unit::Ratio),
        ],
    }
}

/// An invented set of two stages made and none failed.
pub(crate) fn set() -> SetRecord {
    SetRecord {
        job: Job {
            title: "Demo shelf".into(),
            profile: "demo".into(),
            formats: vec![Format::Stl, Format::ThreeMf],
            family: "ruled".into(),
            order: 2,
            times: vec![0.0, 0.5],
            size_mm: 82.0,
            scale: Scale::Each,
            wall_mm: 2.0,
            tolerance_mm: 0.05,
            grid_mm: None,
            direction: Vec3::new(-0.0, 0.0, 1.0),
            colour_a: [0x1f, 0x7a, 0x7a],
            colour_b: [0xe3, 0xc0, 0x8f],
        },
        profile: profile(),
        family_source: "demo formulas".into(),
        stages: vec![stage(1, 0.0), stage(2, 0.5)],
        failures: Vec::new(),
    }
}
