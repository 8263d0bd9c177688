//! The route: gather, split, fit on training parts, score on held-out parts, choose, fit to all.

use crate::check::{CandidateScores, judge, score, with_floor};
use crate::diag::{Diagnostic, Outcome, Problems, Warnings};
use crate::grid::Region;
use crate::maths::random::Stream;
use crate::maths::sum::sum;
use crate::model::{
    CandidateKind, CandidatePlan, Context, Fitted, OddsBin, examine, fit, observed_to_available,
};
use crate::output::{CandidateFinding, Choice, Finding, Tool};
use crate::plan::StudyPlan;
use crate::proxies::ProxyStack;
use crate::records::{Blocks, Folds, HeldOut, Records, Sink, Training};
use crate::units::Metres;

use super::gather::{Gathered, Needs, Notes, gather};

/// Side of a block where the plan gives none: this part of the region's larger side.
const BLOCK_PART: f64 = 0.1;
/// Classes of a layer in its curve of observed to available.
const CLASSES: usize = 20;

/// Runs a study.
///
/// # Errors
/// When an input cannot be used or a fit fails.
pub fn run(
    plan: &StudyPlan,
    needs: &Needs,
    tool: Tool,
    sink: &mut dyn Sink,
    notes: &mut Notes,
) -> Outcome<Finding> {
    let Gathered { region, layers, records, kept, files, .. } = gather(plan, needs, sink, notes)?;
    let blocks = lay_blocks(plan, &region)?;
    let folds = Folds::deal(&records, &blocks, plan.holdout.split, plan.holdout.folds, plan.seed)?;
    let floor = plan.surface.floor.get();
    let context = Context { floor, blocks: Some(&blocks), candidates: &plan.candidates, seed: plan.seed };
    let work =
        Work { records: &records, region: &region, layers: &layers, blocks: &blocks, folds: &folds, context };
    let candidates: Vec<CandidateFinding> =
        plan.candidates.iter().map(|c| work.candidate(c, needs, notes)).collect::<Outcome<_>>()?;
    let verdict = notes.stage("compare", |_| {
        let complexity: Vec<usize> = candidates.iter().map(|c| c.fitted.complexity).collect();
        let scores: Vec<&CandidateScores> = candidates.iter().map(|c| &c.scores).collect();
        judge(&scores, &complexity, plan.holdout.resamples, plan.seed)
    });
    let delivered = match &plan.surface.candidate {
        Choice::Best => verdict.chosen,
        Choice::Named(name) => {
            candidates.iter().position(|c| c.name == *name).expect("the plan names only candidates it holds")
        }
    };
    let mut warnings = std::mem::take(&mut notes.warnings);
    thin_support(&candidates[delivered], &region, plan.surface.support, &mut warnings);
    Ok(Finding {
        title: plan.title.clone(),
        seed: plan.seed,
        tool,
        region,
        records,
        kept,
        files,
        layers,
        holdout: plan.holdout,
        blocks,
        folds,
        candidates,
        verdict,
        delivered,
        surface: plan.surface.clone(),
        warnings: warnings.0,
    })
}

/// Whether what was gathered can be split and fitted, as far as can be told without fitting.
///
/// # Errors
/// When there is too little to hold out, or a layer is the same everywhere.
pub fn ready(plan: &StudyPlan, gathered: &Gathered) -> Outcome<()> {
    let blocks = lay_blocks(plan, &gathered.region)?;
    Folds::deal(&gathered.records, &blocks, plan.holdout.split, plan.holdout.folds, plan.seed)?;
    let problems: Vec<Diagnostic> = plan
        .candidates
        .iter()
        .filter_map(|c| examine(c, &gathered.layers, gathered.region.grid().cell_side()).err())
        .flat_map(|p| p.0)
        .collect();
    if problems.is_empty() { Ok(()) } else { Err(Problems(problems)) }
}

/// Blocks of the plan's side, or of a tenth of the region's larger side.
fn lay_blocks(plan: &StudyPlan, region: &Region) -> Outcome<Blocks> {
    let default = Metres::new(region.larger_side() * BLOCK_PART).expect("sides are finite");
    let asked = plan.holdout.block.and_then(|b| b.metres(region.grid().cell_side()));
    let side = asked.unwrap_or(default);
    if side < region.grid().cell_side() && asked.is_some() {
        let text = format!("blocks of {side} are smaller than a cell");
        return Err(Diagnostic::plan("block_below_cell", "[holdout] block", text)
            .cure("give a larger `block`")
            .into());
    }
    Ok(Blocks::lay(region, side, &mut Stream::new(plan.seed, "blocks", 0)))
}

/// What a check of a candidate needs.
struct Work<'a> {
    records: &'a Records,
    region: &'a std::sync::Arc<Region>,
    layers: &'a ProxyStack,
    blocks: &'a Blocks,
    folds: &'a Folds,
    context: Context<'a>,
}

impl Work<'_> {
    /// Fits a candidate to all records and checks it on held-out ones.
    fn candidate(&self, plan: &CandidatePlan, needs: &Needs, notes: &mut Notes) -> Outcome<CandidateFinding> {
        needs.observer.begin(&format!("fit and check {}", plan.name), Some(self.folds.count as u64 + 1));
        let all = Training::all(self.records, self.region.clone());
        let fitted =
            notes.stage(format!("fit {}", plan.name), |_| fit(plan, &all, self.layers, self.context))?;
        needs.observer.advance(1);
        let scores = notes
            .stage(format!("check {}", plan.name), |_| self.check(plan, &mut || needs.observer.advance(1)))?;
        needs.observer.end();
        notes.warnings.0.extend(no_weight(&plan.name, &scores));
        notes.warnings.0.extend(fitted.warnings.iter().cloned());
        let odds = odds(plan, self.layers, &all);
        Ok(CandidateFinding { name: plan.name.clone(), kind: plan.kind.clone(), fitted, scores, odds })
    }

    /// Fits a candidate to each training part and scores it on the held-out one.
    fn check(&self, candidate: &CandidatePlan, done: &mut dyn FnMut()) -> Outcome<CandidateScores> {
        let context = Context { blocks: None, ..self.context };
        let mut surfaces = Vec::new();
        let mut parts: Vec<HeldOut> = Vec::new();
        for fold in 0..self.folds.count {
            let (training, held) = self.folds.part(fold, self.records, self.region);
            let fitted: Fitted = fit(candidate, &training, self.layers, context)?;
            surfaces.push(with_floor(&fitted.density, self.context.floor));
            parts.push(held);
            done();
        }
        Ok(score(&surfaces, &parts, self.region, self.blocks))
    }
}

/// Classes of observed to available for the layers a candidate uses.
fn odds(candidate: &CandidatePlan, layers: &ProxyStack, training: &Training) -> Vec<(String, Vec<OddsBin>)> {
    match &candidate.kind {
        CandidateKind::Uses { terms, .. } => terms
            .iter()
            .map(|t| {
                (
                    t.layer.clone(),
                    observed_to_available(layers.layer(&t.layer).field.values(), training, CLASSES),
                )
            })
            .collect(),
        _ => Vec::new(),
    }
}

/// Held-out units where a candidate left no weight at all, or none but the floor's.
fn no_weight(name: &str, scores: &CandidateScores) -> Option<Diagnostic> {
    let count = scores.units.iter().filter(|u| u.density <= 0.0).count();
    (count > 0).then(|| {
        let text = format!("{count} held-out units lie in cells to which the candidate gives no weight");
        Diagnostic::plan("no_weight", format!("candidate `{name}`"), text).cure(
            "its log score is minus infinity: set `floor` in [surface] above 0, or use a wider bandwidth",
        )
    })
}

/// Warns of weight that rests on fewer distinct places than the plan wants.
fn thin_support(c: &CandidateFinding, region: &Region, wanted: f64, warnings: &mut Warnings) {
    let Some(support) = &c.fitted.support else { return };
    let thin = (0..support.len()).filter(|i| support[*i] < wanted);
    let weight = sum(thin.map(|i| c.fitted.density[i] * region.areas()[i])) / region.area();
    let least = support.iter().zip(&c.fitted.density).filter(|(_, d)| **d >= 0.01).map(|(s, _)| *s);
    if least.fold(f64::INFINITY, f64::min) < wanted {
        let text = format!(
            "{:.1} % of the weight lies in cells carried by fewer than {wanted} distinct places",
            weight * 100.0
        );
        warnings.push(
            Diagnostic::plan("thin_support", format!("candidate `{}`", c.name), text)
                .cure("single places can be read back from such cells: use a wider bandwidth before handing over sensitive data"),
        );
    }
}
