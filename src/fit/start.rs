//! Cold starts: where a fit begins when nothing is known but the readings.

use super::evidence::Evidence;
use super::rack::{Columns, RackEvidence, Sample, Shows};
use crate::assay::{Model, Role};
use crate::binding::{Block, Hill, Isotherm, Kind, OneClass, TwoClasses};
use nalgebra::{Matrix3, Vector3};

/// How many dissociation constants are tried over the range of the label added.
const TRIED: usize = 7;
/// The Hill coefficients tried with each.
const EXPONENTS: [f64; 3] = [0.6, 1.0, 1.8];

/// An isotherm that can be fitted from nothing.
pub trait Cold: Isotherm {
    /// Which law of binding it is.
    const MODEL: Model;

    /// Starts for its parameters (logarithms), sites left at one: combinations of the constants given.
    fn shapes(constants: &[f64]) -> Vec<Vec<f64>>;

    /// Pairs of parameters that change places where the isotherm is not in the order it is shown in.
    const SWAPS: &'static [(usize, usize)] = &[];

    /// Whether it is not.
    fn out_of_order(_theta: &[f64]) -> bool {
        false
    }
}

impl Cold for OneClass {
    const MODEL: Model = Model::OneClass;

    fn shapes(constants: &[f64]) -> Vec<Vec<f64>> {
        constants.iter().map(|k| vec![*k, 0.0]).collect()
    }
}

impl Cold for TwoClasses {
    const MODEL: Model = Model::TwoClasses;

    fn shapes(constants: &[f64]) -> Vec<Vec<f64>> {
        let pairs = constants
            .iter()
            .enumerate()
            .flat_map(|(i, k)| constants[i + 1..].iter().map(move |l| (*k, *l)));
        pairs.map(|(k, l)| vec![k, 0.0, l, 0.0]).collect()
    }

    const SWAPS: &'static [(usize, usize)] = &[(0, 2), (1, 3)];

    fn out_of_order(theta: &[f64]) -> bool {
        theta[0] > theta[2]
    }
}

impl Cold for Hill {
    const MODEL: Model = Model::Hill;

    fn shapes(constants: &[f64]) -> Vec<Vec<f64>> {
        let both = constants
            .iter()
            .flat_map(|k| EXPONENTS.iter().map(move |n| (*k, n.ln())));
        both.map(|(k, n)| vec![k, 0.0, n]).collect()
    }
}

/// Starting points: the shapes over the range of the label added; for each, sites and nonspecific binding from a
/// weighted straight fit of measured bound.
pub(super) fn cold<I: Cold>(evidence: &RackEvidence<I>) -> Vec<Vec<f64>> {
    let (low, high) = evidence.added();
    let (low, high) = if high > 1.5 * low {
        (low, high)
    } else {
        (low / 10.0, high * 10.0)
    };
    let ratio = (high / low).ln() / (TRIED - 1) as f64;
    let constants: Vec<f64> = (0..TRIED).map(|i| low.ln() + ratio * i as f64).collect();
    let shapes = I::shapes(&constants);
    shapes.iter().map(|s| from_shape(evidence, s)).collect()
}

fn from_shape<I: Cold>(evidence: &RackEvidence<I>, shape: &[f64]) -> Vec<f64> {
    let blank = evidence.background();
    let b = blank.cpm().max(0.5 / blank.minutes);
    // One isotherm for every class of sites, with one nM of it and none of the others.
    let places: Vec<usize> = (0..I::DIM)
        .filter(|j| I::KINDS[*j] == Kind::Sites)
        .collect();
    let classes: Vec<I> = places
        .iter()
        .map(|one| {
            let mut theta = shape.to_vec();
            let others = places.iter().filter(|j| *j != one);
            others.for_each(|j| theta[*j] = f64::NEG_INFINITY);
            I::from_ln(&theta)
        })
        .collect();
    let (mut gram, mut right) = (Matrix3::zeros(), Vector3::zeros());
    let (mut filter, mut filters) = (0.0, 0.0);
    for s in evidence.samples() {
        let Some(rough) = s.rough(b, evidence.gain()) else {
            continue;
        };
        let m = rough.bound;
        if s.role == Role::NoReceptor && evidence.filter_column().is_some() {
            filter += m / s.added;
            filters += 1.0;
            continue;
        }
        // Counting error and a common 6 % between tubes, so that no level rules the others.
        let counted = match s.shows {
            Shows::Unbound => s.added - m,
            _ => m,
        };
        let variance = rough.variance + (0.06 * counted).powi(2);
        let mut x = Vector3::zeros();
        let free = rough.free;
        x[0] = free;
        for (class, x) in classes.iter().zip(x.iter_mut().skip(1)) {
            *x = regressor(class, s, free);
        }
        gram += x * x.transpose() / variance;
        right += x * m / variance;
    }
    let found = positive(&gram, &right, 1 + classes.len());
    let at = Columns::of::<I>();
    let mut theta = vec![0.0; evidence.dim()];
    theta[..I::DIM].copy_from_slice(shape);
    let ns = found[0].unwrap_or(1e-4);
    theta[at.ns()] = ns.ln();
    if let Some(j) = evidence.filter_column() {
        let of_filter = (filter / filters).clamp(1e-5, 0.5);
        theta[j] = of_filter.ln();
        theta[at.ns()] = (ns - of_filter).max(0.05 * ns).ln();
    }
    if let Some(j) = evidence.noise_column() {
        theta[j] = evidence.noise_at_first().ln();
    }
    for (k, j) in places.iter().enumerate() {
        let alone = 0.1 * right[k + 1].abs() / gram[(k + 1, k + 1)];
        let sites = found[k + 1].unwrap_or(alone);
        let least = 1e-3 * shape[0].exp();
        theta[*j] = if sites > 0.0 && sites.is_finite() {
            sites.ln()
        } else {
            least.ln()
        };
    }
    theta[at.background()] = b.ln();
    theta[at.cv()] = evidence.usual_ln_cv();
    theta
}

/// The best solution of the normal equations with every unknown above zero; those that are better left out have none.
fn positive(gram: &Matrix3<f64>, right: &Vector3<f64>, unknowns: usize) -> [Option<f64>; 3] {
    let mut best = (f64::NEG_INFINITY, [None; 3]);
    for subset in 1..1usize << unknowns {
        let inside = |k: usize| subset & (1 << k) != 0;
        let mut a = Matrix3::identity();
        let mut y = Vector3::zeros();
        for i in (0..unknowns).filter(|i| inside(*i)) {
            y[i] = right[i];
            for j in (0..unknowns).filter(|j| inside(*j)) {
                a[(i, j)] = gram[(i, j)];
            }
        }
        let Some(x) = a.cholesky().map(|c| c.solve(&y)) else {
            continue;
        };
        let gain = x.dot(&y);
        let sound = (0..unknowns)
            .filter(|k| inside(*k))
            .all(|k| x[k] > 0.0 && x[k].is_finite());
        if sound && gain > best.0 {
            let of = |k: usize| inside(k).then(|| x[k]);
            best = (gain, [of(0), of(1), of(2)]);
        }
    }
    best.1
}

/// What one nM of the sites of a class would bring to a tube's bound, at this free label.
fn regressor<I: Isotherm>(class: &I, s: &Sample, free: f64) -> f64 {
    match s.block {
        _ if s.role == Role::NoReceptor => 0.0,
        Block::None => class.specific(free),
        Block::SameLigand(c) => class.specific(s.added + c) * s.added / (s.added + c),
        Block::Competitor(factor) => class.blocked(factor).specific(free),
        Block::Full => 0.0,
    }
}
