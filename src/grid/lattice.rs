//! The grid: rows and columns laid over a coordinate reference system.

use crate::units::Metres;

use super::ellipsoid::zone_area;

/// Whether coordinates are angles or lengths.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum CrsKind {
    /// Longitude and latitude in degrees.
    Geographic,
    /// Easting and northing; `metres` is the length of one unit.
    Projected {
        /// Metres in one map unit.
        metres: f64,
    },
}

/// A coordinate reference system, as far as the rooms below the gate need it.
#[derive(Debug, Clone, PartialEq)]
pub struct Crs {
    /// Full definition (WKT), for the gate.
    pub wkt: String,
    /// Short name for people (`EPSG:3035`, or the system's own name).
    pub label: String,
    /// Angles or lengths.
    pub kind: CrsKind,
}

/// How lengths and areas are measured on a grid.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Metric {
    /// In the plane of the projection.
    Planar,
    /// On the globe.
    Geodesic,
}

impl Metric {
    /// The results' word for it.
    pub fn word(self) -> &'static str {
        match self {
            Self::Planar => "planar",
            Self::Geodesic => "geodesic",
        }
    }
}

/// Size, place and reference system of a raster; rows and columns count from 0 at its first row.
#[derive(Debug, Clone, PartialEq)]
pub struct Grid {
    /// Number of columns.
    pub columns: usize,
    /// Number of rows.
    pub rows: usize,
    /// x = t0 + column·t1, y = t3 + row·t5; t2 and t4 are 0, t1 > 0, t5 of either sign.
    pub transform: [f64; 6],
    /// Reference system.
    pub crs: Crs,
}

impl Grid {
    /// Number of cells.
    pub fn len(&self) -> usize {
        self.columns * self.rows
    }

    /// Never: a grid has at least one cell.
    pub fn is_empty(&self) -> bool {
        self.len() == 0
    }

    /// How it measures.
    pub fn metric(&self) -> Metric {
        match self.crs.kind {
            CrsKind::Geographic => Metric::Geodesic,
            CrsKind::Projected { .. } => Metric::Planar,
        }
    }

    /// Metres in a map unit (1 on the globe, where coordinates are degrees).
    pub fn metres_per_unit(&self) -> f64 {
        match self.crs.kind {
            CrsKind::Geographic => 1.0,
            CrsKind::Projected { metres } => metres,
        }
    }

    /// Column and row of a cell's flat index.
    pub fn position(&self, cell: usize) -> (usize, usize) {
        (cell % self.columns, cell / self.columns)
    }

    /// Coordinates of a cell's centre.
    pub fn centre(&self, column: usize, row: usize) -> (f64, f64) {
        (self.x_at(column as f64 + 0.5), self.y_at(row as f64 + 0.5))
    }

    /// x of a column edge or any fraction of a column.
    pub fn x_at(&self, column: f64) -> f64 {
        self.transform[0] + column * self.transform[1]
    }

    /// y of a row edge or any fraction of a row.
    pub fn y_at(&self, row: f64) -> f64 {
        self.transform[3] + row * self.transform[5]
    }

    /// Flat index of the cell that holds a place; `None` outside. Far edges belong to the grid, and
    /// longitudes are taken round the globe.
    pub fn locate(&self, x: f64, y: f64) -> Option<usize> {
        let mut column = (x - self.transform[0]) / self.transform[1];
        if self.crs.kind == CrsKind::Geographic {
            let turn = 360.0 / self.transform[1];
            let turned = if column >= 0.0 && column < turn { column } else { column.rem_euclid(turn) };
            // a place on the far edge stays there rather than jumping round to the near one
            column = if column == self.columns as f64 && !self.wraps() { column } else { turned };
        }
        let row = (y - self.transform[3]) / self.transform[5];
        Some(step(row, self.rows)? * self.columns + step(column, self.columns)?)
    }

    /// Whether the last column is a neighbour of the first.
    pub fn wraps(&self) -> bool {
        self.crs.kind == CrsKind::Geographic
            && (self.columns as f64 * self.transform[1] - 360.0).abs() < 0.01 * self.transform[1]
    }

    /// True area of a cell of this row, m²: in the plane of the projection, or on WGS 84.
    pub fn cell_area(&self, row: usize) -> f64 {
        match self.crs.kind {
            CrsKind::Projected { metres } => (self.transform[1] * self.transform[5]).abs() * metres * metres,
            CrsKind::Geographic => {
                let (a, b) = (self.y_at(row as f64), self.y_at(row as f64 + 1.0));
                zone_area(a.min(b).max(-90.0), a.max(b).min(90.0), self.transform[1])
            }
        }
    }

    /// Side of a square as large as the cell in the middle row: what "1 cell" means as a length.
    pub fn cell_side(&self) -> Metres {
        Metres::new(self.cell_area(self.rows / 2).sqrt()).expect("areas are finite and positive")
    }

    /// The larger side of the grid in metres (along the middle row, or from top to bottom).
    pub fn larger_side(&self) -> f64 {
        let (width, height) = self.cell_sides(self.rows / 2);
        (width * self.columns as f64).max(height * self.rows as f64)
    }

    /// Width and height in metres of a cell of this row.
    pub fn cell_sides(&self, row: usize) -> (f64, f64) {
        match self.crs.kind {
            CrsKind::Projected { metres } => (self.transform[1] * metres, self.transform[5].abs() * metres),
            CrsKind::Geographic => {
                let height = self.transform[5].abs().to_radians() * super::ellipsoid::MEAN_RADIUS;
                (self.cell_area(row) / height, height)
            }
        }
    }

    /// West, south, east, north.
    pub fn extent(&self) -> [f64; 4] {
        let (y0, y1) = (self.y_at(0.0), self.y_at(self.rows as f64));
        [self.x_at(0.0), y0.min(y1), self.x_at(self.columns as f64), y0.max(y1)]
    }
}

/// The step a coordinate falls on, its far end included.
fn step(at: f64, steps: usize) -> Option<usize> {
    let n = steps as f64;
    if at == n {
        return Some(steps - 1);
    }
    (at >= 0.0 && at < n).then_some(at as usize)
}

#[cfg(test)]
pub(crate) mod tests {
    use super::*;

    /// A planar grid with its origin at (0, rows·side).
    pub(crate) fn planar(columns: usize, rows: usize, side: f64) -> Grid {
        let crs = Crs { wkt: String::new(), label: "plane".into(), kind: CrsKind::Projected { metres: 1.0 } };
        Grid { columns, rows, transform: [0.0, side, 0.0, rows as f64 * side, 0.0, -side], crs }
    }

    /// A longitude/latitude grid from a north-west corner.
    pub(crate) fn globe(columns: usize, rows: usize, west: f64, north: f64, step: f64) -> Grid {
        let crs = Crs { wkt: String::new(), label: "globe".into(), kind: CrsKind::Geographic };
        Grid { columns, rows, transform: [west, step, 0.0, north, 0.0, -step], crs }
    }

    #[test]
    fn locates_what_it_centres() {
        for grid in [planar(7, 5, 250.0), globe(360, 180, -180.0, 90.0, 1.0), globe(40, 20, 170.0, 10.0, 0.5)]
        {
            for cell in 0..grid.len() {
                let (column, row) = grid.position(cell);
                let (x, y) = grid.centre(column, row);
                assert_eq!(grid.locate(x, y), Some(cell));
            }
        }
    }

    #[test]
    fn edges_belong_to_the_grid_and_longitudes_wrap() {
        let grid = planar(4, 4, 1.0);
        assert_eq!(grid.locate(4.0, 0.0), Some(15));
        assert_eq!(grid.locate(4.0001, 0.0), None);
        assert_eq!(grid.locate(f64::NAN, 0.0), None);
        let pacific = globe(40, 20, 170.0, 10.0, 0.5);
        assert_eq!(pacific.locate(-179.75, 9.75), Some(20));
        assert_eq!(pacific.locate(0.0, 0.0), None);
        assert_eq!(pacific.locate(190.0, 9.75), Some(39));
        assert!(globe(360, 180, -180.0, 90.0, 1.0).wraps() && !pacific.wraps());
        assert_eq!(globe(360, 180, 0.0, 90.0, 1.0).locate(-0.5, 89.5), Some(359));
    }

    #[test]
    fn areas_are_true() {
        assert_eq!(planar(3, 3, 500.0).cell_area(1), 250_000.0);
        let grid = globe(360, 180, -180.0, 90.0, 1.0);
        let total: f64 = (0..180).map(|r| grid.cell_area(r) * 360.0).sum();
        assert!((total / 1e6 - 510_065_621.724).abs() < 1e-2);
    }
}
