//! Takes screened batches in their order, counts visits, and ends with the records of a study.

use crate::diag::{Diagnostic, Outcome};
use crate::grid::Region;

use super::batch::{Batch, Detail, FINE};
use super::caps::Groups;
use super::desk::Match;
use super::ledger::{Ledger, Rule};
use super::names::Names;
use super::piles::Piles;
use super::settings::{Count, RecordsPlan};
use super::shares::{by_dataset, by_observer, effective, facts, top, top_cell, weight};
use super::signs::Signs;
use super::smells;
use super::units::{Reach, Records, Unit};
use super::visits::{Numbered, PARTS, Part, Sorted, count, days, outings, sorted};

/// Takes note of rows that were dropped.
pub trait Sink: Send {
    /// A row was dropped.
    ///
    /// # Errors
    /// When it cannot be noted.
    fn dropped(&mut self, file: &str, line: u64, rule: Rule, detail: &Detail) -> Outcome<()>;
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

/// Gathers batches.
pub struct Collector<'a> {
    plan: &'a RecordsPlan,
    region: &'a Region,
    sink: &'a mut dyn Sink,
    keep: bool,
    /// Names of the files read.
    pub(super) files: Vec<String>,
    pub(super) matches: Vec<(u32, Vec<Match>)>,
    ledger: Ledger,
    rows: u64,
    observers: Names,
    datasets: Names,
    parts: Vec<Part>,
    piles: Piles,
    dates: [u64; 5],
    signs: Signs,
    pub(super) remarks: Vec<Diagnostic>,
}

/// What was gathered.
pub struct Gathering {
    /// Names of the files read, parts of folders and archives one by one.
    pub files: Vec<String>,
    /// How the columns of each were found.
    pub matches: Vec<(u32, Vec<Match>)>,
    /// The records.
    pub records: Records,
    /// Records kept, where asked for.
    pub kept: Vec<Kept>,
    /// What smells.
    pub smells: Vec<Diagnostic>,
}

impl<'a> Collector<'a> {
    /// Starts gathering; `keep`: also remembers which records were kept.
    pub fn new(plan: &'a RecordsPlan, region: &'a Region, sink: &'a mut dyn Sink, keep: bool) -> Self {
        Self {
            plan,
            region,
            sink,
            keep,
            files: Vec::new(),
            matches: Vec::new(),
            ledger: Ledger::default(),
            rows: 0,
            observers: Names::default(),
            datasets: Names::default(),
            parts: (0..PARTS).map(|_| Part::default()).collect(),
            piles: Piles::default(),
            dates: [0; 5],
            signs: Signs::default(),
            remarks: Vec::new(),
        }
    }

    /// Takes batches that are settled, each with the line from which its rows are counted.
    ///
    /// # Errors
    /// When a dropped record cannot be noted.
    pub(super) fn absorb(&mut self, batches: Vec<(Batch, u64)>) -> Outcome<()> {
        let mut numbered = Vec::with_capacity(batches.len());
        for (batch, line) in batches {
            for d in &batch.dropped {
                self.sink.dropped(&self.files[batch.file as usize], d.line + line, d.rule, &d.detail)?;
            }
            self.ledger.join(&batch.ledger);
            self.rows += batch.dates.iter().sum::<u64>();
            self.dates.iter_mut().zip(batch.dates).for_each(|(mine, theirs)| *mine += theirs);
            self.signs.join(&batch.signs, line);
            let observers = self.observers.adopt(&batch.observers);
            let datasets = self.datasets.adopt(&batch.datasets);
            numbered.push(Numbered { batch, observers, datasets, line });
        }
        count(&mut self.parts, &mut self.piles, &numbered, self.keep);
        Ok(())
    }

    /// Ends the gathering.
    ///
    /// # Errors
    /// When no record is left (the error holds the ledger and what may be wrong), or a cap cannot be met.
    pub fn finish(mut self) -> Outcome<Gathering> {
        if self.rows != self.ledger.read() {
            let text = format!("{} rows were read, {} are accounted for", self.rows, self.ledger.read());
            return Err(Diagnostic::defect("rows_lost", text).into());
        }
        if self.ledger.kept() == 0 {
            let mut problems = self.remarks;
            let extent = self.region.grid().extent();
            problems.push(smells::nothing_left(&self.files, &self.ledger, &self.signs, extent));
            return Err(crate::diag::Problems(problems));
        }
        let parts = std::mem::take(&mut self.parts);
        let mut sorted = sorted(parts, &self.observers, &self.datasets);
        let kept = std::mem::take(&mut sorted.kept);
        let cell = |visit: u32| sorted.visits[visit as usize].key.0;
        let kept = kept
            .iter()
            .map(|k| Kept { file: k.file as usize, line: k.line, cell: cell(k.visit), visit: k.visit + 1 })
            .collect();
        let piles = self.piles.largest();
        let mut smells = std::mem::take(&mut self.remarks);
        let (signs, region) = (self.signs.clone(), self.region);
        let (files, matches) = (std::mem::take(&mut self.files), std::mem::take(&mut self.matches));
        let dataset_names = self.datasets.in_order();
        let records = self.records(&sorted, piles)?;
        smells.extend(smells::all(&files, region, &signs, &records, &dataset_names));
        Ok(Gathering { files, matches, records, kept, smells })
    }

    fn records(self, sorted: &Sorted, piles: Vec<super::piles::Pile>) -> Outcome<Records> {
        let (visits, count) = (&sorted.visits, self.plan.count);
        let (mut units, facts) = rayon::join(|| units(visits, count), || facts(visits));
        let groups = Groups::new(self.plan.cap, sorted, count);
        let capped = match &groups {
            Some(groups) => groups.cap(&mut units)?,
            None => Vec::new(),
        };
        let (observers, datasets) =
            rayon::join(|| by_observer(visits, &units), || by_dataset(sorted, &units));
        if count == Count::Places {
            units.dedup_by_key(|u| u.cell); // visits are sorted by cell
            units.iter_mut().enumerate().for_each(|(n, u)| {
                (u.outing, u.offset, u.number) = (u.cell, [0.0; 2], n as u32);
            });
        }
        let places = visits.chunk_by(|a, b| a.key.0 == b.key.0).count();
        let observer = visits.iter().any(|v| v.key.1 > 0);
        let dataset = visits.iter().any(|v| v.dataset > 0) || !sorted.others.is_empty();
        Ok(Records {
            count,
            outings: count != Count::Places && (observer || visits.iter().any(|v| v.key.2.is_some())),
            places,
            visits: facts,
            effective_observers: observer.then(|| effective(&observers)),
            effective_datasets: dataset.then(|| effective(&datasets)),
            top: [observer.then(|| top(&observers)), dataset.then(|| top(&datasets)), Some(top_cell(&units))],
            dates: self.dates,
            ledger: self.ledger,
            reach: Reach {
                extent: self.signs.extent,
                days: days(visits),
                observers: observers.keys().filter(|k| **k > 0).count(),
                datasets: datasets.keys().filter(|k| **k > 0).count(),
            },
            lattices: smells::lattices(&self.signs),
            piles,
            capped,
            groups: groups.map(std::sync::Arc::new),
            units,
        })
    }
}

/// Visits as units of effort.
fn units(visits: &[super::visits::Visit], count: Count) -> Vec<Unit> {
    let outings = outings(visits);
    let unit = |(n, (v, outing)): (usize, (&super::visits::Visit, u32))| Unit {
        number: n as u32,
        cell: v.key.0,
        weight: weight(v, count),
        outing,
        uncertainty: v.uncertainty,
        offset: v.offset.map(|o| (o as f64 / FINE / f64::from(v.records)) as f32),
    };
    visits.iter().zip(outings).enumerate().map(unit).collect()
}
