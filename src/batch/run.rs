//! A set from a job: stages one after another, files, outcome.

use super::files::{FileError, Place, write_whole};
use super::folder::{Folder, FolderError};
use super::machine::machine_memory_bytes;
use super::names::{self, COLOURS_FILE, stage_stem};
use super::state::{self, Pictures};
use crate::check::Verdict;
use crate::export::{
    ObjInfo, SideColours, ThreeMf, ThreeMfObject, write_3mf, write_mtl, write_obj, write_stl,
};
use crate::job::{Format, Job};
use crate::pipeline::{self, Plan, PlanError, Progress, Stage, StageError, Step};
use crate::profile::Profile;
use crate::report::{SetRecord, StageRecord};
use std::io::Write as _;
use std::path::Path;
use std::time::Instant;

/// Most threads that can be asked for.
pub const THREADS_MAX: usize = 1024;
/// The share of the machine's memory a set may plan to use; the rest is the system's.
const MEMORY_SHARE: f64 = 0.9;

/// Who makes plans and stages; [`Pipeline`] but in tests.
pub trait Maker: Sync {
    /// As [`pipeline::plan`].
    ///
    /// # Errors
    /// As [`pipeline::plan`].
    fn plan(&self, job: &Job, profile: &Profile) -> Result<Plan, PlanError>;

    /// As [`pipeline::make_stage`].
    ///
    /// # Errors
    /// As [`pipeline::make_stage`].
    fn make(
        &self,
        job: &Job,
        profile: &Profile,
        index: usize,
        progress: &dyn Progress,
    ) -> Result<Stage, StageError>;
}

/// The real thing.
#[derive(Clone, Copy, Debug, Default)]
pub struct Pipeline;

impl Maker for Pipeline {
    fn plan(&self, job: &Job, profile: &Profile) -> Result<Plan, PlanError> {
        pipeline::plan(job, profile)
    }

    fn make(
        &self,
        job: &Job,
        profile: &Profile,
        index: usize,
        progress: &dyn Progress,
    ) -> Result<Stage, StageError> {
        pipeline::make_stage(job, profile, index, progress)
    }
}

/// What is to be made, and where.
#[derive(Clone, Debug)]
pub struct Request<'r> {
    /// The job.
    pub job: &'r Job,
    /// Its profile.
    pub profile: &'r Profile,
    /// The output folder; made if needed.
    pub out: &'r Path,
    /// Only these stages, from 1; `None` makes all.
    pub stages: Option<Vec<usize>>,
    /// Threads, 1..=[`THREADS_MAX`]; `None` takes what the machine has. The files do not depend on it.
    pub threads: Option<usize>,
    /// Make stages again that an earlier run has finished.
    pub fresh: bool,
    /// Memory the machine has, bytes; `None` asks the system.
    pub memory_bytes: Option<u64>,
}

/// Who is told how far a set is, and who may stop it.
pub trait Watch: Sync {
    /// A stage begins.
    fn begin(&self, index: usize, tau: f64);
    /// A step of it begins.
    fn step(&self, index: usize, step: Step);
    /// A stage has ended, one way or another.
    fn end(&self, stage: &StageOutcome);
    /// Whether the set should stop; asked between and during steps.
    fn stopped(&self) -> bool;
}

/// How a stage ended.
#[derive(Clone, Debug, PartialEq)]
pub enum StageResult {
    /// Made in this run.
    Made(StageRecord),
    /// Kept from an earlier run with the same recipe; every file was compared with its hash.
    Kept(StageRecord),
    /// Not made, and why.
    NotMade(String),
}

/// A stage that was asked for.
#[derive(Clone, Debug, PartialEq)]
pub struct StageOutcome {
    /// Position in the set, from 1.
    pub index: usize,
    /// Time.
    pub tau: f64,
    /// How it ended.
    pub result: StageResult,
    /// Time it took, s.
    pub seconds: f64,
}

impl StageOutcome {
    /// The record, when there is a finished stage.
    #[must_use]
    pub fn record(&self) -> Option<&StageRecord> {
        match &self.result {
            StageResult::Made(r) | StageResult::Kept(r) => Some(r),
            StageResult::NotMade(_) => None,
        }
    }
}

/// The worst that happened. Ordered: the worst is the greatest.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Worst {
    /// Everything asked for was made and passes every check.
    Made,
    /// Everything asked for was made; a finding is a caution or a fail.
    MadeWithCautions,
    /// Something asked for was not made.
    NotMade,
}

/// What became of a set.
#[derive(Clone, Debug, PartialEq)]
pub struct Outcome {
    /// The stages asked for, in the order of the job.
    pub stages: Vec<StageOutcome>,
    /// Files of the set besides the stages that could not be written, and why.
    pub not_written: Vec<String>,
    /// Files of earlier sets in the same folder that do not belong to this one.
    pub left_over: Vec<String>,
    /// Whether the run was stopped on request.
    pub stopped: bool,
    /// The set as `set.json` has it: the stages asked for, and others finished earlier.
    pub record: SetRecord,
}

impl Outcome {
    /// The worst that happened.
    #[must_use]
    pub fn worst(&self) -> Worst {
        if !self.not_written.is_empty() || self.stopped {
            return Worst::NotMade;
        }
        let of = |s: &StageOutcome| match s.record().map(StageRecord::verdict) {
            None => Worst::NotMade,
            Some(Verdict::Pass) => Worst::Made,
            Some(Verdict::Caution | Verdict::Fail) => Worst::MadeWithCautions,
        };
        self.stages.iter().map(of).max().unwrap_or(Worst::Made)
    }
}

/// Why a set was not begun. Nothing was made.
#[derive(Debug, thiserror::Error)]
pub enum BatchError {
    /// The output folder cannot be used.
    #[error(transparent)]
    Folder(#[from] FolderError),
    /// The job cannot be planned.
    #[error(transparent)]
    Plan(#[from] PlanError),
    /// A stage that the job does not have.
    #[error("--stage {index}: the job has the stages 1 to {count}")]
    NoSuchStage {
        /// The stage asked for.
        index: usize,
        /// Stages in the job.
        count: usize,
    },
    /// More memory than there is.
    #[error(
        "stage {index} (tau {tau}) at a grid of {grid_mm} mm needs about {} of memory, but this machine has {}; {advice}",
        gigabytes(*.needed_bytes), gigabytes(*.machine_bytes)
    )]
    Memory {
        /// The stage that needs most.
        index: usize,
        /// Its time.
        tau: f64,
        /// The grid, mm.
        grid_mm: f64,
        /// Needed, bytes.
        needed_bytes: u64,
        /// There is, bytes.
        machine_bytes: u64,
        /// Which key to change.
        advice: String,
    },
    /// The number of threads is out of range.
    #[error("--threads {threads}: must be 1 to {THREADS_MAX}")]
    Threads {
        /// As asked for.
        threads: usize,
    },
    /// The system gave no threads.
    #[error("{threads} threads could not be started: {source}; ask for fewer with --threads")]
    NoThreads {
        /// As asked for.
        threads: usize,
        /// What the system says.
        source: rayon::ThreadPoolBuildError,
    },
}

fn gigabytes(bytes: u64) -> String {
    #[expect(clippy::cast_precision_loss, reason = "printed with one decimal")]
    let gb = bytes as f64 / 1e9;
    format!("{gb:.1} GB")
}

/// Makes a set.
///
/// Before any work: the stages asked for exist, the folder can be written to, nothing in it would be lost, and
/// the plan fits into the memory. Then the stages in order; a stage that fails does not stop the others.
/// A full disk or [`Watch::stopped`] ends the run; what is finished stays and is described in `set.json`.
///
/// # Errors
/// [`BatchError`] when the set was not begun. What fails later is part of the [`Outcome`].
pub fn run(request: &Request<'_>, maker: &dyn Maker, watch: &dyn Watch) -> Result<Outcome, BatchError> {
    let job = request.job;
    let count = job.times.len();
    if let Some(&index) = request.stages.iter().flatten().find(|i| !(1..=count).contains(*i)) {
        return Err(BatchError::NoSuchStage { index, count });
    }
    let pool = threads(request.threads)?;
    let names = names::all(job);
    let folder = Folder::open(request.out, &names)?;
    let planned = maker.plan(job, request.profile).map_err(BatchError::from).and_then(|plan| {
        let machine_bytes = request.memory_bytes.unwrap_or_else(machine_memory_bytes);
        memory_fits(job, &plan, request.stages.as_deref(), machine_bytes)
    });
    if let Err(e) = planned {
        folder.take_back();
        return Err(e);
    }
    let mut batch = Batch { request, maker, watch, folder, pictures: Vec::new(), full: false };
    Ok(match pool {
        Some(pool) => pool.install(|| batch.run(&names)),
        None => batch.run(&names),
    })
}

fn threads(threads: Option<usize>) -> Result<Option<rayon::ThreadPool>, BatchError> {
    let Some(threads) = threads else { return Ok(None) };
    if !(1..=THREADS_MAX).contains(&threads) {
        return Err(BatchError::Threads { threads });
    }
    let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build();
    Ok(Some(pool.map_err(|source| BatchError::NoThreads { threads, source })?))
}

/// Whether the stages of a plan (all, or those chosen) fit into the memory of a machine, a tenth to spare.
///
/// # Errors
/// [`BatchError::Memory`] naming the stage that needs most and the key to change.
pub fn memory_fits(
    job: &Job,
    plan: &Plan,
    stages: Option<&[usize]>,
    machine_bytes: u64,
) -> Result<(), BatchError> {
    let chosen = |index: usize| stages.is_none_or(|s| s.contains(&index));
    let Some(stage) = plan.stages.iter().filter(|s| chosen(s.index)).max_by_key(|s| s.memory_bytes) else {
        return Ok(());
    };
    #[expect(clippy::cast_precision_loss, reason = "compared with a tenth to spare")]
    let (needed, limit) = (stage.memory_bytes as f64, machine_bytes as f64 * MEMORY_SHARE);
    if needed <= limit {
        return Ok(());
    }
    Err(BatchError::Memory {
        index: stage.index,
        tau: stage.tau,
        grid_mm: plan.grid_mm,
        needed_bytes: stage.memory_bytes,
        machine_bytes,
        advice: memory_advice(job, plan.grid_mm * (needed / limit).sqrt()),
    })
}

/// Which key to change so that a grid of about `grid_mm` is used; memory goes with its inverse square.
fn memory_advice(job: &Job, grid_mm: f64) -> String {
    let grid_mm = (grid_mm * 110.0).ceil() / 100.0; // a tenth to spare, in hundredths
    if job.grid_mm.is_some() {
        return format!("raise `solid.grid_mm` to about {grid_mm:.2} mm or lower `solid.size_mm`");
    }
    "raise `solid.tolerance_mm` or lower `solid.size_mm`".to_owned()
}

/// Where the formulas of a family come from; empty for a name nobody knows.
fn family_source(name: &str) -> String {
    let families = crate::skin::families();
    families.iter().find(|f| f.name == name).map_or_else(String::new, |f| f.source.to_owned())
}

/// A run that has begun.
struct Batch<'b> {
    request: &'b Request<'b>,
    maker: &'b dyn Maker,
    watch: &'b dyn Watch,
    folder: Folder,
    /// Pictures of finished stages: index, name and PNG.
    pictures: Vec<(usize, Pictures)>,
    full: bool,
}

struct StageProgress<'b> {
    watch: &'b dyn Watch,
    index: usize,
}

impl Progress for StageProgress<'_> {
    fn step(&self, step: Step) {
        self.watch.step(self.index, step);
    }

    fn stopped(&self) -> bool {
        self.watch.stopped()
    }
}

impl Batch<'_> {
    fn run(&mut self, names: &[String]) -> Outcome {
        let job = self.request.job;
        let build = state::build();
        let mut stages = Vec::new();
        let mut finished = Vec::new();
        for (i, &tau) in job.times.iter().enumerate() {
            let index = i + 1;
            let recipe = state::recipe(&build, job, self.request.profile, index);
            if self.request.stages.as_ref().is_some_and(|s| !s.contains(&index)) {
                if let Some((record, pictures)) = state::kept(&self.folder, &recipe, index) {
                    self.pictures.push((index, pictures));
                    finished.push(record);
                }
                continue;
            }
            let outcome = self.stage(index, tau, &recipe);
            finished.extend(outcome.record().cloned());
            self.watch.end(&outcome);
            stages.push(outcome);
        }
        let failures = stages.iter().filter_map(|s| match &s.result {
            StageResult::NotMade(why) => Some((s.index, s.tau, why.clone())),
            _ => None,
        });
        let record = SetRecord {
            job: job.clone(),
            profile: self.request.profile.clone(),
            family_source: family_source(&job.family),
            failures: failures.collect(),
            stages: finished,
        };
        let not_written = self.write_set(&record);
        Outcome {
            stages,
            not_written,
            left_over: self.folder.left_over(names),
            stopped: self.watch.stopped(),
            record,
        }
    }

    fn stage(&mut self, index: usize, tau: f64, recipe: &str) -> StageOutcome {
        let start = Instant::now();
        let outcome = |result| StageOutcome { index, tau, result, seconds: start.elapsed().as_secs_f64() };
        if self.watch.stopped() {
            return outcome(StageResult::NotMade("stopped on request".to_owned()));
        }
        if self.full {
            return outcome(StageResult::NotMade("not begun: there is no room for more files".to_owned()));
        }
        self.watch.begin(index, tau);
        if !self.request.fresh
            && let Some((record, pictures)) = state::kept(&self.folder, recipe, index)
        {
            self.pictures.push((index, pictures));
            return outcome(StageResult::Kept(record));
        }
        let progress = StageProgress { watch: self.watch, index };
        let mut stage = match self.maker.make(self.request.job, self.request.profile, index, &progress) {
            Ok(stage) => stage,
            Err(e) => return outcome(StageResult::NotMade(e.to_string())),
        };
        match self.write_stage(&mut stage, recipe) {
            Ok(()) => {
                self.pictures.push((index, stage.pictures));
                outcome(StageResult::Made(stage.record))
            }
            Err(e) => {
                self.full |= e.is_full();
                outcome(StageResult::NotMade(e.to_string()))
            }
        }
    }

    fn write_stage(&mut self, stage: &mut Stage, recipe: &str) -> Result<(), FileError> {
        let job = self.request.job;
        let watch = self.watch;
        let stopped = || watch.stopped();
        let index = stage.record.index;
        state::forget(&self.folder, index);
        let stem = stage_stem(job, index);
        let colours = SideColours::of_sides(job.colour_a, job.colour_b);
        for &format in &job.formats {
            let name = format!("{stem}.{}", format.name());
            let mesh = &stage.mesh;
            let sha256 = write_whole(&mut self.folder, Place::Visible, &name, &stopped, |w| {
                match format {
                    Format::Stl => write_stl(mesh, &mut *w)?,
                    Format::Obj => {
                        let comments = vec![format!("{}; tau {}", job.title, stage.record.tau)];
                        let material_file = Some(COLOURS_FILE.to_owned());
                        write_obj(mesh, &ObjInfo { object: stem.clone(), material_file, comments }, &mut *w)?;
                    }
                    Format::ThreeMf => {
                        let metadata = metadata(job, self.request.profile, &stage.record);
                        let object = ThreeMfObject { name: &stem, part_number: "", mesh, placement: None };
                        let model =
                            ThreeMf { title: &job.title, metadata: &metadata, objects: &[object], colours };
                        write_3mf(&model, &mut *w)?;
                    }
                }
                Ok(w.flush()?)
            })?;
            stage.record.files.insert(format.name().to_owned(), name);
            stage.record.sha256.insert(format.name().to_owned(), sha256);
        }
        state::keep(&mut self.folder, recipe, stage)
    }

    /// Writes the files that describe the set; each is tried even when another fails, and after a stop.
    fn write_set(&mut self, record: &SetRecord) -> Vec<String> {
        let job = self.request.job;
        let mut texts: Vec<(&str, Vec<u8>)> = Vec::new();
        let mut not_written = Vec::new();
        if job.formats.contains(&Format::Obj) {
            let mut mtl = Vec::new();
            match write_mtl(&SideColours::of_sides(job.colour_a, job.colour_b), &mut mtl) {
                Ok(()) => texts.push((COLOURS_FILE, mtl)),
                Err(e) => not_written.push(e.to_string()),
            }
        }
        texts.push(("set.json", crate::report::set_json(record).into_bytes()));
        texts.push(("sheet.html", crate::report::sheet_html(record, &self.pictures).into_bytes()));
        texts.push(("cautions.txt", crate::report::cautions_text(record).into_bytes()));
        for (name, bytes) in texts {
            let written =
                write_whole(&mut self.folder, Place::Visible, name, &|| false, |w| Ok(w.write_all(&bytes)?));
            if let Err(e) = written {
                not_written.push(e.to_string());
            }
        }
        not_written
    }
}

/// What a 3MF file says of itself: enough to make it again.
fn metadata(job: &Job, profile: &Profile, stage: &StageRecord) -> Vec<(String, String)> {
    [
        ("Stage", format!("{} of {}", stage.index, job.times.len())),
        ("Tau", format!("{}", stage.tau)),
        ("Profile", profile.name.clone()),
        ("Recipe", job.to_toml()),
    ]
    .map(|(name, value)| (name.to_owned(), value))
    .to_vec()
}
