//! The whole way on real input: a biodiversity portal's download and the streets of a small coastal
//! city state. What is asserted can be confirmed outside (see `tests/real/README.md`).
//!
//! The data are fetched by `tests/real/fetch.sh`; where that cannot be done the tests say so and
//! count as skipped.

#![allow(clippy::print_stdout, reason = "a test that cannot run here says so")]

mod common;

use std::path::{Path, PathBuf};
use std::process::Command;
use std::sync::OnceLock;

use common::raster::{Read, read};
use common::{World, json, says};
use serde_json::Value;

/// Ways on which people walk or drive, as the map tags them.
const WAYS: [&str; 20] = [
    "motorway",
    "trunk",
    "primary",
    "secondary",
    "tertiary",
    "motorway_link",
    "trunk_link",
    "primary_link",
    "secondary_link",
    "tertiary_link",
    "unclassified",
    "residential",
    "living_street",
    "service",
    "pedestrian",
    "footway",
    "path",
    "track",
    "steps",
    "cycleway",
];

/// The folder of prepared data; `None`, said aloud, where it cannot be had.
fn data() -> Option<&'static Path> {
    static FOLDER: OnceLock<Result<PathBuf, String>> = OnceLock::new();
    let root = Path::new(env!("CARGO_MANIFEST_DIR"));
    let fetched = FOLDER.get_or_init(|| {
        let ran = Command::new("bash").arg(root.join("tests/real/fetch.sh")).output();
        let ran = ran.map_err(|e| format!("no bash ({e})"))?;
        let said = String::from_utf8_lossy(&ran.stderr).trim().to_owned();
        match ran.status.code() {
            Some(0) => Ok(root.join("tests/.cache/real")),
            Some(69) => Err(said),
            Some(75) => Err(format!("the package registry cannot be reached: {said}")),
            _ => panic!("fetch.sh failed: {said}"),
        }
    });
    fetched.as_deref().map_err(|why| println!("skipped: {why}")).ok()
}

/// The plan over the prepared data, with more lines for some of its tables.
fn plan(data: &Path, records: &str, rest: &str) -> String {
    let at = |name: &str| data.join(name).display().to_string();
    let ways = WAYS.map(|way| format!("'{way}'")).join(",");
    format!(
        r#"title = "Records of a small coastal city state"
[grid]
like = '{}'
[records]
file = '{}'
{records}
[[layer]]
name = "roads"
measure = "distance"
file = '{}'
table = "roads"
where = "highway IN ({ways})"
[[layer]]
name = "people"
measure = "value"
file = '{}'
resample = "sum"
[[candidate]]
name = "recorded"
density = {{ bandwidth = "100 m" }}
[[candidate]]
name = "access"
uses = {{ roads = {{ curve = "half-normal" }}, people = {{ curve = "power" }} }}
[holdout]
resamples = 199
[output]
details = true
{rest}
"#,
        at("land.tif"),
        at("occurrence.txt"),
        at("roads.gpkg"),
        at("population.tif"),
    )
}

const BIRDS: &str = "keep = { class = [\"Aves\"] }";

fn count(value: &Value, field: &str) -> u64 {
    value[field].as_u64().unwrap_or_else(|| panic!("no count `{field}` in {value}"))
}

#[track_caller]
fn close(found: f64, expected: f64, tolerance: f64) {
    assert!((found - expected).abs() <= tolerance, "{found} is not {expected} ± {tolerance}");
}

#[test]
fn every_row_is_accounted_for() {
    let Some(data) = data() else { return };
    let world = World::empty(32632);
    world.put("plan.toml", &plan(data, "", ""));
    let found = world.run(&["build", "plan.toml", "--json"]).ended(0).json();
    assert_eq!(found, json(&world.path("out/effort.json")));
    let grid = &found["grid"];
    assert_eq!(
        (count(grid, "columns"), count(grid, "rows"), count(grid, "cells_inside")),
        (300, 350, 23_375)
    );
    close(grid["area_km2"].as_f64().unwrap(), 2.3375, 1e-9);
    assert_eq!(grid["transform"], serde_json::json!([371800.0, 10.0, 0.0, 4846000.0, 0.0, -10.0]));
    let records = &found["records"];
    assert_eq!((count(records, "read"), count(records, "kept")), (7_929, 5_405));
    let dropped = &records["dropped"];
    let due = [("no_coordinate", 1_560), ("zero_zero", 18), ("outside_grid", 296), ("outside_region", 650)];
    due.iter().for_each(|(rule, rows)| assert_eq!(count(dropped, rule), *rows, "{rule}"));
    let all: u64 = dropped.as_object().unwrap().values().map(|v| v.as_u64().unwrap()).sum();
    assert_eq!(all, 7_929 - 5_405);
    let rows = std::fs::read_to_string(world.path("out/dropped.csv")).unwrap();
    assert_eq!(rows.lines().count(), 1 + 7_929 - 5_405);
    let dates = [("day", 6_554), ("range", 297), ("month", 320), ("year", 177), ("none", 581)];
    dates.iter().for_each(|(how, rows)| assert_eq!(count(&records["dates"], how), *rows, "{how}"));
    assert_eq!(count(records, "places"), 1_235);
}

/// What `tests/real/count.py` counts in the archive; `None`, said aloud, where it cannot run.
fn counted_apart(data: &Path, limit: &[&str]) -> Option<Value> {
    let script = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/real/count.py");
    let mut command = Command::new("/usr/bin/python3");
    command.arg("-B").arg(script).arg(data.join("archive")).arg(data.join("land.tif")).args(limit);
    let ran = match command.output() {
        Ok(ran) => ran,
        Err(e) => {
            println!("skipped: no /usr/bin/python3 ({e})");
            return None;
        }
    };
    let said = String::from_utf8_lossy(&ran.stderr);
    if ran.status.code() == Some(69) {
        println!("skipped: {said}");
        return None;
    }
    assert!(ran.status.success(), "count.py: {said}");
    Some(serde_json::from_slice(&ran.stdout).expect("count.py writes JSON"))
}

/// The archive as a folder, as a zip file and its core as plain text: each row meets the fate that
/// Python's csv module and GDAL's bindings find (`tests/real/count.py`).
#[test]
fn the_archive_is_read_as_another_reads_it() {
    let Some(data) = data() else { return };
    for (limit, line) in [(&[][..], ""), (&["2000"], "max_uncertainty = \"2 km\"")] {
        let Some(due) = counted_apart(data, limit) else { return };
        let facts = ["read", "quotes", "no uncertainty", "999999"].map(|fact| count(&due, fact));
        assert_eq!(facts, [7_929, 379, 5_185, 140]);
        let mut whole: Option<Value> = None;
        for (form, place) in [
            ("archive", "archive: occurrence.txt"),
            ("archive.zip", "archive.zip: occurrence.txt"),
            ("occurrence.txt", "occurrence.txt"),
        ] {
            let world = World::empty(32632);
            let plan = plan(data, line, "").replace("/occurrence.txt", &format!("/{form}"));
            world.put("plan.toml", &plan);
            let found = world.run(&["build", "plan.toml", "--json"]).ended(0).json();
            same_fates(&world, &found["records"], &due, place);
            let whole = whole.get_or_insert_with(|| found["records"].clone());
            assert_eq!(found["records"], *whole, "{form}");
        }
    }
}

/// Asserts that kept rows, places and each dropped row with its rule are those that are due.
#[track_caller]
fn same_fates(world: &World, records: &Value, due: &Value, place: &str) {
    for field in ["read", "kept", "places"] {
        assert_eq!(count(records, field), count(due, field), "{place}: {field}");
    }
    let mut table = csv::Reader::from_path(world.path("out/dropped.csv")).unwrap();
    let mut found = Vec::new();
    for row in table.records() {
        let row = row.unwrap();
        assert!(row[0].ends_with(place), "{} is not {place}", &row[0]);
        found.push((row[1].parse::<u64>().unwrap(), row[2].to_owned()));
    }
    let rows = due["dropped"].as_array().unwrap().iter();
    let due: Vec<(u64, String)> =
        rows.map(|r| (r[0].as_u64().unwrap(), r[1].as_str().unwrap().to_owned())).collect();
    assert_eq!(found, due, "{place}");
    for (rule, n) in records["dropped"].as_object().unwrap() {
        assert_eq!(n.as_u64().unwrap(), due.iter().filter(|(_, r)| r == rule).count() as u64, "{rule}");
    }
}

#[test]
fn layers_are_what_the_map_says() {
    let Some(data) = data() else { return };
    let world = World::empty(32632);
    world.put("plan.toml", &plan(data, BIRDS, ""));
    world.run(&["build", "plan.toml"]).ended(0);
    let found = json(&world.path("out/effort.json"));
    let layer = |name: &str| {
        let layers = found["layers"].as_array().unwrap();
        layers.iter().find(|l| l["name"] == name).unwrap_or_else(|| panic!("no layer {name}")).clone()
    };
    let roads = layer("roads");
    assert_eq!((roads["measure"].as_str(), roads["unit"].as_str()), (Some("distance"), Some("m")));
    close(roads["median"].as_f64().unwrap(), 7.6311, 5e-4);
    close(roads["max"].as_f64().unwrap(), 161.7811, 5e-3);
    let distances = read(&world.path("out/layer-roads.tif")).inside();
    assert_eq!(distances.len(), 23_375);
    close(distances.iter().sum::<f64>() / 23_375.0, 14.8075, 5e-4);
    let people = read(&world.path("out/layer-people.tif")).inside();
    close(people.iter().sum(), 39_050.0, 0.039_05);
    assert_eq!(people.iter().filter(|v| **v > 0.0).count(), 6_784);
    close(layer("people")["max"].as_f64().unwrap(), 39_050.0 / 6_784.0, 1e-6);
}

/// Builds the surface of the birds' density, each record or each visit counting once.
fn birds(data: &Path, counted: &str) -> (Value, Read) {
    let world = World::empty(32632);
    let records = format!("{BIRDS}\ncount = \"{counted}\"");
    world.put("plan.toml", &plan(data, &records, "[surface]\ncandidate = \"recorded\""));
    let found = world.run(&["build", "plan.toml", "--json"]).ended(0).json();
    (found, read(&world.path("out/effort.tif")))
}

#[test]
fn records_and_visits_tell_different_stories() {
    let Some(data) = data() else { return };
    let (by_record, records) = birds(data, "records");
    let (by_visit, visits) = birds(data, "visits");
    for found in [&by_record, &by_visit] {
        assert_eq!((count(&found["records"], "kept"), count(&found["records"], "places")), (3_264, 467));
    }
    close(by_record["records"]["units"].as_f64().unwrap(), 3_264.0, 0.0);
    // 836 pairs of observer and date by cell as they are written; the same names in another order,
    // or the same day written in another way, are one
    let visits_made = by_visit["records"]["units"].as_f64().unwrap();
    assert!((800.0..=836.0).contains(&visits_made), "{visits_made} visits");
    let top = |found: &Value| found["records"]["top_share"]["cell"].as_f64().unwrap();
    close(top(&by_record), 1_023.0 / 3_264.0, 1e-3);
    assert!(top(&by_visit) < 0.16, "one cell has {} of the visits", top(&by_visit));
    let (a, b) = (records.inside(), visits.inside());
    close(a.iter().sum(), 1.0, 1e-5);
    close(b.iter().sum(), 1.0, 1e-5);
    // half the summed differences: the share of background points that would move
    let moved = a.iter().zip(&b).map(|(a, b)| (a - b).abs()).sum::<f64>() / 2.0;
    println!("{:.0} % of the weight moves when visits are counted instead of records", 100.0 * moved);
    assert!(moved > 0.15, "only {moved} of the weight moves");
    // the largest cell by a direct sum over records where they lie (visits: the mean place of their
    // records), each renormalised over land, floor 1 %; computed apart with numpy and pyproj
    let largest = |values: &[f64]| values.iter().copied().fold(0.0, f64::max);
    close(largest(&a), 6.444_9e-4, 3e-6);
    close(largest(&b), 4.191_1e-4, 8e-6);
}

#[test]
fn candidates_are_compared() {
    let Some(data) = data() else { return };
    let world = World::empty(32632);
    world.put("plan.toml", &plan(data, BIRDS, ""));
    let ran = world.run(&["compare", "plan.toml"]).ended(0);
    says(&ran.stdout, &["recorded", "access", "uniform"]);
    let found = json(&world.path("out/comparison.json"));
    assert!(found.get("surface").is_none());
    let candidates = found["candidates"].as_array().unwrap();
    assert_eq!(candidates.len(), 3);
    for candidate in candidates {
        let name = candidate["name"].as_str().unwrap();
        let surface = read(&world.path(&format!("out/surface-{name}.tif")));
        assert_eq!((surface.size, surface.nodata), ((300, 350), Some(-9999.0)));
        assert_eq!(surface.transform, [371_800.0, 10.0, 0.0, 4_846_000.0, 0.0, -10.0]);
        let values = surface.inside();
        assert_eq!(values.len(), 23_375);
        close(values.iter().sum(), 1.0, 1e-5);
        assert!(values.iter().all(|v| *v > 0.0), "{name} is zero somewhere inside");
        let score = candidate["scores"]["log_score"]["value"].as_f64().unwrap();
        assert!(if name == "uniform" { score.abs() < 1e-9 } else { score > 0.1 }, "{name}: {score}");
    }
    let rows = std::fs::read_to_string(world.path("out/comparison.csv")).unwrap();
    assert!(rows.lines().count() >= 4, "{rows}");
    assert!(world.path("out/comparison.html").exists());
}
