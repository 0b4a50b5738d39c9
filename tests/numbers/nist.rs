//! Published nonlinear regressions that are exactly a one-class isotherm, through the project's own isotherm, solver and
//! profiles, with the variance estimated from the residuals.
//!
//! Sources: NIST Statistical Reference Datasets, nonlinear regression, Misra1d (public domain; the file is in `data/nist/`).
//! Puromycin: Treloar 1974 (thesis, Toronto), in Bates & Watts 1988, *Nonlinear Regression Analysis*,
//! and in the `datasets` of R; the figures below were computed with R's `nls` and in 50-digit arithmetic.

use nalgebra::DMatrix;
use rackside::binding::{Isotherm, OneClass};
use rackside::fit::{
    Ended, Evidence, Limits, ProfileCut, Profiles, RowOf, Rows, Scale, Solution, covariance, solve,
};

/// Specific binding read at given free concentrations, with one variance for all; theta is `[ln Kd, ln sites]`.
#[derive(Clone)]
pub struct Readings {
    pub free: Vec<f64>,
    pub bound: Vec<f64>,
}

impl Evidence for Readings {
    fn dim(&self) -> usize {
        OneClass::DIM
    }

    fn cost(&self, theta: &[f64]) -> f64 {
        let law = OneClass::from_ln(theta);
        let miss = |(f, b): (&f64, &f64)| (b - law.specific(*f)).powi(2);
        self.free.iter().zip(&self.bound).map(miss).sum()
    }

    fn rows(&self, theta: &[f64], rows: &mut Rows) {
        rows.clear(self.dim());
        let law = OneClass::from_ln(theta);
        for (i, (f, b)) in self.free.iter().zip(&self.bound).enumerate() {
            let row = rows.push(RowOf::Mean(i), b - law.specific(*f));
            law.by_ln(*f, row);
        }
    }

    fn scale(&self) -> Scale {
        Scale::Estimated
    }
}

/// The solution from a start in natural units, and its covariance.
pub fn fitted(readings: &Readings, kd: f64, sites: f64) -> (Solution, DMatrix<f64>) {
    let solution = solve(readings, &[kd.ln(), sites.ln()], None);
    assert_eq!(solution.ended, Ended::Converged);
    let cov = covariance(readings, &solution).unwrap();
    (solution, cov)
}

/// Within half a unit of the last of `digits` digits.
#[track_caller]
pub fn digits(got: f64, want: f64, digits: i32) {
    let unit = 10f64.powi(want.abs().log10().floor() as i32 + 1 - digits);
    assert!(
        (got - want).abs() <= 0.5 * unit * (1.0 + 1e-6),
        "got {got}, want {want} to {digits} digits"
    );
}

/// A certified parameter of the file: two starts, the value, its standard deviation.
struct Certified {
    starts: [f64; 2],
    value: f64,
    sd: f64,
}

/// Data, parameters and the residual sum of squares of a file of the collection, at the lines its header gives.
fn misra() -> (Readings, Vec<Certified>, f64) {
    let text = include_str!("data/nist/Misra1d.dat");
    let numbers = |line: &str| -> Vec<f64> {
        line.split_whitespace()
            .filter_map(|w| w.parse().ok())
            .collect()
    };
    let parameters = text
        .lines()
        .filter(|l| l.trim_start().starts_with('b') && l.contains('='))
        .map(|l| match numbers(l)[..] {
            [a, b, value, sd] => Certified {
                starts: [a, b],
                value,
                sd,
            },
            _ => panic!("{l}"),
        })
        .collect();
    let rss = text
        .lines()
        .find(|l| l.starts_with("Residual Sum of Squares"))
        .unwrap();
    let rows: Vec<Vec<f64>> = text
        .lines()
        .skip(60)
        .map(numbers)
        .filter(|n| !n.is_empty())
        .collect();
    assert_eq!(rows.len(), 14);
    let readings = Readings {
        free: rows.iter().map(|r| r[1]).collect(),
        bound: rows.iter().map(|r| r[0]).collect(),
    };
    (readings, parameters, numbers(rss)[0])
}

/// `y = b1 b2 x / (1 + b2 x)`: `b1` is the concentration of sites and `1 / b2` the dissociation constant.
#[test]
fn misra_is_the_one_class_isotherm() {
    let (readings, parameters, rss) = misra();
    let [b1, b2] = &parameters[..] else {
        panic!("{} parameters", parameters.len())
    };
    for start in [0, 1] {
        let (s, cov) = fitted(&readings, 1.0 / b2.starts[start], b1.starts[start]);
        let law = OneClass::from_ln(&s.theta);
        digits(law.sites, b1.value, 11);
        digits(1.0 / law.kd, b2.value, 11);
        digits(s.cost, rss, 11);
        // A standard deviation of a logarithm times the value is that of the value, in the linear approximation
        // that both are made in; b2 has the relative error of Kd.
        digits(law.sites * cov[(1, 1)].sqrt(), b1.sd, 11);
        digits(cov[(0, 0)].sqrt() / law.kd, b2.sd, 11);
        // Computed from the certified b2.
        digits(law.kd, 3308.265015936, 11);
        digits(law.kd * cov[(0, 0)].sqrt(), 32.105328691, 10);
    }
}

pub fn puromycin() -> Readings {
    Readings {
        free: vec![
            0.02, 0.02, 0.06, 0.06, 0.11, 0.11, 0.22, 0.22, 0.56, 0.56, 1.10, 1.10,
        ],
        bound: vec![
            76.0, 47.0, 97.0, 107.0, 123.0, 139.0, 159.0, 152.0, 191.0, 201.0, 207.0, 200.0,
        ],
    }
}

/// A near start and two far ones.
const STARTS: [(f64, f64); 3] = [(0.05, 200.0), (5.0, 20.0), (0.001, 1000.0)];

#[test]
fn puromycin_estimates_and_errors() {
    let readings = puromycin();
    for (kd, sites) in STARTS {
        let (s, cov) = fitted(&readings, kd, sites);
        let law = OneClass::from_ln(&s.theta);
        digits(law.sites, 212.6837431425, 13);
        digits(law.kd, 0.06412128168157, 13);
        digits(law.sites * cov[(1, 1)].sqrt(), 6.947155160, 10);
        digits(law.kd * cov[(0, 0)].sqrt(), 0.00828094950, 9);
        digits(
            cov[(0, 1)] / (cov[(0, 0)] * cov[(1, 1)]).sqrt(),
            0.7650837018,
            10,
        );
        digits(s.cost, 1195.448814439, 13);
        digits((s.cost / 10.0).sqrt(), 10.93365819, 10);
    }
}

/// The profile intervals with the cut of Student's t on 10 degrees of freedom.
#[test]
fn puromycin_profile_intervals() {
    let readings = puromycin();
    let (s, cov) = fitted(&readings, 0.05, 200.0);
    let cut = ProfileCut::new(12, 2, 0.95).unwrap();
    let mut profiles = Profiles::new(&readings, &s, &cov, cut);
    for (j, want) in [
        (0, [0.04692034203, 0.08615691343]),
        (1, [197.3019329, 229.2890551]),
    ] {
        for (upward, want) in [false, true].into_iter().zip(want) {
            let found = profiles.end(j, upward, Limits::NONE);
            assert_eq!(found.better, None);
            digits(found.end.value().unwrap().exp(), want, 9);
        }
    }
}

/// The cut itself, from a published quantile: `n ln(1 + t^2 / (n - p))` with t = 2.228139 for 10 degrees of
/// freedom (NIST/SEMATECH e-Handbook of Statistical Methods, 1.3.6.7.2, whose 2.228 it rounds to).
#[test]
fn the_cut_is_that_of_students_t() {
    let cut = ProfileCut::new(12, 2, 0.95).unwrap().cut();
    digits(cut, 12.0 * (2.228139f64.powi(2) / 10.0).ln_1p(), 6);
    assert!(ProfileCut::new(2, 2, 0.95).is_none());
}
