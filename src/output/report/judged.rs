//! How the candidates stand on held-out records: the verdict in words, the table, the folds.

use minijinja::{Value, context};

use crate::check::{Estimate, Scores, Split, Standing};
use crate::maths::float;
use crate::model::CandidateKind;
use crate::output::finding::Finding;
use crate::output::settings::Choice;

use super::axis::{Axis, Shape};
use super::plots::{self, Interval};
use super::words;

/// Standings, best first.
fn ranked(f: &Finding) -> Vec<&Standing> {
    let mut out: Vec<&Standing> = f.verdict.standings.iter().collect();
    out.sort_by_key(|s| s.rank);
    out
}

fn named(f: &Finding, candidate: usize) -> String {
    words::name(&f.candidates[candidate].name)
}

fn parameters(f: &Finding, candidate: usize) -> String {
    match f.candidates[candidate].fitted.complexity {
        0 => "none".into(),
        n => words::count(n as u64),
    }
}

/// How the recommended candidate was found.
fn recommended(f: &Finding) -> String {
    let (chosen, best) = (f.verdict.chosen, ranked(f)[0].candidate);
    let name = named(f, chosen);
    if chosen == best {
        return format!(
            "Of the {} candidates compared, it has the highest log score on held-out {}.",
            f.candidates.len(),
            words::nouns(f.records.count).1
        );
    }
    format!(
        "“{}” has the highest log score, but “{name}” can’t be told from it with these records and has fewer fitted parameters ({} against {}), so it is the one to use.",
        named(f, best),
        parameters(f, chosen),
        parameters(f, best),
    )
}

/// Which candidate this is about, and why.
fn choice(f: &Finding) -> String {
    let recommended = recommended(f);
    match &f.surface.candidate {
        Choice::Best => recommended,
        Choice::Named(_) if f.delivered == f.verdict.chosen => {
            format!("The plan asks for “{}”. {recommended}", named(f, f.delivered))
        }
        Choice::Named(_) => format!(
            "The plan asks for “{}”; held-out {} speak for another: {recommended}",
            named(f, f.delivered),
            words::nouns(f.records.count).1,
        ),
    }
}

/// The log score as a factor: how many times as likely as under an even spread.
fn factor(e: &Estimate) -> String {
    let value = e.value.map_or_else(|| "–".into(), |v| words::times(float::exp(v)));
    e.interval.map_or(value.clone(), |(l, h)| {
        format!("{value} times [{}, {}]", words::times(float::exp(l)), words::times(float::exp(h)))
    })
}

/// What its log score allows.
fn advice(f: &Finding, score: &Estimate) -> (&'static str, String) {
    let units = words::nouns(f.records.count).1;
    if f.chosen().kind == CandidateKind::Uniform {
        return ("even", "This surface is even: it weights every place alike and corrects nothing.".into());
    }
    match score.interval {
        Some((low, _)) if low > 0.0 => (
            "yes",
            "It can weight background points, or stand as an offset, inside this region, for species recorded by the same people in the same way. Read the cautions first.".into(),
        ),
        Some((_, high)) if high < 0.0 => {
            ("no", format!("It foretells held-out {units} worse than an even spread does: don’t use it."))
        }
        Some(_) => (
            "no",
            "With these records it can’t be told from an even spread: weighting by it would add noise rather than take a pattern out.".into(),
        ),
        None if score.value == Some(f64::NEG_INFINITY) => ("no", "It gave places with held-out records no weight at all, which no score can forgive: raise `floor` above 0.".into()),
        None => ("no", "No interval can be given: too few blocks hold records to tell how sure this is.".into()),
    }
}

/// The paragraph a reader needs first.
pub(super) fn verdict(f: &Finding) -> Value {
    let standing = &f.verdict.standings[f.delivered];
    let score = &standing.scores[0];
    let (tone, advice) = advice(f, score);
    let (unit, units) = words::nouns(f.records.count);
    context! {
        candidate => named(f, f.delivered), choice => choice(f), factor => factor(score),
        score => words::both(score, 2), tone, advice, unit, units,
        even => f.chosen().kind == CandidateKind::Uniform,
    }
}

/// The rule of choice and the one chosen, for the comparison.
pub(super) fn recommendation(f: &Finding) -> Value {
    context! { name => named(f, f.verdict.chosen), text => recommended(f) }
}

/// What the figures of this run say against using the surface blindly.
pub(super) fn cautions(f: &Finding) -> Vec<String> {
    let units = words::nouns(f.records.count).1;
    let slope = &f.verdict.standings[f.delivered].scores[3];
    let mut out = Vec::new();
    let figures = words::both(slope, 2);
    match slope.interval {
        Some((_, high)) if high < 1.0 => out.push(format!(
            "The surface is sharper than held-out {units} bear out (calibration slope {figures}): differences between much and little effort are overdrawn."
        )),
        Some((low, _)) if low > 1.0 => out.push(format!(
            "The surface is flatter than held-out {units} bear out (calibration slope {figures}): differences between much and little effort are understated."
        )),
        _ => {}
    }
    let [observer, dataset, cell] = f.records.top_share();
    let mut share = |share: Option<f64>, limit: f64, text: &str| {
        if let Some(s) = share.filter(|s| *s >= limit) {
            out.push(format!("{text} {} of all {units}.", words::percent(s)));
        }
    };
    share(observer, 0.2, "The surface leans on one person’s habits: the most active observer accounts for");
    share(dataset, 0.8, "The surface leans on one source: the largest data set accounts for");
    share(cell, 0.1, "One cell stands out: it holds");
    let support = f.support_min();
    if support < f.surface.support {
        out.push(format!(
            "Somewhere the weight of a cell rests on about {} distinct places, fewer than the {} asked for: a single place shows through there.",
            words::digits(support, 2), words::digits(f.surface.support, 2),
        ));
    }
    if f.split() != Split::Blocks {
        out.push("The check asks how well the surface fills in between known places, not how well it reaches beyond them.".into());
    }
    out
}

/// What was held out, and which question that answers.
pub(super) fn question(f: &Finding) -> Value {
    let (what, question) = match f.split() {
        Split::Outings => (
            "Everything one observer did on one date was held out together.",
            "This asks how well a surface fills in: how well it foretells other outings among the places people already go to. It says little about land far from any record.",
        ),
        Split::Random => (
            "Places (cells with records) were held out, all records of a place together.",
            "This asks how well a surface fills in between known places. It says little about land far from any record.",
        ),
        Split::Blocks => (
            "Square blocks of land were held out, and counted as not observed while the rest was fitted.",
            "This asks how well a surface reaches out to land without records.",
        ),
    };
    context! {
        what, question, folds => f.folds.count, resamples => words::count(f.holdout.resamples as u64),
        block => words::length(f.blocks.side.get()), blocks => words::count(f.blocks.count as u64),
        split => f.split().word(),
        instead => f.split() != f.holdout.split,
    }
}

/// The table of candidates, best first.
pub(super) fn table(f: &Finding) -> Value {
    ranked(f)
        .iter()
        .map(|s| {
            let score = |i: usize, places: usize| {
                context! { value => words::value(&s.scores[i], places), interval => words::interval(&s.scores[i], places) }
            };
            let standing = match (s.rank, s.distinguishable) {
                (1, _) => "best",
                (_, false) => "not distinguishable from the best",
                (_, true) => "worse than the best",
            };
            let difference = if s.rank == 1 {
                context! { value => "–", interval => "" }
            } else {
                context! { value => words::value(&s.versus_best, 3), interval => words::interval(&s.versus_best, 3) }
            };
            context! {
                rank => s.rank, name => named(f, s.candidate), delivered => s.candidate == f.delivered,
                recommended => s.candidate == f.verdict.chosen, log => score(0, 3), auc => score(1, 3),
                boyce => score(2, 2), slope => score(3, 2), standing, factor => factor(&s.scores[0]),
                difference,
                parameters => parameters(f, s.candidate),
            }
        })
        .collect()
}

/// Log scores with their intervals, drawn.
pub(super) fn chart(f: &Finding) -> Value {
    let rows: Vec<Interval> = ranked(f)
        .iter()
        .filter_map(|s| {
            Some(Interval {
                name: named(f, s.candidate).chars().take(40).collect(),
                value: s.scores[0].value?,
                ends: s.scores[0].interval,
                marked: s.candidate == f.delivered,
            })
        })
        .collect();
    let ends = rows.iter().flat_map(|r| {
        let (low, high) = r.ends.unwrap_or((r.value, r.value));
        [low.min(r.value), high.max(r.value)]
    });
    let (low, high) = ends.fold((0.0_f64, 0.0_f64), |(l, h), v| (l.min(v), h.max(v)));
    let room = ((high - low) * 0.05).max(0.01);
    let across = Axis::new(Shape::Linear, low - room, high + room, 1.0, 6);
    let alt = format!(
        "Log scores of {} candidates with their 95 % intervals, best at the top; the same figures are in the table.",
        rows.len(),
    );
    context! { svg => plots::intervals(&rows, &across, "log score (nats); 0 = even spread"), alt }
}

/// Scores by fold of every candidate.
pub(super) fn folds(f: &Finding) -> Value {
    ranked(f)
        .iter()
        .flat_map(|s| {
            let c = &f.candidates[s.candidate];
            c.scores.folds.iter().map(|fold| {
                let figure = |of: fn(&Scores) -> Option<f64>, places: usize| {
                    of(&fold.scores).map_or_else(|| "–".into(), |v| words::decimals(v, places))
                };
                context! {
                    name => words::name(&c.name), fold => fold.fold, units => words::weight(fold.units),
                    log => figure(|s| s.log_score, 3), auc => figure(|s| s.auc, 3),
                    boyce => figure(|s| s.boyce, 2), slope => figure(|s| s.calibration_slope, 2),
                }
            })
        })
        .collect()
}
