//! The description of a Darwin Core archive: which table holds the records, and how its text is laid out.
//!
//! Darwin Core text guide, TDWG 2009 (<http://rs.tdwg.org/dwc/terms/guides/text/>).

use std::ops::Range;

use roxmltree::{Attribute, Document, Node, ParsingOptions};

use crate::diag::{Diagnostic, Outcome};

use super::container::Container;
use super::remote::is_remote;
use super::text::Encoding;
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
        let mut locations: Vec<String> = Vec::new();
        for node in nodes {
            let location = self.location(node)?;
            if locations.contains(&location) {
                return Err(self.bad(node.range(), format!("names the file `{location}` twice")).into());
            }
            locations.push(location);
        }
        Ok(locations)
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

#[cfg(test)]
mod tests {
    use std::fs;
    use std::path::Path;

    use proptest::prelude::*;
    use tempfile::{TempDir, tempdir};

    use super::{Archive, Container, Encoding, Field, read, unescaped};
    use crate::diag::{Diagnostic, Outcome};

    /// A folder with a description and empty tables; the place and its hoverflies are invented.
    #[expect(clippy::disallowed_methods, reason = "a test writes its own inputs")]
    fn folder(description: &str) -> TempDir {
        let folder = tempdir().unwrap();
        for (name, text) in [
            ("meta.xml", description),
            ("occurrence.txt", "id\tscientificName\n1\tSkerrowia invented\n"),
            ("more.txt", ""),
            ("event.txt", ""),
        ] {
            fs::write(folder.path().join(name), text).unwrap();
        }
        folder
    }

    fn opened(folder: &Path) -> Outcome<Option<Archive>> {
        read(&Container::open(folder, "skerrow")?)
    }

    fn archive(description: &str) -> Archive {
        opened(folder(description).path()).unwrap().unwrap()
    }

    fn fault(description: &str) -> Diagnostic {
        opened(folder(description).path()).unwrap_err().0.remove(0)
    }

    const OCCURRENCE: &str = "http://rs.tdwg.org/dwc/terms/Occurrence";

    /// A description with one core, its attributes and what is in it.
    fn core(attributes: &str, inside: &str) -> String {
        format!(
            "<archive xmlns=\"http://rs.tdwg.org/dwc/text/\">\n<core rowType=\"{OCCURRENCE}\" {attributes}>\n\
             {inside}</core>\n</archive>"
        )
    }

    const FILE: &str = "<files><location>occurrence.txt</location></files>\n";

    #[test]
    fn defaults_of_the_text_guide() {
        let found = archive(&core("", FILE));
        assert_eq!(found.core, None);
        let table = found.records;
        assert_eq!((table.row_type.as_str(), table.locations), ("Occurrence", vec!["occurrence.txt".into()]));
        assert_eq!((table.separator, table.quote, table.line_end), (b',', Some(b'"'), b'\n'));
        assert_eq!((table.encoding, table.header_lines, table.id), (Encoding::Utf8, 0, None));
    }

    #[test]
    fn a_layout_spelled_out() {
        for tab in ["\\t", "&#9;", "\\u0009"] {
            let attributes = format!(
                "fieldsTerminatedBy=\"{tab}\" linesTerminatedBy=\"\\r\\n\" fieldsEnclosedBy=\"\" \
                 encoding=\"ISO-8859-1\" ignoreHeaderLines=\"1\" dateFormat=\"YYYY-MM-DD\""
            );
            let table = archive(&core(&attributes, &format!("{FILE}<id index=\"0\"/>"))).records;
            assert_eq!((table.separator, table.quote, table.line_end), (b'\t', None, b'\n'));
            assert_eq!((table.encoding, table.header_lines, table.id), (Encoding::Latin1, 1, Some(0)));
        }
        assert_eq!(archive(&core("linesTerminatedBy=\"&#13;\"", FILE)).records.line_end, b'\r');
        assert_eq!(archive(&core("fieldsTerminatedBy='\\\\'", FILE)).records.separator, b'\\');
        assert_eq!(unescaped("\\u00e9\\x\\"), "é\\x\\");
    }

    #[test]
    fn columns_and_constants() {
        let fields = "<field index=\"2\" term=\"http://rs.tdwg.org/dwc/terms/eventDate\"/>\
                      <field default=\"EPSG:4326\" term=\"http://rs.tdwg.org/dwc/terms/geodeticDatum\"/>\
                      <field index=\"3\" default=\"PRESENT\" term=\"http://rs.tdwg.org/dwc/terms/occurrenceStatus\"/>\
                      <field term=\"http://rs.tdwg.org/dwc/terms/sex\"/>\
                      <field index=\"4\" term=\"http://purl.org/dc/terms#type\"/>\
                      <field index=\"5\" term=\"http://rs.tdwg.org/dwc/terms/type\"/>";
        let found = archive(&core("", &format!("{FILE}{fields}"))).records.columns;
        let field = |f: &Field| (f.term.clone(), f.index, f.default.clone());
        assert_eq!(
            found.iter().map(field).collect::<Vec<_>>(),
            [
                ("eventDate".into(), Some(2), None),
                ("geodeticDatum".into(), None, Some("EPSG:4326".into())),
                ("occurrenceStatus".into(), Some(3), Some("PRESENT".into())),
                ("http://purl.org/dc/terms#type".into(), Some(4), None),
                ("type".into(), Some(5), None),
            ]
        );
    }

    #[test]
    fn several_locations_without_namespace() {
        let text = "<archive><core rowType='Occurrence'><files><location>occurrence.txt</location>\
                    <location> ./more.txt </location></files></core></archive>";
        assert_eq!(archive(text).records.locations, ["occurrence.txt", "more.txt"]);
    }

    fn sampling(extensions: &str, id: &str) -> String {
        format!(
            "<archive><core rowType='http://rs.tdwg.org/dwc/terms/Event'>{id}\
             <files><location>event.txt</location></files></core>{extensions}</archive>"
        )
    }

    #[test]
    fn records_as_an_extension() {
        let extension = format!("<extension rowType='{OCCURRENCE}'>{FILE}<coreid index='1'/></extension>");
        let others = format!("<extension rowType='urn:Other'/>{extension}");
        let found = archive(&sampling(&others, "<id index='0'/>"));
        assert_eq!((found.records.row_type.as_str(), found.records.id), ("Occurrence", Some(1)));
        let core = found.core.unwrap();
        assert_eq!(
            (core.row_type.as_str(), core.id, core.locations),
            ("Event", Some(0), vec!["event.txt".into()])
        );

        assert!(fault(&sampling(&extension, "")).text.contains("`<id index"));
        assert!(fault(&sampling(&extension.repeat(2), "<id index='0'/>")).text.contains("second extension"));
        let none = fault(&sampling("<extension rowType='urn:x#Media'/>", ""));
        assert_eq!(none.rule, "no_records");
        assert!(none.text.contains("`Event`, `Media`"), "{}", none.text);
    }

    #[test]
    fn faults_say_where() {
        let found = fault(&core("", "<files><location>gone.txt</location></files>"));
        assert_eq!((found.rule, found.place.as_str()), ("no_such_file", "skerrow: meta.xml:3:8"));
        assert!(
            found.text.contains("`gone.txt`") && found.text.contains("`occurrence.txt`"),
            "{}",
            found.text
        );
        let found = fault(&core("", &format!("{FILE}<field index=\"-1\" term=\"a\"/>")));
        assert_eq!((found.rule, found.place.as_str()), ("bad_archive", "skerrow: meta.xml:4:8"));
    }

    #[test]
    fn faults_of_many_kinds() {
        let field = |attributes: &str| core("", &format!("{FILE}<field {attributes}/>"));
        let location = |name: &str| core("", &format!("<files><location>{name}</location></files>"));
        let tables = core("", FILE);
        let two = tables.replace("</archive>", &format!("<core rowType='x'>{FILE}</core></archive>"));
        for (text, rule, word) in [
            ("<archive/>".into(), "bad_archive", "no `<core>`"),
            (two, "bad_archive", "second `<core>`"),
            ("<html/>".into(), "bad_archive", "its root is `html`"),
            (tables.replace("tdwg", "other"), "bad_archive", "its root"),
            ("<archive><core/></archive>".into(), "no_records", "occurrences"),
            ("".into(), "bad_archive", "well-formed"),
            ("<archive>".into(), "bad_archive", "well-formed"),
            (core("", ""), "bad_archive", "names no file"),
            (core("", "<files><location/></files>"), "bad_archive", "names no file"),
            (core("", &FILE.repeat(2)), "bad_archive", "twice"),
            (location("https://skerrow.example/a.txt"), "remote_path", "network"),
            (location("../a.txt"), "path_outside", "outside"),
            (location("/a.txt"), "path_outside", "outside"),
            (location("C:\\a.txt"), "path_outside", "outside"),
            (field("index='1'"), "bad_archive", "without `term`"),
            (field("index='one' term='a'"), "bad_archive", "whole number"),
            (field("index='+1' term='a'"), "bad_archive", "whole number"),
            (field("index='99999999999999999999999' term='a'"), "bad_archive", "whole number"),
            (field("index='10000' term='a'"), "bad_archive", "counted from 0"),
            (field("index='1' term='urn:a'/><field index='2' term='urn:a'"), "bad_archive", "two fields"),
            (core("fieldsTerminatedBy='||'", FILE), "unknown_layout", "one ASCII character"),
            (core("fieldsTerminatedBy='¦'", FILE), "unknown_layout", "one ASCII character"),
            (core("fieldsTerminatedBy=''", FILE), "bad_archive", "told apart"),
            (core("fieldsEnclosedBy=','", FILE), "bad_archive", "`fieldsEnclosedBy`"),
            (core("linesTerminatedBy=';'", FILE), "unknown_layout", "`linesTerminatedBy`"),
            (core("encoding='UTF-16'", FILE), "unknown_encoding", "UTF-16"),
            (core("ignoreHeaderLines='x'", FILE), "bad_archive", "`ignoreHeaderLines`"),
        ] {
            let found = fault(&text);
            assert_eq!(found.rule, rule, "{text}: {}", found.text);
            assert!(found.text.contains(word), "{text}: {}", found.text);
            assert!(found.place.starts_with("skerrow: meta.xml") && !found.cure.is_empty());
        }
    }

    #[test]
    fn pulls_in_no_other_file() {
        let outside = "<!DOCTYPE archive [<!ENTITY x SYSTEM \"file:///etc/hostname\">]>";
        let text = format!("{outside}{}", core("", "<files><location>&x;</location></files>"));
        assert!(fault(&text).text.contains("DTD"), "{}", fault(&text).text);
        let unknown = core("", "<files><location>&x;</location></files>");
        assert!(fault(&unknown).text.contains("well-formed"));
    }

    #[test]
    fn deep_nesting_ends_in_an_error() {
        assert_eq!(fault(&"<archive>".repeat(300_000)).rule, "bad_archive");
        let balanced = format!("{}{}", "<archive>".repeat(150_000), "</archive>".repeat(150_000));
        assert_eq!(fault(&balanced).rule, "bad_archive");
    }

    #[test]
    fn a_folder_without_description_is_none() {
        assert_eq!(opened(tempdir().unwrap().path()).unwrap(), None);
    }

    proptest! {
        #![proptest_config(ProptestConfig::with_cases(64))]

        #[test]
        fn arbitrary_bytes_do_not_panic(bytes in prop::collection::vec(any::<u8>(), 0..600)) {
            drop(opened(folder(&String::from_utf8_lossy(&bytes)).path()));
        }

        #[test]
        fn arbitrary_attributes_do_not_panic(value in "[^<&'\\x00-\\x1f]{0,12}", which in 0..7_usize) {
            let name = ["fieldsTerminatedBy", "linesTerminatedBy", "fieldsEnclosedBy", "encoding",
                "ignoreHeaderLines", "rowtype", "xmlns:a"][which];
            let inside = format!("<files><location>{value}</location></files><field index='{value}' term='{value}'/>");
            drop(opened(folder(&core(&format!("{name}='{value}'"), &inside)).path()));
        }
    }
}
