//! One invented table of records in every form it can come in: the answer is the same, and nothing is
//! lost on the way.
//!
//! The records are `tests/data/hoverflies.csv`: hoverflies of the Skerrow Uplands, all invented.

#[path = "../common/mod.rs"]
mod common;

mod arbitrary;
mod caps;
mod forms;
mod smells;

use std::collections::BTreeMap;
use std::path::{Path, PathBuf};

use common::raster::{self, read};
use common::{World, project};
use serde_json::Value;

/// A file of `tests/data`.
fn data(name: &str) -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data").join(name)
}

/// The invented records.
struct Survey {
    columns: Vec<String>,
    rows: Vec<Vec<String>>,
}

impl Survey {
    fn read() -> Self {
        let mut reader = csv::Reader::from_path(data("hoverflies.csv")).unwrap();
        let columns = reader.headers().unwrap().iter().map(str::to_owned).collect();
        let rows = reader.records().map(|r| r.unwrap().iter().map(str::to_owned).collect()).collect();
        Self { columns, rows }
    }

    fn at(&self, column: &str) -> usize {
        self.columns.iter().position(|c| c == column).unwrap_or_else(|| panic!("no column {column}"))
    }

    /// As text; fields that hold the separator are quoted.
    fn text(&self, separator: &str, end: &str) -> String {
        let quoted = |f: &String| if f.contains(separator) { format!("\"{f}\"") } else { f.clone() };
        let line = |row: &Vec<String>| row.iter().map(quoted).collect::<Vec<_>>().join(separator) + end;
        line(&self.columns) + &self.rows.iter().map(line).collect::<String>()
    }

    /// Every how-manyth row, from one on.
    fn part(&self, first: usize, step: usize) -> Self {
        let rows = self.rows.iter().skip(first).step_by(step).cloned().collect();
        Self { columns: self.columns.clone(), rows }
    }
}

const PLAN: &str = r#"title = "Hoverflies of the Skerrow Uplands (invented)"
[grid]
like = "land.tif"
[records]
max_uncertainty = "2 km"
RECORDS
[[candidate]]
name = "recorded"
density = { bandwidth = "400 m" }
[holdout]
folds = 3
resamples = 39
"#;

/// The uplands: the small world's grid with a tarn in it, which is outside.
fn uplands() -> World {
    let world = World::new();
    let grid = world.lattice();
    raster::write(&world.path("land.tif"), &grid, &land(&world), Some(-9999.0));
    world
}

fn land(world: &World) -> Vec<f64> {
    let tarn = |c: u32, r: u32| (18..23).contains(&c) && (10..14).contains(&r);
    world.lattice().each(|c, r| if tarn(c, r) { -9999.0 } else { 1.0 })
}

/// What a build found.
struct Found {
    records: Value,
    candidates: Value,
    warnings: Vec<Value>,
    surface: Vec<f64>,
}

impl Found {
    /// The warnings of a rule.
    fn warned(&self, rule: &str) -> Vec<&Value> {
        self.warnings.iter().filter(|w| w["rule"] == rule).collect()
    }

    #[track_caller]
    fn same_as(&self, other: &Self, what: &str) {
        assert_eq!(self.records, other.records, "{what}");
        assert_eq!(self.candidates, other.candidates, "{what}");
        assert!(self.surface == other.surface, "{what}: another surface");
    }
}

/// Builds with these lines in `[records]`; every row read must be accounted for.
#[track_caller]
fn built(world: &World, records: &str) -> Found {
    world.put("plan.toml", &PLAN.replace("RECORDS", records));
    let found = world.run(&["build", "plan.toml", "--json"]).ended(0).json();
    accounted(world, &found["records"]);
    let warnings = found["warnings"].as_array().unwrap().clone();
    Found {
        records: found["records"].clone(),
        candidates: found["candidates"].clone(),
        warnings,
        surface: read(&world.path("out/effort.tif")).inside(),
    }
}

/// Asserts that read = kept + Σ dropped, and that each dropped row stands in `dropped.csv`.
#[track_caller]
fn accounted(world: &World, records: &Value) {
    let count = |v: &Value| v.as_u64().unwrap();
    let by_rule: BTreeMap<String, u64> = records["dropped"]
        .as_object()
        .unwrap()
        .iter()
        .map(|(rule, n)| (rule.clone(), count(n)))
        .filter(|(_, n)| *n > 0)
        .collect();
    let dropped: u64 = by_rule.values().sum();
    assert_eq!(count(&records["read"]), count(&records["kept"]) + dropped, "{records}");
    let mut listed: BTreeMap<String, u64> = BTreeMap::new();
    let mut table = csv::Reader::from_path(world.path("out/dropped.csv")).unwrap();
    for row in table.records() {
        *listed.entry(row.unwrap()[2].to_owned()).or_insert(0) += 1;
    }
    assert_eq!(listed, by_rule);
    let dates: u64 =
        ["day", "range", "month", "year", "none"].map(|p| count(&records["dates"][p])).iter().sum();
    assert_eq!(dates, count(&records["read"]), "{records}");
}

/// What becomes of each row, counted apart: the rules of the contract in their order, cells by GDAL's
/// transformation.
fn expected(world: &World, survey: &Survey) -> BTreeMap<String, u64> {
    let [lon, lat, radius, status] =
        ["decimalLongitude", "decimalLatitude", "coordinateUncertaintyInMeters", "occurrenceStatus"]
            .map(|c| survey.at(c));
    let (land, grid) = (land(world), world.lattice());
    let mut counts = BTreeMap::new();
    for row in &survey.rows {
        let number = |i: usize| row[i].parse::<f64>();
        let fate = match (number(lon), number(lat)) {
            _ if row[status] == "absent" => "absent",
            (Err(_), _) | (_, Err(_)) => "no_coordinate",
            (Ok(x), Ok(y)) if x.abs() > 180.0 || y.abs() > 90.0 => "impossible_coordinate",
            (Ok(0.0), Ok(0.0)) => "zero_zero",
            _ if number(radius).is_ok_and(|r| r > 2_000.0) => "too_vague",
            (Ok(x), Ok(y)) => {
                let (x, y) = project(4326, world.epsg, &[(x, y)])[0];
                let (c, r) = ((x - grid.origin.0) / grid.cell.0, (y - grid.origin.1) / grid.cell.1);
                let within = (0.0..grid.columns as f64).contains(&c) && (0.0..grid.rows as f64).contains(&r);
                match within.then(|| land[r as usize * grid.columns + c as usize]) {
                    None => "outside_grid",
                    Some(1.0) => "kept",
                    Some(_) => "outside_region",
                }
            }
        };
        *counts.entry(fate.to_owned()).or_insert(0) += 1;
    }
    counts
}
