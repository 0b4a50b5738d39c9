//! The solver: damped scoring steps on the rows, accepted on the true cost.
//!
//! Moré's trust region (J. J. Moré 1978, "The Levenberg-Marquardt algorithm: implementation and theory", in G. A. Watson (ed.),
//! Numerical Analysis, Springer, p. 105; from memory): columns scaled by the largest norm met, the step found from a
//! column-pivoted QR, the damping from the stacked system. With expected information in place of `J'J`
//! the steps are Fisher scoring. Runs as a solver of the `argmin` executor.

mod step;

use super::evidence::{Evidence, Rows, Scale};
use argmin::core::{
    CostFunction, Error, Executor, IterState, KV, Problem, Solver, TerminationReason,
    TerminationStatus,
};
use nalgebra::DMatrix;
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

type State = IterState<Vec<f64>, (), (), (), (), f64>;

/// Evidence as a problem of the executor.
struct Posed<'e, E>(&'e E);

impl<E: Evidence> CostFunction for Posed<'_, E> {
    type Param = Vec<f64>;
    type Output = f64;

    fn cost(&self, theta: &Vec<f64>) -> Result<f64, Error> {
        Ok(self.0.cost(theta))
    }
}

/// Curved valleys take hundreds of steps (NIST's MGH17 from its first start: 799).
const MOST_STEPS: u64 = 2000;
const MOST_POLISH: usize = 60;

/// Minimises the cost of `evidence` from `start`; parameter `pinned`, if any, stays where it is.
///
/// `start` is taken inside the limits first. The same evidence and start give the same bits.
pub fn solve<E: Evidence>(evidence: &E, start: &[f64], pinned: Option<usize>) -> Solution {
    let mut theta = start.to_vec();
    for (j, t) in theta.iter_mut().enumerate() {
        let l = evidence.limits(j);
        *t = t.clamp(l.low, l.high);
    }
    let cost = evidence.cost(&theta);
    if !cost.is_finite() {
        let at_limit = vec![false; theta.len()];
        return Solution {
            theta,
            cost,
            ended: Ended::NoStart,
            at_limit,
        };
    }
    let fallback = Solution {
        theta: theta.clone(),
        cost,
        ended: Ended::Stalled,
        at_limit: vec![false; theta.len()],
    };
    let solver = Scoring::new(pinned);
    let run = Executor::new(Posed(evidence), solver)
        .configure(|s: State| s.param(theta).cost(cost).max_iters(MOST_STEPS))
        .timer(false)
        .ctrlc(false)
        .run();
    let Ok(done) = run else { return fallback };
    // The state's best parameters are replaced only by strictly lower costs, which would lose the polishing.
    let Some(theta) = done.state.param.clone() else {
        return fallback;
    };
    let ended = done.solver.ended.unwrap_or(Ended::OutOfSteps);
    // A refit with a parameter pinned is wanted for its cost, which more digits of the others no longer change.
    let steps = if pinned.is_some() && ended == Ended::Converged {
        0
    } else {
        MOST_POLISH
    };
    polished(evidence, theta, done.state.cost, ended, pinned, steps)
}

/// Undamped steps while the scaled step shrinks: the last digits, which the cost can no longer tell.
fn polished<E: Evidence>(
    evidence: &E,
    mut theta: Vec<f64>,
    mut cost: f64,
    mut ended: Ended,
    pinned: Option<usize>,
    steps: usize,
) -> Solution {
    let mut step = Step::default();
    let mut last = f64::INFINITY;
    for _ in 0..steps {
        if !step.prepare(evidence, &theta, pinned) {
            break;
        }
        let Some(d) = step.undamped() else { break };
        let norm = d.norm();
        if norm == 0.0 || norm >= 0.9 * last {
            break;
        }
        let next = step.moved(evidence, &theta, &d);
        let noise = step.noise(evidence.scale(), &theta);
        if step.promised(&theta, &next) <= still(evidence.scale(), cost).max(noise) {
            ended = Ended::Converged;
        }
        let next_cost = evidence.cost(&next);
        let rise = next_cost - cost;
        if rise.is_nan() || rise > rounding(evidence.scale(), cost).max(noise) {
            break;
        }
        theta = next;
        cost = next_cost;
        last = norm;
    }
    let at_limit = (0..theta.len())
        .map(|j| {
            let l = evidence.limits(j);
            Some(j) != pinned && (theta[j] <= l.low || theta[j] >= l.high)
        })
        .collect();
    Solution {
        theta,
        cost,
        ended,
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
struct Scoring {
    pinned: Option<usize>,
    step: Step,
    ready: bool,
    radius: f64,
    ended: Option<Ended>,
}

impl Scoring {
    fn new(pinned: Option<usize>) -> Self {
        let step = Step::default();
        Scoring {
            pinned,
            step,
            ready: false,
            radius: 0.0,
            ended: None,
        }
    }

    fn scaled_norm(&self, theta: &[f64]) -> f64 {
        theta
            .iter()
            .zip(&self.step.norms)
            .map(|(t, n)| (t * n).powi(2))
            .sum::<f64>()
            .sqrt()
    }
}

impl<E: Evidence> Solver<Posed<'_, E>, State> for Scoring {
    fn name(&self) -> &str {
        "damped scoring"
    }

    fn next_iter(
        &mut self,
        problem: &mut Problem<Posed<'_, E>>,
        mut state: State,
    ) -> Result<(State, Option<KV>), Error> {
        let Some(theta) = state.take_param() else {
            self.ended = Some(Ended::Stalled);
            return Ok((state, None));
        };
        let cost = state.cost;
        let mut fresh = false;
        if !self.ready {
            let (step, pinned) = (&mut self.step, self.pinned);
            let moving =
                problem.problem("rows_count", |p| Ok(step.prepare(p.0, &theta, pinned)))?;
            if !moving {
                self.ended = Some(if self.step.rows.finite() {
                    Ended::Converged
                } else {
                    Ended::Stalled
                });
                return Ok((state.param(theta).cost(cost), None));
            }
            self.ready = true;
            fresh = true;
        }
        if self.radius == 0.0 {
            let norm = self.scaled_norm(&theta);
            self.radius = if norm > 0.0 { 10.0 * norm } else { 10.0 };
        }
        let Some(d) = self.step.within(self.radius) else {
            // Without a gradient there is nowhere to go; with one, the factor failed.
            let flat = self.step.r.tr_mul(&self.step.qty).norm() == 0.0;
            self.ended = Some(if flat {
                Ended::Converged
            } else {
                Ended::Stalled
            });
            return Ok((state.param(theta).cost(cost), None));
        };
        let (next, scale) = problem.problem("move_count", |p| {
            Ok((self.step.moved(p.0, &theta, &d), p.0.scale()))
        })?;
        let promised = self.step.promised(&theta, &next);
        let next_cost = problem.problem("cost_count", |p| p.cost(&next))?;
        let real = cost - next_cost;
        let slack = rounding(scale, cost);
        let size = d.norm();
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
        // A drop below what rounding shows is the end of what the cost can tell; polishing follows.
        // A refit with a parameter pinned is wanted for its cost alone.
        let wanted = if self.pinned.is_some() { 100.0 } else { 1.0 };
        let tiny = match scale {
            Scale::Known => 1e-13 * wanted * (1.0 + cost.abs()),
            Scale::Estimated => 1e-14 * wanted * cost,
        };
        let small_step = size <= 1e-13 * self.scaled_norm(&theta);
        let accepted = next_cost.is_finite() && real >= -slack && (promised > 0.0 || real > 0.0);
        if promised.abs() <= tiny && (fresh || real.abs() <= slack) {
            self.ended = Some(Ended::Converged);
        } else if !accepted && (small_step || self.radius <= 1e-300) {
            self.ended = Some(Ended::Stalled);
        }
        if accepted {
            self.ready = false;
            Ok((state.param(next).cost(next_cost), None))
        } else {
            Ok((state.param(theta).cost(cost), None))
        }
    }

    fn terminate(&mut self, _state: &State) -> TerminationStatus {
        match self.ended {
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
    let mut step = Step::default();
    step.rows = rows;
    step.norms = vec![0.0; dim];
    for j in (0..dim).filter(|j| !solution.at_limit[*j]) {
        step.norms[j] = (0..step.rows.len())
            .map(|i| step.rows.row(i)[j].powi(2))
            .sum::<f64>()
            .sqrt();
        if step.norms[j] == 0.0 {
            return None;
        }
        step.free.push(j);
    }
    if step.free.is_empty() {
        return Some(DMatrix::zeros(dim, dim));
    }
    step.factor();
    let p = step.free.len();
    if step.rank(1e-10) < p {
        return None;
    }
    let inverse = step.r.solve_upper_triangular(&DMatrix::identity(p, p))?;
    let c = &inverse * inverse.transpose();
    let scale = row_variance(evidence, &step.rows, solution)?;
    let mut out = DMatrix::zeros(dim, dim);
    for (k, a) in step.order.iter().enumerate() {
        for (l, b) in step.order.iter().enumerate() {
            let (i, j) = (step.free[*a], step.free[*b]);
            out[(i, j)] = scale * c[(k, l)] / (step.norms[i] * step.norms[j]);
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
