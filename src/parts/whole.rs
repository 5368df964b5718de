//! What an audit is of, in a few lines: enough to refuse parts of different audits, or of a
//! tree that changed between them.
//!
//! Sizes of trajectories stand for their contents, which only the part that audits them
//! reads. Times of change do not count: machines may work on copies of one tree.

use std::io::Read;
use std::path::Path;

use crate::audit::Plan;
use crate::outcome::Whole;
use crate::submission::{MOST_SUBMISSION_BYTES, Rules};

/// What the user asked for.
#[derive(Clone, Debug, Default)]
pub struct Asked {
    /// Paths as given.
    pub paths: Vec<String>,
    /// Options that change what an audit finds.
    pub options: Vec<String>,
    /// Digest of the terms of `--require`, if it was given.
    pub terms: Option<String>,
}

/// What a plan is of, and the bytes of each of its submissions that can be read.
pub fn whole(plan: &Plan, asked: &Asked) -> (Whole, Vec<u64>) {
    let [mut names, mut sizes, mut texts] = [Digest::new(); 3];
    for missing in &plan.unreadable {
        names.add(missing.name.as_bytes());
        for fault in &missing.faults {
            texts.add(fault.to_string().as_bytes());
        }
    }
    let mut bytes = Vec::new();
    for planned in &plan.submissions {
        names.add(planned.name.as_bytes());
        let mut all = 0_u64;
        for run in &planned.submission.runs {
            // One that is gone meanwhile is complained of by its part.
            let size = std::fs::metadata(&run.path).map_or(0, |data| data.len());
            names.add(run.file.as_bytes());
            sizes.add(&size.to_le_bytes());
            all = all.saturating_add(size);
        }
        bytes.push(all);
        if let Some(file) = &planned.file {
            texts.add(&start(file));
        }
    }
    let unreadable = plan.unreadable.len();
    let whole = Whole {
        paths: asked.paths.clone(),
        options: asked.options.clone(),
        submissions: (unreadable + plan.submissions.len()) as u64,
        unreadable: unreadable as u64,
        bytes: bytes.iter().fold(0, |all, one| all.saturating_add(*one)),
        names: names.text(),
        sizes: sizes.text(),
        texts: texts.text(),
        cases: cases(plan.library.files()),
        terms: asked.terms.clone(),
    };
    (whole, bytes)
}

/// Digest of the cases beside the built-in ones.
pub fn cases<'a>(files: impl Iterator<Item = &'a Path>) -> String {
    let mut digest = Digest::new();
    for file in files {
        digest.add(&start(file));
    }
    digest.text()
}

/// Digest of what the file of `--require` lays down for each submission.
pub fn terms(rules: &Rules) -> String {
    let mut digest = Digest::new();
    digest.add(rules.terms().as_bytes());
    digest.text()
}

/// Of a file that a user names beside the submissions, such as that of `--limits`.
pub fn digest(file: &Path) -> String {
    let mut digest = Digest::new();
    digest.add(&start(file));
    digest.text()
}

/// As much of a small file as is ever read of one; nothing where it cannot be read, which is
/// complained of elsewhere.
fn start(file: &Path) -> Vec<u8> {
    let mut bytes = Vec::new();
    if let Ok(file) = std::fs::File::open(file) {
        let _ = file.take(MOST_SUBMISSION_BYTES).read_to_end(&mut bytes);
    }
    bytes
}

/// FNV-1a of 64 bits: the same on every machine and in every version of Rust, which the
/// standard library does not promise of its own. It finds accidents, not forgeries.
#[derive(Clone, Copy)]
struct Digest(u64);

impl Digest {
    fn new() -> Digest {
        Digest(0xcbf2_9ce4_8422_2325)
    }

    /// With its length first: `ab`, `c` is not `a`, `bc`.
    fn add(&mut self, bytes: &[u8]) {
        let length = (bytes.len() as u64).to_le_bytes();
        for byte in length.iter().chain(bytes) {
            self.0 = (self.0 ^ u64::from(*byte)).wrapping_mul(0x0100_0000_01b3);
        }
    }

    fn text(self) -> String {
        format!("{:016x}", self.0)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn digests_tell_apart_what_is_cut_elsewhere() {
        let of = |texts: &[&str]| {
            let mut digest = Digest::new();
            texts.iter().for_each(|text| digest.add(text.as_bytes()));
            digest.text()
        };
        assert_eq!(of(&[]), "cbf29ce484222325");
        assert_ne!(of(&["ab", "c"]), of(&["a", "bc"]));
        assert_ne!(of(&["a"]), of(&["a", ""]));
        assert_eq!(of(&["a", "b"]), of(&["a", "b"]));
    }
}
