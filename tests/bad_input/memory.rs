//! Work that memory would not do is refused before it starts.

use std::time::{Duration, Instant};

use super::common::{World, polygon};

/// The world laid over a polygon with cells of this size.
fn with_cell(cell: &str) -> World {
    let world = World::new();
    let ((w, n), (e, s)) = ((500_000.0, 5_000_000.0), (504_000.0, 4_997_000.0));
    world.put("region.geojson", &polygon(32632, &[(w, n), (e, n), (e, s), (w, s), (w, n)]));
    let to = format!("region = \"region.geojson\"\ncrs = \"EPSG:32632\"\ncell = \"{cell}\"");
    world.change(&[("like = \"land.tif\"", &to)]);
    world
}

#[test]
fn a_grid_beyond_all_memory() {
    for cell in ["0.01 m", "1 m"] {
        let world = with_cell(cell);
        let begun = Instant::now();
        for command in ["build", "check"] {
            let ran = world.run(&[command, "plan.toml", "--memory", "64 MiB"]);
            let code = ran.code.expect("no signal");
            assert!(code == 2 || code == 3, "{command} ended with {code}: {}", ran.stderr);
            super::says(&format!("{}{}", ran.stderr, ran.stdout), &["cell|grid", "memory|large"]);
        }
        assert!(begun.elapsed() < Duration::from_secs(10), "refused only after {:?}", begun.elapsed());
        assert!(world.files("out").is_empty());
    }
}

#[test]
fn check_says_how_much_a_build_needs() {
    let world = with_cell("20 m");
    let checked = world.run(&["check", "plan.toml", "--json"]).ended(0).json();
    let needed = checked["memory_bytes"].as_u64().expect("a number of bytes");
    let limit = |bytes: u64| format!("{} MiB", bytes / (1 << 20));
    let short = limit(needed / 2);
    assert!(needed > 2 << 20, "{needed} bytes for 30,000 cells");
    assert_ne!(world.run(&["check", "plan.toml", "--memory", &short]).code, Some(0));
    assert_ne!(world.run(&["build", "plan.toml", "--memory", &short]).code, Some(0));
    assert!(world.files("out").is_empty());
    world.run(&["build", "plan.toml", "--memory", &limit(needed * 2)]).ended(0);
}

#[test]
fn sizes_need_a_unit() {
    let world = World::new();
    for size in ["64", "64 furlongs", "-1 GiB", "much"] {
        let ran = world.run(&["build", "plan.toml", &format!("--memory={size}")]).ended(2);
        super::says(&ran.stderr, &["memory", "gib|mib"]);
    }
}
