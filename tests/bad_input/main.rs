//! What bad input gets: the exit code, words that name the file, the fault and the cure, and
//! earlier outputs as they were.

#![allow(clippy::print_stdout, reason = "a test that cannot run here says so")]

#[path = "../common/mod.rs"]
mod common;

mod files;
mod grids;
mod layers;
mod memory;
mod outputs;
mod packed;
mod plans;
mod records;

use std::collections::BTreeMap;

use common::{World, says};

/// Asserts that `build` refuses the plan with this code and these words and leaves every file as it
/// was, and that `check` comes to the same end and says as much in its JSON.
#[track_caller]
fn refused(world: &World, code: i32, words: &[&str]) {
    let said = refused_by_build(world, code, words);
    let checked = world.run(&["check", "plan.toml", "--json"]).ended(code);
    let found = checked.json();
    let problems = found["problems"].as_array().expect("a list of problems");
    assert!(!problems.is_empty(), "check says nothing where build says {said}");
    for problem in problems {
        for field in ["rule", "place", "text", "cure"] {
            assert!(problem[field].as_str().is_some_and(|t| !t.is_empty()), "no `{field}`: {problem}");
        }
    }
    says(&found["problems"].to_string().replace("\\\"", "\"").replace("\\n", " "), words);
}

/// The same for faults that only the whole data shows, which a look at a sample may miss.
#[track_caller]
fn refused_by_build(world: &World, code: i32, words: &[&str]) -> String {
    world.put("out/effort.tif", "an earlier result");
    world.put("out/notes.txt", "someone's own");
    let before = world.files("");
    let built = world.run(&["build", "plan.toml"]).ended(code);
    says(&built.stderr, words);
    assert_eq!(built.stdout, "", "a refusal writes nothing on stdout");
    assert!(!built.stderr.contains('\u{1b}'), "colour without a terminal: {}", built.stderr);
    assert!(!built.stderr.contains("panicked"), "{}", built.stderr);
    unchanged(&before, &world.files(""));
    built.stderr
}

/// Asserts that a build reads so many rows, keeps so many and drops the others by these rules, and lists
/// each of them; and that `check` is content. What the build found.
#[track_caller]
fn counted(world: &World, read: u64, kept: u64, dropped: &[(&str, u64)]) -> serde_json::Value {
    world.run(&["check", "plan.toml"]).ended(0);
    let found = world.run(&["build", "plan.toml", "--json"]).ended(0).json();
    let records = &found["records"];
    let by_rule: BTreeMap<&str, u64> = records["dropped"]
        .as_object()
        .expect("the rules")
        .iter()
        .map(|(rule, n)| (rule.as_str(), n.as_u64().expect("a count")))
        .filter(|(_, n)| *n > 0)
        .collect();
    assert_eq!(by_rule, dropped.iter().copied().collect(), "{records}");
    assert_eq!((records["read"].as_u64(), records["kept"].as_u64()), (Some(read), Some(kept)), "{records}");
    assert_eq!(read, kept + by_rule.values().sum::<u64>());
    let mut listed: BTreeMap<String, u64> = BTreeMap::new();
    let mut table = csv::Reader::from_path(world.path("out/dropped.csv")).expect("the dropped rows");
    for row in table.records() {
        *listed.entry(row.expect("a row")[2].to_owned()).or_insert(0) += 1;
    }
    let listed: BTreeMap<&str, u64> = listed.iter().map(|(rule, n)| (rule.as_str(), *n)).collect();
    assert_eq!(listed, by_rule);
    found
}

/// Asserts that two listings hold the same files with the same bytes.
#[track_caller]
fn unchanged(before: &BTreeMap<String, Vec<u8>>, after: &BTreeMap<String, Vec<u8>>) {
    let names = |files: &BTreeMap<String, Vec<u8>>| files.keys().cloned().collect::<Vec<_>>();
    assert_eq!(names(before), names(after), "files came or went");
    for (name, bytes) in before {
        assert!(after[name] == *bytes, "{name} was changed");
    }
}

#[test]
fn the_small_world_itself_is_fine() {
    let world = World::new();
    let built = world.run(&["build", "plan.toml"]).ended(0);
    assert!(!built.stdout.is_empty());
    world.run(&["check", "plan.toml"]).ended(0);
    let quiet = world.run(&["build", "plan.toml", "--quiet"]).ended(0);
    assert_eq!(quiet.stderr, "");
    let names: Vec<String> = world.files("out").into_keys().collect();
    let due = ["dropped.csv", "effort.json", "effort.tif", "held-out.csv", "manifest.json", "report.html"];
    assert_eq!(names, due);
}
