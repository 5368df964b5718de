//! What an audit has found, as plain data: no formatting, no file formats.

mod advice;
mod causes;
mod changes;
mod draft;
mod evidence;
mod methods;
mod part;
mod plots;
mod review;
mod steps;

use crate::fault::Fault;
use crate::judge::Verdict;
use crate::submission::{Expect, Role, Setting, Submission};
use crate::trajectory::Finding;

pub use advice::{AdviceOutcome, SettingRung, SettingsOutcome};
pub use causes::CauseOutcome;
pub use changes::{Change, ChangeKind, Changes};
pub use draft::{
    By, Candidate, ColumnGuess, Cover, DraftRun, Drafted, LOOSE_FIT, NO_FIT, StatedCase, Step,
};
pub use evidence::{
    ClaimOutcome, Consistent, Damping, EvidenceOutcome, GrowthOutcome, GrowthSummary, RunEvidence,
};
pub use methods::{AliasFacts, Factor, FormFacts, MethodFacts, SourceFacts, Written};
pub use part::{Part, Whole};
pub use plots::{ExactCurve, PlotPoint};
pub use review::{Required, Review};
pub use steps::{
    ChannelError, ChannelLimit, JumpGrid, LargestStep, MethodSteps, OnJumps, Rule, StepRun,
    StepsOutcome,
};

/// A whole audit.
#[derive(Clone, Debug, Default)]
pub struct Outcome {
    /// In the order of their names.
    pub submissions: Vec<Audited>,
    /// Submissions that could not be audited, with the complaints.
    pub not_audited: Vec<NotAudited>,
    /// Submissions that nobody looked at, since the audit was interrupted.
    pub left: usize,
    /// What changed since an earlier audit, where there was one to compare with.
    pub changes: Option<Changes>,
    /// Which part of a divided audit this is; `None` for a whole one.
    pub part: Option<Part>,
    /// By what rules of a reviewer it was audited, if by any.
    pub review: Option<Review>,
}

/// A submission that could not be audited.
#[derive(Clone, Debug)]
pub struct NotAudited {
    /// Its name.
    pub name: String,
    /// Why.
    pub faults: Vec<Fault>,
}

/// One submission.
#[derive(Clone, Debug)]
pub struct Audited {
    /// Its folder, or the file.
    pub name: String,
    /// The case; `None` where the runs were only compared with each other.
    pub case: Option<String>,
    /// The unit of its times.
    pub time_unit: String,
    /// Who wrote the files.
    pub producer: Option<String>,
    /// What was expected.
    pub expect: Expect,
    /// What was found.
    pub verdict: Verdict,
    /// Parameters of the case that the submission has replaced.
    pub parameters: Vec<(String, f64)>,
    /// Whose limits were used.
    pub limits_from: LimitsFrom,
    /// One sentence for each thing that decides, each with its cure where one is known.
    pub reasons: Vec<String>,
    /// What was assumed or left out.
    pub notes: Vec<String>,
    /// Files in the order of the submission.
    pub runs: Vec<RunOutcome>,
    /// The name of the claimed method, as claimed.
    pub claimed_method: Option<String>,
    /// Orders by channel; empty without a ladder.
    pub orders: Vec<OrderOutcome>,
    /// The verdict on the claimed order.
    pub order_verdict: Option<Verdict>,
    /// Which methods fit the runs; `None` without a case.
    pub evidence: Option<EvidenceOutcome>,
    /// Likely causes of a failure.
    pub causes: Vec<CauseOutcome>,
    /// Errors over error settings by channel; empty without a ladder of such.
    pub settings: Vec<SettingsOutcome>,
    /// Which step the limits need, as far as it can be told.
    pub advice: Option<AdviceOutcome>,
    /// The exact solution for plots; empty where none are wanted.
    pub curves: Vec<ExactCurve>,
}

/// Whose limits an audit has used.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum LimitsFrom {
    /// Those of the case.
    Case,
    /// The submission's own.
    Submission,
    /// Those of the command line.
    CommandLine,
    /// Those of the reviewer's file.
    Reviewer,
}

impl LimitsFrom {
    /// All of them.
    pub const ALL: [LimitsFrom; 4] = [
        LimitsFrom::Case,
        LimitsFrom::Submission,
        LimitsFrom::CommandLine,
        LimitsFrom::Reviewer,
    ];

    /// The word in reports for programs.
    pub fn word(self) -> &'static str {
        match self {
            LimitsFrom::Case => "case",
            LimitsFrom::Submission => "submission",
            LimitsFrom::CommandLine => "command-line",
            LimitsFrom::Reviewer => "reviewer",
        }
    }

    /// Whose they are, for people.
    pub fn whose(self) -> &'static str {
        match self {
            LimitsFrom::Case => "the case",
            LimitsFrom::Submission => "the submission's own",
            LimitsFrom::CommandLine => "the command line",
            LimitsFrom::Reviewer => "the reviewer's file",
        }
    }
}

/// One file.
#[derive(Clone, Debug)]
pub struct RunOutcome {
    /// As the submission names it.
    pub file: String,
    /// Result or rung.
    pub role: Role,
    /// Step or error setting as stated.
    pub setting: Setting,
    /// The step, stated or read off the time stamps.
    pub step: Option<f64>,
    /// What it cost, as stated, in any unit.
    pub cost: Option<f64>,
    /// Rows within the window.
    pub rows: u64,
    /// How the file is laid out, in words.
    pub layout: String,
    /// How finely the time stamps are known, in words.
    pub stamps: String,
    /// What is wrong with the file.
    pub findings: Vec<Finding>,
    /// Channels in the order of the case.
    pub channels: Vec<ChannelOutcome>,
}

/// One channel of one file, in the units of the case.
#[derive(Clone, Debug)]
pub struct ChannelOutcome {
    /// Its name.
    pub name: String,
    /// Its unit.
    pub unit: String,
    /// What was found; `None` where no row had a value.
    pub errors: Option<ErrorOutcome>,
    /// Of this channel.
    pub verdict: Verdict,
    /// Rows for a plot; empty where none is wanted.
    pub trace: Vec<PlotPoint>,
}

/// The errors of one channel.
#[derive(Clone, Debug)]
pub struct ErrorOutcome {
    /// Largest `|written - exact|`.
    pub worst: f64,
    /// The time of it.
    pub at: f64,
    /// Root mean square.
    pub rms: f64,
    /// `written - exact` in the last row.
    pub end: f64,
    /// Largest `|exact|` at the rows.
    pub peak: f64,
    /// What the digits resolve where the error is worst.
    pub resolution: f64,
    /// What was assumed of the digits, in words.
    pub digits: String,
    /// The limit where the error is worst.
    pub limit: f64,
    /// Largest share of the limit over all rows.
    pub limit_used: f64,
    /// The row with that share.
    pub decisive: RowOutcome,
    /// The row that comes nearest to the limit, or farthest beyond it, with what its
    /// digits leave open counted against it.
    pub doubtful: RowOutcome,
    /// True where some row breaks its limit, whatever its digits leave open.
    pub broken: bool,
}

/// One row of one channel.
#[derive(Clone, Copy, Debug)]
pub struct RowOutcome {
    /// Its time.
    pub at: f64,
    /// `|written - exact|`.
    pub error: f64,
    /// What its digits resolve.
    pub resolution: f64,
    /// The limit there.
    pub limit: f64,
}

/// The order of one channel over the ladder.
#[derive(Clone, Debug)]
pub struct OrderOutcome {
    /// The channel.
    pub channel: String,
    /// The order claimed.
    pub claimed: Option<f64>,
    /// The order seen, and its interval.
    pub observed: Option<(f64, f64, f64)>,
    /// Rungs that it rests on.
    pub rungs_used: usize,
    /// On the claim.
    pub verdict: Option<Verdict>,
    /// What to know of it.
    pub note: Option<String>,
}

impl Audited {
    /// Before anything was found.
    pub fn new(
        name: String,
        case: Option<String>,
        time_unit: String,
        submission: &Submission,
        limits_from: LimitsFrom,
    ) -> Audited {
        let parameters = &submission.parameters;
        Audited {
            name,
            case,
            time_unit,
            producer: submission.producer.clone(),
            expect: submission.expect,
            verdict: Verdict::Pass,
            parameters: parameters.iter().map(|(n, v)| (n.clone(), *v)).collect(),
            limits_from,
            reasons: Vec::new(),
            notes: Vec::new(),
            runs: Vec::new(),
            claimed_method: submission.claims.method.clone(),
            orders: Vec::new(),
            order_verdict: None,
            evidence: None,
            causes: Vec::new(),
            settings: Vec::new(),
            advice: None,
            curves: Vec::new(),
        }
    }

    /// True where the verdict is the expected one.
    pub fn in_order(&self) -> bool {
        self.verdict
            == match self.expect {
                Expect::Pass => Verdict::Pass,
                Expect::Fail => Verdict::Fail,
                Expect::Undecided => Verdict::Undecided,
            }
    }
}

impl Outcome {
    /// Number of submissions with a verdict.
    pub fn count(&self, verdict: Verdict) -> usize {
        self.submissions
            .iter()
            .filter(|submission| submission.verdict == verdict)
            .count()
    }

    /// True where something became worse since an earlier audit.
    pub fn became_worse(&self) -> bool {
        let changes = self.changes.as_ref();
        changes.is_some_and(|changes| !changes.worse.is_empty())
    }

    /// What a reviewer requires and no submission meets.
    pub fn missing(&self) -> impl Iterator<Item = &Required> {
        let required = self.review.iter().flat_map(|review| &review.required);
        required.filter(|one| !one.is_met())
    }

    /// True where everything was audited and is as expected, nothing that is required is
    /// missing, and there was anything: only a part may have nothing to do, where there are
    /// more parts than submissions.
    pub fn in_order(&self) -> bool {
        let all = self.submissions.iter().all(Audited::in_order);
        let any = !self.submissions.is_empty() || self.part.is_some();
        let there = self.missing().next().is_none();
        all && any && there && self.left == 0 && self.not_audited.is_empty()
    }
}

/// What the solution of a case says of it beside its equations.
#[derive(Clone, Debug)]
pub struct CaseFacts {
    /// Times within the window at which an input jumps.
    pub jumps: Vec<f64>,
    /// Largest difference between closed form and propagator relative to the peak,
    /// beyond their bounds; `None` without a closed form.
    pub closed_form_gap: Option<f64>,
    /// Shortest time constant, in the unit of the case.
    pub shortest_time_constant: Option<f64>,
    /// Shortest period, in the unit of the case.
    pub shortest_period: Option<f64>,
}
