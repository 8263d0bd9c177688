//! The whole of `compare` in one process: 1,000 × 1,000 cells, 100,000 records, three layers, four
//! candidates beside `uniform`, five folds. Prints time, peak memory and the share of each stage.
//!
//! Run with `cargo bench --bench compare`. Needs Linux for the peak memory (`/proc`).

#![allow(clippy::disallowed_methods, reason = "a bench writes its inputs where it likes")]

use std::fmt::Write as _;
use std::io::Write as _;
use std::path::Path;
use std::process::{Command, Stdio};
use std::time::{Duration, Instant};

use trodden::maths::float;
use trodden::maths::random::Stream;
use trodden::units::Seed;

const SIDE: usize = 1000;
const CELL: f64 = 100.0;
const RECORDS: usize = 100_000;

fn main() {
    let folder = tempfile::tempdir().expect("a folder");
    inputs(folder.path());
    let plan = folder.path().join("plan.toml");
    std::fs::write(&plan, PLAN).expect("a plan");
    let begun = Instant::now();
    let mut child = Command::new(env!("CARGO_BIN_EXE_trodden"))
        .args(["compare", "--quiet"])
        .arg(&plan)
        .stderr(Stdio::inherit())
        .spawn()
        .expect("the program starts");
    let mut peak = 0;
    while child.try_wait().expect("the program can be waited for").is_none() {
        peak = peak.max(peak_kib(child.id()));
        std::thread::sleep(Duration::from_millis(20));
    }
    let seconds = begun.elapsed().as_secs_f64();
    let manifest = std::fs::read_to_string(folder.path().join("out/manifest.json")).expect("a manifest");
    let manifest: serde_json::Value = serde_json::from_str(&manifest).expect("JSON");
    let mut text = format!("compare: {seconds:.1} s, peak {:.0} MiB\n", peak as f64 / 1024.0);
    for stage in manifest["stages"].as_array().expect("stages") {
        let took = stage["seconds"].as_f64().expect("seconds");
        let name = stage["name"].as_str().expect("a name");
        writeln!(text, "  {name:20} {took:7.2} s  {:5.1} %", 100.0 * took / seconds).expect("text");
    }
    std::io::stdout().write_all(text.as_bytes()).expect("stdout");
}

const PLAN: &str = r#"
title = "Bench"
[grid]
like = "template.tif"
[records]
file = "records.tsv"
longitude = "x"
latitude = "y"
crs = "EPSG:3035"
[[layer]]
name = "roads"
measure = "distance"
file = "roads.geojson"
[[layer]]
name = "towns"
measure = "distance"
file = "towns.geojson"
[[layer]]
name = "people"
measure = "value"
file = "people.tif"
resample = "sum"
[[candidate]]
name = "recorded"
density = { bandwidth = "fit" }
[[candidate]]
name = "access"
uses = { roads = { curve = "half-normal" }, towns = { curve = "exponential" }, people = { curve = "power" } }
[[candidate]]
name = "roadside"
uses = { roads = { curve = "exponential" } }
[[candidate]]
name = "crowd"
uses = { people = { curve = "power" } }
"#;

fn peak_kib(process: u32) -> u64 {
    std::fs::read_to_string(format!("/proc/{process}/status"))
        .ok()
        .and_then(|s| {
            s.lines().find_map(|l| l.strip_prefix("VmHWM:")?.split_whitespace().next()?.parse().ok())
        })
        .unwrap_or(0)
}

fn inputs(folder: &Path) {
    let mut stream = Stream::new(Seed(1), "bench", 0);
    let (west, south, extent) = (4_000_000.0, 3_000_000.0, SIDE as f64 * CELL);
    let place = |s: &mut Stream| (west + s.unit() * extent, south + s.unit() * extent);
    let towns: Vec<(f64, f64)> = (0..60).map(|_| place(&mut stream)).collect();
    let roads: Vec<[(f64, f64); 2]> =
        (0..400).map(|_| [towns[stream.below(60)], towns[stream.below(60)]]).collect();
    raster(&folder.join("template.tif"), (west, south), SIDE, |_, _| 1.0);
    raster(&folder.join("people.tif"), (west, south), SIDE / 2, |x, y| {
        towns.iter().map(|t| 5000.0 * float::exp(-(x - t.0).hypot(y - t.1) / 3000.0)).sum::<f64>().floor()
    });
    geojson(&folder.join("towns.geojson"), "Point", towns.iter().map(|t| format!("[{},{}]", t.0, t.1)));
    let line = |r: &[(f64, f64); 2]| format!("[[{},{}],[{},{}]]", r[0].0, r[0].1, r[1].0, r[1].1);
    geojson(&folder.join("roads.geojson"), "LineString", roads.iter().map(line));
    let mut out = String::from("x\ty\teventDate\trecordedBy\n");
    for _ in 0..RECORDS {
        let road = roads[stream.below(400)];
        let (t, spread) = (stream.unit(), 2000.0);
        let mut around = |v: f64| v + (stream.unit() + stream.unit() + stream.unit() - 1.5) * spread;
        let x = around(road[0].0 + t * (road[1].0 - road[0].0)).clamp(west, west + extent - 1.0);
        let y = around(road[0].1 + t * (road[1].1 - road[0].1)).clamp(south, south + extent - 1.0);
        let (day, month, year) = (1 + stream.below(28), 1 + stream.below(12), 2005 + stream.below(20));
        writeln!(out, "{x:.1}\t{y:.1}\t{year}-{month:02}-{day:02}\tobserver {}", stream.below(300))
            .expect("text");
    }
    std::fs::write(folder.join("records.tsv"), out).expect("records");
}

fn geojson(path: &Path, kind: &str, coordinates: impl Iterator<Item = String>) {
    let features: Vec<String> = coordinates
        .map(|c| {
            format!(
                r#"{{"type":"Feature","properties":{{}},"geometry":{{"type":"{kind}","coordinates":{c}}}}}"#
            )
        })
        .collect();
    let crs = r#""crs":{"type":"name","properties":{"name":"urn:ogc:def:crs:EPSG::3035"}}"#;
    let text = format!(r#"{{"type":"FeatureCollection",{crs},"features":[{}]}}"#, features.join(","));
    std::fs::write(path, text).expect("features");
}

fn raster(path: &Path, (west, south): (f64, f64), side: usize, value: impl Fn(f64, f64) -> f64) {
    let cell = SIDE as f64 * CELL / side as f64;
    let north = south + SIDE as f64 * CELL;
    let driver = gdal::DriverManager::get_driver_by_name("GTiff").expect("a driver");
    let mut dataset = driver.create_with_band_type::<f32, _>(path, side, side, 1).expect("a raster");
    dataset.set_geo_transform(&[west, cell, 0.0, north, 0.0, -cell]).expect("a transform");
    let srs = gdal::spatial_ref::SpatialRef::from_epsg(3035).expect("a CRS");
    dataset.set_spatial_ref(&srs).expect("a CRS");
    let at = |i: usize| (west + ((i % side) as f64 + 0.5) * cell, north - ((i / side) as f64 + 0.5) * cell);
    let values: Vec<f32> = (0..side * side).map(|i| value(at(i).0, at(i).1) as f32).collect();
    let mut band = dataset.rasterband(1).expect("a band");
    band.write((0, 0), (side, side), &mut gdal::raster::Buffer::new((side, side), values)).expect("values");
}
