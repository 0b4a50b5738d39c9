//! The labelled ligand.

use super::super::decayed::{Carrier, Decayed, decayed};
use super::super::when::{When, minutes_between};
use super::Protocol;
use crate::units::{Amount, DpmPerFmol, Minute, Nuclide, Share, carrier_free};
use serde::{Deserialize, Serialize};

/// The labelled ligand.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Ligand {
    /// Its name.
    pub name: String,
    /// The label: a nuclide, e.g. `H-3`; where a reader's signal is taken, whatever gives the signal.
    pub label: String,
    /// Its specific activity on the activity date, or on the day of the assay where no decay is computed. Not set where
    /// a reader's signal is taken.
    #[serde(default = "Amount::unset", skip_serializing_if = "Amount::is_unset")]
    pub specific_activity: Amount<DpmPerFmol>,
    /// When the specific activity and the levels were stated for.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub activity_date: Option<When>,
    /// What a molecule becomes when its label decays; without it no decay of the label is computed.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub decay: Option<Carrier>,
    /// The half-life of a nuclide that is not in the table, or another than the table's.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub half_life: Option<Amount<Minute>>,
    /// How many atoms of label a labelled molecule has; see [`Ligand::atoms`].
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub atoms: Option<u16>,
    /// The share of the label that can bind at all.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub bindable: Option<Amount<Share>>,
    /// The lot.
    #[serde(default, skip_serializing_if = "String::is_empty")]
    pub lot: String,
}

/// The most atoms of label taken in a molecule of which their number is not given.
pub(super) const MOST_ATOMS: u16 = 10;

/// Half-lives below this need the time that every vial was counted: ten days, in minutes.
pub const SHORT_LIVED: f64 = 10.0 * 1440.0;

impl Ligand {
    /// The half-life of the label in minutes, where it is known.
    pub fn half_life_minutes(&self) -> Option<f64> {
        match &self.half_life {
            Some(typed) => Some(typed.base()),
            None => Nuclide::find(&self.label).map(|n| n.half_life_minutes()),
        }
    }

    /// Atoms of label in a labelled molecule: as given, or for H-3 and C-14, of which a molecule often has several, the
    /// fewest that give its specific activity; else one.
    pub fn atoms(&self) -> u16 {
        if let Some(n) = self.atoms {
            return n;
        }
        let several =
            Nuclide::find(&self.label).is_some_and(|n| matches!(n.name(), "H-3" | "C-14"));
        match self.half_life_minutes() {
            Some(half_life) if several => {
                let least = self.specific_activity.base() / carrier_free(half_life);
                (least - 1e-6).ceil().clamp(1.0, f64::from(MOST_ATOMS)) as u16
            }
            _ => 1,
        }
    }

    /// The share of the label that can bind; one where nothing is said.
    pub fn bindable(&self) -> f64 {
        self.bindable.as_ref().map_or(1.0, Amount::base)
    }
}

impl Protocol {
    /// Minutes from the activity date to the assay, where both are known.
    pub fn aged_minutes(&self) -> Option<f64> {
        let from = self.ligand.activity_date.as_ref()?.at();
        let to = self.incubation.assayed.as_ref()?.at();
        Some(minutes_between(from, to))
    }

    /// The label at the time of the assay; `None` where no decay of it is computed.
    pub fn label_decayed(&self) -> Option<Decayed> {
        let carrier = self.ligand.decay?;
        let half_life = self.ligand.half_life_minutes()?;
        Some(decayed(
            carrier,
            self.ligand.specific_activity.base(),
            carrier_free(half_life),
            self.ligand.atoms(),
            half_life,
            self.aged_minutes()?,
        ))
    }

    /// The specific activity at the time of the assay in dpm/fmol.
    pub fn activity(&self) -> f64 {
        self.label_decayed()
            .map_or(self.ligand.specific_activity.base(), |d| d.activity)
    }

    /// What is left of every label concentration at the time of the assay, as a share.
    pub fn concentration_left(&self) -> f64 {
        self.label_decayed().map_or(1.0, |d| d.concentration)
    }

    /// The half-life in minutes by which counts are brought to the time of the assay; none where they are taken as they are.
    pub fn count_half_life(&self) -> Option<f64> {
        self.incubation.assayed.as_ref()?;
        self.ligand.decay?;
        self.ligand.half_life_minutes()
    }

    /// Whether the label is so short-lived that every vial needs the time it was counted.
    pub fn short_lived(&self) -> bool {
        self.count_half_life().is_some_and(|t| t < SHORT_LIVED)
    }
}
