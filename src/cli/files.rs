//! The files of a result: opened before the work, listed beside it, and those of an earlier run in the same place taken away.

use std::collections::BTreeSet;
use std::fs::{self, File};
use std::io::{BufWriter, Write};
use std::path::{Path, PathBuf};

use super::CliError;
use super::output::{create, file_error};

/// The list of all files that a run wrote, itself not named in it.
const LIST: &str = "files.txt";
const HEADER: &str =
    "# Files that shotwright wrote here; a later run to this directory replaces them.";

/// A directory that holds the files of one run, whatever else lies in it.
pub(super) struct Output {
    directory: PathBuf,
    names: BTreeSet<String>,
}

/// A file to be written.
pub(super) struct Sink {
    pub(super) path: PathBuf,
    pub(super) out: BufWriter<File>,
}

impl Output {
    /// Makes the directory if it is not there, and removes what its list says an earlier run wrote. A file that the list does
    /// not name stays, and so does one in another directory, whatever the list says.
    pub(super) fn create(directory: &Path) -> Result<Self, CliError> {
        fs::create_dir_all(directory).map_err(|cause| file_error(directory, cause))?;
        let output = Self {
            directory: directory.to_owned(),
            names: BTreeSet::new(),
        };
        let list = output.path(LIST);
        let text = match fs::read_to_string(&list) {
            Ok(text) => text,
            Err(cause) if cause.kind() == std::io::ErrorKind::NotFound => String::new(),
            Err(cause) => return Err(file_error(&list, cause)),
        };
        // Another program's file of this name is no list of ours.
        let mut lines = text.lines();
        if lines.next().is_some_and(|first| first != HEADER) {
            return Err(file_error(
                &list,
                std::io::Error::other(format!(
                    "is not a list of files that shotwright wrote, expected `{HEADER}` as its first line"
                )),
            ));
        }
        for name in lines {
            let path = output.path(name);
            let plain = Path::new(name).file_name().is_some_and(|n| n == name);
            let is_file = fs::symlink_metadata(&path).is_ok_and(|meta| meta.is_file());
            if plain && is_file {
                fs::remove_file(&path).map_err(|cause| file_error(&path, cause))?;
            }
        }
        Ok(output)
    }

    pub(super) fn directory(&self) -> &Path {
        &self.directory
    }

    fn path(&self, name: &str) -> PathBuf {
        self.directory.join(name)
    }

    /// Takes a name into the list, before the file is there: an interrupted run leaves nothing unlisted.
    pub(super) fn claim(&mut self, name: &str) -> Result<PathBuf, CliError> {
        if self.names.insert(name.to_owned()) {
            let lines = self.names.iter().map(|name| format!("{name}\n"));
            let text: String = std::iter::once(format!("{HEADER}\n"))
                .chain(lines)
                .collect();
            let list = self.path(LIST);
            fs::write(&list, text).map_err(|cause| file_error(&list, cause))?;
        }
        Ok(self.path(name))
    }

    /// Opens a file for writing.
    pub(super) fn sink(&mut self, name: &str) -> Result<Sink, CliError> {
        let path = self.claim(name)?;
        let out = create(&path)?;
        Ok(Sink { path, out })
    }
}

impl Sink {
    /// Writes the whole and closes it.
    pub(super) fn write(
        mut self,
        with: impl FnOnce(&mut BufWriter<File>) -> std::io::Result<()>,
    ) -> Result<(), CliError> {
        with(&mut self.out)
            .and_then(|()| self.out.flush())
            .map_err(|cause| file_error(&self.path, cause))
    }
}
