//! The solver: damped scoring steps on the rows, accepted on the true cost.
//!
//! Moré's trust region (J. J. Moré 1978, "The Levenberg-Marquardt algorithm: implementation and theory", in G. A. Watson (ed.),
//! Numerical Analysis, Springer, p. 105; from memory): columns scaled by the largest norm met, the step found from a
//! column-pivoted QR, the damping from the stacked system. With expected information in place of `J'J`
//! the steps are Fisher scoring. Runs as a solver of the `argmin` executor.

use super::evidence::{Evidence, Rows, Scale};
use argmin::core::{
    CostFunction, Error, Executor, IterState, KV, Problem, Solver, TerminationReason,
    TerminationStatus,
};
use nalgebra::{DMatrix, DVector};

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
/// The least ratio of a factor's diagonal at which the normal equations are good for half the digits.
const WELL_CONDITIONED: f64 = 1e-3;

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
    let solver = Scoring::new(pinned, theta.len());
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

/// One linear problem: the rows at a point, its free columns scaled, and its factors.
#[derive(Default)]
struct Step {
    rows: Rows,
    /// The largest norm met by each column.
    norms: Vec<f64>,
    /// The columns that may move.
    free: Vec<usize>,
    r: DMatrix<f64>,
    qty: DVector<f64>,
    /// The normal equations, where the factor comes from them.
    gram: Option<DMatrix<f64>>,
    /// `order[k]` is the place among `free` of the factor's column `k`.
    order: Vec<usize>,
}

impl Step {
    /// Rows and factors at `theta`; false where they are not finite or nothing may move.
    fn prepare<E: Evidence>(&mut self, evidence: &E, theta: &[f64], pinned: Option<usize>) -> bool {
        evidence.rows(theta, &mut self.rows);
        if !self.rows.finite() {
            return false;
        }
        self.norms.resize(theta.len(), 0.0);
        let (norms, downhill) = self.rows.column_sums();
        self.free.clear();
        for (j, t) in theta.iter().enumerate() {
            let l = evidence.limits(j);
            let held = (*t <= l.low && downhill[j] <= 0.0) || (*t >= l.high && downhill[j] >= 0.0);
            if Some(j) == pinned || held {
                continue;
            }
            self.norms[j] = self.norms[j].max(norms[j]);
            if self.norms[j] > 0.0 {
                self.free.push(j);
            }
        }
        if self.free.is_empty() {
            return false;
        }
        if evidence.scale() == Scale::Estimated || !self.factor_quickly() {
            self.factor();
        }
        true
    }

    /// The factor by Cholesky of the normal equations; false where they are too ill-conditioned for it.
    ///
    /// Steps are corrected by the next ones, so half the digits of a step are plenty. A row touches few columns
    /// (one dilution error of many), so this grows with what rows hold and not with rows times columns squared.
    fn factor_quickly(&mut self) -> bool {
        let p = self.free.len();
        let mut gram = DMatrix::zeros(p, p);
        let mut aty = DVector::zeros(p);
        let mut held: Vec<(usize, f64)> = Vec::with_capacity(p);
        let units: Vec<f64> = self.free.iter().map(|j| 1.0 / self.norms[*j]).collect();
        let lower = gram.as_mut_slice();
        for (i, y) in self.rows.y().iter().enumerate() {
            let row = self.rows.row(i);
            held.clear();
            for (k, (j, unit)) in self.free.iter().zip(&units).enumerate() {
                if row[*j] != 0.0 {
                    held.push((k, row[*j] * unit));
                }
            }
            for (n, (k, v)) in held.iter().enumerate() {
                aty[*k] += v * y;
                for (l, w) in &held[..=n] {
                    lower[l * p + k] += v * w;
                }
            }
        }
        let Some(cholesky) = gram.clone().cholesky() else {
            return false;
        };
        let l = cholesky.l();
        let d = l.diagonal();
        if d.min() < WELL_CONDITIONED * d.max() || !l.solve_lower_triangular_mut(&mut aty) {
            return false;
        }
        self.r = l.transpose();
        self.qty = aty;
        self.gram = Some(gram);
        self.order = (0..p).collect();
        true
    }

    /// The factor by column-pivoted QR of the rows.
    fn factor(&mut self) {
        let (m, p) = (self.rows.len(), self.free.len());
        // Rows of zeros below keep the factor square where there are fewer rows than columns.
        let mut a = DMatrix::zeros(m.max(p), p);
        for (j, mut column) in self.free.iter().zip(a.column_iter_mut()) {
            let unit = 1.0 / self.norms[*j];
            for (i, v) in column.iter_mut().take(m).enumerate() {
                *v = self.rows.row(i)[*j] * unit;
            }
        }
        let mut y = DVector::from_fn(m.max(p), |i, _| {
            self.rows.y().get(i).copied().unwrap_or(0.0)
        });
        let qr = a.col_piv_qr();
        qr.q_tr_mul(&mut y);
        self.gram = None;
        self.r = qr.r();
        self.qty = y.rows(0, p).into_owned();
        let mut order = DMatrix::from_fn(1, p, |_, k| k as f64);
        qr.p().permute_columns(&mut order);
        self.order = order.iter().map(|k| *k as usize).collect();
    }

    /// The number of columns that the factor can tell apart, relative to the first.
    fn rank(&self, tolerance: f64) -> usize {
        let first = self.r[(0, 0)].abs();
        (0..self.r.ncols())
            .take_while(|k| self.r[(*k, *k)].abs() > tolerance * first)
            .count()
    }

    /// The undamped scaled step, in the factor's order; columns beyond the rank stay put.
    fn undamped(&self) -> Option<DVector<f64>> {
        let p = self.r.ncols();
        let rank = self.rank(1e-13);
        if rank == 0 {
            return None;
        }
        let head = self.r.view((0, 0), (rank, rank)).into_owned();
        let x = head.solve_upper_triangular(&self.qty.rows(0, rank).into_owned())?;
        let mut d = DVector::zeros(p);
        d.rows_mut(0, rank).copy_from(&x);
        d.iter().all(|v| v.is_finite()).then_some(d)
    }

    /// The scaled step with damping `lambda`, and the factor of the stacked system.
    fn damped(&self, lambda: f64) -> Option<(DVector<f64>, DMatrix<f64>)> {
        let p = self.r.ncols();
        if let Some(gram) = &self.gram {
            let mut sum = gram.clone();
            (0..p).for_each(|k| sum[(k, k)] += lambda);
            let cholesky = sum.cholesky()?;
            let d = cholesky.solve(&self.r.tr_mul(&self.qty));
            let r = cholesky.l().transpose();
            return d.iter().all(|v| v.is_finite()).then_some((d, r));
        }
        let root = lambda.sqrt();
        let stacked = DMatrix::from_fn(2 * p, p, |i, k| {
            if i < p {
                self.r[(i, k)]
            } else if i - p == k {
                root
            } else {
                0.0
            }
        });
        let mut y = DVector::zeros(2 * p);
        y.rows_mut(0, p).copy_from(&self.qty);
        let qr = stacked.qr();
        qr.q_tr_mul(&mut y);
        let r = qr.unpack_r();
        let d = r.solve_upper_triangular(&y.rows(0, p).into_owned())?;
        d.iter().all(|v| v.is_finite()).then_some((d, r))
    }

    /// The scaled step that stays within `radius`: undamped if it does, else with the damping that
    /// brings it there within a tenth (Hebden's iteration on the norm).
    fn within(&self, radius: f64) -> Option<DVector<f64>> {
        let full = self.undamped();
        if let Some(d) = &full
            && self.rank(1e-13) == self.r.ncols()
            && d.norm() <= 1.1 * radius
        {
            return full;
        }
        let gradient = self.r.tr_mul(&self.qty).norm();
        if gradient == 0.0 {
            return None;
        }
        let (mut low, mut high) = (0.0, gradient / radius);
        let mut lambda = 1e-3 * high;
        let mut best = None;
        for _ in 0..20 {
            let (d, r) = self.damped(lambda)?;
            let norm = d.norm();
            let excess = norm - radius;
            if excess > 0.0 {
                low = f64::max(low, lambda)
            } else {
                high = f64::min(high, lambda)
            }
            let near = excess.abs() <= 0.1 * radius;
            let direction = d.unscale(norm.max(f64::MIN_POSITIVE));
            best = Some(d);
            if near || high - low <= 1e-12 * high {
                break;
            }
            let w = r.tr_solve_upper_triangular(&direction)?;
            let newton = lambda + excess / radius / w.norm_squared();
            lambda = if newton > low && newton < high {
                newton
            } else {
                (low.max(1e-6 * high) * high).sqrt()
            };
        }
        best
    }

    /// `theta` moved by a scaled step, kept within the limits.
    fn moved<E: Evidence>(&self, evidence: &E, theta: &[f64], d: &DVector<f64>) -> Vec<f64> {
        let mut next = theta.to_vec();
        for (k, place) in self.order.iter().enumerate() {
            let j = self.free[*place];
            let l = evidence.limits(j);
            next[j] = (next[j] + d[k] / self.norms[j]).clamp(l.low, l.high);
        }
        next
    }

    /// How far rounding of what the model expects can move a sum of squares: where residuals are small beside what is measured
    /// that is far more than rounding of the sum. Each is taken to be off by one unit of its terms `a_j theta_j`.
    fn noise(&self, scale: Scale, theta: &[f64]) -> f64 {
        if scale == Scale::Known {
            return 0.0;
        }
        let of_row = |(i, y): (usize, &f64)| {
            let terms = self.rows.row(i).iter().zip(theta);
            let unit = f64::EPSILON * terms.map(|(a, t)| (a * t).abs()).sum::<f64>();
            (2.0 * y.abs() + unit) * unit
        };
        self.rows.y().iter().enumerate().map(of_row).sum()
    }

    /// The drop of the cost that the rows promise for a move: `2 y'A d - |A d|^2`.
    fn promised(&self, from: &[f64], to: &[f64]) -> f64 {
        let mut drop = 0.0;
        for i in 0..self.rows.len() {
            let ad: f64 = self
                .rows
                .row(i)
                .iter()
                .zip(from.iter().zip(to))
                .map(|(a, (f, t))| a * (t - f))
                .sum();
            drop += ad * (2.0 * self.rows.y()[i] - ad);
        }
        drop
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
    fn new(pinned: Option<usize>, dim: usize) -> Self {
        let step = Step {
            norms: vec![0.0; dim],
            ..Step::default()
        };
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
    let mut step = Step {
        rows,
        norms: vec![0.0; dim],
        ..Step::default()
    };
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
    let scale = match evidence.scale() {
        Scale::Known => 1.0,
        Scale::Estimated => {
            solution.cost / (step.rows.len().checked_sub(p).filter(|df| *df > 0)? as f64)
        }
    };
    let mut out = DMatrix::zeros(dim, dim);
    for (k, a) in step.order.iter().enumerate() {
        for (l, b) in step.order.iter().enumerate() {
            let (i, j) = (step.free[*a], step.free[*b]);
            out[(i, j)] = scale * c[(k, l)] / (step.norms[i] * step.norms[j]);
        }
    }
    out.iter().all(|v| v.is_finite()).then_some(out)
}
