//! A stream of bytes in blocks that end where a row may end.

use std::io::{self, Read};

use memchr::{memchr, memrchr};

/// Bytes read at once.
pub(in crate::gate) const BLOCK: usize = 1 << 21;
/// A row longer than this is not kept in memory.
pub(in crate::gate) const LONGEST: usize = 16 << 20;

/// A stretch of a text.
#[derive(Debug)]
pub(in crate::gate) enum Block {
    /// Whole lines; the last block of a text may end without a terminator.
    Lines {
        /// The bytes.
        bytes: Vec<u8>,
        /// Whether nothing follows.
        last: bool,
    },
    /// One line too long to be kept, and its length.
    TooLong(u64),
}

/// Reads blocks.
pub(in crate::gate) struct Blocks {
    source: Box<dyn Read + Send>,
    terminator: u8,
    carry: Vec<u8>,
    ended: bool,
    done: bool,
}

impl Blocks {
    /// Reads from a stream, beginning with bytes that were read before.
    pub(in crate::gate) fn new(source: Box<dyn Read + Send>, carry: Vec<u8>, terminator: u8) -> Self {
        Self { source, terminator, carry, ended: false, done: false }
    }

    /// The next block; `None` at the end.
    pub(in crate::gate) fn next(&mut self) -> io::Result<Option<Block>> {
        if self.done {
            return Ok(None);
        }
        let mut bytes = std::mem::take(&mut self.carry);
        let mut searched = 0;
        loop {
            if !self.ended && bytes.len() < searched + BLOCK {
                self.fill(&mut bytes, searched + BLOCK)?;
            }
            let end = memrchr(self.terminator, &bytes[searched..]).map(|n| searched + n + 1);
            match end {
                Some(end) if !self.ended || end == bytes.len() => {
                    self.carry = bytes.split_off(end);
                    self.done = self.ended && self.carry.is_empty();
                    return Ok(Some(Block::Lines { bytes, last: self.done }));
                }
                _ if self.ended => {
                    self.done = true;
                    return Ok((!bytes.is_empty()).then_some(Block::Lines { bytes, last: true }));
                }
                _ if bytes.len() > LONGEST => return self.skip(bytes.len() as u64).map(Some),
                _ => searched = bytes.len(),
            }
        }
    }

    /// Gives back what was not used of the block just read, from `at` on.
    pub(in crate::gate) fn put_back(&mut self, mut bytes: Vec<u8>, at: usize) {
        bytes.drain(..at);
        bytes.append(&mut self.carry);
        self.carry = bytes;
        self.done = self.ended && self.carry.is_empty();
    }

    /// Reads until so many bytes are there, or the stream ends.
    fn fill(&mut self, bytes: &mut Vec<u8>, wanted: usize) -> io::Result<()> {
        let missing = (wanted - bytes.len()) as u64;
        bytes.reserve(missing as usize);
        let read = self.source.by_ref().take(missing).read_to_end(bytes)?;
        self.ended = (read as u64) < missing;
        Ok(())
    }

    /// Passes over the rest of a line.
    fn skip(&mut self, mut length: u64) -> io::Result<Block> {
        let mut rest = Vec::new();
        while !self.ended {
            rest.clear();
            self.fill(&mut rest, BLOCK)?;
            if let Some(end) = memchr(self.terminator, &rest) {
                self.carry = rest.split_off(end + 1);
                return Ok(Block::TooLong(length + rest.len() as u64));
            }
            length += rest.len() as u64;
        }
        self.done = true;
        Ok(Block::TooLong(length))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn blocks(text: &[u8]) -> Vec<Block> {
        let mut blocks = Blocks::new(Box::new(io::Cursor::new(text.to_vec())), Vec::new(), b'\n');
        std::iter::from_fn(|| blocks.next().unwrap()).collect()
    }

    #[test]
    fn every_byte_comes_once_and_blocks_end_with_lines() {
        let line = "some text of a row, with a few words\n";
        for ending in ["", "last line without its end"] {
            let text = line.repeat(200_000) + ending;
            let found = blocks(text.as_bytes());
            assert!(found.len() > 2);
            let mut joined = Vec::new();
            for (i, block) in found.iter().enumerate() {
                let Block::Lines { bytes, last } = block else { panic!("no line is too long") };
                assert_eq!(*last, i + 1 == found.len());
                assert!(bytes.ends_with(b"\n") || *last);
                joined.extend_from_slice(bytes);
            }
            assert!(joined == text.as_bytes());
        }
    }

    #[test]
    fn a_line_without_end_is_passed_over() {
        let text = ["a\n".into(), "x".repeat(40 << 20), "\nb\n".into()].concat();
        let found = blocks(text.as_bytes());
        assert!(matches!(&found[0], Block::Lines { bytes, .. } if bytes == b"a\n"));
        assert!(matches!(&found[1], Block::TooLong(n) if *n == (40 << 20) + 1));
        assert!(matches!(&found[2], Block::Lines { bytes, last: true } if bytes == b"b\n"));
    }
}
