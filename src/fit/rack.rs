//! A rack of tubes as evidence: expected counts, their variance, and the rows they give.

use super::evidence::{Evidence, Limits, RowOf, Rows, Scale};
use crate::assay::{
    Level, LevelNo, Made, Role, Sticks, Titration, TubeNo, Unlabelled, background, counts_per_nm,
    observed,
};
use crate::binding::{Block, Isotherm, Stuck, bound};
use statrs::function::gamma::ln_gamma;
use std::collections::BTreeMap;
use std::f64::consts::TAU;
use std::marker::PhantomData;

/// One tube that informs the fit.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Sample {
    /// Its vial number.
    pub tube: TubeNo,
    /// What it is for.
    pub role: Role,
    /// Its level.
    pub level: LevelNo,
    /// Label added, in nM, as the protocol has it.
    pub added: f64,
    /// Gross counts, recounts added up.
    pub counts: f64,
    /// Minutes counted.
    pub minutes: f64,
    pub(super) block: Block,
    /// The column of its level's dilution error, if there is one.
    column: Option<usize>,
}

/// Where the columns of a rack's parameters are, for an isotherm of `dim` parameters.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Columns {
    dim: usize,
}

impl Columns {
    /// For an isotherm of this many parameters.
    pub fn of<I: Isotherm>() -> Self {
        Columns { dim: I::DIM }
    }

    /// `ln ns`.
    pub fn ns(self) -> usize {
        self.dim
    }

    /// `ln b`, b in cpm.
    pub fn background(self) -> usize {
        self.dim + 1
    }

    /// `ln cv`.
    pub fn cv(self) -> usize {
        self.dim + 2
    }

    /// The first dilution error.
    pub fn dilutions(self) -> usize {
        self.dim + 3
    }
}

/// The step that made a level's solution.
#[derive(Debug, Clone, Copy, PartialEq)]
struct Link {
    column: usize,
    from: Option<usize>,
}

/// A rack as evidence about an isotherm, nonspecific binding, background, CV and dilution errors.
///
/// Parameters are logarithms, but for the dilution errors, which are logarithms already: a level
/// holds `LT exp(d)`.
#[derive(Debug, Clone)]
pub struct RackEvidence<I> {
    samples: Vec<Sample>,
    background: (f64, f64),
    ln_gamma_background: f64,
    per_nm: f64,
    stuck: Stuck,
    cv_prior: Option<(f64, f64)>,
    s_d: f64,
    links: Vec<Link>,
    limits: Vec<Limits>,
    added: (f64, f64),
    isotherm: PhantomData<I>,
}

/// The smallest nonspecific binding told from none.
pub(super) const NS_FLOOR: f64 = 1e-9;
/// The smallest tube CV told from none: a hundredth of a percent is below what any pipette does.
const CV_FLOOR: f64 = 1e-4;
/// The fewest counts told from none, in background and in what sites bring.
const COUNTS_FLOOR: f64 = 0.05;
/// How far beyond the levels a dissociation constant is searched.
const KD_SEARCH: f64 = 1000.0;

impl<I: Isotherm> RackEvidence<I> {
    /// The evidence in a titration; with `flags`, readings that are flagged are left out.
    ///
    /// `None` without a counted background or without a tube.
    pub fn new(titration: &Titration, flags: bool) -> Option<Self> {
        let p = &titration.protocol;
        let blank = background(titration, flags)?;
        let levels: BTreeMap<LevelNo, &Level> =
            titration.levels.iter().map(|l| (l.no, l)).collect();
        let mut samples = Vec::new();
        for t in titration
            .tubes
            .iter()
            .filter(|t| t.role != Role::Background)
        {
            let (Some(no), Some(o)) = (t.level, observed(titration, t.no, flags)) else {
                continue;
            };
            let Some(level) = levels.get(&no) else {
                continue;
            };
            let block = if t.role == Role::Nonspecific {
                block(titration)
            } else {
                Block::None
            };
            samples.push(Sample {
                tube: t.no,
                role: t.role,
                level: no,
                added: level.added.base(),
                counts: o.counts,
                minutes: o.minutes,
                block,
                column: None,
            });
        }
        let low = samples.iter().map(|s| s.added).reduce(f64::min)?;
        let high = samples.iter().map(|s| s.added).reduce(f64::max)?;
        let s_d = p.numbers.dilution_error.base();
        let links = if s_d > 0.0 {
            links(&levels, &mut samples, Columns::of::<I>().dilutions())
        } else {
            Vec::new()
        };
        let per_nm = counts_per_nm(p);
        let longest = samples.iter().map(|s| s.minutes).fold(0.0, f64::max);
        let limits = limits::<I>(
            low,
            high,
            COUNTS_FLOOR / (longest * per_nm),
            COUNTS_FLOOR / blank.minutes,
        );
        Some(RackEvidence {
            samples,
            background: (blank.counts, blank.minutes),
            ln_gamma_background: ln_gamma(blank.counts + 1.0),
            per_nm,
            stuck: match p.nonspecific.sticks {
                Sticks::ToPreparation => Stuck::DuringIncubation,
                Sticks::ToFilter => Stuck::AfterSeparation,
            },
            cv_prior: p.numbers.cv_prior.map(|c| (c.centre.ln(), c.sd_ln)),
            s_d,
            links,
            limits,
            added: (low, high),
            isotherm: PhantomData,
        })
    }

    /// The tubes that inform the fit.
    pub fn samples(&self) -> &[Sample] {
        &self.samples
    }

    /// The lowest and the highest label added, in nM.
    pub fn added(&self) -> (f64, f64) {
        self.added
    }

    /// Background counts and minutes.
    pub fn background(&self) -> (f64, f64) {
        self.background
    }

    /// Counts per minute for 1 nM bound.
    pub fn per_nm(&self) -> f64 {
        self.per_nm
    }

    /// The centre of the CV prior, or the lab's common one.
    pub fn usual_ln_cv(&self) -> f64 {
        self.cv_prior
            .map_or(crate::assay::CvPrior::COMMON.centre.ln(), |(centre, _)| {
                centre
            })
    }

    /// Expected counts of a sample without background, and derivatives of it: `by` gets those by the isotherm's
    /// parameters; returned are the value and the derivatives by `ln ns` and by the dilution error.
    fn signal(&self, s: &Sample, isotherm: &I, theta: &[f64], by: &mut [f64]) -> (f64, f64, f64) {
        let d = s.column.map_or(0.0, |c| theta[c]);
        let ns = theta[I::DIM].exp();
        let b = bound(isotherm, ns, self.stuck, s.added * d.exp(), s.block, by);
        let k = s.minutes * self.per_nm;
        by.iter_mut().for_each(|v| *v *= k);
        (k * b.value, k * b.by_ln_ns, k * b.by_ln_added)
    }

    /// `-2 ln L` of the data alone: tubes normal, background Poisson.
    pub fn minus2lnl(&self, theta: &[f64]) -> f64 {
        let at = Columns::of::<I>();
        let isotherm = I::from_ln(theta);
        let (b, cv2) = (theta[at.background()].exp(), (2.0 * theta[at.cv()]).exp());
        let mut by = [0.0; MOST_DIM];
        let mut sum = 0.0;
        for s in &self.samples {
            let (signal, _, _) = self.signal(s, &isotherm, theta, &mut by[..I::DIM]);
            let mu = s.minutes * b + signal;
            let v = mu + cv2 * signal * signal;
            sum += (s.counts - mu).powi(2) / v + (TAU * v).ln();
        }
        let (n_b, t_b) = self.background;
        let expected = t_b * b;
        sum + 2.0 * (expected - n_b * expected.ln() + self.ln_gamma_background)
    }

    /// The squares of the CV and dilution rows.
    pub fn prior_term(&self, theta: &[f64]) -> f64 {
        let cv = self.cv_prior.map_or(0.0, |(centre, sd)| {
            ((theta[Columns::of::<I>().cv()] - centre) / sd).powi(2)
        });
        cv + self
            .links
            .iter()
            .map(|l| (step(l, theta) / self.s_d).powi(2))
            .sum::<f64>()
    }

    /// The expected counts of every sample, with its variance.
    pub fn expected(&self, theta: &[f64]) -> Vec<(f64, f64)> {
        let at = Columns::of::<I>();
        let isotherm = I::from_ln(theta);
        let (b, cv2) = (theta[at.background()].exp(), (2.0 * theta[at.cv()]).exp());
        let mut by = [0.0; MOST_DIM];
        self.samples
            .iter()
            .map(|s| {
                let (signal, _, _) = self.signal(s, &isotherm, theta, &mut by[..I::DIM]);
                let mu = s.minutes * b + signal;
                (mu, mu + cv2 * signal * signal)
            })
            .collect()
    }
}

/// Room for the parameters of any isotherm.
const MOST_DIM: usize = 4;

/// The dilution error that a link's row speaks of.
fn step(l: &Link, theta: &[f64]) -> f64 {
    theta[l.column] - l.from.map_or(0.0, |c| theta[c])
}

/// What blocks the sites of a nonspecific tube.
fn block(titration: &Titration) -> Block {
    let ns = &titration.protocol.nonspecific;
    match &ns.unlabelled {
        Unlabelled::SameLigand => Block::SameLigand(ns.concentration.base()),
        Unlabelled::Other { ki: Some(ki), .. } => {
            Block::Competitor(1.0 + ns.concentration.base() / ki.base())
        }
        Unlabelled::Other { ki: None, .. } => Block::Full,
    }
}

/// A column for every level that has a sample or that one with a sample was diluted from.
///
/// Other levels bear on nothing: their own row is met exactly at its best.
fn links(levels: &BTreeMap<LevelNo, &Level>, samples: &mut [Sample], first: usize) -> Vec<Link> {
    let mut wanted: BTreeMap<LevelNo, usize> = BTreeMap::new();
    for s in samples.iter() {
        let mut at = Some(s.level);
        while let Some(no) = at {
            if wanted.insert(no, 0).is_some() {
                break;
            }
            at = match levels.get(&no).map(|l| l.made) {
                Some(Made::FromLevel(from)) => Some(from),
                _ => None,
            };
        }
    }
    wanted.values_mut().zip(first..).for_each(|(c, n)| *c = n);
    samples
        .iter_mut()
        .for_each(|s| s.column = wanted.get(&s.level).copied());
    wanted
        .iter()
        .map(|(no, column)| Link {
            column: *column,
            from: match levels.get(no).map(|l| l.made) {
                Some(Made::FromLevel(from)) => wanted.get(&from).copied(),
                _ => None,
            },
        })
        .collect()
}

fn limits<I: Isotherm>(low: f64, high: f64, sites_floor: f64, b_floor: f64) -> Vec<Limits> {
    let ln = |low: f64, high: f64| Limits {
        low: low.ln(),
        high: high.ln(),
    };
    let mut limits: Vec<Limits> = I::NAMES
        .iter()
        .map(|name| {
            if name.starts_with("kd") {
                ln(low / KD_SEARCH, high * KD_SEARCH)
            } else {
                ln(sites_floor, sites_floor.max(high) * 1e9)
            }
        })
        .collect();
    limits.push(ln(NS_FLOOR, 1e9));
    limits.push(ln(b_floor, f64::MAX));
    limits.push(ln(CV_FLOOR, 1e2));
    limits
}

impl<I: Isotherm> Evidence for RackEvidence<I> {
    fn dim(&self) -> usize {
        Columns::of::<I>().dilutions() + self.links.len()
    }

    fn cost(&self, theta: &[f64]) -> f64 {
        self.minus2lnl(theta) + self.prior_term(theta)
    }

    fn rows(&self, theta: &[f64], rows: &mut Rows) {
        rows.clear(self.dim());
        let at = Columns::of::<I>();
        let isotherm = I::from_ln(theta);
        let (b, cv2) = (theta[at.background()].exp(), (2.0 * theta[at.cv()]).exp());
        let mut by = [0.0; MOST_DIM];
        for (i, s) in self.samples.iter().enumerate() {
            let (signal, by_ns, by_d) = self.signal(s, &isotherm, theta, &mut by[..I::DIM]);
            let blank = s.minutes * b;
            let mu = blank + signal;
            let v = mu + cv2 * signal * signal;
            // mu' = signal' (and blank' = t b in the column of ln b); V' = mu' + 2 cv^2 signal signal'.
            let root = v.sqrt();
            let miss = s.counts - mu;
            let mean = rows.push(RowOf::Mean(i), miss / root);
            let weight = 1.0 / root;
            by[..I::DIM]
                .iter()
                .zip(mean.iter_mut())
                .for_each(|(d, m)| *m = d * weight);
            mean[at.ns()] = by_ns * weight;
            mean[at.background()] = blank * weight;
            if let Some(c) = s.column {
                mean[c] = by_d * weight;
            }
            let spread = rows.push(
                RowOf::Variance(i),
                (miss * miss - v) / (std::f64::consts::SQRT_2 * v),
            );
            let weight = 1.0 / (std::f64::consts::SQRT_2 * v);
            let of_signal = (1.0 + 2.0 * cv2 * signal) * weight;
            by[..I::DIM]
                .iter()
                .zip(spread.iter_mut())
                .for_each(|(d, m)| *m = d * of_signal);
            spread[at.ns()] = by_ns * of_signal;
            spread[at.background()] = blank * weight;
            spread[at.cv()] = 2.0 * cv2 * signal * signal * weight;
            if let Some(c) = s.column {
                spread[c] = by_d * of_signal;
            }
        }
        let (n_b, t_b) = self.background;
        let root = (t_b * b).sqrt();
        rows.push(RowOf::Background, (n_b - t_b * b) / root)[at.background()] = root;
        if let Some((centre, sd)) = self.cv_prior {
            rows.push(RowOf::CvPrior, -(theta[at.cv()] - centre) / sd)[at.cv()] = 1.0 / sd;
        }
        for l in &self.links {
            let row = rows.push(RowOf::Dilution(l.column), -step(l, theta) / self.s_d);
            row[l.column] = 1.0 / self.s_d;
            if let Some(from) = l.from {
                row[from] = -1.0 / self.s_d;
            }
        }
    }

    fn scale(&self) -> Scale {
        Scale::Known
    }

    fn limits(&self, j: usize) -> Limits {
        self.limits.get(j).copied().unwrap_or(Limits::NONE)
    }
}
