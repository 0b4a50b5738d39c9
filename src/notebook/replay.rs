//! Replay: which entries are live, and what they add up to.

use super::describe::{in_short, reading_in_words};
use super::entry::{Count, Entry, What};
use super::rejection::Rejection;
use crate::assay::{
    Kept, Level, Loss, Note, Protocol, ReadingId, Suspicion, Titration, Tube, TubeNo, check_reading,
};
use crate::units::clean;
use std::collections::{BTreeMap, BTreeSet};
use std::sync::Arc;

/// Which entries are live: those that no live taking-back names.
///
/// Only a later entry can take one back, so one pass from the end settles it.
pub(super) fn liveness(entries: &[Arc<Entry>]) -> Vec<bool> {
    let mut live = vec![true; entries.len()];
    for i in (0..entries.len()).rev() {
        if let (true, What::TakenBack(target)) = (live[i], &entries[i].what)
            && let Some(place) = (*target as usize)
                .checked_sub(1)
                .filter(|t| *t < i)
                .and_then(|t| live.get_mut(t))
        {
            *place = false;
        }
    }
    live
}

/// The state that live entries add up to, with what makes the next one quick to judge.
#[derive(Debug, Clone)]
pub(super) struct State {
    pub titration: Titration,
    /// The entry that closed it, while it is closed.
    closing: Option<u32>,
    vials: BTreeSet<TubeNo>,
    /// The tube of each live reading.
    readings: BTreeMap<ReadingId, TubeNo>,
}

/// Why a replay stopped: the number of the entry, and what it was refused for.
pub(super) type Stop = (u32, Rejection);

/// Replays the live entries.
pub(super) fn replay(entries: &[Arc<Entry>], live: &[bool]) -> Result<State, Stop> {
    let state = run(entries, live)?;
    // While it is closed, a titration is what it was when it was closed. New entries are held to that
    // one by one; taking back could slip something in behind the closing.
    if let Some(closing) = state.closing {
        let then = &entries[..closing as usize];
        let before = run(then, &liveness(then))?;
        if !same_contents(&before.titration, &state.titration) {
            return Err((closing, Rejection::ChangedSinceClosing { closing }));
        }
    }
    Ok(state)
}

fn run(entries: &[Arc<Entry>], live: &[bool]) -> Result<State, Stop> {
    let Some((first, rest)) = entries.split_first() else {
        return Err((1, Rejection::NoEntries));
    };
    let mut state = State::open(first).map_err(|e| (1, e))?;
    for (entry, _) in rest.iter().zip(&live[1..]).filter(|(_, live)| **live) {
        state.apply(entry).map_err(|e| (entry.n, e))?;
    }
    Ok(state)
}

fn same_contents(a: &Titration, b: &Titration) -> bool {
    a.protocol == b.protocol
        && a.levels == b.levels
        && a.tubes == b.tubes
        && a.kept == b.kept
        && a.lost == b.lost
        && a.notes == b.notes
}

impl State {
    fn open(entry: &Entry) -> Result<State, Rejection> {
        let What::Opened {
            protocol,
            levels,
            tubes,
        } = &entry.what
        else {
            return Err(Rejection::NotOpened);
        };
        check_protocol(protocol, levels, tubes)?;
        Ok(State {
            titration: Titration::new((**protocol).clone(), levels.clone(), tubes.clone()),
            closing: None,
            vials: tubes.iter().map(|t| t.no).collect(),
            readings: BTreeMap::new(),
        })
    }

    /// Takes one more live entry; after an error the state is not to be used.
    pub(super) fn apply(&mut self, entry: &Entry) -> Result<(), Rejection> {
        if !matches!(
            entry.what,
            What::Reopened | What::Checked { .. } | What::Rescued { .. } | What::TakenBack(_)
        ) {
            self.refuse_if_closed()?;
        }
        match &entry.what {
            What::Opened { .. } => Err(Rejection::OpenedAgain),
            What::Counted { readings } => (0u32..)
                .zip(readings)
                .try_for_each(|(place, count)| self.count(ReadingId(entry.n, place), count)),
            What::Flagged { reading, why } => self.flag(*reading, Some(why)),
            What::Unflagged { reading } => self.flag(*reading, None),
            What::Lost { tube, why } => self.lose(*tube, entry.n, why),
            What::Noted { tube, text } => {
                if let Some(tube) = tube {
                    self.known(*tube)?;
                }
                self.titration.notes.push(Note {
                    entry: entry.n,
                    tube: *tube,
                    text: text.clone(),
                });
                Ok(())
            }
            What::Amended {
                protocol, levels, ..
            } => self.amend(protocol, levels),
            What::Extended { levels, tubes } => self.extend(levels, tubes),
            What::Checked { by, digest } => {
                self.titration
                    .checked
                    .push((entry.at, by.clone(), digest.clone()));
                Ok(())
            }
            What::Closed => {
                self.titration.closed = Some((entry.at, entry.who.clone()));
                self.closing = Some(entry.n);
                Ok(())
            }
            What::Reopened => {
                self.closing = None;
                let was = self.titration.closed.take();
                was.map(|_| ()).ok_or(Rejection::NotClosed)
            }
            // Whether a taking-back is live has been settled before; it is nothing by itself.
            What::TakenBack(_) | What::Rescued { .. } => Ok(()),
        }
    }

    /// The refusal of any change, while the titration is closed.
    pub(super) fn refuse_if_closed(&self) -> Result<(), Rejection> {
        self.titration.closed.as_ref().map_or(Ok(()), |(at, by)| {
            Err(Rejection::Closed {
                by: clean(by),
                at: at.minute(),
            })
        })
    }

    fn known(&self, tube: TubeNo) -> Result<(), Rejection> {
        if self.vials.contains(&tube) {
            Ok(())
        } else {
            Err(Rejection::NoTube { tube })
        }
    }

    fn count(&mut self, id: ReadingId, count: &Count) -> Result<(), Rejection> {
        let tube = count.tube;
        self.known(tube)?;
        if let Some(loss) = self.titration.lost.get(&tube) {
            return Err(Rejection::IsLost {
                tube,
                entry: loss.entry,
                why: in_short(&loss.why),
            });
        }
        match (self.titration.kept(tube), count.again) {
            ([], true) => return Err(Rejection::NothingToRecount { tube }),
            ([first, ..], false) => {
                return Err(Rejection::HasReading {
                    tube,
                    has: reading_in_words(&first.reading),
                });
            }
            _ => {}
        }
        if let Some(of) = self.titration.tube(tube) {
            check_reading(&self.titration, of, &count.reading, count.again)
                .map_err(|cause| Rejection::Reading { tube, cause })?;
        }
        self.titration.kept.entry(tube).or_default().push(Kept {
            id,
            reading: count.reading.clone(),
            suspect: None,
        });
        self.readings.insert(id, tube);
        Ok(())
    }

    fn flag(&mut self, id: ReadingId, why: Option<&Suspicion>) -> Result<(), Rejection> {
        let missing = Rejection::NoReading { id };
        let Some(tube) = self.readings.get(&id).copied() else {
            return Err(missing);
        };
        let kept = self.titration.kept.get_mut(&tube);
        let Some(kept) = kept.and_then(|k| k.iter_mut().find(|k| k.id == id)) else {
            return Err(missing);
        };
        match (&kept.suspect, why) {
            (Some(stands), Some(_)) => Err(Rejection::FlaggedAlready {
                tube,
                why: in_short(stands),
            }),
            (None, None) => Err(Rejection::NotFlagged { tube }),
            _ => {
                kept.suspect = why.cloned();
                Ok(())
            }
        }
    }

    fn lose(&mut self, tube: TubeNo, entry: u32, why: &Suspicion) -> Result<(), Rejection> {
        self.known(tube)?;
        if let Some(first) = self.titration.kept(tube).first() {
            return Err(Rejection::LostWithReading {
                tube,
                has: reading_in_words(&first.reading),
            });
        }
        if let Some(loss) = self.titration.lost.get(&tube) {
            return Err(Rejection::IsLost {
                tube,
                entry: loss.entry,
                why: in_short(&loss.why),
            });
        }
        let why = why.clone();
        self.titration.lost.insert(tube, Loss { entry, why });
        Ok(())
    }

    fn amend(&mut self, protocol: &Protocol, levels: &[Level]) -> Result<(), Rejection> {
        let there = &self.titration.levels;
        if !levels.iter().map(|l| l.no).eq(there.iter().map(|l| l.no)) {
            let names: Vec<String> = there.iter().take(20).map(|l| l.no.to_string()).collect();
            let more = if there.len() > 20 { " and so on" } else { "" };
            return Err(Rejection::OtherLevels {
                wanted: format!("{}{more}", names.join(", ")),
            });
        }
        check_protocol(protocol, levels, &self.titration.tubes)?;
        self.titration.protocol = protocol.clone();
        self.titration.levels = levels.to_vec();
        self.follow()
    }

    /// Readings that have their minutes or their scale from the protocol follow its correction.
    fn follow(&mut self) -> Result<(), Rejection> {
        let t = &mut self.titration;
        for tube in &t.tubes {
            for kept in t.kept.get_mut(&tube.no).into_iter().flatten() {
                let r = &mut kept.reading;
                if !r.own_minutes {
                    r.minutes = t.protocol.minutes_for(tube.role);
                }
                if !r.own_scale {
                    r.scale = t.protocol.counter.fields.scale();
                }
            }
        }
        let t = &self.titration;
        for tube in &t.tubes {
            for (n, kept) in t.kept(tube.no).iter().enumerate() {
                let no = tube.no;
                check_reading(t, tube, &kept.reading, n > 0)
                    .map_err(|cause| Rejection::Reading { tube: no, cause })?;
            }
        }
        Ok(())
    }

    fn extend(&mut self, levels: &[Level], tubes: &[Tube]) -> Result<(), Rejection> {
        let numbers: BTreeSet<_> = self.titration.levels.iter().map(|l| l.no).collect();
        if let Some(l) = levels.iter().find(|l| numbers.contains(&l.no)) {
            return Err(Rejection::LevelThere { level: l.no });
        }
        if let Some(t) = tubes.iter().find(|t| self.vials.contains(&t.no)) {
            return Err(Rejection::TubeThere { tube: t.no });
        }
        let t = &mut self.titration;
        t.levels.extend_from_slice(levels);
        t.tubes.extend_from_slice(tubes);
        check_rack(&t.protocol, &t.levels, &t.tubes)?;
        self.vials.extend(tubes.iter().map(|t| t.no));
        Ok(())
    }
}

fn check_protocol(protocol: &Protocol, levels: &[Level], tubes: &[Tube]) -> Result<(), Rejection> {
    protocol.check()?;
    check_rack(protocol, levels, tubes)
}

fn check_rack(protocol: &Protocol, levels: &[Level], tubes: &[Tube]) -> Result<(), Rejection> {
    Titration::check_rack(levels, tubes).map_err(Rejection::Rack)?;
    Titration::check_kinds(protocol, tubes).map_err(Rejection::Rack)?;
    let mark = protocol.counter.mark;
    match levels
        .iter()
        .find(|l| l.added.mark().is_some_and(|m| m != mark))
    {
        Some(l) => Err(Rejection::Rack(format!(
            "level {} has `{}` with a decimal {}, and this titration uses a {mark}",
            l.no,
            clean(&l.added.text),
            mark.other()
        ))),
        None => Ok(()),
    }
}
