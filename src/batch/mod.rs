//! Files of a set: written whole or not at all, resumed, worst outcome kept.
//!
//! [`run`] tries the output folder and the memory before any work, makes the stages one after another,
//! writes each file under a temporary name and renames it when it is complete, and goes on after a failed
//! stage. What is needed to resume lies in a folder `.stagewright` beside the files.

mod files;
mod folder;
mod machine;
mod names;
mod run;
mod state;
#[cfg(test)]
mod tests;

pub use files::FileError;
pub use folder::FolderError;
pub use machine::machine_memory_bytes;
pub use names::{COLOURS_FILE, stage_stem};
pub use run::{
    BatchError, Maker, Outcome, Pipeline, Request, StageOutcome, StageResult, THREADS_MAX, Watch, Worst,
    memory_fits, run,
};
