//! Which reader a file of records needs.

use std::fs::File;
use std::path::{Path, PathBuf};

use crate::diag::{Diagnostic, Observer, Outcome};
use crate::records::{Collector, RecordsPlan, Screener};

use super::archive::{self, Archive};
use super::container::{Container, Member, is_archive_folder};
use super::files::Files;
use super::parquet_in::{self, is_parquet};
use super::sources::Peek;
use super::text::{Form, TextSource};
use super::unpack::{Stream, broken, maybe_gzip};
use super::zipped::is_zip;
use super::{points, table};

/// What a file of records is.
pub(super) enum Kind {
    /// Delimited text, gzipped or not.
    Text,
    /// A Darwin Core archive.
    Archive(Container, Box<Archive>),
    /// A table of text in a zip file.
    Zipped(Container, Member),
    /// Parquet files.
    Parquet(Vec<PathBuf>),
    /// A file for a vector driver.
    Vector,
}

/// Finds out what a file of records is; `table`: the one wanted, where it holds several.
pub(super) fn kind(path: &Path, file: &str, table: Option<&str>) -> Outcome<Kind> {
    if path.is_dir() {
        if is_archive_folder(path) {
            let container = Container::open(path, file)?;
            let archive = archive::read(&container)?;
            return Ok(archive.map_or(Kind::Vector, |a| Kind::Archive(container, Box::new(a))));
        }
        let parts = parquet_in::parts(path);
        let vector = path.extension().is_some_and(|e| e.eq_ignore_ascii_case("gdb"));
        return match (parts.is_empty(), vector) {
            (false, _) => Ok(Kind::Parquet(parts)),
            (true, true) => Ok(Kind::Vector),
            (true, false) => Err(no_records(file).into()),
        };
    }
    if is_zip(path) {
        let container = Container::open(path, file)?;
        return match archive::read(&container)? {
            Some(archive) => Ok(Kind::Archive(container, Box::new(archive))),
            None => packed(container, table),
        };
    }
    if is_parquet(path) {
        return Ok(Kind::Parquet(vec![path.to_owned()]));
    }
    Ok(if table::is_text(path) { Kind::Text } else { Kind::Vector })
}

/// What a look at packed records shows; `None` for what is not packed.
///
/// # Errors
/// When a zip file or a folder cannot be used for records.
pub(super) fn peek(path: &Path, file: &str, table: Option<&str>) -> Outcome<Option<Peek>> {
    let look = |kind, count| Peek { file: file.into(), kind, crs: String::new(), extent: None, count };
    Ok(match kind(path, file, table)? {
        Kind::Text | Kind::Vector => None,
        Kind::Zipped(..) => Some(look("text", None)),
        Kind::Archive(..) => Some(look("archive", None)),
        Kind::Parquet(parts) => {
            let rows = |path: &PathBuf| Ok(parquet_in::Table::open(path, file)?.rows());
            Some(look("parquet", Some(parts.iter().map(rows).sum::<Outcome<u64>>()?)))
        }
    })
}

/// The table in a zip file that is no archive: the one named, or the only one.
fn packed(container: Container, table: Option<&str>) -> Outcome<Kind> {
    let members = container.members();
    let texts = members.iter().filter(|m| {
        let name = m.name.to_lowercase();
        [".csv", ".tsv", ".txt", ".tab", ".dat", ".psv"].iter().any(|e| name.ends_with(e))
    });
    let texts: Vec<&Member> = texts.collect();
    let chosen = match table {
        Some(name) => members.iter().find(|m| m.name == name),
        None if members.len() == 1 => members.first(),
        None if texts.len() == 1 => Some(texts[0]),
        None => None,
    };
    match chosen.cloned() {
        Some(member) => Ok(Kind::Zipped(container, member)),
        None => Err(several(&container, &members, table).into()),
    }
}

fn several(container: &Container, members: &[Member], table: Option<&str>) -> Diagnostic {
    if members.iter().any(|m| m.name == "xl/workbook.xml" || m.name == "content.xml") {
        return Diagnostic::input("spreadsheet", container.file.as_str(), "is a spreadsheet")
            .cure("save the sheet of records as delimited text (CSV in UTF-8) and give that");
    }
    let shown: Vec<String> = members.iter().take(20).map(|m| format!("`{}`", m.name)).collect();
    let held = if shown.is_empty() { "nothing".into() } else { shown.join(", ") };
    let text = match table {
        Some(name) => format!("holds no `{name}`; it holds {held}"),
        None => format!(
            "is no Darwin Core archive (no meta.xml), and which table to read is not clear: it holds {held}"
        ),
    };
    Diagnostic::input("which_table", container.file.as_str(), text).cure(
        "name a table of delimited text as `table` in [records], or unpack the file and give what is inside",
    )
}

fn no_records(file: &str) -> Diagnostic {
    Diagnostic::input("no_records_here", file, "is a folder without a meta.xml and without Parquet files")
        .cure("give a file of records, a Darwin Core archive, or a folder of Parquet parts")
}

/// Hands the records of a file to the collector.
pub(super) fn read(
    files: &Files,
    (file, source): (&str, usize),
    plan: &RecordsPlan,
    to: (&Screener, &mut Collector),
    observer: &dyn Observer,
) -> Outcome<()> {
    let path = files.path(file)?;
    let asked = &plan.sources[source];
    let what = format!("read {file}");
    match kind(&path, file, asked.table.as_deref())? {
        Kind::Vector => return points::read(files, (file, source), plan, to, observer),
        Kind::Text => {
            let open = || plain(&path, file);
            let text = TextSource { name: file, open: Box::new(open), form: Form::Found(asked.quotes) };
            observer.begin(&what, unpacked_size(&path));
            table::read(&text, source, plan, to, observer)?;
        }
        Kind::Zipped(container, member) => {
            let name = container.place(&member.name);
            let open = || container.stream(&member.name);
            let text = TextSource { name: &name, open: Box::new(open), form: Form::Found(asked.quotes) };
            observer.begin(&what, Some(member.size));
            table::read(&text, source, plan, to, observer)?;
        }
        Kind::Archive(container, archive) => {
            observer.begin(&what, archive_size(&container, &archive));
            super::archived::read(&container, &archive, (plan, source), to, observer)?;
        }
        Kind::Parquet(parts) => {
            observer.begin(&what, None);
            let (screener, collector) = to;
            for path in &parts {
                let name = part_name(file, path, parts.len());
                let table = parquet_in::Table::open(path, &name)?;
                parquet_in::read(&table, (plan, source), (screener, &mut *collector), observer)?;
            }
        }
    }
    observer.end();
    Ok(())
}

/// What messages call a part of a folder.
pub(super) fn part_name(file: &str, path: &Path, parts: usize) -> String {
    let name = path.file_name().map(|n| n.to_string_lossy().into_owned()).unwrap_or_default();
    if parts == 1 && !file.ends_with('/') && Path::new(file).file_name().is_some_and(|f| *f == *name) {
        file.to_owned()
    } else {
        format!("{}/{name}", file.trim_end_matches('/'))
    }
}

/// Opens a text, unpacked if it is gzipped.
pub(super) fn plain(path: &Path, file: &str) -> Outcome<Stream> {
    let opened = File::open(path).and_then(maybe_gzip);
    opened.map_err(|e| broken(file, &e).into())
}

/// Bytes of a text, where they are known before it is read.
fn unpacked_size(path: &Path) -> Option<u64> {
    if table::is_gzip(path) { None } else { std::fs::metadata(path).ok().map(|m| m.len()) }
}

fn archive_size(container: &Container, archive: &Archive) -> Option<u64> {
    let tables = std::iter::once(&archive.records).chain(&archive.core);
    tables.flat_map(|t| &t.locations).map(|l| container.member(l).map(|m| m.size)).sum()
}
