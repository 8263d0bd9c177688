//! Reads every input of a study onto its grid, and says all that is wrong at once.

use std::sync::Arc;
use std::time::Instant;

use crate::diag::{Diagnostic, Observer, Outcome, Problems, Warnings};
use crate::gate::{GridRequest, LayerData, Sources, Wander};
use crate::grid::{Grid, Region};
use crate::output::Stage;
use crate::plan::{GridPlan, StudyPlan};
use crate::proxies::{Layer, LayerPlan, Measure, ProxyStack, distance};
use crate::records::{Collector, Gathering, Kept, Match, Projection, Records, RecordsPlan, Screener, Sink};
use crate::units::Bytes;

use super::cost::{Cost, estimate, too_large};

/// Departure of lengths or areas from the ground's that is warned about, and that is refused.
const WANDER: (f64, f64) = (0.02, 0.20);

/// What the caller gives beside the plan.
pub struct Needs<'a> {
    /// Where inputs come from.
    pub sources: &'a dyn Sources,
    /// Who is told how the work goes on.
    pub observer: &'a dyn Observer,
    /// Memory that may be used.
    pub memory: Bytes,
    /// Whether kept records are remembered one by one.
    pub kept: bool,
}

/// What gathers on the way.
#[derive(Default)]
pub struct Notes {
    /// Warnings.
    pub warnings: Warnings,
    /// Stages done.
    pub stages: Vec<Stage>,
    /// The grid, as soon as it is known.
    pub grid: Option<(Grid, Option<usize>)>,
    /// What the run will cost, as soon as the grid is known.
    pub cost: Option<Cost>,
}

impl Notes {
    /// Does a stage and notes how long it took.
    pub(super) fn stage<T>(&mut self, name: impl Into<String>, work: impl FnOnce(&mut Self) -> T) -> T {
        let begun = Instant::now();
        let done = work(self);
        self.stages.push(Stage { name: name.into(), seconds: begun.elapsed().as_secs_f64() });
        done
    }
}

/// All inputs, on the grid.
pub struct Gathered {
    /// Grid and mask.
    pub region: Arc<Region>,
    /// The layers.
    pub layers: ProxyStack,
    /// The records.
    pub records: Records,
    /// Records kept, where asked for.
    pub kept: Vec<Kept>,
    /// Names of the files of records read.
    pub files: Vec<String>,
    /// How the columns of each were found.
    pub matches: Vec<(u32, Vec<Match>)>,
}

/// Reads everything.
///
/// # Errors
/// All problems of all inputs together.
pub fn gather(plan: &StudyPlan, needs: &Needs, sink: &mut dyn Sink, notes: &mut Notes) -> Outcome<Gathered> {
    let region = notes.stage("grid", |notes| region(plan, needs, notes)).map_err(|mut problems| {
        problems.0.extend(absent(plan, needs.sources));
        problems
    })?;
    let mut problems = Vec::new();
    let mut layers = ProxyStack::default();
    for layer in &plan.layers {
        let name = format!("layer {}", layer.name);
        let cells = (layer.measure == Measure::Distance).then_some(region.len() as u64);
        needs.observer.begin(&name, cells);
        match notes.stage(&name, |notes| measure(layer, needs, &region, notes)) {
            Ok(layer) => layers.0.push(layer),
            Err(p) => problems.extend(p.0),
        }
        needs.observer.end();
    }
    let read = notes.stage("records", |notes| records(plan, needs, &region, sink, notes));
    notes.warnings.0.extend(needs.sources.remarks());
    match read {
        Ok(Gathering { records, kept, files, matches, .. }) if problems.is_empty() => {
            Ok(Gathered { region, layers, records, kept, files, matches })
        }
        Ok(_) => Err(Problems(problems)),
        Err(p) => {
            problems.extend(p.0);
            Err(Problems(problems))
        }
    }
}

/// Problems of the files that cannot be brought to a grid that is not there.
fn absent(plan: &StudyPlan, sources: &dyn Sources) -> Vec<Diagnostic> {
    let layers = plan.layers.iter().map(|l| (l.file.as_str(), l.table.as_deref()));
    let records = plan.records.files().map(|(f, s)| (f, s.table.as_deref()));
    layers
        .chain(records)
        .filter_map(|(file, table)| sources.peek(file, table).err())
        .flat_map(|p| p.0)
        .collect()
}

fn request(plan: &GridPlan) -> GridRequest<'_> {
    match plan {
        GridPlan::Like(file) => GridRequest::Like(file),
        GridPlan::Region { region, crs, cell, touching } => {
            GridRequest::Over { region, crs, cell: *cell, touching: *touching }
        }
    }
}

fn region(plan: &StudyPlan, needs: &Needs, notes: &mut Notes) -> Outcome<Arc<Region>> {
    let grid = needs.sources.grid(request(&plan.grid))?;
    let cost = estimate(plan, &grid);
    notes.grid = Some((grid.clone(), None));
    notes.cost = Some(cost);
    if cost.memory > needs.memory {
        return Err(too_large(plan, &grid, cost, needs.memory).into());
    }
    let region = needs.sources.region(request(&plan.grid), grid)?;
    notes.grid = Some((region.grid().clone(), Some(region.len())));
    if let Some(wander) = needs.sources.wander(&region)? {
        scale(&region, &wander, notes)?;
    }
    Ok(Arc::new(region))
}

/// Warns of a projection whose lengths or areas depart from the ground's, or refuses it.
fn scale(region: &Region, wander: &Wander, notes: &mut Notes) -> Outcome<()> {
    if wander.worst <= WANDER.0 {
        return Ok(());
    }
    let text = format!(
        "the grid's {}s depart from those on the ground by up to {:.1} % ({})",
        wander.of,
        wander.worst * 100.0,
        region.grid().crs.label
    );
    let (lon, lat) = wander.middle;
    let cure = format!(
        "use an equal-area CRS of this place, such as \"+proj=laea +lat_0={lat:.1} +lon_0={lon:.1} +datum=WGS84 +units=m\", \
         or a longitude/latitude grid, on which areas and distances are taken on the globe"
    );
    let said = Diagnostic::input("scale_wanders", "grid", text).cure(cure);
    if wander.worst > WANDER.1 {
        return Err(said.into());
    }
    notes.warnings.push(said);
    Ok(())
}

/// Brings one layer to the grid.
fn measure(plan: &LayerPlan, needs: &Needs, region: &Arc<Region>, notes: &mut Notes) -> Outcome<Layer> {
    let (values, unit) = match needs.sources.layer(plan, region, &mut notes.warnings)? {
        LayerData::Values(values, unit) => (values, unit),
        LayerData::Features(features) => {
            let values = distance(&features, region, needs.observer).ok_or_else(|| {
                Diagnostic::input("empty_layer", plan.file.as_str(), "holds no geometry")
                    .cure("check the file")
            })?;
            (values, "m".to_owned())
        }
    };
    let measure: Measure = plan.measure;
    Ok(Layer {
        name: plan.name.clone(),
        measure,
        unit,
        field: crate::grid::Field::new(Arc::clone(region), values),
    })
}

/// The way from each source's coordinates to the grid's.
struct OnGrid<'a> {
    sources: &'a dyn Sources,
    region: &'a Region,
    crs: Vec<&'a str>,
    degrees: Vec<bool>,
    windows: Vec<Option<[f64; 4]>>,
}

impl<'a> OnGrid<'a> {
    fn new(plan: &'a RecordsPlan, sources: &'a dyn Sources, region: &'a Region) -> Outcome<Self> {
        let crs: Vec<&str> = plan.sources.iter().map(|s| s.crs.as_str()).collect();
        let degrees = crs.iter().map(|c| sources.degrees(c)).collect::<Outcome<_>>()?;
        let windows = crs.iter().map(|c| sources.window(c, region)).collect::<Outcome<_>>()?;
        Ok(Self { sources, region, crs, degrees, windows })
    }
}

impl Projection for OnGrid<'_> {
    fn degrees(&self, source: usize) -> bool {
        self.degrees[source]
    }

    fn window(&self, source: usize) -> Option<[f64; 4]> {
        self.windows[source]
    }

    fn turn(&self, source: usize, datum: &str, x: &mut [f64], y: &mut [f64]) -> Outcome<()> {
        // a datum is about longitude and latitude; the CRS of a geometry comes as WKT
        let own = if self.degrees[source] || datum.contains('[') { datum } else { "" };
        let from = self.sources.datum(own, self.crs[source], x.len());
        self.sources.project(from, self.region.grid(), x, y)
    }
}

/// Screens the records and finds their cells.
fn records(
    plan: &StudyPlan,
    needs: &Needs,
    region: &Arc<Region>,
    sink: &mut dyn Sink,
    notes: &mut Notes,
) -> Outcome<Gathering> {
    let asked = &plan.records;
    let ground = OnGrid::new(asked, needs.sources, region)?;
    let screener = Screener::new(asked, Arc::clone(region), &ground);
    let mut collector = Collector::new(asked, region, sink, needs.kept);
    needs.sources.records(asked, (&screener, &mut collector), needs.observer)?;
    let mut gathering = collector.finish()?;
    notes.warnings.0.append(&mut gathering.smells);
    Ok(gathering)
}
