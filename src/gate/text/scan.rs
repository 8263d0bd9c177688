//! Walks through a text block by block, several blocks at once, handing rows on in their order.
//!
//! Blocks are cut at line ends. Where a quoted field holds that line end, the row is found open at the
//! block's end: what follows is then joined to it and read again, so that the cut never shows.

use std::collections::VecDeque;

use rayon::prelude::*;

use crate::diag::{Diagnostic, Observer, Outcome};

use super::super::unpack::broken;
use super::blocks::{Block, Blocks, LONGEST};
use super::encoding::{Encoding, census, decode, is_latin1};
use super::head::Head;
use super::source::TextSource;
use super::split::{Dialect, Rows, Step};

/// Blocks worked on at once.
const ROUND: usize = 4;

/// What is done with rows; parts are worked on at once and taken in their order.
pub(in crate::gate) trait Work: Sync {
    /// What a block becomes.
    type Part: Send;
    /// Begins a part.
    fn begin(&self) -> Self::Part;
    /// Takes a row that has all its fields; lines count from 1 within the part.
    fn row(&self, part: &mut Self::Part, line: u64, rows: &Rows);
    /// Notes that a row that was taken holds lines inside its quotes that look like rows.
    fn swallowed(&self, _part: &mut Self::Part, _line: u64, _lines: u64) {}
    /// Takes a row that cannot be read, why, and over how many lines it runs.
    fn unreadable(&self, part: &mut Self::Part, line: u64, why: &str, lines: u64);
    /// Ends a part.
    ///
    /// # Errors
    /// When it cannot be used.
    fn end(&self, part: &mut Self::Part) -> Outcome<()>;
}

/// A part, and how many lines come before it.
pub(in crate::gate) type Parts<P> = Vec<(P, u64)>;

/// A block whose bytes are understood.
struct Ready {
    bytes: Vec<u8>,
    last: bool,
    /// Length of a line that was passed over; such a block holds no bytes.
    too_long: Option<u64>,
    /// Whether it was Latin-1 with bytes that are no text.
    doubtful: bool,
}

/// What became of a block.
struct Parsed<P> {
    part: P,
    lines: u64,
    open: Option<usize>,
}

/// Reads all rows; what deserves attention about the file is returned. Parts are taken while those after them
/// are worked on.
pub(in crate::gate) fn scan<W: Work>(
    source: &TextSource,
    head: Head,
    work: &W,
    take: &mut (dyn FnMut(Parts<W::Part>) -> Outcome<()> + Send),
    observer: &dyn Observer,
) -> Outcome<Option<Diagnostic>> {
    let (dialect, width) = (head.dialect, head.width);
    let mut line = head.lines;
    let mut feed = Feed::new(source, head, observer);
    let mut queue = VecDeque::from(feed.round(1)?);
    let mut done = Vec::new();
    while !queue.is_empty() {
        let round: Vec<Ready> = queue.drain(..queue.len().min(ROUND)).collect();
        let missing = ROUND.saturating_sub(queue.len());
        let parse = || -> Vec<_> { round.par_iter().map(|b| parse(b, dialect, width, work)).collect() };
        let ahead = || rayon::join(parse, || feed.round(missing));
        let (taken, (parsed, fresh)) = rayon::join(|| take(std::mem::take(&mut done)), ahead);
        taken?;
        queue.extend(fresh?);
        let mut round = VecDeque::from(round);
        for parsed in parsed {
            let parsed = parsed?;
            let block = round.pop_front().expect("one for each");
            done.push((parsed.part, line));
            line += parsed.lines;
            if let Some(from) = parsed.open {
                queue = round.into_iter().chain(queue).collect();
                if !feed.join(&mut queue, block, from)? {
                    return Err(unclosed(source.name, line + 1).into());
                }
                break;
            }
        }
    }
    take(done)?;
    Ok(feed.remark)
}

/// Takes the rows of a block.
fn parse<W: Work>(block: &Ready, dialect: Dialect, width: usize, work: &W) -> Outcome<Parsed<W::Part>> {
    let mut parsed = Parsed { part: work.begin(), lines: 0, open: None };
    if let Some(length) = block.too_long {
        parsed.lines = 1;
        work.unreadable(&mut parsed.part, 1, &format!("a line of {length} bytes"), 1);
    }
    let text = simdutf8::basic::from_utf8(&block.bytes).ok();
    let doubtful = block.doubtful || text.is_none() || memchr::memchr(0, &block.bytes).is_some();
    let mut rows = Rows::new(&block.bytes, text, dialect);
    loop {
        let lines = match rows.step() {
            Step::Row(lines) => lines,
            Step::Open(from) => {
                parsed.open = Some(from);
                break;
            }
            Step::End => break,
        };
        let line = parsed.lines + 1;
        parsed.lines += lines;
        if rows.len() == 1 && rows.bytes(0).trim_ascii().is_empty() && width > 1 {
            continue; // an empty line is no row
        }
        if rows.len() != width {
            let why = format!("{} fields instead of {width}", rows.len());
            work.unreadable(&mut parsed.part, line, &why, lines);
        } else if let Some(why) = doubtful.then(|| doubt(&rows)).flatten() {
            work.unreadable(&mut parsed.part, line, why, lines);
        } else {
            work.row(&mut parsed.part, line, &rows);
            let inside = if lines > 1 { like_rows(rows.raw(), dialect, width) } else { 0 };
            if inside > 0 {
                work.swallowed(&mut parsed.part, line, inside);
            }
        }
    }
    work.end(&mut parsed.part)?;
    Ok(parsed)
}

/// How many lines of a row, beyond its first, have as many separators as a whole row.
fn like_rows(raw: &[u8], dialect: Dialect, width: usize) -> u64 {
    let lines = raw.split(|b| *b == dialect.terminator).skip(1);
    let whole = |l: &&[u8]| memchr::memchr_iter(dialect.separator, l).count() + 1 == width;
    lines.filter(whole).count() as u64
}

/// Why a row is no text.
fn doubt(rows: &Rows) -> Option<&'static str> {
    let odd = |text: &str| text.contains(['\u{81}', '\u{8d}', '\u{8f}', '\u{90}', '\u{9d}']);
    match std::str::from_utf8(rows.raw()) {
        Err(_) => Some("bytes that are not UTF-8"),
        Ok(text) if text.contains('\0') => Some("a NUL byte"),
        Ok(text) if odd(text) => Some("bytes that are no text"),
        Ok(_) => None,
    }
}

fn unclosed(file: &str, line: u64) -> Diagnostic {
    let text = format!(
        "a quote opened in the row of line {line} is never closed: the rest of the file is inside it"
    );
    Diagnostic::input("unclosed_quote", format!("{file}:{line}"), text)
        .cure("mend the row, or set `quotes = \"none\"` in [records] if quotes are ordinary characters here")
}

/// Reads blocks and settles what their bytes stand for.
struct Feed<'a> {
    source: &'a TextSource<'a>,
    blocks: Blocks,
    terminator: u8,
    encoding: Option<Encoding>,
    observer: &'a dyn Observer,
    remark: Option<Diagnostic>,
}

impl<'a> Feed<'a> {
    fn new(source: &'a TextSource<'a>, head: Head, observer: &'a dyn Observer) -> Self {
        let terminator = head.dialect.terminator;
        Self { source, blocks: head.blocks, terminator, encoding: head.encoding, observer, remark: None }
    }

    /// The next few blocks.
    fn round(&mut self, count: usize) -> Outcome<Vec<Ready>> {
        let mut ready = Vec::with_capacity(count);
        while ready.len() < count {
            match self.blocks.next().map_err(|e| broken(self.source.name, &e))? {
                None => break,
                Some(Block::Lines { bytes, last }) => {
                    self.observer.advance(bytes.len() as u64);
                    ready.push(self.settle(bytes, last)?);
                }
                Some(Block::TooLong(length)) => {
                    self.observer.advance(length);
                    let too_long = Some(length);
                    let bytes = Vec::new();
                    ready.push(Ready { bytes, last: false, too_long, doubtful: false });
                }
            }
        }
        Ok(ready)
    }

    /// Joins what is open at a block's end to what follows; `false` when nothing does that could close it.
    fn join(&mut self, queue: &mut VecDeque<Ready>, mut block: Ready, from: usize) -> Outcome<bool> {
        if block.last {
            return Ok(false);
        }
        if queue.is_empty() {
            queue.extend(self.round(1)?);
        }
        let Some(next) = queue.pop_front().filter(|n| n.too_long.is_none()) else { return Ok(false) };
        block.bytes.drain(..from);
        if block.bytes.len() > LONGEST {
            return Ok(false);
        }
        block.bytes.extend_from_slice(&next.bytes);
        block.last = next.last;
        block.doubtful |= next.doubtful;
        queue.push_front(block);
        Ok(true)
    }

    /// Settles what a block's bytes stand for.
    fn settle(&mut self, bytes: Vec<u8>, last: bool) -> Outcome<Ready> {
        if self.encoding.is_none() && !bytes.is_ascii() {
            let is_text = std::str::from_utf8(&bytes).is_ok();
            self.encoding = Some(if is_text { Encoding::Utf8 } else { self.judge()? });
        }
        if self.encoding == Some(Encoding::Latin1) && !bytes.is_ascii() {
            let doubtful = !is_latin1(&bytes);
            let bytes = decode(&bytes).into_owned().into_bytes();
            return Ok(Ready { bytes, last, too_long: None, doubtful });
        }
        Ok(Ready { bytes, last, too_long: None, doubtful: false })
    }

    /// Looks through the whole text once for what it is written in.
    fn judge(&mut self) -> Outcome<Encoding> {
        let census = (self.source.open)()
            .and_then(|s| census(s, self.terminator).map_err(|e| broken(self.source.name, &e).into()))?;
        let encoding = census.verdict();
        if encoding == Encoding::Latin1 {
            let text = format!(
                "{} lines hold bytes that are not UTF-8: the file was read as Latin-1",
                census.latin1
            );
            self.remark = Some(
                Diagnostic::input("read_as_latin1", self.source.name, text)
                    .cure("look at a name with an accent; if it is wrong, save the file as UTF-8"),
            );
        }
        Ok(encoding)
    }
}
