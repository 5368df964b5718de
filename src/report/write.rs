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
    let complain = |error: std::io::Error| {
        let text = format!("cannot be written: {}", of_the_system(&error));
        Fault::new(text).in_file(path)
    };
    let folder = match path.parent() {
        Some(folder) if !folder.as_os_str().is_empty() => folder,
        _ => Path::new("."),
    };
    let before = std::fs::symlink_metadata(path).ok();
    if let Some(before) = &before {
        check_kind(before).map_err(|fault| fault.in_file(path))?;
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
    file.as_file_mut().write_all(bytes).map_err(complain)?;
    file.as_file().sync_all().map_err(complain)?;
    if let Some(before) = before {
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

/// A report takes the place of a file and of nothing else: a pipe has a reader who would wait
/// for ever, and a link may lead to what nobody wants overwritten.
fn check_kind(before: &std::fs::Metadata) -> Result<()> {
    let (kind, help) = match before.file_type() {
        kind if kind.is_file() => return Ok(()),
        kind if kind.is_dir() => ("a folder", "name a file in it"),
        kind if kind.is_symlink() => ("a link", "name the file that it leads to"),
        _ => ("no plain file", "name a file"),
    };
    Err(Fault::new(format!("cannot be written: this is {kind}")).help(help))
}

/// The complaint without the name of the file beside the place, which is of no use to anybody.
fn of_the_system(error: &std::io::Error) -> String {
    match error.raw_os_error() {
        Some(_) => error.to_string(),
        None => std::io::Error::from(error.kind()).to_string(),
    }
}
