//! Kernel density of the units, each keeping its whole weight inside the region.
//!
//! # Formula
//! f(u) = Σ wᵢ K(u − xᵢ) / e(xᵢ), e(x) = ∫ K(v − x) dv over the observed part of the region; K is a
//! Gaussian of standard deviation `bandwidth` per axis, cut at five of them.
//!
//! # Source
//! Jones, M. C. (1993), Simple boundary correction for kernel density estimation, Statistics and
//! Computing 3, 135–146; Diggle, P. J. (2010), in Handbook of Spatial Statistics, eq. 18.9.

use std::collections::BTreeMap;

use crate::diag::{Diagnostic, Outcome};
use crate::maths::float;
use crate::maths::optimise::{End, Search, maximise};
use crate::maths::sum::sum;
use crate::records::Training;
use crate::units::Metres;

use super::fitted::{Context, Evidence, Fitted, Parameter, normalise};
use super::groups::{Groups, Levels};
use super::lattice::{Lattice, Power, Spot};
use super::settings::{DensityPlan, Fit};

/// Bandwidths tried on the first, even grid (on the log scale).
pub(super) const STEPS: usize = 14;

/// Fits (or takes) the bandwidth and builds the surface.
pub(super) fn fit(name: &str, plan: &DensityPlan, training: &Training, context: Context) -> Outcome<Fitted> {
    let cell = training.region().grid().cell_side();
    let half = training.region().larger_side() / 2.0;
    let mut warnings = Vec::new();
    let mut evidence = Vec::new();
    let bandwidth = match plan.bandwidth {
        Fit::Given(length) => {
            let given = length.metres(cell).expect("the plan refuses degrees");
            warnings.extend(odd(name, given, cell, half)?);
            given.get()
        }
        Fit::Fitted => {
            let found = search(name, training, context.floor)?;
            warnings.extend(at_end(name, &found));
            evidence.push(curve(&found));
            float::exp(found.best)
        }
    };
    let (density, support) = surface(training, bandwidth);
    let fitted = plan.bandwidth == Fit::Fitted;
    let parameters = vec![Parameter { name: "bandwidth".into(), value: bandwidth, interval: None, fitted }];
    Ok(Fitted {
        density,
        parameters,
        evidence,
        support: Some(support),
        complexity: usize::from(fitted),
        warnings,
    })
}

/// Whether a given bandwidth can be used on a grid.
pub(super) fn examine(name: &str, plan: &DensityPlan, cell: Metres) -> Outcome<()> {
    match plan.bandwidth {
        Fit::Given(length) => {
            odd(name, length.metres(cell).expect("the plan refuses degrees"), cell, f64::INFINITY).map(drop)
        }
        Fit::Fitted => Ok(()),
    }
}

/// A given bandwidth that is too small is an error, one that is too large a warning.
fn odd(name: &str, given: Metres, cell: Metres, half: f64) -> Outcome<Option<Diagnostic>> {
    let place = format!("candidate `{name}`");
    refuse_small(&place, given, cell)?;
    Ok((given.get() > 2.0 * half).then(|| {
        Diagnostic::plan(
            "bandwidth_above_region",
            place,
            format!("bandwidth {given} is larger than the region"),
        )
        .cure("the surface is nearly even; give a smaller `bandwidth`, or \"fit\"")
    }))
}

/// A kernel narrower than half a cell falls between the cells.
pub(super) fn refuse_small(place: &str, given: Metres, cell: Metres) -> Outcome<()> {
    if given.get() >= cell.get() / 2.0 {
        return Ok(());
    }
    let text =
        format!("bandwidth {given} is below half a cell ({cell}): the kernel would fall between the cells");
    Err(Diagnostic::plan("bandwidth_below_cell", place, text)
        .cure("give a larger `bandwidth`, or a finer grid")
        .into())
}

pub(super) fn at_end(name: &str, found: &Search) -> Option<Diagnostic> {
    let (side, cure) = match found.at_end? {
        End::Low => (
            "lower",
            "the records are spread more finely than the grid or their uncertainty can tell: use finer cells, or give a `bandwidth`",
        ),
        End::High => (
            "upper",
            "the records show no pattern at this extent: see whether `uniform` does as well, or give a `bandwidth`",
        ),
    };
    let length = Metres::new(float::exp(found.best))?;
    let text = format!("the fitted bandwidth {length} lies at the {side} end of the range searched");
    Some(Diagnostic::plan("bandwidth_at_end", format!("candidate `{name}`"), text).cure(cure))
}

fn curve(found: &Search) -> Evidence {
    Evidence {
        parameter: "bandwidth".into(),
        criterion: "mean log density over uniform of left-out outings (nats)",
        tried: found.tried.iter().map(|(x, v)| (float::exp(*x), *v)).collect(),
    }
}

/// Density over uniform and support of every cell at a bandwidth in metres.
fn surface(training: &Training, bandwidth: f64) -> (Vec<f64>, Vec<f64>) {
    let lattice = Lattice::new(training, 1);
    let (spots, weights) = binned(training, &lattice);
    let edges = lattice.edges(bandwidth, &spots);
    let scaled: Vec<f64> = weights.iter().zip(&edges).map(|(w, e)| w / e).collect();
    let field = lattice.spread(bandwidth, &spots, &scaled, Power::One);
    let region = training.region();
    let mut density: Vec<f64> = (0..region.len()).map(|c| field[lattice.spot(training, c)]).collect();
    normalise(&mut density, region.areas());
    (density, support(training, &lattice, bandwidth))
}

/// Units shared out among the four nearest cell centres, nearer ones more: the kernel's answer is then
/// right to second order in the cell's side, where the nearest centre alone is right to first order
/// only.
///
/// # Source
/// Jones, M. C. & Lotwick, H. W. (1984), Applied Statistics 33, 120–122 (linear binning).
fn binned(training: &Training, lattice: &Lattice) -> (Vec<Spot>, Vec<f64>) {
    let mut bins: BTreeMap<Spot, f64> = BTreeMap::new();
    for unit in training.units() {
        let spot = lattice.spot(training, unit.cell as usize);
        for (share, at) in lattice.corners(spot, unit.offset) {
            *bins.entry(at).or_insert(0.0) += share * unit.weight;
        }
    }
    bins.into_iter().unzip()
}

/// Effective number of distinct places that carry the weight of every cell.
fn support(training: &Training, lattice: &Lattice, bandwidth: f64) -> Vec<f64> {
    let places = training.places();
    let spots: Vec<Spot> = places.iter().map(|(c, _)| lattice.spot(training, *c)).collect();
    let edges = lattice.edges(bandwidth, &spots);
    let weights: Vec<f64> = places.iter().zip(&edges).map(|((_, w), e)| w / e).collect();
    let squares: Vec<f64> = weights.iter().map(|w| w * w).collect();
    let first = lattice.spread(bandwidth, &spots, &weights, Power::One);
    let second = lattice.spread(bandwidth, &spots, &squares, Power::Two);
    let at = |cell: usize| lattice.spot(training, cell);
    (0..training.region().len())
        .map(|c| if second[at(c)] > 0.0 { float::square(first[at(c)]) / second[at(c)] } else { 0.0 })
        .collect()
}

/// Searches the bandwidth that best foretells left-out outings.
fn search(name: &str, training: &Training, floor: f64) -> Outcome<Search> {
    if training.places().len() < 2 {
        return Err(Diagnostic::input(
            "nothing_to_fit",
            format!("candidate `{name}`"),
            "all training records lie in one place, so no bandwidth can be fitted",
        )
        .cure("give a `bandwidth` as a length, or use a finer grid")
        .into());
    }
    let mut levels = Levels::new(training);
    let (low, high) = levels.range();
    Ok(maximise(float::ln(low), float::ln(high), STEPS, |x| {
        criterion(levels.at(float::exp(x)), float::exp(x), floor)
    }))
}

/// Mean log density over uniform of the left-out units at a bandwidth.
fn criterion(groups: &Groups, bandwidth: f64, floor: f64) -> f64 {
    let edges = groups.lattice.edges(bandwidth, &groups.spots);
    let scaled: Vec<f64> = groups.weights.iter().zip(&edges).map(|(w, e)| w / e).collect();
    let field = groups.lattice.spread(bandwidth, &groups.spots, &scaled, Power::One);
    let total = sum(groups.weights.iter().copied());
    let taps = groups.lattice.taps(bandwidth);
    let terms = groups.groups.iter().map(|group| {
        let own = groups.own(group, &edges, &taps);
        let rest = total - sum(group.iter().map(|g| g.1));
        sum(group.iter().zip(own).map(|((i, w), own)| {
            let density =
                (field[groups.spots[*i]] - own).max(0.0) * groups.area / rest.max(f64::MIN_POSITIVE);
            w * float::ln((floor + (1.0 - floor) * density).max(1e-12))
        }))
    });
    sum(terms) / total
}

#[cfg(test)]
mod tests {
    use std::sync::Arc;

    use super::*;
    use crate::grid::{Region, grids};
    use crate::maths::random::Stream;
    use crate::units::Seed;

    fn clustered(doubled: bool) -> Training {
        let mut stream = Stream::new(Seed(9), "cells", 0);
        let inside: Vec<bool> = (0..3600).map(|i| i % 60 < 45 || i / 60 > 20).collect();
        let region = Arc::new(Region::new(grids::planar(60, 60, 100.0), &inside));
        let mut cells: Vec<u32> = (0..150)
            .map(|i| {
                let (column, row) = (5 + 12 * (i % 4) + stream.below(6), 25 + stream.below(8));
                region.compact(row * 60 + column).unwrap() as u32
            })
            .collect();
        if doubled {
            cells.extend(cells.clone());
        }
        let training = Training::of_cells(region, &cells);
        if doubled { training.with_outings(|i| (i % 150) as u32) } else { training }
    }

    /// Each unit keeps its whole weight inside the region, whatever its shape.
    #[test]
    fn mass_is_kept() {
        let training = clustered(false);
        let lattice = Lattice::new(&training, 1);
        let places = training.places();
        let spots: Vec<Spot> = places.iter().map(|(c, _)| lattice.spot(&training, *c)).collect();
        for bandwidth in [60.0, 180.0, 900.0, 3000.0] {
            let edges = lattice.edges(bandwidth, &spots);
            let weights: Vec<f64> = places.iter().zip(&edges).map(|((_, w), e)| w / e).collect();
            let field = lattice.spread(bandwidth, &spots, &weights, Power::One);
            let region = training.region();
            let mass = sum((0..region.len()).map(|c| field[lattice.spot(&training, c)] * region.areas()[c]));
            assert!((mass - 150.0).abs() < 150.0 * 1e-9, "{bandwidth}: {mass}");
        }
    }

    /// Every record twice in its outing says nothing new about how wide the kernel should be.
    #[test]
    fn doubling_every_record_leaves_the_bandwidth() {
        let once = search("test", &clustered(false), 0.01).unwrap().best;
        let twice = search("test", &clustered(true), 0.01).unwrap().best;
        assert!((once - twice).abs() < 1e-9, "{once} {twice}");
    }
}
