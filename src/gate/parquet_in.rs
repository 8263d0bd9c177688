//! Rows of Parquet files, streamed.

use std::fs::File;
use std::io::Read;
use std::path::{Path, PathBuf};
use std::sync::Arc;

use jiff::civil::Date;
use jiff::{SignedDuration, Span, Timestamp};
use parquet::basic::{LogicalType, TimeUnit};
use parquet::errors::ParquetError;
use parquet::file::reader::{FileReader, SerializedFileReader};
use parquet::record::Field;
use parquet::schema::types::Type;

use crate::diag::{Diagnostic, Outcome};
use crate::records::{Content, Desk, Row};

use super::layout::{Layout, Named, Texts};
use super::record_files::Reading;

/// Rows screened together.
const BATCH: u64 = 16_384;

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

/// A Parquet file, opened.
pub(super) struct Table<'a> {
    reader: SerializedFileReader<File>,
    /// What messages call it.
    name: &'a str,
    /// Its columns.
    pub(super) names: Vec<String>,
}

impl<'a> Table<'a> {
    /// Opens a file.
    pub(super) fn open(path: &Path, name: &'a str) -> Outcome<Self> {
        let file = File::open(path).map_err(|e| broken(name, &e.to_string()))?;
        let reader = SerializedFileReader::new(file).map_err(|e| broken(name, &e.to_string()))?;
        let schema = reader.metadata().file_metadata().schema();
        let names = schema.get_fields().iter().map(|f| f.name().to_owned()).collect();
        Ok(Self { reader, name, names })
    }

    /// Hands the texts of some columns of every row to `each`, with the row's number from 1.
    pub(super) fn each(
        &self,
        columns: &[usize],
        each: &mut dyn FnMut(u64, &[String]) -> Outcome<()>,
    ) -> Outcome<()> {
        let schema = self.reader.metadata().file_metadata().schema();
        let wanted: Vec<Arc<Type>> = columns.iter().map(|c| schema.get_fields()[*c].clone()).collect();
        let fine: Vec<bool> = wanted.iter().map(|t| in_nanoseconds(t)).collect();
        let fault = |e: ParquetError| broken(self.name, &e.to_string());
        let projection =
            Type::group_type_builder(schema.name()).with_fields(wanted).build().map_err(fault)?;
        let rows = self.reader.get_row_iter(Some(projection)).map_err(fault)?;
        let mut texts = vec![String::new(); columns.len()];
        for (number, row) in rows.enumerate() {
            let row = row.map_err(fault)?;
            for (n, (label, field)) in row.get_column_iter().enumerate() {
                texts[n] = text(field, fine[n]).ok_or_else(|| no_text(self.name, label))?;
            }
            each(number as u64 + 1, &texts)?;
        }
        Ok(())
    }
}

/// Hands the rows of a file on.
pub(super) fn read<D: Desk>(table: &Table, to: &mut Reading<D>) -> Outcome<()> {
    let named = Named::in_order(&table.names);
    let layout = Layout::find(&named, (to.plan, to.source()), table.name, false)?;
    let file = to.tray.open(table.name);
    to.tray.found(file, &layout.matches);
    let wanted = layout.columns();
    let mut places = vec![0; table.names.len()];
    wanted.iter().enumerate().for_each(|(n, column)| places[*column] = n);
    let mut part = to.desk.begin(file, to.number);
    table.each(&wanted, &mut |line, texts| {
        layout.fields(&RowOf { texts, places: &places }, None, |fields| {
            to.desk.push(&mut part, &Row { line, content: Content::Fields(fields) });
        });
        if line % BATCH == 0 {
            to.observer.advance(BATCH);
            let full = std::mem::replace(&mut part, to.desk.begin(file, to.number));
            to.hand(full)?;
        }
        Ok(())
    })?;
    to.hand(part)
}

/// One row's texts, and where each column of the file stands among them.
struct RowOf<'a> {
    texts: &'a [String],
    places: &'a [usize],
}

impl Texts for RowOf<'_> {
    fn own(&self, column: usize) -> &str {
        &self.texts[self.places[column]]
    }
}

/// Whether a column holds times in nanoseconds, which come as bare numbers.
fn in_nanoseconds(column: &Type) -> bool {
    matches!(
        column.get_basic_info().logical_type_ref(),
        Some(LogicalType::Timestamp(t)) if t.unit == TimeUnit::NANOS
    )
}

/// A field as the text a table would hold; lists become names between bars. `None` for what is no text,
/// number or date.
fn text(field: &Field, nanoseconds: bool) -> Option<String> {
    Some(match field {
        Field::Null => String::new(),
        Field::Str(s) => s.clone(),
        Field::Bytes(b) => std::str::from_utf8(b.data()).ok()?.to_owned(),
        Field::Date(days) => {
            Date::constant(1970, 1, 1).checked_add(Span::new().try_days(*days).ok()?).ok()?.to_string()
        }
        Field::TimestampMillis(t) => moment(SignedDuration::from_millis(*t))?,
        Field::TimestampMicros(t) => moment(SignedDuration::from_micros(*t))?,
        Field::Long(t) if nanoseconds => moment(SignedDuration::from_nanos(*t))?,
        Field::Float(v) => v.to_string(),
        Field::Double(v) => v.to_string(),
        Field::Group(row) if row.len() == 1 => text(row.get_column_iter().next()?.1, false)?,
        Field::ListInternal(list) => {
            let all: Option<Vec<String>> = list.elements().iter().map(|f| text(f, false)).collect();
            all?.join(" | ")
        }
        Field::Group(_) | Field::MapInternal(_) => return None,
        number => number.to_string(),
    })
}

/// A moment since 1970 as ISO 8601.
fn moment(since: SignedDuration) -> Option<String> {
    Some(Timestamp::UNIX_EPOCH.checked_add(since).ok()?.to_string())
}

fn no_text(file: &str, column: &str) -> Diagnostic {
    let text = format!("column `{column}` holds something that is no text, number or date");
    Diagnostic::input("unusable_column", file, text).cure("write the column as text, or name another")
}

/// A file that cannot be read to its end.
fn broken(file: &str, why: &str) -> Diagnostic {
    Diagnostic::input("cut_off", file, format!("is no whole Parquet file ({why})"))
        .cure("fetch the file again")
}
