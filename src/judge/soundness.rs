//! Whether a fit describes its readings: numbers for a reader to judge by.

use super::groups::groups;
use super::steps::levels;
use crate::assay::{LevelNo, Role, Titration};
use crate::binding::{Hill, OneClass, TwoClasses};
use crate::fit::{Fit, LackOfFit, Model, Runs, lack_of_fit};
use std::collections::BTreeMap;

/// The chance, all levels taken together, below which a level is named as off.
const OFF_BELOW: f64 = 0.05;
/// How far from the lab's usual CV, in standard deviations of its logarithm, one is remarkable.
const CV_FAR: f64 = 1.96;

/// The order of the signs of residuals.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct RunsFound {
    /// Stretches of one sign among the residuals of the total tubes, from the lowest level up and replicates in the order they are counted. The
    /// levels' means would be too few: of eight not even three runs are unlikely.
    pub runs: Runs,
    /// The chance of so few.
    pub p: f64,
}

/// The tube CV found against the one that the lab knows.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct CvFound {
    /// Found, as a share.
    pub found: f64,
    /// The lab's usual one.
    pub usual: f64,
    /// How far apart their logarithms are, in standard deviations of what the lab knows.
    pub distance: f64,
}

impl CvFound {
    /// Whether tubes scatter more, or less, than is usual.
    pub fn remarkable(self) -> bool {
        self.distance.abs() > CV_FAR
    }
}

/// How far a level as a whole is from where the protocol has it.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct LevelError {
    /// The level.
    pub level: LevelNo,
    /// The error that the readings suggest for the step that made its solution, whatever steps usually are: 0.05 is 5 % more
    /// label than written.
    pub error: f64,
    /// Its logarithm over its standard deviation where nothing is wrong, of the step and of the readings.
    pub distance: f64,
    /// The chance that the farthest of all levels is as far.
    pub p: f64,
}

impl LevelError {
    /// Whether the level is named.
    pub fn off(self) -> bool {
        self.p < OFF_BELOW
    }
}

/// Numbers to judge a fit by.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Soundness {
    /// Deviations of the levels from the curve against those of replicates from each other.
    pub lack_of_fit: Option<LackOfFit>,
    /// The order of the signs of residuals.
    pub runs: Option<RunsFound>,
    /// The tube CV found; none where nothing was known beforehand.
    pub cv: Option<CvFound>,
    /// Every level that can be judged, in the order of their numbers.
    pub levels: Vec<LevelError>,
}

/// Numbers to judge a fit by; `flags` as it was fitted.
pub fn soundness(titration: &Titration, flags: bool, fit: &Fit) -> Soundness {
    let numbers = &titration.protocol.numbers;
    let replicates: Vec<Vec<f64>> = groups(fit).into_iter().map(|g| g.residuals).collect();
    let replicates: Vec<&[f64]> = replicates.iter().map(Vec::as_slice).collect();
    let s_d = numbers.dilution_error.base();
    let (steps, levels) = match fit.model {
        Model::OneClass => levels::<OneClass>(titration, flags, fit, s_d),
        Model::TwoClasses => levels::<TwoClasses>(titration, flags, fit, s_d),
        Model::Hill => levels::<Hill>(titration, flags, fit, s_d),
    };
    Soundness {
        lack_of_fit: lack_of_fit(&replicates, steps, fit.mean_parameters),
        runs: runs(titration, fit),
        cv: numbers.cv_prior.map(|prior| CvFound {
            found: fit.cv,
            usual: prior.centre,
            distance: (fit.cv / prior.centre).ln() / prior.sd_ln,
        }),
        levels,
    }
}

fn runs(titration: &Titration, fit: &Fit) -> Option<RunsFound> {
    let all = groups(fit);
    let totals: BTreeMap<LevelNo, &[f64]> = all
        .iter()
        .filter(|g| g.role == Role::Total)
        .map(|g| (g.level, g.residuals.as_slice()))
        .collect();
    let in_order: Vec<f64> = titration
        .levels_by_concentration()
        .iter()
        .filter_map(|l| totals.get(&l.no).copied())
        .flatten()
        .copied()
        .collect();
    let runs = Runs::of(&in_order);
    (runs.plus > 0 && runs.minus > 0).then(|| RunsFound {
        runs,
        p: runs.lower_tail(),
    })
}
