//! Writes rasters as GeoTIFF in the cloud-optimised layout (OGC 21-026).

use std::fs::File;
use std::io::Write;
use std::path::Path;

use gdal::cpl::CslStringList;
use gdal::raster::Buffer;
use gdal::{DriverManager, Metadata};

use crate::diag::Outcome;
use crate::grid::Grid;

use super::staging::failed;

/// One band, with what it says of itself.
pub struct Band<'a> {
    /// Values over the whole grid, row by row.
    pub values: Vec<f32>,
    /// Value that stands for no data.
    pub nodata: f64,
    /// What the band holds.
    pub description: &'a str,
    /// Unit of its values; empty for none.
    pub unit: &'a str,
    /// Further facts, as name and text.
    pub tags: &'a [(&'a str, String)],
    /// `deflate`, `zstd`, `lzw` or `none`.
    pub compress: &'a str,
}

/// Writes one band over a grid.
///
/// # Errors
/// When the file cannot be written.
pub fn write(path: &Path, grid: &Grid, band: Band) -> Outcome<()> {
    let refused = |e: gdal::errors::GdalError| failed(path, &reason(path, &e));
    let memory = DriverManager::get_driver_by_name("MEM").map_err(refused)?;
    let mut dataset =
        memory.create_with_band_type::<f32, _>("", grid.columns, grid.rows, 1).map_err(refused)?;
    dataset.set_geo_transform(&grid.transform).map_err(refused)?;
    dataset.set_projection(&grid.crs.wkt).map_err(refused)?;
    for (name, text) in band.tags {
        dataset.set_metadata_item(name, text, "").map_err(refused)?;
    }
    {
        let mut raster = dataset.rasterband(1).map_err(refused)?;
        raster.set_no_data_value(Some(band.nodata)).map_err(refused)?;
        raster.set_description(band.description).map_err(refused)?;
        if !band.unit.is_empty() {
            raster.set_metadata_item("unit", band.unit, "").map_err(refused)?;
            set_unit(&raster, band.unit);
        }
        let size = (grid.columns, grid.rows);
        raster.write((0, 0), size, &mut Buffer::new(size, band.values)).map_err(refused)?;
    }
    let options = options(band.compress).map_err(refused)?;
    let cog = DriverManager::get_driver_by_name("COG").map_err(refused)?;
    let mut copy = dataset.create_copy(&cog, path, &options).map_err(refused)?;
    copy.flush_cache().map_err(refused)?;
    copy.close().map_err(refused)?;
    verify(path, grid)
}

/// Opens what was written and compares size and transform, so that a full disk is noticed.
fn verify(path: &Path, grid: &Grid) -> Outcome<()> {
    let check = || -> gdal::errors::Result<bool> {
        let dataset = gdal::Dataset::open(path)?;
        let band = dataset.rasterband(1)?;
        let row =
            band.read_as::<f32>((0, grid.rows as isize - 1), (grid.columns, 1), (grid.columns, 1), None)?;
        Ok(dataset.raster_size() == (grid.columns, grid.rows)
            && dataset.geo_transform()? == grid.transform
            && row.len() == grid.columns)
    };
    match check() {
        Ok(true) => Ok(()),
        Ok(false) => Err(failed(path, "it does not read back as written").into()),
        Err(e) => Err(failed(path, &format!("it does not read back: {}", reason(path, &e))).into()),
    }
}

/// Why a file could not be written, as the system puts it where the system is to blame: a few
/// megabytes written beside it meet the same full disk or quota.
fn reason(path: &Path, error: &gdal::errors::GdalError) -> String {
    let probe = path.with_extension("probe");
    let written =
        File::create(&probe).and_then(|mut f| f.write_all(&vec![1; 8 << 20]).and_then(|()| f.sync_all()));
    drop(std::fs::remove_file(&probe));
    match written {
        Err(e) => e.to_string(),
        Ok(()) => {
            let hidden = path.parent().map(|p| format!("{}/", p.display())).unwrap_or_default();
            error.to_string().replace(&hidden, "")
        }
    }
}

fn options(compress: &str) -> gdal::errors::Result<CslStringList> {
    let mut options = CslStringList::new();
    options.set_name_value("COMPRESS", &compress.to_uppercase())?;
    if compress != "none" {
        options.set_name_value("PREDICTOR", "YES")?;
    }
    options.set_name_value("BLOCKSIZE", "512")?;
    options.set_name_value("OVERVIEW_RESAMPLING", "AVERAGE")?;
    options.set_name_value("NUM_THREADS", "1")?;
    options.set_name_value("BIGTIFF", "IF_SAFER")?;
    Ok(options)
}

fn set_unit(band: &gdal::raster::RasterBand, unit: &str) {
    let name = std::ffi::CString::new(unit.replace('\0', "")).expect("no NUL is left");
    // SAFETY: the handle lives as long as `band`; the text is copied by the call
    unsafe { gdal_sys::GDALSetRasterUnitType(band.c_rasterband(), name.as_ptr()) };
}
