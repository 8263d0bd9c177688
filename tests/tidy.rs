//! House rules: imports go down the stairs, outside crates have owners, every file says what it is.

#![allow(clippy::disallowed_methods, reason = "reads the sources")]

use std::collections::BTreeMap;
use std::fs;
use std::path::{Path, PathBuf};

/// The rooms, from the ground up; `cli` belongs to the binary.
const ROOMS: [&str; 13] = [
    "units", "diag", "maths", "grid", "records", "proxies", "model", "check", "output", "gate", "plan",
    "study", "cli",
];

/// Outside crates and the rooms that may name them.
const OWNERS: [(&str, &[&str]); 24] = [
    ("gdal", &["gate"]),
    ("gdal_sys", &["gate"]),
    ("csv", &["gate", "cli"]),
    ("sha2", &["gate"]),
    ("flate2", &["gate"]),
    ("roxmltree", &["gate"]),
    ("zip", &["gate"]),
    ("geographiclib_rs", &["grid"]),
    ("kdtree", &["records"]),
    ("rstar", &["proxies"]),
    ("rand_chacha", &["maths"]),
    ("libm", &["maths", "units"]),
    ("statrs", &["maths"]),
    ("plotters", &["output"]),
    ("minijinja", &["output"]),
    ("png", &["output"]),
    ("strsim", &["plan"]),
    ("clap", &["cli"]),
    ("indicatif", &["cli"]),
    ("ctrlc", &["cli"]),
    ("encoding_rs", &["gate"]),
    ("memchr", &["gate"]),
    ("parquet", &["gate"]),
    ("hashbrown", &["records", "gate"]),
];

fn sources(folder: &Path, found: &mut Vec<PathBuf>) {
    let mut entries: Vec<PathBuf> = fs::read_dir(folder).unwrap().map(|e| e.unwrap().path()).collect();
    entries.sort();
    for path in entries {
        if path.is_dir() {
            sources(&path, found);
        } else if path.extension().is_some_and(|e| e == "rs") {
            found.push(path);
        }
    }
}

fn all() -> Vec<(String, String, String)> {
    let root = Path::new(env!("CARGO_MANIFEST_DIR")).join("src");
    let mut found = Vec::new();
    sources(&root, &mut found);
    found
        .into_iter()
        .map(|path| {
            let name = path.strip_prefix(&root).unwrap().to_string_lossy().into_owned();
            let room = name.split(['/', '.']).next().unwrap().to_owned();
            (name, room, fs::read_to_string(path).unwrap())
        })
        .collect()
}

/// Code without comments.
fn code(text: &str) -> String {
    text.lines().map(|l| l.split("//").next().unwrap_or("")).collect::<Vec<_>>().join("\n")
}

/// Names that follow a prefix such as `crate::`.
fn named<'a>(code: &'a str, prefix: &str) -> Vec<&'a str> {
    code.match_indices(prefix)
        .filter(|(at, _)| !code[..*at].ends_with(|c: char| c.is_alphanumeric() || c == '_' || c == ':'))
        .map(|(at, _)| {
            code[at + prefix.len()..].split(|c: char| !c.is_alphanumeric() && c != '_').next().unwrap()
        })
        .collect()
}

#[test]
fn imports_go_down_the_stairs() {
    let step: BTreeMap<&str, usize> = ROOMS.iter().enumerate().map(|(i, r)| (*r, i)).collect();
    for (name, room, text) in all() {
        let code = code(&text);
        let Some(own) = step.get(room.as_str()) else {
            assert!(["lib", "main"].contains(&room.as_str()), "{name}: `{room}` is no room");
            continue;
        };
        let prefix = if room == "cli" { "trodden::" } else { "crate::" };
        for other in named(&code, prefix) {
            if let Some(theirs) = step.get(other) {
                assert!(theirs <= own, "{name}: `{room}` is below `{other}` and may not import it");
            }
        }
        assert!(!code.contains("crate::{"), "{name}: name rooms one by one, so that this test can read them");
        let depth = name.matches('/').count() + usize::from(!name.ends_with("mod.rs")) - 1;
        let climbs = "super::".repeat(depth + 1);
        let in_tests = code.split("mod tests").next().unwrap_or("");
        assert!(!in_tests.contains(&climbs), "{name}: `{climbs}` leaves the room; say `crate::`");
    }
}

#[test]
fn outside_crates_have_owners() {
    for (name, room, text) in all() {
        let code = code(&text);
        for (outside, owners) in OWNERS {
            let used = !named(&code, &format!("use {outside}")).is_empty()
                || code.contains(&format!(" {outside}::"));
            assert!(!used || owners.contains(&room.as_str()), "{name}: `{outside}` belongs to {owners:?}");
        }
    }
}

#[test]
fn every_file_says_what_it_is_and_stays_short() {
    for (name, _, text) in all() {
        assert!(text.starts_with("//!"), "{name}: begin with `//!` and what the file is for");
        let before_tests = text.split("#[cfg(test)]").next().unwrap_or("").lines().count();
        assert!(before_tests <= 500, "{name}: {before_tests} lines before its tests; split it");
    }
    let main = fs::read_to_string(Path::new(env!("CARGO_MANIFEST_DIR")).join("src/main.rs")).unwrap();
    assert!(main.lines().count() <= 40, "main.rs: at most 40 lines");
}

#[test]
fn methods_name_their_formula_and_source() {
    let methods = [
        "check/auc.rs",
        "check/boyce.rs",
        "check/calibration.rs",
        "check/bootstrap.rs",
        "grid/ellipsoid.rs",
        "model/access.rs",
        "model/blend.rs",
        "model/density.rs",
        "model/precision.rs",
        "model/remainder.rs",
        "model/terms.rs",
        "proxies/distance.rs",
        "records/caps.rs",
        "records/piles.rs",
        "records/thin/search.rs",
        "records/thin/squares.rs",
        "records/thin/starts.rs",
    ];
    let texts: BTreeMap<String, String> = all().into_iter().map(|(name, _, text)| (name, text)).collect();
    for method in methods {
        assert!(texts[method].contains("# Source"), "{method}: name the source of its formula");
    }
}
