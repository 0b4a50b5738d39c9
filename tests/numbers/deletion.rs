//! What speaks against a fit: observations against the fit without them, lack of fit, runs, a further parameter. Held on the
//! Puromycin data (Treloar 1974, in Bates & Watts 1988, *Nonlinear Regression Analysis*, which computes the lack of fit); the
//! figures were computed independently with R's `nls` and in 50-digit arithmetic.

use super::nist::{Readings, digits, fitted, puromycin};
use super::nist_models::{self as models, Regression};
use nalgebra::DVector;
use rackside::binding::{Isotherm, OneClass};
use rackside::fit::{
    Deleted, Ended, Evidence, Limits, Parts, RowOf, Rows, Runs, Scale, Solution, deleted,
    f_upper_tail, lack_of_fit, outlier_p, solve,
};

impl Parts for Readings {
    fn parts(&self) -> usize {
        self.free.len()
    }

    fn without(&self, part: usize) -> Self {
        let mut others = self.clone();
        others.free.remove(part);
        others.bound.remove(part);
        others
    }
}

fn residuals(readings: &Readings, solution: &Solution) -> Vec<f64> {
    let law = OneClass::from_ln(&solution.theta);
    readings
        .free
        .iter()
        .zip(&readings.bound)
        .map(|(f, b)| b - law.specific(*f))
        .collect()
}

/// The first point, by a refit without it: 216.616925772, 0.0722275231819 and the residual computed independently in 50 digits.
#[test]
fn puromycin_suspect() {
    let readings = puromycin();
    let (full, _) = fitted(&readings, 0.05, 200.0);
    let found: Vec<Deleted> = (0..readings.parts())
        .map(|i| deleted(&readings, &full, i).unwrap())
        .collect();
    let size = |i: &usize| found[*i].residual.abs();
    let far = (0..found.len()).max_by(|a, b| size(a).total_cmp(&size(b)));
    assert_eq!(far, Some(0));
    let law = OneClass::from_ln(&found[0].solution.theta);
    digits(law.sites, 216.616925772, 12);
    digits(law.kd, 0.0722275231819, 12);
    digits(found[0].residual, 3.85895039114, 11);
    digits(outlier_p(found[0].residual, 9.0, 12), 0.046238892985, 10);
    assert_eq!(deleted(&readings, &full, found.len()), None);
}

/// The externally studentised residual in the tangent plane of the full fit, which needs no refit and is what is
/// usually tabulated: from the project's fit and covariance, beside the exact one above.
#[test]
fn puromycin_suspect_in_the_tangent_plane() {
    let readings = puromycin();
    let (full, cov) = fitted(&readings, 0.05, 200.0);
    let s2 = full.cost / 10.0;
    let mut rows = Rows::default();
    readings.rows(&full.theta, &mut rows);
    let t: Vec<f64> = (0..rows.len())
        .map(|i| {
            let a = DVector::from_column_slice(rows.row(i));
            let (e, h) = (rows.y()[i], a.dot(&(&cov * &a)) / s2);
            let others = (full.cost - e * e / (1.0 - h)) / 9.0;
            e / (others * (1.0 - h)).sqrt()
        })
        .collect();
    let far = (0..t.len()).max_by(|a, b| t[*a].abs().total_cmp(&t[*b].abs()));
    assert_eq!(far, Some(0));
    digits(t[0], 3.818421, 7);
    digits(outlier_p(t[0], 9.0, 12), 0.0492, 3);
}

/// The replicates are the pairs of one concentration.
#[test]
fn puromycin_lack_of_fit() {
    let readings = puromycin();
    let (full, _) = fitted(&readings, 0.05, 200.0);
    let r = residuals(&readings, &full);
    let pairs: Vec<&[f64]> = r.chunks(2).collect();
    let found = lack_of_fit(&pairs, 0.0, 2).unwrap();
    assert_eq!((found.df_lack, found.df_pure), (4, 6));
    digits(found.f, 1.0708577, 8);
    digits(found.p, 0.446835, 6);
}

#[test]
fn puromycin_runs() {
    let readings = puromycin();
    let (full, _) = fitted(&readings, 0.05, 200.0);
    let found = Runs::of(&residuals(&readings, &full));
    assert_eq!((found.runs, found.plus, found.minus), (8, 6, 6));
}

/// One parameter more, by the F ratio of nested models.
#[test]
fn puromycin_hill() {
    let readings = puromycin();
    let (one, _) = fitted(&readings, 0.05, 200.0);
    let x: Vec<Vec<f64>> = readings.free.iter().map(|f| vec![*f]).collect();
    let regression = Regression {
        y: &readings.bound,
        x: &x,
        dim: 3,
        model: models::hill,
    };
    let hill = solve(&regression, &[200.0, 0.05, 1.0], None);
    assert_eq!(hill.ended, Ended::Converged);
    digits(hill.theta[2], 0.739395, 6);
    let f = (one.cost - hill.cost) / (hill.cost / 9.0);
    digits(f, 4.285, 4);
    digits(f_upper_tail(f, [1.0, 9.0]).unwrap(), 0.0684, 3);
}

/// A straight line through readings of one variance, which is known to be one or is not known.
#[derive(Clone)]
struct Line {
    points: Vec<(f64, f64)>,
    scale: Scale,
    least_slope: f64,
}

impl Evidence for Line {
    fn dim(&self) -> usize {
        2
    }

    fn cost(&self, theta: &[f64]) -> f64 {
        let miss = |(x, y): &(f64, f64)| (y - theta[0] - theta[1] * x).powi(2);
        self.points.iter().map(miss).sum()
    }

    fn rows(&self, theta: &[f64], rows: &mut Rows) {
        rows.clear(2);
        for (i, (x, y)) in self.points.iter().enumerate() {
            let miss = y - theta[0] - theta[1] * x;
            rows.push(RowOf::Mean(i), miss).copy_from_slice(&[1.0, *x]);
        }
    }

    fn scale(&self) -> Scale {
        self.scale
    }

    fn limits(&self, j: usize) -> Limits {
        Limits {
            low: if j == 1 { self.least_slope } else { -1e9 },
            high: 1e9,
        }
    }
}

impl Parts for Line {
    fn parts(&self) -> usize {
        self.points.len()
    }

    fn without(&self, part: usize) -> Self {
        let mut others = self.clone();
        others.points.remove(part);
        others
    }
}

fn line(scale: Scale) -> Line {
    Line {
        points: vec![(0.0, 1.1), (1.0, 2.7), (2.0, 5.4), (4.0, 8.6), (7.0, 14.0)],
        scale,
        least_slope: f64::NEG_INFINITY,
    }
}

/// A linear fit needs no refit: with leverage `h` and residual `e`, `e / sqrt(1 - h)` is the residual against the others where
/// the variance is known; where it is not, that over `s`, with `s^2 (n - p - 1) = RSS - e^2 / (1 - h)`.
#[test]
fn deleted_of_a_line_is_the_closed_form() {
    for scale in [Scale::Known, Scale::Estimated] {
        let line = line(scale);
        let n = line.points.len() as f64;
        let full = solve(&line, &[0.0, 0.0], None);
        let mean = line.points.iter().map(|p| p.0).sum::<f64>() / n;
        let sxx: f64 = line.points.iter().map(|p| (p.0 - mean).powi(2)).sum();
        for (i, (x, y)) in line.points.iter().enumerate() {
            let h = 1.0 / n + (x - mean).powi(2) / sxx;
            let e = y - full.theta[0] - full.theta[1] * x;
            let s2 = match scale {
                Scale::Known => 1.0,
                Scale::Estimated => (full.cost - e * e / (1.0 - h)) / (n - 3.0),
            };
            let want = e / (s2 * (1.0 - h)).sqrt();
            let got = deleted(&line, &full, i).unwrap().residual;
            assert!((got - want).abs() < 1e-9 * want.abs(), "{i}: {got} {want}");
        }
    }
}

/// A parameter on its limit is no error of the expectation, and is not counted.
#[test]
fn deleted_with_a_parameter_on_its_limit() {
    let held = Line {
        least_slope: 3.0,
        ..line(Scale::Estimated)
    };
    let full = solve(&held, &[0.0, 5.0], None);
    assert_eq!(full.at_limit, [false, true]);
    let found = deleted(&held, &full, 2).unwrap();
    assert_eq!(found.solution.theta[1], 3.0);
    // The intercept is the mean of the others' y - 3 x: 1.1, -0.3, -3.4, -7; this point's is -0.6.
    let others = [1.1, -0.3, -3.4, -7.0];
    let mean = others.iter().sum::<f64>() / 4.0;
    let s2 = others.iter().map(|v| (v - mean).powi(2)).sum::<f64>() / 3.0;
    let want = (-0.6 - mean) / (s2 * 1.25).sqrt();
    assert!(
        (found.residual - want).abs() < 1e-9,
        "{} {want}",
        found.residual
    );
}

/// Two points left make a line without a variance, and one point no line.
#[test]
fn deleted_says_nothing_where_too_few_are_left() {
    for (keep, scale) in [(3, Scale::Estimated), (2, Scale::Known)] {
        let mut few = line(scale);
        few.points.truncate(keep);
        let full = solve(&few, &[0.0, 0.0], None);
        assert_eq!(deleted(&few, &full, 0), None);
    }
}

#[test]
fn outliers_are_judged_among_all_tubes() {
    // On 2 degrees of freedom the two-sided tail is 2 / (r (r + t)) with r = sqrt(2 + t^2).
    let p = outlier_p(4.0, 2.0, 1);
    let root = 18f64.sqrt();
    assert!((p - 2.0 / (root * (root + 4.0))).abs() < 1e-12);
    assert!((outlier_p(-4.0, 2.0, 5) - 5.0 * p).abs() < 1e-12);
    assert_eq!(outlier_p(4.0, 2.0, 1000), 1.0);
    assert_eq!(outlier_p(4.0, 0.0, 5), 1.0);
    assert_eq!(outlier_p(f64::NAN, 5.0, 5), 1.0);
}
