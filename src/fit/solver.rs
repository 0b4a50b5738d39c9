//! The solver: damped scoring steps on the rows, accepted on the true cost.
//!
//! Moré's trust region (J. J. Moré 1978, "The Levenberg-Marquardt algorithm: implementation and theory", in G. A. Watson (ed.),
//! Numerical Analysis, Springer, p. 105; from memory): columns scaled by the largest norm met, the step found from a
//! column-pivoted QR, the damping from the stacked system. With expected information in place of `J'J`
//! the steps are Fisher scoring. Runs as a solver of the `argmin` executor.

mod normal;
mod orthogonal;
mod step;

use super::evidence::{Evidence, Rows, Scale};
use argmin::core::{
    Error, Executor, IterState, KV, Problem, Solver, TerminationReason, TerminationStatus,
};
use nalgebra::DMatrix;
use orthogonal::Orthogonal;
use step::Step;

/// How a solution ended.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Ended {
    /// Steps and gradient are as small as rounding allows.
    Converged,
    /// No step lowers the cost and the gradient is not small.
    Stalled,
    /// The steps allowed were used up.
    OutOfSteps,
    /// The start has no finite cost.
    NoStart,
}

/// Where the solver came to rest.
#[derive(Debug, Clone, PartialEq)]
pub struct Solution {
    /// The parameters.
    pub theta: Vec<f64>,
    /// The cost there.
    pub cost: f64,
    /// How it ended.
    pub ended: Ended,
    /// Which parameters rest on a limit.
    pub at_limit: Vec<bool>,
}

/// The executor counts steps; the point is the solver's, which keeps its memory.
type State = IterState<(), (), (), (), (), f64>;

/// Curved valleys take hundreds of steps (NIST's MGH17 from its first start: 799).
const MOST_STEPS: u64 = 2000;
const MOST_POLISH: usize = 60;

/// Minimises the cost of `evidence` from `start`; parameter `pinned`, if any, stays where it is.
///
/// `start` is taken inside the limits first. The same evidence and start give the same bits.
pub fn solve<E: Evidence>(evidence: &E, start: &[f64], pinned: Option<usize>) -> Solution {
    // A refit with a parameter pinned is wanted for its cost alone, which more digits of the others no longer change.
    let care = if pinned.is_some() {
        Care::Cost
    } else {
        Care::Digits
    };
    solved(evidence, start, pinned, care)
}

/// The same to where the drop still promised is next to nothing (1e-10 of the cost): enough to tell solutions apart, and to hold
/// an observation against the others.
pub fn settle<E: Evidence>(evidence: &E, start: &[f64]) -> Solution {
    solved(evidence, start, None, Care::Roughly)
}

/// How far a solution is followed.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Care {
    /// To the last digits of the parameters.
    Digits,
    /// To the last digits of the cost.
    Cost,
    /// To where the drop still promised is next to nothing.
    Roughly,
}

impl Care {
    /// The steps allowed. A start that has not settled in a hundred crawls along a ridge that the readings do not tell the
    /// ends of.
    fn steps(self) -> u64 {
        match self {
            Care::Digits => MOST_STEPS,
            Care::Cost => 500,
            Care::Roughly => 120,
        }
    }

    /// How many times larger a drop of the cost may be ignored than rounding would have it.
    fn ignored(self) -> f64 {
        match self {
            Care::Digits => 1.0,
            Care::Cost => 100.0,
            Care::Roughly => 1000.0,
        }
    }
}

fn solved<E: Evidence>(evidence: &E, start: &[f64], pinned: Option<usize>, care: Care) -> Solution {
    let mut theta = start.to_vec();
    for (j, t) in theta.iter_mut().enumerate() {
        let l = evidence.limits(j);
        *t = t.clamp(l.low, l.high);
    }
    let mut step = Step::default();
    let cost = step.look(evidence, &theta);
    if !cost.is_finite() {
        let at_limit = vec![false; theta.len()];
        return Solution {
            theta,
            cost,
            ended: Ended::NoStart,
            at_limit,
        };
    }
    step.advance();
    let mut at = Scoring {
        evidence,
        pinned,
        care,
        next: Vec::with_capacity(theta.len()),
        theta,
        cost,
        step,
        ready: false,
        radius: 0.0,
        ended: None,
    };
    at.run();
    if care == Care::Digits || at.ended != Some(Ended::Converged) {
        at.polish();
    }
    let at_limit = (0..at.theta.len())
        .map(|j| {
            let l = evidence.limits(j);
            Some(j) != pinned && (at.theta[j] <= l.low || at.theta[j] >= l.high)
        })
        .collect();
    Solution {
        theta: at.theta,
        cost: at.cost,
        ended: at.ended.unwrap_or(Ended::OutOfSteps),
        at_limit,
    }
}

/// How much a cost may rise by rounding alone.
fn rounding(scale: Scale, cost: f64) -> f64 {
    match scale {
        Scale::Known => 1e-12 * (1.0 + cost.abs()),
        Scale::Estimated => 1e-12 * cost,
    }
}

/// A promised drop that is nothing to the person: a solution that can hope for no more has converged,
/// however its last damped steps went.
fn still(scale: Scale, cost: f64) -> f64 {
    match scale {
        Scale::Known => 1e-10 * (1.0 + cost.abs()),
        Scale::Estimated => 1e-10 * cost,
    }
}

/// The solver's own state between steps.
struct Scoring<'e, E> {
    evidence: &'e E,
    pinned: Option<usize>,
    care: Care,
    theta: Vec<f64>,
    cost: f64,
    next: Vec<f64>,
    /// Holds the rows at `theta`.
    step: Step,
    /// Whether they are factored.
    ready: bool,
    radius: f64,
    ended: Option<Ended>,
}

impl<E: Evidence> Scoring<'_, E> {
    /// Damped steps until they end.
    fn run(&mut self) {
        let most = self.care.steps();
        let run = Executor::new((), Running(self))
            .configure(|s: State| s.max_iters(most))
            .timer(false)
            .ctrlc(false)
            .run();
        if run.is_err() {
            self.ended = Some(Ended::Stalled);
        }
    }

    /// One damped step.
    fn damped_step(&mut self) {
        let fresh = !self.ready;
        if fresh && !self.step.prepare(self.evidence, &self.theta, self.pinned) {
            self.ended = Some(if self.step.finite() {
                Ended::Converged
            } else {
                Ended::Stalled
            });
            return;
        }
        self.ready = true;
        if self.radius == 0.0 {
            let norm = self.step.scaled_norm(&self.theta);
            self.radius = if norm > 0.0 { 10.0 * norm } else { 10.0 };
        }
        if !self.step.within(self.radius) {
            // Without a gradient there is nowhere to go; with one, the factor failed.
            self.ended = Some(if self.step.gradient() == 0.0 {
                Ended::Converged
            } else {
                Ended::Stalled
            });
            return;
        }
        self.step.moved(self.evidence, &self.theta, &mut self.next);
        let scale = self.evidence.scale();
        let promised = self.step.promised(&self.theta, &self.next);
        // A drop below what rounding shows is the end of what the cost can tell; polishing follows.
        let wanted = self.care.ignored();
        let tiny = match scale {
            Scale::Known => 1e-13 * wanted * (1.0 + self.cost.abs()),
            Scale::Estimated => 1e-14 * wanted * self.cost,
        };
        if fresh && promised.abs() <= tiny {
            self.ended = Some(Ended::Converged);
            return;
        }
        let next_cost = self.step.look(self.evidence, &self.next);
        let real = self.cost - next_cost;
        let slack = rounding(scale, self.cost);
        let size = self.step.size();
        let gain = if next_cost.is_finite() && promised > 0.0 {
            real / promised
        } else {
            -1.0
        };
        if gain < 0.25 {
            let factor = if gain >= 0.0 { 0.5 } else { 0.25 };
            self.radius = factor * self.radius.min(size);
        } else if gain > 0.75 {
            self.radius = self.radius.max(2.0 * size);
        }
        let small_step = size <= 1e-13 * self.step.scaled_norm(&self.theta);
        let accepted = next_cost.is_finite() && real >= -slack && (promised > 0.0 || real > 0.0);
        if promised.abs() <= tiny && real.abs() <= slack {
            self.ended = Some(Ended::Converged);
        } else if !accepted && (small_step || self.radius <= 1e-300) {
            self.ended = Some(Ended::Stalled);
        }
        if accepted {
            self.advance(next_cost);
        }
    }

    /// Moves to the point last looked at.
    fn advance(&mut self, cost: f64) {
        std::mem::swap(&mut self.theta, &mut self.next);
        self.step.advance();
        self.cost = cost;
        self.ready = false;
    }

    /// Undamped steps while the scaled step shrinks: the last digits, which the cost can no longer tell.
    fn polish(&mut self) {
        let scale = self.evidence.scale();
        let mut last = f64::INFINITY;
        self.step.forget();
        for _ in 0..MOST_POLISH {
            if !self.step.prepare(self.evidence, &self.theta, self.pinned) || !self.step.undamped()
            {
                break;
            }
            let size = self.step.size();
            if size == 0.0 || size >= 0.9 * last {
                break;
            }
            self.step.moved(self.evidence, &self.theta, &mut self.next);
            let noise = self.step.noise(scale, &self.theta);
            let promised = self.step.promised(&self.theta, &self.next);
            if promised <= still(scale, self.cost).max(noise) {
                self.ended = Some(Ended::Converged);
            }
            let next_cost = self.step.look(self.evidence, &self.next);
            let rise = next_cost - self.cost;
            if rise.is_nan() || rise > rounding(scale, self.cost).max(noise) {
                break;
            }
            self.advance(next_cost);
            last = size;
        }
    }
}

/// Damped steps as a solver of the executor.
struct Running<'s, 'e, E>(&'s mut Scoring<'e, E>);

impl<E: Evidence> Solver<(), State> for Running<'_, '_, E> {
    fn name(&self) -> &str {
        "damped scoring"
    }

    fn next_iter(
        &mut self,
        _problem: &mut Problem<()>,
        state: State,
    ) -> Result<(State, Option<KV>), Error> {
        self.0.damped_step();
        Ok((state, None))
    }

    fn terminate(&mut self, _state: &State) -> TerminationStatus {
        match self.0.ended {
            Some(_) => TerminationStatus::Terminated(TerminationReason::SolverConverged),
            None => TerminationStatus::NotTerminated,
        }
    }
}

/// The covariance of the parameters from the expected information at a solution, with rows and columns
/// of zeros for parameters that rest on a limit; `None` where the scaled rows are not of full rank (1e-10).
///
/// With the scale estimated it is multiplied by `RSS / (n - p)`, `n` rows and `p` parameters that move.
pub fn covariance<E: Evidence>(evidence: &E, solution: &Solution) -> Option<DMatrix<f64>> {
    let dim = solution.theta.len();
    let mut rows = Rows::default();
    evidence.rows(&solution.theta, &mut rows);
    if !rows.finite() {
        return None;
    }
    let (norms, _) = rows.column_sums();
    let free: Vec<usize> = (0..dim).filter(|j| !solution.at_limit[*j]).collect();
    if free.iter().any(|j| norms[*j] == 0.0) {
        return None;
    }
    if free.is_empty() {
        return Some(DMatrix::zeros(dim, dim));
    }
    let mut factor = Orthogonal::default();
    factor.factor(&rows, &free, &norms);
    let inverse = factor.inverse(1e-10)?;
    let scale = row_variance(evidence, &rows, solution)?;
    let mut out = DMatrix::zeros(dim, dim);
    for (k, i) in free.iter().enumerate() {
        for (l, j) in free.iter().enumerate() {
            out[(*i, *j)] = scale * inverse[(k, l)] / (norms[*i] * norms[*j]);
        }
    }
    out.iter().all(|v| v.is_finite()).then_some(out)
}

/// The variance of the rows at a solution: one where it is known, else `RSS / (n - p)`, `None` without degrees of freedom.
pub(super) fn row_variance<E: Evidence>(
    evidence: &E,
    rows: &Rows,
    solution: &Solution,
) -> Option<f64> {
    match evidence.scale() {
        Scale::Known => Some(1.0),
        Scale::Estimated => {
            let moving = solution.at_limit.iter().filter(|l| !**l).count();
            let df = rows.len().checked_sub(moving).filter(|df| *df > 0)?;
            Some(solution.cost / df as f64)
        }
    }
}
