//! A paragraph for the methods section of a paper, from the settings and figures of this run.

use minijinja::{Value, context};

use crate::check::Split;
use crate::model::{CandidateKind, CurveForm, TermPlan};
use crate::output::finding::{CandidateFinding, Finding};
use crate::output::settings::{Per, Scale};
use crate::records::Count;

use super::words;

/// A work that can be cited.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
enum Work {
    Berman,
    Boyce,
    Buckland,
    Clayton,
    Efron,
    Hirzel,
    Jones,
    Liang,
    Phillips,
    Smyth,
    Warton2010,
    Warton2013,
}

impl Work {
    /// As it stands in a list of references.
    fn reference(self) -> &'static str {
        match self {
            Self::Berman => {
                "Berman, M. & Turner, T. R. (1992) Approximating point process likelihoods with GLIM. Applied Statistics 41, 31–38."
            }
            Self::Boyce => {
                "Boyce, M. S., Vernier, P. R., Nielsen, S. E. & Schmiegelow, F. K. A. (2002) Evaluating resource selection functions. Ecological Modelling 157, 281–300."
            }
            Self::Buckland => {
                "Buckland, S. T., Anderson, D. R., Burnham, K. P., Laake, J. L., Borchers, D. L. & Thomas, L. (2001) Introduction to Distance Sampling. Oxford University Press."
            }
            Self::Clayton => {
                "Clayton, D. & Kaldor, J. (1987) Empirical Bayes estimates of age-standardized relative risks for use in disease mapping. Biometrics 43, 671–681."
            }
            Self::Efron => {
                "Efron, B. & Tibshirani, R. J. (1993) An Introduction to the Bootstrap. Chapman & Hall."
            }
            Self::Hirzel => {
                "Hirzel, A. H., Le Lay, G., Helfer, V., Randin, C. & Guisan, A. (2006) Evaluating the ability of habitat suitability models to predict species presences. Ecological Modelling 199, 142–152."
            }
            Self::Jones => {
                "Jones, M. C. (1993) Simple boundary correction for kernel density estimation. Statistics and Computing 3, 135–146."
            }
            Self::Liang => {
                "Liang, K.-Y. & Zeger, S. L. (1986) Longitudinal data analysis using generalized linear models. Biometrika 73, 13–22."
            }
            Self::Phillips => {
                "Phillips, S. J., Dudík, M., Elith, J., Graham, C. H., Lehmann, A., Leathwick, J. & Ferrier, S. (2009) Sample selection bias and presence-only distribution models: implications for background and pseudo-absence data. Ecological Applications 19, 181–197."
            }
            Self::Smyth => {
                "Smyth, P. & Wolpert, D. (1999) Linearly combining density estimators via stacking. Machine Learning 36, 59–83."
            }
            Self::Warton2010 => {
                "Warton, D. I. & Shepherd, L. C. (2010) Poisson point process models solve the “pseudo-absence problem” for presence-only data in ecology. Annals of Applied Statistics 4, 1383–1402."
            }
            Self::Warton2013 => {
                "Warton, D. I., Renner, I. W. & Ramp, D. (2013) Model-based control of observer bias for the analysis of presence-only data in ecology. PLoS ONE 8, e79168."
            }
        }
    }
}

/// The paragraph and the works it cites.
pub(super) fn method(f: &Finding) -> Value {
    let mut works = vec![Work::Phillips, Work::Warton2013];
    let parts =
        [records(f), fitted(f, f.chosen(), &mut works), others(f), checked(f, &mut works), delivered(f)];
    let text: Vec<String> = parts.into_iter().filter(|p| !p.is_empty()).collect();
    works.sort_unstable();
    works.dedup();
    context! { text => text.join(" "), references => works.iter().map(|w| w.reference()).collect::<Vec<_>>() }
}

fn records(f: &Finding) -> String {
    let r = &f.records;
    let grid = f.region.grid();
    let (units, places) = (words::weight(r.weight()), words::count(r.places as u64));
    let counted = match r.count {
        Count::Visits => format!(
            "Records of one observer on one date in one cell were counted as one visit, which gave {} visits to {places} cells.",
            words::count(r.visits.count)
        ),
        Count::Records => format!("Every record was counted ({units} in {places} cells)."),
        Count::Places => format!("Every cell with a record was counted once ({units} cells)."),
    };
    let caps: Vec<String> = r
        .capped
        .iter()
        .map(|c| {
            format!(
                "{} of the total to one {}",
                words::percent(c.cap),
                if c.what == "observer" { "observer" } else { "data set" }
            )
        })
        .collect();
    let capped = match caps.as_slice() {
        [] => String::new(),
        caps => format!(
            " They were weighted so as to leave at most {}, which left a weight of {units}.",
            caps.join(" and ")
        ),
    };
    format!(
        "Survey effort was estimated from records of the target group (Phillips et al. 2009) on a grid of {} × {} cells in {}, {} of them ({}) inside the study region. Of {} records read, {} were kept after screening. {counted}{capped}",
        words::count(grid.columns as u64),
        words::count(grid.rows as u64),
        words::name(&grid.crs.label),
        words::count(f.region.len() as u64),
        words::area(f.region.area()),
        words::count(r.ledger.read()),
        words::count(r.ledger.kept()),
    )
}

fn fitted(f: &Finding, c: &CandidateFinding, works: &mut Vec<Work>) -> String {
    match &c.kind {
        CandidateKind::Uniform => {
            "Effort was taken to be even over the region, as no pattern foretold held-out records better."
                .into()
        }
        CandidateKind::Density(_) => smoothed(c, works),
        CandidateKind::Blend(members) => mixed(f, c, members, works),
        CandidateKind::Uses { terms, remainder, .. } => {
            let field = if remainder.is_some() {
                works.push(Work::Clayton);
                ", multiplied by a smooth field of observed over expected records, shrunk to 1 where there are few (after Clayton & Kaldor 1987)"
            } else {
                ""
            };
            curved(f, c, (terms, field), works)
        }
    }
}

fn value(c: &CandidateFinding, name: &str) -> Option<f64> {
    c.fitted.parameters.iter().find(|p| p.name == name).map(|p| p.value)
}

fn smoothed(c: &CandidateFinding, works: &mut Vec<Work>) -> String {
    works.push(Work::Jones);
    let how = if c.fitted.complexity > 0 { ", chosen by leaving out whole outings" } else { "" };
    let bandwidth = value(c, "bandwidth").map_or_else(String::new, words::length);
    format!(
        "Effort was estimated as a Gaussian kernel density (standard deviation {bandwidth} per axis{how}), corrected at the edges of the region so that each record keeps its whole weight inside (Jones 1993)."
    )
}

fn mixed(f: &Finding, c: &CandidateFinding, members: &[String], works: &mut Vec<Work>) -> String {
    works.push(Work::Smyth);
    let shares: Vec<String> = members
        .iter()
        .map(|m| {
            let share = value(c, &format!("weight.{m}")).unwrap_or(0.0);
            format!("“{}” ({})", words::name(m), words::percent(share))
        })
        .collect();
    let parts: Vec<String> = members
        .iter()
        .filter_map(|m| f.candidates.iter().find(|c| c.name == *m))
        .map(|c| format!("“{}”: {}", words::name(&c.name), fitted(f, c, works)))
        .collect();
    format!(
        "Effort was estimated as a mixture of {}, the shares learned on records left out of the members’ fits (Smyth & Wolpert 1999). {}",
        words::list(&shares),
        parts.join(" "),
    )
}

fn curved(
    f: &Finding,
    c: &CandidateFinding,
    (terms, field): (&[TermPlan], &str),
    works: &mut Vec<Work>,
) -> String {
    works.extend([Work::Berman, Work::Warton2010, Work::Liang]);
    let curves: Vec<String> = terms
        .iter()
        .map(|t| {
            let cited = if t.form == CurveForm::HalfNormal {
                works.push(Work::Buckland);
                "; Buckland et al. 2001"
            } else {
                ""
            };
            format!("{} ({}{cited})", words::name(&t.layer), super::explain::form_words(t.form))
        })
        .collect();
    let curves = match curves.as_slice() {
        [one] => format!("a curve over {one}"),
        _ => format!("a product of curves over {}", words::list(&curves)),
    };
    let found: Vec<String> =
        c.fitted.parameters.iter().filter(|p| p.name != "base").map(|p| parameter(f, p)).collect();
    let base = value(c, "base")
        .map_or_else(String::new, |b| format!(" beside an even share of {}", words::percent(b)));
    format!(
        "Effort per unit of area was modelled as {curves}{base}, fitted by maximum likelihood as an inhomogeneous Poisson process over cells (Berman & Turner 1992; Warton & Shepherd 2010), with 95 % intervals from block-wise sandwich variances (Liang & Zeger 1986){field}: {}.",
        found.join("; "),
    )
}

fn parameter(f: &Finding, p: &crate::model::Parameter) -> String {
    let length = p.name == "remainder.bandwidth"
        || p.name.ends_with(".scale")
            && f.layers.0.iter().any(|l| {
                l.measure == crate::proxies::Measure::Distance
                    && p.name.strip_suffix(".scale") == Some(&l.name)
            });
    let write = |v: f64| if length { words::length(v) } else { words::digits(v, 3) };
    let interval = p.interval.map_or_else(String::new, |(l, h)| format!(" [{}, {}]", write(l), write(h)));
    format!("{} {}{interval}", words::name(&p.name), write(p.value))
}

fn others(f: &Finding) -> String {
    let names: Vec<String> = f
        .candidates
        .iter()
        .enumerate()
        .filter(|(i, c)| *i != f.delivered && c.kind != CandidateKind::Uniform)
        .map(|(_, c)| format!("“{}”", words::name(&c.name)))
        .collect();
    if names.is_empty() {
        return String::new();
    }
    format!("It was compared with {} and with an even surface.", words::list(&names))
}

fn checked(f: &Finding, works: &mut Vec<Work>) -> String {
    works.extend([Work::Hirzel, Work::Boyce, Work::Efron]);
    let held = match f.split() {
        Split::Outings => "all records of one observer on one date held out together".into(),
        Split::Random => "all records of a cell held out together".into(),
        Split::Blocks => format!("square blocks of {} held out", words::length(f.blocks.side.get())),
    };
    let [log, auc, boyce, slope] = &f.verdict.standings[f.delivered].scores;
    let figure = |name: &str, e, places| format!("{name} {}", words::both(e, places));
    format!(
        "In {}-fold cross-validation with {held}, the mean log density over that of an even surface was {} nats per {}, {}, {} (Boyce et al. 2002; Hirzel et al. 2006) and {} (95 % intervals from {} bootstrap resamples of spatial blocks of {}; Efron & Tibshirani 1993).",
        f.folds.count,
        words::both(log, 2),
        words::nouns(f.records.count).0,
        figure("AUC", auc, 2),
        figure("continuous Boyce index", boyce, 2),
        figure("calibration slope", slope, 2),
        words::count(f.holdout.resamples as u64),
        words::length(f.blocks.side.get()),
    )
}

fn delivered(f: &Finding) -> String {
    let per = match f.surface.per {
        Per::Cell => "per cell (in proportion to the chance that a background point falls in it)",
        Per::Km2 => "per unit of area",
    };
    let scale = match f.surface.scale {
        Scale::Sum => "cells add to 1",
        Scale::Max => "the largest value is 1",
        Scale::Mean => "the mean over cells is 1",
    };
    let floor = f.surface.floor.get();
    let even = if floor > 0.0 {
        format!(
            ", with {} of the weight spread evenly so that no cell has weight zero",
            words::percent(floor)
        )
    } else {
        String::new()
    };
    format!(
        "The surface gives effort {per}, scaled so that {scale}{even}, and was used to weight the background (Phillips et al. 2009; Warton, Renner & Ramp 2013). It was made with {} {} (seed {}).",
        "trodden", f.tool.version, f.seed.0,
    )
}
