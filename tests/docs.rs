//! What README.md and DEVELOPERS.md say is what the program has: keys, defaults, commands, files, profiles.
#![allow(clippy::unwrap_used, reason = "test code: a document that cannot be read is a failure")]

use assert_cmd::Command;
use stagewright::job::{KEYS, Known, parse, reference, starter};
use stagewright::profile::built_in_names;
use std::collections::BTreeSet;
use std::path::{Path, PathBuf};

fn root() -> PathBuf {
    PathBuf::from(env!("CARGO_MANIFEST_DIR"))
}

fn text(name: &str) -> String {
    std::fs::read_to_string(root().join(name)).unwrap()
}

/// The contents of the fenced blocks of one language, in order.
fn blocks(markdown: &str, language: &str) -> Vec<String> {
    let fence = format!("```{language}\n");
    markdown
        .split(&fence)
        .skip(1)
        .map(|rest| rest.split("```").next().unwrap_or_default().to_owned())
        .collect()
}

fn known() -> Known {
    Known {
        families: stagewright::skin::families().iter().map(|f| f.name.to_owned()).collect(),
        profiles: built_in_names().map(str::to_owned).to_vec(),
    }
}

#[test]
fn the_readme_explains_every_key_as_the_program_does() {
    let readme = text("README.md");
    assert!(readme.contains(reference().trim_end()), "README.md must hold this text:\n{}", reference());
}

#[test]
fn the_job_file_in_the_readme_is_accepted_and_shows_every_key() {
    let examples = blocks(&text("README.md"), "toml");
    assert!(!examples.is_empty(), "README.md has no example of a job file");
    for example in &examples {
        parse(example, "README.md", &known()).unwrap_or_else(|e| panic!("{e}\n{example}"));
    }
    for key in KEYS {
        assert!(
            examples[0].lines().any(|l| l.trim_start().starts_with(&format!("{} =", key.name))),
            "the first example of README.md does not show {}",
            key.dotted()
        );
    }
}

#[test]
fn the_readme_names_every_command_profile_and_the_two_first_steps() {
    let readme = text("README.md");
    let help = Command::cargo_bin("stagewright").unwrap().arg("--help").output().unwrap();
    let help = String::from_utf8(help.stdout).unwrap();
    let commands: Vec<&str> = help
        .lines()
        .skip_while(|l| *l != "Commands:")
        .skip(1)
        .take_while(|l| !l.trim().is_empty())
        .filter(|l| l.starts_with("  ") && !l.starts_with("   "))
        .filter_map(|l| l.split_whitespace().next())
        .filter(|c| *c != "help")
        .collect();
    assert!(commands.len() >= 5, "{help}");
    for command in commands {
        assert!(readme.contains(&format!("stagewright {command}")), "README.md does not show {command}");
    }
    for profile in built_in_names() {
        assert!(readme.contains(&format!("`{profile}`")), "README.md does not name {profile}");
    }
    assert!(readme.contains("cargo run --release -- make") && readme.contains("bash tests/run"));
}

#[test]
fn the_readme_has_the_figures_of_the_starter_set() {
    let (readme, job) = (text("README.md"), starter());
    for figure in [format!("{} mm", job.size_mm), format!("{} mm", job.wall_mm), job.profile] {
        assert!(readme.contains(&figure), "README.md does not say {figure}");
    }
}

#[test]
fn the_map_in_developers_names_every_source_file_and_no_other() {
    let src = root().join("src");
    let mut there = BTreeSet::new();
    let mut todo = vec![src.clone()];
    while let Some(folder) = todo.pop() {
        for entry in std::fs::read_dir(folder).unwrap() {
            let path = entry.unwrap().path();
            if path.is_dir() {
                todo.push(path);
            } else if path.extension().is_some_and(|e| e == "rs") {
                there.insert(path.strip_prefix(&src).unwrap().to_string_lossy().replace('\\', "/"));
            }
        }
    }
    let mapped: BTreeSet<String> = text("DEVELOPERS.md")
        .lines()
        .filter_map(|l| l.strip_prefix("- `")?.split_once(".rs` "))
        .map(|(file, _)| format!("{file}.rs"))
        .collect();
    let missing: Vec<String> = there.difference(&mapped).map(|f| map_line(&src, f)).collect();
    let gone: Vec<&String> = mapped.difference(&there).collect();
    assert!(missing.is_empty(), "add to the map of DEVELOPERS.md:\n{}", missing.join("\n"));
    assert!(gone.is_empty(), "the map of DEVELOPERS.md names files that are gone: {gone:?}");
}

/// The line for the map: the file and the first line of its own documentation.
fn map_line(src: &Path, file: &str) -> String {
    let text = std::fs::read_to_string(src.join(file)).unwrap();
    let first = text.lines().next().unwrap_or_default().trim_start_matches("//!").trim();
    format!("- `{file}` {}", first.trim_end_matches('.'))
}

#[test]
fn links_between_documents_lead_somewhere() {
    for document in ["README.md", "DEVELOPERS.md"] {
        for link in text(document).split("](").skip(1).filter_map(|r| r.split(')').next()) {
            let file = link.split('#').next().unwrap_or_default();
            if !file.is_empty() && !file.contains("://") {
                assert!(root().join(file).exists(), "{document} links to {file}, which is not there");
            }
        }
    }
}
