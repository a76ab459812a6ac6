//! The child processes of the bench: our own run, and the skins written for the rival.

use crate::SIZE_MM;
use anyhow::{Context, Result, bail};
use nalgebra::Rotation3;
use stagewright::field::SheetField;
use stagewright::geom::{Placed, Placement, Vec3};
use stagewright::mesh::measure::euler_number;
use stagewright::mesh::{EdgeTable, components};
use stagewright::skin::{StageSurface, sample};
use stagewright::solid::{GridSettings, solidify};
use std::io::{BufWriter, Write};
use std::time::Instant;

/// Chord bound of our skin as a share of the grid, as the pipeline takes it.
const CHORD_OF_GRID: f64 = 0.1;
/// Shells below this volume are filled or dropped, mm3: the cube of mex-pla's smallest feature, as the program does.
const CRUMB_MM3: f64 = 8.0;

/// Edges of the icosahedron are cut into this many pieces: 20 x 256^2 = 1 310 720 triangles, the input of the
/// figures the rival was first measured with.
const FINE_PIECES: usize = 256;

/// A stage in its own coordinates and where to put it: greatest extent `SIZE_MM`, wall included.
pub(crate) fn placed_stage(order: u32, tau: f64, wall_mm: f64) -> Result<(Box<dyn StageSurface>, Placement)> {
    let stage = stagewright::skin::family("ruled", order)?.stage(tau);
    let (points, _) = icosphere(64);
    let mut extent = stagewright::geom::Aabb::EMPTY;
    for p in points {
        extent.include(&stage.position(p));
    }
    let scale = (SIZE_MM - wall_mm) / extent.extent().max();
    let placement = Placement { scale, rotation: Rotation3::identity(), shift: -extent.centre() * scale };
    Ok((stage, placement))
}

/// The unit sphere as an icosahedron whose faces are cut into `pieces`^2 triangles; faces do not share points.
fn icosphere(pieces: usize) -> (Vec<Vec3>, Vec<[u32; 3]>) {
    let g = 0.5 * (1.0 + 5.0_f64.sqrt());
    let mut corners = Vec::new();
    for (a, b) in [(-1.0, -g), (-1.0, g), (1.0, -g), (1.0, g)] {
        corners.extend([Vec3::new(0.0, a, b), Vec3::new(a, b, 0.0), Vec3::new(b, 0.0, a)]);
    }
    let near = |a: &Vec3, b: &Vec3| (a - b).norm() < 2.1; // edges are 2 long, the next distance is 3.2
    let (mut points, mut triangles) = (Vec::new(), Vec::new());
    for i in 0..12 {
        for j in i + 1..12 {
            for k in j + 1..12 {
                let (a, mut b, mut c) = (corners[i], corners[j], corners[k]);
                if !(near(&a, &b) && near(&b, &c) && near(&c, &a)) {
                    continue;
                }
                if a.dot(&b.cross(&c)) < 0.0 {
                    std::mem::swap(&mut b, &mut c);
                }
                cut_face([a, b, c], pieces, &mut points, &mut triangles);
            }
        }
    }
    (points, triangles)
}

fn cut_face([a, b, c]: [Vec3; 3], pieces: usize, points: &mut Vec<Vec3>, triangles: &mut Vec<[u32; 3]>) {
    let first = points.len();
    let at =
        |row: usize, column: usize| u32::try_from(first + row * (row + 1) / 2 + column).unwrap_or(u32::MAX);
    for row in 0..=pieces {
        for column in 0..=row {
            let (u, v) = ((row - column) as f64, column as f64);
            let w = (pieces - row) as f64;
            points.push((a * w + b * u + c * v).normalize());
            if row < pieces {
                triangles.push([at(row, column), at(row + 1, column), at(row + 1, column + 1)]);
            }
            if row < pieces && column < row {
                triangles.push([at(row, column), at(row + 1, column + 1), at(row, column + 1)]);
            }
        }
    }
}

/// Writes the file `rival.cpp` reads.
fn write_skin(path: &str, positions: &[Vec3], triangles: &[[u32; 3]]) -> Result<()> {
    let mut out = BufWriter::new(std::fs::File::create(path).with_context(|| path.to_owned())?);
    for n in [positions.len(), triangles.len()] {
        out.write_all(&u32::try_from(n)?.to_le_bytes())?;
    }
    for x in positions.iter().flat_map(|p| p.iter()) {
        #[expect(clippy::cast_possible_truncation, reason = "the rival works in f32")]
        out.write_all(&(*x as f32).to_le_bytes())?;
    }
    for i in triangles.iter().flatten() {
        out.write_all(&i.to_le_bytes())?;
    }
    out.flush()?;
    Ok(())
}

/// CPU seconds this process has used, all threads; Linux counts them in hundredths.
fn cpu_seconds() -> Result<f64> {
    let stat = std::fs::read_to_string("/proc/self/stat").context("the bench needs Linux")?;
    let fields = stat.rsplit_once(')').context("/proc/self/stat has no name")?.1;
    let mut ticks = fields.split_whitespace().skip(11).take(2).map(str::parse::<f64>);
    let mut next = || ticks.next().context("/proc/self/stat is short")?.context("/proc/self/stat");
    Ok((next()? + next()?) / 100.0)
}

/// The high-water mark of this process's memory, MiB.
fn peak_mib() -> Result<f64> {
    let status = std::fs::read_to_string("/proc/self/status").context("the bench needs Linux")?;
    let line = status.lines().find_map(|l| l.strip_prefix("VmHWM:")).context("no VmHWM")?;
    let kib: f64 = line.split_whitespace().next().context("VmHWM is empty")?.parse()?;
    Ok(kib / 1024.0)
}

/// Our run: the field around the sampled skin, meshed. Sampling is timed apart, since the rival gets its skin
/// ready made; counting comes after time and memory are read.
fn ours(order: u32, tau: f64, wall_mm: f64, grid_mm: f64) -> Result<()> {
    let (stage, placement) = placed_stage(order, tau, wall_mm)?;
    let placed = Placed::new(stage.as_ref(), placement);
    let before = cpu_seconds()?;
    let skin = sample(&placed, CHORD_OF_GRID * grid_mm, 10_000_000)?;
    let cpu0 = cpu_seconds()?;
    let start = Instant::now();
    let field = SheetField::new(&skin, Some(&placed), wall_mm)?;
    let meshed = solidify(&field, &GridSettings { cell_mm: grid_mm, crumb_mm3: CRUMB_MM3 })?;
    let (cpu, wall) = (cpu_seconds()? - cpu0, start.elapsed().as_secs_f64());
    let peak = peak_mib()?;
    let table = EdgeTable::build(&meshed.mesh);
    println!(
        "cpu_s={cpu} wall_s={wall} peak_mib={peak} sample_s={} input={} triangles={} shells={} euler={} bad_edges={}",
        cpu0 - before,
        skin.triangles.len(),
        meshed.mesh.triangles.len(),
        components(&meshed.mesh).len(),
        euler_number(&meshed.mesh),
        table.edges().filter(|e| !e.is_manifold()).count()
    );
    Ok(())
}

/// `ours ORDER TAU GRID THREADS`, `skin-fine ORDER TAU GRID FILE`, `skin-same ORDER TAU GRID FILE`.
pub(crate) fn child(args: &[String], wall_mm: f64) -> Result<()> {
    let args: Vec<&str> = args.iter().map(String::as_str).collect();
    match args[..] {
        ["ours", order, tau, grid, threads] => {
            let (order, tau, grid) = (order.parse()?, tau.parse()?, grid.parse()?);
            let pool = rayon::ThreadPoolBuilder::new().num_threads(threads.parse()?).build()?;
            pool.install(|| ours(order, tau, wall_mm, grid))
        }
        ["skin-fine", order, tau, _grid, path] => {
            let (stage, placement) = placed_stage(order.parse()?, tau.parse()?, wall_mm)?;
            let (points, triangles) = icosphere(FINE_PIECES);
            let positions: Vec<Vec3> = points.iter().map(|p| placement.point(&stage.position(*p))).collect();
            write_skin(path, &positions, &triangles)
        }
        ["skin-same", order, tau, grid, path] => {
            let (stage, placement) = placed_stage(order.parse()?, tau.parse()?, wall_mm)?;
            let chord = CHORD_OF_GRID * grid.parse::<f64>()?;
            let skin = sample(&Placed::new(stage.as_ref(), placement), chord, 10_000_000)?;
            write_skin(path, &skin.positions, &skin.triangles)
        }
        _ => bail!("unknown child arguments {args:?}"),
    }
}
