//! The order of the house, kept by a test: which room may use which, and what a room never touches.
//!
//! The sources are read as text: comments, strings and `#[cfg(test)]` items are taken out, then every path
//! (`crate::x`, `super::x`, `use crate::{x, y::z}`) is followed to the room it names. No compiler is asked,
//! so a path hidden behind a macro of another crate is not seen; `house` below has none.
#![allow(clippy::unwrap_used, reason = "test code: a file of the house that cannot be read is a failure")]

use std::collections::BTreeSet;
use std::path::{Path, PathBuf};

/// Rooms by row, lowest first. A room uses lower rows only.
const ROWS: [&[&str]; 9] = [
    &["units"],
    &["geom", "profile"],
    &["mesh"],
    &["skin", "field", "solid", "check", "export"],
    &["orient", "job"],
    &["report"],
    &["pipeline"],
    &["batch"],
    &["cli"],
];

/// The only uses allowed inside one row: (user, used).
const SAME_ROW: [(&str, &str); 1] = [("solid", "field")];

/// Rooms that may touch files, processes, the clock and the environment.
const OUTSIDE_WORLD: [&str; 2] = ["batch", "cli"];

/// Path beginnings that reach the outside world.
const WORLD_PATHS: [&[&str]; 14] = [
    &["std", "fs"],
    &["std", "process"],
    &["std", "env"],
    &["std", "net"],
    &["std", "time"],
    &["std", "io", "stdin"],
    &["std", "io", "stdout"],
    &["std", "io", "stderr"],
    &["tempfile"],
    &["indicatif"],
    &["comfy_table"],
    &["ctrlc"],
    &["sysinfo"],
    &["clap"],
];

/// Names and macros that reach the outside world, however they came into scope.
const WORLD_NAMES: [&str; 10] = [
    "File",
    "OpenOptions",
    "Instant",
    "SystemTime",
    "println",
    "print",
    "eprintln",
    "eprint",
    "dbg",
    "include_dir",
];

/// Crates that do geometry; `batch` and `cli` never do.
const GEOMETRY: [&str; 4] = ["nalgebra", "meshopt", "robust", "parry3d_f64"];

fn row(room: &str) -> Option<usize> {
    ROWS.iter().position(|r| r.contains(&room))
}

/// Takes out comments, strings, characters and lifetimes; keeps line breaks.
fn strip(source: &str) -> String {
    let c: Vec<char> = source.chars().collect();
    let at = |i: usize| c.get(i).copied().unwrap_or('\0');
    let mut out = String::with_capacity(source.len());
    let mut i = 0;
    let keep_lines = |out: &mut String, from: usize, to: usize| {
        out.push(' ');
        out.extend(c[from.min(c.len())..to.min(c.len())].iter().filter(|x| **x == '\n'));
    };
    while i < c.len() {
        let start = i;
        let after_word = i > 0 && (at(i - 1).is_alphanumeric() || at(i - 1) == '_');
        if at(i) == '/' && at(i + 1) == '/' {
            while i < c.len() && at(i) != '\n' {
                i += 1;
            }
            keep_lines(&mut out, start, i);
        } else if at(i) == '/' && at(i + 1) == '*' {
            let mut depth = 0;
            loop {
                if at(i) == '/' && at(i + 1) == '*' {
                    depth += 1;
                    i += 2;
                } else if at(i) == '*' && at(i + 1) == '/' {
                    depth -= 1;
                    i += 2;
                } else {
                    i += 1;
                }
                if depth == 0 || i >= c.len() {
                    break;
                }
            }
            keep_lines(&mut out, start, i);
        } else if let Some(end) = (!after_word).then(|| raw_string_end(&c, i)).flatten() {
            i = end;
            keep_lines(&mut out, start, i);
        } else if at(i) == '"' {
            i += 1;
            while i < c.len() && at(i) != '"' {
                i += if at(i) == '\\' { 2 } else { 1 };
            }
            i += 1;
            keep_lines(&mut out, start, i);
        } else if at(i) == '\'' {
            // A character ends with a quote after one (escaped) character; a lifetime does not.
            if at(i + 1) == '\\' {
                i += 3;
                while i < c.len() && at(i) != '\'' {
                    i += 1;
                }
                i += 1;
            } else if at(i + 2) == '\'' {
                i += 3;
            } else {
                i += 1;
                while at(i).is_alphanumeric() || at(i) == '_' {
                    i += 1;
                }
            }
            keep_lines(&mut out, start, i);
        } else {
            out.push(at(i));
            i += 1;
        }
    }
    out
}

/// The index just past a raw string (`r"…"`, `br#"…"#`) that begins at `i`, if one does.
fn raw_string_end(c: &[char], i: usize) -> Option<usize> {
    let at = |i: usize| c.get(i).copied().unwrap_or('\0');
    let mut j = i;
    if matches!(at(j), 'b' | 'c') {
        j += 1;
    }
    if at(j) != 'r' {
        return None;
    }
    j += 1;
    let first_hash = j;
    while at(j) == '#' {
        j += 1;
    }
    let hashes = j - first_hash;
    if at(j) != '"' {
        return None;
    }
    j += 1;
    while j < c.len() {
        if at(j) == '"' && (1..=hashes).all(|k| at(j + k) == '#') {
            return Some(j + 1 + hashes);
        }
        j += 1;
    }
    Some(c.len())
}

/// A word or a single sign; `::` is one sign.
#[derive(Clone, Debug, PartialEq)]
struct Token {
    text: String,
    line: usize,
}

fn tokens(stripped: &str) -> Vec<Token> {
    let mut out: Vec<Token> = Vec::new();
    let (mut line, mut word) = (1, String::new());
    let mut previous_colon = false;
    for c in stripped.chars().chain(std::iter::once('\n')) {
        if c.is_alphanumeric() || c == '_' {
            word.push(c);
            previous_colon = false;
            continue;
        }
        if !word.is_empty() {
            out.push(Token { text: std::mem::take(&mut word), line });
        }
        if c == ':' && previous_colon {
            out.last_mut().unwrap().text = "::".into();
            previous_colon = false;
        } else if !c.is_whitespace() {
            out.push(Token { text: c.into(), line });
            previous_colon = c == ':';
        } else {
            previous_colon = false;
        }
        line += usize::from(c == '\n');
    }
    out
}

/// Takes out every item marked `#[cfg(test)]`: tests may build what they test with any room.
fn without_tests(all: &[Token]) -> Vec<Token> {
    let marker = ["#", "[", "cfg", "(", "test", ")", "]"];
    let mut out = Vec::with_capacity(all.len());
    let mut i = 0;
    while i < all.len() {
        if !marker.iter().enumerate().all(|(k, m)| all.get(i + k).is_some_and(|t| t.text == *m)) {
            out.push(all[i].clone());
            i += 1;
            continue;
        }
        i += marker.len();
        let mut depth = 0_i32;
        while i < all.len() {
            let t = all[i].text.as_str();
            i += 1;
            depth += i32::from(t == "{") - i32::from(t == "}");
            if depth == 0 && (t == "}" || t == ";") {
                break;
            }
        }
    }
    out
}

fn is_word(t: &str) -> bool {
    t.starts_with(|c: char| c.is_alphabetic() || c == '_')
}

/// Every path in the tokens from `i`, groups unfolded; returns where the path ends.
fn read_path(t: &[Token], mut i: usize, prefix: &[String], out: &mut Vec<Vec<String>>) -> usize {
    let mut path = prefix.to_vec();
    let text = |i: usize| t.get(i).map_or("", |x| x.text.as_str());
    loop {
        if text(i) == "{" {
            i += 1;
            while i < t.len() && text(i) != "}" {
                let before = i;
                i = if text(i) == "," { i + 1 } else { read_path(t, i, &path, out) };
                i = i.max(before + 1);
            }
            return i + 1;
        }
        if text(i) == "*" || is_word(text(i)) {
            path.push(text(i).to_owned());
            i += 1;
        } else {
            out.push(path);
            return i;
        }
        let continues = text(i) == "::" && (is_word(text(i + 1)) || matches!(text(i + 1), "{" | "*"));
        if !continues {
            if text(i) == "as" {
                path.push("as".to_owned());
                i += 2;
            }
            out.push(path);
            return i;
        }
        i += 1;
    }
}

/// What one file names: (line, path from the crate's root or from another crate), and the bare words.
fn named_paths(file_module: &[String], t: &[Token]) -> Vec<(usize, Vec<String>)> {
    let mut found = Vec::new();
    // Modules written inside the file: (name, depth of braces at which it ends).
    let mut inner: Vec<(String, i32)> = Vec::new();
    let (mut depth, mut i) = (0, 0);
    while i < t.len() {
        let text = t[i].text.as_str();
        depth += i32::from(text == "{");
        if text == "}" {
            depth -= 1;
            inner.retain(|(_, d)| *d <= depth);
        }
        if text == "mod" && t.get(i + 2).is_some_and(|x| x.text == "{") {
            inner.push((t[i + 1].text.clone(), depth + 1));
        }
        let continues_a_path = i > 1 && t[i - 1].text == "::" && is_word(&t[i - 2].text);
        if !is_word(text) || continues_a_path {
            i += 1;
            continue;
        }
        let line = t[i].line;
        let mut paths = Vec::new();
        let end = read_path(t, i, &[], &mut paths);
        let here: Vec<String> =
            file_module.iter().cloned().chain(inner.iter().map(|m| m.0.clone())).collect();
        for p in paths {
            found.push((line, from_root(&here, p)));
        }
        // Groups may hold braces of their own, balanced; nothing else is skipped.
        i = end.max(i + 1);
    }
    found
}

/// Rewrites `super::…` and `self::…` as `crate::…`.
fn from_root(here: &[String], path: Vec<String>) -> Vec<String> {
    let ups = path.iter().take_while(|s| *s == "super" || *s == "self").count();
    if ups == 0 || path.first().is_some_and(|s| s == "self" && path.len() == 1) {
        return path;
    }
    let levels = path[..ups].iter().filter(|s| *s == "super").count();
    let base = here.len().saturating_sub(levels);
    let mut full = vec!["crate".to_owned()];
    full.extend(here[..base].iter().cloned());
    full.extend(path[ups..].iter().cloned());
    full
}

/// The module a file of src/ holds: `field/sheet.rs` is [field, sheet], `field/mod.rs` is [field].
fn module_of(relative: &Path) -> Vec<String> {
    let mut m: Vec<String> =
        relative.with_extension("").iter().map(|s| s.to_string_lossy().into_owned()).collect();
    if m.last().is_some_and(|s| s == "mod" || s == "lib" || s == "main") {
        m.pop();
    }
    m
}

/// Everything wrong with one file, as sentences that begin with file and line.
fn faults(relative: &str, source: &str) -> Vec<String> {
    let all = without_tests(&tokens(&strip(source)));
    let module = module_of(Path::new(relative));
    let mut out = Vec::new();
    let mut fault = |line: usize, what: String| out.push(format!("src/{relative}:{line}: {what}"));
    if relative == "main.rs" {
        for (line, p) in named_paths(&module, &all) {
            if p[0] == "stagewright" && p.get(1).is_none_or(|r| r != "cli") {
                fault(line, format!("main.rs may use cli only, not {}", p.join("::")));
            }
            if p[0] == "mod" {
                fault(line, "main.rs may not have modules".into());
            }
        }
        return out;
    }
    let Some(room) = module.first().map(String::as_str) else {
        return out; // lib.rs: its list of modules is compared elsewhere
    };
    let Some(own_row) = row(room) else {
        fault(1, format!("{room} is in no row of the house (tests/layers.rs, ROWS)"));
        return out;
    };
    for (line, p) in named_paths(&module, &all) {
        let first = p[0].as_str();
        if matches!(first, "crate" | "stagewright") && p.len() > 1 {
            let used = p[1].as_str();
            match row(used) {
                _ if used == room || used == "as" => {}
                None => fault(line, format!("{} names no room: write crate::room::item", p.join("::"))),
                Some(r) if r < own_row || SAME_ROW.contains(&(room, used)) => {}
                Some(r) if r == own_row => fault(line, format!("{room} uses {used} of its own row {r}")),
                Some(r) => fault(line, format!("{room} (row {own_row}) uses {used} of the higher row {r}")),
            }
        }
        if !OUTSIDE_WORLD.contains(&room) {
            let world =
                WORLD_PATHS.iter().any(|w| p.len() >= w.len() && w.iter().zip(&p).all(|(a, b)| a == b));
            if world || p.iter().any(|s| WORLD_NAMES.contains(&s.as_str())) {
                fault(line, format!("{room} reaches the outside world: {}", p.join("::")));
            }
        } else if GEOMETRY.contains(&first) {
            fault(line, format!("{room} does geometry: {}", p.join("::")));
        }
        if p.len() == 2 && matches!(first, "crate" | "std") && p[1] == "as" {
            fault(line, format!("a second name for {first} hides what is used"));
        }
    }
    out
}

fn root() -> PathBuf {
    PathBuf::from(env!("CARGO_MANIFEST_DIR"))
}

/// All files under `dir` with one of the extensions, sorted; what is built or made is left out.
fn files_under(dir: &Path, extensions: &[&str]) -> Vec<PathBuf> {
    let mut out = Vec::new();
    let mut todo = vec![dir.to_path_buf()];
    while let Some(d) = todo.pop() {
        for entry in std::fs::read_dir(&d).unwrap() {
            let path = entry.unwrap().path();
            let name = path.file_name().unwrap().to_string_lossy().into_owned();
            if ["target", "__pycache__", "stagewright-set", ".git"].contains(&name.as_str()) {
                continue;
            }
            if path.is_dir() {
                todo.push(path);
            } else if path
                .extension()
                .map_or(extensions.contains(&""), |e| extensions.contains(&&*e.to_string_lossy()))
            {
                out.push(path);
            }
        }
    }
    out.sort();
    out
}

#[test]
fn every_room_uses_only_what_stands_below_it() {
    let src = root().join("src");
    let files = files_under(&src, &["rs"]);
    assert!(files.len() >= 20, "only {} sources found under src/", files.len());
    let mut bad = Vec::new();
    for f in files {
        let relative = f.strip_prefix(&src).unwrap().to_string_lossy().replace('\\', "/");
        bad.extend(faults(&relative, &std::fs::read_to_string(&f).unwrap()));
    }
    assert!(bad.is_empty(), "the order of the house is broken:\n{}", bad.join("\n"));
}

#[test]
fn the_library_has_exactly_the_rooms_of_the_table() {
    let text = std::fs::read_to_string(root().join("src/lib.rs")).unwrap();
    let t = tokens(&strip(&text));
    let declared: BTreeSet<&str> =
        t.windows(2).filter(|w| w[0].text == "mod").map(|w| w[1].text.as_str()).collect();
    let table: BTreeSet<&str> = ROWS.iter().flat_map(|r| r.iter().copied()).collect();
    assert_eq!(declared, table);
}

#[test]
fn no_file_names_a_place_on_a_builders_machine() {
    let places = [
        concat!("/wo", "rk/"),
        concat!("/ho", "me/"),
        concat!("/ro", "ot/"),
        concat!("/Us", "ers/"),
        concat!("C:", "\\Us", "ers"),
    ];
    let kinds = ["rs", "md", "toml", "py", "cpp", "json", "txt", "html", "csv", "sh", ""];
    let mut bad = Vec::new();
    for f in files_under(&root(), &kinds) {
        let Ok(text) = std::fs::read_to_string(&f) else { continue };
        for (n, line) in text.lines().enumerate() {
            for place in places.iter().filter(|p| line.contains(**p)) {
                bad.push(format!("{}:{}: {place}", f.display(), n + 1));
            }
        }
    }
    assert!(bad.is_empty(), "paths of one machine only:\n{}", bad.join("\n"));
}

#[test]
fn planted_uses_of_higher_rows_are_found() {
    for (file, source, expected) in [
        ("mesh/x.rs", "use crate::solid::audit;", "higher row 3"),
        ("mesh/x.rs", "use crate::{geom::Vec3, job::Job};", "uses job"),
        ("mesh/x.rs", "use crate::{geom::{Aabb, Vec3}, pipeline};", "uses pipeline"),
        ("units.rs", "fn f() { let x = crate::geom::Vec3::zeros(); }", "uses geom"),
        ("mesh/x.rs", "use super::super::check::Finding;", "uses check"),
        ("mesh/mod.rs", "use super::{geom::Vec3, report};", "uses report"),
        ("mesh/x.rs", "mod inner { use super::super::super::cli::run; }", "uses cli"),
        ("check/x.rs", "use crate::solid::solidify;", "own row"),
        ("field/x.rs", "pub(in crate::solid) fn f() {}", "own row"),
        ("job/mod.rs", "impl From<crate::orient::Cost> for u8 {}", "own row"),
        ("mesh/x.rs", "macro_rules! m { () => { $crate::batch::go() } }", "uses batch"),
        ("mesh/x.rs", "use stagewright::cli;", "uses cli"),
        ("mesh/x.rs", "use crate::TriMesh;", "names no room"),
        ("mesh/x.rs", "use crate::*;", "names no room"),
        ("mesh/x.rs", "use crate as c;", "second name"),
        ("stray.rs", "", "in no row"),
        ("main.rs", "fn main() { stagewright::batch::go() }", "cli only"),
        ("main.rs", "mod extra;", "may not have modules"),
    ] {
        let found = faults(file, source);
        assert!(found.len() == 1 && found[0].contains(expected), "{file}: {source}\ngave {found:?}");
    }
}

#[test]
fn planted_reaches_for_the_outside_world_are_found() {
    for (file, source) in [
        ("export/stl.rs", "use std::fs::File;"),
        ("export/stl.rs", "use std::{fs, io::Write};"),
        ("check/x.rs", "fn f() { println!(\"x\"); }"),
        ("pipeline.rs", "let t = std::time::Instant::now();"),
        ("job/mod.rs", "fn f() { ::std::process::exit(1) }"),
        ("report/mod.rs", "use std::io::{self, stdout};"),
        ("solid/grid.rs", "use sysinfo::System;"),
        ("batch.rs", "use nalgebra::Vector3;"),
    ] {
        let found = faults(file, source);
        assert!(!found.is_empty(), "{file}: {source} was let through");
    }
}

#[test]
fn what_is_allowed_is_let_through() {
    for (file, source) in [
        ("solid/grid.rs", "use crate::field::Field; use crate::geom::{Aabb, Vec3};"),
        ("mesh/x.rs", "use super::TriMesh; use crate::mesh::Side; pub(crate) fn f() {}"),
        (
            "mesh/x.rs",
            "/// [`crate::cli::run`] prints; `std::fs` too\n//! crate::job\n/* crate::job /* x */ y */",
        ),
        ("mesh/x.rs", "const S: &str = \"crate::job \\\" crate::cli\"; const R: &str = r#\"crate::\"job\"#;"),
        ("mesh/x.rs", "fn f<'a>(c: char) -> bool { c == '\"' || c == '\\'' || c == 'x' } // crate::cli"),
        ("mesh/x.rs", "#[cfg(test)]\nmod tests { use crate::solid::solidify; fn f() { println!(\"x\") } }"),
        ("mesh/x.rs", "mod inner { use super::Thing; use super::super::Side; }"),
        ("batch.rs", "use std::fs::File; use std::time::Instant;"),
        ("export/stl.rs", "use std::io::Write; fn f(w: &mut dyn Write) { write!(w, \"x\"); }"),
        ("main.rs", "fn main() -> std::process::ExitCode { stagewright::cli::run() }"),
        ("lib.rs", "pub mod units;"),
    ] {
        let found = faults(file, source);
        assert!(found.is_empty(), "{file}: {source}\ngave {found:?}");
    }
}

#[test]
fn code_after_a_test_module_is_still_read() {
    let source = "#[cfg(test)]\nmod tests { fn f() { if true { } } }\nuse crate::cli::run;";
    assert_eq!(faults("mesh/x.rs", source), ["src/mesh/x.rs:3: mesh (row 2) uses cli of the higher row 8"]);
}
