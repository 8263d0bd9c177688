//! Thinning 1,000,000 places at 10 km, beside one pass through them with a k-d tree of the kept ones.
//! Prints seconds, places kept and the ratios of both; peak memory of all at the end.
//!
//! Run with `cargo bench --bench thin`. Needs Linux for the peak memory (`/proc`).

#![allow(clippy::disallowed_methods, reason = "a bench reads what it likes")]

use std::io::Write as _;
use std::time::Instant;

use kdtree::KdTree;
use kdtree::distance::squared_euclidean;
use trodden::grid::geocentric;
use trodden::maths::random::Stream;
use trodden::records::{Ground, thin_by_distance, thin_by_square};
use trodden::units::{Metres, Seed};

const PLACES: usize = 1_000_000;
const EXTENT: f64 = 1_500_000.0;
const TRIES: usize = 4;
const PLANE: Ground = Ground::Plane { metres_per_unit: 1.0 };

fn main() {
    let mut lines =
        vec![format!("{PLACES} places, {TRIES} tries: seconds, kept; one pass: seconds, kept; ratios")];
    let sets = [
        ("uniform", uniform(), PLANE, 10_000.0),
        ("clusters of 10 km", clusters(10_000.0), PLANE, 10_000.0),
        ("clusters of 2 km", clusters(2_000.0), PLANE, 10_000.0),
        ("clusters, globe", on_globe(clusters(10_000.0)), Ground::Globe, 10_000.0),
        ("clusters, 1 km", clusters(10_000.0), PLANE, 1_000.0),
        ("clusters, 10 m", clusters(10_000.0), PLANE, 10.0),
        ("clusters, globe, 60 km", on_globe(clusters(10_000.0)), Ground::Globe, 60_000.0),
        (
            "within 12 km",
            clusters(10_000.0).iter().map(|p| (p.0 / 120.0, p.1 / 120.0)).collect(),
            PLANE,
            10_000.0,
        ),
        ("all the same", vec![(5.0, 5.0); PLACES], PLANE, 10_000.0),
    ];
    let only = std::env::args().nth(1).filter(|a| !a.starts_with('-'));
    for (name, places, ground, distance) in &sets {
        if only.as_ref().is_none_or(|o| name.starts_with(o.as_str())) {
            lines.push(compared(name, places, *ground, *distance));
        }
    }
    let begun = Instant::now();
    let squares = thin_by_square(&sets[3].1, Ground::Globe, metres(10_000.0), 1, Seed(1));
    let seconds = begun.elapsed().as_secs_f64();
    lines.push(format!("one for each square of 10 km: {seconds:.2} s, {}", squares.kept.len()));
    lines.push(format!("peak {:.0} MiB", peak_kib() as f64 / 1024.0));
    std::io::stdout().write_all((lines.join("\n") + "\n").as_bytes()).expect("stdout");
}

fn metres(value: f64) -> Metres {
    Metres::new(value).expect("a length")
}

fn compared(name: &str, places: &[(f64, f64)], ground: Ground, distance: f64) -> String {
    let begun = Instant::now();
    let thinned = thin_by_distance(places, ground, metres(distance), TRIES, Seed(1));
    let seconds = begun.elapsed().as_secs_f64();
    let begun = Instant::now();
    let plain = one_pass(places, ground, distance);
    let plain_seconds = begun.elapsed().as_secs_f64();
    let kept = thinned.kept.len();
    format!(
        "  {name:24} {seconds:6.2} s {kept:7}; {plain_seconds:6.2} s {plain:7}; time × {:.2}, kept × {:.3}",
        seconds / plain_seconds,
        kept as f64 / plain as f64
    )
}

/// How many places are kept when each is taken that no earlier kept one is too near to.
fn one_pass(places: &[(f64, f64)], ground: Ground, distance: f64) -> usize {
    let mut tree = KdTree::new(3);
    for place in places {
        let point = match ground {
            Ground::Globe => geocentric(place.0, place.1),
            Ground::Plane { .. } => [place.0, place.1, 0.0],
        };
        let near = tree.nearest(&point, 1, &squared_euclidean).expect("places are finite");
        if near.first().is_none_or(|(square, _)| *square >= distance * distance) {
            tree.add(point, ()).expect("places are finite");
        }
    }
    tree.size()
}

fn uniform() -> Vec<(f64, f64)> {
    let mut stream = Stream::new(Seed(1), "bench", 0);
    (0..PLACES).map(|_| (stream.unit() * EXTENT, stream.unit() * EXTENT)).collect()
}

/// Places around 2,000 middles, spread to each side as the sum of uniform numbers is.
fn clusters(spread: f64) -> Vec<(f64, f64)> {
    let mut stream = Stream::new(Seed(2), "bench", 0);
    let middles: Vec<(f64, f64)> =
        (0..2000).map(|_| (stream.unit() * EXTENT, stream.unit() * EXTENT)).collect();
    let bell = |s: &mut Stream| ((0..12).map(|_| s.unit()).sum::<f64>() - 6.0) * spread;
    (0..PLACES)
        .map(|_| {
            let middle = middles[stream.below(middles.len())];
            (middle.0 + bell(&mut stream), middle.1 + bell(&mut stream))
        })
        .collect()
}

/// About the same places around 45° north.
fn on_globe(places: Vec<(f64, f64)>) -> Vec<(f64, f64)> {
    places.into_iter().map(|(x, y)| (x / 78_700.0, 38.0 + y / 111_100.0)).collect()
}

fn peak_kib() -> u64 {
    let status = std::fs::read_to_string("/proc/self/status").unwrap_or_default();
    let line = status.lines().find_map(|l| l.strip_prefix("VmHWM:"));
    line.and_then(|l| l.split_whitespace().next()?.parse().ok()).unwrap_or(0)
}
