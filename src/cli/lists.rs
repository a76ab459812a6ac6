//! `families` and `profiles`: what there is.

use super::Status;
use super::args::ProfilesArgs;
use super::input;
use super::terminal::{Terminal, table};
use crate::profile::{Profile, built_in_names, describe};
use std::path::Path;

pub(super) fn families(terminal: &Terminal) -> Status {
    let mut text = String::new();
    for f in crate::skin::families() {
        let times: Vec<String> = f.default_times.iter().map(f64::to_string).collect();
        text += &format!(
            "{}: {}\n  orders {} to {} (default {}), tau {} to {}, starter times {}\n  source: {}\n",
            f.name,
            f.description,
            f.orders.start(),
            f.orders.end(),
            f.default_order,
            f.tau.start(),
            f.tau.end(),
            times.join(", "),
            f.source
        );
    }
    terminal.say(&text);
    Status::Done
}

pub(super) fn profiles(args: &ProfilesArgs, terminal: &Terminal) -> anyhow::Result<Status> {
    if let Some(name) = &args.name {
        let profile = input::profile(name, Path::new(""))?;
        terminal.say(&describe(&profile));
        return Ok(Status::Done);
    }
    let rows = built_in_names().into_iter().filter_map(Profile::built_in).map(|p| {
        let [x, y, z] = p.envelope_mm;
        let wall = format!("{} mm", p.wall_supported_mm.value);
        [p.name, p.process_code, p.material, wall, format!("{x} x {y} x {z} mm")]
    });
    let mut text = table(["name", "process", "material", "wall from", "envelope"], &[3], rows.collect());
    text += "stagewright profiles NAME prints one with the source of every limit\n";
    terminal.say(&text);
    Ok(Status::Done)
}
