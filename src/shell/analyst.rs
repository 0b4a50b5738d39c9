//! The analyst: a thread with one slot; a newer question takes the place of one that waits.

use crate::analysis::{Analysis, analyse};
use crate::assay::Titration;
use std::io;
use std::sync::{Arc, Condvar, Mutex, MutexGuard, PoisonError};
use std::thread;

#[derive(Default)]
struct Slot {
    question: Option<(u32, u32, Titration)>,
    over: bool,
}

#[derive(Default)]
struct Shared {
    slot: Mutex<Slot>,
    changed: Condvar,
}

impl Shared {
    fn slot(&self) -> MutexGuard<'_, Slot> {
        self.slot.lock().unwrap_or_else(PoisonError::into_inner)
    }
}

/// The handle of the thread; it ends with it.
pub(super) struct Analyst {
    shared: Arc<Shared>,
}

impl Analyst {
    /// Starts the thread; `answer` is called on it with every analysis, and with which titration and which
    /// revision of it that is of.
    pub(super) fn spawn(
        answer: impl Fn(u32, u32, Arc<Analysis>) + Send + 'static,
    ) -> io::Result<Analyst> {
        let shared = Arc::new(Shared::default());
        let ours = Arc::clone(&shared);
        thread::Builder::new()
            .name("analyst".into())
            .spawn(move || {
                while let Some((laid, revision, titration)) = next(&ours) {
                    answer(laid, revision, Arc::new(analyse(&titration)));
                }
            })?;
        Ok(Analyst { shared })
    }

    /// Asks for an analysis in place of one that still waits.
    pub(super) fn analyse(&self, laid: u32, revision: u32, titration: Titration) {
        self.shared.slot().question = Some((laid, revision, titration));
        self.shared.changed.notify_all();
    }
}

impl Drop for Analyst {
    fn drop(&mut self) {
        self.shared.slot().over = true;
        self.shared.changed.notify_all();
    }
}

/// The next question; `None` when there will be no more.
fn next(shared: &Shared) -> Option<(u32, u32, Titration)> {
    let mut slot = shared.slot();
    loop {
        if slot.over {
            return None;
        }
        if let Some(question) = slot.question.take() {
            return Some(question);
        }
        slot = shared
            .changed
            .wait(slot)
            .unwrap_or_else(PoisonError::into_inner);
    }
}
