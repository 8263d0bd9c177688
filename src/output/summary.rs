//! The figures of a run as JSON: lengths in metres, areas in km², dates in ISO 8601.

use serde_json::{Map, Value, json};

use crate::check::{Estimate, Standing};
use crate::diag::Diagnostic;
use crate::grid::Grid;
use crate::records::{Capped, Match, Pile, Precision, Records, Rule};

use super::finding::{CandidateFinding, Finding};
use super::surface::Finished;

/// A figure with its interval.
fn estimate(e: &Estimate) -> Value {
    json!({"value": e.value, "low": e.interval.map(|i| i.0), "high": e.interval.map(|i| i.1)})
}

fn grid(g: &Grid, cells_inside: Option<usize>, area_m2: Option<f64>) -> Value {
    json!({
        "crs": g.crs.label, "crs_wkt": g.crs.wkt, "columns": g.columns, "rows": g.rows, "transform": g.transform,
        "metric": g.metric().word(), "cells_inside": cells_inside, "area_km2": area_m2.map(|a| a / 1e6),
    })
}

fn records(r: &Records) -> Value {
    let top = r.top_share();
    let dropped: Map<String, Value> =
        Rule::ALL.iter().map(|rule| (rule.word().to_owned(), json!(r.ledger.dropped(*rule)))).collect();
    json!({
        "read": r.ledger.read(), "kept": r.ledger.kept(), "snapped": r.ledger.snapped(), "dropped": dropped,
        "dates": dates(r), "count": r.count.word(), "units": r.weight(), "places": r.places,
        "visits": {
            "count": r.visits.count,
            "records_per_visit": {
                "mean": r.visits.mean, "median": r.visits.median, "single_share": r.visits.single_share,
            },
            "empty_share": Value::Null,
        },
        "observers": r.reach.observers, "datasets": r.reach.datasets, "extent": r.reach.extent,
        "effective_observers": r.effective_observers, "effective_datasets": r.effective_datasets,
        "top_share": {"observer": top[0], "dataset": top[1], "cell": top[2]},
        "on_lattice": r.lattices.iter().map(|(step, share)| json!({"step": step, "share": share})).collect::<Vec<_>>(),
        "piles": r.piles.iter().map(|p| pile(r, p)).collect::<Vec<_>>(),
        "cap": r.capped.iter().map(cap).collect::<Vec<_>>(),
    })
}

/// How finely the rows are dated, and the first and last day of those kept.
fn dates(r: &Records) -> Value {
    let names = [Precision::Day, Precision::Range, Precision::Month, Precision::Year]
        .map(|p| format!("{p:?}").to_lowercase());
    let mut dates: Map<String, Value> = names.into_iter().zip(r.dates).map(|(n, c)| (n, json!(c))).collect();
    dates.insert("none".into(), json!(r.dates[4]));
    dates.insert("first".into(), json!(r.reach.days.map(|d| d.0.to_string())));
    dates.insert("last".into(), json!(r.reach.days.map(|d| d.1.to_string())));
    Value::Object(dates)
}

/// How many records share one place; not which place, as this file is handed on.
fn pile(r: &Records, p: &Pile) -> Value {
    json!({"records": p.records, "share": p.records as f64 / r.ledger.kept() as f64})
}

fn cap(c: &Capped) -> Value {
    let weights: Vec<Value> =
        c.heaviest.iter().map(|(units, each)| json!({"units": units, "weight_each": each})).collect();
    json!({
        "of": c.what, "cap": c.cap, "groups": c.groups.0, "capped": c.groups.1, "unknown_share": c.unknown,
        "heaviest": weights,
    })
}

fn layers(f: &Finding) -> Value {
    f.layers
        .0
        .iter()
        .map(|l| {
            let (min, median, max) = l.field.summary();
            json!({"name": l.name, "measure": l.measure.word(), "unit": l.unit, "min": min, "median": median, "max": max})
        })
        .collect()
}

fn candidate(c: &CandidateFinding, s: &Standing) -> Value {
    let parameters: Map<String, Value> = c
        .fitted
        .parameters
        .iter()
        .map(|p| {
            let (low, high) = (p.interval.map(|i| i.0), p.interval.map(|i| i.1));
            (p.name.clone(), json!({"value": p.value, "low": low, "high": high, "fitted": p.fitted}))
        })
        .collect();
    let evidence: Vec<Value> = c
        .fitted
        .evidence
        .iter()
        .map(|e| json!({"parameter": e.parameter, "criterion": e.criterion, "tried": e.tried}))
        .collect();
    json!({
        "name": c.name, "rank": s.rank, "parameters": parameters,
        "scores": {
            "log_score": estimate(&s.scores[0]), "auc": estimate(&s.scores[1]),
            "boyce": estimate(&s.scores[2]), "calibration_slope": estimate(&s.scores[3]),
        },
        "versus_best": {"log_score": estimate(&s.versus_best), "distinguishable": s.distinguishable},
        "fitted_parameters": c.fitted.complexity, "evidence": evidence,
    })
}

fn warning(d: &Diagnostic) -> Value {
    json!({"rule": d.rule, "place": d.place, "text": d.text, "cure": d.cure})
}

/// What `effort.json` and `comparison.json` share.
fn common(f: &Finding) -> Map<String, Value> {
    let mut standings: Vec<&Standing> = f.verdict.standings.iter().collect();
    standings.sort_by_key(|s| s.rank);
    let candidates: Vec<Value> = standings.iter().map(|s| candidate(&f.candidates[s.candidate], s)).collect();
    let entries = [
        ("tool", json!({"name": "trodden", "version": f.tool.version})),
        ("title", json!(f.title)),
        ("seed", json!(f.seed.0)),
        ("grid", grid(f.region.grid(), Some(f.region.len()), Some(f.region.area()))),
        ("records", records(&f.records)),
        ("layers", layers(f)),
        (
            "holdout",
            json!({
                "split": f.split().word(), "folds": f.folds.count, "block_m": f.blocks.side.get(),
                "blocks": f.blocks.count, "resamples": f.holdout.resamples,
            }),
        ),
        ("candidates", Value::Array(candidates)),
    ];
    entries.into_iter().map(|(k, v)| (k.to_owned(), v)).collect()
}

fn closing(mut map: Map<String, Value>, f: &Finding) -> Value {
    map.insert("warnings".into(), f.warnings.iter().map(warning).collect());
    Value::Object(map)
}

/// Every figure of a build.
pub fn effort_json(f: &Finding, finished: &Finished) -> Value {
    let mut map = common(f);
    let support = f.support_min();
    map.insert(
        "surface".into(),
        json!({
            "candidate": f.chosen().name, "recommended": f.candidates[f.verdict.chosen].name,
            "per": f.surface.per.word(), "scale": f.surface.scale.word(), "floor": f.surface.floor.get(),
            "sum": finished.sum, "min": finished.min, "max": finished.max,
            "effective_cells": finished.effective_cells,
            "support_min": if support.is_finite() { json!(support.floor() as u64) } else { Value::Null },
        }),
    );
    closing(map, f)
}

/// Every figure of a comparison.
pub fn comparison_json(f: &Finding) -> Value {
    let mut map = common(f);
    map.insert("recommended".into(), json!(f.candidates[f.verdict.chosen].name));
    closing(map, f)
}

/// A stage of the run and how long it took.
#[derive(Debug, Clone, PartialEq)]
pub struct Stage {
    /// Its name.
    pub name: String,
    /// Seconds on the clock.
    pub seconds: f64,
}

/// A file and its fingerprint.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct FileDigest {
    /// Its name.
    pub name: String,
    /// Its size.
    pub bytes: u64,
    /// SHA-256 in hexadecimal.
    pub sha256: String,
}

/// What `manifest.json` holds.
pub struct Manifest<'a> {
    /// The program.
    pub tool: &'a super::finding::Tool,
    /// The plan with all defaults written out.
    pub plan: Value,
    /// The seed.
    pub seed: u64,
    /// When the run began, ISO 8601 in UTC.
    pub time: String,
    /// Inputs read.
    pub inputs: Vec<FileDigest>,
    /// Outputs written.
    pub outputs: Vec<FileDigest>,
    /// How long each stage took.
    pub stages: Vec<Stage>,
}

/// `manifest.json`.
pub fn manifest_json(m: &Manifest) -> Value {
    let files = |list: &[FileDigest]| -> Value {
        list.iter().map(|f| json!({"file": f.name, "bytes": f.bytes, "sha256": f.sha256})).collect()
    };
    let stages: Value = m.stages.iter().map(|s| json!({"name": s.name, "seconds": s.seconds})).collect();
    json!({
        "tool": {"name": "trodden", "version": m.tool.version}, "libraries": m.tool.libraries, "time": m.time,
        "seed": m.seed, "plan": m.plan, "inputs": files(&m.inputs), "outputs": files(&m.outputs), "stages": stages,
    })
}

/// An input as `check` shows it.
#[derive(Debug, Clone, PartialEq)]
pub struct CheckedInput {
    /// Its name in the plan.
    pub file: String,
    /// `raster`, `vector` or `text`.
    pub kind: &'static str,
    /// Its CRS; empty where it states none.
    pub crs: String,
    /// West, south, east, north in its own CRS.
    pub extent: Option<[f64; 4]>,
    /// Cells or features.
    pub count: Option<u64>,
}

/// What `check` found.
#[derive(Default)]
pub struct Checked {
    /// The grid, where it could be read, with its cells inside.
    pub grid: Option<(Grid, Option<usize>)>,
    /// The inputs.
    pub inputs: Vec<CheckedInput>,
    /// The records, where they could be read.
    pub records: Option<Records>,
    /// How the columns of each file of records were found.
    pub columns: Vec<(String, Vec<Match>)>,
    /// Memory a build would need.
    pub memory_bytes: Option<u64>,
    /// Seconds a build would take, roughly.
    pub seconds: Option<f64>,
    /// Errors.
    pub problems: Vec<Diagnostic>,
    /// Warnings.
    pub warnings: Vec<Diagnostic>,
}

fn columns(files: &[(String, Vec<Match>)]) -> Value {
    let one = |m: &Match| json!({"role": m.role, "wanted": m.wanted, "column": m.column, "how": m.how()});
    files
        .iter()
        .map(|(file, found)| json!({"file": file, "found": found.iter().map(one).collect::<Vec<_>>()}))
        .collect()
}

/// `check --json`.
pub fn check_json(c: &Checked) -> Value {
    let inputs: Value = c
        .inputs
        .iter()
        .map(|i| json!({"file": i.file, "kind": i.kind, "crs": i.crs, "extent": i.extent, "count": i.count}))
        .collect();
    let said = |list: &[Diagnostic]| -> Value { list.iter().map(warning).collect() };
    json!({
        "grid": c.grid.as_ref().map(|(g, inside)| grid(g, *inside, None)), "inputs": inputs,
        "records": c.records.as_ref().map(records), "columns": columns(&c.columns),
        "memory_bytes": c.memory_bytes, "seconds": c.seconds,
        "problems": said(&c.problems), "warnings": said(&c.warnings),
    })
}
