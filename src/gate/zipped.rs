//! Zip files: their directory, checked before anything inside is used, and entries as streams.

use std::collections::BTreeMap;
use std::fs::File;
use std::io::{Read, Seek, SeekFrom};
use std::path::{Path, PathBuf};

use flate2::read::DeflateDecoder;
use zip::read::ZipFileEntry;
use zip::result::ZipError;
use zip::{CompressionMethod, ZipArchive};

use crate::diag::{Diagnostic, Outcome};

use super::unpack::{Stated, Stream, broken, held_to};

/// Whether a file begins as zip files do.
pub(super) fn is_zip(path: &Path) -> bool {
    let mut head = [0; 4];
    let read = path.is_file() && File::open(path).and_then(|mut f| f.read_exact(&mut head)).is_ok();
    read && (head == *b"PK\x03\x04" || head == *b"PK\x05\x06")
}

/// A zip file whose directory was found sound.
#[derive(Debug)]
pub(super) struct Zip {
    path: PathBuf,
    file: String,
    entries: Vec<Entry>,
}

/// One file or folder in a zip file.
#[derive(Debug)]
pub(super) struct Entry {
    /// Its name, with `/` between folders.
    pub name: String,
    /// Bytes after unpacking, as stated.
    pub size: u64,
    /// Whether it is a folder.
    pub folder: bool,
    at: usize,
}

impl Zip {
    /// Reads the directory; `file` is the name for messages.
    pub(super) fn open(path: &Path, file: &str) -> Outcome<Self> {
        let archive = directory(path, file)?;
        if archive.has_duplicate_names() {
            return Err(twice(file, "two entries have the same name".into()).into());
        }
        let mut seen = BTreeMap::new();
        let mut entries = Vec::new();
        for at in 0..archive.len() {
            let found = archive.by_index_data(at).map_err(|e| unsound(file, &e))?;
            let name = name(&found, file)?;
            can_be_read(&found, &format!("{file}: {name}"))?;
            if let Some(other) = seen.insert(name.to_lowercase(), name.clone()) {
                let text = format!("the entries `{other}` and `{name}` are the same file on some systems");
                return Err(twice(file, text).into());
            }
            entries.push(Entry { name, size: found.size(), folder: found.is_dir(), at });
        }
        Ok(Self { path: path.to_owned(), file: file.to_owned(), entries })
    }

    /// All entries in the order of the directory.
    pub(super) fn entries(&self) -> &[Entry] {
        &self.entries
    }

    /// Unpacks an entry from its beginning.
    pub(super) fn stream(&self, entry: &Entry) -> Outcome<Stream> {
        let place = format!("{}: {}", self.file, entry.name);
        let mut archive = directory(&self.path, &self.file)?;
        let found = archive.by_index_raw(entry.at).map_err(|e| unsound(&place, &e))?;
        let start = found.data_start().ok_or_else(|| unsound(&place, &ZipError::FileNotFound))?;
        let (method, crc) = (found.compression(), found.crc32());
        let (size, packed) = (found.size(), found.compressed_size());
        drop(found);
        let mut source = archive.into_inner();
        let length = source.seek(SeekFrom::End(0)).map_err(|e| broken(&place, &e))?;
        source.seek(SeekFrom::Start(start)).map_err(|e| broken(&place, &e))?;
        let stated = Stated { size, packed: packed.min(length), crc };
        let inside = source.take(packed);
        Ok(match method {
            CompressionMethod::Stored => held_to(stated, inside),
            _ => held_to(stated, DeflateDecoder::new(inside)),
        })
    }
}

fn directory(path: &Path, file: &str) -> Outcome<ZipArchive<File>> {
    let source = File::open(path).map_err(|e| broken(file, &e))?;
    Ok(ZipArchive::new(source).map_err(|e| unsound(file, &e))?)
}

/// The name of an entry, which must stay inside the archive.
fn name(entry: &ZipFileEntry, file: &str) -> Outcome<String> {
    let name = match entry.name() {
        Ok(name) => name.into_owned(),
        Err(_) => String::from_utf8_lossy(entry.name_raw()).into_owned(),
    };
    let Some(inside) = inside(&name) else {
        let text = format!("holds an entry named `{}`, which leads out of the archive", name.escape_debug());
        return Err(Diagnostic::input("path_outside", file, text)
            .cure("check where the file comes from; pack it again with plain relative names")
            .into());
    };
    Ok(inside)
}

/// A relative path with `/` between its parts and nothing superfluous; `None` for one that is absolute,
/// names a drive, climbs by `..` or holds control characters.
pub(super) fn inside(name: &str) -> Option<String> {
    let path = name.replace('\\', "/");
    let drive = path.as_bytes().get(1) == Some(&b':') && path.as_bytes()[0].is_ascii_alphabetic();
    if drive || path.starts_with('/') || path.chars().any(char::is_control) {
        return None;
    }
    let parts: Vec<&str> = path.split('/').filter(|p| !p.is_empty() && *p != ".").collect();
    if parts.contains(&"..") || parts.is_empty() { None } else { Some(parts.join("/")) }
}

fn can_be_read(entry: &ZipFileEntry, place: &str) -> Outcome<()> {
    if entry.encrypted() {
        return Err(Diagnostic::input("encrypted", place, "is encrypted")
            .cure("unpack it with its password and give the files, or pack them without one")
            .into());
    }
    let method = entry.compression();
    if method == CompressionMethod::Stored || method == CompressionMethod::Deflated {
        return Ok(());
    }
    let text = format!("is packed by a method not known here ({method}); expected deflate or none");
    Err(Diagnostic::input("unknown_packing", place, text)
        .cure("unpack it and give the files, or pack them with deflate")
        .into())
}

fn twice(file: &str, text: String) -> Diagnostic {
    Diagnostic::input("duplicate_entry", file, text)
        .cure("which of the two is meant cannot be told: remove or rename one")
}

fn unsound(place: &str, error: &ZipError) -> Diagnostic {
    match error {
        ZipError::Io(e) => broken(place, e),
        ZipError::UnsupportedArchive(what) => Diagnostic::input(
            "unknown_packing",
            place,
            format!("is a zip file of a kind not known here: {what}"),
        )
        .cure("unpack it and give the files, or pack them as an ordinary zip file"),
        e => Diagnostic::input("cut_off", place, format!("is no whole zip file: {e}"))
            .cure("download or pack the file again"),
    }
}

#[cfg(test)]
pub(super) mod tests {
    use std::io::{self, Cursor, Read, Write};

    use proptest::prelude::*;
    use tempfile::NamedTempFile;
    use zip::write::SimpleFileOptions;
    use zip::{CompressionMethod, ZipWriter};

    use super::{Zip, broken, inside, is_zip};
    use crate::diag::Diagnostic;

    /// A zip file of these entries; a name that ends with `/` is a folder.
    pub(in super::super) fn packed(entries: &[(&str, &str)]) -> Vec<u8> {
        packed_as(CompressionMethod::Deflated, entries)
    }

    fn packed_as(method: CompressionMethod, entries: &[(&str, &str)]) -> Vec<u8> {
        let mut writer = ZipWriter::new(Cursor::new(Vec::new()));
        let options = SimpleFileOptions::default().compression_method(method);
        for (name, text) in entries {
            if name.ends_with('/') {
                writer.add_directory(*name, options).unwrap();
            } else {
                writer.start_file(*name, options).unwrap();
                writer.write_all(text.as_bytes()).unwrap();
            }
        }
        writer.finish().unwrap().into_inner()
    }

    /// Bytes as a file.
    pub(in super::super) fn written(bytes: &[u8]) -> NamedTempFile {
        let mut file = NamedTempFile::new().unwrap();
        file.write_all(bytes).unwrap();
        file
    }

    fn replaced(bytes: &[u8], from: &[u8], to: &[u8]) -> Vec<u8> {
        let mut bytes = bytes.to_vec();
        assert_eq!(from.len(), to.len());
        let places: Vec<usize> =
            (0..bytes.len() - from.len()).filter(|at| bytes[*at..].starts_with(from)).collect();
        assert!(!places.is_empty());
        for at in places {
            bytes[at..at + to.len()].copy_from_slice(to);
        }
        bytes
    }

    /// The offset of a field in the first header of the central directory.
    fn in_directory(bytes: &[u8], offset: usize) -> usize {
        bytes.windows(4).position(|w| w == b"PK\x01\x02").unwrap() + offset
    }

    fn refused(bytes: &[u8]) -> Diagnostic {
        Zip::open(written(bytes).path(), "skerrow.zip").unwrap_err().0.remove(0)
    }

    /// Reads the first entry to its end.
    fn first(bytes: &[u8]) -> io::Result<Vec<u8>> {
        let file = written(bytes);
        let zip = Zip::open(file.path(), "skerrow.zip").unwrap();
        let mut text = Vec::new();
        zip.stream(&zip.entries()[0]).unwrap().read_to_end(&mut text).map(|_| text)
    }

    fn rows() -> String {
        (0..20_000_u32).map(|i| format!("{i},Skerrowia invented,{}\n", i * 7919 % 1000)).collect()
    }

    #[test]
    fn entries_stream_again_and_again() {
        for method in [CompressionMethod::Stored, CompressionMethod::Deflated] {
            let rows = rows();
            let file = written(&packed_as(method, &[("a/", ""), ("a\\b.csv", &rows), ("c.csv", "x\n")]));
            assert!(is_zip(file.path()));
            let zip = Zip::open(file.path(), "skerrow.zip").unwrap();
            let found: Vec<_> = zip.entries().iter().map(|e| (e.name.as_str(), e.folder, e.size)).collect();
            assert_eq!(found, [("a", true, 0), ("a/b.csv", false, rows.len() as u64), ("c.csv", false, 2)]);
            for _ in 0..2 {
                let mut text = String::new();
                zip.stream(&zip.entries()[1]).unwrap().read_to_string(&mut text).unwrap();
                assert_eq!(text, rows);
            }
        }
    }

    #[test]
    fn sizes_stated_behind_the_data() {
        let mut writer = ZipWriter::new_stream(Vec::new());
        writer.start_file("a.csv", SimpleFileOptions::default()).unwrap();
        writer.write_all(rows().as_bytes()).unwrap();
        let bytes = writer.finish().unwrap().into_inner();
        assert_eq!(first(&bytes).unwrap(), rows().as_bytes());
    }

    #[test]
    fn told_by_the_first_bytes() {
        assert!(is_zip(written(&packed(&[])).path()));
        assert!(!is_zip(written(b"PK").path()));
        assert!(!is_zip(std::env::temp_dir().as_path()));
    }

    #[test]
    fn names_that_lead_outside() {
        for name in [
            "../a.csv",
            "a/../../b.csv",
            "/a.csv",
            "\\a.csv",
            "C:\\a.csv",
            "c:a.csv",
            "a\\..\\b.csv",
            "a\u{7}",
        ] {
            assert_eq!(inside(name), None, "{name}");
            let stand_in = "x".repeat(name.len());
            let bytes = replaced(&packed(&[(&stand_in, "")]), stand_in.as_bytes(), name.as_bytes());
            assert_eq!(refused(&bytes).rule, "path_outside", "{name}");
        }
        assert_eq!(inside("./a//b\\c..csv").as_deref(), Some("a/b/c..csv"));
    }

    #[test]
    fn names_given_twice() {
        let same = replaced(&packed(&[("a.csv", "1"), ("b.csv", "2")]), b"b.csv", b"a.csv");
        assert_eq!(refused(&same).rule, "duplicate_entry");
        for (one, other) in [("a.csv", "A.CSV"), ("a/b.csv", "a\\b.csv"), ("a.csv", "./a.csv")] {
            let found = refused(&packed(&[(one, ""), (other, "")]));
            assert_eq!(found.rule, "duplicate_entry", "{one} {other}");
        }
    }

    #[test]
    fn encrypted_or_packed_otherwise() {
        let whole = packed(&[("a.csv", "x\n")]);
        let mut encrypted = whole.clone();
        let flags = in_directory(&whole, 8);
        encrypted[flags] |= 1;
        assert_eq!(refused(&encrypted).rule, "encrypted");
        let mut method = whole.clone();
        method[in_directory(&whole, 10)] = 12;
        let found = refused(&method);
        assert_eq!((found.rule, found.place.as_str()), ("unknown_packing", "skerrow.zip: a.csv"));
    }

    #[test]
    fn cut_off_or_damaged() {
        let whole = packed(&[("a.csv", &rows())]);
        for length in [0, 4, whole.len() / 2, whole.len() - 1] {
            assert_eq!(refused(&whole[..length]).rule, "cut_off", "{length}");
        }
        let mut checksum = whole.clone();
        checksum[in_directory(&whole, 16)] ^= 1;
        assert_eq!(broken("a", &first(&checksum).unwrap_err()).rule, "cut_off");
        let mut short = whole.clone();
        let packed_size = in_directory(&whole, 20);
        let half = whole.len() as u32 / 2;
        short[packed_size..packed_size + 4].copy_from_slice(&half.to_le_bytes());
        assert_eq!(broken("a", &first(&short).unwrap_err()).rule, "cut_off");
        let stored = packed_as(CompressionMethod::Stored, &[("a.csv", &rows())]);
        let harmed = replaced(&stored, b"19999,", b"19998,");
        assert_eq!(broken("a", &first(&harmed).unwrap_err()).rule, "cut_off");
        for at in [whole.len() / 4, whole.len() / 2] {
            let mut harmed = whole.clone();
            harmed[at] ^= 0x55;
            first(&harmed).unwrap_err();
        }
    }

    #[test]
    fn more_than_stated() {
        let whole = packed(&[("a.csv", &rows())]);
        let mut less = whole.clone();
        let size = in_directory(&whole, 24);
        less[size..size + 4].copy_from_slice(&100_u32.to_le_bytes());
        assert_eq!(broken("a", &first(&less).unwrap_err()).rule, "too_much_inside");
        let mut more = whole.clone();
        more[size..size + 4].copy_from_slice(&u32::MAX.wrapping_sub(9).to_le_bytes());
        assert_eq!(broken("a", &first(&more).unwrap_err()).rule, "cut_off");
    }

    #[test]
    fn zeros_without_end_are_stopped() {
        let zeros = "0".repeat(80 << 20);
        let file = written(&packed(&[("a.csv", &zeros)]));
        let zip = Zip::open(file.path(), "skerrow.zip").unwrap();
        let error = io::copy(&mut zip.stream(&zip.entries()[0]).unwrap(), &mut io::sink()).unwrap_err();
        assert_eq!(broken("a", &error).rule, "too_much_inside");
        assert!(error.to_string().contains("250 times"));
    }

    proptest! {
        #![proptest_config(ProptestConfig::with_cases(128))]

        #[test]
        fn arbitrary_bytes_do_not_panic(bytes in prop::collection::vec(any::<u8>(), 0..400)) {
            drop(Zip::open(written(&bytes).path(), "a.zip"));
        }

        #[test]
        fn changed_bytes_do_not_panic(changes in prop::collection::vec((0..400_usize, any::<u8>()), 1..6)) {
            let mut bytes = packed(&[("a.csv", "id,x\n1,2\n"), ("b/", ""), ("b/c.csv", "3\n")]);
            let length = bytes.len();
            for (at, byte) in changes {
                bytes[at % length] = byte;
            }
            let file = written(&bytes);
            if let Ok(zip) = Zip::open(file.path(), "a.zip") {
                for entry in zip.entries() {
                    if let Ok(mut stream) = zip.stream(entry) {
                        drop(io::copy(&mut stream, &mut io::sink()));
                    }
                }
            }
        }
    }
}
