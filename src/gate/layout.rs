//! Where the fields of a record are found among the columns of a file.

use crate::diag::{Diagnostic, Outcome};
use crate::records::{Count, Fields, Match, Place, RecordsPlan, SourcePlan};

/// Where a field's text comes from.
#[derive(Debug, Clone, Default, PartialEq)]
pub(super) struct Slot {
    /// The column of the file.
    pub(super) own: Option<usize>,
    /// The field of the row that the file's row belongs to, where its own is empty.
    pub(super) parent: Option<usize>,
    /// What stands for empty ones.
    pub(super) fixed: Option<String>,
}

/// A column of a file by its name.
#[derive(Debug, Clone)]
pub(super) struct Named {
    pub(super) name: String,
    pub(super) slot: Slot,
}

impl Named {
    /// The columns of a file that names each in its order.
    pub(super) fn in_order(names: &[String]) -> Vec<Self> {
        let named = |(i, name): (usize, &String)| Self {
            name: name.clone(),
            slot: Slot { own: Some(i), ..Slot::default() },
        };
        names.iter().enumerate().map(named).collect()
    }
}

/// The text of a row's columns, and of the row it belongs to.
pub(super) trait Texts {
    /// A column's text.
    fn own(&self, column: usize) -> &str;
    /// A field of the row it belongs to.
    fn parent(&self, _field: usize) -> &str {
        ""
    }
}

/// A place that is a geometry, and its CRS.
pub(super) struct Point<'a> {
    pub(super) place: Place<'a>,
    pub(super) wkt: &'a str,
    pub(super) degrees: bool,
}

/// Where each field of a row is found; `None` where the file has no such column.
#[derive(Default)]
pub(super) struct Layout {
    place: Option<(Slot, Slot)>,
    date: Option<Slot>,
    year_month_day: [Option<Slot>; 3],
    observer: Option<Slot>,
    dataset: Option<Slot>,
    uncertainty: Option<Slot>,
    status: Option<Slot>,
    individuals: Option<Slot>,
    datum: Option<Slot>,
    filters: Vec<Slot>,
    /// How the columns were found.
    pub(super) matches: Vec<Match>,
}

/// Looks for columns and notes which are missing and how others were found.
struct Search<'a> {
    columns: &'a [Named],
    source: &'a SourcePlan,
    short: bool,
    missing: Vec<String>,
    matches: Vec<Match>,
}

impl Search<'_> {
    fn find(&mut self, role: &str, name: &str) -> Option<Slot> {
        let at = position(self.columns, name, self.short)?;
        let found = &self.columns[at];
        let column = found.name.clone();
        self.matches.push(Match { role: role.to_owned(), wanted: name.to_owned(), column });
        Some(found.slot.clone())
    }

    /// A column that must be there only where the plan states it.
    fn optional(&mut self, key: &str, name: &str) -> Option<Slot> {
        let found = self.find(key, name);
        if found.is_none() && self.source.columns.stated.iter().any(|s| s == key) {
            self.missing.push(name.to_owned());
        }
        found
    }

    fn required(&mut self, role: &str, name: &str) -> Option<Slot> {
        let found = self.find(role, name);
        if found.is_none() && !self.missing.iter().any(|m| m == name) {
            self.missing.push(name.to_owned());
        }
        found
    }
}

impl Layout {
    /// Finds the plan's columns among those of a file; `points`: the place comes from a geometry.
    pub(super) fn find(
        columns: &[Named],
        (plan, source): (&RecordsPlan, &SourcePlan),
        file: &str,
        points: bool,
    ) -> Outcome<Self> {
        let short = file.to_lowercase().ends_with(".shp");
        let mut s = Search { columns, source, short, missing: Vec::new(), matches: Vec::new() };
        let wanted = &source.columns;
        let mut layout = Self {
            date: s.optional("date", &wanted.date),
            observer: s.optional("observer", &wanted.observer),
            dataset: s.optional("dataset", &wanted.dataset),
            uncertainty: s.optional("uncertainty", &wanted.uncertainty),
            year_month_day: ["year", "month", "day"].map(|n| s.find(n, n)),
            status: s.find("status", "occurrenceStatus"),
            individuals: s.find("individuals", "individualCount"),
            datum: s.find("datum", "geodeticDatum"),
            ..Self::default()
        };
        s.optional("taxon", &wanted.taxon);
        let dated = layout.date.is_some() || layout.year_month_day[0].is_some();
        if plan.dates.is_some() && !dated {
            s.required("date", &wanted.date);
        }
        if plan.max_uncertainty.is_some() && layout.uncertainty.is_none() {
            s.required("uncertainty", &wanted.uncertainty);
        }
        if !points {
            let x = s.required("longitude", &wanted.longitude);
            layout.place = x.zip(s.required("latitude", &wanted.latitude));
        }
        let filters =
            plan.keep.iter().map(|f| ("keep", f)).chain(plan.leave_out.iter().map(|f| ("leave_out", f)));
        layout.filters = filters.filter_map(|(role, f)| s.required(role, &f.column)).collect();
        if !s.missing.is_empty() {
            return Err(missing_columns(file, &s.missing, columns).into());
        }
        if plan.count == Count::Visits && layout.observer.is_none() && !dated {
            return Err(no_visits(source, file, columns).into());
        }
        layout.matches = s.matches;
        Ok(layout)
    }

    /// The columns of the file that are read, in their order.
    pub(super) fn columns(&self) -> Vec<usize> {
        let all: std::collections::BTreeSet<usize> = self.slots().filter_map(|s| s.own).collect();
        all.into_iter().collect()
    }

    /// The fields that are read of the rows that the file's rows belong to.
    pub(super) fn parents(&self) -> Vec<usize> {
        let all: std::collections::BTreeSet<usize> = self.slots().filter_map(|s| s.parent).collect();
        all.into_iter().collect()
    }

    fn slots(&self) -> impl Iterator<Item = &Slot> {
        let single = [
            &self.date,
            &self.observer,
            &self.dataset,
            &self.uncertainty,
            &self.status,
            &self.individuals,
            &self.datum,
        ];
        let place = self.place.iter().flat_map(|(x, y)| [x, y]);
        place
            .chain(single.into_iter().flatten())
            .chain(self.year_month_day.iter().flatten())
            .chain(&self.filters)
    }

    /// Hands the fields of a row to `each`.
    pub(super) fn fields<'a>(
        &'a self,
        row: &'a impl Texts,
        point: Option<Point<'a>>,
        each: impl FnOnce(Fields),
    ) {
        let text = |slot: &'a Option<Slot>| slot.as_ref().map_or("", |s| s.text(row));
        let place = point
            .as_ref()
            .map(|p| p.place)
            .or_else(|| self.place.as_ref().map(|(x, y)| Place::Text { x: x.text(row), y: y.text(row) }));
        let mut few = [""; 8];
        let many: Vec<&str>;
        let filters = if self.filters.len() <= few.len() {
            self.filters.iter().zip(&mut few).for_each(|(slot, text)| *text = slot.text(row));
            &few[..self.filters.len()]
        } else {
            many = self.filters.iter().map(|s| s.text(row)).collect();
            &many
        };
        each(Fields {
            place: place.unwrap_or(Place::Missing),
            date: text(&self.date),
            year_month_day: [0, 1, 2].map(|i| text(&self.year_month_day[i])),
            observer: text(&self.observer),
            dataset: text(&self.dataset),
            uncertainty: text(&self.uncertainty),
            status: text(&self.status),
            individuals: text(&self.individuals),
            degrees: point.as_ref().map(|p| p.degrees),
            datum: point.as_ref().map_or_else(|| text(&self.datum), |p| p.wkt),
            filters,
        });
    }
}

impl Slot {
    /// The field's text in a row.
    fn text<'a>(&'a self, row: &'a impl Texts) -> &'a str {
        if let Some(column) = self.own {
            let text = row.own(column);
            if !text.is_empty() || (self.parent.is_none() && self.fixed.is_none()) {
                return text;
            }
        }
        let text = self.parent.map_or("", |field| row.parent(field));
        if text.is_empty() { self.fixed.as_deref().unwrap_or("") } else { text }
    }
}

/// A column by its exact name, else by its name in another case when only one fits; a shapefile cuts
/// names to ten characters.
fn position(columns: &[Named], name: &str, short: bool) -> Option<usize> {
    let only = |fits: &dyn Fn(&str) -> bool| {
        let mut found = columns.iter().enumerate().filter(|(_, c)| fits(&c.name)).map(|(i, _)| i);
        found.next().filter(|_| found.next().is_none())
    };
    let cut = name.get(..10).unwrap_or(name);
    columns
        .iter()
        .position(|c| c.name == name)
        .or_else(|| only(&|n| n.eq_ignore_ascii_case(name)))
        .or_else(|| only(&|n| plain(n).eq_ignore_ascii_case(name)))
        .or_else(|| if short { only(&|n| n.eq_ignore_ascii_case(cut)) } else { None })
}

/// A term without what stands before it: `dwc:eventDate`, or its whole address.
fn plain(name: &str) -> &str {
    name.rsplit(['/', '#', ':']).next().unwrap_or(name)
}

fn listed(names: &[String]) -> String {
    let shown: Vec<String> = names.iter().take(40).map(|n| format!("`{n}`")).collect();
    let rest = names.len().saturating_sub(shown.len());
    if rest > 0 { format!("{} and {rest} more", shown.join(", ")) } else { shown.join(", ") }
}

fn missing_columns(file: &str, missing: &[String], columns: &[Named]) -> Diagnostic {
    let names: Vec<String> = columns.iter().map(|c| c.name.clone()).collect();
    let text = format!("has no column {}; it has {}", listed(missing), listed(&names));
    let quoted = names.iter().any(|n| n.len() > 1 && n.starts_with('"') && n.ends_with('"'));
    Diagnostic::input("missing_column", format!("{file}:1"), text).cure(if quoted {
        "the names stand in quotes: set `quotes = \"double\"` in [records]"
    } else {
        "name the columns in [records], or leave out what needs them (`dates`, `max_uncertainty`, `keep`)"
    })
}

fn no_visits(source: &SourcePlan, file: &str, columns: &[Named]) -> Diagnostic {
    let names: Vec<String> = columns.iter().map(|c| c.name.clone()).collect();
    let text = format!(
        "has neither a date column (`{}`) nor an observer column (`{}`), so visits cannot be told; it has {}",
        source.columns.date,
        source.columns.observer,
        listed(&names)
    );
    Diagnostic::input("no_visits", format!("{file}:1"), text)
        .cure("name one of them in [records], or set `count = \"records\"` or `\"places\"`")
}
