//! How far an audit is, for whoever waits for it: files and bytes that were compared, and
//! the submissions that are done, which stand even if the rest is never looked at.

use std::collections::BTreeMap;
use std::sync::atomic::{AtomicU64, Ordering};
use std::sync::{Mutex, MutexGuard, PoisonError};

use super::Plan;
use crate::fault::Fault;
use crate::outcome::{Audited, NotAudited, Outcome};

/// Counters and results of an audit that goes on.
#[derive(Debug, Default)]
pub struct Watch {
    files: AtomicU64,
    bytes: AtomicU64,
    done: Mutex<BTreeMap<usize, Result<Audited, Vec<Fault>>>>,
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
        let done = std::mem::take(&mut *self.lock());
        let mut outcome = Outcome {
            not_audited: plan.unreadable.clone(),
            ..Outcome::default()
        };
        for (index, result) in done {
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

    /// What is known up to now, in the order of the plan. Submissions that are not done are
    /// counted as left.
    pub fn outcome(&self, plan: &Plan) -> Outcome {
        let mut outcome = Outcome {
            submissions: Vec::new(),
            not_audited: plan.unreadable.clone(),
            left: 0,
            changes: None,
        };
        let done = self.lock();
        for (index, planned) in plan.submissions.iter().enumerate() {
            match done.get(&index) {
                Some(Ok(audited)) => outcome.submissions.push(audited.clone()),
                Some(Err(faults)) => outcome.not_audited.push(NotAudited {
                    name: planned.name.clone(),
                    faults: faults.clone(),
                }),
                None => outcome.left += 1,
            }
        }
        outcome
    }

    /// The data is whole even if another thread has panicked.
    fn lock(&self) -> MutexGuard<'_, BTreeMap<usize, Result<Audited, Vec<Fault>>>> {
        self.done.lock().unwrap_or_else(PoisonError::into_inner)
    }
}
