//! The beginning of a text: its signs, and the names of its columns.

use std::io::Read;

use crate::diag::{Diagnostic, Outcome};
use crate::records::Quotes;

use super::super::unpack::broken;
use super::blocks::{Block, Blocks};
use super::encoding::{Encoding, decode};
use super::source::{Form, TextSource};
use super::split::{Dialect, Rows, Step};

/// Separators looked for in a header, in the order in which ties are settled.
const SEPARATORS: [u8; 4] = [b'\t', b',', b';', b'|'];
/// Bytes in which the signs are looked for.
const GLANCE: u64 = 1 << 16;

/// A text opened, its header read.
pub(in crate::gate) struct Head {
    pub(in crate::gate) dialect: Dialect,
    pub(in crate::gate) encoding: Option<Encoding>,
    /// Names in the header; none where a description names the columns.
    pub(in crate::gate) names: Vec<String>,
    /// Fields of a row.
    pub(in crate::gate) width: usize,
    /// Lines of the header.
    pub(in crate::gate) lines: u64,
    /// The header as it stands.
    pub(in crate::gate) raw: Vec<u8>,
    /// What follows.
    pub(in crate::gate) blocks: Blocks,
}

impl Head {
    /// Opens a text and reads its header.
    pub(in crate::gate) fn open(source: &TextSource) -> Outcome<Self> {
        let mut stream = (source.open)()?;
        let mut glance = Vec::new();
        stream.by_ref().take(GLANCE).read_to_end(&mut glance).map_err(|e| broken(source.name, &e))?;
        if is_utf16(&glance) {
            return Err(Diagnostic::input("not_utf8", source.name, "is written in UTF-16")
                .cure("save it as UTF-8")
                .into());
        }
        if glance.starts_with(b"\xef\xbb\xbf") {
            glance.drain(..3);
        }
        if glance.get(257..262) == Some(b"ustar") {
            return Err(Diagnostic::input("not_a_table", source.name, "is a tar archive")
                .cure("unpack it and give the file inside")
                .into());
        }
        let dialect = dialect(&glance, source.form);
        if glance.split(|b| *b == dialect.terminator).next().is_some_and(|line| line.contains(&0)) {
            let text = "its first line holds NUL bytes: it is no text, or text in UTF-16";
            return Err(Diagnostic::input("not_a_table", format!("{}:1", source.name), text)
                .cure("give delimited text, saved as UTF-8")
                .into());
        }
        let mut blocks = Blocks::new(stream, glance, dialect.terminator);
        let first = match blocks.next().map_err(|e| broken(source.name, &e))? {
            Some(Block::Lines { bytes, .. }) => bytes,
            Some(Block::TooLong(length)) => return Err(long_header(source.name, length).into()),
            None => Vec::new(),
        };
        Self::read(source, dialect, first, blocks)
    }

    fn read(source: &TextSource, dialect: Dialect, first: Vec<u8>, mut blocks: Blocks) -> Outcome<Self> {
        let (header, encoding, columns) = match source.form {
            Form::Found(_) => (1, None, 0),
            // a description says UTF-8 by default: the text itself is believed
            Form::Given { encoding, header, columns, .. } => {
                (header, Some(encoding).filter(|e| *e == Encoding::Latin1), columns)
            }
        };
        let mut rows = Rows::new(&first, None, dialect);
        let (mut lines, mut width, mut names, mut at) = (0, 0, Vec::new(), 0);
        for n in 0..header.max(1) {
            match rows.step() {
                Step::Row(l) if n < header => (lines, at) = (lines + l, rows.position()),
                Step::Row(_) => {}
                Step::Open(_) => return Err(open_header(source.name, lines + 1).into()),
                Step::End if header == 0 => break,
                Step::End => return Err(no_header(source.name).into()),
            }
            if n == 0 {
                names = (0..rows.len()).map(|f| name(rows.bytes(f))).collect();
                width = rows.len();
            }
        }
        if header == 0 {
            width = usual_width(&first, dialect);
        }
        if width < columns && !first.is_empty() {
            return Err(narrow(source.name, width, columns).into());
        }
        let raw = first[..at].to_vec();
        blocks.put_back(first, at);
        if matches!(source.form, Form::Found(_)) {
            unique(&names, source.name)?;
        } else {
            names.clear();
        }
        Ok(Self { dialect, encoding, names, width, lines, raw, blocks })
    }
}

/// Whether a text begins as one in UTF-16 does: with its mark, or with every other byte zero.
fn is_utf16(glance: &[u8]) -> bool {
    let zero = |from: usize| glance.iter().take(64).skip(from).step_by(2).all(|b| *b == 0);
    let plain = |from: usize| glance.iter().take(64).skip(from).step_by(2).all(|b| *b != 0);
    let marked = glance.starts_with(b"\xff\xfe") || glance.starts_with(b"\xfe\xff");
    marked || (glance.len() >= 4 && ((zero(0) && plain(1)) || (zero(1) && plain(0))))
}

/// Fields of most of the first rows: without a header, the very first may be the odd one.
fn usual_width(first: &[u8], dialect: Dialect) -> usize {
    let mut rows = Rows::new(first, None, dialect);
    let mut counts = std::collections::BTreeMap::new();
    for _ in 0..100 {
        if !matches!(rows.step(), Step::Row(_)) {
            break;
        }
        *counts.entry(rows.len()).or_insert(0) += 1;
    }
    counts.into_iter().max_by_key(|(_, rows)| *rows).map_or(0, |(width, _)| width)
}

/// The signs of a text: given, or as its first line shows.
fn dialect(glance: &[u8], form: Form) -> Dialect {
    match form {
        Form::Given { dialect, .. } => dialect,
        Form::Found(quotes) => {
            let old = !glance.contains(&b'\n') && glance.contains(&b'\r');
            let terminator = if old { b'\r' } else { b'\n' };
            let line = glance.split(|b| *b == terminator).next().unwrap_or_default();
            let separator = separator(line);
            let quoted = quotes.map_or(separator != b'\t', |q| q == Quotes::Double);
            Dialect { separator, terminator, quote: quoted.then_some(b'"') }
        }
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

fn name(bytes: &[u8]) -> String {
    match std::str::from_utf8(bytes) {
        Ok(text) => text.trim().to_owned(),
        Err(_) => decode(bytes).trim().to_owned(),
    }
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

fn no_header(file: &str) -> Diagnostic {
    Diagnostic::input("empty_file", file, "holds no header").cure("give the real file")
}

fn open_header(file: &str, line: u64) -> Diagnostic {
    let text = format!("a quote opened in the header (line {line}) is never closed");
    Diagnostic::input("unclosed_quote", format!("{file}:{line}"), text)
        .cure("mend the header, or set `quotes = \"none\"` in [records]")
}

fn long_header(file: &str, length: u64) -> Diagnostic {
    let text = format!("its first line has {length} bytes: no table of records begins like that");
    Diagnostic::input("not_a_table", format!("{file}:1"), text).cure("give delimited text with a header")
}

fn narrow(file: &str, width: usize, columns: usize) -> Diagnostic {
    let text = format!("rows have {width} fields, but `meta.xml` names a column {}", columns - 1);
    Diagnostic::input("column_past_end", format!("{file}:1"), text)
        .cure("mend `index` or `fieldsTerminatedBy` in meta.xml (columns count from 0)")
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
