//! Records in delimited text, streamed.

use std::fs::File;
use std::io::Read;
use std::path::Path;

use crate::diag::Outcome;
use crate::records::{Content, Desk, Row};

use super::layout::{Layout, Named, Texts};
use super::record_files::Reading;
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

/// Hands the rows of a text to a desk.
struct Handing<'a, D> {
    desk: &'a D,
    layout: &'a Layout,
    /// Number of the file among those read, and of its source in the plan.
    at: (usize, usize),
}

impl<D: Desk> Work for Handing<'_, D> {
    type Part = D::Part;

    fn begin(&self) -> D::Part {
        self.desk.begin(self.at.0, self.at.1)
    }

    fn row(&self, part: &mut D::Part, line: u64, rows: &Rows) {
        self.layout.fields(rows, None, |fields| {
            self.desk.push(part, &Row { line, content: Content::Fields(fields) });
        });
    }

    fn swallowed(&self, part: &mut D::Part, line: u64, lines: u64) {
        self.desk.swallowed(part, line, lines);
    }

    fn unreadable(&self, part: &mut D::Part, line: u64, why: &str, lines: u64) {
        self.desk.push(part, &Row { line, content: Content::Unreadable(why, lines) });
    }

    fn end(&self, part: &mut D::Part) -> Outcome<()> {
        self.desk.settle(part)
    }
}

/// Hands the records of a text on.
pub(super) fn read<D: Desk>(text: &TextSource, to: &mut Reading<D>) -> Outcome<()> {
    let head = Head::open(text)?;
    let layout = Layout::find(&Named::in_order(&head.names), (to.plan, to.source()), text.name, false)?;
    let file = to.tray.open(text.name);
    to.tray.found(file, &layout.matches);
    let work = Handing { desk: to.desk, layout: &layout, at: (file, to.number) };
    let tray = &mut *to.tray;
    let remark = scan(text, head, &work, &mut |parts| tray.take(parts), to.observer)?;
    remark.into_iter().for_each(|r| to.tray.remark(r));
    Ok(())
}
