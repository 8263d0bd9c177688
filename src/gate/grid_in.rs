//! Grids and masks: from a raster, or laid over polygons.

use gdal::raster::RasterizeOptions;
use gdal::vector::{Geometry, LayerAccess};
use gdal::{Dataset, DriverManager};

use crate::diag::{Diagnostic, Outcome};
use crate::grid::{Crs, CrsKind, Grid, Region};
use crate::units::Length;

use super::crs;
use super::features::open_layer;
use super::files::Files;
use super::sources::GridRequest;

/// Most cells a grid may have: cells are numbered with 32 bits.
const MOST_CELLS: f64 = 4.0e9;

/// The grid asked for.
pub(super) fn grid(files: &Files, request: GridRequest) -> Outcome<Grid> {
    let (grid, place) = match request {
        GridRequest::Like(file) => (like(&files.raster(file)?, file)?, file),
        GridRequest::Over { region, crs, cell, .. } => (over(files, region, crs, cell)?, region),
    };
    if grid.len() == 1 {
        return Err(Diagnostic::input(
            "one_cell",
            place,
            "the grid has a single cell: there is nothing to spread",
        )
        .cure("use a finer grid, or a larger region")
        .into());
    }
    Ok(grid)
}

/// The mask of the grid.
pub(super) fn region(files: &Files, request: GridRequest, grid: Grid) -> Outcome<Region> {
    let (inside, place) = match request {
        GridRequest::Like(file) => (valid(&files.raster(file)?, file)?, file),
        GridRequest::Over { region, crs, touching, .. } => {
            let polygons = polygons(files, region, crs)?;
            (burn(&grid, &polygons, touching).map_err(|e| unreadable(region, &e))?, region)
        }
    };
    let region = Region::new(grid, &inside);
    if region.is_empty() {
        return Err(Diagnostic::input(
            "empty_mask",
            place,
            "no cell of the grid is inside: all are without data",
        )
        .cure("check the raster's nodata value, or the polygons")
        .into());
    }
    Ok(region)
}

pub(super) fn unreadable(file: &str, error: &gdal::errors::GdalError) -> Diagnostic {
    Diagnostic::input("unreadable", file, format!("cannot be read: {error}"))
        .cure("check that the file is whole")
}

/// Size, transform and CRS of a raster.
pub(super) fn like(dataset: &Dataset, file: &str) -> Outcome<Grid> {
    let refuse = |rule, text: String, cure: &str| Diagnostic::input(rule, file, text).cure(cure);
    let transform = dataset.geo_transform().map_err(|_| {
        refuse(
            "no_georeference",
            "the raster does not say where it lies".into(),
            "give it a geotransform, e.g. `gdal_edit.py -a_ullr …`",
        )
    })?;
    if transform[2] != 0.0 || transform[4] != 0.0 {
        let text = format!("the raster is rotated (transform {transform:?})");
        return Err(refuse("rotated", text, "bring it to a north-up grid with `gdalwarp`").into());
    }
    if transform[1] <= 0.0 || transform[5] == 0.0 {
        let text = format!("the raster's columns do not run from west to east (transform {transform:?})");
        return Err(refuse("mirrored", text, "bring it to a north-up grid with `gdalwarp`").into());
    }
    let (columns, rows) = dataset.raster_size();
    if dataset.raster_count() == 0 || columns * rows == 0 {
        return Err(refuse("no_band", "the raster has no band".into(), "give a raster with one").into());
    }
    let known = dataset.spatial_ref().ok().and_then(|srs| crs::describe(&srs));
    let crs = known.ok_or_else(|| {
        let text = "the raster states no CRS that can be placed on the ground".into();
        refuse("no_crs", text, "write one into it, e.g. `gdal_edit.py -a_srs EPSG:3035 FILE`")
    })?;
    Ok(Grid { columns, rows, transform, crs })
}

/// Which cells of the first band hold data: nodata, mask bands and not-a-number are outside.
pub(super) fn valid(dataset: &Dataset, file: &str) -> Outcome<Vec<bool>> {
    let read = || -> gdal::errors::Result<Vec<bool>> {
        let band = dataset.rasterband(1)?;
        let (columns, rows) = band.size();
        let mask = band.open_mask_band()?;
        let mut inside = Vec::with_capacity(columns * rows);
        for row in 0..rows as isize {
            let line = mask.read_as::<u8>((0, row), (columns, 1), (columns, 1), None)?;
            inside.extend(line.data().iter().map(|v| *v != 0));
        }
        if matches!(
            band.band_type(),
            gdal::raster::GdalDataType::Float32 | gdal::raster::GdalDataType::Float64
        ) {
            for row in 0..rows {
                let line = band.read_as::<f64>((0, row as isize), (columns, 1), (columns, 1), None)?;
                let flags = &mut inside[row * columns..(row + 1) * columns];
                flags.iter_mut().zip(line.data()).for_each(|(f, v)| *f &= !v.is_nan());
            }
        }
        Ok(inside)
    };
    read().map_err(|e| unreadable(file, &e).into())
}

/// Cells laid over polygons, on multiples of the cell side.
fn over(files: &Files, region: &str, definition: &str, cell: Length) -> Outcome<Grid> {
    let polygons = polygons(files, region, definition)?;
    let srs = crs::parse(definition, "[grid] crs")?;
    let crs = crs::describe(&srs).ok_or_else(|| {
        Diagnostic::plan(
            "unknown_crs",
            "[grid] crs",
            format!("`{definition}` is neither projected nor geographic"),
        )
        .cure("give a projected CRS, or one of longitude and latitude")
    })?;
    let side = side_in_units(&crs, cell)?;
    let mut bounds = [f64::MAX, f64::MAX, f64::MIN, f64::MIN];
    for polygon in &polygons {
        let e = polygon.envelope();
        bounds = [bounds[0].min(e.MinX), bounds[1].min(e.MinY), bounds[2].max(e.MaxX), bounds[3].max(e.MaxY)];
    }
    let west = (bounds[0] / side).floor() * side;
    let north = (bounds[3] / side).ceil() * side;
    let steps = |length: f64| (length / side - 1e-9).ceil().max(1.0);
    let (columns, rows) = (steps(bounds[2] - west), steps(north - bounds[1]));
    if !(columns * rows).is_finite() || columns * rows > MOST_CELLS {
        let text = format!("cells of {cell} would make a grid of {columns:.0} by {rows:.0}");
        return Err(Diagnostic::plan("grid_too_large", "[grid] cell", text)
            .cure("use a larger `cell`")
            .into());
    }
    Ok(Grid {
        columns: columns as usize,
        rows: rows as usize,
        transform: [west, side, 0.0, north, 0.0, -side],
        crs,
    })
}

/// The cell side in map units.
fn side_in_units(crs: &Crs, cell: Length) -> Outcome<f64> {
    match (crs.kind, cell) {
        (CrsKind::Projected { metres }, Length::Metres(m)) => Ok(m.get() / metres),
        (CrsKind::Geographic, Length::Degrees(d)) => Ok(d),
        (CrsKind::Projected { .. }, _) => Err(Diagnostic::plan(
            "wrong_unit",
            "[grid] cell",
            format!("`{cell}` does not fit a projected grid"),
        )
        .cure("give the cell as a length, such as \"1 km\"")
        .into()),
        (CrsKind::Geographic, _) => Err(Diagnostic::plan(
            "wrong_unit",
            "[grid] cell",
            format!("`{cell}` does not fit a longitude/latitude grid"),
        )
        .cure("give the cell in degrees, such as \"0.01 deg\"")
        .into()),
    }
}

/// The polygons of a file in a CRS.
fn polygons(files: &Files, file: &str, definition: &str) -> Outcome<Vec<Geometry>> {
    let dataset = files.vector(file)?;
    let mut layer = open_layer(&dataset, file, None)?;
    let from = layer.spatial_ref().ok_or_else(|| super::features::no_crs(file))?;
    let to = crs::parse(definition, "[grid] crs")?;
    let transform = crs::transform(&from, &to).ok_or_else(|| super::features::no_way(file, definition))?;
    let mut found = Vec::new();
    for feature in layer.features() {
        let Some(geometry) = feature.geometry().filter(|g| !g.is_empty()) else { continue };
        if geometry.area() <= 0.0 {
            continue;
        }
        let turned = super::features::turned_polygon(geometry, &from, &to, &transform);
        let turned = turned.map_err(|e| unreadable(file, &e))?;
        found.push(turned);
    }
    if found.is_empty() {
        return Err(Diagnostic::input("no_polygon", file, "holds no polygon")
            .cure("give polygons of the region")
            .into());
    }
    Ok(found)
}

/// Which cells polygons (in the grid's CRS) cover, on whatever turn of longitude they are written.
pub(super) fn burn(grid: &Grid, polygons: &[Geometry], touching: bool) -> gdal::errors::Result<Vec<bool>> {
    let turns: &[f64] = if grid.crs.kind == CrsKind::Geographic { &[0.0, 360.0, -360.0] } else { &[0.0] };
    let mut covered = vec![false; grid.len()];
    for turn in turns {
        let memory = DriverManager::get_driver_by_name("MEM")?;
        let mut dataset = memory.create_with_band_type::<u8, _>("", grid.columns, grid.rows, 1)?;
        let mut transform = grid.transform;
        transform[0] += turn;
        dataset.set_geo_transform(&transform)?;
        let options = RasterizeOptions { all_touched: touching, ..RasterizeOptions::default() };
        gdal::raster::rasterize(&mut dataset, &[1], polygons, &vec![1.0; polygons.len()], Some(options))?;
        let size = (grid.columns, grid.rows);
        let burnt = dataset.rasterband(1)?.read_as::<u8>((0, 0), size, size, None)?;
        covered.iter_mut().zip(burnt.data()).for_each(|(c, v)| *c |= *v != 0);
    }
    Ok(covered)
}
