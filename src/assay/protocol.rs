//! How a titration was done, as far as a record or a number depends on it.

mod check;
mod scale;

use check::Checks;
pub use check::ProtocolError;
pub use scale::ScaleErrors;

use super::model::Model;
use crate::units::{
    Amount, Cell, DegreeCelsius, DpmPerFmol, Mark, MilliGram, MilliLitre, Minute, NanoMolar, Share,
};
use jiff::civil::Date;
use serde::{Deserialize, Serialize};

/// The protocol of one titration. Every setting that a number depends on is in here.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Protocol {
    /// What the titration is called.
    pub title: String,
    /// Who does it.
    #[serde(default)]
    pub operator: String,
    /// The labelled ligand.
    pub ligand: Ligand,
    /// The receptor preparation.
    pub receptor: Receptor,
    /// What happens in the tube.
    pub incubation: Incubation,
    /// The nonspecific tubes, and where nonspecific label sticks.
    pub nonspecific: Nonspecific,
    /// How bound is parted from free.
    #[serde(default)]
    pub separation: Separation,
    /// The counter and what it prints.
    pub counter: Counter,
    /// What the fit is told beyond the readings.
    #[serde(default)]
    pub numbers: Numbers,
    /// The units results are shown in.
    #[serde(default)]
    pub display: Display,
}

/// The labelled ligand.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Ligand {
    /// Its name.
    pub name: String,
    /// The label, e.g. `H-3`.
    pub label: String,
    /// Its specific activity on the day of the assay.
    pub specific_activity: Amount<DpmPerFmol>,
    /// The day the specific activity was stated for.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub activity_date: Option<Date>,
    /// The lot.
    #[serde(default, skip_serializing_if = "String::is_empty")]
    pub lot: String,
}

/// The receptor preparation.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Receptor {
    /// What it is.
    pub preparation: String,
    /// The batch.
    #[serde(default, skip_serializing_if = "String::is_empty")]
    pub batch: String,
    /// How much of it is in each tube.
    #[serde(default)]
    pub amount: ReceptorAmount,
    /// How the amount was found, e.g. the protein method.
    #[serde(default, skip_serializing_if = "String::is_empty")]
    pub method: String,
}

/// How much receptor preparation is in each tube.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
pub enum ReceptorAmount {
    /// Not known: sites are given as a concentration in the tube.
    #[default]
    Unknown,
    /// Protein.
    Protein(Amount<MilliGram>),
    /// Cells.
    Cells(Amount<Cell>),
    /// Tissue, wet weight.
    Tissue(Amount<MilliGram>),
}

/// What happens in the tube.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Incubation {
    /// The incubation volume.
    pub volume: Amount<MilliLitre>,
    /// The temperature.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub temperature: Option<Amount<DegreeCelsius>>,
    /// How long.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub time: Option<Amount<Minute>>,
    /// The buffer.
    #[serde(default, skip_serializing_if = "String::is_empty")]
    pub buffer: String,
    /// Solvent brought in with the ligands, as a share of the volume.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub vehicle: Option<Amount<Share>>,
}

/// The nonspecific tubes, and where nonspecific label sticks.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Nonspecific {
    /// Where nonspecific label sticks; this decides the mass balance.
    pub sticks: Sticks,
    /// What blocks the sites.
    #[serde(default)]
    pub unlabelled: Unlabelled,
    /// Its concentration in the tube.
    pub concentration: Amount<NanoMolar>,
}

/// Where nonspecific label sticks.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub enum Sticks {
    /// To the preparation, during incubation: it is taken from the free label.
    ToPreparation,
    /// To the filter or as trapped liquid, after separation: the free label is not reduced by it.
    ToFilter,
}

/// What blocks the sites in nonspecific tubes.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
pub enum Unlabelled {
    /// The unlabelled form of the labelled ligand.
    #[default]
    SameLigand,
    /// Another ligand.
    Other {
        /// Its name.
        name: String,
        /// Its Ki at these sites, if known; without it full block is assumed.
        #[serde(default, skip_serializing_if = "Option::is_none")]
        ki: Option<Amount<NanoMolar>>,
    },
}

/// How bound is parted from free. What is counted is the bound side.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Separation {
    /// The share of the tube that is separated and counted.
    #[serde(default = "all")]
    pub fraction: Amount<Share>,
    /// Filtration, centrifugation or another way, in words.
    #[serde(default, skip_serializing_if = "String::is_empty")]
    pub method: String,
    /// The filter and what it was soaked in.
    #[serde(default, skip_serializing_if = "String::is_empty")]
    pub filter: String,
    /// Washes, in words.
    #[serde(default, skip_serializing_if = "String::is_empty")]
    pub washes: String,
    /// How long the washes take together.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub wash_time: Option<Amount<Minute>>,
}

fn all() -> Amount<Share> {
    share("100 %", 1.0)
}

/// A share written here rather than typed by anybody.
fn share(text: &str, value: f64) -> Amount<Share> {
    crate::units::Typed {
        text: text.into(),
        value: crate::units::Measure::of(value),
    }
}

impl Default for Separation {
    fn default() -> Self {
        Separation {
            fraction: all(),
            method: String::new(),
            filter: String::new(),
            washes: String::new(),
            wash_time: None,
        }
    }
}

/// The counter and what it prints.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Counter {
    /// Its name.
    #[serde(default, skip_serializing_if = "String::is_empty")]
    pub name: String,
    /// Counts per disintegration.
    pub efficiency: Amount<Share>,
    /// What is typed for each vial.
    #[serde(default)]
    pub fields: Fields,
    /// How long a tube is counted, where the minutes are not typed.
    pub minutes: Amount<Minute>,
    /// The background vials.
    pub background: BackgroundVials,
    /// The decimal mark of what is typed.
    #[serde(default)]
    pub mark: Mark,
}

/// What is typed for each vial, in the order it is typed.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, Serialize, Deserialize)]
pub enum Fields {
    /// Gross counts; the minutes are the protocol's.
    #[default]
    Counts,
    /// Gross counts, then minutes.
    CountsMinutes,
    /// Gross counts per minute; the minutes are the protocol's.
    Cpm,
    /// Gross counts per minute, then minutes.
    CpmMinutes,
}

impl Fields {
    /// Whether minutes are typed for every vial.
    pub fn with_minutes(self) -> bool {
        matches!(self, Fields::CountsMinutes | Fields::CpmMinutes)
    }

    /// What the first number is.
    pub fn scale(self) -> super::reading::Scale {
        match self {
            Fields::Counts | Fields::CountsMinutes => super::reading::Scale::Counts,
            Fields::Cpm | Fields::CpmMinutes => super::reading::Scale::Cpm,
        }
    }
}

/// The background vials.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct BackgroundVials {
    /// How long each is counted, where the minutes are not typed.
    pub minutes: Amount<Minute>,
    /// What is in them.
    #[serde(default)]
    pub blank: BlankKind,
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

/// What the fit is told beyond the readings.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Numbers {
    /// What the lab knows of its tube-to-tube CV; `None` leaves it to the readings alone.
    #[serde(default = "lab_cv")]
    pub cv_prior: Option<CvPrior>,
    /// The pipetting error of one dilution step; zero takes level concentrations as exact.
    #[serde(default = "two_percent")]
    pub dilution_error: Amount<Share>,
    /// The confidence level of intervals.
    #[serde(default = "ninety_five")]
    pub confidence: f64,
    /// What is known of the errors that all tubes share.
    #[serde(default, skip_serializing_if = "ScaleErrors::none")]
    pub scale_errors: ScaleErrors,
    /// The law of binding that somebody chose to see; `None` where nobody did.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub model: Option<Model>,
}

/// What the lab knows of its tube-to-tube CV: `ln cv` is normal about `ln centre`.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct CvPrior {
    /// The usual CV, as a share.
    pub centre: f64,
    /// The standard deviation of `ln cv`.
    pub sd_ln: f64,
}

impl CvPrior {
    /// A 6 % tube, give or take a factor of two (common practice).
    pub const COMMON: CvPrior = CvPrior {
        centre: 0.06,
        sd_ln: 0.7,
    };
}

fn lab_cv() -> Option<CvPrior> {
    Some(CvPrior::COMMON)
}

fn two_percent() -> Amount<Share> {
    share("2 %", 0.02)
}

fn ninety_five() -> f64 {
    0.95
}

impl Default for Numbers {
    fn default() -> Self {
        Numbers {
            cv_prior: lab_cv(),
            dilution_error: two_percent(),
            confidence: ninety_five(),
            scale_errors: ScaleErrors::default(),
            model: None,
        }
    }
}

/// The units results are shown in.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Display {
    /// For Kd and concentrations.
    #[serde(default)]
    pub concentration: DisplayUnit,
    /// For sites.
    #[serde(default)]
    pub sites: SitesUnit,
}

/// A unit for concentrations.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, Serialize, Deserialize)]
#[allow(non_camel_case_types)]
pub enum DisplayUnit {
    /// Picomolar.
    pM,
    /// Nanomolar.
    #[default]
    nM,
    /// Micromolar.
    uM,
}

impl DisplayUnit {
    /// The unit as written.
    pub fn word(self) -> &'static str {
        match self {
            DisplayUnit::pM => "pM",
            DisplayUnit::nM => "nM",
            DisplayUnit::uM => "uM",
        }
    }

    /// From nM to this unit.
    pub fn from_nm(self, nm: f64) -> f64 {
        match self {
            DisplayUnit::pM => nm * 1e3,
            DisplayUnit::nM => nm,
            DisplayUnit::uM => nm / 1e3,
        }
    }
}

/// A unit for sites.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, Serialize, Deserialize)]
pub enum SitesUnit {
    /// By the amount of receptor preparation where it is known, else in the tube.
    #[default]
    PerAmount,
    /// As a concentration in the tube.
    InTube,
}

impl Protocol {
    /// Counts per minute of one fmol bound: `efficiency x specific activity x fraction counted`.
    pub fn counts_per_fmol(&self) -> f64 {
        self.counter.efficiency.base()
            * self.ligand.specific_activity.base()
            * self.separation.fraction.base()
    }

    /// How long a tube of this role is counted, in minutes, where it is not typed.
    pub fn minutes_for(&self, role: super::rack::Role) -> f64 {
        match role {
            super::rack::Role::Background => self.counter.background.minutes.base(),
            _ => self.counter.minutes.base(),
        }
    }
}
