//! Whether a fit describes its readings: numbers for a reader to judge by.

use super::groups::groups;
use crate::assay::{LevelNo, Role, Titration};
use crate::binding::{Hill, OneClass, TwoClasses};
use crate::fit::{
    Cold, Evidence, Fit, LackOfFit, Model, RackEvidence, RowOf, Rows, Runs, lack_of_fit,
    t_two_sided,
};
use crate::units::{Measure, Typed};
use nalgebra::DVector;
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
    /// The error that the readings suggest for the step that made its solution: 0.05 is 5 % more label than written.
    pub error: f64,
    /// That error over what would be usual.
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

/// The sum of squares of the dilution steps over their error, and the error of every step.
///
/// With dilution columns: the step as fitted over its spread where nothing is wrong, whose square is what is known beforehand
/// less what the readings leave open. Without: the score of a column that the fit does not have.
fn levels<I: Cold>(
    titration: &Titration,
    flags: bool,
    fit: &Fit,
    s_d: f64,
) -> (f64, Vec<LevelError>) {
    let df = fit.tubes_used as f64 - fit.mean_parameters as f64;
    let (squares, steps) = if s_d > 0.0 {
        fitted_steps::<I>(titration, flags, fit, s_d)
    } else {
        (0.0, scored_steps::<I>(titration, flags, fit))
    };
    let of = steps.len() as f64;
    let judged = steps
        .into_iter()
        .map(|(level, error, distance)| LevelError {
            level,
            error,
            distance,
            p: t_two_sided(distance, df).map_or(1.0, |p| (p * of).min(1.0)),
        });
    (squares, judged.collect())
}

type Step = (LevelNo, f64, f64);

fn fitted_steps<I: Cold>(
    titration: &Titration,
    flags: bool,
    fit: &Fit,
    s_d: f64,
) -> (f64, Vec<Step>) {
    let Some(evidence) = RackEvidence::<I>::new(titration, flags) else {
        return (0.0, Vec::new());
    };
    let (mut squares, mut steps) = (0.0, Vec::new());
    for c in evidence.dilution_columns().1 {
        let (j, cov) = (c.column, &fit.cov);
        let (error, left) = match c.from {
            None => (fit.theta[j], cov[(j, j)]),
            Some(k) => (
                fit.theta[j] - fit.theta[k],
                cov[(j, j)] + cov[(k, k)] - 2.0 * cov[(j, k)],
            ),
        };
        squares += (error / s_d).powi(2);
        let spread = s_d * s_d - left;
        // Readings that say next to nothing of a step cannot say that it is off.
        if spread > 0.02 * s_d * s_d {
            steps.push((c.level, error.exp_m1(), error / spread.sqrt()));
        }
    }
    (squares, steps)
}

fn scored_steps<I: Cold>(titration: &Titration, flags: bool, fit: &Fit) -> Vec<Step> {
    // The same rack with a column for every level; what its error is set to does not matter for rows of tubes.
    let mut with = titration.clone();
    with.protocol.numbers.dilution_error = Typed {
        text: String::new(),
        value: Measure::of(1.0),
    };
    with.levels
        .iter_mut()
        .for_each(|l| l.made = crate::assay::Made::FromStock);
    let Some(evidence) = RackEvidence::<I>::new(&with, flags) else {
        return Vec::new();
    };
    let columns = evidence.dilution_columns().1;
    let first = crate::fit::Columns::of::<I>().dilutions();
    let mut theta = fit.theta.clone();
    theta.splice(first..first, std::iter::repeat_n(0.0, columns.len()));
    let mut rows = Rows::default();
    evidence.rows(&theta, &mut rows);
    // Places of the fit's own parameters among the columns.
    let own: Vec<usize> = (0..theta.len())
        .filter(|j| !(first..first + columns.len()).contains(j))
        .collect();
    let tubes: Vec<usize> = (0..rows.len())
        .filter(|i| matches!(rows.of()[*i], RowOf::Mean(_) | RowOf::Variance(_)))
        .collect();
    let mut steps = Vec::new();
    for c in &columns {
        let (mut score, mut information) = (0.0, 0.0);
        let mut shared = DVector::zeros(own.len());
        for i in &tubes {
            let row = rows.row(*i);
            let d = row[c.column];
            if d == 0.0 {
                continue;
            }
            score += d * rows.y()[*i];
            information += d * d;
            for (k, j) in own.iter().enumerate() {
                shared[k] += d * row[*j];
            }
        }
        let left = information - shared.dot(&(&fit.cov * &shared));
        if left > 1e-6 * information && left > 0.0 {
            let error = score / left;
            steps.push((c.level, error.exp_m1(), score / left.sqrt()));
        }
    }
    steps
}
