//! Caps: what one observer or data set may weigh.

use std::collections::{BTreeMap, BTreeSet};
use std::fs;

use super::common::raster::read;
use super::common::{World, says};
use super::{Survey, built, uplands};

/// Writes visits of observers, each in a strip of its own (400 m wide, its places in the middle of it);
/// `visits`: how many each makes.
fn strips(world: &World, visits: &[usize]) {
    let mut text = String::from(
        "decimalLongitude\tdecimalLatitude\teventDate\trecordedBy\tdatasetName\tcoordinateUncertaintyInMeters\n",
    );
    let (west, north) = world.lattice().origin;
    for (who, count) in visits.iter().enumerate() {
        for n in 0..*count {
            let x = west + 400.0 * who as f64 + 180.0 + (n % 5) as f64 * 10.0;
            let y = north - 50.0 - 100.0 * (n * 7 % 30) as f64 - (n % 3) as f64;
            let (lon, lat) = world.lonlat(&[(x, y)])[0];
            let (day, month, year) = (1 + n % 28, 1 + n / 28 % 12, 2001 + n / 336);
            text += &format!(
                "{lon:.8}\t{lat:.8}\t{year}-{month:02}-{day:02}\tObserver {who}\tCount {}\t20\n",
                who % 3
            );
        }
    }
    world.put("records.tsv", &text);
}

/// Total weight when nobody may have more than `cap` of it: T = Σ min(w, cap·T), by bisection.
fn capped(visits: &[usize], cap: f64) -> f64 {
    let after = |t: f64| visits.iter().map(|w| (*w as f64).min(cap * t)).sum::<f64>();
    let (mut low, mut high) = (1e-9, visits.iter().sum::<usize>() as f64);
    for _ in 0..200 {
        let middle = f64::midpoint(low, high);
        if after(middle) >= middle { low = middle } else { high = middle }
    }
    low
}

#[test]
fn five_observers_cannot_each_have_a_tenth() {
    let world = World::new();
    strips(&world, &[40, 30, 20, 20, 10]);
    let records = "file = \"records.tsv\"\ncap = { observer = \"10 %\" }";
    world.put("plan.toml", &super::PLAN.replace("RECORDS", records));
    for command in ["build", "check"] {
        let ran = world.run(&[command, "plan.toml"]).ended(2);
        says(&(ran.stderr + &ran.stdout), &["5 observers", "10 %", "smallest cap", "20 %", "raise the cap"]);
    }
    assert!(world.files("out").is_empty());
    // the smallest possible, as said: all weigh the same
    let found = built(&world, "file = \"records.tsv\"\ncap = { observer = \"20 %\" }");
    let units = found.records["units"].as_f64().unwrap();
    assert!((units - 50.0).abs() < 1e-6, "five observers of ten visits each, not {units}");
}

#[test]
fn shares_hold_in_the_surface() {
    let world = World::new();
    let visits = [120, 60, 25, 20, 15, 12, 10, 9, 8, 6];
    strips(&world, &visits);
    let plan = super::PLAN.replace("400 m", "50 m") + "[surface]\ncandidate = \"recorded\"\n";
    for (cap, percent) in [(0.15, "15 %"), (0.2, "20 %"), (0.3, "30 %")] {
        let records = format!("file = \"records.tsv\"\ncap = {{ observer = \"{percent}\" }}");
        world.put("plan.toml", &plan.replace("RECORDS", &records));
        let found = world.run(&["build", "plan.toml", "--json"]).ended(0).json();
        let total = capped(&visits, cap);
        let units = found["records"]["units"].as_f64().unwrap();
        assert!((units - total).abs() < 1e-6, "{percent}: {units} is not {total}");
        // each strip is 4 columns; the kernel (50 m) hardly leaves it; the floor is 1 %
        let surface = read(&world.path("out/effort.tif"));
        for (who, w) in visits.iter().enumerate() {
            let mine = |i: usize| i % 40 / 4 == who;
            let share: f64 =
                surface.values.iter().enumerate().filter(|(i, _)| mine(*i)).map(|(_, v)| v).sum();
            let due = 0.99 * (*w as f64).min(cap * total) / total + 0.001;
            assert!((share - due).abs() < 2e-3, "{percent}, observer {who}: {share} is not {due}");
        }
        let top = found["records"]["top_share"]["observer"].as_f64().unwrap();
        assert!((top - cap).abs() < 1e-9, "{top}");
    }
}

/// Visits of nobody in particular are never capped, and make room for the others.
#[test]
fn the_unknown_is_nobody() {
    let world = World::new();
    strips(&world, &[90, 20, 40]);
    let text = fs::read_to_string(world.path("records.tsv")).unwrap().replace("Observer 2", "");
    world.put("records.tsv", &text);
    let found = built(&world, "file = \"records.tsv\"\ncap = { observer = \"25 %\" }");
    // 40 are nobody's; T = 40 + 20 + T/4
    let units = found.records["units"].as_f64().unwrap();
    assert!((units - 80.0).abs() < 1e-6, "{units}");
}

/// A training part may have fewer observers than the whole: it is capped by what it has.
#[test]
fn few_observers_in_a_training_part() {
    let world = World::new();
    for (visits, cap) in
        [(&[40, 30, 20][..], "34 %"), (&[60, 4][..], "50 %"), (&[40, 1, 1, 1, 1][..], "21 %")]
    {
        strips(&world, visits);
        for split in ["outings", "random", "blocks"] {
            let plan = super::PLAN
                .replace("[holdout]", &format!("[holdout]\nsplit = \"{split}\"\nblock = \"800 m\""));
            let records = format!("file = \"records.tsv\"\ncap = {{ observer = \"{cap}\" }}");
            world.put("plan.toml", &plan.replace("RECORDS", &records));
            let ran = world.run(&["build", "plan.toml", "--json"]);
            if split == "blocks" && ran.code == Some(3) {
                says(&ran.stderr, &["block", "folds"]);
                continue;
            }
            let found = ran.ended(0).json();
            super::accounted(&world, &found["records"]);
            for candidate in found["candidates"].as_array().unwrap() {
                let score = candidate["scores"]["log_score"]["value"].as_f64();
                assert!(score.is_some_and(f64::is_finite), "{visits:?} {split}: {candidate}");
            }
        }
    }
}

#[test]
fn observers_and_data_sets_together() {
    let (world, survey) = (uplands(), Survey::read());
    world.put("hoverflies.csv", &survey.text(",", "\n"));
    let free = built(&world, "file = \"hoverflies.csv\"");
    let mut loose =
        built(&world, "file = \"hoverflies.csv\"\ncap = { observer = \"99 %\", dataset = \"99 %\" }");
    loose.records["cap"] = free.records["cap"].clone(); // what is said of the cap itself
    loose.same_as(&free, "a cap that nobody reaches");
    let tight = built(&world, "file = \"hoverflies.csv\"\ncap = { observer = \"20 %\", dataset = \"40 %\" }");
    let weight = |records: &serde_json::Value| records["units"].as_f64().unwrap();
    assert!(weight(&tight.records) < weight(&free.records));
    assert_eq!(tight.records["kept"], free.records["kept"]);
    // three data sets cannot each have 30 %
    let records = "file = \"hoverflies.csv\"\ncap = { dataset = \"30 %\" }";
    world.put("plan.toml", &super::PLAN.replace("RECORDS", records));
    says(&world.run(&["build", "plan.toml"]).ended(2).stderr, &["3 data sets", "30 %", "33.34 %"]);
}

/// Distinct visits, counted here from the kept rows of the file.
#[test]
fn visits_are_those_of_the_file() {
    let world = World::new();
    strips(&world, &[33, 21, 8]);
    world.put(
        "plan.toml",
        &(super::PLAN.replace("RECORDS", "file = \"records.tsv\"") + "[output]\ndetails = true\n"),
    );
    let found = world.run(&["build", "plan.toml", "--json"]).ended(0).json();
    let mut table = csv::Reader::from_path(world.path("out/kept.csv")).unwrap();
    let columns = table.headers().unwrap().clone();
    let at = |name: &str| columns.iter().position(|c| c == name).unwrap_or_else(|| panic!("{columns:?}"));
    let (line, column, row, visit) = (at("line"), at("column"), at("row"), at("visit"));
    let text = fs::read_to_string(world.path("records.tsv")).unwrap();
    let lines: Vec<Vec<&str>> = text.lines().map(|l| l.split('\t').collect()).collect();
    let mut visits: BTreeMap<String, BTreeSet<String>> = BTreeMap::new();
    for kept in table.records() {
        let kept = kept.unwrap();
        let fields = &lines[kept[line].parse::<usize>().unwrap() - 1];
        let key = format!("{} {} {} {}", fields[2], fields[3], &kept[column], &kept[row]);
        visits.entry(key).or_default().insert(kept[visit].to_owned());
    }
    assert_eq!(found["records"]["visits"]["count"].as_u64(), Some(visits.len() as u64));
    assert!(visits.values().all(|v| v.len() == 1), "one number for each visit");
}
