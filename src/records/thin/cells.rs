//! Places gathered into small cubes; a k-d tree of the cubes finds which may hold clashing places.

use kdtree::KdTree;
use kdtree::distance::squared_euclidean;
use rayon::prelude::*;

use crate::maths::random::Stream;
use crate::maths::sum::chunks;
use crate::units::Seed;

use super::ground::{Space, extent, square_between};

/// Set on a link when every place of the one cube clashes with every place of the other.
const WHOLE: u32 = 1 << 31;

/// Cubes with places in them, numbered so that those of a component follow one another. No place
/// clashes with one of another component.
pub struct Cells {
    /// Where the places of each cube begin; one more than there are cubes.
    pub starts: Vec<u32>,
    /// The cube of each place.
    pub cell_of: Vec<u32>,
    /// Where each component's cubes begin; one more than there are components.
    pub components: Vec<u32>,
    /// Whether any two places of a cube clash.
    pub tight: bool,
    heads: Vec<u32>,
    links: Vec<u32>,
}

/// The corners of a box around places.
type Corners = ([f64; 3], [f64; 3]);

impl Cells {
    /// Gathers the places and puts them in the order of their cubes; gives that order too.
    pub fn gather(space: &mut Space, distance: f64) -> (Self, Vec<u32>) {
        let (order, starts) = sorted(space, distance);
        let boxes: Vec<Corners> = starts
            .par_windows(2)
            .map(|w| corners(order[w[0] as usize..w[1] as usize].iter().map(|&i| &space.points[i as usize])))
            .collect();
        let (heads, links) = linked(&boxes, space.settling);
        let (cells, components) = by_component(&heads, &links);
        let mut places = Vec::with_capacity(order.len());
        let mut out = Self {
            starts: vec![0],
            cell_of: Vec::with_capacity(order.len()),
            components,
            tight: boxes.iter().all(|b| square_between(&b.0, &b.1) < space.settling.0),
            heads: vec![0],
            links: Vec::with_capacity(links.len()),
        };
        let mut renamed = vec![0_u32; cells.len()];
        cells.iter().enumerate().for_each(|(new, &old)| renamed[old as usize] = new as u32);
        for (new, &old) in cells.iter().enumerate() {
            let old = old as usize;
            places.extend_from_slice(&order[starts[old] as usize..starts[old + 1] as usize]);
            out.cell_of.resize(places.len(), new as u32);
            out.starts.push(places.len() as u32);
            let old_links = &links[heads[old] as usize..heads[old + 1] as usize];
            out.links.extend(old_links.iter().map(|&l| renamed[(l & !WHOLE) as usize] | (l & WHOLE)));
            out.heads.push(out.links.len() as u32);
        }
        space.reorder(&places);
        (out, places)
    }

    /// The cubes that may hold places clashing with one of this cube, itself included, each with
    /// whether all of them do.
    #[inline]
    pub fn around(&self, cell: u32) -> impl Iterator<Item = (u32, bool)> + '_ {
        self.links_of(cell).iter().map(|&l| (l & !WHOLE, l & WHOLE != 0))
    }

    /// One of the cubes of [`Cells::around`], drawn at random.
    pub fn any_around(&self, cell: u32, stream: &mut Stream) -> u32 {
        let links = self.links_of(cell);
        links[stream.below(links.len())] & !WHOLE
    }

    fn links_of(&self, cell: u32) -> &[u32] {
        &self.links[self.heads[cell as usize] as usize..self.heads[cell as usize + 1] as usize]
    }

    /// How many places a cube holds.
    pub fn size(&self, cell: u32) -> u32 {
        self.starts[cell as usize + 1] - self.starts[cell as usize]
    }
}

/// The places in the order of their cubes, and where each cube begins.
fn sorted(space: &Space, distance: f64) -> (Vec<u32>, Vec<u32>) {
    let side = (distance / 2.0).max(extent(&space.points) * 1e-9).max(f64::MIN_POSITIVE);
    let keys: Vec<[i64; 3]> = space.points.par_iter().map(|p| p.map(|c| (c / side).floor() as i64)).collect();
    let mut order: Vec<u32> = (0..keys.len() as u32).collect();
    order.par_sort_unstable_by_key(|&i| (keys[i as usize], i));
    let mut starts: Vec<u32> = (0..order.len())
        .filter(|&at| at == 0 || keys[order[at] as usize] != keys[order[at - 1] as usize])
        .map(|at| at as u32)
        .collect();
    starts.push(order.len() as u32);
    (order, starts)
}

/// The smallest box around points.
pub fn corners<'a>(points: impl Iterator<Item = &'a [f64; 3]>) -> Corners {
    points.fold(([f64::INFINITY; 3], [f64::NEG_INFINITY; 3]), |(low, high), p| {
        (std::array::from_fn(|k| low[k].min(p[k])), std::array::from_fn(|k| high[k].max(p[k])))
    })
}

/// The cubes that may clash with each, found with a k-d tree of their middles.
fn linked(boxes: &[Corners], settling: (f64, f64)) -> (Vec<u32>, Vec<u32>) {
    let middle = |b: &Corners| -> [f64; 3] { std::array::from_fn(|k| (b.0[k] + b.1[k]) / 2.0) };
    let half = |b: &Corners| square_between(&b.0, &b.1).sqrt() / 2.0;
    let widest = boxes.iter().map(half).fold(0.0, f64::max);
    let mut order: Vec<u32> = (0..boxes.len() as u32).collect();
    Stream::new(Seed(0), "order of a k-d tree", 0).shuffle(&mut order);
    let mut tree = KdTree::new(3);
    for &cell in &order {
        tree.add(middle(&boxes[cell as usize]), cell).expect("places are finite");
    }
    let parts: Vec<(Vec<u32>, Vec<u32>)> = chunks(boxes.len())
        .map(|range| {
            let (mut counts, mut links) = (Vec::with_capacity(range.len()), Vec::new());
            for own in &boxes[range] {
                let before = links.len();
                let reach = (settling.1.sqrt() + half(own) + widest) * (1.0 + 1e-9);
                let near = tree.within(&middle(own), reach * reach, &squared_euclidean);
                let near = near.expect("places are finite");
                links.extend(near.iter().filter_map(|(_, cell)| link(boxes, own, **cell, settling)));
                links[before..].sort_unstable_by_key(|l| l & !WHOLE);
                counts.push((links.len() - before) as u32);
            }
            (counts, links)
        })
        .collect();
    let mut heads = vec![0_u32];
    let mut links = Vec::with_capacity(parts.iter().map(|p| p.1.len()).sum());
    for (counts, part) in parts {
        heads.extend(counts.iter().scan(links.len() as u32, |at, n| {
            *at += n;
            Some(*at)
        }));
        links.extend(part);
    }
    (heads, links)
}

/// The link to a cube, when a place of it may clash with one in the box.
fn link(boxes: &[Corners], own: &Corners, cell: u32, settling: (f64, f64)) -> Option<u32> {
    let other = &boxes[cell as usize];
    let (mut least, mut most) = (0.0, 0.0);
    for k in 0..3 {
        let gap = (own.0[k] - other.1[k]).max(other.0[k] - own.1[k]).max(0.0);
        let span = (own.1[k] - other.0[k]).max(other.1[k] - own.0[k]);
        least += gap * gap;
        most += span * span;
    }
    (least < settling.1).then_some(if most < settling.0 { cell | WHOLE } else { cell })
}

/// The cubes in the order of their components, and where each component begins.
fn by_component(heads: &[u32], links: &[u32]) -> (Vec<u32>, Vec<u32>) {
    let count = heads.len() - 1;
    let mut seen = vec![false; count];
    let (mut order, mut components) = (Vec::with_capacity(count), vec![0]);
    for first in 0..count as u32 {
        if std::mem::replace(&mut seen[first as usize], true) {
            continue;
        }
        let begin = order.len();
        order.push(first);
        let mut at = begin;
        while at < order.len() {
            let cell = order[at] as usize;
            for &l in &links[heads[cell] as usize..heads[cell + 1] as usize] {
                if !std::mem::replace(&mut seen[(l & !WHOLE) as usize], true) {
                    order.push(l & !WHOLE);
                }
            }
            at += 1;
        }
        order[begin..].sort_unstable();
        components.push(order.len() as u32);
    }
    (order, components)
}
