//! Each observation held against the fit without it: an outlier inflates the variance that it is judged by, and hides.

use super::evidence::{Evidence, RowOf, Rows};
use super::solver::{Ended, Solution, covariance, row_variance, solve};
use super::statistics::t_two_sided;
use nalgebra::DMatrix;

/// Evidence that observations can be taken out of.
pub trait Parts: Evidence + Sized {
    /// How many observations there are. Number `i` has the rows `Mean(i)` and, where there is one, `Variance(i)`.
    fn parts(&self) -> usize;

    /// The evidence without one of them: of the same parameters, in the same columns with the same limits.
    fn without(&self, part: usize) -> Self;
}

/// An observation against the fit without it.
#[derive(Debug, Clone, PartialEq)]
pub struct Deleted {
    /// How far it is from what the others expect, in standard deviations of that difference.
    pub residual: f64,
    /// The fit without it.
    pub solution: Solution,
    /// The covariance of that fit.
    pub cov: DMatrix<f64>,
}

/// Observation `part` against a refit without it, started from the `full` solution.
///
/// The residual is `(N - mu) / sqrt(V + mu' Cov mu'^T)` with all of it at the refit, `V` the variance of the observation and `Cov`
/// the covariance of the refit: the error of the observation and that of its expectation, which are independent. With the scale
/// estimated `V` is `RSS / (n - p)` of the refit; for a linear model this is the externally studentised residual
/// (R. D. Cook & S. Weisberg 1982, *Residuals and Influence in Regression*, 2.2; from memory). `None` where
/// there is no such observation, or the refit does not converge or has no covariance.
pub fn deleted<E: Parts>(evidence: &E, full: &Solution, part: usize) -> Option<Deleted> {
    if part >= evidence.parts() {
        return None;
    }
    let others = evidence.without(part);
    let solution = solve(&others, &full.theta, None);
    if solution.ended != Ended::Converged {
        return None;
    }
    let cov = covariance(&others, &solution)?;
    let mut rows = Rows::default();
    others.rows(&solution.theta, &mut rows);
    let variance = row_variance(&others, &rows, &solution)?;
    evidence.rows(&solution.theta, &mut rows);
    let at = rows.of().iter().position(|of| *of == RowOf::Mean(part))?;
    let (a, y) = (rows.row(at), rows.y()[at]);
    let expectation: f64 = (0..a.len())
        .map(|j| {
            a[j] * a
                .iter()
                .zip(cov.column(j).iter())
                .map(|(v, c)| v * c)
                .sum::<f64>()
        })
        .sum();
    let residual = y / (variance + expectation).sqrt();
    residual.is_finite().then_some(Deleted {
        residual,
        solution,
        cov,
    })
}

/// The probability that the farthest of `tubes` residuals is as far out as `t` by chance: that of Student's t, either side, on
/// `df` degrees of freedom, times the number of tubes (Bonferroni), at most one. One also where `df` is not positive
/// or `t` is no number: nothing speaks against the tube.
pub fn outlier_p(t: f64, df: f64, tubes: usize) -> f64 {
    t_two_sided(t, df).map_or(1.0, |p| (p * tubes as f64).min(1.0))
}
