//! All batches of a file through three stages: parsed apart from each other, looked at in their
//! order, and what comes of that worked on apart from each other again. The results are
//! gathered in order, so that they do not depend on how many threads there are.

use std::collections::BTreeMap;
use std::sync::atomic::{AtomicUsize, Ordering};
use std::sync::{Condvar, Mutex, MutexGuard, PoisonError};

use super::batch::{Batch, Columns};
use super::open::{Source, after};
use super::pieces::{Piece, Pieces};
use super::survey::Survey;
use crate::fault::Result;

/// Threads that have nothing to do, for whoever has work that can be shared.
#[derive(Debug, Default)]
pub struct Crew {
    idle: AtomicUsize,
}

impl Crew {
    /// So many idle threads.
    pub fn new(idle: usize) -> Crew {
        Crew {
            idle: AtomicUsize::new(idle),
        }
    }

    /// Takes one, if there is one.
    fn hire(&self) -> bool {
        let less = |idle: usize| idle.checked_sub(1);
        let order = Ordering::Relaxed;
        self.idle.fetch_update(order, order, less).is_ok()
    }

    /// Gives one back.
    pub fn release(&self) {
        self.idle.fetch_add(1, Ordering::Relaxed);
    }
}

/// The stages of one file.
pub(crate) struct Stages<'s, W, D> {
    /// Takes the batches in order; hands out work.
    pub in_order: &'s mut (dyn FnMut(&Batch) -> Vec<W> + Send),
    /// Does it, in any order.
    pub apart: &'s (dyn Fn(W) -> D + Sync),
    /// Takes what was done, in the order of the work.
    pub gather: &'s mut (dyn FnMut(D) + Send),
}

type Input<'s> = Pieces<Box<dyn std::io::Read + Send + 's>>;

struct Shared<'s, W, D> {
    columns: Columns<'s>,
    input: Mutex<(Input<'s>, u64)>,
    turn: Mutex<Turn<'s, W>>,
    turned: Condvar,
    done: Mutex<Done<'s, D>>,
    apart: &'s (dyn Fn(W) -> D + Sync),
}

/// Whose turn it is, and what happens then.
struct Turn<'s, W> {
    next: u64,
    lines: u64,
    work: u64,
    in_order: &'s mut (dyn FnMut(&Batch) -> Vec<W> + Send),
    /// What went wrong first; nothing happens after it.
    failed: Result<()>,
    /// A thread has panicked and will never take its turn.
    broken: bool,
}

struct Done<'s, D> {
    next: u64,
    early: BTreeMap<u64, D>,
    gather: &'s mut (dyn FnMut(D) + Send),
}

impl Source {
    /// Sends all batches through the stages, with the threads that are idle.
    ///
    /// # Errors
    /// A file that cannot be read, or a line too long.
    pub(crate) fn stream<W: Send, D: Send>(
        &self,
        guess: &Survey,
        crew: &Crew,
        stages: Stages<W, D>,
    ) -> Result<()> {
        let layout = &guess.layout;
        if self.table().is_some() || layout.long.is_some() {
            return self.batches(layout, &guess.selection, &mut |batch| {
                for work in (stages.in_order)(&batch) {
                    (stages.gather)((stages.apart)(work));
                }
                Ok(())
            });
        }
        let shared = Shared {
            columns: Columns::new(layout, &guess.selection, guess.known.clone()),
            input: Mutex::new((self.pieces(layout)?, 0)),
            turn: Mutex::new(Turn {
                next: 0,
                lines: layout.first_row - 1,
                work: 0,
                in_order: stages.in_order,
                failed: Ok(()),
                broken: false,
            }),
            turned: Condvar::new(),
            done: Mutex::new(Done {
                next: 0,
                early: BTreeMap::new(),
                gather: stages.gather,
            }),
            apart: stages.apart,
        };
        std::thread::scope(|scope| {
            let helper = || {
                shared.work(&mut || {});
                crew.release();
            };
            // A thread that becomes idle in the middle of a file is welcome as well.
            shared.work(&mut || {
                if crew.hire() {
                    scope.spawn(helper);
                }
            });
        });
        shared
            .turn
            .into_inner()
            .unwrap_or_else(PoisonError::into_inner)
            .failed
    }
}

impl<W, D> Shared<'_, W, D> {
    /// Piece after piece, as long as there are any.
    fn work(&self, between: &mut dyn FnMut()) {
        let guard = Guard(self);
        let mut piece = Piece::default();
        loop {
            let (number, read) = {
                let (input, count) = &mut *lock(&self.input);
                *count += 1;
                (*count - 1, input.next(&mut piece))
            };
            let batch = match read {
                Ok(false) => break,
                Ok(true) => {
                    if !piece.last {
                        between();
                    }
                    self.columns.parse(&piece)
                }
                Err(fault) => Err(fault),
            };
            let Some((first, work)) = self.in_turn(number, batch) else {
                break;
            };
            for (place, work) in work.into_iter().enumerate() {
                self.gather(first + place as u64, (self.apart)(work));
            }
        }
        std::mem::forget(guard);
    }

    /// Waits for the batches before this one; the number of the first piece of work and all of
    /// it, or nothing where another thread has failed.
    fn in_turn(&self, number: u64, batch: Result<Batch>) -> Option<(u64, Vec<W>)> {
        let mut turn = lock(&self.turn);
        while turn.next != number && !turn.broken {
            turn = self
                .turned
                .wait(turn)
                .unwrap_or_else(PoisonError::into_inner);
        }
        if turn.broken {
            return None;
        }
        let first = turn.work;
        let mut work = Vec::new();
        let lines = turn.lines;
        match batch {
            _ if turn.failed.is_err() => {}
            Ok(batch) => {
                work = (turn.in_order)(&batch);
                turn.lines += batch.lines;
                turn.work += work.len() as u64;
            }
            Err(fault) => turn.failed = Err(after(fault, lines)),
        }
        turn.next += 1;
        self.turned.notify_all();
        turn.failed.is_ok().then_some((first, work))
    }

    fn gather(&self, number: u64, result: D) {
        let done = &mut *lock(&self.done);
        done.early.insert(number, result);
        while let Some(result) = done.early.remove(&done.next) {
            (done.gather)(result);
            done.next += 1;
        }
    }
}

/// Wakes the others where a thread panics, so that they do not wait for it.
struct Guard<'a, 's, W, D>(&'a Shared<'s, W, D>);

impl<W, D> Drop for Guard<'_, '_, W, D> {
    fn drop(&mut self) {
        lock(&self.0.turn).broken = true;
        self.0.turned.notify_all();
    }
}

/// A lock whose data is whole even if another thread has panicked.
fn lock<T>(mutex: &Mutex<T>) -> MutexGuard<'_, T> {
    mutex.lock().unwrap_or_else(PoisonError::into_inner)
}
