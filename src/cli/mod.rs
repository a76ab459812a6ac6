//! The command line: arguments to a request, an outcome to an exit status.

mod args;
mod input;
mod inspect;
mod lists;
mod make;
mod plan;
mod stop;
mod terminal;

use args::{Cli, Command};
use clap::Parser as _;
use std::process::ExitCode;
use terminal::Terminal;

/// How a command ended: the exit status. Ordered: the worst is the greatest.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
enum Status {
    /// Everything asked for was made.
    Done = 0,
    /// Everything asked for was made; there are cautions.
    Cautions = 1,
    /// Something asked for was not made.
    NotMade = 2,
}

/// Runs the program with the process arguments.
#[must_use]
pub fn run() -> ExitCode {
    ExitCode::from(run_command() as u8)
}

fn run_command() -> Status {
    let cli = match Cli::try_parse() {
        Ok(cli) => cli,
        Err(e) => {
            // Nobody can be told when this cannot be printed.
            let _ = e.print();
            return if e.use_stderr() { Status::NotMade } else { Status::Done };
        }
    };
    let terminal = Terminal::new(&cli.command);
    let ended = match &cli.command {
        Command::Make(args) => make::run(args, &terminal),
        Command::Plan(args) => plan::run(args, &terminal),
        Command::Inspect(args) => inspect::run(args, &terminal),
        Command::Families => Ok(lists::families(&terminal)),
        Command::Profiles(args) => lists::profiles(args, &terminal),
    };
    ended.unwrap_or_else(|e| {
        terminal.error(&e);
        Status::NotMade
    })
}
