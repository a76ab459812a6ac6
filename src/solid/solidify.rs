//! A field in, one closed mesh out.

use super::extract::extract;
use super::fill::fill_thin_air;
use super::lattice::{BLOCK, Lattice, block_range, exact_cell};
use super::probe::Probe;
use crate::field::Field;
use crate::geom::Vec3;
use crate::mesh::{TriMesh, components};

/// Blocks the sign table may hold: 8 bytes each, 0.5 GB.
const MOST_BLOCKS: f64 = 6.7e7;
/// Finest cell relative to the size of the part: node coordinates must be exact in f32.
const MOST_CELLS: f64 = 8000.0;

/// How to mesh.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct GridSettings {
    /// Edge of a cell, mm; rounded down by at most 0.1 % to a number with few binary digits.
    pub cell_mm: f64,
    /// Shells with less volume than this are filled (air) or dropped (material), mm3.
    pub crumb_mm3: f64,
}

/// A meshed field.
pub struct Meshed<'f> {
    /// Closed, two-manifold, outward, free of self-crossings; every coordinate exact in f32.
    pub mesh: TriMesh,
    /// Edge of a cell as used, mm.
    pub cell_mm: f64,
    /// Lattice nodes in air too thin for the grid, made material.
    pub filled_nodes: usize,
    /// How far above the exact surface the farthest of them was, mm.
    pub filled_deepest_mm: f64,
    /// Closed bubbles of air smaller than the crumb, filled.
    pub filled_voids: usize,
    /// Loose bits of material smaller than the crumb, dropped.
    pub dropped_crumbs: usize,
    /// Volume of all of these, mm3.
    pub crumbs_mm3: f64,
    /// The exact field, quick near the mesh.
    pub probe: Probe<'f>,
}

/// Why a field could not be meshed.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum GridError {
    /// A cell that is not a positive length.
    #[error("a grid of {0} mm is not a positive length; set grid_mm to about a quarter of wall_mm")]
    Cell(f64),
    /// More cells across the part than single precision can number.
    #[error(
        "a grid of {cell_mm} mm on a part of {extent_mm:.1} mm is finer than the limit of {limit_mm:.4} mm \
         for this size; raise grid_mm"
    )]
    TooFine {
        /// The cell asked for, mm.
        cell_mm: f64,
        /// Greatest extent of the part, mm.
        extent_mm: f64,
        /// The finest cell for this extent, mm.
        limit_mm: f64,
    },
    /// The field has no zero set on this grid.
    #[error("nothing solid is left on a grid of {0} mm; lower grid_mm or raise wall_mm")]
    Empty(f64),
}

/// Meshes the set where `field` is not positive.
///
/// # Guarantees
/// By construction, for any field whatever its values: the mesh is closed, two-manifold at edges and
/// vertices, oriented outward and embedded, and stays so when positions are read as f32, because every
/// vertex on a lattice edge stays exactly on it when rounded (see the module docs of `cube`, `extract`).
/// For a 1-Lipschitz field: no part of the zero set that the nodes can see is missed. Vertices on lattice
/// edges lie within 0.2 um of the zero set (plus the field's own accuracy, plus a five-thousandth of a cell
/// where the zero set passes a node), except beside air filled by `fill`.
///
/// # Limits
/// Air thinner than about one cell between two walls becomes material; `filled_nodes` counts it.
/// Memory: about 2.1 kB per block of 512 cells near the surface, 36 bytes a vertex, 16 bytes a triangle,
/// and the narrowed fields.
///
/// # Errors
/// [`GridError`] when the cell is not a positive length, too fine for the part, or nothing is left.
pub fn solidify<'f>(field: &'f dyn Field, settings: &GridSettings) -> Result<Meshed<'f>, GridError> {
    let wanted = settings.cell_mm;
    if !(wanted.is_finite() && wanted > 0.0) {
        return Err(GridError::Cell(wanted));
    }
    let cell = exact_cell(wanted);
    let bounds = field.bounds();
    let reach = bounds.min.amax().max(bounds.max.amax()).max(bounds.extent().amax());
    let (_, dims) = block_range(&bounds, cell * f64::from(BLOCK));
    if reach / cell > MOST_CELLS || dims.iter().map(|&d| f64::from(d)).product::<f64>() > MOST_BLOCKS {
        let limit_mm = reach / MOST_CELLS;
        return Err(GridError::TooFine { cell_mm: wanted, extent_mm: reach, limit_mm });
    }
    let mut lattice = Lattice::sample(field, cell);
    let filled = fill_thin_air(&mut lattice);
    let mesh = extract(&lattice);
    let probe = lattice.into_probe(field);
    let (mesh, filled_voids, dropped_crumbs, crumbs_mm3) = without_crumbs(mesh, settings.crumb_mm3);
    if mesh.triangles.is_empty() {
        return Err(GridError::Empty(wanted));
    }
    Ok(Meshed {
        mesh,
        cell_mm: cell,
        filled_nodes: filled.nodes,
        filled_deepest_mm: f64::from(filled.deepest_mm),
        filled_voids,
        dropped_crumbs,
        crumbs_mm3,
        probe,
    })
}

/// Leaves out closed shells with less volume than `crumb_mm3`; counts those of air and of material and sums
/// their volumes.
fn without_crumbs(mesh: TriMesh, crumb_mm3: f64) -> (TriMesh, usize, usize, f64) {
    let parts = components(&mesh);
    let small: Vec<_> = parts.iter().filter(|c| c.volume_mm3.abs() < crumb_mm3).collect();
    if small.is_empty() {
        return (mesh, 0, 0, 0.0);
    }
    let voids = small.iter().filter(|c| c.volume_mm3 < 0.0).count();
    let mut keep = vec![true; mesh.triangles.len()];
    small.iter().flat_map(|c| &c.triangles).for_each(|&t| keep[t as usize] = false);
    let mut number = vec![u32::MAX; mesh.positions.len()];
    let mut out = TriMesh::default();
    for (t, _) in keep.iter().enumerate().filter(|(_, k)| **k) {
        out.triangles.push(mesh.triangles[t].map(|v| {
            let slot = &mut number[v as usize];
            if *slot == u32::MAX {
                *slot = u32::try_from(out.positions.len()).unwrap_or(u32::MAX);
                out.positions.push(mesh.positions[v as usize]);
            }
            *slot
        }));
        out.sides.push(mesh.sides[t]);
    }
    let volume = small.iter().map(|c| c.volume_mm3.abs()).sum();
    (out, voids, small.len() - voids, volume)
}

/// Blocks of the sign table for a part of this extent, for estimates of memory; 8 bytes each.
#[must_use]
pub fn block_estimate(extent_mm: &Vec3, cell_mm: f64) -> f64 {
    let b = cell_mm * f64::from(BLOCK);
    (0..3).map(|k| extent_mm[k] / b + 2.0).product()
}
