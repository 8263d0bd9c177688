//! Records in Parquet, part by part, streamed in batches of rows.

use std::fs::File;
use std::io::Read;
use std::path::{Path, PathBuf};

use arrow_array::cast::AsArray;
use arrow_array::{Array, ArrayRef, RecordBatch, StringArray};
use arrow_schema::DataType;
use parquet::arrow::ProjectionMask;
use parquet::arrow::arrow_reader::{ParquetRecordBatchReader, ParquetRecordBatchReaderBuilder};
use rayon::prelude::*;

use crate::diag::{Diagnostic, Observer, Outcome};
use crate::records::{Batch, Collector, Content, RecordsPlan, Row, Screener};

use super::layout::{Layout, Named, Texts};

/// Rows read together, and how many such batches are screened at once.
const BATCH: (usize, usize) = (16_384, 8);

/// Whether a file is Parquet, by its first bytes.
pub(super) fn is_parquet(path: &Path) -> bool {
    let mut head = [0; 4];
    File::open(path).and_then(|mut f| f.read_exact(&mut head)).is_ok() && &head == b"PAR1"
}

/// The parts of a folder, by name; empty where it holds none. What systems that write such folders put
/// beside the parts (names that begin with a dot or an underscore) is passed over.
pub(super) fn parts(folder: &Path) -> Vec<PathBuf> {
    let entries = std::fs::read_dir(folder).into_iter().flatten().flatten().map(|e| e.path());
    let aside = |p: &PathBuf| p.file_name().is_some_and(|n| n.to_string_lossy().starts_with(['.', '_']));
    let mut parts: Vec<PathBuf> = entries.filter(|p| p.is_file() && !aside(p) && is_parquet(p)).collect();
    parts.sort();
    parts
}

/// A part: the file, what messages call it, and the number of its source in the plan.
pub(super) struct PartFile<'a> {
    pub(super) path: &'a Path,
    pub(super) name: &'a str,
    pub(super) source: usize,
}

/// Hands the rows of one file to the collector.
pub(super) fn read(
    part: &PartFile,
    plan: &RecordsPlan,
    (screener, collector): (&Screener, &mut Collector),
    observer: &dyn Observer,
) -> Outcome<()> {
    let number = collector.open(part.name);
    let builder = File::open(part.path).map_err(|e| broken(part.name, &e.to_string())).and_then(|f| {
        ParquetRecordBatchReaderBuilder::try_new(f).map_err(|e| broken(part.name, &e.to_string()))
    })?;
    let names: Vec<String> = builder.schema().fields().iter().map(|f| f.name().clone()).collect();
    let named = Named::in_order(&names);
    let layout = Layout::find(&named, (plan, &plan.sources[part.source]), part.name, false)?;
    collector.found(number, &layout.matches);
    let wanted = layout.columns();
    let mask = ProjectionMask::roots(builder.parquet_schema(), wanted.iter().copied());
    let mut reader = builder
        .with_projection(mask)
        .with_batch_size(BATCH.0)
        .build()
        .map_err(|e| broken(part.name, &e.to_string()))?;
    let mut row = 0;
    loop {
        let round = round(&mut reader, part.name)?;
        if round.is_empty() {
            return Ok(());
        }
        let screen = |rows: &RecordBatch| -> Outcome<Batch> {
            let texts = columns(rows, &wanted, (names.len(), part.name))?;
            let mut batch = screener.batch(number, part.source);
            for i in 0..rows.num_rows() {
                layout.fields(&RowOf { texts: &texts, row: i }, None, |fields| {
                    let line = i as u64 + 1;
                    screener.push(&mut batch, &Row { line, content: Content::Fields(fields) });
                });
            }
            screener.settle(&mut batch)?;
            Ok(batch)
        };
        let screened: Vec<Outcome<Batch>> = round.par_iter().map(screen).collect();
        let mut batches = Vec::with_capacity(round.len());
        for (batch, rows) in screened.into_iter().zip(&round) {
            batches.push((batch?, row));
            row += rows.num_rows() as u64;
            observer.advance(rows.num_rows() as u64);
        }
        collector.absorb(batches)?;
    }
}

fn round(reader: &mut ParquetRecordBatchReader, name: &str) -> Outcome<Vec<RecordBatch>> {
    let batches = reader.by_ref().take(BATCH.1);
    batches.map(|b| b.map_err(|e| broken(name, &e.to_string()).into())).collect()
}

/// The rows of a whole file, as text in all columns, for whoever wants them as they are.
pub(super) fn schema_and_rows(
    path: &Path,
    name: &str,
) -> Outcome<(arrow_schema::SchemaRef, ParquetRecordBatchReader)> {
    let builder = File::open(path).map_err(|e| broken(name, &e.to_string())).and_then(|f| {
        ParquetRecordBatchReaderBuilder::try_new(f).map_err(|e| broken(name, &e.to_string()))
    })?;
    let schema = builder.schema().clone();
    let reader = builder.with_batch_size(BATCH.0).build().map_err(|e| broken(name, &e.to_string()))?;
    Ok((schema, reader))
}

/// One row of columns as text.
struct RowOf<'a> {
    texts: &'a [Option<StringArray>],
    row: usize,
}

impl Texts for RowOf<'_> {
    fn own(&self, column: usize) -> &str {
        match &self.texts[column] {
            Some(array) if !array.is_null(self.row) => array.value(self.row),
            _ => "",
        }
    }
}

/// The columns read, as text, each at its place among all columns of the file.
fn columns(
    rows: &RecordBatch,
    wanted: &[usize],
    (all, name): (usize, &str),
) -> Outcome<Vec<Option<StringArray>>> {
    let mut texts: Vec<Option<StringArray>> = (0..all).map(|_| None).collect();
    for (n, column) in wanted.iter().enumerate() {
        let label = rows.schema().field(n).name().clone();
        texts[*column] = Some(text(rows.column(n)).ok_or_else(|| no_text(name, &label, rows.column(n)))?);
    }
    Ok(texts)
}

/// A column as text; lists become names between bars.
fn text(array: &ArrayRef) -> Option<StringArray> {
    match array.data_type() {
        DataType::List(_) => {
            let list = array.as_list::<i32>();
            let joined = |i: usize| -> Option<String> {
                let inner = text(&list.value(i))?;
                Some(inner.iter().flatten().collect::<Vec<_>>().join(" | "))
            };
            (0..list.len())
                .map(|i| Some(Some(if list.is_null(i) { String::new() } else { joined(i)? })))
                .collect()
        }
        DataType::Struct(fields) if fields.len() == 1 => text(array.as_struct().column(0)),
        _ => Some(arrow_cast::cast(array, &DataType::Utf8).ok()?.as_string::<i32>().clone()),
    }
}

fn no_text(file: &str, column: &str, array: &ArrayRef) -> Diagnostic {
    let text = format!("column `{column}` is a {}, which is no text, number or date", array.data_type());
    Diagnostic::input("unusable_column", file, text).cure("write the column as text, or name another")
}

/// A file that cannot be read to its end.
fn broken(file: &str, why: &str) -> Diagnostic {
    Diagnostic::input("cut_off", file, format!("is no whole Parquet file ({why})"))
        .cure("fetch the file again")
}
