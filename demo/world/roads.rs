//! Roads: least-cost ways between neighbouring towns, tracks from there into the hills.

use std::cmp::Reverse;
use std::collections::{BTreeSet, BinaryHeap};

use crate::dice::Dice;
use crate::frame::{AROUND, CELLS, Field, Point, centre, neighbour};
use crate::land::Land;
use crate::noise::lot;
use crate::towns::Settlement;

/// What kind of road it is.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Class {
    /// Between the largest towns.
    Primary,
    /// Between neighbouring towns.
    Secondary,
    /// A dead end into the hills or to the shore.
    Track,
}

impl Class {
    /// The word for it in the file.
    pub fn word(self) -> &'static str {
        match self {
            Class::Primary => "primary",
            Class::Secondary => "secondary",
            Class::Track => "track",
        }
    }
}

/// A stretch of road.
pub struct Road {
    /// Its kind.
    pub class: Class,
    /// Its course.
    pub line: Vec<Point>,
}

/// Towns joined by primary roads: so many of the largest.
const PRIMARY_TOWNS: usize = 6;
/// Tracks to lay.
const TRACKS: usize = 48;

/// Lays all roads.
pub fn lay_roads(land: &Land, towns: &[Settlement]) -> Vec<Road> {
    let mut network = Network { land, used: BTreeSet::new(), on_road: vec![false; CELLS], roads: Vec::new() };
    for (a, b) in shortest_tree(&towns[..PRIMARY_TOWNS]) {
        network.join(Class::Primary, towns[a].cell, towns[b].cell);
    }
    for (a, b) in neighbours(towns) {
        network.join(Class::Secondary, towns[a].cell, towns[b].cell);
    }
    network.lay_tracks();
    network.roads
}

/// The least total length that links all towns (Prim 1957).
fn shortest_tree(towns: &[Settlement]) -> Vec<(usize, usize)> {
    let mut linked = vec![0];
    let mut links = Vec::new();
    while linked.len() < towns.len() {
        let open = (0..towns.len()).filter(|b| !linked.contains(b));
        let pairs = open.flat_map(|b| linked.iter().map(move |&a| (a, b)));
        let length = |&(a, b): &(usize, usize)| centre(towns[a].cell).distance(centre(towns[b].cell));
        let Some(best) = pairs.min_by(|p, q| length(p).total_cmp(&length(q))) else { break };
        linked.push(best.1);
        links.push(best);
    }
    links
}

/// Pairs of towns with no third one in the circle between them (Gabriel and Sokal 1969).
fn neighbours(towns: &[Settlement]) -> Vec<(usize, usize)> {
    let place = |k: usize| centre(towns[k].cell);
    let free = |a: usize, b: usize| {
        let (p, q) = (place(a), place(b));
        let middle = Point { x: (p.x + q.x) / 2.0, y: (p.y + q.y) / 2.0 };
        let radius = p.distance(q) / 2.0;
        (0..towns.len()).all(|k| k == a || k == b || place(k).distance(middle) > radius)
    };
    let pairs = (0..towns.len()).flat_map(|a| (a + 1..towns.len()).map(move |b| (a, b)));
    pairs.filter(|&(a, b)| free(a, b) && place(a).distance(place(b)) < 55_000.0).collect()
}

struct Network<'a> {
    land: &'a Land,
    used: BTreeSet<(usize, usize)>,
    on_road: Vec<bool>,
    roads: Vec<Road>,
}

impl Network<'_> {
    /// Builds what is missing of the cheapest way between two cells.
    fn join(&mut self, class: Class, from: usize, to: usize) {
        let Some(path) = self.cheapest(from, |cell| cell == to) else { return };
        self.build(class, &path);
    }

    /// Lays tracks from cells without a road near them to the nearest road.
    fn lay_tracks(&mut self) {
        let mut dice = Dice::new(3);
        let sites: Vec<usize> =
            self.land.cells().into_iter().filter(|&cell| self.land.mainland[cell]).collect();
        let mut laid = 0;
        while laid < TRACKS {
            let end = *dice.pick(&sites);
            let far = self.to_road(end);
            let wanted = dice.between(0.0, 1.0) < 0.25 + self.land.height[end] / 600.0;
            if !(2_500.0..13_000.0).contains(&far) || !wanted {
                continue;
            }
            if let Some(path) = self.cheapest(end, |cell| self.on_road[cell]) {
                self.build(Class::Track, &path);
            }
            laid += 1;
        }
    }

    fn to_road(&self, cell: usize) -> f64 {
        let roads = (0..CELLS).filter(|&other| self.on_road[other]);
        roads.map(|other| centre(cell).distance(centre(other))).fold(f64::INFINITY, f64::min)
    }

    /// The cheapest way over land from a cell to the first that is a goal (Dijkstra 1959).
    fn cheapest(&self, from: usize, goal: impl Fn(usize) -> bool) -> Option<Vec<usize>> {
        let mut best = vec![u64::MAX; CELLS];
        let mut previous = vec![from; CELLS];
        let mut open = BinaryHeap::from([Reverse((0, from))]);
        best[from] = 0;
        while let Some(Reverse((cost, cell))) = open.pop() {
            if goal(cell) {
                return Some(walk_back(&previous, from, cell));
            }
            if cost > best[cell] {
                continue;
            }
            for next in AROUND.iter().filter_map(|&(dx, dy)| neighbour(cell, dx, dy)) {
                let total = cost + self.cost(cell, next);
                if self.land.is_land(next) && total < best[next] {
                    best[next] = total;
                    previous[next] = cell;
                    open.push(Reverse((total, next)));
                }
            }
        }
        None
    }

    /// Cost of a step, in metres of level road: slopes cost more, roads that are there cost less.
    fn cost(&self, a: usize, b: usize) -> u64 {
        let length = centre(a).distance(centre(b));
        let slope = (self.land.height[a] - self.land.height[b]).abs() / length;
        let ground = 0.6 + 1.1 * lot(77, a.min(b) as i64, a.max(b) as i64);
        let road = if self.used.contains(&(a.min(b), a.max(b))) { 0.35 } else { 1.0 };
        (length * (1.0 + 9.0 * slope) * ground * road).round() as u64
    }

    /// Adds the parts of a path that are no road yet.
    fn build(&mut self, class: Class, path: &[usize]) {
        let mut run = Vec::new();
        for step in path.windows(2) {
            let fresh = self.used.insert((step[0].min(step[1]), step[0].max(step[1])));
            if fresh {
                if run.is_empty() {
                    run.push(step[0]);
                }
                run.push(step[1]);
            } else {
                self.finish(class, &mut run);
            }
        }
        self.finish(class, &mut run);
        for &cell in path {
            self.on_road[cell] = true;
        }
    }

    fn finish(&mut self, class: Class, run: &mut Vec<usize>) {
        if run.len() > 1 {
            let line = round_corners(&run.iter().map(|&cell| node(cell)).collect::<Vec<_>>());
            self.roads.push(Road { class, line });
        }
        run.clear();
    }
}

fn walk_back(previous: &[usize], from: usize, to: usize) -> Vec<usize> {
    let mut path = vec![to];
    let mut cell = to;
    while cell != from {
        cell = previous[cell];
        path.push(cell);
    }
    path
}

/// Where roads through a cell meet: off its centre, always the same place.
pub fn node(cell: usize) -> Point {
    let (a, b) = (lot(78, cell as i64, 0), lot(78, cell as i64, 1));
    centre(cell).shifted(300.0 * (a - 0.5), 300.0 * (b - 0.5))
}

/// Cuts the corners of a line once (Chaikin 1974), its ends kept.
fn round_corners(line: &[Point]) -> Vec<Point> {
    let between = |a: Point, b: Point, share: f64| a.shifted(share * (b.x - a.x), share * (b.y - a.y));
    let mut smooth = vec![line[0]];
    for pair in line.windows(2) {
        smooth.push(between(pair[0], pair[1], 0.25));
        smooth.push(between(pair[0], pair[1], 0.75));
    }
    smooth.push(line[line.len() - 1]);
    smooth
}

/// Metres from each cell of `cells` to the nearest of some roads; infinite elsewhere.
pub fn distance_to(roads: &[Road], wanted: impl Fn(Class) -> bool, cells: &[usize]) -> Field {
    let mut metres = vec![f64::INFINITY; CELLS];
    for road in roads.iter().filter(|road| wanted(road.class)) {
        let span = |value: fn(&Point) -> f64| {
            let values = road.line.iter().map(value);
            values.fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), v| (low.min(v), high.max(v)))
        };
        let (x, y) = (span(|p| p.x), span(|p| p.y));
        for &cell in cells {
            let place = centre(cell);
            let dx = (x.0 - place.x).max(place.x - x.1).max(0.0);
            let dy = (y.0 - place.y).max(place.y - y.1).max(0.0);
            if dx.max(dy) < metres[cell] {
                let near = road.line.windows(2).map(|pair| to_segment(place, pair[0], pair[1]));
                metres[cell] = near.fold(metres[cell], f64::min);
            }
        }
    }
    metres
}

fn to_segment(place: Point, a: Point, b: Point) -> f64 {
    let (dx, dy) = (b.x - a.x, b.y - a.y);
    let length = dx * dx + dy * dy;
    let along = if length > 0.0 { ((place.x - a.x) * dx + (place.y - a.y) * dy) / length } else { 0.0 };
    let share = along.clamp(0.0, 1.0);
    place.distance(a.shifted(share * dx, share * dy))
}
