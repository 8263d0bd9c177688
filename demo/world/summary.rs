//! What came out: a few figures for whoever made the world, and the text beside the truth.

use crate::effort::{EVEN_SHARE, Effort, ORDINARY_VISITS, RESERVE_SD, RESERVE_VISITS};
use crate::fauna::Species;
use crate::frame::{CELLS, centre, column_row};
use crate::visits::{Visit, chance_of_a_find};

/// The world in a few lines.
pub fn describe(
    rows: usize,
    visits: &[Visit],
    effort: &Effort,
    species: &[Species],
    cells: &[usize],
) -> String {
    let empty = visits.iter().filter(|visit| visit.finds.is_empty()).count();
    let mut by_cell = vec![0.0; CELLS];
    for visit in visits.iter().filter(|visit| !visit.finds.is_empty()) {
        by_cell[visit.cell] += 1.0;
    }
    let (visited, top, top_percent) = concentration(&by_cell, cells);
    format!(
        "cells of land       {}\n\
         rows                {rows}\n\
         visits              {} of which {empty} ({:.1} %) found nothing\n\
         cells with finds    {visited}; the fullest holds {:.1} % of visits, the fullest 1 % of land {:.1} %\n\
         truth against expected visits with finds: correlation of logarithms {:.3}\n",
        cells.len(),
        visits.len(),
        100.0 * empty as f64 / visits.len() as f64,
        100.0 * top,
        100.0 * top_percent,
        agreement(visits, effort, species, cells),
    )
}

/// Cells visited, the share of the fullest and of the fullest hundredth.
fn concentration(by_cell: &[f64], cells: &[usize]) -> (usize, f64, f64) {
    let mut counts: Vec<f64> = cells.iter().map(|&cell| by_cell[cell]).collect();
    counts.sort_by(|a, b| b.total_cmp(a));
    let total: f64 = counts.iter().sum();
    let hundredth: f64 = counts[..counts.len() / 100].iter().sum();
    (counts.iter().filter(|&&count| count > 0.0).count(), counts[0] / total, hundredth / total)
}

/// Correlation over the land between the logarithms of the true effort and of the visits with finds
/// that it leads one to expect, given what lives where.
fn agreement(visits: &[Visit], effort: &Effort, species: &[Species], cells: &[usize]) -> f64 {
    let works: Vec<f64> = visits.iter().step_by(40).map(|visit| visit.work).collect();
    let truth = effort.truth();
    let logs = cells.iter().map(|&cell| {
        let rate = species.iter().map(|one| one.rate[cell]).sum();
        let found: f64 = works.iter().map(|&work| chance_of_a_find(rate, work)).sum();
        let share = found / works.len() as f64;
        (libm::log(truth[cell]), libm::log(truth[cell] * share))
    });
    correlation(&logs.collect::<Vec<_>>())
}

fn correlation(pairs: &[(f64, f64)]) -> f64 {
    let count = pairs.len() as f64;
    let mean_a = pairs.iter().map(|pair| pair.0).sum::<f64>() / count;
    let mean_b = pairs.iter().map(|pair| pair.1).sum::<f64>() / count;
    let product = |f: fn(f64, f64) -> f64| pairs.iter().map(|&(a, b)| f(a - mean_a, b - mean_b)).sum::<f64>();
    product(|a, b| a * b) / libm::sqrt(product(|a, _| a * a) * product(|_, b| b * b))
}

/// How the truth was made, in words.
pub fn truth_text(effort: &Effort) -> String {
    let (column, row) = column_row(effort.reserve_cell);
    let middle = centre(effort.reserve_cell);
    format!(
        "effort.tif: the known effort of the Skerrow Uplands, an invented land.\n\
         \n\
         Each cell holds the share of all visits that is expected there: float32, sum 1 over the land,\n\
         nodata -9999 elsewhere, the grid of data/environment/temperature.tif. Cells are equal in area.\n\
         Visits that found nothing count here, though they left no record.\n\
         \n\
         {ORDINARY_VISITS} ordinary visits: {even:.0} % of them anywhere on land, the others in proportion to\n\
         \x20 (0.75 exp(-d\u{b2} / 2 (2.4 km)\u{b2}) + 0.25 exp(-d / 5 km))    d: to the nearest primary or secondary road\n\
         \x20 x (1 + 0.9 exp(-t / 0.7 km))                          t: to the nearest track\n\
         \x20 x (p + 15) ^ 0.4                                      p: people per km\u{b2}, Gaussian mean, s.d. 4 km\n\
         \x20 x exp(f)                                              f: smooth noise, s.d. about 0.3, features of\n\
         \x20                                                          14 km and less: favourite corners\n\
         {RESERVE_VISITS} visits of one observer to a heath reserve: a Gaussian bump, s.d. {RESERVE_SD} m, about column {column},\n\
         \x20 row {row} (easting {x:.0}, northing {y:.0}).\n\
         \n\
         The form was fixed before any model was fitted to the records.\n",
        even = 100.0 * EVEN_SHARE,
        x = middle.x,
        y = middle.y,
    )
}
