//! The forms a table comes in.

use std::fs;
use std::path::Path;
use std::process::Command;

use super::common::packing::{Described, gzip, latin1, meta, zip};
use super::common::{World, json};
use super::{Found, Survey, built, data, expected, uplands};

/// Puts the whole table there as comma-separated text and builds from it.
fn reference(world: &World, survey: &Survey) -> Found {
    world.put("hoverflies.csv", &survey.text(",", "\n"));
    built(world, "file = \"hoverflies.csv\"")
}

#[test]
fn the_table_itself_is_counted_apart() {
    let (world, survey) = (uplands(), Survey::read());
    let found = reference(&world, &survey);
    let mut due = expected(&world, &survey);
    for rule in ["absent", "no_coordinate", "impossible_coordinate", "zero_zero", "too_vague", "outside_grid"]
    {
        assert!(due[rule] > 0, "the table shows no {rule}");
    }
    assert!(due["outside_region"] > 0);
    assert_eq!(found.records["read"].as_u64(), Some(survey.rows.len() as u64));
    assert_eq!(found.records["kept"].as_u64(), due.remove("kept"));
    for (rule, n) in found.records["dropped"].as_object().unwrap() {
        assert_eq!(n.as_u64().unwrap(), due.remove(rule).unwrap_or(0), "{rule}");
    }
    assert!(due.is_empty(), "{due:?}");
    assert!(found.warned("read_as_latin1").is_empty());
}

#[test]
fn text_however_it_is_laid_out() {
    let (world, survey) = (uplands(), Survey::read());
    let whole = reference(&world, &survey);
    let comma = survey.text(",", "\n");
    let forms: [(&str, Vec<u8>); 8] = [
        ("a.tsv", survey.text("\t", "\n").into()),
        ("b.csv", ["\u{feff}", &survey.text(";", "\r\n")].concat().into()),
        ("c.txt", survey.text(",", "\r").into()),
        ("d.csv.gz", gzip(comma.as_bytes())),
        ("e.csv.gz", [gzip(&comma.as_bytes()[..5_000]), gzip(&comma.as_bytes()[5_000..])].concat()),
        ("f.csv", comma.trim_end().into()),
        ("g.csv", survey.text(",", "\n\n").into()),
        ("h", comma.clone().into()),
    ];
    for (name, bytes) in forms {
        world.put_bytes(name, &bytes);
        let found = built(&world, &format!("file = \"{name}\""));
        found.same_as(&whole, name);
        assert!(found.warned("read_as_latin1").is_empty(), "{name}");
    }
}

#[test]
fn latin1_is_read_and_said() {
    let (world, survey) = (uplands(), Survey::read());
    let whole = reference(&world, &survey);
    let text = survey.text(",", "\n");
    let beyond = text.lines().filter(|l| !l.is_ascii()).count();
    let entry: (&str, &[u8]) = ("hoverflies.csv", &latin1(&text));
    for (name, bytes) in [("a.csv", latin1(&text)), ("b.gz", gzip(entry.1)), ("c.zip", zip(&[entry]))] {
        world.put_bytes(name, &bytes);
        let found = built(&world, &format!("file = \"{name}\""));
        found.same_as(&whole, name);
        let said = found.warned("read_as_latin1");
        assert_eq!(said.len(), 1, "{name}");
        let text = said[0]["text"].as_str().unwrap();
        assert!(text.contains(&format!("{beyond} lines")), "{text}");
        assert!(said[0]["place"].as_str().unwrap().contains(name), "{}", said[0]);
    }
}

#[test]
fn names_of_columns_in_another_case_or_in_full() {
    let (world, survey) = (uplands(), Survey::read());
    let whole = reference(&world, &survey);
    let ways: [&dyn Fn(&str) -> String; 3] =
        [&|c| c.to_uppercase(), &|c| format!("dwc:{c}"), &|c| format!("http://rs.tdwg.org/dwc/terms/{c}")];
    for way in ways {
        let columns: Vec<String> = survey.columns.iter().map(|c| way(c)).collect();
        let other = Survey { columns, rows: survey.rows.clone() };
        world.put("other.csv", &other.text(",", "\n"));
        built(&world, "file = \"other.csv\"").same_as(&whole, &other.columns[1]);
    }
}

#[test]
fn a_table_in_a_zip_file() {
    let (world, survey) = (uplands(), Survey::read());
    let whole = reference(&world, &survey);
    let text = survey.text(",", "\n");
    world.put_bytes("one.zip", &zip(&[("hoverflies.csv", text.as_bytes())]));
    built(&world, "file = \"one.zip\"").same_as(&whole, "one");
    let entries: [(&str, &[u8]); 3] =
        [("data/hoverflies.csv", text.as_bytes()), ("licence.pdf", b"%PDF"), ("__MACOSX/data/._x", b"\0")];
    world.put_bytes("beside.zip", &zip(&entries));
    built(&world, "file = \"beside.zip\"").same_as(&whole, "beside");
    world.put_bytes("two.zip", &zip(&[("readme.txt", b"Invented\n"), ("b.csv", text.as_bytes())]));
    built(&world, "file = \"two.zip\"\ntable = \"b.csv\"").same_as(&whole, "two");
}

const TABS: &str = r#"fieldsTerminatedBy="\t" linesTerminatedBy="\n" fieldsEnclosedBy="" ignoreHeaderLines="1" encoding="UTF-8""#;

/// An archive as a zip file and as a folder; both must give what `whole` gave.
fn archived(world: &World, entries: &[(&str, Vec<u8>)], whole: &Found, what: &str) {
    let packed: Vec<(&str, &[u8])> = entries.iter().map(|(n, b)| (*n, b.as_slice())).collect();
    world.put_bytes("archive.zip", &zip(&packed));
    drop(fs::remove_dir_all(world.path("archive")));
    entries.iter().for_each(|(name, bytes)| world.put_bytes(&format!("archive/{name}"), bytes));
    for file in ["archive.zip", "archive", "archive/"] {
        let found = built(world, &format!("file = \"{file}\""));
        found.same_as(whole, &format!("{what}: {file}"));
        assert!(found.warned("core_rows").is_empty(), "{what}");
    }
}

/// The description of a core of occurrences with all columns of the table.
fn core<'a>(columns: &'a [&'a str], attributes: &'a str, files: &'a [&'a str]) -> Described<'a> {
    Described { element: "core", row_type: "Occurrence", attributes, files, columns, more: "" }
}

#[test]
fn an_archive_of_occurrences() {
    let (world, mut survey) = (uplands(), Survey::read());
    let whole = reference(&world, &survey);
    let owned = survey.columns.clone();
    let columns: Vec<&str> = owned.iter().map(String::as_str).collect();
    let plain = meta(&[core(&columns, TABS, &["occurrence.txt"])]);
    let tabs = survey.text("\t", "\n");
    archived(&world, &[("meta.xml", plain.clone().into()), ("occurrence.txt", tabs.into())], &whole, "tabs");
    // commas and quotes, in Latin-1, without a header
    let quoted =
        r#"fieldsTerminatedBy="," linesTerminatedBy="\r\n" fieldsEnclosedBy='"' encoding="ISO-8859-1""#;
    let (_, rows) =
        survey.text(",", "\r\n").split_once("\r\n").map(|(a, b)| (a.to_owned(), b.to_owned())).unwrap();
    let entries = [
        ("meta.xml", meta(&[core(&columns, quoted, &["data/occurrence.csv"])]).into()),
        ("data/occurrence.csv", latin1(&rows)),
    ];
    archived(&world, &entries, &whole, "commas");
    // several files in one core
    let files = ["a.txt", "b.txt"];
    let entries = [
        ("meta.xml", meta(&[core(&columns, TABS, &files)]).into()),
        ("a.txt", survey.part(0, 2).text("\t", "\n").into()),
        ("b.txt", survey.part(1, 2).text("\t", "\n").into()),
    ];
    archived(&world, &entries, &whole, "two files");
    // quotes that are characters like any other
    let name = survey.at("scientificName");
    survey.rows.iter_mut().step_by(7).for_each(|row| row[name] = "\"Skerrowia invented".into());
    let stray = survey.text("\t", "\n");
    archived(&world, &[("meta.xml", plain.into()), ("occurrence.txt", stray.into())], &whole, "stray quotes");
}

/// A value that holds for all rows, and one that stands for empty ones.
#[test]
fn an_archive_with_defaults() {
    let (world, mut survey) = (uplands(), Survey::read());
    let (who, set) = (survey.at("recordedBy"), survey.at("datasetName"));
    let bare = survey.text("\t", "\n");
    for row in &mut survey.rows {
        row[set] = "Skerrow hoverfly count".into();
        if row[who].is_empty() {
            row[who] = "T. Heugh".into();
        }
    }
    let whole = reference(&world, &survey);
    let mut columns: Vec<&str> = survey.columns.iter().map(String::as_str).collect();
    (columns[who], columns[set]) = ("", "");
    let terms = "http://rs.tdwg.org/dwc/terms";
    let more = format!(
        "<field index=\"{who}\" default=\"T. Heugh\" term=\"{terms}/recordedBy\"/>\
         <field default=\"Skerrow hoverfly count\" term=\"{terms}/datasetName\"/>\
         <field default=\"WGS84\" term=\"{terms}/geodeticDatum\"/>"
    );
    let table = Described { more: &more, ..core(&columns, TABS, &["occurrence.txt"]) };
    let entries = [("meta.xml", meta(&[table]).into()), ("occurrence.txt", bare.into_bytes())];
    archived(&world, &entries, &whole, "defaults");
}

/// Occurrences that say neither where nor when: their events do.
#[test]
fn an_archive_of_events() {
    let (world, survey) = (uplands(), Survey::read());
    let whole = reference(&world, &survey);
    let of_event = ["occurrenceID", "decimalLongitude", "decimalLatitude", "eventDate", "recordedBy"];
    let own = [
        "occurrenceID",
        "scientificName",
        "datasetName",
        "coordinateUncertaintyInMeters",
        "occurrenceStatus",
    ];
    let cut = |columns: &[&str], own_day: bool| -> Survey {
        let places: Vec<usize> = columns.iter().map(|c| survey.at(c)).collect();
        let day = survey.at("eventDate");
        let mut rows: Vec<Vec<String>> = Vec::new();
        for (n, row) in survey.rows.iter().enumerate() {
            let mut cut: Vec<String> = places.iter().map(|p| row[*p].clone()).collect();
            // every fifth event says another day; its occurrence its own, which holds
            if own_day {
                cut.push(if n % 5 == 0 { row[day].clone() } else { String::new() });
            } else if n % 5 == 0 && !row[day].is_empty() {
                cut[3] = "1999-09-09".into();
            }
            rows.push(cut);
        }
        rows.reverse();
        let mut columns: Vec<String> = columns.iter().map(|c| (*c).to_owned()).collect();
        columns.extend(own_day.then(|| "eventDate".to_owned()));
        Survey { columns, rows }
    };
    let (events, mut occurrences) = (cut(&of_event, false), cut(&own, true));
    occurrences.rows.reverse();
    let mut event_columns = of_event;
    event_columns[0] = "eventID";
    let mut columns = own.to_vec();
    columns.push("eventDate");
    columns[0] = "";
    let core = Described { row_type: "Event", ..core(&event_columns, TABS, &["event.txt"]) };
    let files: &[&str] = &["occurrence.txt"];
    let extension = Described {
        element: "extension",
        row_type: "Occurrence",
        attributes: TABS,
        files,
        columns: &columns,
        more: "",
    };
    let entries = [
        ("meta.xml", meta(&[core, extension]).into()),
        ("event.txt", events.text("\t", "\n").into_bytes()),
        ("occurrence.txt", occurrences.text("\t", "\n").into_bytes()),
    ];
    archived(&world, &entries, &whole, "events");
}

/// Made with `ogr2ogr` from the text.
#[test]
fn vectors_of_points() {
    let (world, survey) = (uplands(), Survey::read());
    let whole = reference(&world, &survey);
    let convert = |to: &str, more: &[&str]| {
        let ran = Command::new("ogr2ogr")
            .current_dir(world.path(""))
            .args(["-q", "-a_srs", "EPSG:4326", "-oo", "KEEP_GEOM_COLUMNS=NO"])
            .args(["-oo", "X_POSSIBLE_NAMES=decimalLongitude", "-oo", "Y_POSSIBLE_NAMES=decimalLatitude"])
            .args(more)
            .args([to, "hoverflies.csv"])
            .output()
            .expect("ogr2ogr starts");
        assert!(ran.status.success(), "{to}: {}", String::from_utf8_lossy(&ran.stderr));
    };
    // a shapefile cuts names to ten characters: `occurrenceID` would become what `occurrenceStatus` does
    let columns = survey.columns[3..].join(",");
    convert("a.gpkg", &[]);
    convert("b.geojson", &["-lco", "COORDINATE_PRECISION=9"]);
    convert("c.shp", &["-select", &columns, "-lco", "ENCODING=UTF-8"]);
    convert("d.fgb", &["-lco", "SPATIAL_INDEX=NO"]);
    for name in ["a.gpkg", "b.geojson", "c.shp"] {
        built(&world, &format!("file = \"{name}\"")).same_as(&whole, name);
    }
    // a container of two tables
    convert("a.gpkg", &["-update", "-nln", "other"]);
    built(&world, "file = \"a.gpkg\"\ntable = \"other\"").same_as(&whole, "a.gpkg, other");
    // the writer of this format leaves out what has no place
    let mut placed = Survey::read();
    let longitude = placed.at("decimalLongitude");
    placed.rows.retain(|row| !row[longitude].is_empty());
    let found = built(&world, "file = \"d.fgb\"");
    found.same_as(&reference(&world, &placed), "d.fgb");
}

#[test]
fn parquet_files_and_folders() {
    let (world, survey) = (uplands(), Survey::read());
    let whole = reference(&world, &survey);
    fs::copy(data("hoverflies.parquet"), world.path("a.parquet")).unwrap();
    built(&world, "file = \"a.parquet\"").same_as(&whole, "a file");
    fs::copy(data("hoverflies.parquet"), world.path("no-ending")).unwrap();
    built(&world, "file = \"no-ending\"").same_as(&whole, "a file without ending");
    fs::create_dir(world.path("parts")).unwrap();
    for part in ["part-0.parquet", "part-1.parquet"] {
        fs::copy(data("hoverflies-parts").join(part), world.path("parts").join(part)).unwrap();
    }
    world.put("parts/_SUCCESS", "");
    world.put("parts/.part-0.parquet.crc", "crc");
    built(&world, "file = \"parts\"").same_as(&whole, "a folder");
    let dropped = fs::read_to_string(world.path("out/dropped.csv")).unwrap();
    assert!(dropped.contains("parts/part-0.parquet,12,no_coordinate"), "{dropped}");
}

/// Days as days, and as nanoseconds since 1970: see `tests/data/make.py`.
#[test]
fn typed_dates_of_parquet_files() {
    let (world, mut survey) = (uplands(), Survey::read());
    survey.rows.truncate(60);
    let day = survey.at("eventDate");
    for row in &mut survey.rows {
        row[day] = row[day].get(..10).unwrap_or("2015-06-01").to_owned();
    }
    let whole = reference(&world, &survey);
    for name in ["hoverflies-days.parquet", "hoverflies-times.parquet"] {
        fs::copy(data(name), world.path(name)).unwrap();
        built(&world, &format!("file = \"{name}\"")).same_as(&whole, name);
    }
}

#[test]
fn files_in_any_order() {
    let (world, survey) = (uplands(), Survey::read());
    let whole = reference(&world, &survey);
    let names = ["a.csv", "b.tsv", "c.csv.gz"];
    world.put(names[0], &survey.part(0, 3).text(",", "\n"));
    world.put(names[1], &survey.part(1, 3).text("\t", "\n"));
    world.put_bytes(names[2], &gzip(survey.part(2, 3).text(";", "\r\n").as_bytes()));
    for [a, b, c] in [[0, 1, 2], [0, 2, 1], [1, 0, 2], [1, 2, 0], [2, 0, 1], [2, 1, 0]] {
        let list = format!("file = [\"{}\", \"{}\", \"{}\"]", names[a], names[b], names[c]);
        built(&world, &list).same_as(&whole, &list);
    }
}

#[test]
fn rows_in_any_order() {
    let (world, mut survey) = (uplands(), Survey::read());
    let whole = reference(&world, &survey);
    for step in [1, 7, 53] {
        survey.rows.rotate_left(step);
        survey.rows.reverse();
        reference(&world, &survey).same_as(&whole, &format!("{step}"));
    }
}

#[test]
fn sources_with_columns_of_their_own() {
    let (world, survey) = (uplands(), Survey::read());
    let whole = reference(&world, &survey);
    world.put("first.csv", &survey.part(0, 2).text(",", "\n"));
    let mut second = survey.part(1, 2);
    let renamed = ["id", "x", "y", "day", "who", "set", "kind", "radius", "occurrenceStatus"];
    second.columns = renamed.map(str::to_owned).to_vec();
    world.put("second.tsv", &second.text("\t", "\n"));
    let source = "[[records.source]]\nfile = \"second.tsv\"\nlongitude = \"x\"\nlatitude = \"y\"\ndate = \"day\"\n\
                  observer = \"who\"\ndataset = \"set\"\ntaxon = \"kind\"\nuncertainty = \"radius\"";
    let records = format!("file = \"first.csv\"\n{source}");
    built(&world, &records).same_as(&whole, "one file and one source");
    let records = format!("{source}\n[[records.source]]\nfile = \"first.csv\"");
    built(&world, &records).same_as(&whole, "two sources");
    // eastings and northings, turned by GDAL: to the nanometre, so that no place changes its cell
    let (x, y) = (survey.at("decimalLongitude"), survey.at("decimalLatitude"));
    second.rows.retain(|row| row[x].parse::<f64>().is_ok_and(|v| v != 0.0 && v < 180.0));
    let mut both = survey.part(0, 2);
    both.rows.extend(second.rows.iter().cloned());
    let same = reference(&world, &both);
    for row in &mut second.rows {
        let place = (row[x].parse().unwrap(), row[y].parse().unwrap());
        let (east, north) = super::project(4326, 32632, &[place])[0];
        (row[x], row[y]) = (format!("{east:.9}"), format!("{north:.9}"));
    }
    world.put("second.tsv", &second.text("\t", "\n"));
    let found = built(&world, &format!("file = \"first.csv\"\n{source}\ncrs = \"EPSG:32632\""));
    for field in ["read", "kept", "dropped", "dates", "units", "places", "visits", "top_share"] {
        assert_eq!(found.records[field], same.records[field], "{field}");
    }
}

/// What was read can be recognised: the manifest holds the tables of an archive wherever they lie.
#[test]
fn the_manifest_holds_what_was_read() {
    let (world, survey) = (uplands(), Survey::read());
    let columns: Vec<&str> = survey.columns.iter().map(String::as_str).collect();
    world.put("archive/meta.xml", &meta(&[core(&columns, TABS, &["data/occurrence.txt"])]));
    world.put("archive/data/occurrence.txt", &survey.text("\t", "\n"));
    world.put_bytes("more.csv.gz", &gzip(survey.part(0, 9).text(",", "\n").as_bytes()));
    built(&world, "file = [\"archive\", \"more.csv.gz\"]");
    let manifest = json(&world.path("out/manifest.json"));
    let inputs = manifest["inputs"].as_array().unwrap();
    for name in ["archive/meta.xml", "archive/data/occurrence.txt", "more.csv.gz"] {
        let found =
            inputs.iter().find(|i| i["file"] == name).unwrap_or_else(|| panic!("no {name}: {inputs:?}"));
        let size = fs::metadata(world.path(name)).unwrap().len();
        assert_eq!(found["bytes"].as_u64().or(found["size"].as_u64()), Some(size), "{found}");
    }
}

/// `check` names every file of records and what it is.
#[test]
fn check_lists_every_form() {
    let (world, survey) = (uplands(), Survey::read());
    let text = survey.text(",", "\n");
    world.put("a.csv", &text);
    world.put_bytes("b.zip", &zip(&[("a.csv", text.as_bytes())]));
    world.put_bytes("c.csv.gz", &gzip(text.as_bytes()));
    fs::copy(data("hoverflies.parquet"), world.path("d.parquet")).unwrap();
    fs::create_dir(world.path("e")).unwrap();
    fs::copy(data("hoverflies.parquet"), world.path("e/part.parquet")).unwrap();
    let names = ["a.csv", "b.zip", "c.csv.gz", "d.parquet", "e"];
    let list = names.map(|n| format!("\"{n}\"")).join(", ");
    world.put("plan.toml", &super::PLAN.replace("RECORDS", &format!("file = [{list}]")));
    let checked = world.run(&["check", "plan.toml", "--json"]).ended(0).json();
    let inputs: Vec<&str> =
        checked["inputs"].as_array().unwrap().iter().map(|i| i["file"].as_str().unwrap()).collect();
    for name in names {
        assert!(inputs.contains(&name), "{name} is not among {inputs:?}");
    }
    // without the grid, the fault is the grid's alone
    fs::remove_file(world.path("land.tif")).unwrap();
    let checked = world.run(&["check", "plan.toml", "--json"]).ended(3).json();
    let problems = checked["problems"].as_array().unwrap();
    assert_eq!(problems.len(), 1, "{problems:?}");
    assert!(Path::new(problems[0]["place"].as_str().unwrap()).ends_with("land.tif"), "{problems:?}");
}
