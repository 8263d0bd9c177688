//! Rasters as layers: one value per inside cell.

use gdal::Dataset;
use gdal::DriverManager;
use gdal::raster::Buffer;

use crate::diag::{Diagnostic, Outcome, Warnings};
use crate::grid::{Grid, Region};
use crate::proxies::{LayerPlan, Resample};

use super::crs;
use super::files::Files;
use super::grid_in::{like, unreadable, valid};
use super::reproject::warp;

/// Finest division of a source cell when its total is shared out over another grid.
const MOST_PARTS: usize = 64;

/// Reads a raster onto the grid; the unit is the band's own.
pub(super) fn read(
    files: &Files,
    plan: &LayerPlan,
    region: &Region,
    warnings: &mut Warnings,
) -> Outcome<(Vec<f64>, String)> {
    let file = plan.file.as_str();
    let dataset = files.raster(file)?;
    let source = like(&dataset, file)?;
    let unit = dataset.rasterband(1).map(|b| b.unit()).unwrap_or_default();
    let over_grid = match plan.resample {
        Resample::Sum => shared_out(&dataset, &source, region.grid(), file, warnings)?,
        how => warped(&dataset, &source, region.grid(), how, file)?,
    };
    let mut values: Vec<f64> = (0..region.len()).map(|c| over_grid[region.flat(c)]).collect();
    settle_missing(&mut values, plan, &source, region)?;
    Ok((values, unit))
}

/// Fills or refuses cells without a value; infinite ones are always refused.
fn settle_missing(values: &mut [f64], plan: &LayerPlan, source: &Grid, region: &Region) -> Outcome<()> {
    let place = format!("{}, band 1", plan.file);
    let infinite = values.iter().filter(|v| v.is_infinite()).count();
    if infinite > 0 {
        let text = format!("{infinite} cells inside the region are infinite");
        return Err(Diagnostic::input("infinite_value", place, text).cure("mend the raster").into());
    }
    let missing = values.iter().filter(|v| v.is_nan()).count();
    if let Some(fill) = plan.missing {
        values.iter_mut().filter(|v| v.is_nan()).for_each(|v| *v = fill);
        return Ok(());
    }
    if missing == 0 {
        return Ok(());
    }
    if missing == values.len() {
        let ([a, b, c, d], [w, s, e, n]) = (source.extent(), region.grid().extent());
        let text = format!(
            "has no value inside the region: it spans x {a:.4} to {c:.4}, y {b:.4} to {d:.4} ({}), the grid \
             x {w:.4} to {e:.4}, y {s:.4} to {n:.4} ({})",
            source.crs.label,
            region.grid().crs.label
        );
        return Err(Diagnostic::input("layer_elsewhere", place, text)
            .cure("check the raster's CRS and extent")
            .into());
    }
    let text = format!("{missing} of {} cells inside the region have no value", values.len());
    let cure = format!("give layer `{}` a `missing` value, or a raster that covers the region", plan.name);
    Err(Diagnostic::input("missing_value", place, text).cure(cure).into())
}

/// Values over the grid, not-a-number where there are none.
fn warped(dataset: &Dataset, source: &Grid, grid: &Grid, how: Resample, file: &str) -> Outcome<Vec<f64>> {
    let run = || -> gdal::errors::Result<Vec<f64>> {
        let band = dataset.rasterband(1)?;
        let flags = band.mask_flags()?;
        if flags.is_per_dataset() || flags.is_alpha() {
            let size = band.size();
            let inside = valid(dataset, file).unwrap_or_default();
            let mut values = band.read_as::<f64>((0, 0), size, size, None)?.data().to_vec();
            values.iter_mut().zip(&inside).filter(|(_, i)| !**i).for_each(|(v, _)| *v = f64::NAN);
            return warp(&in_memory(source, values)?, grid, how);
        }
        warp(dataset, grid, how)
    };
    run().map_err(|e| unreadable(file, &e).into())
}

fn in_memory(grid: &Grid, values: Vec<f64>) -> gdal::errors::Result<Dataset> {
    let memory = DriverManager::get_driver_by_name("MEM")?;
    let size = (grid.columns, grid.rows);
    let mut dataset = memory.create_with_band_type::<f64, _>("", size.0, size.1, 1)?;
    dataset.set_geo_transform(&grid.transform)?;
    dataset.set_projection(&grid.crs.wkt)?;
    let mut band = dataset.rasterband(1)?;
    band.set_no_data_value(Some(f64::NAN))?;
    band.write((0, 0), size, &mut Buffer::new(size, values))?;
    Ok(dataset)
}

/// Shares each source cell's total out over the grid's cells, so that no part of it is lost or
/// counted twice: by exact overlap where the grids share a CRS, else by equal parts.
fn shared_out(
    dataset: &Dataset,
    source: &Grid,
    grid: &Grid,
    file: &str,
    warnings: &mut Warnings,
) -> Outcome<Vec<f64>> {
    let inside = valid(dataset, file)?;
    let from = crs::parse(&source.crs.wkt, file)?;
    let to = crs::parse(&grid.crs.wkt, "grid")?;
    let mut sums = Sums { grid, totals: vec![f64::NAN; grid.len()] };
    let band = dataset.rasterband(1).map_err(|e| unreadable(file, &e))?;
    let sharing = if from == to { Sharing::Overlap } else { Sharing::parts(source, grid, &from, &to, file)? };
    let (mut all, mut negative) = (0.0, 0_usize);
    for row in 0..source.rows {
        let line = band
            .read_as::<f64>((0, row as isize), (source.columns, 1), (source.columns, 1), None)
            .map_err(|e| unreadable(file, &e))?;
        let line: Vec<(usize, f64)> = (0..source.columns)
            .filter(|c| inside[row * source.columns + c])
            .map(|c| (c, line.data()[c]))
            .collect();
        negative += line.iter().filter(|(_, v)| *v < 0.0).count();
        all += line.iter().map(|(_, v)| v).sum::<f64>();
        sharing.row(source, row, &line, &mut sums);
    }
    if negative > 0 {
        let text = format!("{negative} cells are negative, which a total to be shared out cannot be");
        return Err(Diagnostic::input("negative_value", format!("{file}, band 1"), text)
            .cure("mend the raster (is a nodata value undeclared?), or use another `resample`")
            .into());
    }
    let kept: f64 = sums.totals.iter().filter(|v| !v.is_nan()).sum();
    if all > 0.0 && kept < 0.5 * all {
        let text = format!("{:.1} % of the raster's total of {all:.6} lies on the grid", 100.0 * kept / all);
        warnings.push(
            Diagnostic::input("total_off_grid", format!("{file}, band 1"), text)
                .cure("this is as it should be when the raster covers a larger area than the grid"),
        );
    }
    Ok(sums.totals)
}

/// Totals over the grid; not-a-number until a source cell with data reaches a cell.
struct Sums<'a> {
    grid: &'a Grid,
    totals: Vec<f64>,
}

impl Sums<'_> {
    fn add(&mut self, cell: usize, value: f64) {
        let total = &mut self.totals[cell];
        *total = if total.is_nan() { value } else { *total + value };
    }
}

enum Sharing {
    /// Same CRS: by the area two rectangles share.
    Overlap,
    /// Another CRS: each source cell in `n` by `n` parts, each where its centre falls.
    Parts(usize, gdal::spatial_ref::CoordTransform),
}

impl Sharing {
    fn parts(
        source: &Grid,
        grid: &Grid,
        from: &gdal::spatial_ref::SpatialRef,
        to: &gdal::spatial_ref::SpatialRef,
        file: &str,
    ) -> Outcome<Self> {
        let transform =
            crs::transform(from, to).ok_or_else(|| super::features::no_way(file, &grid.crs.label))?;
        // parts a quarter of a target cell wide or less
        let ratio = source.cell_side().get() / grid.cell_side().get();
        Ok(Self::Parts(((4.0 * ratio).ceil() as usize).clamp(4, MOST_PARTS), transform))
    }

    fn row(&self, source: &Grid, row: usize, line: &[(usize, f64)], sums: &mut Sums) {
        match self {
            Self::Overlap => overlap(source, row, line, sums),
            Self::Parts(n, transform) => parts(source, row, line, (*n, transform), sums),
        }
    }
}

/// One axis of the target grid.
struct AxisSteps {
    origin: f64,
    step: f64,
    count: usize,
    /// Steps round the globe, for longitudes.
    turn: Option<f64>,
}

impl AxisSteps {
    /// Steps of the target that a source step from `a` to `b` covers, each with its share of it.
    fn shares(&self, a: f64, b: f64) -> Vec<(usize, f64)> {
        let (p, q) = ((a - self.origin) / self.step, (b - self.origin) / self.step);
        // rounding of edges meant to agree must not spill a sliver into the neighbour
        let snap = |v: f64| if (v - v.round()).abs() < 1e-7 { v.round() } else { v };
        let (low, high) = (snap(p.min(q)), snap(p.max(q)));
        let mut out = Vec::new();
        let mut from = low.floor();
        while from < high {
            let share = (high.min(from + 1.0) - low.max(from)) / (high - low);
            let at = self.turn.map_or(from, |turn| from.rem_euclid(turn));
            if at >= 0.0 && at < self.count as f64 && share > 0.0 {
                out.push((at as usize, share));
            }
            from += 1.0;
        }
        out
    }
}

fn overlap(source: &Grid, row: usize, line: &[(usize, f64)], sums: &mut Sums) {
    let grid = sums.grid;
    let t = &grid.transform;
    let turn = (grid.crs.kind == crate::grid::CrsKind::Geographic).then(|| 360.0 / t[1]);
    let columns = AxisSteps { origin: t[0], step: t[1], count: grid.columns, turn };
    let rows = AxisSteps { origin: t[3], step: t[5], count: grid.rows, turn: None };
    let down = rows.shares(source.y_at(row as f64), source.y_at(row as f64 + 1.0));
    for &(column, value) in line {
        for (c, across) in columns.shares(source.x_at(column as f64), source.x_at(column as f64 + 1.0)) {
            for (r, share) in &down {
                sums.add(r * grid.columns + c, value * across * share);
            }
        }
    }
}

fn parts(
    source: &Grid,
    row: usize,
    line: &[(usize, f64)],
    (n, transform): (usize, &gdal::spatial_ref::CoordTransform),
    sums: &mut Sums,
) {
    let part = |i: usize| (i as f64 + 0.5) / n as f64;
    let mut x: Vec<f64> = Vec::with_capacity(line.len() * n * n);
    let mut y = Vec::with_capacity(line.len() * n * n);
    for (column, _) in line {
        for i in 0..n {
            for j in 0..n {
                x.push(source.x_at(*column as f64 + part(j)));
                y.push(source.y_at(row as f64 + part(i)));
            }
        }
    }
    crs::turn(transform, &mut x, &mut y);
    for (i, (x, y)) in x.iter().zip(&y).enumerate() {
        if let Some(cell) = sums.grid.locate(*x, *y) {
            sums.add(cell, line[i / (n * n)].1 / (n * n) as f64);
        }
    }
}
