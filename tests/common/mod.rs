//! What the outside tests share: a folder with a small world in it, runs of the program, fixtures.
//!
//! Knows the program only by its command line and its files.

#![allow(dead_code, reason = "each test takes its own part")]

pub mod packing;
pub mod raster;

use std::collections::BTreeMap;
use std::fs::{self, File};
use std::io::Write;
use std::path::{Path, PathBuf};
use std::process::{Command, Output};

use gdal::spatial_ref::{AxisMappingStrategy, CoordTransform, SpatialRef};

use raster::Lattice;

/// The program under test.
pub const PROGRAM: &str = env!("CARGO_BIN_EXE_trodden");

/// The plan of the small world.
pub const PLAN: &str = r#"title = "A small world"
seed = 7

[grid]
like = "land.tif"

[records]
file = "records.tsv"

[[layer]]
name = "roads"
measure = "distance"
file = "roads.geojson"

[[layer]]
name = "people"
measure = "value"
file = "people.tif"
resample = "sum"

[[candidate]]
name = "recorded"
density = { bandwidth = "400 m" }

[[candidate]]
name = "access"
uses = { roads = { curve = "half-normal" }, people = { curve = "power" } }

[holdout]
folds = 3
resamples = 99
"#;

/// Columns of the record file.
pub const HEADER: &str =
    "occurrenceID\tdecimalLongitude\tdecimalLatitude\teventDate\trecordedBy\tscientificName";

/// What a run of the program gave.
pub struct Ran {
    /// The exit code; `None` when a signal ended it.
    pub code: Option<i32>,
    /// What it wrote on stdout.
    pub stdout: String,
    /// What it wrote on stderr.
    pub stderr: String,
}

impl From<Output> for Ran {
    fn from(output: Output) -> Self {
        Self {
            code: output.status.code(),
            stdout: String::from_utf8(output.stdout).expect("stdout is UTF-8"),
            stderr: String::from_utf8(output.stderr).expect("stderr is UTF-8"),
        }
    }
}

impl Ran {
    /// Asserts the exit code.
    #[track_caller]
    pub fn ended(self, code: i32) -> Self {
        assert_eq!(self.code, Some(code), "stderr: {}\nstdout: {}", self.stderr, self.stdout);
        self
    }

    /// stdout as JSON.
    #[track_caller]
    pub fn json(&self) -> serde_json::Value {
        serde_json::from_str(&self.stdout).unwrap_or_else(|e| panic!("{e}: {}", self.stdout))
    }
}

/// Asserts that a text holds every word; `a|b` asks for one of the two. Case and line breaks do not
/// count.
#[track_caller]
pub fn says(text: &str, words: &[&str]) {
    let flat = text.to_lowercase().split_whitespace().collect::<Vec<_>>().join(" ");
    for word in words {
        let found = word.to_lowercase().split('|').any(|one| flat.contains(one));
        assert!(found, "`{word}` is not said in:\n{text}");
    }
}

/// Reads a JSON file.
#[track_caller]
pub fn json(path: &Path) -> serde_json::Value {
    let text = fs::read_to_string(path).unwrap_or_else(|e| panic!("{}: {e}", path.display()));
    serde_json::from_str(&text).unwrap_or_else(|e| panic!("{}: {e}", path.display()))
}

/// A folder with a small world: land, a road, people, records and a plan that runs.
pub struct World {
    folder: tempfile::TempDir,
    /// The EPSG number of its CRS.
    pub epsg: u32,
}

impl World {
    /// The world every test starts from, in Europe.
    pub fn new() -> Self {
        Self::with_crs(32632)
    }

    /// The same in another zone.
    pub fn with_crs(epsg: u32) -> Self {
        let world = Self::empty(epsg);
        let grid = world.lattice();
        raster::write(&world.path("land.tif"), &grid, &grid.filled(1.0), Some(-9999.0));
        let people = grid.each(|column, row| f64::from(1 + (column / 4 + row / 4) % 7));
        raster::write(&world.path("people.tif"), &grid, &people, None);
        let (west, north) = grid.origin;
        let y = north - 1_450.0;
        world.put("roads.geojson", &line(epsg, &[(west, y), (west + 4_000.0, y + 300.0)]));
        world.put_records("records.tsv", &world.points(240));
        world.put("plan.toml", PLAN);
        world
    }

    /// A folder without files.
    pub fn empty(epsg: u32) -> Self {
        Self { folder: tempfile::tempdir().expect("a temporary folder"), epsg }
    }

    /// The grid: 40 × 30 cells of 100 m.
    pub fn lattice(&self) -> Lattice {
        Lattice {
            columns: 40,
            rows: 30,
            origin: (500_000.0, 5_000_000.0),
            cell: (100.0, -100.0),
            epsg: self.epsg,
        }
    }

    /// Where a file of this name is.
    pub fn path(&self, name: &str) -> PathBuf {
        self.folder.path().join(name)
    }

    /// Writes a text file.
    pub fn put(&self, name: &str, text: &str) {
        self.put_bytes(name, text.as_bytes());
    }

    /// Writes a file.
    pub fn put_bytes(&self, name: &str, bytes: &[u8]) {
        let path = self.path(name);
        fs::create_dir_all(path.parent().expect("a parent")).expect("a folder");
        File::create(&path).and_then(|mut f| f.write_all(bytes)).expect("a fixture can be written");
    }

    /// Places on the grid, in its coordinates: more of them near the road.
    pub fn points(&self, count: u64) -> Vec<(f64, f64)> {
        let (west, north) = self.lattice().origin;
        let mut state = 20_240_611_u64;
        let mut next = move || {
            state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
            (state >> 40) as f64 / (1_u64 << 24) as f64
        };
        (0..count)
            .map(|_| {
                let (x, near, off) = (next(), (next() - 0.5) * (next() - 0.5) * 4.0, next());
                let y = if off < 0.15 { off / 0.15 } else { (0.48 + near / 2.2).clamp(0.0, 0.999) };
                (west + 4_000.0 * x, north - 3_000.0 * y)
            })
            .collect()
    }

    /// Longitudes and latitudes of places in the grid's coordinates.
    pub fn lonlat(&self, points: &[(f64, f64)]) -> Vec<(f64, f64)> {
        project(self.epsg, 4326, points)
    }

    /// Writes records at places of the grid as tab-separated text, one outing for every four.
    pub fn put_records(&self, name: &str, points: &[(f64, f64)]) {
        let mut text = format!("{HEADER}\n");
        for (i, (lon, lat)) in self.lonlat(points).into_iter().enumerate() {
            text += &record(i, &format!("{lon:.7}"), &format!("{lat:.7}"));
        }
        self.put(name, &text);
    }

    /// The plan with passages exchanged.
    #[track_caller]
    pub fn change(&self, changes: &[(&str, &str)]) {
        let mut plan = PLAN.to_owned();
        for (from, to) in changes {
            assert!(plan.contains(from), "`{from}` is not in the plan");
            plan = plan.replace(from, to);
        }
        self.put("plan.toml", &plan);
    }

    /// A run of the program in this folder.
    pub fn command(&self, arguments: &[&str]) -> Command {
        let mut command = Command::new(PROGRAM);
        command.current_dir(self.folder.path()).args(arguments).env_remove("NO_COLOR");
        command
    }

    /// Runs the program in this folder.
    pub fn run(&self, arguments: &[&str]) -> Ran {
        self.command(arguments).output().expect("the program starts").into()
    }

    /// All files below a folder, hidden ones too, with their bytes; folders end in `/`.
    pub fn files(&self, folder: &str) -> BTreeMap<String, Vec<u8>> {
        let mut found = BTreeMap::new();
        gather(&self.path(folder), "", &mut found);
        found
    }
}

fn gather(folder: &Path, prefix: &str, found: &mut BTreeMap<String, Vec<u8>>) {
    let Ok(entries) = fs::read_dir(folder) else { return };
    for entry in entries.flatten() {
        let name = format!("{prefix}{}", entry.file_name().to_string_lossy());
        if entry.path().is_dir() {
            found.insert(format!("{name}/"), Vec::new());
            gather(&entry.path(), &format!("{name}/"), found);
        } else if let Ok(bytes) = fs::read(entry.path()) {
            found.insert(name, bytes);
        }
    }
}

/// A line of the record file.
pub fn record(number: usize, longitude: &str, latitude: &str) -> String {
    let outing = number / 4;
    let (day, month, who) = (1 + outing % 28, 1 + outing / 28 % 12, outing % 9);
    format!(
        "r{number}\t{longitude}\t{latitude}\t2019-{month:02}-{day:02}\tObserver {who}\tGenus species{}\n",
        number % 5
    )
}

/// Coordinates in another CRS; x is easting or longitude.
pub fn project(from: u32, to: u32, points: &[(f64, f64)]) -> Vec<(f64, f64)> {
    let system = |epsg| {
        let mut system = SpatialRef::from_epsg(epsg).expect("a known CRS");
        system.set_axis_mapping_strategy(AxisMappingStrategy::TraditionalGisOrder);
        system
    };
    let turn = CoordTransform::new(&system(from), &system(to)).expect("a transformation");
    let (mut x, mut y): (Vec<f64>, Vec<f64>) = points.iter().copied().unzip();
    turn.transform_coords(&mut x, &mut y, &mut []).expect("the places can be turned");
    x.into_iter().zip(y).collect()
}

/// A line as GeoJSON.
pub fn line(epsg: u32, points: &[(f64, f64)]) -> String {
    geojson(epsg, &format!("{{\"type\":\"LineString\",\"coordinates\":[{}]}}", pairs(points)))
}

/// A polygon as GeoJSON.
pub fn polygon(epsg: u32, ring: &[(f64, f64)]) -> String {
    geojson(epsg, &format!("{{\"type\":\"Polygon\",\"coordinates\":[[{}]]}}", pairs(ring)))
}

fn pairs(points: &[(f64, f64)]) -> String {
    points.iter().map(|(x, y)| format!("[{x},{y}]")).collect::<Vec<_>>().join(",")
}

fn geojson(epsg: u32, geometry: &str) -> String {
    format!(
        "{{\"type\":\"FeatureCollection\",\
         \"crs\":{{\"type\":\"name\",\"properties\":{{\"name\":\"urn:ogc:def:crs:EPSG::{epsg}\"}}}},\
         \"features\":[{{\"type\":\"Feature\",\"properties\":{{\"class\":\"primary\"}},\"geometry\":{geometry}}}]}}"
    )
}
