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
