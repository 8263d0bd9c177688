//! Small rasters as fixtures, and reading what the program wrote.

use std::path::Path;

use gdal::raster::Buffer;
use gdal::spatial_ref::SpatialRef;
use gdal::{Dataset, DriverManager};

/// Where a raster lies.
#[derive(Clone, Copy)]
pub struct Lattice {
    /// Number of columns.
    pub columns: usize,
    /// Number of rows.
    pub rows: usize,
    /// The corner of the first cell.
    pub origin: (f64, f64),
    /// Steps from one cell to the next; the second is negative where the first row is the northern.
    pub cell: (f64, f64),
    /// EPSG number of the CRS.
    pub epsg: u32,
}

impl Lattice {
    /// The six numbers of the transform.
    pub fn transform(&self) -> [f64; 6] {
        [self.origin.0, self.cell.0, 0.0, self.origin.1, 0.0, self.cell.1]
    }

    /// One value for all cells.
    pub fn filled(&self, value: f64) -> Vec<f64> {
        vec![value; self.columns * self.rows]
    }

    /// A value for each cell, by column and row.
    pub fn each(&self, value: impl Fn(u32, u32) -> f64) -> Vec<f64> {
        let rows = 0..u32::try_from(self.rows).expect("a small raster");
        let columns = u32::try_from(self.columns).expect("a small raster");
        rows.flat_map(|row| (0..columns).map(move |column| (column, row))).map(|(c, r)| value(c, r)).collect()
    }
}

/// Writes a GeoTIFF of 64-bit numbers.
pub fn write(path: &Path, lattice: &Lattice, values: &[f64], nodata: Option<f64>) {
    write_turned(path, lattice, &lattice.transform(), (values, nodata));
}

/// Writes a GeoTIFF with a transform of its own.
pub fn write_turned(path: &Path, lattice: &Lattice, transform: &[f64; 6], band: (&[f64], Option<f64>)) {
    let driver = DriverManager::get_driver_by_name("GTiff").expect("the GeoTIFF driver");
    let size = (lattice.columns, lattice.rows);
    let mut dataset = driver.create_with_band_type::<f64, _>(path, size.0, size.1, 1).expect("a raster");
    dataset.set_geo_transform(transform).expect("a transform");
    let crs = SpatialRef::from_epsg(lattice.epsg).expect("a known CRS");
    dataset.set_spatial_ref(&crs).expect("a CRS");
    let mut raster = dataset.rasterband(1).expect("a band");
    if band.1.is_some() {
        raster.set_no_data_value(band.1).expect("a nodata value");
    }
    raster.write((0, 0), size, &mut Buffer::new(size, band.0.to_vec())).expect("the values can be written");
}

/// A raster as read back.
pub struct Read {
    /// Columns and rows.
    pub size: (usize, usize),
    /// The six numbers of the transform.
    pub transform: [f64; 6],
    /// The value that stands for no data.
    pub nodata: Option<f64>,
    /// All values, row by row; no data where `nodata` stands.
    pub values: Vec<f64>,
}

impl Read {
    /// The values that are data.
    pub fn inside(&self) -> Vec<f64> {
        self.values.iter().copied().filter(|v| Some(*v) != self.nodata && !v.is_nan()).collect()
    }
}

/// Reads the first band.
#[track_caller]
pub fn read(path: &Path) -> Read {
    let dataset = Dataset::open(path).unwrap_or_else(|e| panic!("{}: {e}", path.display()));
    let band = dataset.rasterband(1).expect("a band");
    let size = dataset.raster_size();
    let values = band.read_as::<f64>((0, 0), size, size, None).expect("the values can be read");
    Read {
        size,
        transform: dataset.geo_transform().expect("a transform"),
        nodata: band.no_data_value(),
        values: values.data().to_vec(),
    }
}
