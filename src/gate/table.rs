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
        let short = file.to_lowercase().ends_with(".shp");
        let position = |names: &[String], name: &str| position(names, name, short);
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
        let year_month_day = ["year", "month", "day"].map(|n| position(names, n));
        if plan.dates.is_some() && date.is_none() && year_month_day[0].is_none() {
            missing.push(columns.date.clone());
        }
        if plan.max_uncertainty.is_some() && uncertainty.is_none() {
            missing.push(columns.uncertainty.clone());
        }
        if !missing.is_empty() {
            return Err(missing_columns(file, &missing, names).into());
        }
        let other = |name: &str| position(names, name);
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
            degrees: None,
            datum: text(self.datum),
            filters,
        }
    }

    /// Columns named in `keep` and `leave_out`.
    pub(super) fn filters(&self) -> &[usize] {
        &self.filters
    }
}

/// A column by its exact name, else by its name in another case when only one fits; a shapefile cuts
/// names to ten characters.
fn position(names: &[String], name: &str, short: bool) -> Option<usize> {
    let only = |fits: &dyn Fn(&str) -> bool| {
        let mut found = names.iter().enumerate().filter(|(_, n)| fits(n)).map(|(i, _)| i);
        found.next().filter(|_| found.next().is_none())
    };
    let cut = name.get(..10).unwrap_or(name);
    names
        .iter()
        .position(|n| n == name)
        .or_else(|| only(&|n| n.eq_ignore_ascii_case(name)))
        .or_else(|| if short { only(&|n| n.eq_ignore_ascii_case(cut)) } else { None })
}

fn listed(names: &[String]) -> String {
    let shown: Vec<String> = names.iter().take(40).map(|n| format!("`{n}`")).collect();
    let rest = names.len().saturating_sub(shown.len());
    if rest > 0 { format!("{} and {rest} more", shown.join(", ")) } else { shown.join(", ") }
}

fn missing_columns(file: &str, missing: &[String], names: &[String]) -> Diagnostic {
    let text = format!("has no column {}; it has {}", listed(missing), listed(names));
    Diagnostic::input("missing_column", format!("{file}:1"), text).cure(
        "name the columns in [records], or leave out what needs them (`dates`, `max_uncertainty`, `keep`)",
    )
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
    let mut spans = (0, 0, true);
    let mut filters: Vec<&str> = Vec::new();
    loop {
        let begun = reader.reader.position().line();
        if !reader.next(&mut record, file)? {
            break;
        }
        let line = reader.line_of(&record);
        let byte = reader.reader.position().byte();
        if byte - told > 1 << 20 {
            observer.advance(byte - told);
            told = byte;
        }
        if record.len() == 1 && record[0].trim_ascii().is_empty() && reader.names.len() > 1 {
            continue; // an empty line is no row
        }
        let row = |content| Row { file: index, line, content };
        let read = readable(&record, reader.names.len());
        spans = (begun, reader.reader.position().line(), read.is_ok());
        match read {
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
    reader.all_closed(file, spans)?;
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
    quoted: bool,
    /// Bytes after the byte-order mark.
    length: u64,
    /// How the file ends: with a line feed, and with a quote before it.
    end: (bool, bool),
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
        // a lone carriage return inside a field must not end the row; one at a row's end is cut off
        builder.terminator(Terminator::Any(b'\n'));
        let end = ending(path).map_err(broken)?;
        let length = std::fs::metadata(path).map_err(broken)?.len() - if bom { 3 } else { 0 };
        let mut text = Self { reader: builder.from_reader(source), names: Vec::new(), quoted, length, end };
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

    /// The line on which the row just read begins: the reader stands behind it.
    fn line_of(&self, record: &ByteRecord) -> u64 {
        let inside = record.as_slice().iter().filter(|b| **b == b'\n').count() as u64;
        let cut_off = self.reader.position().byte() >= self.length && !self.end.0;
        self.reader.position().line() - inside - u64::from(!cut_off)
    }

    /// Refuses a file whose last row runs over several lines and does not end as a row should: a quote
    /// was opened and never closed, and everything after it was swallowed.
    fn all_closed(&self, file: &str, (from, to, whole): (u64, u64, bool)) -> Outcome<()> {
        if !self.quoted || to <= from + 1 || (whole && self.end.1) {
            return Ok(());
        }
        let text = format!(
            "a quote opened in the row of line {from} is never closed: the rest of the file is inside it"
        );
        Err(Diagnostic::input("unclosed_quote", format!("{file}:{from}"), text)
            .cure("mend the row, or set `quotes = \"none\"` in [records] if quotes are ordinary characters here")
            .into())
    }

    fn next(&mut self, record: &mut ByteRecord, file: &str) -> Outcome<bool> {
        self.reader.read_byte_record(record).map_err(|e| {
            Diagnostic::input("unreadable", file, format!("cannot be read: {e}"))
                .cure("check the file")
                .into()
        })
    }
}

/// Whether a file ends with a line feed, and whether the last thing before it is a quote.
fn ending(path: &Path) -> std::io::Result<(bool, bool)> {
    let mut file = File::open(path)?;
    let length = file.metadata()?.len();
    file.seek(std::io::SeekFrom::Start(length.saturating_sub(64)))?;
    let mut tail = Vec::new();
    file.read_to_end(&mut tail)?;
    Ok((tail.ends_with(b"\n"), tail.trim_ascii_end().ends_with(b"\"")))
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
