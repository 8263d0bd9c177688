//! Gathers rows into records: screens them, finds their cells, counts visits.

use std::collections::BTreeMap;
use std::sync::Arc;

use crate::diag::{Diagnostic, Outcome};
use crate::grid::{CrsKind, Region};

use super::ledger::{Ledger, Rule};
use super::row::{Content, Fields, Row};
use super::screen::{Passed, date_of, precision, screen};
use super::settings::{Count, RecordsPlan};
use super::snap::Snapper;
use super::units::{Records, Unit};
use super::visits::{
    Names, Visit, Visits, dataset_shares, day_numbers, effective, facts, observer_set, observer_shares, top,
    top_cell,
};

/// Turns coordinates of a reference system (by name, or a record's own datum) into the grid's, in
/// place; a place that cannot be turned becomes not-a-number.
pub type Project<'a> = dyn Fn(&str, &mut [f64], &mut [f64]) -> Outcome<()> + 'a;

/// Told of every dropped record.
pub trait Sink {
    /// A record was dropped.
    ///
    /// # Errors
    /// When the note cannot be written.
    fn dropped(&mut self, file: usize, line: u64, rule: Rule, detail: &str) -> Outcome<()>;
}

/// A kept record, for those who want to check.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Kept {
    /// Which file.
    pub file: usize,
    /// Which line.
    pub line: u64,
    /// Compact index of its cell.
    pub cell: u32,
    /// Number of its visit, from 1.
    pub visit: u32,
}

/// Rows that passed the first rules and wait for their cell.
struct Waiting {
    file: usize,
    line: u64,
    passed: Passed,
    observer: u32,
    dataset: u32,
}

/// Gathers rows.
pub struct Collector<'a> {
    plan: &'a RecordsPlan,
    region: Arc<Region>,
    project: &'a Project<'a>,
    sink: &'a mut dyn Sink,
    degrees: bool,
    snapper: Option<Snapper>,
    ledger: Ledger,
    waiting: BTreeMap<String, Vec<Waiting>>,
    waiting_count: usize,
    observers: Names,
    datasets: Names,
    visits: Visits,
    kept: Option<Vec<Kept>>,
    dates: [u64; 5],
    hints: Hints,
}

/// Signs that coordinates were written in another way than the plan says.
#[derive(Default)]
struct Hints {
    swapped: u64,
    commas: u64,
    /// Coordinates too large for degrees, and the first of them.
    large: (u64, String),
    extent: Option<[f64; 4]>,
}

/// Parts into which a cell's side is divided when positions in it are added up.
const PARTS: f64 = 65_536.0;
/// Rows gathered before their coordinates are turned together.
const BATCH: usize = 16_384;

impl<'a> Collector<'a> {
    /// Starts gathering; `degrees`: the plan's coordinates are longitude and latitude.
    pub fn new(
        plan: &'a RecordsPlan,
        region: Arc<Region>,
        project: &'a Project<'a>,
        sink: &'a mut dyn Sink,
        degrees: bool,
    ) -> Self {
        let reach = plan.snap.and_then(|s| s.metres(region.grid().cell_side()));
        Self {
            plan,
            project,
            sink,
            degrees,
            snapper: reach.map(|reach| Snapper::new(&region, reach)),
            region,
            ledger: Ledger::default(),
            waiting: BTreeMap::new(),
            waiting_count: 0,
            observers: Names::default(),
            datasets: Names::default(),
            visits: Visits::default(),
            kept: None,
            dates: [0; 5],
            hints: Hints::default(),
        }
    }

    /// Also remembers which records were kept.
    #[must_use]
    pub fn with_kept(mut self) -> Self {
        self.kept = Some(Vec::new());
        self
    }

    /// Takes one row.
    ///
    /// # Errors
    /// When a dropped record cannot be noted or coordinates cannot be turned.
    pub fn push(&mut self, row: &Row) -> Outcome<()> {
        match &row.content {
            Content::Unreadable(why) => {
                self.dates[4] += 1;
                self.drop(row.file, row.line, Rule::UnreadableRow, why)
            }
            Content::Fields(fields) => self.take(row, fields),
        }
    }

    fn take(&mut self, row: &Row, fields: &Fields) -> Outcome<()> {
        self.dates[precision(date_of(fields))] += 1;
        match screen(fields, self.plan, fields.degrees.unwrap_or(self.degrees)) {
            Err((rule, detail)) => {
                if rule == Rule::ImpossibleCoordinate {
                    self.hints.note(&detail);
                }
                self.drop(row.file, row.line, rule, &detail)
            }
            Ok(passed) => {
                let waiting = Waiting {
                    file: row.file,
                    line: row.line,
                    passed,
                    observer: self.observers.number(&observer_set(fields.observer)),
                    dataset: self.datasets.number(fields.dataset.trim()),
                };
                let datum = fields.datum.trim();
                if let Some(list) = self.waiting.get_mut(datum) {
                    list.push(waiting);
                } else {
                    self.waiting.insert(datum.to_owned(), vec![waiting]);
                }
                self.waiting_count += 1;
                if self.waiting_count >= BATCH { self.settle() } else { Ok(()) }
            }
        }
    }

    fn drop(&mut self, file: usize, line: u64, rule: Rule, detail: &str) -> Outcome<()> {
        self.ledger.drop(rule);
        self.sink.dropped(file, line, rule, detail)
    }

    /// Finds the cells of the waiting rows.
    fn settle(&mut self) -> Outcome<()> {
        self.waiting_count = 0;
        for (datum, rows) in std::mem::take(&mut self.waiting) {
            let mut x: Vec<f64> = rows.iter().map(|w| w.passed.xy.0).collect();
            let mut y: Vec<f64> = rows.iter().map(|w| w.passed.xy.1).collect();
            (self.project)(&datum, &mut x, &mut y)?;
            let mut strays = Vec::new();
            for (i, row) in rows.iter().enumerate() {
                if !self.place(row, x[i], y[i])? {
                    strays.push(row.passed.xy);
                }
            }
            self.try_swapped(&datum, &strays)?;
        }
        Ok(())
    }

    /// Files a row under its cell, or drops it; `false` when it is outside the grid.
    fn place(&mut self, row: &Waiting, x: f64, y: f64) -> Outcome<bool> {
        self.hints.stretch(x, y);
        let flat = self.region.grid().locate(x, y);
        let inside = flat.and_then(|f| self.region.compact(f));
        let snapped = || self.snapper.as_ref().and_then(|s| s.nearest(&self.region, x, y));
        match (inside, inside.or_else(snapped)) {
            (_, Some(cell)) => {
                self.ledger.keep(inside.is_none());
                let offset = inside.map_or([0; 2], |_| self.offset(cell, x, y));
                self.keep(row, cell as u32, offset);
                Ok(true)
            }
            (_, None) => {
                let rule = if flat.is_some() { Rule::OutsideRegion } else { Rule::OutsideGrid };
                let detail = if x.is_finite() {
                    format!("{x:.5} {y:.5}")
                } else {
                    "no place on the grid's CRS".into()
                };
                self.drop(row.file, row.line, rule, &detail)?;
                Ok(flat.is_some())
            }
        }
    }

    /// Where in its cell a place lies, in parts of a column and a row.
    fn offset(&self, cell: usize, x: f64, y: f64) -> [i64; 2] {
        let grid = self.region.grid();
        let (cx, cy) = self.region.centre(cell);
        let mut across = (x - cx) / grid.transform[1];
        if grid.crs.kind == CrsKind::Geographic {
            let turn = 360.0 / grid.transform[1];
            across -= (across / turn).round() * turn;
        }
        [across, (y - cy) / grid.transform[5]].map(|part| (part.clamp(-0.5, 0.5) * PARTS).round() as i64)
    }

    fn keep(&mut self, row: &Waiting, cell: u32, offset: [i64; 2]) {
        let days = row.passed.date.map(day_numbers);
        let radius = row.passed.uncertainty.map_or(f32::NAN, |r| r as f32);
        let visit = self.visits.add((cell, row.observer, days), (row.dataset, radius, offset));
        if let Some(kept) = &mut self.kept {
            kept.push(Kept { file: row.file, line: row.line, cell, visit });
        }
    }

    /// Counts how many rows outside the grid would be inside with their coordinates swapped.
    fn try_swapped(&mut self, datum: &str, strays: &[(f64, f64)]) -> Outcome<()> {
        if strays.is_empty() {
            return Ok(());
        }
        let (mut x, mut y): (Vec<f64>, Vec<f64>) = strays.iter().map(|s| (s.1, s.0)).unzip();
        (self.project)(datum, &mut x, &mut y)?;
        let inside = x.iter().zip(&y).filter(|(x, y)| {
            self.region.grid().locate(**x, **y).is_some_and(|f| self.region.compact(f).is_some())
        });
        self.hints.swapped += inside.count() as u64;
        Ok(())
    }

    /// Ends the gathering.
    ///
    /// # Errors
    /// When no record is left; the error holds the ledger and what may be wrong.
    pub fn finish(mut self) -> Outcome<(Records, Vec<Kept>, Option<Diagnostic>)> {
        self.settle()?;
        let smell = self.smells();
        if self.ledger.kept() == 0 {
            return Err(self.nothing_left().into());
        }
        let (visits, order) = self.sorted_visits();
        let mut renumbered = vec![0; order.len()];
        order.iter().enumerate().for_each(|(rank, &i)| renumbered[i as usize] = rank as u32);
        let mut kept = self.kept.take().unwrap_or_default();
        kept.iter_mut().for_each(|k| k.visit = renumbered[k.visit as usize] + 1);
        kept.sort_unstable_by_key(|k| (k.file, k.line));
        Ok((self.records(&visits, &order), kept, smell))
    }

    /// The visits in an order that does not depend on the order of rows, and the number under which
    /// each was gathered.
    fn sorted_visits(&mut self) -> (Vec<Visit>, Vec<u32>) {
        let (observers, datasets) = (self.observers.order(), self.datasets.order());
        let mut found = std::mem::take(&mut self.visits.found);
        found.iter_mut().for_each(|v| {
            v.key.1 = observers[v.key.1 as usize];
            v.dataset = datasets[v.dataset as usize];
        });
        let others = std::mem::take(&mut self.visits.others);
        self.visits.others = others.into_iter().map(|((v, d), n)| ((v, datasets[d as usize]), n)).collect();
        let mut order: Vec<u32> = (0..found.len() as u32).collect();
        order.sort_unstable_by_key(|&i| found[i as usize].key);
        (order.iter().map(|&i| found[i as usize]).collect(), order)
    }

    fn records(self, visits: &[Visit], numbers: &[u32]) -> Records {
        let mut outings = BTreeMap::new();
        for v in visits {
            let next = outings.len() as u32;
            outings.entry((v.key.1, v.key.2)).or_insert(next);
        }
        let mut units: Vec<Unit> = visits
            .iter()
            .map(|v| Unit {
                cell: v.key.0,
                weight: if self.plan.count == Count::Records { f64::from(v.records) } else { 1.0 },
                outing: outings[&(v.key.1, v.key.2)],
                uncertainty: v.uncertainty,
                offset: v.offset.map(|o| (o as f64 / PARTS / f64::from(v.records)) as f32),
            })
            .collect();
        if self.plan.count == Count::Places {
            units.dedup_by_key(|u| u.cell); // visits are sorted by cell
            units.iter_mut().for_each(|u| (u.outing, u.offset) = (u.cell, [0.0; 2]));
        }
        let places = visits.chunk_by(|a, b| a.key.0 == b.key.0).count();
        let known = |pick: fn(&Visit) -> u32| visits.iter().any(|v| pick(v) > 0);
        let by_observer = observer_shares(visits, self.plan.count);
        let by_dataset = dataset_shares(visits, numbers, &self.visits.others, self.plan.count);
        let (observer, dataset) =
            (known(|v| v.key.1), known(|v| v.dataset) || !self.visits.others.is_empty());
        Records {
            count: self.plan.count,
            outings: self.plan.count != Count::Places
                && (observer || visits.iter().any(|v| v.key.2.is_some())),
            places,
            visits: facts(visits),
            effective_observers: observer.then(|| effective(&by_observer)),
            effective_datasets: dataset.then(|| effective(&by_dataset)),
            top_share: [
                observer.then(|| top(&by_observer)),
                dataset.then(|| top(&by_dataset)),
                Some(top_cell(&units)),
            ],
            dates: self.dates,
            ledger: self.ledger,
            units,
        }
    }

    /// The error of a study without records.
    fn nothing_left(&self) -> Diagnostic {
        let extent = self.region.grid().extent();
        let mut text = format!("no record is left after screening ({})", self.ledger.lines().join("; "));
        let mut cure = "check the column names, `crs`, `dates` and `keep` of [records]".to_owned();
        if let Some([w, s, e, n]) = self.hints.extent {
            let [gw, gs, ge, gn] = extent;
            text += &format!(
                "; in the grid's CRS the records span x {w:.4} to {e:.4}, y {s:.4} to {n:.4}, \
                 the grid x {gw:.4} to {ge:.4}, y {gs:.4} to {gn:.4}"
            );
            cure = "state the CRS of the coordinate columns as `crs` in [records]".into();
        }
        if let Some(hint) = self.hints.cure() {
            cure = hint;
        }
        let rule = if self.ledger.read() == 0 { "no_rows" } else { "no_records" };
        if self.ledger.read() == 0 {
            text = "the file holds a header and no rows".into();
            cure = "give a file with records".into();
        }
        Diagnostic::input(rule, self.plan.files.join(", "), text).cure(cure)
    }

    /// A warning about coordinates that look swapped or written with a decimal comma.
    fn smells(&self) -> Option<Diagnostic> {
        let cure = self.hints.cure()?;
        let count = self.hints.swapped.max(self.hints.commas).max(self.hints.large.0);
        (count * 100 >= self.ledger.read()).then(|| {
            Diagnostic::input(
                "coordinates_swapped",
                self.plan.files.join(", "),
                format!("{count} records look misplaced"),
            )
            .cure(cure)
        })
    }
}

impl Hints {
    fn note(&mut self, detail: &str) {
        self.commas += u64::from(detail.contains(','));
        let mut parts = detail.split(' ').map(str::parse::<f64>);
        if let (Some(Ok(x)), Some(Ok(y))) = (parts.next(), parts.next()) {
            self.swapped += u64::from(x.abs() <= 90.0 && y.abs() > 90.0 && y.abs() <= 180.0);
            if x.abs() > 360.0 && y.abs() > 180.0 {
                self.large.0 += 1;
                if self.large.1.is_empty() {
                    detail.clone_into(&mut self.large.1);
                }
            }
        }
    }

    fn stretch(&mut self, x: f64, y: f64) {
        if x.is_finite() && y.is_finite() {
            let [w, s, e, n] = self.extent.unwrap_or([x, y, x, y]);
            self.extent = Some([w.min(x), s.min(y), e.max(x), n.max(y)]);
        }
    }

    fn cure(&self) -> Option<String> {
        if self.swapped > self.commas {
            Some(format!(
                "{} records would be on the map with their coordinates swapped: exchange `longitude` and \
                 `latitude` in [records]",
                self.swapped
            ))
        } else if self.commas > 0 {
            Some(format!(
                "{} records write numbers with a decimal comma: write them with a point",
                self.commas
            ))
        } else if self.large.0 > 0 {
            Some(format!(
                "{} records have coordinates too large for degrees (the first: {}): state their CRS as `crs` in [records] (a vector file: write it into the file with `ogr2ogr -a_srs`)",
                self.large.0, self.large.1
            ))
        } else {
            None
        }
    }
}
