//! Writes a plan with its defaults in place, in the plan's own keys.

use toml::{Table, Value};

use super::layers::RESAMPLE;
use super::records::COLUMNS;
use super::{GridPlan, StudyPlan};
use crate::check::HoldoutPlan;
use crate::model::{CandidateKind, CandidatePlan, Fit, TermPlan};
use crate::output::{Choice, OutputPlan, SurfacePlan};
use crate::proxies::{LayerPlan, Measure};
use crate::records::{CapPlan, ColumnValues, Columns, DateRange, Precision, Quotes, RecordsPlan, SourcePlan};
use crate::units::Length;

/// The plan with every default written out, such that reading its text gives an equal plan.
///
/// What has no word of its own stays out: options that are absent, columns the plan does not state
/// (a stated column must exist, a default one need not), the baseline `uniform`.
pub fn resolved(plan: &StudyPlan) -> Table {
    let stated = plan.candidates.iter().filter(|candidate| candidate.kind != CandidateKind::Uniform);
    let mut table = Table::new();
    put(&mut table, "title", plan.title.as_str());
    put(&mut table, "seed", i64::try_from(plan.seed.0).unwrap_or(i64::MAX));
    put(&mut table, "grid", grid(&plan.grid));
    put(&mut table, "records", records(&plan.records));
    if !plan.layers.is_empty() {
        put(&mut table, "layer", plan.layers.iter().map(layer).collect::<Vec<Table>>());
    }
    put(&mut table, "candidate", stated.map(candidate).collect::<Vec<Table>>());
    put(&mut table, "holdout", holdout(&plan.holdout));
    put(&mut table, "surface", surface(&plan.surface));
    put(&mut table, "output", output(&plan.output));
    table
}

fn put(table: &mut Table, key: &str, value: impl Into<Value>) {
    table.insert(key.into(), value.into());
}

fn maybe(table: &mut Table, key: &str, value: Option<impl Into<Value>>) {
    if let Some(value) = value {
        put(table, key, value);
    }
}

fn grid(plan: &GridPlan) -> Table {
    let mut table = Table::new();
    match plan {
        GridPlan::Like(like) => put(&mut table, "like", like.as_str()),
        GridPlan::Region { region, crs, cell, touching } => {
            put(&mut table, "region", region.as_str());
            put(&mut table, "crs", crs.as_str());
            put(&mut table, "cell", exactly(*cell));
            put(&mut table, "touching", *touching);
        }
    }
    table
}

fn records(plan: &RecordsPlan) -> Table {
    let mut table = plan.sources.first().map(source).unwrap_or_default();
    maybe(&mut table, "dates", plan.dates.map(dates));
    maybe(&mut table, "max_uncertainty", plan.max_uncertainty.map(|m| exactly(Length::Metres(m))));
    maybe(&mut table, "keep", column_values(&plan.keep));
    maybe(&mut table, "leave_out", column_values(&plan.leave_out));
    maybe(&mut table, "snap", plan.snap.map(exactly));
    put(&mut table, "count", plan.count.word());
    put(&mut table, "empty_visits", "ignore");
    maybe(&mut table, "cap", cap(plan.cap));
    put(&mut table, "sensitive", false);
    if plan.sources.len() > 1 {
        put(&mut table, "source", plan.sources[1..].iter().map(source).collect::<Vec<Table>>());
    }
    table
}

fn source(plan: &SourcePlan) -> Table {
    let mut table = Table::new();
    put(&mut table, "file", plan.files.clone());
    maybe(&mut table, "table", plan.table.as_deref());
    let quotes = plan.quotes.map(|quotes| if quotes == Quotes::None { "none" } else { "double" });
    maybe(&mut table, "quotes", quotes);
    for (key, column) in stated_columns(&plan.columns) {
        put(&mut table, key, column);
    }
    put(&mut table, "crs", plan.crs.as_str());
    table
}

fn cap(plan: CapPlan) -> Option<Table> {
    let mut table = Table::new();
    maybe(&mut table, "observer", plan.observer.map(percent));
    maybe(&mut table, "dataset", plan.dataset.map(percent));
    (!table.is_empty()).then_some(table)
}

/// A share as a percentage that reads as the very same share.
fn percent(share: f64) -> String {
    let near = share * 100.0;
    let exact = [near, near.next_down(), near.next_up()].into_iter().find(|p| p / 100.0 == share);
    format!("{} %", exact.unwrap_or(near))
}

fn stated_columns(columns: &Columns) -> Vec<(&'static str, &str)> {
    let names = [
        &columns.longitude,
        &columns.latitude,
        &columns.date,
        &columns.observer,
        &columns.dataset,
        &columns.taxon,
        &columns.uncertainty,
    ];
    let all = COLUMNS.iter().map(|(key, _)| *key).zip(names.map(String::as_str));
    all.filter(|(key, _)| columns.stated.iter().any(|stated| stated == key)).collect()
}

fn column_values(columns: &[ColumnValues]) -> Option<Table> {
    let entry = |c: &ColumnValues| (c.column.clone(), Value::from(c.values.clone()));
    (!columns.is_empty()).then(|| columns.iter().map(entry).collect())
}

fn layer(plan: &LayerPlan) -> Table {
    let mut table = Table::new();
    put(&mut table, "name", plan.name.as_str());
    put(&mut table, "measure", plan.measure.word());
    put(&mut table, "file", plan.file.as_str());
    maybe(&mut table, "table", plan.table.as_deref());
    maybe(&mut table, "where", plan.filter.as_deref());
    if plan.measure == Measure::Value {
        let word = RESAMPLE.iter().find(|(_, resample)| *resample == plan.resample);
        maybe(&mut table, "resample", word.map(|(word, _)| *word));
        maybe(&mut table, "missing", plan.missing);
    }
    table
}

fn candidate(plan: &CandidatePlan) -> Table {
    let mut table = Table::new();
    put(&mut table, "name", plan.name.as_str());
    match &plan.kind {
        CandidateKind::Density(density) => {
            let mut kernel = Table::new();
            put(&mut kernel, "kernel", "gaussian");
            put(&mut kernel, "bandwidth", fit(density.bandwidth, |length| exactly(length).into()));
            put(&mut kernel, "edges", "renormalise");
            put(&mut table, "density", kernel);
        }
        CandidateKind::Uses { terms, base, remainder } => {
            put(&mut table, "uses", terms.iter().map(term).collect::<Table>());
            put(&mut table, "base", fit(*base, |share| share.get().into()));
            if let Some(bandwidth) = remainder {
                let mut field = Table::new();
                put(&mut field, "bandwidth", fit(*bandwidth, |length| exactly(length).into()));
                put(&mut table, "remainder", field);
            }
        }
        CandidateKind::Blend(members) => {
            let names = members.iter().map(|m| Value::from(m.as_str())).collect::<Vec<_>>();
            table.insert("blend".into(), Value::Array(names));
        }
        CandidateKind::Uniform => {}
    }
    table
}

fn term(plan: &TermPlan) -> (String, Value) {
    let mut table = Table::new();
    put(&mut table, "curve", plan.form.word());
    for (name, parameter) in plan.form.parameters().iter().zip(&plan.parameters) {
        let is_length = *name == "scale"; // the curves with a scale lie over distances
        let given = |v: f64| if is_length { format!("{v} m").into() } else { Value::from(v) };
        put(&mut table, name, fit(*parameter, given));
    }
    (plan.layer.clone(), table.into())
}

fn fit<T>(value: Fit<T>, given: impl Fn(T) -> Value) -> Value {
    match value {
        Fit::Fitted => "fit".into(),
        Fit::Given(value) => given(value),
    }
}

fn holdout(plan: &HoldoutPlan) -> Table {
    let mut table = Table::new();
    let whole = |number: usize| i64::try_from(number).unwrap_or(i64::MAX);
    put(&mut table, "split", plan.split.word());
    put(&mut table, "folds", whole(plan.folds));
    put(&mut table, "repeats", 1);
    put(&mut table, "buffer", "0 km");
    maybe(&mut table, "block", plan.block.map(exactly));
    put(&mut table, "resamples", whole(plan.resamples));
    table
}

fn surface(plan: &SurfacePlan) -> Table {
    let mut table = Table::new();
    let candidate = match &plan.candidate {
        Choice::Best => "best",
        Choice::Named(name) => name,
    };
    put(&mut table, "candidate", candidate);
    put(&mut table, "per", plan.per.word());
    put(&mut table, "scale", plan.scale.word());
    put(&mut table, "floor", plan.floor.get());
    put(&mut table, "support", plan.support);
    put(&mut table, "uncertainty", false);
    table
}

fn output(plan: &OutputPlan) -> Table {
    let mut table = Table::new();
    put(&mut table, "folder", plan.folder.as_str());
    put(&mut table, "compress", plan.compress.word());
    put(&mut table, "also", Vec::<String>::new());
    put(&mut table, "details", plan.details);
    table
}

/// A length with all its digits: kilometres where these give the same number back, else metres.
fn exactly(length: Length) -> String {
    match length {
        Length::Metres(metres) => {
            let km = format!("{} km", metres.get() / 1000.0);
            let same = metres.get() >= 1000.0 && Length::parse(&km) == Ok(length);
            if same { km } else { format!("{} m", metres.get()) }
        }
        Length::Cells(cells) => format!("{cells} cells"),
        Length::Degrees(degrees) => format!("{degrees} deg"),
    }
}

fn dates(range: DateRange) -> String {
    match range.precision {
        Precision::Day => range.first.to_string(),
        Precision::Month => range.first.strftime("%Y-%m").to_string(),
        Precision::Year => range.first.strftime("%Y").to_string(),
        Precision::Range => format!("{}/{}", range.first, range.last),
    }
}

#[cfg(test)]
pub(super) mod tests {
    use crate::plan::{StudyPlan, read, resolved};

    /// The shortest plan there is.
    pub(in crate::plan) const SHORTEST: &str = "title = \"T\"
[grid]
like = \"t.tif\"
[records]
file = \"r.tsv\"
[[candidate]]
name = \"recorded\"
density = {}
";

    /// A plan that says all this version honours.
    pub(in crate::plan) const FULL: &str = r#"title = "Hoverflies"
seed = 20240611
[grid]
region = "region.gpkg"
crs = "EPSG:3035"
cell = "1 km"
touching = true
[records]
file = ["a.tsv", "b.csv"]
table = "t"
quotes = "none"
longitude = "x"
latitude = "decimalLatitude"
crs = "EPSG:3035"
dates = "2005/2024"
max_uncertainty = "1.5 km"
keep = { sex = "", basisOfRecord = ["HUMAN_OBSERVATION", "PRESERVED_SPECIMEN"] }
leave_out = { scientificName = ["Focalis exempli"] }
snap = "1 cells"
count = "records"
empty_visits = "ignore"
cap = { observer = "12.5 %" }
sensitive = false
[[records.source]]
file = "c.csv"
longitude = "lon"
observer = "who"
crs = "EPSG:4258"
[[layer]]
name = "roads"
measure = "distance"
file = "roads.gpkg"
table = "roads"
where = "class IN ('primary','secondary')"
[[layer]]
name = "people"
measure = "value"
file = "population.tif"
resample = "sum"
missing = 0
[[candidate]]
name = "recorded"
density = { kernel = "gaussian", bandwidth = "2 cells", edges = "renormalise" }
[[candidate]]
name = "access"
uses = { people = { curve = "power", offset = 1 }, roads = { curve = "half-normal", scale = "1234.5 m" } }
base = 0
[holdout]
split = "blocks"
folds = 4
repeats = 1
buffer = "0 km"
block = "30 km"
resamples = 199
[surface]
candidate = "access"
per = "km2"
scale = "max"
floor = 0.05
support = 3
uncertainty = false
[output]
folder = "results"
compress = "zstd"
also = []
details = true
"#;

    pub(in crate::plan) fn good(text: &str) -> StudyPlan {
        read(text, "plan.toml").unwrap_or_else(|problems| panic!("{problems}\n{text}"))
    }

    #[test]
    fn a_resolved_plan_reads_as_itself() {
        let records = |lines: &str| SHORTEST.replace("[records]\n", &format!("[records]\n{lines}\n"));
        let more = [
            records("dates = \"2005\"\nsnap = \"0 m\"\nobserver = \"o\""),
            records("dates = \"2005-03\"\nmax_uncertainty = \"0.1 km\""),
            records("dates = \"2005-03-01\""),
            records("dates = \"2005-W03\""),
            records("dates = \"2005-12-31/2005\""),
            format!("{SHORTEST}[surface]\ncandidate = \"uniform\"\nfloor = 0.30000000000000004"),
            FULL.replace("\"1 km\"", "\"0.01 deg\"").replace("1234.5 m", "0.1234567 km"),
            FULL.replace("half-normal", "power")
                .replace("power\", offset = 1", "log-linear\", rate = -1e-30"),
        ];
        for text in [SHORTEST, FULL].into_iter().map(String::from).chain(more) {
            let plan = good(&text);
            let again = toml::to_string(&resolved(&plan)).unwrap();
            assert_eq!(good(&again), plan, "{again}");
            assert!(again.contains("floor = ") && again.contains("count = "));
        }
    }

    proptest::proptest! {
        #[test]
        fn any_numbers_survive_being_resolved(
            seed in 0..i64::MAX, floor in 0.0..1.0_f64, metres in 1e-6..1e9_f64, cells in 1e-3..1e6_f64,
            rate in -1e3..1e3_f64, folds in 2..1000_i64,
        ) {
            let text = FULL
                .replace("20240611", &seed.to_string())
                .replace("floor = 0.05", &format!("floor = {floor:?}"))
                .replace("1234.5 m", &format!("{metres} m"))
                .replace("2 cells", &format!("{cells} cells"))
                .replace("power\", offset = 1", &format!("log-linear\", rate = {rate:?}"))
                .replace("folds = 4", &format!("folds = {folds}"));
            let plan = good(&text);
            proptest::prop_assert_eq!(good(&toml::to_string(&resolved(&plan)).unwrap()), plan);
        }
    }
}
