//! The demo's world: makes the Skerrow Uplands, an invented land with invented hoverflies, and writes
//! what a study of them would start from, together with the truth that real studies never have.
//!
//! `cargo run --release --example skerrow -- demo` writes `demo/data` and `demo/truth`. The same seed
//! gives the same world.

#![allow(clippy::disallowed_methods, reason = "a generator writes its files where it likes")]

mod climate;
mod dice;
mod effort;
mod fauna;
mod frame;
mod land;
mod maps;
mod mess;
mod noise;
mod observers;
mod outline;
mod roads;
mod rows;
mod summary;
mod table;
mod towns;
mod visits;

use std::error::Error;
use std::fs;
use std::io::{BufWriter, Write};
use std::path::{Path, PathBuf};

use climate::Climate;
use effort::{Effort, Ways};
use fauna::Species;
use frame::{CELLS, COLUMNS, Field};
use land::Land;
use roads::{Class, Road};
use rows::Row;
use towns::Settlement;
use visits::Visit;

/// How many observers there are.
const OBSERVERS: usize = 40;

/// The whole world, before anything is written.
struct World {
    land: Land,
    climate: Climate,
    towns: Vec<Settlement>,
    roads: Vec<Road>,
    people: Vec<Option<f64>>,
    effort: Effort,
    species: Vec<Species>,
    visits: Vec<Visit>,
    table: Vec<Vec<Row>>,
}

impl World {
    fn new() -> World {
        let land = Land::new();
        let climate = Climate::new(&land);
        let cells = land.cells();
        let towns = towns::found_towns(&land);
        let roads = roads::lay_roads(&land, &towns);
        let ways = Ways {
            main: roads::distance_to(&roads, |class| class != Class::Track, &cells),
            tracks: roads::distance_to(&roads, |class| class == Class::Track, &cells),
        };
        let hamlets = towns::found_hamlets(&land, &ways.main);
        let people = towns::population(&land, towns.iter().chain(&hamlets));
        let effort = Effort::new(&land, &climate, &ways, &people);
        let species = fauna::invent(&climate, &cells);
        let observers = observers::invent(OBSERVERS);
        let visits = visits::make(&effort, &observers, &species);
        let mut table = rows::write_down(&visits, &observers, &species);
        let fruitful: Vec<&Visit> = visits.iter().filter(|visit| !visit.finds.is_empty()).collect();
        mess::make(&mut table, &fruitful, &land);
        World { land, climate, towns, roads, people, effort, species, visits, table }
    }

    fn write_data(&self, folder: &Path) -> Result<usize, Box<dyn Error>> {
        let environment = folder.join("environment");
        fs::create_dir_all(&environment)?;
        let fields = [
            ("temperature.tif", &self.climate.temperature),
            ("rain.tif", &self.climate.rain),
            ("heath.tif", &self.climate.heath),
        ];
        for (name, field) in fields {
            maps::write_raster(&fresh(&environment, name)?, &self.on_land(field), COLUMNS)?;
        }
        let reserve = effort::reserve_cover(self.effort.reserve_cell);
        maps::write_raster(&fresh(folder, "reserve.tif")?, &self.on_land(&reserve), COLUMNS)?;
        maps::write_raster(&fresh(folder, "population.tif")?, &self.people, towns::COARSE_COLUMNS)?;
        maps::write_region(&fresh(folder, "region.gpkg")?, &outline::polygons(&self.land.inside))?;
        maps::write_roads(&fresh(folder, "roads.gpkg")?, &self.roads)?;
        maps::write_towns(&fresh(folder, "towns.gpkg")?, &self.towns, roads::node)?;
        let mut out = BufWriter::new(fs::File::create(fresh(folder, "records.tsv")?)?);
        let rows: Vec<&Row> = self.table.iter().flatten().collect();
        let count = table::write(&mut out, &rows)?;
        out.flush()?;
        Ok(count)
    }

    fn write_truth(&self, folder: &Path) -> Result<(), Box<dyn Error>> {
        fs::create_dir_all(folder)?;
        let truth = self.effort.truth();
        maps::write_raster(&fresh(folder, "effort.tif")?, &self.on_land(&truth), COLUMNS)?;
        fs::write(fresh(folder, "README.txt")?, summary::truth_text(&self.effort))?;
        Ok(())
    }

    fn on_land(&self, field: &Field) -> Vec<Option<f64>> {
        (0..CELLS).map(|cell| Some(field[cell]).filter(|_| self.land.is_land(cell))).collect()
    }
}

/// The path of a file to write; one that is there already is taken away.
fn fresh(folder: &Path, name: &str) -> Result<PathBuf, Box<dyn Error>> {
    let path = folder.join(name);
    if path.exists() {
        fs::remove_file(&path)?;
    }
    Ok(path)
}

fn main() -> Result<(), Box<dyn Error>> {
    let Some(folder) = std::env::args_os().nth(1).map(PathBuf::from) else {
        return Err("say where: cargo run --release --example skerrow -- FOLDER".into());
    };
    // A fixed date keeps the GeoPackages the same each time they are made.
    gdal::config::set_config_option("OGR_CURRENT_DATE", "2025-01-01T00:00:00.000Z")?;
    let world = World::new();
    let rows = world.write_data(&folder.join("data"))?;
    world.write_truth(&folder.join("truth"))?;
    let cells = world.land.cells();
    let text = summary::describe(rows, &world.visits, &world.effort, &world.species, &cells);
    write!(std::io::stdout(), "{text}")?;
    Ok(())
}
