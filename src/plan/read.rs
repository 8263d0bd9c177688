//! Reads a whole plan: table by table, then what the tables say of each other.

use toml::de::DeTable;

use super::log::Log;
use super::table::{Item, Table};
use super::values::elements;
use super::{GridPlan, StudyPlan, candidates, grid, layers, records, rest, syntax};
use crate::diag::{Diagnostic, Outcome, Problems};
use crate::model::{CandidateKind, CandidatePlan};
use crate::proxies::LayerPlan;
use crate::records::RecordsPlan;
use crate::units::Seed;

/// Reads a plan; `file` is its name in messages.
///
/// # Errors
/// Everything that is wrong with it, in the order of the text, each problem with its place.
pub fn read(text: &str, file: &str) -> Outcome<StudyPlan> {
    let mut log = Log::new(text, file);
    let (document, errors) = DeTable::parse_recoverable(text);
    let plan = if errors.is_empty() {
        study(&mut log, document.get_ref())
    } else {
        syntax::report(&mut log, document.get_ref(), &errors);
        None
    };
    match (log.into_problems(), plan) {
        (None, Some(plan)) => Ok(plan),
        (Some(problems), _) => Err(problems),
        (None, None) => {
            Err(Problems::from(Diagnostic::defect("plan", "a plan was refused without a reason")))
        }
    }
}

fn study(log: &mut Log, document: &DeTable) -> Option<StudyPlan> {
    let top = Table::top(log, document);
    let grid = read_grid(log, &top);
    let records = read_records(log, &top);
    let (layers, known) = read_layers(log, &top);
    let (candidates, names) = read_candidates(log, &top, &known);
    let holdout = open(log, &top, "holdout", "holdout");
    open(log, &top, "environment", "environment");
    let surface = open(log, &top, "surface", "surface");
    let output = open(log, &top, "output", "output");
    let surface = rest::surface(log, surface.as_ref(), &names);
    Some(StudyPlan {
        title: top.string("title")?,
        seed: Seed(u64::try_from(top.whole("seed").unwrap_or(1)).ok()?),
        grid: grid?,
        records: records?,
        layers: layers?,
        candidates: candidates?,
        holdout: rest::holdout(holdout.as_ref())?,
        surface: surface?,
        output: rest::output(output.as_ref()),
    })
}

fn open<'t>(log: &mut Log, top: &Table<'t>, key: &str, section: &'static str) -> Option<Table<'t>> {
    Table::open(log, section, top.item(key)?.value)
}

fn read_grid(log: &mut Log, top: &Table) -> Option<GridPlan> {
    let table = open(log, top, "grid", "grid")?;
    grid::read(log, &table)
}

fn read_records(log: &mut Log, top: &Table) -> Option<RecordsPlan> {
    let table = open(log, top, "records", "records")?;
    records::read(log, &table)
}

/// The tables of a list, opened and with names of their own.
fn list<'t>(log: &mut Log, top: &Table<'t>, key: &'static str) -> Vec<Table<'t>> {
    let tables: Vec<Table> = top
        .item(key)
        .into_iter()
        .flat_map(|item| elements(item))
        .filter_map(|element| Table::open(log, key, element.value))
        .collect();
    let names: Vec<&Item> = tables.iter().filter_map(|table| table.item("name")).collect();
    for (n, item) in names.iter().enumerate() {
        let lower = |item: &Item| item.text().map(str::to_lowercase);
        if let Some(first) = names[..n].iter().find(|earlier| lower(earlier) == lower(item)) {
            let (name, line) = (item.text().unwrap_or_default(), log.line(first.at.start));
            let text = format!("the name `{name}` is taken by the `[[{key}]]` of line {line}");
            let cure = "give each a name of its own; names that differ in case alone do not suffice";
            log.say(&item.span(), "duplicate_name", text, cure);
        }
    }
    tables
}

fn read_layers<'t>(log: &mut Log, top: &Table<'t>) -> (Option<Vec<LayerPlan>>, Vec<layers::Known<'t>>) {
    let tables = list(log, top, "layer");
    let plans: Vec<Option<LayerPlan>> = tables.iter().map(|table| layers::read(log, table)).collect();
    (plans.into_iter().collect(), tables.iter().filter_map(layers::known).collect())
}

/// The candidates with the baseline last, and the names that may be chosen.
fn read_candidates(
    log: &mut Log,
    top: &Table,
    layers: &[layers::Known],
) -> (Option<Vec<CandidatePlan>>, Vec<String>) {
    let tables = list(log, top, "candidate");
    if let Some(item) = top.item("candidate").filter(|_| tables.is_empty()) {
        let text = "the list `candidate` is empty, so that only `uniform` could be compared";
        log.say(&item.span(), "empty", text, "add a `[[candidate]]` with `density` or `uses`");
    }
    let plans: Vec<Option<CandidatePlan>> =
        tables.iter().map(|table| candidates::read(log, table, layers)).collect();
    candidates::check_blends(log, &tables);
    let names = tables.iter().filter_map(|table| table.any("name").and_then(Item::text)).map(String::from);
    let names = names.chain(["uniform".to_string()]).collect();
    let baseline = Some(CandidatePlan { name: "uniform".into(), kind: CandidateKind::Uniform });
    (plans.into_iter().chain([baseline]).collect(), names)
}

#[cfg(test)]
mod tests {
    use crate::check::{HoldoutPlan, Split};
    use crate::diag::Fault;
    use crate::model::{CandidateKind, CurveForm, Fit};
    use crate::output::{Choice, Compress, Per, Scale};
    use crate::plan::resolved::tests::{FULL, SHORTEST, good};
    use crate::plan::{GridPlan, read};
    use crate::proxies::{Measure, Resample};
    use crate::records::{Count, Quotes};
    use crate::units::{Length, Metres, Seed, Share};

    #[test]
    fn the_shortest_plan_is_all_defaults() {
        let plan = good(SHORTEST);
        assert_eq!(plan.seed, Seed(1));
        assert_eq!(plan.grid, GridPlan::Like("t.tif".into()));
        let records = &plan.records;
        let [source] = records.sources.as_slice() else { panic!("one source is due") };
        assert_eq!(source.files, ["r.tsv"]);
        assert_eq!((source.crs.as_str(), records.count, source.quotes), ("EPSG:4326", Count::Visits, None));
        assert_eq!((records.dates, records.max_uncertainty, records.snap), (None, None, None));
        assert_eq!(source.columns.longitude, "decimalLongitude");
        assert_eq!(source.columns.uncertainty, "coordinateUncertaintyInMeters");
        assert!(source.columns.stated.is_empty() && records.keep.is_empty() && plan.layers.is_empty());
        assert_eq!(plan.candidates.len(), 2);
        assert!(matches!(&plan.candidates[0].kind, CandidateKind::Density(d) if d.bandwidth == Fit::Fitted));
        assert_eq!(
            (plan.candidates[1].name.as_str(), &plan.candidates[1].kind),
            ("uniform", &CandidateKind::Uniform)
        );
        let holdout = HoldoutPlan { split: Split::Outings, folds: 5, block: None, resamples: 999 };
        assert_eq!(plan.holdout, holdout);
        let surface = &plan.surface;
        assert_eq!((&surface.candidate, surface.per, surface.scale), (&Choice::Best, Per::Cell, Scale::Sum));
        assert_eq!((surface.floor, surface.support), (Share::new(0.01).unwrap(), 5.0));
        assert_eq!((plan.output.folder.as_str(), plan.output.compress), ("out", Compress::Deflate));
        assert!(!plan.output.details);
    }

    #[test]
    fn a_full_plan_is_read_whole() {
        let plan = good(FULL);
        let cell = Length::Metres(Metres::new(1000.0).unwrap());
        let grid =
            GridPlan::Region { region: "region.gpkg".into(), crs: "EPSG:3035".into(), cell, touching: true };
        assert_eq!(plan.grid, grid);
        let records = &plan.records;
        assert_eq!(records.sources[0].columns.stated, ["longitude", "latitude"]);
        assert_eq!(records.sources[1].columns.stated, ["longitude", "observer"]);
        assert_eq!((records.sources[0].quotes, records.snap), (Some(Quotes::None), Some(Length::Cells(1.0))));
        assert_eq!((records.cap.observer, records.cap.dataset), (Some(0.125), None));
        assert_eq!(records.max_uncertainty, Metres::new(1500.0));
        assert_eq!(records.keep.len(), 2);
        assert_eq!(records.keep[1].values, [""]);
        assert_eq!(plan.layers[0].measure, Measure::Distance);
        assert_eq!(plan.layers[0].filter.as_deref(), Some("class IN ('primary','secondary')"));
        assert_eq!((plan.layers[1].resample, plan.layers[1].missing), (Resample::Sum, Some(0.0)));
        let CandidateKind::Uses { terms, base, .. } = &plan.candidates[1].kind else { panic!() };
        assert_eq!(*base, Fit::Given(Share::new(0.0).unwrap()));
        assert_eq!(
            (terms[0].form, &terms[0].parameters[..]),
            (CurveForm::HalfNormal, &[Fit::Given(1234.5)][..])
        );
        assert_eq!(terms[1].form, CurveForm::RisingPower);
        assert_eq!(terms[1].parameters, [Fit::Fitted, Fit::Given(1.0)]);
        assert_eq!(plan.surface.candidate, Choice::Named("access".into()));
    }

    proptest::proptest! {
        #[test]
        fn no_text_makes_it_panic(cut in 0..FULL.len(), put in "[\\[\\]{}=\"'\n,.a1 é#]{0,3}", drop in 0..4_usize) {
            let end = (cut + drop).min(FULL.len());
            if let (Some(head), Some(tail)) = (FULL.get(..cut), FULL.get(end..))
                && let Err(found) = read(&format!("{head}{put}{tail}"), "plan.toml")
            {
                proptest::prop_assert!(found.0.iter().all(|d| d.fault == Fault::Plan), "{:?}", found);
            }
        }
    }
}
