//! `inspect`: every check on a mesh from anywhere.

use super::Status;
use super::args::InspectArgs;
use super::input;
use super::terminal::Terminal;
use anyhow::bail;
use std::path::Path;

pub(super) fn run(args: &InspectArgs, terminal: &Terminal) -> anyhow::Result<Status> {
    let profile = input::profile(&args.profile, Path::new(""))?;
    let _ = terminal;
    bail!("{}: this build cannot check meshes against {} yet", args.mesh.display(), profile.name)
}
