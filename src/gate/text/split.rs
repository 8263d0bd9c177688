//! Splits a block of delimited text into rows and fields.
//!
//! A quote encloses a field only where it stands at its beginning; two of them inside stand for one.
//! Whatever follows a closing quote before the next separator belongs to the field as it stands. The
//! twin in the tests is the `csv` crate.

use memchr::memchr;

use super::marks::Marks;

/// The signs a text is made of.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(in crate::gate) struct Dialect {
    /// Between fields.
    pub(in crate::gate) separator: u8,
    /// Between rows.
    pub(in crate::gate) terminator: u8,
    /// Around fields, if any.
    pub(in crate::gate) quote: Option<u8>,
}

/// What the next step through a block found.
#[derive(Debug, PartialEq, Eq)]
pub(in crate::gate) enum Step {
    /// A row; over how many lines it runs.
    Row(u64),
    /// A row whose quote is still open where the block ends; where the row begins.
    Open(usize),
    /// Nothing more.
    End,
}

/// Where a field lies: in the block, or, with its quotes resolved, in the text beside it.
#[derive(Debug, Clone, Copy)]
struct Span {
    from: u32,
    to: u32,
    resolved: bool,
}

impl Span {
    /// A stretch of the block (which is far shorter than 4 GiB), or of the text beside it.
    fn new(from: usize, to: usize, resolved: bool) -> Self {
        Self { from: from as u32, to: to as u32, resolved }
    }

    fn range(self) -> std::ops::Range<usize> {
        self.from as usize..self.to as usize
    }
}

/// Walks through the rows of a block.
pub(in crate::gate) struct Rows<'a> {
    bytes: &'a [u8],
    /// The same as text, where all of it is.
    text: Option<&'a str>,
    dialect: Dialect,
    at: usize,
    row: (usize, usize),
    spans: Vec<Span>,
    resolved: Vec<u8>,
    marks: Marks<'a>,
}

impl<'a> Rows<'a> {
    /// Begins at the start of a block.
    pub(in crate::gate) fn new(bytes: &'a [u8], text: Option<&'a str>, dialect: Dialect) -> Self {
        let marks = Marks::new(bytes, [dialect.separator, dialect.terminator]);
        Self { bytes, text, dialect, at: 0, row: (0, 0), spans: Vec::new(), resolved: Vec::new(), marks }
    }

    /// Finds the next row.
    pub(in crate::gate) fn step(&mut self) -> Step {
        self.spans.clear();
        self.resolved.clear();
        let begin = self.at;
        if begin >= self.bytes.len() {
            return Step::End;
        }
        let mut lines = 1;
        loop {
            let quoted = self.dialect.quote.is_some_and(|q| self.bytes.get(self.at) == Some(&q));
            let end = if quoted {
                match self.quoted(&mut lines) {
                    Some(end) => end,
                    None => {
                        self.at = begin;
                        return Step::Open(begin);
                    }
                }
            } else {
                self.plain()
            };
            if end {
                break;
            }
        }
        let stop = self.at - usize::from(self.bytes[self.at - 1] == self.dialect.terminator);
        self.row = (begin, stop.max(begin));
        Step::Row(lines)
    }

    /// A field without quotes; `true` when it ends the row.
    fn plain(&mut self) -> bool {
        let from = self.at;
        let (to, end) = self.stop(from);
        self.spans.push(Span::new(from, to, false));
        end
    }

    /// Moves behind the next separator or terminator; where it stands, and whether the row ends there.
    fn stop(&mut self, from: usize) -> (usize, bool) {
        match self.marks.next(from) {
            Some(at) => {
                self.at = at + 1;
                (at, self.bytes[at] == self.dialect.terminator)
            }
            None => {
                self.at = self.bytes.len();
                (self.bytes.len(), true)
            }
        }
    }

    /// A field in quotes; `None` when they do not close in this block.
    fn quoted(&mut self, lines: &mut u64) -> Option<bool> {
        let quote = self.dialect.quote?;
        let open = self.at + 1;
        let (mut from, mut begun) = (open, None); // what is before `from` is resolved
        loop {
            let close = from + memchr(quote, &self.bytes[from..])?;
            *lines += memchr::memchr_iter(self.dialect.terminator, &self.bytes[from..close]).count() as u64;
            match self.bytes.get(close + 1) {
                Some(b) if *b == quote => {
                    begun.get_or_insert(self.resolved.len());
                    self.resolved.extend_from_slice(&self.bytes[from..=close]);
                    from = close + 2;
                }
                Some(b) if *b != self.dialect.separator && *b != self.dialect.terminator => {
                    return Some(self.trailing((from, close), begun));
                }
                _ => {
                    let end = self.stop(close + 1).1;
                    match begun {
                        None => self.spans.push(Span::new(open, close, false)),
                        Some(at) => {
                            self.resolved.extend_from_slice(&self.bytes[from..close]);
                            self.spans.push(Span::new(at, self.resolved.len(), true));
                        }
                    }
                    return Some(end);
                }
            }
        }
    }

    /// Text between a closing quote and the next separator belongs to the field.
    fn trailing(&mut self, (from, close): (usize, usize), begun: Option<usize>) -> bool {
        let (to, end) = self.stop(close + 1);
        let at = begun.unwrap_or(self.resolved.len());
        self.resolved.extend_from_slice(&self.bytes[from..close]);
        self.resolved.extend_from_slice(&self.bytes[close + 1..to]);
        self.spans.push(Span::new(at, self.resolved.len(), true));
        end
    }

    /// Where the next row begins.
    pub(in crate::gate) fn position(&self) -> usize {
        self.at
    }

    /// Number of fields of the row.
    pub(in crate::gate) fn len(&self) -> usize {
        self.spans.len()
    }

    /// The whole row as it stands, without what ends it.
    pub(in crate::gate) fn raw(&self) -> &'a [u8] {
        let raw = &self.bytes[self.row.0..self.row.1];
        raw.strip_suffix(b"\r").unwrap_or(raw)
    }

    /// A field's bytes; a carriage return that ends the row is cut off.
    pub(in crate::gate) fn bytes(&self, field: usize) -> &[u8] {
        let span = self.spans[field];
        let from: &[u8] = if span.resolved { &self.resolved } else { self.bytes };
        let bytes = &from[span.range()];
        if field + 1 == self.spans.len() { bytes.strip_suffix(b"\r").unwrap_or(bytes) } else { bytes }
    }

    /// A field's text; empty where it is none.
    pub(in crate::gate) fn field(&self, field: usize) -> &str {
        let span = self.spans[field];
        match self.text {
            Some(text) if !span.resolved => {
                let text = &text[span.range()];
                if field + 1 == self.spans.len() { text.strip_suffix('\r').unwrap_or(text) } else { text }
            }
            _ => std::str::from_utf8(self.bytes(field)).unwrap_or(""),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn rows(bytes: &[u8], dialect: Dialect) -> Option<Vec<Vec<Vec<u8>>>> {
        let mut rows = Rows::new(bytes, None, dialect);
        let mut all = Vec::new();
        loop {
            match rows.step() {
                Step::Row(_) if rows.len() == 1 && rows.bytes(0).is_empty() => {}
                Step::Row(_) => all.push((0..rows.len()).map(|f| rows.bytes(f).to_vec()).collect()),
                Step::Open(_) => return None,
                Step::End => return Some(all),
            }
        }
    }

    /// The slow twin.
    fn twin(bytes: &[u8], dialect: Dialect) -> Vec<Vec<Vec<u8>>> {
        let mut builder = csv::ReaderBuilder::new();
        builder
            .delimiter(dialect.separator)
            .flexible(true)
            .has_headers(false)
            .quoting(dialect.quote.is_some());
        builder.terminator(csv::Terminator::Any(dialect.terminator));
        let cut = |(i, f, n): (usize, &[u8], usize)| {
            let f = if i + 1 == n { f.strip_suffix(b"\r").unwrap_or(f) } else { f };
            f.to_vec()
        };
        builder
            .from_reader(bytes)
            .byte_records()
            .map(|r| r.unwrap())
            .map(|r| r.iter().enumerate().map(|(i, f)| cut((i, f, r.len()))).collect::<Vec<_>>())
            .filter(|r: &Vec<Vec<u8>>| !(r.len() == 1 && r[0].is_empty()))
            .collect()
    }

    const QUOTED: Dialect = Dialect { separator: b',', terminator: b'\n', quote: Some(b'"') };

    #[test]
    fn quotes_are_resolved() {
        let text = b"a,\"b,\"\"c\"\"\",d\r\n\"x\ny\",\"\",z\"z\n\"p\"q,r,s";
        let found: Vec<Vec<String>> = rows(text, QUOTED)
            .unwrap()
            .iter()
            .map(|r| r.iter().map(|f| String::from_utf8(f.clone()).unwrap()).collect())
            .collect();
        assert_eq!(found, [vec!["a", "b,\"c\"", "d"], vec!["x\ny", "", "z\"z"], vec!["pq", "r", "s"]]);
        let mut steps = Rows::new(text, None, QUOTED);
        assert_eq!((steps.step(), steps.step(), steps.step()), (Step::Row(1), Step::Row(2), Step::Row(1)));
    }

    #[test]
    fn an_open_quote_is_told() {
        let mut steps = Rows::new(b"a,b\n\"c,d\n", None, QUOTED);
        assert_eq!((steps.step(), steps.step()), (Step::Row(1), Step::Open(4)));
    }

    proptest! {
        #[test]
        fn any_text_is_split_as_the_twin_does(text in "[ab,;\"\r\n\té]{0,60}", tabs: bool) {
            let dialect = if tabs { Dialect { separator: b'\t', quote: None, ..QUOTED } } else { QUOTED };
            if let Some(found) = rows(text.as_bytes(), dialect) {
                prop_assert_eq!(found, twin(text.as_bytes(), dialect));
            }
        }
    }
}
