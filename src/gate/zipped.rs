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
