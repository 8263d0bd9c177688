//! Files that travel together, in a folder or in a zip file, as streams.

use std::fs::File;
use std::io::Read;
use std::path::{Path, PathBuf};

use crate::diag::{Diagnostic, Outcome};

use super::unpack::{Stream, broken};
use super::zipped::{Zip, inside};

/// The description of a Darwin Core archive.
const DESCRIPTION: &str = "meta.xml";

/// A description is at most so long.
const LONGEST: u64 = 4 << 20;

/// Whether a folder holds the description of a Darwin Core archive.
pub(super) fn is_archive_folder(path: &Path) -> bool {
    path.join(DESCRIPTION).is_file()
}

/// A folder or a zip file.
#[derive(Debug)]
pub(super) struct Container {
    /// Its name for messages.
    pub file: String,
    inner: Inner,
}

#[derive(Debug)]
enum Inner {
    Folder(PathBuf),
    Zip(Zip),
}

/// A file in a container.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(super) struct Member {
    /// Its path in the container, with `/` between folders.
    pub name: String,
    /// Its bytes when unpacked.
    pub size: u64,
}

/// The text of a description and where it was found.
pub(super) struct Description {
    /// The folder it stands in, ending with `/`; empty for the top.
    pub folder: String,
    /// Its name for messages.
    pub place: String,
    /// What it says.
    pub text: String,
}

impl Container {
    /// Opens a folder, or a zip file after checking its directory; `file` is the name for messages.
    pub(super) fn open(path: &Path, file: &str) -> Outcome<Self> {
        let inner =
            if path.is_dir() { Inner::Folder(path.to_owned()) } else { Inner::Zip(Zip::open(path, file)?) };
        Ok(Self { file: file.to_owned(), inner })
    }

    /// The files in it, by name: of a zip file all but folders and what some systems add by themselves,
    /// of a folder those at its top.
    pub(super) fn members(&self) -> Vec<Member> {
        let mut members = match &self.inner {
            Inner::Folder(folder) => top_of(folder),
            Inner::Zip(zip) => zip
                .entries()
                .iter()
                .filter(|e| !e.folder && !added_by_a_system(&e.name))
                .map(|e| Member { name: e.name.clone(), size: e.size })
                .collect(),
        };
        members.sort_by(|a, b| a.name.cmp(&b.name));
        members
    }

    /// A file by its path in the container.
    pub(super) fn member(&self, name: &str) -> Option<Member> {
        let name = inside(name)?;
        let size = match &self.inner {
            Inner::Folder(folder) => {
                std::fs::metadata(folder.join(&name)).ok().filter(|m| m.is_file())?.len()
            }
            Inner::Zip(zip) => zip.entries().iter().find(|e| !e.folder && e.name == name)?.size,
        };
        Some(Member { name, size })
    }

    /// The name of a member for messages.
    pub(super) fn place(&self, name: &str) -> String {
        format!("{}: {name}", self.file)
    }

    /// Opens a member from its beginning; as often as wanted.
    pub(super) fn stream(&self, name: &str) -> Outcome<Stream> {
        let place = self.place(name);
        let absent = || {
            Diagnostic::input("no_such_file", place.as_str(), "no such file")
                .cure("check the name; those of an archive are case-sensitive")
        };
        let name = self.member(name).ok_or_else(absent)?.name;
        match &self.inner {
            Inner::Folder(folder) => {
                Ok(Box::new(File::open(folder.join(&name)).map_err(|e| broken(&place, &e))?))
            }
            Inner::Zip(zip) => {
                let entry = zip.entries().iter().find(|e| !e.folder && e.name == name);
                zip.stream(entry.ok_or_else(absent)?)
            }
        }
    }

    /// The description of a Darwin Core archive, at the top or in the single folder of a zip file.
    pub(super) fn description(&self) -> Outcome<Option<Description>> {
        let Some(name) = self.described_in() else { return Ok(None) };
        let place = self.place(&name);
        let mut bytes = Vec::new();
        self.stream(&name)?.take(LONGEST + 1).read_to_end(&mut bytes).map_err(|e| broken(&place, &e))?;
        if bytes.len() as u64 > LONGEST {
            return Err(unfit(&place, "is longer than 4 MiB; no description of an archive is").into());
        }
        let text = match bytes.strip_prefix(b"\xEF\xBB\xBF") {
            Some(rest) => String::from_utf8(rest.to_vec()),
            None => String::from_utf8(bytes),
        };
        let text = text.map_err(|_| unfit(&place, "is not in UTF-8"))?;
        let folder = name.strip_suffix(DESCRIPTION).unwrap_or_default().to_owned();
        Ok(Some(Description { folder, place, text }))
    }

    fn described_in(&self) -> Option<String> {
        if self.member(DESCRIPTION).is_some() {
            return Some(DESCRIPTION.into());
        }
        if matches!(self.inner, Inner::Folder(_)) {
            return None;
        }
        let members = self.members();
        let (top, _) = members.first()?.name.split_once('/')?;
        let name = format!("{top}/{DESCRIPTION}");
        let all = members.iter().all(|m| m.name.split_once('/').is_some_and(|(t, _)| t == top));
        (all && members.iter().any(|m| m.name == name)).then_some(name)
    }
}

fn unfit(place: &str, text: &str) -> Diagnostic {
    Diagnostic::input("bad_archive", place, text).cure("mend the file, or download the archive again")
}

fn added_by_a_system(name: &str) -> bool {
    name.starts_with("__MACOSX/") || name.ends_with(".DS_Store")
}

fn top_of(folder: &Path) -> Vec<Member> {
    let entries = std::fs::read_dir(folder).into_iter().flatten().flatten();
    entries
        .filter_map(|e| {
            let known = std::fs::metadata(e.path()).ok().filter(|m| m.is_file())?;
            Some(Member { name: e.file_name().to_str()?.to_owned(), size: known.len() })
        })
        .collect()
}
