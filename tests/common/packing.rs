//! Tables packed as people pack them: gzip, zip, Darwin Core archives.

use std::fmt::Write as _;
use std::io::{Cursor, Write};

use flate2::Compression;
use flate2::write::GzEncoder;
use zip::ZipWriter;
use zip::write::SimpleFileOptions;

/// Bytes as gzip.
pub fn gzip(bytes: &[u8]) -> Vec<u8> {
    let mut encoder = GzEncoder::new(Vec::new(), Compression::default());
    encoder.write_all(bytes).expect("bytes can be packed");
    encoder.finish().expect("bytes can be packed")
}

/// A zip file of these entries.
pub fn zip(entries: &[(&str, &[u8])]) -> Vec<u8> {
    let mut writer = ZipWriter::new(Cursor::new(Vec::new()));
    for (name, bytes) in entries {
        writer.start_file(*name, SimpleFileOptions::default()).expect("an entry");
        writer.write_all(bytes).expect("an entry");
    }
    writer.finish().expect("a zip file").into_inner()
}

/// Bytes with a stretch exchanged for one of the same length, wherever it stands.
pub fn exchanged(bytes: &[u8], from: &[u8], to: &[u8]) -> Vec<u8> {
    assert_eq!(from.len(), to.len());
    let mut bytes = bytes.to_vec();
    let places: Vec<usize> =
        (0..bytes.len() - from.len()).filter(|at| bytes[*at..].starts_with(from)).collect();
    assert!(!places.is_empty(), "nothing to exchange");
    places.iter().for_each(|at| bytes[*at..*at + to.len()].copy_from_slice(to));
    bytes
}

/// A text in Latin-1.
pub fn latin1(text: &str) -> Vec<u8> {
    text.chars().map(|c| u8::try_from(u32::from(c)).expect("a character of Latin-1")).collect()
}

/// How a table of an archive is described.
pub struct Described<'a> {
    /// `core` or `extension`.
    pub element: &'a str,
    /// What its rows are.
    pub row_type: &'a str,
    /// Its attributes, as they stand in the description.
    pub attributes: &'a str,
    /// Its files.
    pub files: &'a [&'a str],
    /// Its columns in their order; the first is the identifier, an empty name is passed over.
    pub columns: &'a [&'a str],
    /// More elements (`<field …/>`).
    pub more: &'a str,
}

/// The description of an archive (Darwin Core text guide, TDWG 2009).
pub fn meta(tables: &[Described]) -> String {
    let mut text =
        String::from("<?xml version=\"1.0\"?>\n<archive xmlns=\"http://rs.tdwg.org/dwc/text/\">\n");
    for table in tables {
        let Described { element, row_type, attributes, files, columns, more } = table;
        let id = if *element == "core" { "id" } else { "coreid" };
        let files: String = files.iter().map(|f| format!("<location>{f}</location>")).collect();
        let row = format!("http://rs.tdwg.org/dwc/terms/{row_type}");
        let _ = write!(
            text,
            "<{element} rowType=\"{row}\" {attributes}>\n<files>{files}</files>\n<{id} index=\"0\"/>\n"
        );
        for (i, column) in columns.iter().enumerate().filter(|(_, c)| !c.is_empty()) {
            let _ = writeln!(text, "<field index=\"{i}\" term=\"http://rs.tdwg.org/dwc/terms/{column}\"/>");
        }
        let _ = writeln!(text, "{more}\n</{element}>");
    }
    text + "</archive>\n"
}
