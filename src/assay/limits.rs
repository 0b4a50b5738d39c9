//! What a counter can tell from nothing: limits of detection, the error of a net rate, and how long to count.
//!
//! Limits are those of L. A. Currie 1968, Anal Chem 40:586 (formulas from memory): a net result above the *critical* one is
//! taken for real, wrongly so for 5 % of blanks; a true net result at the limit of *detection* is above the critical one 95 times
//! in 100; at the limit of *determination* it is known to 10 % (one standard deviation).

use statrs::distribution::{ChiSquared, ContinuousCDF};

/// The 95 % point of the standard normal distribution: both errors of detection are 5 %, each on one side.
pub const Z: f64 = 1.6448536269514722;

/// How many standard deviations a result is at the limit of determination.
const DETERMINED: f64 = 10.0;

/// Beyond as many counts the incomplete gamma function takes too long, and the square root of the counts is as good.
const MOST_COUNTS: f64 = 1e9;

/// Currie's three limits, all in net counts or all in net cpm.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Limits {
    /// The net result above which something is taken to be there.
    pub critical: f64,
    /// The true net result that is found 95 times in 100.
    pub detection: f64,
    /// The true net result that is known to 10 %.
    pub determination: f64,
}

/// The variance of a net result `L` is `slope L + zero`.
fn limits(slope: f64, zero: f64) -> Limits {
    let critical = Z * zero.sqrt();
    let half = 0.5 * DETERMINED * DETERMINED * slope;
    Limits {
        critical,
        detection: Z * Z * slope + 2.0 * critical,
        determination: half + (half * half + DETERMINED * DETERMINED * zero).sqrt(),
    }
}

/// Limits in net counts where the blank is counted once, as long as the sample: the variance of a net zero is `2 B`.
pub fn paired(blank_counts: f64) -> Limits {
    limits(1.0, 2.0 * blank_counts)
}

/// Limits in net counts where the blank is known without error: the variance of a net zero is `B`.
pub fn well_known(blank_counts: f64) -> Limits {
    limits(1.0, blank_counts)
}

/// Limits in net cpm for a sample and a background counted for times of their own, in minutes.
///
/// The variance of a net zero is `b / ts + b / tb + between`, where `between` is the variance of background between vials in cpm^2 (0
/// where there is none), which the vial of the sample has once.
pub fn for_rates(
    background_cpm: f64,
    sample_minutes: f64,
    background_minutes: f64,
    between: f64,
) -> Limits {
    let zero = background_cpm / sample_minutes + background_cpm / background_minutes + between;
    limits(1.0 / sample_minutes, zero)
}

/// The net rate of `counts` in `minutes` over background, and its counting error, in cpm; minutes are above zero.
///
/// `sqrt(N / t^2 + B / tb^2)`, from Poisson counts.
pub fn net_rate(
    counts: f64,
    minutes: f64,
    background_counts: f64,
    background_minutes: f64,
) -> (f64, f64) {
    let net = counts / minutes - background_counts / background_minutes;
    let variance = counts / (minutes * minutes)
        + background_counts / (background_minutes * background_minutes);
    (net, variance.sqrt())
}

/// A counting time shared between a sample and its background.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Split {
    /// Minutes for the sample.
    pub sample_minutes: f64,
    /// Minutes for the background.
    pub background_minutes: f64,
    /// The standard deviation of the net rate, in cpm.
    pub sd: f64,
}

/// The split of `total_minutes` that gives the smallest error of the net rate: `ts / tb = sqrt(Rs / Rb)`, halves where both rates are zero.
///
/// Rates are gross and background, in cpm. The variance `Rs / ts + Rb / tb` is then `(sqrt Rs + sqrt Rb)^2 / T` (algebra).
pub fn best_split(gross_cpm: f64, background_cpm: f64, total_minutes: f64) -> Split {
    let (sample, blank) = (gross_cpm.sqrt(), background_cpm.sqrt());
    let both = sample + blank;
    let share = if both > 0.0 { sample / both } else { 0.5 };
    Split {
        sample_minutes: share * total_minutes,
        background_minutes: (1.0 - share) * total_minutes,
        sd: both / total_minutes.sqrt(),
    }
}

/// The minutes, sample and background together at their best split, in which a net rate is known to `relative_error` (one standard
/// deviation over the net rate); infinite for a net rate of zero over a background.
pub fn minutes_for(relative_error: f64, net_cpm: f64, background_cpm: f64) -> f64 {
    let one_minute = best_split(net_cpm + background_cpm, background_cpm, 1.0).sd;
    (one_minute / (relative_error * net_cpm)).powi(2)
}

/// The exact central interval of the mean of Poisson counts, e.g. for a `confidence` of 0.95.
///
/// Half of the chi-square quantiles on `2 N` and `2 N + 2` degrees of freedom; from 0 where nothing was counted (F. Garwood 1936,
/// Biometrika 28:437; from memory). `None` unless `counts` is a whole number from 0 to 1e9 and `0 < confidence < 1`.
pub fn exact_interval(counts: f64, confidence: f64) -> Option<(f64, f64)> {
    let whole = (0.0..=MOST_COUNTS).contains(&counts) && counts.fract() == 0.0;
    if !(whole && confidence > 0.0 && confidence < 1.0) {
        return None;
    }
    let tail = 0.5 * (1.0 - confidence);
    let half = |df: f64, p: f64| Some(0.5 * ChiSquared::new(df).ok()?.inverse_cdf(p));
    let low = if counts == 0.0 {
        0.0
    } else {
        half(2.0 * counts, tail)?
    };
    Some((low, half(2.0 * counts + 2.0, 1.0 - tail)?))
}

/// The difference between the means of total and nonspecific tubes above which specific binding is taken to be there (5 % wrongly so).
///
/// `variance` is that of one nonspecific tube, all its sources together, in the square of the unit of the result; `totals` and
/// `nonspecifics` are how many tubes there are. `z sqrt(V (1 / nT + 1 / nN))`: Currie's critical level with both means estimated and nothing
/// specific in either. Infinite where there is no tube of a kind.
pub fn critical_specific(variance: f64, totals: usize, nonspecifics: usize) -> f64 {
    if totals == 0 || nonspecifics == 0 {
        return f64::INFINITY;
    }
    Z * (variance * (1.0 / totals as f64 + 1.0 / nonspecifics as f64)).sqrt()
}
