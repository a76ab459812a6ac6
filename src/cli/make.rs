//! `make`: a set in a folder.

use super::Status;
use super::args::MakeArgs;
use super::input::{self, Input};
use super::stop;
use super::terminal::{Terminal, count, duration, extents, table};
use crate::batch::{self, Outcome, Request, StageOutcome, StageResult, Watch, Worst};
use crate::check::Verdict;
use crate::pipeline::Step;
use crate::units::{Quantity, Unit};
use indicatif::{ProgressBar, ProgressStyle};
use serde_json::json;
use std::path::Path;
use std::time::Duration;

pub(super) fn run(args: &MakeArgs, terminal: &Terminal) -> anyhow::Result<Status> {
    stop::listen();
    let Input { job, profile, folder } = input::load(args.job.as_deref())?;
    let out = args.out.as_deref().unwrap_or(&folder);
    let request = Request {
        job: &job,
        profile: &profile,
        out,
        stages: (!args.stages.is_empty()).then(|| args.stages.clone()),
        threads: args.threads,
        fresh: args.fresh,
        memory_bytes: None,
    };
    let lines = Lines::new(job.times.len(), terminal);
    let outcome = batch::run(&request, &batch::Pipeline, &lines)?;
    lines.finish();
    let status = match outcome.worst() {
        Worst::Made => Status::Done,
        Worst::MadeWithCautions => Status::Cautions,
        Worst::NotMade => Status::NotMade,
    };
    terminal.say(&words(&outcome, out));
    terminal.json(&as_json(&outcome, out, status));
    for stage in &outcome.stages {
        if let StageResult::NotMade(why) = &stage.result {
            terminal.failure(&format!("stage {} (tau {}) was not made: {why}", stage.index, stage.tau));
        }
    }
    for why in &outcome.not_written {
        terminal.failure(why);
    }
    if outcome.stopped {
        terminal
            .failure("stopped on request; finished files are kept, and the same command continues the set");
    }
    for name in &outcome.left_over {
        terminal.note(&format!("note: {name} is of an earlier set in this folder and was left as it is"));
    }
    Ok(status)
}

/// The table and a closing line.
fn words(outcome: &Outcome, out: &Path) -> String {
    let rows = outcome.stages.iter().map(row).collect();
    let head = ["stage", "tau", "size", "mass", "triangles", "time", "verdict"];
    let mut text = table(head, &[0, 1, 3, 4, 5], rows);
    let finished: Vec<_> = outcome.stages.iter().filter_map(StageOutcome::record).collect();
    let mass_g: f64 = finished.iter().map(|r| r.solid.mass_g).sum();
    let kept = outcome.stages.iter().filter(|s| matches!(s.result, StageResult::Kept(_))).count();
    text += &format!(
        "{} of {} finished, {} together; files in {}\n",
        finished.len(),
        count(outcome.stages.len(), "stage"),
        Quantity::new(mass_g, Unit::Gram),
        out.display()
    );
    if kept > 0 {
        text += &format!("{} kept from an earlier run: same job, files unchanged\n", count(kept, "stage"));
    }
    let of = |v: Verdict| finished.iter().flat_map(|r| &r.findings).filter(|f| f.verdict == v).count();
    let (cautions, fails) = (of(Verdict::Caution), of(Verdict::Fail));
    if cautions + fails > 0 {
        text += &format!(
            "findings: {} and {}; read {}\n",
            count(fails, "fail"),
            count(cautions, "caution"),
            out.join("cautions.txt").display()
        );
    }
    text
}

fn row(stage: &StageOutcome) -> [String; 7] {
    let (index, tau) = (stage.index.to_string(), format!("{:.3}", stage.tau));
    let Some(r) = stage.record() else {
        let dash = || "-".to_owned();
        return [index, tau, dash(), dash(), dash(), duration(stage.seconds), "not made".to_owned()];
    };
    let [min, max] = r.solid.bbox_mm;
    let time = match stage.result {
        StageResult::Kept(_) => "kept".to_owned(),
        _ => duration(stage.seconds),
    };
    [
        index,
        tau,
        extents([max[0] - min[0], max[1] - min[1], max[2] - min[2]]),
        Quantity::new(r.solid.mass_g, Unit::Gram).to_string(),
        r.solid.triangles.to_string(),
        time,
        r.verdict().word().to_owned(),
    ]
}

fn as_json(outcome: &Outcome, out: &Path, status: Status) -> serde_json::Value {
    let stages: Vec<_> = outcome
        .stages
        .iter()
        .map(|s| {
            let (result, why) = match &s.result {
                StageResult::Made(_) => ("made", None),
                StageResult::Kept(_) => ("kept", None),
                StageResult::NotMade(why) => ("not-made", Some(why)),
            };
            let r = s.record();
            json!({
                "index": s.index,
                "tau": s.tau,
                "result": result,
                "why": why,
                "seconds": s.seconds,
                "verdict": r.map(|r| r.verdict().word()),
                "files": r.map(|r| &r.files),
                "sha256": r.map(|r| &r.sha256),
                "bbox_mm": r.map(|r| r.solid.bbox_mm),
                "mass_g": r.map(|r| r.solid.mass_g),
                "triangles": r.map(|r| r.solid.triangles),
            })
        })
        .collect();
    json!({
        "status": status as u8,
        "folder": out.display().to_string(),
        "stopped": outcome.stopped,
        "stages": stages,
        "not_written": outcome.not_written,
        "left_over": outcome.left_over,
    })
}

/// One line a stage while it is made, on the stream for messages, for people only.
struct Lines {
    bar: ProgressBar,
    count: usize,
    begun: std::sync::Mutex<f64>,
}

impl Lines {
    fn new(count: usize, terminal: &Terminal) -> Self {
        let bar = if terminal.shows_progress() { ProgressBar::new_spinner() } else { ProgressBar::hidden() };
        if let Ok(style) = ProgressStyle::with_template("{spinner} {msg}  {elapsed}") {
            bar.set_style(style.tick_strings(&["-", "\\", "|", "/", " "]));
        }
        if terminal.shows_progress() {
            bar.enable_steady_tick(Duration::from_millis(200));
        }
        Self { bar, count, begun: std::sync::Mutex::new(f64::NAN) }
    }

    fn finish(&self) {
        self.bar.finish_and_clear();
    }
}

impl Watch for Lines {
    fn begin(&self, index: usize, tau: f64) {
        if let Ok(mut begun) = self.begun.lock() {
            *begun = tau;
        }
        self.bar.reset_elapsed();
        self.bar.set_message(format!("stage {index} of {}, tau {tau:.3}", self.count));
    }

    fn step(&self, index: usize, step: Step) {
        let tau = self.begun.lock().map_or(f64::NAN, |t| *t);
        self.bar.set_message(format!("stage {index} of {}, tau {tau:.3}: {}", self.count, step.words()));
    }

    fn end(&self, stage: &StageOutcome) {
        let word = match &stage.result {
            StageResult::NotMade(_) => "not made".to_owned(),
            StageResult::Kept(r) => format!("kept, {}", r.verdict().word()),
            StageResult::Made(r) => format!("{}, {}", r.verdict().word(), duration(stage.seconds)),
        };
        self.bar.println(format!("stage {} of {}, tau {:.3}: {word}", stage.index, self.count, stage.tau));
    }

    fn stopped(&self) -> bool {
        stop::stopped()
    }
}
