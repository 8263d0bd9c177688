//! Outputs appear whole or not at all: written in a hidden folder beside their targets, synced,
//! then moved into place one after another.

use std::collections::BTreeMap;
use std::fs::{self, File};
use std::path::{Path, PathBuf};
use std::sync::Mutex;

use crate::diag::{Diagnostic, Outcome};

/// Prefix of the hidden folders.
const PREFIX: &str = ".trodden-";

/// Hidden folders to clear when the run is interrupted, each with the folders made for it. Held while files are moved into place, so that an
/// interruption waits for the move to end.
static OPEN: Mutex<BTreeMap<PathBuf, Vec<PathBuf>>> = Mutex::new(BTreeMap::new());

/// Removes every unfinished output; called when the run is interrupted.
pub fn clear_all() {
    let open = OPEN.lock().unwrap_or_else(std::sync::PoisonError::into_inner);
    open.iter().for_each(|(hidden, made)| clear(hidden, made));
}

/// Removes a hidden folder, and those made for it that hold nothing else.
fn clear(hidden: &Path, made: &[PathBuf]) {
    // another thread may still be putting files there
    for _ in 0..50 {
        if fs::remove_dir_all(hidden).is_ok() || !hidden.exists() {
            break;
        }
    }
    made.iter().for_each(|folder| drop(fs::remove_dir(folder)));
}

/// Outputs on their way into a folder.
pub struct Staging {
    target: PathBuf,
    hidden: PathBuf,
    made: Vec<PathBuf>,
    names: Vec<String>,
}

impl Staging {
    /// Opens a hidden folder inside the target, which is made when it does not exist. What an
    /// earlier, killed run left there is cleared.
    ///
    /// # Errors
    /// When the folder cannot be made or written to.
    pub fn open(target: &Path) -> Outcome<Self> {
        let refused = |e: std::io::Error| {
            Diagnostic::output(
                "folder_not_writable",
                target.display().to_string(),
                format!("cannot write there: {e}"),
            )
            .cure("give another folder with `-o`, or change its permissions")
        };
        let made: Vec<PathBuf> = target
            .ancestors()
            .take_while(|a| !a.as_os_str().is_empty() && !a.exists())
            .map(Path::to_owned)
            .collect();
        fs::create_dir_all(target).map_err(refused)?;
        clear_stale(target);
        let hidden = target.join(format!("{PREFIX}{}", std::process::id()));
        fs::create_dir_all(&hidden).map_err(refused)?;
        OPEN.lock().unwrap_or_else(std::sync::PoisonError::into_inner).insert(hidden.clone(), made.clone());
        Ok(Self { target: target.to_owned(), hidden, made, names: Vec::new() })
    }

    /// Where to write an output of this name for now.
    pub fn path(&mut self, name: &str) -> PathBuf {
        if !self.names.iter().any(|n| n == name) {
            self.names.push(name.to_owned());
        }
        self.hidden.join(name)
    }

    /// Writes an output.
    ///
    /// # Errors
    /// When the disk does not take it.
    #[allow(clippy::disallowed_methods, reason = "this is the atomic writer")]
    pub fn write(&mut self, name: &str, bytes: &[u8]) -> Outcome<()> {
        let path = self.path(name);
        fs::write(path, bytes).map_err(|e| self.failed(name, &e).into())
    }

    /// Names of the outputs, in the order of writing.
    pub fn names(&self) -> &[String] {
        &self.names
    }

    /// Syncs the outputs and moves them into place.
    ///
    /// # Errors
    /// When the disk does not take them.
    pub fn commit(mut self) -> Outcome<Vec<PathBuf>> {
        for name in &self.names {
            File::open(self.hidden.join(name))
                .and_then(|f| f.sync_all())
                .map_err(|e| self.failed(name, &e))?;
        }
        // a folder in the way would stop the renames half-way, so it is looked for first
        for name in &self.names {
            if self.target.join(name).is_dir() {
                return Err(self
                    .failed(name, &std::io::Error::other("a folder of that name is in the way"))
                    .into());
            }
        }
        let mut open = OPEN.lock().unwrap_or_else(std::sync::PoisonError::into_inner);
        let mut placed = Vec::new();
        for name in &self.names {
            let to = self.target.join(name);
            fs::rename(self.hidden.join(name), &to).map_err(|e| self.failed(name, &e))?;
            placed.push(to);
        }
        open.remove(&self.hidden);
        drop(open);
        self.made.clear();
        Ok(placed)
    }

    fn failed(&self, name: &str, error: &std::io::Error) -> Diagnostic {
        failed(&self.target.join(name), &error.to_string())
    }
}

/// An output that could not be written.
pub(super) fn failed(path: &Path, why: &str) -> Diagnostic {
    // people know the place where the file was to appear, not the hidden one on the way
    let shown: PathBuf =
        path.components().filter(|c| !c.as_os_str().to_string_lossy().starts_with(PREFIX)).collect();
    Diagnostic::output("cannot_write", shown.display().to_string(), format!("cannot be written: {why}"))
        .cure("free some space, or give another folder with `-o`; earlier outputs are as they were")
}

impl Drop for Staging {
    fn drop(&mut self) {
        clear(&self.hidden, &self.made);
        OPEN.lock().unwrap_or_else(std::sync::PoisonError::into_inner).remove(&self.hidden);
    }
}

/// Removes hidden folders of runs that are no more.
fn clear_stale(target: &Path) {
    let Ok(entries) = fs::read_dir(target) else { return };
    for entry in entries.flatten() {
        let name = entry.file_name().to_string_lossy().into_owned();
        let Some(process) = name.strip_prefix(PREFIX) else { continue };
        let alive = process
            .parse::<u32>()
            .is_ok_and(|p| p != std::process::id() && Path::new(&format!("/proc/{p}")).exists());
        if !alive {
            drop(fs::remove_dir_all(entry.path()));
        }
    }
}
