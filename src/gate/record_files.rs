//! Which reader a file of records needs.

use std::fs::File;
use std::io::Read;

use crate::diag::{Diagnostic, Observer, Outcome};
use crate::records::{Collector, RecordsPlan, Screener};

use super::files::Files;
use super::text::{Form, TextSource};
use super::{points, table};

/// Hands the records of a file to the collector.
pub(super) fn read(
    files: &Files,
    (file, index): (&str, usize),
    plan: &RecordsPlan,
    to: (&Screener, &mut Collector),
    observer: &dyn Observer,
) -> Outcome<()> {
    let path = files.path(file)?;
    if !table::is_text(&path) {
        return points::read(files, (file, index), plan, to, observer);
    }
    let (_, source) = plan.files().nth(index).expect("a file of the plan");
    let open = || -> Outcome<Box<dyn Read + Send>> {
        let opened = File::open(&path).map_err(|e| {
            Diagnostic::input("unreadable", file, format!("cannot be opened: {e}")).cure("check the file")
        })?;
        Ok(Box::new(opened))
    };
    let text = TextSource { name: file, open: Box::new(open), form: Form::Found(source.quotes) };
    observer.begin(&format!("read {file}"), std::fs::metadata(&path).ok().map(|m| m.len()));
    table::read(&text, index, plan, to, observer)?;
    observer.end();
    Ok(())
}
