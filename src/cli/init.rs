//! `trodden init`: writes a commented plan from the files it is given, and says what it sees in them.

use std::fmt::Write as _;
use std::path::{Path, PathBuf};

use trodden::diag::{Diagnostic, Outcome};
use trodden::gate::{ColumnNames, Files, GridRequest, Sources, Staging, usual_column};
use trodden::records::{Columns, SourcePlan};

use super::args::{Common, InitArgs};
use super::commands::{Opened, look};
use super::render::{Voice, result};

/// Cells along the larger side of a grid that is proposed.
const ACROSS: f64 = 250.0;

/// Keys of columns and the Darwin Core terms they default to.
const TERMS: [(&str, &str); 7] = [
    ("longitude", "decimalLongitude"),
    ("latitude", "decimalLatitude"),
    ("date", "eventDate"),
    ("observer", "recordedBy"),
    ("dataset", "datasetName"),
    ("taxon", "scientificName"),
    ("uncertainty", "coordinateUncertaintyInMeters"),
];

/// Runs the command.
pub fn init(args: &InitArgs, common: &Common, voice: Voice) -> Outcome<()> {
    if args.output.exists() {
        return Err(Diagnostic::output("plan_exists", args.output.display().to_string(), "exists already")
            .cure("give another name with `-o`, or remove it first")
            .into());
    }
    let folder = args.output.parent().filter(|p| !p.as_os_str().is_empty()).unwrap_or_else(|| Path::new("."));
    let text = propose(args, folder)?;
    let name = args.output.display().to_string();
    let plan = trodden::plan::read(&text, &name)?;
    let opened = Opened { plan, name, folder: folder.to_owned() };
    let (checked, outcome) = look(&opened, common, voice);
    outcome?;
    let mut staging = Staging::open(folder)?;
    let file = args.output.file_name().map(|n| n.to_string_lossy().into_owned()).unwrap_or_default();
    staging.write(&file, text.as_bytes())?;
    staging.commit()?;
    if common.json {
        let json = trodden::output::check_json(&checked);
        result(&serde_json::to_string_pretty(&json).unwrap_or_default());
    } else if !common.quiet {
        let words = super::write::check_words(&opened.name, &opened.plan, &checked);
        result(&format!(
            "{words}\n  written  {}: read it through, then run `trodden build {0}`",
            opened.name
        ));
    }
    Ok(())
}

/// The text of the plan.
fn propose(args: &InitArgs, folder: &Path) -> Outcome<String> {
    let files = Files::new(Path::new(""));
    let mut text = String::from(
        "# A plan for trodden, written by `trodden init`. Every line may be changed; what is left out has the\n\
         # default that config/plan-keys.md gives.\n\ntitle = \"Recording effort\"   # what reports call the study\nseed  = 1                    # same plan, inputs and seed: same bytes\n\n",
    );
    text += &grid(args, folder, &files)?;
    text += &records(args, folder, &files)?;
    let mut terms = Vec::new();
    if let Some(roads) = &args.roads {
        let _ = write!(
            text,
            "[[layer]]                    # people look where they can get to\nname    = \"roads\"\nmeasure = \"distance\"         # metres from each cell to the nearest feature\nfile    = {}\n\n",
            quoted(&relative(roads, folder))
        );
        terms.push("roads = { curve = \"half-normal\" }");
    }
    if let Some(people) = &args.population {
        let _ = write!(
            text,
            "[[layer]]                    # people look near where they live\nname     = \"people\"\nmeasure  = \"value\"\nfile     = {}\nresample = \"sum\"             # totals are kept; right for counts, wrong for densities (\"mean\")\nmissing  = 0                 # where the raster has no value, nobody lives\n\n",
            quoted(&relative(people, folder))
        );
        terms.push("people = { curve = \"power\" }");
    }
    text += &candidates(&terms);
    text += "[holdout]\nsplit = \"outings\"            # what one observer did on one day is held out together: how well a surface fills in;\n                             # \"blocks\" asks how well it reaches out to land without records\nfolds = 5\n\n\
             [surface]\ncandidate = \"best\"           # the simplest of those that cannot be told from the best on held-out records\nper       = \"cell\"           # a number is the chance that a background point falls in the cell\nfloor     = 0.01             # this share is spread evenly, so that no cell inside is zero\n\n[output]\nfolder = \"out\"\n";
    Ok(text)
}

fn grid(args: &InitArgs, folder: &Path, files: &Files) -> Outcome<String> {
    if let Some(like) = &args.like {
        files.grid(GridRequest::Like(&like.display().to_string()))?;
        return Ok(format!(
            "[grid]\nlike = {}   # the result matches this raster cell for cell; its nodata is outside\n\n",
            quoted(&relative(like, folder))
        ));
    }
    let Some(region) = &args.region else {
        return Err(Diagnostic::plan("missing_option", "init", "neither --like nor --region is given")
            .cure("give a raster of your covariates with --like, or polygons with --region")
            .into());
    };
    let name = region.display().to_string();
    let peek = files.peek(&name, None)?;
    let Some([w, s, e, n]) = peek.extent.filter(|_| !peek.crs.is_empty()) else {
        return Err(Diagnostic::input("no_crs", name, "has no CRS, or no extent")
            .cure("write its CRS into the file (`ogr2ogr -a_srs`)")
            .into());
    };
    let (side, unit) = match files.degrees(&peek.crs)? {
        true => (round((e - w).max(n - s) / ACROSS), "deg"),
        false => (round((e - w).max(n - s) / ACROSS), "m"),
    };
    Ok(format!(
        "[grid]\nregion = {}   # a cell is inside when its centre is\ncrs    = {}   # the region's own\ncell   = \"{side} {unit}\"   # a guess, about {ACROSS:.0} cells across: use that of your covariates, or `like`\n\n",
        quoted(&relative(region, folder)),
        quoted(&peek.crs)
    ))
}

/// A length near the one given whose first digit is 1, 2 or 5.
fn round(length: f64) -> f64 {
    let mut power = 1.0_f64;
    while power * 10.0 <= length {
        power *= 10.0;
    }
    while power > length {
        power /= 10.0;
    }
    [5.0, 2.0].into_iter().find(|d| d * power <= length).unwrap_or(1.0) * power
}

fn records(args: &InitArgs, folder: &Path, files: &Files) -> Outcome<String> {
    let file = args.records.display().to_string();
    let mut text = format!("[records]\nfile = {}\n", quoted(&relative(&args.records, folder)));
    let names = files.columns(&file, &default_source(args))?;
    let mut found = Vec::new();
    for (key, term) in TERMS {
        if names.geometry && ["longitude", "latitude"].contains(&key) {
            continue;
        }
        match column(&names, key, term) {
            Some(column) if column == term => found.push(key),
            Some(column) => {
                let _ = writeln!(
                    text,
                    "{key} = {}   # no column is named `{term}`; taken by its name, so look whether it is right",
                    quoted(column)
                );
                found.push(key);
            }
            None => {
                let _ = writeln!(
                    text,
                    "# {key} = \"…\"   # no column named `{term}`, or as such columns usually are"
                );
            }
        }
    }
    let crs = args.crs.as_deref().unwrap_or("EPSG:4326");
    if !names.geometry {
        let why = if args.crs.is_some() {
            "as given"
        } else {
            "longitude and latitude on WGS 84, unless a column `geodeticDatum` says otherwise"
        };
        let _ = writeln!(text, "crs = {}   # {why}", quoted(crs));
    }
    let visits = found.contains(&"date") || found.contains(&"observer");
    text += if visits {
        "count = \"visits\"   # one observer on one date in one cell counts once: nearer to effort than records\n"
    } else {
        "count = \"records\"   # neither a date nor an observer column was found, so visits cannot be told\n"
    };
    text += "# dates = \"2005/2024\"       # keep only these, both ends included\n# max_uncertainty = \"2 km\"   # drop what is vaguer\n# snap = \"1 cells\"           # records this close outside the region move to the nearest cell inside\n# cap = { observer = \"10 %\" }   # no observer weighs more than this\n\n";
    Ok(text)
}

/// The column for a key: the Darwin Core term (in any case), else one of a usual name.
fn column<'n>(names: &'n ColumnNames, key: &str, term: &'n str) -> Option<&'n str> {
    let same = names.names.iter().any(|n| n.eq_ignore_ascii_case(term));
    if same { Some(term) } else { usual_column(&names.names, key) }
}

fn default_source(args: &InitArgs) -> SourcePlan {
    let [longitude, latitude, date, observer, dataset, taxon, uncertainty] =
        TERMS.map(|(_, term)| term.to_owned());
    SourcePlan {
        files: vec![args.records.display().to_string()],
        table: None,
        quotes: None,
        columns: Columns {
            longitude,
            latitude,
            date,
            observer,
            dataset,
            taxon,
            uncertainty,
            stated: Vec::new(),
        },
        crs: "EPSG:4326".into(),
    }
}

fn candidates(terms: &[&str]) -> String {
    let mut text = String::from(
        "[[candidate]]                # where was recorded, smoothed; the bandwidth is fitted to outings left out\nname = \"recorded\"\ndensity = { bandwidth = \"fit\" }\n\n",
    );
    if !terms.is_empty() {
        let _ = write!(
            text,
            "[[candidate]]                # how effort falls or rises with the layers, fitted to the records\nname = \"access\"\nuses = {{ {} }}\n\n\
             [[candidate]]                # both, mixed as left-out records ask for\nname = \"mixed\"\nblend = [\"recorded\", \"access\"]\n\n",
            terms.join(", ")
        );
    }
    text
}

/// A path as seen from the plan's folder.
fn relative(path: &Path, folder: &Path) -> String {
    let (Ok(to), Ok(from)) = (path.canonicalize(), folder.canonicalize()) else {
        return path.display().to_string();
    };
    let shared = to.components().zip(from.components()).take_while(|(a, b)| a == b).count();
    let up = from.components().count() - shared;
    let way: PathBuf = std::iter::repeat_n(std::path::Component::ParentDir, up)
        .chain(to.components().skip(shared))
        .collect();
    way.display().to_string()
}

/// A text as TOML writes it.
fn quoted(text: &str) -> String {
    toml::Value::from(text).to_string()
}
