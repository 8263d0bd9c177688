//! The places of records to be thinned: only where each row lies, nothing else of it.

use crate::diag::{Diagnostic, Outcome};
use crate::records::{Content, Desk, Match, Place, Projection, Row, Tray};

/// A row with a place.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Spot {
    /// Number of its file.
    pub file: u32,
    /// Its line, row or feature id.
    pub line: u64,
    /// Where it lies.
    pub xy: (f64, f64),
}

/// Notes where rows lie.
pub struct Spotter<'a> {
    projection: &'a dyn Projection,
}

/// Rows of one file.
pub struct Spots {
    file: u32,
    source: usize,
    found: Vec<Spot>,
    datums: Vec<(String, Vec<usize>)>,
    unreadable: u64,
    placeless: u64,
}

/// All rows of all files.
#[derive(Debug, Default)]
pub struct SpotList {
    /// Rows with a place.
    pub spots: Vec<Spot>,
    /// Rows that could not be read.
    pub unreadable: u64,
    /// Rows without a place on Earth.
    pub placeless: u64,
    /// What deserves attention.
    pub remarks: Vec<Diagnostic>,
    files: u32,
}

impl SpotList {
    /// Rows read.
    pub fn read(&self) -> u64 {
        self.spots.len() as u64 + self.unreadable + self.placeless
    }
}

impl<'a> Spotter<'a> {
    /// Notes places as `projection` turns them.
    pub fn new(projection: &'a dyn Projection) -> Self {
        Self { projection }
    }
}

/// Coordinates of a place, where they are numbers in range; both exactly zero stand for none.
fn numbers(place: Place, degrees: bool) -> Option<(f64, f64)> {
    let (x, y) = match place {
        Place::Missing => return None,
        Place::Point(x, y) => (x, y),
        Place::Text { x, y } => (x.trim().parse().ok()?, y.trim().parse().ok()?),
    };
    let legal = if degrees { x.abs() <= 180.0 && y.abs() <= 90.0 } else { x.is_finite() && y.is_finite() };
    (legal && (x, y) != (0.0, 0.0)).then_some((x, y))
}

impl Desk for Spotter<'_> {
    type Part = Spots;

    fn begin(&self, file: usize, source: usize) -> Spots {
        let (found, datums) = (Vec::new(), Vec::new());
        Spots { file: file as u32, source, found, datums, unreadable: 0, placeless: 0 }
    }

    fn push(&self, part: &mut Spots, row: &Row) {
        let Content::Fields(fields) = &row.content else {
            part.unreadable += 1;
            return;
        };
        let degrees = fields.degrees.unwrap_or_else(|| self.projection.degrees(part.source));
        let Some(xy) = numbers(fields.place, degrees) else {
            part.placeless += 1;
            return;
        };
        let datum = fields.datum.trim();
        let number = part.datums.iter().rposition(|d| d.0 == datum).unwrap_or_else(|| {
            part.datums.push((datum.to_owned(), Vec::new()));
            part.datums.len() - 1
        });
        part.datums[number].1.push(part.found.len());
        part.found.push(Spot { file: part.file, line: row.line, xy });
    }

    fn settle(&self, part: &mut Spots) -> Outcome<()> {
        for (datum, rows) in std::mem::take(&mut part.datums) {
            let (mut x, mut y): (Vec<f64>, Vec<f64>) = rows.iter().map(|i| part.found[*i].xy).unzip();
            self.projection.turn(part.source, &datum, &mut x, &mut y)?;
            rows.iter().enumerate().for_each(|(n, i)| part.found[*i].xy = (x[n], y[n]));
        }
        let before = part.found.len();
        part.found.retain(|s| s.xy.0.is_finite() && s.xy.1.is_finite());
        part.placeless += (before - part.found.len()) as u64;
        Ok(())
    }
}

impl Tray<Spots> for SpotList {
    fn open(&mut self, _: &str) -> usize {
        self.files += 1;
        self.files as usize - 1
    }

    fn found(&mut self, _: usize, _: &[Match]) {}

    fn remark(&mut self, remark: Diagnostic) {
        self.remarks.push(remark);
    }

    fn take(&mut self, parts: Vec<(Spots, u64)>) -> Outcome<()> {
        for (part, line) in parts {
            self.unreadable += part.unreadable;
            self.placeless += part.placeless;
            self.spots.extend(part.found.iter().map(|s| Spot { line: s.line + line, ..*s }));
        }
        Ok(())
    }
}
