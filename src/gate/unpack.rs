//! Gzip streams, guards against streams that unpack to far more than any table, and what to say of
//! a stream that breaks off.
//!
//! Streams only: nothing is unpacked into memory or onto disk.

use std::io::{self, Cursor, ErrorKind, Read};

use flate2::Crc;
use flate2::read::MultiGzDecoder;

use crate::diag::Diagnostic;

/// The first bytes of a gzip stream.
const GZIP: [u8; 2] = [0x1F, 0x8B];

/// A stream may unpack to so many bytes whatever its packed size.
const FREE: u64 = 64 << 20;

/// Beyond [`FREE`], a stream may be so many times larger than its packed size.
const TIMES: u64 = 250;

/// A stream of bytes that can move to another thread.
pub(super) type Stream = Box<dyn Read + Send>;

/// The stream itself, or what is inside when it begins as gzip does.
pub(super) fn maybe_gzip(mut reader: impl Read + Send + 'static) -> io::Result<Stream> {
    let mut head = Vec::new();
    reader.by_ref().take(GZIP.len() as u64).read_to_end(&mut head)?;
    let packed = head == GZIP;
    let whole = Cursor::new(head).chain(reader);
    Ok(if packed { gzip(whole) } else { Box::new(whole) })
}

/// What is inside a gzip stream of one or several members.
pub(super) fn gzip(reader: impl Read + Send + 'static) -> Stream {
    Box::new(Gunzip { decoder: MultiGzDecoder::new(Counted { reader, bytes: 0 }), given: 0 })
}

struct Gunzip<R: Read> {
    decoder: MultiGzDecoder<Counted<R>>,
    given: u64,
}

impl<R: Read> Read for Gunzip<R> {
    fn read(&mut self, buffer: &mut [u8]) -> io::Result<usize> {
        let n = self.decoder.read(buffer)?;
        self.given += n as u64;
        within_reason(self.given, self.decoder.get_ref().bytes)?;
        Ok(n)
    }
}

/// Counts what is taken from a reader.
struct Counted<R> {
    reader: R,
    bytes: u64,
}

impl<R: Read> Read for Counted<R> {
    fn read(&mut self, buffer: &mut [u8]) -> io::Result<usize> {
        let n = self.reader.read(buffer)?;
        self.bytes += n as u64;
        Ok(n)
    }
}

/// What the directory of an archive states about an entry.
#[derive(Clone, Copy)]
pub(super) struct Stated {
    /// Bytes after unpacking.
    pub size: u64,
    /// Bytes before.
    pub packed: u64,
    /// Checksum of the unpacked bytes (CRC-32).
    pub crc: u32,
}

/// An unpacked entry, held to what its directory states.
pub(super) fn held_to(stated: Stated, reader: impl Read + Send + 'static) -> Stream {
    Box::new(Held { stated, reader, given: 0, seen: Crc::new() })
}

struct Held<R> {
    stated: Stated,
    reader: R,
    given: u64,
    seen: Crc,
}

impl<R> Held<R> {
    /// At the end of the entry: all of it was there, unharmed.
    fn whole(&self) -> io::Result<()> {
        if self.given < self.stated.size {
            let text = format!("ends after {} of {} bytes", self.given, self.stated.size);
            return Err(io::Error::new(ErrorKind::UnexpectedEof, text));
        }
        if self.seen.sum() != self.stated.crc {
            return Err(io::Error::new(ErrorKind::InvalidData, "does not fit its checksum (CRC)"));
        }
        Ok(())
    }
}

impl<R: Read> Read for Held<R> {
    fn read(&mut self, buffer: &mut [u8]) -> io::Result<usize> {
        let n = self.reader.read(buffer)?;
        if n == 0 && !buffer.is_empty() {
            self.whole()?;
        }
        self.given += n as u64;
        if self.given > self.stated.size {
            return Err(too_much(format!("unpacks to more than the {} bytes it states", self.stated.size)));
        }
        within_reason(self.given, self.stated.packed)?;
        self.seen.update(&buffer[..n]);
        Ok(n)
    }
}

/// Refuses a stream that grows as only a made-up one does.
fn within_reason(given: u64, packed: u64) -> io::Result<()> {
    if given <= FREE || given <= packed.saturating_mul(TIMES) {
        return Ok(());
    }
    Err(too_much(format!("unpacks to more than {TIMES} times its size; no table of records does")))
}

fn too_much(text: String) -> io::Error {
    io::Error::new(ErrorKind::FileTooLarge, text)
}

/// What to say when reading breaks off; `place` names the file, and the entry in it.
pub(super) fn broken(place: &str, error: &io::Error) -> Diagnostic {
    match error.kind() {
        ErrorKind::FileTooLarge => Diagnostic::input("too_much_inside", place, error.to_string())
            .cure("download it again and check where it comes from; if it is sound, give it unpacked"),
        ErrorKind::UnexpectedEof | ErrorKind::InvalidData | ErrorKind::InvalidInput => {
            Diagnostic::input("cut_off", place, format!("is cut off or damaged: {error}"))
                .cure("download or pack the file again")
        }
        _ => Diagnostic::input("unreadable", place, format!("cannot be read: {error}"))
            .cure("check the file and the right to read it"),
    }
}

#[cfg(test)]
mod tests {
    use std::io::{self, Cursor, Read, Write};

    use flate2::Compression;
    use flate2::write::GzEncoder;
    use proptest::prelude::*;

    use super::{broken, gzip, maybe_gzip};

    fn packed(text: &[u8]) -> Vec<u8> {
        let mut encoder = GzEncoder::new(Vec::new(), Compression::default());
        encoder.write_all(text).unwrap();
        encoder.finish().unwrap()
    }

    fn all(mut reader: impl Read) -> io::Result<Vec<u8>> {
        let mut found = Vec::new();
        reader.read_to_end(&mut found).map(|_| found)
    }

    #[test]
    fn members_follow_one_another() {
        let two = [packed(b"one\n"), packed(b"two\n")].concat();
        assert_eq!(all(gzip(Cursor::new(two))).unwrap(), b"one\ntwo\n");
    }

    #[test]
    fn told_by_the_first_bytes() {
        assert_eq!(all(maybe_gzip(Cursor::new(packed(b"a,b"))).unwrap()).unwrap(), b"a,b");
        for plain in [&b""[..], b"\x1F", b"a,b\n1,2\n"] {
            assert_eq!(all(maybe_gzip(Cursor::new(plain.to_vec())).unwrap()).unwrap(), plain);
        }
    }

    #[test]
    fn a_cut_or_damaged_stream_is_an_error() {
        let text: Vec<u8> = (0..50_000_u32).flat_map(|i| format!("{}\n", i * 7919).into_bytes()).collect();
        let whole = packed(&text);
        for length in [whole.len() - 1, whole.len() / 2, 5] {
            let error = all(gzip(Cursor::new(whole[..length].to_vec()))).unwrap_err();
            assert_eq!(broken("skerrow.csv.gz", &error).rule, "cut_off", "{length}");
        }
        let mut harmed = whole.clone();
        let checksum = harmed.len() - 8;
        harmed[checksum] ^= 1;
        let error = all(gzip(Cursor::new(harmed))).unwrap_err();
        assert_eq!(broken("skerrow.csv.gz", &error).rule, "cut_off");
    }

    #[test]
    fn zeros_without_end_are_stopped() {
        let zeros = packed(&vec![0; 80 << 20]);
        let error = io::copy(&mut gzip(Cursor::new(zeros)), &mut io::sink()).unwrap_err();
        let said = broken("skerrow.csv.gz", &error);
        assert_eq!(said.rule, "too_much_inside");
        assert!(said.text.contains("250 times"), "{}", said.text);
    }

    #[test]
    fn other_errors_stay_what_they_are() {
        let error = io::Error::new(io::ErrorKind::PermissionDenied, "not yours");
        assert_eq!(broken("skerrow.csv", &error).rule, "unreadable");
    }

    proptest! {
        #[test]
        fn arbitrary_bytes_do_not_panic(bytes in prop::collection::vec(any::<u8>(), 0..2000)) {
            drop(all(gzip(Cursor::new(bytes.clone()))));
            let after_head = [&[0x1F, 0x8B, 8, 0][..], &bytes].concat();
            drop(all(maybe_gzip(Cursor::new(after_head)).unwrap()));
        }
    }
}
