//! A shelf for legs that were worked out before: runs of one model at the same spacing are held
//! against the same steps.

use std::collections::HashMap;
use std::sync::atomic::{AtomicU64, Ordering};
use std::sync::{Arc, PoisonError, RwLock};

use super::leg::Leg;
use super::recurrence::Reading;

/// Numbers on a shelf at most; it is cleared then, so that memory does not grow with what is
/// audited.
const MOST_NUMBERS: usize = 2_500_000;

/// What tells the legs of one model apart.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub(super) struct Title {
    /// Where the method lies in memory, and the place of its form.
    pub(super) form: (usize, usize),
    pub(super) reading: Reading,
    /// Which of the orders of states.
    pub(super) order: usize,
    /// The bits of the step.
    pub(super) step: u64,
    pub(super) steps: u64,
}

/// Legs that were worked out before, shared by the models of an audit.
#[derive(Debug, Default)]
pub struct Shelf {
    kept: RwLock<Kept>,
    models: AtomicU64,
}

#[derive(Debug, Default)]
struct Kept {
    legs: HashMap<(u64, Title), Arc<Leg>>,
    numbers: usize,
}

/// The part of a shelf that is for one model.
#[derive(Debug, Default)]
pub(super) struct Section(Option<(Arc<Shelf>, u64)>);

/// A model that is copied is going to be changed: its legs are others.
impl Clone for Section {
    fn clone(&self) -> Section {
        Section(None)
    }
}

impl Section {
    pub(super) fn on(shelf: &Arc<Shelf>) -> Section {
        let model = shelf.models.fetch_add(1, Ordering::Relaxed);
        Section(Some((Arc::clone(shelf), model)))
    }

    /// A leg from the shelf, else a new one; `None` where it cannot be worked out.
    pub(super) fn leg(
        &self,
        title: impl FnOnce() -> Title,
        new: impl FnOnce() -> Option<Leg>,
    ) -> Option<Arc<Leg>> {
        let Some((shelf, model)) = &self.0 else {
            return new().map(Arc::new);
        };
        let title = (*model, title());
        let kept = shelf.kept.read().unwrap_or_else(PoisonError::into_inner);
        if let Some(leg) = kept.legs.get(&title) {
            return Some(Arc::clone(leg));
        }
        drop(kept);
        let leg = Arc::new(new()?);
        let mut kept = shelf.kept.write().unwrap_or_else(PoisonError::into_inner);
        kept.numbers += leg.numbers();
        if kept.numbers > MOST_NUMBERS {
            kept.legs.clear();
            kept.numbers = leg.numbers();
        }
        kept.legs.insert(title, Arc::clone(&leg));
        Some(leg)
    }
}
