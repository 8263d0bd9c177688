//! Records that cannot be read, placed or held out.

use std::fs;

use super::common::{HEADER, World, project, record, says};
use super::{counted, refused};

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

/// The lines of the records, header first, with commas between the fields.
fn with_commas(world: &World) -> Vec<String> {
    let text = fs::read_to_string(world.path("records.tsv")).unwrap();
    text.lines().map(|l| l.replace('\t', ",")).collect()
}

fn put(world: &World, name: &str, bytes: &[u8]) {
    world.put_bytes(name, bytes);
    world.change(&[("records.tsv", name)]);
}

fn warned<'a>(found: &'a serde_json::Value, rule: &str) -> Option<&'a serde_json::Value> {
    found["warnings"].as_array().unwrap().iter().find(|w| w["rule"] == rule)
}

#[test]
fn a_quote_never_closed_in_a_long_file() {
    let world = World::new();
    let mut lines = with_commas(&world);
    let rows = lines[1..].to_vec();
    (0..400).for_each(|_| lines.extend(rows.iter().cloned()));
    lines[20].insert(0, '"');
    let text = lines.join("\n");
    assert!(text.len() > 5 << 20, "{}", text.len());
    put(&world, "records.csv", text.as_bytes());
    refused(&world, 3, &["records.csv:21", "quote", "never closed", "quotes = \"none\""]);
    // the cure: two more characters in one identifier
    world.change(&[("file = \"records.tsv\"", "file = \"records.csv\"\nquotes = \"none\"")]);
    let rows = lines.len() as u64 - 1;
    counted(&world, rows, rows, &[]);
}

/// Quotes that close again have swallowed the lines between them.
#[test]
fn stray_quotes_that_swallow_lines() {
    let world = World::new();
    let mut lines = with_commas(&world);
    lines[20].insert(0, '"');
    lines[25] = lines[25].replacen(',', ",\"", 1);
    put(&world, "records.csv", lines.join("\n").as_bytes());
    // lines 21 to 26 are one row with too few fields
    let found = counted(&world, 235, 234, &[("unreadable_row", 1)]);
    let warning = warned(&found, "swallowed_lines").expect("a warning");
    says(&warning.to_string(), &["records.csv:21", "5 lines", "quotes = "]);
}

/// In the last field they leave a row with as many fields as it should have; its lines are rows all the
/// same.
#[test]
fn stray_quotes_that_leave_a_whole_row() {
    let world = World::new();
    let mut lines = with_commas(&world);
    for line in [20, 25] {
        lines[line] = lines[line].replace("Genus", "\"Genus");
    }
    put(&world, "records.csv", lines.join("\n").as_bytes());
    let found = counted(&world, 235, 235, &[]);
    let warning = warned(&found, "swallowed_lines").expect("a warning");
    says(&warning.to_string(), &["records.csv:21", "5 lines", "quotes = "]);
    // a remark of several lines is none of that
    lines[20] = lines[20].replace("\"Genus", "\"Genus\nfound on a thistle, twice\nby the tarn\"");
    lines[25] = lines[25].replace('"', "");
    put(&world, "records.csv", lines.join("\n").as_bytes());
    let found = counted(&world, 240, 240, &[]);
    assert!(warned(&found, "swallowed_lines").is_none(), "{found}");
}

#[test]
fn lines_of_many_megabytes() {
    let world = World::new();
    let mut lines = with_commas(&world);
    // kept in memory: a name of 10 MB is a name
    lines[20] += &"x".repeat(10 << 20);
    put(&world, "records.csv", lines.join("\n").as_bytes());
    counted(&world, 240, 240, &[]);
    // too long to be kept: passed over, and counted
    lines[20] += &"x".repeat(30 << 20);
    put(&world, "records.csv", lines.join("\n").as_bytes());
    counted(&world, 240, 239, &[("unreadable_row", 1)]);
    let dropped = fs::read_to_string(world.path("out/dropped.csv")).unwrap();
    says(&dropped, &["records.csv,21,unreadable_row,a line of 419"]);
    lines.swap(20, 240);
    put(&world, "records.csv", lines.join("\n").as_bytes());
    counted(&world, 240, 239, &[("unreadable_row", 1)]);
    lines.truncate(1);
    lines[0] += &"x".repeat(40 << 20);
    put(&world, "records.csv", lines.join("\n").as_bytes());
    refused(&world, 3, &["records.csv:1", "first line", "header"]);
}

#[test]
fn numbers_that_are_none_and_ragged_rows() {
    let world = World::new();
    let mut text = fs::read_to_string(world.path("records.tsv")).unwrap();
    for place in ["12,5\t45.14", "1e400\t45.14", "NaN\tNaN", "inf\t45.14", "9.01\t-1e999", "0x9\t45"] {
        text += &format!("odd\t{place}\t2019-01-01\tA\tGenus species\n");
    }
    text += "short\t9.01\t45.14\nlong\t9.01\t45.14\t2019-01-01\tA\tGenus\tmore\n";
    text += "nul\t9.01\t45.14\t2019-01-01\tA\0\tGenus species\n";
    world.put("records.tsv", &text);
    counted(&world, 249, 240, &[("impossible_coordinate", 6), ("unreadable_row", 3)]);
    let dropped = fs::read_to_string(world.path("out/dropped.csv")).unwrap();
    says(
        &dropped,
        &[
            "records.tsv,242,impossible_coordinate,\"12,5 45.14\"",
            "records.tsv,243,impossible_coordinate,1e400",
        ],
    );
    says(
        &dropped,
        &[
            "248,unreadable_row,3 fields instead of 6",
            "249,unreadable_row,7 fields",
            "250,unreadable_row,a NUL byte",
        ],
    );
}

#[test]
fn two_columns_of_one_name() {
    let world = World::new();
    let text = fs::read_to_string(world.path("records.tsv")).unwrap();
    world.put("records.tsv", &text.replace("occurrenceID", "recordedBy"));
    refused(&world, 3, &["records.tsv:1", "two columns", "`recordedBy`", "rename"]);
    // in another case: the exact one counts
    world.put("records.tsv", &text.replace("occurrenceID", "RECORDEDBY"));
    counted(&world, 240, 240, &[]);
    // neither is exact: which is meant cannot be told
    let neither =
        text.replace("occurrenceID", "DECIMALLATITUDE").replace("decimalLatitude", "DecimalLatitude");
    world.put("records.tsv", &neither);
    refused(&world, 3, &["records.tsv:1", "decimalLatitude", "`DecimalLatitude`", "`DECIMALLATITUDE`"]);
}

/// Quotes are characters between tabs, unless the plan says otherwise.
#[test]
fn names_in_quotes_between_tabs() {
    let world = World::new();
    let text = fs::read_to_string(world.path("records.tsv")).unwrap();
    let quoted: Vec<String> = text.lines().map(|l| format!("\"{}\"", l.replace('\t', "\"\t\""))).collect();
    world.put("records.tsv", &quoted.join("\n"));
    refused(&world, 3, &["records.tsv:1", "decimalLongitude", "in quotes", "quotes = \"double\""]);
    world.change(&[("file = \"records.tsv\"", "file = \"records.tsv\"\nquotes = \"double\"")]);
    counted(&world, 240, 240, &[]);
}

#[test]
fn a_file_named_twice() {
    let world = World::new();
    world.change(&[("file = \"records.tsv\"", "file = [\"records.tsv\", \"./records.tsv\"]")]);
    refused(&world, 2, &["plan.toml", "records.tsv", "named twice", "once"]);
    world.change(&[(
        "file = \"records.tsv\"",
        "file = \"records.tsv\"\n[[records.source]]\nfile = \"records.tsv\"",
    )]);
    refused(&world, 2, &["plan.toml", "records.tsv", "named twice", "once"]);
}

#[test]
fn names_in_another_case_are_found() {
    let world = World::new();
    let text = fs::read_to_string(world.path("records.tsv")).unwrap();
    let (header, rows) = text.split_once('\n').unwrap();
    world.put("records.tsv", &format!("{}\n{rows}", header.to_lowercase()));
    counted(&world, 240, 240, &[]);
}

#[test]
fn every_row_dropped() {
    let world = World::new();
    rewritten(&world, |_, _| (String::new(), String::new()));
    refused(&world, 3, &["records.tsv", "read 120, kept 0", "no_coordinate 120"]);
    rewritten(&world, |_, _| ("0".into(), "0".into()));
    refused(&world, 3, &["records.tsv", "zero_zero 120"]);
}

/// A separator at the end of every row, but not of the header.
#[test]
fn every_row_with_a_field_too_many() {
    let world = World::new();
    let lines = with_commas(&world);
    let text = lines[0].clone() + "\n" + &lines[1..].join(",\n") + ",\n";
    put(&world, "records.csv", text.as_bytes());
    refused(&world, 3, &["records.csv", "unreadable_row 240", "as many fields as the header"]);
}

#[test]
fn text_in_utf16() {
    let world = World::new();
    let text = fs::read_to_string(world.path("records.tsv")).unwrap();
    let little: Vec<u8> = text.encode_utf16().flat_map(u16::to_le_bytes).collect();
    let big: Vec<u8> = text.encode_utf16().flat_map(u16::to_be_bytes).collect();
    for (mark, bytes) in [(&b"\xff\xfe"[..], &little), (b"\xfe\xff", &big), (b"", &little), (b"", &big)] {
        world.put_bytes("records.tsv", &[mark, bytes].concat());
        refused(&world, 3, &["records.tsv", "UTF-16", "UTF-8"]);
    }
}

#[test]
fn latin1_and_lone_carriage_returns() {
    let world = World::new();
    let text = fs::read_to_string(world.path("records.tsv")).unwrap().replace("Observer", "Ång Åse");
    let bytes: Vec<u8> = text.chars().map(|c| u8::try_from(u32::from(c)).unwrap()).collect();
    world.put_bytes("records.tsv", &bytes);
    let found = counted(&world, 240, 240, &[]);
    says(
        &warned(&found, "read_as_latin1").expect("a warning").to_string(),
        &["records.tsv", "240 lines", "UTF-8"],
    );
    world.put("records.tsv", &text.replace('\n', "\r"));
    let found = counted(&world, 240, 240, &[]);
    assert!(warned(&found, "read_as_latin1").is_none());
}

/// A column that should hold a datum holds something else in every row.
#[test]
fn a_datum_of_its_own_in_every_row() {
    let world = World::new();
    let rows = 120_000;
    let mut text = String::from("decimalLongitude\tdecimalLatitude\teventDate\trecordedBy\tgeodeticDatum\n");
    for (i, (lon, lat)) in world.lonlat(&world.points(rows)).into_iter().enumerate() {
        text += &format!("{lon:.7}\t{lat:.7}\t2019-01-0{}\tO{}\t{i}\n", 1 + i % 9, i % 7);
    }
    world.put("records.tsv", &text);
    let begun = std::time::Instant::now();
    let found = counted(&world, rows, rows, &[]);
    let said = found["warnings"].as_array().unwrap().iter().filter(|w| w["rule"] == "unknown_datum").count();
    assert!((1..=20).contains(&said), "{said} warnings");
    assert!(begun.elapsed() < std::time::Duration::from_secs(60), "took {:?}", begun.elapsed());
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
