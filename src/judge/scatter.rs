//! How tubes scatter about a fit, whatever was known of their CV beforehand.

use crate::binding::Isotherm;
use crate::fit::{Evidence, Expectation, RackEvidence, RowOf, Rows, f_upper_tail};
use nalgebra::DMatrix;

/// The scatter of tubes about a fit that they are part of.
///
/// The likelihood counts no degree of freedom for what it fits, so that the CV it finds is too small by about `sqrt((n - p) / n)`,
/// and by more with a column for every dilution; and what is known beforehand pulls it away from what these tubes show. So the
/// square of the CV is found again from `sum w (r^2 - (1 - h)) = 0`, with `r` a tube's residual in standard deviations, `h` its
/// leverage, and `w` the share of its variance that the CV makes: the score of `ln cv` with what fitting takes from every
/// residual put back, that of restricted likelihood (Patterson & Thompson 1971, Biometrika 58:545; from memory), in one step
/// from the fit.
///
/// A tube whose variance is all counting error needs no estimate of it, and tubes like that bring none. The variance of a tube with
/// the share `w` is known as well as with `sum w_j^2 (1 - h_j) / w^2` degrees of freedom (Satterthwaite 1946, Biometrics Bull
/// 2:110; from memory).
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Scatter {
    /// The residual of every tube over its standard deviation in a fit that it is part of, `sqrt(1 - h)`.
    pub(super) studentised: Vec<f64>,
    /// The number of tubes less their leverages.
    df: f64,
    /// `sum w^2 (1 - h)`.
    informed: f64,
    /// The square of the CV found again over that of the fit.
    ratio: f64,
}

impl Scatter {
    /// Of a fit at `theta` with its covariance.
    pub(super) fn of<I: Isotherm>(
        evidence: &RackEvidence<I>,
        theta: &[f64],
        cov: &DMatrix<f64>,
    ) -> Scatter {
        let mut rows = Rows::default();
        evidence.rows(theta, &mut rows);
        let samples = evidence.samples();
        let mut studentised = vec![0.0; samples.len()];
        let (mut df, mut informed, mut score) = (0.0, 0.0, 0.0);
        for (at, of) in rows.of().iter().enumerate() {
            let RowOf::Mean(i) = *of else { continue };
            let y = rows.y()[at];
            let left = 1.0 - leverage(rows.row(at), cov);
            let w = share_of_cv(evidence.expected(&samples[i], theta));
            studentised[i] = y / left.max(1e-6).sqrt();
            df += left;
            informed += w * w * left;
            score += w * (y * y - left);
        }
        let ratio = if informed > 0.0 {
            1.0 + score / informed
        } else {
            1.0
        };
        Scatter {
            studentised,
            df,
            informed,
            ratio,
        }
    }

    /// The variance of a tube over the model's, where the CV makes the share `w` of it. It is never less than one: what is unlikely
    /// has to be so by the model too.
    pub(super) fn beyond_model(&self, w: f64) -> f64 {
        1.0 + w * (self.ratio.max(1.0) - 1.0)
    }

    /// The chance of a sum of `squares` on `of` degrees of freedom, all in standard deviations of tubes with the share `w`, against a
    /// fit without them: that of `(squares / of) / ((df - squares) / (df - of))` as an F ratio. Exact for a linear model
    /// (R. D. Cook & S. Weisberg 1982, *Residuals and Influence in Regression*, 2.2; from memory), and here a guess that says
    /// whether to find out.
    pub(super) fn chance_alone(&self, squares: f64, of: f64, w: f64) -> f64 {
        let df = self.df(w);
        if df <= of || df <= squares {
            return 0.0;
        }
        let f = squares / of * (df - of) / (df - squares);
        f_upper_tail(f, [of, df - of]).unwrap_or(0.0)
    }

    /// The degrees of freedom that it is known with; no more than the tubes have, should counts scatter more than counting
    /// makes them.
    pub(super) fn df(&self, w: f64) -> f64 {
        self.df.min(self.informed / (w * w))
    }
}

/// The share of a tube's variance that is not that of counting.
pub(super) fn share_of_cv(of: Expectation) -> f64 {
    of.of_cv / of.variance
}

/// `a Cov a'` of a row; it touches few columns.
fn leverage(row: &[f64], cov: &DMatrix<f64>) -> f64 {
    let held: Vec<(usize, f64)> = row
        .iter()
        .copied()
        .enumerate()
        .filter(|(_, v)| *v != 0.0)
        .collect();
    let with = |(j, v): &(usize, f64)| {
        let sum: f64 = held.iter().map(|(k, w)| w * cov[(*j, *k)]).sum();
        v * sum
    };
    held.iter().map(with).sum()
}
