//! Links to folders below an audited path: they are never entered, since whoever hands something
//! in could lead the search anywhere with them, and round in circles. Where one leads is looked
//! at as far as names go, so that a submission behind it does not go missing in silence.

use std::collections::{BTreeSet, VecDeque};
use std::path::{Path, PathBuf};

use crate::fault::Fault;

/// Most names that are read behind the links below one path.
const MOST_BEHIND: usize = 100_000;

/// What is known of links below an audited path.
pub(super) struct Links<'a> {
    /// True paths of all folders that are audited.
    audited: &'a [PathBuf],
    /// Names that may still be read.
    left: usize,
}

/// Where a link leads.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Leads {
    /// To a file or a device, which is no matter of the search.
    ToFile,
    /// Nowhere, or where nobody may look.
    Nowhere,
    /// Into what is audited, where everything is looked at in its own place.
    Inside,
    /// To a folder that holds what is audited: entering it would go round in a circle.
    Above,
    /// Elsewhere, to a folder with a submission in it or below it.
    ToSubmission,
    /// Elsewhere, to a folder without any.
    Elsewhere,
    /// Elsewhere, to more than anybody looks through.
    TooFar,
}

impl<'a> Links<'a> {
    pub(super) fn new(audited: &'a [PathBuf]) -> Links<'a> {
        Links::with(audited, MOST_BEHIND)
    }

    fn with(audited: &'a [PathBuf], left: usize) -> Links<'a> {
        Links { audited, left }
    }

    /// Where a link leads.
    pub(super) fn follow(&mut self, link: &Path) -> Leads {
        let Ok(target) = link.canonicalize() else {
            return Leads::Nowhere;
        };
        if !target.is_dir() {
            return Leads::ToFile;
        }
        if self.is_audited(&target) {
            return Leads::Inside;
        }
        if self
            .audited
            .iter()
            .any(|folder| folder.starts_with(&target))
        {
            return Leads::Above;
        }
        self.look(target)
    }

    /// True for a folder that a path leads to which was named below the one that is searched.
    pub(super) fn is_named_below(&self, root: &Path, folder: &Path) -> bool {
        let (Ok(root), Ok(folder)) = (root.canonicalize(), folder.canonicalize()) else {
            return false;
        };
        let below = |own: &&PathBuf| **own != root && own.starts_with(&root);
        let mut named = self.audited.iter().filter(below);
        named.any(|own| folder.starts_with(own))
    }

    fn is_audited(&self, folder: &Path) -> bool {
        self.audited.iter().any(|own| folder.starts_with(own))
    }

    /// Looks for a submission level by level, so that one near the link is found whatever else
    /// there is; further links on the way are followed once each.
    fn look(&mut self, target: PathBuf) -> Leads {
        let mut seen = BTreeSet::from([target.clone()]);
        let mut waiting = VecDeque::from([target]);
        while let Some(folder) = waiting.pop_front() {
            let Ok(entries) = folder.read_dir() else {
                continue;
            };
            let mut folders = Vec::new();
            for entry in entries.filter_map(Result::ok) {
                let Some(left) = self.left.checked_sub(1) else {
                    return Leads::TooFar;
                };
                self.left = left;
                let (name, path) = (entry.file_name(), entry.path());
                let kind = entry.file_type();
                let is_folder = kind.as_ref().is_ok_and(|kind| kind.is_dir());
                if name == "submission.toml" && !is_folder {
                    return Leads::ToSubmission;
                }
                if is_folder {
                    folders.push(path);
                } else if kind.is_ok_and(|kind| kind.is_symlink())
                    && let Ok(path) = path.canonicalize()
                    && path.is_dir()
                {
                    folders.push(path);
                }
            }
            // In an order that no file system decides.
            folders.sort();
            for folder in folders {
                if !self.is_audited(&folder) && seen.insert(folder.clone()) {
                    waiting.push_back(folder);
                }
            }
        }
        Leads::Elsewhere
    }
}

impl Leads {
    /// What a user is told of a link that hides no submission, where that is anything.
    pub(super) fn note(self, link: &Path) -> Option<Fault> {
        let text = match self {
            Leads::ToFile | Leads::ToSubmission => return None,
            Leads::Nowhere => "a link that leads nowhere: what it stood for was not looked at",
            Leads::Inside => {
                "a link to a folder, which was not entered: what it leads to is audited in its \
                 own place"
            }
            Leads::Above => "a link to a folder above, which was not entered",
            Leads::Elsewhere => {
                "a link to a folder, which was not entered: no submission lies there"
            }
            Leads::TooFar => {
                "a link to a folder, which was not entered: it leads to more files than are looked \
                 through for submissions"
            }
        };
        Some(Fault::new(text).in_file(link))
    }
}

#[cfg(test)]
mod tests {
    #[cfg(unix)]
    #[test]
    fn a_link_is_followed_as_far_as_names_go() {
        use super::{Leads, Links};
        use std::fs::{create_dir_all, write};
        use std::os::unix::fs::symlink;
        let folder = tempfile::tempdir().unwrap();
        let root = folder.path().canonicalize().unwrap();
        let path = |name: &str| root.join(name);
        for name in ["tree/sub", "far/a/b", "deep/a/b/c", "other", "wide", "up"] {
            create_dir_all(path(name)).unwrap();
        }
        write(path("far/a/b/submission.toml"), "").unwrap();
        write(path("other/run.csv"), "").unwrap();
        // A folder of that name is none; round in a circle, and back into the tree.
        create_dir_all(path("other/submission.toml")).unwrap();
        write(path("tree/sub/submission.toml"), "").unwrap();
        symlink(".", path("other/round")).unwrap();
        symlink("../tree", path("other/back")).unwrap();
        // One link after the other.
        symlink("../../../../far", path("deep/a/b/c/on")).unwrap();
        for number in 0..10 {
            write(path(&format!("wide/{number}")), "").unwrap();
        }
        for (name, target) in [
            ("l-far", "../far"),
            ("l-deep", "../deep"),
            ("l-other", "../other"),
            ("l-sub", "sub"),
            ("l-up", ".."),
            ("l-round", "l-round"),
            ("l-gone", "../gone"),
            ("l-file", "../other/run.csv"),
            ("l-wide", "../wide"),
        ] {
            symlink(target, path("tree").join(name)).unwrap();
        }
        let audited = [path("tree")];
        let mut links = Links::with(&audited, 100);
        for (name, leads) in [
            ("l-far", Leads::ToSubmission),
            ("l-deep", Leads::ToSubmission),
            ("l-other", Leads::Elsewhere),
            ("l-sub", Leads::Inside),
            ("l-up", Leads::Above),
            ("l-round", Leads::Nowhere),
            ("l-gone", Leads::Nowhere),
            ("l-file", Leads::ToFile),
            ("l-wide", Leads::Elsewhere),
        ] {
            assert_eq!(links.follow(&path("tree").join(name)), leads, "{name}");
        }
        // Exactly as many names as may be read, and one less.
        let wide = path("tree/l-wide");
        assert_eq!(Links::with(&audited, 10).follow(&wide), Leads::Elsewhere);
        assert_eq!(Links::with(&audited, 9).follow(&wide), Leads::TooFar);
        // One near the link is found however much lies beside it, deeper down.
        create_dir_all(path("near/b")).unwrap();
        create_dir_all(path("near/a/x")).unwrap();
        for number in 0..10 {
            write(path(&format!("near/a/x/{number}")), "").unwrap();
        }
        write(path("near/b/submission.toml"), "").unwrap();
        symlink("../near", path("tree/l-near")).unwrap();
        let near = path("tree/l-near");
        assert_eq!(Links::with(&audited, 4).follow(&near), Leads::ToSubmission);
        assert_eq!(Links::with(&audited, 3).follow(&near), Leads::TooFar);
    }
}
