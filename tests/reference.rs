//! Outside checks: results of the program against general-purpose libraries for Python.
//!
//! Each check is a script under `tests/reference/` that makes its input, runs the program and
//! compares. Where the libraries cannot be installed the checks say so and count as skipped.

#![allow(clippy::print_stdout, reason = "a test that cannot run here says so")]

use std::path::{Path, PathBuf};
use std::process::Command;
use std::sync::OnceLock;

/// The interpreter with the libraries; `None`, said aloud, where it cannot be had.
fn python() -> Option<&'static Path> {
    static PYTHON: OnceLock<Result<PathBuf, String>> = OnceLock::new();
    let root = Path::new(env!("CARGO_MANIFEST_DIR"));
    let made = PYTHON.get_or_init(|| {
        let ran = Command::new("bash").arg(root.join("tests/reference/venv.sh")).output();
        let ran = ran.map_err(|e| format!("no bash ({e})"))?;
        let said = String::from_utf8_lossy(&ran.stderr).trim().to_owned();
        match ran.status.code() {
            Some(0) => Ok(root.join("tests/.cache/venv/bin/python")),
            Some(69) => Err(said),
            Some(75) => Err(format!("the package registry cannot be reached: {said}")),
            _ => panic!("venv.sh failed: {said}"),
        }
    });
    made.as_deref().map_err(|why| println!("skipped: {why}")).ok()
}

/// Runs a script; what it prints is the evidence.
#[track_caller]
fn check(script: &str) {
    let Some(python) = python() else { return };
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/reference");
    let ran = Command::new(python)
        .arg("-B")
        .arg(folder.join(script))
        .env("TRODDEN", env!("CARGO_BIN_EXE_trodden"))
        .output()
        .expect("python starts");
    let (said, erred) = (String::from_utf8_lossy(&ran.stdout), String::from_utf8_lossy(&ran.stderr));
    println!("{said}");
    assert!(ran.status.success(), "{script}:\n{said}{erred}");
}

#[test]
fn density_of_a_published_pattern() {
    check("density.py");
}

#[test]
fn scores_of_known_surfaces() {
    check("scores.py");
}

#[test]
fn layout_of_the_raster() {
    check("geotiff.py");
}

#[test]
fn recovered_scales() {
    check("curves.py");
}

#[test]
fn population_before_and_after() {
    check("population.py");
}
