//! What smells about records is said with figures, and never mended.

use super::common::raster::{self, Lattice};
use super::common::{Ran, World, project, says};
use super::{Found, PLAN, built};

/// The rules that say that records may not be what they seem.
const RULES: [&str; 17] = [
    "coordinates_swapped",
    "sign_flipped",
    "decimal_comma",
    "coordinates_too_large",
    "coordinates_in_kilometres",
    "coarse_coordinates",
    "identical_places",
    "equal_coordinates",
    "just_outside",
    "vague_for_cells",
    "uncertainty_not_positive",
    "uncertainty_unreadable",
    "dates_unreadable",
    "swallowed_lines",
    "one_observer",
    "one_dataset",
    "one_cell",
];

const ROWS: usize = 200;

/// Longitude, latitude, date, observer, data set, uncertainty.
type Row = [String; 6];

/// Writes 200 clean rows (invented hoverflies), each changed as the test wants.
fn rows(world: &World, places: &[(f64, f64)], change: impl Fn(usize, &mut Row)) {
    let mut text = String::from(
        "decimalLongitude\tdecimalLatitude\teventDate\trecordedBy\tdatasetName\tcoordinateUncertaintyInMeters\n",
    );
    for (i, (lon, lat)) in places.iter().enumerate() {
        let outing = i / 2;
        let mut row = [
            format!("{lon:.7}"),
            format!("{lat:.7}"),
            format!("2019-{:02}-{:02}", 1 + outing / 28, 1 + outing % 28),
            format!("Observer {}", outing % 9),
            format!("Count {}", outing % 7),
            "25".to_owned(),
        ];
        change(i, &mut row);
        text += &(row.join("\t") + "\n");
    }
    world.put("records.tsv", &text);
}

/// 200 places on the grid, 150 m and more from its edges.
fn places(world: &World) -> Vec<(f64, f64)> {
    let (west, north) = world.lattice().origin;
    let inner = |(x, y): (f64, f64)| (west + 150.0 + (x - west) * 0.92, north - 150.0 - (north - y) * 0.9);
    world.lonlat(&world.points(ROWS as u64).into_iter().map(inner).collect::<Vec<_>>())
}

/// Builds from the rows changed so; only the rules named may be said.
#[track_caller]
fn smelled(world: &World, rules: &[&str], change: impl Fn(usize, &mut Row)) -> Found {
    rows(world, &places(world), change);
    only(built(world, "file = \"records.tsv\""), rules)
}

#[track_caller]
fn only(found: Found, rules: &[&str]) -> Found {
    let said: Vec<&str> = found.warnings.iter().map(|w| w["rule"].as_str().unwrap()).collect();
    let smells: Vec<&&str> = said.iter().filter(|r| RULES.contains(r)).collect();
    assert_eq!(smells, rules.iter().collect::<Vec<_>>(), "{:?}", found.warnings);
    found
}

impl Found {
    /// Asserts that a rule was said once, at this line, with these words and a cure.
    #[track_caller]
    fn said(&self, rule: &str, place: &str, words: &[&str]) {
        let [warning] = self.warned(rule)[..] else { panic!("{rule}: {:?}", self.warnings) };
        assert_eq!(warning["place"].as_str().unwrap(), place, "{warning}");
        says(&format!("{} {}", warning["text"], warning["cure"]), words);
        assert!(!warning["cure"].as_str().unwrap().is_empty());
    }
}

/// Refused by `build` and `check` alike, with these words.
#[track_caller]
fn refused(world: &World, records: &str, words: &[&str]) {
    world.put("plan.toml", &PLAN.replace("RECORDS", records));
    let all = |ran: Ran| format!("{}{}", ran.stderr, ran.stdout);
    for command in ["build", "check"] {
        says(&all(world.run(&[command, "plan.toml"]).ended(3)), words);
    }
    assert!(world.files("out").is_empty());
}

#[test]
fn a_clean_file_smells_of_nothing() {
    smelled(&World::new(), &[], |_, _| {});
}

#[test]
fn a_longitude_without_its_minus_sign() {
    let world = World::with_crs(32629); // 9° west
    rows(&world, &places(&world), |_, row| row[0] = row[0].replace('-', ""));
    let words = [
        "records.tsv",
        "outside_grid 200",
        "200 records",
        "such as 8.9|such as 9.0",
        "would be inside",
        "other sign of their longitude",
        "minus sign",
    ];
    refused(&world, "file = \"records.tsv\"", &words);
    let some = |i: usize, row: &mut Row| {
        if i % 10 == 3 {
            row[0] = row[0].replace('-', "");
        }
    };
    let found = smelled(&world, &["sign_flipped"], some);
    found.said("sign_flipped", "records.tsv:5", &["20 records", "longitude", "minus sign"]);
    assert_eq!(found.records["dropped"]["outside_grid"].as_u64(), Some(20), "never mended");
    assert_eq!(found.records["kept"].as_u64(), Some(180));
}

#[test]
fn a_latitude_with_a_minus_sign_too_many() {
    let found = smelled(&World::new(), &["sign_flipped"], |i, row| {
        if i < 15 {
            row[1].insert(0, '-');
        }
    });
    found.said("sign_flipped", "records.tsv:2", &["15 records", "latitude"]);
}

#[test]
fn coordinates_exchanged() {
    let found = smelled(&World::new(), &["coordinates_swapped"], |i, row| {
        if i % 8 == 1 {
            row.swap(0, 1);
        }
    });
    found.said("coordinates_swapped", "records.tsv:3", &["25 records", "such as 45.", "exchange"]);
    assert_eq!(found.records["kept"].as_u64(), Some(175), "never mended");
}

#[test]
fn numbers_with_a_comma() {
    let found = smelled(&World::new(), &["decimal_comma"], |i, row| {
        if i % 10 == 0 {
            row[0] = row[0].replace('.', ",");
        }
    });
    found.said("decimal_comma", "records.tsv:2", &["20 records", "decimal point"]);
    assert_eq!(found.records["dropped"]["impossible_coordinate"].as_u64(), Some(20));
}

#[test]
fn eastings_taken_for_degrees() {
    let world = World::new();
    let metres = project(4326, 32632, &places(&world));
    rows(&world, &metres, |_, _| {});
    refused(&world, "file = \"records.tsv\"", &["200", "too large for degrees", "such as 50", "`crs`"]);
    let found = smelled(&world, &["coordinates_too_large"], |i, row| {
        if i % 5 == 4 {
            (row[0], row[1]) = (format!("{:.1}", metres[i].0), format!("{:.1}", metres[i].1));
        }
    });
    found.said("coordinates_too_large", "records.tsv:6", &["40 records", "too large for degrees", "crs"]);
}

#[test]
fn coordinates_in_kilometres() {
    let world = World::new();
    let metres = project(4326, 32632, &places(&world));
    let kilometres: Vec<_> = metres.iter().map(|(x, y)| (x / 1000.0, y / 1000.0)).collect();
    rows(&world, &kilometres, |_, _| {});
    let records = "file = \"records.tsv\"\ncrs = \"EPSG:32632\"";
    refused(&world, records, &["200 records", "would be inside", "kilometres", "+units=km"]);
    // the cure holds
    let cured = "file = \"records.tsv\"\ncrs = \"+proj=utm +zone=32 +datum=WGS84 +units=km\"";
    let found = only(built(&world, cured), &[]);
    assert_eq!(found.records["kept"].as_u64(), Some(200));
}

#[test]
fn coordinates_rounded() {
    let found = smelled(&World::new(), &["coarse_coordinates"], |i, row| {
        if i % 4 == 2 {
            row[0] = format!("9.0{}", 1 + i % 3);
            row[1] = format!("45.1{}", 3 + i % 2);
        }
    });
    let words = ["25.0 %", "multiples of 0.01 degree", "100 m", "0.1 degree 0.0 %", "max_uncertainty"];
    found.said("coarse_coordinates", "records.tsv:4", &words);
}

#[test]
fn many_records_on_one_place() {
    let found = smelled(&World::new(), &["identical_places"], |i, row| {
        if i % 6 == 0 {
            (row[0], row[1]) = ("9.0312345".into(), "45.1398765".into());
        }
    });
    found.said("identical_places", "records.tsv", &["9.0312345 45.1398765 (34, 17.0 %)", "centroids"]);
}

#[test]
fn a_coordinate_copied_over_the_other() {
    // where longitudes and latitudes are alike: 45° east, 45° north
    let world = World::empty(32638);
    let grid = Lattice { origin: (508_000.0, 5_000_000.0), epsg: 32638, ..World::new().lattice() };
    raster::write(&world.path("land.tif"), &grid, &grid.filled(1.0), Some(-9999.0));
    let inner: Vec<(f64, f64)> = (0..200)
        .map(|i| {
            (
                508_200.0 + 3_600.0 * f64::from(i * 37 % 199) / 199.0,
                4_999_800.0 - 2_600.0 * f64::from(i) / 199.0,
            )
        })
        .collect();
    rows(&world, &world.lonlat(&inner), |i, row| {
        if i % 100 == 50 {
            row[0] = row[1].clone();
        }
    });
    let found = only(built(&world, "file = \"records.tsv\""), &["equal_coordinates"]);
    found.said("equal_coordinates", "records.tsv:52", &["2 of 200", "copied"]);
}

#[test]
fn just_outside_the_region() {
    let world = World::new();
    let mut all = places(&world);
    // 50 m east of the grid, within one cell of it
    let strays: Vec<(f64, f64)> = (0..10).map(|i| (504_050.0, 4_999_500.0 - 200.0 * f64::from(i))).collect();
    all.splice(0..10, world.lonlat(&strays));
    rows(&world, &all, |_, _| {});
    let found = only(built(&world, "file = \"records.tsv\""), &["just_outside"]);
    found.said("just_outside", "records.tsv:2", &["10 records", "within one cell", "snap = \\\"1 cells\\\""]);
    // what was said comes true
    let found = only(built(&world, "file = \"records.tsv\"\nsnap = \"1 cells\""), &[]);
    let count = |field: &str| found.records[field].as_u64().unwrap();
    assert_eq!((count("kept"), count("snapped")), (200, 10));
}

#[test]
fn vaguer_than_a_cell() {
    let found = smelled(&World::new(), &["vague_for_cells"], |i, row| {
        row[5] = if i % 2 == 0 { "250".into() } else { String::new() };
    });
    found.said("vague_for_cells", "records.tsv", &["250 m", "of the visits", "100 m", "max_uncertainty"]);
}

#[test]
fn radii_that_are_none() {
    let rules = ["uncertainty_not_positive", "uncertainty_unreadable"];
    let found = smelled(&World::new(), &rules, |i, row| {
        row[5] = match i {
            10..15 => "0".into(),
            15..18 => "-3".into(),
            20..24 => "10-20 m".into(),
            _ => return,
        };
    });
    found.said(rules[0], "records.tsv:12", &["8 records", "zero or less", "unknown"]);
    found.said(rules[1], "records.tsv:22", &["4 records", "no number", "metres"]);
    assert_eq!(found.records["kept"].as_u64(), Some(200));
}

#[test]
fn one_observer_one_data_set_one_cell() {
    // a third of the 200 rows by one observer, each visit of its own
    let found = smelled(&World::new(), &["one_observer"], |i, row| {
        row[2] = format!("20{:02}-{:02}-{:02}", i / 28, 1 + i % 12, 1 + i % 28);
        if i % 3 == 0 {
            row[3] = "Una Rigg".into();
        }
    });
    let share = (67.0 + 133.0 / 9.0 / 100.0) / 200.0;
    assert!(share > 0.3);
    found.said("one_observer", "records.tsv", &["one observer", "33.5 %", "cap"]);
    let top = found.records["top_share"]["observer"].as_f64().unwrap();
    assert!((top - 0.335).abs() < 1e-12, "{top}");
    let found = smelled(&World::new(), &["one_dataset"], |i, row| {
        if i % 4 < 2 {
            row[4] = "Garth collection".into();
        }
    });
    found.said("one_dataset", "records.tsv", &["the data set `Garth collection`", "cap"]);
    let found = smelled(&World::new(), &["one_cell"], |i, row| {
        if i % 4 == 0 {
            // within one cell of 100 m, no two alike
            row[0] = format!("9.03{:05}", i);
            row[1] = format!("45.139{:04}", i);
        }
    });
    found.said("one_cell", "records.tsv", &["the cell around 50", "%", "centroid"]);
}

#[test]
fn the_unknown_observer_is_named_so() {
    let found = smelled(&World::new(), &["one_observer"], |i, row| {
        if i % 3 == 0 {
            row[3] = String::new();
        }
    });
    found.said("one_observer", "records.tsv", &["what has no observer", "name the column"]);
}

#[test]
fn dates_in_a_way_of_their_own() {
    let found = smelled(&World::new(), &["dates_unreadable"], |i, row| {
        if i >= 50 {
            let day = row[2].split('-').rev().collect::<Vec<_>>().join("/");
            row[2] = if i % 2 == 0 { day } else { String::new() };
        }
    });
    found.said("dates_unreadable", "records.tsv:52", &["75 records", "unknown", "ISO 8601"]);
    assert_eq!(found.records["dates"]["none"].as_u64(), Some(150));
}

/// Digits alone are a legal date (ISO 8601-1:2019, 5.2.2.1, basic format); a placeholder is none.
#[test]
fn dates_in_digits_and_places_at_zero() {
    let found = smelled(&World::new(), &[], |i, row| {
        row[2] = row[2].replace('-', "");
        if i % 20 == 0 {
            (row[0], row[1]) = ("0.0".into(), "0".into());
        }
    });
    assert_eq!(found.records["dates"]["day"].as_u64(), Some(200));
    assert_eq!(found.records["dropped"]["zero_zero"].as_u64(), Some(10));
}
