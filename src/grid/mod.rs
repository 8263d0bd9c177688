//! Where things are: the grid, its mask, index to coordinate and back, true areas and lengths.
//!
//! No file formats and no statistics.

mod ellipsoid;
mod lattice;
mod region;

pub use ellipsoid::{MEAN_RADIUS, arc_of_chord, chords_that_settle, geocentric, geodesic, zone_area};
pub use lattice::{Crs, CrsKind, Grid, Metric};
pub use region::{Field, Region};

#[cfg(test)]
pub(crate) use lattice::tests as grids;
