//! The command line: arguments to a request, an outcome to an exit status.

/// Runs the program with the process arguments.
#[must_use]
pub fn run() -> std::process::ExitCode {
    std::process::ExitCode::SUCCESS
}
