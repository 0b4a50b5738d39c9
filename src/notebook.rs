//! The notebook: entries that are only ever added, and the titration they add up to.
//!
//! An entry is live if no live [`What::TakenBack`] names it; the titration is the replay of the live
//! entries. Nothing is ever removed, so redo is the taking back of a taking-back.

mod describe;
mod entry;
mod rejection;
mod replay;

pub use describe::reading_in_words;
pub use entry::{Count, Entry, MOST_ENTRIES, MOST_READINGS, MOST_TEXT, What};
pub use rejection::Rejection;

use crate::assay::{Level, Protocol, Stamp, Titration, Tube};
use replay::{State, liveness, replay};
use std::sync::Arc;

/// The entries of one titration, and what they add up to.
#[derive(Debug, Clone)]
pub struct Notebook {
    entries: Vec<Arc<Entry>>,
    live: Vec<bool>,
    state: State,
}

impl Notebook {
    /// A notebook with its first entry.
    ///
    /// # Errors
    /// The protocol or the rack is not one that a titration can have, or `who` is empty or too long.
    pub fn open(
        protocol: Protocol,
        levels: Vec<Level>,
        tubes: Vec<Tube>,
        at: Stamp,
        who: &str,
    ) -> Result<Notebook, Rejection> {
        let first = Entry {
            n: 1,
            at,
            who: who.into(),
            what: What::Opened {
                protocol: Box::new(protocol),
                levels,
                tubes,
            },
        };
        Self::replay(vec![Arc::new(first)]).map_err(|e| match e {
            Rejection::Entry { cause, .. } => *cause,
            other => other,
        })
    }

    /// A notebook from its entries.
    ///
    /// # Errors
    /// [`Rejection::Entry`] names the first entry that cannot stand where it does, and says why.
    pub fn replay(entries: Vec<Arc<Entry>>) -> Result<Notebook, Rejection> {
        if entries.is_empty() {
            return Err(Rejection::NoEntries);
        }
        if entries.len() > MOST_ENTRIES {
            return Err(Rejection::Full);
        }
        let at = |n, cause| Rejection::Entry {
            n,
            cause: Box::new(cause),
        };
        for (wanted, entry) in (1..).zip(&entries) {
            if entry.n != wanted {
                let found = entry.n;
                return Err(at(wanted, Rejection::Number { found, wanted }));
            }
            entry.check().map_err(|e| at(wanted, e))?;
        }
        let live = liveness(&entries);
        let state = replay(&entries, &live).map_err(|(n, e)| at(n, e))?;
        Ok(Notebook {
            entries,
            live,
            state,
        })
    }

    /// Adds an entry, and gives it back with its number.
    ///
    /// # Errors
    /// Why it cannot stand; the notebook is then as it was. For a taking-back,
    /// [`Rejection::InTheWay`] names the later entry that must be taken back first.
    pub fn record(&mut self, what: What, at: Stamp, who: &str) -> Result<Arc<Entry>, Rejection> {
        if self.entries.len() >= MOST_ENTRIES {
            return Err(Rejection::Full);
        }
        let entry = Arc::new(Entry {
            n: self.revision() + 1,
            at,
            who: who.into(),
            what,
        });
        entry.check()?;
        if let What::TakenBack(target) = entry.what {
            self.take_back(target, &entry)?;
        } else {
            // The newest entry comes last in a replay too, so it may be put on top of what is there.
            let mut state = self.state.clone();
            state.apply(&entry)?;
            self.state = state;
            self.entries.push(Arc::clone(&entry));
            self.live.push(true);
        }
        Ok(entry)
    }

    fn take_back(&mut self, target: u32, entry: &Arc<Entry>) -> Result<(), Rejection> {
        if !self.is_live(target) {
            let by = self.live_entries().find_map(|e| match e.what {
                What::TakenBack(t) if t == target => Some(e.n),
                _ => None,
            });
            return Err(Rejection::TakenBackAlready {
                target,
                by: by.unwrap_or(0),
            });
        }
        let mut entries = self.entries.clone();
        entries.push(Arc::clone(entry));
        let live = liveness(&entries);
        let state = replay(&entries, &live).map_err(|(n, cause)| {
            // What a closed titration refuses is said in the words of the closing.
            match self.state.refuse_if_closed() {
                Err(closed) => closed,
                Ok(()) => Self::in_the_way(n, self.entry(n).map(|e| &e.what), cause),
            }
        })?;
        *self = Notebook {
            entries,
            live,
            state,
        };
        Ok(())
    }

    /// The titration as it stands.
    pub fn titration(&self) -> &Titration {
        &self.state.titration
    }

    /// Every entry, live or not, in order.
    pub fn entries(&self) -> &[Arc<Entry>] {
        &self.entries
    }

    /// The entry with a number.
    pub fn entry(&self, n: u32) -> Option<&Arc<Entry>> {
        self.entries.get((n as usize).checked_sub(1)?)
    }

    /// How many entries there are; it grows with every change.
    pub fn revision(&self) -> u32 {
        // At most MOST_ENTRIES.
        self.entries.len() as u32
    }

    /// The titration as it stood after entry `n`.
    ///
    /// # Errors
    /// There is no entry `n`.
    pub fn as_of(&self, n: u32) -> Result<Titration, Rejection> {
        let newest = self.revision();
        if n == 0 || n > newest {
            return Err(Rejection::NoEntry { n, newest });
        }
        let entries = &self.entries[..n as usize];
        match replay(entries, &liveness(entries)) {
            Ok(state) => Ok(state.titration),
            Err((n, cause)) => Err(Rejection::Entry {
                n,
                cause: Box::new(cause),
            }),
        }
    }

    /// Whether an entry is there and not taken back.
    pub fn is_live(&self, n: u32) -> bool {
        (n as usize)
            .checked_sub(1)
            .and_then(|i| self.live.get(i))
            .is_some_and(|live| *live)
    }

    /// The live entries from the newest down.
    fn live_entries(&self) -> impl Iterator<Item = &Arc<Entry>> {
        let pairs = self.entries.iter().zip(&self.live).rev();
        pairs.filter(|(_, live)| **live).map(|(e, _)| e)
    }

    /// What a key that takes back would take back: the newest live entry that is neither the opening
    /// nor itself a taking-back.
    pub fn last_takeable(&self) -> Option<u32> {
        self.live_entries()
            .find(|e| !matches!(e.what, What::Opened { .. } | What::TakenBack(_)))
            .map(|e| e.n)
    }

    /// What a key that redoes would take back: the newest live taking-back that keeps something away.
    ///
    /// The taking-back of a taking-back keeps only that one away: taking it back would be an undo.
    pub fn last_taken_back(&self) -> Option<u32> {
        // How many steps of taking back lie between an entry and the one it is about in the end.
        let mut steps = vec![0u32; self.entries.len()];
        let mut by = vec![0u32; self.entries.len()];
        for (i, e) in self.entries.iter().enumerate() {
            if let What::TakenBack(t) = e.what {
                let target = t as usize - 1;
                steps[i] = steps[target] + 1;
                by[target] += u32::from(self.live[i]);
            }
        }
        self.live_entries()
            .find(|e| match e.what {
                // Two live taking-backs of one entry: taking back either brings nothing back.
                What::TakenBack(t) => steps[e.n as usize - 1] % 2 == 1 && by[t as usize - 1] == 1,
                _ => false,
            })
            .map(|e| e.n)
    }
}

#[cfg(test)]
mod tests;
