//! Files that are not there, or not what they are taken for.

use std::fs;

use super::common::World;
use super::refused;

#[test]
fn no_such_file() {
    for named in ["land.tif", "records.tsv", "roads.geojson", "people.tif"] {
        let world = World::new();
        world.change(&[(named, "absent.xyz")]);
        refused(&world, 3, &["absent.xyz", "no such file|not found|does not exist"]);
    }
}

#[test]
fn every_missing_file_is_named_at_once() {
    let world = World::new();
    world.change(&[
        ("records.tsv", "absent.tsv"),
        ("roads.geojson", "gone.gpkg"),
        ("people.tif", "lost.tif"),
    ]);
    let checked = world.run(&["check", "plan.toml", "--json"]).ended(3);
    super::says(&checked.stdout, &["absent.tsv", "gone.gpkg", "lost.tif"]);
}

#[test]
fn not_a_raster() {
    for named in ["land.tif", "people.tif"] {
        let world = World::new();
        world.put("prose.tif", "This is a letter to the editor, and no raster at all.\n");
        world.change(&[(named, "prose.tif")]);
        refused(&world, 3, &["prose.tif", "raster"]);
        world.change(&[(named, "roads.geojson")]);
        refused(&world, 3, &["roads.geojson", "raster"]);
    }
}

#[test]
fn not_a_vector() {
    let world = World::new();
    world.put("prose.gpkg", "This is a letter to the editor, and no map at all.\n");
    world.change(&[("roads.geojson", "prose.gpkg")]);
    refused(&world, 3, &["prose.gpkg", "vector"]);
    world.change(&[("roads.geojson", "people.tif")]);
    refused(&world, 3, &["people.tif", "vector"]);
}

#[test]
fn records_that_are_no_text() {
    let world = World::new();
    world.put_bytes("noise.tsv", &[0, 159, 146, 150, 0, 1, 2, 3, 255, 254, 0, 10, 0, 7]);
    world.change(&[("records.tsv", "noise.tsv")]);
    refused(&world, 3, &["noise.tsv"]);
}

#[test]
fn a_folder_in_place_of_a_file() {
    let world = World::new();
    fs::create_dir(world.path("folder")).unwrap();
    for named in ["land.tif", "records.tsv", "people.tif"] {
        world.change(&[(named, "folder")]);
        refused(&world, 3, &["folder"]);
    }
}

#[test]
fn empty_file() {
    for (named, empty) in [
        ("land.tif", "e.tif"),
        ("records.tsv", "e.tsv"),
        ("roads.geojson", "e.geojson"),
        ("people.tif", "e2.tif"),
    ] {
        let world = World::new();
        world.put(empty, "");
        world.change(&[(named, empty)]);
        refused(&world, 3, &[empty, "empty"]);
    }
}

#[test]
fn a_layer_without_features() {
    let world = World::new();
    world.put("bare.geojson", "{\"type\":\"FeatureCollection\",\"features\":[]}");
    world.change(&[("roads.geojson", "bare.geojson")]);
    refused(&world, 3, &["bare.geojson", "no feature|holds no|empty"]);
}

#[test]
fn a_raster_cut_short() {
    let world = World::new();
    for (named, cut) in [("land.tif", "half-land.tif"), ("people.tif", "half-people.tif")] {
        let whole = fs::read(world.path(named)).unwrap();
        world.put_bytes(cut, &whole[..whole.len() / 3]);
        world.change(&[(named, cut)]);
        super::refused_by_build(&world, 3, &[cut]);
    }
}

#[test]
fn a_table_that_is_not_there() {
    let world = World::new();
    world.change(&[("file = \"roads.geojson\"", "file = \"roads.geojson\"\ntable = \"rivers\"")]);
    refused(&world, 3, &["roads.geojson", "rivers", "roads"]);
}

#[test]
fn a_filter_that_does_not_parse() {
    let world = World::new();
    world.change(&[("file = \"roads.geojson\"", "file = \"roads.geojson\"\nwhere = \"class ==== (\"")]);
    refused(&world, 2, &["where"]);
}

#[test]
fn a_filter_that_leaves_nothing() {
    let world = World::new();
    world.change(&[("file = \"roads.geojson\"", "file = \"roads.geojson\"\nwhere = \"class = 'canal'\"")]);
    refused(&world, 3, &["roads.geojson", "canal|filter|where"]);
}
