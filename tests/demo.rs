//! The demo, whole: made, built and compared by the real binary, and held against the known truth.

#![allow(clippy::disallowed_methods, reason = "writes plans into a folder of its own")]
#![allow(clippy::print_stdout, reason = "prints what it finds")]

use std::path::{Path, PathBuf};
use std::process::Command;
use std::sync::OnceLock;

use serde_json::Value;
use trodden::maths::float::ln;
use trodden::maths::rank::pearson;

/// The demo's world, made once; the folder lives as long as the tests.
fn world() -> &'static Path {
    static WORLD: OnceLock<tempfile::TempDir> = OnceLock::new();
    WORLD
        .get_or_init(|| {
            let folder = tempfile::tempdir().unwrap();
            let program = Path::new(env!("CARGO_BIN_EXE_trodden"));
            let maker = program.parent().unwrap().join("examples/skerrow");
            let made = Command::new(maker).arg(folder.path()).output().unwrap();
            assert!(made.status.success(), "{}", String::from_utf8_lossy(&made.stderr));
            folder
        })
        .path()
}

/// Runs a command on the demo's plan, changed by `edit`, into a folder of its own.
fn run(command: &str, threads: &str, edit: impl Fn(String) -> String) -> (PathBuf, tempfile::TempDir) {
    let plan = std::fs::read_to_string(concat!(env!("CARGO_MANIFEST_DIR"), "/demo/plan.toml")).unwrap();
    let out = tempfile::tempdir().unwrap();
    let name = format!("plan-{}.toml", out.path().file_name().unwrap().to_string_lossy());
    std::fs::write(world().join(&name), edit(plan)).unwrap();
    let done = Command::new(env!("CARGO_BIN_EXE_trodden"))
        .args([command, "--threads", threads, "-o"])
        .arg(out.path())
        .arg(world().join(&name))
        .output()
        .unwrap();
    assert!(done.status.success(), "{}", String::from_utf8_lossy(&done.stderr));
    (out.path().to_owned(), out)
}

fn json(path: &Path) -> Value {
    serde_json::from_str(&std::fs::read_to_string(path).unwrap()).unwrap()
}

fn raster(path: &Path) -> (Vec<f64>, usize) {
    let dataset = gdal::Dataset::open(path).unwrap();
    let size = dataset.raster_size();
    let band = dataset.rasterband(1).unwrap();
    (band.read_as::<f64>((0, 0), size, size, None).unwrap().data().to_vec(), size.0)
}

/// Log scores of a candidate and of the true field on the same held-out units.
fn scores(out: &Path, candidate: &str, truth: &[f64], columns: usize) -> (f64, f64) {
    let cells = truth.iter().filter(|t| **t > 0.0).count() as f64;
    let text = std::fs::read_to_string(out.join("held-out-units.csv")).unwrap();
    let (mut ours, mut theirs, mut n) = (0.0, 0.0, 0.0);
    for line in text.lines().skip(1) {
        let f: Vec<&str> = line.split(',').collect();
        if f[4] == candidate {
            let (column, row): (usize, usize) = (f[1].parse().unwrap(), f[2].parse().unwrap());
            ours += f[5].parse::<f64>().unwrap();
            theirs += ln(truth[row * columns + column] * cells);
            n += 1.0;
        }
    }
    (ours / n, theirs / n)
}

/// The best candidate follows the known effort: correlation of logarithms at least 0.9 over the
/// region, held-out log score within 0.05 nats of the true field's on the same units.
#[test]
fn the_best_candidate_follows_the_known_effort() {
    let (out, _keep) = run("build", "2", |p| p.replace("details = false", "details = true"));
    let effort = json(&out.join("effort.json"));
    let best = effort["surface"]["candidate"].as_str().unwrap();
    assert_eq!(effort["candidates"][0]["name"], best, "the best by log score is the one delivered");
    let (truth, columns) = raster(&world().join("truth/effort.tif"));
    let (ours, _) = raster(&out.join("effort.tif"));
    let inside: Vec<usize> = (0..truth.len()).filter(|i| truth[*i] > 0.0).collect();
    assert!(inside.iter().all(|i| ours[*i] > 0.0), "every cell of land has weight");
    let logs = |v: &[f64]| inside.iter().map(|i| ln(v[*i])).collect::<Vec<f64>>();
    let correlation = pearson(&logs(&truth), &logs(&ours));
    let (score, true_score) = scores(&out, best, &truth, columns);
    let stated = effort["candidates"][0]["scores"]["log_score"]["value"].as_f64().unwrap();
    println!(
        "delivered {best}: correlation with the known effort {correlation:.4} (log scale, {} cells)",
        inside.len()
    );
    println!(
        "held-out log score {score:.4}, of the true field {true_score:.4}, difference {:.4}",
        score - true_score
    );
    assert!((stated - score).abs() < 1e-9);
    assert!(correlation >= 0.9);
    assert!((score - true_score).abs() <= 0.05);
}

#[test]
fn the_ledger_adds_up() {
    let (out, _keep) = run("build", "2", |p| p);
    let records = &json(&out.join("effort.json"))["records"];
    let dropped: u64 = records["dropped"].as_object().unwrap().values().map(|v| v.as_u64().unwrap()).sum();
    assert_eq!(records["read"].as_u64().unwrap(), records["kept"].as_u64().unwrap() + dropped);
    let rows = std::fs::read_to_string(out.join("dropped.csv")).unwrap().lines().count() as u64 - 1;
    assert_eq!(rows, dropped);
    let lines = std::fs::read_to_string(world().join("data/records.tsv")).unwrap().lines().count() as u64 - 1;
    assert_eq!(records["read"].as_u64().unwrap(), lines);
}

/// Everything but the manifest and the report, which carry the time.
#[test]
fn same_plan_same_bytes_at_any_thread_count() {
    let (one, _a) = run("compare", "1", |p| p);
    let (two, _b) = run("compare", "2", |p| p);
    let (again, _c) = run("compare", "2", |p| p);
    let mut seen = 0;
    for entry in std::fs::read_dir(&one).unwrap() {
        let name = entry.unwrap().file_name();
        let timed = ["manifest.json", "comparison.html"].iter().any(|t| name.to_string_lossy() == *t);
        if !timed {
            let bytes = |folder: &Path| std::fs::read(folder.join(&name)).unwrap();
            assert!(bytes(&one) == bytes(&two), "{name:?} differs between 1 and 2 threads");
            assert!(bytes(&two) == bytes(&again), "{name:?} differs between runs");
            seen += 1;
        }
    }
    assert!(seen >= 8, "{seen} files compared");
}

/// Units of held-out blocks say nothing about a cell's fold but their own.
#[test]
fn blocks_hold_out_whole_cells() {
    let (out, _keep) = run("build", "2", |p| {
        p.replace("split = \"outings\"", "split = \"blocks\"\nblock = \"15 km\"")
            .replace("details = false", "details = true")
    });
    let (folds, columns) = raster(&out.join("folds.tif"));
    let text = std::fs::read_to_string(out.join("held-out-units.csv")).unwrap();
    for line in text.lines().skip(1) {
        let f: Vec<&str> = line.split(',').collect();
        let (column, row): (usize, usize) = (f[1].parse().unwrap(), f[2].parse().unwrap());
        assert_eq!(folds[row * columns + column], f[3].parse::<f64>().unwrap());
    }
    assert_eq!(json(&out.join("effort.json"))["holdout"]["block_m"], 15_000.0);
}
