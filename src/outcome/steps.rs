//! Which step a case needs, as plain data: what a method does at given steps, and the
//! largest step that keeps the limits.

/// What keeps the step from being longer.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Rule {
    /// Errors.
    Accuracy,
    /// The method's stability: the step that keeps the limits lies at its end.
    Stability,
    /// Neither: as few steps as a run may have keep the limits.
    Neither,
}

/// Error of one channel over one run.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ChannelError {
    /// Largest `|computed - exact|` at the nodes compared, in the unit of the channel;
    /// infinite where the run left all numbers.
    pub worst: f64,
    /// Largest share of the limit; 1 is the edge. Zero for a channel without a limit.
    pub limit_used: f64,
}

/// One method run over the window at one step.
#[derive(Clone, Debug, PartialEq)]
pub struct StepRun {
    /// In the time unit of the case.
    pub step: f64,
    /// How many of them.
    pub steps: u64,
    /// True where the step is within the method's stability limit.
    pub stable: bool,
    /// In the order of [`crate::case::Case::channels`].
    pub channels: Vec<ChannelError>,
}

/// The largest step of one method that keeps the limits.
#[derive(Clone, Debug, PartialEq)]
pub struct LargestStep {
    /// The run at that step, which divides the window; `None` where even `most_steps`
    /// steps do not keep the limits.
    pub kept: Option<StepRun>,
    /// Most steps that were tried, or would have been.
    pub most_steps: u64,
    /// The largest stable step; `None` where any step is stable, zero where none is.
    pub approx_stable: Option<f64>,
    /// `None` where it cannot be told, because no step tried was stable.
    pub ruled_by: Option<Rule>,
}

/// Steps that hit every jump of the inputs.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct JumpGrid {
    /// Times within the window at which an input jumps or bends.
    pub times: Vec<f64>,
    /// The longest step that hits all of them when counted from the start of the window;
    /// `None` where there is none that a run could use.
    pub common: Option<f64>,
    /// The longest step that hits all of them and the end of the window.
    pub common_with_end: Option<f64>,
}

/// What steps that hit all jumps and the end of the window do for one method.
#[derive(Clone, Debug, PartialEq)]
pub struct OnJumps {
    /// Where the program reads the new value from the instant of a jump on (`t >= at`).
    pub after: Option<StepRun>,
    /// Where every step sees the value that holds within it.
    pub own: Option<StepRun>,
}

/// One method on one case.
#[derive(Clone, Debug, PartialEq)]
pub struct MethodSteps {
    /// Its name.
    pub name: String,
    /// Its order on smooth problems.
    pub order: u8,
    /// Values that a step needs; more than one start from exact values.
    pub start_values: usize,
    /// With inputs read as `t >= at`.
    pub largest: LargestStep,
    /// One entry for each step of [`StepsOutcome::grids`]; `None` where the method cannot
    /// take it: too few steps for its start values, a step that cannot be solved, or more
    /// steps than its bound allows.
    pub ladder: Vec<Option<StepRun>>,
    /// Jumps that fall between the steps of the largest step.
    pub jumps_missed: usize,
    /// `None` without such a step.
    pub on_jumps: Option<OnJumps>,
}

/// The limit of one channel.
#[derive(Clone, Debug, PartialEq)]
pub struct ChannelLimit {
    /// Its name.
    pub channel: String,
    /// In the unit of the channel.
    pub absolute: f64,
    /// A fraction.
    pub relative: f64,
}

/// What every method asked about does on one case.
#[derive(Clone, Debug, PartialEq)]
pub struct StepsOutcome {
    /// Of the channels that have one.
    pub limits: Vec<ChannelLimit>,
    /// Step and number of steps of every row of the ladder, longest step first.
    pub grids: Vec<(f64, u64)>,
    /// In the order asked for.
    pub methods: Vec<MethodSteps>,
    /// Jumps of the inputs.
    pub jumps: JumpGrid,
    /// Fewest steps that a run of the case may have.
    pub fewest_steps: u64,
    /// Of the case, in its time unit.
    pub shortest_time_constant: Option<f64>,
    /// Of the case, in its time unit.
    pub shortest_period: Option<f64>,
}

impl StepRun {
    /// The largest share of a limit among all channels.
    pub fn limit_used(&self) -> f64 {
        let shares = self.channels.iter().map(|channel| channel.limit_used);
        shares.fold(0.0, f64::max)
    }

    /// True where every channel keeps its limit.
    pub fn keeps(&self) -> bool {
        self.limit_used() <= 1.0
    }
}
