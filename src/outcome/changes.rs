//! What became worse or better since an earlier audit, as plain data.

/// An audit beside an earlier one.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Changes {
    /// The earlier report, as the user named it.
    pub earlier: String,
    /// The share by which a worst error must have grown to be worse.
    pub worse_by: f64,
    /// Submissions that both have.
    pub compared: usize,
    /// What became worse.
    pub worse: Vec<Change>,
    /// What became better.
    pub better: Vec<Change>,
    /// What changed and is neither.
    pub other: Vec<Change>,
    /// Submissions that the earlier audit did not have.
    pub new_submissions: Vec<String>,
}

/// One thing that changed.
#[derive(Clone, Debug, PartialEq)]
pub struct Change {
    /// What sort of thing.
    pub kind: ChangeKind,
    /// The submission.
    pub submission: String,
    /// The file, where it is about one.
    pub file: Option<String>,
    /// The channel, where it is about one.
    pub channel: Option<String>,
    /// The number then, where it is about one.
    pub earlier: Option<f64>,
    /// The number now.
    pub now: Option<f64>,
    /// In a sentence, without the submission.
    pub text: String,
}

/// What sort of thing changed.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum ChangeKind {
    /// A worst error.
    Error,
    /// An order seen over a ladder.
    Order,
    /// The methods that fit the rows.
    Method,
    /// A claim, or what the rows say of it.
    Claim,
    /// A verdict.
    Verdict,
    /// The case or its parameters: numbers cannot be compared.
    Case,
    /// Whose limits are used, or which run they apply to.
    Limits,
    /// Whether the submission could be audited.
    NotAudited,
    /// A submission that is not there any more.
    SubmissionVanished,
    /// A run that is not there any more.
    RunVanished,
    /// A channel that is not there any more.
    ChannelVanished,
    /// A run that was not there.
    RunAdded,
}

impl ChangeKind {
    /// The word in reports.
    pub fn word(self) -> &'static str {
        match self {
            ChangeKind::Error => "error",
            ChangeKind::Order => "order",
            ChangeKind::Method => "method",
            ChangeKind::Claim => "claim",
            ChangeKind::Verdict => "verdict",
            ChangeKind::Case => "case",
            ChangeKind::Limits => "limits",
            ChangeKind::NotAudited => "not-audited",
            ChangeKind::SubmissionVanished => "submission-vanished",
            ChangeKind::RunVanished => "run-vanished",
            ChangeKind::ChannelVanished => "channel-vanished",
            ChangeKind::RunAdded => "run-added",
        }
    }
}
