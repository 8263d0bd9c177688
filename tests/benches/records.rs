//! Reading, screening and counting the visits of 5,000,000 rows, beside a table library doing the same.
//! Prints seconds (the best of three), peak memory and their ratios, and what either does with bad rows.
//!
//! Run with `cargo bench --bench records`. Needs Linux for the peak memory (`/proc`); the rows (about
//! 600 MB, all made up) and the library (`requirements.txt`, from PyPI) are kept in `tests/.cache`.

#![allow(clippy::disallowed_methods, reason = "a bench writes its inputs where it likes")]

use std::fmt::Write as _;
use std::fs::File;
use std::io::{BufWriter, Write as _};
use std::path::{Path, PathBuf};
use std::process::Command;
use std::time::Instant;

use serde_json::{Value, json};
use trodden::diag::{Outcome, Silent};
use trodden::gate::Files;
use trodden::maths::random::Stream;
use trodden::records::{Detail, Rule, Sink};
use trodden::study::{Needs, Notes, gather};
use trodden::units::{Bytes, Seed};

const ROWS: usize = 5_000_000;
const RUNS: usize = 3;
/// West and north end in a digit that no coordinate has, so that none lies between two cells.
const WEST: f64 = 9.996_375_1;
const NORTH: f64 = 60.003_624_9;
const CELL: f64 = 0.01;
const COLUMNS: usize = 1200;
const LINES: usize = 800;

const PLAN: &str = r#"
title = "Bench"
[grid]
like = "template.tif"
[records]
file = "FILE"
dates = "2005-01-01/2024-12-31"
[[candidate]]
name = "recorded"
density = { bandwidth = "fit" }
"#;

fn main() {
    let arguments: Vec<String> = std::env::args().collect();
    if let Some(at) = arguments.iter().position(|a| a == "--ours") {
        return say(&ours(Path::new(&arguments[at + 1])).to_string());
    }
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/.cache/bench");
    std::fs::create_dir_all(&folder).expect("a folder");
    raster(&folder.join("template.tif"));
    let (many, bad) = (folder.join("records.tsv"), folder.join("bad.tsv"));
    if !many.exists() {
        made(&many, |out| rows(out, ROWS));
    }
    made(&bad, bad_rows);
    let python = python();
    compare(&many, python.as_deref());
    say(&format!("1,000 rows, one of 11 fields, one of 13: ours {}", run_ours(&bad)));
    if let Some(python) = python {
        say(&format!("  the table library {}", run_theirs(&python, &bad)));
    }
}

fn compare(file: &Path, python: Option<&Path>) {
    let ours = best(|| run_ours(file));
    say(&told("ours", &ours));
    let Some(python) = python else {
        return say("the table library cannot be installed: ours alone");
    };
    let theirs = best(|| run_theirs(python, file));
    say(&told("the table library", &theirs));
    for what in ["kept", "visits"] {
        assert_eq!(ours[what], theirs[what], "{what}");
    }
    let ratio =
        |what: &str| theirs[what].as_f64().expect("a number") / ours[what].as_f64().expect("a number");
    say(&format!("theirs ÷ ours: time {:.2}, memory {:.2}", ratio("seconds"), ratio("peak_kib")));
}

fn told(name: &str, run: &Value) -> String {
    let number = |what: &str| run[what].as_f64().unwrap_or(f64::NAN);
    format!(
        "{name:18} {:6.2} s, peak {:5.0} MiB; {} records kept, {} visits",
        number("seconds"),
        number("peak_kib") / 1024.0,
        run["kept"],
        run["visits"]
    )
}

fn best(run: impl Fn() -> Value) -> Value {
    let runs = (0..RUNS).map(|_| run());
    let seconds = |v: &Value| v["seconds"].as_f64().unwrap_or(f64::INFINITY);
    runs.min_by(|a, b| seconds(a).total_cmp(&seconds(b))).expect("a run")
}

fn run_ours(file: &Path) -> Value {
    json_of(Command::new(std::env::current_exe().expect("this bench")).arg("--ours").arg(file))
}

fn run_theirs(python: &Path, file: &Path) -> Value {
    let script = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/benches/records.py");
    let grid = [WEST, NORTH, CELL, COLUMNS as f64, LINES as f64].map(|v| v.to_string());
    json_of(Command::new(python).arg(script).arg(file).args(grid))
}

fn json_of(command: &mut Command) -> Value {
    let output = command.output().expect("it starts");
    let shown = String::from_utf8_lossy(&output.stderr);
    serde_json::from_slice(&output.stdout).unwrap_or_else(|e| panic!("{e}: {shown}"))
}

/// Gathers the records of a file in this process.
fn ours(file: &Path) -> Value {
    let name = file.file_name().expect("a file").to_string_lossy();
    let plan = trodden::plan::read(&PLAN.replace("FILE", &name), "plan.toml").expect("a plan");
    let files = Files::new(file.parent().expect("a folder"));
    let needs = Needs { sources: &files, observer: &Silent, memory: Bytes(4 << 30), kept: false };
    let begun = Instant::now();
    let gathered = gather(&plan, &needs, &mut Nowhere, &mut Notes::default()).expect("records");
    let seconds = begun.elapsed().as_secs_f64();
    let ledger = &gathered.records.ledger;
    json!({
        "kept": ledger.kept(),
        "visits": gathered.records.visits.count,
        "unreadable": ledger.dropped(Rule::UnreadableRow),
        "seconds": seconds,
        "peak_kib": peak_kib(),
    })
}

struct Nowhere;

impl Sink for Nowhere {
    fn dropped(&mut self, _: &str, _: u64, _: Rule, _: &Detail) -> Outcome<()> {
        Ok(())
    }
}

/// The library's Python, made ready; `None` where it cannot be.
fn python() -> Option<PathBuf> {
    let root = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests");
    let folder = root.join(".cache/venv-bench");
    let script = root.join("reference/venv.sh");
    let wanted = root.join("benches/requirements.txt");
    let made = Command::new("bash").arg(script).arg(&folder).arg(wanted).status();
    made.is_ok_and(|s| s.success()).then(|| folder.join("bin/python"))
}

/// An outing: who went where, when, for which data set.
struct Outing {
    observer: usize,
    day: (usize, usize, usize),
    place: (f64, f64),
    dataset: usize,
}

impl Outing {
    fn new(s: &mut Stream) -> Self {
        let skewed = |s: &mut Stream, n: usize| ((s.unit() * s.unit() * s.unit()) * n as f64) as usize;
        let spread = |s: &mut Stream, side: f64| (0.5 + 0.98 * (s.unit() - 0.5) * s.unit().sqrt()) * side;
        Self {
            observer: skewed(s, 6000),
            day: (2002 + s.below(23), 1 + s.below(12), 1 + s.below(28)),
            place: (WEST + spread(s, COLUMNS as f64 * CELL), NORTH - spread(s, LINES as f64 * CELL)),
            dataset: skewed(s, 40),
        }
    }
}

const HEADER: &str = "occurrenceID\tdatasetKey\tdatasetName\tbasisOfRecord\toccurrenceStatus\tscientificName\t\
                      decimalLatitude\tdecimalLongitude\tcoordinateUncertaintyInMeters\teventDate\trecordedBy\t\
                      individualCount\n";

/// Rows of outings that are told side by side, as a download mixes them.
fn rows(out: &mut dyn std::io::Write, count: usize) {
    let mut s = Stream::new(Seed(1), "bench", 0);
    let names: Vec<String> = (0..6000).map(|_| person(&mut s)).collect();
    let taxa: Vec<String> =
        (0..900).map(|_| format!("{} {}", word(&mut s, 3), word(&mut s, 4).to_lowercase())).collect();
    let mut pool: Vec<Outing> = (0..20_000).map(|_| Outing::new(&mut s)).collect();
    out.write_all(HEADER.as_bytes()).expect("a header");
    let mut line = String::new();
    for n in 0..count {
        let at = s.below(pool.len());
        if s.below(100) < 26 {
            pool[at] = Outing::new(&mut s);
        }
        line.clear();
        row(&mut line, n, &pool[at], (&names, &taxa), &mut s);
        out.write_all(line.as_bytes()).expect("a row");
    }
}

fn row(out: &mut String, n: usize, outing: &Outing, (names, taxa): (&[String], &[String]), s: &mut Stream) {
    let absent = s.below(100) == 0;
    let (year, month, day) = outing.day;
    let time = if s.below(20) == 0 { "T08:30:00" } else { "" };
    let date = if s.below(200) == 0 { String::new() } else { format!("{year}-{month:02}-{day:02}{time}") };
    write!(
        out,
        "{}\td-{:04}\t{}\t{}\t{}\t{}\t",
        4_000_000_000_u64 + n as u64 * 7,
        outing.dataset * 37,
        ["Walks of the north", "Garden watch", "Old cabinets, digitised", "Field days"][outing.dataset % 4],
        if s.below(10) == 0 { "PRESERVED_SPECIMEN" } else { "HUMAN_OBSERVATION" },
        if absent { "ABSENT" } else { "PRESENT" },
        taxa[s.below(taxa.len())]
    )
    .expect("text");
    place(out, outing, s);
    let radius = ["", "10", "25", "100", "250.5", "1000"][s.below(6)];
    let individuals = ["", "1", "1", "2", "10", "3"][s.below(6)];
    let individuals = if s.below(500) == 0 { "0" } else { individuals };
    writeln!(out, "\t{radius}\t{date}\t{}\t{individuals}", names[outing.observer]).expect("text");
}

fn place(out: &mut String, outing: &Outing, s: &mut Stream) {
    let (mut x, mut y) = outing.place;
    if s.below(3) == 0 {
        (x, y) = (x + (s.unit() - 0.5) * 0.004, y + (s.unit() - 0.5) * 0.004);
    }
    match s.below(200) {
        0 | 1 => out.push('\t'),
        2 => out.push_str("0\t0"),
        3 => out.push_str("0.0\t0.0"),
        4 => write!(out, "{:.4}\t{x:.4}", y + 97.0).expect("text"),
        5..10 => write!(out, "{y:.5}\t{:.5}", x + 15.0).expect("text"),
        10..20 => write!(out, "{y:.2}\t{x:.2}").expect("text"),
        20..50 => write!(out, "{y:.4}\t{x:.4}").expect("text"),
        50..80 => write!(out, "{y:.6}\t{x:.6}").expect("text"),
        _ => write!(out, "{y:.5}\t{x:.5}").expect("text"),
    }
}

/// An invented word with a capital.
fn word(s: &mut Stream, syllables: usize) -> String {
    const PARTS: [&str; 16] = [
        "bra", "skel", "vo", "ri", "tun", "a", "mel", "øs", "qua", "dir", "po", "nes", "gla", "zu", "hem",
        "fi",
    ];
    let text: String = (0..syllables).map(|_| PARTS[s.below(PARTS.len())]).collect();
    let mut letters = text.chars();
    letters.next().map_or_else(String::new, |c| c.to_uppercase().chain(letters).collect())
}

fn person(s: &mut Stream) -> String {
    format!("{} {}", word(s, 2), word(s, 3))
}

/// A few rows, one of which lacks its last field, and one of which has one more than it should.
fn bad_rows(out: &mut dyn std::io::Write) {
    let mut text = Vec::new();
    rows(&mut text, 1000);
    let text = String::from_utf8(text).expect("text");
    for (n, line) in text.lines().enumerate() {
        let line = match n {
            300 => line.rsplit_once('\t').expect("fields").0.to_owned(),
            600 => line.replacen('\t', "\tmore\t", 1),
            _ => line.to_owned(),
        };
        writeln!(out, "{line}").expect("a row");
    }
}

/// Writes a file beside its place, then puts it there.
fn made(path: &Path, write: impl Fn(&mut dyn std::io::Write)) {
    let half = path.with_extension("half");
    let mut out = BufWriter::new(File::create(&half).expect("a file"));
    write(&mut out);
    out.flush().expect("all written");
    std::fs::rename(half, path).expect("renamed");
}

fn raster(path: &Path) {
    let driver = gdal::DriverManager::get_driver_by_name("GTiff").expect("a driver");
    let mut dataset = driver.create_with_band_type::<u8, _>(path, COLUMNS, LINES, 1).expect("a raster");
    dataset.set_geo_transform(&[WEST, CELL, 0.0, NORTH, 0.0, -CELL]).expect("a transform");
    dataset.set_spatial_ref(&gdal::spatial_ref::SpatialRef::from_epsg(4326).expect("a CRS")).expect("a CRS");
    let mut ones = gdal::raster::Buffer::new((COLUMNS, LINES), vec![1_u8; COLUMNS * LINES]);
    dataset.rasterband(1).expect("a band").write((0, 0), (COLUMNS, LINES), &mut ones).expect("values");
}

fn peak_kib() -> u64 {
    let status = std::fs::read_to_string("/proc/self/status").unwrap_or_default();
    let line = status.lines().find_map(|l| l.strip_prefix("VmHWM:"));
    line.and_then(|l| l.split_whitespace().next()?.parse().ok()).unwrap_or(0)
}

fn say(text: &str) {
    std::io::stdout().write_all(format!("{text}\n").as_bytes()).expect("stdout");
}
