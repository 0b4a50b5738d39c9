//! Normal equations: summed over the rows, factored in place by Cholesky. Nothing here allocates once its buffers are grown.

use super::step::Factor;
use crate::fit::evidence::Rows;

/// `A'A` and `A'y` of all columns.
#[derive(Default)]
pub(super) struct Sums {
    dim: usize,
    /// The lower triangle of `A'A`, column after column of full length.
    gram: Vec<f64>,
    /// `A'y`.
    pub(super) right: Vec<f64>,
    /// Where a block of rows is not zero, and what it holds there.
    held: Vec<(usize, [f64; BLOCK])>,
    /// The last rows, filled up to a block with zeros.
    tail: Vec<f64>,
    delta: Vec<f64>,
}

/// How many rows are summed at once.
const BLOCK: usize = 4;

impl Sums {
    /// Sums over the rows; false where one is not finite.
    ///
    /// A row touches few columns (one dilution error of many), so this grows with what rows hold and not with rows times
    /// columns squared. Neighbours mostly touch the same ones.
    pub(super) fn take(&mut self, rows: &Rows) -> bool {
        let dim = rows.dim();
        self.dim = dim;
        self.gram.clear();
        self.gram.resize(dim * dim, 0.0);
        self.right.clear();
        self.right.resize(dim, 0.0);
        let (blocks, rest) = rows.y().as_chunks();
        let (whole, last) = rows.matrix().split_at(blocks.len() * BLOCK * dim);
        for (y, block) in blocks.iter().zip(whole.chunks_exact(BLOCK * dim)) {
            self.add(block, *y);
        }
        let mut y = [0.0; BLOCK];
        y[..rest.len()].copy_from_slice(rest);
        let mut tail = std::mem::take(&mut self.tail);
        tail.clear();
        tail.extend_from_slice(last);
        tail.resize(BLOCK * dim, 0.0);
        self.add(&tail, y);
        self.tail = tail;
        // What is not finite in a row is not finite in the square of its column.
        (0..dim).all(|j| self.gram[j * (dim + 1)].is_finite() && self.right[j].is_finite())
    }

    /// Adds a block of rows.
    fn add(&mut self, block: &[f64], y: [f64; BLOCK]) {
        let dim = self.dim;
        let (ab, cd) = block.split_at(2 * dim);
        let ((a, b), (c, d)) = (ab.split_at(dim), cd.split_at(dim));
        self.held.clear();
        for (j, (((a, b), c), d)) in a.iter().zip(b).zip(c).zip(d).enumerate() {
            let v = [*a, *b, *c, *d];
            if v != [0.0; BLOCK] {
                self.held.push((j, v));
            }
        }
        for (k, (j, v)) in self.held.iter().enumerate() {
            self.right[*j] += inner(v, &y);
            let column = &mut self.gram[j * dim..(j + 1) * dim];
            for (l, w) in &self.held[k..] {
                column[*l] += inner(v, w);
            }
        }
    }

    /// The norm of a column.
    pub(super) fn norm(&self, j: usize) -> f64 {
        self.gram[j * (self.dim + 1)].sqrt()
    }

    /// `2 y'A d - |A d|^2` for a move.
    pub(super) fn promised(&mut self, from: &[f64], to: &[f64]) -> f64 {
        let dim = self.dim;
        self.delta.clear();
        self.delta.extend(from.iter().zip(to).map(|(f, t)| t - f));
        let mut drop = 0.0;
        for (j, d) in self.delta.iter().enumerate().filter(|(_, d)| **d != 0.0) {
            let column = &self.gram[j * dim..(j + 1) * dim];
            let below = dot(&column[j + 1..], &self.delta[j + 1..]);
            drop += d * (2.0 * (self.right[j] - below) - column[j] * d);
        }
        drop
    }
}

/// The least ratio of a factor's diagonal at which steps are good for five digits: rounding of 1e-16 is divided by its square.
const WELL_CONDITIONED: f64 = 1e-5;

/// The normal equations of the columns that may move, each scaled, and their factor.
///
/// Steps are corrected by the next ones, so a few digits of a step are plenty: where steps lead is decided by `A'y`, which
/// is summed from the rows.
#[derive(Default)]
pub(super) struct Normal {
    p: usize,
    /// The columns and what they are multiplied by, from the last to the first: dilution errors, which rows tie to few
    /// columns, are last, and eliminated first they leave the rest of the factor as empty as it was.
    order: Vec<(usize, f64)>,
    gram: Vec<f64>,
    right: Vec<f64>,
    lower: Vec<f64>,
    /// The factor of the matrix with damping.
    damped: Vec<f64>,
    give: Vec<f64>,
}

impl Normal {
    /// Factors the sums of the columns `free`, scaled by `norms`; false where they are too ill-conditioned for it.
    pub(super) fn factor(&mut self, sums: &Sums, free: &[usize], norms: &[f64]) -> bool {
        let p = free.len();
        self.p = p;
        self.order.clear();
        self.order
            .extend(free.iter().rev().map(|j| (*j, 1.0 / norms[*j])));
        self.right.clear();
        self.right
            .extend(self.order.iter().map(|(j, u)| sums.right[*j] * u));
        self.gram.resize(p * p, 0.0);
        for (k, (j, unit)) in self.order.iter().enumerate() {
            let to = &mut self.gram[k * p + k..(k + 1) * p];
            for (v, (l, u)) in to.iter_mut().zip(&self.order[k..]) {
                *v = sums.gram[l * sums.dim + j] * (unit * u);
            }
        }
        self.lower.clone_from(&self.gram);
        if !cholesky(&mut self.lower, p) {
            return false;
        }
        let (mut least, mut most) = (f64::INFINITY, 0.0);
        for d in self.lower.iter().step_by(p + 1) {
            least = f64::min(least, *d);
            most = f64::max(most, *d);
        }
        least >= WELL_CONDITIONED * most
    }
}

impl Factor for Normal {
    fn undamped(&mut self, d: &mut Vec<f64>) -> bool {
        d.clone_from(&self.right);
        forward(&self.lower, d);
        backward(&self.lower, d);
        d.reverse();
        d.iter().all(|v| v.is_finite())
    }

    fn full_rank(&self) -> bool {
        true
    }

    fn gradient(&self) -> f64 {
        dot(&self.right, &self.right).sqrt()
    }

    fn damped(&mut self, lambda: f64, d: &mut Vec<f64>) -> bool {
        self.damped.clone_from(&self.gram);
        let stride = self.p + 1;
        self.damped
            .iter_mut()
            .step_by(stride)
            .for_each(|v| *v += lambda);
        if !cholesky(&mut self.damped, self.p) {
            return false;
        }
        d.clone_from(&self.right);
        forward(&self.damped, d);
        backward(&self.damped, d);
        d.reverse();
        d.iter().all(|v| v.is_finite())
    }

    fn give(&mut self, direction: &[f64]) -> Option<f64> {
        self.give.clear();
        self.give.extend(direction.iter().rev());
        forward(&self.damped, &mut self.give);
        Some(dot(&self.give, &self.give))
    }
}

fn inner(v: &[f64; BLOCK], w: &[f64; BLOCK]) -> f64 {
    (v[0] * w[0] + v[2] * w[2]) + (v[1] * w[1] + v[3] * w[3])
}

fn dot(a: &[f64], b: &[f64]) -> f64 {
    a.iter().zip(b).map(|(a, b)| a * b).sum()
}

/// The factor `L` of a positive definite matrix in place, by columns of the lower triangle; false where it is not one.
fn cholesky(a: &mut [f64], p: usize) -> bool {
    for j in 0..p {
        let (before, from) = a.split_at_mut(j * p);
        let column = &mut from[j..p];
        for other in before.chunks_exact(p) {
            let other = &other[j..];
            // Levels that were not diluted from one another have nothing in common.
            if other[0] != 0.0 {
                let by = other[0];
                column.iter_mut().zip(other).for_each(|(v, o)| *v -= by * o);
            }
        }
        let pivot = column[0];
        if !(pivot > 0.0 && pivot.is_finite()) {
            return false;
        }
        let unit = 1.0 / pivot.sqrt();
        column.iter_mut().for_each(|v| *v *= unit);
    }
    true
}

/// Solves `L x = b` in place.
fn forward(l: &[f64], x: &mut [f64]) {
    let p = x.len();
    for j in 0..p {
        let column = &l[j * p + j..(j + 1) * p];
        let (head, tail) = x[j..].split_at_mut(1);
        head[0] /= column[0];
        let by = head[0];
        tail.iter_mut()
            .zip(&column[1..])
            .for_each(|(v, o)| *v -= by * o);
    }
}

/// Solves `L' x = b` in place.
fn backward(l: &[f64], x: &mut [f64]) {
    let p = x.len();
    for j in (0..p).rev() {
        let column = &l[j * p + j..(j + 1) * p];
        let (head, tail) = x[j..].split_at_mut(1);
        head[0] = (head[0] - dot(&column[1..], tail)) / column[0];
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::fit::evidence::RowOf;

    fn rows() -> Rows {
        let mut rows = Rows::default();
        rows.clear(3);
        let held = [
            ([1.0, 2.0, 0.0], 1.0),
            ([0.0, -1.0, 3.0], 2.0),
            ([4.0, 0.0, 1.0], -1.0),
            ([1.0, 1.0, 1.0], 0.5),
        ];
        for (i, (a, y)) in held.iter().enumerate() {
            rows.push(RowOf::Mean(i), *y).copy_from_slice(a);
        }
        rows
    }

    /// The solution meets the normal equations, written out row by row.
    #[test]
    fn steps_solve_the_damped_equations() {
        let rows = rows();
        let mut sums = Sums::default();
        assert!(sums.take(&rows));
        let free = [0, 1, 2];
        let norms: Vec<f64> = free.iter().map(|j| 2.0 * sums.norm(*j)).collect();
        let mut normal = Normal::default();
        assert!(normal.factor(&sums, &free, &norms));
        let mut d = Vec::new();
        for lambda in [0.0, 0.3] {
            assert!(if lambda == 0.0 {
                normal.undamped(&mut d)
            } else {
                normal.damped(lambda, &mut d)
            });
            for j in free {
                let miss: f64 = (0..rows.len())
                    .map(|i| {
                        let a = rows.row(i);
                        let ad: f64 = free.iter().map(|k| a[*k] / norms[*k] * d[*k]).sum();
                        a[j] / norms[j] * (rows.y()[i] - ad)
                    })
                    .sum();
                assert!((miss - lambda * d[j]).abs() < 1e-14, "{j}: {miss}");
            }
        }
    }

    #[test]
    fn the_promise_is_that_of_the_rows() {
        let rows = rows();
        let mut sums = Sums::default();
        assert!(sums.take(&rows));
        let (from, to) = ([1.0, 2.0, 3.0], [1.5, 2.0, 2.75]);
        let want: f64 = (0..rows.len())
            .map(|i| {
                let ad: f64 = (0..3).map(|j| rows.row(i)[j] * (to[j] - from[j])).sum();
                ad * (2.0 * rows.y()[i] - ad)
            })
            .sum();
        assert!((sums.promised(&from, &to) - want).abs() < 1e-13);
    }

    #[test]
    fn what_is_not_finite_is_not_summed() {
        for bad in [f64::NAN, f64::INFINITY] {
            let mut in_row = rows();
            in_row.push(RowOf::Background, 0.0)[1] = bad;
            assert!(!Sums::default().take(&in_row));
            let mut in_y = rows();
            in_y.push(RowOf::Background, bad)[1] = 1.0;
            assert!(!Sums::default().take(&in_y));
        }
    }
}
