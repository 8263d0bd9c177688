//! Which reader a file of records needs.

use std::fs::File;
use std::path::{Path, PathBuf};

use crate::diag::{Diagnostic, Observer, Outcome};
use crate::records::{Desk, RecordsPlan, SourcePlan, Tray};

use super::archive::{self, Archive};
use super::container::{Container, Member, is_archive_folder};
use super::files::Files;
use super::parquet_in::{self, is_parquet};
use super::points::{self, Points};
use super::text::{Form, TextSource};
use super::unpack::{Stream, broken, maybe_gzip};
use super::zipped::is_zip;
use super::{archived, table};

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

/// Records on their way to a desk.
pub(super) struct Reading<'a, D: Desk> {
    pub(super) plan: &'a RecordsPlan,
    /// Number of the source in the plan.
    pub(super) number: usize,
    pub(super) desk: &'a D,
    pub(super) tray: &'a mut (dyn Tray<D::Part> + Send),
    pub(super) observer: &'a dyn Observer,
}

impl<D: Desk> Reading<'_, D> {
    pub(super) fn source(&self) -> &SourcePlan {
        &self.plan.sources[self.number]
    }

    /// Hands on a part whose lines need no counting.
    pub(super) fn hand(&mut self, mut part: D::Part) -> Outcome<()> {
        self.desk.settle(&mut part)?;
        self.tray.take(vec![(part, 0)])
    }
}

/// Reads the records of a file.
pub(super) fn read<D: Desk>(files: &Files, file: &str, to: &mut Reading<D>) -> Outcome<()> {
    let path = files.path(file)?;
    let quotes = to.source().quotes;
    let what = format!("read {file}");
    let kind = kind(&path, file, to.source().table.as_deref())?;
    fits(&kind, file, to.source())?;
    match kind {
        Kind::Vector => {
            let points = Points::open(files, file, to.source())?;
            to.observer.begin(&what, points.count());
            points::read(&points, to)?;
        }
        Kind::Text => {
            let open = || plain(&path, file);
            to.observer.begin(&what, unpacked_size(&path));
            table::read(&TextSource { name: file, open: Box::new(open), form: Form::Found(quotes) }, to)?;
        }
        Kind::Zipped(container, member) => {
            let name = container.place(&member.name);
            let open = || container.stream(&member.name);
            to.observer.begin(&what, Some(member.size));
            table::read(&TextSource { name: &name, open: Box::new(open), form: Form::Found(quotes) }, to)?;
        }
        Kind::Archive(container, archive) => {
            to.observer.begin(&what, archive_size(&container, &archive));
            archived::read(&container, &archive, to)?;
        }
        Kind::Parquet(parts) => {
            to.observer.begin(&what, None);
            for path in &parts {
                let name = part_name(file, path, parts.len());
                parquet_in::read(&parquet_in::Table::open(path, &name)?, to)?;
            }
        }
    }
    to.observer.end();
    Ok(())
}

/// Refuses keys of the plan that say nothing of this kind of file.
fn fits(kind: &Kind, file: &str, source: &SourcePlan) -> Outcome<()> {
    let (what, table, quotes) = match kind {
        Kind::Text => ("is delimited text", false, true),
        Kind::Archive(..) => {
            ("is a Darwin Core archive, which says itself where its records are", false, true)
        }
        Kind::Zipped(..) => ("is a zip file", true, true),
        Kind::Parquet(_) => ("is Parquet", false, false),
        Kind::Vector => ("is a vector file", true, false),
    };
    let unfit = [("table", source.table.is_some() && !table), ("quotes", source.quotes.is_some() && !quotes)];
    match unfit.iter().find(|(_, unfit)| *unfit) {
        None => Ok(()),
        Some((key, _)) => Err(Diagnostic::plan(
            "misplaced_key",
            format!("[records] {key}"),
            format!("`{file}` {what}: `{key}` says nothing of it"),
        )
        .cure(format!("remove `{key}`, or give that file a `[[records.source]]` of its own"))
        .into()),
    }
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
