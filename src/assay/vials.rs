//! Several background vials: whether they differ by more than counting explains, and their mean.

use statrs::function::gamma::checked_gamma_ur;

/// How far vials of one kind scatter.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Dispersion {
    /// The index of dispersion.
    pub chi2: f64,
    /// Its degrees of freedom: vials less one.
    pub df: usize,
    /// The probability of an index as large, were there only counting error.
    pub p: f64,
    /// The variance of the rate between vials beyond counting, in cpm^2; zero where the vials show none.
    pub between: f64,
}

/// The pooled rate in cpm and the minutes in all; `None` without vials or where a count or a time is none.
fn pooled_rate(vials: &[(f64, f64)]) -> Option<(f64, f64)> {
    let sound = |&(counts, minutes): &(f64, f64)| {
        counts >= 0.0 && counts.is_finite() && minutes > 0.0 && minutes.is_finite()
    };
    if vials.is_empty() || !vials.iter().all(sound) {
        return None;
    }
    let (counts, minutes) = vials
        .iter()
        .fold((0.0, 0.0), |(n, t), v| (n + v.0, t + v.1));
    Some((counts / minutes, minutes))
}

/// The dispersion of vials, each `(counts, minutes)`.
///
/// The index is `sum (N - t b)^2 / (t b)` with `b` the pooled rate, a chi-square on vials less one where all scatter is that of Poisson
/// counts (R. A. Fisher's index of dispersion; from memory). The variance between vials is the moment estimate of R. DerSimonian &
/// N. Laird 1986, Control Clin Trials 7:177 (from memory) with weights `t / b`: `b (chi2 - df) / (T - sum t^2 / T)`. `None` below two vials,
/// without a single count, or where a count or a time makes no sense.
pub fn dispersion(vials: &[(f64, f64)]) -> Option<Dispersion> {
    let (rate, minutes) = pooled_rate(vials)?;
    if vials.len() < 2 || rate == 0.0 {
        return None;
    }
    let df = vials.len() - 1;
    let chi2: f64 = vials
        .iter()
        .map(|(n, t)| (n - t * rate).powi(2) / (t * rate))
        .sum();
    let p = if chi2 == 0.0 {
        1.0
    } else {
        checked_gamma_ur(0.5 * df as f64, 0.5 * chi2).ok()?
    };
    let squares: f64 = vials.iter().map(|(_, t)| t * t).sum();
    let between = rate * (chi2 - df as f64) / (minutes - squares / minutes);
    Some(Dispersion {
        chi2,
        df,
        p,
        between: between.max(0.0),
    })
}

/// The mean rate of vials, each `(counts, minutes)`, in cpm, and its variance in cpm^2.
///
/// Weights are `1 / (b / t + between)` with `b` the pooled rate and `between` the variance between vials (as [`dispersion`] gives it, or 0:
/// then the mean is all counts over all minutes). The variance is one over the sum of weights. `None` without vials, or where a count or a
/// time makes no sense.
pub fn pooled(vials: &[(f64, f64)], between: f64) -> Option<(f64, f64)> {
    let (rate, minutes) = pooled_rate(vials)?;
    if between <= 0.0 {
        return Some((rate, rate / minutes));
    }
    let (mut weights, mut sum) = (0.0, 0.0);
    for (n, t) in vials {
        let weight = 1.0 / (rate / t + between);
        weights += weight;
        sum += weight * n / t;
    }
    Some((sum / weights, 1.0 / weights))
}
