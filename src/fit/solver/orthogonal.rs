//! The column-pivoted QR of the rows: every digit there is, for ill-conditioned rows, sums of squares and the covariance.

use super::step::Factor;
use crate::fit::evidence::Rows;
use nalgebra::{DMatrix, DVector};

/// The factor of the columns that may move, each scaled.
#[derive(Default)]
pub(super) struct Orthogonal {
    r: DMatrix<f64>,
    qty: DVector<f64>,
    /// `order[k]` is the place of the factor's column `k` among those that may move.
    order: Vec<usize>,
    /// The factor of the system with damping.
    stacked: DMatrix<f64>,
}

/// The ratio of a factor's diagonal to its first below which a column is not told from those before it, in a step.
const STEP_RANK: f64 = 1e-13;

impl Orthogonal {
    /// Factors the columns `free` of the rows, scaled by `norms`.
    pub(super) fn factor(&mut self, rows: &Rows, free: &[usize], norms: &[f64]) {
        let (m, p) = (rows.len(), free.len());
        // Rows of zeros below keep the factor square where there are fewer rows than columns.
        let mut a = DMatrix::zeros(m.max(p), p);
        for (j, mut column) in free.iter().zip(a.column_iter_mut()) {
            let unit = 1.0 / norms[*j];
            for (i, v) in column.iter_mut().take(m).enumerate() {
                *v = rows.row(i)[*j] * unit;
            }
        }
        let mut y = DVector::from_fn(m.max(p), |i, _| rows.y().get(i).copied().unwrap_or(0.0));
        let qr = a.col_piv_qr();
        qr.q_tr_mul(&mut y);
        self.r = qr.r();
        self.qty = y.rows(0, p).into_owned();
        let mut order = DMatrix::from_fn(1, p, |_, k| k as f64);
        qr.p().permute_columns(&mut order);
        self.order.clear();
        self.order.extend(order.iter().map(|k| *k as usize));
    }

    /// The number of columns that the factor can tell apart, relative to the first.
    fn rank(&self, tolerance: f64) -> usize {
        let first = self.r[(0, 0)].abs();
        (0..self.r.ncols())
            .take_while(|k| self.r[(*k, *k)].abs() > tolerance * first)
            .count()
    }

    /// `(A'A)^-1` of the scaled columns, in their own order; `None` where they are not told apart by `tolerance`.
    pub(super) fn inverse(&self, tolerance: f64) -> Option<DMatrix<f64>> {
        let p = self.r.ncols();
        if self.rank(tolerance) < p {
            return None;
        }
        let half = self.r.solve_upper_triangular(&DMatrix::identity(p, p))?;
        let c = &half * half.transpose();
        let mut out = DMatrix::zeros(p, p);
        for (k, a) in self.order.iter().enumerate() {
            for (l, b) in self.order.iter().enumerate() {
                out[(*a, *b)] = c[(k, l)];
            }
        }
        Some(out)
    }

    /// A step in the factor's order put into that of the columns; columns beyond its length stay put.
    fn put(&self, x: &DVector<f64>, d: &mut Vec<f64>) -> bool {
        d.clear();
        d.resize(self.order.len(), 0.0);
        for (v, place) in x.iter().zip(&self.order) {
            d[*place] = *v;
        }
        d.iter().all(|v| v.is_finite())
    }
}

impl Factor for Orthogonal {
    fn undamped(&mut self, d: &mut Vec<f64>) -> bool {
        let rank = self.rank(STEP_RANK);
        if rank == 0 {
            return false;
        }
        let head = self.r.view((0, 0), (rank, rank));
        let mut x = self.qty.rows(0, rank).into_owned();
        head.solve_upper_triangular_mut(&mut x) && self.put(&x, d)
    }

    fn full_rank(&self) -> bool {
        self.rank(STEP_RANK) == self.r.ncols()
    }

    fn gradient(&self) -> f64 {
        self.r.tr_mul(&self.qty).norm()
    }

    fn damped(&mut self, lambda: f64, d: &mut Vec<f64>) -> bool {
        let p = self.r.ncols();
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
        self.stacked = qr.unpack_r();
        let mut x = y.rows(0, p).into_owned();
        self.stacked.solve_upper_triangular_mut(&mut x) && self.put(&x, d)
    }

    fn give(&mut self, direction: &[f64]) -> Option<f64> {
        let along = DVector::from_iterator(
            self.order.len(),
            self.order.iter().map(|place| direction[*place]),
        );
        let w = self.stacked.tr_solve_upper_triangular(&along)?;
        Some(w.norm_squared())
    }
}
