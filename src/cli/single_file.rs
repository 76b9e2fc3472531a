//! One text file that the user asked for by name.

use std::fs;
use std::path::{Path, PathBuf};

use super::error::CliError;

/// The first words of every text file that notchwright writes on its own.
pub(super) const MARK: &str = "# notchwright";

/// Refuses a path at which someone else's file stands: one that does not begin
/// with [`MARK`].
///
/// # Errors
/// [`CliError::StrangersFile`], or [`CliError::Write`] where the folder is missing.
pub(super) fn check(path: &Path) -> Result<(), CliError> {
    let folder = match path.parent() {
        Some(folder) if !folder.as_os_str().is_empty() => folder,
        _ => Path::new("."),
    };
    if !folder.is_dir() {
        return Err(CliError::write(path, std::io::Error::other("its folder does not exist")));
    }
    if path.symlink_metadata().is_err() {
        return Ok(());
    }
    let ours = fs::read(path).is_ok_and(|bytes| bytes.starts_with(MARK.as_bytes()));
    if ours { Ok(()) } else { Err(CliError::StrangersFile { path: path.to_owned() }) }
}

/// Writes the file beside its place, then renames it.
///
/// # Errors
/// [`CliError::Write`]; nothing half-written stays.
pub(super) fn write(path: &Path, text: &str) -> Result<(), CliError> {
    let beside = beside(path);
    let written = fs::write(&beside, text).and_then(|()| fs::rename(&beside, path));
    written.map_err(|source| {
        let _ = fs::remove_file(&beside);
        CliError::write(path, source)
    })
}

fn beside(path: &Path) -> PathBuf {
    let mut name = path.file_name().unwrap_or_default().to_owned();
    name.push(".notchwright-unfinished");
    path.with_file_name(name)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn our_own_file_is_written_again_and_a_strangers_is_not() {
        let home = tempfile::tempdir().unwrap();
        let path = home.path().join("plan.yaml");
        check(&path).unwrap();
        write(&path, "# notchwright plan\nmet: true\n").unwrap();
        check(&path).unwrap();
        fs::write(&path, "met: true\n").unwrap();
        assert!(matches!(check(&path), Err(CliError::StrangersFile { .. })));
    }

    #[test]
    fn nothing_is_left_beside_a_file_that_cannot_be_written() {
        let home = tempfile::tempdir().unwrap();
        let path = home.path().join("folder");
        fs::create_dir_all(path.join("full")).unwrap();
        assert!(write(&path, "text").is_err());
        assert_eq!(fs::read_dir(home.path()).unwrap().count(), 1);
    }
}
