//! Time and memory from skin to closed mesh, beside a general-purpose sparse-voxel library in the same run.
//!
//! `cargo bench` prints one table a stage: for each grid the medians of our own runs (1 and 2 threads), of the
//! rival's, and the ratio. Every run is a process of its own, so its peak memory is its own. No figure is
//! tested: machines differ, ratios in one run less so. Options (after `--`): `--fine` adds the 0.2 mm grid,
//! `--runs N` (3), `--order N --tau T` for one stage only, `--quick` for one run at 0.6 mm.
//!
//! The rival is built from `tests/bench/rival.cpp` with `g++ -O3 -march=native` when its library is there. It gets the
//! skin as triangles twice: a cut icosahedron of 1.3 million triangles, and the triangles our own field uses. Linux only: CPU time and peak memory are read from /proc.
#![allow(clippy::print_stdout, reason = "a bench talks to a person")]

use anyhow::{Context, Result, bail, ensure};
use std::path::{Path, PathBuf};
use std::process::{Command, ExitCode};

#[path = "ours.rs"]
mod ours;

/// Greatest extent of the solid, mm.
const SIZE_MM: f64 = 120.0;
/// Wall, mm.
const WALL_MM: f64 = 2.4;
/// The stages measured when none is named: (order, tau).
const STAGES: [(u32, f64); 3] = [(2, 0.5), (2, 0.41), (3, 0.4)];
/// The grids measured, mm; the last with `--fine` only.
const GRIDS_MM: [f64; 4] = [0.6, 0.4, 0.3, 0.2];

/// What one run reports.
#[derive(Clone, Debug, Default)]
struct Run {
    cpu_s: f64,
    wall_s: f64,
    peak_mib: f64,
    /// CPU seconds to sample the skin, not part of `cpu_s`; 0 for the rival, which gets it ready made.
    sample_s: f64,
    input: f64,
    triangles: f64,
    shells: f64,
    euler: f64,
    bad_edges: f64,
}

impl Run {
    /// Reads `key=value` words; every key must be there.
    fn parse(line: &str) -> Result<Self> {
        let get = |key: &str| -> Result<f64> {
            let word = line.split_whitespace().find_map(|w| w.strip_prefix(key)?.strip_prefix('='));
            word.with_context(|| format!("no `{key}` in `{line}`"))?.parse().context("not a number")
        };
        Ok(Self {
            cpu_s: get("cpu_s")?,
            wall_s: get("wall_s")?,
            peak_mib: get("peak_mib")?,
            sample_s: get("sample_s")?,
            input: get("input")?,
            triangles: get("triangles")?,
            shells: get("shells")?,
            euler: get("euler")?,
            bad_edges: get("bad_edges")?,
        })
    }

    /// The median of every figure on its own.
    fn medians(runs: &[Self]) -> Self {
        let of = |f: fn(&Self) -> f64| {
            let mut v: Vec<f64> = runs.iter().map(f).collect();
            v.sort_by(f64::total_cmp);
            if v.len() % 2 == 1 { v[v.len() / 2] } else { 0.5 * (v[v.len() / 2 - 1] + v[v.len() / 2]) }
        };
        Self {
            cpu_s: of(|r| r.cpu_s),
            wall_s: of(|r| r.wall_s),
            peak_mib: of(|r| r.peak_mib),
            sample_s: of(|r| r.sample_s),
            input: of(|r| r.input),
            triangles: of(|r| r.triangles),
            shells: of(|r| r.shells),
            euler: of(|r| r.euler),
            bad_edges: of(|r| r.bad_edges),
        }
    }
}

/// The slope of the least-squares line through (log x, log y).
fn log_slope(points: &[(f64, f64)]) -> f64 {
    let n = points.iter().fold(0.0, |n, _| n + 1.0);
    let mean = |f: fn(&(f64, f64)) -> f64| points.iter().map(|p| f(p).ln()).sum::<f64>() / n;
    let (mx, my) = (mean(|p| p.0), mean(|p| p.1));
    let sum =
        |f: &dyn Fn(f64, f64) -> f64| points.iter().map(|p| f(p.0.ln() - mx, p.1.ln() - my)).sum::<f64>();
    sum(&|x, y| x * y) / sum(&|x, _| x * x)
}

/// One contender: how to start a run of it.
struct Contender<'a> {
    name: String,
    command: Box<dyn Fn(f64) -> Command + 'a>,
}

fn measured(mut command: Command) -> Result<Run> {
    let output = command.output().with_context(|| format!("{command:?} did not start"))?;
    let text = String::from_utf8_lossy(&output.stdout).into_owned();
    ensure!(output.status.success(), "{command:?} failed: {}", String::from_utf8_lossy(&output.stderr));
    Run::parse(text.trim())
}

/// Builds the rival, or says in one line why there is none.
fn build_rival(folder: &Path) -> Option<PathBuf> {
    let source = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/bench/rival.cpp");
    let program = folder.join("rival");
    let built = Command::new("g++")
        .args(["-std=c++17", "-O3", "-march=native"])
        .arg(source)
        .arg("-o")
        .arg(&program)
        .args(["-lopenvdb", "-ltbb"])
        .output();
    match built {
        Ok(o) if o.status.success() => Some(program),
        _ => {
            println!(
                "rival skipped: install libopenvdb-dev libboost-dev libboost-iostreams-dev libtbb-dev and g++"
            );
            None
        }
    }
}

struct Options {
    stages: Vec<(u32, f64)>,
    grids: Vec<f64>,
    runs: usize,
}

fn options(args: &[String]) -> Result<Options> {
    let mut o = Options { stages: STAGES.to_vec(), grids: GRIDS_MM[..3].to_vec(), runs: 3 };
    let (mut order, mut tau) = (None, None);
    let mut i = 0;
    while i < args.len() {
        let value = || args.get(i + 1).with_context(|| format!("{} needs a value", args[i]));
        match args[i].as_str() {
            "--bench" => {} // cargo says so
            "--fine" => o.grids = GRIDS_MM.to_vec(),
            "--quick" => (o.grids, o.runs) = (GRIDS_MM[..1].to_vec(), 1),
            "--runs" => o.runs = value()?.parse().context("--runs")?,
            "--order" => order = Some(value()?.parse().context("--order")?),
            "--tau" => tau = Some(value()?.parse().context("--tau")?),
            other => bail!("unknown option `{other}`; known: --fine --quick --runs --order --tau"),
        }
        i += if ["--runs", "--order", "--tau"].contains(&args[i].as_str()) { 2 } else { 1 };
    }
    ensure!(o.runs > 0, "--runs must be at least 1");
    match (order, tau) {
        (Some(n), Some(t)) => o.stages = vec![(n, t)],
        (None, None) => {}
        _ => bail!("--order and --tau go together"),
    }
    Ok(o)
}

fn bench(o: &Options) -> Result<()> {
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join("bench");
    std::fs::create_dir_all(&folder)?;
    let me = std::env::current_exe()?;
    let rival = build_rival(&folder);
    println!("solid {SIZE_MM} mm, wall {WALL_MM} mm; medians of {} runs, each a process of its own", o.runs);
    for &(order, tau) in &o.stages {
        println!("\norder {order}, tau {tau}");
        let stage = [order.to_string(), tau.to_string()];
        let mut contenders = Vec::new();
        for threads in ["1", "2"] {
            let (me, stage) = (&me, &stage);
            contenders.push(Contender {
                name: format!("ours, {threads} threads"),
                command: Box::new(move |h| {
                    let mut c = Command::new(me);
                    c.args(["--child", "ours"]).args(stage).args([&h.to_string(), threads]);
                    c
                }),
            });
        }
        if let Some(rival) = &rival {
            for (what, threads) in [("fine", "1"), ("fine", "2"), ("same", "1")] {
                let mut skins = Vec::new();
                for &h in &o.grids {
                    let skin = folder.join(format!("skin-{order}-{tau}-{what}-{h}.tri"));
                    let mut c = Command::new(&me);
                    c.args(["--child", &format!("skin-{what}")]).args(&stage).arg(h.to_string()).arg(&skin);
                    let output = c.output()?;
                    ensure!(output.status.success(), "no skin: {}", String::from_utf8_lossy(&output.stderr));
                    skins.push((h, skin));
                }
                contenders.push(Contender {
                    name: format!("rival, {what} skin, {threads} threads"),
                    command: Box::new(move |h| {
                        let mut c = Command::new(rival);
                        c.args(skins.iter().filter(|s| s.0.total_cmp(&h).is_eq()).map(|s| &s.1));
                        c.args([&h.to_string(), &WALL_MM.to_string(), threads]);
                        c
                    }),
                });
            }
        }
        table(&contenders, o)?;
    }
    Ok(())
}

/// Runs all contenders, one round after another so that a busy minute hits all of them, and prints the table.
fn table(contenders: &[Contender<'_>], o: &Options) -> Result<()> {
    println!(
        "{:<30} {:>5} {:>8} {:>8} {:>9} {:>8} {:>10} {:>9} {:>6} {:>6} {:>4} {:>9} {:>9}",
        "",
        "grid",
        "CPU s",
        "wall s",
        "peak MiB",
        "sample s",
        "skin tri",
        "triangles",
        "shells",
        "Euler",
        "bad",
        "CPU/ours1",
        "peak/ours1"
    );
    let mut series: Vec<Vec<(f64, Run)>> = vec![Vec::new(); contenders.len()];
    for &h in &o.grids {
        let mut runs: Vec<Vec<Run>> = vec![Vec::new(); contenders.len()];
        for _ in 0..o.runs {
            for (c, r) in contenders.iter().zip(&mut runs) {
                r.push(measured((c.command)(h))?);
            }
        }
        let medians: Vec<Run> = runs.iter().map(|r| Run::medians(r)).collect();
        for (k, (c, m)) in contenders.iter().zip(&medians).enumerate() {
            println!(
                "{:<30} {h:>5} {:>8.2} {:>8.2} {:>9.0} {:>8.2} {:>10.0} {:>9.0} {:>6.0} {:>6.0} {:>4.0} {:>9.2} {:>9.2}",
                c.name,
                m.cpu_s,
                m.wall_s,
                m.peak_mib,
                m.sample_s,
                m.input,
                m.triangles,
                m.shells,
                m.euler,
                m.bad_edges,
                m.cpu_s / medians[0].cpu_s,
                m.peak_mib / medians[0].peak_mib
            );
            series[k].push((h, m.clone()));
        }
    }
    if o.grids.len() > 1 {
        println!("slope over 1/grid (2 = grows with the surface, 3 = with the box):");
        for (c, s) in contenders.iter().zip(&series) {
            let of =
                |f: fn(&Run) -> f64| log_slope(&s.iter().map(|(h, r)| (1.0 / h, f(r))).collect::<Vec<_>>());
            println!("{:<30} CPU {:.2}, peak {:.2}", c.name, of(|r| r.cpu_s), of(|r| r.peak_mib));
        }
    }
    Ok(())
}

fn run(args: &[String]) -> Result<()> {
    match args.first().map(String::as_str) {
        Some("--child") => ours::child(&args[1..], WALL_MM),
        _ => bench(&options(args)?),
    }
}

fn main() -> ExitCode {
    let args: Vec<String> = std::env::args().skip(1).collect();
    match run(&args) {
        Ok(()) => ExitCode::SUCCESS,
        Err(e) => {
            eprintln!("bench: {e:#}");
            ExitCode::from(2)
        }
    }
}
