//! What has to be there before a number means anything.

use super::rack::RackEvidence;
use crate::assay::{
    LevelNo, Model, Role, Side, Titration, background, calibration, noise_known, observed,
};
use crate::binding::Isotherm;
use std::fmt;

/// What is missing for a number to mean anything.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Missing {
    /// No background vial has been counted.
    Background,
    /// No blank of a reader has been read, or none with a signal above zero.
    Blank,
    /// No standard of a reader has been read.
    Standards,
    /// Too few blanks to know the noise of a reader.
    Blanks {
        /// How many there are.
        have: usize,
    },
    /// Total tubes at too few levels for the parameters.
    Levels {
        /// At how many there are.
        have: usize,
        /// At how many they are wanted.
        want: usize,
    },
    /// No nonspecific tube in the upper half of the ladder.
    NonspecificAbove,
    /// Too few tubes for the parameters.
    Tubes {
        /// How many there are.
        have: usize,
        /// How many are wanted.
        want: usize,
    },
    /// No tube is above background.
    NothingAboveBackground,
    /// The readings cannot tell the parameters of this law of binding apart.
    NotTellingApart(Model),
    /// The best fit of two classes leaves one of them without sites.
    SecondClass,
}

impl fmt::Display for Missing {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Missing::Background => f.write_str("a counted background vial"),
            Missing::Blank => {
                f.write_str("blanks whose mean is above zero (no blank taken off by the reader)")
            }
            Missing::Standards => f.write_str("a standard above the blank that is not flagged"),
            Missing::Blanks { have } => write!(
                f,
                "{BLANKS_WANTED} blanks that differ, or the noise of the reader in the protocol (now {have})"
            ),
            Missing::Levels { have, want } => {
                write!(f, "total tubes at {want} levels (now {have})")
            }
            Missing::NonspecificAbove => {
                f.write_str("a nonspecific tube in the upper half of the levels")
            }
            Missing::Tubes { have, want } => write!(f, "{want} tubes (now {have})"),
            Missing::NothingAboveBackground => f.write_str("a tube clearly above background"),
            Missing::NotTellingApart(model) => f.write_str(match model {
                Model::OneClass => "readings that tell Kd, sites and nonspecific apart",
                Model::TwoClasses => "readings that tell two classes and nonspecific apart",
                Model::Hill => "readings that tell Kh, sites, n and nonspecific apart",
            }),
            Missing::SecondClass => f.write_str("readings that show a second class of sites"),
        }
    }
}

/// How many blanks tell the noise of a reader.
const BLANKS_WANTED: usize = 3;

/// The one-sided 5 % point of the normal distribution (NIST/SEMATECH e-Handbook of Statistical Methods, 1.3.6.7.1).
const Z95: f64 = 1.644_853_6;

/// What is missing where there is no evidence at all.
pub(super) fn nothing_yet<I: Isotherm>(titration: &Titration, flags: bool) -> Vec<Missing> {
    let mut missing = Vec::new();
    let signal = titration.protocol.separation.counted.is_signal();
    match background(titration, flags) {
        None if signal => missing.push(Missing::Blank),
        None => missing.push(Missing::Background),
        Some(_) if signal && calibration(titration, flags).is_none() => {
            missing.push(Missing::Standards);
        }
        Some(_) => {}
    }
    let samples: Vec<(Role, LevelNo)> = titration
        .tubes
        .iter()
        .filter(|t| t.role.assayed() && t.side != Some(Side::Ligand))
        .filter(|t| observed(titration, t.no, flags).is_some())
        .filter_map(|t| t.level.map(|l| (t.role, l)))
        .collect();
    missing.extend(rack_missing(titration, &samples, I::DIM));
    missing
}

/// What is missing of the rack's layout for an isotherm of `dim` parameters: one level more than it has, and two tubes
/// more than it has with nonspecific binding.
fn rack_missing(titration: &Titration, samples: &[(Role, LevelNo)], dim: usize) -> Vec<Missing> {
    let mut missing = Vec::new();
    // Two levels of one concentration say no more of a curve than one.
    let mut levels: Vec<f64> = samples
        .iter()
        .filter(|s| s.0 == Role::Total)
        .filter_map(|s| titration.level_nm(s.1))
        .collect();
    levels.sort_by(f64::total_cmp);
    levels.dedup();
    let (have, want) = (levels.len(), dim + 1);
    if have < want {
        missing.push(Missing::Levels { have, want });
    }
    let ladder = titration.levels_by_concentration();
    let upper = &ladder[ladder.len() / 2..];
    if !samples
        .iter()
        .any(|s| s.0 == Role::Nonspecific && upper.iter().any(|l| l.no == s.1))
    {
        missing.push(Missing::NonspecificAbove);
    }
    let want = dim + 3;
    if samples.len() < want {
        missing.push(Missing::Tubes {
            have: samples.len(),
            want,
        });
    }
    missing
}

/// What is missing for a fit.
pub(super) fn missing<I: Isotherm>(
    titration: &Titration,
    evidence: &RackEvidence<I>,
) -> Vec<Missing> {
    let samples: Vec<_> = evidence
        .samples()
        .iter()
        .filter(|s| s.assayed())
        .filter_map(|s| Some((s.role, s.level?)))
        .collect();
    let mut missing = rack_missing(titration, &samples, evidence.mean_parameters() - 1);
    let blank = evidence.background();
    if titration.protocol.separation.counted.is_signal() {
        let have = blank.vials;
        if blank.cpm() <= 0.0 {
            missing.push(Missing::Blank);
        } else if (have < BLANKS_WANTED || blank.between <= 0.0) && noise_known(titration).is_none()
        {
            missing.push(Missing::Blanks { have });
        }
    }
    let b = blank.cpm();
    // Currie's critical level of a net count (1968, Anal Chem 40:586; formula from memory).
    let above = evidence.samples().iter().filter(|s| s.assayed()).any(|s| {
        let net = s.counts - s.minutes * b;
        let own = if blank.between > 0.0 {
            blank.between * s.minutes
        } else {
            b * s.minutes
        };
        net > Z95 * (own + blank.variance * s.minutes * s.minutes).sqrt()
    });
    if !above {
        missing.push(Missing::NothingAboveBackground);
    }
    missing
}
