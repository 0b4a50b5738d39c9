//! Tests and their critical values: pure functions of numbers, with no knowledge of tubes or models.

use statrs::distribution::{ContinuousCDF, StudentsT};
use statrs::function::beta::checked_beta_reg;
use statrs::function::factorial::ln_binomial;
use statrs::function::gamma::checked_gamma_ur;

fn is_df(df: f64) -> bool {
    df > 0.0 && df.is_finite()
}

/// The probability of an F ratio of at least `f` on `df = [numerator, denominator]` degrees of freedom.
///
/// `I_x(df2 / 2, df1 / 2)` at `x = df2 / (df2 + df1 f)`, the incomplete beta function (NIST/SEMATECH e-Handbook of Statistical
/// Methods, 1.3.6.6.5; from memory). `None` unless `f >= 0` and both degrees are positive and finite.
pub fn f_upper_tail(f: f64, df: [f64; 2]) -> Option<f64> {
    let [of, over] = df;
    if f.is_nan() || f < 0.0 || !is_df(of) || !is_df(over) {
        return None;
    }
    checked_beta_reg(over / 2.0, of / 2.0, over / (over + of * f)).ok()
}

/// The probability of a Student's t at least as far from zero as `t`, either side, on `df` degrees of freedom.
///
/// The upper tail of `t^2` as an F ratio on 1 and `df`. `None` unless `t` is a number and `df` positive and finite.
pub fn t_two_sided(t: f64, df: f64) -> Option<f64> {
    f_upper_tail(t * t, [1.0, df])
}

/// The value below which a Student's t on `df` degrees of freedom lies with probability `p`.
///
/// Small `p` are told apart better than those near one: take minus the quantile of what is above. `None` unless `0 < p < 1` and
/// `df` is positive and finite.
pub fn t_quantile(p: f64, df: f64) -> Option<f64> {
    if !(p > 0.0 && p < 1.0 && is_df(df)) {
        return None;
    }
    let t = StudentsT::new(0.0, 1.0, df).ok()?.inverse_cdf(p);
    t.is_finite().then_some(t)
}

/// The probability of a chi-square of at least `x` on `df` degrees of freedom; `None` unless `x >= 0` and `df` is positive,
/// both finite.
pub fn chi_square_upper_tail(x: f64, df: f64) -> Option<f64> {
    if !(x >= 0.0 && x.is_finite() && is_df(df)) {
        return None;
    }
    if x == 0.0 {
        return Some(1.0);
    }
    checked_gamma_ur(df / 2.0, x / 2.0).ok()
}

/// The two-sided critical value at level `alpha` of Grubbs' test, the largest distance from the mean of `n` values in
/// sample standard deviations; `None` unless `n >= 3` and `0 < alpha < 1`.
///
/// `(n - 1) / sqrt(n) sqrt(t^2 / (n - 2 + t^2))` with `t` the upper `alpha / (2 n)` quantile on `n - 2` degrees of freedom
/// (F. E. Grubbs 1969, Technometrics 11:1; NIST/SEMATECH e-Handbook, 1.3.5.17.1; from memory).
pub fn grubbs_critical(n: usize, alpha: f64) -> Option<f64> {
    if n < 3 || !(alpha > 0.0 && alpha < 1.0) {
        return None;
    }
    let df = (n - 2) as f64;
    let n = n as f64;
    let t = t_quantile(alpha / (2.0 * n), df)?;
    // t^2 / (df + t^2), written so that no t is too large.
    let share = 1.0 / (1.0 + df / t / t);
    Some((n - 1.0) / n.sqrt() * share.sqrt())
}

/// How often the sign changes along a sequence.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Runs {
    /// Stretches of one sign.
    pub runs: usize,
    /// Values above zero.
    pub plus: usize,
    /// Values below zero.
    pub minus: usize,
}

impl Runs {
    /// Of residuals in their order; zeros, and what is no number, are dropped.
    pub fn of(residuals: &[f64]) -> Runs {
        let mut found = Runs {
            runs: 0,
            plus: 0,
            minus: 0,
        };
        let mut last = None;
        for up in residuals
            .iter()
            .filter(|r| !(r.is_nan() || **r == 0.0))
            .map(|r| *r > 0.0)
        {
            if up {
                found.plus += 1;
            } else {
                found.minus += 1;
            }
            if last != Some(up) {
                found.runs += 1;
            }
            last = Some(up);
        }
        found
    }

    /// The probability of so few runs or fewer were the signs in random order.
    pub fn lower_tail(self) -> f64 {
        runs_lower_tail(self.runs, self.plus, self.minus)
    }
}

/// The probability that `plus` and `minus` signs in random order make at most `runs` runs, exactly.
///
/// Of `C(plus + minus, plus)` orders, `2 C(plus-1, k-1) C(minus-1, k-1)` make `2 k` runs, and
/// `C(plus-1, k) C(minus-1, k-1) + C(plus-1, k-1) C(minus-1, k)` make `2 k + 1` (A. Wald & J. Wolfowitz 1940, Ann Math Stat
/// 11:147; from memory). With signs of one kind alone there is one run, and with none there is none.
pub fn runs_lower_tail(runs: usize, plus: usize, minus: usize) -> f64 {
    if plus == 0 || minus == 0 {
        return if runs >= (plus + minus).min(1) {
            1.0
        } else {
            0.0
        };
    }
    if runs > 2 * plus.min(minus) {
        return 1.0;
    }
    let (a, b) = (plus as u64 - 1, minus as u64 - 1);
    let all = ln_binomial(a + b + 2, a + 1);
    let share = |of_plus: u64, of_minus: u64| {
        (ln_binomial(a, of_plus) + ln_binomial(b, of_minus) - all).exp()
    };
    let exactly = |r: u64| {
        let k = r / 2;
        if r.is_multiple_of(2) {
            2.0 * share(k - 1, k - 1)
        } else {
            share(k, k - 1) + share(k - 1, k)
        }
    };
    (2..=runs as u64).map(exactly).sum::<f64>().min(1.0)
}

/// Lack of fit against the scatter of replicates.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct LackOfFit {
    /// The ratio of the mean squares.
    pub f: f64,
    /// Degrees of freedom of the lack of fit: groups less parameters.
    pub df_lack: usize,
    /// Degrees of freedom of pure error: values less groups.
    pub df_pure: usize,
    /// The probability of a ratio as large were the model right.
    pub p: f64,
}

/// The share of all squares that rounding of the means alone may make of pure error, with room.
const AGREED: f64 = 1e-28;

/// Whether replicates leave too much of the residuals unexplained: the F ratio of lack of fit to pure error.
///
/// `groups` holds the weighted residuals (of unit variance but for a common factor) of each set of replicates, groups of
/// one included; those without any are passed over. Pure error is the sum of squares about each group's own mean, and the lack of fit
/// what is left of all squares and `extra_ss`, squares of rows that have no replicates (Bates & Watts 1988, *Nonlinear
/// Regression Analysis*, 1.3.2). `parameters` is the number of those fitted. `None` where either has no degree of freedom, where
/// the replicates agree but for rounding, or where a number is not finite.
pub fn lack_of_fit(groups: &[&[f64]], extra_ss: f64, parameters: usize) -> Option<LackOfFit> {
    let (mut values, mut sets, mut total, mut pure) = (0, 0, extra_ss, 0.0);
    for group in groups.iter().filter(|g| !g.is_empty()) {
        let mean = group.iter().sum::<f64>() / group.len() as f64;
        values += group.len();
        sets += 1;
        total += group.iter().map(|r| r * r).sum::<f64>();
        pure += group.iter().map(|r| (r - mean).powi(2)).sum::<f64>();
    }
    let df_pure = values - sets;
    let df_lack = usize::checked_sub(sets, parameters)?;
    if df_lack == 0 || df_pure == 0 || pure <= AGREED * total || !total.is_finite() {
        return None;
    }
    let df = [df_lack as f64, df_pure as f64];
    let f = ((total - pure) / df[0]).max(0.0) / (pure / df[1]);
    Some(LackOfFit {
        f,
        df_lack,
        df_pure,
        p: f_upper_tail(f, df)?,
    })
}
