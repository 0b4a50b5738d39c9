//! One call from a titration to all that is said of it.

use crate::assay::{
    Background, Counting, Label, Measured, Observed, Role, Silent, Step, Suspicion, Titration,
    Tube, Value, Work, background, label, measured, observed_in,
};
use crate::binding::Sticking;
use crate::fit::{Compared, Fit, Model, Outcome, compare, fit_model};
use crate::judge::{
    Choice, CountStatistics, LabelFound, Soundness, Suspects, Vial, asked_for, choose,
    count_statistics, label_found, soundness, supported_at, suspects,
};

/// One tube with what its counts say.
#[derive(Debug, Clone, PartialEq)]
pub struct TubeResult {
    /// Which tube.
    pub tube: Tube,
    /// Label added in nM at the time of the assay, or what a standard holds; none for background.
    pub added_nm: Option<f64>,
    /// Its counts: those in use, or where every reading is flagged, all of them.
    pub observed: Option<Observed>,
    /// The label in the vial as counted, once a background is counted.
    pub label: Option<Label>,
    /// Bound and free, once a background is counted.
    pub measured: Option<Measured>,
    /// Free label in nM: as measured, and once there is a fit, with what the fit knows of where nonspecific label
    /// sticks: label on the filter was free in the tube.
    pub free_nm: Option<f64>,
    /// Specific binding in nM, `bound - ns x free`, once there is a fit.
    pub specific_nm: Option<f64>,
    /// Why it is left out, if every reading is flagged, or every reading of the other side of its cell.
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
    /// What the counts can tell; `None` before a background is counted.
    pub counting: Option<CountStatistics>,
    /// What became of the label; `None` before a background is counted.
    pub label: Option<LabelFound>,
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
pub(crate) fn free(measured: Measured, sticking: Option<Sticking>) -> f64 {
    free_with(measured, sticking, &mut Silent)
}

fn free_with<W: Work>(measured: Measured, sticking: Option<Sticking>, work: &mut W) -> f64 {
    let counted = measured.free_nm;
    match sticking {
        Some(s) if s.after > 0.0 && s.after < 1.0 => {
            let free = counted / (1.0 - s.after);
            work.step(|| {
                Step::new(
                    "free in the tube: what sticks after separation was free",
                    Value::new("F'", free, "nM"),
                    "F / (1 - m)",
                    [
                        Value::new("F", counted, "nM"),
                        Value::new("m", s.after, "nonspecific after separation"),
                    ],
                )
            });
            free
        }
        _ => counted,
    }
}

/// Specific binding of a tube in nM: `bound - ns x free`; a tube without receptor has only what sticks after separation to take off.
pub(crate) fn specific(measured: Measured, role: Role, sticking: Sticking) -> f64 {
    specific_with(measured, role, sticking, &mut Silent)
}

fn specific_with<W: Work>(measured: Measured, role: Role, sticking: Sticking, work: &mut W) -> f64 {
    let free = free_with(measured, Some(sticking), work);
    let ns = match role {
        Role::NoReceptor => sticking.after,
        _ => sticking.during + sticking.after,
    };
    let specific = measured.bound_nm - ns * free;
    work.step(|| {
        Step::new(
            "specific binding",
            Value::new("S", specific, "nM"),
            "B - n * F'",
            [
                Value::new("B", measured.bound_nm, "nM"),
                Value::new("n", ns, "nonspecific for one of free, as fitted"),
                Value::new("F'", free, "nM"),
            ],
        )
    });
    specific
}

/// Every step from the readings of a tube to bound, free and, with a fit, specific.
pub fn working(titration: &Titration, analysis: &Analysis, tube: &Tube) -> Vec<Step> {
    let mut steps = crate::assay::working(titration, tube, analysis.background);
    let of = analysis.tubes.iter().find(|t| t.tube.no == tube.no);
    let measured = of.and_then(|t| t.measured);
    if let (Some(measured), Some(fit)) = (measured, analysis.fit()) {
        let sticks = titration.protocol.nonspecific.sticks;
        if let Some(sticking) = fit.told_sticking(sticks) {
            specific_with(measured, tube.role, sticking, &mut steps);
        }
    }
    steps
}

/// Why a tube is left out, if every reading of it is flagged, or of the other side of its cell.
fn left_out(titration: &Titration, tube: &Tube) -> Option<Suspicion> {
    let own = |no| {
        let kept = titration.kept(no).last();
        let flagged = titration.is_suspect(no);
        kept.filter(|_| flagged).and_then(|k| k.suspect.clone())
    };
    own(tube.no).or_else(|| own(titration.other_side(tube)?.no))
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
    let sticks = titration.protocol.nonspecific.sticks;
    let sticking = outcome.fit().and_then(|f| f.told_sticking(sticks));
    let counting = Counting::of(&titration.protocol);
    let in_use = |tube: &Tube| {
        let of = |flags| observed_in(&counting, titration, tube, flags);
        of(true).or_else(|| of(false))
    };
    let tubes: Vec<TubeResult> = titration
        .tubes
        .iter()
        .map(|tube| {
            let counts = in_use(tube);
            let both = counts.zip(blank);
            let amounts = both.and_then(|(counts, blank)| measured(titration, tube, counts, blank));
            TubeResult {
                tube: *tube,
                added_nm: titration
                    .added_nm(tube)
                    .or_else(|| titration.standard_nm(tube)),
                observed: counts,
                label: both.and_then(|(counts, blank)| label(titration, tube, counts, blank)),
                measured: amounts,
                free_nm: amounts.map(|m| free(m, sticking)),
                specific_nm: amounts
                    .zip(sticking)
                    .map(|(m, sticking)| specific(m, tube.role, sticking)),
                suspect: left_out(titration, tube),
            }
        })
        .collect();
    let vials: Vec<Vial> = tubes.iter().filter_map(vial).collect();
    let counting = blank.map(|b| count_statistics(titration, &vials, b, outcome.fit()));
    let label = blank.map(|b| label_found(titration, &vials, b, outcome.fit()));
    Analysis {
        tubes,
        background: blank,
        outcome,
        all_readings,
        compared,
        choice,
        suspects,
        soundness,
        counting,
        label,
    }
}

/// A tube as those who judge without a fit take it; none that has no reading.
fn vial(of: &TubeResult) -> Option<Vial> {
    Some(Vial {
        tube: of.tube,
        added_nm: of.added_nm,
        observed: of.observed?,
        label: of.label,
        measured: of.measured,
        suspect: of.suspect.is_some(),
    })
}
