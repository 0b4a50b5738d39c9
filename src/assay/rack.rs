//! The rack: levels, tubes, what is kept of each, and the titration as it stands.

use super::protocol::Protocol;
use super::reading::{Reading, ReadingId, Suspicion};
use super::stamp::Stamp;
use crate::units::{Amount, NanoMolar};
use serde::{Deserialize, Serialize};
use std::collections::{BTreeMap, BTreeSet};
use std::fmt;

/// The number of a level; it keeps it for life.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(transparent)]
pub struct LevelNo(pub u16);

/// The permanent number of a vial.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(transparent)]
pub struct TubeNo(pub u32);

impl fmt::Display for LevelNo {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        self.0.fmt(f)
    }
}

impl fmt::Display for TubeNo {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        self.0.fmt(f)
    }
}

/// What a level's solution was made from; this says which pipetting errors levels share.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub enum Made {
    /// One dilution from the stock.
    FromStock,
    /// One dilution from another level's solution.
    FromLevel(LevelNo),
}

/// One concentration of labelled ligand.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Level {
    /// Its number.
    pub no: LevelNo,
    /// The label added to its tubes, as the concentration in the tube.
    pub added: Amount<NanoMolar>,
    /// What it was diluted from.
    pub made: Made,
}

/// What a tube is for.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
pub enum Role {
    /// Label only.
    Total,
    /// Label and an excess of unlabelled ligand.
    Nonspecific,
    /// Label without receptor preparation.
    NoReceptor,
    /// An aliquot of a level's solution, counted to learn what was really added.
    Added,
    /// A standard of a reader.
    Standard,
    /// No label: what the counter, or the reader, shows by itself.
    Background,
}

/// A side of an equilibrium-dialysis cell.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
pub enum Side {
    /// The side that the receptor preparation is on.
    Protein,
    /// The other one.
    Ligand,
}

impl Side {
    /// The word, in small letters.
    pub fn word(self) -> &'static str {
        match self {
            Side::Protein => "protein side",
            Side::Ligand => "ligand side",
        }
    }
}

impl Role {
    /// The word, in small letters.
    pub fn word(self) -> &'static str {
        match self {
            Role::Total => "total",
            Role::Nonspecific => "nonspecific",
            Role::NoReceptor => "no receptor",
            Role::Added => "added",
            Role::Standard => "standard",
            Role::Background => "background",
        }
    }

    /// Every role.
    pub const ALL: [Role; 6] = [
        Role::Total,
        Role::Nonspecific,
        Role::NoReceptor,
        Role::Added,
        Role::Standard,
        Role::Background,
    ];

    /// The role a word stands for; a hyphen may stand for a blank.
    pub fn from_word(word: &str) -> Option<Role> {
        let word = word.trim().replace('-', " ");
        Role::ALL
            .into_iter()
            .find(|r| r.word().eq_ignore_ascii_case(&word))
    }

    /// Whether a tube of it went through the assay: with label, incubated and separated.
    pub fn assayed(self) -> bool {
        matches!(self, Role::Total | Role::Nonspecific | Role::NoReceptor)
    }

    /// Whether a vial of it holds label.
    pub fn labelled(self) -> bool {
        self != Role::Background
    }
}

impl fmt::Display for Role {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(self.word())
    }
}

/// One vial.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Tube {
    /// Its permanent number.
    pub no: TubeNo,
    /// What it is for.
    pub role: Role,
    /// Its level; none for background and standards.
    pub level: Option<LevelNo>,
    /// 1 for a, 2 for b and so on.
    pub replicate: u16,
    /// The side of a dialysis cell that it comes from.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub side: Option<Side>,
    /// Which of the protocol's standards it holds, from 1.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub standard: Option<u16>,
}

impl Tube {
    /// A tube that is neither of a dialysis cell nor a standard.
    pub fn new(no: TubeNo, role: Role, level: Option<LevelNo>, replicate: u16) -> Tube {
        Tube {
            no,
            role,
            level,
            replicate,
            side: None,
            standard: None,
        }
    }

    /// What it is for, with the side of a cell: `total`, `total, protein side`.
    pub fn what(&self) -> String {
        match self.side {
            Some(side) => format!("{}, {}", self.role, side.word()),
            None => self.role.to_string(),
        }
    }

    /// The replicate as a letter, or as a number past z.
    pub fn letter(&self) -> String {
        replicate_letter(self.replicate)
    }
}

/// `1` as `a`, `2` as `b`, `27` as `27`.
pub fn replicate_letter(replicate: u16) -> String {
    match u8::try_from(replicate) {
        Ok(n @ 1..=26) => char::from(b'a' + n - 1).to_string(),
        _ => replicate.to_string(),
    }
}

/// A reading that is kept, and whether it is doubted.
#[derive(Debug, Clone, PartialEq)]
pub struct Kept {
    /// Its name in the notebook.
    pub id: ReadingId,
    /// The reading.
    pub reading: Reading,
    /// Why it is left out of the fit, if it is.
    pub suspect: Option<Suspicion>,
}

/// A note, on one tube or on the whole.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Note {
    /// The entry that holds it.
    pub entry: u32,
    /// The tube it is about.
    pub tube: Option<TubeNo>,
    /// What it says.
    pub text: String,
}

/// A tube that will never have a reading.
#[derive(Debug, Clone, PartialEq)]
pub struct Loss {
    /// The entry that says so.
    pub entry: u32,
    /// Why.
    pub why: Suspicion,
}

/// One titration as it stands: no history, no file, a plain value.
#[derive(Debug, Clone, PartialEq)]
pub struct Titration {
    /// How it was done.
    pub protocol: Protocol,
    /// The levels, in the order they were laid.
    pub levels: Vec<Level>,
    /// The tubes, in the order they are counted.
    pub tubes: Vec<Tube>,
    /// What is kept of each tube.
    pub kept: BTreeMap<TubeNo, Vec<Kept>>,
    /// Tubes without a reading for ever.
    pub lost: BTreeMap<TubeNo, Loss>,
    /// Notes in the order they were made.
    pub notes: Vec<Note>,
    /// Set while the titration is closed: when and by whom.
    pub closed: Option<(Stamp, String)>,
    /// Who checked it, when, and the digest they saw.
    pub checked: Vec<(Stamp, String, String)>,
}

impl Titration {
    /// A titration before its first reading.
    pub fn new(protocol: Protocol, levels: Vec<Level>, tubes: Vec<Tube>) -> Self {
        Titration {
            protocol,
            levels,
            tubes,
            kept: BTreeMap::new(),
            lost: BTreeMap::new(),
            notes: Vec::new(),
            closed: None,
            checked: Vec::new(),
        }
    }

    /// The tube with a vial number.
    pub fn tube(&self, no: TubeNo) -> Option<&Tube> {
        self.tubes.iter().find(|t| t.no == no)
    }

    /// The level with a number.
    pub fn level(&self, no: LevelNo) -> Option<&Level> {
        self.levels.iter().find(|l| l.no == no)
    }

    /// The label added to a tube in nM at the time of the assay; none for background and standards.
    pub fn added_nm(&self, tube: &Tube) -> Option<f64> {
        tube.level.and_then(|l| self.level_nm(l))
    }

    /// The label of a level in nM at the time of the assay: as written, less what has decayed where that is computed.
    pub fn level_nm(&self, no: LevelNo) -> Option<f64> {
        let level = self.level(no)?;
        Some(level.added.base() * self.protocol.concentration_left())
    }

    /// The concentration of label in a standard, in nM in the volume that is read.
    pub fn standard_nm(&self, tube: &Tube) -> Option<f64> {
        let place = usize::from(tube.standard?).checked_sub(1)?;
        let standards = self.protocol.separation.counted.standards();
        standards.get(place).map(|s| s.base())
    }

    /// The other vial of a dialysis cell.
    pub fn other_side(&self, tube: &Tube) -> Option<&Tube> {
        let side = tube.side?;
        self.tubes.iter().find(|t| {
            t.side.is_some_and(|s| s != side)
                && (t.role, t.level, t.replicate) == (tube.role, tube.level, tube.replicate)
        })
    }

    /// What is kept of a tube.
    pub fn kept(&self, no: TubeNo) -> &[Kept] {
        self.kept.get(&no).map_or(&[], Vec::as_slice)
    }

    /// Whether a tube has every reading taken out of the fit by a flag.
    pub fn is_suspect(&self, no: TubeNo) -> bool {
        let kept = self.kept(no);
        !kept.is_empty() && kept.iter().all(|k| k.suspect.is_some())
    }

    /// Whether any reading of a tube is flagged.
    pub fn has_flag(&self, no: TubeNo) -> bool {
        self.kept(no).iter().any(|k| k.suspect.is_some())
    }

    /// The mark before a tube's number: `x` with a flagged reading, `+` counted more than once, else a blank.
    pub fn mark_of(&self, no: TubeNo) -> char {
        match self.kept(no) {
            _ if self.has_flag(no) => 'x',
            [_, _, ..] => '+',
            _ => ' ',
        }
    }

    /// Whether any flag stands.
    pub fn has_flags(&self) -> bool {
        self.kept.values().flatten().any(|k| k.suspect.is_some())
    }

    /// The first tube in counting order that still wants a reading.
    pub fn next_unread(&self) -> Option<TubeNo> {
        self.tubes
            .iter()
            .map(|t| t.no)
            .find(|no| self.wants_reading(*no))
    }

    /// Whether a tube has neither a reading nor been given up.
    pub fn wants_reading(&self, no: TubeNo) -> bool {
        self.kept(no).is_empty() && !self.lost.contains_key(&no)
    }

    /// How many tubes have a reading, and how many there are.
    pub fn progress(&self) -> (usize, usize) {
        let read = self
            .tubes
            .iter()
            .filter(|t| !self.kept(t.no).is_empty())
            .count();
        (read, self.tubes.len())
    }

    /// The levels by concentration, lowest first.
    pub fn levels_by_concentration(&self) -> Vec<&Level> {
        let mut levels: Vec<&Level> = self.levels.iter().collect();
        levels.sort_by(|a, b| {
            a.added
                .base()
                .total_cmp(&b.added.base())
                .then(a.no.cmp(&b.no))
        });
        levels
    }

    /// How a tube is called in a sentence: `vial 26, 5.0 nM, total b`.
    pub fn name(&self, tube: &Tube) -> String {
        let standard = tube.standard.and_then(|n| {
            let standards = self.protocol.separation.counted.standards();
            standards.get(usize::from(n).checked_sub(1)?)
        });
        let holds = tube
            .level
            .and_then(|l| self.level(l))
            .map(|l| &l.added)
            .or(standard);
        let side = tube
            .side
            .map_or(String::new(), |s| format!(", {}", s.word()));
        let (role, letter) = (self.word_for(tube.role), tube.letter());
        match holds {
            Some(holds) => format!("vial {}, {holds}, {role} {letter}{side}", tube.no),
            None => format!("vial {}, {role} {letter}", tube.no),
        }
    }

    /// What a role is called here: a reader has blanks, not a background.
    pub fn word_for(&self, role: Role) -> &'static str {
        if role == Role::Background && self.protocol.separation.counted.is_signal() {
            "blank"
        } else {
            role.word()
        }
    }

    /// Whether levels and tubes hang together.
    ///
    /// # Errors
    /// A sentence naming the level or tube at fault.
    pub fn check_rack(levels: &[Level], tubes: &[Tube]) -> Result<(), String> {
        if levels.len() > Self::MOST_LEVELS || tubes.len() > Self::MOST_TUBES {
            return Err(format!(
                "{} levels and {} tubes: at most {} and {} are allowed",
                levels.len(),
                tubes.len(),
                Self::MOST_LEVELS,
                Self::MOST_TUBES
            ));
        }
        let mut made = BTreeMap::new();
        for l in levels {
            let nm = l.added.base();
            if !(nm.is_finite() && nm > 0.0 && nm <= 1e9) {
                return Err(format!(
                    "level {} has {}: a level is more than zero and at most 1 M",
                    l.no, l.added
                ));
            }
            if made.insert(l.no, l.made).is_some() {
                return Err(format!("level {} is there twice", l.no));
            }
        }
        // Every chain of dilutions ends in the stock; a level found sound is not walked again.
        let mut sound = BTreeSet::new();
        for l in levels {
            let (mut at, mut walked) = (l.no, BTreeSet::new());
            while !sound.contains(&at) {
                if !walked.insert(at) {
                    return Err(format!("level {at} is diluted from itself in a circle"));
                }
                match made.get(&at) {
                    Some(Made::FromStock) => break,
                    Some(Made::FromLevel(from)) if made.contains_key(from) => at = *from,
                    Some(Made::FromLevel(from)) => {
                        return Err(format!(
                            "level {at} is diluted from level {from}, which is not there"
                        ));
                    }
                    None => break,
                }
            }
            sound.extend(walked);
        }
        let mut vials = BTreeSet::new();
        let mut places = BTreeSet::new();
        for t in tubes {
            if t.no.0 == 0 || t.replicate == 0 {
                return Err(format!(
                    "vial {}: vials and replicates are numbered from 1",
                    t.no
                ));
            }
            if !vials.insert(t.no) {
                return Err(format!("vial {} is there twice", t.no));
            }
            match (t.role, t.level) {
                (Role::Background | Role::Standard, None) => {}
                (Role::Background | Role::Standard, Some(_)) => {
                    return Err(format!("vial {} is {} and has a level", t.no, t.role));
                }
                (_, None) => return Err(format!("vial {} has no level", t.no)),
                (_, Some(l)) if !made.contains_key(&l) => {
                    return Err(format!("vial {} is at level {l}, which is not there", t.no));
                }
                _ => {}
            }
            if !places.insert((t.role, t.level, t.replicate, t.side, t.standard)) {
                return Err(format!(
                    "vial {} repeats the {} {} of its level",
                    t.no,
                    t.role,
                    t.letter()
                ));
            }
        }
        if tubes.is_empty() {
            return Err("there are no tubes".into());
        }
        Ok(())
    }

    /// Whether tubes are of the kinds that a protocol counts: cells with both sides, standards that it has.
    ///
    /// # Errors
    /// A sentence naming the tube at fault.
    pub fn check_kinds(protocol: &Protocol, tubes: &[Tube]) -> Result<(), String> {
        let counted = &protocol.separation.counted;
        let (cells, standards) = (counted.is_cell(), counted.standards().len());
        let mut sides = BTreeMap::new();
        for t in tubes {
            let no = t.no;
            let in_cell = matches!(t.role, Role::Total | Role::Nonspecific);
            match (t.side, cells && in_cell) {
                (None, true) => {
                    return Err(format!(
                        "vial {no} is of a dialysis cell and of no side of it"
                    ));
                }
                (Some(_), false) => {
                    return Err(format!(
                        "vial {no} is a side of a dialysis cell, and what is counted here is {}",
                        counted.words()
                    ));
                }
                (Some(side), true) => {
                    let cell = (t.role, t.level, t.replicate);
                    let (vial, protein, ligand) = sides.entry(cell).or_insert((no, 0, 0));
                    *vial = no;
                    *(if side == Side::Protein {
                        protein
                    } else {
                        ligand
                    }) += 1;
                }
                (None, false) => {}
            }
            if cells && matches!(t.role, Role::NoReceptor | Role::Added) {
                return Err(format!(
                    "vial {no} is {}, and a dialysis cell has none",
                    t.role
                ));
            }
            if counted.is_signal() && t.role == Role::Added {
                return Err(format!(
                    "vial {no} is {}, and a reader has standards instead",
                    t.role
                ));
            }
            let there = |n: u16| n >= 1 && usize::from(n) <= standards;
            if (t.role == Role::Standard) != t.standard.is_some() || !t.standard.is_none_or(there) {
                return Err(format!(
                    "vial {no} is not one of the protocol's {standards} standards"
                ));
            }
        }
        match sides.values().find(|(_, p, l)| (*p, *l) != (1, 1)) {
            Some((vial, ..)) => Err(format!(
                "vial {vial} is a side of a cell without the other side"
            )),
            None => Ok(()),
        }
    }

    /// The most levels a rack may have.
    pub const MOST_LEVELS: usize = 1000;
    /// The most tubes a rack may have.
    pub const MOST_TUBES: usize = 10_000;
}
