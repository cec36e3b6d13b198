//! Reading files that the user names.

use std::fs::File;
use std::io::Read;
use std::path::{Path, PathBuf};

use thalweg::{Blame, Failure};

/// The largest problem file. One of 16 MiB would be three million numbers written out; beyond, something else was named.
pub(crate) const LARGEST_PROBLEM: u64 = 16 << 20;

/// The bytes of a file of at most `largest` bytes. A missing file, a folder, or one too large is the user's mistake;
/// one that cannot be read is an outside failure.
pub(crate) fn read_file(path: &Path, largest: u64) -> Result<Vec<u8>, Failure> {
    let shown = path.display();
    let metadata = std::fs::metadata(path).map_err(|error| match error.kind() {
        std::io::ErrorKind::NotFound => Failure::new(Blame::Input, format!("there is no file {shown}")),
        _ => Failure::new(Blame::Outside, format!("{shown} could not be looked at ({error})")),
    })?;
    if metadata.is_dir() {
        return Err(Failure::new(Blame::Input, format!("{shown} is a folder; name a file")));
    }
    let too_large = || {
        let mebibytes = largest >> 20;
        Failure::new(Blame::Input, format!("{shown} is larger than {mebibytes} MiB; is it the right file?"))
    };
    if metadata.len() > largest {
        return Err(too_large());
    }
    let mut bytes = Vec::new();
    // Devices and pipes give no length beforehand: one byte more than allowed is enough to know.
    File::open(path)
        .and_then(|file| file.take(largest + 1).read_to_end(&mut bytes))
        .map_err(|error| Failure::new(Blame::Outside, format!("{shown} could not be read ({error})")))?;
    if bytes.len() as u64 > largest { Err(too_large()) } else { Ok(bytes) }
}

/// The folder of a run that the user names by its path, or by its name within `results`.
pub(crate) fn run_folder(named: &Path) -> Result<PathBuf, Failure> {
    let beside = Path::new("results").join(named);
    let folder = if !named.exists() && beside.exists() { beside } else { named.to_path_buf() };
    if folder.is_dir() {
        return Ok(folder);
    }
    let text = format!("there is no run folder {}; name one of those in results/", folder.display());
    Err(Failure::new(Blame::Input, text))
}
