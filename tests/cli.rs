//! The program as a person or a script meets it: arguments, messages, exit status, files left behind.
//!
//! Help texts are compared with tests/golden; `STAGEWRIGHT_BLESS=1 cargo test --test cli` rewrites them, and
//! the change is then reviewed as a diff.
#![allow(clippy::unwrap_used, reason = "test code")]

use assert_cmd::Command;
use std::fs;
use std::path::{Path, PathBuf};
use std::process::Output;

/// A folder of its own for one test, and the program started in it.
struct Bench {
    dir: tempfile::TempDir,
}

/// What a run said.
struct Said {
    status: i32,
    out: String,
    err: String,
}

impl Bench {
    fn new() -> Self {
        Self { dir: tempfile::tempdir().unwrap() }
    }

    fn path(&self, name: &str) -> PathBuf {
        self.dir.path().join(name)
    }

    fn write(&self, name: &str, bytes: impl AsRef<[u8]>) -> PathBuf {
        let path = self.path(name);
        fs::create_dir_all(path.parent().unwrap()).unwrap();
        fs::write(&path, bytes).unwrap();
        path
    }

    fn run(&self, args: &[&str]) -> Said {
        said(program().current_dir(self.dir.path()).args(args).output().unwrap())
    }

    /// Names in the folder, hidden ones too.
    fn names(&self) -> Vec<String> {
        names_in(self.dir.path())
    }
}

fn program() -> Command {
    let mut command = Command::cargo_bin("stagewright").unwrap();
    command.env("COLUMNS", "100").env("NO_COLOR", "1").env_remove("RUST_BACKTRACE");
    command
}

fn said(output: Output) -> Said {
    let said = Said {
        status: output.status.code().expect("the program ended by itself"),
        out: String::from_utf8(output.stdout).unwrap(),
        err: String::from_utf8(output.stderr).unwrap(),
    };
    assert!(!said.err.contains("panicked"), "{}", said.err);
    said
}

fn names_in(folder: &Path) -> Vec<String> {
    let mut names: Vec<String> =
        fs::read_dir(folder).unwrap().map(|e| e.unwrap().file_name().into_string().unwrap()).collect();
    names.sort();
    names
}

/// Runs a command that must be refused: status 2, a message with all `parts`, nothing on stdout, no new file.
fn refused(bench: &Bench, args: &[&str], parts: &[&str]) {
    let before = bench.names();
    let said = bench.run(args);
    assert_eq!(said.status, 2, "{args:?}: {}", said.err);
    assert!(said.err.starts_with("error: "), "{args:?}: {}", said.err);
    assert_eq!(said.out, "", "{args:?}");
    for part in parts {
        assert!(said.err.contains(part), "{args:?}: {part:?} is not in\n{}", said.err);
    }
    assert!(said.err.len() < 20_000, "{args:?}: {} bytes of message", said.err.len());
    assert_eq!(bench.names(), before, "{args:?} left something");
}

/// A job with the given lines in its tables.
fn job(set: &str, skin: &str, solid: &str) -> String {
    format!("[set]\ntitle = \"t\"\n{set}\n[skin]\ntimes = [0.5]\n{skin}\n[solid]\n{solid}\n")
}

#[test]
fn help_and_lists_are_as_reviewed() {
    let golden = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/golden");
    let bless = std::env::var_os("STAGEWRIGHT_BLESS").is_some();
    let bench = Bench::new();
    let mut wrong = Vec::new();
    for (file, args) in [
        ("help-short.txt", "-h"),
        ("help.txt", "--help"),
        ("help-make.txt", "make --help"),
        ("help-plan.txt", "plan --help"),
        ("help-inspect.txt", "inspect --help"),
        ("help-families.txt", "families --help"),
        ("help-profiles.txt", "profiles --help"),
        ("families.txt", "families"),
        ("profiles.txt", "profiles"),
    ] {
        let said = bench.run(&args.split(' ').collect::<Vec<_>>());
        assert_eq!((said.status, said.err.as_str()), (0, ""), "{args}");
        let path = golden.join(file);
        if bless {
            fs::create_dir_all(&golden).unwrap();
            fs::write(&path, &said.out).unwrap();
        } else if fs::read_to_string(&path).unwrap_or_default() != said.out {
            wrong.push(format!("tests/golden/{file} differs from `stagewright {args}`:\n{}", said.out));
        }
    }
    assert!(wrong.is_empty(), "{}\nSTAGEWRIGHT_BLESS=1 rewrites these files", wrong.join("\n"));
}

#[test]
fn every_help_shows_an_example_that_names_the_command() {
    let bench = Bench::new();
    for command in ["make", "plan", "inspect", "families", "profiles"] {
        for flag in ["-h", "--help"] {
            let said = bench.run(&[command, flag]);
            assert_eq!(said.out.matches("Example:\n").count(), 1, "{command} {flag}");
            assert!(said.out.contains(&format!("\n  stagewright {command}")), "{command} {flag}");
        }
    }
    assert!(bench.run(&["--help"]).out.contains("Exit status:\n  0 "));
}

#[test]
fn wrong_arguments_are_refused_with_value_and_range() {
    let bench = Bench::new();
    for value in ["0", "-1", "1025", "nan", "inf", "1e400", "2.5", "", "many", "999999999999999999999"] {
        refused(&bench, &["make", "--threads", value], &[value, "1 to 1024"]);
    }
    for value in ["0", "-7", "201", "nan", "-inf"] {
        refused(&bench, &["make", "--stage", value], &[value, "1 to 200"]);
    }
    refused(&bench, &["make", "--stage", "6"], &["--stage 6", "1 to 5"]);
    refused(&bench, &["mak"], &["mak", "make"]);
    refused(&bench, &["make", "--thread", "2"], &["--thread"]);
    refused(&bench, &["make", "a.toml", "b.toml"], &["b.toml"]);
    refused(&bench, &["make", "--json", "--quiet"], &["--quiet"]);
    refused(&bench, &["inspect", "a.stl"], &["--profile"]);
    assert_eq!(bench.run(&[]).status, 2);
}

#[test]
fn files_that_are_no_job_are_refused() {
    let bench = Bench::new();
    bench.write("empty.toml", "");
    bench.write("latin.toml", b"[set]\n# f\xfcr\ntitle = \"t\"\n");
    bench.write("nul.toml", b"\0\0\0\0");
    let noise = |n: u32| (0..n).map(|i| i.wrapping_mul(2_654_435_761).to_le_bytes()[2]);
    bench.write("garbage.toml", noise(10 << 20).collect::<Vec<u8>>());
    bench.write("letters.toml", noise(1 << 20).map(|b| b' ' + b % 95).collect::<Vec<u8>>());
    bench.write("folder/x", "");
    for command in ["make", "plan"] {
        let refused = |file: &str, parts: &[&str]| refused(&bench, &[command, file], parts);
        refused("missing.toml", &["job file missing.toml", "No such file"]);
        refused("folder", &["folder", "it is a folder"]);
        refused("empty.toml", &["empty.toml:1:1", "empty"]);
        refused("latin.toml", &["latin.toml", "not UTF-8", "byte 10 on line 2"]);
        refused("nul.toml", &["nul.toml:1:"]);
        refused("garbage.toml", &["garbage.toml", "10485760 bytes", "1048576"]);
        refused("letters.toml", &["letters.toml:1:", "not TOML"]);
    }
}

#[test]
fn all_problems_of_a_job_are_told_at_once() {
    let bench = Bench::new();
    let text = job(
        "profil = \"x\"\nformats = [\"stl\", \"ply\"]",
        "family = \"rulled\"",
        "wall_mm = -1\nsize_mm = nan",
    );
    bench.write("job.toml", text);
    let parts = [
        "job.toml:3:1: there is no key `set.profil`",
        "did you mean `profile`?",
        "job.toml:4:19: `set.formats` is \"ply\", which is not known; known are \"stl\", \"obj\", \"3mf\"",
        "did you mean `ruled`?",
        "`solid.wall_mm` is -1, but must be 0.2 to 50 mm",
        "`solid.size_mm` is nan, but must be 10 to 2000 mm",
    ];
    refused(&bench, &["make", "job.toml"], &parts);
    refused(&bench, &["plan", "job.toml"], &parts);
}

#[test]
fn values_out_of_range_are_refused_naming_the_key() {
    let bench = Bench::new();
    let many = format!("times = [{}]", (0..10_000).map(|i| format!("{i}e-4")).collect::<Vec<_>>().join(", "));
    let cases = [
        (job("", "", "wall_mm = inf"), "solid.wall_mm"),
        (job("", "", "wall_mm = 1e300"), "solid.wall_mm"),
        (job("", "", "size_mm = -80"), "solid.size_mm"),
        (job("", "", "size_mm = 20\nwall_mm = 12"), "`solid.size_mm` (20 mm)"),
        (job("", "", "tolerance_mm = 0"), "solid.tolerance_mm"),
        (job("", "", "grid_mm = 1e-300"), "solid.grid_mm"),
        (job("", "order = 6", ""), "skin.order"),
        (job("profile = \"mex-plaa\"", "", ""), "did you mean `mex-pla`?"),
        (job("", "family = \"x\"", ""), "known are \"ruled\""),
        (job("title = \"again\"", "", ""), "given twice"),
        ("[set]\ntitle = \"t\"\n[skin]\ntimes = []\n".to_owned(), "no times"),
        ("[set]\ntitle = \"t\"\n[skin]\ntimes = [0.5, 1.0001]\n".to_owned(), "skin.times[1]"),
        ("[set]\ntitle = \"t\"\n[skin]\n".to_owned(), "`skin.times` is missing"),
        (format!("[set]\ntitle = \"t\"\n[skin]\n{many}\n"), "a list of 10000 times"),
    ];
    for (text, part) in cases {
        bench.write("job.toml", text);
        refused(&bench, &["make", "job.toml"], &["job.toml:", part]);
    }
}

#[test]
fn a_profile_path_is_taken_from_the_job_files_folder() {
    let bench = Bench::new();
    bench.write("jobs/job.toml", job("profile = \"own/p.toml\"", "", ""));
    refused(&bench, &["make", "jobs/job.toml"], &["set.profile", "own/p.toml", "No such file"]);
    bench.write("jobs/own/p.toml", "name = 3");
    refused(&bench, &["make", "jobs/job.toml"], &["jobs", "own/p.toml", "name"]);
    refused(&bench, &["profiles", "mexpla"], &["mex-pla", "did you mean"]);
    refused(&bench, &["inspect", "x.stl", "--profile", "pbf"], &["there is no profile `pbf`", "pbf-pa12"]);
}

#[test]
fn folders_that_cannot_be_written_to_are_refused_before_the_work() {
    let bench = Bench::new();
    bench.write("file", "mine");
    refused(&bench, &["make", "--out", "file"], &["output folder file", "--out"]);
    refused(&bench, &["make", "--out", "file/in"], &["file/in", "cannot be made"]);
    #[cfg(target_os = "linux")]
    for folder in ["/proc/self", "/sys"] {
        refused(&bench, &["make", "--out", folder], &[folder, "no file can be written there"]);
    }
    assert_eq!(fs::read(bench.path("file")).unwrap(), b"mine");
    // A file of somebody else with a name of ours.
    bench.write("set/sheet.html", "mine");
    refused(&bench, &["make", "--out", "set"], &["sheet.html would be overwritten"]);
    assert_eq!(fs::read(bench.path("set/sheet.html")).unwrap(), b"mine");
}

#[test]
fn quiet_prints_errors_only_and_json_prints_json() {
    let bench = Bench::new();
    refused(&bench, &["make", "missing.toml", "--quiet"], &["missing.toml"]);
    for command in ["make", "plan"] {
        let said = bench.run(&[command, "missing.toml", "--json"]);
        assert_eq!(said.status, 2);
        let value: serde_json::Value = serde_json::from_str(&said.out).unwrap();
        assert_eq!(value["status"], 2);
        assert!(value["error"].as_str().unwrap().contains("missing.toml"));
    }
}

#[test]
fn a_reader_that_goes_away_is_no_error() {
    use std::process::{Command, Stdio};
    for args in [&["profiles", "mex-pla"][..], &["families"], &["make", "--help"]] {
        let mut child = Command::new(env!("CARGO_BIN_EXE_stagewright"))
            .args(args)
            .stdout(Stdio::piped())
            .stderr(Stdio::piped())
            .spawn()
            .unwrap();
        drop(child.stdout.take());
        let said = said(child.wait_with_output().unwrap());
        assert_eq!((said.status, said.err.as_str()), (0, ""), "{args:?}");
    }
}

/// A block of 20 x 20 x `height` mm as ASCII STL; `keep` triangles of its 12.
fn block_stl(height: f64, keep: usize) -> String {
    let corner = |i: usize| {
        let axis = |bit: usize, size: f64| if i >> bit & 1 == 1 { size } else { 0.0 };
        format!("vertex {} {} {}", axis(0, 20.0), axis(1, 20.0), axis(2, height))
    };
    let quads = [[0, 2, 3, 1], [4, 5, 7, 6], [0, 1, 5, 4], [2, 6, 7, 3], [0, 4, 6, 2], [1, 3, 7, 5]];
    let triangles = quads.iter().flat_map(|q| [[q[0], q[1], q[2]], [q[0], q[2], q[3]]]);
    let mut text = "solid block\n".to_owned();
    for t in triangles.take(keep) {
        let [a, b, c] = t.map(corner);
        text += &format!("facet normal 0 0 0\nouter loop\n{a}\n{b}\n{c}\nendloop\nendfacet\n");
    }
    text + "endsolid block\n"
}

#[test]
fn inspect_tells_good_thin_and_open_meshes_apart() {
    let bench = Bench::new();
    bench.write("block.stl", block_stl(20.0, 12));
    bench.write("thin.stl", block_stl(0.3, 12));
    bench.write("open.stl", block_stl(20.0, 11));
    let json = |file: &str| {
        let said = bench.run(&["inspect", file, "--profile", "mex-pla", "--json"]);
        assert_eq!(said.err, "");
        let value: serde_json::Value = serde_json::from_str(&said.out).unwrap();
        assert_eq!(value["status"], said.status);
        let verdict = value["verdict"].as_str().unwrap().to_owned();
        let fails: Vec<String> = value["findings"]
            .as_array()
            .unwrap()
            .iter()
            .filter(|f| f["verdict"] == "fail")
            .map(|f| f["check"].as_str().unwrap().to_owned())
            .collect();
        (said.status, verdict, fails)
    };
    assert_eq!(json("block.stl"), (0, "pass".into(), vec![]));
    let (status, verdict, fails) = json("thin.stl");
    assert_eq!((status, verdict.as_str()), (1, "fail"));
    assert!(fails.iter().all(|f| f.starts_with("wall-")), "{fails:?}");
    let (status, _, fails) = json("open.stl");
    assert_eq!((status, fails), (1, vec!["mesh-closed".to_owned()]));
    // For people: what is wrong, what to change, where the limit is from.
    let said = bench.run(&["inspect", "open.stl", "--profile", "mex-pla"]);
    assert!(said.out.contains("fail    mesh-closed") && said.out.contains("limit from: "), "{}", said.out);
    assert!(said.out.contains("3 edges") && said.out.contains("1 fail,"), "{}", said.out);
}

#[test]
fn files_that_are_no_mesh_are_refused() {
    let bench = Bench::new();
    bench.write("empty.stl", "");
    bench.write("words.txt", "a letter\n");
    bench.write("cut.3mf", b"PK\x03\x04 and then nothing");
    bench.write("cut.stl", &block_stl(20.0, 12)[..400]);
    bench.write("folder.stl/x", "");
    for (file, part) in [
        ("missing.stl", "No such file"),
        ("empty.stl", "empty"),
        ("words.txt", "txt"),
        ("cut.3mf", "cut.3mf"),
        ("cut.stl", "line"),
        ("folder.stl", "it is a folder"),
    ] {
        refused(&bench, &["inspect", file, "--profile", "mex-pla"], &["mesh ", file, part]);
    }
}

/// A job small enough for a test: 20 mm, grid 1 mm.
fn small(title: &str, times: &str) -> String {
    format!(
        "[set]\ntitle = {title}\nformats = [\"stl\", \"obj\", \"3mf\"]\n[skin]\ntimes = {times}\n\
         [solid]\nsize_mm = 20\nwall_mm = 2\ntolerance_mm = 0.5\ngrid_mm = 1.0\n"
    )
}

/// Every path below a folder, relative to it.
fn all_below(folder: &Path) -> Vec<String> {
    let mut all = Vec::new();
    for name in names_in(folder) {
        let path = folder.join(&name);
        if path.is_dir() {
            all.extend(all_below(&path).into_iter().map(|n| format!("{name}/{n}")));
        }
        all.push(name);
    }
    all
}

fn read_json(path: &Path) -> serde_json::Value {
    serde_json::from_slice(&fs::read(path).unwrap()).unwrap()
}

/// Each stage that `set.json` lists has its files whole: their hashes are the ones it gives.
fn finished_stages(folder: &Path) -> usize {
    use sha2::Digest as _;
    let set = read_json(&folder.join("set.json"));
    let stages = set["stages"].as_array().unwrap();
    for stage in stages {
        let files = stage["files"].as_object().unwrap();
        assert!(!files.is_empty());
        for (format, name) in files {
            let bytes = fs::read(folder.join(name.as_str().unwrap())).unwrap();
            let hash: String = sha2::Sha256::digest(bytes).iter().map(|b| format!("{b:02x}")).collect();
            assert_eq!(stage["sha256"][format], hash, "{name}");
        }
    }
    stages.len()
}

#[test]
fn a_set_with_a_hostile_title_is_made_kept_and_told() {
    let bench = Bench::new();
    let title = "'../../<script>alert(\"1\")</script>&'";
    bench.write("jobs/j.toml", small(title, "[0.5]"));
    let made = bench.run(&["make", "jobs/j.toml", "--threads", "2"]);
    assert!(made.status <= 1, "{}", made.err);
    // One table; progress is for terminals only.
    assert_eq!(made.err, "");
    let lines: Vec<&str> = made.out.lines().collect();
    assert!(lines[0].starts_with("stage") && lines[2].contains("0.500"), "{}", made.out);
    assert!(made.out.contains("files in j-set"), "{}", made.out);
    let out = bench.path("j-set");
    for name in [
        "01-tau-0.500.stl",
        "01-tau-0.500.obj",
        "01-tau-0.500.3mf",
        "colours.mtl",
        "sheet.html",
        "cautions.txt",
    ] {
        assert!(out.join(name).is_file(), "{name} in {:?}", all_below(&out));
    }
    assert_eq!(finished_stages(&out), 1);
    let names = all_below(bench.dir.path());
    assert!(names.iter().all(|n| n.starts_with("j") && !n.contains("script") && !n.contains("unfinished")));
    let sheet = fs::read_to_string(out.join("sheet.html")).unwrap();
    assert!(!sheet.contains("<script") && sheet.contains("&lt;script&gt;"));
    let set = read_json(&out.join("set.json"));
    assert_eq!(set["title"], "../../<script>alert(\"1\")</script>&");
    // Again: kept, and the same bytes.
    let before = fs::read(out.join("set.json")).unwrap();
    let again = bench.run(&["make", "jobs/j.toml", "--json"]);
    let value: serde_json::Value = serde_json::from_str(&again.out).unwrap();
    assert_eq!((again.status, &value["stages"][0]["result"]), (made.status, &"kept".into()));
    assert_eq!(fs::read(out.join("set.json")).unwrap(), before);
    let quiet = bench.run(&["make", "jobs/j.toml", "--quiet"]);
    assert_eq!((quiet.status, quiet.out.as_str(), quiet.err.as_str()), (made.status, "", ""));
    // What was written can be inspected.
    for format in ["stl", "obj", "3mf"] {
        let file = format!("j-set/01-tau-0.500.{format}");
        let said = bench.run(&["inspect", &file, "--profile", "mex-pla", "--json"]);
        let value: serde_json::Value = serde_json::from_str(&said.out).unwrap();
        let broken = value["findings"]
            .as_array()
            .unwrap()
            .iter()
            .any(|f| f["verdict"] == "fail" && f["check"].as_str().unwrap().starts_with("mesh-"));
        assert!(!broken, "{value:#}");
    }
}

#[test]
fn a_grid_too_fine_for_the_memory_is_refused_naming_the_key() {
    let bench = Bench::new();
    bench.write("job.toml", job("", "", "size_mm = 2000\ngrid_mm = 0.01"));
    let parts = ["`solid.grid_mm`", "GB of memory", "this machine has"];
    refused(&bench, &["make", "job.toml"], &parts);
    let said = bench.run(&["plan", "job.toml"]);
    assert_eq!(said.status, 2);
    assert!(parts.iter().all(|p| said.err.contains(p)), "{}", said.err);
}

#[test]
fn a_plan_writes_nothing_and_reads_a_profile_beside_the_job() {
    let bench = Bench::new();
    let profile =
        fs::read_to_string(Path::new(env!("CARGO_MANIFEST_DIR")).join("profiles/mex-pla.toml")).unwrap();
    bench.write("jobs/own/p.toml", profile);
    bench.write("jobs/j.toml", job("profile = \"own/p.toml\"", "", "size_mm = 50"));
    let before = all_below(bench.dir.path());
    let said = bench.run(&["plan", "jobs/j.toml", "--json"]);
    assert_eq!(said.status, 0, "{}", said.err);
    let value: serde_json::Value = serde_json::from_str(&said.out).unwrap();
    let extent = value["stages"][0]["extent_mm"].as_array().unwrap();
    let largest = extent.iter().map(|x| x.as_f64().unwrap()).fold(0.0, f64::max);
    assert!((largest - 50.0).abs() < 0.01, "{extent:?}");
    assert_eq!(all_below(bench.dir.path()), before);
}

#[cfg(unix)]
mod unix {
    use super::*;
    use std::process::{Child, Command, Stdio};
    use std::time::{Duration, Instant};

    /// A disk that is full in the middle of a file: the system refuses a file to grow past 40 KiB.
    #[test]
    fn no_room_for_a_file_leaves_none_and_names_it() {
        let bench = Bench::new();
        bench.write("job.toml", small("'t'", "[0.5, 0.75]"));
        let script =
            format!("trap '' XFSZ; ulimit -f 40; exec '{}' make job.toml", env!("CARGO_BIN_EXE_stagewright"));
        let said =
            said(Command::new("bash").current_dir(bench.dir.path()).args(["-c", &script]).output().unwrap());
        assert_eq!(said.status, 2, "{}", said.err);
        assert!(said.err.contains("job-set/01-tau-0.500.stl was not written: "), "{}", said.err);
        assert!(said.err.contains("File too large"), "{}", said.err);
        assert!(said.err.contains("stage 2 (tau 0.75) was not made: not begun"), "{}", said.err);
        let names = all_below(&bench.path("job-set"));
        assert!(!names.iter().any(|n| n.starts_with("0") || n.contains("unfinished")), "{names:?}");
        assert_eq!(finished_stages(&bench.path("job-set")), 0);
    }

    fn start(bench: &Bench) -> Child {
        Command::new(env!("CARGO_BIN_EXE_stagewright"))
            .current_dir(bench.dir.path())
            .args(["make", "job.toml", "--threads", "1"])
            .stdout(Stdio::piped())
            .stderr(Stdio::piped())
            .spawn()
            .unwrap()
    }

    /// Waits until the file is there, then sends the signal; what the program said then.
    fn signal_when(mut child: Child, file: &Path, signal: &str) -> Said {
        let start = Instant::now();
        while !file.exists() {
            if start.elapsed() > Duration::from_secs(240) || child.try_wait().unwrap().is_some() {
                let _ = child.kill();
                panic!("{} did not come: {:?}", file.display(), child.wait_with_output());
            }
            std::thread::sleep(Duration::from_millis(10));
        }
        let sent = Command::new("kill").args([signal, child.id().to_string().as_str()]).status().unwrap();
        assert!(sent.success());
        said(child.wait_with_output().unwrap())
    }

    #[test]
    fn ctrl_c_leaves_whole_files_and_the_set_can_be_continued() {
        let bench = Bench::new();
        bench.write("job.toml", small("'t'", "[0.0, 0.5, 1.0]"));
        let out = bench.path("job-set");
        let said = signal_when(start(&bench), &out.join(".stagewright/001.toml"), "-INT");
        assert_eq!(said.status, 2, "{}", said.err);
        assert!(said.err.contains("stopped on request; finished files are kept"), "{}", said.err);
        let names = all_below(&out);
        assert!(!names.iter().any(|n| n.starts_with("03") || n.contains("unfinished")), "{names:?}");
        let finished = finished_stages(&out);
        assert!((1..3).contains(&finished), "{finished}");
        let again = bench.run(&["make", "job.toml", "--json", "--stage", "1"]);
        let value: serde_json::Value = serde_json::from_str(&again.out).unwrap();
        assert_eq!(value["stages"][0]["result"], "kept");
    }

    #[test]
    fn a_request_to_end_is_heard_before_the_first_stage_is_done() {
        let bench = Bench::new();
        bench.write("job.toml", small("'t'", "[0.5]"));
        let out = bench.path("job-set");
        let said = signal_when(start(&bench), &out.join(".stagewright/lock"), "-TERM");
        assert_eq!(said.status, 2, "{}", said.err);
        assert!(said.err.contains("stopped on request"), "{}", said.err);
        let names = all_below(&out);
        assert!(!names.iter().any(|n| n.starts_with("01") || n.contains("unfinished")), "{names:?}");
        assert_eq!(finished_stages(&out), 0);
    }
}
