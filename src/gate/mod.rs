//! How bytes come and go: rasters, vectors and tables onto the study's grid; outputs onto disk.
//!
//! The only room that knows GDAL, files and reference systems. It makes no scientific choice.

mod archive;
mod archived;
mod cells;
mod container;
mod copy;
mod crs;
mod digest;
mod features;
mod files;
mod geotiff;
mod grid_in;
mod guess;
mod layout;
mod on_earth;
mod overlay;
mod parquet_in;
mod points;
mod record_files;
mod remote;
mod reproject;
mod scale;
mod share_out;
mod sources;
mod staging;
mod table;
mod text;
mod unpack;
mod values;
mod zipped;

pub use copy::Copy;
pub use digest::{InputFile, digest};
pub use files::{Files, libraries};
pub use geotiff::{Band, write as write_geotiff};
pub use guess::{ColumnNames, usual_column};
pub use on_earth::OnEarth;
pub use remote::is_remote;
pub use scale::Wander;
pub use sources::{GridRequest, LayerData, Peek, Sources};
pub use staging::{Staging, clear_all as clear_staging};
