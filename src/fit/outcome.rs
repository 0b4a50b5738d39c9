//! What a rack says: estimates with their intervals, or what is still missing for any.

use super::evidence::{Evidence, Limits};
use super::profile::{End, ProfileCut, Profiles};
use super::rack::{Columns, RackEvidence};
use super::solver::{Ended, Solution, covariance, solve};
use super::start;
use crate::assay::{Role, Titration};
use crate::binding::{Isotherm, OneClass};
use nalgebra::DMatrix;
use std::fmt;

/// A law of binding that can be fitted.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Model {
    /// One class of sites.
    OneClass,
}

impl Model {
    /// The name in a record.
    pub fn id(self) -> &'static str {
        match self {
            Model::OneClass => "one_class",
        }
    }

    /// The name in a sentence.
    pub fn words(self) -> &'static str {
        match self {
            Model::OneClass => "one class",
        }
    }
}

/// One parameter, estimated on the ln scale.
#[derive(Debug, Clone, PartialEq)]
pub struct Estimate {
    /// Its name: `kd_nm`, `sites_nm`, `ns`, `background_cpm`.
    pub name: &'static str,
    /// The estimate.
    pub value: f64,
    /// The standard error of its logarithm from the expected information, prior rows included; none where the
    /// estimate rests on a limit.
    pub se_ln: Option<f64>,
    /// The estimate rests on its floor: all that can be said is `below high`.
    pub at_floor: bool,
    /// The lower end of the profile interval.
    pub low: End,
    /// The upper end of the profile interval.
    pub high: End,
}

/// A fitted model.
#[derive(Debug, Clone, PartialEq)]
pub struct Fit {
    /// Which model.
    pub model: Model,
    /// All parameters as fitted, in the columns of the rack's evidence.
    pub theta: Vec<f64>,
    /// Their covariance; zero for a parameter on a limit.
    pub cov: DMatrix<f64>,
    /// `-2 ln L` of the data alone.
    pub minus2lnl: f64,
    /// The squares of the CV and dilution rows.
    pub prior_term: f64,
    /// Akaike's criterion with the correction for few data (Hurvich & Tsai 1989, Biometrika 76:297; from
    /// memory), `n` = tubes used + 1; `None` where there are too few tubes for it.
    pub aicc: Option<f64>,
    /// Tubes used, background not counted.
    pub tubes_used: usize,
    /// The tube CV found, as a share.
    pub cv: f64,
    /// Kd, sites, nonspecific binding, background.
    pub estimates: Vec<Estimate>,
}

impl Fit {
    /// An estimate by its name.
    pub fn estimate(&self, name: &str) -> Option<&Estimate> {
        self.estimates.iter().find(|e| e.name == name)
    }

    /// The value of an estimate by its name; not a number where there is none.
    pub fn value(&self, name: &str) -> f64 {
        self.estimate(name).map_or(f64::NAN, |e| e.value)
    }

    /// The isotherm as fitted, for one class of sites.
    pub fn one_class(&self) -> OneClass {
        OneClass {
            kd: self.value("kd_nm"),
            sites: self.value("sites_nm"),
        }
    }
}

/// What is missing for a number to mean anything.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Missing {
    /// No background vial has been counted.
    Background,
    /// Total tubes at fewer than three levels.
    Levels {
        /// At how many there are.
        have: usize,
    },
    /// No nonspecific tube in the upper half of the ladder.
    NonspecificAbove,
    /// Too few tubes for the parameters.
    Tubes {
        /// How many there are.
        have: usize,
        /// How many are wanted.
        want: usize,
    },
    /// No tube is above background.
    NothingAboveBackground,
    /// The readings cannot tell the parameters apart.
    NotTellingApart,
}

impl fmt::Display for Missing {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Missing::Background => f.write_str("a counted background vial"),
            Missing::Levels { have } => write!(f, "total tubes at 3 levels (now {have})"),
            Missing::NonspecificAbove => {
                f.write_str("a nonspecific tube in the upper half of the levels")
            }
            Missing::Tubes { have, want } => write!(f, "{want} tubes (now {have})"),
            Missing::NothingAboveBackground => f.write_str("a tube clearly above background"),
            Missing::NotTellingApart => {
                f.write_str("readings that tell Kd, sites and nonspecific apart")
            }
        }
    }
}

/// What came of fitting a rack.
#[derive(Debug, Clone, PartialEq)]
pub enum Outcome {
    /// Estimates.
    Fitted(Box<Fit>),
    /// No number yet.
    TooEarly(Vec<Missing>),
    /// The readings are there and no solution was found.
    NoConvergence,
}

impl Outcome {
    /// The fit, if there is one.
    pub fn fit(&self) -> Option<&Fit> {
        match self {
            Outcome::Fitted(fit) => Some(fit),
            _ => None,
        }
    }
}

/// Parameters of the mean without the background, which has readings of its own.
const MEAN_PARAMETERS: usize = 3;
/// Parameters for AICc: Kd, sites, ns, b, cv.
const COUNTED_PARAMETERS: usize = 5;
/// How many starts are followed to the end.
const POLISHED: usize = 3;
/// How often a fit is taken up again from a better place met in a profile.
const MOST_RESTARTS: usize = 3;
/// The one-sided 5 % point of the normal distribution (NIST/SEMATECH e-Handbook of Statistical Methods, 1.3.6.7.1).
const Z95: f64 = 1.644_853_6;

/// Fits one class of sites to a titration; with `flags`, readings that are flagged are left out.
///
/// A pure function: the same titration gives the same bits. It always starts cold.
pub fn fit_rack(titration: &Titration, flags: bool) -> Outcome {
    let Some(evidence) = RackEvidence::<OneClass>::new(titration, flags) else {
        return Outcome::TooEarly(nothing_yet(titration, flags));
    };
    let missing = missing(titration, &evidence);
    if !missing.is_empty() {
        return Outcome::TooEarly(missing);
    }
    let n = evidence.samples().len();
    let Some(cut) = ProfileCut::new(n, MEAN_PARAMETERS, titration.protocol.numbers.confidence)
    else {
        return Outcome::NoConvergence;
    };
    let mut polished = global(&evidence).into_iter();
    let Some(mut best) = polished.next() else {
        return Outcome::NoConvergence;
    };
    let others = polished.as_slice();
    for _ in 0..=MOST_RESTARTS {
        if best.ended != Ended::Converged {
            return Outcome::NoConvergence;
        }
        let Some(cov) = covariance(&evidence, &best) else {
            return Outcome::TooEarly(vec![Missing::NotTellingApart]);
        };
        match estimates(&evidence, &best, others, &cov, cut) {
            Ok(estimates) => {
                return Outcome::Fitted(Box::new(described(&evidence, best, cov, estimates)));
            }
            Err(better) => best = solve(&evidence, &better, None),
        }
    }
    Outcome::NoConvergence
}

/// The solutions from the best cold starts, best first.
fn global(evidence: &RackEvidence<OneClass>) -> Vec<Solution> {
    let mut starts: Vec<(f64, Vec<f64>)> = start::one_class(evidence)
        .into_iter()
        .map(|theta| (evidence.cost(&theta), theta))
        .filter(|(cost, _)| cost.is_finite())
        .collect();
    starts.sort_by(|a, b| a.0.total_cmp(&b.0));
    let mut polished: Vec<Solution> = starts
        .iter()
        .take(POLISHED)
        .map(|(_, theta)| solve(evidence, theta, None))
        .collect();
    polished.sort_by(|a, b| {
        let failed = |s: &Solution| s.ended != Ended::Converged;
        failed(a).cmp(&failed(b)).then(a.cost.total_cmp(&b.cost))
    });
    polished
}

/// Estimates with intervals, or a better place to fit from.
fn estimates(
    evidence: &RackEvidence<OneClass>,
    best: &Solution,
    others: &[Solution],
    cov: &DMatrix<f64>,
    cut: ProfileCut,
) -> Result<Vec<Estimate>, Vec<f64>> {
    let at = Columns::of::<OneClass>();
    let shown = at.background() + 1;
    // Where Kd runs to the top of its search the other parameters run with it.
    let mut profiles = Profiles::new(evidence, best, cov, cut).opened_by(0);
    others.iter().for_each(|o| profiles.meet(o));
    let se = |j: usize| (!best.at_limit[j]).then(|| cov[(j, j)].sqrt());
    let end = |j: usize, upward: bool, profiles: &mut Profiles<_>| {
        let limits = evidence.limits(j);
        let within = Limits {
            low: limits.low,
            high: limits.high.min(best.theta[j] + WIDEST),
        };
        let found = profiles.end(j, upward, within);
        found.better.map_or(Ok(found.end), Err)
    };
    let mut ends = Vec::new();
    for j in 0..shown {
        ends.push([end(j, false, &mut profiles)?, end(j, true, &mut profiles)?]);
    }
    // What later profiles met may lie beyond the ends of earlier ones.
    for (j, pair) in ends.iter_mut().enumerate() {
        for (found, upward) in pair.iter_mut().zip([false, true]) {
            if profiles.contradict(j, upward, *found) {
                *found = end(j, upward, &mut profiles)?;
            }
        }
    }
    let names = OneClass::NAMES
        .iter()
        .copied()
        .chain(["ns", "background_cpm"]);
    let described = names.zip(ends).enumerate().map(|(j, (name, [low, high]))| {
        let limits = evidence.limits(j);
        Estimate {
            name,
            value: best.theta[j].exp(),
            se_ln: se(j),
            at_floor: j != 0 && best.at_limit[j] && best.theta[j] <= limits.low,
            low: low.map(f64::exp),
            high: high.map(f64::exp),
        }
    });
    Ok(described.collect())
}

/// The farthest an upper end is looked for, on the ln scale: a factor of 1e13, from any floor to any use.
const WIDEST: f64 = 30.0;

fn described(
    evidence: &RackEvidence<OneClass>,
    best: Solution,
    cov: DMatrix<f64>,
    estimates: Vec<Estimate>,
) -> Fit {
    let tubes_used = evidence.samples().len();
    let minus2lnl = evidence.minus2lnl(&best.theta);
    Fit {
        model: Model::OneClass,
        minus2lnl,
        prior_term: evidence.prior_term(&best.theta),
        aicc: aicc(minus2lnl, COUNTED_PARAMETERS, tubes_used + 1),
        tubes_used,
        cv: best.theta[Columns::of::<OneClass>().cv()].exp(),
        theta: best.theta,
        cov,
        estimates,
    }
}

/// `-2 ln L + 2 k + 2 k (k + 1) / (n - k - 1)`.
fn aicc(minus2lnl: f64, k: usize, n: usize) -> Option<f64> {
    let rest = n.checked_sub(k + 1).filter(|r| *r > 0)? as f64;
    let k = k as f64;
    Some(minus2lnl + 2.0 * k + 2.0 * k * (k + 1.0) / rest)
}

/// What is missing where there is no evidence at all.
fn nothing_yet(titration: &Titration, flags: bool) -> Vec<Missing> {
    let mut missing = Vec::new();
    if crate::assay::background(titration, flags).is_none() {
        missing.push(Missing::Background);
    }
    let samples: Vec<(Role, crate::assay::LevelNo)> = titration
        .tubes
        .iter()
        .filter(|t| crate::assay::observed(titration, t.no, flags).is_some())
        .filter_map(|t| t.level.map(|l| (t.role, l)))
        .collect();
    missing.extend(rack_missing(titration, &samples));
    missing
}

/// What is missing of the rack's layout.
fn rack_missing(titration: &Titration, samples: &[(Role, crate::assay::LevelNo)]) -> Vec<Missing> {
    let mut missing = Vec::new();
    // Two levels of one concentration say no more of a curve than one.
    let mut levels: Vec<f64> = samples
        .iter()
        .filter(|s| s.0 == Role::Total)
        .filter_map(|s| titration.level(s.1).map(|l| l.added.base()))
        .collect();
    levels.sort_by(f64::total_cmp);
    levels.dedup();
    if levels.len() < 3 {
        missing.push(Missing::Levels { have: levels.len() });
    }
    let ladder = titration.levels_by_concentration();
    let upper = &ladder[ladder.len() / 2..];
    if !samples
        .iter()
        .any(|s| s.0 == Role::Nonspecific && upper.iter().any(|l| l.no == s.1))
    {
        missing.push(Missing::NonspecificAbove);
    }
    let want = MEAN_PARAMETERS + 2;
    if samples.len() < want {
        missing.push(Missing::Tubes {
            have: samples.len(),
            want,
        });
    }
    missing
}

/// What is missing for a fit.
fn missing(titration: &Titration, evidence: &RackEvidence<OneClass>) -> Vec<Missing> {
    let samples: Vec<_> = evidence
        .samples()
        .iter()
        .map(|s| (s.role, s.level))
        .collect();
    let mut missing = rack_missing(titration, &samples);
    let (n_b, t_b) = evidence.background();
    let b = n_b / t_b;
    // Currie's critical level of a net count (1968, Anal Chem 40:586; formula from memory).
    let above = evidence.samples().iter().any(|s| {
        let net = s.counts - s.minutes * b;
        net > Z95 * (b * s.minutes * (1.0 + s.minutes / t_b)).sqrt()
    });
    if !above {
        missing.push(Missing::NothingAboveBackground);
    }
    missing
}
