//! Writing what a run found, and saying it in a few lines.

use std::fs::File;
use std::io::BufWriter;
use std::path::Path;
use std::time::Instant;

use trodden::diag::{Diagnostic, Outcome};
use trodden::gate::{Band, InputFile, Staging, write_geotiff};
use trodden::grid::Field;
use trodden::output::{
    CandidateFinding, Checked, CheckedInput, Compress, FileDigest, Finding, Finished, Manifest, Stage,
    finish, held_out_units_csv, kept_csv, manifest_json,
};
use trodden::plan::StudyPlan;
use trodden::records::{Detail, Match, Records, Rule, Sink};

/// Value of cells outside the region.
const NODATA: f64 = -9999.0;

/// A run on its way to disk.
pub struct Run {
    pub staging: Staging,
    pub plan: toml::Table,
    pub inputs: Vec<InputFile>,
    pub stages: Vec<Stage>,
    pub time: String,
}

impl Run {
    /// The plan with all defaults written out.
    pub fn plan_text(&self) -> String {
        toml::to_string_pretty(&self.plan).unwrap_or_default()
    }

    /// Does a stage and notes how long it took.
    pub fn stage(&mut self, name: &str, work: impl FnOnce(&mut Self) -> Outcome<()>) -> Outcome<()> {
        let begun = Instant::now();
        work(self)?;
        self.stages.push(Stage { name: name.to_owned(), seconds: begun.elapsed().as_secs_f64() });
        Ok(())
    }
}

/// `dropped.csv`, written as rows are dropped.
pub struct DroppedTable {
    writer: csv::Writer<BufWriter<File>>,
    path: String,
}

impl DroppedTable {
    pub fn create(staging: &mut Staging) -> Outcome<Self> {
        let path = staging.path("dropped.csv");
        let file = File::create(&path).map_err(|e| unwritten(&path.display().to_string(), &e.to_string()))?;
        let mut table =
            Self { writer: csv::Writer::from_writer(BufWriter::new(file)), path: "dropped.csv".into() };
        table.row(["file", "line", "rule", "detail"])?;
        Ok(table)
    }

    fn row(&mut self, fields: [&str; 4]) -> Outcome<()> {
        self.writer.write_record(fields).map_err(|e| unwritten(&self.path, &e.to_string()).into())
    }

    pub fn finish(mut self) -> Outcome<()> {
        self.writer.flush().map_err(|e| unwritten(&self.path, &e.to_string()).into())
    }
}

fn unwritten(path: &str, why: &str) -> Diagnostic {
    Diagnostic::output("cannot_write", path, format!("cannot be written: {why}"))
        .cure("free some space, or give another folder with `-o`; earlier outputs are as they were")
}

impl Sink for DroppedTable {
    fn dropped(&mut self, file: &str, line: u64, rule: Rule, detail: &Detail) -> Outcome<()> {
        let detail = detail.to_string();
        // a detail that would start a spreadsheet formula is kept from it; a negative number is none
        let risky = detail.starts_with(['=', '+', '@'])
            || detail.starts_with('-') && !detail[1..].starts_with(|c: char| c.is_ascii_digit());
        let detail = if risky { format!("'{detail}") } else { detail };
        self.row([file, &line.to_string(), rule.word(), &detail])
    }
}

/// Writes a candidate's finished surface.
pub fn surface(
    run: &mut Run,
    name: &str,
    finding: &Finding,
    candidate: &CandidateFinding,
    (finished, compress): (&Finished, Compress),
) -> Outcome<()> {
    let s = &finding.surface;
    let parameters: Vec<String> =
        candidate.fitted.parameters.iter().map(|p| format!("{}={}", p.name, p.value)).collect();
    let tags = [
        ("TITLE", finding.title.clone()),
        ("SOFTWARE", format!("trodden {} ({})", finding.tool.version, finding.tool.libraries)),
        ("CANDIDATE", candidate.name.clone()),
        ("PARAMETERS", parameters.join("; ")),
        ("PER", s.per.word().to_owned()),
        ("SCALE", s.scale.word().to_owned()),
        ("FLOOR", s.floor.get().to_string()),
        ("COUNT", finding.records.count.word().to_owned()),
        ("UNITS", finding.records.weight().to_string()),
        ("SEED", finding.seed.0.to_string()),
    ];
    let (description, unit) = match s.per.word() {
        "cell" => ("recording effort: relative chance that a background point falls in the cell", "1"),
        _ => ("recording effort: relative weight per unit of area", "1"),
    };
    let field = Field::new(finding.region.clone(), finished.values.clone());
    let band = Band {
        values: field.spread(NODATA as f32),
        nodata: NODATA,
        description,
        unit,
        tags: &tags,
        compress: compress.word(),
    };
    write_geotiff(&run.staging.path(name), finding.region.grid(), band)
}

/// Writes what the result was made of.
pub fn details(run: &mut Run, finding: &Finding, compress: Compress) -> Outcome<()> {
    let grid = finding.region.grid();
    for layer in &finding.layers.0 {
        let name = format!("layer-{}.tif", layer.name);
        let description = format!("{} ({})", layer.name, layer.measure.word());
        let band = Band {
            values: layer.field.spread(NODATA as f32),
            nodata: NODATA,
            description: &description,
            unit: &layer.unit,
            tags: &[],
            compress: compress.word(),
        };
        write_geotiff(&run.staging.path(&name), grid, band)?;
    }
    let folds: Vec<f64> = (0..finding.region.len())
        .map(|cell| finding.folds.of_cell(cell).map_or(0.0, |f| f as f64 + 1.0))
        .collect();
    let band = Band {
        values: Field::new(finding.region.clone(), folds).spread(NODATA as f32),
        nodata: NODATA,
        description: "fold in which the cell's block is held out; 0 for none",
        unit: "",
        tags: &[],
        compress: compress.word(),
    };
    write_geotiff(&run.staging.path("folds.tif"), grid, band)?;
    for candidate in &finding.candidates {
        let finished = finish(&candidate.fitted.density, &finding.region, &finding.surface);
        surface(run, &format!("surface-{}.tif", candidate.name), finding, candidate, (&finished, compress))?;
    }
    run.staging.write("held-out-units.csv", held_out_units_csv(finding).as_bytes())?;
    run.staging.write("kept.csv", kept_csv(finding).as_bytes())
}

/// Writes `manifest.json`, last of all.
pub fn manifest(run: &mut Run, finding: &Finding, target: &Path) -> Outcome<()> {
    let list = |files: &[InputFile]| -> Vec<FileDigest> {
        files
            .iter()
            .map(|f| FileDigest { name: f.name.clone(), bytes: f.bytes, sha256: f.sha256.clone() })
            .collect()
    };
    let names: Vec<String> = run.staging.names().to_vec();
    let mut outputs: Vec<InputFile> =
        names.iter().filter_map(|n| trodden::gate::digest(&run.staging.path(n), n)).collect();
    outputs.extend(earlier(target, &names));
    let json = manifest_json(&Manifest {
        tool: &finding.tool,
        plan: serde_json::to_value(&run.plan).unwrap_or_default(),
        seed: finding.seed.0,
        time: run.time.clone(),
        inputs: list(&run.inputs),
        outputs: list(&outputs),
        stages: run.stages.clone(),
    });
    let text = serde_json::to_string_pretty(&json).unwrap_or_default();
    run.staging.write("manifest.json", text.as_bytes())
}

/// Outputs that an earlier run of another command left in the folder, where they still are as its
/// manifest says.
fn earlier(target: &Path, written: &[String]) -> Vec<InputFile> {
    let text = std::fs::read_to_string(target.join("manifest.json")).unwrap_or_default();
    let manifest: serde_json::Value = serde_json::from_str(&text).unwrap_or_default();
    let listed = manifest["outputs"].as_array().cloned().unwrap_or_default();
    listed
        .iter()
        .filter_map(|o| {
            let name =
                o["file"].as_str().filter(|n| !written.iter().any(|w| w == n) && !n.contains(['/', '\\']))?;
            let found = trodden::gate::digest(&target.join(name), name)?;
            (o["sha256"].as_str() == Some(found.sha256.as_str())).then_some(found)
        })
        .collect()
}

/// A value with its interval.
fn interval(e: &trodden::check::Estimate) -> String {
    match (e.value, e.interval) {
        (Some(v), Some((l, h))) => format!("{v:.3} [{l:.3}, {h:.3}]"),
        (Some(v), None) => format!("{v:.3}"),
        _ => "-".into(),
    }
}

/// The standing of the candidates as a table.
fn standings(finding: &Finding) -> String {
    let mut rows = vec![
        ["candidate", "log score [95 %]", "AUC", "Boyce", "slope", "against the best"].map(str::to_owned),
    ];
    let mut order: Vec<_> = finding.verdict.standings.iter().collect();
    order.sort_by_key(|s| s.rank);
    for s in order {
        let short = |i: usize| s.scores[i].value.map_or("-".into(), |v| format!("{v:.3}"));
        let against = match (s.rank, s.distinguishable) {
            (1, _) => "best".to_owned(),
            (_, true) => interval(&s.versus_best),
            (_, false) => format!("{} not distinguishable", interval(&s.versus_best)),
        };
        let name = finding.candidates[s.candidate].name.clone();
        rows.push([name, interval(&s.scores[0]), short(1), short(2), short(3), against]);
    }
    let widths: Vec<usize> =
        (0..6).map(|c| rows.iter().map(|r| r[c].chars().count()).max().unwrap_or(0)).collect();
    rows.iter()
        .map(|r| {
            let cells: Vec<String> = r.iter().zip(&widths).map(|(t, w)| format!("{t:w$}")).collect();
            format!("  {}", cells.join("  ").trim_end())
        })
        .collect::<Vec<_>>()
        .join("\n")
}

/// What every run says first.
fn opening(finding: &Finding) -> String {
    let r = &finding.records;
    let g = finding.region.grid();
    format!(
        "{}\n  grid      {} x {} cells of {}, {} inside, {}\n  records   {} read, {} kept, {} dropped; {} {} in {} places\n{}  \
         held out  {} in {} folds; intervals from {} blocks of {}{}\n\n{}\n",
        finding.title,
        g.columns,
        g.rows,
        g.cell_side(),
        finding.region.len(),
        g.crs.label,
        r.ledger.read(),
        r.ledger.kept(),
        r.ledger.read() - r.ledger.kept(),
        weight(r.weight()),
        r.count.word(),
        r.places,
        caps(r).iter().map(|line| format!("            {line}\n")).collect::<String>(),
        finding.split().word(),
        finding.folds.count,
        finding.blocks.count,
        finding.blocks.side,
        if finding.holdout.block.is_none() { " (a tenth of the region's larger side)" } else { "" },
        standings(finding),
    )
}

/// A short summary of a build.
pub fn build_words(finding: &Finding, finished: &Finished, target: &Path, files: usize) -> String {
    let c = finding.chosen();
    let why = if finding.delivered == finding.verdict.chosen {
        "the simplest of those not distinguishable from the best"
    } else {
        "as asked for"
    };
    format!(
        "{}\n  delivered {} ({why}); spread as over {:.0} even cells\n  written   {files} files to {}: effort.tif, report.html, …",
        opening(finding),
        c.name,
        finished.effective_cells,
        target.display()
    )
}

/// A short summary of a comparison.
pub fn compare_words(finding: &Finding, target: &Path, files: usize) -> String {
    format!(
        "{}\n  recommended {} (the simplest of those not distinguishable from the best)\n  written     {files} files to {}: \
         comparison.html, comparison.csv, surface-NAME.tif, …",
        opening(finding),
        finding.candidates[finding.verdict.chosen].name,
        target.display()
    )
}

/// How the columns of a file were found.
fn columns(file: &str, found: &[Match]) -> Option<String> {
    let one = |m: &Match| match m.how() {
        "" => format!("{} `{}`", m.role, m.column),
        how => format!("{} `{}` ({how}: `{}` was looked for)", m.role, m.column, m.wanted),
    };
    let all: Vec<String> = found.iter().map(one).collect();
    (!all.is_empty()).then(|| format!("  columns  {file}: {}", all.join(", ")))
}

/// What the records are, line by line.
fn seen(r: &Records) -> Vec<String> {
    let mut lines = r.ledger.lines();
    if let Some([w, s, e, n]) = r.reach.extent {
        lines.push(format!("all places read span x {w:.4} to {e:.4}, y {s:.4} to {n:.4} in the grid's CRS"));
    }
    if let Some((first, last)) = r.reach.days {
        let [day, range, month, year, none] = r.dates;
        lines.push(format!(
            "dated {first} to {last} (of the rows read, {day} to the day, {range} as ranges, {month} to the month, \
             {year} to the year, {none} without a readable date)"
        ));
    }
    lines.push(format!(
        "by {} observers or parties, from {} data sets; {} {} in {} places",
        r.reach.observers,
        r.reach.datasets,
        weight(r.weight()),
        r.count.word(),
        r.places
    ));
    lines.extend(caps(r));
    lines
}

/// A weight without digits that mean nothing.
fn weight(weight: f64) -> String {
    if weight.fract() == 0.0 { weight.to_string() } else { format!("{weight:.1}") }
}

/// What caps did, a line each.
fn caps(r: &Records) -> Vec<String> {
    r.capped
        .iter()
        .map(|c| {
            let what = if c.what == "observer" { "observers" } else { "data sets" };
            let heaviest: Vec<String> = c
                .heaviest
                .iter()
                .take(5)
                .map(|(units, each)| format!("{} count {each:.3} each", weight(*units)))
                .collect();
            let shown =
                if heaviest.is_empty() { String::new() } else { format!(": {}", heaviest.join(", ")) };
            let unknown = if c.unknown > 0.0 {
                format!("; {:.1} % is nobody's and not capped", c.unknown * 100.0)
            } else {
                String::new()
            };
            format!(
                "capped at {} %: {} of {} {what} weigh less{shown}{unknown}",
                weight(c.cap * 100.0),
                c.groups.1,
                c.groups.0
            )
        })
        .collect()
}

/// What `check` says.
pub fn check_words(name: &str, plan: &StudyPlan, checked: &Checked) -> String {
    let mut lines = vec![format!("{name}: {}", plan.title)];
    if let Some((g, inside)) = &checked.grid {
        let inside = inside.map_or(String::new(), |n| format!(", {n} inside"));
        lines.push(format!(
            "  grid     {} x {} cells of {}{inside}, {}, {}",
            g.columns,
            g.rows,
            g.cell_side(),
            g.crs.label,
            g.metric().word()
        ));
    }
    for CheckedInput { file, kind, crs, count, .. } in &checked.inputs {
        let count = count.map_or(String::new(), |n| {
            let what = match *kind {
                "raster" => "cells",
                "vector" => "features",
                _ => "rows",
            };
            format!(", {n} {what}")
        });
        let turned = match &checked.grid {
            Some((g, _)) if !crs.is_empty() && *crs != g.crs.label => {
                format!(" (brought to {})", g.crs.label)
            }
            _ => String::new(),
        };
        let crs = if crs.is_empty() { String::new() } else { format!(", {crs}{turned}") };
        lines.push(format!("  input    {file}: {kind}{crs}{count}"));
    }
    checked.columns.iter().for_each(|(file, found)| lines.extend(columns(file, found)));
    let records = checked.records.iter().flat_map(seen);
    lines.extend(records.map(|line| format!("  records  {line}")));
    for c in &plan.candidates {
        lines.push(format!("  would fit and check candidate {}", c.name));
    }
    if let (Some(memory), Some(seconds)) = (checked.memory_bytes, checked.seconds) {
        lines.push(format!(
            "  a build needs about {} of memory and {seconds:.0} s on two cores",
            trodden::units::Bytes(memory)
        ));
    }
    lines.push(match checked.problems.len() {
        0 => "  no problem found".into(),
        n => format!("  {n} problem{} found", if n == 1 { "" } else { "s" }),
    });
    lines.join("\n")
}
