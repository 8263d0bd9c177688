//! Records in delimited text, streamed.

use std::fs::File;
use std::io::{BufReader, Read, Seek};
use std::path::Path;

use csv::{ByteRecord, Reader, ReaderBuilder, Terminator};

use crate::diag::{Diagnostic, Observer, Outcome};
use crate::records::{Content, Fields, Place, Quotes, RecordsPlan, Row};

/// Separators looked for in a header, in the order in which ties are settled.
const SEPARATORS: [u8; 4] = [b'\t', b',', b';', b'|'];

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

/// Where each field of a row is found; `None` where the file has no such column.
pub(super) struct Columns {
    place: Option<(usize, usize)>,
    date: Option<usize>,
    year_month_day: [Option<usize>; 3],
    observer: Option<usize>,
    dataset: Option<usize>,
    uncertainty: Option<usize>,
    status: Option<usize>,
    individuals: Option<usize>,
    datum: Option<usize>,
    filters: Vec<usize>,
}

impl Columns {
    /// Finds the plan's columns among those of a file; `points`: the place comes from a geometry.
    pub(super) fn find(names: &[String], plan: &RecordsPlan, file: &str, points: bool) -> Outcome<Self> {
        let columns = &plan.columns;
        let mut missing = Vec::new();
        let mut optional = |key: &str, name: &str| {
            let at = position(names, name);
            if at.is_none() && columns.stated.iter().any(|s| s == key) {
                missing.push(name.to_owned());
            }
            at
        };
        let date = optional("date", &columns.date);
        let observer = optional("observer", &columns.observer);
        let dataset = optional("dataset", &columns.dataset);
        let uncertainty = optional("uncertainty", &columns.uncertainty);
        optional("taxon", &columns.taxon);
        let mut required = |name: &str| {
            position(names, name).or_else(|| {
                missing.push(name.to_owned());
                None
            })
        };
        let place =
            if points { None } else { Some((required(&columns.longitude), required(&columns.latitude))) };
        let filters: Vec<Option<usize>> =
            plan.keep.iter().chain(&plan.leave_out).map(|f| required(&f.column)).collect();
        if !missing.is_empty() {
            return Err(missing_columns(file, &missing, names).into());
        }
        let other = |name: &str| position(names, name);
        let year_month_day = ["year", "month", "day"].map(other);
        if plan.count == crate::records::Count::Visits
            && observer.is_none()
            && date.is_none()
            && year_month_day[0].is_none()
        {
            return Err(no_visits(plan, file, names).into());
        }
        Ok(Self {
            place: place.map(|(x, y)| (x.expect("checked"), y.expect("checked"))),
            date,
            year_month_day,
            observer,
            dataset,
            uncertainty,
            status: other("occurrenceStatus"),
            individuals: other("individualCount"),
            datum: other("geodeticDatum"),
            filters: filters.into_iter().flatten().collect(),
        })
    }

    /// The fields of a row, given each column's text; `point` where the place is a geometry.
    pub(super) fn fields<'a>(
        &self,
        at: impl Fn(usize) -> &'a str,
        point: Option<Place<'a>>,
        filters: &'a [&'a str],
    ) -> Fields<'a> {
        let text = |column: Option<usize>| column.map_or("", &at);
        let place = point.or_else(|| self.place.map(|(x, y)| Place::Text { x: at(x), y: at(y) }));
        Fields {
            place: place.unwrap_or(Place::Missing),
            date: text(self.date),
            year_month_day: self.year_month_day.map(text),
            observer: text(self.observer),
            dataset: text(self.dataset),
            uncertainty: text(self.uncertainty),
            status: text(self.status),
            individuals: text(self.individuals),
            datum: text(self.datum),
            filters,
        }
    }

    /// Columns named in `keep` and `leave_out`.
    pub(super) fn filters(&self) -> &[usize] {
        &self.filters
    }
}

/// A column by its exact name, else by its name in another case when only one fits.
fn position(names: &[String], name: &str) -> Option<usize> {
    names.iter().position(|n| n == name).or_else(|| {
        let mut fits = names.iter().enumerate().filter(|(_, n)| n.eq_ignore_ascii_case(name)).map(|(i, _)| i);
        fits.next().filter(|_| fits.next().is_none())
    })
}

fn listed(names: &[String]) -> String {
    let shown: Vec<String> = names.iter().take(40).map(|n| format!("`{n}`")).collect();
    let rest = names.len().saturating_sub(shown.len());
    if rest > 0 { format!("{} and {rest} more", shown.join(", ")) } else { shown.join(", ") }
}

fn missing_columns(file: &str, missing: &[String], names: &[String]) -> Diagnostic {
    let text = format!("has no column {}; it has {}", listed(missing), listed(names));
    Diagnostic::input("missing_column", format!("{file}:1"), text).cure("name the columns in [records]")
}

fn no_visits(plan: &RecordsPlan, file: &str, names: &[String]) -> Diagnostic {
    let text = format!(
        "has neither a date column (`{}`) nor an observer column (`{}`), so visits cannot be told; it has {}",
        plan.columns.date,
        plan.columns.observer,
        listed(names)
    );
    Diagnostic::input("no_visits", format!("{file}:1"), text)
        .cure("name one of them in [records], or set `count = \"records\"` or `\"places\"`")
}

/// Streams the rows of a text file.
pub(super) fn read(
    path: &Path,
    (file, index): (&str, usize),
    plan: &RecordsPlan,
    each: &mut dyn FnMut(&Row) -> Outcome<()>,
    observer: &dyn Observer,
) -> Outcome<()> {
    let mut reader = Text::open(path, file, plan.quotes)?;
    let columns = Columns::find(&reader.names, plan, file, false)?;
    observer.begin(&format!("read {file}"), std::fs::metadata(path).ok().map(|m| m.len()));
    let mut record = ByteRecord::new();
    let mut told = 0;
    let mut filters: Vec<&str> = Vec::new();
    while reader.next(&mut record, file)? {
        let line = record.position().map_or(0, csv::Position::line);
        let byte = record.position().map_or(0, csv::Position::byte);
        if byte - told > 1 << 20 {
            observer.advance(byte - told);
            told = byte;
        }
        let row = |content| Row { file: index, line, content };
        match readable(&record, reader.names.len()) {
            Err(why) => each(&row(Content::Unreadable(&why)))?,
            Ok(text) => {
                let at = |column: usize| {
                    let range = record.range(column).expect("the row has all columns");
                    text[range].trim_end_matches('\r')
                };
                filters.clear();
                let mut named = std::mem::take(&mut filters);
                named.extend(columns.filters().iter().map(|c| at(*c)));
                each(&row(Content::Fields(columns.fields(at, None, &named))))?;
            }
        }
    }
    observer.end();
    Ok(())
}

/// The text of a row, or why it cannot be read.
fn readable(record: &ByteRecord, columns: usize) -> Result<&str, String> {
    if record.len() != columns {
        return Err(format!("{} fields instead of {columns}", record.len()));
    }
    if record.as_slice().contains(&0) {
        return Err("a NUL byte".into());
    }
    std::str::from_utf8(record.as_slice()).map_err(|_| "bytes that are not UTF-8".into())
}

/// A text file after its header.
struct Text {
    reader: Reader<BufReader<File>>,
    names: Vec<String>,
}

impl Text {
    fn open(path: &Path, file: &str, quotes: Option<Quotes>) -> Outcome<Self> {
        let broken = |e: std::io::Error| {
            Diagnostic::input("unreadable", file, format!("cannot be read: {e}")).cure("check the file")
        };
        let mut source = BufReader::with_capacity(1 << 18, File::open(path).map_err(broken)?);
        let mut head = vec![0; 1 << 16];
        let mut n = 0;
        while n < head.len() {
            let more = source.read(&mut head[n..]).map_err(broken)?;
            if more == 0 {
                break;
            }
            n += more;
        }
        head.truncate(n);
        if head.contains(&0) {
            return Err(Diagnostic::input("not_text", file, "holds NUL bytes: it is no text")
                .cure("give delimited text in UTF-8, or a vector file")
                .into());
        }
        let bom = head.starts_with(b"\xEF\xBB\xBF");
        let header = head.split(|b| *b == b'\n').next().unwrap_or_default();
        let separator = separator(header);
        let quoted = quotes.map_or(separator != b'\t', |q| q == Quotes::Double);
        source.seek(std::io::SeekFrom::Start(if bom { 3 } else { 0 })).map_err(broken)?;
        let mut builder = ReaderBuilder::new();
        builder.delimiter(separator).quoting(quoted).flexible(true).has_headers(false);
        if !quoted {
            // a lone carriage return inside a field must not end the row
            builder.terminator(Terminator::Any(b'\n'));
        }
        let mut text = Self { reader: builder.from_reader(source), names: Vec::new() };
        let mut record = ByteRecord::new();
        if !text.next(&mut record, file)? {
            return Err(Diagnostic::input("empty_file", file, "holds no header")
                .cure("give the real file")
                .into());
        }
        text.names = record.iter().map(|n| String::from_utf8_lossy(n).trim().to_owned()).collect();
        unique(&text.names, file)?;
        Ok(text)
    }

    fn next(&mut self, record: &mut ByteRecord, file: &str) -> Outcome<bool> {
        self.reader.read_byte_record(record).map_err(|e| {
            Diagnostic::input("unreadable", file, format!("cannot be read: {e}"))
                .cure("check the file")
                .into()
        })
    }
}

/// The separator that stands most often in the header, outside quotes.
fn separator(header: &[u8]) -> u8 {
    let mut quoted = false;
    let mut counts = [0; SEPARATORS.len()];
    for byte in header {
        if *byte == b'"' {
            quoted = !quoted;
        } else if !quoted && let Some(i) = SEPARATORS.iter().position(|s| s == byte) {
            counts[i] += 1;
        }
    }
    let best = (0..counts.len()).fold(0, |b, i| if counts[i] > counts[b] { i } else { b });
    if counts[best] == 0 { b',' } else { SEPARATORS[best] }
}

fn unique(names: &[String], file: &str) -> Outcome<()> {
    let mut seen = std::collections::BTreeSet::new();
    match names.iter().find(|n| !n.is_empty() && !seen.insert(n.as_str())) {
        None => Ok(()),
        Some(twice) => Err(Diagnostic::input(
            "duplicate_column",
            format!("{file}:1"),
            format!("two columns are named `{twice}`"),
        )
        .cure("rename one of them")
        .into()),
    }
}

#[cfg(test)]
mod tests {
    use super::separator;

    #[test]
    fn finds_the_separator() {
        assert_eq!(separator(b"a\tb\tc,d"), b'\t');
        assert_eq!(separator(b"a;b;c"), b';');
        assert_eq!(separator(b"\"a;b;c\",d"), b',');
        assert_eq!(separator(b"one"), b',');
    }
}
