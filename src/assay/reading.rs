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
    /// Gross disintegrations per minute over the stated minutes.
    Dpm,
    /// Counts per minute over the stated minutes, background taken off by the counter.
    NetCpm,
    /// Disintegrations per minute over the stated minutes, background taken off by the counter.
    NetDpm,
    /// A reader's signal.
    Signal,
}

impl Scale {
    /// The unit as it stands behind a number.
    pub fn unit(self) -> &'static str {
        match self {
            Scale::Counts => "counts",
            Scale::Cpm => "cpm",
            Scale::Dpm => "dpm",
            Scale::NetCpm => "net cpm",
            Scale::NetDpm => "net dpm",
            Scale::Signal => "signal",
        }
    }

    /// Whether a background was taken off, so that a number may be below zero.
    pub fn may_be_negative(self) -> bool {
        matches!(self, Scale::NetCpm | Scale::NetDpm | Scale::Signal)
    }
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
    /// A number that no instrument gives.
    #[error("{}: a net reading or a signal lies between -1e12 and 1e12", found(*value))]
    NetValue {
        /// What was given.
        value: f64,
    },
    /// A signal for a counter, or counts for a reader.
    #[error("{}: {}", scale.unit(), if *scale == Scale::Signal {
        "this titration is counted; counts, cpm or dpm are allowed"
    } else {
        "this titration is read by a reader; a signal is allowed"
    })]
    OtherInstrument {
        /// What was given.
        scale: Scale,
    },
    /// A quench curve stands in the protocol and the reading has no indicator.
    #[error(
        "no quench indicator: this titration takes the efficiency of every vial from its quench curve"
    )]
    NoQuench,
    /// The indicator lies outside the curve.
    #[error("quench: {0}")]
    Quench(String),
    /// A net reading where nothing says what was taken off.
    #[error(
        "a net reading needs the background that the counter took off: counter.subtracted of the protocol"
    )]
    NotKnownTakenOff,
    /// A net reading below what was taken off.
    #[error("{} counts behind this net reading: it is lower than the background that the counter took off allows", found(*counts))]
    BelowNone {
        /// The counts behind it.
        counts: f64,
    },
    /// More than the dead time allows.
    #[error("dead time: {0}")]
    Dead(String),
    /// The time of the count is not known and has to be.
    #[error(
        "no time of counting, and the label is short-lived: type the time with every vial (field `at`), or give the start of the \
         run at the counter step"
    )]
    NoTime,
    /// Counted when hardly any of the label was left.
    #[error(
        "counted {} min after the assay, with {} % of the label left: allowed is a tenth of a percent or more; is the day right?",
        found(*minutes),
        found(100.0 * left)
    )]
    AllDecayed {
        /// How long after it.
        minutes: f64,
        /// The share left.
        left: f64,
    },
    /// Counted before the assay.
    #[error("counted {} min before the assay of {assayed}; a vial is counted after it", found(*minutes))]
    BeforeAssay {
        /// By how much.
        minutes: f64,
        /// The time of the assay, as typed.
        assayed: String,
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
        if self.scale.may_be_negative() {
            return if self.value.abs() <= 1e12 {
                Ok(())
            } else {
                Err(ReadingError::NetValue { value: self.value })
            };
        }
        let counts = match self.scale {
            Scale::Counts => self.value,
            _ => self.value * self.minutes,
        };
        if !(self.value >= 0.0 && self.value <= 1e12 && counts <= 1e15) {
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
