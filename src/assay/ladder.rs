//! The ladder: how levels and tubes are laid out before the first reading.

use super::protocol::{Counted, Protocol, ProtocolError};
use super::rack::{Level, LevelNo, Made, Role, Side, Titration, Tube, TubeNo};
use crate::units::{Amount, Mark, Measure, NanoMolar, Typed, significant};
use serde::{Deserialize, Serialize};

/// A protocol with its ladder: what a titration is opened from.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Sheet {
    /// How it is done.
    pub protocol: Protocol,
    /// The levels and tubes.
    pub ladder: Ladder,
}

/// A text is not a protocol with a ladder.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[error("line {line}, column {column}: {what}")]
pub struct SheetError {
    /// The line, from 1.
    pub line: usize,
    /// The column, from 1.
    pub column: usize,
    /// What is wrong there.
    pub what: String,
}

/// The longest part of a line that a message shows, in characters.
const MOST_SHOWN: usize = 60;

/// What a line of a sheet says, without its comment; nothing where it names no field.
fn reads(text: &str, line: usize) -> String {
    let line = text.lines().nth(line.saturating_sub(1)).unwrap_or("");
    let said = line.split("//").next().unwrap_or("").trim();
    if !said.contains(':') {
        return String::new();
    }
    let shown: String = said.chars().take(MOST_SHOWN).collect();
    let more = if shown.len() < said.len() { " .." } else { "" };
    format!("; the line reads `{}{more}`", shown.trim_end_matches(','))
}

impl Sheet {
    /// A commented sheet to start from; its content is invented.
    pub const EXAMPLE: &'static str = include_str!("example.ron");

    /// Reads a sheet written by a person: RON, in which an optional field may be given plainly.
    ///
    /// # Errors
    /// Where the text stops making sense, and why.
    pub fn parse(text: &str) -> Result<Sheet, SheetError> {
        ron::Options::default()
            .with_default_extension(ron::extensions::Extensions::IMPLICIT_SOME)
            .from_str(text)
            .map_err(|e| SheetError {
                line: e.span.start.line,
                column: e.span.start.col,
                what: format!("{}{}", e.code, reads(text, e.span.start.line)),
            })
    }

    /// Whether something will tell the background: without it there would never be a number.
    ///
    /// # Errors
    /// The ladder has no background vial and the counter's own background is not known either.
    pub fn check_background(&self) -> Result<(), LadderError> {
        let counter = &self.protocol.counter;
        let taken_off = counter
            .subtracted
            .as_ref()
            .is_some_and(|s| s.minutes.is_some());
        if self.ladder.background > 0 || taken_off {
            return Ok(());
        }
        Err(wrong(
            "background",
            if self.protocol.separation.counted.is_signal() {
                "0 blanks: at least one is needed, and three where the noise of the reader is not known"
            } else {
                "0 vials: at least one is needed, or the minutes of the background that the counter took off"
            },
        ))
    }

    /// The titration that this sheet opens.
    ///
    /// # Errors
    /// The field of the protocol or of the ladder at fault.
    pub fn titration(&self) -> Result<Titration, LadderError> {
        self.protocol.check()?;
        self.protocol.check_new()?;
        let counted = &self.protocol.separation.counted;
        let (levels, tubes) = self.ladder.lay(self.protocol.counter.mark, counted)?;
        self.check_background()?;
        Ok(Titration::new(self.protocol.clone(), levels, tubes))
    }
}

/// How levels and tubes are laid out.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Ladder {
    /// The concentrations, in any order; levels are numbered from the lowest up.
    pub levels: Levels,
    /// How their solutions were made.
    #[serde(default)]
    pub dilution: Dilution,
    /// Total tubes at each level.
    pub total: u16,
    /// Nonspecific tubes at each level.
    pub nonspecific: u16,
    /// Levels with other numbers of tubes.
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub except: Vec<Except>,
    /// Tubes with label and no receptor preparation.
    #[serde(default, skip_serializing_if = "Few::none")]
    pub no_receptor: Few,
    /// Aliquots of the levels' solutions, counted to learn what was really added.
    #[serde(default, skip_serializing_if = "Few::none")]
    pub added: Few,
    /// How often each standard of a reader is there.
    #[serde(default = "one", skip_serializing_if = "is_one")]
    pub standards: u16,
    /// Background vials; they are counted first and numbered after the tubes.
    #[serde(default = "one")]
    pub background: u16,
}

fn one() -> u16 {
    1
}

fn is_one(n: &u16) -> bool {
    *n == 1
}

/// Tubes at some levels.
#[derive(Debug, Clone, PartialEq, Eq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Few {
    /// How many at each.
    pub tubes: u16,
    /// At which levels, numbered from the lowest up; empty for all of them.
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub levels: Vec<u16>,
}

impl Few {
    /// Whether there are none.
    pub fn none(&self) -> bool {
        self.tubes == 0
    }

    fn at(&self, level: u16) -> u16 {
        if self.levels.is_empty() || self.levels.contains(&level) {
            self.tubes
        } else {
            0
        }
    }
}

/// Vials of one kind that are to be laid.
struct Planned {
    role: Role,
    level: Option<LevelNo>,
    standard: Option<u16>,
    number: u16,
}

/// The concentrations of a ladder.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub enum Levels {
    /// Written out.
    List(Vec<Amount<NanoMolar>>),
    /// Equal ratios from the lowest to the highest, both included.
    Geometric {
        /// The lowest.
        lowest: Amount<NanoMolar>,
        /// The highest.
        highest: Amount<NanoMolar>,
        /// How many.
        number: u16,
    },
}

/// How the solutions of a ladder were made.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, Serialize, Deserialize)]
pub enum Dilution {
    /// Each in one step from the stock.
    #[default]
    EachFromStock,
    /// The highest from the stock, every other from the one above it.
    Serial,
}

/// A level with its own numbers of tubes.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Except {
    /// Which level, numbered from the lowest up.
    pub level: u16,
    /// Total tubes there.
    pub total: u16,
    /// Nonspecific tubes there.
    pub nonspecific: u16,
}

/// A sheet that cannot be laid out.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[non_exhaustive]
pub enum LadderError {
    /// A field of the protocol.
    #[error("protocol.{0}")]
    Protocol(#[from] ProtocolError),
    /// A field of the ladder.
    #[error("ladder.{field}: {what}")]
    Ladder {
        /// The field.
        field: &'static str,
        /// The value found and what is allowed.
        what: String,
    },
}

fn wrong(field: &'static str, what: impl Into<String>) -> LadderError {
    LadderError::Ladder {
        field,
        what: what.into(),
    }
}

impl Ladder {
    /// Levels from the lowest up, tubes in counting order.
    ///
    /// Background vials are counted first, so that a fit can begin with the first tubes, and carry the
    /// numbers after the last tube, so that the rack itself is numbered from 1; a reader's standards follow its blanks. The
    /// rack runs level by level from the lowest, totals before nonspecific tubes, then those without receptor and aliquots of what
    /// is added. A dialysis cell is two vials, the protein side first.
    ///
    /// # Errors
    /// The field of the ladder at fault, with what was found and what is allowed.
    pub fn lay(
        &self,
        mark: Mark,
        counted: &Counted,
    ) -> Result<(Vec<Level>, Vec<Tube>), LadderError> {
        let mut added = self.concentrations(mark)?;
        added.sort_by(|a, b| a.base().total_cmp(&b.base()));
        let n = added.len() as u16;
        let levels: Vec<Level> = added
            .into_iter()
            .zip(1u16..)
            .map(|(added, no)| Level {
                no: LevelNo(no),
                added,
                made: self.made(no, n),
            })
            .collect();
        let mut per_level = vec![(self.total, self.nonspecific); levels.len()];
        for e in &self.except {
            match usize::from(e.level)
                .checked_sub(1)
                .and_then(|i| per_level.get_mut(i))
            {
                Some(place) => *place = (e.total, e.nonspecific),
                None => {
                    return Err(wrong(
                        "except",
                        format!("level {}: levels are 1 to {n}", e.level),
                    ));
                }
            }
        }
        for (field, few) in [("no_receptor", &self.no_receptor), ("added", &self.added)] {
            if let Some(level) = few.levels.iter().find(|l| !(1..=n).contains(l)) {
                return Err(wrong(field, format!("level {level}: levels are 1 to {n}")));
            }
        }
        let cell = counted.is_cell();
        if cell && !(self.no_receptor.none() && self.added.none()) {
            let field = if self.no_receptor.none() {
                "added"
            } else {
                "no_receptor"
            };
            return Err(wrong(
                field,
                "a dialysis cell counts what is on both sides; tubes of this kind are not used with it",
            ));
        }
        if counted.is_signal() && !self.added.none() {
            return Err(wrong(
                "added",
                "a reader has standards; aliquots of what is added are not used with it",
            ));
        }
        let plan = self.plan(&levels, &per_level, counted);
        let vials = if cell { 2 } else { 1 };
        let wanted: usize = plan.iter().map(|p| usize::from(p.number) * vials).sum();
        let most = Titration::MOST_TUBES;
        if wanted + usize::from(self.background) > most {
            return Err(wrong(
                "total",
                format!("{wanted} tubes in all: at most {most} are allowed"),
            ));
        }
        let mut numbers = 1..;
        let mut next = || TubeNo(numbers.next().unwrap_or(u32::MAX));
        let mut tubes = Vec::with_capacity(wanted + usize::from(self.background));
        let mut standards = Vec::new();
        for p in &plan {
            for replicate in 1..=p.number {
                let tube = |no, side| Tube {
                    side,
                    standard: p.standard,
                    ..Tube::new(no, p.role, p.level, replicate)
                };
                let sides = if cell {
                    &[Some(Side::Protein), Some(Side::Ligand)][..]
                } else {
                    &[None][..]
                };
                let to = if p.role == Role::Standard {
                    &mut standards
                } else {
                    &mut tubes
                };
                to.extend(sides.iter().map(|side| tube(next(), *side)));
            }
        }
        if !tubes.iter().any(|t| t.role == Role::Total) {
            let n = tubes.len();
            return Err(wrong(
                "total",
                format!("no total tubes and {n} nonspecific: a rack has total tubes"),
            ));
        }
        let mut first: Vec<Tube> = (1..=self.background)
            .map(|replicate| Tube::new(next(), Role::Background, None, replicate))
            .collect();
        first.append(&mut standards);
        first.append(&mut tubes);
        Titration::check_rack(&levels, &first).map_err(|e| wrong("levels", e))?;
        Ok((levels, first))
    }

    /// How many vials of what, in the order of their numbers.
    fn plan(&self, levels: &[Level], per_level: &[(u16, u16)], counted: &Counted) -> Vec<Planned> {
        let mut plan = Vec::new();
        for (level, (total, nonspecific)) in levels.iter().zip(per_level) {
            let no = level.no.0;
            for (role, number) in [
                (Role::Total, *total),
                (Role::Nonspecific, *nonspecific),
                (Role::NoReceptor, self.no_receptor.at(no)),
                (Role::Added, self.added.at(no)),
            ] {
                plan.push(Planned {
                    role,
                    level: Some(level.no),
                    standard: None,
                    number,
                });
            }
        }
        plan.extend((1..).zip(counted.standards()).map(|(n, _)| Planned {
            role: Role::Standard,
            level: None,
            standard: Some(n),
            number: self.standards,
        }));
        plan
    }

    fn made(&self, no: u16, n: u16) -> Made {
        match self.dilution {
            Dilution::Serial if no < n => Made::FromLevel(LevelNo(no + 1)),
            _ => Made::FromStock,
        }
    }

    fn concentrations(&self, mark: Mark) -> Result<Vec<Amount<NanoMolar>>, LadderError> {
        let sound = |a: &Amount<NanoMolar>| {
            if a.mark().is_some_and(|m| m != mark) {
                return Err(wrong(
                    "levels",
                    format!(
                        "`{a}` has a decimal {}, and this titration uses a {mark}",
                        mark.other()
                    ),
                ));
            }
            if a.base() > 0.0 && a.base() <= 1e9 {
                Ok(())
            } else {
                Err(wrong(
                    "levels",
                    format!("`{a}`: a level is more than zero and at most 1 M"),
                ))
            }
        };
        match &self.levels {
            Levels::List(list) => {
                if list.is_empty() || list.len() > Titration::MOST_LEVELS {
                    return Err(wrong(
                        "levels",
                        format!(
                            "{} levels: allowed is 1 to {}",
                            list.len(),
                            Titration::MOST_LEVELS
                        ),
                    ));
                }
                list.iter().try_for_each(sound)?;
                Ok(list.clone())
            }
            Levels::Geometric {
                lowest,
                highest,
                number,
            } => {
                sound(lowest)?;
                sound(highest)?;
                if !(2..=Titration::MOST_LEVELS as u16).contains(number) {
                    return Err(wrong(
                        "levels",
                        format!(
                            "{number} levels: allowed is 2 to {}",
                            Titration::MOST_LEVELS
                        ),
                    ));
                }
                if highest.base() <= lowest.base() {
                    return Err(wrong(
                        "levels",
                        format!("from {lowest} to {highest}: the highest is above the lowest"),
                    ));
                }
                Ok(geometric(lowest, highest, *number, mark))
            }
        }
    }
}

/// Equal ratios, rounded to four digits as a person would pipette them; the ends stay as typed.
fn geometric(
    lowest: &Amount<NanoMolar>,
    highest: &Amount<NanoMolar>,
    number: u16,
    mark: Mark,
) -> Vec<Amount<NanoMolar>> {
    let (low, high) = (lowest.base(), highest.base());
    let ratio = (high / low).ln() / f64::from(number - 1);
    (0..number)
        .map(|i| match i {
            0 => lowest.clone(),
            i if i + 1 == number => highest.clone(),
            i => {
                let nm = significant(low * (ratio * f64::from(i)).exp(), 4);
                let value = nm.parse().unwrap_or(low);
                Typed {
                    text: format!("{} nM", nm.replace('.', &mark.char().to_string())),
                    value: Measure::of(value),
                }
            }
        })
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_example_lays_out_the_rack_it_shows() {
        let t = Sheet::parse(Sheet::EXAMPLE).unwrap().titration().unwrap();
        assert_eq!((t.levels.len(), t.tubes.len()), (8, 33));
        // Background first in counting order and last by number; the rack itself is numbered from 1.
        let first: Vec<u32> = t.tubes.iter().take(5).map(|t| t.no.0).collect();
        assert_eq!(first, [33, 1, 2, 3, 4]);
        assert_eq!(t.name(&t.tubes[4]), "vial 4, 0.05 nM, nonspecific b");
    }

    #[test]
    fn a_geometric_ladder_keeps_its_ends_as_typed() {
        let text = Sheet::EXAMPLE.replace(
            r#"List(["0.05 nM", "0.1 nM", "0.2 nM", "0.5 nM", "1 nM", "2 nM", "5 nM", "10 nM"])"#,
            r#"Geometric(lowest: "50 pM", highest: "5 nM", number: 5)"#,
        );
        let t = Sheet::parse(&text).unwrap().titration().unwrap();
        let texts: Vec<&str> = t.levels.iter().map(|l| l.added.text.as_str()).collect();
        assert_eq!(
            texts,
            ["50 pM", "0.1581 nM", "0.5000 nM", "1.581 nM", "5 nM"]
        );
    }

    #[test]
    fn what_is_wrong_is_named_with_its_place() {
        let wrong = |from: &str, to: &str| {
            assert!(Sheet::EXAMPLE.contains(from), "{from}");
            let text = Sheet::EXAMPLE.replacen(from, to, 1);
            match Sheet::parse(&text) {
                Err(e) => e.to_string(),
                Ok(sheet) => sheet.titration().unwrap_err().to_string(),
            }
        };
        for (from, to, says) in [
            ("\"0.5 mL\"", "\"0.5 nM\"", "mL, uL"),
            ("\"0.5 mL\"", "\"-1 mL\"", "protocol.incubation.volume"),
            ("\"0.5 mL\"", "\"0,5 mL\"", "decimal comma"),
            ("\"45 %\"", "\"145 %\"", "protocol.counter.efficiency"),
            ("\"0.05 nM\"", "\"0 nM\"", "ladder.levels"),
            ("\"0.05 nM\"", "\"0,05 nM\"", "decimal comma"),
            ("batch:", "badge:", "line 26, column 13"),
            (
                "confidence: 0.95",
                "confidence: 95",
                "protocol.numbers.confidence",
            ),
            (
                "// except: [(level: 3,",
                "except: [(level: 9,",
                "levels are 1 to 8",
            ),
            (
                "Protein(\"50 ug\")",
                "Protein(\"0 ug\")",
                "protocol.receptor.amount",
            ),
            (
                "minutes: \"2 min\"",
                "minutes: \"0 min\"",
                "protocol.counter.minutes",
            ),
        ] {
            let e = wrong(from, to);
            assert!(e.contains(says), "{to}: {e}");
        }
    }
}
