//! What smells about the records: said with figures and examples, never mended.

use crate::diag::Diagnostic;
use crate::grid::Region;

use super::ledger::{Ledger, Rule};
use super::signs::{DEGREES, Seen, Sign, Signs, Turn, UNITS};
use super::units::{Records, median_uncertainty};

/// A share of the records from which something is worth saying.
const SOME: f64 = 0.01;
/// A share of records on a lattice coarser than the cells, or on one place, that is said.
const MANY: f64 = 0.05;
/// A share of the whole that one observer, data set or cell should not carry.
const LARGE: f64 = 0.2;
/// Records of a pile below which it is not worth saying.
const PILE: u64 = 20;
/// Length of a degree of latitude on a sphere of mean radius, metres.
const DEGREE: f64 = 111_195.0;

/// Everything that smells.
pub(super) fn all(
    files: &[String],
    region: &Region,
    signs: &Signs,
    records: &Records,
    datasets: &[String],
) -> Vec<Diagnostic> {
    let say = Says { files: files.to_vec() };
    let mut found = say.misplaced(signs, &records.ledger);
    found.extend(say.coarse(region, signs));
    found.extend(say.piles(records));
    found.extend(say.equal(signs, &records.ledger));
    found.extend(say.near(signs, &records.ledger));
    found.extend(say.vague(region, records));
    found.extend(say.radii(signs));
    found.extend(say.dateless(signs, &records.ledger));
    found.extend(say.swallowed(signs));
    found.extend(say.concentrated(region, records, datasets));
    found
}

/// Lattices on which kept coordinates lie, coarsest first, with the share of those that do.
pub(super) fn lattices(signs: &Signs) -> Vec<(&'static str, f64)> {
    let share = |(lattice, sign): (&(f64, f64, &'static str), &Sign), all: u64| {
        (lattice.2, sign.count as f64 / all as f64)
    };
    if signs.in_degrees >= signs.in_units && signs.in_degrees > 0 {
        DEGREES.iter().zip(&signs.on_degrees).map(|p| share(p, signs.in_degrees)).collect()
    } else {
        UNITS.iter().zip(&signs.on_units).map(|p| share(p, signs.in_units)).collect()
    }
}

/// The error of a study without records.
pub(super) fn nothing_left(
    files: &[String],
    ledger: &Ledger,
    signs: &Signs,
    [gw, gs, ge, gn]: [f64; 4],
) -> Diagnostic {
    let say = Says { files: files.to_vec() };
    let place = say.files.join(", ");
    if ledger.read() == 0 {
        return Diagnostic::input("no_rows", place, "the file holds a header and no rows")
            .cure("give a file with records");
    }
    let mut text = format!("no record is left after screening ({})", ledger.lines().join("; "));
    let mut cure = "check the column names, `crs`, `dates` and `keep` of [records]".to_owned();
    if 2 * ledger.dropped(Rule::UnreadableRow) > ledger.read() {
        cure =
            "see that every row has as many fields as the header, quotes come in pairs and lines end alike"
                .into();
    }
    if let Some([w, s, e, n]) = signs.extent {
        text += &format!(
            "; in the grid's CRS the records span x {w:.4} to {e:.4}, y {s:.4} to {n:.4}, \
             the grid x {gw:.4} to {ge:.4}, y {gs:.4} to {gn:.4}"
        );
        cure = "state the CRS of the coordinate columns as `crs` in [records]".into();
    }
    if let Some((_, said, hint, _)) = say.meant(signs).into_iter().max_by_key(|m| m.3.count) {
        text += &format!("; {said}");
        cure = hint;
    }
    Diagnostic::input("no_records", place, text).cure(cure)
}

/// A rule, what was seen, what to do, and how often.
type Meant = (&'static str, String, String, Sign);

struct Says {
    files: Vec<String>,
}

impl Says {
    /// File and line of an example.
    fn at(&self, sign: &Sign) -> String {
        sign.first.map_or_else(String::new, |s| format!("{}:{}", self.files[s.file as usize], s.line))
    }

    /// How coordinates that are off may have been meant.
    fn meant(&self, signs: &Signs) -> Vec<Meant> {
        let example = |s: &Sign| match s.first {
            Some(Seen { xy: (x, y), .. }) if s.count > 0 => format!(" (such as {x} {y})"),
            _ => String::new(),
        };
        let mut found = Vec::new();
        for (turn, sign) in Turn::ALL.iter().zip(&signs.turned) {
            let (rule, how, cure) = turned(*turn);
            let text =
                format!("{} records outside the grid{} would be inside {how}", sign.count, example(sign));
            found.push((rule, text, cure, *sign));
        }
        let text = format!("{} records write their coordinates with a decimal comma", signs.commas.count);
        let cure = "write numbers with a decimal point".to_owned();
        found.push(("decimal_comma", text, cure, signs.commas));
        let text = format!(
            "{} records have coordinates too large for degrees{}",
            signs.large.count,
            example(&signs.large)
        );
        let cure = "state their CRS as `crs` in [records], with its unit: coordinates in kilometres need a CRS in kilometres \
                    (\"+proj=utm +zone=32 +datum=WGS84 +units=km\"); a vector file: write the CRS into it with `ogr2ogr -a_srs`";
        found.push(("coordinates_too_large", text, cure.to_owned(), signs.large));
        found.retain(|f| f.3.count > 0);
        found
    }

    fn misplaced(&self, signs: &Signs, ledger: &Ledger) -> Vec<Diagnostic> {
        let enough =
            |n: u64| n as f64 >= SOME * ledger.read() as f64 && n as f64 >= MANY * ledger.kept() as f64;
        let said = |(rule, text, cure, sign): Meant| Diagnostic::input(rule, self.at(&sign), text).cure(cure);
        self.meant(signs).into_iter().filter(|m| enough(m.3.count)).map(said).collect()
    }

    /// Coordinates on a lattice coarser than the cells.
    fn coarse(&self, region: &Region, signs: &Signs) -> Option<Diagnostic> {
        let degrees = signs.in_degrees >= signs.in_units;
        let (table, counts, all) = if degrees {
            (DEGREES, &signs.on_degrees, signs.in_degrees)
        } else {
            (UNITS, &signs.on_units, signs.in_units)
        };
        let cell = region.grid().cell_side().get();
        let unit = if degrees { DEGREE } else { 1000.0 };
        let coarse = |i: &usize| unit / table[*i].0 >= cell && counts[*i].count as f64 >= MANY * all as f64;
        let finest = (0..table.len()).rev().find(coarse)?;
        // of lattices that hold about the same records the coarsest says most
        let alike = |i: &usize| counts[*i].count as f64 >= 0.9 * counts[finest].count as f64;
        let step = (0..finest).find(alike).unwrap_or(finest);
        let shares: Vec<String> =
            lattices(signs).iter().map(|(step, share)| format!("{step} {}", percent(*share))).collect();
        let text = format!(
            "{} of the records have both coordinates on multiples of {}, coarser than the cells ({cell:.0} m); by step: {}",
            percent(counts[step].count as f64 / all as f64),
            table[step].2,
            shares.join(", ")
        );
        let cure = "such coordinates are rounded: drop them (`max_uncertainty`, `leave_out`), or use cells no finer than that";
        Some(Diagnostic::input("coarse_coordinates", self.at(&counts[step]), text).cure(cure))
    }

    fn piles(&self, records: &Records) -> Option<Diagnostic> {
        let kept = records.ledger.kept() as f64;
        let first = records.piles.first().filter(|p| p.records >= PILE)?;
        if (first.records as f64) < MANY * kept {
            return None;
        }
        let piles: Vec<String> = records
            .piles
            .iter()
            .filter(|p| p.records >= PILE)
            .map(|p| format!("{} {} ({}, {})", p.xy.0, p.xy.1, p.records, percent(p.records as f64 / kept)))
            .collect();
        let text = format!("many records share one place to the last digit: {}", piles.join("; "));
        let cure = "find out whether these are sites that were visited often, or centroids of districts and the like: leave those out";
        Some(Diagnostic::input("identical_places", self.files.join(", "), text).cure(cure))
    }

    fn equal(&self, signs: &Signs, ledger: &Ledger) -> Option<Diagnostic> {
        let sign = &signs.equal;
        (sign.count > 0).then(|| {
            let text = format!(
                "{} of {} records kept have a latitude equal to their longitude",
                sign.count,
                ledger.kept()
            );
            Diagnostic::input("equal_coordinates", self.at(sign), text)
                .cure("look at these rows: one coordinate may have been copied over the other")
        })
    }

    /// Records dropped that `snap` would rescue.
    fn near(&self, signs: &Signs, ledger: &Ledger) -> Option<Diagnostic> {
        let sign = &signs.near;
        (sign.count as f64 >= SOME * ledger.kept() as f64 && sign.count > 0).then(|| {
            let text = format!(
                "{} records lie outside the region, but within one cell of it (at a coast, say); they were dropped",
                sign.count
            );
            Diagnostic::input("just_outside", self.at(sign), text)
                .cure("set `snap = \"1 cells\"` in [records] to move them to the nearest cell inside")
        })
    }

    fn vague(&self, region: &Region, records: &Records) -> Option<Diagnostic> {
        let median = median_uncertainty(&records.units)?;
        let cell = region.grid().cell_side();
        (median > cell).then(|| {
            let stated = records.units.iter().filter(|u| !u.uncertainty.is_nan()).count();
            let text = format!(
                "the median uncertainty ({median}; stated for {} of the {}) is above the side of a cell ({cell})",
                percent(stated as f64 / records.units.len() as f64),
                records.count.word()
            );
            Diagnostic::input("vague_for_cells", self.files.join(", "), text)
                .cure("use larger cells, or drop what is vague with `max_uncertainty`")
        })
    }

    fn radii(&self, signs: &Signs) -> Vec<Diagnostic> {
        let say = |rule, sign: &Sign, what: &str, cure: &str| {
            (sign.count > 0).then(|| {
                let text = format!("{} records state an uncertainty {what}: treated as unknown", sign.count);
                Diagnostic::input(rule, self.at(sign), text).cure(cure)
            })
        };
        let zero = "a radius is above 0: leave it empty where it is not known";
        let number = "write it in metres, as a bare number";
        [
            say("uncertainty_not_positive", &signs.not_positive, "of zero or less", zero),
            say("uncertainty_unreadable", &signs.no_radius, "that is no number", number),
        ]
        .into_iter()
        .flatten()
        .collect()
    }

    /// Dates in a way that is not read.
    fn dateless(&self, signs: &Signs, ledger: &Ledger) -> Option<Diagnostic> {
        let sign = &signs.no_date;
        (sign.count > 0 && sign.count as f64 >= SOME * ledger.kept() as f64).then(|| {
            let text = format!(
                "{} records have a date that cannot be read: when they were made counts as unknown, \
                 so that one observer's outings to a cell become one",
                sign.count
            );
            Diagnostic::input("dates_unreadable", self.at(sign), text)
                .cure("write dates as ISO 8601, such as 2015-03-17")
        })
    }

    /// Rows that hold the lines of others.
    fn swallowed(&self, signs: &Signs) -> Option<Diagnostic> {
        let sign = &signs.swallowed;
        (sign.count > 0).then(|| {
            let text = format!("{} lines lie inside quotes and were not read as rows of their own", sign.count);
            Diagnostic::input("swallowed_lines", self.at(sign), text).cure(
                "mend the quote in that row, or set `quotes = \"none\"` in [records] if quotes are ordinary characters here",
            )
        })
    }

    fn concentrated(&self, region: &Region, records: &Records, datasets: &[String]) -> Vec<Diagnostic> {
        let [observer, dataset, cell] = records.top.map(|t| t.filter(|(_, share)| *share > LARGE));
        let of = records.count.word();
        let mut found = Vec::new();
        let mut say = |rule, who: String, share: f64, cure: &str| {
            let text = format!("{who} carries {} of the {of}", percent(share));
            found.push(Diagnostic::input(rule, self.files.join(", "), text).cure(cure));
        };
        let capped = |what: &str| records.capped.iter().any(|c| c.what == what);
        let cap = "check that this is effort and not an import; `cap` in [records] limits what one may weigh";
        if let Some((number, share)) = observer.filter(|_| !capped("observer")) {
            let (who, cure) = if number == 0 {
                (
                    "what has no observer",
                    "name the column that holds observers as `observer` in [records], if there is one: unknown ones count as one, so that their records of a day and cell are one visit",
                )
            } else {
                ("one observer", cap)
            };
            say("one_observer", who.into(), share, cure);
        }
        if let Some((number, share)) = dataset.filter(|_| !capped("dataset") && datasets.len() > 2) {
            let name = datasets.get(number as usize).map_or("", String::as_str);
            let (who, cure) = if name.is_empty() {
                let cure = "name the column that holds data sets as `dataset` in [records], if there is one";
                ("what has no data set".into(), cure)
            } else {
                (format!("the data set `{name}`"), cap)
            };
            say("one_dataset", who, share, cure);
        }
        if let Some((number, share)) = cell {
            let (x, y) = region.centre(number as usize);
            say(
                "one_cell",
                format!("the cell around {x:.5} {y:.5}"),
                share,
                "check whether that place is a centroid or a default; leave such records out",
            );
        }
        found
    }
}

/// The rule of a turn, how it is said, and what to do.
fn turned(turn: Turn) -> (&'static str, &'static str, String) {
    let sign = |what: &str| {
        format!(
            "the {what} lacks its minus sign, or has one too many: mend it in the file, or read it from a column that has it"
        )
    };
    match turn {
        Turn::Swapped => (
            "coordinates_swapped",
            "with their coordinates swapped",
            "exchange `longitude` and `latitude` in [records]".into(),
        ),
        Turn::East => ("sign_flipped", "with the other sign of their longitude", sign("longitude")),
        Turn::North => ("sign_flipped", "with the other sign of their latitude", sign("latitude")),
        Turn::Both => {
            ("sign_flipped", "with the other sign of both coordinates", sign("longitude, and the latitude,"))
        }
        Turn::Kilometres => (
            "coordinates_in_kilometres",
            "with their coordinates taken as kilometres",
            "state a CRS in kilometres as `crs` in [records] (such as \"+proj=utm +zone=32 +datum=WGS84 +units=km\"), or write metres".into(),
        ),
    }
}

fn percent(share: f64) -> String {
    format!("{:.1} %", share * 100.0)
}
