//! Moving records that lie just outside the region to the nearest inside cell.

use kdtree::KdTree;
use kdtree::distance::squared_euclidean;

use crate::grid::{Metric, Region, geocentric, geodesic};
use crate::units::Metres;

/// Finds the nearest inside cell within a distance.
pub struct Snapper {
    tree: KdTree<f64, u32, Vec<f64>>,
    /// Smallest and largest of each coordinate in the tree.
    reached: Vec<(f64, f64)>,
    reach: f64,
    /// Squared distance between coordinates within which the centre of a cell in reach must lie.
    around: f64,
}

impl Snapper {
    /// Indexes the cells at the region's rim.
    pub fn new(region: &Region, reach: Metres) -> Self {
        let dimensions = match region.grid().metric() {
            Metric::Planar => 2,
            Metric::Geodesic => 3,
        };
        let mut tree = KdTree::new(dimensions);
        let mut reached = vec![(f64::INFINITY, f64::NEG_INFINITY); dimensions];
        for cell in (0..region.len()).filter(|&c| at_rim(region, c)) {
            let (x, y) = region.centre(cell);
            let at = point(region, x, y);
            reached.iter_mut().zip(&at).for_each(|(r, v)| *r = (r.0.min(*v), r.1.max(*v)));
            tree.add(at, cell as u32).expect("centres are finite");
        }
        let widest = (0..region.grid().rows)
            .map(|r| region.grid().cell_sides(r))
            .fold(0.0, |m: f64, (w, h)| m.max(w.hypot(h)));
        let unit = region.grid().metres_per_unit();
        let around = (reach.get() + widest) / unit * 1.01;
        Self { tree, reached, reach: reach.get(), around: around * around }
    }

    /// The nearest inside cell, when it is within reach of the place (to its edge, not its centre).
    pub fn nearest(&self, region: &Region, x: f64, y: f64) -> Option<usize> {
        if !x.is_finite() || !y.is_finite() {
            return None;
        }
        let at = point(region, x, y);
        let beyond = at.iter().zip(&self.reached).map(|(v, r)| v - v.max(r.0).min(r.1));
        if beyond.map(|d| d * d).sum::<f64>() > self.around {
            return None; // farther than any cell of the tree can be near
        }
        let near = self.tree.within(&at, self.around, &squared_euclidean).ok()?;
        near.iter()
            .map(|(_, cell)| (to_cell(region, **cell as usize, x, y), **cell as usize))
            .min_by(|a, b| a.0.total_cmp(&b.0).then(a.1.cmp(&b.1)))
            .filter(|(distance, _)| *distance <= self.reach)
            .map(|(_, cell)| cell)
    }
}

/// Whether a neighbour of the cell, diagonals included, is outside.
fn at_rim(region: &Region, cell: usize) -> bool {
    let grid = region.grid();
    let (column, row) = region.position(cell);
    (-1..=1_isize).any(|dy| {
        (-1..=1_isize).any(|dx| {
            let (c, r) = (column as isize + dx, row as isize + dy);
            let within = (0..grid.columns as isize).contains(&c) && (0..grid.rows as isize).contains(&r);
            !within || region.compact(r as usize * grid.columns + c as usize).is_none()
        })
    })
}

/// Coordinates in which straight distance orders places by nearness.
fn point(region: &Region, x: f64, y: f64) -> Vec<f64> {
    match region.grid().metric() {
        Metric::Planar => vec![x, y],
        Metric::Geodesic => geocentric(x, y).to_vec(),
    }
}

/// Distance in metres from a place to a cell's rectangle.
fn to_cell(region: &Region, cell: usize, x: f64, y: f64) -> f64 {
    let grid = region.grid();
    let (cx, cy) = region.centre(cell);
    let (hx, hy) = (grid.transform[1] / 2.0, grid.transform[5].abs() / 2.0);
    match grid.metric() {
        Metric::Planar => {
            let (px, py) = (x.clamp(cx - hx, cx + hx), y.clamp(cy - hy, cy + hy));
            (x - px).hypot(y - py) * grid.metres_per_unit()
        }
        Metric::Geodesic => {
            let x = cx + (x - cx + 180.0).rem_euclid(360.0) - 180.0;
            let near = (x.clamp(cx - hx, cx + hx), y.clamp(cy - hy, cy + hy));
            geodesic((x, y), near)
        }
    }
}
