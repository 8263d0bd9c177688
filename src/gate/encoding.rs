//! Single-byte encodings of text, turned into UTF-8 as they stream.

use std::io::{self, Read};

use super::unpack::Stream;

/// How the bytes of a text stand for characters.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Encoding {
    /// UTF-8, and ASCII as part of it.
    Utf8,
    /// ISO-8859-1.
    Latin1,
    /// Windows-1252.
    Windows1252,
}

/// Characters of Windows-1252 at 0x80 to 0x9F; the five bytes without one stay control characters, as in
/// the WHATWG Encoding Standard.
const WINDOWS: [char; 32] = [
    '€', '\u{81}', '‚', 'ƒ', '„', '…', '†', '‡', 'ˆ', '‰', 'Š', '‹', 'Œ', '\u{8D}', 'Ž', '\u{8F}', '\u{90}',
    '‘', '’', '“', '”', '•', '–', '—', '˜', '™', 'š', '›', 'œ', '\u{9D}', 'ž', 'Ÿ',
];

impl Encoding {
    /// An encoding by any of its usual names.
    pub(super) fn named(name: &str) -> Option<Self> {
        let plain: String = name.chars().filter(char::is_ascii_alphanumeric).collect();
        match plain.to_ascii_lowercase().as_str() {
            "" | "utf8" | "ascii" | "usascii" | "ansix341968" => Some(Self::Utf8),
            "iso88591" | "latin1" | "l1" | "isolatin1" => Some(Self::Latin1),
            "windows1252" | "cp1252" | "win1252" => Some(Self::Windows1252),
            _ => None,
        }
    }

    /// The stream in UTF-8; one that is UTF-8 already passes unchanged and unchecked.
    pub(super) fn to_utf8(self, reader: Stream) -> Stream {
        match self {
            Self::Utf8 => reader,
            _ => Box::new(Turned { reader, encoding: self, ready: Vec::new(), given: 0 }),
        }
    }

    fn character(self, byte: u8) -> char {
        match (self, byte) {
            (Self::Windows1252, 0x80..=0x9F) => WINDOWS[usize::from(byte - 0x80)],
            _ => char::from(byte),
        }
    }
}

struct Turned {
    reader: Stream,
    encoding: Encoding,
    ready: Vec<u8>,
    given: usize,
}

impl Read for Turned {
    fn read(&mut self, buffer: &mut [u8]) -> io::Result<usize> {
        if self.given == self.ready.len() {
            let mut raw = [0; 8192];
            let n = self.reader.read(&mut raw)?;
            self.ready.clear();
            self.given = 0;
            let mut bytes = [0; 4];
            for byte in &raw[..n] {
                let character = self.encoding.character(*byte);
                self.ready.extend_from_slice(character.encode_utf8(&mut bytes).as_bytes());
            }
        }
        let n = buffer.len().min(self.ready.len() - self.given);
        buffer[..n].copy_from_slice(&self.ready[self.given..self.given + n]);
        self.given += n;
        Ok(n)
    }
}

#[cfg(test)]
mod tests {
    use std::io::{Cursor, Read};

    use super::Encoding;

    fn turned(bytes: &[u8], encoding: Encoding) -> String {
        let mut text = String::new();
        encoding.to_utf8(Box::new(Cursor::new(bytes.to_vec()))).read_to_string(&mut text).unwrap();
        text
    }

    #[test]
    fn bytes_become_characters() {
        assert_eq!(turned(b"M\xFCller \x80", Encoding::Latin1), "Müller \u{80}");
        assert_eq!(turned(b"M\xFCller \x80\x93\x9F", Encoding::Windows1252), "Müller €“Ÿ");
        assert_eq!(turned("Müller".as_bytes(), Encoding::Utf8), "Müller");
        let long = vec![0xE9; 20_000];
        assert_eq!(turned(&long, Encoding::Latin1), "é".repeat(20_000));
    }

    #[test]
    fn usual_names() {
        for (name, encoding) in [
            ("UTF-8", Encoding::Utf8),
            ("utf8", Encoding::Utf8),
            ("US-ASCII", Encoding::Utf8),
            ("ISO-8859-1", Encoding::Latin1),
            ("iso_8859_1", Encoding::Latin1),
            ("Latin-1", Encoding::Latin1),
            ("windows-1252", Encoding::Windows1252),
            ("Cp1252", Encoding::Windows1252),
        ] {
            assert_eq!(Encoding::named(name), Some(encoding), "{name}");
        }
        assert_eq!(Encoding::named("UTF-16"), None);
        assert_eq!(Encoding::named("ISO-8859-15"), None);
    }
}
