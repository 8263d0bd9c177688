//! `thin` and `init` as a user meets them: real files in, real files out.

#![allow(clippy::disallowed_methods, reason = "reads and writes files of its own folder")]

mod common;

use std::fs;

use common::{World, json, says};
use trodden::grid::geodesic;

/// Longitude and latitude of the rows of a thinned table.
fn places(text: &str) -> Vec<(f64, f64)> {
    let number = |row: &str, column: usize| row.split('\t').nth(column).unwrap().parse().unwrap();
    text.lines().skip(1).map(|row| (number(row, 1), number(row, 2))).collect()
}

#[test]
fn what_is_kept_is_apart_and_nothing_more_fits() {
    let world = World::new();
    let found = world
        .run(&["thin", "records.tsv", "--distance", "900 m", "-o", "out/t.tsv", "--json"])
        .ended(0)
        .json();
    let (all, kept) = (
        fs::read_to_string(world.path("records.tsv")).unwrap(),
        fs::read_to_string(world.path("out/t.tsv")).unwrap(),
    );
    let rows: Vec<&str> = all.lines().collect();
    let mut at = 0;
    for row in kept.lines() {
        // the header first, then rows as they stand, in their order
        at += rows[at..].iter().position(|r| *r == row).unwrap_or_else(|| panic!("no such row: {row}")) + 1;
    }
    let (places, left) = (places(&all), places(&kept));
    assert_eq!((found["read"].as_u64(), found["kept"].as_u64()), (Some(240), Some(left.len() as u64)));
    let mut closest = f64::INFINITY;
    for (i, a) in left.iter().enumerate() {
        left[..i].iter().for_each(|b| closest = closest.min(geodesic(*a, *b)));
    }
    assert!(closest >= 900.0, "two kept are {closest} m apart");
    assert!((found["closest_kept_m"].as_f64().unwrap() - closest).abs() < 1e-6, "{found}");
    let near = |p: &(f64, f64)| left.iter().any(|k| geodesic(*p, *k) < 900.0);
    assert!(places.iter().all(near), "a place that was dropped would fit");
}

#[test]
fn the_same_seed_keeps_the_same_rows_at_any_thread_count() {
    let world = World::new();
    let kept = |rule: &str, threads: &str, seed: &str| {
        let more = ["--threads", threads, "--seed", seed];
        let base = ["thin", "records.tsv", rule, "700 m", "-o", "t.tsv"];
        world.run(&[&base[..], &more].concat()).ended(0);
        fs::read_to_string(world.path("t.tsv")).unwrap()
    };
    for rule in ["--distance", "--square"] {
        assert!(kept(rule, "1", "3") == kept(rule, "2", "3"), "{rule}: threads change the choice");
    }
    assert!(kept("--square", "2", "3") != kept("--square", "2", "4"), "the seed changes nothing");
}

#[test]
fn squares_hold_no_more_than_asked_for() {
    let world = World::with_crs(3035);
    let points = world.points(240);
    let rows: String = points.iter().enumerate().map(|(i, (x, y))| format!("{i},{x},{y}\n")).collect();
    world.put("plane.csv", &format!("id,e,n\n{rows}"));
    let columns = ["--longitude", "e", "--latitude", "n", "--crs", "EPSG:3035"];
    let base = ["thin", "plane.csv", "--square", "1 km", "--per-square", "2", "-o", "out.csv"];
    world.run(&[&base[..], &columns].concat()).ended(0);
    let kept = fs::read_to_string(world.path("out.csv")).unwrap();
    let square = |x: f64, y: f64| ((x / 1000.0).floor() as i64, (y / 1000.0).floor() as i64);
    let mut filled = std::collections::BTreeMap::<(i64, i64), [u32; 2]>::new();
    points.iter().for_each(|(x, y)| filled.entry(square(*x, *y)).or_default()[0] += 1);
    for row in kept.lines().skip(1) {
        let numbers: Vec<f64> = row.split(',').map(|n| n.parse().unwrap()).collect();
        filled.get_mut(&square(numbers[1], numbers[2])).expect("a square that was filled")[1] += 1;
    }
    assert!(filled.values().all(|[all, kept]| *kept == (*all).min(2)), "{filled:?}");
}

#[test]
fn rows_without_a_place_are_counted() {
    let world = World::new();
    let mut text = fs::read_to_string(world.path("records.tsv")).unwrap();
    text +=
        "short\t9.01\nempty\t\t\t2019-01-01\tA\tGenus species\nfar\t912\t45\t2019-01-01\tA\tGenus species\n";
    world.put("records.tsv", &text);
    let ran = world.run(&["thin", "records.tsv", "--distance", "900 m", "-o", "t.tsv", "--json"]).ended(0);
    let found = ran.json();
    let count = |field: &str| found[field].as_u64().unwrap();
    assert_eq!((count("read"), count("unreadable"), count("without_place")), (243, 1, 2));
}

#[test]
fn wrong_use_says_what_to_do() {
    let world = World::new();
    let refused = |arguments: &[&str], code: i32, words: &[&str]| {
        let ran = world.run(&[&["thin"], arguments].concat()).ended(code);
        says(&ran.stderr, words);
        assert!(!world.path("o.csv").exists(), "{arguments:?} wrote something");
    };
    refused(&["records.tsv", "-o", "o.csv"], 2, &["--distance"]);
    refused(&["records.tsv", "--distance", "5", "-o", "o.csv"], 2, &["--distance", "5 km"]);
    refused(&["records.tsv", "--distance", "0 m", "-o", "o.csv"], 2, &["above zero"]);
    refused(&["records.tsv", "--distance", "5 deg", "-o", "o.csv"], 2, &["m or km"]);
    refused(
        &["records.tsv", "--distance", "1 km", "--square", "1 km", "-o", "o.csv"],
        2,
        &["cannot be used"],
    );
    refused(&["records.tsv", "--distance", "1 km", "-o", "records.tsv"], 2, &["the input itself"]);
    refused(&["records.tsv", "--distance", "1 km", "-o", "o.gpkg"], 2, &["delimited text", ".csv"]);
    refused(&["absent.tsv", "--distance", "1 km", "-o", "o.csv"], 3, &["absent.tsv", "no such file"]);
    refused(
        &["records.tsv", "--distance", "1 km", "--longitude", "lon", "-o", "o.csv"],
        3,
        &["no column `lon`"],
    );
    refused(&["records.tsv", "--distance", "1 km", "--crs", "EPSG:0", "-o", "o.csv"], 2, &["EPSG:0"]);
    world.put("empty.tsv", "decimalLongitude\tdecimalLatitude\n");
    refused(&["empty.tsv", "--distance", "1 km", "-o", "o.csv"], 3, &["no row has a place", "--longitude"]);
}

#[test]
fn a_plan_made_by_init_builds() {
    let world = World::new();
    let base = ["init", "--records", "records.tsv", "--like", "land.tif", "--roads", "roads.geojson"];
    let ran = world.run(&[&base[..], &["--population", "people.tif", "-o", "made.toml"]].concat()).ended(0);
    says(&ran.stdout, &["columns", "`recordedBy`", "240", "made.toml"]);
    let plan = fs::read_to_string(world.path("made.toml")).unwrap();
    says(&plan, &["like = \"land.tif\"", "half-normal", "blend", "visits"]);
    world.run(&["build", "made.toml"]).ended(0);
    let found = json(&world.path("out/effort.json"));
    assert_eq!(found["candidates"].as_array().unwrap().len(), 4);
    let again = world.run(&[&base[..], &["-o", "made.toml"]].concat()).ended(4);
    says(&again.stderr, &["made.toml", "exists"]);
    assert_eq!(fs::read_to_string(world.path("made.toml")).unwrap(), plan);
}

#[test]
fn init_takes_columns_by_their_usual_names_and_says_so() {
    let world = World::new();
    let text = fs::read_to_string(world.path("records.tsv")).unwrap();
    let renamed = text
        .replacen("decimalLongitude", "Lon", 1)
        .replacen("decimalLatitude", "lat", 1)
        .replacen("eventDate", "obs_date", 1)
        .replacen("recordedBy", "watcher", 1);
    world.put("named.tsv", &renamed);
    world.run(&["init", "--records", "named.tsv", "--like", "land.tif", "-o", "made.toml"]).ended(0);
    let plan = fs::read_to_string(world.path("made.toml")).unwrap();
    says(
        &plan,
        &["longitude = \"Lon\"", "latitude = \"lat\"", "date = \"obs_date\"", "# observer", "`recordedBy`"],
    );
    world.run(&["check", "made.toml"]).ended(0);
}

#[test]
fn init_writes_nothing_that_would_not_run() {
    let world = World::new();
    world.put("plain.csv", "a,b\n1,2\n");
    let ran =
        world.run(&["init", "--records", "plain.csv", "--like", "land.tif", "-o", "made.toml"]).ended(3);
    says(&ran.stderr, &["plain.csv", "decimalLongitude", "`a`"]);
    assert!(!world.path("made.toml").exists());
}
