//! Records in a Darwin Core archive: rows of one table, each completed by the row it belongs to.

use hashbrown::HashMap;

use crate::diag::{Diagnostic, Observer, Outcome};
use crate::records::{Content, Desk, Quotes, Row};

use super::archive::{Archive, Field, Table};
use super::container::Container;
use super::layout::{Layout, Named, Slot, Texts};
use super::record_files::Reading;
use super::text::{Dialect, Form, Head, Parts, Rows, TextSource, Work, scan};

/// Hands the records of an archive on.
pub(super) fn read<D: Desk>(container: &Container, archive: &Archive, to: &mut Reading<D>) -> Outcome<()> {
    let named = named(&archive.records, archive.core.as_ref());
    let layout = Layout::find(&named, (to.plan, to.source()), &container.file, false)?;
    let parents = match (&archive.core, archive.records.id) {
        (Some(core), Some(id)) => {
            let (parents, twice) = Parents::read(container, core, layout.parents(), to.observer)?;
            twice.into_iter().for_each(|r| to.tray.remark(r));
            Some((parents, id))
        }
        _ => None,
    };
    let mut orphans = 0;
    for location in &archive.records.locations {
        let name = container.place(location);
        let text = text((container, location), &name, &archive.records, to.source().quotes);
        let head = Head::open(&text)?;
        let file = to.tray.open(&name);
        to.tray.found(file, &layout.matches);
        let at = (file, to.number);
        let work = Handing { desk: to.desk, layout: &layout, parents: parents.as_ref(), at };
        let tray = &mut *to.tray;
        let mut take = |parts: Parts<(D::Part, u64)>| {
            orphans += parts.iter().map(|((_, orphans), _)| orphans).sum::<u64>();
            tray.take(parts.into_iter().map(|((part, _), line)| (part, line)).collect())
        };
        let remark = scan(&text, head, &work, &mut take, to.observer)?;
        remark.into_iter().for_each(|r| to.tray.remark(r));
    }
    lost(container, orphans).into_iter().for_each(|r| to.tray.remark(r));
    Ok(())
}

fn lost(container: &Container, records: u64) -> Option<Diagnostic> {
    let text = format!(
        "{records} records belong to a row of the core that is not there: they lack what it would say"
    );
    (records > 0).then(|| {
        Diagnostic::input("core_rows", container.file.as_str(), text)
            .cure("mend the core, or download the archive again")
    })
}

/// A table's text at one location; `quotes` overrides the description.
pub(super) fn text<'a>(
    (container, location): (&'a Container, &'a str),
    name: &'a str,
    table: &Table,
    quotes: Option<Quotes>,
) -> TextSource<'a> {
    let quote = match quotes {
        None => table.quote,
        Some(Quotes::None) => None,
        Some(Quotes::Double) => Some(b'"'),
    };
    let dialect = Dialect { separator: table.separator, terminator: table.line_end, quote };
    let last = table.columns.iter().filter_map(|c| c.index).chain(table.id).max();
    let form = Form::Given {
        dialect,
        encoding: table.encoding,
        header: table.header_lines,
        columns: last.map_or(0, |i| i + 1),
    };
    TextSource { name, open: Box::new(move || container.stream(location)), form }
}

/// The columns of the records, and those of the core for what the records do not say themselves.
fn named(records: &Table, core: Option<&Table>) -> Vec<Named> {
    let slot = |f: &Field| Slot { own: f.index, parent: None, fixed: f.default.clone() };
    let own = |f: &Field| Named { name: f.term.clone(), slot: slot(f) };
    let mut columns: Vec<Named> = records.columns.iter().map(own).collect();
    for (number, field) in core.into_iter().flat_map(|c| c.columns.iter().enumerate()) {
        match columns.iter_mut().find(|c| c.name == field.term) {
            Some(column) => column.slot.parent = Some(number),
            None => columns.push(Named {
                name: field.term.clone(),
                slot: Slot { own: None, parent: Some(number), fixed: None },
            }),
        }
    }
    columns
}

/// What is kept of a row of the core.
type Fields = Box<[Box<str>]>;

/// Rows of the core, by their identifier; only what is needed of them.
struct Parents {
    /// Where each field of the core stands among those kept.
    places: Vec<Option<usize>>,
    rows: HashMap<Box<str>, Fields>,
}

impl Parents {
    /// Reads the core; also says which identifiers it holds twice.
    fn read(
        container: &Container,
        core: &Table,
        wanted: Vec<usize>,
        observer: &dyn Observer,
    ) -> Outcome<(Self, Option<Diagnostic>)> {
        let mut places = vec![None; core.columns.len()];
        wanted.iter().enumerate().for_each(|(n, field)| places[*field] = Some(n));
        let mut all = Self { places, rows: HashMap::new() };
        let (mut twice, mut unreadable, mut first) = (0_u64, 0_u64, None);
        for location in &core.locations {
            let name = container.place(location);
            let text = text((container, location), &name, core, None);
            let head = Head::open(&text)?;
            let work = Core { core, wanted: &wanted };
            let mut take = |parts: Vec<(CorePart, u64)>| -> Outcome<()> {
                for (part, _) in parts {
                    unreadable += part.unreadable;
                    for (id, fields) in part.rows {
                        if all.rows.contains_key(&id) {
                            twice += 1;
                            first.get_or_insert(id);
                        } else {
                            all.rows.insert(id, fields);
                        }
                    }
                }
                Ok(())
            };
            scan(&text, head, &work, &mut take, observer)?;
        }
        let remark =
            (twice + unreadable > 0).then(|| faults(container, (twice, unreadable), first.as_deref()));
        Ok((all, remark))
    }
}

fn faults(container: &Container, (twice, unreadable): (u64, u64), first: Option<&str>) -> Diagnostic {
    let mut texts = Vec::new();
    if twice > 0 {
        let first = first.unwrap_or_default();
        texts.push(format!(
            "{twice} rows of the core repeat an identifier (the first: `{first}`): the first of each counts"
        ));
    }
    if unreadable > 0 {
        texts.push(format!(
            "{unreadable} rows of the core cannot be read: their records lack what stands there"
        ));
    }
    Diagnostic::input("core_rows", container.file.as_str(), texts.join("; "))
        .cure("mend the core, or download the archive again")
}

/// Keeps the rows of the core.
struct Core<'a> {
    core: &'a Table,
    wanted: &'a [usize],
}

/// Rows of a block of the core.
#[derive(Default)]
struct CorePart {
    rows: Vec<(Box<str>, Fields)>,
    unreadable: u64,
}

impl Work for Core<'_> {
    type Part = CorePart;

    fn begin(&self) -> CorePart {
        CorePart::default()
    }

    fn row(&self, part: &mut CorePart, _: u64, rows: &Rows) {
        let text = |field: &Field| -> Box<str> {
            let own = field.index.map_or("", |i| rows.field(i).trim());
            let text = if own.is_empty() { field.default.as_deref().unwrap_or("") } else { own };
            text.into()
        };
        let fields = self.wanted.iter().map(|f| text(&self.core.columns[*f])).collect();
        let id = self.core.id.map_or("", |i| rows.field(i).trim());
        part.rows.push((id.into(), fields));
    }

    fn unreadable(&self, part: &mut CorePart, _: u64, _: &str, _: u64) {
        part.unreadable += 1;
    }

    fn end(&self, _: &mut CorePart) -> Outcome<()> {
        Ok(())
    }
}

/// Hands the records to a desk.
struct Handing<'a, D> {
    desk: &'a D,
    layout: &'a Layout,
    parents: Option<&'a (Parents, usize)>,
    at: (usize, usize),
}

/// A record with the row it belongs to.
struct Joined<'a> {
    rows: &'a Rows<'a>,
    parent: Option<(&'a Parents, &'a [Box<str>])>,
}

impl Texts for Joined<'_> {
    fn own(&self, column: usize) -> &str {
        self.rows.field(column)
    }

    fn parent(&self, field: usize) -> &str {
        let (parents, row) = match self.parent {
            Some(found) => found,
            None => return "",
        };
        parents.places[field].map_or("", |n| &row[n])
    }
}

impl<D: Desk> Work for Handing<'_, D> {
    /// With how many of its rows belong to none of the core: blocks may be read twice, so this is counted
    /// where parts are taken.
    type Part = (D::Part, u64);

    fn begin(&self) -> Self::Part {
        (self.desk.begin(self.at.0, self.at.1), 0)
    }

    fn row(&self, (part, orphans): &mut Self::Part, line: u64, rows: &Rows) {
        let parent = self.parents.and_then(|(parents, id)| {
            let found = parents.rows.get(rows.field(*id).trim());
            *orphans += u64::from(found.is_none());
            found.map(|row| (parents, row.as_ref()))
        });
        self.layout.fields(&Joined { rows, parent }, None, |fields| {
            self.desk.push(part, &Row { line, content: Content::Fields(fields) });
        });
    }

    fn swallowed(&self, (part, _): &mut Self::Part, line: u64, lines: u64) {
        self.desk.swallowed(part, line, lines);
    }

    fn unreadable(&self, (part, _): &mut Self::Part, line: u64, why: &str, lines: u64) {
        self.desk.push(part, &Row { line, content: Content::Unreadable(why, lines) });
    }

    fn end(&self, (part, _): &mut Self::Part) -> Outcome<()> {
        self.desk.settle(part)
    }
}
