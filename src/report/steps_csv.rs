//! Error against step as CSV: a row for each method, step and channel, in the shortest
//! digits that read back.

use std::io::{self, Write};

use super::csv_values::{kept, shortest};
use crate::case::Case;
use crate::outcome::{StepRun, StepsOutcome};

/// Writes `method,step,steps,channel,worst_error,limit_used,stable`, longest step first;
/// the largest step that keeps the limit has its rows among them. A run that leaves all
/// numbers has `inf`; a step that cannot be run has no rows.
///
/// # Errors
/// What the stream says.
pub fn steps_csv(case: &Case, outcome: &StepsOutcome, stream: impl Write) -> io::Result<()> {
    let mut csv = csv::WriterBuilder::new().from_writer(stream);
    let header = [
        "method",
        "step",
        "steps",
        "channel",
        "worst_error",
        "limit_used",
        "stable",
    ];
    csv.write_record(header).map_err(kept)?;
    let names = case.channels();
    for method in &outcome.methods {
        let mut runs: Vec<&StepRun> = method.ladder.iter().flatten().collect();
        if let Some(largest) = &method.largest.kept
            && !runs.iter().any(|run| run.step == largest.step)
        {
            runs.push(largest);
        }
        runs.sort_by(|a, b| b.step.total_cmp(&a.step));
        for run in runs {
            for (channel, error) in names.iter().zip(&run.channels) {
                let cells = [
                    method.name.clone(),
                    shortest(run.step),
                    run.steps.to_string(),
                    channel.name.to_owned(),
                    shortest(error.worst),
                    shortest(error.limit_used),
                    run.stable.to_string(),
                ];
                csv.write_record(&cells).map_err(kept)?;
            }
        }
    }
    csv.flush()
}
