//! Records in delimited text, streamed.

use std::fs::File;
use std::io::Read;
use std::path::Path;

use crate::diag::{Observer, Outcome};
use crate::records::{Batch, Collector, Content, RecordsPlan, Row, Screener};

use super::layout::{Layout, Named, Texts};
use super::text::{Head, Rows, TextSource, Work, scan};

/// Whether a file is gzipped.
pub(super) fn is_gzip(path: &Path) -> bool {
    let mut head = [0; 2];
    File::open(path).and_then(|mut f| f.read_exact(&mut head)).is_ok() && head == [0x1f, 0x8b]
}

/// Whether a file is read as delimited text, gzipped or not: by its ending, or because it is text that no
/// vector driver claims.
pub(super) fn is_text(path: &Path) -> bool {
    let ending = path.extension().map(|e| e.to_string_lossy().to_lowercase()).unwrap_or_default();
    match ending.as_str() {
        "csv" | "tsv" | "txt" | "tab" | "dat" | "psv" => true,
        "gpkg" | "shp" | "geojson" | "json" | "fgb" | "gml" | "kml" | "sqlite" | "db" | "gdb" | "vrt"
        | "tif" | "tiff" => false,
        _ => {
            let mut head = [0; 4096];
            let n = File::open(path).and_then(|mut f| f.read(&mut head)).unwrap_or(0);
            n > 0 && (!head[..n].contains(&0) || head.starts_with(&[0x1f, 0x8b]))
        }
    }
}

impl Texts for Rows<'_> {
    fn own(&self, column: usize) -> &str {
        self.field(column)
    }
}

/// Screens the rows of a text.
struct Screening<'a> {
    screener: &'a Screener<'a>,
    layout: &'a Layout,
    /// Number of the file among those read, and of its source in the plan.
    at: (usize, usize),
}

impl Work for Screening<'_> {
    type Part = Batch;

    fn begin(&self) -> Batch {
        self.screener.batch(self.at.0, self.at.1)
    }

    fn row(&self, batch: &mut Batch, line: u64, rows: &Rows) {
        self.layout.fields(rows, None, |fields| {
            self.screener.push(batch, &Row { line, content: Content::Fields(fields) });
        });
    }

    fn swallowed(&self, batch: &mut Batch, line: u64, lines: u64) {
        self.screener.swallowed(batch, line, lines);
    }

    fn unreadable(&self, batch: &mut Batch, line: u64, why: &str, lines: u64) {
        self.screener.push(batch, &Row { line, content: Content::Unreadable(why, lines) });
    }

    fn end(&self, batch: &mut Batch) -> Outcome<()> {
        self.screener.settle(batch)
    }
}

/// Hands the records of a text file to the collector.
pub(super) fn read(
    text: &TextSource,
    source: usize,
    plan: &RecordsPlan,
    (screener, collector): (&Screener, &mut Collector),
    observer: &dyn Observer,
) -> Outcome<()> {
    let head = Head::open(text)?;
    let named = Named::in_order(&head.names);
    let layout = Layout::find(&named, (plan, &plan.sources[source]), text.name, false)?;
    let file = collector.open(text.name);
    collector.found(file, &layout.matches);
    let work = Screening { screener, layout: &layout, at: (file, source) };
    let remark = scan(text, head, &work, &mut |parts| collector.absorb(parts), observer)?;
    collector.remarks(remark);
    Ok(())
}
