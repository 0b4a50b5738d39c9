//! Laws of binding held against one class: what a further parameter gains.

use super::fitting::Fitting;
use super::outcome::{Fit, Outcome};
use super::start::Cold;
use super::statistics::f_upper_tail;
use crate::assay::{Model, Titration};
use crate::binding::{Hill, Isotherm, OneClass, TwoClasses};

/// What a law of binding with more parameters gains over one class, on the same readings.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Gain {
    /// How much lower it brings `-2 ln L` with its prior terms.
    pub drop: f64,
    /// The ratio of the gain for each further parameter to what is left: `F = (exp(drop/n) - 1) (n - p) / q`.
    pub f: f64,
    /// Its degrees of freedom, `q` and `n - p`.
    pub df: [f64; 2],
    /// The chance of as large an `F` where there is but one class: that of the F distribution, which holds for a linear model with
    /// normal errors and is only a guide here.
    pub p: f64,
    /// AICc less that of one class; `None` where there are too few tubes for it.
    pub delta_aicc: Option<f64>,
}

impl Gain {
    /// The gain of `other` over `one`, both of the same `n` tubes.
    ///
    /// The drop of `n ln RSS` of a linear model is `n ln(1 + q F / (n - p))`, so that the drop of `-2 ln L` with a variance that is
    /// itself estimated is turned into `F` by it (algebra); a chi-square would be over-eager with few tubes.
    pub fn of(one: &Fit, other: &Fit) -> Option<Gain> {
        let n = other.tubes_used;
        let q = other.mean_parameters.checked_sub(one.mean_parameters)?;
        let rest = n.checked_sub(other.mean_parameters)?;
        if q == 0 || rest == 0 || one.tubes_used != n {
            return None;
        }
        let drop = one.cost() - other.cost();
        let df = [q as f64, rest as f64];
        let f = (drop.max(0.0) / n as f64).exp_m1() * df[1] / df[0];
        Some(Gain {
            drop,
            f,
            df,
            p: f_upper_tail(f, df)?,
            delta_aicc: other.aicc.zip(one.aicc).map(|(other, one)| other - one),
        })
    }
}

/// A law of binding beside the one that is shown.
#[derive(Debug, Clone, PartialEq)]
pub struct Rival {
    /// Which.
    pub model: Model,
    /// Its fit; without intervals, unless its gain is so large that they matter.
    pub outcome: Outcome,
    /// Its gain over one class, where both were fitted.
    pub gain: Option<Gain>,
}

/// All laws of binding fitted to one rack.
#[derive(Debug, Clone, PartialEq)]
pub struct Compared {
    /// One class, with its intervals.
    pub one: Outcome,
    /// The others in the order of [`Model::ALL`].
    pub rivals: Vec<Rival>,
}

impl Compared {
    /// The outcome of a law of binding.
    pub fn outcome(&self, model: Model) -> &Outcome {
        let rival = self.rivals.iter().find(|r| r.model == model);
        rival.map_or(&self.one, |r| &r.outcome)
    }
}

/// Fits one class with its intervals and the other laws.
///
/// A law that is `asked` for gets its intervals. Of those whose gain has a chance `p` of at most `wanted(model)`, the one of the
/// lowest AICc does, and the next one only where an interval of that is not closed: they say whether it can be relied on. A law with a
/// parameter that the readings hardly determine gets none: its profiles would be long ways along a ridge.
///
/// A pure function: the same titration gives the same bits.
pub fn compare(
    titration: &Titration,
    flags: bool,
    asked: impl Fn(Model) -> bool,
    wanted: impl Fn(Model) -> f64,
) -> Compared {
    let mut one = Fitting::<OneClass>::new(titration, flags, &[]);
    let outcome = match &mut one {
        Ok(fitting) => fitting.outcome(),
        Err(outcome) => outcome.clone(),
    };
    let base = outcome.fit();
    let mut rivals = [
        Candidate::of::<TwoClasses>(titration, flags, &[], base),
        Candidate::of::<Hill>(titration, flags, &as_hill(base), base),
    ];
    for r in rivals.iter_mut().filter(|r| asked(r.rival.model)) {
        r.complete(base, |f| f.outcome());
    }
    let mut supported: Vec<&mut Candidate> = rivals
        .iter_mut()
        .filter(|r| r.rival.gain.is_some_and(|g| g.p <= wanted(r.rival.model)))
        .filter(|r| r.rival.outcome.fit().is_some_and(|f| f.vague().is_none()))
        .collect();
    let aicc = |c: &Candidate| c.rival.outcome.fit().and_then(|f| f.aicc);
    supported.sort_by(|a, b| {
        let of = |c| aicc(c).unwrap_or(f64::INFINITY);
        of(a).total_cmp(&of(b))
    });
    for r in supported {
        r.complete(base, |f| f.outcome_if_closed());
        if r.rival.outcome.fit().is_some_and(Fit::closed) {
            break;
        }
    }
    Compared {
        rivals: rivals.into_iter().map(|r| r.rival).collect(),
        one: outcome,
    }
}

/// A fitted law whose intervals can still be asked for.
trait Fitted {
    fn outcome(&mut self) -> Outcome;
    fn outcome_if_closed(&mut self) -> Outcome;
}

impl<I: Cold> Fitted for Fitting<I> {
    fn outcome(&mut self) -> Outcome {
        Fitting::outcome(self)
    }

    fn outcome_if_closed(&mut self) -> Outcome {
        Fitting::outcome_if_closed(self)
    }
}

/// A law on its way to be compared.
struct Candidate {
    rival: Rival,
    /// Until its intervals are known.
    fitting: Option<Box<dyn Fitted>>,
}

impl Candidate {
    fn of<I: Cold + 'static>(
        titration: &Titration,
        flags: bool,
        warm: &[Vec<f64>],
        one: Option<&Fit>,
    ) -> Candidate {
        let model = I::MODEL;
        match Fitting::<I>::new(titration, flags, warm) {
            Ok(fitting) => {
                let bare = fitting.bare();
                Candidate {
                    rival: Rival {
                        model,
                        gain: one.and_then(|one| Gain::of(one, &bare)),
                        outcome: Outcome::Fitted(Box::new(bare)),
                    },
                    fitting: Some(Box::new(fitting)),
                }
            }
            Err(outcome) => Candidate {
                rival: Rival {
                    model,
                    outcome,
                    gain: None,
                },
                fitting: None,
            },
        }
    }

    /// Finds its intervals. They may lead to a better optimum.
    fn complete(&mut self, one: Option<&Fit>, by: fn(&mut dyn Fitted) -> Outcome) {
        if let Some(mut fitting) = self.fitting.take() {
            self.rival.outcome = by(&mut *fitting);
            let fit = self.rival.outcome.fit();
            self.rival.gain = one.zip(fit).and_then(|(one, f)| Gain::of(one, f));
        }
    }
}

/// One class as Hill's isotherm: `n = 1`.
fn as_hill(one: Option<&Fit>) -> Vec<Vec<f64>> {
    let start = |one: &Fit| {
        let mut theta = one.theta.clone();
        theta.insert(OneClass::DIM, 0.0);
        theta
    };
    one.map(start).into_iter().collect()
}
