//! Common ways of analysing a rack, for comparison: nonspecific binding is subtracted level by level, and what is left is
//! fitted by a straight line or by a hyperbola, every level with the same weight.

use super::rack::BACKGROUND_CPM;
use super::tally::{Answer, Answers};
use rackside::assay::{Role, Titration, background, counts_per_nm, observed};
use rackside::binding::{Isotherm, OneClass};
use rackside::fit::{Ended, Evidence, Limits, RowOf, Rows, Scale, covariance, solve};
use statrs::distribution::{ContinuousCDF, StudentsT};

/// What is taken for the free label of a level.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Free {
    /// All that was added.
    Added,
    /// What was added less what is bound in the total tubes, nonspecific included.
    LessBound,
    /// What was added less what is bound specifically.
    LessSpecific,
}

/// Free and specifically bound label of every level, in nM.
#[derive(Debug, Clone, PartialEq)]
pub struct Points {
    pub free: Vec<f64>,
    pub bound: Vec<f64>,
}

impl Points {
    /// From a rack: specific is the mean of the total tubes less that of the nonspecific tubes of the level.
    pub fn of(t: &Titration, free: Free) -> Points {
        let per_nm = counts_per_nm(&t.protocol);
        let blank = background(t, true).map_or(BACKGROUND_CPM, |b| b.cpm());
        let mut points = Points {
            free: Vec::new(),
            bound: Vec::new(),
        };
        for level in &t.levels {
            let mean = |role: Role| {
                let rates: Vec<f64> = t
                    .tubes
                    .iter()
                    .filter(|x| x.role == role && x.level == Some(level.no))
                    .filter_map(|x| observed(t, x.no, true))
                    .map(|o| (o.counts / o.minutes - blank) / per_nm)
                    .collect();
                rates.iter().sum::<f64>() / rates.len() as f64
            };
            let total = mean(Role::Total);
            let specific = total - mean(Role::Nonspecific);
            let added = level.added.base();
            points.bound.push(specific);
            points.free.push(match free {
                Free::Added => added,
                Free::LessBound => added - total,
                Free::LessSpecific => added - specific,
            });
        }
        points
    }
}

/// The two-sided 95 % quantile of Student's t.
fn t95(df: f64) -> Option<f64> {
    Some(StudentsT::new(0.0, 1.0, df).ok()?.inverse_cdf(0.975))
}

/// A straight line through bound/free against bound, by ordinary least squares.
struct Line {
    mean_bound: f64,
    mean_ratio: f64,
    slope: f64,
    /// The sum of squares of bound about its mean.
    sxx: f64,
    /// The variance of a ratio about the line.
    variance: f64,
    n: f64,
    /// The quantile of Student's t.
    t: f64,
}

impl Line {
    /// `None` where the line does not fall: it has no Kd.
    fn of(points: &Points) -> Option<Line> {
        let n = points.free.len() as f64;
        let bound = &points.bound;
        let ratio: Vec<f64> = bound.iter().zip(&points.free).map(|(b, f)| b / f).collect();
        let mean = |v: &[f64]| v.iter().sum::<f64>() / n;
        let (mean_bound, mean_ratio) = (mean(bound), mean(&ratio));
        let about = || {
            let pairs = bound.iter().zip(&ratio);
            pairs.map(|(x, y)| (x - mean_bound, y - mean_ratio))
        };
        let sxx: f64 = about().map(|(x, _)| x * x).sum();
        let slope = about().map(|(x, y)| x * y).sum::<f64>() / sxx;
        let rss: f64 = about().map(|(x, y)| (y - slope * x).powi(2)).sum();
        (slope < 0.0).then_some(Line {
            mean_bound,
            mean_ratio,
            slope,
            sxx,
            variance: rss / (n - 2.0),
            n,
            t: t95(n - 2.0)?,
        })
    }

    fn kd(&self) -> f64 {
        -1.0 / self.slope
    }

    /// Where the line meets the axis of bound.
    fn sites(&self) -> f64 {
        self.mean_bound - self.mean_ratio / self.slope
    }

    /// t standard errors of the slope.
    fn reach(&self) -> f64 {
        self.t * (self.variance / self.sxx).sqrt()
    }
}

/// The straight line of bound/free on bound: Kd is minus the inverse of its slope, sites its intercept on the axis of bound.
///
/// The intervals are Fieller's (1954, J R Stat Soc B 16:175; from memory), which are exact for a line with normal errors
/// of its ordinate: a Kd belongs to the interval if the slope `-1/Kd` is within t standard errors, and an intercept if the
/// line there is within t standard errors of zero. Where they have no end, it is open.
pub fn line(points: &Points) -> Option<Answers> {
    let l = Line::of(points)?;
    let reach = l.reach();
    let top = l.slope + reach;
    let kd = Answer {
        value: l.kd(),
        low: -1.0 / (l.slope - reach),
        high: if top < 0.0 { -1.0 / top } else { f64::INFINITY },
    };
    // (ratio + slope u)^2 <= t^2 variance (1/n + u^2 / sxx), with u the intercept less the mean of bound.
    let lead = l.slope.powi(2) - reach.powi(2);
    let half = l.slope * l.mean_ratio;
    let last = l.mean_ratio.powi(2) - l.t.powi(2) * l.variance / l.n;
    let root = (half * half - lead * last).max(0.0).sqrt();
    let [low, high] = if lead > 0.0 {
        [(-half - root) / lead, (-half + root) / lead]
    } else {
        [f64::NEG_INFINITY, f64::INFINITY]
    };
    let sites = Answer {
        value: l.sites(),
        low: l.mean_bound + low,
        high: l.mean_bound + high,
    };
    Some([kd, sites])
}

/// The same line with intervals by the delta method: t standard errors of Kd and of the intercept either way, these
/// from the first derivatives.
pub fn line_delta(points: &Points) -> Option<Answers> {
    let l = Line::of(points)?;
    let answer = |value: f64, reach: f64| Answer {
        value,
        low: value - reach,
        high: value + reach,
    };
    let sites = l.sites();
    let spread = 1.0 / l.n + (sites - l.mean_bound).powi(2) / l.sxx;
    Some([
        answer(l.kd(), l.reach() / l.slope.powi(2)),
        answer(sites, l.t * (l.variance * spread).sqrt() / -l.slope),
    ])
}

impl Evidence for Points {
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

    /// Kd is searched as far beyond the levels as the program does; sites as far beyond what is bound.
    fn limits(&self, j: usize) -> Limits {
        let over = if j == 0 { &self.free } else { &self.bound };
        let top = over.iter().copied().fold(f64::MIN_POSITIVE, f64::max);
        Limits {
            low: (1e-6 * top).ln(),
            high: (1e3 * top).ln(),
        }
    }
}

/// Ordinary least squares of bound on free by the hyperbola `R F / (Kd + F)`, with the usual t intervals: t
/// asymptotic standard errors of Kd and of sites either way. No answer where the search ends at its limits.
pub fn hyperbola(points: &Points) -> Option<Answers> {
    let top = points.bound.iter().copied().fold(0.0, f64::max);
    let widest = points.free.iter().copied().fold(0.0, f64::max);
    let best = [0.02, 0.1, 0.5]
        .map(|share| [(share * widest).ln(), (1.2 * top).ln()])
        .iter()
        .map(|start| solve(points, start, None))
        .filter(|s| s.ended == Ended::Converged && !s.at_limit.contains(&true))
        .min_by(|a, b| a.cost.total_cmp(&b.cost))?;
    let cov = covariance(points, &best)?;
    let t = t95(points.free.len() as f64 - 2.0)?;
    let answer = |j: usize| {
        let value = best.theta[j].exp();
        let reach = t * cov[(j, j)].sqrt() * value;
        Answer {
            value,
            low: value - reach,
            high: value + reach,
        }
    };
    Some([answer(0), answer(1)])
}
