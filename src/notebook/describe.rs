//! Entries in a few words, for reading back.

use super::Notebook;
use super::entry::{Count, Entry, What};
use super::rejection::Rejection;
use crate::assay::{Reading, ReadingId, Suspicion, TubeNo};
use crate::units::{clean, fixed, grouped, short};

/// What a reading shows, with its unit: `2 258 counts`, `1 203 cpm`.
pub fn reading_in_words(reading: &Reading) -> String {
    let whole = reading.value.fract() == 0.0;
    let number = if whole {
        grouped(reading.value)
    } else {
        fixed(reading.value, 2)
    };
    let mut text = format!("{number} {}", reading.scale.unit());
    if let Some(quench) = reading.quench {
        text.push_str(&format!(", quench {}", short(quench, 9)));
    }
    if let Some(at) = reading.counted {
        text.push_str(&format!(", at {}", at.clock()));
    }
    text
}

/// A reason without control characters.
pub(super) fn in_short(why: &Suspicion) -> String {
    clean(&why.to_string())
}

/// `1 tube`, `2 tubes`.
fn number(n: usize, thing: &str) -> String {
    match n {
        1 => format!("1 {thing}"),
        n => format!("{n} {thing}s"),
    }
}

impl Notebook {
    /// An entry in a short sentence: `2 258 counts, vial 26, 5.0 nM, total b`.
    ///
    /// Tubes are called as the titration now calls them; control characters are removed.
    pub fn describe(&self, entry: &Entry) -> String {
        let text = match &entry.what {
            What::Opened { levels, tubes, .. } => format!(
                "opened with {} and {}",
                number(levels.len(), "level"),
                number(tubes.len(), "tube")
            ),
            What::Counted { readings } => self.counted(readings),
            What::Flagged { reading, why } => {
                format!("flagged {}: {}", in_short(why), self.reading(*reading))
            }
            What::Unflagged { reading } => format!("flag off: {}", self.reading(*reading)),
            What::Lost { tube, why } => format!("lost, {}: {}", in_short(why), self.tube(*tube)),
            What::Noted { tube, text } => match tube {
                Some(tube) => format!("note on {}: {text}", self.tube(*tube)),
                None => format!("note: {text}"),
            },
            What::Amended { reason, .. } => format!("protocol amended: {reason}"),
            What::Extended { levels, tubes } => format!(
                "{} and {} added",
                number(levels.len(), "level"),
                number(tubes.len(), "tube")
            ),
            What::TakenBack(target) => self.taken_back(*target),
            What::Rescued { kept, said, .. } => format!(
                "rescued from a damaged file, {} kept: {said}",
                if *kept == 1 {
                    "1 entry".to_string()
                } else {
                    format!("{kept} entries")
                }
            ),
            What::Checked { by, digest } => format!("checked by {by}, digest {digest}"),
            What::Closed => "closed".into(),
            What::Reopened => "reopened".into(),
        };
        clean(&text)
    }

    /// Walks to the entry that a chain of taking back and bringing back is about; a loop, since the
    /// chain may be as long as the notebook.
    fn taken_back(&self, target: u32) -> String {
        let (mut at, mut back) = (target, true);
        loop {
            match self.entry(at).map(|e| &e.what) {
                Some(What::TakenBack(next)) if *next < at => (at, back) = (*next, !back),
                Some(_) => break,
                None => return format!("entry {at} taken back"),
            }
        }
        let what = self.entry(at).map(|e| self.describe(e)).unwrap_or_default();
        let how = if back { "taken back" } else { "brought back" };
        format!("{how}, entry {at}: {what}")
    }

    fn counted(&self, readings: &[Count]) -> String {
        match readings {
            [one] => {
                let recount = if one.again { "recount " } else { "" };
                format!(
                    "{recount}{}, {}",
                    reading_in_words(&one.reading),
                    self.tube(one.tube)
                )
            }
            [first, .., last] => format!(
                "{} readings, vial {} to vial {}",
                readings.len(),
                first.tube,
                last.tube
            ),
            [] => "no readings".into(),
        }
    }

    fn reading(&self, id: ReadingId) -> String {
        match self.entry(id.0).map(|e| &e.what) {
            Some(What::Counted { readings }) => match readings.get(id.1 as usize) {
                Some(c) => format!("{}, {}", reading_in_words(&c.reading), self.tube(c.tube)),
                None => format!("a reading of entry {}", id.0),
            },
            _ => format!("a reading of entry {}", id.0),
        }
    }

    fn tube(&self, no: TubeNo) -> String {
        match self.titration().tube(no) {
            Some(tube) => self.titration().name(tube),
            None => format!("vial {no}"),
        }
    }

    /// The rejection of a taking-back that `entry` stands in the way of.
    pub(super) fn in_the_way(entry: u32, what: Option<&What>, cause: Rejection) -> Rejection {
        if matches!(cause, Rejection::ChangedSinceClosing { .. }) {
            return cause;
        }
        let why = match (what, &cause) {
            (Some(What::Flagged { .. }), Rejection::NoReading { .. }) => {
                "flags this reading".to_string()
            }
            (Some(What::Flagged { .. }), Rejection::FlaggedAlready { .. }) => {
                "flags this reading too".to_string()
            }
            (Some(What::Unflagged { .. }), _) => "takes the flag off this reading".to_string(),
            (Some(What::Counted { .. }), Rejection::NothingToRecount { tube }) => {
                format!("is a recount of vial {tube}")
            }
            (Some(What::Counted { .. }), Rejection::HasReading { tube, .. }) => {
                format!("holds another reading of vial {tube}")
            }
            (
                Some(What::Counted { .. }),
                Rejection::NoTube { tube } | Rejection::IsLost { tube, .. },
            ) => {
                format!("holds a reading of vial {tube}")
            }
            (Some(What::Lost { tube, .. }), _) => format!("gives up vial {tube}"),
            (Some(What::Noted { .. }), Rejection::NoTube { tube }) => {
                format!("is a note on vial {tube}")
            }
            (Some(What::Closed), _) => "closes the titration".to_string(),
            (Some(What::Reopened), _) => "reopens the titration".to_string(),
            _ => format!("would no longer hold ({cause})"),
        };
        Rejection::InTheWay {
            entry,
            why,
            cause: Box::new(cause),
        }
    }
}
