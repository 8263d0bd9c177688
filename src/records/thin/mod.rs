//! Spatial thinning: of many places, a choice of which no two are closer than a distance, as large as
//! can be found; or at most so many for each square of an equal-area grid.
//!
//! Pure: the same places, rule, tries and seed give the same choice at any number of threads.

mod cells;
mod closest;
mod conflicts;
mod ground;
mod search;
mod spots;
mod squares;
mod starts;

use rayon::prelude::*;

use crate::maths::random::Stream;
use crate::units::{Metres, Seed};

use cells::Cells;
use closest::closest;
use conflicts::Conflicts;
use ground::Space;
use search::Search;

pub use ground::Ground;
pub use spots::{Spot, SpotList, Spotter};
pub use squares::thin_by_square;

/// Places that all tries together look at before a search ends, where nothing else ends it sooner.
const EFFORT: u64 = 500_000_000;
/// Changes without gain, for each kept place, after which a search ends.
const PATIENCE: usize = 200;

/// Places left by thinning.
#[derive(Debug, Clone, PartialEq)]
pub struct Thinned {
    /// Which of the places are kept: their indices, ascending.
    pub kept: Vec<u32>,
    /// The distance between the two kept places closest to each other; `None` with fewer than two.
    pub closest: Option<Metres>,
}

impl Thinned {
    fn new(mut kept: Vec<u32>, places: &[(f64, f64)], ground: Ground) -> Self {
        kept.sort_unstable();
        let closest = closest(kept.iter().map(|&i| places[i as usize]).collect(), ground);
        Self { kept, closest }
    }
}

/// Keeps as many places as it can such that no two are closer than `distance` (exactly that far apart is
/// far enough). Never keeps fewer than going through the places once in their order would.
///
/// `tries` searches begin from different choices; the best one counts, part by part where the places
/// fall into parts that do not touch. Of identical places the first is kept or none. Which of equally
/// many places are kept depends on the seed, not on the order of the places, unless only the pass in
/// their order leads to so many.
///
/// ```
/// use trodden::records::{Ground, thin_by_distance};
/// use trodden::units::{Metres, Seed};
/// let places = [(0.0, 0.0), (600.0, 0.0), (1200.0, 0.0)];
/// let plane = Ground::Plane { metres_per_unit: 1.0 };
/// let thinned = thin_by_distance(&places, plane, Metres::new(1000.0).unwrap(), 4, Seed(1));
/// assert_eq!(thinned.kept, [0, 2]);
/// assert_eq!(thinned.closest, Metres::new(1200.0));
/// ```
pub fn thin_by_distance(
    places: &[(f64, f64)],
    ground: Ground,
    distance: Metres,
    tries: usize,
    seed: Seed,
) -> Thinned {
    if distance.get() == 0.0 {
        return Thinned::new((0..places.len() as u32).collect(), places, ground);
    }
    let mut firsts = distinct(places);
    let among = firsts.iter().map(|&i| places[i as usize]).collect();
    let mut space = Space::new(among, ground, distance.get());
    let (cells, order) = Cells::gather(&mut space, distance.get());
    firsts = order.iter().map(|&i| firsts[i as usize]).collect();
    let parts: Vec<Vec<u32>> = (0..cells.components.len() - 1)
        .into_par_iter()
        .map(|component| {
            let first = cells.starts[cells.components[component] as usize];
            let end = cells.starts[cells.components[component + 1] as usize];
            let task = Task { component, tries: tries.max(1), seed, whole: cells.starts.len() - 1 };
            let kept = task.choose(&space, &cells, &firsts[first as usize..end as usize]);
            kept.into_iter().map(|p| firsts[(first + p) as usize]).collect()
        })
        .collect();
    Thinned::new(parts.concat(), places, ground)
}

/// The first of each set of identical places, in the order of their coordinates.
fn distinct(places: &[(f64, f64)]) -> Vec<u32> {
    // zero has two signs
    let at = |i: u32| (places[i as usize].0 + 0.0, places[i as usize].1 + 0.0);
    let mut order: Vec<u32> = (0..places.len() as u32).collect();
    order.par_sort_unstable_by(|&i, &j| {
        let (p, q) = (at(i), at(j));
        p.0.total_cmp(&q.0).then(p.1.total_cmp(&q.1)).then(i.cmp(&j))
    });
    order.dedup_by(|i, j| at(*i) == at(*j));
    order
}

/// The search within one component.
struct Task {
    component: usize,
    tries: usize,
    seed: Seed,
    /// Number of cubes of all components.
    whole: usize,
}

impl Task {
    /// The places to keep; `input` gives the index of each in the input.
    fn choose(&self, space: &Space, cells: &Cells, input: &[u32]) -> Vec<u32> {
        if input.len() == 1 {
            return vec![0];
        }
        let cubes = cells.components[self.component + 1] - cells.components[self.component];
        let share = EFFORT as f64 * f64::from(cubes) / self.whole as f64;
        let effort = (share / self.tries as f64) as u64;
        let conflicts = Conflicts::new(space, cells, self.component, (share / 4.0) as u64);
        let found: Vec<Vec<u32>> = (0..self.tries)
            .into_par_iter()
            .map(|index| {
                let mut stream = self.stream(index);
                let order = match index % 2 {
                    0 => starts::fewest_first(&conflicts, &mut stream),
                    _ => None,
                };
                let order = order.unwrap_or_else(|| starts::sweep(&conflicts, &mut stream));
                let mut search = Search::new(&conflicts, &order, stream);
                search.improve(PATIENCE, effort);
                search.kept
            })
            .collect();
        let best = longest(found);
        let mut order: Vec<u32> = (0..input.len() as u32).collect();
        order.sort_unstable_by_key(|&p| input[p as usize]);
        let mut plain = Search::new(&conflicts, &order, self.stream(self.tries));
        if plain.kept.len() <= best.len() {
            return best;
        }
        plain.improve(PATIENCE, effort);
        plain.kept
    }

    fn stream(&self, index: usize) -> Stream {
        Stream::new(self.seed, "thinning", (self.component * (self.tries + 1) + index) as u64)
    }
}

/// The first of the longest lists.
fn longest(lists: Vec<Vec<u32>>) -> Vec<u32> {
    lists
        .into_iter()
        .reduce(|best, next| if next.len() > best.len() { next } else { best })
        .unwrap_or_default()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::grid::geodesic;
    use crate::maths::float;

    const PLANE: Ground = Ground::Plane { metres_per_unit: 1.0 };

    fn metres(value: f64) -> Metres {
        Metres::new(value).unwrap()
    }

    /// Places all over a square, or around a few middles, of side 1.
    fn drawn(stream: &mut Stream, count: usize, clustered: bool) -> Vec<(f64, f64)> {
        let middles: Vec<(f64, f64)> = (0..4).map(|_| (stream.unit(), stream.unit())).collect();
        (0..count)
            .map(|_| {
                let (x, y) = (stream.unit(), stream.unit());
                let middle = middles[stream.below(4)];
                if clustered { (middle.0 + (x - 0.5) * 0.3, middle.1 + (y - 0.5) * 0.3) } else { (x, y) }
            })
            .collect()
    }

    /// A place on the globe, each equally likely.
    fn anywhere(stream: &mut Stream) -> (f64, f64) {
        (stream.unit() * 360.0 - 180.0, float::asin(stream.unit() * 2.0 - 1.0).to_degrees())
    }

    /// Which places clash with each, as bits.
    fn clashes(places: &[(f64, f64)], ground: Ground, distance: f64) -> Vec<u32> {
        let near = |p, q| ground.distance(p, q) < distance;
        let row = |i: usize| (0..places.len()).filter(move |&j| j != i && near(places[i], places[j]));
        (0..places.len()).map(|i| row(i).fold(0, |bits, j| bits | 1 << j)).collect()
    }

    /// The most that can be kept of the open places: branch and bound.
    fn optimum(open: u32, clashes: &[u32]) -> u32 {
        let degree = |v: u32| (clashes[v as usize] & open).count_ones();
        let vertices = || (0..32).filter(|v| open >> v & 1 == 1);
        let Some(least) = vertices().min_by_key(|&v| degree(v)) else { return 0 };
        if degree(least) <= 1 {
            return 1 + optimum(open & !(clashes[least as usize] | 1 << least), clashes);
        }
        let most = vertices().max_by_key(|&v| degree(v)).unwrap();
        let taken = 1 + optimum(open & !(clashes[most as usize] | 1 << most), clashes);
        let left = open & !(1 << most);
        if left.count_ones() <= taken { taken } else { taken.max(optimum(left, clashes)) }
    }

    /// How many one pass in the given order keeps.
    fn one_pass(places: &[(f64, f64)], ground: Ground, distance: f64) -> usize {
        let mut kept: Vec<(f64, f64)> = Vec::new();
        for &p in places {
            if kept.iter().all(|&q| ground.distance(p, q) >= distance) {
                kept.push(p);
            }
        }
        kept.len()
    }

    /// Every pair of kept places, and no dropped place that could be added, by distances alone.
    fn assert_valid(places: &[(f64, f64)], ground: Ground, distance: f64, thinned: &Thinned) {
        let at = |i: &u32| places[*i as usize];
        let mut least = f64::INFINITY;
        for (n, i) in thinned.kept.iter().enumerate() {
            assert!(n == 0 || thinned.kept[n - 1] < *i);
            for j in &thinned.kept[..n] {
                let apart = ground.distance(at(i), at(j));
                assert!(apart >= distance, "{:?} {:?}: {apart} < {distance}", at(i), at(j));
                least = least.min(apart);
            }
        }
        assert_eq!(thinned.closest.map_or(f64::INFINITY, Metres::get), least);
        for p in places {
            let clash = |i: &u32| at(i) == *p || ground.distance(at(i), *p) < distance;
            assert!(thinned.kept.iter().any(clash), "{p:?} could be kept as well");
        }
    }

    #[test]
    #[allow(clippy::print_stdout, reason = "tells the share of optima")]
    fn keeps_nearly_the_most_that_can_be_kept() {
        let (mut exact, mut parts) = (0, 0.0);
        for set in 0..200_u64 {
            let mut stream = Stream::new(Seed(11), "test", set);
            let count = 12 + stream.below(19);
            let mut places = drawn(&mut stream, count, set % 2 == 0);
            let distance = [0.1, 0.15, 0.2, 0.28, 0.4][(set / 4 % 5) as usize];
            let (ground, distance) = match set % 4 {
                0 | 1 => (PLANE, distance),
                _ if set % 8 < 4 => (Ground::Globe, distance * 1.1e6),
                _ => {
                    places.iter_mut().for_each(|p| *p = (p.0 * 400.0 - 200.0, p.1 * 180.0 - 90.0));
                    places.retain(|p| p.1.abs() <= 90.0);
                    (Ground::Globe, distance * 2e7)
                }
            };
            if set % 8 < 4 && ground == Ground::Globe {
                places.iter_mut().for_each(|p| *p = (p.0 * 12.0 + 174.0, p.1 * 10.0 + 40.0));
            }
            let thinned = thin_by_distance(&places, ground, metres(distance), 4, Seed(set));
            assert_valid(&places, ground, distance, &thinned);
            assert!(thinned.kept.len() >= one_pass(&places, ground, distance));
            let best = optimum(((1_u64 << places.len()) - 1) as u32, &clashes(&places, ground, distance));
            exact += usize::from(thinned.kept.len() == best as usize);
            parts += thinned.kept.len() as f64 / f64::from(best);
        }
        println!("{exact} of 200 sets reach the optimum; on average {:.4} of it", parts / 200.0);
        assert!(exact >= 196 && parts / 200.0 > 0.99);
    }

    #[test]
    #[allow(clippy::print_stdout, reason = "tells how many are kept")]
    fn a_few_dozen_to_a_few_hundred_are_left_of_three_thousand_at_60_km() {
        let mut found = Vec::new();
        for seed in 0..2 {
            let mut stream = Stream::new(Seed(seed), "test", 1);
            let side = [1000e3, 1400e3][seed as usize % 2];
            let middles: Vec<(f64, f64)> =
                (0..40).map(|_| (stream.unit() * side, stream.unit() * side)).collect();
            let bell = |s: &mut Stream| ((0..12).map(|_| s.unit()).sum::<f64>() - 6.0) * 30e3;
            let places: Vec<(f64, f64)> = (0..3000)
                .map(|_| {
                    let middle = middles[stream.below(40)];
                    (middle.0 + bell(&mut stream), middle.1 + bell(&mut stream))
                })
                .collect();
            let thinned = thin_by_distance(&places, PLANE, metres(60e3), 2, Seed(seed));
            assert_valid(&places, PLANE, 60e3, &thinned);
            found.push((thinned.kept.len(), one_pass(&places, PLANE, 60e3)));
        }
        println!("kept of 3,000 (and by one pass): {found:?}");
        assert!(found.iter().all(|(kept, pass)| (24..=500).contains(kept) && kept >= pass), "{found:?}");
    }

    #[test]
    fn is_right_all_over_the_globe_at_any_distance() {
        for (set, distance) in
            [10.0, 1e3, 5e4, 1e6, 3e6, 6e6, 1e7, 1.25e7, 1.5e7, 1.79e7, 1.99e7, 2.0003e7, 3e7]
                .iter()
                .enumerate()
        {
            let mut stream = Stream::new(Seed(3), "test", set as u64);
            let mut places: Vec<(f64, f64)> = (0..150).map(|_| anywhere(&mut stream)).collect();
            let degrees = distance / 1.1e5;
            for i in 0..150 {
                let (x, y) = places[i];
                let (dx, dy) = ((stream.unit() - 0.5) * 3.0 * degrees, (stream.unit() - 0.5) * 3.0 * degrees);
                places.push(((x + dx).clamp(-360.0, 360.0), (y + dy).clamp(-90.0, 90.0)));
                places.push((x + 180.0, -y + dy.clamp(-0.3, 0.3) * 1e-3));
            }
            places.iter_mut().for_each(|p| p.1 = p.1.clamp(-90.0, 90.0));
            places.extend([
                (180.0, 1.0),
                (-180.0, 1.0),
                (0.0, 90.0),
                (77.0, 90.0),
                (5.0, -90.0),
                (-60.0, -90.0),
            ]);
            let thinned = thin_by_distance(&places, Ground::Globe, metres(*distance), 3, Seed(1));
            assert_valid(&places, Ground::Globe, *distance, &thinned);
            assert!(thinned.kept.len() >= one_pass(&places, Ground::Globe, *distance));
        }
    }

    #[test]
    fn exactly_the_distance_is_far_enough() {
        let row: Vec<(f64, f64)> = (0..7).map(|i| (f64::from(i) * 10_000.0, 0.0)).collect();
        assert_eq!(thin_by_distance(&row, PLANE, metres(10_000.0), 2, Seed(1)).kept.len(), 7);
        assert_eq!(thin_by_distance(&row, PLANE, metres(10_000.0 + 1e-9), 2, Seed(1)).kept.len(), 4);
        let pair = [(12.3, 45.6), (13.1, 45.1)];
        let apart = geodesic(pair[0], pair[1]).min(geodesic(pair[1], pair[0]));
        assert_eq!(thin_by_distance(&pair, Ground::Globe, metres(apart), 2, Seed(1)).kept, [0, 1]);
        assert_eq!(thin_by_distance(&pair, Ground::Globe, metres(apart + 1e-6), 2, Seed(1)).kept.len(), 1);
        let feet = Ground::Plane { metres_per_unit: 0.3048 };
        let thinned = thin_by_distance(&[(0.0, 0.0), (100.0, 0.0)], feet, metres(30.48), 2, Seed(1));
        assert_eq!((thinned.kept.len(), thinned.closest), (2, Some(metres(30.48))));
    }

    #[test]
    fn copes_with_few_same_and_huddled_places() {
        for ground in [PLANE, Ground::Globe] {
            let kept = |places: &[(f64, f64)], distance: f64| {
                thin_by_distance(places, ground, metres(distance), 3, Seed(1)).kept
            };
            assert_eq!(kept(&[], 5.0), [0_u32; 0]);
            assert_eq!(kept(&[(1.0, 2.0)], 5.0), [0]);
            assert_eq!(kept(&[(1.0, 2.0), (1.0, 2.0)], 5.0), [0]);
            assert_eq!(kept(&[(1.0, 2.0), (1.0, 2.0)], 0.0), [0, 1]);
            assert_eq!(kept(&[(0.0, 0.0), (-0.0, 0.0), (90.0, 0.0)], 5.0), [0, 2]);
            assert_eq!(kept(&vec![(7.0, 8.0); 100_000], 5.0), [0]);
            assert_eq!(kept(&[(1.0, 2.0), (-70.0, 3.0), (100.0, -80.0)], 1e9).len(), 1);
            assert_eq!(kept(&[(1.0, 2.0), (-70.0, 3.0), (100.0, -80.0)], 1e300).len(), 1);
            assert_eq!(kept(&[(1.0, 2.0), (-70.0, 3.0), (100.0, -80.0)], 1e-300).len(), 3);
            let mut stream = Stream::new(Seed(3), "test", 0);
            let huddle = drawn(&mut stream, 20_000, false);
            assert_eq!(kept(&huddle, 1e6).len(), 1);
        }
    }

    #[test]
    fn is_the_same_at_any_thread_count_and_order_and_follows_the_seed() {
        let mut stream = Stream::new(Seed(8), "test", 0);
        let mut places = drawn(&mut stream, 1500, true);
        places.extend_from_within(..500);
        let run = |threads, seed, places: &[(f64, f64)]| {
            let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().unwrap();
            pool.install(|| thin_by_distance(places, PLANE, metres(0.03), 2, Seed(seed)))
        };
        let once = run(1, 1, &places);
        assert_eq!(once, run(2, 1, &places));
        assert_ne!(once.kept, run(2, 2, &places).kept);
        let sorted = |places: &[(f64, f64)], thinned: &Thinned| {
            let mut kept: Vec<(f64, f64)> = thinned.kept.iter().map(|&i| places[i as usize]).collect();
            kept.sort_by(|p, q| p.partial_cmp(q).unwrap());
            kept
        };
        let before = sorted(&places, &once);
        stream.shuffle(&mut places);
        assert_eq!(before, sorted(&places, &run(2, 1, &places)));
    }

    /// Enough places that clashes are looked up, not stored.
    #[test]
    fn is_right_where_clashes_are_not_stored() {
        let mut stream = Stream::new(Seed(4), "test", 0);
        for ground in [PLANE, Ground::Globe] {
            let mut places = drawn(&mut stream, 9000, true);
            places.iter_mut().for_each(|p| *p = (p.0 - 0.5 + 179.5, p.1 + 60.0));
            let distance = if ground == PLANE { 0.2 } else { 15_000.0 };
            let thinned = thin_by_distance(&places, ground, metres(distance), 1, Seed(1));
            assert_valid(&places, ground, distance, &thinned);
            assert!(thinned.kept.len() > one_pass(&places, ground, distance));
        }
    }

    proptest::proptest! {
        #[test]
        fn any_places_are_thinned_rightly(
            grid in proptest::collection::vec((0_i32..12, 0_i32..12), 0..60),
            distance in 0.5_f64..6.0,
            globe in proptest::bool::ANY,
            seed in 0_u64..1000,
        ) {
            // many identical places and many at just the same distance; on the globe around a pole
            let (ground, unit) = if globe { (Ground::Globe, 111e3) } else { (PLANE, 1.0) };
            let scale = |(x, y): (i32, i32)| (f64::from(x) * if globe { 30.0 } else { 1.0 }, f64::from(y) + 79.0);
            let places: Vec<(f64, f64)> = grid.into_iter().map(scale).collect();
            let distance = (distance * 2.0).round() / 2.0 * unit;
            let thinned = thin_by_distance(&places, ground, metres(distance), 2, Seed(seed));
            assert_valid(&places, ground, distance, &thinned);
            proptest::prop_assert!(thinned.kept.len() >= one_pass(&places, ground, distance));
            let again = thin_by_distance(&places, ground, metres(distance), 2, Seed(seed));
            proptest::prop_assert_eq!(&again, &thinned);
            let back: Vec<(f64, f64)> = places.iter().rev().copied().collect();
            let other = thin_by_distance(&back, ground, metres(distance), 2, Seed(seed));
            proptest::prop_assert_eq!(other.kept.len(), thinned.kept.len());
        }
    }
}
