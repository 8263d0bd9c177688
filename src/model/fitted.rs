//! What a fit gives, and the one door to all fits.

use crate::diag::{Diagnostic, Outcome};
use crate::maths::sum::{par_sum, sum};
use crate::proxies::ProxyStack;
use crate::records::{Blocks, Training};
use crate::units::{Metres, Seed};

use super::settings::{CandidateKind, CandidatePlan, Fit};
use super::{access, blend, density, remainder};

/// A parameter of a candidate.
#[derive(Debug, Clone, PartialEq)]
pub struct Parameter {
    /// Its name in results, such as `roads.scale`.
    pub name: String,
    /// Its value.
    pub value: f64,
    /// 95 % interval, where one can be given.
    pub interval: Option<(f64, f64)>,
    /// Whether it was fitted rather than given.
    pub fitted: bool,
}

/// How a number was chosen.
#[derive(Debug, Clone, PartialEq)]
pub struct Evidence {
    /// The parameter.
    pub parameter: String,
    /// Name of the criterion, larger is better.
    pub criterion: &'static str,
    /// (value of the parameter, criterion), ascending.
    pub tried: Vec<(f64, f64)>,
}

/// A fitted candidate.
#[derive(Debug, Clone)]
pub struct Fitted {
    /// Density of effort over that of the uniform surface, by cell: its mean over the region,
    /// weighted by area, is 1.
    pub density: Vec<f64>,
    /// Its parameters, given and fitted.
    pub parameters: Vec<Parameter>,
    /// How fitted numbers were chosen.
    pub evidence: Vec<Evidence>,
    /// Effective number of distinct places that carry each cell's weight; `None`: all of them.
    pub support: Option<Vec<f64>>,
    /// How many parameters were fitted, those of a blend's members included: what "simpler" means
    /// between candidates.
    pub complexity: usize,
    /// What deserves attention.
    pub warnings: Vec<Diagnostic>,
}

/// What a fit needs beside training records and layers.
#[derive(Clone, Copy)]
pub struct Context<'a> {
    /// Share of the weight the delivered surface spreads evenly.
    pub floor: f64,
    /// Blocks behind the parameters' intervals; `None`: no intervals are wanted.
    pub blocks: Option<&'a Blocks>,
    /// All candidates of the plan, for a blend to find its members.
    pub candidates: &'a [CandidatePlan],
    /// Seed of the inner folds.
    pub seed: Seed,
}

/// Fits one candidate to training records.
///
/// # Errors
/// When a layer cannot explain anything, the records leave nothing to fit, or the fit does not
/// converge.
pub fn fit(
    plan: &CandidatePlan,
    training: &Training,
    layers: &ProxyStack,
    context: Context,
) -> Outcome<Fitted> {
    match &plan.kind {
        CandidateKind::Uniform => Ok(uniform(training)),
        CandidateKind::Blend(members) => blend::fit(&plan.name, members, training, layers, context),
        CandidateKind::Density(density) => density::fit(&plan.name, density, training, context),
        CandidateKind::Uses { terms, base, remainder } => {
            let asked = access::Asked { name: &plan.name, terms, base: *base };
            let fitted = access::fit(&asked, training, layers, context)?;
            match remainder {
                None => Ok(fitted),
                Some(bandwidth) => remainder::add(&plan.name, fitted, *bandwidth, training),
            }
        }
    }
}

/// Whether a candidate's layers and given numbers can be used at all.
///
/// # Errors
/// When a layer is constant or has values its curve cannot take, or a bandwidth is below half a cell.
pub fn examine(plan: &CandidatePlan, layers: &ProxyStack, cell: Metres) -> Outcome<()> {
    match &plan.kind {
        CandidateKind::Uniform | CandidateKind::Blend(_) => Ok(()),
        CandidateKind::Density(density) => density::examine(&plan.name, density, cell),
        CandidateKind::Uses { terms, remainder, .. } => {
            if let Some(Fit::Given(length)) = remainder {
                let given = length.metres(cell).expect("the plan refuses degrees");
                density::refuse_small(&format!("candidate `{}`, remainder", plan.name), given, cell)?;
            }
            access::examine(&plan.name, terms, layers)
        }
    }
}

/// No pattern at all.
fn uniform(training: &Training) -> Fitted {
    Fitted {
        density: vec![1.0; training.region().len()],
        parameters: Vec::new(),
        evidence: Vec::new(),
        support: None,
        complexity: 0,
        warnings: Vec::new(),
    }
}

/// Scales values per unit of area so that their mean over the region, weighted by area, is 1.
pub(super) fn normalise(values: &mut [f64], areas: &[f64]) {
    let mass = par_sum(values.len(), |i| values[i] * areas[i]);
    let factor = sum(areas.iter().copied()) / mass;
    values.iter_mut().for_each(|v| *v *= factor);
}

/// Units observed in a class of a layer, beside what its area would hold under even effort.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct OddsBin {
    /// Smallest value of the class.
    pub from: f64,
    /// Largest value of the class.
    pub to: f64,
    /// Weight of the units in it.
    pub units: f64,
    /// Share of the region's area in it.
    pub area_share: f64,
}

impl OddsBin {
    /// Observed share over available share.
    pub fn ratio(&self, total: f64) -> f64 {
        self.units / total / self.area_share
    }
}

/// Classes of a layer that hold about equal areas, with the units in each.
pub fn observed_to_available(values: &[f64], training: &Training, classes: usize) -> Vec<OddsBin> {
    let areas = training.region().areas();
    let total = training.region().area();
    let mut order: Vec<usize> = (0..values.len()).collect();
    order.sort_unstable_by(|&a, &b| values[a].total_cmp(&values[b]));
    let mut class = vec![0_u32; values.len()];
    let mut bins: Vec<OddsBin> = Vec::new();
    let mut passed = 0.0;
    let mut start = 0;
    while start < order.len() {
        let value = values[order[start]];
        let ties = order[start..].iter().take_while(|&&i| values[i] == value).count();
        let full = passed >= total * bins.len() as f64 / classes as f64;
        if full {
            bins.push(OddsBin { from: value, to: value, units: 0.0, area_share: 0.0 });
        }
        let last = bins.len() - 1;
        for &i in &order[start..start + ties] {
            class[i] = last as u32;
            passed += areas[i];
            bins[last].area_share += areas[i] / total;
        }
        bins[last].to = value;
        start += ties;
    }
    training.units().iter().for_each(|u| bins[class[u.cell as usize] as usize].units += u.weight);
    bins
}
