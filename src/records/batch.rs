//! Screens rows, many batches at once, and finds the cells of those that pass.
//!
//! A batch holds only its own rows; the collector takes batches in their order.

use std::fmt;
use std::sync::Arc;

use crate::diag::Outcome;
use crate::grid::{CrsKind, Region};

use super::ledger::{Ledger, Rule};
use super::names::Names;
use super::row::{Content, Fields, Row, trimmed};
use super::screen::{Passed, Radius, date_of, precision};
use super::settings::RecordsPlan;
use super::signs::{Seen, Signs, Turn};
use super::snap::Snapper;
use super::visits::{Days, PARTS, day_numbers, observer_set, part_of};
use crate::units::Metres;

/// How coordinates of each source become the grid's.
pub trait Projection: Sync {
    /// Whether a source's coordinates are longitudes and latitudes.
    fn degrees(&self, source: usize) -> bool;

    /// West, south, east, north of the region in a source's coordinates (west above east: across the
    /// antimeridian); `None` where there is no telling.
    fn window(&self, source: usize) -> Option<[f64; 4]>;

    /// Turns coordinates of a source (or of a row's own datum or CRS) into the grid's, in place; a place
    /// that cannot be turned becomes not-a-number.
    ///
    /// # Errors
    /// When there is no way from the one to the other.
    fn turn(&self, source: usize, datum: &str, x: &mut [f64], y: &mut [f64]) -> Outcome<()>;
}

/// What more there is to say of a dropped row.
#[derive(Debug, Clone, PartialEq)]
pub enum Detail {
    /// Words.
    Text(String),
    /// A place on the grid's CRS.
    Place(f64, f64),
}

impl fmt::Display for Detail {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Text(text) => f.write_str(text),
            Self::Place(x, y) if x.is_finite() => write!(f, "{x:.5} {y:.5}"),
            Self::Place(..) => f.write_str("no place on the grid's CRS"),
        }
    }
}

/// A row that was dropped; its line is counted from where the batch begins.
pub(super) struct Dropped {
    pub(super) line: u64,
    pub(super) rule: Rule,
    pub(super) detail: Detail,
}

/// A row that was kept, with its cell.
pub(super) struct Placed {
    pub(super) line: u64,
    pub(super) cell: u32,
    /// Numbers among the batch's own names.
    pub(super) observer: u32,
    pub(super) dataset: u32,
    pub(super) days: Days,
    pub(super) radius: f32,
    /// Where in its cell it lies, in parts of a column and a row.
    pub(super) offset: [i32; 2],
    /// Its coordinates as written.
    pub(super) xy: (f64, f64),
}

/// A row that passed the first rules and waits for its cell.
struct Waiting {
    line: u64,
    passed: Passed,
    observer: u32,
    dataset: u32,
    datum: u32,
    degrees: bool,
}

/// Rows of one file, screened together.
pub struct Batch {
    pub(super) file: u32,
    pub(super) source: usize,
    pub(super) ledger: Ledger,
    pub(super) dropped: Vec<Dropped>,
    pub(super) observers: Names,
    pub(super) datasets: Names,
    pub(super) placed: [Vec<Placed>; PARTS],
    pub(super) dates: [u64; 5],
    pub(super) signs: Signs,
    datums: Names,
    waiting: Vec<Waiting>,
    /// Rows whose coordinates are legal only when swapped.
    twisted: Vec<(u64, f64, f64)>,
}

impl Batch {
    fn drop(&mut self, line: u64, rule: Rule, detail: Detail) {
        self.ledger.drop(rule);
        self.dropped.push(Dropped { line, rule, detail });
    }
}

/// Parts into which a cell's side is divided when positions in it are added up.
pub(super) const FINE: f64 = 65_536.0;

/// Screens rows; many threads may use one at once.
pub struct Screener<'a> {
    plan: &'a RecordsPlan,
    region: Arc<Region>,
    projection: &'a dyn Projection,
    snapper: Option<Snapper>,
    /// What would be snapped from within one cell, where the plan does not ask for as much.
    rim: Option<Snapper>,
}

impl<'a> Screener<'a> {
    /// Makes ready to screen for a region.
    pub fn new(plan: &'a RecordsPlan, region: Arc<Region>, projection: &'a dyn Projection) -> Self {
        let side = region.grid().cell_side();
        let reach = plan.snap.and_then(|s| s.metres(side));
        let rim = side.get() > reach.map_or(0.0, Metres::get);
        Self {
            plan,
            projection,
            snapper: reach.map(|reach| Snapper::new(&region, reach)),
            rim: rim.then(|| Snapper::new(&region, side)),
            region,
        }
    }

    /// An empty batch for rows of a file, by its number among those read and that of its source.
    pub(super) fn batch(&self, file: usize, source: usize) -> Batch {
        Batch {
            file: file as u32,
            source,
            ledger: Ledger::default(),
            dropped: Vec::new(),
            observers: Names::default(),
            datasets: Names::default(),
            placed: Default::default(),
            dates: [0; 5],
            signs: Signs::default(),
            datums: Names::default(),
            waiting: Vec::new(),
            twisted: Vec::new(),
        }
    }

    /// Takes one row.
    pub(super) fn screen(&self, batch: &mut Batch, row: &Row) {
        match &row.content {
            Content::Unreadable(why, lines) => {
                batch.dates[4] += 1;
                batch.signs.swallowed.add(batch.file, row.line, (0.0, 0.0), lines - 1);
                batch.drop(row.line, Rule::UnreadableRow, Detail::Text((*why).to_owned()));
            }
            Content::Fields(fields) => self.take(batch, row.line, fields),
        }
    }

    /// Notes so many lines inside the quotes of a row that look like rows themselves.
    pub(super) fn hold(&self, batch: &mut Batch, line: u64, lines: u64) {
        batch.signs.swallowed.add(batch.file, line, (0.0, 0.0), lines);
    }

    fn take(&self, batch: &mut Batch, line: u64, fields: &Fields) {
        let date = date_of(fields);
        batch.dates[precision(date)] += 1;
        let degrees = fields.degrees.unwrap_or_else(|| self.projection.degrees(batch.source));
        match super::screen::screen(fields, self.plan, degrees, date) {
            Err((rule, detail)) => {
                if rule == Rule::ImpossibleCoordinate {
                    self.note_impossible(batch, line, &detail);
                }
                batch.drop(line, rule, Detail::Text(detail));
            }
            Ok(passed) => {
                match passed.radius {
                    Radius::NotPositive => batch.signs.not_positive.add(batch.file, line, passed.xy, 1),
                    Radius::Unreadable => batch.signs.no_radius.add(batch.file, line, passed.xy, 1),
                    _ => {}
                }
                if date.is_none() && !fields.date.trim().is_empty() {
                    batch.signs.no_date.add(batch.file, line, passed.xy, 1);
                }
                let waiting = Waiting {
                    line,
                    observer: batch.observers.number(&observer_set(fields.observer)),
                    dataset: batch.datasets.number(trimmed(fields.dataset)),
                    datum: batch.datums.number(trimmed(fields.datum)),
                    passed,
                    degrees,
                };
                batch.waiting.push(waiting);
            }
        }
    }

    /// Coordinates that are no legal place may show how they were meant.
    fn note_impossible(&self, batch: &mut Batch, line: u64, detail: &str) {
        let file = batch.file;
        if detail.contains(',') {
            batch.signs.commas.add(file, line, (0.0, 0.0), 1);
        }
        let mut parts = detail.split(' ').map(str::parse::<f64>);
        if let (Some(Ok(x)), Some(Ok(y))) = (parts.next(), parts.next()) {
            if x.abs() <= 90.0 && y.abs() <= 180.0 {
                batch.twisted.push((line, x, y));
            } else if x.abs() > 360.0 && y.abs() > 180.0 {
                batch.signs.large.add(file, line, (x, y), 1);
            }
        }
    }

    /// Finds the cells of the waiting rows; to be called when a batch is full.
    ///
    /// # Errors
    /// When coordinates cannot be turned.
    pub(super) fn place_all(&self, batch: &mut Batch) -> Outcome<()> {
        let waiting = std::mem::take(&mut batch.waiting);
        let datums = std::mem::take(&mut batch.datums);
        let mut by_datum: Vec<Vec<&Waiting>> = vec![Vec::new(); datums.len() + 1];
        waiting.iter().for_each(|w| by_datum[w.datum as usize].push(w));
        for (number, rows) in by_datum.iter().enumerate().filter(|(_, rows)| !rows.is_empty()) {
            let datum = datums.name(number as u32);
            let (mut x, mut y): (Vec<f64>, Vec<f64>) = rows.iter().map(|w| w.passed.xy).unzip();
            self.projection.turn(batch.source, datum, &mut x, &mut y)?;
            let mut strays = std::mem::take(&mut batch.twisted);
            // all cells are looked up before any is used, so that no row waits for memory
            let located = |(x, y): (&f64, &f64)| self.region.grid().locate(*x, *y);
            let flats: Vec<Option<usize>> = x.iter().zip(&y).map(located).collect();
            let cells: Vec<_> = flats.iter().map(|f| (*f, f.and_then(|f| self.region.compact(f)))).collect();
            for (i, row) in rows.iter().enumerate() {
                if !self.place(batch, row, (x[i], y[i]), cells[i]) {
                    strays.push((row.line, row.passed.xy.0, row.passed.xy.1));
                }
            }
            self.try_turned(batch, datum, &strays)?;
        }
        let strays = std::mem::take(&mut batch.twisted);
        self.try_turned(batch, "", &strays)?;
        batch.dropped.sort_by_key(|d| d.line);
        Ok(())
    }

    /// Files a row under its cell, or drops it; `false` when it is outside the grid. `found`: the cell of
    /// the grid, and of the region.
    fn place(
        &self,
        batch: &mut Batch,
        row: &Waiting,
        (x, y): (f64, f64),
        found: (Option<usize>, Option<usize>),
    ) -> bool {
        batch.signs.stretch(x, y);
        let (flat, inside) = found;
        let nearest =
            |snapper: &Option<Snapper>| snapper.as_ref().and_then(|s| s.nearest(&self.region, x, y));
        if let Some(cell) = inside.or_else(|| nearest(&self.snapper)) {
            batch.ledger.keep(inside.is_none());
            let offset = inside.and(flat).map_or([0; 2], |flat| self.offset(flat, x, y));
            batch.signs.kept(Seen { file: batch.file, line: row.line, xy: row.passed.xy }, row.degrees);
            batch.placed[part_of(cell as u32)].push(Placed {
                line: row.line,
                cell: cell as u32,
                observer: row.observer,
                dataset: row.dataset,
                days: row.passed.date.map(day_numbers),
                radius: row.passed.radius.metres().map_or(f32::NAN, |r| r as f32),
                offset,
                xy: row.passed.xy,
            });
            return true;
        }
        if nearest(&self.rim).is_some() {
            batch.signs.near.add(batch.file, row.line, row.passed.xy, 1);
        }
        let rule = if flat.is_some() { Rule::OutsideRegion } else { Rule::OutsideGrid };
        batch.drop(row.line, rule, Detail::Place(x, y));
        flat.is_some()
    }

    /// Where in its cell a place lies, in parts of a column and a row.
    fn offset(&self, flat: usize, x: f64, y: f64) -> [i32; 2] {
        let grid = self.region.grid();
        let (column, row) = grid.position(flat);
        let (cx, cy) = grid.centre(column, row);
        let mut across = (x - cx) / grid.transform[1];
        if grid.crs.kind == CrsKind::Geographic && across.abs() > 1.0 {
            let turn = 360.0 / grid.transform[1];
            across -= (across / turn).round() * turn;
        }
        [across, (y - cy) / grid.transform[5]].map(|part| (part.clamp(-0.5, 0.5) * FINE).round() as i32)
    }

    /// Counts how many rows outside the grid would be inside with their coordinates swapped or of the
    /// other sign.
    fn try_turned(&self, batch: &mut Batch, datum: &str, strays: &[(u64, f64, f64)]) -> Outcome<()> {
        for turn in Turn::ALL {
            let turned = |s: &&(u64, f64, f64)| within(turn.of(s.1, s.2), self.window(batch.source));
            let rows: Vec<&(u64, f64, f64)> = strays.iter().filter(turned).collect();
            if rows.is_empty() {
                continue;
            }
            let (mut x, mut y): (Vec<f64>, Vec<f64>) = rows.iter().map(|s| turn.of(s.1, s.2)).unzip();
            self.projection.turn(batch.source, datum, &mut x, &mut y)?;
            for (i, row) in rows.iter().enumerate() {
                let flat = self.region.grid().locate(x[i], y[i]);
                if flat.is_some_and(|f| self.region.compact(f).is_some()) {
                    batch.signs.turned[turn as usize].add(batch.file, row.0, (row.1, row.2), 1);
                }
            }
        }
        Ok(())
    }

    fn window(&self, source: usize) -> Option<[f64; 4]> {
        self.projection.window(source)
    }
}

/// Whether a place lies in a window.
fn within((x, y): (f64, f64), window: Option<[f64; 4]>) -> bool {
    let Some([w, s, e, n]) = window else { return true };
    let across = if w <= e { (w..=e).contains(&x) } else { x >= w || x <= e };
    across && (s..=n).contains(&y)
}
