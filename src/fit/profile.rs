//! Profile-likelihood intervals: how far one parameter may be pushed before the best the others can do
//! becomes too poor.

use super::evidence::{Evidence, Limits, Scale};
use super::solver::{Ended, Solution, solve};
use statrs::distribution::{ContinuousCDF, StudentsT};

/// One end of an interval, on the parameter's own scale.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum End {
    /// Here.
    At(f64),
    /// The cut is not reached within the limits of the search.
    Open,
    /// A refit on the way did not converge.
    Failed,
}

impl End {
    /// The value, where there is one.
    pub fn value(self) -> Option<f64> {
        match self {
            End::At(v) => Some(v),
            End::Open | End::Failed => None,
        }
    }

    /// The end with its value changed.
    pub fn map(self, f: impl Fn(f64) -> f64) -> End {
        match self {
            End::At(v) => End::At(f(v)),
            other => other,
        }
    }
}

/// How much poorer a fit may become: the cut on the profile, and how the cost is measured.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ProfileCut {
    /// The cut on `-2 ln L`.
    cut: f64,
    /// The number of observations, where the scale is estimated.
    n: f64,
}

impl ProfileCut {
    /// `n ln(1 + t^2 / (n - p))` with `t` the two-sided quantile of Student's t on `n - p` degrees of freedom.
    ///
    /// For a linear model with the scale estimated, the profile of `n ln RSS` reaches this cut exactly where the
    /// t interval ends (Bates & Watts 1988, Nonlinear Regression Analysis, ch. 6; algebra). `None` unless `n > p`.
    pub fn new(n: usize, p: usize, confidence: f64) -> Option<ProfileCut> {
        let df = n.checked_sub(p).filter(|df| *df > 0)? as f64;
        let t = StudentsT::new(0.0, 1.0, df)
            .ok()?
            .inverse_cdf(0.5 + confidence / 2.0);
        let n = n as f64;
        Some(ProfileCut {
            cut: n * (t * t / df).ln_1p(),
            n,
        })
    }

    /// The cut itself.
    pub fn cut(&self) -> f64 {
        self.cut
    }

    /// How much poorer `cost` is than `best`, on the scale of the cut.
    fn excess(&self, scale: Scale, best: f64, cost: f64) -> f64 {
        match scale {
            Scale::Known => cost - best,
            Scale::Estimated => self.n * (cost / best).ln(),
        }
    }
}

/// What a search for one end found.
#[derive(Debug, Clone, PartialEq)]
pub struct ProfileEnd {
    /// The end.
    pub end: End,
    /// A better optimum met on the way, from which the fit should be taken up again.
    pub better: Option<Vec<f64>>,
}

impl From<End> for ProfileEnd {
    fn from(end: End) -> Self {
        ProfileEnd { end, better: None }
    }
}

const MOST_WIDENINGS: usize = 60;
const MOST_NARROWINGS: usize = 60;
/// How exactly an end is found, on the parameter's own scale (a logarithm for binding).
const TOLERANCE: f64 = 1e-9;

/// The end of the interval of parameter `j`, upward or downward, within `within`.
///
/// `se` sets the first step. An end is open if the cut is not reached within the limits, or only with parameter
/// `opens` resting on the top of its own search: then what stopped the profile is the edge of the search
/// and not the readings.
#[allow(clippy::too_many_arguments)]
pub fn profile_end<E: Evidence>(
    evidence: &E,
    best: &Solution,
    j: usize,
    upward: bool,
    cut: ProfileCut,
    se: Option<f64>,
    within: Limits,
    opens: Option<usize>,
) -> ProfileEnd {
    let scale = evidence.scale();
    let sign = if upward { 1.0 } else { -1.0 };
    let wall = if upward { within.high } else { within.low };
    let target = cut.cut.sqrt();
    let start = best.theta[j];
    if (wall - start) * sign <= 0.0 {
        return End::Open.into();
    }
    let mut warm = best.theta.clone();
    let mut slope: Option<Vec<f64>> = None;
    let mut inner = (0.0, 0.0);
    let mut step = se.map_or(0.25, |se| target * se).clamp(1e-6, 4.0);
    // Reaching an end of another parameter's search while the cut is still far is remembered by the state at the end.
    let at = |distance: f64, warm: &[f64], from: f64, slope: &Option<Vec<f64>>| {
        let mut guess = warm.to_vec();
        if let Some(s) = slope {
            guess
                .iter_mut()
                .zip(s)
                .for_each(|(g, s)| *g += s * (distance - from));
        }
        guess[j] = start + sign * distance;
        let mut done = solve(evidence, &guess, Some(j));
        if done.ended != Ended::Converged {
            let mut plain = warm.to_vec();
            plain[j] = guess[j];
            done = solve(evidence, &plain, Some(j));
        }
        done
    };
    let far = (wall - start).abs();
    let mut outer = None;
    for _ in 0..MOST_WIDENINGS {
        let distance = (inner.0 + step).min(far);
        let done = at(distance, &warm, inner.0, &slope);
        if done.ended != Ended::Converged {
            return End::Failed.into();
        }
        let excess = cut.excess(scale, best.cost, done.cost);
        if excess < -1e-6 {
            return ProfileEnd {
                end: End::Failed,
                better: Some(done.theta),
            };
        }
        let root = excess.max(0.0).sqrt();
        if root >= target {
            outer = Some((distance, root, done));
            break;
        }
        if distance >= far {
            return End::Open.into();
        }
        slope = Some(rate(&warm, &done.theta, distance - inner.0));
        warm = done.theta;
        // The signed root is nearly straight in the parameter: aim a little beyond the cut, and at most three times as far.
        let pace = (root - inner.1) / (distance - inner.0);
        let wanted = if pace > 0.0 {
            1.02 * (target - root) / pace
        } else {
            f64::INFINITY
        };
        inner = (distance, root);
        step = wanted.clamp(0.02 * distance, 2.0 * distance + 0.25);
    }
    let Some((mut high, mut high_root, mut at_high)) = outer else {
        return End::Open.into();
    };
    let mut side = 0i32;
    let (mut low, mut low_root) = inner;
    let (mut low_weight, mut high_weight) = (low_root - target, high_root - target);
    for _ in 0..MOST_NARROWINGS {
        if high - low <= TOLERANCE || (high_root - target).abs() <= 1e-10 * target {
            break;
        }
        let mut mid = low - low_weight * (high - low) / (high_weight - low_weight);
        if !(mid > low && mid < high) {
            mid = 0.5 * (low + high);
        }
        let done = at(mid, &warm, low, &slope);
        if done.ended != Ended::Converged {
            return End::Failed.into();
        }
        let excess = cut.excess(scale, best.cost, done.cost);
        if excess < -1e-6 {
            return ProfileEnd {
                end: End::Failed,
                better: Some(done.theta),
            };
        }
        let root = excess.max(0.0).sqrt();
        if (root - target).abs() <= 1e-10 * target {
            (high, at_high) = (mid, done);
            break;
        }
        // Regula falsi with the stale end's weight halved (the Illinois rule).
        if root >= target {
            (high, high_root, at_high) = (mid, root, done);
            high_weight = root - target;
            if side == 1 {
                low_weight *= 0.5;
            }
            side = 1;
        } else {
            slope = Some(rate(&warm, &done.theta, mid - low));
            warm = done.theta;
            (low, low_root) = (mid, root);
            low_weight = low_root - target;
            if side == -1 {
                high_weight *= 0.5;
            }
            side = -1;
        }
    }
    if opens.is_some_and(|k| k != j && at_high.theta[k] >= evidence.limits(k).high) {
        return End::Open.into();
    }
    End::At(start + sign * high).into()
}

/// How the other parameters move with the pinned one.
fn rate(from: &[f64], to: &[f64], distance: f64) -> Vec<f64> {
    from.iter()
        .zip(to)
        .map(|(f, t)| (t - f) / distance)
        .collect()
}
