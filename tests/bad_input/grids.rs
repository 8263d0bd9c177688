//! Grids on which nothing can be spread, and odd ones on which it can.

use super::common::{World, json, line, polygon, raster};
use super::{refused, refused_by_build};

#[test]
fn one_cell() {
    let world = World::new();
    let mut grid = world.lattice();
    (grid.columns, grid.rows, grid.cell) = (1, 1, (4_000.0, -4_000.0));
    raster::write(&world.path("land.tif"), &grid, &[1.0], None);
    refused(&world, 3, &["land.tif", "one cell|single cell|1 × 1|1x1", "finer|larger"]);
}

#[test]
fn a_mask_with_no_cell_inside() {
    let world = World::new();
    let grid = world.lattice();
    raster::write(&world.path("land.tif"), &grid, &grid.filled(-9999.0), Some(-9999.0));
    refused(&world, 3, &["land.tif", "no cell|nodata|without data"]);
}

#[test]
fn a_region_too_small_for_any_centre() {
    let world = World::new();
    let (x, y) = (500_010.0, 4_999_010.0);
    world.put("region.geojson", &polygon(32632, &[(x, y), (x + 9.0, y), (x + 9.0, y + 9.0), (x, y)]));
    world.change(&[(
        "like = \"land.tif\"",
        "region = \"region.geojson\"\ncrs = \"EPSG:32632\"\ncell = \"100 m\"",
    )]);
    refused_by_build(&world, 3, &["region.geojson|cell"]);
}

#[test]
fn a_region_without_polygons() {
    let world = World::new();
    world.change(&[(
        "like = \"land.tif\"",
        "region = \"roads.geojson\"\ncrs = \"EPSG:32632\"\ncell = \"100 m\"",
    )]);
    refused(&world, 3, &["roads.geojson", "polygon"]);
}

#[test]
fn unknown_crs() {
    let world = World::new();
    let (x, y) = (500_000.0, 4_998_000.0);
    world.put("region.geojson", &polygon(32632, &[(x, y), (x + 900.0, y), (x + 900.0, y + 900.0), (x, y)]));
    let to = "region = \"region.geojson\"\ncrs = \"EPSG:99999\"\ncell = \"100 m\"";
    world.change(&[("like = \"land.tif\"", to)]);
    refused(&world, 2, &["EPSG:99999", "crs"]);
}

#[test]
fn rotated_is_refused() {
    let world = World::new();
    let grid = world.lattice();
    let turned = [500_000.0, 98.0, 17.0, 5_000_000.0, 17.0, -98.0];
    raster::write_turned(&world.path("land.tif"), &grid, &turned, (&grid.filled(1.0), None));
    refused(&world, 3, &["land.tif", "rotat|shear|turned", "gdalwarp|north"]);
}

/// The world's surface with the density alone, which does not depend on how folds are dealt.
fn recorded(world: &World) -> raster::Read {
    world.change(&[("[holdout]", "[surface]\ncandidate = \"recorded\"\nper = \"km2\"\n\n[holdout]")]);
    world.run(&["build", "plan.toml"]).ended(0);
    raster::read(&world.path("out/effort.tif"))
}

#[test]
fn south_up_is_accepted() {
    let north_up = recorded(&World::new());
    let world = World::new();
    let mut grid = world.lattice();
    (grid.origin.1, grid.cell.1) = (4_997_000.0, 100.0);
    raster::write(&world.path("land.tif"), &grid, &grid.filled(1.0), Some(-9999.0));
    let south_up = recorded(&world);
    assert_eq!(south_up.transform, grid.transform());
    let turned: Vec<f64> = south_up.values.chunks(40).rev().flatten().copied().collect();
    for (a, b) in turned.iter().zip(&north_up.values) {
        assert!((a - b).abs() <= 1e-4 * b.abs(), "{a} is not {b}");
    }
}

#[test]
fn other_number_types_are_accepted() {
    for (nodata, outside) in [(Some(0.0), 0.0), (Some(f64::NAN), f64::NAN)] {
        let world = World::new();
        let grid = world.lattice();
        let land = grid.each(|column, _| if column < 3 { outside } else { 5.0 });
        raster::write(&world.path("land.tif"), &grid, &land, nodata);
        world.run(&["build", "plan.toml"]).ended(0);
        assert_eq!(json(&world.path("out/effort.json"))["grid"]["cells_inside"], 37 * 30);
        let effort = raster::read(&world.path("out/effort.tif"));
        assert_eq!((effort.nodata, effort.inside().len()), (Some(-9999.0), 37 * 30));
        assert!(effort.values.chunks(40).all(|row| row[..3].iter().all(|v| *v == -9999.0)));
    }
}

/// A world on another projection, its corner at a given longitude and latitude.
fn at(epsg: u32, place: (f64, f64)) -> World {
    let world = World::empty(epsg);
    let (x, y) = super::common::project(4326, epsg, &[place])[0];
    let mut grid = world.lattice();
    grid.origin = (x.round(), y.round());
    raster::write(&world.path("land.tif"), &grid, &grid.filled(1.0), None);
    let people = grid.each(|column, row| f64::from(1 + (column + row) % 5));
    raster::write(&world.path("people.tif"), &grid, &people, None);
    let (west, y) = (grid.origin.0, grid.origin.1 - 1_400.0);
    world.put("roads.geojson", &line(epsg, &[(west, y), (west + 4_000.0, y)]));
    let moved = |p: (f64, f64)| (p.0 - 500_000.0 + grid.origin.0, p.1 - 5_000_000.0 + grid.origin.1);
    world.put_records("records.tsv", &world.points(240).into_iter().map(moved).collect::<Vec<_>>());
    world.change(&[]);
    world
}

#[test]
fn web_map_mercator_far_from_the_equator_is_refused() {
    let world = at(3857, (15.0, 60.0));
    refused(&world, 3, &["land.tif|grid", "3857|mercator", "%", "equal-area|equal area"]);
}

#[test]
fn a_stretched_zone_is_warned_about() {
    let world = at(32632, (24.0, 45.0)); // 15 degrees off its meridian: areas 3.4 % too large
    let built = world.run(&["build", "plan.toml"]).ended(0);
    super::says(&built.stderr, &["%", "equal-area|equal area"]);
    let warnings = &json(&world.path("out/effort.json"))["warnings"];
    super::says(&warnings.to_string(), &["%", "equal-area|equal area"]);
    let near = World::new().run(&["build", "plan.toml"]).ended(0);
    assert!(!near.stderr.contains("equal"), "{}", near.stderr);
}
