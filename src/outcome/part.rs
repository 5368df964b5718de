//! Which share of a divided audit this is, as plain data.

/// One part of an audit that was divided, so that many machines can work on it.
///
/// Places number the submissions of the whole audit from zero: first those that could not
/// be read, then the others in the order of the report.
#[derive(Clone, Debug, PartialEq)]
pub struct Part {
    /// Which one, counted from one.
    pub number: u32,
    /// How many there are.
    pub of: u32,
    /// What was divided.
    pub whole: Whole,
    /// Of the submissions with a verdict; in a plan, of those that can be read.
    pub places: Vec<u64>,
    /// Of the submissions without one; in a plan, of those that cannot be read.
    pub places_not_audited: Vec<u64>,
}

/// What was divided: the same for all parts of one audit, and another one as soon as the
/// submissions or the wishes change.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Whole {
    /// Paths as the user gave them.
    pub paths: Vec<String>,
    /// Options that change what an audit finds, as in `--absolute 0.1`.
    pub options: Vec<String>,
    /// All submissions below the paths.
    pub submissions: u64,
    /// Those of them that could not be read.
    pub unreadable: u64,
    /// Bytes of all files of runs.
    pub bytes: u64,
    /// Digest of the names of the submissions and their runs.
    pub names: String,
    /// Digest of the sizes of the files.
    pub sizes: String,
    /// Digest of the texts of the submissions.
    pub texts: String,
    /// Digest of the cases beside the built-in ones.
    pub cases: String,
    /// Digest of the terms that the file of `--require` lays down, if there is one; what it
    /// requires is no matter of a part.
    pub terms: Option<String>,
}

impl Part {
    /// As it is called wherever it is shown.
    pub fn name(&self) -> String {
        format!("part {} of {}", self.number, self.of)
    }

    /// Of all submissions: those that can be read.
    pub fn readable(&self) -> u64 {
        self.whole.submissions.saturating_sub(self.whole.unreadable)
    }
}
