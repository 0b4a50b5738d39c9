//! One call from a titration to all that is said of it.

use crate::assay::{
    Background, Measured, Observed, Sticks, Suspicion, Titration, Tube, background, measured,
    observed,
};
use crate::fit::{Compared, Fit, Model, Outcome, compare, fit_model};
use crate::judge::{
    Choice, Soundness, Suspects, asked_for, choose, soundness, supported_at, suspects,
};

/// One tube with what its counts say.
#[derive(Debug, Clone, PartialEq)]
pub struct TubeResult {
    /// Which tube.
    pub tube: Tube,
    /// Label added in nM; none for background.
    pub added_nm: Option<f64>,
    /// Its counts: those in use, or where every reading is flagged, all of them.
    pub observed: Option<Observed>,
    /// Bound and free, once a background is counted.
    pub measured: Option<Measured>,
    /// Free label in nM: as measured, and once there is a fit, with what the fit knows of where nonspecific label
    /// sticks: label on the filter was free in the tube.
    pub free_nm: Option<f64>,
    /// Specific binding in nM, `bound - ns x free`, once there is a fit.
    pub specific_nm: Option<f64>,
    /// Why it is left out, if every reading is flagged.
    pub suspect: Option<Suspicion>,
}

/// All that is said of a titration as it stands.
#[derive(Debug, Clone, PartialEq)]
pub struct Analysis {
    /// The tubes in counting order.
    pub tubes: Vec<TubeResult>,
    /// The background vials taken together.
    pub background: Option<Background>,
    /// The fit of the law that is shown, flagged readings left out.
    pub outcome: Outcome,
    /// The fit with no reading left out; `None` where nothing is flagged, since it is the same.
    pub all_readings: Option<Outcome>,
    /// Every law of binding, fitted to the same readings.
    pub compared: Compared,
    /// Which law is shown, and where the others stand.
    pub choice: Choice,
    /// Tubes and replicates that do not fit with the others; nothing is flagged by that. Empty without a fit.
    pub suspects: Suspects,
    /// Numbers to judge the shown fit by; `None` without one.
    pub soundness: Option<Soundness>,
}

impl Analysis {
    /// The fit, flagged readings left out.
    pub fn fit(&self) -> Option<&Fit> {
        self.outcome.fit()
    }

    /// The fit with no reading left out.
    pub fn without_flags(&self) -> &Outcome {
        self.all_readings.as_ref().unwrap_or(&self.outcome)
    }

    /// The fit of a law of binding, flagged readings left out.
    pub fn fit_of(&self, model: Model) -> Option<&Fit> {
        self.compared.outcome(model).fit()
    }
}

/// Free label of a tube in nM.
///
/// Label that sticks after separation was free in the tube: `LT = F + S` and `bound = S + ns F`, so that
/// `F = (LT - bound) / (1 - ns)`. Label that sticks during incubation is not free: `F = LT - bound`. Before
/// there is a fit, and where `ns` is not below one, the latter is all that can be said.
pub(crate) fn free(measured: Measured, sticks: Sticks, ns: Option<f64>) -> f64 {
    match (sticks, ns) {
        (Sticks::ToFilter, Some(ns)) if ns < 1.0 => measured.free_nm / (1.0 - ns),
        _ => measured.free_nm,
    }
}

/// Everything that can be said of a titration: a pure function, so that a notebook gives the same
/// bits live and reloaded.
pub fn analyse(titration: &Titration) -> Analysis {
    analyse_with(titration, false)
}

/// The same, with the intervals of every law of binding where `every` is set, and not only of those that matter.
pub fn analyse_with(titration: &Titration, every: bool) -> Analysis {
    let asked = |model| every || asked_for(titration, model);
    let compared = compare(titration, true, asked, supported_at);
    let choice = choose(titration, &compared);
    let outcome = compared.outcome(choice.shown).clone();
    let all_readings = titration
        .has_flags()
        .then(|| fit_model(titration, false, choice.shown));
    let fit = outcome.fit();
    let suspects = fit.map_or_else(Suspects::default, |f| suspects(titration, true, f));
    let soundness = fit.map(|f| soundness(titration, true, f));
    let blank = background(titration, true);
    let ns = outcome.fit().map(|f| f.value("ns"));
    let sticks = titration.protocol.nonspecific.sticks;
    let tubes = titration
        .tubes
        .iter()
        .map(|tube| {
            let counts =
                observed(titration, tube.no, true).or_else(|| observed(titration, tube.no, false));
            let amounts = counts
                .zip(blank)
                .and_then(|(counts, blank)| measured(titration, tube, counts, blank));
            TubeResult {
                tube: *tube,
                added_nm: titration.added_nm(tube),
                observed: counts,
                measured: amounts,
                free_nm: amounts.map(|m| free(m, sticks, ns)),
                specific_nm: amounts
                    .zip(ns)
                    .map(|(m, ns)| m.bound_nm - ns * free(m, sticks, Some(ns))),
                suspect: titration
                    .is_suspect(tube.no)
                    .then(|| {
                        titration
                            .kept(tube.no)
                            .last()
                            .and_then(|k| k.suspect.clone())
                    })
                    .flatten(),
            }
        })
        .collect();
    Analysis {
        tubes,
        background: blank,
        outcome,
        all_readings,
        compared,
        choice,
        suspects,
        soundness,
    }
}
