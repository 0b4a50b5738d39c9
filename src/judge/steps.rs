//! Levels as a whole: the step that made a level's solution, judged by all of its tubes.

use super::scatter::{Scatter, share_of_cv};
use super::soundness::LevelError;
use crate::assay::{LevelNo, Titration};
use crate::fit::{
    Cold, Ended, Evidence, Fit, RackEvidence, RowOf, Rows, covariance, outlier_p, solve,
};
use nalgebra::{DMatrix, DVector};

/// Levels whose chance, as guessed from the fit that they are part of, is not below this get no fit of their own.
const WORTH_A_REFIT: f64 = 1.0;
/// The share of a step's variance that readings have to bring for it to be judged at all.
const TELLING: f64 = 0.02;

/// What the readings say of the step that made a level.
struct Step {
    level: LevelNo,
    /// The share of the variance of the tubes that say it that is not that of counting.
    w: f64,
    /// Its logarithm, whatever steps usually are.
    error: f64,
    /// The variance that the readings leave it.
    variance: f64,
}

impl Step {
    /// The error over its standard deviation where nothing is wrong.
    fn distance(&self, s_d: f64) -> f64 {
        self.error / (self.variance + s_d * s_d).sqrt()
    }
}

/// The sum of squares of the dilution steps over their error, and the error of every step that the readings tell of.
///
/// The likelihood that takes a level to be as written spreads its error over the CV of all tubes, and hides it. So a level that may be
/// off is held against a fit in which its step is free: the error found there over the root of its variance, that of the readings as
/// the tubes scatter there and that of the step as the protocol has it; by Student's t, times the number of levels.
pub(super) fn levels<I: Cold>(
    titration: &Titration,
    flags: bool,
    fit: &Fit,
    s_d: f64,
) -> (f64, Vec<LevelError>) {
    let Some(evidence) = RackEvidence::<I>::new(titration, flags) else {
        return (0.0, Vec::new());
    };
    let (squares, steps) = if s_d > 0.0 {
        fitted(&evidence, fit, s_d)
    } else {
        (0.0, scored(&evidence, fit))
    };
    let scatter = Scatter::of(&evidence, &fit.theta, &fit.cov);
    let of = steps.len();
    let judged = steps.into_iter().map(|step| {
        let distance = step.distance(s_d);
        let chance = scatter.chance_alone(distance * distance, 1.0, step.w) * of as f64;
        let freed = (chance < WORTH_A_REFIT)
            .then(|| freed(&evidence, fit, step.level, s_d))
            .flatten();
        let (error, distance, p) = match freed {
            Some((error, distance, df)) => (error, distance, outlier_p(distance, df, of)),
            None => (step.error, distance, chance.min(1.0)),
        };
        LevelError {
            level: step.level,
            error: error.exp_m1(),
            distance,
            p,
        }
    });
    // Where nothing bends the likelihood a score may lead anywhere: such a level is not judged.
    let sound = |l: &LevelError| l.error.is_finite() && l.distance.is_finite();
    (squares, judged.filter(sound).collect())
}

/// The steps by the columns that the fit has for them: what is fitted has the share of the error that readings bring beside what
/// is known beforehand.
fn fitted<I: Cold>(evidence: &RackEvidence<I>, fit: &Fit, s_d: f64) -> (f64, Vec<Step>) {
    let (mut squares, mut steps) = (0.0, Vec::new());
    for c in evidence.dilution_columns().1 {
        let (fitted, left) = step(&fit.theta, &fit.cov, c.column, c.from);
        squares += (fitted / s_d).powi(2);
        let share = 1.0 - left / (s_d * s_d);
        if share > TELLING {
            steps.push(Step {
                level: c.level,
                w: share_of_column(evidence, c.column, &fit.theta),
                error: fitted / share,
                variance: left / share,
            });
        }
    }
    (squares, steps)
}

/// A step at `theta` and its variance.
fn step(theta: &[f64], cov: &DMatrix<f64>, j: usize, from: Option<usize>) -> (f64, f64) {
    match from {
        None => (theta[j], cov[(j, j)]),
        Some(k) => (
            theta[j] - theta[k],
            cov[(j, j)] + cov[(k, k)] - 2.0 * cov[(j, k)],
        ),
    }
}

/// The steps of a fit that has no columns for them, each by the score of a column of its own.
fn scored<I: Cold>(evidence: &RackEvidence<I>, fit: &Fit) -> Vec<Step> {
    let mut levels: Vec<LevelNo> = evidence.samples().iter().filter_map(|s| s.level).collect();
    levels.sort();
    levels.dedup();
    let mut rows = Rows::default();
    let by_score = |level: LevelNo| {
        let (with, of) = evidence.freed(level);
        let mut theta = fit.theta.clone();
        theta.push(0.0);
        with.rows(&theta, &mut rows);
        let own = fit.theta.len();
        let (mut score, mut information) = (0.0, 0.0);
        let mut shared = DVector::zeros(own);
        for (i, y) in rows.y().iter().enumerate() {
            let row = rows.row(i);
            let d = row[of.column];
            if d == 0.0 || !matches!(rows.of()[i], RowOf::Mean(_) | RowOf::Variance(_)) {
                continue;
            }
            score += d * y;
            information += d * d;
            shared.axpy(d, &DVector::from_column_slice(&row[..own]), 1.0);
        }
        let left = information - shared.dot(&(&fit.cov * &shared));
        (left > 1e-6 * information && left > 0.0).then(|| Step {
            level,
            w: share_of_column(&with, of.column, &theta),
            error: score / left,
            variance: 1.0 / left,
        })
    };
    levels.into_iter().filter_map(by_score).collect()
}

/// The error of a level's step in a fit that leaves it free, its distance, and the degrees of freedom that this is known with.
fn freed<I: Cold>(
    evidence: &RackEvidence<I>,
    fit: &Fit,
    level: LevelNo,
    s_d: f64,
) -> Option<(f64, f64, f64)> {
    let (free, of) = evidence.freed(level);
    let mut start = fit.theta.clone();
    start.resize(free.dim(), 0.0);
    let solution = solve(&free, &start, None);
    if solution.ended != Ended::Converged {
        return None;
    }
    let theta = &solution.theta;
    let cov = covariance(&free, &solution)?;
    let (error, variance) = step(theta, &cov, of.column, of.from);
    let scatter = Scatter::of(&free, theta, &cov);
    let w = share_of_column(&free, of.column, theta);
    let of_readings = variance * scatter.beyond_model(w);
    let all = of_readings + s_d * s_d;
    let df = scatter.df(w * of_readings / all);
    Some((error, error / all.sqrt(), df))
}

/// The share of the variance of the tubes that tell of a column that is not that of counting, each by how much it tells; all of it
/// where none does.
fn share_of_column<I: Cold>(evidence: &RackEvidence<I>, column: usize, theta: &[f64]) -> f64 {
    let mut rows = Rows::default();
    evidence.rows(theta, &mut rows);
    let (mut told, mut all) = (0.0, 0.0);
    for (at, of) in rows.of().iter().enumerate() {
        let RowOf::Mean(i) = *of else { continue };
        let information = rows.row(at)[column].powi(2);
        if information > 0.0 {
            let w = share_of_cv(evidence.expected(&evidence.samples()[i], theta));
            told += information * w;
            all += information;
        }
    }
    if all > 0.0 { told / all } else { 1.0 }
}
