//! `trodden thin`: leaves so many records that no two are closer than a distance.

use std::fs::File;
use std::io::{BufWriter, Write};
use std::path::Path;

use serde_json::json;

use trodden::diag::{Diagnostic, Observer, Outcome};
use trodden::gate::{Copy, Files, OnEarth, Sources, Staging};
use trodden::records::{
    CapPlan, Columns, Count, Ground, RecordsPlan, SourcePlan, Spot, SpotList, Spotter, Thinned,
    thin_by_distance, thin_by_square,
};
use trodden::units::{Length, Metres, Seed};

use super::args::{Common, ThinArgs};
use super::progress::Bars;
use super::render::{Voice, result};

/// What is asked for.
enum Rule {
    Distance(Metres),
    Square(Metres, usize),
}

/// Runs the command.
pub fn thin(args: &ThinArgs, common: &Common, voice: Voice) -> Outcome<()> {
    let rule = rule(args)?;
    let file = args.records.display().to_string();
    refuse_target(args)?;
    let files = Files::new(Path::new(""));
    let plan = plan(args, &file);
    let ground = OnEarth::new(&files, &args.crs, "--crs", matches!(rule, Rule::Square(..)))?;
    let bars = Bars::new(voice.shows_progress());
    let mut list = SpotList::default();
    files.read_records(&plan, &Spotter::new(&ground), &mut list, &bars)?;
    list.remarks.iter().chain(&files.remarks()).for_each(|r| voice.warning(r));
    if list.spots.is_empty() {
        return Err(no_place(&file, &list).into());
    }
    bars.begin("thin", None);
    let thinned = choose(&list, &rule, &ground, args);
    bars.end();
    let kept: Vec<Spot> = thinned.kept.iter().map(|i| list.spots[*i as usize]).collect();
    let (folder, name) = target(&args.output);
    let mut staging = Staging::open(folder)?;
    let path = staging.path(name);
    let unwritten = |e: std::io::Error| {
        Diagnostic::output(
            "cannot_write",
            args.output.display().to_string(),
            format!("cannot be written: {e}"),
        )
        .cure("free some space, or give another file with `-o`")
    };
    let mut out = BufWriter::new(File::create(&path).map_err(unwritten)?);
    files.copy_records(&plan, Copy::new(&kept, &mut out, &bars))?;
    out.flush().map_err(unwritten)?;
    bars.end();
    staging.commit()?;
    if common.json {
        result(&serde_json::to_string_pretty(&summary(&list, &thinned, &rule)).unwrap_or_default());
    } else if !common.quiet {
        result(&words(&file, &list, &thinned, (&rule, args)));
    }
    Ok(())
}

fn choose(list: &SpotList, rule: &Rule, ground: &OnEarth, args: &ThinArgs) -> Thinned {
    let places: Vec<(f64, f64)> = list.spots.iter().map(|s| s.xy).collect();
    let on = ground.plane().map_or(Ground::Globe, |metres_per_unit| Ground::Plane { metres_per_unit });
    match rule {
        Rule::Distance(d) => thin_by_distance(&places, on, *d, args.tries.get(), Seed(args.seed)),
        Rule::Square(side, n) => thin_by_square(&places, on, *side, *n, Seed(args.seed)),
    }
}

fn rule(args: &ThinArgs) -> Outcome<Rule> {
    let length = |text: &str, option: &str| -> Outcome<Metres> {
        match Length::parse(text) {
            Ok(Length::Metres(m)) if m.get() > 0.0 => Ok(m),
            _ => Err(Diagnostic::plan(
                "bad_quantity",
                option,
                format!("`{text}` is no length above zero in m or km"),
            )
            .cure(format!("write {option} \"5 km\""))
            .into()),
        }
    };
    match (&args.distance, &args.square) {
        (Some(d), _) => Ok(Rule::Distance(length(d, "--distance")?)),
        (None, Some(s)) => Ok(Rule::Square(length(s, "--square")?, args.per_square.get())),
        (None, None) => {
            Err(Diagnostic::plan("missing_option", "thin", "neither --distance nor --square is given")
                .cure("give --distance \"5 km\", or --square \"10 km\"")
                .into())
        }
    }
}

/// A plan of one file in which every row counts.
fn plan(args: &ThinArgs, file: &str) -> RecordsPlan {
    let name = |given: &Option<String>, term: &str| given.clone().unwrap_or_else(|| term.to_owned());
    let stated = [("longitude", &args.longitude), ("latitude", &args.latitude)];
    let columns = Columns {
        longitude: name(&args.longitude, "decimalLongitude"),
        latitude: name(&args.latitude, "decimalLatitude"),
        date: "eventDate".into(),
        observer: "recordedBy".into(),
        dataset: "datasetName".into(),
        taxon: "scientificName".into(),
        uncertainty: "coordinateUncertaintyInMeters".into(),
        stated: stated.iter().filter(|s| s.1.is_some()).map(|s| s.0.to_owned()).collect(),
    };
    let source = SourcePlan {
        files: vec![file.to_owned()],
        table: args.table.clone(),
        quotes: None,
        columns,
        crs: args.crs.clone(),
    };
    RecordsPlan {
        sources: vec![source],
        dates: None,
        max_uncertainty: None,
        keep: Vec::new(),
        leave_out: Vec::new(),
        snap: None,
        count: Count::Records,
        cap: CapPlan::default(),
    }
}

/// The folder and the name of a file to write.
fn target(path: &Path) -> (&Path, &str) {
    let folder = path.parent().filter(|p| !p.as_os_str().is_empty()).unwrap_or_else(|| Path::new("."));
    (folder, path.file_name().and_then(|n| n.to_str()).unwrap_or("thinned.csv"))
}

/// Refuses to write over the input, or under a name of another kind of file.
fn refuse_target(args: &ThinArgs) -> Outcome<()> {
    let out = &args.output;
    let same = out.canonicalize().is_ok_and(|o| args.records.canonicalize().is_ok_and(|r| r == o));
    if same || out.file_name().is_none() {
        let text = if same { "is the input itself" } else { "is no name of a file" };
        return Err(Diagnostic::plan("output_is_input", format!("-o {}", out.display()), text)
            .cure("give another file with `-o`")
            .into());
    }
    let ending = out.extension().map(|e| e.to_string_lossy().to_lowercase()).unwrap_or_default();
    if ["gpkg", "shp", "geojson", "json", "fgb", "parquet", "zip", "gz"].contains(&ending.as_str()) {
        let text = format!("thinned records are written as delimited text, not as `.{ending}`");
        return Err(Diagnostic::plan("wrong_kind", format!("-o {}", out.display()), text)
            .cure("end the name in .csv or .tsv")
            .into());
    }
    Ok(())
}

fn no_place(file: &str, list: &SpotList) -> Diagnostic {
    let text = format!(
        "no row has a place: {} read, {} unreadable, {} without coordinates that can be read",
        list.read(),
        list.unreadable,
        list.placeless
    );
    Diagnostic::input("no_records", file, text)
        .cure("name the columns with --longitude and --latitude, and their CRS with --crs")
}

fn summary(list: &SpotList, thinned: &Thinned, rule: &Rule) -> serde_json::Value {
    let (distance, square, per_square) = match rule {
        Rule::Distance(d) => (Some(d.get()), None, None),
        Rule::Square(s, n) => (None, Some(s.get()), Some(*n)),
    };
    json!({
        "read": list.read(), "kept": thinned.kept.len(), "distance_m": distance, "square_m": square,
        "per_square": per_square, "closest_kept_m": thinned.closest.map(Metres::get),
        "unreadable": list.unreadable, "without_place": list.placeless,
    })
}

fn words(file: &str, list: &SpotList, thinned: &Thinned, (rule, args): (&Rule, &ThinArgs)) -> String {
    let kept = match rule {
        Rule::Distance(d) => format!("no two closer than {d}"),
        Rule::Square(s, n) => format!("at most {n} in each square of {s}"),
    };
    let closest = thinned.closest.map_or(String::new(), |c| format!("; the closest two are {c} apart"));
    let mut lines =
        vec![format!("{file}: {} records read, {} kept ({kept}{closest})", list.read(), thinned.kept.len())];
    if list.unreadable + list.placeless > 0 {
        lines.push(format!(
            "  left out: {} rows that cannot be read, {} without a place (or at 0, 0)",
            list.unreadable, list.placeless
        ));
    }
    lines.push(format!("  written to {}", args.output.display()));
    lines.join("\n")
}
