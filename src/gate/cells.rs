//! A raster's first band, row by row, as numbers: not-a-number where it holds none, scale and offset
//! of the band applied.

use gdal::Dataset;
use gdal::raster::RasterBand;

/// The band of a raster, ready to be read by row.
pub(super) struct Cells<'a> {
    band: RasterBand<'a>,
    scale: f64,
    offset: f64,
}

impl<'a> Cells<'a> {
    pub(super) fn open(dataset: &'a Dataset) -> gdal::errors::Result<Self> {
        let band = dataset.rasterband(1)?;
        let (scale, offset) = (band.scale().unwrap_or(1.0), band.offset().unwrap_or(0.0));
        Ok(Self { band, scale, offset })
    }

    /// Turns a stored number into the one meant.
    pub(super) fn meant(&self, stored: f64) -> f64 {
        stored * self.scale + self.offset
    }

    /// Whether larger stored numbers mean smaller ones.
    pub(super) fn reversed(&self) -> bool {
        self.scale < 0.0
    }

    /// Columns `from..to` of a row.
    pub(super) fn row(&self, row: usize, from: usize, to: usize) -> gdal::errors::Result<Vec<f64>> {
        let (at, size) = ((from as isize, row as isize), (to - from, 1));
        let values = self.band.read_as::<f64>(at, size, size, None)?;
        let mask = self.band.open_mask_band()?.read_as::<u8>(at, size, size, None)?;
        let one = |(v, m): (&f64, &u8)| if *m == 0 { f64::NAN } else { self.meant(*v) };
        Ok(values.data().iter().zip(mask.data()).map(one).collect())
    }
}
