//! The distance of the two kept places that are closest to each other.

use kdtree::KdTree;
use kdtree::distance::squared_euclidean;
use rayon::prelude::*;

use crate::maths::random::Stream;
use crate::maths::sum::CHUNK;
use crate::units::{Metres, Seed};

use super::ground::{Ground, extent, square_between};

type Tree = KdTree<f64, u32, [f64; 3]>;

/// The least distance between two of the places; `None` when there are fewer than two.
pub fn closest(mut places: Vec<(f64, f64)>, ground: Ground) -> Option<Metres> {
    places.par_sort_unstable_by(|p, q| p.0.total_cmp(&q.0).then(p.1.total_cmp(&q.1)));
    if places.windows(2).any(|w| w[0] == w[1]) {
        return Metres::new(0.0);
    }
    let points: Vec<[f64; 3]> = places.par_iter().map(|p| ground.point(*p)).collect();
    let tree = planted(&points);
    let bound = points.windows(2).map(|w| square_between(&w[0], &w[1])).min_by(f64::total_cmp)?;
    let nearest: Vec<Option<(f64, u32)>> = points.par_iter().map(|p| nearest(&tree, p, bound)).collect();
    let pairs = nearest.iter().enumerate().filter_map(|(i, n)| n.map(|(square, j)| (square, i, j)));
    let (_, one, two) = pairs.min_by(|a, b| a.0.total_cmp(&b.0))?;
    let found = ground.distance(places[one], places[two as usize]);
    // a longer straight line can still belong to a shorter geodesic
    let reach = ground.settling(found, extent(&points)).1;
    let length = |i: usize, j: u32| {
        if i == j as usize { found } else { ground.distance(places[i], places[j as usize]) }
    };
    let within = |i: usize| {
        let near = tree.within(&points[i], reach, &squared_euclidean).expect("places are finite");
        near.iter().map(|(_, j)| length(i, **j)).fold(found, f64::min)
    };
    let all: Vec<f64> = (0..points.len())
        .into_par_iter()
        .with_min_len(CHUNK)
        .filter(|&i| reach > bound || nearest[i].is_some_and(|n| n.0 <= reach))
        .map(within)
        .collect();
    Metres::new(all.into_iter().fold(found, f64::min))
}

fn planted(points: &[[f64; 3]]) -> Tree {
    let mut order: Vec<u32> = (0..points.len() as u32).collect();
    Stream::new(Seed(0), "order of a k-d tree", 0).shuffle(&mut order);
    let mut tree = KdTree::new(3);
    for i in order {
        tree.add(points[i as usize], i).expect("places are finite");
    }
    tree
}

/// The square of the straight line to the nearest other point, and that point, if it is `within`.
fn nearest(tree: &Tree, point: &[f64; 3], within: f64) -> Option<(f64, u32)> {
    let near = tree.nearest_within_radius(point, 2, Some(within), &squared_euclidean);
    let near = near.expect("places are finite");
    // of two at no distance either may come first
    near.get(1).map(|(square, i)| (*square, **i))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn matches_all_pairs() {
        let mut stream = Stream::new(Seed(9), "test", 0);
        for set in 0..60_u32 {
            let ground = if set % 2 == 0 { Ground::Globe } else { Ground::Plane { metres_per_unit: 3.0 } };
            let scale = [1.0, 1e-3, 60.0][set as usize % 3];
            let rounding = [1e9, 4.0 / scale][set as usize / 30];
            let mut place = || (stream.unit() * scale * rounding).round() / rounding;
            let places: Vec<(f64, f64)> = (0..2 + set * 5).map(|_| (place() * 3.0, place())).collect();
            let mut least = f64::INFINITY;
            for (i, p) in places.iter().enumerate() {
                least = places[..i].iter().map(|q| ground.distance(*p, *q)).fold(least, f64::min);
            }
            assert_eq!(closest(places, ground), Metres::new(least), "{set}");
        }
        assert_eq!(closest(vec![(1.0, 2.0)], Ground::Globe), None);
    }

    /// Along a meridian equal chords near the pole belong to other lengths than near the equator.
    #[test]
    fn the_closest_pair_is_the_shortest_geodesic_not_the_shortest_line() {
        let places = vec![(0.0, 0.0), (0.0, 60.0), (90.0, 5.0), (90.0, -54.6)];
        let mut least = f64::INFINITY;
        for (i, p) in places.iter().enumerate() {
            least = places[..i].iter().map(|q| Ground::Globe.distance(*p, *q)).fold(least, f64::min);
        }
        assert_eq!(closest(places, Ground::Globe), Metres::new(least));
    }
}
