//! How bound is parted from free, and which side is counted.

use super::share;
use crate::units::{Amount, MilliLitre, Minute, NanoMolar, Share};
use serde::{Deserialize, Serialize};

/// How bound is parted from free, and what of it is counted.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Separation {
    /// Which side is counted.
    #[serde(default, skip_serializing_if = "Counted::is_bound")]
    pub counted: Counted,
    /// The share of the tube that is separated and counted, where the bound side is.
    #[serde(default = "all")]
    pub fraction: Amount<Share>,
    /// The share of what a tube gets that is counted in an aliquot of a level's solution.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub added_counted: Option<Amount<Share>>,
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

/// Which side of the separation is counted.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub enum Counted {
    /// What is bound: filters, pellets.
    #[default]
    Bound,
    /// What is free: an aliquot of the supernatant or the filtrate.
    Free {
        /// The volume of the aliquot.
        aliquot: Amount<MilliLitre>,
    },
    /// An aliquot of each side of an equilibrium-dialysis cell. The incubation volume is that of the protein side as filled.
    BothSides {
        /// The aliquot of the protein side.
        protein_aliquot: Amount<MilliLitre>,
        /// The aliquot of the ligand side.
        ligand_aliquot: Amount<MilliLitre>,
        /// The volume of the protein side at the end, if it was measured: water follows the protein.
        #[serde(default, skip_serializing_if = "Option::is_none")]
        protein_after: Option<Amount<MilliLitre>>,
        /// The volume of the ligand side as filled, which the levels are concentrations in; with it the label is looked
        /// for on both sides.
        #[serde(default, skip_serializing_if = "Option::is_none")]
        ligand_volume: Option<Amount<MilliLitre>>,
    },
    /// A reader's signal of what is bound, against standards.
    Signal {
        /// The volume that is read, if what is bound is brought into another than that of the tube.
        #[serde(default, skip_serializing_if = "Option::is_none")]
        read_volume: Option<Amount<MilliLitre>>,
        /// The standards: concentrations of label in the volume that is read.
        standards: Vec<Amount<NanoMolar>>,
        /// What is known of the standard deviation of a blank reading, in units of the signal.
        #[serde(default, skip_serializing_if = "Option::is_none")]
        noise: Option<f64>,
    },
}

impl Counted {
    /// Whether it is the bound side of a counter's tubes.
    pub fn is_bound(&self) -> bool {
        *self == Counted::Bound
    }

    /// Whether both sides of a cell are counted.
    pub fn is_cell(&self) -> bool {
        matches!(self, Counted::BothSides { .. })
    }

    /// Whether a reader's signal is taken.
    pub fn is_signal(&self) -> bool {
        matches!(self, Counted::Signal { .. })
    }

    /// In a word or two.
    pub fn words(&self) -> &'static str {
        match self {
            Counted::Bound => "bound",
            Counted::Free { .. } => "free",
            Counted::BothSides { .. } => "both sides of a dialysis cell",
            Counted::Signal { .. } => "a reader's signal of bound",
        }
    }

    /// The standards of a reader.
    pub fn standards(&self) -> &[Amount<NanoMolar>] {
        match self {
            Counted::Signal { standards, .. } => standards,
            _ => &[],
        }
    }
}

fn all() -> Amount<Share> {
    share("100 %", 1.0)
}

impl Default for Separation {
    fn default() -> Self {
        Separation {
            counted: Counted::Bound,
            fraction: all(),
            added_counted: None,
            method: String::new(),
            filter: String::new(),
            washes: String::new(),
            wash_time: None,
        }
    }
}
