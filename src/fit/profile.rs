//! Profile-likelihood intervals: how far one parameter may be pushed before the best the others can do
//! becomes too poor.

use super::evidence::{Evidence, Limits, Scale};
use super::solver::{Ended, Solution, solve};
use nalgebra::DMatrix;
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
    /// Nobody asked for it.
    Unasked,
}

impl End {
    /// The value, where there is one.
    pub fn value(self) -> Option<f64> {
        match self {
            End::At(v) => Some(v),
            End::Open | End::Failed | End::Unasked => None,
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
/// How often a walk is taken up again beyond an end that a place met earlier shows to be no end.
const MOST_RESUMED: usize = 4;
/// How exactly an end is found, on the parameter's own scale (a logarithm for binding).
const TOLERANCE: f64 = 1e-9;
/// How exactly the cut is met, relative to its root: as exactly as refits know their cost.
const NEAR: f64 = 1e-9;

/// The profiles of one solution, and every place under the cut that was met along them.
///
/// A profile may have two branches (Kd far above the levels or among them), and refits that start from the
/// last one stay on theirs although the other is lower. So every place under the cut is
/// kept: an interval has to reach at least as far as each of them, and where a profile is about to
/// cross the cut the best of them is tried as another start.
#[derive(Debug, Clone)]
pub struct Profiles<'e, E> {
    evidence: &'e E,
    best: &'e Solution,
    cov: &'e DMatrix<f64>,
    cut: ProfileCut,
    opens: Vec<usize>,
    pairs: Vec<(usize, usize)>,
    met: Vec<Met>,
    trace: Vec<(usize, f64, f64)>,
}

/// A place under the cut.
#[derive(Debug, Clone)]
struct Met {
    theta: Vec<f64>,
    root: f64,
}

/// A refit with the parameter pinned some way from the estimate.
struct Refit {
    distance: f64,
    /// The square root of the excess, nearly straight in the parameter.
    root: f64,
    theta: Vec<f64>,
}

impl<'e, E: Evidence> Profiles<'e, E> {
    /// The profiles of `best`, cut at `cut`; its covariance `cov` says how far and whereto the first steps go.
    pub fn new(
        evidence: &'e E,
        best: &'e Solution,
        cov: &'e DMatrix<f64>,
        cut: ProfileCut,
    ) -> Self {
        Profiles {
            evidence,
            best,
            cov,
            cut,
            opens: Vec::new(),
            pairs: Vec::new(),
            met: Vec::new(),
            trace: Vec::new(),
        }
    }

    /// Counts an end as open if the cut is reached only with parameter `k` resting on the top of its own search: then
    /// what stopped the profile is the edge of the search and not the readings.
    pub fn opened_by(mut self, k: usize) -> Self {
        self.opens.push(k);
        self
    }

    /// Counts an end as open if one of two parameters that could change places reaches the other on the way: beyond
    /// that it is the other one.
    pub fn opened_by_meeting(mut self, j: usize, k: usize) -> Self {
        self.pairs.push((j, k));
        self
    }

    /// The places met on the profile of parameter `j`, lowest value first: its value, and the excess of the cost
    /// there over the best.
    pub fn trace(&self, j: usize) -> Vec<(f64, f64)> {
        let of_j = self.trace.iter().filter(|t| t.0 == j);
        let mut places: Vec<(f64, f64)> = of_j.map(|t| (t.1, t.2)).collect();
        places.sort_by(|a, b| a.0.total_cmp(&b.0));
        places.dedup_by(|a, b| (a.0 - b.0).abs() <= 1e-9);
        places
    }

    /// Looks at the profile of parameter `j` at more places, `distances` from the estimate (with their sign), each refit
    /// started from the one before.
    pub fn look(&mut self, j: usize, distances: &[f64]) {
        let start = self.best.theta[j];
        let variance = self.cov[(j, j)];
        let mut warm = self.best.theta.clone();
        let mut at = 0.0;
        for d in distances {
            if variance > 0.0 {
                let along = self.cov.column(j);
                let by = (d - at) / variance;
                warm.iter_mut().zip(&along).for_each(|(w, c)| *w += by * c);
            }
            warm[j] = start + d;
            let done = solve(self.evidence, &warm, Some(j));
            if done.ended == Ended::Converged {
                let excess = self.excess(done.cost).max(0.0);
                self.trace.push((j, start + d, excess));
                warm = done.theta;
                at = *d;
            } else {
                warm.clone_from(&self.best.theta);
                at = 0.0;
            }
        }
    }

    /// Takes another solution of the same evidence into account, where it is under the cut.
    pub fn meet(&mut self, other: &Solution) {
        let root = self.root(other.cost);
        if other.ended == Ended::Converged && root < self.target() && self.alike(&other.theta) {
            let theta = other.theta.clone();
            self.met.push(Met { theta, root });
        }
    }

    /// The end of the interval of parameter `j`, upward or downward, within `within`.
    ///
    /// The end is open if the cut is not reached within the limits, or as [`Profiles::opened_by`] has it.
    pub fn end(&mut self, j: usize, upward: bool, within: Limits) -> ProfileEnd {
        let sign = if upward { 1.0 } else { -1.0 };
        let wall = if upward { within.high } else { within.low };
        let start = self.best.theta[j];
        if (wall - start) * sign <= 0.0 {
            return End::Open.into();
        }
        let before = self.met.len();
        // Without the readings' say on the parameter there is no direction to start in, and a step is as good as another.
        let variance = self.cov[(j, j)];
        let known = variance > 0.0;
        let slope = known.then(|| {
            let along = self.cov.column(j);
            along.iter().map(|c| sign * c / variance).collect()
        });
        let step = if known {
            self.target() * variance.sqrt()
        } else {
            0.25
        };
        Walk {
            j,
            sign,
            start,
            far: (wall - start).abs(),
            warm: self.best.theta.clone(),
            slope,
            inner: (0.0, 0.0),
            before,
            profiles: self,
        }
        .end(step.clamp(1e-6, 4.0))
        .unwrap_or_else(|stopped| stopped)
    }

    /// Whether a place under the cut lies beyond `end`, which then is none.
    pub fn contradict(&self, j: usize, upward: bool, end: End) -> bool {
        let sign = if upward { 1.0 } else { -1.0 };
        matches!(end, End::At(end) if self.met.iter().any(|m| (m.theta[j] - end) * sign > 1e-6))
    }

    /// Whether parameters that could change places are in the order that they have in the best solution.
    fn alike(&self, theta: &[f64]) -> bool {
        let best = &self.best.theta;
        let same = |(j, k): &(usize, usize)| (theta[*j] - theta[*k]) * (best[*j] - best[*k]) > 0.0;
        self.pairs.iter().all(same)
    }

    fn target(&self) -> f64 {
        self.cut.cut.sqrt()
    }

    fn excess(&self, cost: f64) -> f64 {
        self.cut.excess(self.evidence.scale(), self.best.cost, cost)
    }

    fn root(&self, cost: f64) -> f64 {
        self.excess(cost).max(0.0).sqrt()
    }
}

/// The search for one end: a walk outwards to the cut.
struct Walk<'p, 'e, E> {
    profiles: &'p mut Profiles<'e, E>,
    j: usize,
    sign: f64,
    start: f64,
    /// The distance of the wall.
    far: f64,
    /// The last refit under the cut.
    warm: Vec<f64>,
    /// How the other parameters moved on the way to it.
    slope: Option<Vec<f64>>,
    /// Its distance and root.
    inner: (f64, f64),
    /// How many places had been met before this walk.
    before: usize,
}

impl<E: Evidence> Walk<'_, '_, E> {
    fn end(mut self, mut step: f64) -> Result<ProfileEnd, ProfileEnd> {
        for _ in 0..=MOST_RESUMED {
            let outer = self.widen(step)?;
            let end = self.narrow(outer)?;
            if self.pass(end.distance)? {
                step = self.stride(self.inner.1 / self.inner.0);
                continue;
            }
            let p = &self.profiles;
            let edge = |k: &usize| *k != self.j && end.theta[*k] >= p.evidence.limits(*k).high;
            return Ok(if p.opens.iter().any(edge) || self.met_other(&end.theta) {
                End::Open.into()
            } else {
                End::At(self.start + self.sign * end.distance).into()
            });
        }
        Err(End::Failed.into())
    }

    /// Steps outwards until the cut is crossed.
    fn widen(&mut self, mut step: f64) -> Result<Refit, ProfileEnd> {
        let target = self.profiles.target();
        for _ in 0..MOST_WIDENINGS {
            let distance = (self.inner.0 + step).min(self.far);
            let mut refit = self.refit(distance)?;
            if refit.root >= target {
                if let Some(other) = self.elsewhere(distance)?
                    && other.root < refit.root
                {
                    refit = other;
                }
                if refit.root >= target {
                    if !self.pass(distance)? {
                        return Ok(refit);
                    }
                    step = self.stride(self.inner.1 / self.inner.0);
                    continue;
                }
            }
            if distance >= self.far || self.met_other(&refit.theta) {
                return Err(End::Open.into());
            }
            // The root is nearly straight in the parameter: aim a little beyond the cut, and at most three times as far.
            let pace = (refit.root - self.inner.1) / (distance - self.inner.0);
            self.advance(refit);
            step = self.stride(pace);
        }
        Err(End::Open.into())
    }

    /// Whether the pinned parameter has reached the one that it could change places with.
    fn met_other(&self, theta: &[f64]) -> bool {
        let best = &self.profiles.best.theta;
        let meet = |(j, k): &(usize, usize)| {
            (self.j == *j || self.j == *k)
                && (theta[*j] - theta[*k]) * (best[*j] - best[*k]).signum() <= 0.0
        };
        self.profiles.pairs.iter().any(meet)
    }

    /// How far to go next where the root rises at `pace`.
    fn stride(&self, pace: f64) -> f64 {
        let (distance, root) = self.inner;
        let wanted = if pace > 0.0 {
            1.02 * (self.profiles.target() - root) / pace
        } else {
            f64::INFINITY
        };
        wanted.clamp(0.02 * distance, 2.0 * distance + 0.25)
    }

    /// Narrows the crossing down: regula falsi with the stale end's weight halved (the Illinois rule).
    fn narrow(&mut self, outer: Refit) -> Result<Refit, ProfileEnd> {
        let target = self.profiles.target();
        let mut high = outer;
        let (mut low_weight, mut high_weight) = (self.inner.1 - target, high.root - target);
        let mut side = 0i32;
        for _ in 0..MOST_NARROWINGS {
            let low = self.inner.0;
            let width = high.distance - low;
            if width <= TOLERANCE || (high.root - target).abs() <= NEAR * target {
                break;
            }
            let mut mid = low - low_weight * width / (high_weight - low_weight);
            if !(mid > low && mid < high.distance) {
                mid = 0.5 * (low + high.distance);
            }
            self.slope = Some(self.rates(&high));
            let refit = self.refit(mid)?;
            let over = refit.root - target;
            if over.abs() <= NEAR * target {
                return Ok(refit);
            }
            if over >= 0.0 {
                high = refit;
                high_weight = over;
                if side == 1 {
                    low_weight *= 0.5;
                }
                side = 1;
            } else {
                self.advance(refit);
                low_weight = over;
                if side == -1 {
                    high_weight *= 0.5;
                }
                side = -1;
            }
        }
        Ok(high)
    }

    /// Takes a refit under the cut as the place to go on from.
    fn advance(&mut self, refit: Refit) {
        self.slope = Some(self.rates(&refit));
        self.inner = (refit.distance, refit.root);
        self.warm.clone_from(&refit.theta);
        // Where two parameters have changed places on the way of another one, what is met is of the other name.
        if self.profiles.alike(&refit.theta) {
            self.profiles.met.push(Met {
                theta: refit.theta,
                root: refit.root,
            });
        }
    }

    /// How the parameters move from the last refit under the cut to another one.
    fn rates(&self, to: &Refit) -> Vec<f64> {
        let moved = to.distance - self.inner.0;
        let rate = |(from, to): (&f64, &f64)| (to - from) / moved;
        self.warm.iter().zip(&to.theta).map(rate).collect()
    }

    /// Goes on from the farthest place under the cut, if that is beyond `distance`; open if that is the wall.
    fn pass(&mut self, distance: f64) -> Result<bool, ProfileEnd> {
        let away = |m: &Met| (m.theta[self.j] - self.start) * self.sign;
        let farthest = self
            .profiles
            .met
            .iter()
            .max_by(|a, b| away(a).total_cmp(&away(b)));
        let Some(m) = farthest.filter(|m| away(m) > distance + 1e-6) else {
            return Ok(false);
        };
        if away(m) >= self.far {
            return Err(End::Open.into());
        }
        self.inner = (away(m), m.root);
        self.warm.clone_from(&m.theta);
        self.slope = None;
        Ok(true)
    }

    /// The pinned value at a distance.
    fn pinned(&self, distance: f64) -> f64 {
        self.start + self.sign * distance
    }

    /// The best refit at a distance, started from the last one carried on.
    fn refit(&mut self, distance: f64) -> Result<Refit, ProfileEnd> {
        let mut guess = self.warm.clone();
        if let Some(slope) = &self.slope {
            let by = distance - self.inner.0;
            guess.iter_mut().zip(slope).for_each(|(g, s)| *g += s * by);
        }
        let carried = self.solved(distance, guess);
        let done = if carried.ended == Ended::Converged {
            carried
        } else {
            self.solved(distance, self.warm.clone())
        };
        let refit = if done.ended == Ended::Converged {
            self.judged(distance, done)
        } else {
            self.elsewhere(distance)?
                .ok_or_else(|| ProfileEnd::from(End::Failed))
        }?;
        let excess = refit.root * refit.root;
        let place = (self.j, self.pinned(distance), excess);
        self.profiles.trace.push(place);
        Ok(refit)
    }

    /// The refit from the best of the places met before this walk.
    fn elsewhere(&self, distance: f64) -> Result<Option<Refit>, ProfileEnd> {
        let places = self.profiles.met[..self.before].iter().map(|m| {
            let mut theta = m.theta.clone();
            theta[self.j] = self.pinned(distance);
            (self.profiles.evidence.cost(&theta), theta)
        });
        let nearest = places
            .filter(|(cost, _)| cost.is_finite())
            .min_by(|a, b| a.0.total_cmp(&b.0));
        let Some((_, theta)) = nearest else {
            return Ok(None);
        };
        let done = self.solved(distance, theta);
        if done.ended == Ended::Converged {
            self.judged(distance, done).map(Some)
        } else {
            Ok(None)
        }
    }

    fn solved(&self, distance: f64, mut guess: Vec<f64>) -> Solution {
        guess[self.j] = self.pinned(distance);
        solve(self.profiles.evidence, &guess, Some(self.j))
    }

    /// A refit by its excess, or the news of a better optimum.
    fn judged(&self, distance: f64, done: Solution) -> Result<Refit, ProfileEnd> {
        if self.profiles.excess(done.cost) < -1e-6 {
            return Err(ProfileEnd {
                end: End::Failed,
                better: Some(done.theta),
            });
        }
        Ok(Refit {
            distance,
            root: self.profiles.root(done.cost),
            theta: done.theta,
        })
    }
}
