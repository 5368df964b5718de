//! The whole pipeline: a plan of submissions to an outcome.
//!
//! `run` compares one file, `verdict` judges the files of a submission together, `alone`
//! compares the runs of a submission without a case with each other.

mod advice;
mod alone;
mod causes;
mod curves;
mod evidence;
mod growth;
mod keep;
mod required;
mod rows;
mod run;
mod settings;
mod verdict;
mod watch;

use std::collections::BTreeMap;
use std::path::PathBuf;
use std::sync::atomic::{AtomicUsize, Ordering};
use std::sync::{Arc, Mutex};

use crate::case::{Case, Library};
use crate::exact::{Exact, approx_time_scales};
use crate::fault::Fault;
use crate::judge::Verdict;
use crate::method::{Linear, Shelf};
use crate::outcome::{Audited, LimitsFrom, NotAudited, Outcome, Part};
use crate::submission::{LimitStated, Submission};
use crate::trajectory::Crew;
use run::compare;
use verdict::{assign_roles, judge_orders, judge_runs, note_hidden_rungs};

pub use required::required;
pub use rows::{Rows, audit_rows};
pub use watch::Watch;

/// What is to be audited.
#[derive(Debug)]
pub struct Plan {
    /// The cases at hand.
    pub library: Library,
    /// Submissions in the order of the report.
    pub submissions: Vec<Planned>,
    /// Submissions that could not even be read.
    pub unreadable: Vec<NotAudited>,
    /// Threads to work with.
    pub threads: usize,
    /// True where the outcome is to hold points for plots.
    pub traced: bool,
    /// Which part of a divided audit this is.
    pub part: Option<Part>,
}

impl Plan {
    /// Submissions that can be read, those of other parts included: what is looked at closely
    /// must not depend on the division.
    fn readable(&self) -> usize {
        let here = self.submissions.len();
        let all = self.part.as_ref().map(Part::readable);
        all.map_or(here, |all| usize::try_from(all).unwrap_or(usize::MAX))
    }
}

/// One submission of a plan.
#[derive(Clone, Debug)]
pub struct Planned {
    /// Its name in reports.
    pub name: String,
    /// Where its complaints belong: the submission.toml, if there is one.
    pub file: Option<PathBuf>,
    /// What was handed in.
    pub submission: Submission,
    /// What a reviewer's rules and the command line make of it.
    pub reviewed: Reviewed,
}

/// What is laid down for a submission, whatever it states itself.
#[derive(Clone, Debug, Default)]
pub struct Reviewed {
    /// Whose limits it was given; `None` where its own count, or those of the case.
    pub limits_from: Option<LimitsFrom>,
    /// Why it fails, whatever its numbers say.
    pub refused: Vec<String>,
    /// What else to know.
    pub notes: Vec<String>,
}

impl Reviewed {
    /// What is refused fails, and is told first.
    fn conclude(&self, audited: &mut Audited) {
        if !self.refused.is_empty() {
            audited.verdict = Verdict::Fail;
            audited.reasons.splice(0..0, self.refused.iter().cloned());
        }
        audited.notes.extend(self.notes.iter().cloned());
    }
}

/// A case with its solution, shared by the submissions that name it.
struct Model {
    case: Case,
    exact: Exact,
    /// The case as a time-stepping program sees it.
    linear: Linear,
    /// Of the fastest mode, if it decays or grows.
    time_constant: Option<f64>,
}

/// Up to so many submissions each is looked at closely, whether it passes or not.
const FEW: usize = 3;

/// The models so far, and what is known of methods on them.
#[derive(Default)]
struct Models {
    known: Mutex<BTreeMap<String, Arc<Model>>>,
    shelf: Arc<Shelf>,
}

/// Audits everything in the plan. The outcome does not depend on the threads.
pub fn audit(plan: &Plan) -> Outcome {
    audit_watched(plan, &Watch::default())
}

/// The same for somebody who watches, and who may stop waiting.
pub fn audit_watched(plan: &Plan, watch: &Watch) -> Outcome {
    let models = Models::default();
    let next = AtomicUsize::new(0);
    let threads = plan.threads.clamp(1, plan.submissions.len().max(1));
    // Threads without a submission of their own help with those that are long.
    let crew = Crew::new(plan.threads.saturating_sub(threads));
    let work = || {
        loop {
            let index = next.fetch_add(1, Ordering::Relaxed);
            let Some(planned) = plan.submissions.get(index) else {
                break;
            };
            watch.finished(index, audit_one(planned, plan, &models, watch, &crew));
        }
        crew.release();
    };
    // Each submission is shared out among the threads as well.
    let pool = rayon::ThreadPoolBuilder::new()
        .num_threads(plan.threads)
        .build();
    match pool {
        Ok(pool) => pool.scope(|scope| (0..threads).for_each(|_| scope.spawn(|_| work()))),
        Err(_) => work(),
    }
    watch.take(plan)
}

/// A lock whose data is whole even if another thread has panicked.
fn lock<T>(mutex: &Mutex<T>) -> std::sync::MutexGuard<'_, T> {
    mutex
        .lock()
        .unwrap_or_else(std::sync::PoisonError::into_inner)
}

fn model(
    name: &str,
    submission: &Submission,
    library: &Library,
    models: &Models,
) -> Result<Arc<Model>, Vec<Fault>> {
    let key = format!("{name} {:?}", submission.parameters);
    if let Some(model) = lock(&models.known).get(&key) {
        return Ok(Arc::clone(model));
    }
    // The lock is not held meanwhile: two threads may do the same work once.
    let case = library.load(name, &submission.parameters)?;
    let exact = case.exact().map_err(|fault| vec![fault])?;
    let time_constant = approx_time_scales(&case).time_constant;
    let model = Arc::new(Model {
        linear: Linear::new(&case).on(&models.shelf),
        case,
        exact,
        time_constant,
    });
    lock(&models.known).insert(key, Arc::clone(&model));
    Ok(model)
}

/// Audits one submission; what is wrong with it as such is placed in its file.
fn audit_one(
    planned: &Planned,
    plan: &Plan,
    models: &Models,
    watch: &Watch,
    crew: &Crew,
) -> Result<Audited, Vec<Fault>> {
    let (submission, library) = (&planned.submission, &plan.library);
    let few = plan.readable() <= FEW;
    let place = |fault: Fault| match &planned.file {
        Some(file) => fault.in_file(file),
        None => fault,
    };
    let placed = |faults: Vec<Fault>| faults.into_iter().map(place).collect::<Vec<_>>();
    let Some(name) = submission.case.as_deref() else {
        let mut audited = alone::audit_alone(planned).map_err(placed)?;
        planned.reviewed.conclude(&mut audited);
        return Ok(audited);
    };
    let keyed = |faults: Vec<Fault>| {
        placed(
            faults
                .into_iter()
                .map(|fault| at_key(submission, fault))
                .collect(),
        )
    };
    let model = model(name, submission, library, models).map_err(keyed)?;
    // Those of a reviewer are for many cases, and were looked at before.
    if planned.reviewed.limits_from != Some(LimitsFrom::Reviewer) {
        check_limited_channels(&model.case, submission).map_err(placed)?;
    }
    let mut audited = Audited::new(
        planned.name.clone(),
        Some(model.case.name.clone()),
        model.case.time.unit.clone(),
        submission,
        limits_from(planned),
    );
    let mut compared = Vec::new();
    for run in &submission.runs {
        let one = compare(
            run,
            submission,
            &model,
            (plan.traced, crew),
            &mut audited.notes,
        );
        watch.compared(one.as_ref().map_or(0, |one| one.bytes));
        // A complaint with a line is about the submission, one without about the run.
        compared.push(one.map_err(|fault| match (fault.line, &planned.file) {
            (Some(_), Some(file)) if fault.path.is_none() => vec![fault.in_file(file)],
            _ => vec![fault.in_file(&run.path)],
        })?);
    }
    assign_roles(&mut compared);
    note_hidden_rungs(&compared, &mut audited.notes);
    let mut found = evidence::ask(&model, submission, &compared);
    judge_orders(
        &model.case,
        submission,
        &compared,
        &found,
        model.time_constant,
        &mut audited,
    );
    audited.runs = compared.iter().map(|one| one.outcome.clone()).collect();
    judge_runs(&mut audited);
    causes::look(
        &model,
        library,
        submission,
        &compared,
        &mut found,
        &mut audited,
    );
    evidence::conclude(submission, &compared, &found, &mut audited);
    growth::measure(&model, &compared, &mut audited);
    settings::settings(&model.case, &compared, &mut audited);
    advice::advise(&model, submission, &compared, &found, few, &mut audited);
    if plan.traced {
        audited.curves = curves::exact_curves(&model);
    }
    planned.reviewed.conclude(&mut audited);
    Ok(audited)
}

fn limits_from(planned: &Planned) -> LimitsFrom {
    let limits = &planned.submission.limits;
    let states = |limit: &LimitStated| *limit != LimitStated::default();
    if let Some(from) = planned.reviewed.limits_from {
        from
    } else if states(&limits.general)
        || limits.channels.values().any(states)
        || limits.order_slack.is_some()
    {
        LimitsFrom::Submission
    } else {
        LimitsFrom::Case
    }
}

/// A complaint of the library about what the submission names, with its place there.
fn at_key(submission: &Submission, fault: Fault) -> Fault {
    if fault.line.is_some() {
        return fault;
    }
    let names = |name: &&String| fault.text.contains(&format!("`{name}`"));
    match submission.parameters.keys().find(names) {
        Some(name) => submission.at_key(fault, &format!("parameters.{name}")),
        None => submission.at_key(fault, "case"),
    }
}

fn check_limited_channels(case: &Case, submission: &Submission) -> Result<(), Vec<Fault>> {
    let channels = case.channels();
    let unknown = |name: &&String| channels.iter().all(|channel| channel.name != name.as_str());
    let complain = |name: &String| {
        let names: Vec<&str> = channels.iter().map(|channel| channel.name).collect();
        let text = format!("case `{}` has no channel `{name}` to limit", case.name);
        let fault = Fault::new(text).help(format!("its channels are {}", names.join(", ")));
        submission.at_key(fault, &format!("limits.{name}"))
    };
    let limited = submission.limits.channels.keys();
    let faults: Vec<Fault> = limited.filter(unknown).map(complain).collect();
    if faults.is_empty() {
        Ok(())
    } else {
        Err(faults)
    }
}
