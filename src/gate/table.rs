//! Records in delimited text, streamed.

use std::fs::File;
use std::io::Read;
use std::path::Path;

use crate::diag::{Observer, Outcome};
use crate::records::{Batch, Collector, Content, RecordsPlan, Row, Screener};

use super::layout::{Layout, Named, Texts};
use super::text::{Head, Rows, TextSource, Work, scan};

/// Whether a file is read as delimited text: by its ending, or because it is text that no vector
/// driver claims.
pub(super) fn is_text(path: &Path) -> bool {
    let ending = path.extension().map(|e| e.to_string_lossy().to_lowercase()).unwrap_or_default();
    match ending.as_str() {
        "csv" | "tsv" | "txt" | "tab" | "dat" | "psv" => true,
        "gpkg" | "shp" | "geojson" | "json" | "fgb" | "gml" | "kml" | "sqlite" | "db" | "gdb" | "vrt"
        | "tif" | "tiff" => false,
        _ => {
            let mut head = [0; 4096];
            let n = File::open(path).and_then(|mut f| f.read(&mut head)).unwrap_or(0);
            n > 0 && !head[..n].contains(&0)
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
    file: usize,
}

impl Work for Screening<'_> {
    type Part = Batch;

    fn begin(&self) -> Batch {
        self.screener.batch(self.file)
    }

    fn row(&self, batch: &mut Batch, line: u64, rows: &Rows) {
        self.layout.fields(rows, None, |fields| {
            self.screener.push(batch, &Row { line, content: Content::Fields(fields) });
        });
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
    file: usize,
    plan: &RecordsPlan,
    (screener, collector): (&Screener, &mut Collector),
    observer: &dyn Observer,
) -> Outcome<()> {
    let head = Head::open(text)?;
    let (_, source) = plan.files().nth(file).expect("a file of the plan");
    let layout = Layout::find(&Named::in_order(&head.names), (plan, source), text.name, false)?;
    let work = Screening { screener, layout: &layout, file };
    let remark = scan(text, head, &work, &mut |parts| collector.absorb(parts), observer)?;
    remark.into_iter().for_each(|r| collector.remark(r));
    Ok(())
}
