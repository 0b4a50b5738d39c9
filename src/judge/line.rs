//! Small fits that some judgements rest on: a straight line, a parabola, a power.

use nalgebra::{DMatrix, DVector, Matrix2, Vector2};

/// The least sum of weighted squares about a polynomial, and its highest coefficient; `None` where the points do not determine it.
///
/// Points are `[x, y, weight]`. Columns are brought to the same length first, which leaves the sum as it is.
fn polynomial(points: &[[f64; 3]], terms: i32) -> Option<(f64, f64)> {
    let mut distinct: Vec<f64> = points.iter().map(|p| p[0]).collect();
    distinct.sort_by(f64::total_cmp);
    distinct.dedup();
    let scale = distinct.iter().fold(0.0, |m: f64, x| m.max(x.abs()));
    if distinct.len() < terms as usize || scale == 0.0 {
        return None;
    }
    let columns = terms as usize;
    let a = DMatrix::from_fn(points.len(), columns, |i, j| {
        points[i][2].sqrt() * (points[i][0] / scale).powi(j as i32)
    });
    let y = DVector::from_fn(points.len(), |i, _| points[i][2].sqrt() * points[i][1]);
    let qr = a.clone().qr();
    let solved = qr.r().solve_upper_triangular(&(qr.q().transpose() * &y))?;
    let rss = (&y - &a * &solved).norm_squared();
    let top = solved[columns - 1] / scale.powi(terms - 1);
    (rss.is_finite() && top.is_finite()).then_some((rss, top))
}

/// The weighted sum of squares about a straight line; points are `[x, y, weight]`.
pub(super) fn weighted_line(points: &[[f64; 3]]) -> Option<f64> {
    polynomial(points, 2).map(|(rss, _)| rss)
}

/// The weighted sum of squares about a parabola, and its quadratic coefficient.
pub(super) fn quadratic(points: &[[f64; 3]]) -> Option<(f64, f64)> {
    polynomial(points, 3)
}

/// `y = a x^(1 + g)` fitted with errors that are correlated.
pub(super) struct Line {
    /// `g`.
    pub(super) exponent: f64,
    /// Its standard error, from the scatter about the fit.
    pub(super) se: f64,
}

/// Steps of the fit; it converges in a few.
const STEPS: usize = 50;
/// How often a step is halved.
const HALVINGS: i32 = 30;
/// A step shorter than this is the last.
const SETTLED: f64 = 1e-10;

impl Line {
    /// Fits the power of `x`, all above zero, to `y` by generalised least squares: the covariance of `y`, known but for a factor, is
    /// that of a line in proportion, `covariance` of what it expects.
    ///
    /// `None` below three points, or where the points do not determine it.
    pub(super) fn power(
        x: &[f64],
        y: &[f64],
        covariance: impl Fn(&[f64]) -> DMatrix<f64>,
    ) -> Option<Line> {
        let n = x.len();
        if n < 3 {
            return None;
        }
        let whiten = |root: &DMatrix<f64>, v: DVector<f64>| root.solve_lower_triangular(&v);
        // In proportion first: a line through the origin, twice, since the covariance wants what it expects.
        let ratio = y.iter().sum::<f64>() / x.iter().sum::<f64>();
        let mut a = ratio.abs();
        let xs = DVector::from_column_slice(x);
        let ys = DVector::from_column_slice(y);
        let mut root = DMatrix::zeros(n, n);
        for _ in 0..3 {
            let expected: Vec<f64> = x.iter().map(|v| a * v).collect();
            root = covariance(&expected).cholesky()?.unpack();
            let (u, v) = (whiten(&root, xs.clone())?, whiten(&root, ys.clone())?);
            a = u.dot(&v) / u.norm_squared();
            if a <= 0.0 || !a.is_finite() {
                return None;
            }
        }
        let centre = x.iter().map(|v| v.ln()).sum::<f64>() / n as f64;
        let mut at = Vector2::new((a * centre.exp()).ln(), 0.0);
        let model = |at: &Vector2<f64>| {
            let f = |v: &f64| (at[0] + (1.0 + at[1]) * (v.ln() - centre)).exp();
            DVector::from_iterator(n, x.iter().map(f))
        };
        let away = |at: &Vector2<f64>| whiten(&root, &ys - model(at));
        let mut r = away(&at)?;
        for _ in 0..STEPS {
            let m = model(&at);
            let by_a = whiten(&root, m.clone())?;
            let by_g = whiten(
                &root,
                DVector::from_iterator(n, (0..n).map(|i| m[i] * (x[i].ln() - centre))),
            )?;
            let normal = Matrix2::new(
                by_a.norm_squared(),
                by_a.dot(&by_g),
                by_a.dot(&by_g),
                by_g.norm_squared(),
            );
            let inverse = normal.try_inverse()?;
            let full = inverse * Vector2::new(by_a.dot(&r), by_g.dot(&r));
            // A step that makes it worse is halved until it does not; where none is left, this is the place.
            let better = (0..HALVINGS).find_map(|h| {
                let there = at + full * 0.5f64.powi(h);
                let left = away(&there)?;
                (left.norm_squared() < r.norm_squared()).then_some((there, left))
            });
            let settled = better.is_none() || full.norm() < SETTLED;
            if let Some((there, left)) = better {
                (at, r) = (there, left);
            }
            if settled {
                let scale = r.norm_squared() / (n - 2) as f64;
                let se = (inverse[(1, 1)] * scale).sqrt();
                return (se > 0.0 && se.is_finite()).then_some(Line {
                    exponent: at[1],
                    se,
                });
            }
        }
        None
    }
}
