//! Bringing rasters to the grid by GDAL's warper.

use gdal::raster::Buffer;
use gdal::{Dataset, DriverManager};

use crate::grid::Grid;
use crate::proxies::Resample;

/// Values over the whole grid, not-a-number where the source has none.
pub(super) fn warp(source: &Dataset, grid: &Grid, how: Resample) -> gdal::errors::Result<Vec<f64>> {
    use gdal_sys::{CPLErr, GDALResampleAlg};
    let method = match how {
        Resample::Sum => unreachable!("sums are shared out, not warped"),
        Resample::Mean => GDALResampleAlg::GRA_Average,
        Resample::Nearest => GDALResampleAlg::GRA_NearestNeighbour,
        Resample::Bilinear => GDALResampleAlg::GRA_Bilinear,
        Resample::Max => GDALResampleAlg::GRA_Max,
        Resample::Min => GDALResampleAlg::GRA_Min,
    };
    let memory = DriverManager::get_driver_by_name("MEM")?;
    let size = (grid.columns, grid.rows);
    let mut target = memory.create_with_band_type::<f64, _>("", size.0, size.1, 1)?;
    target.set_geo_transform(&grid.transform)?;
    target.set_projection(&grid.crs.wkt)?;
    {
        let mut band = target.rasterband(1)?;
        band.set_no_data_value(Some(f64::NAN))?;
        band.write((0, 0), size, &mut Buffer::new(size, vec![f64::NAN; size.0 * size.1]))?;
    }
    // SAFETY: both handles live through the call; no options and no callback are passed
    let code = unsafe {
        gdal_sys::GDALReprojectImage(
            source.c_dataset(),
            std::ptr::null(),
            target.c_dataset(),
            std::ptr::null(),
            method,
            0.0,
            0.0,
            None,
            std::ptr::null_mut(),
            std::ptr::null_mut(),
        )
    };
    if code != CPLErr::CE_None {
        return Err(gdal::errors::GdalError::CplError {
            class: code,
            number: 0,
            msg: "the raster could not be brought to the grid".into(),
        });
    }
    Ok(target.rasterband(1)?.read_as::<f64>((0, 0), size, size, None)?.data().to_vec())
}
