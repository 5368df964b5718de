//! Reports onto the disk: whole or not at all.

use std::io::Write;
use std::path::Path;

use crate::fault::{Fault, Result};

/// Writes a file beside its place first and then renames it, so that whoever reads it
/// finds the old report or the new one, never half of one.
///
/// # Errors
/// A folder that is not there or cannot be written to, a full disk.
pub fn write_atomically(path: &Path, bytes: &[u8]) -> Result<()> {
    write(path, bytes, true)
}

/// As [`write_atomically`], but never in the place of another file.
///
/// # Errors
/// As there, and where there is something at that place.
pub fn write_new(path: &Path, bytes: &[u8]) -> Result<()> {
    write(path, bytes, false)
}

fn write(path: &Path, bytes: &[u8], overwrite: bool) -> Result<()> {
    let complain =
        |error: std::io::Error| Fault::new(format!("cannot be written: {error}")).in_file(path);
    let folder = match path.parent() {
        Some(folder) if !folder.as_os_str().is_empty() => folder,
        _ => Path::new("."),
    };
    if path.is_dir() {
        return Err(Fault::new("cannot be written: this is a folder").in_file(path));
    }
    let mut builder = tempfile::Builder::new();
    builder.prefix(".stepgauge-");
    // A temporary file is for its owner alone; a report is for everyone whom the user lets
    // read new files, or whom the report before let.
    #[cfg(unix)]
    {
        use std::os::unix::fs::PermissionsExt;
        builder.permissions(std::fs::Permissions::from_mode(0o666));
    }
    let mut file = builder.tempfile_in(folder).map_err(complain)?;
    file.write_all(bytes).map_err(complain)?;
    file.as_file().sync_all().map_err(complain)?;
    let before = std::fs::symlink_metadata(path).ok();
    if let Some(before) = before.filter(std::fs::Metadata::is_file) {
        file.as_file()
            .set_permissions(before.permissions())
            .map_err(complain)?;
    }
    let kept = if overwrite {
        file.persist(path)
    } else {
        file.persist_noclobber(path)
    };
    kept.map_err(|error| complain(error.error))?;
    Ok(())
}
