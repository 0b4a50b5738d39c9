//! One linear problem of the solver: the rows at a point, their factor, and the steps that come of it.

use super::normal::{Normal, Sums};
use super::orthogonal::Orthogonal;
use crate::fit::evidence::{Evidence, Rows, Scale};

/// A factor of the scaled columns that may move; steps are in the order of these columns.
pub(super) trait Factor {
    /// The step without damping; columns that are not told apart stay put. False where there is none.
    fn undamped(&mut self, d: &mut Vec<f64>) -> bool;
    /// Whether every column is told apart.
    fn full_rank(&self) -> bool;
    /// The norm of the scaled `A'y`.
    fn gradient(&self) -> f64;
    /// The step with damping `lambda`; false where there is none.
    fn damped(&mut self, lambda: f64, d: &mut Vec<f64>) -> bool;
    /// `u' (A'A + lambda)^-1 u` for a direction, with the last damping.
    fn give(&mut self, direction: &[f64]) -> Option<f64>;
}

/// The rows at a point and the next, the free columns, and the factors. All buffers are kept from step to step.
#[derive(Default)]
pub(super) struct Step {
    rows: Rows,
    /// The rows where a step leads.
    ahead: Rows,
    /// The largest norm met by each column.
    norms: Vec<f64>,
    /// The columns that may move.
    free: Vec<usize>,
    sums: Sums,
    normal: Normal,
    orthogonal: Orthogonal,
    /// Whether the sums are those of the rows, and whether the factor is that of the normal equations.
    summed: bool,
    quick: bool,
    /// The step in scaled columns, and its direction.
    d: Vec<f64>,
    direction: Vec<f64>,
}

impl Step {
    /// The cost at `theta`, with the rows there kept for [`Step::advance`].
    pub(super) fn look<E: Evidence>(&mut self, evidence: &E, theta: &[f64]) -> f64 {
        evidence.cost_and_rows(theta, &mut self.ahead)
    }

    /// Takes the point last looked at for the one to step from.
    pub(super) fn advance(&mut self) {
        std::mem::swap(&mut self.rows, &mut self.ahead);
    }

    /// Forgets the norms met.
    pub(super) fn forget(&mut self) {
        self.norms.clear();
    }

    /// Whether every number of the rows is finite.
    pub(super) fn finite(&self) -> bool {
        self.rows.finite()
    }

    /// Factors at `theta`; false where the rows are not finite or nothing may move.
    pub(super) fn prepare<E: Evidence>(
        &mut self,
        evidence: &E,
        theta: &[f64],
        pinned: Option<usize>,
    ) -> bool {
        self.summed = evidence.scale() == Scale::Known && self.sums.take(&self.rows);
        if !self.summed && !self.rows.finite() {
            return false;
        }
        let by_rows = (!self.summed).then(|| self.rows.column_sums());
        self.norms.resize(theta.len(), 0.0);
        self.free.clear();
        for (j, t) in theta.iter().enumerate() {
            let l = evidence.limits(j);
            let (norm, downhill) = match &by_rows {
                Some((norms, downhill)) => (norms[j], downhill[j]),
                None => (self.sums.norm(j), self.sums.right[j]),
            };
            let held = (*t <= l.low && downhill <= 0.0) || (*t >= l.high && downhill >= 0.0);
            if Some(j) == pinned || held {
                continue;
            }
            self.norms[j] = self.norms[j].max(norm);
            if self.norms[j] > 0.0 {
                self.free.push(j);
            }
        }
        if self.free.is_empty() {
            return false;
        }
        self.quick = self.summed && self.normal.factor(&self.sums, &self.free, &self.norms);
        if !self.quick {
            self.orthogonal.factor(&self.rows, &self.free, &self.norms);
        }
        true
    }

    fn parts(&mut self) -> (&mut dyn Factor, &mut Vec<f64>, &mut Vec<f64>) {
        let factor: &mut dyn Factor = if self.quick {
            &mut self.normal
        } else {
            &mut self.orthogonal
        };
        (factor, &mut self.d, &mut self.direction)
    }

    /// The norm of the scaled `A'y`.
    pub(super) fn gradient(&mut self) -> f64 {
        self.parts().0.gradient()
    }

    /// Finds the step without damping; false where there is none.
    pub(super) fn undamped(&mut self) -> bool {
        let (factor, d, _) = self.parts();
        factor.undamped(d)
    }

    /// Finds the step that stays within `radius`: undamped if it does, else with the damping that
    /// brings it there within a tenth (Hebden's iteration on the norm). False where there is none.
    pub(super) fn within(&mut self, radius: f64) -> bool {
        let (factor, d, direction) = self.parts();
        if factor.full_rank() && factor.undamped(d) && norm(d) <= 1.1 * radius {
            return true;
        }
        let gradient = factor.gradient();
        if gradient == 0.0 {
            return false;
        }
        let (mut low, mut high) = (0.0, gradient / radius);
        let mut lambda = 1e-3 * high;
        for _ in 0..20 {
            if !factor.damped(lambda, d) {
                return false;
            }
            let size = norm(d);
            let excess = size - radius;
            if excess > 0.0 {
                low = f64::max(low, lambda)
            } else {
                high = f64::min(high, lambda)
            }
            if excess.abs() <= 0.1 * radius || high - low <= 1e-12 * high {
                break;
            }
            let unit = size.max(f64::MIN_POSITIVE);
            direction.clear();
            direction.extend(d.iter().map(|v| v / unit));
            let Some(give) = factor.give(direction) else {
                return false;
            };
            let newton = lambda + excess / radius / give;
            lambda = if newton > low && newton < high {
                newton
            } else {
                (low.max(1e-6 * high) * high).sqrt()
            };
        }
        true
    }

    /// The norm of the step in scaled columns.
    pub(super) fn size(&self) -> f64 {
        norm(&self.d)
    }

    /// The norm of `theta` in scaled columns.
    pub(super) fn scaled_norm(&self, theta: &[f64]) -> f64 {
        let squares = theta.iter().zip(&self.norms).map(|(t, n)| (t * n).powi(2));
        squares.sum::<f64>().sqrt()
    }

    /// `theta` moved by the step, kept within the limits.
    pub(super) fn moved<E: Evidence>(&self, evidence: &E, theta: &[f64], next: &mut Vec<f64>) {
        next.clear();
        next.extend_from_slice(theta);
        for (j, d) in self.free.iter().zip(&self.d) {
            let l = evidence.limits(*j);
            next[*j] = (next[*j] + d / self.norms[*j]).clamp(l.low, l.high);
        }
    }

    /// How far rounding of what the model expects can move a sum of squares: where residuals are small beside what is measured
    /// that is far more than rounding of the sum. Each is taken to be off by one unit of its terms `a_j theta_j`.
    pub(super) fn noise(&self, scale: Scale, theta: &[f64]) -> f64 {
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
    pub(super) fn promised(&mut self, from: &[f64], to: &[f64]) -> f64 {
        if self.summed {
            return self.sums.promised(from, to);
        }
        let mut drop = 0.0;
        for (i, y) in self.rows.y().iter().enumerate() {
            let moves = from.iter().zip(to).map(|(f, t)| t - f);
            let ad: f64 = self.rows.row(i).iter().zip(moves).map(|(a, m)| a * m).sum();
            drop += ad * (2.0 * y - ad);
        }
        drop
    }
}

fn norm(d: &[f64]) -> f64 {
    d.iter().map(|v| v * v).sum::<f64>().sqrt()
}
