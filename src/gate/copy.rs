//! Copies some rows of a file of records: the same columns, as delimited text.
//!
//! A row of text is copied as it stands; rows of other files are written with commas. Where a row's place
//! is not in a column of its own it is added at the end.

use std::io::Write;

use crate::diag::{Diagnostic, Observer, Outcome};
use crate::records::{RecordsPlan, SourcePlan, Spot};

use super::archive::{Archive, Table};
use super::container::Container;
use super::files::Files;
use super::parquet_in;
use super::points::Points;
use super::record_files::{Kind, kind, part_name, plain};
use super::text::{Form, Head, Rows, TextSource, Work, scan};

/// Names of the columns that are added where a row's place is not in one of its own.
const ADDED: [&str; 2] = ["decimalLongitude", "decimalLatitude"];

/// Where rows are copied to.
pub struct Copy<'a> {
    /// The rows wanted, by file and line, in that order.
    kept: &'a [Spot],
    out: &'a mut dyn Write,
    observer: &'a dyn Observer,
    /// Number of the file at hand.
    file: u32,
}

impl<'a> Copy<'a> {
    /// Copies these rows, which are in the order of files and lines.
    pub fn new(kept: &'a [Spot], out: &'a mut dyn Write, observer: &'a dyn Observer) -> Self {
        Self { kept, out, observer, file: 0 }
    }

    /// The row wanted next, if it is this one.
    fn wanted(&mut self, line: u64) -> Option<Spot> {
        let first = *self.kept.first().filter(|s| (s.file, s.line) == (self.file, line))?;
        self.kept = &self.kept[1..];
        Some(first)
    }

    fn write(&mut self, bytes: &[u8]) -> Outcome<()> {
        self.out.write_all(bytes).map_err(|e| unwritten(&e.to_string()).into())
    }
}

fn unwritten(why: &str) -> Diagnostic {
    Diagnostic::output("cannot_write", "the thinned records", format!("cannot be written: {why}"))
        .cure("free some space, or give another file with `-o`")
}

impl Files {
    /// Copies rows of the one file of a plan.
    ///
    /// # Errors
    /// When the file cannot be read again, or the rows cannot be written.
    pub fn copy_records(&self, plan: &RecordsPlan, mut copy: Copy) -> Outcome<()> {
        let (file, source) = plan.files().next().expect("a plan names a file");
        let path = self.path(file)?;
        match kind(&path, file, source.table.as_deref())? {
            Kind::Text => {
                let open = || plain(&path, file);
                let form = Form::Found(source.quotes);
                text(&TextSource { name: file, open: Box::new(open), form }, &[], false, &mut copy)
            }
            Kind::Zipped(container, member) => {
                let name = container.place(&member.name);
                let open = || container.stream(&member.name);
                let form = Form::Found(source.quotes);
                text(&TextSource { name: &name, open: Box::new(open), form }, &[], false, &mut copy)
            }
            Kind::Archive(container, archive) => archived(&container, &archive, &mut copy),
            Kind::Parquet(parts) => {
                for (n, path) in parts.iter().enumerate() {
                    let table = part_name(file, path, parts.len());
                    let table = parquet_in::Table::open(path, &table)?;
                    let all: Vec<usize> = (0..table.names.len()).collect();
                    let mut writer = Writer::new(&mut copy, &table.names, n == 0, false)?;
                    table.each(&all, &mut |line, texts| writer.row(line, texts))?;
                    writer.end()?;
                    copy.file += 1;
                }
                Ok(())
            }
            Kind::Vector => points(self, file, source, &mut copy),
        }
    }
}

fn points(files: &Files, file: &str, source: &SourcePlan, copy: &mut Copy) -> Outcome<()> {
    let points = Points::open(files, file, source)?;
    let mut writer = Writer::new(copy, &points.names, true, points.own.is_some())?;
    points.each(&mut |line, texts, _| writer.row(line, texts))?;
    writer.end()
}

/// Writes rows with commas.
struct Writer<'a, 'b> {
    copy: &'a mut Copy<'b>,
    csv: csv::Writer<Vec<u8>>,
    placed: bool,
}

impl<'a, 'b> Writer<'a, 'b> {
    fn new(copy: &'a mut Copy<'b>, names: &[String], header: bool, placed: bool) -> Outcome<Self> {
        let mut writer = Self { copy, csv: csv::Writer::from_writer(Vec::new()), placed };
        if header {
            let added: &[&str] = if placed { &ADDED } else { &[] };
            writer.put(names.iter().map(String::as_str).chain(added.iter().copied()))?;
        }
        Ok(writer)
    }

    fn put<'t>(&mut self, fields: impl Iterator<Item = &'t str>) -> Outcome<()> {
        self.csv.write_record(fields).map_err(|e| unwritten(&e.to_string()).into())
    }

    fn row(&mut self, line: u64, texts: &[String]) -> Outcome<()> {
        let Some(spot) = self.copy.wanted(line) else { return Ok(()) };
        let place = [spot.xy.0.to_string(), spot.xy.1.to_string()];
        let added = if self.placed { &place[..] } else { &[] };
        self.put(texts.iter().chain(added).map(String::as_str))
    }

    fn end(self) -> Outcome<()> {
        let bytes = self.csv.into_inner().map_err(|e| unwritten(&e.to_string()))?;
        self.copy.write(&bytes)
    }
}

fn archived(container: &Container, archive: &Archive, copy: &mut Copy) -> Outcome<()> {
    let own = |term: &str| archive.records.columns.iter().any(|c| c.term == term && c.index.is_some());
    let placed = !ADDED.iter().all(|term| own(term));
    for location in &archive.records.locations {
        let name = container.place(location);
        let source = super::archived::text((container, location), &name, &archive.records, None);
        text(&source, &terms(&archive.records), placed, copy)?;
    }
    Ok(())
}

/// Names of a table's columns in their order; those that the description does not name get a number.
fn terms(table: &Table) -> Vec<String> {
    let last = table.columns.iter().filter_map(|c| c.index).chain(table.id).max().unwrap_or(0);
    let mut names: Vec<String> = (0..=last).map(|i| format!("column{i}")).collect();
    table.id.into_iter().for_each(|i| names[i] = "id".into());
    table.columns.iter().filter_map(|c| Some((c.index?, &c.term))).for_each(|(i, t)| names[i].clone_from(t));
    names
}

/// Copies rows of a text; `terms` name the columns where the text itself does not.
fn text(source: &TextSource, terms: &[String], placed: bool, copy: &mut Copy) -> Outcome<()> {
    let head = Head::open(source)?;
    let separator = char::from(head.dialect.separator).to_string();
    if copy.file == 0 {
        let mut header = match head.raw.split(|b| *b == head.dialect.terminator).next() {
            Some(line) if !line.is_empty() => line.strip_suffix(b"\r").unwrap_or(line).to_vec(),
            _ => terms.join(&separator).into_bytes(),
        };
        ADDED.iter().filter(|_| placed).for_each(|name| {
            header.extend_from_slice(separator.as_bytes());
            header.extend_from_slice(name.as_bytes());
        });
        header.push(b'\n');
        copy.write(&header)?;
    }
    let observer = copy.observer;
    let mut take = |parts: Vec<(Picked, u64)>| -> Outcome<()> {
        for (part, before) in parts {
            let mut from = 0;
            for (line, to) in part.rows {
                if let Some(spot) = copy.wanted(before + line) {
                    copy.write(&part.bytes[from..to])?;
                    if placed {
                        let place = format!("{separator}{}{separator}{}", spot.xy.0, spot.xy.1);
                        copy.write(place.as_bytes())?;
                    }
                    copy.write(b"\n")?;
                }
                from = to;
            }
        }
        Ok(())
    };
    scan(source, head, &Picking, &mut take, observer)?;
    copy.file += 1;
    Ok(())
}

/// Keeps rows as they stand.
struct Picking;

/// Rows of a block: one behind the other, each with its line and where it ends.
#[derive(Default)]
struct Picked {
    bytes: Vec<u8>,
    rows: Vec<(u64, usize)>,
}

impl Work for Picking {
    type Part = Picked;

    fn begin(&self) -> Picked {
        Picked::default()
    }

    fn row(&self, part: &mut Picked, line: u64, rows: &Rows) {
        part.bytes.extend_from_slice(rows.raw());
        part.rows.push((line, part.bytes.len()));
    }

    fn unreadable(&self, _: &mut Picked, _: u64, _: &str, _: u64) {}

    fn end(&self, _: &mut Picked) -> Outcome<()> {
        Ok(())
    }
}
