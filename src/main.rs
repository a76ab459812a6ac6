//! The `stagewright` program: hands its arguments to [`stagewright::cli`] and returns its exit status.

fn main() -> std::process::ExitCode {
    stagewright::cli::run()
}
