//! Rasters as layers: one value per inside cell.

use gdal::Dataset;
use gdal::DriverManager;
use gdal::raster::Buffer;

use crate::diag::{Diagnostic, Outcome, Warnings};
use crate::grid::{Grid, Region};
use crate::proxies::{LayerPlan, Resample};

use super::cells::Cells;
use super::crs;
use super::files::Files;
use super::grid_in::{like, unreadable, valid};
use super::overlay::resample;
use super::reproject::warp;
use super::share_out::shared_out;

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

/// Values over the grid, not-a-number where there are none: by exact overlap where the raster shares
/// the grid's CRS, else by GDAL's warper.
fn warped(dataset: &Dataset, source: &Grid, grid: &Grid, how: Resample, file: &str) -> Outcome<Vec<f64>> {
    let same = crs::parse(&source.crs.wkt, file)? == crs::parse(&grid.crs.wkt, "grid")?;
    let run = || -> gdal::errors::Result<Vec<f64>> {
        let cells = Cells::open(dataset)?;
        if same {
            return resample(&cells, source, grid, how);
        }
        let band = dataset.rasterband(1)?;
        let flags = band.mask_flags()?;
        let how = match how {
            Resample::Max if cells.reversed() => Resample::Min,
            Resample::Min if cells.reversed() => Resample::Max,
            how => how,
        };
        let stored = if flags.is_per_dataset() || flags.is_alpha() {
            let size = band.size();
            let inside = valid(dataset, file).unwrap_or_default();
            let mut values = band.read_as::<f64>((0, 0), size, size, None)?.data().to_vec();
            values.iter_mut().zip(&inside).filter(|(_, i)| !**i).for_each(|(v, _)| *v = f64::NAN);
            warp(&in_memory(source, values)?, grid, how)?
        } else {
            warp(dataset, grid, how)?
        };
        Ok(stored.into_iter().map(|v| cells.meant(v)).collect())
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
