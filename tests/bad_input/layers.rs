//! Layers that do not fit the region, or hold what no curve can take.

use super::common::{World, line, raster};
use super::{refused, refused_by_build};

#[test]
fn lines_that_do_not_reach_the_grid() {
    let world = World::new();
    world.put("roads.geojson", &line(32632, &[(700_000.0, 5_300_000.0), (704_000.0, 5_300_000.0)]));
    refused(&world, 3, &["roads.geojson", "crs|extent|reach"]);
}

#[test]
fn values_that_do_not_reach_the_grid() {
    let world = World::new();
    let mut far = world.lattice();
    far.origin.0 += 200_000.0;
    raster::write(&world.path("people.tif"), &far, &far.filled(2.0), None);
    refused(&world, 3, &["people.tif", "crs|extent|reach"]);
}

#[test]
fn values_that_do_not_cover_the_region() {
    let world = World::new();
    let mut part = world.lattice();
    part.columns = 35;
    raster::write(&world.path("people.tif"), &part, &part.each(|c, r| f64::from(c + r)), None);
    refused_by_build(&world, 3, &["people.tif", "150 ", "1200|1,200", "missing"]);
    world.change(&[("resample = \"sum\"", "resample = \"sum\"\nmissing = 0")]);
    world.run(&["build", "plan.toml"]).ended(0);
}

/// The world with other numbers in some cells of the population raster.
fn with_people(value: f64, cells: usize) -> World {
    let world = World::new();
    let grid = world.lattice();
    let mut people = grid.each(|column, row| f64::from(1 + (column + row) % 5));
    people[300..300 + cells].fill(value);
    raster::write(&world.path("people.tif"), &grid, &people, None);
    world
}

#[test]
fn not_a_number() {
    for resample in ["sum", "mean", "nearest", "bilinear"] {
        let world = with_people(f64::NAN, 3);
        world.change(&[("resample = \"sum\"", &format!("resample = \"{resample}\""))]);
        let said = refused_by_build(&world, 3, &["people.tif", "no value|not a number|nan"]);
        assert!(said.contains('3'), "{said}");
    }
}

#[test]
fn infinity() {
    for value in [f64::INFINITY, f64::NEG_INFINITY] {
        for resample in ["sum", "mean", "nearest"] {
            let world = with_people(value, 4);
            let to = format!("resample = \"{resample}\"\nmissing = 0");
            world.change(&[("resample = \"sum\"", &to)]);
            // a total of less than nothing is refused as negative
            let fault = if value < 0.0 { "infinit|not finite|negative" } else { "infinit|not finite" };
            refused_by_build(&world, 3, &["people.tif", fault]);
        }
    }
}

#[test]
fn constant() {
    let world = World::new();
    let grid = world.lattice();
    raster::write(&world.path("people.tif"), &grid, &grid.filled(2.5), None);
    refused_by_build(&world, 3, &["people", "2.5", "everywhere|constant|same|vary"]);
}

#[test]
fn negative_population_under_a_power_curve() {
    let world = with_people(-7.0, 2);
    world.change(&[("resample = \"sum\"", "resample = \"mean\"")]);
    refused_by_build(&world, 3, &["people", "-7", "negative|below zero"]);
}

#[test]
fn negative_population_to_be_summed() {
    let world = with_people(-9999.0, 2);
    refused_by_build(&world, 3, &["people.tif", "2 ", "negative|below zero", "nodata"]);
}

#[test]
fn declared_nodata_is_not_a_number() {
    let world = World::new();
    let grid = world.lattice();
    let mut people = grid.each(|column, row| f64::from(1 + (column + row) % 5));
    people[..5].fill(-9999.0);
    raster::write(&world.path("people.tif"), &grid, &people, Some(-9999.0));
    refused_by_build(&world, 3, &["people.tif", "5 ", "missing"]);
}

#[test]
fn a_layer_without_crs() {
    let world = World::new();
    world.put("roads.csv", "WKT,class\n\"LINESTRING (500000 4998550,504000 4998850)\",primary\n");
    world.change(&[("roads.geojson", "roads.csv")]);
    refused(&world, 3, &["roads.csv", "crs"]);
}

/// A feature without geometry is left out, and said; the others are a layer all the same.
#[test]
fn a_feature_without_geometry() {
    let world = World::new();
    let text = std::fs::read_to_string(world.path("roads.geojson")).unwrap();
    let bare = "{\"type\":\"Feature\",\"properties\":{\"class\":\"primary\"},\"geometry\":null}";
    world.put("roads.geojson", &text.replace("\"features\":[", &format!("\"features\":[{bare},")));
    for filter in ["", "\nwhere = \"class = 'primary'\""] {
        world.change(&[("file = \"roads.geojson\"", &format!("file = \"roads.geojson\"{filter}"))]);
        let found = world.run(&["build", "plan.toml", "--json"]).ended(0).json();
        super::says(&found["warnings"].to_string(), &["empty_geometry", "1 features have no geometry"]);
    }
}
