//! Fingerprints of files.

use std::fs::File;
use std::io::Read;
use std::path::Path;

use sha2::{Digest, Sha256};

/// A file and its fingerprint.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct InputFile {
    /// Its name as the plan writes it, or in the output folder.
    pub name: String,
    /// Its size in bytes.
    pub bytes: u64,
    /// SHA-256, in hexadecimal.
    pub sha256: String,
}

/// Reads a file and gives its fingerprint; `None` when it cannot be read.
pub fn digest(path: &Path, name: &str) -> Option<InputFile> {
    let mut file = File::open(path).ok()?;
    let mut hasher = Sha256::new();
    let mut buffer = vec![0_u8; 1 << 20];
    let mut bytes = 0;
    loop {
        let n = file.read(&mut buffer).ok()?;
        if n == 0 {
            break;
        }
        bytes += n as u64;
        hasher.update(&buffer[..n]);
    }
    let sha256 = hasher.finalize().iter().map(|b| format!("{b:02x}")).collect();
    Some(InputFile { name: name.to_owned(), bytes, sha256 })
}
