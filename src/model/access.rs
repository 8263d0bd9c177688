//! Effort from layers: an inhomogeneous Poisson process over cells, fitted by maximum likelihood.
//!
//! # Formula
//! Effort per unit of area f = (1 − base)·G/mean(G) + base, G = Π g_k(layer_k); the likelihood of
//! the units given their number is Σ wᵢ ln [f(cellᵢ) / mean of f over the observed area], so that what
//! is available enters with its own distances and values; mean(G) is over the whole region. Solved by Levenberg–Marquardt steps on
//! the outer product of scores, within bounds. Intervals are from block-wise sandwich variances: the
//! records of one block may depend on each other as they like.
//!
//! # Source
//! Berman, M. & Turner, T. R. (1992), Applied Statistics 41, 31–38; Warton, D. I. & Shepherd, L. C.
//! (2010), Annals of Applied Statistics 4, 1383–1402; Liang, K.-Y. & Zeger, S. L. (1986), Biometrika
//! 73, 13–22 (sandwich); Marquardt, D. W. (1963), SIAM Journal 11, 431–441.

use rayon::prelude::*;

use crate::diag::{Diagnostic, Outcome};
use crate::maths::sum::par_totals;
use crate::maths::{float, linear};
use crate::proxies::ProxyStack;
use crate::records::Training;
use crate::units::Share;

use super::fitted::{Context, Fitted, Parameter, normalise};
use super::settings::{CurveForm, Fit, TermPlan};
use super::terms::{Free, Term};

/// Most parameters a candidate may have (two per layer and the base).
pub(super) const MOST: usize = 33;
/// Cells of the sample on which the search begins.
const SAMPLE: usize = 20_000;
/// Starts of the search: how far the first scales are stretched.
const STARTS: [f64; 4] = [0.03, 0.3, 1.0, 3.0];
/// The search is over when a step promises less than this many nats per unit.
const TOLERANCE: f64 = 1e-10;
/// Steps after which a search is given up.
const MOST_STEPS: usize = 500;
/// Largest base share searched.
const MOST_BASE: f64 = 0.999;

/// What the plan asks for.
pub(super) struct Asked<'a> {
    pub name: &'a str,
    pub terms: &'a [TermPlan],
    pub base: Fit<Share>,
}

/// Fits the candidate.
pub(super) fn fit(
    asked: &Asked,
    training: &Training,
    layers: &ProxyStack,
    context: Context,
) -> Outcome<Fitted> {
    let model = Model::new(asked, training, layers)?;
    let sample: Vec<u32> = {
        let stride = training.region().len().div_ceil(SAMPLE);
        (0..training.region().len() as u32).step_by(stride).collect()
    };
    let best = STARTS
        .iter()
        .map(|spread| model.climb(&model.start(*spread), &Cells::Some(&sample)))
        .max_by(|a, b| a.value.total_cmp(&b.value))
        .expect("there are starts");
    let found = model.climb(&best.at, &Cells::All(training.region().len()));
    if !found.converged {
        let text = "the fit did not converge: the layers leave several answers equally likely";
        return Err(Diagnostic::input("no_convergence", model.place, text)
            .cure("take out a layer that repeats another, or give one of the parameters")
            .into());
    }
    Ok(model.result(&found, context))
}

/// Whether the layers can be used at all.
pub(super) fn examine(name: &str, terms: &[TermPlan], layers: &ProxyStack) -> Outcome<()> {
    let place = format!("candidate `{name}`");
    terms.iter().try_for_each(|t| Term::new(t, layers.layer(&t.layer), &place).map(drop))
}

/// The cells a pass runs over.
pub(super) enum Cells<'a> {
    All(usize),
    Some(&'a [u32]),
}

impl Cells<'_> {
    fn len(&self) -> usize {
        match self {
            Self::All(n) => *n,
            Self::Some(list) => list.len(),
        }
    }

    fn at(&self, i: usize) -> usize {
        match self {
            Self::All(_) => i,
            Self::Some(list) => list[i] as usize,
        }
    }
}

/// Where a search ended.
struct Found {
    at: Vec<f64>,
    value: f64,
    converged: bool,
}

/// Mean of G over an area, and of its derivatives over the mean.
#[derive(Clone)]
pub(super) struct Mean {
    value: f64,
    slopes: Vec<f64>,
}

/// Means over the region, which the base share is measured against, and over its observed part, in
/// which units could be.
pub(super) struct Moments {
    region: Mean,
    observed: Mean,
}

impl Moments {
    /// Mean of f over the observed part, and derivatives of its logarithm into `slopes`.
    fn level(&self, base: f64, slopes: &mut [f64; MOST]) -> f64 {
        let ratio = self.observed.value / self.region.value;
        let level = (1.0 - base) * ratio + base;
        let part = (1.0 - base) * ratio / level;
        let width = self.region.slopes.len();
        let both = self.observed.slopes.iter().zip(&self.region.slopes);
        slopes.iter_mut().zip(both).for_each(|(s, (seen, all))| *s = part * (seen - all));
        slopes[width] = (1.0 - ratio) / level;
        level
    }
}

pub(super) struct Model<'a> {
    place: String,
    terms: Vec<Term>,
    base: Option<f64>,
    training: &'a Training,
    pub(super) exposure: Vec<f64>,
    pub(super) places: Vec<(usize, f64)>,
    pub(super) total: f64,
}

impl<'a> Model<'a> {
    fn new(asked: &Asked, training: &'a Training, layers: &ProxyStack) -> Outcome<Self> {
        let place = format!("candidate `{}`", asked.name);
        if asked.terms.len() * 2 + 1 > MOST {
            let text = format!("more than {} layers in one candidate", MOST / 2);
            return Err(Diagnostic::plan("too_many_layers", place, text).cure("use fewer layers").into());
        }
        let terms: Vec<Term> = asked
            .terms
            .iter()
            .map(|t| Term::new(t, layers.layer(&t.layer), &place))
            .collect::<Outcome<_>>()?;
        let base = match asked.base {
            Fit::Given(share) => Some(share.get()),
            Fit::Fitted => None,
        };
        Ok(Self {
            place,
            terms,
            base,
            training,
            exposure: (0..training.region().len()).map(|c| training.exposure(c)).collect(),
            places: training.places(),
            total: training.weight(),
        })
    }

    /// Number of parameters, given ones included; the base is the last.
    pub(super) fn width(&self) -> usize {
        self.terms.iter().map(Term::width).sum::<usize>() + 1
    }

    /// The free ranges of all parameters; `None` where given.
    pub(super) fn ranges(&self, spread: f64) -> Vec<Option<Free>> {
        let of_terms = self.terms.iter().flat_map(|t| {
            (0..t.width()).map(move |k| if t.given(k).is_some() { None } else { Some(t.free(k, spread)) })
        });
        let base = self.base.is_none().then_some(Free { start: 0.1, low: 0.0, high: MOST_BASE });
        of_terms.chain([base]).collect()
    }

    fn start(&self, spread: f64) -> Vec<f64> {
        let given: Vec<Option<f64>> =
            self.terms.iter().flat_map(|t| (0..t.width()).map(|k| t.given(k))).chain([self.base]).collect();
        self.ranges(spread)
            .iter()
            .zip(given)
            .map(|(r, g)| {
                g.unwrap_or_else(|| r.expect("free").start.clamp(r.expect("free").low, r.expect("free").high))
            })
            .collect()
    }

    pub(super) fn ready(&self, at: &[f64]) -> Vec<[f64; 4]> {
        let mut from = 0;
        self.terms
            .iter()
            .map(|t| {
                let ready = t.ready(&at[from..from + t.width()]);
                from += t.width();
                ready
            })
            .collect()
    }

    /// G in a cell, with derivatives of its logarithm.
    #[inline]
    fn product(&self, cell: usize, ready: &[[f64; 4]], slopes: &mut [f64; MOST]) -> f64 {
        let (mut log, mut from) = (0.0, 0);
        for (term, p) in self.terms.iter().zip(ready) {
            log += term.log_curve(cell, p, &mut slopes[from..from + term.width()]);
            from += term.width();
        }
        float::exp(log)
    }

    pub(super) fn moments(&self, ready: &[[f64; 4]], cells: &Cells) -> Moments {
        let areas = self.training.region().areas();
        let region = self.mean(ready, cells, areas);
        let observed =
            if self.training.whole() { region.clone() } else { self.mean(ready, cells, &self.exposure) };
        Moments { region, observed }
    }

    fn mean(&self, ready: &[[f64; 4]], cells: &Cells, areas: &[f64]) -> Mean {
        let width = self.width() - 1;
        let totals = par_totals(cells.len(), width + 2, |i, sums| {
            let cell = cells.at(i);
            let area = areas[cell];
            if area > 0.0 {
                let mut slopes = [0.0; MOST];
                let g = area * self.product(cell, ready, &mut slopes);
                sums[0] += area;
                sums[1] += g;
                sums[2..].iter_mut().zip(&slopes).for_each(|(s, d)| *s += g * d);
            }
        });
        let mass = totals[1].max(f64::MIN_POSITIVE);
        Mean { value: mass / totals[0], slopes: totals[2..].iter().map(|s| s / mass).collect() }
    }

    /// f in a cell over its mean in the observed part, and derivatives of its logarithm by all
    /// parameters into `scores`.
    pub(super) fn score(
        &self,
        cell: usize,
        base: f64,
        state: (&[[f64; 4]], &Moments),
        scores: &mut [f64; MOST],
    ) -> f64 {
        let (ready, moments) = state;
        let mut slopes = [0.0; MOST];
        let relative = self.product(cell, ready, &mut slopes) / moments.region.value;
        let f = ((1.0 - base) * relative + base).max(1e-300);
        let part = (1.0 - base) * relative / f;
        let mut level_slopes = [0.0; MOST];
        let level = moments.level(base, &mut level_slopes);
        let width = moments.region.slopes.len();
        for k in 0..width {
            scores[k] = part * (slopes[k] - moments.region.slopes[k]) - level_slopes[k];
        }
        scores[width] = (1.0 - relative) / f - level_slopes[width];
        f / level
    }

    /// Log likelihood per unit, its gradient and the mean outer product of scores.
    fn likelihood(&self, at: &[f64], cells: &Cells) -> (f64, Vec<f64>, Vec<f64>) {
        let ready = self.ready(at);
        let moments = self.moments(&ready, cells);
        let n = self.width();
        let base = at[n - 1];
        let totals = par_totals(self.places.len(), 1 + n + n * n, |i, sums| {
            let (cell, weight) = self.places[i];
            let mut scores = [0.0; MOST];
            let f = self.score(cell, base, (&ready, &moments), &mut scores);
            sums[0] += weight * float::ln(f);
            for a in 0..n {
                sums[1 + a] += weight * scores[a];
                for b in 0..n {
                    sums[1 + n + a * n + b] += weight * scores[a] * scores[b];
                }
            }
        });
        let per_unit: Vec<f64> = totals.iter().map(|t| t / self.total).collect();
        (per_unit[0], per_unit[1..=n].to_vec(), per_unit[1 + n..].to_vec())
    }

    /// Climbs to the nearest maximum within the bounds.
    fn climb(&self, start: &[f64], cells: &Cells) -> Found {
        let ranges = self.ranges(1.0);
        let mut at = start.to_vec();
        let (mut value, mut gradient, mut outer) = self.likelihood(&at, cells);
        let mut damping = 1e-3;
        for _ in 0..MOST_STEPS {
            let free = movable(&ranges, &at, &gradient);
            let Some(step) = damped(&gradient, &outer, &free, damping) else {
                return Found { at, value, converged: true };
            };
            let promised: f64 = free.iter().zip(&step).map(|(&k, s)| gradient[k] * s).sum();
            if promised < TOLERANCE {
                return Found { at, value, converged: true };
            }
            let mut next = at.clone();
            for (&k, s) in free.iter().zip(&step) {
                let range = ranges[k].expect("free");
                next[k] = (at[k] + s.clamp(-2.0, 2.0)).clamp(range.low, range.high);
            }
            let tried = self.likelihood(&next, cells);
            if tried.0 > value {
                at = next;
                (value, gradient, outer) = tried;
                damping = (damping * 0.2).max(1e-9);
            } else {
                damping *= 8.0;
                if damping > 1e12 {
                    // no step of any length helps: the promise is below what the sums can tell
                    return Found { at, value, converged: promised < 1e-7 };
                }
            }
        }
        Found { at, value, converged: false }
    }

    /// f of every cell of the region, held-out ones included.
    fn surface(&self, at: &[f64]) -> Vec<f64> {
        let ready = self.ready(at);
        let moments = self.moments(&ready, &Cells::All(self.exposure.len()));
        let base = at[self.width() - 1];
        (0..self.exposure.len())
            .into_par_iter()
            .with_min_len(4096)
            .map(|cell| {
                let mut slopes = [0.0; MOST];
                (1.0 - base) * self.product(cell, &ready, &mut slopes) / moments.region.value + base
            })
            .collect()
    }

    fn result(&self, found: &Found, context: Context) -> Fitted {
        let mut density = self.surface(&found.at);
        normalise(&mut density, self.training.region().areas());
        let errors = context.blocks.map(|b| (self.standard_errors(&found.at, b), self.width_of_interval(b)));
        Fitted {
            density,
            parameters: self.parameters(&found.at, errors.as_ref().map(|(e, w)| (e.as_slice(), *w))),
            evidence: Vec::new(),
            support: None,
            complexity: self.ranges(1.0).iter().flatten().count(),
            warnings: self.remarks(&found.at),
        }
    }

    fn parameters(&self, at: &[f64], errors: Option<(&[Option<f64>], f64)>) -> Vec<Parameter> {
        let ranges = self.ranges(1.0);
        let mut out = Vec::new();
        let mut k = 0;
        let interval = |k: usize, to: &dyn Fn(f64) -> f64| {
            let (errors, wide) = errors?;
            let error = errors[k]?;
            let range = ranges[k]?;
            let end = |z: f64| to((at[k] + z * error).clamp(range.low, range.high));
            Some((end(-wide), end(wide)))
        };
        for term in &self.terms {
            for name in term.form.parameters().iter().take(term.width()) {
                out.push(Parameter {
                    name: format!("{}.{name}", term.layer),
                    value: term.external(at[k]),
                    interval: interval(k, &|v| term.external(v)),
                    fitted: ranges[k].is_some(),
                });
                k += 1;
            }
            if let Some(offset) = term.offset() {
                let name = format!("{}.offset", term.layer);
                out.push(Parameter { name, value: offset, interval: None, fitted: false });
            }
        }
        let fitted = ranges[k].is_some();
        out.push(Parameter { name: "base".into(), value: at[k], interval: interval(k, &|v| v), fitted });
        out
    }

    /// What the bounds say about the fit.
    fn remarks(&self, at: &[f64]) -> Vec<Diagnostic> {
        let mut out = Vec::new();
        let mut k = 0;
        for term in &self.terms {
            let free = |i: usize| term.given(i).is_none().then(|| term.free(i, 1.0));
            let first = free(0).map(|f| (at[k] <= f.low, at[k] >= f.high));
            let rising = matches!(term.form, CurveForm::RisingPower | CurveForm::LogLinear);
            let flat = first.is_some_and(|(low, high)| if rising { low } else { high });
            if flat {
                let way = if rising { "do not grow denser with" } else { "do not thin out away from" };
                let text = format!("records {way} `{}` here: the term is flat", term.layer);
                out.push(
                    Diagnostic::plan("flat_term", &self.place, text)
                        .cure("take it out of `uses`, or look for another layer"),
                );
            } else if let Some(bound) = self.bound(term, &at[k..k + term.width()]) {
                out.push(bound);
            }
            k += term.width();
        }
        out
    }

    /// A warning when a parameter lies at an end of its range.
    fn bound(&self, term: &Term, at: &[f64]) -> Option<Diagnostic> {
        let (k, _) = at.iter().enumerate().find(|(k, v)| {
            term.given(*k).is_none() && {
                let range = term.free(*k, 1.0);
                **v <= range.low || **v >= range.high
            }
        })?;
        let name = term.form.parameters()[k];
        let text =
            format!("`{}.{name}` lies at an end of its range ({:.4})", term.layer, term.external(at[k]));
        Some(
            Diagnostic::plan("parameter_at_bound", &self.place, text)
                .cure("give the parameter, or choose a curve of another form"),
        )
    }
}

/// Free parameters that are not held at a bound by their gradient.
fn movable(ranges: &[Option<Free>], at: &[f64], gradient: &[f64]) -> Vec<usize> {
    (0..at.len())
        .filter(|&k| {
            ranges[k].is_some_and(|r| {
                !(at[k] <= r.low && gradient[k] <= 0.0 || at[k] >= r.high && gradient[k] >= 0.0)
            })
        })
        .collect()
}

/// A damped step for the movable parameters; `None` when there is nothing to move.
fn damped(gradient: &[f64], outer: &[f64], free: &[usize], damping: f64) -> Option<Vec<f64>> {
    let n = gradient.len();
    let m = free.len();
    if m == 0 {
        return None;
    }
    let mut matrix = vec![0.0; m * m];
    for (a, &k) in free.iter().enumerate() {
        for (b, &l) in free.iter().enumerate() {
            matrix[a * m + b] = outer[k * n + l];
        }
        // the added constant keeps directions that change nothing finite
        matrix[a * m + a] += damping * outer[k * n + k] + 1e-10;
    }
    let rhs: Vec<f64> = free.iter().map(|&k| gradient[k]).collect();
    linear::solve(&matrix, &rhs)
}

#[cfg(test)]
mod tests {
    use std::sync::Arc;

    use super::*;
    use crate::grid::{Field, Region, grids};
    use crate::maths::random::Stream;
    use crate::proxies::{Layer, Measure};
    use crate::records::Blocks;
    use crate::units::Seed;

    fn layer(region: &Arc<Region>, name: &str, value: impl Fn(f64, f64) -> f64) -> Layer {
        let at = |c| {
            let (x, y) = region.centre(c);
            value(x, y)
        };
        let values = (0..region.len()).map(at).collect();
        Layer {
            name: name.into(),
            measure: Measure::Value,
            unit: String::new(),
            field: Field::new(region.clone(), values),
        }
    }

    fn term(layer: &str, form: CurveForm) -> TermPlan {
        TermPlan { layer: layer.into(), form, parameters: vec![Fit::Fitted; form.parameters().len()] }
    }

    /// Units drawn from a density over cells.
    fn draw(region: &Arc<Region>, n: usize, density: impl Fn(f64, f64) -> f64) -> Training {
        let mut stream = Stream::new(Seed(3), "draw", 0);
        let mut sums = vec![0.0];
        for c in 0..region.len() {
            let (x, y) = region.centre(c);
            sums.push(sums[c] + density(x, y));
        }
        let all = sums[region.len()];
        let cells: Vec<u32> = (0..n)
            .map(|_| {
                let at = stream.unit() * all;
                (sums.partition_point(|s| *s <= at) - 1) as u32
            })
            .collect();
        Training::of_cells(region.clone(), &cells)
    }

    fn fitted(training: &Training, terms: &[TermPlan], base: Fit<Share>, layers: Vec<Layer>) -> Fitted {
        let blocks = Blocks::lay(
            training.region(),
            crate::units::Metres::new(1000.0).unwrap(),
            &mut Stream::new(Seed(1), "blocks", 0),
        );
        let context = Context { floor: 0.01, blocks: Some(&blocks), candidates: &[], seed: Seed(1) };
        fit(&Asked { name: "test", terms, base }, training, &ProxyStack(layers), context).unwrap()
    }

    /// Half-normal on a strip of distances: σ̂² = Σx²/n where the strip is wide (Buckland et al. 2001).
    #[test]
    fn recovers_the_half_normal_scale() {
        let region = Arc::new(Region::new(grids::planar(600, 10, 10.0), &[true; 6000]));
        let training = draw(&region, 4000, |x, _| float::exp(-x * x / (2.0 * 800.0 * 800.0)));
        let squares: f64 =
            training.units().iter().map(|u| float::square(region.centre(u.cell as usize).0)).sum();
        let closed = (squares / 4000.0).sqrt();
        let got = fitted(
            &training,
            &[term("d", CurveForm::HalfNormal)],
            Fit::Given(Share::new(0.0).unwrap()),
            vec![layer(&region, "d", |x, _| x)],
        );
        assert!(
            (got.parameters[0].value / closed - 1.0).abs() < 1e-3,
            "{} {closed}",
            got.parameters[0].value
        );
        let (low, high) = got.parameters[0].interval.unwrap();
        assert!(low < 800.0 && 800.0 < high, "{low} {high}");
    }

    /// Every form and the base at once: the gradient equals finite differences of the likelihood.
    #[test]
    fn the_gradient_is_that_of_the_likelihood() {
        let region = Arc::new(Region::new(grids::planar(40, 40, 10.0), &[true; 1600]));
        let training = draw(&region, 300, |x, y| 1.0 + x / (y + 50.0));
        let layers = ProxyStack(vec![
            layer(&region, "a", |x, _| x),
            layer(&region, "b", |_, y| y),
            layer(&region, "c", |x, y| (x * 0.7 - y).abs()),
            layer(&region, "d", |x, y| ((x + y) / 50.0).floor()),
            layer(&region, "e", |x, y| x * y / 1000.0),
        ]);
        let terms = [
            term("a", CurveForm::Exponential),
            term("b", CurveForm::HalfNormal),
            term("c", CurveForm::FallingPower),
            term("d", CurveForm::RisingPower),
            term("e", CurveForm::LogLinear),
        ];
        let asked = Asked { name: "test", terms: &terms, base: Fit::Fitted };
        let model = Model::new(&asked, &training, &layers).unwrap();
        let at = model.start(1.3);
        let cells = Cells::All(region.len());
        let (_, gradient, _) = model.likelihood(&at, &cells);
        for k in 0..at.len() {
            let value = |step: f64| {
                let mut moved = at.clone();
                moved[k] += step;
                model.likelihood(&moved, &cells).0
            };
            let numeric = (value(1e-5) - value(-1e-5)) / 2e-5;
            assert!((gradient[k] - numeric).abs() < 1e-7, "{k}: {} {numeric}", gradient[k]);
        }
    }

    /// A layer that effort runs against is set flat, and said.
    #[test]
    fn a_term_of_the_wrong_sign_is_flat() {
        let region = Arc::new(Region::new(grids::planar(60, 60, 10.0), &[true; 3600]));
        let training = draw(&region, 800, |x, _| 1.0 + x);
        let got = fitted(
            &training,
            &[term("d", CurveForm::Exponential)],
            Fit::Given(Share::new(0.0).unwrap()),
            vec![layer(&region, "d", |x, _| x)],
        );
        assert_eq!(got.warnings[0].rule, "flat_term");
        assert!(got.density.iter().all(|d| (d - 1.0).abs() < 1e-2));
    }
}
