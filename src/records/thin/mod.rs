//! Spatial thinning: of many places, a choice of which no two are closer than a distance, as large as
//! can be found; or at most so many for each square of an equal-area grid.
//!
//! Pure: the same places, rule, tries and seed give the same choice at any number of threads.

mod cells;
mod closest;
mod conflicts;
mod ground;
mod search;
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
pub use squares::thin_by_square;

/// Places that all tries together look at before a search ends, where nothing else ends it sooner.
const EFFORT: u64 = 4_000_000_000;
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
        let conflicts = Conflicts::new(space, cells, self.component);
        let share = conflicts.cubes as f64 / self.whole as f64 / self.tries as f64;
        let effort = (EFFORT as f64 * share) as u64;
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
    lists.into_iter().reduce(|best, next| if next.len() > best.len() { next } else { best }).unwrap_or_default()
}

#[cfg(test)]
mod tests;
