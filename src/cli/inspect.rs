//! `inspect`: every check on a mesh from anywhere.

use super::Status;
use super::args::InspectArgs;
use super::input;
use super::terminal::{Terminal, count, extents};
use crate::check::{Finding, Verdict};
use crate::export::{Imported, UNPACKED_MAX, detect_format, read_mesh};
use crate::pipeline;
use crate::profile::Profile;
use anyhow::{Context as _, bail};
use serde_json::json;
use std::fs::File;
use std::io::Read as _;
use std::path::Path;

pub(super) fn run(args: &InspectArgs, terminal: &Terminal) -> anyhow::Result<Status> {
    let profile = input::profile(&args.profile, Path::new(""))?;
    let read = read(&args.mesh).with_context(|| format!("mesh {}", args.mesh.display()))?;
    let findings = pipeline::inspect(&read.mesh, &profile);
    let worst = findings.iter().map(|f| f.verdict).max().unwrap_or(Verdict::Pass);
    let status = if worst == Verdict::Pass { Status::Done } else { Status::Cautions };
    terminal.say(&words(&args.mesh, &read, &profile, &findings));
    terminal.json(&json!({
        "status": status as u8,
        "verdict": worst.word(),
        "file": args.mesh.display().to_string(),
        "format": read.format.name(),
        "profile": profile.name,
        "triangles": read.mesh.triangles.len(),
        "vertices": read.mesh.positions.len(),
        "notes": read.notes.iter().map(ToString::to_string).collect::<Vec<_>>(),
        "findings": findings.iter().map(finding_json).collect::<Vec<_>>(),
    }));
    Ok(status)
}

fn read(path: &Path) -> anyhow::Result<Imported> {
    let file = File::open(path)?;
    if file.metadata()?.is_dir() {
        bail!("it is a folder");
    }
    let mut bytes = Vec::new();
    file.take(UNPACKED_MAX + 1).read_to_end(&mut bytes)?;
    if u64::try_from(bytes.len()).unwrap_or(u64::MAX) > UNPACKED_MAX {
        bail!("it has more than {UNPACKED_MAX} bytes, the most that is read");
    }
    let extension = path.extension().and_then(|e| e.to_str());
    let format = detect_format(&bytes, extension)?;
    Ok(read_mesh(&bytes, format)?)
}

fn words(path: &Path, read: &Imported, profile: &Profile, findings: &[Finding]) -> String {
    let size = read.mesh.bounds();
    let size = if size.is_empty() { "no size".to_owned() } else { extents(size.extent().into()) };
    let triangles = count(read.mesh.triangles.len(), "triangle");
    let mut text = format!("{}: {}, {triangles}, {size}\n", path.display(), read.format.name());
    text += &format!("profile {}: {}\n", profile.name, profile.title);
    for note in &read.notes {
        text += &format!("note: {note}\n");
    }
    text.push('\n');
    for f in findings {
        text += &format!("{:<8}{:<18} {}\n", f.verdict.word(), f.check, f.message);
        if f.verdict != Verdict::Pass {
            let place = f.place_mm.map(|p| format!(" (at {:.2}, {:.2}, {:.2} mm)", p.x, p.y, p.z));
            text += &format!("{:27}{}{}\n", "", f.advice, place.unwrap_or_default());
            text += &format!("{:27}limit from: {}\n", "", f.source);
        }
    }
    let of = |v: Verdict| findings.iter().filter(|f| f.verdict == v).count();
    text += &format!(
        "\n{}, {}, {}\n",
        count(of(Verdict::Fail), "fail"),
        count(of(Verdict::Caution), "caution"),
        if of(Verdict::Pass) == 1 { "1 pass".to_owned() } else { format!("{} passes", of(Verdict::Pass)) }
    );
    text
}

fn finding_json(f: &Finding) -> serde_json::Value {
    json!({
        "check": f.check,
        "verdict": f.verdict.word(),
        "value": f.value,
        "limit": f.limit,
        "unit": f.unit.symbol(),
        "place_mm": f.place_mm.map(<[f64; 3]>::from),
        "message": f.message,
        "advice": f.advice,
        "source": f.source,
    })
}
