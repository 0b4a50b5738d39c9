//! From a titration and a law of binding to estimates with intervals.

use super::evidence::{Evidence, Limits};
use super::missing::{Missing, missing, nothing_yet};
use super::outcome::{Estimate, Fit, FittedTube, Outcome, ProfilePlace};
use super::profile::{End, ProfileCut, Profiles};
use super::rack::{Columns, RackEvidence, Sample};
use super::solver::{Ended, Solution, covariance, settle, solve};
use super::start::{Cold, cold};
use crate::assay::{Model, Titration};
use crate::binding::{Hill, Kind, OneClass, TwoClasses};
use nalgebra::DMatrix;

/// How many starts are followed; the best of them to the last digits.
const FOLLOWED: usize = 3;
/// How often a fit is taken up again from a better place met in a profile.
const MOST_RESTARTS: usize = 3;
/// The farthest an upper end is looked for, on the ln scale: a factor of 1e13, from any floor to any use.
const WIDEST: f64 = 30.0;

/// Fits one class of sites with its intervals; with `flags`, readings that are flagged are left out.
///
/// A pure function: the same titration gives the same bits. It always starts cold.
pub fn fit_rack(titration: &Titration, flags: bool) -> Outcome {
    fit_model(titration, flags, Model::OneClass)
}

/// Fits a law of binding with its intervals; with `flags`, readings that are flagged are left out.
///
/// A pure function, as [`fit_rack`].
pub fn fit_model(titration: &Titration, flags: bool, model: Model) -> Outcome {
    fn whole<I: Cold>(titration: &Titration, flags: bool) -> Outcome {
        match Fitting::<I>::new(titration, flags, &[]) {
            Ok(mut fitting) => fitting.outcome(),
            Err(outcome) => outcome,
        }
    }
    match model {
        Model::OneClass => whole::<OneClass>(titration, flags),
        Model::TwoClasses => whole::<TwoClasses>(titration, flags),
        Model::Hill => whole::<Hill>(titration, flags),
    }
}

/// A law of binding fitted to a rack, before anybody asked for an interval.
#[derive(Debug, Clone)]
pub struct Fitting<I> {
    evidence: RackEvidence<I>,
    best: Solution,
    /// Other solutions, which an interval may have to reach.
    others: Vec<Solution>,
    cov: DMatrix<f64>,
    cut: ProfileCut,
}

impl<I: Cold> Fitting<I> {
    /// Fits from cold starts and from `warm` ones (in the columns of this law).
    ///
    /// # Errors
    /// The outcome, where it is no fit.
    pub fn new(titration: &Titration, flags: bool, warm: &[Vec<f64>]) -> Result<Self, Outcome> {
        let Some(evidence) = RackEvidence::<I>::new(titration, flags) else {
            return Err(Outcome::TooEarly(nothing_yet::<I>(titration, flags)));
        };
        let missing = missing(titration, &evidence);
        if !missing.is_empty() {
            return Err(Outcome::TooEarly(missing));
        }
        let n = evidence.assayed();
        let confidence = titration.protocol.numbers.confidence;
        let cut = ProfileCut::new(n, evidence.mean_parameters(), confidence)
            .ok_or(Outcome::NoConvergence)?;
        let mut others = global(&evidence, warm);
        if others.is_empty() {
            return Err(Outcome::NoConvergence);
        }
        let best = others.remove(0);
        let cov = checked(&evidence, &best)?;
        Ok(Fitting {
            evidence,
            best,
            others,
            cov,
            cut,
        })
    }

    /// The evidence.
    pub fn evidence(&self) -> &RackEvidence<I> {
        &self.evidence
    }

    /// The solution.
    pub fn solution(&self) -> &Solution {
        &self.best
    }

    /// The fit without any interval.
    pub fn bare(&self) -> Fit {
        let ends = vec![[End::Unasked; 2]; self.evidence.reported().len()];
        self.described(&ends, Vec::new())
    }

    /// The fit with the intervals of all its parameters.
    pub fn outcome(&mut self) -> Outcome {
        self.with_intervals(false)
    }

    /// The fit with the intervals of its parameters as far as each has both ends: after the first that lacks one the others
    /// are not asked for.
    pub fn outcome_if_closed(&mut self) -> Outcome {
        self.with_intervals(true)
    }

    fn with_intervals(&mut self, only_closed: bool) -> Outcome {
        for _ in 0..=MOST_RESTARTS {
            match self.intervals(only_closed) {
                Ok((ends, profile)) => {
                    return Outcome::Fitted(Box::new(self.described(&ends, profile)));
                }
                Err(better) => {
                    self.best = in_order::<I>(solve(&self.evidence, &better, None));
                    match checked(&self.evidence, &self.best) {
                        Ok(cov) => self.cov = cov,
                        Err(outcome) => return outcome,
                    }
                }
            }
        }
        Outcome::NoConvergence
    }

    /// The interval of the first parameter alone.
    pub fn first_interval(&self) -> [End; 2] {
        let mut profiles = self.profiles();
        [false, true].map(|upward| match self.end(0, upward, &mut profiles) {
            Ok(end) => end.map(f64::exp),
            Err(_) => End::Failed,
        })
    }

    fn profiles(&self) -> Profiles<'_, RackEvidence<I>> {
        let mut profiles = Profiles::new(&self.evidence, &self.best, &self.cov, self.cut);
        // Where a constant runs to the top of its search the other parameters run with it.
        let constants: Vec<usize> = (0..I::DIM)
            .filter(|j| I::KINDS[*j] == Kind::Constant)
            .collect();
        for j in &constants {
            profiles = profiles.opened_by(*j);
        }
        if let [j, k] = constants[..] {
            profiles = profiles.opened_by_meeting(j, k);
        }
        self.others.iter().for_each(|o| profiles.meet(o));
        profiles
    }

    fn end(
        &self,
        j: usize,
        upward: bool,
        profiles: &mut Profiles<'_, RackEvidence<I>>,
    ) -> Result<End, Vec<f64>> {
        let limits = self.evidence.limits(j);
        let within = Limits {
            low: limits.low,
            high: limits.high.min(self.best.theta[j] + WIDEST),
        };
        let found = profiles.end(j, upward, within);
        found.better.map_or(Ok(found.end), Err)
    }

    /// The ends of all intervals (logarithms) and the profile of the first parameter, or a better place to fit from.
    #[allow(clippy::type_complexity)]
    fn intervals(&self, only_closed: bool) -> Result<(Vec<[End; 2]>, Vec<ProfilePlace>), Vec<f64>> {
        let mut profiles = self.profiles();
        let mut ends = Vec::new();
        let asked: Vec<usize> = self.evidence.reported().iter().map(|(_, j)| *j).collect();
        for j in asked.iter().copied() {
            let low = self.end(j, false, &mut profiles)?;
            let enough = |end: End| only_closed && end.value().is_none();
            let high = if enough(low) {
                End::Unasked
            } else {
                self.end(j, true, &mut profiles)?
            };
            ends.push([low, high]);
            if enough(low) || enough(high) {
                ends.resize(asked.len(), [End::Unasked; 2]);
                return Ok((ends, Vec::new()));
            }
        }
        // What later profiles met may lie beyond the ends of earlier ones.
        for (j, pair) in asked.iter().copied().zip(&mut ends) {
            for (found, upward) in pair.iter_mut().zip([false, true]) {
                if profiles.contradict(j, upward, *found) {
                    *found = self.end(j, upward, &mut profiles)?;
                }
            }
        }
        let profile = self.profile(&mut profiles, ends[0]);
        Ok((ends, profile))
    }

    /// The profile of the first parameter, somewhat beyond the ends of its interval.
    fn profile(
        &self,
        profiles: &mut Profiles<'_, RackEvidence<I>>,
        ends: [End; 2],
    ) -> Vec<ProfilePlace> {
        let at = self.best.theta[0];
        for end in ends {
            if let End::At(end) = end {
                profiles.look(0, &[0.35, 0.7, 1.2].map(|share| share * (end - at)));
            }
        }
        let mut places = profiles.trace(0);
        places.push((at, 0.0));
        places.sort_by(|a, b| a.0.total_cmp(&b.0));
        let place = |(ln, excess): (f64, f64)| ProfilePlace {
            value: ln.exp(),
            excess,
        };
        places.into_iter().map(place).collect()
    }

    fn described(&self, ends: &[[End; 2]], profile: Vec<ProfilePlace>) -> Fit {
        let theta = &self.best.theta;
        let reported = self.evidence.reported();
        let estimates = reported
            .into_iter()
            .zip(ends)
            .map(|((name, j), [low, high])| {
                let held = self.best.at_limit[j];
                let searched = I::KINDS.get(j).is_some_and(|k| *k != Kind::Sites);
                let value = self.evidence.value(theta, j);
                let shown = |ln: f64| (ln - theta[j]).exp() * value;
                Estimate {
                    name,
                    value,
                    se_ln: (!held).then(|| self.cov[(j, j)].sqrt()),
                    at_floor: !searched && held && theta[j] <= self.evidence.limits(j).low,
                    low: low.map(shown),
                    high: high.map(shown),
                }
            });
        let tubes_used = self.evidence.assayed();
        let minus2lnl = self.evidence.minus2lnl(theta);
        let fitted = |s: &Sample, used: bool| {
            let of = self.evidence.expected(s, theta);
            FittedTube {
                tube: s.tube,
                role: s.role,
                level: s.level,
                counts: s.counts,
                expected: of.mean,
                variance: of.variance,
                per_nm: of.per_nm,
                taken: of.taken,
                used,
            }
        };
        let used = self.evidence.samples().iter().map(|s| fitted(s, true));
        let flagged = self.evidence.left_out().iter().map(|s| fitted(s, false));
        Fit {
            model: I::MODEL,
            law: I::from_ln(theta).law(),
            minus2lnl,
            prior_term: self.evidence.prior_term(theta),
            aicc: aicc(
                minus2lnl,
                self.evidence.parameters(),
                self.evidence.observations(),
            ),
            tubes_used,
            mean_parameters: self.evidence.mean_parameters(),
            of_law: I::DIM,
            cv: theta[Columns::of::<I>().cv()].exp(),
            theta: theta.clone(),
            cov: self.cov.clone(),
            estimates: estimates.collect(),
            profile,
            cut: self.cut.cut(),
            tubes: used.chain(flagged).collect(),
        }
    }
}

/// The covariance of a solution that is one.
fn checked<I: Cold>(evidence: &RackEvidence<I>, best: &Solution) -> Result<DMatrix<f64>, Outcome> {
    if best.ended != Ended::Converged {
        return Err(Outcome::NoConvergence);
    }
    let empty = (0..I::DIM).any(|j| I::KINDS[j] == Kind::Sites && best.at_limit[j]);
    if I::MODEL == Model::TwoClasses && empty {
        return Err(Outcome::TooEarly(vec![Missing::SecondClass]));
    }
    covariance(evidence, best)
        .ok_or_else(|| Outcome::TooEarly(vec![Missing::NotTellingApart(I::MODEL)]))
}

/// The solutions from the best starts, best first.
fn global<I: Cold>(evidence: &RackEvidence<I>, warm: &[Vec<f64>]) -> Vec<Solution> {
    let mut starts: Vec<(f64, Vec<f64>)> = cold(evidence)
        .into_iter()
        .map(|theta| (evidence.cost(&theta), theta))
        .filter(|(cost, _)| cost.is_finite())
        .collect();
    starts.sort_by(|a, b| a.0.total_cmp(&b.0));
    let mut settled: Vec<Solution> = starts
        .iter()
        .take(FOLLOWED)
        .map(|(_, theta)| theta)
        .chain(warm)
        .map(|theta| in_order::<I>(settle(evidence, theta)))
        .collect();
    settled.sort_by(|a, b| {
        let failed = |s: &Solution| s.ended != Ended::Converged;
        failed(a).cmp(&failed(b)).then(a.cost.total_cmp(&b.cost))
    });
    // One class is what a rack is asked about first, and gets all the steps there are.
    let one = I::MODEL == Model::OneClass;
    if let Some(best) = settled
        .first_mut()
        .filter(|s| one || s.ended == Ended::Converged)
    {
        *best = in_order::<I>(solve(evidence, &best.theta, None));
    }
    settled
}

/// A solution with its parameters in the order they are shown in.
fn in_order<I: Cold>(mut s: Solution) -> Solution {
    if I::out_of_order(&s.theta) {
        for (j, k) in I::SWAPS {
            s.theta.swap(*j, *k);
            s.at_limit.swap(*j, *k);
        }
    }
    s
}

/// `-2 ln L + 2 k + 2 k (k + 1) / (n - k - 1)`.
fn aicc(minus2lnl: f64, k: usize, n: usize) -> Option<f64> {
    let rest = n.checked_sub(k + 1).filter(|r| *r > 0)? as f64;
    let k = k as f64;
    Some(minus2lnl + 2.0 * k + 2.0 * k * (k + 1.0) / rest)
}
