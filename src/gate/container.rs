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

#[cfg(test)]
#[expect(clippy::disallowed_methods, reason = "a test writes its own inputs")]
mod tests {
    use std::fs;
    use std::io::Read;

    use tempfile::tempdir;

    use super::super::archive;
    use super::super::zipped::tests::{packed, written};
    use super::{Container, is_archive_folder};

    const META: &str = "<archive><core rowType='Occurrence'><files><location>data/a.csv</location></files>\
                        <id index='0'/></core></archive>";

    fn text(container: &Container, name: &str) -> String {
        let mut text = String::new();
        container.stream(name).unwrap().read_to_string(&mut text).unwrap();
        text
    }

    #[test]
    fn a_zip_and_a_folder_read_alike() {
        let folder = tempdir().unwrap();
        fs::create_dir(folder.path().join("data")).unwrap();
        fs::write(folder.path().join("meta.xml"), META).unwrap();
        fs::write(folder.path().join("data/a.csv"), "id\n1\n").unwrap();
        assert!(is_archive_folder(folder.path()) && !is_archive_folder(&folder.path().join("data")));
        let zip = written(&packed(&[("meta.xml", META), ("data/a.csv", "id\n1\n")]));
        for path in [folder.path(), zip.path()] {
            let container = Container::open(path, "skerrow").unwrap();
            let found = archive::read(&container).unwrap().unwrap();
            assert_eq!(found.records.locations, ["data/a.csv"]);
            assert_eq!(container.member("data/a.csv").unwrap().size, 5);
            assert_eq!(text(&container, "data/a.csv"), text(&container, "./data/a.csv"));
            assert_eq!(text(&container, "data/a.csv"), "id\n1\n");
            assert!(container.member("data").is_none() && container.member("../x").is_none());
            let Err(gone) = container.stream("gone.csv") else { panic!("opened what is not there") };
            assert_eq!((gone.0[0].rule, gone.0[0].place.as_str()), ("no_such_file", "skerrow: gone.csv"));
        }
    }

    #[test]
    fn a_single_top_folder_is_stepped_into() {
        let entries = [
            ("skerrow/meta.xml", META),
            ("skerrow/data/a.csv", "id\n"),
            ("__MACOSX/skerrow/._meta.xml", "x"),
        ];
        let zip = written(&packed(&entries));
        let found = archive::read(&Container::open(zip.path(), "a.zip").unwrap()).unwrap().unwrap();
        assert_eq!(found.records.locations, ["skerrow/data/a.csv"]);
        let two = written(&packed(&[("skerrow/meta.xml", META), ("other/a.csv", "id\n")]));
        assert_eq!(archive::read(&Container::open(two.path(), "a.zip").unwrap()).unwrap(), None);
    }

    #[test]
    fn one_table_in_a_zip() {
        let zip = written(&packed(&[("hoverflies/", ""), ("hoverflies/a.csv", "x\n"), ("__MACOSX/a", "")]));
        let container = Container::open(zip.path(), "a.zip").unwrap();
        assert_eq!(archive::read(&container).unwrap(), None);
        let names: Vec<String> = container.members().into_iter().map(|m| m.name).collect();
        assert_eq!(names, ["hoverflies/a.csv"]);
    }

    #[test]
    fn a_description_too_long_or_in_another_encoding() {
        let long = " ".repeat(5 << 20);
        for (bytes, word) in [(long.as_bytes(), "4 MiB"), (b"\xFF\xFE<\0a\0", "UTF-8")] {
            let folder = tempdir().unwrap();
            fs::write(folder.path().join("meta.xml"), bytes).unwrap();
            let found = archive::read(&Container::open(folder.path(), "skerrow").unwrap()).unwrap_err();
            assert!(found.0[0].text.contains(word), "{}", found.0[0].text);
        }
        let marked = format!("\u{FEFF}{META}");
        let zip = written(&packed(&[("meta.xml", &marked), ("data/a.csv", "id\n")]));
        assert!(archive::read(&Container::open(zip.path(), "a.zip").unwrap()).unwrap().is_some());
    }
}
