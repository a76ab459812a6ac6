//! The arguments, their help and their ranges.

use crate::batch::THREADS_MAX;
use crate::job::TIMES_MAX;
use clap::{Args, Parser, Subcommand};
use std::path::PathBuf;

const STATUS: &str = "Exit status:
  0  everything asked for was made (plan: it fits into the memory;
     inspect: every check passed)
  1  everything asked for was made, with cautions: at least one finding is a caution or a fail
  2  something asked for was not made (also: wrong arguments, a stop by Ctrl-C)";

/// Makes printable solids of the stages of a sphere eversion.
///
/// A job file says which stages, how large, how thick and for which printing process; stagewright makes one
/// watertight solid of each stage, checks it, and writes the files for the printer and a sheet of figures.
#[derive(Debug, Parser)]
#[command(name = "stagewright", version)]
#[command(after_long_help = format!("Example:\n  stagewright make\n\n{STATUS}"))]
#[command(
    after_help = "Example:\n  stagewright make\n\nExit status: 0 made; 1 made, with cautions; 2 something asked for was not made."
)]
#[command(subcommand_required = true, arg_required_else_help = true, infer_long_args = false)]
#[command(max_term_width = 100)]
pub(super) struct Cli {
    #[command(subcommand)]
    pub(super) command: Command,
}

/// What to do.
#[derive(Debug, Subcommand)]
pub(super) enum Command {
    /// Make a set: solids, set.json, sheet.html and cautions.txt.
    ///
    /// Without JOB, makes the built-in starter set: five stages of the ruled family, 80 mm, wall 2 mm, for
    /// material extrusion in PLA. A set that was interrupted is continued: finished stages whose files are
    /// unchanged are kept. Only files that this program has made are ever replaced.
    #[command(after_help = "Example:\n  stagewright make foyer.toml --out foyer --stage 3")]
    #[command(after_long_help = make_long_help())]
    Make(MakeArgs),
    /// Tell what would be made: size, mass, triangles, memory and time of each stage.
    ///
    /// Nothing is written. All figures are estimates from the skin.
    #[command(after_help = "Example:\n  stagewright plan foyer.toml")]
    #[command(after_long_help = format!("Example:\n  stagewright plan foyer.toml\n\n{STATUS}"))]
    Plan(PlanArgs),
    /// Check a mesh from anywhere against a printing profile.
    ///
    /// Reads STL, OBJ or 3MF in millimetres and makes every check; +z is the build direction. A mesh that is
    /// open, turned or crosses itself is told what is wrong and where.
    #[command(after_help = "Example:\n  stagewright inspect part.stl --profile vpp-resin")]
    #[command(after_long_help = format!("Example:\n  stagewright inspect part.stl --profile vpp-resin\n\n{STATUS}"))]
    Inspect(InspectArgs),
    /// List the families of eversions, with orders, times and sources.
    #[command(after_help = "Example:\n  stagewright families")]
    Families,
    /// List the printing profiles, or print one with the source of every limit.
    #[command(after_help = "Example:\n  stagewright profiles mex-pla")]
    Profiles(ProfilesArgs),
}

/// Arguments of `make`.
#[derive(Debug, Args)]
pub(super) struct MakeArgs {
    /// The job file (TOML); without it, the built-in starter set
    pub(super) job: Option<PathBuf>,
    /// The output folder; default ./NAME-set for the job file NAME.toml, ./stagewright-set without a job
    #[arg(long, value_name = "DIR")]
    pub(super) out: Option<PathBuf>,
    /// Threads, 1 to 1024; default: all the machine has. The files do not depend on it
    #[arg(long, value_name = "N", value_parser = threads, allow_hyphen_values = true)]
    pub(super) threads: Option<usize>,
    /// Make only stage K (from 1, in the order of the job); may be repeated
    #[arg(long = "stage", value_name = "K", value_parser = stage, allow_hyphen_values = true)]
    pub(super) stages: Vec<usize>,
    /// Make stages again that an earlier run has finished
    #[arg(long)]
    pub(super) fresh: bool,
    /// Print nothing but errors
    #[arg(long)]
    pub(super) quiet: bool,
    /// Print the outcome as JSON instead of the table
    #[arg(long, conflicts_with = "quiet")]
    pub(super) json: bool,
}

/// Arguments of `plan`.
#[derive(Debug, Args)]
pub(super) struct PlanArgs {
    /// The job file (TOML); without it, the built-in starter set
    pub(super) job: Option<PathBuf>,
    /// Print the plan as JSON instead of a table
    #[arg(long)]
    pub(super) json: bool,
}

/// Arguments of `inspect`.
#[derive(Debug, Args)]
pub(super) struct InspectArgs {
    /// The mesh: a .stl, .obj or .3mf file, in millimetres
    pub(super) mesh: PathBuf,
    /// The printing profile: a name from `stagewright profiles`, or a path ending in .toml
    #[arg(long, value_name = "NAME")]
    pub(super) profile: String,
    /// Print the findings as JSON instead of text
    #[arg(long)]
    pub(super) json: bool,
}

/// Arguments of `profiles`.
#[derive(Debug, Args)]
pub(super) struct ProfilesArgs {
    /// The profile to print: a name, or a path ending in .toml
    pub(super) name: Option<String>,
}

fn make_long_help() -> String {
    format!(
        "Example:\n  stagewright make foyer.toml --out foyer --stage 3\n\n{STATUS}\n\nKeys of a job file:\n{}",
        crate::job::reference()
    )
}

fn threads(text: &str) -> Result<usize, String> {
    whole(text, THREADS_MAX)
}

fn stage(text: &str) -> Result<usize, String> {
    whole(text, TIMES_MAX)
}

/// A whole number, 1 to `max`. NaN, infinities, fractions, signs and huge numbers are all refused.
fn whole(text: &str, max: usize) -> Result<usize, String> {
    let digits = !text.is_empty() && text.len() <= 9 && text.bytes().all(|b| b.is_ascii_digit());
    let number = if digits { text.parse().ok() } else { None };
    number.filter(|n| (1..=max).contains(n)).ok_or_else(|| format!("must be a whole number, 1 to {max}"))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_arguments_are_consistent() {
        use clap::CommandFactory as _;
        Cli::command().debug_assert();
    }

    #[test]
    fn numbers_that_are_none_are_refused() {
        for bad in
            ["0", "-1", "+1", "1025", "nan", "inf", "1e3", "1.0", "", " 1", "٣", "99999999999999999999999"]
        {
            assert!(threads(bad).is_err(), "{bad:?}");
        }
        assert_eq!(threads("1024"), Ok(1024));
    }
}
