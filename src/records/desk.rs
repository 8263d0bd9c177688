//! What the gate hands rows to: a desk where many threads look at them, and a tray that takes what
//! became of them in order.

use crate::diag::{Diagnostic, Outcome};

use super::batch::{Batch, Screener};
use super::collect::Collector;
use super::row::Row;

/// How a column was found.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Match {
    /// What it serves as: a key of the plan, or a term that is read wherever it stands.
    pub role: String,
    /// The name looked for.
    pub wanted: String,
    /// The name found.
    pub column: String,
}

impl Match {
    /// How the column was found, in words; empty where it has the very name.
    pub fn how(&self) -> &'static str {
        if self.column == self.wanted {
            ""
        } else if self.column.eq_ignore_ascii_case(&self.wanted) {
            "in another case"
        } else if self.wanted.to_lowercase().starts_with(&self.column.to_lowercase()) {
            "its name cut short"
        } else {
            "its name in full"
        }
    }
}

/// Looks at rows; many parts may be worked on at once.
pub trait Desk: Sync {
    /// What rows of one file become.
    type Part: Send;

    /// Begins a part for rows of a file, by its number among those read and that of its source.
    fn begin(&self, file: usize, source: usize) -> Self::Part;

    /// Looks at a row.
    fn push(&self, part: &mut Self::Part, row: &Row);

    /// Notes so many lines inside the quotes of a row that look like rows themselves.
    fn swallowed(&self, _part: &mut Self::Part, _line: u64, _lines: u64) {}

    /// Ends a part.
    ///
    /// # Errors
    /// When its rows cannot be used.
    fn settle(&self, part: &mut Self::Part) -> Outcome<()>;
}

/// Takes parts in their order.
pub trait Tray<P> {
    /// Notes that a file is read now; its number.
    fn open(&mut self, name: &str) -> usize;

    /// Notes how the columns of a file were found.
    fn found(&mut self, file: usize, matches: &[Match]);

    /// Notes what about a file deserves attention.
    fn remark(&mut self, remark: Diagnostic);

    /// Takes parts that are settled, each with the line from which its rows are counted.
    ///
    /// # Errors
    /// When they cannot be taken.
    fn take(&mut self, parts: Vec<(P, u64)>) -> Outcome<()>;
}

impl Desk for Screener<'_> {
    type Part = Batch;

    fn begin(&self, file: usize, source: usize) -> Batch {
        self.batch(file, source)
    }

    fn push(&self, part: &mut Batch, row: &Row) {
        self.screen(part, row);
    }

    fn swallowed(&self, part: &mut Batch, line: u64, lines: u64) {
        self.hold(part, line, lines);
    }

    fn settle(&self, part: &mut Batch) -> Outcome<()> {
        self.place_all(part)
    }
}

impl Tray<Batch> for Collector<'_> {
    fn open(&mut self, name: &str) -> usize {
        self.files.push(name.to_owned());
        self.files.len() - 1
    }

    fn found(&mut self, file: usize, matches: &[Match]) {
        self.matches.push((file as u32, matches.to_vec()));
    }

    fn remark(&mut self, remark: Diagnostic) {
        self.remarks.push(remark);
    }

    fn take(&mut self, parts: Vec<(Batch, u64)>) -> Outcome<()> {
        self.absorb(parts)
    }
}
