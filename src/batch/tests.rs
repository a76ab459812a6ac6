//! Tests of making sets, with a maker that takes no time.

use super::*;
use crate::check::{Finding, Verdict};
use crate::geom::Vec3;
use crate::job::{Format, Job, starter};
use crate::mesh::{Side, TriMesh};
use crate::pipeline::{Plan, PlanError, Progress, Stage, StageError, StagePlan, Step};
use crate::profile::Profile;
use crate::report::{RegularityRecord, SkinRecord, SolidRecord, StageRecord};
use crate::solid::GridError;
use crate::units::Unit;
use std::collections::BTreeMap;
use std::fs;
use std::path::Path;
use std::sync::atomic::{AtomicBool, AtomicUsize, Ordering};

/// Makes tetrahedra; `fails` is a stage that cannot be made.
#[derive(Default)]
struct Tetrahedra {
    made: AtomicUsize,
    fails: Option<usize>,
    memory_bytes: u64,
    caution: bool,
    stop_after: Option<usize>,
    stop: AtomicBool,
    not_a_number: bool,
}

impl Maker for Tetrahedra {
    fn plan(&self, job: &Job, _: &Profile) -> Result<Plan, PlanError> {
        let stage = |(i, tau): (usize, &f64)| StagePlan {
            index: i + 1,
            tau: *tau,
            extent_mm: [80.0; 3],
            triangles: 4,
            mass_g: 1.0,
            memory_bytes: self.memory_bytes,
            seconds: 0.0,
        };
        Ok(Plan { grid_mm: 0.05, stages: job.times.iter().enumerate().map(stage).collect() })
    }

    fn make(
        &self,
        job: &Job,
        _: &Profile,
        index: usize,
        progress: &dyn Progress,
    ) -> Result<Stage, StageError> {
        progress.step(Step::Skin);
        if progress.stopped() {
            return Err(StageError::Stopped);
        }
        if self.fails == Some(index) {
            return Err(StageError::Grid(GridError::Empty(1.0)));
        }
        let made = self.made.fetch_add(1, Ordering::SeqCst) + 1;
        if self.stop_after.is_some_and(|n| made > n) {
            self.stop.store(true, Ordering::SeqCst);
        }
        let tau = job.times[index - 1];
        let verdict = if self.caution { Verdict::Caution } else { Verdict::Pass };
        let mut mesh = TriMesh {
            positions: vec![Vec3::zeros(), Vec3::x() * 10.0, Vec3::y() * 10.0, Vec3::z() * (1.0 + tau)],
            triangles: vec![[0, 2, 1], [0, 1, 3], [0, 3, 2], [1, 2, 3]],
            sides: vec![Side::A; 4],
        };
        if self.not_a_number {
            mesh.positions[0].x = f64::NAN;
        }
        let record = StageRecord {
            index,
            tau,
            files: BTreeMap::new(),
            sha256: BTreeMap::new(),
            placement: [[0.1 + 0.2, 0.0, 0.0, -1e-300]; 3],
            skin: SkinRecord {
                area_mm2: 1.0 / 3.0,
                signed_volume_mm3: -5e-324,
                min_radius_mm: f64::INFINITY,
                regularity: RegularityRecord { fold_margin: None, sigma_min: 0.1 },
            },
            solid: SolidRecord {
                triangles: 4,
                vertices: 4,
                volume_mm3: 1e300,
                area_mm2: 2.0,
                bbox_mm: [[0.0; 3], [10.0, 10.0, 1.0 + tau]],
                shells: 1,
                chambers: 0,
                euler: -2,
                mass_g: 0.7,
                deviation_mm: 0.01,
                grid_mm: 0.05,
            },
            findings: vec![Finding {
                check: "wall-ball",
                verdict,
                value: 0.1 + 0.7,
                limit: Some(0.8),
                unit: Unit::Mm,
                place_mm: Some(Vec3::new(1.0 / 3.0, 2.0, 3.0)),
                message: "thin \"here\"\n".into(),
                advice: String::new(),
                source: "common practice, no source".into(),
            }],
        };
        Ok(Stage {
            record,
            mesh,
            pictures: vec![("front".into(), vec![0x89, tau.to_bits().to_le_bytes()[6]])],
        })
    }
}

impl Watch for Tetrahedra {
    fn begin(&self, _: usize, _: f64) {}
    fn step(&self, _: usize, _: Step) {}
    fn end(&self, _: &StageOutcome) {}
    fn stopped(&self) -> bool {
        self.stop.load(Ordering::SeqCst)
    }
}

fn job() -> Job {
    Job { formats: Format::ALL.to_vec(), times: vec![0.0, 0.41], title: "../<script>\"".into(), ..starter() }
}

fn profile() -> Profile {
    Profile::built_in("mex-pla").unwrap()
}

fn made_with(maker: &Tetrahedra, job: &Job, out: &Path) -> Result<Outcome, BatchError> {
    let profile = profile();
    run(&request(job, &profile, out), maker, maker)
}

fn request<'r>(job: &'r Job, profile: &'r Profile, out: &'r Path) -> Request<'r> {
    Request { job, profile, out, stages: None, threads: None, fresh: false, memory_bytes: None }
}

/// All files below a folder but the lock, with their bytes.
fn contents(folder: &Path) -> BTreeMap<String, Vec<u8>> {
    let mut all = BTreeMap::new();
    for entry in fs::read_dir(folder).unwrap() {
        let path = entry.unwrap().path();
        if path.is_dir() {
            all.extend(contents(&path).into_iter().map(|(n, b)| (format!("{}/{n}", folder_name(&path)), b)));
        } else if folder_name(&path) != "lock" {
            all.insert(folder_name(&path), fs::read(&path).unwrap());
        }
    }
    all
}

fn folder_name(path: &Path) -> String {
    path.file_name().unwrap().to_string_lossy().into_owned()
}

fn visible(folder: &Path) -> Vec<String> {
    contents(folder).into_keys().filter(|n| !n.contains('/')).collect()
}

#[test]
fn a_set_has_the_promised_files_and_hashes() {
    let dir = tempfile::tempdir().unwrap();
    let out = dir.path().join("deep/er");
    let outcome = made_with(&Tetrahedra::default(), &job(), &out).unwrap();
    assert_eq!(outcome.worst(), Worst::Made);
    for name in ["01-tau-0.000.stl", "01-tau-0.000.obj", "02-tau-0.410.3mf", "colours.mtl", "set.json"] {
        assert!(out.join(name).is_file(), "{name} in {:?}", visible(&out));
    }
    let record = outcome.stages[1].record().unwrap();
    assert_eq!(record.files["3mf"], "02-tau-0.410.3mf");
    assert_eq!(record.sha256["stl"], files::sha256_of(&out.join("02-tau-0.410.stl")).unwrap());
    // Nothing of the title is in a name, and nothing was written outside the folder.
    assert!(contents(dir.path()).keys().all(|n| !n.contains("script") && n.starts_with("deep/er/")));
    assert!(contents(&out).keys().all(|n| !n.contains("unfinished")));
}

#[cfg(unix)]
#[test]
fn files_can_be_read_by_others() {
    use std::os::unix::fs::PermissionsExt as _;
    let dir = tempfile::tempdir().unwrap();
    made_with(&Tetrahedra::default(), &job(), dir.path()).unwrap();
    let mode = fs::metadata(dir.path().join("set.json")).unwrap().permissions().mode();
    assert_eq!(mode & 0o777, 0o644);
}

#[test]
fn the_known_sha256_of_abc_is_found() {
    // FIPS 180-4 example.
    assert_eq!(
        files::sha256_bytes(b"abc"),
        "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
    );
}

#[test]
fn the_same_job_gives_the_same_bytes_whatever_the_threads_and_resumed_or_not() {
    let dir = tempfile::tempdir().unwrap();
    let (a, b) = (dir.path().join("a"), dir.path().join("b"));
    let (job, profile) = (job(), profile());
    let maker = Tetrahedra::default();
    run(&Request { threads: Some(1), ..request(&job, &profile, &a) }, &maker, &maker).unwrap();
    // The second set in two runs, one stage each.
    for stage in [2, 1] {
        let stages = Some(vec![stage]);
        run(&Request { threads: Some(3), stages, ..request(&job, &profile, &b) }, &maker, &maker).unwrap();
    }
    let sorted = |mut all: BTreeMap<String, Vec<u8>>| {
        all.remove(".stagewright/made.txt"); // one name a line, in the order they were made
        all
    };
    assert_eq!(sorted(contents(&a)), sorted(contents(&b)));
}

#[test]
fn finished_stages_are_kept_unless_something_changed() {
    let dir = tempfile::tempdir().unwrap();
    let out = dir.path();
    let made = |job: &Job| {
        let maker = Tetrahedra::default();
        let outcome = made_with(&maker, job, out).unwrap();
        (maker.made.into_inner(), outcome)
    };
    let job = job();
    let first = made(&job);
    assert_eq!(first.0, 2);
    let again = made(&job);
    assert_eq!(again.0, 0);
    assert!(matches!(again.1.stages[0].result, StageResult::Kept(_)));
    assert_eq!(again.1.record, first.1.record);
    // A file changed by hand, lost, or a damaged record: that stage alone is made again.
    fs::write(out.join("01-tau-0.000.stl"), "edited").unwrap();
    assert_eq!(made(&job).0, 1);
    fs::remove_file(out.join("02-tau-0.410.3mf")).unwrap();
    assert_eq!(made(&job).0, 1);
    fs::write(out.join(".stagewright/002.toml"), "recipe = 3").unwrap();
    assert_eq!(made(&job).0, 1);
    fs::write(out.join(".stagewright/001-0.png"), "x").unwrap();
    assert_eq!(made(&job).0, 1);
    // Another wall: all.
    assert_eq!(made(&Job { wall_mm: 2.1, ..job.clone() }).0, 2);
    // Other times: the old file stays and is named.
    let (_, outcome) = made(&Job { times: vec![0.0], ..job });
    assert!(outcome.left_over.contains(&"02-tau-0.410.stl".to_owned()), "{:?}", outcome.left_over);
}

#[test]
fn a_failed_stage_does_not_stop_the_others_and_is_the_worst_outcome() {
    let dir = tempfile::tempdir().unwrap();
    let maker = Tetrahedra { fails: Some(1), ..Default::default() };
    let outcome = made_with(&maker, &job(), dir.path()).unwrap();
    assert_eq!(outcome.worst(), Worst::NotMade);
    assert!(dir.path().join("02-tau-0.410.stl").is_file());
    assert_eq!(outcome.record.failures.len(), 1);
    let why = GridError::Empty(1.0).to_string();
    let StageResult::NotMade(said) = &outcome.stages[0].result else { panic!("{outcome:?}") };
    assert_eq!(said, &why);
    let json: serde_json::Value =
        serde_json::from_slice(&fs::read(dir.path().join("set.json")).unwrap()).unwrap();
    assert!(json["failures"][0].to_string().contains(&why), "{json:#}");
    let caution = Tetrahedra { caution: true, ..Default::default() };
    let outcome = made_with(&caution, &job(), &dir.path().join("other")).unwrap();
    assert_eq!(outcome.worst(), Worst::MadeWithCautions);
}

#[test]
fn a_mesh_no_format_can_hold_leaves_no_file() {
    let dir = tempfile::tempdir().unwrap();
    let maker = Tetrahedra { not_a_number: true, ..Default::default() };
    let outcome = made_with(&maker, &job(), dir.path()).unwrap();
    assert_eq!(outcome.worst(), Worst::NotMade);
    assert!(visible(dir.path()).iter().all(|n| !n.starts_with('0')), "{:?}", visible(dir.path()));
    let StageResult::NotMade(why) = &outcome.stages[0].result else { panic!("{outcome:?}") };
    assert!(why.contains("01-tau-0.000.stl was not written"), "{why}");
}

#[test]
fn a_stop_leaves_finished_stages_and_no_half_file_and_can_be_resumed() {
    let dir = tempfile::tempdir().unwrap();
    let job = Job { times: vec![0.0, 0.2, 0.4, 0.6], ..job() };
    // Asked to stop while the second stage is being made: its first file is then refused.
    let maker = Tetrahedra { stop_after: Some(1), ..Default::default() };
    let outcome = made_with(&maker, &job, dir.path()).unwrap();
    assert!(outcome.stopped && outcome.worst() == Worst::NotMade);
    let names = visible(dir.path());
    assert!(names.contains(&"01-tau-0.000.3mf".to_owned()) && names.contains(&"set.json".to_owned()));
    assert!(!names.iter().any(|n| n.starts_with("02")), "{names:?}");
    assert!(contents(dir.path()).keys().all(|n| !n.contains("unfinished")));
    let maker = Tetrahedra::default();
    assert_eq!(made_with(&maker, &job, dir.path()).unwrap().worst(), Worst::Made);
    assert_eq!(maker.made.into_inner(), 3);
}

#[test]
fn a_write_that_fails_half_way_leaves_the_old_file_and_nothing_else() {
    use std::io::{self, Write as _};
    let dir = tempfile::tempdir().unwrap();
    let mut folder = folder::Folder::open(dir.path(), &[]).unwrap();
    let mut write = |text: &'static [u8], then: Option<io::ErrorKind>| {
        files::write_whole(&mut folder, files::Place::Visible, "a.stl", &|| false, |w| {
            w.write_all(text)?;
            then.map_or(Ok(()), |kind| Err(io::Error::from(kind).into()))
        })
    };
    write(b"whole", None).unwrap();
    let full = write(b"half of the new", Some(io::ErrorKind::StorageFull)).unwrap_err();
    assert!(full.is_full() && full.to_string().contains("a.stl was not written"), "{full}");
    assert!(!write(b"half", Some(io::ErrorKind::BrokenPipe)).unwrap_err().is_full());
    assert_eq!(fs::read(dir.path().join("a.stl")).unwrap(), b"whole");
    assert!(contents(dir.path()).keys().all(|n| !n.contains("unfinished")));
}

#[test]
fn folders_that_cannot_be_used_are_refused_before_any_work() {
    let dir = tempfile::tempdir().unwrap();
    let file = dir.path().join("file");
    fs::write(&file, "mine").unwrap();
    let refused = |out: &Path| {
        let maker = Tetrahedra::default();
        let e = made_with(&maker, &job(), out).unwrap_err();
        assert_eq!(maker.made.into_inner(), 0);
        e
    };
    assert!(matches!(refused(&file), BatchError::Folder(FolderError::NotAFolder { .. })));
    assert!(matches!(refused(&file.join("in")), BatchError::Folder(FolderError::NotMade { .. })));
    #[cfg(target_os = "linux")]
    {
        let e = refused(Path::new("/proc/self")); // no file can be made there, by root neither
        assert!(matches!(e, BatchError::Folder(FolderError::NotWritable { .. })), "{e}");
    }
    let held = folder::Folder::open(dir.path(), &[]).unwrap();
    assert!(matches!(refused(dir.path()), BatchError::Folder(FolderError::InUse { .. })));
    drop(held);
    fs::write(dir.path().join("set.json"), "mine").unwrap();
    let e = refused(dir.path());
    assert!(e.to_string().contains("set.json would be overwritten"), "{e}");
    assert_eq!(fs::read(dir.path().join("set.json")).unwrap(), b"mine");
    assert_eq!(fs::read(&file).unwrap(), b"mine");
}

#[test]
fn a_set_that_needs_more_memory_than_there_is_is_refused_naming_the_key() {
    let dir = tempfile::tempdir().unwrap();
    let out = dir.path().join("deep/out");
    let maker = Tetrahedra { memory_bytes: 40_000_000_000, ..Default::default() };
    let profile = profile();
    for (grid_mm, part) in
        [(Some(0.05), "raise `solid.grid_mm` to about 0.13 mm"), (None, "`solid.tolerance_mm`")]
    {
        let job = Job { grid_mm, ..job() };
        let request = Request { memory_bytes: Some(8_000_000_000), ..request(&job, &profile, &out) };
        let e = run(&request, &maker, &maker).unwrap_err().to_string();
        assert!(e.contains("40.0 GB") && e.contains("8.0 GB") && e.contains(part), "{e}");
    }
    assert!(contents(dir.path()).is_empty() && !dir.path().join("deep").exists());
}

#[test]
fn stages_and_threads_that_do_not_exist_are_refused() {
    let dir = tempfile::tempdir().unwrap();
    let (job, profile, maker) = (job(), profile(), Tetrahedra::default());
    for stage in [0, 3] {
        let r = Request { stages: Some(vec![1, stage]), ..request(&job, &profile, dir.path()) };
        assert!(run(&r, &maker, &maker).unwrap_err().to_string().contains("1 to 2"));
    }
    for threads in [0, THREADS_MAX + 1] {
        let r = Request { threads: Some(threads), ..request(&job, &profile, dir.path()) };
        assert!(run(&r, &maker, &maker).unwrap_err().to_string().contains("1 to 1024"));
    }
}
