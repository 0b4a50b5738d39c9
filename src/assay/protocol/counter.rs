//! The counter, or the reader, and what is typed of each vial.

use super::super::reading::Scale;
use super::super::when::When;
use crate::units::{Amount, Cpm, Mark, Minute, Share};
use serde::{Deserialize, Serialize};
use std::fmt;

/// The counter and what it prints.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Counter {
    /// Its name.
    #[serde(default, skip_serializing_if = "String::is_empty")]
    pub name: String,
    /// Counts per disintegration. Not set for a reader, and where a quench curve stands instead.
    #[serde(default = "Amount::unset", skip_serializing_if = "Amount::is_unset")]
    pub efficiency: Amount<Share>,
    /// The user's quench standards; with them every vial has its own efficiency.
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub quench: Vec<QuenchStandard>,
    /// How long the counter is blind after a count.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub dead_time: Option<Amount<Minute>>,
    /// The counting error that is wanted of a net rate, as a share of it; one percent where nothing is said.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub wanted_error: Option<Amount<Share>>,
    /// What the counter has taken off every net reading.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub subtracted: Option<Subtracted>,
    /// When the run began and how long the changer takes, where the printout gives no time for each vial.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub run: Option<Run>,
    /// What is typed for each vial.
    #[serde(default)]
    pub fields: Fields,
    /// How long a tube is counted, where the minutes are not typed. Not set for a reader.
    #[serde(default = "Amount::unset", skip_serializing_if = "Amount::is_unset")]
    pub minutes: Amount<Minute>,
    /// The background vials.
    #[serde(default)]
    pub background: BackgroundVials,
    /// The decimal mark of what is typed.
    #[serde(default)]
    pub mark: Mark,
}

/// One quench standard.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct QuenchStandard {
    /// What the counter's quench indicator showed.
    pub indicator: f64,
    /// Counts per disintegration.
    pub efficiency: Amount<Share>,
}

/// The background that a counter has taken off.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Subtracted {
    /// Its rate.
    pub rate: Amount<Cpm>,
    /// How long the counter had counted it; it stands in for background vials where the rack has none.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub minutes: Option<Amount<Minute>>,
}

/// A run of the counter through the rack.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Run {
    /// When the first vial began to be counted.
    pub start: When,
    /// From the end of one vial to the start of the next.
    pub changer: Amount<Minute>,
}

/// One thing that is typed of a vial.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub enum Field {
    /// Gross counts.
    Counts,
    /// Gross counts per minute.
    Cpm,
    /// Gross disintegrations per minute.
    Dpm,
    /// Counts per minute, background taken off.
    NetCpm,
    /// Disintegrations per minute, background taken off.
    NetDpm,
    /// A reader's signal.
    Signal,
    /// Minutes counted.
    Minutes,
    /// The quench indicator.
    Quench,
    /// The time at which the count began.
    At,
}

impl Field {
    /// Every field with the word for it.
    pub const WORDS: [(Field, &'static str); 9] = [
        (Field::Counts, "counts"),
        (Field::Cpm, "cpm"),
        (Field::Dpm, "dpm"),
        (Field::NetCpm, "net cpm"),
        (Field::NetDpm, "net dpm"),
        (Field::Signal, "signal"),
        (Field::Minutes, "minutes"),
        (Field::Quench, "quench"),
        (Field::At, "at"),
    ];

    /// The word.
    pub fn word(self) -> &'static str {
        Self::WORDS
            .iter()
            .find(|(f, _)| *f == self)
            .map_or("", |(_, w)| w)
    }

    /// The scale of the number, where the field is one.
    pub fn scale(self) -> Option<Scale> {
        match self {
            Field::Counts => Some(Scale::Counts),
            Field::Cpm => Some(Scale::Cpm),
            Field::Dpm => Some(Scale::Dpm),
            Field::NetCpm => Some(Scale::NetCpm),
            Field::NetDpm => Some(Scale::NetDpm),
            Field::Signal => Some(Scale::Signal),
            Field::Minutes | Field::Quench | Field::At => None,
        }
    }
}

/// What is typed for each vial, in the order it is typed: a number and what the printout gives with it.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(try_from = "Written", into = "Written")]
pub struct Fields {
    scale: Scale,
    /// Minutes, quench and time, each once at most.
    more: [Option<Field>; 3],
}

/// As it stands in a file.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
enum Written {
    /// Gross counts; the minutes are the protocol's.
    Counts,
    /// Gross counts, then minutes.
    CountsMinutes,
    /// Gross counts per minute; the minutes are the protocol's.
    Cpm,
    /// Gross counts per minute, then minutes.
    CpmMinutes,
    /// One after the other.
    Each(Vec<Field>),
}

/// Fields that cannot be typed one after the other.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[error(
    "`{text}`: first counts, cpm, dpm, net cpm, net dpm or signal, then any of minutes, quench and at, each once: e.g. cpm, quench"
)]
pub struct FieldsError {
    text: String,
}

impl Default for Fields {
    fn default() -> Self {
        Fields::just(Scale::Counts)
    }
}

impl Fields {
    /// The number alone.
    pub const fn just(scale: Scale) -> Fields {
        Fields {
            scale,
            more: [None; 3],
        }
    }

    /// The fields one after the other.
    ///
    /// # Errors
    /// The first is not a number of the counter's, or another one comes twice.
    pub fn each(fields: &[Field]) -> Result<Fields, FieldsError> {
        let wrong = || FieldsError {
            text: fields
                .iter()
                .map(|f| f.word())
                .collect::<Vec<_>>()
                .join(", "),
        };
        let (first, rest) = fields.split_first().ok_or_else(wrong)?;
        let scale = first.scale().ok_or_else(wrong)?;
        let mut more = [None; 3];
        if rest.len() > more.len() {
            return Err(wrong());
        }
        for (i, field) in rest.iter().enumerate() {
            if field.scale().is_some() || more.contains(&Some(*field)) {
                return Err(wrong());
            }
            more[i] = Some(*field);
        }
        Ok(Fields { scale, more })
    }

    /// Reads `cpm, quench`.
    ///
    /// # Errors
    /// A word is not one of a field, or they cannot follow each other.
    pub fn parse(text: &str) -> Result<Fields, FieldsError> {
        let wrong = || FieldsError { text: text.into() };
        let fields: Result<Vec<Field>, FieldsError> = text
            .split([',', ';'])
            .map(|word| {
                let word = word.split_whitespace().collect::<Vec<_>>().join(" ");
                Field::WORDS
                    .iter()
                    .find(|(_, w)| w.eq_ignore_ascii_case(&word))
                    .map(|(f, _)| *f)
                    .ok_or_else(wrong)
            })
            .collect();
        Fields::each(&fields?).map_err(|_| wrong())
    }

    /// What the number is.
    pub fn scale(self) -> Scale {
        self.scale
    }

    /// What is typed after the number, in order.
    pub fn more(self) -> impl Iterator<Item = Field> {
        self.more.into_iter().flatten()
    }

    /// Whether a field is typed for every vial.
    pub fn has(self, field: Field) -> bool {
        self.more.contains(&Some(field))
    }

    /// Whether minutes are typed for every vial.
    pub fn with_minutes(self) -> bool {
        self.has(Field::Minutes)
    }

    fn all(self) -> Vec<Field> {
        let first = Field::WORDS
            .iter()
            .map(|(f, _)| *f)
            .find(|f| f.scale() == Some(self.scale));
        first.into_iter().chain(self.more()).collect()
    }
}

impl fmt::Display for Fields {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let words: Vec<&str> = self.all().into_iter().map(Field::word).collect();
        f.write_str(&words.join(", "))
    }
}

impl TryFrom<Written> for Fields {
    type Error = FieldsError;

    fn try_from(written: Written) -> Result<Fields, FieldsError> {
        match written {
            Written::Counts => Fields::each(&[Field::Counts]),
            Written::CountsMinutes => Fields::each(&[Field::Counts, Field::Minutes]),
            Written::Cpm => Fields::each(&[Field::Cpm]),
            Written::CpmMinutes => Fields::each(&[Field::Cpm, Field::Minutes]),
            Written::Each(fields) => Fields::each(&fields),
        }
    }
}

impl From<Fields> for Written {
    fn from(fields: Fields) -> Written {
        match fields.all()[..] {
            [Field::Counts] => Written::Counts,
            [Field::Counts, Field::Minutes] => Written::CountsMinutes,
            [Field::Cpm] => Written::Cpm,
            [Field::Cpm, Field::Minutes] => Written::CpmMinutes,
            ref all => Written::Each(all.to_vec()),
        }
    }
}

/// The background vials.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct BackgroundVials {
    /// How long each is counted, where the minutes are not typed. Not set for a reader.
    #[serde(default = "Amount::unset", skip_serializing_if = "Amount::is_unset")]
    pub minutes: Amount<Minute>,
    /// What is in them.
    #[serde(default)]
    pub blank: BlankKind,
}

impl Default for BackgroundVials {
    fn default() -> Self {
        BackgroundVials {
            minutes: Amount::unset(),
            blank: BlankKind::default(),
        }
    }
}

/// What a background vial holds.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, Serialize, Deserialize)]
pub enum BlankKind {
    /// Nothing: an empty place in the counter.
    EmptyCounter,
    /// Scintillant alone.
    #[default]
    Scintillant,
    /// Scintillant with an unused filter.
    ScintillantAndFilter,
}

impl Counter {
    /// The efficiency that amounts are first reckoned with: as given, or the highest of the quench curve.
    pub fn nominal_efficiency(&self) -> f64 {
        if self.efficiency.is_unset() && !self.quench.is_empty() {
            let all = self.quench.iter().map(|s| s.efficiency.base());
            return all.fold(0.0, f64::max);
        }
        self.efficiency.base()
    }

    /// The counting error that is wanted of a net rate, as a share of it.
    pub fn aim(&self) -> f64 {
        self.wanted_error.as_ref().map_or(0.01, Amount::base)
    }

    /// The dead time in minutes.
    pub fn dead_minutes(&self) -> f64 {
        self.dead_time.as_ref().map_or(0.0, Amount::base)
    }
}
