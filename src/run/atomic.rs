//! Files that are old or new, never half.

use std::fs::{self, File};
use std::io::Write;
use std::path::Path;

use super::error::RunError;

/// Writes a file beside its place, syncs it, and renames it over what stood there.
///
/// The temporary file lies in the same folder, because a rename is only atomic within one file system. Its name is
/// fixed: a leftover of a killed run is overwritten by the next write instead of piling up.
///
/// # Errors
/// [`RunError::Write`] where any of the steps fails; what stood there before is then untouched.
pub fn write_atomically(path: &Path, bytes: &[u8]) -> Result<(), RunError> {
    write(path, bytes, File::sync_all)?;
    // The rename itself is safe only once the folder is synced. Some systems cannot sync a folder; the file is whole
    // there all the same.
    if let Some(folder) = path.parent().and_then(|folder| File::open(folder).ok()) {
        let _ = folder.sync_all();
    }
    Ok(())
}

/// As [`write_atomically`], but the disk is not waited for.
pub(super) fn replace(path: &Path, bytes: &[u8]) -> Result<(), RunError> {
    write(path, bytes, |_| Ok(()))
}

fn write(path: &Path, bytes: &[u8], sync: impl Fn(&File) -> std::io::Result<()>) -> Result<(), RunError> {
    let mut beside = path.as_os_str().to_os_string();
    beside.push(".part");
    let beside = Path::new(&beside);
    let write = || -> std::io::Result<()> {
        let mut file = File::create(beside)?;
        file.write_all(bytes)?;
        sync(&file)?;
        fs::rename(beside, path)
    };
    write().map_err(|error| {
        // Best effort: the first failure is the one worth telling.
        let _ = fs::remove_file(beside);
        RunError::Write { path: path.to_path_buf(), cause: error.to_string() }
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_file_is_replaced_whole_and_nothing_is_left_beside_it() {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("minima.json");
        write_atomically(&path, b"first, which is longer").unwrap();
        write_atomically(&path, b"second").unwrap();
        assert_eq!(fs::read(&path).unwrap(), b"second");
        assert_eq!(fs::read_dir(folder.path()).unwrap().count(), 1);
    }

    #[test]
    fn a_failed_write_keeps_the_old_file_and_names_the_place() {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("minima.json");
        write_atomically(&path, b"old").unwrap();
        fs::create_dir(folder.path().join("minima.json.part")).unwrap();
        let error = write_atomically(&path, b"new").unwrap_err();
        assert!(error.to_string().contains("minima.json"), "{error}");
        assert_eq!(fs::read(&path).unwrap(), b"old");
    }
}
