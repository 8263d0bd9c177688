//! The maps of a page: which values, which scale, and the words around them.

use minijinja::{Value, context};

use crate::check::with_floor;
use crate::grid::{CrsKind, Grid, Metric};
use crate::maths::float;
use crate::output::finding::Finding;

use super::axis::{Axis, Shape};
use super::map::{Frame, Picture, Scale, Squares, aspect, scale_bar, strip};
use super::words;

/// Pixels on the longer side of the report's maps, and of those side by side.
const LARGE: usize = 1100;
const SMALL: usize = 560;
/// A coarse square is told only where records come from at least so many places.
const PLACES: usize = 5;

/// The delivered surface and the records, coarsened, on one scale.
pub(super) fn of_report(f: &Finding) -> Value {
    let density = with_floor(&f.chosen().fitted.density, f.surface.floor.get());
    let scale = Scale::over(density.iter());
    let frame = Frame::new(&f.region, LARGE);
    let squares = Squares::over(f.region.grid());
    let told = told(f, &squares);
    let effort = frame.picture(&density, scale);
    let alt = format!(
        "Map of effort for each unit of area: from {} to {} times the even share, on a logarithmic scale; it is densest in the {}.",
        words::times(scale.low),
        words::times(scale.most),
        part(f.region.grid(), densest(f, &density)),
    );
    let shown = told.iter().flatten().count();
    let records_alt = format!(
        "Map of the density of records in {shown} coarse squares, on the same scale; squares with records from fewer than {PLACES} places are left blank."
    );
    context! {
        effort => picture(&effort, f.region.grid(), &alt),
        records => picture(&frame.coarse(&squares, &told, scale), f.region.grid(), &records_alt),
        shown, side => squares.side, side_length => words::length(squares.side as f64 * f.region.grid().cell_side().get()),
        places => PLACES, legend => legend(scale), ground => ground(f.region.grid()),
        floor => words::percent(f.surface.floor.get()), has_floor => f.surface.floor.get() > 0.0,
    }
}

/// One map a candidate, best first, all on one scale.
pub(super) fn of_comparison(f: &Finding) -> Value {
    let floor = f.surface.floor.get();
    let mut order: Vec<_> = f.verdict.standings.iter().collect();
    order.sort_by_key(|s| s.rank);
    let densities: Vec<Vec<f64>> =
        order.iter().map(|s| with_floor(&f.candidates[s.candidate].fitted.density, floor)).collect();
    let scale = Scale::over(densities.iter().flatten());
    let frame = Frame::new(&f.region, SMALL);
    let maps: Vec<Value> = order
        .iter()
        .zip(&densities)
        .map(|(s, density)| {
            let name = words::name(&f.candidates[s.candidate].name);
            let (low, high) = density.iter().fold((f64::MAX, 0.0_f64), |(l, h), v| (l.min(*v), h.max(*v)));
            let range = if high / low < 1.0001 {
                "even everywhere".into()
            } else {
                format!("from {} to {} times the even share", words::times(low), words::times(high))
            };
            let alt = format!("Map of effort for each unit of area under “{name}”: {range}.");
            context! { name, range, map => picture(&frame.picture(density, scale), f.region.grid(), &alt) }
        })
        .collect();
    context! { maps, legend => legend(scale), ground => ground(f.region.grid()) }
}

fn picture(p: &Picture, grid: &Grid, alt: &str) -> Value {
    let (aspect, _) = aspect(grid);
    // tall maps are kept to about one screen
    let widest = (620.0 * aspect).clamp(200.0, 860.0);
    context! {
        source => Value::from_safe_string(p.source.clone()), width => p.width, height => p.height, alt, widest => format!("{widest:.0}"),
        aspect => format!("{aspect:.4}"),
    }
}

/// Density of units over even by coarse square, told only where enough places stand behind it.
fn told(f: &Finding, squares: &Squares) -> Vec<Option<f64>> {
    let position = |cell: usize| {
        let (column, row) = f.region.position(cell);
        squares.of(column, row)
    };
    let mut area = vec![0.0; squares.len()];
    f.region.areas().iter().enumerate().for_each(|(cell, a)| area[position(cell)] += a);
    let mut weight = vec![0.0; squares.len()];
    let mut places = vec![0_usize; squares.len()];
    let mut seen = vec![false; f.region.len()];
    for unit in &f.records.units {
        let (cell, square) = (unit.cell as usize, position(unit.cell as usize));
        weight[square] += unit.weight;
        places[square] += usize::from(!std::mem::replace(&mut seen[cell], true));
    }
    let even = f.records.weight() / f.region.area();
    (0..squares.len()).map(|s| (places[s] >= PLACES).then(|| weight[s] / area[s] / even)).collect()
}

/// Mean column and row of the cells among the densest that hold a quarter of the effort, as shares
/// of the grid from its west and north.
fn densest(f: &Finding, density: &[f64]) -> (f64, f64) {
    let areas = f.region.areas();
    let most = density.iter().copied().fold(0.0, f64::max);
    let grid = f.region.grid();
    let mut sums = [0.0; 3];
    for (cell, d) in density.iter().enumerate().filter(|(_, d)| **d >= 0.5 * most) {
        let (column, row) = f.region.position(cell);
        let row = if grid.transform[5] > 0.0 { grid.rows - 1 - row } else { row };
        let weight = d * areas[cell];
        sums[0] += weight;
        sums[1] += weight * (column as f64 + 0.5) / grid.columns as f64;
        sums[2] += weight * (row as f64 + 0.5) / grid.rows as f64;
    }
    (sums[1] / sums[0], sums[2] / sums[0])
}

/// Where on the map a place is.
fn part(grid: &Grid, (along, down): (f64, f64)) -> String {
    let third = |v: f64| (v * 3.0).clamp(0.0, 2.9) as usize;
    let (x, y) = (third(along), third(down));
    if grid.columns < 3 || grid.rows < 3 || (x, y) == (1, 1) {
        return "middle".into();
    }
    let rows = ["north", "", "south"];
    let columns = ["west", "", "east"];
    match (rows[y], columns[x]) {
        (r, "") => r.into(),
        ("", c) => c.into(),
        (r, c) => format!("{r}-{c}"),
    }
}

/// Colours with their numbers.
fn legend(scale: Scale) -> Value {
    let axis = Axis::new(Shape::Log, scale.low, scale.high, 1.0, 6);
    let mut ticks = axis.ticks.clone();
    if !ticks.iter().any(|t| (t - 1.0).abs() < 1e-9) && scale.low < 1.0 && scale.high > 1.0 {
        ticks.push(1.0);
    }
    ticks.sort_by(f64::total_cmp);
    let ticks: Vec<Value> = ticks
        .iter()
        .map(|t| {
            context! {
                left => format!("{:.2}", 100.0 * scale.along(*t)), label => words::digits(*t, 3),
                even => (*t - 1.0).abs() < 1e-9,
            }
        })
        .collect();
    let beyond = (scale.most > scale.high).then(|| {
        format!(
            "The darkest colour stands for {}× and more, up to {}×.",
            words::times(scale.high),
            words::times(scale.most)
        )
    });
    context! { strip => Value::from_safe_string(strip()), ticks, beyond }
}

/// Scale bar, extent and which way is up.
fn ground(grid: &Grid) -> Value {
    let bar = scale_bar(grid)
        .map(|(length, share)| context! { label => words::length(length), percent => format!("{:.2}", 100.0 * share) });
    let [west, south, east, north] = grid.extent();
    let (places, unit) = match grid.crs.kind {
        CrsKind::Geographic => (4, "degrees"),
        CrsKind::Projected { metres } if (metres - 1.0).abs() < 1e-9 => (0, "metres"),
        CrsKind::Projected { .. } => (0, "map units"),
    };
    let at = |v: f64| words::decimals(v, places);
    let degree = (grid.metric() == Metric::Geodesic).then(|| {
        let middle = grid.y_at(grid.rows as f64 / 2.0);
        let one = grid.cell_sides(grid.rows / 2).0 / grid.transform[1];
        format!(
            "One degree of longitude is {} at latitude {}.",
            words::length(one),
            words::decimals(middle, 1)
        )
    });
    context! {
        bar, west => at(west), south => at(south), east => at(east), north => at(north), unit, degree,
        crs => words::name(&grid.crs.label), stretched => aspect(grid).1,
        up => if grid.metric() == Metric::Planar { "Grid north is up." } else { "North is up." },
    }
}

/// Largest over smallest area of a cell: what per cell and per area differ by.
pub(super) fn spread_of_areas(f: &Finding) -> f64 {
    let (low, high) = f.region.areas().iter().fold((f64::MAX, 0.0_f64), |(l, h), a| (l.min(*a), h.max(*a)));
    high / low
}

/// A cell's sides in words.
pub(super) fn cell(grid: &Grid) -> String {
    let (width, height) = grid.cell_sides(grid.rows / 2);
    if grid.metric() == Metric::Geodesic {
        return format!(
            "{}° × {}°, about {} × {} in the middle row",
            words::digits(grid.transform[1], 5),
            words::digits(grid.transform[5].abs(), 5),
            words::length(width),
            words::length(height),
        );
    }
    if float::square(width / height - 1.0) < 1e-18 {
        return words::length(width);
    }
    format!("{} × {}", words::length(width), words::length(height))
}
