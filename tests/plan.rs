//! Bad plans: what is said of them, and where; and the reference of their keys.

#![allow(clippy::disallowed_methods, reason = "writes the reference when asked to")]

use trodden::diag::{Diagnostic, Fault};
use trodden::plan::{read, reference};

/// The shortest plan there is.
const SHORTEST: &str = "title = \"T\"
[grid]
like = \"t.tif\"
[records]
file = \"r.tsv\"
[[candidate]]
name = \"recorded\"
density = {}
";

fn good(text: &str) {
    read(text, "plan.toml").unwrap_or_else(|problems| {
        panic!(
            "{problems}
{text}"
        )
    });
}

fn problems(text: &str) -> Vec<Diagnostic> {
    let found = read(text, "plan.toml").expect_err(text).0;
    for problem in &found {
        assert_eq!(problem.fault, Fault::Plan);
        assert!(!problem.text.ends_with('.') && !problem.cure.ends_with('.'), "{problem:?}");
        assert!(!problem.cure.is_empty(), "{problem:?}");
        if let Some(quote) = &problem.quote {
            assert_eq!(problem.place, format!("plan.toml:{}:{}", quote.line, quote.column));
            assert!(quote.width >= 1 && quote.column <= quote.text.chars().count() + 1, "{problem:?}");
        }
    }
    found
}

/// The shortest plan with lines added under one of its headers (or at the top, or the end).
fn with(after: &str, lines: &str) -> String {
    if after == "end" {
        return format!("{SHORTEST}{lines}\n");
    }
    let at = SHORTEST.find(after).unwrap() + after.len() + 1;
    format!("{}{lines}\n{}", &SHORTEST[..at], &SHORTEST[at..])
}

/// One problem, of this rule, whose place is where `marked` last stands and whose words include `words`.
fn check(text: &str, rule: &str, marked: &str, words: &[&str]) {
    let found = problems(text);
    assert_eq!(found.len(), 1, "{text}\n{found:#?}");
    let at = text.rfind(marked).unwrap_or_else(|| panic!("{marked} is not in {text}"));
    let line = text[..at].matches('\n').count() + 1;
    let column = text[..at].rsplit('\n').next().unwrap().chars().count() + 1;
    assert_eq!((found[0].rule, found[0].place.as_str()), (rule, &*format!("plan.toml:{line}:{column}")));
    let quote = found[0].quote.as_ref().expect("a quote");
    assert_eq!(quote.width, marked.lines().next().unwrap().chars().count(), "{found:#?}");
    assert_eq!(quote.text, text.lines().nth(line - 1).unwrap());
    let said = format!("{} {}", found[0].text, found[0].cure);
    for word in words {
        assert!(said.contains(word), "`{word}` is not in: {said}");
    }
}

const TOP: &str = "title = \"T\"";

#[test]
fn slips_of_toml_show_once() {
    check(
        &with("[records]", "table = two words"),
        "syntax",
        "two words",
        &["without quotes", "\"two words\""],
    );
    check(&with("[records]", "table = \"a\"\ntable = \"b\""), "syntax", "table", &["stands twice"]);
    check(&SHORTEST.replace("[records]", "[grid]"), "syntax", "grid", &["twice"]);
    let found = problems(&with("[records]", "table = \"a"));
    assert_eq!((found.len(), found[0].place.as_str()), (1, "plan.toml:5:11"), "{found:#?}");
    let found = problems(&SHORTEST.replace("\"r.tsv\"", "[\"a\", \"b\""));
    assert_eq!((found.len(), found[0].place.as_str()), (1, "plan.toml:5:8"), "{found:#?}");
    let found = problems("title = T\nseed =\n");
    assert_eq!(found.len(), 2, "{found:#?}");
    let found = problems("title = \"\"\"T\n[grid]\n");
    assert_eq!(found.len(), 1, "{found:#?}");
    let found = problems("title");
    assert_eq!((found.len(), found[0].rule), (1, "syntax"), "{found:#?}");
}

#[test]
fn all_is_said_at_once_in_order() {
    let found =
        problems("titel = \"x\"\n[grid]\ncell = 1\n[holdout]\nfolds = 1\n[[candidate]]\nname = 'a b'\n");
    let rules: Vec<&str> = found.iter().map(|d| d.rule).collect();
    let expected = [
        "unknown_key", // in the first line, and then what misses as a whole:
        "missing_key", // title
        "missing_key", // [records]
        "missing_key", // region
        "missing_key", // crs
        "missing_unit",
        "out_of_range",
        "candidate_kind",
        "bad_name",
    ];
    assert_eq!(rules, expected, "{found:#?}");
    assert_eq!(problems("").len(), 4);
    assert_eq!(problems("\u{feff}titl = 1").iter().filter(|d| d.place == "plan.toml:1:1").count(), 5);
}

#[test]
fn unknown_keys_name_the_nearest() {
    check(&with(TOP, "sed = 1"), "unknown_key", "sed", &["`seed`", "top level"]);
    check(&with("[records]", "longitud = \"x\""), "unknown_key", "longitud", &["`longitude`", "`[records]`"]);
    check(&with("[grid]", "folds = 3"), "unknown_key", "folds", &["belongs in `[holdout]`", "nearest"]);
    check(&with("[grid]", "xyz = 1"), "unknown_key", "xyz", &["known here: `like`, `region`"]);
    check(&with("end", "[holdouts]\nfolds = 5"), "unknown_key", "holdouts", &["`holdout`"]);
    check(&SHORTEST.replace("{}", "{ kernal = 1 }"), "unknown_key", "kernal", &["`kernel`", "`density`"]);
    check(&access("roads = { curve = \"power\", scales = 1 }"), "unknown_key", "scales", &["`scale`"]);
}

#[test]
fn what_is_required_is_asked_for() {
    check(&SHORTEST.replace("file = \"r.tsv\"\n", ""), "missing_key", "[records]", &["`file`"]);
    check(&SHORTEST.replace("name = \"recorded\"\n", ""), "missing_key", "[[candidate]]", &["`name`"]);
    check(&access("roads = { scale = \"fit\" }"), "missing_key", "{ scale = \"fit\" }", &["`curve`"]);
    let found = problems("title = \"T\"\n[grid]\nlike = \"t.tif\"\n[records]\nfile = \"r.tsv\"\n");
    assert_eq!((found.len(), found[0].rule, found[0].place.as_str()), (1, "missing_key", "plan.toml:1:1"));
    assert!(found[0].text.contains("[[candidate]]"));
}

#[test]
fn wrong_kinds_say_what_was_found_and_what_is_due() {
    check(&with(TOP, "seed = \"one\""), "wrong_type", "\"one\"", &["text `\"one\"`", "whole number"]);
    check(&with(TOP, "seed = 1.5"), "wrong_type", "1.5", &["number `1.5`", "whole number"]);
    check(&with(TOP, "seed = \"1\""), "wrong_type", "\"1\"", &["neither quotes"]);
    check(&with("[records]", "table = 3"), "wrong_type", "3", &["where text is due"]);
    check(&with("[records]", "dates = 2005-01-01"), "wrong_type", "2005-01-01", &["bare date", "in quotes"]);
    check(&with("[records]", "dates = 2005"), "wrong_type", "2005", &["\"2005/2024\""]);
    check(&with("[records]", "count = 1"), "wrong_type", "1", &["`visits`, `records` or `places`"]);
    check(&with("[records]", "keep = [\"a\"]"), "wrong_type", "[\"a\"]", &["list", "a table is due"]);
    check(&with("[records]", "keep = { year = 2005 }"), "wrong_type", "2005", &["`year`", "double quotes"]);
    check(&with("[records]", "cap = { observer = true }"), "wrong_type", "true", &["share"]);
    check(&SHORTEST.replace("\"r.tsv\"", "[1]"), "wrong_type", "1", &["`file`"]);
    check(&with("end", "[layer]\nname = \"x\""), "wrong_type", "[layer]", &["a list of tables", "[[layer]]"]);
    check(&with("end", "[output]\ndetails = \"yes\""), "wrong_type", "\"yes\"", &["`true` or `false`"]);
    check(&with("end", "[surface]\nfloor = \"1 %\""), "wrong_type", "\"1 %\"", &["a share from 0"]);
    check(&SHORTEST.replace("{}", "\"x\""), "wrong_type", "\"x\"", &["`density`", "a table is due"]);
    check(&access("roads = \"power\""), "wrong_type", "\"power\"", &["curve = "]);
    check(&with(TOP, "holdout = 1"), "wrong_type", "1", &["[holdout]"]);
}

#[test]
fn quantities_need_a_unit_that_fits() {
    check(&region("cell = 1"), "missing_unit", "1", &["\"1 m\"", "\"1 km\"", "\"1 deg\""]);
    check(&region("cell = \"250\""), "missing_unit", "\"250\"", &["\"250 km\""]);
    check(&region("cell = \"2 cells\""), "wrong_unit", "\"2 cells\"", &["`cells`", "\"2 km\""]);
    check(&region("cell = \"3 miles\""), "wrong_unit", "\"3 miles\"", &["`miles`"]);
    check(&region("cell = \"0 km\""), "out_of_range", "\"0 km\"", &["above zero"]);
    check(&region("cell = \"1e300 km\""), "out_of_range", "\"1e300 km\"", &["smaller"]);
    check(&region("cell = \"1,5 km\""), "bad_quantity", "\"1,5 km\"", &["\"1.5 km\""]);
    check(&region("cell = true"), "wrong_type", "true", &["a length"]);
    check(&with("[records]", "snap = 2"), "missing_unit", "2", &["\"2 cells\""]);
    check(&with("[records]", "snap = \"-1 km\""), "out_of_range", "\"-1 km\"", &["not below zero"]);
    check(&with("[records]", "snap = \"1 deg\""), "wrong_unit", "\"1 deg\"", &["`deg`", "\"1 cells\""]);
    check(&with("[records]", "max_uncertainty = \"2 cells\""), "wrong_unit", "\"2 cells\"", &["\"2 km\""]);
    check(&with("end", "[holdout]\nblock = \"1 deg\""), "wrong_unit", "\"1 deg\"", &["`block`"]);
    check(&density("bandwidth = 5"), "missing_unit", "5", &["\"5 km\"", "\"fit\""]);
    check(&density("bandwidth = \"0 m\""), "out_of_range", "\"0 m\"", &["above zero"]);
    check(&density("bandwidth = \"best\""), "bad_quantity", "\"best\"", &["\"fit\""]);
    check(&access("roads = { curve = \"power\", scale = 1.5 }"), "missing_unit", "1.5", &["\"1.5 km\""]);
    check(&access("roads = { curve = \"power\", scale = \"2 cells\" }"), "wrong_unit", "\"2 cells\"", &[]);
    check(&access("roads = { curve = \"power\", scale = \"0 m\" }"), "out_of_range", "\"0 m\"", &[]);
}

#[test]
fn numbers_stay_in_their_range() {
    check(&with(TOP, "seed = -1"), "out_of_range", "-1", &["from 0 to"]);
    check(&with(TOP, "seed = 9223372036854775808"), "out_of_range", "9223372036854775808", &["`seed`"]);
    check(&with("end", "[holdout]\nfolds = 1"), "out_of_range", "1", &["from 2"]);
    check(&with("end", "[holdout]\nresamples = 38"), "out_of_range", "38", &["from 39"]);
    check(&with("end", "[surface]\nfloor = 1"), "out_of_range", "1", &["below 1"]);
    check(&with("end", "[surface]\nfloor = -0.1"), "out_of_range", "-0.1", &["from 0"]);
    check(&with("end", "[surface]\nsupport = -1"), "out_of_range", "-1", &["not below 0"]);
    check(&with("end", "[surface]\nsupport = inf"), "out_of_range", "inf", &["a number"]);
    check(&access("roads = { curve = \"power\", shape = 0 }"), "out_of_range", "0", &["above 0", "\"fit\""]);
    check(&access("people = { curve = \"power\", offset = -1 }"), "out_of_range", "-1", &["`offset`"]);
    check(&access("roads = { curve = \"power\" }\n}\nbase = 1#"), "out_of_range", "1", &["below 1"]);
}

#[test]
fn words_and_texts_are_checked() {
    check(
        &with("[records]", "count = \"visit\""),
        "unknown_word",
        "\"visit\"",
        &["nearest word is `visits`"],
    );
    check(
        &access("roads = { curve = \"halfnormal\" }"),
        "unknown_word",
        "\"halfnormal\"",
        &["`half-normal`"],
    );
    check(&SHORTEST.replace("\"T\"", "\" \""), "empty", "\" \"", &["`title`"]);
    check(&with("[records]", "crs = \"\""), "empty", "\"\"", &["`crs`"]);
    check(&SHORTEST.replace("\"r.tsv\"", "[]"), "empty", "[]", &["`file`"]);
    check(&SHORTEST.replace("\"r.tsv\"", "[\"\"]"), "empty", "\"\"", &["`file`"]);
    check(&with("[records]", "keep = { sex = [] }"), "empty", "[]", &["`sex`"]);
    check(&SHORTEST.replace("density = {}", "uses = {}"), "empty", "{}", &["`uses`"]);
    check(&with("[records]", "dates = \"2024/2005\""), "bad_date", "\"2024/2005\"", &["ISO 8601"]);
    check(&with("[records]", "dates = \"May 2005\""), "bad_date", "\"May 2005\"", &["\"2005/2024\""]);
    let remote = "\"/vsizip//vsicurl/http://example.org/a.zip\"";
    check(&SHORTEST.replace("\"t.tif\"", remote), "remote_path", remote, &["network"]);
    check(&SHORTEST.replace("\"r.tsv\"", "[\"PG:dbname=x\"]"), "remote_path", "\"PG:dbname=x\"", &[]);
    let remote = "\"https://example.org/crs\"";
    check(&with("[records]", &format!("crs = {remote}")), "remote_path", remote, &["network"]);
    check(&with("end", "[output]\nfolder = \"/vsis3/b\""), "remote_path", "\"/vsis3/b\"", &["network"]);
}

#[test]
fn grids_are_one_thing_or_the_other() {
    check(&with("[grid]", "region = \"r.gpkg\""), "grid_choice", "region", &["cannot stand together"]);
    check(&with("[grid]", "touching = true"), "grid_choice", "touching", &["`like`"]);
    check(&SHORTEST.replace("like = \"t.tif\"\n", ""), "grid_choice", "[grid]", &["neither"]);
    check(&region("touching = true"), "missing_key", "[grid]", &["`cell`"]);
}

#[test]
fn names_are_checked() {
    check(&SHORTEST.replace("recorded", "a/b"), "bad_name", "\"a/b\"", &["letters, digits"]);
    check(&SHORTEST.replace("recorded", "uniform"), "reserved_name", "\"uniform\"", &["baseline"]);
    check(&SHORTEST.replace("recorded", "best"), "reserved_name", "\"best\"", &["`[surface]`"]);
    let twice = "[[candidate]]\nname = \"Recorded\"\ndensity = {}";
    check(&with("end", twice), "duplicate_name", "\"Recorded\"", &["line 7"]);
    let text = access("roads = { curve = \"power\" }").replace("\"people\"", "'roads'");
    check(&text, "duplicate_name", "'roads'", &["`[[layer]]` of line 10"]);
    check(&access("road = { curve = \"power\" }"), "unknown_layer", "road", &["nearest layer is `roads`"]);
    check(
        &SHORTEST.replace("density = {}", "uses = { a = { curve = \"power\" } }"),
        "unknown_layer",
        "a",
        &["add"],
    );
    check(
        &with("end", "[surface]\ncandidate = \"record\""),
        "unknown_candidate",
        "\"record\"",
        &["`recorded`"],
    );
    good(&with("end", "[surface]\ncandidate = \"uniform\""));
}

#[test]
fn candidates_are_of_one_kind() {
    check(&SHORTEST.replace("density = {}", ""), "candidate_kind", "[[candidate]]", &["one of `density`"]);
    let both = access("roads = { curve = \"power\" } }\ndensity = { ");
    check(&both, "candidate_kind", "uses", &["both `density` and `uses`"]);
    check(&with("end", "base = 0.1"), "misplaced_key", "base", &["goes with `uses`"]);
    check(
        &with(TOP, "candidate = []")
            .replace("[[candidate]]", "[output]")
            .replace("density = {}", "")
            .replace("name = \"recorded\"", ""),
        "empty",
        "[]",
        &["uniform"],
    );
}

#[test]
fn curves_fit_their_layers() {
    let falling = access("people = { curve = \"half-normal\" }");
    check(&falling, "curve_direction", "\"half-normal\"", &["falls", "`people`", "`power` or `log-linear`"]);
    let rising = access("roads = { curve = \"log-linear\" }");
    check(
        &rising,
        "curve_direction",
        "\"log-linear\"",
        &["rises", "`exponential`, `half-normal` or `power`"],
    );
    let shape = access("roads = { curve = \"half-normal\", shape = 2 }");
    check(&shape, "misplaced_key", "shape", &["takes `scale`"]);
    let rate = access("people = { curve = \"power\", rate = 2 }");
    check(&rate, "misplaced_key", "rate", &["`exponent` and `offset`"]);
}

#[test]
fn layers_take_the_keys_of_their_measure() {
    check(&layer("value", "where = \"a > 1\""), "misplaced_key", "where", &["a raster and has no `where`"]);
    check(&layer("value", "table = \"a\""), "misplaced_key", "table", &["raster"]);
    check(&layer("distance", "resample = \"sum\""), "misplaced_key", "resample", &["`value` layers"]);
    check(&layer("distance", "missing = 0"), "misplaced_key", "missing", &["does not apply"]);
    check(&layer("distance", "weight = \"a\""), "misplaced_key", "weight", &["`density` layers"]);
}

#[test]
fn what_later_versions_fill_in_is_refused_by_name() {
    let later = "not supported by this version";
    let refused = |text: &str, marked: &str, name: &str| check(text, "not_supported", marked, &[name, later]);
    let travel = "where = \"p > 5\"\n[layer.travel]\nroads = { file = \"r.gpkg\", column = \"class\", \
                  speed = { primary = \"80 km/h\" } }\ncover = { file = \"c.tif\", \
                  speed = { 1 = \"4 km/h\", 9 = \"closed\" } }\nslope = \"e.tif\"\nwalk = \"5 km/h\"";
    refused(&layer("travel-time", travel), "\"travel-time\"", "`travel-time` layers are");
    let weighted = layer("density", "weight = \"population\"\nbandwidth = \"10 km\"");
    refused(&weighted, "\"density\"", "`density` layers are");
    for curve in ["hazard-rate", "log-logistic", "monotone"] {
        let text = access(&format!("roads = {{ curve = \"{curve}\" }}"));
        refused(&text, &format!("\"{curve}\""), &format!("`{curve}` curves are"));
    }
    refused(
        &access("people = { curve = \"saturating\", scale = 3 }"),
        "\"saturating\"",
        "`saturating` curves",
    );
    refused(&density("kernel = \"quartic\""), "\"quartic\"", "`quartic` kernels are");
    refused(&density("edges = \"none\""), "\"none\"", "`none` edges are");
    refused(&density("bandwidth = \"scott\""), "\"scott\"", "`bandwidth = \"scott\"` is");
    refused(&density("bandwidth = { neighbours = 15 }"), "{ neighbours = 15 }", "`bandwidth` that varies");
    refused(&density("bandwidth = { adaptive = \"20 km\" }"), "{ adaptive = \"20 km\" }", "`bandwidth`");
    refused(
        &with("[records]", "empty_visits = \"estimate\""),
        "\"estimate\"",
        "`empty_visits = \"estimate\"` is",
    );
    refused(&with("[records]", "sensitive = true"), "true", "coordinates");
    refused(&SHORTEST.replace("r.tsv", "R.7Z"), "\"R.7Z\"", "packed in this way");
    for split in ["dates", "dataset", "observer"] {
        refused(&with("end", &format!("[holdout]\nsplit = '{split}'")), &format!("'{split}'"), "splits are");
    }
    refused(&with("end", "[holdout]\nrepeats = 3"), "3", "`repeats = 3` is");
    refused(&with("end", "[holdout]\nbuffer = \"2 km\""), "\"2 km\"", "`buffer = \"2 km\"` is");
    refused(&with("end", "[holdout]\nblock = \"fit\""), "\"fit\"", "`block = \"fit\"` is");
    refused(&with("end", "[surface]\nuncertainty = true"), "true", "`uncertainty = true` is");
    refused(&with("end", "[output]\nalso = [\"ascii-grid\"]"), "[\"ascii-grid\"]", "`also");
    refused(&with("end", "[environment]\nrasters = [\"e/*.tif\"]"), "environment", "`environment` is");
    let more = access("roads = { curve = \"power\" } }\nremainder = { bandwidth = \"fit\"");
    assert!(trodden::plan::read(&more, "plan.toml").is_ok(), "a remainder is understood");
    refused(
        &format!("{}\nadjust = [\"a.tif\"]", access("roads = { curve = \"power\" }")),
        "adjust",
        "`adjust` is",
    );
}

#[test]
fn what_later_versions_fill_in_is_checked_all_the_same() {
    let rules = |text: &str| problems(text).iter().map(|d| d.rule).collect::<Vec<_>>();
    assert_eq!(rules(&layer("travel-time", "[layer.travel]\nwalk = 5")), ["not_supported", "missing_unit"]);
    assert_eq!(rules(&layer("travel-time", "[layer.travel]\nwlk = 5")), ["not_supported", "unknown_key"]);
    assert_eq!(rules(&layer("density", "bandwidth = 5")), ["not_supported", "missing_unit"]);
    assert_eq!(rules(&with("[records]", "cap = { observer = 10 }")), ["missing_unit"]);
    assert_eq!(rules(&with("[records]", "cap = { observer = \"110 %\" }")), ["out_of_range"]);
    assert_eq!(rules(&with("end", "[holdout]\nbuffer = 0")), ["missing_unit"]);
    assert_eq!(rules(&with("end", "[environment]\nrasters = \"a.tif\"")), ["not_supported", "wrong_type"]);
    let blend = |names: &str| with("end", &format!("[[candidate]]\nname = \"mixed\"\nblend = [{names}]"));
    assert_eq!(rules(&blend("\"recorder\"")), ["out_of_range", "unknown_candidate"]);
    assert_eq!(rules(&blend("\"mixed\"")), ["out_of_range", "blend_of_blend"]);
    assert_eq!(rules(&blend("")), ["empty"]);
    assert_eq!(rules(&blend("\"recorded\", \"recorded\"")), ["duplicate_name"]);
    assert!(trodden::plan::read(&blend("\"recorded\", \"uniform\""), "plan.toml").is_ok());
    let wrong = access("people = { curve = \"hazard-rate\" }");
    assert_eq!(rules(&wrong), ["not_supported", "curve_direction"]);
}

#[test]
fn the_reference_is_up_to_date() {
    let file = std::fs::read_to_string(concat!(env!("CARGO_MANIFEST_DIR"), "/config/plan-keys.md"))
        .unwrap_or_default();
    if std::env::var_os("TRODDEN_WRITE_REFERENCE").is_some() {
        std::fs::write(concat!(env!("CARGO_MANIFEST_DIR"), "/config/plan-keys.md"), reference()).unwrap();
        return;
    }
    assert!(
        file == reference(),
        "config/plan-keys.md is stale: run this test with TRODDEN_WRITE_REFERENCE=1"
    );
}

/// A plan with a layer over distance, one over values, and a candidate with this `uses`.
fn access(uses: &str) -> String {
    with(
        "end",
        &format!(
            "[[layer]]\nname = \"roads\"\nmeasure = \"distance\"\nfile = \"roads.gpkg\"\n[[layer]]\nname = \"people\"\n\
             measure = \"value\"\nfile = \"p.tif\"\n[[candidate]]\nname = \"access\"\nuses = {{ {uses} }}"
        ),
    )
}

/// A plan with a grid of its own.
fn region(line: &str) -> String {
    SHORTEST.replace("like = \"t.tif\"", &format!("region = \"r.gpkg\"\ncrs = \"EPSG:3035\"\n{line}"))
}

/// A plan whose candidate has this `density`.
fn density(inside: &str) -> String {
    SHORTEST.replace("{}", &format!("{{ {inside} }}"))
}

/// A plan with one layer of this measure.
fn layer(measure: &str, lines: &str) -> String {
    with("end", &format!("[[layer]]\nname = \"x\"\nmeasure = \"{measure}\"\nfile = \"x.gpkg\"\n{lines}"))
}
