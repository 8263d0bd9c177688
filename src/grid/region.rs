//! The part of a grid that counts, and values over it.

use std::sync::Arc;

use crate::maths::sum::sum;

use super::lattice::Grid;

/// No compact index: the cell is outside.
const OUTSIDE: u32 = u32::MAX;

/// A grid with its mask. Inside cells are numbered compactly, in row order; every value over the
/// region is a list in that order, so nodata can never be mistaken for a number.
#[derive(Debug, Clone, PartialEq)]
pub struct Region {
    grid: Grid,
    compact: Vec<u32>,
    cells: Vec<u32>,
    areas: Vec<f64>,
}

impl Region {
    /// Builds a region from one flag per cell.
    pub fn new(grid: Grid, inside: &[bool]) -> Self {
        assert_eq!(inside.len(), grid.len(), "one flag per cell");
        let cells: Vec<u32> = (0..inside.len()).filter(|&c| inside[c]).map(|c| c as u32).collect();
        let mut compact = vec![OUTSIDE; inside.len()];
        cells.iter().enumerate().for_each(|(i, &c)| compact[c as usize] = i as u32);
        let by_row: Vec<f64> = (0..grid.rows).map(|r| grid.cell_area(r)).collect();
        let areas = cells.iter().map(|&c| by_row[c as usize / grid.columns]).collect();
        Self { grid, compact, cells, areas }
    }

    /// The grid.
    pub fn grid(&self) -> &Grid {
        &self.grid
    }

    /// Number of cells inside.
    pub fn len(&self) -> usize {
        self.cells.len()
    }

    /// Whether no cell is inside.
    pub fn is_empty(&self) -> bool {
        self.cells.is_empty()
    }

    /// Flat index in the grid of an inside cell.
    pub fn flat(&self, cell: usize) -> usize {
        self.cells[cell] as usize
    }

    /// Column and row of an inside cell.
    pub fn position(&self, cell: usize) -> (usize, usize) {
        self.grid.position(self.flat(cell))
    }

    /// Coordinates of an inside cell's centre.
    pub fn centre(&self, cell: usize) -> (f64, f64) {
        let (column, row) = self.position(cell);
        self.grid.centre(column, row)
    }

    /// Compact index of a cell of the grid; `None` outside the region.
    pub fn compact(&self, flat: usize) -> Option<usize> {
        Some(self.compact[flat]).filter(|&c| c != OUTSIDE).map(|c| c as usize)
    }

    /// Area in m² of each inside cell.
    pub fn areas(&self) -> &[f64] {
        &self.areas
    }

    /// Total area in m².
    pub fn area(&self) -> f64 {
        sum(self.areas.iter().copied())
    }

    /// The larger side in metres of the box around the inside cells.
    pub fn larger_side(&self) -> f64 {
        let (mut west, mut east, mut top, mut bottom) = (usize::MAX, 0, usize::MAX, 0);
        for cell in 0..self.len() {
            let (column, row) = self.position(cell);
            (west, east) = (west.min(column), east.max(column));
            (top, bottom) = (top.min(row), bottom.max(row));
        }
        if west == usize::MAX {
            return 0.0;
        }
        let (width, height) = self.grid.cell_sides(usize::midpoint(top, bottom));
        (width * (east - west + 1) as f64).max(height * (bottom - top + 1) as f64)
    }
}

/// One number per inside cell of a region.
#[derive(Debug, Clone)]
pub struct Field {
    region: Arc<Region>,
    values: Vec<f64>,
}

impl Field {
    /// Builds a field from one value per inside cell.
    pub fn new(region: Arc<Region>, values: Vec<f64>) -> Self {
        assert_eq!(values.len(), region.len(), "one value per inside cell");
        Self { region, values }
    }

    /// The region it is over.
    pub fn region(&self) -> &Arc<Region> {
        &self.region
    }

    /// The values, in the region's order.
    pub fn values(&self) -> &[f64] {
        &self.values
    }

    /// The values over the whole grid, `nodata` outside.
    pub fn spread(&self, nodata: f32) -> Vec<f32> {
        let mut out = vec![nodata; self.region.grid().len()];
        self.values.iter().enumerate().for_each(|(i, &v)| out[self.region.flat(i)] = v as f32);
        out
    }

    /// Smallest, median and largest value.
    pub fn summary(&self) -> (f64, f64, f64) {
        let mut sorted = self.values.clone();
        sorted.sort_unstable_by(f64::total_cmp);
        (sorted[0], crate::maths::rank::quantile(&sorted, 0.5), sorted[sorted.len() - 1])
    }
}

#[cfg(test)]
mod tests {
    use super::super::lattice::tests::planar;
    use super::*;

    #[test]
    fn numbers_inside_cells_in_row_order() {
        let inside = [true, false, true, false, false, true];
        let region = Arc::new(Region::new(planar(3, 2, 10.0), &inside));
        assert_eq!(region.len(), 3);
        assert_eq!(region.compact(2), Some(1));
        assert_eq!(region.compact(1), None);
        assert_eq!(region.position(2), (2, 1));
        assert_eq!(region.area(), 300.0);
        let field = Field::new(region, vec![1.0, 2.0, 3.0]);
        assert_eq!(field.spread(-9.0), vec![1.0, -9.0, 2.0, -9.0, -9.0, 3.0]);
        assert_eq!(field.summary(), (1.0, 2.0, 3.0));
    }
}
