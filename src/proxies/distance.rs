//! Distance from each cell's centre to the nearest point of a layer's geometry.
//!
//! # Formula
//! Planar: min over segments of |p − (a + t(b − a))|, t = clamp((p − a)·(b − a)/|b − a|², 0, 1), in
//! metres. Globe: the same between geocentric coordinates on WGS 84, lines cut into pieces so short
//! that they lie less than 0.1 m below the ground, the chord turned into an arc.
//!
//! # Source
//! Ericson, C. (2005), Real-Time Collision Detection, §5.1.2; lines are straight in the layer's own
//! coordinates (RFC 7946, §3.1.1).

use rayon::prelude::*;
use rstar::{AABB, PointDistance, RTree, RTreeObject};

use crate::diag::Observer;
use crate::grid::{Metric, Region, arc_of_chord, geocentric};

use super::features::{Features, Shape};

/// Longest piece of a line on the globe, metres.
const PIECE: f64 = 2_000.0;

/// A straight piece between two points of space (equal for a point feature).
#[derive(Debug, Clone, Copy)]
struct Segment<const D: usize>([f64; D], [f64; D]);

impl<const D: usize> RTreeObject for Segment<D>
where
    [f64; D]: rstar::Point<Scalar = f64>,
{
    type Envelope = AABB<[f64; D]>;

    fn envelope(&self) -> Self::Envelope {
        AABB::from_corners(self.0, self.1)
    }
}

impl<const D: usize> PointDistance for Segment<D>
where
    [f64; D]: rstar::Point<Scalar = f64>,
{
    fn distance_2(&self, point: &[f64; D]) -> f64 {
        to_segment(point, &self.0, &self.1)
    }
}

/// Squared distance from a point to a segment.
fn to_segment<const D: usize>(p: &[f64; D], a: &[f64; D], b: &[f64; D]) -> f64 {
    let (mut along, mut length) = (0.0, 0.0);
    for i in 0..D {
        along += (p[i] - a[i]) * (b[i] - a[i]);
        length += (b[i] - a[i]) * (b[i] - a[i]);
    }
    let t = if length > 0.0 { (along / length).clamp(0.0, 1.0) } else { 0.0 };
    (0..D).map(|i| p[i] - a[i] - t * (b[i] - a[i])).map(|d| d * d).sum()
}

/// Distance in metres of every inside cell, told to the observer cell by cell; `None` when the layer holds no geometry.
pub fn distance(features: &Features, region: &Region, observer: &dyn Observer) -> Option<Vec<f64>> {
    let mut values = match region.grid().metric() {
        Metric::Planar => {
            let unit = region.grid().metres_per_unit();
            let segments = features.shapes.iter().flat_map(planar).collect();
            nearest(segments, region, observer, |x, y| [x, y])?
                .into_iter()
                .map(|d| d * unit)
                .collect::<Vec<f64>>()
        }
        Metric::Geodesic => {
            let segments = features.shapes.par_iter().flat_map_iter(spatial).collect();
            nearest(segments, region, observer, geocentric)?.into_iter().map(arc_of_chord).collect()
        }
    };
    if !features.covered.is_empty() {
        let inside = |cell: usize| features.covered[region.flat(cell)];
        (0..region.len()).filter(|c| inside(*c)).for_each(|c| values[c] = 0.0);
    }
    Some(values)
}

fn nearest<const D: usize>(
    segments: Vec<Segment<D>>,
    region: &Region,
    observer: &dyn Observer,
    place: impl Fn(f64, f64) -> [f64; D] + Sync,
) -> Option<Vec<f64>>
where
    [f64; D]: rstar::Point<Scalar = f64>,
{
    if segments.is_empty() {
        return None;
    }
    let tree = RTree::bulk_load(segments);
    let mut values = vec![0.0; region.len()];
    values.par_chunks_mut(RUN).enumerate().for_each(|(run, values)| {
        let mut before: Option<([f64; D], f64)> = None;
        for (i, value) in values.iter_mut().enumerate() {
            let (x, y) = region.centre(run * RUN + i);
            let point = place(x, y);
            *value = match before {
                // nothing nearer than the neighbour's distance and the way from it can be missed
                Some((last, d)) => within(&tree, &point, d + to_segment(&point, &last, &last).sqrt()),
                None => None,
            }
            .unwrap_or_else(|| {
                tree.nearest_neighbor(point).expect("the tree is not empty").distance_2(&point).sqrt()
            });
            before = Some((point, *value));
        }
        observer.advance(values.len() as u64);
    });
    Some(values)
}

/// Cells that follow each other and help each other's search.
const RUN: usize = 1024;

/// Distance to the nearest segment, given that one lies within `bound`.
fn within<const D: usize>(tree: &RTree<Segment<D>>, point: &[f64; D], bound: f64) -> Option<f64>
where
    [f64; D]: rstar::Point<Scalar = f64>,
{
    let bound = bound * (1.0 + 1e-9) + 1e-9; // rounding must not shut the nearest out
    let near = tree.locate_within_distance(*point, bound * bound);
    near.map(|s| s.distance_2(point)).min_by(f64::total_cmp).map(f64::sqrt)
}

/// The segments of a shape in the plane.
fn planar(shape: &Shape) -> Vec<Segment<2>> {
    let at = |p: &(f64, f64)| [p.0, p.1];
    match shape.0.as_slice() {
        [only] => vec![Segment(at(only), at(only))],
        points => points.windows(2).map(|w| Segment(at(&w[0]), at(&w[1]))).collect(),
    }
}

/// The pieces of a shape on the globe.
fn spatial(shape: &Shape) -> Vec<Segment<3>> {
    let on = |p: (f64, f64)| geocentric(p.0, p.1);
    if let [only] = shape.0.as_slice() {
        return vec![Segment(on(*only), on(*only))];
    }
    shape.0.windows(2).flat_map(|w| pieces(w[0], w[1])).map(|(a, b)| Segment(on(a), on(b))).collect()
}

/// A line of the layer cut into pieces, straight in longitude and latitude.
fn pieces(a: (f64, f64), b: (f64, f64)) -> Vec<((f64, f64), (f64, f64))> {
    // a degree is at most 111.7 km long
    let length = (b.0 - a.0).hypot(b.1 - a.1) * 111_700.0;
    let n = (length / PIECE).ceil().max(1.0) as usize;
    let at = |i: usize| {
        let t = i as f64 / n as f64;
        (a.0 + t * (b.0 - a.0), a.1 + t * (b.1 - a.1))
    };
    (0..n).map(|i| (at(i), at(i + 1))).collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::diag::Silent;
    use crate::grid::{geodesic, grids};
    use crate::maths::random::Stream;
    use crate::units::Seed;

    /// Point–segment distances by hand (t = 0.3, 0, 1, 0.44, zero length, 0.72, 0.3423).
    #[test]
    fn point_to_segment() {
        for (p, a, b, d) in [
            ([3.0, 4.0], [0.0, 0.0], [10.0, 0.0], 4.0),
            ([-3.0, 4.0], [0.0, 0.0], [10.0, 0.0], 5.0),
            ([13.0, -4.0], [0.0, 0.0], [10.0, 0.0], 5.0),
            ([1.0, 2.0], [0.0, 0.0], [3.0, 4.0], 0.4),
            ([5.0, 5.0], [2.0, 2.0], [2.0, 2.0], 4.242_640_687),
            ([7.0, 1.0], [1.0, 1.0], [4.0, 5.0], 4.8),
            ([0.5, -1.25], [-2.0, 0.5], [3.5, 2.0], 2.346_130_202),
        ] {
            assert!((to_segment(&p, &a, &b).sqrt() - d).abs() < 1e-9);
        }
    }

    fn random_shapes(stream: &mut Stream, (x0, y0, w, h): (f64, f64, f64, f64)) -> Vec<Shape> {
        let mut place = || (x0 + w * stream.unit(), y0 + h * stream.unit());
        (0..12).map(|i| Shape((0..=i % 4).map(|_| place()).collect())).collect()
    }

    /// Fast route against the loop over all segments, in the plane.
    #[test]
    fn equals_brute_force_in_the_plane() {
        for world in 0..50 {
            let mut stream = Stream::new(Seed(world), "plane", 0);
            let region = Region::new(grids::planar(17, 13, 250.0), &[true; 17 * 13]);
            let shapes = random_shapes(&mut stream, (-1000.0, -1000.0, 6000.0, 5000.0));
            let all: Vec<Segment<2>> = shapes.iter().flat_map(planar).collect();
            let fast = distance(&Features { shapes, covered: Vec::new() }, &region, &Silent).unwrap();
            for (cell, d) in fast.iter().enumerate() {
                let (x, y) = region.centre(cell);
                let slow =
                    all.iter().map(|s| to_segment(&[x, y], &s.0, &s.1)).fold(f64::MAX, f64::min).sqrt();
                assert!((d - slow).abs() <= 1e-9 * slow.max(1.0));
            }
        }
    }

    /// On the globe against geodesics to points close together along every line: within 0.1 % or
    /// the spacing of the points.
    #[test]
    fn follows_geodesics_on_the_globe() {
        for (west, north) in [(0.0, 3.0), (20.0, 52.0), (60.0, 81.0), (178.0, 1.0)] {
            let mut stream = Stream::new(Seed(7), "globe", north as u64);
            let region = Region::new(grids::globe(8, 6, west, north, 0.5), &[true; 48]);
            let shapes = random_shapes(&mut stream, (west, north - 3.0, 4.0, 3.0));
            let mut dense: Vec<(f64, f64)> = Vec::new();
            for shape in &shapes {
                dense.extend(shape.0.first());
                for w in shape.0.windows(2) {
                    let at = |t: f64| (w[0].0 + t * (w[1].0 - w[0].0), w[0].1 + t * (w[1].1 - w[0].1));
                    dense.extend((0..=2000).map(|i| at(f64::from(i) / 2000.0)));
                }
            }
            let fast = distance(&Features { shapes, covered: Vec::new() }, &region, &Silent).unwrap();
            for (cell, d) in fast.iter().enumerate().step_by(5) {
                let slow = dense.iter().map(|p| geodesic(region.centre(cell), *p)).fold(f64::MAX, f64::min);
                assert!((d - slow).abs() <= 0.001 * slow + 150.0, "{west} {north}: {d} {slow}");
            }
        }
    }

    /// Two vertices 2 km apart, a cell's centre beside the middle: the line is near, no vertex is.
    #[test]
    fn measures_to_the_line_not_to_its_vertices() {
        let region = Region::new(grids::planar(21, 3, 100.0), &[true; 63]);
        let line = Shape(vec![(0.0, 50.0), (2000.0, 50.0)]);
        let d = distance(&Features { shapes: vec![line], covered: Vec::new() }, &region, &Silent).unwrap();
        assert!((d[21 + 10] - 100.0).abs() < 1e-9, "{}", d[31]);
    }

    #[test]
    fn is_zero_inside_polygons() {
        let region = Region::new(grids::planar(4, 1, 10.0), &[true; 4]);
        let shapes = vec![Shape(vec![(0.0, 0.0), (20.0, 0.0), (20.0, 10.0), (0.0, 10.0), (0.0, 0.0)])];
        let d = distance(&Features { shapes, covered: vec![true, true, false, false] }, &region, &Silent)
            .unwrap();
        assert_eq!(d, vec![0.0, 0.0, 5.0, 15.0]);
    }
}
