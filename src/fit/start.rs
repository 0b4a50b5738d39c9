//! Cold starts: where a fit of one class begins when nothing is known but the readings.

use super::rack::{Columns, RackEvidence, Sample};
use crate::binding::{Block, Isotherm, OneClass};

/// How many values of Kd are tried.
const TRIED: usize = 7;

/// Starting points over the range of the label added, one for each of seven dissociation constants;
/// for each, sites and nonspecific binding from a weighted straight fit of measured bound.
pub(super) fn one_class(evidence: &RackEvidence<OneClass>) -> Vec<Vec<f64>> {
    let (low, high) = evidence.added();
    let (low, high) = if high > 1.5 * low {
        (low, high)
    } else {
        (low / 10.0, high * 10.0)
    };
    let ratio = (high / low).ln() / (TRIED - 1) as f64;
    (0..TRIED)
        .map(|i| from_kd(evidence, low * (ratio * i as f64).exp()))
        .collect()
}

fn from_kd(evidence: &RackEvidence<OneClass>, kd: f64) -> Vec<f64> {
    let (n_b, t_b) = evidence.background();
    let b = n_b.max(0.5) / t_b;
    let one = OneClass { kd, sites: 1.0 };
    let mut sums = [0.0; 5];
    for s in evidence.samples() {
        let per_nm = evidence.per_nm();
        let m = (s.counts / s.minutes - b) / per_nm;
        // Counting error and a common 6 % between tubes, so that no level rules the others.
        let variance = s.counts.max(1.0) / (s.minutes * per_nm).powi(2) + (0.06 * m).powi(2);
        let (x, z) = regressors(&one, s, m);
        let w = 1.0 / variance;
        for (sum, term) in sums.iter_mut().zip([x * x, x * z, z * z, x * m, z * m]) {
            *sum += w * term;
        }
    }
    let [xx, xz, zz, xm, zm] = sums;
    let determinant = xx * zz - xz * xz;
    let (mut sites, mut ns) = (
        (xm * zz - zm * xz) / determinant,
        (zm * xx - xm * xz) / determinant,
    );
    if !(sites > 0.0 && sites.is_finite()) {
        (sites, ns) = (0.1 * xm.abs() / xx, zm / zz);
    }
    if !(ns > 0.0 && ns.is_finite()) {
        (sites, ns) = (xm / xx, 1e-4);
    }
    let at = Columns::of::<OneClass>();
    let mut theta = vec![0.0; crate::fit::Evidence::dim(evidence)];
    theta[0] = kd.ln();
    theta[1] = sound(sites, 1e-3 * kd).ln();
    theta[at.ns()] = sound(ns, 1e-4).ln();
    theta[at.background()] = b.ln();
    theta[at.cv()] = evidence.usual_ln_cv();
    theta
}

fn sound(v: f64, otherwise: f64) -> f64 {
    if v > 0.0 && v.is_finite() {
        v
    } else {
        otherwise
    }
}

/// What one unit of sites and one of `ns` would bring to a tube's bound, free taken as added less measured.
fn regressors(one: &OneClass, s: &Sample, measured: f64) -> (f64, f64) {
    let free = (s.added - measured).clamp(0.02 * s.added, s.added);
    match s.block {
        Block::None => (one.specific(free), free),
        Block::SameLigand(c) => (one.specific(s.added + c) * s.added / (s.added + c), free),
        Block::Competitor(factor) => (one.blocked(factor).specific(free), free),
        Block::Full => (0.0, free),
    }
}
