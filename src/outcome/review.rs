//! The rules of a reviewer, as far as a report tells them, and what came of them.

/// By what rules an audit was made.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Review {
    /// The file of `--limits`, as named.
    pub limits: Option<String>,
    /// The file of `--require`, as named.
    pub require: Option<String>,
    /// Whether submissions may replace parameters of their cases.
    pub refuses_own_parameters: bool,
    /// Whether they may bring their cases along.
    pub refuses_own_cases: bool,
    /// Whether they may mark themselves as controls.
    pub refuses_controls: bool,
    /// In the order of the file.
    pub required: Vec<Required>,
}

/// One thing that has to be there, and whether it is.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Required {
    /// The case.
    pub case: String,
    /// Runs at different steps, at least.
    pub runs: u64,
    /// Rows of each result, at least; zero where nothing is said of them.
    pub rows: u64,
    /// Methods of which one has to be claimed; empty where any will do.
    pub methods: Vec<String>,
    /// Whether the rows have to agree with the method.
    pub method_shown: bool,
    /// Submissions that meet it.
    pub met_by: Vec<String>,
    /// What is required and what came of it, in one sentence.
    pub text: String,
}

impl Required {
    /// True where some submission meets it.
    pub fn is_met(&self) -> bool {
        !self.met_by.is_empty()
    }
}
