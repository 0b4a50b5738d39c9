//! Which law of binding: one class, unless more is clearly there and nothing else would look the same.

use super::depletion::{Depletion, depletion};
use super::suspects::{Suspect, suspects};
use crate::assay::{LevelNo, Model, Reason, Titration, TubeNo};
use crate::fit::{Compared, End, Gain, Missing, Outcome, Rival, compare};
use std::fmt;

/// Why a law that fits better is not offered.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum WhyWithheld {
    /// An interval of one of its parameters has an open end.
    OpenEnd(&'static str),
    /// The readings hardly determine one of its parameters.
    Vague(&'static str),
    /// So much label is bound at a level that a small error in what was added would look the same.
    Depletion(Depletion),
    /// Without this tube, which does not fit with the others, the gain is gone.
    Suspect(TubeNo),
    /// The other law fits as well with fewer parameters, or better.
    Other(Model),
    /// Its AICc is not lower than that of one class.
    Aicc,
}

/// Where a law of binding stands.
#[derive(Debug, Clone, PartialEq)]
pub enum Standing {
    /// The readings support it and nothing known speaks against it.
    Offered,
    /// It fits better, and still is not offered.
    Withheld(WhyWithheld),
    /// It does not fit clearly better than one class.
    NotSupported,
    /// It has no fit: what it lacks; empty where no solution was found.
    NoFit(Vec<Missing>),
}

/// A law of binding beside one class.
#[derive(Debug, Clone, PartialEq)]
pub struct Verdict {
    /// Which law.
    pub model: Model,
    /// What it gains over one class.
    pub gain: Option<Gain>,
    /// Where it stands.
    pub standing: Standing,
}

impl Verdict {
    /// Whether it is offered.
    pub fn offered(&self) -> bool {
        self.standing == Standing::Offered
    }
}

/// Which law of binding is shown, and where the others stand.
#[derive(Debug, Clone, PartialEq)]
pub struct Choice {
    /// The law shown.
    pub shown: Model,
    /// Whether somebody chose it.
    pub pinned: bool,
    /// The others against one class, in the order of [`Model::ALL`].
    pub verdicts: Vec<Verdict>,
}

impl Choice {
    /// The law that is offered, if there is one.
    pub fn offered(&self) -> Option<Model> {
        self.verdicts.iter().find(|v| v.offered()).map(|v| v.model)
    }
}

/// The chance of its gain at which a law is taken as supported.
///
/// Calibrated on simulated racks of one class so that two classes or Hill are offered in at most 5 % of them
/// (`tests/benches/models.txt`). Chi-square in place of F would be over-eager, and two classes are not a regular extension of
/// one: most of their gains by chance are held back by an interval that has an open end.
pub fn supported_at(model: Model) -> f64 {
    match model {
        Model::OneClass => 1.0,
        Model::TwoClasses | Model::Hill => 0.04,
    }
}

/// Whether the protocol asks for a law of binding to be shown.
pub fn asked_for(titration: &Titration, model: Model) -> bool {
    titration.protocol.numbers.model == Some(model)
}

/// Which law is shown and which is offered.
///
/// A second class or a Hill coefficient is offered only if its gain is supported, AICc agrees, its parameters all have closed
/// intervals, its gain does not come from a tube that does not fit with the others, and depletion holds (two-class and cooperative fits only after equilibration and depletion are settled: Jarmoskaite
/// et al. 2020, eLife 9:e57264). Of two the one of lower AICc is offered.
pub fn choose(titration: &Titration, compared: &Compared) -> Choice {
    let pin = titration.protocol.numbers.model;
    let any_supported = compared
        .rivals
        .iter()
        .any(|r| r.gain.is_some_and(|g| g.p <= supported_at(r.model)));
    let without = compared
        .one
        .fit()
        .map(|one| suspects(titration, true, one).tubes)
        .filter(|tubes| !tubes.is_empty() && any_supported)
        .map(|tubes| {
            let rest = compare(&left_out(titration, &tubes), true, |_| false, |_| 0.0);
            (tubes[0].tube, rest)
        });
    let depleted = compared
        .one
        .fit()
        .and_then(depletion)
        .filter(|d| !d.holds());
    let mut verdicts: Vec<Verdict> = compared
        .rivals
        .iter()
        .map(|rival| Verdict {
            model: rival.model,
            gain: rival.gain,
            standing: standing(
                rival,
                other_than(compared, rival),
                without.as_ref(),
                depleted,
            ),
        })
        .collect();
    let aicc = |m: Model| compared.outcome(m).fit().and_then(|f| f.aicc);
    let best = verdicts
        .iter()
        .filter(|v| v.offered())
        .min_by(|a, b| {
            let of = |v: &Verdict| aicc(v.model).unwrap_or(f64::INFINITY);
            of(a).total_cmp(&of(b))
        })
        .map(|v| v.model);
    for v in &mut verdicts {
        if let (true, Some(best)) = (v.offered(), best)
            && best != v.model
        {
            v.standing = Standing::Withheld(WhyWithheld::Other(best));
        }
    }
    Choice {
        shown: pin.unwrap_or(Model::OneClass),
        pinned: pin.is_some(),
        verdicts,
    }
}

/// The law that a rival competes with for the offer.
fn other_than(compared: &Compared, rival: &Rival) -> Model {
    let others = compared.rivals.iter().map(|r| r.model);
    others
        .filter(|m| *m != rival.model)
        .min()
        .unwrap_or(Model::OneClass)
}

/// The titration with some of its tubes left out of the fit.
fn left_out(titration: &Titration, tubes: &[Suspect]) -> Titration {
    let mut rest = titration.clone();
    for s in tubes {
        for kept in rest.kept.entry(s.tube).or_default() {
            kept.suspect = Some(Reason::NumbersAlone.into());
        }
    }
    rest
}

fn standing(
    rival: &Rival,
    other: Model,
    without: Option<&(TubeNo, Compared)>,
    depleted: Option<Depletion>,
) -> Standing {
    let fit = match &rival.outcome {
        Outcome::Fitted(fit) => fit,
        Outcome::TooEarly(missing) => return Standing::NoFit(missing.clone()),
        Outcome::NoConvergence => return Standing::NoFit(Vec::new()),
    };
    let Some(gain) = rival.gain.filter(|g| g.p <= supported_at(rival.model)) else {
        return Standing::NotSupported;
    };
    if gain.delta_aicc.is_none_or(|d| d >= 0.0) {
        return Standing::Withheld(WhyWithheld::Aicc);
    }
    let lacks = |end: End| matches!(end, End::Open | End::Failed);
    let open = fit
        .of_isotherm()
        .iter()
        .find(|e| lacks(e.low) || lacks(e.high));
    if let Some(e) = open {
        return Standing::Withheld(WhyWithheld::OpenEnd(e.name));
    }
    if let Some(e) = fit.vague() {
        return Standing::Withheld(WhyWithheld::Vague(e.name));
    }
    // Its intervals were not needed where another law fits better and has all of them.
    if fit.of_isotherm().iter().any(|e| e.low == End::Unasked) {
        return Standing::Withheld(WhyWithheld::Other(other));
    }
    if let Some((tube, rest)) = without {
        let still = rest.rivals.iter().find(|r| r.model == rival.model);
        let gain = still.and_then(|r| r.gain);
        if gain.is_none_or(|g| g.p > supported_at(rival.model)) {
            return Standing::Withheld(WhyWithheld::Suspect(*tube));
        }
    }
    depleted.map_or(Standing::Offered, |d| {
        Standing::Withheld(WhyWithheld::Depletion(d))
    })
}

impl fmt::Display for Standing {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Standing::Offered => f.write_str(
                "offered; whether the lowest level was at equilibrium is not shown, and too short an incubation looks the same",
            ),
            Standing::NotSupported => f.write_str("no clear gain over one class"),
            Standing::NoFit(missing) if missing.is_empty() => f.write_str("no fit found"),
            Standing::NoFit(missing) => {
                let list: Vec<String> = missing.iter().map(ToString::to_string).collect();
                write!(f, "no result; wanted: {}", list.join(", "))
            }
            Standing::Withheld(why) => write!(f, "fits better, not offered: {why}"),
        }
    }
}

impl fmt::Display for WhyWithheld {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            WhyWithheld::OpenEnd(name) => {
                let name = name.trim_end_matches("_nm");
                write!(f, "the interval of {name} has an open end")
            }
            WhyWithheld::Depletion(Depletion {
                level: LevelNo(no),
                share,
            }) => write!(
                f,
                "{:.0} % of the label is bound at level {no} (limit {:.0} %), so that a small error in what was added \
                 looks the same",
                100.0 * share,
                100.0 * Depletion::LIMIT
            ),
            WhyWithheld::Vague(name) => {
                let name = name.trim_end_matches("_nm");
                write!(f, "the readings hardly determine {name}")
            }
            WhyWithheld::Suspect(TubeNo(no)) => write!(
                f,
                "without vial {no}, which does not fit with the others, it does not; look at that first"
            ),
            WhyWithheld::Other(model) => {
                write!(f, "the fit of {} has the lower AICc", model.words())
            }
            WhyWithheld::Aicc => f.write_str("its AICc is not lower than that of one class"),
        }
    }
}
