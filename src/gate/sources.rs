//! What a study is fed by: files in earnest, lists in memory in tests.

use std::sync::Arc;

use crate::diag::{Diagnostic, Observer, Outcome, Warnings};
use crate::grid::{Grid, Region};
use crate::proxies::{Features, LayerPlan};
use crate::records::{Collector, RecordsPlan, Screener};
use crate::units::Length;

use super::scale::Wander;

/// Which grid is asked for.
#[derive(Debug, Clone, Copy)]
pub enum GridRequest<'a> {
    /// The grid and mask of a raster.
    Like(&'a str),
    /// Cells laid over polygons.
    Over {
        /// File of polygons.
        region: &'a str,
        /// CRS of the grid.
        crs: &'a str,
        /// Side of a cell.
        cell: Length,
        /// Inside when touched rather than when the centre is.
        touching: bool,
    },
}

/// What a layer gives.
pub enum LayerData {
    /// Geometry to measure distances to.
    Features(Features),
    /// One value per inside cell, and their unit.
    Values(Vec<f64>, String),
}

/// What a look at an input shows.
#[derive(Debug, Clone, PartialEq)]
pub struct Peek {
    /// Its name in the plan.
    pub file: String,
    /// What it is: `raster`, `vector`, `text`, `zipped text`, `archive` or `Parquet`.
    pub kind: &'static str,
    /// Its CRS, where it states one.
    pub crs: String,
    /// West, south, east, north in its own CRS.
    pub extent: Option<[f64; 4]>,
    /// Cells, features or (for text) rows, where cheap to know.
    pub count: Option<u64>,
}

/// Where the inputs of a study come from.
pub trait Sources: Sync {
    /// The grid alone, without reading a mask: what memory is planned from.
    ///
    /// # Errors
    /// When the input cannot be opened or holds no usable grid.
    fn grid(&self, request: GridRequest) -> Outcome<Grid>;

    /// The grid with its mask.
    ///
    /// # Errors
    /// When the input cannot be read or no cell is inside.
    fn region(&self, request: GridRequest, grid: Grid) -> Outcome<Region>;

    /// How far lengths and areas of the projection are from the ground's; `None` on the globe.
    ///
    /// # Errors
    /// When places of the grid have no longitude and latitude.
    fn wander(&self, region: &Region) -> Outcome<Option<Wander>>;

    /// A layer's geometry or values in the coordinates of the grid.
    ///
    /// # Errors
    /// When the input cannot be read, does not reach the grid, or has no value somewhere inside.
    fn layer(&self, plan: &LayerPlan, region: &Arc<Region>, warnings: &mut Warnings) -> Outcome<LayerData>;

    /// Hands every row of the record files to the collector, screened.
    ///
    /// # Errors
    /// When a file cannot be read or lacks a column, or the collector fails.
    fn records(
        &self,
        plan: &RecordsPlan,
        to: (&Screener, &mut Collector),
        observer: &dyn Observer,
    ) -> Outcome<()>;

    /// Turns coordinates of a CRS into the grid's, in place; what cannot be turned becomes
    /// not-a-number.
    ///
    /// # Errors
    /// When the CRS is unknown.
    fn project(&self, from: &str, grid: &Grid, x: &mut [f64], y: &mut [f64]) -> Outcome<()>;

    /// West, south, east, north of a region in the coordinates of a CRS, a little widened; `None` where
    /// there is no telling.
    ///
    /// # Errors
    /// When the CRS is unknown.
    fn window(&self, crs: &str, region: &Region) -> Outcome<Option<[f64; 4]>>;

    /// Turns the datum of so many records into the CRS to use: its own where it is known, else the
    /// plan's, which is noted.
    fn datum<'a>(&self, datum: &'a str, plan: &'a str, records: usize) -> &'a str;

    /// What was noted on the way and deserves attention.
    fn remarks(&self) -> Vec<Diagnostic> {
        Vec::new()
    }

    /// Whether a CRS holds longitudes and latitudes.
    ///
    /// # Errors
    /// When the CRS is unknown.
    fn degrees(&self, crs: &str) -> Outcome<bool>;

    /// What a look at an input shows.
    ///
    /// # Errors
    /// When it cannot be opened.
    fn peek(&self, file: &str, table: Option<&str>) -> Outcome<Peek>;
}
