//! Totals of a raster's cells, shared out over the grid so that none is lost or counted twice.

use gdal::Dataset;
use gdal::spatial_ref::CoordTransform;

use crate::diag::{Diagnostic, Outcome, Warnings};
use crate::grid::{CrsKind, Grid};

use super::cells::Cells;
use super::crs;
use super::grid_in::unreadable;
use super::overlay::Axis;

/// Finest division of a source cell when its total is shared out over a grid of another CRS.
const MOST_PARTS: usize = 64;

/// Shares each source cell's total out over the grid's cells: by exact overlap where the grids share
/// a CRS, else by parts a quarter of a target cell wide or less, each spread over the box that its
/// corners span.
pub(super) fn shared_out(
    dataset: &Dataset,
    source: &Grid,
    grid: &Grid,
    file: &str,
    warnings: &mut Warnings,
) -> Outcome<Vec<f64>> {
    let failed = |e: gdal::errors::GdalError| unreadable(file, &e);
    let cells = Cells::open(dataset).map_err(failed)?;
    let (from, to) = (crs::parse(&source.crs.wkt, file)?, crs::parse(&grid.crs.wkt, "grid")?);
    let mut sums = Sums {
        grid,
        totals: vec![f64::NAN; grid.len()],
        across: Axis::columns(grid),
        down: Axis::rows(grid),
    };
    let (sharing, window) = if from == to {
        (Sharing::Overlap, [0, source.columns, 0, source.rows])
    } else {
        let there =
            crs::transform(&from, &to).ok_or_else(|| super::features::no_way(file, &grid.crs.label))?;
        let back =
            crs::transform(&to, &from).ok_or_else(|| super::features::no_way(file, &grid.crs.label))?;
        let ratio = source.cell_side().get() / grid.cell_side().get();
        (
            Sharing::Parts(((4.0 * ratio).ceil() as usize).clamp(1, MOST_PARTS), there),
            window(source, grid, &back),
        )
    };
    let [west, east, top, bottom] = window;
    let (mut all, mut negative, mut least) = (0.0, 0_usize, 0.0_f64);
    for row in top..bottom {
        let values = cells.row(row, west, east).map_err(failed)?;
        let line: Vec<(usize, f64)> =
            values.into_iter().enumerate().filter(|(_, v)| !v.is_nan()).map(|(c, v)| (west + c, v)).collect();
        negative += line.iter().filter(|(_, v)| *v < 0.0).count();
        least = line.iter().fold(least, |l, (_, v)| l.min(*v));
        all += line.iter().map(|(_, v)| v).sum::<f64>();
        sharing.row(source, row, &line, &mut sums);
    }
    if negative > 0 {
        let text = format!(
            "{negative} cells are negative (smallest {least}), which a total to be shared out cannot be"
        );
        return Err(Diagnostic::input("negative_value", format!("{file}, band 1"), text)
            .cure("mend the raster (is a nodata value undeclared?), or use another `resample`")
            .into());
    }
    let kept: f64 = sums.totals.iter().filter(|v| !v.is_nan()).sum();
    if from == to && all > 0.0 && kept < 0.5 * all {
        let text = format!("{:.1} % of the raster's total of {all:.6} lies on the grid", 100.0 * kept / all);
        warnings.push(
            Diagnostic::input("total_off_grid", format!("{file}, band 1"), text)
                .cure("this is as it should be when the raster covers a larger area than the grid"),
        );
    }
    Ok(sums.totals)
}

/// Columns and rows of the source that can reach the grid: west, east, top, bottom.
fn window(source: &Grid, grid: &Grid, back: &CoordTransform) -> [usize; 4] {
    const LOOKS: usize = 40;
    let whole = [0, source.columns, 0, source.rows];
    let at = |i: usize, n: usize| i as f64 / LOOKS as f64 * n as f64;
    let (mut x, mut y): (Vec<f64>, Vec<f64>) = (0..=LOOKS)
        .flat_map(|i| (0..=LOOKS).map(move |j| (i, j)))
        .map(|(i, j)| (grid.x_at(at(j, grid.columns)), grid.y_at(at(i, grid.rows))))
        .unzip();
    crs::turn(back, &mut x, &mut y);
    let span = |v: &[f64]| v.iter().fold((f64::MAX, f64::MIN), |(l, h), v| (l.min(*v), h.max(*v)));
    let ((x0, x1), (y0, y1)) = (span(&x), span(&y));
    let round = source.crs.kind == CrsKind::Geographic;
    // round a pole, across 180°, on another turn of longitude: every cell is looked at
    let elsewhere = round
        && (x1 - x0 > 180.0 || source.x_at(0.0) > x0 + 180.0 || source.x_at(source.columns as f64) > 180.5);
    if x.iter().any(|v| v.is_nan()) || elsewhere {
        return whole;
    }
    let limits = |a: f64, b: f64, origin: f64, step: f64, count: usize| {
        let (p, q) = ((a - origin) / step, (b - origin) / step);
        let margin = 2.0 + 0.05 * (p - q).abs();
        let within = |v: f64| v.clamp(0.0, count as f64) as usize;
        (within((p.min(q) - margin).floor()), within((p.max(q) + margin).ceil()))
    };
    let t = &source.transform;
    let (west, east) = limits(x0, x1, t[0], t[1], source.columns);
    let (top, bottom) = limits(y0, y1, t[3], t[5], source.rows);
    if east <= west { [0, 0, 0, 0] } else { [west, east, top, bottom] }
}

/// Totals over the grid; not-a-number until a source cell with data reaches a cell.
struct Sums<'a> {
    grid: &'a Grid,
    totals: Vec<f64>,
    across: Axis,
    down: Axis,
}

impl Sums<'_> {
    /// Spreads a value evenly over a box.
    fn spread(&mut self, value: f64, x: (f64, f64), y: (f64, f64)) {
        let down = self.down.shares(y.0, y.1);
        for (column, across) in self.across.shares(x.0, x.1) {
            for (row, share) in &down {
                let total = &mut self.totals[row * self.grid.columns + column];
                let part = value * across * share;
                *total = if total.is_nan() { part } else { *total + part };
            }
        }
    }
}

enum Sharing {
    /// Same CRS: by the area two rectangles share.
    Overlap,
    /// Another CRS: each source cell in `n` by `n` parts.
    Parts(usize, CoordTransform),
}

impl Sharing {
    fn row(&self, source: &Grid, row: usize, line: &[(usize, f64)], sums: &mut Sums) {
        let edge = |c: usize| source.x_at(c as f64);
        match self {
            Self::Overlap => {
                let y = (source.y_at(row as f64), source.y_at(row as f64 + 1.0));
                line.iter().for_each(|(c, v)| sums.spread(*v, (edge(*c), edge(c + 1)), y));
            }
            Self::Parts(n, transform) => parts(source, row, line, (*n, transform), sums),
        }
    }
}

/// Turns the corners of every part and spreads the part over the box they span.
fn parts(
    source: &Grid,
    row: usize,
    line: &[(usize, f64)],
    (n, transform): (usize, &CoordTransform),
    sums: &mut Sums,
) {
    let corners = n + 1;
    let part = |i: usize| i as f64 / n as f64;
    let (mut x, mut y): (Vec<f64>, Vec<f64>) = line
        .iter()
        .flat_map(|(c, _)| (0..corners * corners).map(move |k| (*c, k)))
        .map(|(c, k)| {
            (source.x_at(c as f64 + part(k % corners)), source.y_at(row as f64 + part(k / corners)))
        })
        .unzip();
    crs::turn(transform, &mut x, &mut y);
    let round = sums.grid.crs.kind == CrsKind::Geographic;
    for (i, (_, value)) in line.iter().enumerate() {
        let first = i * corners * corners;
        for k in 0..n * n {
            let corner = first + k / n * corners + k % n;
            let four = [corner, corner + 1, corner + corners, corner + corners + 1];
            if let Some((xs, ys)) = box_of(&four.map(|c| (x[c], y[c])), round) {
                sums.spread(value / (n * n) as f64, xs, ys);
            }
        }
    }
}

/// The box of the same area-centre as four corners, as wide and high as two opposite sides lie apart
/// on average; `None` where a corner has no place.
fn box_of(corners: &[(f64, f64); 4], round: bool) -> Option<((f64, f64), (f64, f64))> {
    if corners.iter().any(|c| c.0.is_nan()) {
        return None;
    }
    // corners either side of 180° are brought to one side
    let near = |x: f64| if round { x - ((x - corners[0].0) / 360.0).round() * 360.0 } else { x };
    let x: Vec<f64> = corners.iter().map(|c| near(c.0)).collect();
    let y: Vec<f64> = corners.iter().map(|c| c.1).collect();
    let middle = |v: &[f64]| v.iter().sum::<f64>() / 4.0;
    // half the side along the axis, whichever of the two directions runs along it more
    let reach = |v: &[f64]| {
        let along = ((v[1] - v[0]).abs() + (v[3] - v[2]).abs()) / 4.0;
        let across = ((v[2] - v[0]).abs() + (v[3] - v[1]).abs()) / 4.0;
        along.max(across).max(1e-12)
    };
    let (cx, cy, rx, ry) = (middle(&x), middle(&y), reach(&x), reach(&y));
    Some(((cx - rx, cx + rx), (cy - ry, cy + ry)))
}
