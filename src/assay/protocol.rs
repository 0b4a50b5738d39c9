//! How a titration was done, as far as a record or a number depends on it.

mod check;
mod counter;
mod ligand;
mod scale;
mod separation;

use check::Checks;
pub use check::ProtocolError;
pub use counter::{
    BackgroundVials, BlankKind, Counter, Field, Fields, FieldsError, QuenchStandard, Run,
    Subtracted,
};
pub use ligand::{Ligand, SHORT_LIVED};
pub use scale::ScaleErrors;
pub use separation::{Counted, Separation};

use super::model::Model;
use super::when::When;
use crate::units::{Amount, Cell, DegreeCelsius, MilliGram, MilliLitre, Minute, NanoMolar, Share};
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
    /// When the tubes were separated: label, levels and counts are brought to this time where decay is computed.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub assayed: Option<When>,
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

/// A share written here rather than typed by anybody.
fn share(text: &str, value: f64) -> Amount<Share> {
    crate::units::Typed {
        text: text.into(),
        value: crate::units::Measure::of(value),
    }
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
    /// By the amount of receptor preparation where it is known, else in the tube; cells one by one.
    #[default]
    PerAmount,
    /// By a million cells, where they are counted.
    PerMillionCells,
    /// As a concentration in the tube.
    InTube,
}

impl Protocol {
    /// Counts per minute of one fmol bound, at the nominal efficiency and at the time of the assay: `efficiency x specific activity x
    /// fraction counted`.
    pub fn counts_per_fmol(&self) -> f64 {
        self.counter.nominal_efficiency() * self.activity() * self.separation.fraction.base()
    }

    /// How long a tube of this role is counted, in minutes, where it is not typed; one reading of a reader counts as one.
    pub fn minutes_for(&self, role: super::rack::Role) -> f64 {
        match role {
            _ if self.separation.counted.is_signal() => 1.0,
            super::rack::Role::Background => self.counter.background.minutes.base(),
            _ => self.counter.minutes.base(),
        }
    }
}
