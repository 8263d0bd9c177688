//! The commands: each reads a plan, runs the study, writes or prints what came out.

use std::path::{Path, PathBuf};

use serde_json::Value;

use trodden::diag::{Diagnostic, Outcome, Warnings};
use trodden::gate::{Files, Sources, Staging};
use trodden::output::{
    Checked, CheckedInput, Finding, Page, Tool, check_json, comparison_csv, comparison_json, effort_json,
    finish, held_out_csv,
};
use trodden::plan::{GridPlan, StudyPlan, read, resolved};
use trodden::records::{Detail, Match, Rule, Sink};
use trodden::study::{Gathered, Needs, Notes, gather, run};
use trodden::units::{Bytes, Length};

use super::args::{BuildArgs, CheckArgs, Common, CompareArgs};
use super::progress::Bars;
use super::render::{Voice, result};
use super::write::{DroppedTable, Run, details, manifest, surface};

/// A plan read from disk, and the folder its paths are relative to.
pub struct Opened {
    pub plan: StudyPlan,
    pub name: String,
    pub folder: PathBuf,
}

fn open(path: &Path) -> Outcome<Opened> {
    let name = path.display().to_string();
    let text = std::fs::read(path).map_err(|e| {
        let why =
            if e.kind() == std::io::ErrorKind::NotFound { "no such file".to_owned() } else { e.to_string() };
        Diagnostic::plan("no_plan", name.as_str(), why).cure("give the path of a plan (TOML)")
    })?;
    let text = String::from_utf8(text).map_err(|e| {
        let line = e.as_bytes()[..e.utf8_error().valid_up_to()].iter().filter(|b| **b == b'\n').count() + 1;
        Diagnostic::plan("not_text", format!("{name}:{line}"), "the plan holds bytes that are not UTF-8")
            .cure("save it as UTF-8")
    })?;
    let plan = read(text.strip_prefix('\u{feff}').unwrap_or(&text), &name)?;
    let folder =
        path.parent().filter(|p| !p.as_os_str().is_empty()).unwrap_or_else(|| Path::new(".")).to_owned();
    Ok(Opened { plan, name, folder })
}

/// Memory that may be used.
fn memory(common: &Common) -> Bytes {
    common.memory.unwrap_or_else(|| {
        let free = std::fs::read_to_string("/proc/meminfo").ok().and_then(|text| {
            let line = text.lines().find(|l| l.starts_with("MemAvailable:"))?;
            line.split_whitespace().nth(1)?.parse::<u64>().ok()
        });
        Bytes(free.map_or(4 << 30, |kib| kib * 1024 / 10 * 7))
    })
}

fn tool() -> Tool {
    Tool { version: env!("CARGO_PKG_VERSION"), libraries: trodden::gate::libraries() }
}

/// Nobody keeps the dropped records of a check.
struct Nowhere;

impl Sink for Nowhere {
    fn dropped(&mut self, _: &str, _: u64, _: Rule, _: &Detail) -> Outcome<()> {
        Ok(())
    }
}

/// `trodden check`.
pub fn check(args: &CheckArgs, common: &Common, voice: Voice) -> Outcome<()> {
    let opened = open(&args.plan).inspect_err(|problems| {
        if common.json {
            result(&pretty(&check_json(&Checked { problems: problems.0.clone(), ..Checked::default() })));
        }
    })?;
    let (checked, outcome) = look(&opened, common, voice);
    if common.json {
        result(&pretty(&check_json(&checked)));
    } else if !common.quiet {
        result(&super::write::check_words(&opened.name, &opened.plan, &checked));
    }
    outcome
}

/// Reads all that a plan asks for and says what is there; fits nothing.
pub fn look(opened: &Opened, common: &Common, voice: Voice) -> (Checked, Outcome<()>) {
    let plan = &opened.plan;
    let files = Files::new(&opened.folder);
    let bars = Bars::new(voice.shows_progress());
    let needs = Needs { sources: &files, observer: &bars, memory: memory(common), kept: false };
    let mut notes = Notes::default();
    let target = opened.folder.join(&plan.output.folder);
    let place = own_inputs(opened, &target).and_then(|()| Staging::open(&target).map(drop));
    let gathered = gather(plan, &needs, &mut Nowhere, &mut notes);
    let outcome = gathered.and_then(|g| trodden::study::ready(plan, &g).map(|()| g));
    let outcome = match (outcome, place) {
        (Ok(_), Err(p)) => Err(p),
        (Err(mut all), Err(p)) => {
            all.0.extend(p.0);
            Err(all)
        }
        (outcome, Ok(())) => outcome,
    };
    bars_end(&bars);
    let inputs = looks(plan, &files, outcome.as_ref().ok().map(|g| g.records.ledger.read()));
    let (problems, records, columns) = match &outcome {
        Ok(g) => (Vec::new(), Some(g.records.clone()), columns(g)),
        Err(p) => (p.0.clone(), None, Vec::new()),
    };
    let checked = Checked {
        grid: notes.grid.clone(),
        inputs,
        records,
        columns,
        memory_bytes: notes.cost.map(|c| c.memory.0),
        seconds: notes.cost.map(|c| c.seconds),
        problems,
        warnings: notes.warnings.0.clone(),
    };
    warn(&notes.warnings, voice);
    (checked, outcome.map(drop))
}

/// How the columns of each file of records were found.
fn columns(gathered: &Gathered) -> Vec<(String, Vec<Match>)> {
    let named = |(file, found): &(u32, Vec<Match>)| (gathered.files[*file as usize].clone(), found.clone());
    gathered.matches.iter().map(named).collect()
}

/// A look at every input, the grid's first, each file and table once.
fn looks(plan: &StudyPlan, files: &Files, rows: Option<u64>) -> Vec<CheckedInput> {
    let grid = match &plan.grid {
        GridPlan::Like(file) | GridPlan::Region { region: file, .. } => (file.as_str(), None),
    };
    let layers = plan.layers.iter().map(|l| (l.file.as_str(), l.table.as_deref()));
    let records = plan.records.files().map(|(f, s)| (f, s.table.as_deref()));
    let mut all: Vec<(&str, Option<&str>)> = Vec::new();
    for one in std::iter::once(grid).chain(layers).chain(records) {
        if !all.contains(&one) {
            all.push(one);
        }
    }
    let look = |(file, table): (&str, Option<&str>)| {
        let p = Sources::peek(files, file, table).ok()?;
        let text = !["raster", "vector"].contains(&p.kind);
        let single = plan.records.files().count() == 1;
        Some(CheckedInput {
            file: table.map_or_else(|| p.file.clone(), |t| format!("{}, {t}", p.file)),
            kind: p.kind,
            crs: if text { text_crs(plan, file) } else { p.crs },
            extent: p.extent,
            count: if text && single { rows } else { p.count },
        })
    };
    all.into_iter().filter_map(look).collect()
}

/// The CRS that the plan gives the columns of a text.
fn text_crs(plan: &StudyPlan, file: &str) -> String {
    plan.records.files().find(|(f, _)| *f == file).map_or_else(String::new, |(_, s)| s.crs.clone())
}

/// Refuses a run whose outputs would replace its own inputs.
fn own_inputs(opened: &Opened, target: &Path) -> Outcome<()> {
    let Ok(target) = target.canonicalize() else { return Ok(()) }; // a new folder holds no input
    let plan = &opened.plan;
    let grid = match &plan.grid {
        GridPlan::Like(file) | GridPlan::Region { region: file, .. } => file,
    };
    let records = plan.records.files().map(|(f, _)| f);
    let inputs = plan.layers.iter().map(|l| l.file.as_str()).chain(records).chain([grid.as_str()]);
    for input in inputs {
        let Ok(path) = opened.folder.join(input).canonicalize() else { continue };
        let name = file_name(input);
        if path.parent() == Some(&target) && is_output(&name) {
            let text = format!("the input `{input}` would be replaced by an output of the same name");
            return Err(Diagnostic::plan(
                "output_is_input",
                format!("{}: [output] folder", opened.name),
                text,
            )
            .cure("write into another `folder`, or rename the input")
            .into());
        }
    }
    Ok(())
}

/// Whether a file of this name may be written by a run.
fn is_output(name: &str) -> bool {
    let known = [
        "effort.tif",
        "effort.json",
        "held-out.csv",
        "dropped.csv",
        "report.html",
        "manifest.json",
        "comparison.json",
        "comparison.csv",
        "comparison.html",
        "folds.tif",
        "held-out-units.csv",
        "kept.csv",
    ];
    known.contains(&name)
        || (name.ends_with(".tif") && (name.starts_with("surface-") || name.starts_with("layer-")))
}

fn bars_end(bars: &Bars) {
    trodden::diag::Observer::end(bars);
}

fn warn(warnings: &Warnings, voice: Voice) {
    warnings.0.iter().for_each(|w| voice.warning(w));
}

fn pretty(value: &Value) -> String {
    serde_json::to_string_pretty(value).unwrap_or_default()
}

/// Runs a study into a staging folder; the caller writes what it wants and commits.
fn study(
    opened: &Opened,
    target: &Path,
    common: &Common,
    voice: Voice,
    kept: bool,
) -> Outcome<(Finding, Run)> {
    let time = now();
    own_inputs(opened, target)?;
    let files = Files::new(&opened.folder);
    let mut staging = Staging::open(target)?;
    let mut dropped = DroppedTable::create(&mut staging)?;
    let bars = Bars::new(voice.shows_progress());
    let needs = Needs { sources: &files, observer: &bars, memory: memory(common), kept };
    let mut notes = Notes::default();
    let outcome = run(&opened.plan, &needs, tool(), &mut dropped, &mut notes);
    bars_end(&bars);
    if outcome.is_err() {
        warn(&notes.warnings, voice);
    }
    let finding = outcome?;
    finding.warnings.iter().for_each(|w| voice.warning(w));
    dropped.finish()?;
    let mut whole = opened.plan.clone();
    whole.holdout.block = Some(Length::Metres(finding.blocks.side));
    let plan = resolved(&whole);
    let mut inputs = files.inputs();
    inputs.insert(
        0,
        trodden::gate::digest(&opened.folder.join(file_name(&opened.name)), &opened.name).ok_or_else(
            || {
                Diagnostic::plan("no_plan", opened.name.as_str(), "the plan vanished during the run")
                    .cure("run again")
            },
        )?,
    );
    Ok((finding, Run { staging, plan, inputs, stages: notes.stages, time }))
}

/// Delivers a candidate other than the plan's choice.
fn choose(plan: &mut StudyPlan, name: &str) -> Outcome<()> {
    if !plan.candidates.iter().any(|c| c.name == name) {
        let names: Vec<String> = plan.candidates.iter().map(|c| format!("`{}`", c.name)).collect();
        let text = format!("the plan has no candidate `{name}`");
        return Err(Diagnostic::plan("unknown_candidate", "--candidate", text)
            .cure(format!("name one of {}", names.join(", ")))
            .into());
    }
    plan.surface.candidate = trodden::output::Choice::Named(name.to_owned());
    Ok(())
}

fn file_name(path: &str) -> String {
    Path::new(path).file_name().map(|n| n.to_string_lossy().into_owned()).unwrap_or_default()
}

fn now() -> String {
    let now = jiff::Timestamp::now();
    jiff::Timestamp::from_second(now.as_second()).unwrap_or(now).to_string()
}

fn target(wanted: Option<&PathBuf>, opened: &Opened) -> PathBuf {
    wanted.cloned().unwrap_or_else(|| opened.folder.join(&opened.plan.output.folder))
}

/// `trodden build`.
pub fn build(args: &BuildArgs, common: &Common, voice: Voice) -> Outcome<()> {
    let mut opened = open(&args.plan)?;
    if let Some(name) = &args.candidate {
        choose(&mut opened.plan, name)?;
    }
    let target = target(args.output.as_ref(), &opened);
    let output = &opened.plan.output;
    let (finding, mut run) = study(&opened, &target, common, voice, output.details)?;
    let finished = finish(&finding.chosen().fitted.density, &finding.region, &finding.surface);
    run.stage("write", |run| {
        surface(run, "effort.tif", &finding, finding.chosen(), (&finished, output.compress))?;
        let page = Page {
            time: run.time.clone(),
            plan: run.plan_text(),
            command: match &args.candidate {
                Some(name) => format!("trodden build {} --candidate {name}", opened.name),
                None => format!("trodden build {}", opened.name),
            },
        };
        run.staging.write("effort.json", pretty(&effort_json(&finding, &finished)).as_bytes())?;
        run.staging.write("held-out.csv", held_out_csv(&finding).as_bytes())?;
        run.staging.write("report.html", trodden::output::report(&finding, &finished, &page).as_bytes())?;
        if output.details { details(run, &finding, output.compress) } else { Ok(()) }
    })?;
    manifest(&mut run, &finding, &target)?;
    let placed = run.staging.commit()?;
    if common.json {
        result(&pretty(&effort_json(&finding, &finished)));
    } else if !common.quiet {
        result(&super::write::build_words(&finding, &finished, &target, placed.len()));
    }
    Ok(())
}

/// `trodden compare`.
pub fn compare(args: &CompareArgs, common: &Common, voice: Voice) -> Outcome<()> {
    let opened = open(&args.plan)?;
    let target = target(args.output.as_ref(), &opened);
    let output = &opened.plan.output;
    let (finding, mut run) = study(&opened, &target, common, voice, false)?;
    run.stage("write", |run| {
        for candidate in &finding.candidates {
            let finished = finish(&candidate.fitted.density, &finding.region, &finding.surface);
            surface(
                run,
                &format!("surface-{}.tif", candidate.name),
                &finding,
                candidate,
                (&finished, output.compress),
            )?;
        }
        let page = Page {
            time: run.time.clone(),
            plan: run.plan_text(),
            command: format!("trodden compare {}", opened.name),
        };
        run.staging.write("comparison.json", pretty(&comparison_json(&finding)).as_bytes())?;
        run.staging.write("comparison.csv", comparison_csv(&finding).as_bytes())?;
        run.staging.write("held-out.csv", held_out_csv(&finding).as_bytes())?;
        run.staging.write("comparison.html", trodden::output::comparison(&finding, &page).as_bytes())
    })?;
    manifest(&mut run, &finding, &target)?;
    let placed = run.staging.commit()?;
    if common.json {
        result(&pretty(&comparison_json(&finding)));
    } else if !common.quiet {
        result(&super::write::compare_words(&finding, &target, placed.len()));
    }
    Ok(())
}
