//! The search for submissions below the paths that a user names, and the rule that a
//! submission's files lie in its own folder.

use std::io::ErrorKind;
use std::path::{Component, Path, PathBuf};

use walkdir::WalkDir;

use crate::fault::{Fault, Result, quoted};

/// Deepest folder that is looked into.
pub const MOST_DEPTH: usize = 32;
/// Most submissions below one path.
pub const MOST_SUBMISSIONS: usize = 100_000;

/// Where a submission lies.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub struct Place {
    /// Its name in reports: the folder, from the path that the user named.
    pub name: String,
    /// The folder.
    pub folder: PathBuf,
    /// The `submission.toml`.
    pub file: PathBuf,
    /// False for a link, a pipe or a device of that name, which nobody opens.
    pub is_plain: bool,
}

/// Every `submission.toml` at or below a path, in order of their names. Links are not
/// followed.
///
/// # Errors
/// A path that is not there, folders that cannot be read, a folder without any
/// submission.
pub fn discover(path: &Path, prefix: bool) -> std::result::Result<Vec<Place>, Vec<Fault>> {
    walk(path, prefix, MOST_SUBMISSIONS)
}

fn walk(path: &Path, prefix: bool, most: usize) -> std::result::Result<Vec<Place>, Vec<Fault>> {
    let mut places = Vec::new();
    let mut faults = Vec::new();
    for entry in WalkDir::new(path).max_depth(MOST_DEPTH).sort_by_file_name() {
        match entry {
            // What nobody looks at must not pass in silence.
            Ok(entry) if entry.depth() == MOST_DEPTH && entry.file_type().is_dir() => {
                let text = format!("folders lie more than {MOST_DEPTH} deep from here on");
                let fault = Fault::new(text).help("name a folder further down on the command line");
                faults.push(fault.in_file(entry.path()));
            }
            Ok(entry) => {
                let named = entry.depth() == 0 || entry.file_name() == "submission.toml";
                // What has the name and is no file is not passed over in silence.
                let kind = entry.file_type();
                let is_plain = kind.is_file();
                if named && (is_plain || entry.depth() > 0 && !kind.is_dir()) {
                    let place = place(path, entry.path(), prefix);
                    places.push(Place { is_plain, ..place });
                    if places.len() > most {
                        let text = format!("more than {most} submissions lie here and below");
                        let fault = Fault::new(text).help("name the folders below it in turn");
                        return Err(vec![fault.in_file(path)]);
                    }
                }
            }
            Err(error) => {
                let place = error.path().unwrap_or(path).to_owned();
                let missing = error
                    .io_error()
                    .is_some_and(|e| e.kind() == ErrorKind::NotFound);
                let text = if missing {
                    "there is no such file or folder".to_owned()
                } else {
                    format!("cannot be read: {error}")
                };
                faults.push(Fault::new(text).in_file(&place));
            }
        }
    }
    if places.is_empty() && faults.is_empty() {
        let fault = Fault::new("no `submission.toml` is found here or below").in_file(path);
        faults.push(fault.help("`--case NAME` audits single trajectory files without one"));
    }
    if faults.is_empty() {
        Ok(places)
    } else {
        Err(faults)
    }
}

fn place(root: &Path, file: &Path, prefix: bool) -> Place {
    let folder = file.parent().unwrap_or(Path::new("")).to_owned();
    let relative = folder
        .strip_prefix(root)
        .ok()
        .filter(|rest| !rest.as_os_str().is_empty());
    let name = match relative {
        Some(rest) if prefix => root.join(rest),
        Some(rest) => rest.to_owned(),
        None => named(&folder),
    };
    let name = name.to_string_lossy().replace('\\', "/");
    Place {
        name,
        folder,
        file: file.to_owned(),
        is_plain: true,
    }
}

/// The name of a folder, also where it is given as `.`.
fn named(folder: &Path) -> PathBuf {
    let plain = folder.file_name().map(PathBuf::from);
    let found = || folder.canonicalize().ok()?.file_name().map(PathBuf::from);
    plain.or_else(found).unwrap_or_else(|| PathBuf::from("."))
}

/// The path of a file that a submission names.
///
/// # Errors
/// Absolute paths, `..`, links that lead out of the folder, files that are not there.
pub fn confined(folder: &Path, file: &str) -> Result<PathBuf> {
    let relative = Path::new(file);
    let plain = |part: Component| matches!(part, Component::Normal(_) | Component::CurDir);
    if file.is_empty() || file.contains('\0') || !relative.components().all(plain) {
        let text = format!(
            "file {} does not lie in the submission's own folder",
            quoted(file)
        );
        return Err(Fault::new(text).help("write a path within the folder of submission.toml"));
    }
    let path = folder.join(relative);
    let missing = |error: std::io::Error| match error.kind() {
        ErrorKind::NotFound => Fault::new(format!("there is no file {}", quoted(file))),
        _ => Fault::new(format!("file {} cannot be read: {error}", quoted(file))),
    };
    let true_folder = if folder.as_os_str().is_empty() {
        Path::new(".")
    } else {
        folder
    };
    let true_folder = true_folder.canonicalize().map_err(missing)?;
    let true_path = path.canonicalize().map_err(missing)?;
    if !true_path.starts_with(&true_folder) {
        let text = format!(
            "file {} is a link that leads out of the folder",
            quoted(file)
        );
        return Err(Fault::new(text).help("put the file itself into the folder"));
    }
    if !true_path.is_file() {
        return Err(Fault::new(format!(
            "file {} is not a plain file",
            quoted(file)
        )));
    }
    Ok(path)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn submissions_are_counted() {
        let folder = tempfile::tempdir().unwrap();
        for name in ["a", "b", "c"] {
            std::fs::create_dir(folder.path().join(name)).unwrap();
            std::fs::write(folder.path().join(name).join("submission.toml"), "").unwrap();
        }
        assert_eq!(walk(folder.path(), false, 3).unwrap().len(), 3);
        let faults = walk(folder.path(), false, 2).unwrap_err();
        assert!(faults[0].text.contains("more than 2 submissions lie here"));
        assert_eq!(discover(folder.path(), false).unwrap().len(), 3);
    }
}
