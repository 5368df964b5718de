//! What a look at trajectory files found, as plain data: runs, likely cases, columns, and
//! where each guess comes from.

use crate::submission::ColumnName;

/// An error above this share of the channel's peak is no fit.
pub const NO_FIT: f64 = 0.2;
/// An error above this share, with no name that speaks for the case, is a loose fit: another
/// model of the same kind comes as near.
pub const LOOSE_FIT: f64 = 0.02;

/// Everything that a draft of a submission is written from.
#[derive(Clone, Debug)]
pub struct Drafted {
    /// In the order in which the files were named.
    pub runs: Vec<DraftRun>,
    /// Columns of the files in words: names, or numbers.
    pub columns: Vec<String>,
    /// Likely cases, the most likely first; empty where none is.
    pub candidates: Vec<Candidate>,
    /// How many candidates after the first explain the files nearly as well.
    pub rivals: usize,
    /// How many cases were looked at.
    pub cases_tried: usize,
    /// The case, where the user has named it.
    pub stated: Option<StatedCase>,
    /// True where no case that was looked at has the window of the files.
    pub no_window: bool,
}

/// A case that the user has named, for whoever must go on by hand.
#[derive(Clone, Debug)]
pub struct StatedCase {
    /// Its name.
    pub name: String,
    /// Its states with their units.
    pub states: Vec<(String, String)>,
}

/// One file.
#[derive(Clone, Debug)]
pub struct DraftRun {
    /// Its path within the folder of the submission.
    pub file: String,
    /// Rows with a time stamp.
    pub rows: u64,
    /// First and last stamp, in the unit of the file.
    pub stamps: (f64, f64),
    /// The layout in words.
    pub layout: String,
    /// How values were printed, in words, each way once.
    pub digits: Vec<String>,
    /// Digits of the longest value, where the pattern of the digits stays open.
    pub digits_open: Option<u8>,
    /// Spacing of the rows in the unit of the case.
    pub step: Step,
    /// Largest error as a share of the peak in the most likely case, with the channel.
    pub worst: Option<(f64, String)>,
    /// Faults that keep the file from passing.
    pub faults: Vec<String>,
}

/// What the rows say of the step.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Step {
    /// The rows are evenly spaced.
    Read(f64),
    /// They are, but another run has the same spacing: the runs differ in something that
    /// the rows do not show.
    Shared(f64),
    /// They are not.
    Varied,
}

/// A case that the files may belong to.
#[derive(Clone, Debug)]
pub struct Candidate {
    /// Its name.
    pub case: String,
    /// In a line.
    pub title: String,
    /// The unit of its times.
    pub time_unit: String,
    /// Its window.
    pub window: (f64, f64),
    /// Its limits: absolute, relative.
    pub limits: (f64, f64),
    /// How many states it has.
    pub states: usize,
    /// The time stamps.
    pub time: ColumnGuess,
    /// Channels that were found.
    pub channels: Vec<ColumnGuess>,
    /// States that were not.
    pub missing: Vec<String>,
    /// Columns of the file that are no channel.
    pub unused: Vec<String>,
    /// Largest error of all channels as a share of the peak, in the finest run.
    pub error: Option<f64>,
    /// How the stamps lie to the window.
    pub cover: Cover,
}

impl Candidate {
    /// True where the errors leave no doubt that the files and the case belong together.
    pub fn fits(&self) -> bool {
        self.error.is_some_and(|error| error <= NO_FIT)
    }

    /// True where the fit is all there is, and not a close one.
    pub fn is_loose(&self) -> bool {
        let named = |guess: &ColumnGuess| matches!(guess.by, By::Name | By::LikeName);
        self.fits() && self.error > Some(LOOSE_FIT) && !self.channels.iter().any(named)
    }
}

/// How the stamps of a file lie to the window of a case.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Cover {
    /// From its start to its end.
    Whole,
    /// On beyond its end.
    Longer,
    /// A part of it.
    Part,
}

/// One line of `[columns]`.
#[derive(Clone, Debug)]
pub struct ColumnGuess {
    /// The channel, or `time`.
    pub channel: String,
    /// False for an output and for the time stamps.
    pub is_state: bool,
    /// Where it is in the file.
    pub column: ColumnName,
    /// Its unit in the case.
    pub unit: String,
    /// The unit that has to be stated, as the file does not say it.
    pub unit_guessed: Option<String>,
    /// The unit that the header says.
    pub unit_of_header: Option<String>,
    /// Where the guess comes from.
    pub by: By,
    /// Largest error as a share of the peak.
    pub error: Option<f64>,
    /// Columns, or units, that fit nearly as well.
    pub rivals: Vec<String>,
    /// The unit in which the column would fit, though its header says another.
    pub fits_in: Option<String>,
}

/// Where a guess comes from.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum By {
    /// The name is the same.
    Name,
    /// The name is alike.
    LikeName,
    /// The numbers fit.
    Fit,
    /// There is no other column left.
    Position,
}
