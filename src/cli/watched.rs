//! An audit with somebody in front of it: progress on a terminal, and an end at once when it
//! is interrupted, with what was finished by then.

use std::io::IsTerminal;
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::mpsc::{RecvTimeoutError, channel};
use std::time::Duration;

use indicatif::{ProgressBar, ProgressDrawTarget, ProgressStyle};

use crate::audit::{Plan, Watch, audit_watched};
use crate::outcome::Outcome;

/// How often it is looked whether there is anything new.
const GLANCE: Duration = Duration::from_millis(40);
/// The status of a program that was interrupted (common practice, no source).
const INTERRUPTED: i32 = 130;

/// Set by Ctrl-C; a second one ends the program in the middle of whatever it does.
static STOPPED: AtomicBool = AtomicBool::new(false);

/// Audits in threads of its own, which are left behind when the audit is interrupted: what
/// they would still find out nobody waits for.
pub(super) fn audit(plan: Plan, quiet: bool) -> Outcome {
    // Without a handler Ctrl-C ends the program as it always does.
    let _ = ctrlc::set_handler(|| {
        if STOPPED.swap(true, Ordering::SeqCst) {
            std::process::exit(INTERRUPTED);
        }
    });
    let (plan, watch) = (Arc::new(plan), Arc::new(Watch::default()));
    let bar = bar(&plan, quiet);
    let (sender, finished) = channel();
    let (own, seen) = (Arc::clone(&plan), Arc::clone(&watch));
    let worker = std::thread::spawn(move || {
        let outcome = audit_watched(&own, &seen);
        // Whoever waited may have gone.
        let _ = sender.send(outcome);
    });
    let outcome = loop {
        match finished.recv_timeout(GLANCE) {
            Ok(outcome) => break Some(outcome),
            Err(RecvTimeoutError::Disconnected) => break None,
            Err(RecvTimeoutError::Timeout) if STOPPED.load(Ordering::SeqCst) => {
                break Some(watch.outcome(&plan));
            }
            Err(RecvTimeoutError::Timeout) => {
                bar.set_position(watch.bytes());
                bar.set_message(format!("{} files", watch.files()));
            }
        }
    };
    bar.finish_and_clear();
    // The worker ends without an outcome only where it has panicked: so does this.
    outcome.unwrap_or_else(|| match worker.join() {
        Err(panic) => std::panic::resume_unwind(panic),
        Ok(()) => watch.outcome(&plan),
    })
}

/// Bytes and files on standard error, on a terminal only.
fn bar(plan: &Plan, quiet: bool) -> ProgressBar {
    if quiet || !std::io::stderr().is_terminal() {
        return ProgressBar::hidden();
    }
    let runs = plan.submissions.iter().flat_map(|one| &one.submission.runs);
    let bytes = runs.map(|run| std::fs::metadata(&run.path).map_or(0, |data| data.len()));
    let bar = ProgressBar::with_draw_target(Some(bytes.sum()), ProgressDrawTarget::stderr());
    bar.set_message("0 files");
    let style = ProgressStyle::with_template("{bytes} of {total_bytes} compared, {msg} {wide_bar}");
    match style {
        Ok(style) => bar.with_style(style),
        Err(_) => bar,
    }
}
