//! The search for submissions below the paths that a user names, and the rule that a
//! submission's files lie in its own folder.

use std::io::ErrorKind;
use std::path::{Component, Path, PathBuf};

use walkdir::{DirEntry, WalkDir};

use super::links::{Leads, Links};
use crate::fault::{Fault, Result, quoted};

/// Deepest folder that is looked into.
pub const MOST_DEPTH: usize = 32;
/// Most submissions below one path.
pub const MOST_SUBMISSIONS: usize = 100_000;

/// Where a submission lies, or something that may keep one from being found.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub struct Place {
    /// Its name in reports: the folder, from the path that the user named.
    pub name: String,
    /// The folder.
    pub folder: PathBuf,
    /// The `submission.toml`, or what is in its way.
    pub file: PathBuf,
    /// What is there.
    pub is: Found,
}

/// What the search came upon.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Found {
    /// A file that can be opened.
    Submission,
    /// A link, a pipe or a device of that name, which nobody opens.
    NotPlain,
    /// A link to a folder with submissions, which is not entered.
    Link,
    /// A folder that lies too deep to be entered.
    TooDeep,
    /// A folder that cannot be read, and why.
    Unreadable(String),
}

impl Found {
    /// The complaint about what is no submission that can be read.
    ///
    /// # Errors
    /// All but a submission.
    pub fn plain(&self) -> Result<()> {
        let (text, help) = match self {
            Found::Submission => return Ok(()),
            Found::NotPlain => (
                "this is a link or no plain file, so it was not opened".to_owned(),
                "put the file itself into the folder",
            ),
            Found::Link => (
                "this is a link to a folder with a submission, which was not entered".to_owned(),
                "put the folder itself there, or name the one that it leads to on the command \
                 line as well",
            ),
            Found::TooDeep => (
                format!("folders lie more than {MOST_DEPTH} deep from here on"),
                "name this folder on the command line as well",
            ),
            Found::Unreadable(why) => (
                why.clone(),
                "make the folder readable: submissions may lie in it",
            ),
        };
        Err(Fault::new(text).help(help))
    }
}

/// What lies at or below a path.
#[derive(Clone, Debug, Default)]
pub struct Discovered {
    /// In order of their names.
    pub places: Vec<Place>,
    /// Links that were not entered and hide no submission.
    pub notes: Vec<Fault>,
}

/// Every `submission.toml` at or below a path, in order of their names. Links are not
/// followed; `audited` are the true paths of all folders that are searched.
///
/// # Errors
/// A path that is not there or cannot be read, a folder without any submission.
pub fn discover(path: &Path, prefix: bool, audited: &[PathBuf]) -> Result<Discovered> {
    walk(path, prefix, audited, MOST_SUBMISSIONS)
}

fn walk(path: &Path, prefix: bool, audited: &[PathBuf], most: usize) -> Result<Discovered> {
    let mut found = Discovered::default();
    let mut links = Links::new(audited);
    for entry in WalkDir::new(path).max_depth(MOST_DEPTH).sort_by_file_name() {
        let place = match entry {
            Ok(entry) => place_of(path, &entry, prefix, &mut links, &mut found.notes),
            // What lies elsewhere can be audited all the same.
            Err(error) if error.depth() > 0 => {
                let folder = error.path().unwrap_or(path).to_owned();
                let is = Found::Unreadable(why(&error));
                Some(place(path, &folder, &folder, prefix, is))
            }
            Err(error) => return Err(Fault::new(why(&error)).in_file(path)),
        };
        found.places.extend(place);
        if found.places.len() > most {
            let text = format!("more than {most} submissions lie here and below");
            let fault = Fault::new(text).help("name the folders below it in turn");
            return Err(fault.in_file(path));
        }
    }
    if found.places.is_empty() {
        let fault = Fault::new("no `submission.toml` is found here or below").in_file(path);
        return Err(fault.help("`--case NAME` audits single trajectory files without one"));
    }
    Ok(found)
}

fn place_of(
    root: &Path,
    entry: &DirEntry,
    prefix: bool,
    links: &mut Links,
    notes: &mut Vec<Fault>,
) -> Option<Place> {
    let (kind, path) = (entry.file_type(), entry.path());
    let parent = path.parent().unwrap_or(Path::new(""));
    let (folder, is) = if entry.depth() == 0 {
        (parent, kind.is_file().then_some(Found::Submission)?)
    } else if kind.is_dir() {
        // What nobody looks at must not pass in silence.
        let too_deep = entry.depth() == MOST_DEPTH && !links.is_named_below(root, path);
        (path, too_deep.then_some(Found::TooDeep)?)
    } else if entry.file_name() == "submission.toml" {
        // What has the name and is no file is not passed over in silence either.
        match kind.is_file() {
            true => (parent, Found::Submission),
            false => (parent, Found::NotPlain),
        }
    } else if kind.is_symlink() {
        let leads = links.follow(path);
        notes.extend(leads.note(path));
        (path, (leads == Leads::ToSubmission).then_some(Found::Link)?)
    } else {
        return None;
    };
    Some(place(root, folder, path, prefix, is))
}

fn why(error: &walkdir::Error) -> String {
    let missing = error
        .io_error()
        .is_some_and(|e| e.kind() == ErrorKind::NotFound);
    if missing {
        "there is no such file or folder".to_owned()
    } else {
        format!("cannot be read: {error}")
    }
}

fn place(root: &Path, folder: &Path, file: &Path, prefix: bool, is: Found) -> Place {
    let relative = folder
        .strip_prefix(root)
        .ok()
        .filter(|rest| !rest.as_os_str().is_empty());
    let name = match relative {
        Some(rest) if prefix => root.join(rest),
        Some(rest) => rest.to_owned(),
        None => named(folder),
    };
    let name = name.to_string_lossy().replace('\\', "/");
    Place {
        name,
        folder: folder.to_owned(),
        file: file.to_owned(),
        is,
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
        let walked = |most| walk(folder.path(), false, &[], most);
        assert_eq!(walked(3).unwrap().places.len(), 3);
        let fault = walked(2).unwrap_err();
        assert!(fault.text.contains("more than 2 submissions lie here"));
        let found = discover(folder.path(), false, &[]).unwrap();
        assert_eq!(found.places.len(), 3);
    }
}
