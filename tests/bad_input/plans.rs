//! Plans that are wrong: the line is quoted, the fault marked, the cure named.

use super::common::{World, says};
use super::refused;

/// A plan with one passage exchanged is refused, with its line quoted and marked.
#[track_caller]
fn wrong(from: &str, to: &str, words: &[&str]) {
    let world = World::new();
    world.change(&[(from, to)]);
    refused(&world, 2, words);
    let said = world.run(&["build", "plan.toml"]).stderr;
    let plan = std::fs::read_to_string(world.path("plan.toml")).unwrap();
    let place = said.split("plan.toml:").nth(1).unwrap_or_else(|| panic!("no place in: {said}"));
    let number: usize = place.split(':').next().unwrap().parse().expect("a line number");
    let quoted = plan.lines().nth(number - 1).expect("a line of the plan");
    assert!(said.contains(quoted.trim()), "`{quoted}` is not quoted in: {said}");
    assert!(said.lines().any(|line| line.contains('^') || line.contains('─')), "no marker in: {said}");
}

#[test]
fn unknown_key() {
    wrong("seed = 7", "sede = 7", &["plan.toml:2", "sede", "`seed`"]);
    wrong("like = ", "lik = ", &["plan.toml:5", "`lik`", "`like`"]);
}

#[test]
fn wrong_unit() {
    wrong("\"400 m\"", "\"400 kg\"", &["plan.toml:", "kg", "km"]);
    wrong("\"400 m\"", "400", &["plan.toml:", "400", "unit|\"400 m\"|\"400 km\""]);
}

#[test]
fn wrong_type() {
    wrong("seed = 7", "seed = \"seven\"", &["plan.toml:2", "seven", "number"]);
    wrong("folds = 3", "folds = \"three\"", &["plan.toml:", "three", "number"]);
    wrong("title = \"A small world\"", "title = 5", &["plan.toml:1", "text"]);
}

#[test]
fn two_candidates_of_one_name() {
    wrong(
        "name = \"access\"",
        "name = \"recorded\"",
        &["plan.toml:", "recorded", "twice|two|already|both|taken"],
    );
}

#[test]
fn two_layers_of_one_name() {
    wrong("name = \"people\"", "name = \"roads\"", &["plan.toml:", "roads", "twice|two|already|both|taken"]);
}

#[test]
fn a_blend_naming_no_one() {
    let blend = "[[candidate]]\nname = \"mixed\"\nblend = [\"recorded\", \"ghost\"]\n\n[holdout]";
    wrong("[holdout]", blend, &["plan.toml:", "ghost"]);
}

#[test]
fn a_use_of_no_layer() {
    wrong("uses = { roads", "uses = { rails", &["plan.toml:", "rails", "roads"]);
}

#[test]
fn a_surface_of_no_candidate() {
    wrong("[holdout]", "[surface]\ncandidate = \"acces\"\n\n[holdout]", &["plan.toml:", "acces", "`access`"]);
}

#[test]
fn a_remote_path() {
    for path in [
        "/vsicurl/http://data.invalid/roads.gpkg",
        "https://data.invalid/roads.geojson",
        "/vsizip//vsicurl/http://data.invalid/roads.zip",
        "PG:host=data.invalid dbname=maps",
    ] {
        wrong("roads.geojson", path, &["plan.toml:", "data.invalid", "network|download|remote"]);
    }
}

#[test]
fn a_remote_path_inside_a_virtual_file() {
    let world = World::new();
    world.put(
        "people.vrt",
        "<VRTDataset rasterXSize=\"40\" rasterYSize=\"30\"><SRS>EPSG:32632</SRS>\
         <GeoTransform>500000,100,0,5000000,0,-100</GeoTransform>\
         <VRTRasterBand dataType=\"Float32\" band=\"1\"><SimpleSource>\
         <SourceFilename relativeToVRT=\"0\">/vsicurl/http://data.invalid/people.tif</SourceFilename>\
         <SourceBand>1</SourceBand></SimpleSource></VRTRasterBand></VRTDataset>",
    );
    world.change(&[("people.tif", "people.vrt")]);
    refused(&world, 3, &["people.vrt", "data.invalid|vsicurl", "network|download|remote"]);
    world.put(
        "roads.vrt",
        "<OGRVRTDataSource><OGRVRTLayer name=\"roads\">\
         <SrcDataSource>/vsicurl/http://data.invalid/roads.geojson</SrcDataSource>\
         </OGRVRTLayer></OGRVRTDataSource>",
    );
    world.change(&[("roads.geojson", "roads.vrt")]);
    refused(&world, 3, &["roads.vrt", "data.invalid|vsicurl", "network|download|remote"]);
}

#[test]
fn no_plan() {
    let world = World::new();
    for command in ["build", "check", "compare"] {
        let ran = world.run(&[command, "absent.toml"]);
        assert!(matches!(ran.code, Some(2 | 3)), "{:?}: {}", ran.code, ran.stderr);
        super::says(&ran.stderr, &["absent.toml", "no such file|not found|does not exist"]);
    }
    world.put_bytes("plan.toml", &[255, 254, 0, 1]);
    let ran = world.run(&["build", "plan.toml"]).ended(2);
    super::says(&ran.stderr, &["plan.toml", "utf-8|text"]);
}

#[test]
fn wrong_usage() {
    let world = World::new();
    for arguments in [
        &["build"][..],
        &["bild", "plan.toml"],
        &["build", "plan.toml", "--colour", "x"],
        &["build", "plan.toml", "--threads", "none"],
        &["build", "plan.toml", "--candidate", "nobody"],
    ] {
        let ran = world.run(arguments).ended(2);
        assert!(!ran.stderr.is_empty() && ran.stdout.is_empty(), "{arguments:?}: {}", ran.stdout);
    }
    assert!(world.files("out").is_empty());
}

#[test]
fn all_that_is_wrong_is_said_at_once() {
    let world = World::new();
    world.change(&[("seed = 7", "sede = 7"), ("folds = 3", "folds = 1"), ("\"400 m\"", "400")]);
    refused(&world, 2, &["sede", "folds", "400"]);
}

/// A name that is none is refused before any work, not after all of it.
#[test]
fn a_candidate_on_the_command_line_that_is_none() {
    let world = World::new();
    let said = world.run(&["build", "plan.toml", "--candidate", "nobody"]).ended(2);
    says(&said.stderr, &["nobody", "name one of", "uniform"]);
    assert!(!world.path("out").exists());
}
