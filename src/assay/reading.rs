//! What the counter showed, and the doubts a person may have about it.

use super::stamp::Stamp;
use crate::units::short;
use serde::{Deserialize, Serialize};
use std::fmt;

/// What a reading's number is.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, Serialize, Deserialize)]
pub enum Scale {
    /// Gross counts in the stated minutes.
    #[default]
    Counts,
    /// Gross counts per minute over the stated minutes.
    Cpm,
}

/// One reading of one tube, with the text it was typed as.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Reading {
    /// As typed, pasted or read from a table.
    pub raw: String,
    /// The number in `raw`.
    pub value: f64,
    /// What the number is.
    #[serde(default, skip_serializing_if = "is_counts")]
    pub scale: Scale,
    /// How long the tube was counted, in minutes.
    pub minutes: f64,
    /// The minutes came with the reading; otherwise they are the protocol's, and follow it if it is corrected.
    #[serde(default, skip_serializing_if = "is_false")]
    pub own_minutes: bool,
    /// The scale came with the reading; otherwise it is the protocol's, and follows it likewise.
    #[serde(default, skip_serializing_if = "is_false")]
    pub own_scale: bool,
    /// When the vial was counted, if the printout says so.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub counted: Option<Stamp>,
    /// The counter's quench indicator, if it prints one.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub quench: Option<f64>,
    /// Which typing of the printout this is; only 1 is taken so far.
    #[serde(default = "one", skip_serializing_if = "is_one")]
    pub pass: u8,
    /// The person was asked about the number and gave it again.
    #[serde(default, skip_serializing_if = "is_false")]
    pub confirmed: bool,
}

fn is_counts(s: &Scale) -> bool {
    *s == Scale::Counts
}
fn one() -> u8 {
    1
}
fn is_one(n: &u8) -> bool {
    *n == 1
}
fn is_false(b: &bool) -> bool {
    !*b
}

/// A number as found, finite or not.
fn found(v: f64) -> String {
    if v.is_finite() {
        short(v, 6)
    } else {
        v.to_string()
    }
}

/// Why a reading makes no sense.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum ReadingError {
    /// Minutes of zero, negative or not finite.
    #[error("{} minutes: allowed is more than zero and at most {most}", found(*minutes))]
    Minutes {
        /// What was given.
        minutes: f64,
        /// The largest allowed.
        most: f64,
    },
    /// A number of counts that no counter gives.
    #[error("{}: a reading is zero or more, and at most 1e12", found(*value))]
    Value {
        /// What was given.
        value: f64,
    },
}

/// The longest count taken, in minutes: thirty days.
pub(crate) const MOST_MINUTES: f64 = 43_200.0;

impl Reading {
    /// Gross counts in minutes.
    pub fn counts(raw: impl Into<String>, value: f64, minutes: f64) -> Self {
        let (scale, pass) = (Scale::Counts, 1);
        Reading {
            raw: raw.into(),
            value,
            scale,
            minutes,
            own_minutes: false,
            own_scale: false,
            counted: None,
            quench: None,
            pass,
            confirmed: false,
        }
    }

    /// The gross counts behind the reading.
    pub fn gross_counts(&self) -> f64 {
        match self.scale {
            Scale::Counts => self.value,
            Scale::Cpm => self.value * self.minutes,
        }
    }

    /// Whether the reading can be one.
    ///
    /// # Errors
    /// Minutes or the value are outside what a counter can give.
    pub fn check(&self) -> Result<(), ReadingError> {
        if !(self.minutes > 0.0 && self.minutes <= MOST_MINUTES) {
            return Err(ReadingError::Minutes {
                minutes: self.minutes,
                most: MOST_MINUTES,
            });
        }
        if !(self.value >= 0.0 && self.value <= 1e12 && self.gross_counts() <= 1e15) {
            return Err(ReadingError::Value { value: self.value });
        }
        Ok(())
    }
}

/// A reading's name in the notebook: the entry that brought it and its place there.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub struct ReadingId(
    /// The number of the entry.
    pub u32,
    /// The place in the entry, from 0.
    pub u32,
);

/// Why a reading is doubted or a tube is lost, as a digit menu offers it.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub enum Reason {
    /// Some of it was spilled.
    Spilled,
    /// The filter was torn.
    FilterTorn,
    /// It was not washed, or not like the others.
    NotWashed,
    /// The wrong vial was read.
    WrongVial,
    /// The counter failed.
    CounterFault,
    /// A pipetting error was seen.
    PipettingSeen,
    /// Something else, put in words.
    Other,
    /// Nothing was seen: the number alone is doubted.
    NumbersAlone,
}

impl Reason {
    /// Every reason with the digit that chooses it.
    pub const MENU: [(char, Reason); 8] = [
        ('1', Reason::Spilled),
        ('2', Reason::FilterTorn),
        ('3', Reason::NotWashed),
        ('4', Reason::WrongVial),
        ('5', Reason::CounterFault),
        ('6', Reason::PipettingSeen),
        ('7', Reason::Other),
        ('9', Reason::NumbersAlone),
    ];

    /// The reason a digit chooses.
    pub fn from_digit(c: char) -> Option<Reason> {
        Self::MENU.iter().find(|(d, _)| *d == c).map(|(_, r)| *r)
    }
}

impl fmt::Display for Reason {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Reason::Spilled => "spilled",
            Reason::FilterTorn => "filter torn",
            Reason::NotWashed => "not washed",
            Reason::WrongVial => "wrong vial",
            Reason::CounterFault => "counter fault",
            Reason::PipettingSeen => "pipetting seen",
            Reason::Other => "other",
            Reason::NumbersAlone => "on numbers alone",
        })
    }
}

/// A reason and, where there are any, the person's own words.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Suspicion {
    /// From the menu.
    pub reason: Reason,
    /// In words.
    #[serde(default, skip_serializing_if = "String::is_empty")]
    pub words: String,
}

impl From<Reason> for Suspicion {
    fn from(reason: Reason) -> Self {
        Suspicion {
            reason,
            words: String::new(),
        }
    }
}

impl fmt::Display for Suspicion {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}", self.reason)?;
        if self.words.is_empty() {
            Ok(())
        } else {
            write!(f, ": {}", self.words)
        }
    }
}
