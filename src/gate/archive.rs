//! The description of a Darwin Core archive: which table holds the records, and how its text is laid out.
//!
//! Darwin Core text guide, TDWG 2009 (<http://rs.tdwg.org/dwc/terms/guides/text/>).

use std::ops::Range;

use roxmltree::{Attribute, Document, Node, ParsingOptions};

use crate::diag::{Diagnostic, Outcome};

use super::container::Container;
use super::encoding::Encoding;
use super::remote::is_remote;
use super::zipped::inside;

/// Namespace of the description's elements.
const NAMESPACE: &str = "http://rs.tdwg.org/dwc/text";

/// Namespace of the terms that keep their short name when two share one.
const TERMS: &str = "http://rs.tdwg.org/dwc/terms/";

/// Columns are counted up to here.
const LAST_COLUMN: usize = 9_999;

/// Elements and texts in a description; more is no description.
const NODES: u32 = 200_000;

/// What is to be done about a fault of the description.
const MEND: &str = "mend the description, or download the archive again";

/// Where the records of an archive are.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(super) struct Archive {
    /// The table of records.
    pub records: Table,
    /// The table that the records extend, when they are an extension: `records.id` refers to `core.id`,
    /// and both are there.
    pub core: Option<Table>,
}

/// How one table is laid out.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(super) struct Table {
    /// What a row is (`Occurrence`).
    pub row_type: String,
    /// Its files, one after another, by their names in the container.
    pub locations: Vec<String>,
    /// Between fields.
    pub separator: u8,
    /// Around fields; `None`: quotes are ordinary characters.
    pub quote: Option<u8>,
    /// Ends a row: a line feed (one carriage return before it is no part of the row), or a carriage return.
    pub line_end: u8,
    /// Of all its files.
    pub encoding: Encoding,
    /// Lines to pass over at the top of each file.
    pub header_lines: u64,
    /// Its columns as described; others may lie between them.
    pub columns: Vec<Field>,
    /// Column of the identifier: the core's own, or the one by which an extension refers to it.
    pub id: Option<usize>,
}

/// One column, or a value that holds for all rows.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(super) struct Field {
    /// Short name of its term, unique in the table; the full one where another took the short one.
    pub term: String,
    /// The term in full.
    pub uri: String,
    /// Where it stands in a row, from 0; `None`: `default` holds for all rows.
    pub index: Option<usize>,
    /// What holds where the field is empty.
    pub default: Option<String>,
}

/// Reads the description in a container; `None` when there is none.
pub(super) fn read(container: &Container) -> Outcome<Option<Archive>> {
    let Some(description) = container.description()? else { return Ok(None) };
    let options = ParsingOptions { allow_dtd: false, nodes_limit: NODES, ..ParsingOptions::default() };
    let document = Document::parse_with_options(&description.text, options)
        .map_err(|e| unparsed(&description.place, &e))?;
    let page =
        Page { document: &document, place: &description.place, folder: &description.folder, container };
    page.archive().map(Some)
}

fn unparsed(place: &str, error: &roxmltree::Error) -> Diagnostic {
    if matches!(error, roxmltree::Error::DtdDetected) {
        let text = "declares a document type (DTD), through which other files can be pulled in";
        return Diagnostic::input("bad_archive", place, text)
            .cure("no description of an archive needs one: check where the file comes from");
    }
    let at = error.pos();
    let text = format!("is no well-formed XML: {error}");
    Diagnostic::input("bad_archive", format!("{place}:{}:{}", at.row, at.col), text).cure(MEND)
}

/// The name after the last `/` or `#` of a term.
fn short(uri: &str) -> &str {
    uri.rsplit(['/', '#']).next().unwrap_or(uri)
}

/// A description while it is read.
struct Page<'a> {
    document: &'a Document<'a>,
    place: &'a str,
    folder: &'a str,
    container: &'a Container,
}

impl<'a> Page<'a> {
    fn fault(&self, at: Range<usize>, rule: &'static str, text: String) -> Diagnostic {
        let at = self.document.text_pos_at(at.start);
        Diagnostic::input(rule, format!("{}:{}:{}", self.place, at.row, at.col), text).cure(MEND)
    }

    fn bad(&self, at: Range<usize>, text: String) -> Diagnostic {
        self.fault(at, "bad_archive", text)
    }

    fn archive(&self) -> Outcome<Archive> {
        let root = self.document.root_element();
        if !named(root, "archive") {
            let text = format!("describes no archive: its root is `{}`", root.tag_name().name());
            return Err(self.bad(root.range(), text).into());
        }
        let cores: Vec<Node> = children(root, "core").collect();
        let core = match cores[..] {
            [core] => core,
            [] => return Err(self.bad(root.range(), "has no `<core>`".into()).into()),
            [_, second, ..] => return Err(self.bad(second.range(), "has a second `<core>`".into()).into()),
        };
        if of_records(core) {
            return Ok(Archive { records: self.table(core)?, core: None });
        }
        let extensions: Vec<Node> = children(root, "extension").filter(|e| of_records(*e)).collect();
        match extensions[..] {
            [extension] => self.joined(core, extension),
            [] => Err(self.no_records(root).into()),
            [_, second, ..] => {
                let text = "has a second extension of occurrences; which one is meant cannot be told";
                Err(self.bad(second.range(), text.into()).into())
            }
        }
    }

    fn joined(&self, core: Node, extension: Node) -> Outcome<Archive> {
        let (records, joined) = (self.table(extension)?, self.table(core)?);
        for (node, table, element) in [(extension, &records, "coreid"), (core, &joined, "id")] {
            if table.id.is_none() {
                let text =
                    format!("has no `<{element} index=\"…\"/>`, so records cannot be joined to the core");
                return Err(self.bad(node.range(), text).into());
            }
        }
        Ok(Archive { records, core: Some(joined) })
    }

    fn no_records(&self, root: Node) -> Diagnostic {
        let tables = root.children().filter(|n| named(*n, "core") || named(*n, "extension"));
        let types: Vec<String> =
            tables.map(|n| format!("`{}`", short(n.attribute("rowType").unwrap_or_default()))).collect();
        let text = format!("has no table of occurrences; its tables hold {}", types.join(", "));
        self.fault(root.range(), "no_records", text).cure("give an archive of occurrences")
    }

    fn table(&self, node: Node) -> Outcome<Table> {
        let Some(row_type) = node.attribute("rowType").map(str::trim).filter(|t| !t.is_empty()) else {
            return Err(self.bad(node.range(), "has no `rowType`".into()).into());
        };
        let separator = self.character(node, "fieldsTerminatedBy", ",")?;
        let Some(separator) = separator.filter(|s| !b"\r\n".contains(s)) else {
            let text = "`fieldsTerminatedBy` is empty or ends lines: fields cannot be told apart";
            return Err(self.bad(node.range(), text.into()).into());
        };
        let quote = self.character(node, "fieldsEnclosedBy", "\"")?;
        if quote == Some(separator) || quote.is_some_and(|q| b"\r\n".contains(&q)) {
            let text = "`fieldsEnclosedBy` is what ends fields or lines";
            return Err(self.bad(node.range(), text.into()).into());
        }
        let element = if named(node, "core") { "id" } else { "coreid" };
        let id = children(node, element).next().map_or(Ok(None), |n| self.index(n))?;
        Ok(Table {
            row_type: short(row_type).to_owned(),
            locations: self.locations(node)?,
            separator,
            quote,
            line_end: self.line_end(node)?,
            encoding: self.encoding(node)?,
            header_lines: self.number(node, "ignoreHeaderLines")?.unwrap_or(0),
            columns: self.columns(node)?,
            id,
        })
    }

    /// An attribute of one ASCII character; `None` when it is empty.
    fn character(&self, node: Node, name: &str, default: &str) -> Outcome<Option<u8>> {
        let text = unescaped(node.attribute(name).unwrap_or(default));
        match text.as_bytes() {
            [] => Ok(None),
            [one] if one.is_ascii() => Ok(Some(*one)),
            _ => {
                let text = format!("`{name}` is `{}`; expected one ASCII character", text.escape_debug());
                let cure = "give the table by itself as delimited text with such a separator";
                Err(self.fault(place_of(node, name), "unknown_layout", text).cure(cure).into())
            }
        }
    }

    fn line_end(&self, node: Node) -> Outcome<u8> {
        match unescaped(node.attribute("linesTerminatedBy").unwrap_or("\n")).as_str() {
            "\n" | "\r\n" => Ok(b'\n'),
            "\r" => Ok(b'\r'),
            other => {
                let found = other.escape_debug();
                let text = format!("`linesTerminatedBy` is `{found}`; expected `\\n`, `\\r\\n` or `\\r`");
                Err(self.fault(place_of(node, "linesTerminatedBy"), "unknown_layout", text).into())
            }
        }
    }

    fn encoding(&self, node: Node) -> Outcome<Encoding> {
        let name = node.attribute("encoding").unwrap_or("UTF-8");
        Ok(Encoding::named(name).ok_or_else(|| {
            let text = format!(
                "the encoding `{}` is not known here; expected UTF-8, US-ASCII, ISO-8859-1 or windows-1252",
                name.escape_debug()
            );
            self.fault(place_of(node, "encoding"), "unknown_encoding", text)
                .cure("give the table by itself, turned into UTF-8")
        })?)
    }

    /// A whole number in an attribute; `None` when it is absent or empty.
    fn number(&self, node: Node, name: &str) -> Outcome<Option<u64>> {
        let text = node.attribute(name).unwrap_or_default().trim();
        if text.is_empty() {
            return Ok(None);
        }
        let digits = text.bytes().all(|b| b.is_ascii_digit());
        match text.parse().ok().filter(|_| digits) {
            Some(number) => Ok(Some(number)),
            None => {
                let text = format!("`{name}` is `{}`; expected a whole number from 0", text.escape_debug());
                Err(self.bad(place_of(node, name), text).into())
            }
        }
    }

    /// The column an element names.
    fn index(&self, node: Node) -> Outcome<Option<usize>> {
        let Some(index) = self.number(node, "index")? else { return Ok(None) };
        match usize::try_from(index).ok().filter(|i| *i <= LAST_COLUMN) {
            Some(index) => Ok(Some(index)),
            None => {
                let text = format!("`index` is {index}; columns are counted from 0 to {LAST_COLUMN}");
                Err(self.bad(place_of(node, "index"), text).into())
            }
        }
    }

    fn columns(&self, table: Node) -> Outcome<Vec<Field>> {
        let mut fields: Vec<Field> = Vec::new();
        for node in children(table, "field") {
            let Some(uri) = node.attribute("term").map(str::trim).filter(|t| !t.is_empty()) else {
                return Err(self.bad(node.range(), "has a `<field>` without `term`".into()).into());
            };
            if fields.iter().any(|f| f.uri == uri) {
                return Err(self.bad(node.range(), format!("has two fields of the term `{uri}`")).into());
            }
            let default = node.attribute("default").filter(|d| !d.is_empty()).map(str::to_owned);
            let index = self.index(node)?;
            fields.push(Field { term: short(uri).to_owned(), uri: uri.to_owned(), index, default });
        }
        // one with neither column nor value says nothing
        fields.retain(|f| f.index.is_some() || f.default.is_some());
        Ok(with_unique_names(fields))
    }

    fn locations(&self, table: Node) -> Outcome<Vec<String>> {
        let nodes: Vec<Node> = children(table, "files").flat_map(|f| children(f, "location")).collect();
        if nodes.is_empty() {
            let text = format!("`<{}>` names no file (`<files><location>`)", table.tag_name().name());
            return Err(self.bad(table.range(), text).into());
        }
        nodes.into_iter().map(|n| self.location(n)).collect()
    }

    /// The name in the container of a file that a description refers to.
    fn location(&self, node: Node) -> Outcome<String> {
        let text = node.text().unwrap_or_default().trim();
        let shown = text.escape_debug();
        if is_remote(text) || text.contains("://") {
            let text = format!("refers to a network (`{shown}`)");
            let cure = "download the whole archive; no command opens a network connection";
            return Err(self.fault(node.range(), "remote_path", text).cure(cure).into());
        }
        if text.is_empty() {
            return Err(self.bad(node.range(), "names no file in `<location>`".into()).into());
        }
        let Some(path) = inside(text) else {
            let text = format!("names the file `{shown}`, which lies outside the archive");
            return Err(self.fault(node.range(), "path_outside", text).into());
        };
        let found = self.container.member(&format!("{}{path}", self.folder));
        Ok(found.map(|m| m.name).ok_or_else(|| self.absent(node, &path))?)
    }

    fn absent(&self, node: Node, path: &str) -> Diagnostic {
        let members = self.container.members();
        let shown: Vec<String> = members.iter().take(20).map(|m| format!("`{}`", m.name)).collect();
        let more = members.len() - shown.len();
        let rest = if more > 0 { format!(" and {more} more") } else { String::new() };
        let text =
            format!("names the file `{path}`, which is not there; there are {}{rest}", shown.join(", "));
        self.fault(node.range(), "no_such_file", text)
            .cure("add the file, mend the description, or download the archive again")
    }
}

/// Where an attribute stands; its element when it is not there.
fn place_of(node: Node, name: &str) -> Range<usize> {
    node.attribute_node(name).map_or_else(|| node.range(), |a: Attribute| a.range())
}

/// Whether an element of the text guide has this name; descriptions without namespace are let pass.
fn named(node: Node, name: &str) -> bool {
    let tag = node.tag_name();
    node.is_element()
        && tag.name() == name
        && tag.namespace().is_none_or(|n| n.is_empty() || n.trim_end_matches('/') == NAMESPACE)
}

fn children<'a, 'i: 'a>(node: Node<'a, 'i>, name: &str) -> impl Iterator<Item = Node<'a, 'i>> {
    node.children().filter(move |n| named(*n, name))
}

/// Whether the rows of a table are occurrences.
fn of_records(table: Node) -> bool {
    table.attribute("rowType").is_some_and(|t| short(t.trim()).eq_ignore_ascii_case("Occurrence"))
}

/// Where two terms share a short name, one keeps it: the one of Darwin Core, else the first.
fn with_unique_names(mut fields: Vec<Field>) -> Vec<Field> {
    let keeps = |at: usize| {
        let field = &fields[at];
        let mut same = fields.iter().enumerate().filter(|(_, f)| f.term == field.term);
        let of_darwin_core = same.clone().find(|(_, f)| f.uri.starts_with(TERMS));
        of_darwin_core.or_else(|| same.next()).is_some_and(|(i, _)| i == at)
    };
    let kept: Vec<bool> = (0..fields.len()).map(keeps).collect();
    for (field, _) in fields.iter_mut().zip(kept).filter(|(_, kept)| !kept) {
        field.term.clone_from(&field.uri);
    }
    fields
}

/// An attribute with its escapes (`\t`, `\u0009`) turned into the characters they stand for.
fn unescaped(text: &str) -> String {
    let mut found = String::new();
    let mut rest = text;
    while let Some(first) = rest.chars().next() {
        let (character, length) = escape(rest).unwrap_or((first, first.len_utf8()));
        found.push(character);
        rest = &rest[length..];
    }
    found
}

/// The escape at the beginning of a text and its length.
fn escape(text: &str) -> Option<(char, usize)> {
    let after = text.strip_prefix('\\')?;
    match after.chars().next()? {
        't' => Some(('\t', 2)),
        'n' => Some(('\n', 2)),
        'r' => Some(('\r', 2)),
        same @ ('\\' | '"' | '\'') => Some((same, 2)),
        'u' => {
            let digits = after.get(1..5).filter(|d| d.bytes().all(|b| b.is_ascii_hexdigit()))?;
            Some((char::from_u32(u32::from_str_radix(digits, 16).ok()?)?, 6))
        }
        _ => None,
    }
}
