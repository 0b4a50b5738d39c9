//! Tubes that do not fit with the others. The program proposes, a person decides.

use super::groups::{Group, groups};
use super::scatter::{Scatter, share_of_cv};
use crate::assay::{LevelNo, Model, Role, Titration, TubeNo};
use crate::binding::{Hill, OneClass, TwoClasses};
use crate::fit::{
    Cold, Ended, Evidence, Fit, Parts, RackEvidence, RowOf, Rows, Solution, covariance, deleted,
    f_upper_tail, grubbs_critical, outlier_p, solve,
};

/// The chance, all tubes taken together, below which a tube or a group is named.
const NAMED_BELOW: f64 = 0.05;
/// Tubes and groups whose chance, as guessed from the fit that they are part of, is not below this are not refitted: one that
/// is named would have to be twenty times less likely without them.
const WORTH_A_REFIT: f64 = 1.0;
/// The least replicates for Grubbs' test: below five it has hardly any power.
const GRUBBS_FROM: usize = 5;

/// A tube that does not fit with the others.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Suspect {
    /// Which.
    pub tube: TubeNo,
    /// Its distance from what a fit without it expects, in standard deviations of the difference as the other tubes have it.
    pub residual: f64,
    /// The chance that the farthest of all tubes is as far, where nothing is wrong.
    pub p: f64,
}

/// Replicates that disagree.
#[derive(Debug, Clone, PartialEq)]
pub struct Disagreement {
    /// Their level.
    pub level: LevelNo,
    /// What they are for.
    pub role: Role,
    /// Which.
    pub tubes: Vec<TubeNo>,
    /// Their variance over what it would be as the other tubes scatter.
    pub f: f64,
    /// The chance of as large a ratio in any group.
    pub p: f64,
    /// The one that stands out among them by Grubbs' test, from five replicates on.
    pub one: Option<TubeNo>,
}

/// What does not fit with the others.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Suspects {
    /// Tubes, the farthest first.
    pub tubes: Vec<Suspect>,
    /// Groups of replicates, the least likely first.
    pub groups: Vec<Disagreement>,
}

/// Tubes and groups that do not fit with the others, by a fit of the law that `fit` is of.
///
/// Every tube, and every group of replicates, is held against a refit without it, since an outlier inflates the CV that it is
/// judged by, and against the scatter of the others there where that is more than the model has it. A tube by its residual, as
/// Student's t, times the number of tubes (externally studentised residuals: R. D. Cook & S. Weisberg 1982, *Residuals and
/// Influence in Regression*, 2.2; from memory); a group by its variance (F test), times the number of groups. In a group of five or
/// more that is named, Grubbs' test (Grubbs 1969, Technometrics 11:1; from memory) says whether one of them stands out; by
/// itself it names none: with many groups it would name one too often, and with an allowance for that hardly ever.
pub fn suspects(titration: &Titration, flags: bool, fit: &Fit) -> Suspects {
    match fit.model {
        Model::OneClass => named::<OneClass>(titration, flags, fit),
        Model::TwoClasses => named::<TwoClasses>(titration, flags, fit),
        Model::Hill => named::<Hill>(titration, flags, fit),
    }
}

fn named<I: Cold>(titration: &Titration, flags: bool, fit: &Fit) -> Suspects {
    let Some(evidence) = RackEvidence::<I>::new(titration, flags) else {
        return Suspects::default();
    };
    let scatter = Scatter::of(&evidence, &fit.theta, &fit.cov);
    Suspects {
        tubes: tubes(&evidence, fit, &scatter),
        groups: disagreements(&evidence, fit, &scatter),
    }
}

fn tubes<I: Cold>(evidence: &RackEvidence<I>, fit: &Fit, scatter: &Scatter) -> Vec<Suspect> {
    let full = Solution {
        theta: fit.theta.clone(),
        cost: fit.cost(),
        ended: Ended::Converged,
        at_limit: vec![false; fit.theta.len()],
    };
    let mut found: Vec<Suspect> = evidence
        .samples()
        .iter()
        .enumerate()
        .filter(|(i, sample)| {
            let w = share_of_cv(evidence.expected(sample, &fit.theta));
            let chance = scatter.chance_alone(scatter.studentised[*i].powi(2), 1.0, w);
            chance * (evidence.parts() as f64) < WORTH_A_REFIT
        })
        .filter_map(|(i, sample)| {
            let alone = deleted(evidence, &full, i)?;
            let theta = &alone.solution.theta;
            let others = Scatter::of(&evidence.without(i), theta, &alone.cov);
            let w = share_of_cv(evidence.expected(sample, theta));
            let residual = alone.residual / others.beyond_model(w).sqrt();
            Some(Suspect {
                tube: sample.tube,
                residual,
                p: outlier_p(residual, others.df(w), evidence.parts()),
            })
        })
        .filter(|s| s.p < NAMED_BELOW)
        .collect();
    found.sort_by(|a, b| a.p.total_cmp(&b.p).then(a.tube.cmp(&b.tube)));
    found
}

/// Groups of replicates that scatter more than the others.
fn disagreements<I: Cold>(
    evidence: &RackEvidence<I>,
    fit: &Fit,
    scatter: &Scatter,
) -> Vec<Disagreement> {
    let all = groups(fit);
    let several: Vec<&Group> = all.iter().filter(|g| g.residuals.len() > 1).collect();
    let tests = several.len() as f64;
    let mut found: Vec<Disagreement> = several
        .iter()
        .filter(|g| {
            let w = share_of_group(evidence, g, &fit.theta);
            let of = g.residuals.len() as f64 - 1.0;
            let chance = scatter.chance_alone(g.about_mean(), of, w);
            chance * tests < WORTH_A_REFIT
        })
        .filter_map(|g| {
            let (f, df) = against_others(evidence, fit, g)?;
            let p = f_upper_tail(f, [g.residuals.len() as f64 - 1.0, df])? * tests;
            Some(Disagreement {
                level: g.level,
                role: g.role,
                tubes: g.tubes.clone(),
                f,
                p: p.min(1.0),
                one: outlier(g),
            })
        })
        .filter(|d| d.p < NAMED_BELOW)
        .collect();
    found.sort_by(|a, b| a.p.total_cmp(&b.p).then(a.level.cmp(&b.level)));
    found
}

/// The variance of a group over what it would be as the tubes of a fit without it scatter, and the degrees of freedom that this is known with.
fn against_others<I: Cold>(evidence: &RackEvidence<I>, fit: &Fit, g: &Group) -> Option<(f64, f64)> {
    let parts: Vec<usize> = (0..evidence.parts())
        .filter(|i| g.tubes.contains(&evidence.samples()[*i].tube))
        .collect();
    // From the last one on, so that the places of those before stay.
    let others = parts
        .iter()
        .rev()
        .fold(evidence.clone(), |rest, i| rest.without(*i));
    let solution = solve(&others, &fit.theta, None);
    if solution.ended != Ended::Converged {
        return None;
    }
    let theta = &solution.theta;
    let scatter = Scatter::of(&others, theta, &covariance(&others, &solution)?);
    let mut rows = Rows::default();
    evidence.rows(theta, &mut rows);
    let mut alone = g.clone();
    alone.residuals = (0..rows.len())
        .filter(|at| matches!(rows.of()[*at], RowOf::Mean(i) if parts.contains(&i)))
        .map(|at| rows.y()[at])
        .collect();
    let w = share_of_group(evidence, g, theta);
    Some((alone.variance() / scatter.beyond_model(w), scatter.df(w)))
}

/// The share of the variance of a group's tubes that is not that of counting, on average.
fn share_of_group<I: Cold>(evidence: &RackEvidence<I>, g: &Group, theta: &[f64]) -> f64 {
    let tubes = evidence.samples().iter();
    let shares = tubes
        .filter(|s| g.tubes.contains(&s.tube))
        .map(|s| share_of_cv(evidence.expected(s, theta)));
    shares.sum::<f64>() / g.tubes.len() as f64
}

/// The replicate of a group that Grubbs' test sets apart.
fn outlier(g: &Group) -> Option<TubeNo> {
    let n = g.residuals.len();
    if n < GRUBBS_FROM {
        return None;
    }
    let mean = g.mean();
    let sd = g.variance().sqrt();
    let (tube, far) = g
        .tubes
        .iter()
        .zip(g.residuals.iter().map(|r| (r - mean).abs() / sd))
        .max_by(|a, b| a.1.total_cmp(&b.1))?;
    (far > grubbs_critical(n, NAMED_BELOW)?).then_some(*tube)
}
