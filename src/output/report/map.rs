//! Maps as images: cells averaged or enlarged to pixels, coloured on one logarithmic scale.
//!
//! North is up whatever the raster's row order. Knows nothing of what is mapped.

use base64::Engine;
use base64::engine::general_purpose::STANDARD;
use png::{BitDepth, ColorType, Compression, Encoder, Filter};

use crate::grid::{Grid, Metric, Region};
use crate::maths::float;

use super::palette::{BLANK, LEVELS, OPACITY, OUTSIDE, colours, index};

/// A logarithmic colour scale.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Scale {
    /// Value of the lightest colour.
    pub low: f64,
    /// Value of the darkest colour.
    pub high: f64,
    /// Largest value of all.
    pub most: f64,
}

impl Scale {
    /// A scale over these values. Zeros and what is far below the rest share the lightest colour; a
    /// thousandth of the cells may lie beyond the darkest, so that one peak does not take up the
    /// colours of all others; an even surface gets a scale around its one value.
    pub(super) fn over<'a>(values: impl Iterator<Item = &'a f64>) -> Self {
        let mut sorted: Vec<f64> = values.copied().filter(|v| *v > 0.0).collect();
        sorted.sort_unstable_by(f64::total_cmp);
        let Some(most) = sorted.last().copied() else { return Self { low: 0.5, high: 2.0, most: 0.0 } };
        let bulk = sorted[(sorted.len() - 1) * 999 / 1000];
        let high = if most > 2.0 * bulk { bulk } else { most };
        let low = sorted[0].max(high * 1e-4);
        if high / low < 1.5 {
            return Self { low: low / 2.0, high: high * 2.0, most };
        }
        Self { low, high, most }
    }

    /// Place of a value on the scale, 0 to 1 inside.
    pub(super) fn along(self, value: f64) -> f64 {
        if value <= self.low {
            return 0.0;
        }
        float::ln(value / self.low) / float::ln(self.high / self.low)
    }

    fn index(self, value: f64) -> u8 {
        index(self.along(value))
    }
}

/// An image ready for a page.
#[derive(Debug, Clone)]
pub(super) struct Picture {
    /// The image as a data URI.
    pub source: String,
    /// Its width in pixels.
    pub width: usize,
    /// Its height.
    pub height: usize,
}

/// How the cells of a grid become pixels.
#[derive(Debug, Clone, Copy)]
pub(super) struct Frame<'a> {
    region: &'a Region,
    /// Cells averaged along each side of a pixel.
    block: usize,
    /// Image pixels along each side of a pixel.
    zoom: usize,
    columns: usize,
    rows: usize,
}

impl<'a> Frame<'a> {
    /// At most `longest` image pixels on the longer side.
    pub(super) fn new(region: &'a Region, longest: usize) -> Self {
        let (columns, rows) = (region.grid().columns, region.grid().rows);
        let block = columns.max(rows).div_ceil(longest);
        let (columns, rows) = (columns.div_ceil(block), rows.div_ceil(block));
        Self { region, block, zoom: (longest / columns.max(rows)).max(1), columns, rows }
    }

    /// Pixel of a cell, counted from the north-west.
    fn pixel(&self, column: usize, row: usize) -> usize {
        let grid = self.region.grid();
        let row = if grid.transform[5] > 0.0 { grid.rows - 1 - row } else { row };
        row / self.block * self.columns + column / self.block
    }

    /// Mean of the inside cells by pixel, weighted by area; `None` where there is none.
    pub(super) fn means(&self, values: &[f64]) -> Vec<Option<f64>> {
        let mut sums = vec![(0.0_f64, 0.0_f64); self.columns * self.rows];
        for (cell, (v, a)) in values.iter().zip(self.region.areas()).enumerate() {
            let (column, row) = self.region.position(cell);
            let sum = &mut sums[self.pixel(column, row)];
            *sum = (sum.0 + v * a, sum.1 + a);
        }
        sums.into_iter().map(|(v, a)| (a > 0.0).then(|| v / a)).collect()
    }

    /// A map of values by inside cell.
    pub(super) fn picture(&self, values: &[f64], scale: Scale) -> Picture {
        let means = self.means(values);
        self.paint(&means.iter().map(|m| m.map_or(OUTSIDE, |v| scale.index(v))).collect::<Vec<u8>>())
    }

    /// A map of values by coarse square, `None` where a square is not told; the mask is that of the
    /// cells.
    pub(super) fn coarse(&self, squares: &Squares, values: &[Option<f64>], scale: Scale) -> Picture {
        let mut pixels = vec![OUTSIDE; self.columns * self.rows];
        for cell in 0..self.region.len() {
            let (column, row) = self.region.position(cell);
            let told = values[squares.of(column, row)];
            pixels[self.pixel(column, row)] = told.map_or(BLANK, |v| scale.index(v));
        }
        self.paint(&pixels)
    }

    fn paint(&self, pixels: &[u8]) -> Picture {
        let (width, height) = (self.columns * self.zoom, self.rows * self.zoom);
        let mut image = Vec::with_capacity(width * height);
        for row in pixels.chunks_exact(self.columns) {
            let line: Vec<u8> = row.iter().flat_map(|p| std::iter::repeat_n(*p, self.zoom)).collect();
            (0..self.zoom).for_each(|_| image.extend_from_slice(&line));
        }
        Picture { source: data_uri(&image, width, height), width, height }
    }
}

/// Coarse squares of cells.
#[derive(Debug, Clone, Copy)]
pub(super) struct Squares {
    /// Cells along a side.
    pub side: usize,
    columns: usize,
    rows: usize,
}

impl Squares {
    /// About 30 squares along the width, of at least 4 by 4 cells.
    pub(super) fn over(grid: &Grid) -> Self {
        let side = grid.columns.div_ceil(30).max(4);
        Self { side, columns: grid.columns.div_ceil(side), rows: grid.rows.div_ceil(side) }
    }

    /// Number of squares.
    pub(super) fn len(&self) -> usize {
        self.columns * self.rows
    }

    /// The square of a cell.
    pub(super) fn of(&self, column: usize, row: usize) -> usize {
        row / self.side * self.columns + column / self.side
    }
}

/// The colour scale as a strip of one row, light to dark.
pub(super) fn strip() -> String {
    let row: Vec<u8> = (0..LEVELS).map(|l| index(l as f64 / (LEVELS - 1) as f64)).collect();
    data_uri(&row, LEVELS, 1)
}

/// Packs indexed pixels, with whichever of two ways of filtering packs better.
fn data_uri(pixels: &[u8], width: usize, height: usize) -> String {
    let packed = [Filter::NoFilter, Filter::Up].map(|filter| encode(pixels, (width, height), filter));
    let best = packed.into_iter().min_by_key(Vec::len).unwrap_or_default();
    format!("data:image/png;base64,{}", STANDARD.encode(best))
}

fn encode(pixels: &[u8], (width, height): (usize, usize), filter: Filter) -> Vec<u8> {
    let mut out = Vec::new();
    let mut encoder = Encoder::new(&mut out, width as u32, height as u32);
    encoder.set_color(ColorType::Indexed);
    encoder.set_depth(BitDepth::Eight);
    encoder.set_palette(colours());
    encoder.set_trns(OPACITY.to_vec());
    encoder.set_compression(Compression::Balanced);
    encoder.set_filter(filter);
    let written = encoder.write_header().and_then(|mut w| w.write_image_data(pixels));
    written.expect("the image has as many pixels as said, and memory does not fail");
    out
}

/// Width over height on the ground, kept within what a page can show; whether it had to be changed.
pub(super) fn aspect(grid: &Grid) -> (f64, bool) {
    let (width, height) = grid.cell_sides(grid.rows / 2);
    let truth = width * grid.columns as f64 / (height * grid.rows as f64);
    let shown = truth.clamp(0.4, 5.0);
    (shown, shown != truth)
}

/// A scale bar: its length in metres and its share of the map's width; on planar maps only.
pub(super) fn scale_bar(grid: &Grid) -> Option<(f64, f64)> {
    if grid.metric() != Metric::Planar || aspect(grid).1 {
        return None;
    }
    let width = grid.cell_sides(0).0 * grid.columns as f64;
    let power = float::pow(10.0, float::log10(width / 3.0).floor());
    let length = [5.0, 2.0, 1.0].into_iter().map(|m| m * power).find(|l| *l <= width / 3.0).unwrap_or(power);
    Some((length, length / width))
}

#[cfg(test)]
mod tests {
    use super::super::sample::plane;
    use super::*;

    #[test]
    fn averages_blocks_and_leaves_outside_out() {
        let mut inside = vec![true; 16];
        inside[0] = false;
        let region = Region::new(plane(4, 4, 100.0), &inside);
        let values: Vec<f64> = (0..region.len()).map(|c| region.flat(c) as f64).collect();
        let frame = Frame::new(&region, 2);
        let close = |a: Option<f64>, b: f64| (a.unwrap() - b).abs() < 1e-12;
        let means = frame.means(&values);
        assert!(close(means[0], (1.0 + 4.0 + 5.0) / 3.0) && close(means[3], 12.5), "{means:?}");
        let small = Frame::new(&region, 1100);
        assert_eq!((small.block, small.zoom), (1, 275));
        assert_eq!(small.picture(&values, Scale { low: 1.0, high: 15.0, most: 15.0 }).width, 1100);
    }

    #[test]
    fn south_up_rasters_are_turned() {
        let mut grid = plane(2, 2, 1.0);
        grid.transform[3] = 0.0;
        grid.transform[5] = 1.0;
        let region = Region::new(grid, &[true; 4]);
        let means = Frame::new(&region, 2).means(&[1.0, 2.0, 3.0, 4.0]);
        assert_eq!(means, [3.0, 4.0, 1.0, 2.0].map(Some));
    }

    #[test]
    fn scale_bars_are_round() {
        let (length, share) = scale_bar(&plane(300, 240, 500.0)).unwrap();
        assert_eq!((length, share), (50_000.0, 1.0 / 3.0));
    }

    #[test]
    fn long_grids_have_maps() {
        for (columns, rows) in [(1, 5000), (3000, 2), (1, 1)] {
            let region = Region::new(plane(columns, rows, 30.0), &vec![true; columns * rows]);
            let picture =
                Frame::new(&region, 1100).picture(&vec![1.0; columns * rows], Scale::over([1.0].iter()));
            assert!(picture.width.max(picture.height) <= 1100 && picture.width.min(picture.height) >= 1);
            assert!(
                Squares::over(region.grid()).of(columns - 1, rows - 1) < Squares::over(region.grid()).len()
            );
            assert!((0.4..=5.0).contains(&aspect(region.grid()).0));
        }
    }

    #[test]
    fn an_even_surface_has_a_scale() {
        let scale = Scale::over([1.0; 5].iter());
        assert!((scale.along(1.0) - 0.5).abs() < 1e-12);
    }
}
