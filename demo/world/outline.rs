//! From a field to the polygons where it is positive (marching squares over cell centres), so that a
//! cell's centre is inside a polygon exactly where the field is positive.

use std::collections::BTreeMap;

use crate::frame::{COLUMNS, Field, Point, ROWS, centre};

/// A closed line; its last point is its first. Anticlockwise: land; clockwise: a hole.
pub type Ring = Vec<Point>;

/// An outer ring and its holes.
pub struct Polygon {
    /// The outer edge.
    pub outer: Ring,
    /// The holes, wholly inside.
    pub holes: Vec<Ring>,
}

/// The polygons where a field is positive, largest first. The field's outermost cells must not be.
pub fn polygons(field: &Field) -> Vec<Polygon> {
    let (mut outers, holes): (Vec<Ring>, Vec<Ring>) =
        rings(field).into_iter().partition(|ring| signed_area(ring) > 0.0);
    outers.sort_by(|a, b| signed_area(b).total_cmp(&signed_area(a)));
    let mut all: Vec<Polygon> =
        outers.into_iter().map(|outer| Polygon { outer, holes: Vec::new() }).collect();
    for hole in holes {
        // The smallest ring around a hole is the one it is cut from; the list runs from large to small.
        if let Some(owner) = all.iter_mut().rev().find(|polygon| contains(&polygon.outer, hole[0])) {
            owner.holes.push(hole);
        }
    }
    all
}

/// Links the crossings of all squares into rings with the positive side on the left.
fn rings(field: &Field) -> Vec<Ring> {
    let mut links: BTreeMap<(usize, usize), (usize, usize)> = BTreeMap::new();
    for row in 0..ROWS - 1 {
        for column in 0..COLUMNS - 1 {
            links.extend(square(field, row * COLUMNS + column));
        }
    }
    let mut found = Vec::new();
    while let Some((&start, _)) = links.first_key_value() {
        let mut ring = vec![crossing(field, start)];
        let mut edge = start;
        while let Some(next) = links.remove(&edge) {
            ring.push(crossing(field, next));
            edge = next;
        }
        found.push(ring);
    }
    found
}

/// The links within one square of four neighbouring centres, the first of them in the north-west. An
/// edge is named by its two cells, the smaller first.
fn square(field: &Field, north_west: usize) -> Vec<((usize, usize), (usize, usize))> {
    let corners = [north_west, north_west + 1, north_west + COLUMNS + 1, north_west + COLUMNS];
    let positive = |k: usize| field[corners[k % 4]] > 0.0;
    let edge = |k: usize| {
        let (a, b) = (corners[k % 4], corners[(k + 1) % 4]);
        (a.min(b), a.max(b))
    };
    let entering = (0..4).filter(|&k| !positive(k) && positive(k + 1));
    let link = |k: usize| {
        let last = (k + 1..k + 4).find(|&m| !positive(m + 1)).unwrap_or(k + 3);
        (edge(k), edge(last))
    };
    entering.map(link).collect()
}

/// Where the field crosses zero between two neighbouring centres.
fn crossing(field: &Field, (a, b): (usize, usize)) -> Point {
    let share = (field[a] / (field[a] - field[b])).clamp(0.02, 0.98);
    let (from, to) = (centre(a), centre(b));
    Point { x: from.x + share * (to.x - from.x), y: from.y + share * (to.y - from.y) }
}

fn signed_area(ring: &Ring) -> f64 {
    ring.windows(2).map(|pair| pair[0].x * pair[1].y - pair[1].x * pair[0].y).sum::<f64>() / 2.0
}

fn contains(ring: &Ring, place: Point) -> bool {
    let crossed = ring.windows(2).filter(|pair| {
        let (a, b) = (pair[0], pair[1]);
        (a.y > place.y) != (b.y > place.y) && place.x < a.x + (place.y - a.y) / (b.y - a.y) * (b.x - a.x)
    });
    crossed.count() % 2 == 1
}
