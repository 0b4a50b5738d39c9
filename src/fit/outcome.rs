//! What a rack says: estimates with their intervals, or what is still missing for any.

use super::missing::Missing;
use super::profile::End;
use crate::assay::{LevelNo, Model, Role, Sticks, TubeNo};
use crate::binding::{Law, Sticking, Stuck};
use nalgebra::DMatrix;

/// One parameter, estimated on the ln scale.
#[derive(Debug, Clone, PartialEq)]
pub struct Estimate {
    /// Its name: that of a parameter of the isotherm, `ns`, or `background_cpm`.
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

impl Estimate {
    /// The same with a further relative error (the standard deviation of its logarithm) that no reading knows of, as of the
    /// amount that an estimate is divided by.
    ///
    /// Where a profile is a parabola of half-width `h` at the cut, the best of it and of a normal error together is one of
    /// half-width `sqrt(h^2 + cut sd^2)` (algebra).
    pub fn widened(&self, sd_ln: f64, cut: f64) -> Estimate {
        let ln = self.value.ln();
        let away = |end: End, sign: f64| {
            end.map(|v| (ln + sign * ((v.ln() - ln).powi(2) + cut * sd_ln * sd_ln).sqrt()).exp())
        };
        Estimate {
            se_ln: self.se_ln.map(|se| se.hypot(sd_ln)),
            low: away(self.low, -1.0),
            high: away(self.high, 1.0),
            ..self.clone()
        }
    }
}

/// A tube beside what the fit expects of it.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct FittedTube {
    /// Its vial number.
    pub tube: TubeNo,
    /// What it is for.
    pub role: Role,
    /// Its level; none for standards and blanks.
    pub level: Option<LevelNo>,
    /// Gross counts, recounts added up.
    pub counts: f64,
    /// Gross counts expected.
    pub expected: f64,
    /// Their variance, of counting and between tubes.
    pub variance: f64,
    /// Counts for one nM of what is seen in it.
    pub per_nm: f64,
    /// The share of its label that is bound, as fitted; where the tube tells.
    pub taken: Option<f64>,
    /// Whether the fit uses it; one that is flagged is only compared.
    pub used: bool,
}

impl FittedTube {
    /// Counts less expected, in standard deviations.
    pub fn residual(&self) -> f64 {
        (self.counts - self.expected) / self.variance.sqrt()
    }
}

/// A place on a profile.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ProfilePlace {
    /// The value that the parameter is held at.
    pub value: f64,
    /// How much `-2 ln L` with its prior terms is above its lowest.
    pub excess: f64,
}

/// A fitted model.
#[derive(Debug, Clone, PartialEq)]
pub struct Fit {
    /// Which model.
    pub model: Model,
    /// The isotherm as fitted.
    pub law: Law,
    /// All parameters as fitted, in the columns of the rack's evidence.
    pub theta: Vec<f64>,
    /// Their covariance; zero for a parameter on a limit.
    pub cov: DMatrix<f64>,
    /// `-2 ln L` of the data alone.
    pub minus2lnl: f64,
    /// The squares of the CV, dilution and scale rows.
    pub prior_term: f64,
    /// Akaike's criterion with the correction for few data (Hurvich & Tsai 1989, Biometrika 76:297; from
    /// memory), `n` = tubes used + 1; `None` where there are too few tubes for it.
    pub aicc: Option<f64>,
    /// Tubes used that went through the assay; a dialysis cell is one.
    pub tubes_used: usize,
    /// How many parameters of the mean counts there are, background not counted.
    pub mean_parameters: usize,
    /// How many of the estimates are parameters of the isotherm; they come first.
    pub of_law: usize,
    /// The tube CV found, as a share.
    pub cv: f64,
    /// The parameters of the isotherm, nonspecific binding (and that of the filter apart, where tubes without receptor tell), background
    /// or blank, and the gain of a reader.
    pub estimates: Vec<Estimate>,
    /// The profile of the first parameter of the isotherm, lowest value first; empty where no interval was asked for.
    pub profile: Vec<ProfilePlace>,
    /// The cut on the profile that ends the intervals.
    pub cut: f64,
    /// Every tube with a reading beside what is expected of it.
    pub tubes: Vec<FittedTube>,
}

impl Fit {
    /// An estimate by its name.
    pub fn estimate(&self, name: &str) -> Option<&Estimate> {
        self.estimates.iter().find(|e| e.name == name)
    }

    /// The nonspecific binding that sticks in the tube and that sticks to the filter, for one of free label.
    pub fn sticking(&self, sticks: Sticks) -> Sticking {
        let ns = self.value("ns");
        match (self.estimate("ns_filter"), sticks) {
            (Some(filter), _) => Sticking {
                during: ns,
                after: filter.value,
            },
            (None, Sticks::ToPreparation) => Sticking::all(ns, Stuck::DuringIncubation),
            (None, Sticks::ToFilter) => Sticking::all(ns, Stuck::AfterSeparation),
        }
    }

    /// The same, where the readings determine nonspecific binding at all: none of its estimates has a standard error above 1.5 on the ln
    /// scale, but one that rests on its floor is as good as zero.
    pub fn told_sticking(&self, sticks: Sticks) -> Option<Sticking> {
        let vague = |name: &str| {
            let of = self.estimate(name);
            of.is_some_and(|e| !e.at_floor && e.se_ln.is_none_or(|se| se > 1.5))
        };
        // What sticks to the filter may be next to nothing beside what sticks to the preparation, and the other way round.
        let all = if self.estimate("ns_filter").is_some() {
            vague("ns") && vague("ns_filter")
        } else {
            vague("ns")
        };
        (!all).then(|| self.sticking(sticks))
    }

    /// The value of an estimate by its name; not a number where there is none.
    pub fn value(&self, name: &str) -> f64 {
        self.estimate(name).map_or(f64::NAN, |e| e.value)
    }

    /// What the fit minimises: `-2 ln L` of the data with what is known beforehand.
    pub fn cost(&self) -> f64 {
        self.minus2lnl + self.prior_term
    }

    /// The parameters of the isotherm.
    pub fn of_isotherm(&self) -> &[Estimate] {
        &self.estimates[..self.of_law.min(self.estimates.len())]
    }

    /// A parameter of the isotherm that the readings hardly determine: it rests on a limit, or its standard error is more than 1.5 on
    /// the ln scale, a factor of twenty either way at 95 %.
    pub fn vague(&self) -> Option<&Estimate> {
        let hardly = |e: &&Estimate| e.se_ln.is_none_or(|se| se > 1.5);
        self.of_isotherm().iter().find(hardly)
    }

    /// Whether every parameter of the isotherm has an interval with both ends.
    pub fn closed(&self) -> bool {
        self.of_isotherm()
            .iter()
            .all(|e| matches!((e.low, e.high), (End::At(_), End::At(_))))
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
