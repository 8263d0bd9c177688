//! Outputs that cannot be written, and runs that are stopped: earlier results stay as they were.

use std::fs;
use std::path::Path;
use std::process::{Child, Command, Stdio};
use std::thread::sleep;
use std::time::{Duration, Instant};

use super::common::{PROGRAM, Ran, World, raster, says};
use super::unchanged;

#[test]
fn a_folder_below_a_file() {
    let world = World::new();
    let before = world.files("");
    let ran = world.run(&["build", "plan.toml", "-o", "land.tif/out"]).ended(4);
    says(&ran.stderr, &["land.tif/out", "-o|folder"]);
    unchanged(&before, &world.files(""));
}

#[test]
fn a_file_in_place_of_the_folder() {
    let world = World::new();
    world.put("out", "a file");
    let ran = world.run(&["build", "plan.toml"]).ended(4);
    says(&ran.stderr, &["out", "-o|folder"]);
    assert_eq!(fs::read_to_string(world.path("out")).unwrap(), "a file");
}

#[test]
fn a_folder_where_an_output_should_be() {
    let world = World::new();
    world.put("out/effort.json", "an earlier result");
    world.put("out/effort.tif", "an earlier result");
    world.put("out/held-out.csv/notes.txt", "someone's own");
    let before = world.files("out");
    let ran = world.run(&["build", "plan.toml"]).ended(4);
    says(&ran.stderr, &["held-out.csv"]);
    unchanged(&before, &world.files("out"));
}

/// A mounted file system in memory, unmounted when dropped.
struct Mount<'a>(&'a Path);

impl<'a> Mount<'a> {
    /// `None` where this machine does not let us mount.
    fn new(folder: &'a Path, options: &str) -> Option<Self> {
        fs::create_dir_all(folder).expect("a folder");
        let mount = Command::new("mount").args(["-t", "tmpfs", "-o", options, "tmpfs"]).arg(folder).output();
        if mount.is_ok_and(|m| m.status.success()) {
            return Some(Self(folder));
        }
        println!("skipped: this machine does not let the test mount a file system");
        None
    }
}

impl Drop for Mount<'_> {
    fn drop(&mut self) {
        drop(Command::new("umount").arg(self.0).output());
    }
}

#[test]
fn a_folder_that_is_not_writable() {
    let world = World::new();
    let folder = world.path("shelf");
    let Some(_mount) = Mount::new(&folder, "ro,size=64k") else { return };
    for target in ["shelf", "shelf/new"] {
        let ran = world.run(&["build", "plan.toml", "-o", target]).ended(4);
        says(&ran.stderr, &[target, "-o|folder|permission"]);
    }
}

/// Asserts that the message is about an output the user knows, and says what may help.
#[track_caller]
fn full(said: &str, folder: &str) {
    says(said, &[folder, "space"]);
    assert!(!said.contains(".trodden-"), "names a file that is no more: {said}");
}

#[test]
fn a_disk_that_is_full_from_the_start() {
    let world = World::new();
    world.run(&["build", "plan.toml"]).ended(0);
    let pages: usize = world.files("out").values().map(|file| file.len().div_ceil(4096)).sum();
    let folder = world.path("shelf");
    for pages in [1, pages / 2, pages - 1] {
        let Some(_mount) = Mount::new(&folder, &format!("size={}k", 4 * pages)) else { return };
        let ran = world.run(&["build", "plan.toml", "-o", "shelf"]).ended(4);
        full(&ran.stderr, "shelf");
        assert!(world.files("shelf").is_empty(), "{:?}", world.files("shelf").keys());
    }
}

#[test]
fn a_disk_that_fills_while_earlier_results_are_replaced() {
    let world = World::new();
    world.run(&["build", "plan.toml"]).ended(0);
    let pages: usize = world.files("out").values().map(|file| file.len().div_ceil(4096)).sum();
    let folder = world.path("shelf");
    let Some(_mount) = Mount::new(&folder, &format!("size={}k", 4 * (pages + pages / 2))) else { return };
    world.run(&["build", "plan.toml", "-o", "shelf"]).ended(0);
    let before = world.files("shelf");
    let ran = world.run(&["build", "plan.toml", "-o", "shelf"]).ended(4);
    full(&ran.stderr, "shelf");
    unchanged(&before, &world.files("shelf"));
}

#[test]
fn a_quota_on_file_sizes() {
    let world = World::new();
    world.run(&["build", "plan.toml"]).ended(0);
    let before = world.files("out");
    let largest = before.values().map(Vec::len).max().expect("some files") / 1024;
    for blocks in [0, 1, largest / 2, largest] {
        let ran: Ran = Command::new("bash")
            .current_dir(world.path(""))
            .args(["-c", &format!("ulimit -f {blocks}; exec \"$0\" build plan.toml"), PROGRAM])
            .output()
            .expect("bash starts")
            .into();
        let ran = ran.ended(4);
        full(&ran.stderr, "out");
        unchanged(&before, &world.files("out"));
    }
}

/// A finer grid under the same plan, in `slow.toml`: seconds of work.
fn slow(world: &World) {
    let mut grid = world.lattice();
    (grid.columns, grid.rows, grid.cell) = (500, 375, (8.0, -8.0));
    raster::write(&world.path("fine.tif"), &grid, &grid.filled(1.0), None);
    world.put_records("many.tsv", &world.points(20_000));
    world.change(&[
        ("land.tif", "fine.tif"),
        ("records.tsv", "many.tsv"),
        ("\"400 m\"", "\"fit\""),
        ("folds = 3", "folds = 10"),
    ]);
    fs::rename(world.path("plan.toml"), world.path("slow.toml")).expect("a new name");
    world.change(&[]);
}

fn start(world: &World) -> Child {
    let mut command = world.command(&["build", "slow.toml"]);
    command.stdout(Stdio::piped()).stderr(Stdio::piped()).spawn().expect("the program starts")
}

/// Waits until the run is at work, and then until it writes a raster, at most so long.
fn until_it_writes(world: &World, child: &mut Child, longest: Duration) {
    let mut wait = |mark: &str, longest: Duration| {
        let begun = Instant::now();
        let there = || world.files("out").keys().any(|name| name.starts_with('.') && name.ends_with(mark));
        while begun.elapsed() < longest && !there() && child.try_wait().is_ok_and(|ended| ended.is_none()) {
            sleep(Duration::from_millis(1));
        }
    };
    wait("/", Duration::from_secs(60));
    wait(".tif", longest);
}

#[test]
fn killed_in_the_middle() {
    let world = World::new();
    slow(&world);
    world.run(&["build", "plan.toml"]).ended(0);
    let before = world.files("out");
    let mut after = Vec::new();
    for longest in [0, 200, 600, 60_000] {
        let mut child = start(&world);
        until_it_writes(&world, &mut child, Duration::from_millis(longest));
        child.kill().expect("it can be killed");
        assert!(!child.wait().expect("it ends").success(), "it had ended before it was killed");
        after.push(world.files("out"));
    }
    world.run(&["build", "slow.toml"]).ended(0);
    let finished = world.files("out");
    assert!(finished.keys().all(|name| !name.starts_with('.')), "{:?}", finished.keys());
    for (name, bytes) in after.iter().flatten().filter(|(name, _)| !name.starts_with('.')) {
        let timed = name == "manifest.json" || name == "report.html";
        let ends = [&b"}\n"[..], b"}", b"</html>\n", b"</html>"];
        let whole =
            if timed { ends.iter().any(|end| bytes.ends_with(end)) } else { *bytes == finished[name] };
        assert!(whole || *bytes == before[name], "{name} is neither the earlier nor the later one");
    }
    assert!(after.iter().all(|files| before.keys().all(|name| files.contains_key(name))));
}

/// Sends a signal once the run is under way and gives what it ended with.
fn stopped(world: &World, signal: &str, longest: u64) -> Ran {
    let mut child = start(world);
    until_it_writes(world, &mut child, Duration::from_millis(longest));
    let sent = Command::new("kill").args([&format!("-{signal}"), &child.id().to_string()]).status();
    assert!(sent.is_ok_and(|s| s.success()), "the run had ended before the signal");
    child.wait_with_output().expect("it ends").into()
}

#[test]
fn interrupted() {
    let world = World::new();
    slow(&world);
    // earlier than this the program is still being loaded and cannot answer
    for longest in [150, 300, 60_000] {
        let ran = stopped(&world, "INT", longest);
        assert_eq!(ran.code, Some(130), "{}", ran.stderr);
        assert_eq!(ran.stdout, "");
        assert!(!ran.stderr.contains("panicked"), "{}", ran.stderr);
        assert!(!world.path("out").exists(), "left behind: {:?}", world.files("out").keys());
    }
    world.run(&["build", "plan.toml"]).ended(0);
    let before = world.files("");
    for longest in [150, 300, 60_000] {
        assert_eq!(stopped(&world, "INT", longest).code, Some(130));
        unchanged(&before, &world.files(""));
    }
    let ran = stopped(&world, "TERM", 300);
    assert_ne!(ran.code, Some(0));
    unchanged(&before, &world.files(""));
}

#[test]
fn what_else_is_in_the_folder_stays() {
    let world = World::new();
    world.put("out/notes.txt", "someone's own");
    world.put("out/.hidden", "someone's own");
    world.put("out/more/notes.txt", "someone's own");
    world.run(&["build", "plan.toml"]).ended(0);
    let after = world.files("out");
    for name in ["notes.txt", ".hidden", "more/notes.txt"] {
        assert_eq!(after[name], b"someone's own");
    }
}
