//! Why the notebook refuses an entry.

use super::entry::{MOST_ENTRIES, MOST_READINGS, MOST_TEXT};
use crate::assay::{LevelNo, ProtocolError, ReadingError, ReadingId, TubeNo};

/// An entry is refused, and the notebook is as it was.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum Rejection {
    /// A notebook without entries.
    #[error("there are no entries: a notebook begins with the opening of the titration")]
    NoEntries,
    /// The first entry does not open the titration.
    #[error("the first entry does not open the titration")]
    NotOpened,
    /// A later entry opens it once more.
    #[error("the titration is open already; only entry 1 opens it")]
    OpenedAgain,
    /// The numbers of the entries do not run on.
    #[error("entry {found} stands where entry {wanted} is due")]
    Number {
        /// The number found.
        found: u32,
        /// The number due.
        wanted: u32,
    },
    /// No entry has that number.
    #[error("there is no entry {n}: the notebook has entries 1 to {newest}")]
    NoEntry {
        /// The number asked for.
        n: u32,
        /// The newest entry.
        newest: u32,
    },
    /// The notebook is full.
    #[error("the notebook is full: at most {MOST_ENTRIES} entries are allowed")]
    Full,
    /// A text that has to say something is empty.
    #[error("{what} is empty")]
    Empty {
        /// Which text.
        what: &'static str,
    },
    /// A text is too long.
    #[error("{what} has {characters} characters: at most {MOST_TEXT} are allowed")]
    Long {
        /// Which text.
        what: &'static str,
        /// Its length.
        characters: usize,
    },
    /// A field of the protocol.
    #[error("protocol.{0}")]
    Protocol(#[from] ProtocolError),
    /// Levels and tubes do not hang together.
    #[error("{0}")]
    Rack(String),
    /// An amendment that adds, leaves out or reorders levels.
    #[error(
        "the amendment does not hold the levels that are there, {wanted}; levels are added by extending"
    )]
    OtherLevels {
        /// The levels there, in words.
        wanted: String,
    },
    /// An extension brings a level that is there.
    #[error("level {level} is there already; a new level takes a new number")]
    LevelThere {
        /// The level.
        level: LevelNo,
    },
    /// An extension brings a tube that is there.
    #[error("vial {tube} is there already; a new vial takes a new number")]
    TubeThere {
        /// The tube.
        tube: TubeNo,
    },
    /// An extension without levels and tubes.
    #[error("neither a level nor a tube is added")]
    NothingNew,
    /// No tube has that number.
    #[error("there is no vial {tube} in this rack")]
    NoTube {
        /// The number asked for.
        tube: TubeNo,
    },
    /// No reading has that name.
    #[error("there is no reading {} in entry {}", id.1.saturating_add(1), id.0)]
    NoReading {
        /// The name asked for.
        id: ReadingId,
    },
    /// No readings, or too many in one entry.
    #[error("{readings} readings in one entry: allowed is 1 to {MOST_READINGS}")]
    HowMany {
        /// How many.
        readings: usize,
    },
    /// A reading that no counter gives.
    #[error("vial {tube}: {cause}")]
    Reading {
        /// The tube.
        tube: TubeNo,
        /// What is wrong with it.
        cause: ReadingError,
    },
    /// A quench indicator that is not a number.
    #[error("vial {tube}: a quench indicator of {quench} is not a finite number")]
    Quench {
        /// The tube.
        tube: TubeNo,
        /// What was given.
        quench: f64,
    },
    /// A pass other than the first: nothing compares a second one yet, and added up it would count twice.
    #[error("vial {tube}: pass {pass}; only readings of pass 1 are taken")]
    Pass {
        /// The tube.
        tube: TubeNo,
        /// What was given.
        pass: u8,
    },
    /// A second reading of a tube that is not meant as a recount.
    #[error("vial {tube} already has {has}; + adds a recount")]
    HasReading {
        /// The tube.
        tube: TubeNo,
        /// What it has.
        has: String,
    },
    /// A recount of a tube that was never counted.
    #[error("vial {tube} has no reading to add a recount to")]
    NothingToRecount {
        /// The tube.
        tube: TubeNo,
    },
    /// A reading of a tube that was given up.
    #[error("vial {tube} was given up in entry {entry} ({why}); take that back to read it")]
    IsLost {
        /// The tube.
        tube: TubeNo,
        /// The entry that says so.
        entry: u32,
        /// Why.
        why: String,
    },
    /// A tube with a reading is given up.
    #[error("vial {tube} has {has} and cannot be lost; flag the reading instead")]
    LostWithReading {
        /// The tube.
        tube: TubeNo,
        /// What it has.
        has: String,
    },
    /// A flag on a flagged reading.
    #[error("this reading of vial {tube} is flagged already ({why})")]
    FlaggedAlready {
        /// The tube.
        tube: TubeNo,
        /// Why it is.
        why: String,
    },
    /// A flag taken off a reading that has none.
    #[error("this reading of vial {tube} is not flagged")]
    NotFlagged {
        /// The tube.
        tube: TubeNo,
    },
    /// A change of a closed titration.
    #[error("the titration was closed by {by} at {at}; reopen it to change it")]
    Closed {
        /// By whom.
        by: String,
        /// When.
        at: String,
    },
    /// An open titration is reopened.
    #[error("the titration is not closed")]
    NotClosed,
    /// An entry would take back itself or a later one.
    #[error("entry {target} cannot be taken back: entries 2 to {newest} can")]
    NotEarlier {
        /// The entry named.
        target: u32,
        /// The newest entry.
        newest: u32,
    },
    /// The opening cannot be taken back.
    #[error("entry 1 opens the titration and cannot be taken back")]
    TheOpening,
    /// An entry that is taken back already.
    #[error("entry {target} is taken back already, by entry {by}")]
    TakenBackAlready {
        /// The entry named.
        target: u32,
        /// The entry that takes it back.
        by: u32,
    },
    /// A later entry needs what would be taken back, or has no room for what would be brought back.
    #[error("entry {entry} {why}; take that back first")]
    InTheWay {
        /// The entry in the way.
        entry: u32,
        /// What it does there.
        why: String,
        /// What that entry would be refused for.
        cause: Box<Rejection>,
    },
    /// Taking back would leave the titration closed with other contents than it was closed with.
    #[error("the titration has changed since entry {closing} closed it; close it again instead")]
    ChangedSinceClosing {
        /// The entry that closed it.
        closing: u32,
    },
    /// An entry read from a record is refused.
    #[error("entry {n}: {cause}")]
    Entry {
        /// Its number, by its place.
        n: u32,
        /// Why.
        cause: Box<Rejection>,
    },
}
