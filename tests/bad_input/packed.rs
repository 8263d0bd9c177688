//! Records in gzip, zip, Parquet and Darwin Core archives that are broken, hostile or not what they seem.

use std::fs;
use std::path::Path;

use super::common::World;
use super::common::packing::{Described, exchanged, gzip, meta, zip};
use super::{counted, refused};

/// The small world with its records as comma-separated text.
fn table(world: &World) -> String {
    fs::read_to_string(world.path("records.tsv")).unwrap().replace('\t', ",")
}

/// Enough rows that half a packed file holds some.
fn long_table(world: &World) -> String {
    let text = table(world);
    let (header, rows) = text.split_once('\n').unwrap();
    format!("{header}\n{}", rows.repeat(200))
}

fn put(world: &World, name: &str, bytes: &[u8]) {
    world.put_bytes(name, bytes);
    world.change(&[("records.tsv", name)]);
}

fn fixture(name: &str) -> Vec<u8> {
    fs::read(Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data").join(name)).unwrap()
}

#[test]
fn cut_off_in_the_middle() {
    let world = World::new();
    let text = long_table(&world);
    let whole = [
        ("a.csv.gz", gzip(text.as_bytes())),
        ("b.zip", zip(&[("records.csv", text.as_bytes())])),
        ("c.parquet", fixture("hoverflies.parquet")),
    ];
    for (name, bytes) in whole {
        for length in [bytes.len() / 2, bytes.len() - 1] {
            put(&world, name, &bytes[..length]);
            refused(&world, 3, &[name, "cut off|whole", "again"]);
        }
    }
}

#[test]
fn damaged_inside() {
    let world = World::new();
    let text = long_table(&world);
    for (name, mut bytes) in
        [("a.csv.gz", gzip(text.as_bytes())), ("b.zip", zip(&[("records.csv", text.as_bytes())]))]
    {
        let middle = bytes.len() / 2;
        bytes[middle..middle + 8].fill(0x55);
        put(&world, name, &bytes);
        refused(&world, 3, &[name, "damaged|cut off|field|columns"]);
    }
    let mut bytes = fixture("hoverflies.parquet");
    bytes[1500..2500].fill(0x55);
    put(&world, "c.parquet", &bytes);
    refused(&world, 3, &["c.parquet", "whole", "again"]);
}

#[test]
fn zeros_that_unpack_without_end() {
    let world = World::new();
    let bomb = [table(&world).into_bytes(), vec![0; 90 << 20]].concat();
    put(&world, "a.csv.gz", &gzip(&bomb));
    refused(&world, 3, &["a.csv.gz", "250 times its size", "unpacked"]);
    put(&world, "b.zip", &zip(&[("records.csv", &bomb)]));
    refused(&world, 3, &["b.zip: records.csv", "250 times its size", "unpacked"]);
    // from the first byte on
    put(&world, "c.csv.gz", &gzip(&vec![0; 90 << 20]));
    refused(&world, 3, &["c.csv.gz", "250 times its size|NUL bytes"]);
}

#[test]
fn entries_that_lead_outside_or_come_twice() {
    let world = World::new();
    let text = table(&world);
    let climbing = zip(&[("xx/x/records.csv", text.as_bytes())]);
    put(&world, "a.zip", &exchanged(&climbing, b"xx/x/", b"../x/"));
    refused(&world, 3, &["a.zip", "`../x/records.csv`", "leads out of the archive", "pack it again"]);
    let two = zip(&[("a.csv", text.as_bytes()), ("b.csv", text.as_bytes())]);
    put(&world, "b.zip", &exchanged(&two, b"b.csv", b"a.csv"));
    refused(&world, 3, &["b.zip", "same name", "remove or rename"]);
    let cases = zip(&[("a.csv", text.as_bytes()), ("A.csv", text.as_bytes())]);
    put(&world, "c.zip", &cases);
    refused(&world, 3, &["c.zip", "`a.csv`", "`A.csv`", "rename"]);
}

/// Bit 0 of the general purpose flags (APPNOTE 4.4.4), in the directory and before the entry.
#[test]
fn an_encrypted_entry() {
    let world = World::new();
    let mut bytes = zip(&[("records.csv", table(&world).as_bytes())]);
    let at = |bytes: &[u8], mark: &[u8]| bytes.windows(4).position(|w| w == mark).unwrap();
    let (local, central) = (at(&bytes, b"PK\x03\x04"), at(&bytes, b"PK\x01\x02"));
    bytes[local + 6] |= 1;
    bytes[central + 8] |= 1;
    put(&world, "a.zip", &bytes);
    refused(&world, 3, &["a.zip: records.csv", "encrypted", "password"]);
}

#[test]
fn a_zip_file_with_several_tables_or_none() {
    let world = World::new();
    let text = table(&world);
    put(&world, "a.zip", &zip(&[("one.csv", text.as_bytes()), ("two.csv", text.as_bytes())]));
    refused(&world, 3, &["a.zip", "`one.csv`, `two.csv`", "table"]);
    world.change(&[("file = \"records.tsv\"", "file = \"a.zip\"\ntable = \"three.csv\"")]);
    refused(&world, 3, &["a.zip", "`three.csv`", "`one.csv`, `two.csv`"]);
    put(&world, "b.zip", &zip(&[]));
    refused(&world, 3, &["b.zip", "nothing", "unpack"]);
    put(&world, "c.zip", &zip(&[("picture.png", b"\x89PNG\r\n\x1a\n\0\0\0\rIHDR")]));
    refused(&world, 3, &["c.zip", "decimalLongitude|no table|which table"]);
    put(&world, "d.zip", &zip(&[("records.csv.gz", &gzip(text.as_bytes()))]));
    let built = world.run(&["build", "plan.toml", "--json"]);
    if built.code == Some(0) {
        assert_eq!(built.json()["records"]["kept"], 240);
    } else {
        refused(&world, 3, &["d.zip: records.csv.gz"]);
    }
}

#[test]
fn a_spreadsheet() {
    let world = World::new();
    for (name, inside) in [("a.xlsx", "xl/workbook.xml"), ("b.ods", "content.xml")] {
        put(&world, name, &zip(&[(inside, b"<workbook/>"), ("styles.xml", b"<styles/>")]));
        refused(&world, 3, &[name, "is a spreadsheet", "CSV"]);
    }
}

#[test]
fn folders_that_hold_no_records() {
    let world = World::new();
    fs::create_dir(world.path("empty")).unwrap();
    world.change(&[("records.tsv", "empty")]);
    refused(&world, 3, &["empty", "without a meta.xml", "Parquet", "give a file"]);
    world.put("several/a.csv", &table(&world));
    world.put("several/readme.md", "Invented.\n");
    world.change(&[("records.tsv", "several")]);
    refused(&world, 3, &["several", "without a meta.xml", "Parquet", "give a file"]);
}

#[test]
fn tables_without_rows() {
    let world = World::new();
    let header = format!("{}\n", super::common::HEADER);
    put(&world, "a.tsv.gz", &gzip(header.as_bytes()));
    refused(&world, 3, &["a.tsv.gz", "header", "no rows"]);
    put(&world, "b.zip", &zip(&[("b.tsv", header.as_bytes())]));
    refused(&world, 3, &["b.zip", "no rows"]);
    put(&world, "c.parquet", &fixture("hoverflies-none.parquet"));
    refused(&world, 3, &["c.parquet", "no rows"]);
    put(&world, "d.csv.gz", &gzip(b""));
    refused(&world, 3, &["d.csv.gz", "no header|empty"]);
    put(&world, "e.zip", &zip(&[("e.csv", b"")]));
    refused(&world, 3, &["e.zip: e.csv", "no header|empty"]);
}

const COLUMNS: [&str; 6] =
    ["occurrenceID", "decimalLongitude", "decimalLatitude", "eventDate", "recordedBy", "scientificName"];

const TABS: &str =
    r#"fieldsTerminatedBy="\t" linesTerminatedBy="\n" fieldsEnclosedBy="" ignoreHeaderLines="1""#;

fn core<'a>(files: &'a [&'a str], columns: &'a [&'a str]) -> Described<'a> {
    Described { element: "core", row_type: "Occurrence", attributes: TABS, files, columns, more: "" }
}

/// Asserts that an archive is refused, zipped and as a folder.
#[track_caller]
fn archive_refused(description: &str, words: &[&str]) {
    let world = World::new();
    let text = fs::read(world.path("records.tsv")).unwrap();
    put(&world, "a.zip", &zip(&[("meta.xml", description.as_bytes()), ("occurrence.txt", &text)]));
    refused(&world, 3, &[&["a.zip: meta.xml"], words].concat());
    world.put("a/meta.xml", description);
    world.put_bytes("a/occurrence.txt", &text);
    world.change(&[("records.tsv", "a")]);
    refused(&world, 3, &[&["a: meta.xml"], words].concat());
}

#[test]
fn descriptions_that_cannot_be_used() {
    let sound = meta(&[core(&["occurrence.txt"], &COLUMNS)]);
    let outside = sound.replace(
        "<archive",
        "<!DOCTYPE archive [<!ENTITY secret SYSTEM \"file:///etc/hostname\">]>\n<archive",
    );
    archive_refused(&outside.replace(">occurrence.txt", ">&secret;"), &["document type", "check where"]);
    archive_refused(
        &sound.replace(">occurrence.txt", ">gone.txt"),
        &["`gone.txt`", "not there", "`occurrence.txt`"],
    );
    archive_refused(
        &sound.replace(">occurrence.txt", ">../records.tsv"),
        &["../records.tsv", "outside the archive"],
    );
    archive_refused(
        &sound.replace(">occurrence.txt", ">https://skerrow.invalid/o.txt"),
        &["network", "download"],
    );
    archive_refused(&sound[..sound.len() / 2], &["well-formed", "mend|again"]);
    archive_refused(&sound.replace("rowType=", "other="), &["rowType|no table of occurrences"]);
    archive_refused(&sound.replace("dwc/terms/Occurrence", "dwc/terms/Taxon"), &["Taxon", "occurrences"]);
    archive_refused(
        &sound.replace("TerminatedBy=\"\\t\"", "TerminatedBy=\"ab\""),
        &["`ab`", "one ASCII character"],
    );
}

#[test]
fn a_column_past_the_end_of_a_row() {
    let sound = meta(&[core(&["occurrence.txt"], &COLUMNS)]);
    let beyond = sound.replace("<field index=\"4\"", "<field index=\"17\"");
    let world = World::new();
    let text = fs::read(world.path("records.tsv")).unwrap();
    put(&world, "a.zip", &zip(&[("meta.xml", beyond.as_bytes()), ("occurrence.txt", &text)]));
    refused(&world, 3, &["a.zip: occurrence.txt", "6 fields", "17", "meta.xml"]);
}

/// The cure that is named for stray quotes works for archives too.
#[test]
fn quotes_in_an_archive() {
    let world = World::new();
    let text = fs::read_to_string(world.path("records.tsv")).unwrap();
    let mut lines: Vec<String> = text.lines().map(str::to_owned).collect();
    lines[20] = lines[20].replace("Genus", "\"Genus");
    let text = lines.join("\n") + "\n";
    let quoted = meta(&[core(&["occurrence.txt"], &COLUMNS)]).replace("EnclosedBy=\"\"", "EnclosedBy='\"'");
    put(&world, "a.zip", &zip(&[("meta.xml", quoted.as_bytes()), ("occurrence.txt", text.as_bytes())]));
    refused(&world, 3, &["a.zip: occurrence.txt:21", "never closed", "quotes = \"none\""]);
    world.change(&[("file = \"records.tsv\"", "file = \"a.zip\"\nquotes = \"none\"")]);
    counted(&world, 240, 240, &[]);
}

#[test]
fn ragged_rows_of_an_archive() {
    let world = World::new();
    let mut text = fs::read_to_string(world.path("records.tsv")).unwrap();
    text += "short\t9.01\nlong\t9.01\t45.14\t2019-01-01\tA\tGenus\tmore\tand more\n";
    let sound = meta(&[core(&["occurrence.txt"], &COLUMNS)]);
    put(&world, "a.zip", &zip(&[("meta.xml", sound.as_bytes()), ("occurrence.txt", text.as_bytes())]));
    counted(&world, 242, 240, &[("unreadable_row", 2)]);
    let dropped = fs::read_to_string(world.path("out/dropped.csv")).unwrap();
    assert!(dropped.contains("a.zip: occurrence.txt,242,unreadable_row"), "{dropped}");
}

/// Without a header the first row may be the odd one; the description knows how many fields there are.
#[test]
fn the_first_row_of_an_archive_without_header() {
    let world = World::new();
    let text = fs::read_to_string(world.path("records.tsv")).unwrap();
    let rows = text.split_once('\n').unwrap().1;
    let long = format!("long\t9.01\t45.14\t2019-01-01\tA\tGenus\tmore\n{rows}");
    let bare = meta(&[core(&["occurrence.txt"], &COLUMNS)]).replace("ignoreHeaderLines=\"1\"", "");
    put(&world, "a.zip", &zip(&[("meta.xml", bare.as_bytes()), ("occurrence.txt", long.as_bytes())]));
    counted(&world, 241, 240, &[("unreadable_row", 1)]);
}

/// Occurrences whose event is not there have no place; that is counted, and said.
#[test]
fn occurrences_without_their_event() {
    let world = World::new();
    let text = fs::read_to_string(world.path("records.tsv")).unwrap();
    let events = text.lines().take(201).collect::<Vec<_>>().join("\n") + "\n";
    let events = events + "r7\t9.03\t45.14\t2001-01-01\tZ\tGenus\n";
    let finds: String = (0..240).map(|n| format!("r{n}\tGenus species\n")).collect();
    let core = Described { row_type: "Event", ..core(&["event.txt"], &COLUMNS) };
    let extension = Described {
        element: "extension",
        row_type: "Occurrence",
        attributes: TABS,
        files: &["occurrence.txt"],
        columns: &["", "scientificName"],
        more: "",
    };
    let finds = format!("id\tscientificName\n{finds}");
    let described = meta(&[core, extension]);
    let entries: [(&str, &[u8]); 3] = [
        ("meta.xml", described.as_bytes()),
        ("event.txt", events.as_bytes()),
        ("occurrence.txt", finds.as_bytes()),
    ];
    put(&world, "a.zip", &zip(&entries));
    let found = counted(&world, 240, 200, &[("no_coordinate", 40)]);
    let said = found["warnings"].to_string();
    super::says(
        &said,
        &[
            "core_rows",
            "repeat an identifier",
            "`r7`",
            "40 records belong to a row of the core that is not there",
        ],
    );
}

#[test]
fn vectors_cut_off() {
    use std::process::Command;
    let world = World::new();
    world.put("records.csv", &long_table(&world));
    for (name, more) in
        [("a.fgb", &["-lco", "SPATIAL_INDEX=NO"][..]), ("b.gpkg", &[]), ("c.geojson", &[]), ("d.shp", &[])]
    {
        let ran = Command::new("ogr2ogr")
            .current_dir(world.path(""))
            .args(["-q", "-a_srs", "EPSG:4326"])
            .args(["-oo", "X_POSSIBLE_NAMES=decimalLongitude", "-oo", "Y_POSSIBLE_NAMES=decimalLatitude"])
            .args(more)
            .args([name, "records.csv"])
            .output()
            .expect("ogr2ogr starts");
        assert!(ran.status.success(), "{name}: {}", String::from_utf8_lossy(&ran.stderr));
        world.change(&[("records.tsv", name)]);
        world.run(&["build", "plan.toml"]).ended(0);
        fs::remove_dir_all(world.path("out")).unwrap();
        let bytes = fs::read(world.path(name)).unwrap();
        world.put_bytes(name, &bytes[..bytes.len() / 2]);
        refused(&world, 3, &[name]);
        fs::remove_dir_all(world.path("out")).unwrap();
    }
}
