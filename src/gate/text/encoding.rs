//! What the bytes of a text stand for: UTF-8, or Latin-1 where a file is plainly written in it.

use std::borrow::Cow;
use std::io::Read;

use encoding_rs::WINDOWS_1252;

use super::blocks::{Block, Blocks};

/// How bytes become text.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(in crate::gate) enum Encoding {
    /// UTF-8; a row that is none cannot be read.
    Utf8,
    /// Latin-1 (as Windows-1252, which agrees with it wherever Latin-1 has letters).
    Latin1,
}

impl Encoding {
    /// An encoding by any of its usual names.
    pub(in crate::gate) fn named(name: &str) -> Option<Self> {
        let plain: String = name.chars().filter(char::is_ascii_alphanumeric).collect();
        match plain.to_ascii_lowercase().as_str() {
            "" | "utf8" | "ascii" | "usascii" | "ansix341968" => Some(Self::Utf8),
            "iso88591" | "latin1" | "l1" | "isolatin1" | "windows1252" | "cp1252" | "win1252" => {
                Some(Self::Latin1)
            }
            _ => None,
        }
    }
}

/// What the lines of a text that are not plain ASCII look like.
#[derive(Debug, Default, Clone, Copy, PartialEq, Eq)]
pub(in crate::gate) struct Census {
    /// Lines in UTF-8.
    pub(in crate::gate) utf8: u64,
    /// Lines that are none, and look like words in Latin-1.
    pub(in crate::gate) latin1: u64,
    /// Lines that look like neither.
    pub(in crate::gate) neither: u64,
}

impl Census {
    /// Looks at whole lines.
    fn count(&mut self, lines: &[u8], terminator: u8) {
        if lines.is_ascii() {
            return;
        }
        for line in lines.split(|b| *b == terminator).filter(|l| !l.is_ascii()) {
            if std::str::from_utf8(line).is_ok() {
                self.utf8 += 1;
            } else if is_latin1(line) && has_words(line) {
                self.latin1 += 1;
            } else {
                self.neither += 1;
            }
        }
    }

    /// The encoding these lines speak for.
    pub(in crate::gate) fn verdict(self) -> Encoding {
        if self.latin1 > self.utf8 + self.neither { Encoding::Latin1 } else { Encoding::Utf8 }
    }
}

/// Whether most letters beyond ASCII stand in words, as accents do: one or two together, beside an ASCII
/// letter. Words of another alphabet, and bytes that are no text, do not.
fn has_words(line: &[u8]) -> bool {
    let (mut words, mut runs, mut at) = (0, 0, 0);
    while let Some(from) = line[at..].iter().position(|b| !b.is_ascii()).map(|n| at + n) {
        let to = line[from..].iter().position(u8::is_ascii).map_or(line.len(), |n| from + n);
        let letter = |b: Option<&u8>| b.is_some_and(u8::is_ascii_alphabetic);
        let beside = letter(from.checked_sub(1).and_then(|n| line.get(n))) || letter(line.get(to));
        runs += 1;
        words += usize::from(beside && to - from <= 2);
        at = to;
    }
    words > 0 && 2 * words >= runs
}

/// Reads a whole text for what its lines are written in.
pub(in crate::gate) fn census(source: Box<dyn Read + Send>, terminator: u8) -> std::io::Result<Census> {
    let mut blocks = Blocks::new(source, Vec::new(), terminator);
    let mut census = Census::default();
    while let Some(block) = blocks.next()? {
        if let Block::Lines { bytes, .. } = block {
            census.count(&bytes, terminator);
        }
    }
    Ok(census)
}

/// Whether no byte is one that Windows-1252, and so Latin-1, gives no character.
pub(in crate::gate) fn is_latin1(bytes: &[u8]) -> bool {
    !bytes.iter().any(|b| [0x81, 0x8D, 0x8F, 0x90, 0x9D].contains(b))
}

/// Latin-1 as text.
pub(in crate::gate) fn decode(bytes: &[u8]) -> Cow<'_, str> {
    WINDOWS_1252.decode_without_bom_handling(bytes).0
}

#[cfg(test)]
mod tests {
    use super::*;

    fn verdict(text: &[u8]) -> Encoding {
        census(Box::new(std::io::Cursor::new(text.to_vec())), b'\n').unwrap().verdict()
    }

    #[test]
    fn the_majority_of_lines_decides() {
        assert_eq!(verdict(b"plain\n"), Encoding::Utf8);
        assert_eq!(verdict("M\u{fc}ller\nJos\u{e9}\n".as_bytes()), Encoding::Utf8);
        assert_eq!(verdict(b"M\xfcller\nJos\xe9\n"), Encoding::Latin1);
        assert_eq!(verdict(b"M\xc3\xbcller\nJos\xe9\n"), Encoding::Utf8);
        assert_eq!(verdict(b"\x81\x8d\n"), Encoding::Utf8);
        assert_eq!(verdict(b"a\t\xff\xfe\xff\t1\n"), Encoding::Utf8);
        assert_eq!(verdict(b"\xcf\xe5\xf2\xf0\xee\xe2 \xc8.\n"), Encoding::Utf8);
        assert_eq!(verdict(b"\xd6sterberg, 5\xb0 N\n\xc5ke\n"), Encoding::Latin1);
        assert_eq!(decode(b"M\xfcller"), "M\u{fc}ller");
    }

    #[test]
    fn usual_names() {
        for name in ["UTF-8", "utf8", "US-ASCII"] {
            assert_eq!(Encoding::named(name), Some(Encoding::Utf8), "{name}");
        }
        for name in ["ISO-8859-1", "iso_8859_1", "Latin-1", "windows-1252", "Cp1252"] {
            assert_eq!(Encoding::named(name), Some(Encoding::Latin1), "{name}");
        }
        assert_eq!((Encoding::named("UTF-16"), Encoding::named("ISO-8859-15")), (None, None));
    }
}
