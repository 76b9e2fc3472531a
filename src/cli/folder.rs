//! The output folder: filled whole or not at all, and never over a stranger's file.
//!
//! Files are written into a staging folder inside the output folder and renamed
//! into place at the end. A list of what was written, with length and digest,
//! stays in the folder under [`LIST_NAME`]: a file by one of our names that the
//! list does not vouch for is someone else's, and ends the work before it starts.

use std::collections::BTreeMap;
use std::fs;
use std::io::Read;
use std::path::{Path, PathBuf};

use super::error::CliError;

/// The list of files that notchwright wrote into a folder.
const LIST_NAME: &str = ".notchwright-files";
/// The staging folder.
const STAGING_NAME: &str = ".notchwright-unfinished";
/// The digest covers a file's length and this much of its head; the rest of a
/// recording of hours is not read again just to know it.
const DIGESTED_BYTES: u64 = 64 * 1024;

/// An output folder on its way to being filled.
#[derive(Debug)]
pub struct OutFolder {
    dir: PathBuf,
    /// Name to digest of the files that an earlier call wrote and that are unchanged.
    ours: BTreeMap<String, String>,
    staged: Vec<String>,
    /// Folders that had to be made, outermost first; unmade when nothing comes of it.
    made: Vec<PathBuf>,
}

impl OutFolder {
    /// Checks that `dir` can take files by these `names`. Writes nothing.
    ///
    /// # Errors
    /// When `dir` is not a folder and cannot become one, or when it holds a file
    /// by one of the names that notchwright did not write or that was changed since.
    pub fn check(dir: &Path, names: &[&str]) -> Result<Self, CliError> {
        refuse_non_folder(dir)?;
        let listed = read_list(dir)?;
        let mut ours = BTreeMap::new();
        for (name, digest) in listed {
            if digest_of(&dir.join(&name)).is_some_and(|found| found == digest) {
                ours.insert(name, digest);
            }
        }
        for name in names {
            let path = dir.join(name);
            if path.symlink_metadata().is_ok() && !ours.contains_key(*name) {
                return Err(CliError::StrangersFile { path });
            }
        }
        Ok(Self { dir: dir.to_owned(), ours, staged: Vec::new(), made: Vec::new() })
    }

    /// Makes the folder and the staging folder in it.
    ///
    /// # Errors
    /// When the system refuses.
    pub fn open(&mut self) -> Result<(), CliError> {
        let missing: Vec<_> =
            self.dir.ancestors().take_while(|dir| !dir.as_os_str().is_empty() && !dir.exists()).collect();
        for dir in missing.iter().rev() {
            fs::create_dir(dir).map_err(|source| CliError::write(dir, source))?;
            self.made.push(dir.to_path_buf());
        }
        let staging = self.staging();
        if staging.exists() {
            // Left by a call that was cut short; its name is ours alone.
            fs::remove_dir_all(&staging).map_err(|source| CliError::write(&staging, source))?;
        }
        fs::create_dir(&staging).map_err(|source| CliError::write(&staging, source))
    }

    /// The path at which to write the file that will be called `name`.
    pub fn stage(&mut self, name: &str) -> PathBuf {
        if !self.staged.iter().any(|staged| staged == name) {
            self.staged.push(name.to_owned());
        }
        self.staging().join(name)
    }

    /// Writes a whole text file that will be called `name`.
    ///
    /// # Errors
    /// When the system refuses.
    pub fn write(&mut self, name: &str, text: &str) -> Result<(), CliError> {
        let path = self.stage(name);
        fs::write(&path, text).map_err(|source| CliError::write(&path, source))
    }

    /// Moves all staged files into place. With `alone`, files of an earlier call
    /// that this one did not write again are removed: they would contradict it.
    ///
    /// # Errors
    /// When the system refuses.
    pub fn finish(mut self, alone: bool) -> Result<Vec<String>, CliError> {
        let staging = self.staging();
        let mut list = BTreeMap::new();
        for (name, digest) in &self.ours {
            if self.staged.contains(name) {
                continue;
            }
            if alone {
                let path = self.dir.join(name);
                fs::remove_file(&path).map_err(|source| CliError::write(&path, source))?;
            } else {
                list.insert(name.clone(), digest.clone());
            }
        }
        for name in &self.staged {
            let (from, to) = (staging.join(name), self.dir.join(name));
            let digest = digest_of(&from)
                .ok_or_else(|| CliError::write(&from, std::io::ErrorKind::NotFound.into()))?;
            fs::rename(&from, &to).map_err(|source| CliError::write(&to, source))?;
            list.insert(name.clone(), digest);
        }
        let text: String = list.iter().map(|(name, digest)| format!("{digest} {name}\n")).collect();
        let path = self.dir.join(LIST_NAME);
        fs::write(&path, text).map_err(|source| CliError::write(&path, source))?;
        self.made.clear();
        Ok(std::mem::take(&mut self.staged))
    }

    fn staging(&self) -> PathBuf {
        self.dir.join(STAGING_NAME)
    }
}

/// Whatever was staged and not finished goes, and so do folders made for it.
impl Drop for OutFolder {
    fn drop(&mut self) {
        // Nothing to be done about a failure here: the error that led here is being reported.
        let _ = fs::remove_dir_all(self.staging());
        for dir in self.made.iter().rev() {
            let _ = fs::remove_dir(dir);
        }
    }
}

/// An existing path must be a folder, and so must the nearest existing ancestor
/// of one that does not exist yet.
fn refuse_non_folder(dir: &Path) -> Result<(), CliError> {
    let standing =
        dir.ancestors().find(|path| path.as_os_str().is_empty() || path.symlink_metadata().is_ok());
    match standing {
        Some(path) if !path.as_os_str().is_empty() && !path.is_dir() => {
            Err(CliError::NotAFolder { path: path.to_owned() })
        }
        _ => Ok(()),
    }
}

/// The names and digests in the folder's list; empty where there is none.
fn read_list(dir: &Path) -> Result<Vec<(String, String)>, CliError> {
    let path = dir.join(LIST_NAME);
    if !path.exists() {
        return Ok(Vec::new());
    }
    let text = fs::read_to_string(&path).map_err(|source| CliError::read(&path, source))?;
    let entries = text.lines().filter_map(|line| line.split_once(' '));
    // A name with a separator is none of ours: the list must not reach outside its folder.
    let entries = entries.filter(|(_, name)| !name.contains(['/', '\\']));
    Ok(entries.map(|(digest, name)| (name.to_owned(), digest.to_owned())).collect())
}

/// Length and 64-bit FNV-1a (Fowler, Noll, Vo; IETF draft) of the file's head;
/// `None` where it cannot be read.
fn digest_of(path: &Path) -> Option<String> {
    if !path.symlink_metadata().ok()?.is_file() {
        return None;
    }
    let mut head = Vec::new();
    let file = fs::File::open(path).ok()?;
    let length = file.metadata().ok()?.len();
    file.take(DIGESTED_BYTES).read_to_end(&mut head).ok()?;
    let hash = head.iter().fold(0xcbf2_9ce4_8422_2325_u64, |hash, &byte| {
        (hash ^ u64::from(byte)).wrapping_mul(0x0000_0100_0000_01b3)
    });
    Some(format!("{length}-{hash:016x}"))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn fill(dir: &Path, names: &[&str], alone: bool) -> Result<(), CliError> {
        let mut folder = OutFolder::check(dir, names)?;
        folder.open()?;
        for name in names {
            folder.write(name, &format!("contents of {name}"))?;
        }
        folder.finish(alone).map(drop)
    }

    fn names_in(dir: &Path) -> Vec<String> {
        let mut names: Vec<_> = fs::read_dir(dir)
            .unwrap()
            .map(|entry| entry.unwrap().file_name().into_string().unwrap())
            .collect();
        names.sort();
        names
    }

    #[test]
    fn a_folder_that_was_filled_is_refilled_and_other_files_stay() {
        let home = tempfile::tempdir().unwrap();
        let dir = home.path().join("a/b");
        fill(&dir, &["plan.yaml", "filtered.wav"], true).unwrap();
        fs::write(dir.join("my-notes.txt"), "mine").unwrap();
        fill(&dir, &["plan.yaml"], true).unwrap();
        assert_eq!(names_in(&dir), [LIST_NAME, "my-notes.txt", "plan.yaml"]);
    }

    #[test]
    fn a_second_command_keeps_what_the_first_wrote() {
        let home = tempfile::tempdir().unwrap();
        fill(home.path(), &["plan.yaml"], true).unwrap();
        fill(home.path(), &["filtered.wav"], false).unwrap();
        fill(home.path(), &["plan.yaml", "filtered.wav"], true).unwrap();
        assert_eq!(names_in(home.path()), [LIST_NAME, "filtered.wav", "plan.yaml"]);
    }

    #[test]
    fn a_strangers_file_by_one_of_our_names_ends_the_work_before_it_starts() {
        let home = tempfile::tempdir().unwrap();
        fs::write(home.path().join("plan.yaml"), "a plan of the garden").unwrap();
        let refused = fill(home.path(), &["plan.yaml"], true).unwrap_err();
        assert!(refused.to_string().contains("plan.yaml"), "{refused}");
        assert_eq!(fs::read_to_string(home.path().join("plan.yaml")).unwrap(), "a plan of the garden");
        assert_eq!(names_in(home.path()), ["plan.yaml"]);
    }

    #[test]
    fn a_file_that_was_edited_since_is_not_written_over() {
        let home = tempfile::tempdir().unwrap();
        fill(home.path(), &["plan.yaml"], true).unwrap();
        fs::write(home.path().join("plan.yaml"), "contents edited by hand").unwrap();
        assert!(fill(home.path(), &["plan.yaml"], true).is_err());
    }

    #[test]
    fn work_that_fails_leaves_nothing_behind() {
        let home = tempfile::tempdir().unwrap();
        let dir = home.path().join("new/folder");
        let mut folder = OutFolder::check(&dir, &["plan.yaml"]).unwrap();
        folder.open().unwrap();
        folder.write("plan.yaml", "half").unwrap();
        drop(folder);
        assert!(names_in(home.path()).is_empty());
    }

    #[test]
    fn a_file_where_the_folder_should_be_is_named() {
        let home = tempfile::tempdir().unwrap();
        let file = home.path().join("file");
        fs::write(&file, "").unwrap();
        for dir in [file.clone(), file.join("below")] {
            let refused = OutFolder::check(&dir, &["plan.yaml"]).unwrap_err();
            assert!(refused.to_string().contains(file.to_str().unwrap()), "{refused}");
        }
    }

    #[cfg(unix)]
    #[test]
    fn a_link_by_one_of_our_names_is_not_followed() {
        let home = tempfile::tempdir().unwrap();
        fs::write(home.path().join("elsewhere"), "kept").unwrap();
        std::os::unix::fs::symlink(home.path().join("elsewhere"), home.path().join("plan.yaml")).unwrap();
        assert!(fill(home.path(), &["plan.yaml"], true).is_err());
        assert_eq!(fs::read_to_string(home.path().join("elsewhere")).unwrap(), "kept");
    }
}
