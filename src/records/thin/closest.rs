//! The distance of the two kept places that are closest to each other.

use kdtree::KdTree;
use kdtree::distance::squared_euclidean;
use rayon::prelude::*;

use crate::maths::random::Stream;
use crate::maths::sum::CHUNK;
use crate::units::{Metres, Seed};

use super::ground::{Ground, extent};

type Tree = KdTree<f64, u32, [f64; 3]>;

/// The least distance between two of the places; `None` when there are fewer than two.
pub fn closest(mut places: Vec<(f64, f64)>, ground: Ground) -> Option<Metres> {
    places.par_sort_unstable_by(|p, q| p.0.total_cmp(&q.0).then(p.1.total_cmp(&q.1)));
    if places.windows(2).any(|w| w[0] == w[1]) {
        return Metres::new(0.0);
    }
    let points: Vec<[f64; 3]> = places.par_iter().map(|p| ground.point(*p)).collect();
    let tree = planted(&points);
    let nearest: Vec<(f64, u32)> = points.par_iter().map(|p| nearest(&tree, p)).collect::<Option<_>>()?;
    let (one, shortest) = nearest.iter().enumerate().min_by(|a, b| a.1.0.total_cmp(&b.1.0))?;
    let found = ground.distance(places[one], places[shortest.1 as usize]);
    // a longer straight line can still belong to a shorter geodesic
    let reach = ground.settling(found, extent(&points)).1;
    let length = |i: usize, j: u32| if i == j as usize { found } else { ground.distance(places[i], places[j as usize]) };
    let within = |i: usize| {
        let near = tree.within(&points[i], reach, &squared_euclidean).expect("places are finite");
        near.iter().map(|(_, j)| length(i, **j)).fold(found, f64::min)
    };
    let all: Vec<f64> = (0..points.len())
        .into_par_iter()
        .with_min_len(CHUNK)
        .filter(|&i| nearest[i].0 <= reach)
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

/// The square of the straight line to the nearest other point, and that point.
fn nearest(tree: &Tree, point: &[f64; 3]) -> Option<(f64, u32)> {
    let near = tree.nearest(point, 2, &squared_euclidean).expect("places are finite");
    // of two at no distance either may come first
    near.get(1).map(|(square, i)| (*square, **i))
}
