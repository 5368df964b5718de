//! How far an audit is, for whoever waits for it: files and bytes that were compared, and
//! the submissions that are done, which stand even if the rest is never looked at.

use std::collections::BTreeMap;
use std::sync::atomic::{AtomicU64, Ordering};
use std::sync::{Mutex, MutexGuard, PoisonError};

use super::Plan;
use crate::fault::Fault;
use crate::outcome::{Audited, NotAudited, Outcome};

/// Results by the place of their submission in the plan.
type Done = BTreeMap<usize, Result<Audited, Vec<Fault>>>;

/// Counters and results of an audit that goes on.
#[derive(Debug, Default)]
pub struct Watch {
    files: AtomicU64,
    bytes: AtomicU64,
    done: Mutex<Done>,
}

impl Watch {
    /// Files compared so far.
    pub fn files(&self) -> u64 {
        self.files.load(Ordering::Relaxed)
    }

    /// Their bytes.
    pub fn bytes(&self) -> u64 {
        self.bytes.load(Ordering::Relaxed)
    }

    pub(super) fn compared(&self, bytes: u64) {
        self.files.fetch_add(1, Ordering::Relaxed);
        self.bytes.fetch_add(bytes, Ordering::Relaxed);
    }

    pub(super) fn finished(&self, index: usize, result: Result<Audited, Vec<Fault>>) {
        self.lock().insert(index, result);
    }

    /// All results, once everything is done.
    pub(super) fn take(&self, plan: &Plan) -> Outcome {
        gathered(plan, std::mem::take(&mut *self.lock()))
    }

    /// What is known up to now, while the audit goes on.
    pub fn outcome(&self, plan: &Plan) -> Outcome {
        gathered(plan, self.lock().clone())
    }

    /// The data is whole even if another thread has panicked.
    fn lock(&self) -> MutexGuard<'_, Done> {
        self.done.lock().unwrap_or_else(PoisonError::into_inner)
    }
}

/// Results in the order of the plan; submissions that are not among them are counted as left.
fn gathered(plan: &Plan, done: Done) -> Outcome {
    let mut outcome = Outcome {
        not_audited: plan.unreadable.clone(),
        left: plan.submissions.len() - done.len(),
        part: plan.part.clone(),
        ..Outcome::default()
    };
    let planned = plan.part.as_ref().map_or(&[][..], |part| &part.places);
    if let Some(part) = &mut outcome.part {
        part.places.clear();
    }
    for (index, result) in done {
        let failed = result.is_err();
        if let (Some(part), Some(&place)) = (&mut outcome.part, planned.get(index)) {
            match failed {
                true => part.places_not_audited.push(place),
                false => part.places.push(place),
            }
        }
        match result {
            Ok(audited) => outcome.submissions.push(audited),
            Err(faults) => {
                let name = plan.submissions[index].name.clone();
                outcome.not_audited.push(NotAudited { name, faults });
            }
        }
    }
    outcome
}
