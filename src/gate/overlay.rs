//! Rasters that share the grid's CRS: brought to it by the exact overlap of cells, round the globe
//! where longitudes are.

use crate::grid::{CrsKind, Grid};
use crate::proxies::Resample;

use super::cells::Cells;

/// One axis of a grid: where it begins, its step, how many.
pub(super) struct Axis {
    origin: f64,
    step: f64,
    count: usize,
    /// Steps round the globe, for longitudes.
    turn: Option<f64>,
}

impl Axis {
    pub(super) fn columns(grid: &Grid) -> Self {
        let t = &grid.transform;
        let turn = (grid.crs.kind == CrsKind::Geographic).then(|| 360.0 / t[1]);
        Self { origin: t[0], step: t[1], count: grid.columns, turn }
    }

    pub(super) fn rows(grid: &Grid) -> Self {
        Self { origin: grid.transform[3], step: grid.transform[5], count: grid.rows, turn: None }
    }

    /// A coordinate in steps from the axis's beginning.
    fn at(&self, coordinate: f64) -> f64 {
        let at = (coordinate - self.origin) / self.step;
        // edges meant to agree must not spill a sliver into the neighbour
        if (at - at.round()).abs() < 1e-7 * at.abs().max(1.0) { at.round() } else { at }
    }

    /// Steps that the stretch from `a` to `b` covers, each with its share of the stretch.
    pub(super) fn shares(&self, a: f64, b: f64) -> Vec<(usize, f64)> {
        let (p, q) = (self.at(a), self.at(b));
        let (low, high) = (p.min(q), p.max(q));
        let mut out = Vec::new();
        match self.turn {
            None => self.cover(low, high, &mut out),
            Some(turn) => {
                let home = self.snapped(low - (low / turn).floor() * turn);
                for lap in [-1.0, 0.0] {
                    self.cover(
                        self.snapped(home + lap * turn),
                        self.snapped(home + lap * turn + high - low),
                        &mut out,
                    );
                }
            }
        }
        out
    }

    fn snapped(&self, at: f64) -> f64 {
        if (at - at.round()).abs() < 1e-6 { at.round() } else { at }
    }

    fn cover(&self, low: f64, high: f64, out: &mut Vec<(usize, f64)>) {
        let mut from = low.floor();
        while from < high {
            let share = (high.min(from + 1.0) - low.max(from)) / (high - low);
            if from >= 0.0 && from < self.count as f64 && share > 1e-12 {
                out.push((from as usize, share));
            }
            from += 1.0;
        }
    }

    /// The two steps whose middles lie around a coordinate, with their weights; beyond the first or
    /// last middle the end counts alone.
    fn around(&self, coordinate: f64) -> Vec<(usize, f64)> {
        let mut at = self.at(coordinate) - 0.5;
        if let Some(turn) = self.turn {
            at -= (at / turn).floor() * turn;
            if at > self.count as f64 - 0.5 && at - turn >= -0.5 {
                at -= turn; // just west of the first middle
            }
        }
        let (floor, part) = (at.floor(), at - at.floor());
        let whole = self.turn.is_some_and(|t| (t - self.count as f64).abs() < 0.01);
        let step = |s: f64| {
            let s = if whole { s.rem_euclid(self.count as f64) } else { s };
            (s >= 0.0 && s < self.count as f64).then_some(s as usize)
        };
        [(step(floor), 1.0 - part), (step(floor + 1.0), part)]
            .into_iter()
            .filter_map(|(s, w)| s.filter(|_| w > 0.0).map(|s| (s, w)))
            .collect()
    }
}

/// Source rows a target row needs, read once each.
struct Rows<'a> {
    cells: &'a Cells<'a>,
    columns: usize,
    held: std::collections::BTreeMap<usize, Vec<f64>>,
}

impl Rows<'_> {
    /// Makes sure that these rows are there, and forgets all others.
    fn hold(&mut self, rows: &[(usize, f64)]) -> gdal::errors::Result<()> {
        self.held.retain(|r, _| rows.iter().any(|(n, _)| n == r));
        for (row, _) in rows {
            if !self.held.contains_key(row) {
                self.held.insert(*row, self.cells.row(*row, 0, self.columns)?);
            }
        }
        Ok(())
    }
}

/// Values over the target, not-a-number where the source has none.
pub(super) fn resample(
    cells: &Cells,
    source: &Grid,
    target: &Grid,
    how: Resample,
) -> gdal::errors::Result<Vec<f64>> {
    let (across, down) = (Axis::columns(source), Axis::rows(source));
    let pick = |axis: &Axis, a: f64, b: f64| match how {
        Resample::Bilinear => axis.around(f64::midpoint(a, b)),
        _ => axis.shares(a, b),
    };
    let edge = |c: usize| target.x_at(c as f64);
    let columns: Vec<Vec<(usize, f64)>> =
        (0..target.columns).map(|c| pick(&across, edge(c), edge(c + 1))).collect();
    let mut rows = Rows { cells, columns: source.columns, held: std::collections::BTreeMap::new() };
    let mut out = Vec::with_capacity(target.len());
    for row in 0..target.rows {
        let lines = pick(&down, target.y_at(row as f64), target.y_at(row as f64 + 1.0));
        let centre = source.locate(
            target.x_at(0.5).clamp(source.x_at(0.0), source.x_at(1.0)),
            target.y_at(row as f64 + 0.5),
        );
        let middle = centre.map(|c| (c / source.columns, 1.0));
        let wanted: Vec<(usize, f64)> = lines.iter().copied().chain(middle).collect();
        rows.hold(&wanted)?;
        for (column, steps) in columns.iter().enumerate() {
            let (x, y) = target.centre(column, row);
            let here = source.locate(x, y).map(|c| rows.held[&(c / source.columns)][c % source.columns]);
            out.push(match how {
                Resample::Nearest => here.unwrap_or(f64::NAN),
                Resample::Bilinear if here.is_none_or(f64::is_nan) => f64::NAN,
                _ => combine(&rows.held, &lines, steps, how),
            });
        }
    }
    Ok(out)
}

/// The values of some cells as one: their weighted mean, largest or smallest; cells without a value do
/// not count.
fn combine(
    held: &std::collections::BTreeMap<usize, Vec<f64>>,
    lines: &[(usize, f64)],
    steps: &[(usize, f64)],
    how: Resample,
) -> f64 {
    let (mut weight, mut sum, mut most, mut least) = (0.0, 0.0, f64::NAN, f64::NAN);
    for (row, down) in lines {
        let values = &held[row];
        for (column, across) in steps {
            let value = values[*column];
            if !value.is_nan() {
                weight += down * across;
                sum += down * across * value;
                most = most.max(value); // a number beats not-a-number
                least = least.min(value);
            }
        }
    }
    match how {
        Resample::Max => most,
        Resample::Min => least,
        _ => sum / weight, // nothing over nothing is not a number
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::grid::grids;

    fn shares(grid: &Grid, a: f64, b: f64) -> Vec<(usize, f64)> {
        Axis::columns(grid).shares(a, b)
    }

    #[test]
    fn stretches_are_shared_out_round_the_globe() {
        let pacific = grids::globe(40, 4, 170.0, 2.0, 0.5);
        assert_eq!(shares(&pacific, -180.0, -179.5), vec![(20, 1.0)]);
        assert_eq!(shares(&pacific, 179.75, 180.25), vec![(19, 0.5), (20, 0.5)]);
        assert_eq!(shares(&pacific, 0.0, 0.5), vec![]);
        // a step that does not divide the circle
        let odd = grids::globe(30, 4, 170.0, 2.0, 0.7);
        let covered = shares(&odd, -180.0, -179.3);
        assert_eq!(covered.iter().map(|c| c.0).collect::<Vec<_>>(), vec![14, 15]);
        assert!((covered.iter().map(|c| c.1).sum::<f64>() - 1.0).abs() < 1e-9);
        // pixel sizes rounded in the last digit
        let rounded = grids::globe(1200, 4, 170.0, 2.0, 0.016_666_666_666_667);
        assert_eq!(shares(&rounded, -180.0 + 3.0 / 60.0, -180.0 + 4.0 / 60.0).len(), 1);
        assert_eq!(shares(&rounded, -180.0 + 3.0 / 60.0, -180.0 + 4.0 / 60.0)[0].0, 603);
    }

    #[test]
    fn middles_around_a_place() {
        let axis = Axis::columns(&grids::globe(360, 4, -180.0, 2.0, 1.0));
        assert_eq!(axis.around(-180.0), vec![(359, 0.5), (0, 0.5)]);
        assert_eq!(axis.around(180.5), vec![(0, 1.0)]);
        let part = Axis::columns(&grids::globe(10, 4, 0.0, 2.0, 1.0));
        assert_eq!(part.around(0.25), vec![(0, 0.75)]);
    }
}
