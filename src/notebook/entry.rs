//! One entry: what happened, when, and who did it.

use super::rejection::Rejection;
use crate::assay::{Level, Protocol, Reading, ReadingId, Stamp, Suspicion, Tube, TubeNo};
use serde::{Deserialize, Serialize};

/// The longest text an entry may hold, in characters.
pub const MOST_TEXT: usize = 500;

/// The most entries a notebook may hold.
pub const MOST_ENTRIES: usize = 100_000;

/// The most readings one entry may bring.
pub const MOST_READINGS: usize = crate::assay::Titration::MOST_TUBES;

/// One line of a notebook.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Entry {
    /// Its number; the first is 1 and none is left out.
    pub n: u32,
    /// When it was made.
    pub at: Stamp,
    /// Who made it.
    pub who: String,
    /// What happened.
    pub what: What,
}

/// What an entry says.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub enum What {
    /// The titration was opened: entry 1, and only that.
    Opened {
        /// How it is done, with every setting a number depends on.
        protocol: Box<Protocol>,
        /// The levels.
        levels: Vec<Level>,
        /// The tubes in counting order.
        tubes: Vec<Tube>,
    },
    /// Readings were taken; a key press, a paste and a table are one entry each.
    Counted {
        /// In the order they came.
        readings: Vec<Count>,
    },
    /// A reading is doubted; it stays, and the fit leaves it out.
    Flagged {
        /// Which one.
        reading: ReadingId,
        /// Why.
        why: Suspicion,
    },
    /// A reading is no longer doubted.
    Unflagged {
        /// Which one.
        reading: ReadingId,
    },
    /// A tube will never have a reading.
    Lost {
        /// Which one.
        tube: TubeNo,
        /// Why.
        why: Suspicion,
    },
    /// A note.
    Noted {
        /// The tube it is about, or none for the whole titration.
        #[serde(default, skip_serializing_if = "Option::is_none")]
        tube: Option<TubeNo>,
        /// What it says.
        text: String,
    },
    /// The protocol or the concentrations were corrected.
    Amended {
        /// The whole protocol as it is now.
        protocol: Box<Protocol>,
        /// Every level, same numbers in the same order, with its concentration as it is now.
        levels: Vec<Level>,
        /// Why.
        reason: String,
    },
    /// Levels and tubes were added.
    Extended {
        /// The new levels.
        levels: Vec<Level>,
        /// The new tubes, counted after the others.
        tubes: Vec<Tube>,
    },
    /// An earlier entry is taken back; taking back such an entry brings that one back.
    TakenBack(u32),
    /// The notebook was rescued from a damaged file.
    Rescued {
        /// The digest of the damaged file.
        from: String,
        /// How many entries could be kept.
        kept: u32,
        /// What was said about the damage.
        said: String,
    },
    /// A second person checked the titration.
    Checked {
        /// Who.
        by: String,
        /// The digest they saw.
        digest: String,
    },
    /// The titration is finished.
    Closed,
    /// It is not finished after all.
    Reopened,
}

/// One reading of one tube.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Count {
    /// The tube.
    pub tube: TubeNo,
    /// What the counter showed.
    pub reading: Reading,
    /// A further count of a tube that has one, meant as such.
    #[serde(default, skip_serializing_if = "is_false")]
    pub again: bool,
}

fn is_false(b: &bool) -> bool {
    !*b
}

impl Count {
    /// The first count of a tube.
    pub fn first(tube: TubeNo, reading: Reading) -> Self {
        let again = false;
        Count {
            tube,
            reading,
            again,
        }
    }

    /// A further count of a tube that has one.
    pub fn again(tube: TubeNo, reading: Reading) -> Self {
        let again = true;
        Count {
            tube,
            reading,
            again,
        }
    }
}

impl Entry {
    /// Whether the entry can be one, whatever stands before it.
    pub(super) fn check(&self) -> Result<(), Rejection> {
        said("the name of who did it", &self.who)?;
        match &self.what {
            What::Counted { readings } => {
                let n = readings.len();
                if n == 0 || n > MOST_READINGS {
                    return Err(Rejection::HowMany { readings: n });
                }
                readings.iter().try_for_each(check_count)
            }
            What::Flagged { why, .. } | What::Lost { why, .. } => check_why(why),
            What::Noted { text, .. } => said("the note", text),
            What::Amended { reason, .. } => said("the reason for the change", reason),
            What::Extended { levels, tubes } if levels.is_empty() && tubes.is_empty() => {
                Err(Rejection::NothingNew)
            }
            What::Rescued {
                from, said: why, ..
            } => {
                said("the digest of the damaged file", from)?;
                short("what was said of the damage", why)
            }
            What::Checked { by, digest } => {
                said("the name of who checked", by)?;
                said("the digest", digest)
            }
            What::TakenBack(target) => {
                if *target == 0 || *target >= self.n {
                    return Err(Rejection::NotEarlier {
                        target: *target,
                        newest: self.n.saturating_sub(1),
                    });
                }
                if *target == 1 {
                    return Err(Rejection::TheOpening);
                }
                Ok(())
            }
            What::Opened { .. }
            | What::Unflagged { .. }
            | What::Extended { .. }
            | What::Closed
            | What::Reopened => Ok(()),
        }
    }
}

fn check_count(count: &Count) -> Result<(), Rejection> {
    let tube = count.tube;
    let r = &count.reading;
    r.check()
        .map_err(|cause| Rejection::Reading { tube, cause })?;
    if let Some(quench) = r.quench.filter(|q| !q.is_finite()) {
        return Err(Rejection::Quench { tube, quench });
    }
    if r.pass != 1 {
        return Err(Rejection::Pass { tube, pass: r.pass });
    }
    said("the reading as typed", &r.raw)
}

fn check_why(why: &Suspicion) -> Result<(), Rejection> {
    short("the words to a reason", &why.words)
}

/// A text that has to say something.
fn said(what: &'static str, text: &str) -> Result<(), Rejection> {
    if text.trim().is_empty() {
        return Err(Rejection::Empty { what });
    }
    short(what, text)
}

fn short(what: &'static str, text: &str) -> Result<(), Rejection> {
    let characters = text.chars().count();
    if characters > MOST_TEXT {
        return Err(Rejection::Long { what, characters });
    }
    Ok(())
}
