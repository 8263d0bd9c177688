//! Where people live: named towns, unnamed hamlets by the roads, people per square kilometre.

use crate::dice::{Dice, Urn};
use crate::frame::{CELL, CELLS, COLUMNS, Field, Point, ROWS, centre, column_row};
use crate::land::Land;

/// A place where people live.
pub struct Settlement {
    /// Its name; empty for a hamlet.
    pub name: &'static str,
    /// Inhabitants.
    pub people: u32,
    /// The cell of its middle.
    pub cell: usize,
}

/// Names and inhabitants, largest first.
const TOWNS: [(&str, u32); 14] = [
    ("Skerrowmouth", 86_400),
    ("Ambleholm", 31_200),
    ("Pellwick Strand", 17_900),
    ("Tarnover", 12_600),
    ("Quoymere", 8_700),
    ("Brantle", 6_900),
    ("Old Hessock", 5_300),
    ("Dunnaby Cross", 4_200),
    ("Fennochtie", 3_300),
    ("Lower Myrrick", 2_600),
    ("Stathelow", 2_100),
    ("Greyn", 1_600),
    ("Ulverack", 1_200),
    ("Wetherlaw End", 800),
];

/// How many of the largest towns are ports.
const PORTS: usize = 4;
/// How many hamlets stand by the roads.
const HAMLETS: usize = 80;

/// Places the towns: low, near water rather than far, well apart, on the mainland.
pub fn found_towns(land: &Land) -> Vec<Settlement> {
    let mut dice = Dice::new(1);
    let sites: Vec<usize> =
        land.cells().into_iter().filter(|&cell| land.mainland[cell] && land.inside[cell] > 1500.0).collect();
    let mut towns: Vec<Settlement> = Vec::new();
    for (rank, &(name, people)) in TOWNS.iter().enumerate() {
        let mut best = (f64::NEG_INFINITY, sites[0]);
        for &cell in &sites {
            let luck = -libm::log(-libm::log(dice.between(1e-12, 1.0)));
            let merit = 0.35 * luck - draw_of_water(land, cell, rank) - land.height[cell] / 200.0;
            let apart = towns.iter().all(|town| centre(town.cell).distance(centre(cell)) > 17_500.0);
            if apart && merit > best.0 {
                best = (merit, cell);
            }
        }
        towns.push(Settlement { name, people, cell: best.1 });
    }
    towns
}

/// The largest towns are ports; the others stand anywhere, though not quite out on the coast.
fn draw_of_water(land: &Land, cell: usize, rank: usize) -> f64 {
    let from_the_sea = land.shore[cell] / 1000.0;
    if rank < PORTS { (from_the_sea - 2.0).abs() / 4.0 } else { (6.0 - from_the_sea).max(0.0) / 6.0 }
}

/// Scatters hamlets within walking distance of the main roads.
pub fn found_hamlets(land: &Land, main_roads: &Field) -> Vec<Settlement> {
    let mut dice = Dice::new(2);
    let pull = |cell: usize| {
        if land.is_land(cell) {
            libm::exp(-main_roads[cell] / 900.0 - land.height[cell] / 250.0)
        } else {
            0.0
        }
    };
    let urn = Urn::new((0..CELLS).map(pull));
    let mut hamlet = || {
        let cell = urn.draw(&mut dice);
        Settlement { name: "", people: (90.0 * dice.lognormal(0.7)) as u32 + 15, cell }
    };
    (0..HAMLETS).map(|_| hamlet()).collect()
}

/// Columns of the population raster, whose cells are two by two cells of the grid.
pub const COARSE_COLUMNS: usize = COLUMNS / 2;
/// Rows of the population raster.
pub const COARSE_ROWS: usize = ROWS / 2;

/// People per cell of the coarse raster, whole people; `None` where all four fine cells lack land.
pub fn population<'a>(land: &Land, settlements: impl Iterator<Item = &'a Settlement>) -> Vec<Option<f64>> {
    let mut people = vec![None; COARSE_COLUMNS * COARSE_ROWS];
    for cell in land.cells() {
        people[coarse(cell)] = Some(0.0);
    }
    for place in settlements {
        let spread = 350.0 + 8.5 * libm::sqrt(f64::from(place.people));
        let share = |at: usize| {
            let far = coarse_centre(at).distance(centre(place.cell)) / spread;
            if people[at].is_some() && far < 3.0 { libm::exp(-far * far / 2.0) } else { 0.0 }
        };
        let shares: Vec<f64> = (0..people.len()).map(share).collect();
        let total: f64 = shares.iter().sum();
        for (inhabitants, share) in people.iter_mut().zip(shares) {
            *inhabitants = inhabitants.map(|known| known + f64::from(place.people) * share / total);
        }
    }
    people.into_iter().map(|known| known.map(f64::round)).collect()
}

/// The coarse cell that holds a fine one.
pub fn coarse(cell: usize) -> usize {
    let (column, row) = column_row(cell);
    row / 2 * COARSE_COLUMNS + column / 2
}

fn coarse_centre(at: usize) -> Point {
    let first = at / COARSE_COLUMNS * 2 * COLUMNS + at % COARSE_COLUMNS * 2;
    centre(first).shifted(CELL / 2.0, -CELL / 2.0)
}
