//! Records that cannot be read, placed or held out.

use std::fs;

use super::common::{HEADER, World, project, record, says};
use super::refused;

#[test]
fn header_only() {
    let world = World::new();
    world.put("records.tsv", &format!("{HEADER}\n"));
    refused(&world, 3, &["records.tsv", "header|no row|no record"]);
}

#[test]
fn missing_column_names_those_there_are() {
    let world = World::new();
    let text = fs::read_to_string(world.path("records.tsv")).unwrap().replace("decimalLatitude", "lat");
    world.put("records.tsv", &text);
    refused(&world, 3, &["records.tsv", "decimalLatitude", "`lat`|lat,", "recordedBy", "scientificName"]);
}

#[test]
fn a_stated_column_that_is_not_there() {
    let world = World::new();
    world.change(&[("file = \"records.tsv\"", "file = \"records.tsv\"\nobserver = \"watcher\"")]);
    refused(&world, 3, &["records.tsv", "watcher", "recordedBy"]);
}

#[test]
fn visits_without_date_and_observer() {
    let world = World::new();
    let text = fs::read_to_string(world.path("records.tsv")).unwrap();
    world.put("records.tsv", &text.replace("eventDate", "a").replace("recordedBy", "b"));
    refused(&world, 3, &["records.tsv", "visits", "eventDate", "recordedBy"]);
}

/// Writes the records with something else in their two coordinate columns.
fn rewritten(world: &World, write: impl Fn(f64, f64) -> (String, String)) {
    let mut text = format!("{HEADER}\n");
    for (i, (lon, lat)) in world.lonlat(&world.points(120)).into_iter().enumerate() {
        let (x, y) = write(lon, lat);
        text += &record(i, &x, &y);
    }
    world.put("records.tsv", &text);
}

#[test]
fn coordinates_swapped() {
    // longitude 9, latitude 45: both ways are legal, one is on the map
    let world = World::new();
    rewritten(&world, |lon, lat| (lat.to_string(), lon.to_string()));
    refused(&world, 3, &["records.tsv", "swapped|exchange", "longitude", "latitude"]);
    // longitude 123: no latitude
    let world = World::with_crs(32651);
    rewritten(&world, |lon, lat| (lat.to_string(), lon.to_string()));
    refused(&world, 3, &["records.tsv", "swapped|exchange", "impossible_coordinate", "120"]);
}

#[test]
fn decimal_commas() {
    let comma = |v: f64| format!("{v:.6}").replace('.', ",");
    let world = World::new();
    rewritten(&world, |lon, lat| (comma(lon), comma(lat)));
    refused(&world, 3, &["records.tsv", "comma", "impossible_coordinate", "120"]);
    let text = fs::read_to_string(world.path("records.tsv")).unwrap().replace('\t', ";");
    world.put("records.csv", &text);
    world.change(&[("records.tsv", "records.csv")]);
    refused(&world, 3, &["records.csv", "comma"]);
}

#[test]
fn records_in_another_crs() {
    let world = World::new();
    let elsewhere = project(32632, 3035, &world.points(120));
    let east = elsewhere.iter().map(|p| p.0).fold(f64::MIN, f64::max);
    let mut text = format!("{HEADER}\n");
    elsewhere.iter().enumerate().for_each(|(i, p)| text += &record(i, &p.0.to_string(), &p.1.to_string()));
    world.put("records.tsv", &text);
    world.change(&[("file = \"records.tsv\"", "file = \"records.tsv\"\ncrs = \"EPSG:32632\"")]);
    let east = format!("{}", east.floor());
    refused(&world, 3, &["records.tsv", "outside_grid", "500000", "504000", &east, "crs"]);
    // projected coordinates taken for longitudes and latitudes
    world.change(&[]);
    refused(&world, 3, &["records.tsv", "impossible_coordinate", "crs"]);
}

#[test]
fn no_record_left_prints_the_ledger() {
    let world = World::new();
    world.change(&[("file = \"records.tsv\"", "file = \"records.tsv\"\ndates = \"1900/1910\"")]);
    refused(&world, 3, &["records.tsv", "240", "outside_dates", "dates"]);
    world.change(&[(
        "file = \"records.tsv\"",
        "file = \"records.tsv\"\nkeep = { scientificName = [\"Nemo\"] }",
    )]);
    refused(&world, 3, &["records.tsv", "240", "not_kept", "keep"]);
}

#[test]
fn one_record() {
    let world = World::new();
    world.put_records("records.tsv", &world.points(1));
    refused(&world, 3, &["records.tsv|holdout", "1 |one|single", "folds|hold out|held out"]);
    let said = world.run(&["build", "plan.toml"]).stderr;
    assert!(!said.contains("2 or fewer"), "no number of folds helps a single record: {said}");
}

#[test]
fn all_records_in_one_place() {
    let world = World::new();
    world.put_records("records.tsv", &[(502_050.0, 4_998_550.0); 60]);
    for split in ["outings", "random", "blocks"] {
        world.change(&[("[holdout]", &format!("[holdout]\nsplit = \"{split}\""))]);
        refused(&world, 3, &["1 |one|single", "place|block"]);
    }
}

#[test]
fn fewer_places_than_folds() {
    let world = World::new();
    let places = [(500_450.0, 4_998_550.0), (502_050.0, 4_998_650.0), (503_050.0, 4_997_550.0)];
    let many: Vec<(f64, f64)> = (0..60).map(|i| places[i % 3]).collect();
    world.put_records("records.tsv", &many);
    for split in ["outings", "random", "blocks"] {
        world.change(&[
            ("folds = 3", "folds = 5"),
            ("[holdout]", &format!("[holdout]\nsplit = \"{split}\"\nblock = \"500 m\"")),
        ]);
        refused(&world, 3, &["3 |three", "5 |five", "place|block", "folds"]);
    }
}

#[test]
fn fewer_blocks_than_folds() {
    let world = World::new();
    world.change(&[("folds = 3", "folds = 5\nsplit = \"blocks\"\nblock = \"3 km\"")]);
    refused(&world, 3, &["block", "5 |five", "folds"]);
}

#[test]
fn what_cannot_be_read_is_dropped_and_counted() {
    let world = World::new();
    let mut text = fs::read(world.path("records.tsv")).unwrap();
    text.extend_from_slice(b"short\t9.01\n");
    text.extend_from_slice(b"bytes\t9.01\t45.1\t2019-01-01\t\xff\xfe\xff\tGenus species\n");
    text.extend_from_slice(b"empty\t\t\t2019-01-01\tA\tGenus species\n");
    text.extend_from_slice(b"zero\t0\t0.000\t2019-01-01\tA\tGenus species\n");
    text.extend_from_slice(b"text\teast\tnorth\t2019-01-01\tA\tGenus species\n");
    text.extend_from_slice(b"far\t-120\t-45\t2019-01-01\tA\tGenus species\n");
    world.put_bytes("records.tsv", &text);
    let built = world.run(&["build", "plan.toml", "--json"]).ended(0);
    let records = &built.json()["records"];
    let dropped = |rule: &str| records["dropped"][rule].as_u64().unwrap_or(0);
    assert_eq!(dropped("unreadable_row"), 2, "{records}");
    for rule in ["no_coordinate", "zero_zero", "impossible_coordinate", "outside_grid"] {
        assert_eq!(dropped(rule), 1, "{rule}: {records}");
    }
    assert_eq!((records["read"].as_u64(), records["kept"].as_u64()), (Some(246), Some(240)));
    let rows = fs::read_to_string(world.path("out/dropped.csv")).unwrap();
    let lines: Vec<&str> = rows.lines().collect();
    assert_eq!((lines.len(), lines[0]), (7, "file,line,rule,detail"));
    says(lines[1], &["records.tsv,242,unreadable_row"]);
}

/// Lines count from 1 with the header, whatever ends them; empty lines count and are no rows.
#[test]
fn lines_are_those_of_the_file() {
    for (end, last) in [("\n", "\n"), ("\r\n", "\r\n"), ("\n", ""), ("\r\n", "")] {
        let world = World::new();
        let text = fs::read_to_string(world.path("records.tsv")).unwrap();
        let mut lines: Vec<String> = text.lines().map(|l| l.replace('\t', ",")).collect();
        lines.insert(3, String::new());
        let fields = lines[0].split(',').count();
        lines.push(vec!["x"; fields - 1].join(","));
        let line = lines.len();
        world.put("records.csv", &(lines.join(end) + last));
        world.change(&[("records.tsv", "records.csv")]);
        world.run(&["build", "plan.toml"]).ended(0);
        let dropped = fs::read_to_string(world.path("out/dropped.csv")).unwrap();
        assert!(dropped.contains(&format!("records.csv,{line},unreadable_row")), "line {line}: {dropped}");
    }
}

#[test]
fn a_quote_that_is_never_closed() {
    for last in ["\n", ""] {
        let world = World::new();
        let text = fs::read_to_string(world.path("records.tsv")).unwrap();
        let mut lines: Vec<String> = text.lines().map(|l| l.replace('\t', ",")).collect();
        lines[20].insert(0, '"');
        world.put("records.csv", &(lines.join("\n") + last));
        world.change(&[("records.tsv", "records.csv")]);
        refused(&world, 3, &["records.csv:21", "quote", "never closed"]);
    }
}

/// An output never replaces an input of the same plan.
#[test]
fn outputs_do_not_replace_inputs() {
    let world = World::new();
    fs::copy(world.path("records.tsv"), world.path("dropped.csv")).unwrap();
    world.change(&[("records.tsv", "dropped.csv")]);
    let before = fs::read(world.path("dropped.csv")).unwrap();
    world.run(&["build", "plan.toml", "-o", "."]).ended(2);
    assert_eq!(fs::read(world.path("dropped.csv")).unwrap(), before);
}
