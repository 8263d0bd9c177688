//! The lattice a kernel runs on: the region's cells, or squares of several of them where the
//! bandwidth is wide against the cell.

use ndarray::Array2;
use rayon::prelude::*;

use crate::grid::{Grid, MEAN_RADIUS, Metric};
use crate::maths::{float, gaussian};
use crate::records::Training;

/// A kernel lattice.
pub(super) struct Lattice {
    step: usize,
    columns: usize,
    grid_columns: usize,
    form: Form,
    /// Observed area of each lattice cell, m².
    mass: Array2<f64>,
}

/// Plane or globe.
enum Form {
    Plane {
        width: f64,
        height: f64,
    },
    Globe {
        latitudes: Vec<f64>,
        /// Cosine of each row's latitude.
        cosines: Vec<f64>,
        /// sin²(Δλ/2) at column distances 0, 1, ….
        halves: Vec<f64>,
        wraps: bool,
    },
}

/// A kernel power: densities use the kernel itself, supports its square.
#[derive(Clone, Copy, PartialEq)]
pub(super) enum Power {
    One,
    Two,
}

/// A place of the lattice: row, column.
pub(super) type Spot = (usize, usize);

impl Lattice {
    /// The lattice of squares of `step` cells a side.
    pub(super) fn new(training: &Training, step: usize) -> Self {
        let region = training.region();
        let grid = region.grid();
        let (rows, columns) = (grid.rows.div_ceil(step), grid.columns.div_ceil(step));
        let mut mass = Array2::zeros((rows, columns));
        for cell in 0..region.len() {
            let (column, row) = region.position(cell);
            mass[(row / step, column / step)] += training.exposure(cell);
        }
        Self { step, columns, grid_columns: grid.columns, form: form(grid, step, rows), mass }
    }

    /// Nothing on every spot.
    pub(super) fn blank(&self) -> Array2<f64> {
        Array2::zeros(self.mass.dim())
    }

    /// Where a cell of the region lies.
    pub(super) fn spot(&self, training: &Training, cell: usize) -> Spot {
        let flat = training.region().flat(cell);
        (flat / self.grid_columns / self.step, flat % self.grid_columns / self.step)
    }

    /// The spots among which a unit at an offset from its own is shared out, each with its share.
    pub(super) fn corners(&self, (row, column): Spot, offset: [f32; 2]) -> Vec<(f64, Spot)> {
        let (rows, wraps) = (self.mass.nrows(), matches!(self.form, Form::Globe { wraps: true, .. }));
        let next = |at: usize, offset: f32, count: usize, wraps: bool| {
            let to = at as isize + if offset > 0.0 { 1 } else { -1 };
            let to = if wraps { to.rem_euclid(count as isize) } else { to };
            let part = f64::from(offset.abs());
            if part > 0.0 && (0..count as isize).contains(&to) {
                vec![(1.0 - part, at), (part, to as usize)]
            } else {
                vec![(1.0, at)]
            }
        };
        let across = next(column, offset[0], self.columns, wraps);
        let down = next(row, offset[1], rows, false);
        down.iter().flat_map(|(p, r)| across.iter().map(move |(q, c)| (p * q, (*r, *c)))).collect()
    }

    /// Mass of the kernel that falls on observed area, at each spot.
    pub(super) fn edges(&self, sigma: f64, spots: &[Spot]) -> Vec<f64> {
        match &self.form {
            Form::Plane { width, height } => {
                let field = convolve(&self.mass, sigma, (*width, *height), Power::One);
                spots.iter().map(|s| field[*s]).collect()
            }
            Form::Globe { .. } => self.globe_edges(sigma, spots),
        }
    }

    /// Σ weight·kernel per m² over the lattice.
    pub(super) fn spread(&self, sigma: f64, spots: &[Spot], weights: &[f64], power: Power) -> Array2<f64> {
        match &self.form {
            Form::Plane { width, height } => {
                let mut field = Array2::zeros(self.mass.dim());
                spots.iter().zip(weights).for_each(|(s, w)| field[*s] += w);
                convolve(&field, sigma, (*width, *height), power)
            }
            Form::Globe { .. } => self.globe_spread(sigma, spots, weights, power),
        }
    }

    /// Kernel per m² between two spots.
    pub(super) fn kernel(&self, taps: &Taps, a: Spot, b: Spot) -> f64 {
        match &self.form {
            Form::Plane { .. } => {
                let tap = |t: &[f64], d: usize| t.get(d).copied().unwrap_or(0.0);
                tap(&taps.down, a.0.abs_diff(b.0)) * tap(&taps.across, a.1.abs_diff(b.1)) / taps.area
            }
            Form::Globe { latitudes, cosines, halves, wraps } => {
                let mut apart = a.1.abs_diff(b.1);
                if *wraps {
                    apart = apart.min(self.columns - apart);
                }
                let rows = half(latitudes[b.0] - latitudes[a.0]);
                on_globe(rows + cosines[a.0] * cosines[b.0] * halves[apart], taps.sigma)
            }
        }
    }

    /// What [`Self::kernel`] needs for a standard deviation in metres.
    pub(super) fn taps(&self, sigma: f64) -> Taps {
        match &self.form {
            Form::Plane { width, height } => Taps {
                sigma,
                across: gaussian::taps(sigma / width),
                down: gaussian::taps(sigma / height),
                area: width * height,
            },
            Form::Globe { .. } => Taps { sigma, across: Vec::new(), down: Vec::new(), area: 1.0 },
        }
    }

    fn globe_edges(&self, sigma: f64, spots: &[Spot]) -> Vec<f64> {
        let mut by_row: Vec<Vec<(usize, usize)>> = vec![Vec::new(); self.mass.nrows()];
        spots.iter().enumerate().for_each(|(i, s)| by_row[s.0].push((i, s.1)));
        let sums: Vec<Vec<(usize, f64)>> = by_row
            .par_iter()
            .enumerate()
            .map(|(row, here)| {
                let mut sums: Vec<(usize, f64)> = here.iter().map(|(i, _)| (*i, 0.0)).collect();
                for other in self.rows_in_reach(row, sigma).filter(|_| !here.is_empty()) {
                    let line = self.line(row, other, sigma, Power::One);
                    let masses = self.mass.row(other);
                    for ((_, column), (_, sum)) in here.iter().zip(&mut sums) {
                        self.along(*column, &line, |c, k| *sum += k * masses[c]);
                    }
                }
                sums
            })
            .collect();
        let mut edges = vec![0.0; spots.len()];
        sums.into_iter().flatten().for_each(|(i, sum)| edges[i] = sum);
        edges
    }

    fn globe_spread(&self, sigma: f64, spots: &[Spot], weights: &[f64], power: Power) -> Array2<f64> {
        let rows = self.mass.nrows();
        let mut by_row: Vec<Vec<(usize, f64)>> = vec![Vec::new(); rows];
        spots.iter().zip(weights).for_each(|(s, w)| by_row[s.0].push((s.1, *w)));
        let lines: Vec<Vec<f64>> = (0..rows)
            .into_par_iter()
            .map(|row| {
                let mut out = vec![0.0; self.columns];
                for other in self.rows_in_reach(row, sigma).filter(|&o| !by_row[o].is_empty()) {
                    let line = self.line(other, row, sigma, power);
                    for &(column, weight) in &by_row[other] {
                        self.along(column, &line, |c, k| out[c] += k * weight);
                    }
                }
                out
            })
            .collect();
        Array2::from_shape_vec((rows, self.columns), lines.concat()).expect("one line a row")
    }

    /// Rows within the kernel's reach of a row.
    fn rows_in_reach(&self, row: usize, sigma: f64) -> std::ops::RangeInclusive<usize> {
        let Form::Globe { latitudes, .. } = &self.form else { unreachable!("planes have no lines") };
        let reach = (gaussian::REACH * sigma / MEAN_RADIUS).to_degrees();
        let near = |r: &usize| (latitudes[*r] - latitudes[row]).abs() <= reach;
        let first = (0..=row).rev().take_while(near).last().unwrap_or(row);
        let last = (row..latitudes.len()).take_while(near).last().unwrap_or(row);
        first..=last
    }

    /// Kernel values from a spot of one row to another row, at column distances 0, 1, ….
    fn line(&self, from: usize, to: usize, sigma: f64, power: Power) -> Vec<f64> {
        let Form::Globe { latitudes, cosines, halves, wraps } = &self.form else {
            unreachable!("planes have no lines")
        };
        let most = if *wraps { self.columns / 2 } else { self.columns - 1 };
        let rows = half(latitudes[to] - latitudes[from]);
        let ring = cosines[from] * cosines[to];
        // on a grid wider than half the globe the kernel comes back from the other side
        let back = halves[..=most].iter().any(|h| *h > halves[most]);
        halves[..=most]
            .iter()
            .map(|half| on_globe(rows + ring * half, sigma))
            .take_while(|k| *k > 0.0 || back)
            .map(|k| if power == Power::Two { k * k } else { k })
            .collect()
    }

    /// Calls `each(column, kernel)` for the columns on both sides of a column.
    fn along(&self, column: usize, line: &[f64], mut each: impl FnMut(usize, f64)) {
        let Form::Globe { wraps, .. } = &self.form else { unreachable!("planes have no lines") };
        let n = self.columns;
        for (d, &k) in line.iter().enumerate() {
            if *wraps {
                each((column + d) % n, k);
                if d > 0 && 2 * d != n {
                    each((column + n - d) % n, k);
                }
            } else {
                if column + d < n {
                    each(column + d, k);
                }
                if d > 0 && d <= column {
                    each(column - d, k);
                }
            }
        }
    }
}

/// Kernel taps of one bandwidth.
pub(super) struct Taps {
    pub(super) sigma: f64,
    across: Vec<f64>,
    down: Vec<f64>,
    area: f64,
}

fn form(grid: &Grid, step: usize, rows: usize) -> Form {
    match grid.metric() {
        Metric::Planar => {
            let (width, height) = grid.cell_sides(0);
            Form::Plane { width: width * step as f64, height: height * step as f64 }
        }
        Metric::Geodesic => {
            let middle = |r: usize| grid.y_at((r as f64 + 0.5) * step as f64).clamp(-90.0, 90.0);
            let latitudes: Vec<f64> = (0..rows).map(middle).collect();
            let apart = grid.transform[1] * step as f64;
            Form::Globe {
                cosines: latitudes.iter().map(|l| float::cos(l.to_radians())).collect(),
                halves: (0..grid.columns.div_ceil(step)).map(|d| half(d as f64 * apart)).collect(),
                latitudes,
                wraps: grid.wraps() && grid.columns.is_multiple_of(step),
            }
        }
    }
}

/// sin² of half an angle in degrees.
fn half(degrees: f64) -> f64 {
    float::square(float::sin(degrees.to_radians() / 2.0))
}

fn convolve(field: &Array2<f64>, sigma: f64, sides: (f64, f64), power: Power) -> Array2<f64> {
    let taps = |side: f64| {
        let mut taps = gaussian::taps(sigma / side);
        if power == Power::Two {
            taps.iter_mut().for_each(|t| *t *= *t);
        }
        taps
    };
    let cell = sides.0 * sides.1;
    let area = if power == Power::Two { cell * cell } else { cell };
    let mut out = gaussian::convolve(field.view(), &taps(sides.0), &taps(sides.1));
    out.par_mapv_inplace(|v| v / area);
    out
}

/// Gaussian of a great-circle distance given by its haversine, per m²; 0 beyond the kernel's reach.
fn on_globe(haversine: f64, sigma: f64) -> f64 {
    let distance = 2.0 * MEAN_RADIUS * float::asin(haversine.sqrt().min(1.0));
    if distance > gaussian::REACH * sigma {
        return 0.0;
    }
    float::exp(-0.5 * float::square(distance / sigma)) / (2.0 * std::f64::consts::PI * sigma * sigma)
}

#[cfg(test)]
mod tests {
    use std::sync::Arc;

    use super::*;
    use crate::grid::{Region, geodesic, grids};
    use crate::maths::random::Stream;
    use crate::units::Seed;

    fn haversine(p: (f64, f64), q: (f64, f64)) -> f64 {
        half(q.1 - p.1) + float::cos(p.1.to_radians()) * float::cos(q.1.to_radians()) * half(q.0 - p.0)
    }

    /// Σ K(d)/e by the double sum as written, d the great circle on a sphere of mean radius.
    fn brute(region: &Region, cells: &[u32], sigma: f64) -> Vec<f64> {
        let kernel = |a: usize, b: usize| {
            let (p, q) = (region.centre(a), region.centre(b));
            on_globe(haversine(p, q), sigma)
        };
        let edge = |c: usize| (0..region.len()).map(|u| kernel(u, c) * region.areas()[u]).sum::<f64>();
        let places: Vec<(usize, f64)> = cells.iter().map(|c| (*c as usize, edge(*c as usize))).collect();
        (0..region.len()).map(|u| places.iter().map(|(c, e)| kernel(u, *c) / e).sum()).collect()
    }

    fn check(columns: usize, rows: usize, (west, north, step): (f64, f64, f64), sigma: f64) {
        let grid = grids::globe(columns, rows, west, north, step);
        let mut stream = Stream::new(Seed(11), "test", columns as u64);
        let inside: Vec<bool> = (0..grid.len()).map(|_| stream.unit() < 0.8).collect();
        let region = Arc::new(Region::new(grid, &inside));
        let cells: Vec<u32> = (0..40).map(|_| stream.below(region.len()) as u32).collect();
        let training = Training::of_cells(region.clone(), &cells);
        let lattice = Lattice::new(&training, 1);
        let spots: Vec<Spot> = cells.iter().map(|c| lattice.spot(&training, *c as usize)).collect();
        let weights: Vec<f64> = lattice.edges(sigma, &spots).iter().map(|e| 1.0 / e).collect();
        let fast = lattice.spread(sigma, &spots, &weights, Power::One);
        let slow = brute(&region, &cells, sigma);
        let peak = slow.iter().copied().fold(0.0, f64::max);
        let mut total = 0.0;
        for (cell, slow) in slow.iter().enumerate() {
            let fast = fast[lattice.spot(&training, cell)];
            assert!((fast - slow).abs() < 1e-9 * peak, "{west} {north}: {fast} {slow}");
            total += fast * region.areas()[cell];
        }
        assert!((total - 40.0).abs() < 40.0 * 1e-9, "mass {total}");
    }

    #[test]
    fn on_the_globe_rows_equal_the_double_sum() {
        check(40, 30, (0.0, 7.5, 0.5), 150_000.0);
        check(40, 30, (10.0, 60.0, 0.5), 80_000.0);
        check(60, 20, (20.0, 90.0, 0.5), 120_000.0);
        check(40, 20, (170.0, 5.0, 0.5), 200_000.0);
        check(90, 40, (-180.0, 80.0, 4.0), 500_000.0);
        check(89, 20, (-178.0, 40.0, 4.0), 1_500_000.0);
    }

    /// The sphere's distance is within 0.6 % of the geodesic on the ellipsoid.
    #[test]
    fn the_sphere_is_close_to_the_ellipsoid() {
        for (a, b) in [((0.0, 0.0), (0.0, 5.0)), ((0.0, 50.0), (6.0, 50.0)), ((10.0, 79.0), (30.0, 82.0))] {
            let true_length = geodesic(a, b);
            let k = on_globe(haversine(a, b), 1e6) * (2.0 * std::f64::consts::PI * 1e12);
            let length = 1e6 * (-2.0 * float::ln(k)).sqrt();
            assert!((length / true_length - 1.0).abs() < 0.006, "{length} {true_length}");
        }
    }
}
