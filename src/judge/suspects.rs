//! Tubes that do not fit with the others. The program proposes, a person decides.

use super::groups::{Group, groups};
use crate::assay::{LevelNo, Model, Role, Titration, TubeNo};
use crate::binding::{Hill, OneClass, TwoClasses};
use crate::fit::{
    Cold, Ended, Evidence, Fit, Parts, RackEvidence, RowOf, Rows, Solution, deleted, f_upper_tail,
    grubbs_critical, outlier_p,
};

/// The chance, all tubes taken together, below which a tube or a group is named.
const NAMED_BELOW: f64 = 0.05;
/// Tubes whose studentised residual in the fit with them is smaller are not refitted: without them they
/// would be about as far, and none is named below three.
const WORTH_A_REFIT: f64 = 1.5;
/// The least replicates for Grubbs' test: below five it has hardly any power.
const GRUBBS_FROM: usize = 5;

/// A tube that does not fit with the others.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Suspect {
    /// Which.
    pub tube: TubeNo,
    /// Its distance from what a fit without it expects, in standard deviations of the difference.
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
    /// Their variance over that of all other tubes, as the model has it.
    pub f: f64,
    /// The chance of as large a ratio in any group.
    pub p: f64,
    /// The one that stands out by Grubbs' test, from five replicates on.
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
/// Every tube is held against a refit without it, since an outlier inflates the CV that it is judged by: Student's t on `n - 1 - p`
/// degrees of freedom, times the number of tubes. Replicates are held against the variance of the other tubes (F test, times
/// the number of groups), and from five on among themselves (Grubbs 1969, Technometrics 11:1; from memory).
pub fn suspects(titration: &Titration, flags: bool, fit: &Fit) -> Suspects {
    let tubes = match fit.model {
        Model::OneClass => tubes::<OneClass>(titration, flags, fit),
        Model::TwoClasses => tubes::<TwoClasses>(titration, flags, fit),
        Model::Hill => tubes::<Hill>(titration, flags, fit),
    };
    Suspects {
        tubes,
        groups: disagreements(fit),
    }
}

fn tubes<I: Cold>(titration: &Titration, flags: bool, fit: &Fit) -> Vec<Suspect> {
    let Some(evidence) = RackEvidence::<I>::new(titration, flags) else {
        return Vec::new();
    };
    let n = evidence.parts();
    let df = n as f64 - 1.0 - fit.mean_parameters as f64;
    let full = Solution {
        theta: fit.theta.clone(),
        cost: fit.cost(),
        ended: Ended::Converged,
        at_limit: vec![false; fit.theta.len()],
    };
    let mut found: Vec<Suspect> = studentised(&evidence, fit)
        .into_iter()
        .filter(|(_, r)| r.abs() >= WORTH_A_REFIT)
        .filter_map(|(i, _)| {
            let residual = deleted(&evidence, &full, i)?.residual;
            Some(Suspect {
                tube: evidence.samples()[i].tube,
                residual,
                p: outlier_p(residual, df, n),
            })
        })
        .filter(|s| s.p < NAMED_BELOW)
        .collect();
    found.sort_by(|a, b| a.p.total_cmp(&b.p).then(a.tube.cmp(&b.tube)));
    found
}

/// The residual of every tube over its standard deviation in a fit that it is part of, `sqrt(1 - h)` with its leverage `h`.
fn studentised<I: Cold>(evidence: &RackEvidence<I>, fit: &Fit) -> Vec<(usize, f64)> {
    let mut rows = Rows::default();
    evidence.rows(&fit.theta, &mut rows);
    let mut found = Vec::with_capacity(evidence.parts());
    for (at, of) in rows.of().iter().enumerate() {
        let RowOf::Mean(i) = of else { continue };
        let row = rows.row(at);
        let held: Vec<(usize, f64)> = row
            .iter()
            .copied()
            .enumerate()
            .filter(|(_, v)| *v != 0.0)
            .collect();
        let leverage: f64 = held
            .iter()
            .flat_map(|(j, v)| held.iter().map(move |(k, w)| v * w * fit.cov[(*j, *k)]))
            .sum();
        let left = (1.0 - leverage).max(1e-6);
        found.push((*i, rows.y()[at] / left.sqrt()));
    }
    found
}

/// Groups of replicates that scatter more than the others.
fn disagreements(fit: &Fit) -> Vec<Disagreement> {
    let all = groups(fit);
    let several: Vec<&Group> = all.iter().filter(|g| g.residuals.len() > 1).collect();
    let used = fit.tubes.iter().filter(|t| t.used);
    let total: f64 = used.clone().map(|t| t.residual().powi(2)).sum();
    let rest = used.count() as f64 - fit.mean_parameters as f64;
    let mut found: Vec<Disagreement> = several
        .iter()
        .filter_map(|g| {
            let df = g.residuals.len() as f64 - 1.0;
            let within = g.about_mean();
            let others = (total - within) / (rest - df);
            let f = within / df / others;
            let p = f_upper_tail(f, [df, rest - df])? * several.len() as f64;
            Some(Disagreement {
                level: g.level,
                role: g.role,
                tubes: g.tubes.clone(),
                f,
                p: p.min(1.0),
                one: outlier(g),
            })
        })
        .filter(|d| d.p < NAMED_BELOW || d.one.is_some())
        .collect();
    found.sort_by(|a, b| a.p.total_cmp(&b.p).then(a.level.cmp(&b.level)));
    found
}

/// The replicate that Grubbs' test sets apart.
fn outlier(g: &Group) -> Option<TubeNo> {
    let n = g.residuals.len();
    if n < GRUBBS_FROM {
        return None;
    }
    let mean = g.mean();
    let sd = (g.about_mean() / (n as f64 - 1.0)).sqrt();
    let (tube, far) = g
        .tubes
        .iter()
        .zip(g.residuals.iter().map(|r| (r - mean).abs() / sd))
        .max_by(|a, b| a.1.total_cmp(&b.1))?;
    (far > grubbs_critical(n, NAMED_BELOW)?).then_some(*tube)
}
