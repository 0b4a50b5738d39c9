//! The saver: a thread that keeps the file up with the notebook.
//!
//! It has one slot, and a newer text takes the place of one that still waits, so the bench never waits
//! for a disk. What fails is tried again for as long as it takes; nothing is called saved before it is.

use super::error::StoreError;
use super::format::Text;
use super::save::Target;
use std::io;
use std::path::PathBuf;
use std::sync::{Arc, Condvar, Mutex, MutexGuard, PoisonError};
use std::thread;
use std::time::{Duration, Instant};

/// What the saver has to say.
#[derive(Debug, Clone)]
pub enum SaveReport {
    /// The notebook is on disk up to a revision.
    Saved {
        /// The revision.
        rev: u32,
    },
    /// It is not; the saver goes on trying where that may help.
    Failed {
        /// The revision that could not be saved.
        rev: u32,
        /// Why.
        error: Arc<StoreError>,
    },
}

/// How the saver ended.
#[derive(Debug, Clone)]
pub enum Ended {
    /// All that was given to it is on disk.
    Saved,
    /// The newest text is not.
    Unsaved {
        /// Its revision.
        rev: u32,
        /// Why.
        error: Arc<StoreError>,
    },
    /// It is still writing; the time is over.
    StillWriting,
}

const FIRST_PAUSE: Duration = Duration::from_millis(250);
const LONGEST_PAUSE: Duration = Duration::from_secs(5);
/// How long a saver that nobody finished is waited for when it is dropped.
const DROP_PATIENCE: Duration = Duration::from_secs(5);

struct Job {
    rev: u32,
    text: Text,
}

#[derive(Default)]
struct Slot {
    job: Option<Job>,
    elsewhere: Option<Target>,
    stop: bool,
    /// What became of the newest text tried.
    unsaved: Option<(u32, Arc<StoreError>)>,
    ended: bool,
}

#[derive(Default)]
struct Shared {
    slot: Mutex<Slot>,
    changed: Condvar,
}

impl Shared {
    /// The slot holds whole values at any moment, so a panic elsewhere does not spoil it.
    fn slot(&self) -> MutexGuard<'_, Slot> {
        self.slot.lock().unwrap_or_else(PoisonError::into_inner)
    }
}

/// The handle of the thread that saves one notebook.
pub struct Saver {
    shared: Arc<Shared>,
    thread: Option<thread::JoinHandle<()>>,
}

impl Saver {
    /// Starts the thread; `notify` is called on it after every attempt.
    ///
    /// # Errors
    /// The system gives no thread.
    pub fn spawn(
        target: Target,
        notify: impl Fn(SaveReport) + Send + 'static,
    ) -> io::Result<Saver> {
        let shared = Arc::new(Shared::default());
        let ours = Arc::clone(&shared);
        let thread = thread::Builder::new().name("saver".into()).spawn(move || {
            // However it ends, nobody is left waiting.
            let end = AtEnd(&ours);
            run(&ours, target, notify);
            drop(end);
        })?;
        Ok(Saver {
            shared,
            thread: Some(thread),
        })
    }

    /// Has a text saved, in place of one that still waits.
    pub fn save(&self, rev: u32, text: Text) {
        self.shared.slot().job = Some(Job { rev, text });
        self.shared.changed.notify_all();
    }

    /// Saves to another file from now on, beginning with a text; lets go of the old file.
    pub fn redirect(&self, target: Target, rev: u32, text: Text) {
        let mut slot = self.shared.slot();
        slot.elsewhere = Some(target);
        slot.job = Some(Job { rev, text });
        drop(slot);
        self.shared.changed.notify_all();
    }

    /// Waits until the newest text is saved or has failed once more, and ends the thread.
    pub fn finish(mut self, patience: Duration) -> Ended {
        self.end(patience)
    }

    fn end(&mut self, patience: Duration) -> Ended {
        let Some(thread) = self.thread.take() else {
            return Ended::Saved;
        };
        let mut slot = self.shared.slot();
        slot.stop = true;
        self.shared.changed.notify_all();
        let (slot, _) = self
            .shared
            .changed
            .wait_timeout_while(slot, patience, |s| !s.ended)
            .unwrap_or_else(PoisonError::into_inner);
        if !slot.ended {
            return Ended::StillWriting;
        }
        // A thread that died left its job behind.
        let left = slot.job.as_ref().map(|job| {
            let cause = io::Error::other("the saving thread stopped");
            (
                job.rev,
                Arc::new(StoreError::Io {
                    path: PathBuf::new(),
                    doing: "save",
                    cause,
                }),
            )
        });
        let unsaved = slot.unsaved.clone().or(left);
        drop(slot);
        // It is past its last statement that could take time.
        let _ = thread.join();
        match unsaved {
            Some((rev, error)) => Ended::Unsaved { rev, error },
            None => Ended::Saved,
        }
    }
}

impl Drop for Saver {
    fn drop(&mut self) {
        self.end(DROP_PATIENCE);
    }
}

struct AtEnd<'a>(&'a Shared);

impl Drop for AtEnd<'_> {
    fn drop(&mut self) {
        self.0.slot().ended = true;
        self.0.changed.notify_all();
    }
}

fn run(shared: &Shared, mut target: Target, notify: impl Fn(SaveReport)) {
    let mut pause = FIRST_PAUSE;
    // A text that failed and waits to be tried again, and when; never, where that cannot help.
    let mut failed: Option<(Job, Option<Instant>)> = None;
    loop {
        let mut slot = shared.slot();
        let job = loop {
            if let Some(elsewhere) = slot.elsewhere.take() {
                target = elsewhere;
            }
            if let Some(newer) = slot.job.take() {
                pause = FIRST_PAUSE;
                break newer;
            }
            let due = match &failed {
                None if slot.stop => return,
                None => None,
                Some(_) if slot.stop => Some(Instant::now()),
                Some((_, when)) => *when,
            };
            let left = due.map(|when| when.saturating_duration_since(Instant::now()));
            match (left, failed.take()) {
                (Some(Duration::ZERO), Some((job, _))) => break job,
                (Some(left), waiting) => {
                    failed = waiting;
                    let woken = shared.changed.wait_timeout(slot, left);
                    slot = woken.unwrap_or_else(PoisonError::into_inner).0;
                }
                (None, waiting) => {
                    failed = waiting;
                    let woken = shared.changed.wait(slot);
                    slot = woken.unwrap_or_else(PoisonError::into_inner);
                }
            }
        };
        let last_chance = slot.stop;
        drop(slot);
        let rev = job.rev;
        let outcome = target.save(&job.text).map_err(Arc::new);
        failed = None;
        if let Err(error) = &outcome {
            let again = error.may_pass().then(|| Instant::now() + pause);
            pause = (pause * 2).min(LONGEST_PAUSE);
            failed = Some((job, again));
        }
        shared.slot().unsaved = outcome.as_ref().err().map(|e| (rev, Arc::clone(e)));
        notify(match outcome {
            Ok(()) => SaveReport::Saved { rev },
            Err(error) => SaveReport::Failed { rev, error },
        });
        if last_chance {
            // A stop was asked for before this attempt, and a text given after it would be a new one.
            if shared.slot().job.is_none() {
                return;
            }
        }
    }
}
