//! One linear problem of the solver: its factors, and the steps that come of them.

use crate::fit::evidence::{Evidence, Rows, Scale};
use nalgebra::{DMatrix, DVector};

/// The least ratio of a factor's diagonal at which the normal equations are good for half the digits.
const WELL_CONDITIONED: f64 = 1e-3;

/// One linear problem: the rows at a point, its free columns scaled, and its factors.
#[derive(Default)]
pub(super) struct Step {
    pub(super) rows: Rows,
    /// The largest norm met by each column.
    pub(super) norms: Vec<f64>,
    /// The columns that may move.
    pub(super) free: Vec<usize>,
    pub(super) r: DMatrix<f64>,
    pub(super) qty: DVector<f64>,
    /// The normal equations, where the factor comes from them.
    gram: Option<DMatrix<f64>>,
    /// `order[k]` is the place among `free` of the factor's column `k`.
    pub(super) order: Vec<usize>,
}

impl Step {
    /// Rows and factors at `theta`; false where they are not finite or nothing may move.
    pub(super) fn prepare<E: Evidence>(
        &mut self,
        evidence: &E,
        theta: &[f64],
        pinned: Option<usize>,
    ) -> bool {
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
    pub(super) fn factor(&mut self) {
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
    pub(super) fn rank(&self, tolerance: f64) -> usize {
        let first = self.r[(0, 0)].abs();
        (0..self.r.ncols())
            .take_while(|k| self.r[(*k, *k)].abs() > tolerance * first)
            .count()
    }

    /// The undamped scaled step, in the factor's order; columns beyond the rank stay put.
    pub(super) fn undamped(&self) -> Option<DVector<f64>> {
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
    pub(super) fn damped(&self, lambda: f64) -> Option<(DVector<f64>, DMatrix<f64>)> {
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
    pub(super) fn within(&self, radius: f64) -> Option<DVector<f64>> {
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
    pub(super) fn moved<E: Evidence>(
        &self,
        evidence: &E,
        theta: &[f64],
        d: &DVector<f64>,
    ) -> Vec<f64> {
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
    pub(super) fn promised(&self, from: &[f64], to: &[f64]) -> f64 {
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
