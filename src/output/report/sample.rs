//! A small invented study for the tests of this room: a ridge with a road and a town, fitted and
//! scored by the rooms below, so that pages are tested on findings that hang together.

use std::sync::Arc;

use crate::check::{HoldoutPlan, judge, score, with_floor};
use crate::diag::Diagnostic;
use crate::grid::{Crs, CrsKind, Field, Grid, Region};
use crate::maths::float;
use crate::maths::random::Stream;
use crate::model::{
    CandidateKind, CandidatePlan, Context, CurveForm, DensityPlan, Fit, TermPlan, fit, observed_to_available,
};
use crate::output::finding::{CandidateFinding, Finding, Tool};
use crate::output::settings::{Choice, Per, Scale, SurfacePlan};
use crate::proxies::{Layer, Measure, ProxyStack};
use crate::records::{Blocks, Count, Folds, Ledger, Records, Rule, Split, Training, Unit, VisitFacts};
use crate::units::{Metres, Seed, Share};

/// A planar grid in metres with its south-west corner at the origin.
pub(super) fn plane(columns: usize, rows: usize, side: f64) -> Grid {
    let crs = Crs { wkt: String::new(), label: "plane".into(), kind: CrsKind::Projected { metres: 1.0 } };
    Grid { columns, rows, transform: [0.0, side, 0.0, rows as f64 * side, 0.0, -side], crs }
}

fn layer(
    name: &str,
    (measure, unit): (Measure, &str),
    region: &Arc<Region>,
    of: &dyn Fn(f64, f64) -> f64,
) -> Layer {
    let values = (0..region.len()).map(|c| of(region.centre(c).0, region.centre(c).1)).collect();
    Layer { name: name.into(), measure, unit: unit.into(), field: Field::new(Arc::clone(region), values) }
}

fn region(columns: usize, rows: usize) -> Arc<Region> {
    let grid = plane(columns, rows, 500.0);
    let inside: Vec<bool> = (0..grid.len())
        .map(|i| {
            let (c, r) = grid.position(i);
            let (u, v) = (c as f64 / columns as f64 - 0.5, r as f64 / rows as f64 - 0.5);
            let lake = float::square(u - 0.15) + float::square(v + 0.1) < 0.004;
            u * u / 0.23 + v * v / 0.24 < 1.0 && !lake
        })
        .collect();
    Arc::new(Region::new(grid, &inside))
}

fn layers(region: &Arc<Region>) -> ProxyStack {
    let [_, _, east, north] = region.grid().extent();
    let road = move |x: f64, y: f64| (y - north * (0.4 + 0.1 * float::sin(6.0 * x / east))).abs();
    let people = move |x: f64, y: f64| {
        let d = float::square((x - 0.6 * east) / 9000.0) + float::square((y - 0.5 * north) / 9000.0);
        (400.0 * float::exp(-d)).floor()
    };
    ProxyStack(vec![
        layer("main-roads", (Measure::Distance, "m"), region, &road),
        layer("people", (Measure::Value, "persons"), region, &people),
    ])
}

/// Units drawn from a known pattern: near the road, and at a few favourite places.
fn records(region: &Arc<Region>, layers: &ProxyStack, wanted: usize) -> Records {
    let mut stream = Stream::new(Seed(7), "sample", 0);
    let road = layers.0[0].field.values();
    let mut units = Vec::new();
    while units.len() < wanted {
        let cell = stream.below(region.len());
        let here = 0.06 + 0.94 * float::exp(-road[cell] / 3500.0);
        if stream.unit() < here {
            let (again, outing) = (1 + stream.below(3), (units.len() / 3) as u32);
            let next = units.len() as u32;
            units.extend((0..again).map(|k| Unit {
                number: next + k as u32,
                cell: cell as u32,
                weight: 1.0,
                outing,
                uncertainty: f32::NAN,
                offset: [0.0; 2],
            }));
        }
    }
    let mut cells: Vec<u32> = units.iter().map(|u| u.cell).collect();
    cells.sort_unstable();
    cells.dedup();
    let mut ledger = Ledger::default();
    (0..3 * units.len()).for_each(|i| ledger.keep(i % 90 == 0));
    (0..211).for_each(|_| ledger.drop(Rule::OutsideDates));
    (0..17).for_each(|_| ledger.drop(Rule::ZeroZero));
    Records {
        ledger,
        count: Count::Visits,
        outings: true,
        places: cells.len(),
        visits: VisitFacts { count: units.len() as u64, mean: 3.0, median: 2.0, single_share: 0.31 },
        effective_observers: Some(6.3),
        effective_datasets: None,
        top: [Some((1, 0.31)), None, Some((0, 0.012))],
        reach: Default::default(),
        lattices: Vec::new(),
        piles: Vec::new(),
        capped: Vec::new(),
        groups: None,
        dates: [5000, 40, 13, 7, 21],
        units,
    }
}

fn plans() -> Vec<CandidatePlan> {
    let term = |layer: &str, form| TermPlan { layer: layer.into(), form, parameters: vec![Fit::Fitted; 2] };
    let mut half = term("main-roads", CurveForm::Exponential);
    half.parameters.truncate(1);
    let people = term("people", CurveForm::RisingPower);
    let uses = |terms, remainder| CandidateKind::Uses { terms, base: Fit::Fitted, remainder };
    let named = |name: &str, kind| CandidatePlan { name: name.into(), kind };
    vec![
        named("recorded", CandidateKind::Density(DensityPlan { bandwidth: Fit::Fitted })),
        named("access", uses(vec![half, people.clone()], Some(Fit::Fitted))),
        named("crowd", uses(vec![people], None)),
        named("mixed", CandidateKind::Blend(vec!["recorded".into(), "crowd".into()])),
        named("uniform", CandidateKind::Uniform),
    ]
}

fn candidate(plan: &CandidatePlan, all: &Study) -> CandidateFinding {
    let context = Context { floor: 0.01, blocks: None, candidates: &all.plans, seed: Seed(1) };
    let surfaces: Vec<Vec<f64>> = all
        .parts
        .iter()
        .map(|(t, _)| with_floor(&fit(plan, t, &all.layers, context).unwrap().density, 0.01))
        .collect();
    let held: Vec<_> = all.parts.iter().map(|(_, h)| h.clone()).collect();
    let training = Training::all(&all.records, Arc::clone(&all.region));
    let context = Context { blocks: Some(&all.blocks), ..context };
    let odds = match &plan.kind {
        CandidateKind::Uses { terms, .. } => terms
            .iter()
            .map(|t| {
                let values = all.layers.layer(&t.layer).field.values();
                (t.layer.clone(), observed_to_available(values, &training, 10))
            })
            .collect(),
        _ => Vec::new(),
    };
    CandidateFinding {
        name: plan.name.clone(),
        kind: plan.kind.clone(),
        fitted: fit(plan, &training, &all.layers, context).unwrap(),
        scores: score(&surfaces, &held, &all.region, &all.blocks),
        odds,
    }
}

struct Study {
    region: Arc<Region>,
    layers: ProxyStack,
    records: Records,
    blocks: Blocks,
    plans: Vec<CandidatePlan>,
    parts: Vec<(Training, crate::records::HeldOut)>,
}

/// The study, on a grid of a size.
pub(super) fn finding(columns: usize, rows: usize) -> Finding {
    let region = region(columns, rows);
    let layers = layers(&region);
    let records = records(&region, &layers, 1500);
    let side = Metres::new(region.larger_side() / 10.0).unwrap();
    let blocks = Blocks::lay(&region, side, &mut Stream::new(Seed(1), "blocks", 0));
    let folds = Folds::deal(&records, &blocks, Split::Outings, 3, Seed(1)).unwrap();
    let parts = (0..3).map(|k| folds.part(k, &records, &region)).collect();
    let all = Study { region, layers, records, blocks, plans: plans(), parts };
    let candidates: Vec<CandidateFinding> = all.plans.iter().map(|p| candidate(p, &all)).collect();
    let complexity: Vec<usize> = candidates.iter().map(|c| c.fitted.complexity).collect();
    let scores: Vec<_> = candidates.iter().map(|c| &c.scores).collect();
    let verdict = judge(&scores, &complexity, 199, Seed(1));
    Finding {
        title: "Hoverflies of an invented ridge, 2005–2024".into(),
        seed: Seed(1),
        tool: Tool { version: "0.1.0", libraries: "GDAL 3.6.2, PROJ 9.1.1".into() },
        delivered: verdict.chosen,
        records: all.records,
        kept: Vec::new(),
        files: vec!["data/records.tsv".into()],
        layers: all.layers,
        holdout: HoldoutPlan { split: Split::Outings, folds: 3, block: None, resamples: 199 },
        blocks: all.blocks,
        region: all.region,
        folds,
        candidates,
        verdict,
        surface: SurfacePlan {
            candidate: Choice::Best,
            per: Per::Cell,
            scale: Scale::Sum,
            floor: Share::new(0.01).unwrap(),
            support: 5.0,
        },
        warnings: vec![
            Diagnostic::input(
                "low_support",
                "candidate `recorded`",
                "a cell's weight rests on 2.4 places, fewer than 5",
            )
            .cure("use a larger `bandwidth`, or coarser cells, before the raster leaves your hands"),
        ],
    }
}
