//! Geometry of a vector layer, in the coordinates of the grid.

/// Points and lines of a layer, and the cells its polygons cover.
#[derive(Debug, Clone, Default)]
pub struct Features {
    /// Points, lines and the rims of polygons.
    pub shapes: Vec<Shape>,
    /// For each cell of the grid, whether its centre lies in a polygon; empty without polygons.
    pub covered: Vec<bool>,
}

/// A point (one vertex) or a line (several), in the grid's coordinates.
#[derive(Debug, Clone, PartialEq)]
pub struct Shape(pub Vec<(f64, f64)>);
