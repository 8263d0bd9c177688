//! The frame of the world: one grid of square cells in metres, on empty ocean. It holds no land.

/// Columns of the grid.
pub const COLUMNS: usize = 300;
/// Rows of the grid, the first one in the north.
pub const ROWS: usize = 240;
/// All cells of the grid.
pub const CELLS: usize = COLUMNS * ROWS;
/// Side of a cell, in metres.
pub const CELL: f64 = 500.0;
/// Easting of the western edge, in metres.
pub const WEST: f64 = 125_000.0;
/// Northing of the northern edge, in metres.
pub const NORTH: f64 = 260_000.0;

/// An equal-area projection of its own, centred where there is nothing but sea.
pub const CRS: &str = r#"PROJCS["Skerrow grid (invented)",
GEOGCS["WGS 84",DATUM["WGS_1984",SPHEROID["WGS 84",6378137,298.257223563,AUTHORITY["EPSG","7030"]],
AUTHORITY["EPSG","6326"]],PRIMEM["Greenwich",0,AUTHORITY["EPSG","8901"]],
UNIT["degree",0.0174532925199433,AUTHORITY["EPSG","9122"]],AUTHORITY["EPSG","4326"]],
PROJECTION["Lambert_Azimuthal_Equal_Area"],PARAMETER["latitude_of_center",44],
PARAMETER["longitude_of_center",-148],PARAMETER["false_easting",200000],
PARAMETER["false_northing",200000],UNIT["metre",1,AUTHORITY["EPSG","9001"]],
AXIS["Easting",EAST],AXIS["Northing",NORTH]]"#;

/// One number for each cell, row by row from the north-west.
pub type Field = Vec<f64>;

/// A place in the projection, in metres.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Point {
    /// Easting.
    pub x: f64,
    /// Northing.
    pub y: f64,
}

impl Point {
    /// Straight-line distance to another place, in metres.
    pub fn distance(self, other: Point) -> f64 {
        libm::hypot(self.x - other.x, self.y - other.y)
    }

    /// This place, moved.
    pub fn shifted(self, dx: f64, dy: f64) -> Point {
        Point { x: self.x + dx, y: self.y + dy }
    }
}

/// Column and row of a cell.
pub fn column_row(cell: usize) -> (usize, usize) {
    (cell % COLUMNS, cell / COLUMNS)
}

/// The middle of a cell.
pub fn centre(cell: usize) -> Point {
    let (column, row) = column_row(cell);
    Point { x: WEST + (column as f64 + 0.5) * CELL, y: NORTH - (row as f64 + 0.5) * CELL }
}

/// The nearest place to `point` inside a cell, a metre or more from its edge.
pub fn clamp_into(cell: usize, point: Point) -> Point {
    let middle = centre(cell);
    let reach = CELL / 2.0 - 1.0;
    Point {
        x: point.x.clamp(middle.x - reach, middle.x + reach),
        y: point.y.clamp(middle.y - reach, middle.y + reach),
    }
}

/// The cell `columns` to the east and `rows` to the south, if the grid has it.
pub fn neighbour(cell: usize, columns: isize, rows: isize) -> Option<usize> {
    let (column, row) = column_row(cell);
    let column = column.checked_add_signed(columns).filter(|&c| c < COLUMNS)?;
    let row = row.checked_add_signed(rows).filter(|&r| r < ROWS)?;
    Some(row * COLUMNS + column)
}

/// The four cells that share a side with a cell.
pub const SIDES: [(isize, isize); 4] = [(0, -1), (1, 0), (0, 1), (-1, 0)];

/// The eight cells around a cell.
pub const AROUND: [(isize, isize); 8] =
    [(0, -1), (1, -1), (1, 0), (1, 1), (0, 1), (-1, 1), (-1, 0), (-1, -1)];
