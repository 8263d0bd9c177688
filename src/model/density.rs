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
use crate::records::{Training, Unit, median_uncertainty};
use crate::units::Metres;

use super::fitted::{Context, Evidence, Fitted, Parameter, normalise};
use super::lattice::{Lattice, Power, Spot, Taps};
use super::settings::{DensityPlan, Fit};

/// Bandwidths tried on the first, even grid (on the log scale).
const STEPS: usize = 14;
/// A lattice step is doubled while the bandwidth spans at least this many of the doubled steps.
const CELLS_PER_BANDWIDTH: f64 = 4.0;
/// Outings of more units than this are taken out by a pass of their own rather than pair by pair.
const PAIRWISE: usize = 256;

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
            let found = search(name, training, context.floor, (cell.get(), half))?;
            warnings.extend(at_end(name, &found));
            evidence.push(curve(&found));
            float::exp(found.best)
        }
    };
    let (density, support) = surface(training, bandwidth);
    let fitted = plan.bandwidth == Fit::Fitted;
    let parameters = vec![Parameter { name: "bandwidth".into(), value: bandwidth, interval: None, fitted }];
    Ok(Fitted { density, parameters, evidence, support: Some(support), warnings })
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
    if given.get() < cell.get() / 2.0 {
        let text = format!(
            "bandwidth {given} is below half a cell ({cell}): the kernel would fall between the cells"
        );
        return Err(Diagnostic::plan("bandwidth_below_cell", place, text)
            .cure("give a larger `bandwidth`, or a finer grid")
            .into());
    }
    Ok((given.get() > 2.0 * half).then(|| {
        Diagnostic::plan(
            "bandwidth_above_region",
            place,
            format!("bandwidth {given} is larger than the region"),
        )
        .cure("the surface is nearly even; give a smaller `bandwidth`, or \"fit\"")
    }))
}

fn at_end(name: &str, found: &Search) -> Option<Diagnostic> {
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
    let places = training.places();
    let spots: Vec<Spot> = places.iter().map(|(c, _)| lattice.spot(training, *c)).collect();
    let edges = lattice.edges(bandwidth, &spots);
    let weights: Vec<f64> = places.iter().zip(&edges).map(|((_, w), e)| w / e).collect();
    let squares: Vec<f64> = weights.iter().map(|w| w * w).collect();
    let first = lattice.spread(bandwidth, &spots, &weights, Power::One);
    let second = lattice.spread(bandwidth, &spots, &squares, Power::Two);
    let region = training.region();
    let at = |cell: usize| lattice.spot(training, cell);
    let support = (0..region.len())
        .map(|c| if second[at(c)] > 0.0 { float::square(first[at(c)]) / second[at(c)] } else { 0.0 })
        .collect();
    let mut density: Vec<f64> = (0..region.len()).map(|c| first[at(c)]).collect();
    normalise(&mut density, region.areas());
    (density, support)
}

/// Searches the bandwidth that best foretells left-out outings.
fn search(name: &str, training: &Training, floor: f64, (cell, half): (f64, f64)) -> Outcome<Search> {
    if training.places().len() < 2 {
        return Err(Diagnostic::input(
            "nothing_to_fit",
            format!("candidate `{name}`"),
            "all training records lie in one place, so no bandwidth can be fitted",
        )
        .cure("give a `bandwidth` as a length, or use a finer grid")
        .into());
    }
    let least = median_uncertainty(training.units()).map_or(cell, |u| u.get().max(cell)).min(half);
    let mut criterion = Criterion { training, floor, cell, levels: BTreeMap::new() };
    Ok(maximise(float::ln(least), float::ln(half.max(least * 1.001)), STEPS, |x| {
        criterion.value(float::exp(x))
    }))
}

/// Cross-validated log likelihood, leaving out whole outings (places where there are none).
struct Criterion<'a> {
    training: &'a Training,
    floor: f64,
    cell: f64,
    levels: BTreeMap<usize, Level>,
}

/// The units on a lattice, grouped by what is left out together.
struct Level {
    lattice: Lattice,
    spots: Vec<Spot>,
    weights: Vec<f64>,
    groups: Vec<Vec<(usize, f64)>>,
    area: f64,
}

impl Criterion<'_> {
    fn value(&mut self, bandwidth: f64) -> f64 {
        let step = step_for(bandwidth / self.cell);
        let level = self.levels.entry(step).or_insert_with(|| Level::new(self.training, step));
        level.value(bandwidth, self.floor)
    }
}

/// The lattice step, a power of two, that suits a bandwidth in cells.
fn step_for(cells: f64) -> usize {
    let mut step = 1;
    while cells / (2 * step) as f64 >= CELLS_PER_BANDWIDTH {
        step *= 2;
    }
    step
}

impl Level {
    fn new(training: &Training, step: usize) -> Self {
        let lattice = Lattice::new(training, step);
        let mut numbers: BTreeMap<Spot, usize> = BTreeMap::new();
        let mut groups: BTreeMap<u32, BTreeMap<Spot, f64>> = BTreeMap::new();
        let key = |u: &Unit| if training.outings() { u.outing } else { u.cell };
        for unit in training.units() {
            let spot = lattice.spot(training, unit.cell as usize);
            numbers.insert(spot, 0);
            *groups.entry(key(unit)).or_default().entry(spot).or_insert(0.0) += unit.weight;
        }
        numbers.values_mut().enumerate().for_each(|(i, n)| *n = i);
        let groups: Vec<Vec<(usize, f64)>> = groups
            .into_values()
            .map(|g| g.into_iter().map(|(spot, w)| (numbers[&spot], w)).collect())
            .collect();
        let mut weights = vec![0.0; numbers.len()];
        groups.iter().flatten().for_each(|(i, w)| weights[*i] += w);
        let area = sum((0..training.region().len()).map(|c| training.exposure(c)));
        Self { lattice, spots: numbers.into_keys().collect(), weights, groups, area }
    }

    /// Mean log density over uniform of the left-out units.
    fn value(&self, bandwidth: f64, floor: f64) -> f64 {
        let edges = self.lattice.edges(bandwidth, &self.spots);
        let scaled: Vec<f64> = self.weights.iter().zip(&edges).map(|(w, e)| w / e).collect();
        let field = self.lattice.spread(bandwidth, &self.spots, &scaled, Power::One);
        let total = sum(self.weights.iter().copied());
        let taps = self.lattice.taps(bandwidth);
        let terms = self.groups.iter().map(|group| {
            let own = self.own(group, &edges, &taps);
            let rest = total - sum(group.iter().map(|g| g.1));
            sum(group.iter().zip(own).map(|((i, w), own)| {
                let density =
                    (field[self.spots[*i]] - own).max(0.0) * self.area / rest.max(f64::MIN_POSITIVE);
                w * float::ln((floor + (1.0 - floor) * density).max(1e-12))
            }))
        });
        sum(terms) / total
    }

    /// What a group itself adds to the field at each of its spots.
    fn own(&self, group: &[(usize, f64)], edges: &[f64], taps: &Taps) -> Vec<f64> {
        if group.len() > PAIRWISE {
            let spots: Vec<Spot> = group.iter().map(|(i, _)| self.spots[*i]).collect();
            let weights: Vec<f64> = group.iter().map(|(i, w)| w / edges[*i]).collect();
            let field = self.lattice.spread(taps.sigma, &spots, &weights, Power::One);
            return spots.iter().map(|s| field[*s]).collect();
        }
        group
            .iter()
            .map(|(i, _)| {
                group
                    .iter()
                    .map(|(j, w)| w / edges[*j] * self.lattice.kernel(taps, self.spots[*i], self.spots[*j]))
                    .sum()
            })
            .collect()
    }
}
