//! `plan`: what would be made.

use super::Status;
use super::args::PlanArgs;
use super::input::{self, Input};
use super::terminal::{Terminal, duration, extents, table};
use crate::batch::{machine_memory_bytes, memory_fits};
use crate::pipeline;
use crate::units::{Quantity, Unit};
use serde_json::json;

pub(super) fn run(args: &PlanArgs, terminal: &Terminal) -> anyhow::Result<Status> {
    let Input { job, profile, .. } = input::load(args.job.as_deref())?;
    let plan = pipeline::plan(&job, &profile)?;
    let machine_bytes = machine_memory_bytes();
    let fits = memory_fits(&job, &plan, None, machine_bytes);
    let rows = plan.stages.iter().map(|s| {
        [
            s.index.to_string(),
            format!("{:.3}", s.tau),
            extents(s.extent_mm),
            Quantity::new(s.mass_g, Unit::Gram).to_string(),
            s.triangles.to_string(),
            format!("{} MB", s.memory_bytes.div_ceil(1_000_000)),
            duration(s.seconds),
        ]
    });
    let head = ["stage", "tau", "size", "mass", "triangles", "memory", "time"];
    let mut text = table(head, &[0, 1, 3, 4, 5, 6], rows.collect());
    let mass_g: f64 = plan.stages.iter().map(|s| s.mass_g).sum();
    let seconds: f64 = plan.stages.iter().map(|s| s.seconds).sum();
    text += &format!(
        "estimates; together {} and {} on one core; grid {:.3} mm\n",
        Quantity::new(mass_g, Unit::Gram),
        duration(seconds),
        plan.grid_mm
    );
    terminal.say(&text);
    let stages: Vec<_> = plan
        .stages
        .iter()
        .map(|s| {
            json!({
                "index": s.index,
                "tau": s.tau,
                "extent_mm": s.extent_mm,
                "triangles": s.triangles,
                "mass_g": s.mass_g,
                "memory_bytes": s.memory_bytes,
                "seconds": s.seconds,
            })
        })
        .collect();
    let status = if fits.is_ok() { Status::Done } else { Status::NotMade };
    terminal.json(&json!({
        "status": status as u8,
        "job": job.to_toml(),
        "grid_mm": plan.grid_mm,
        "machine_memory_bytes": machine_bytes,
        "stages": stages,
        "why_not": fits.as_ref().err().map(ToString::to_string),
    }));
    if let Err(e) = fits {
        terminal.failure(&e.to_string());
    }
    Ok(status)
}
