//! What is to be said of a fit beyond its estimates, in sentences shared by screen and paper.

use crate::analysis::Analysis;
use crate::assay::{LevelNo, Model, Role, Titration, TubeNo};
use crate::fit::{Fit, Outcome};
use crate::judge::{Disagreement, LevelError, Standing, Suspect, WhyWithheld};
use crate::units::{fixed, short, significant};

/// The chance below which levels, replicates and lack of fit are remarked on at the bench. The page has all that is below
/// 5 %; at the bench one of so many checks would cry wolf in every fourth sound rack.
const REMARKED_BELOW: f64 = 0.01;

/// A law of binding on one line.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct LawLine {
    /// Which law.
    pub model: Model,
    /// AICc, or nothing.
    pub aicc: String,
    /// The chance of its gain over one class; nothing for one class itself.
    pub p: String,
    /// Where it stands, in a sentence.
    pub standing: String,
}

/// Every law of binding: its AICc, and where it stands.
pub fn laws(analysis: &Analysis) -> Vec<LawLine> {
    let choice = &analysis.choice;
    let aicc = |m: Model| {
        let aicc = analysis.fit_of(m).and_then(|f| f.aicc);
        aicc.map_or("-".into(), |a| fixed(a, 2))
    };
    let shown = |m: Model| match (choice.shown == m, choice.pinned) {
        (true, true) => "shown: chosen by hand; ",
        (true, false) => "shown; ",
        _ => "",
    };
    let mut lines = vec![LawLine {
        model: Model::OneClass,
        aicc: aicc(Model::OneClass),
        p: String::new(),
        standing: shown(Model::OneClass).trim_end_matches("; ").into(),
    }];
    for v in &choice.verdicts {
        lines.push(LawLine {
            model: v.model,
            aicc: aicc(v.model),
            p: v.gain.map_or(String::new(), |g| p_words(g.p)),
            standing: format!("{}{}", shown(v.model), v.standing),
        });
    }
    lines
}

/// `p 0.0021`, `p < 0.0001`.
pub fn p_words(p: f64) -> String {
    if p < 1e-4 {
        "p < 0.0001".into()
    } else {
        format!("p {}", significant(p, 2))
    }
}

/// A tube that does not fit with the others, in a sentence.
pub fn suspect(t: &Titration, s: &Suspect) -> String {
    let name = t.tube(s.tube).map_or(String::new(), |x| t.name(x));
    let side = if s.residual > 0.0 { "above" } else { "below" };
    format!(
        "{name}: {} sd {side} what the others expect, {}",
        fixed(s.residual.abs(), 1),
        p_words(s.p)
    )
}

/// Replicates that disagree, in a sentence.
pub fn disagreement(t: &Titration, d: &Disagreement) -> String {
    let numbers: Vec<String> = d.tubes.iter().map(|TubeNo(n)| n.to_string()).collect();
    let one = d.one.map_or(String::new(), |TubeNo(n)| {
        format!("; by Grubbs' test vial {n} stands apart")
    });
    format!(
        "vials {} ({} of level {}, {}) scatter {} times as much as the others, {}{one}",
        numbers.join(", "),
        d.role,
        d.level.0,
        added(t, d.level),
        significant(d.f, 2),
        p_words(d.p)
    )
}

fn added(t: &Titration, level: LevelNo) -> String {
    t.level(level)
        .map_or(String::new(), |l| l.added.to_string())
}

/// A level that is off as a whole, in a sentence.
pub fn level(t: &Titration, e: &LevelError) -> String {
    format!(
        "level {} ({}) is off as a whole, as if its solution held {}{} % of what is written, {}",
        e.level.0,
        added(t, e.level),
        if e.error > 0.0 { "+" } else { "" },
        significant(100.0 * e.error, 2),
        p_words(e.p)
    )
}

/// The numbers to judge the fit by, one to a line: a name, and what was found.
pub fn soundness(t: &Titration, analysis: &Analysis) -> Vec<(&'static str, String)> {
    let Some(s) = &analysis.soundness else {
        return Vec::new();
    };
    let mut lines = Vec::new();
    lines.push((
        "lack of fit",
        s.lack_of_fit.map_or(
            "not judged: no replicates, or no more levels than parameters".into(),
            |l| {
                format!(
                    "F({},{}) {}, {}",
                    l.df_lack,
                    l.df_pure,
                    significant(l.f, 3),
                    p_words(l.p)
                )
            },
        ),
    ));
    lines.push((
        "runs",
        s.runs
            .map_or("not judged: residuals of one sign".into(), |r| {
                format!(
                    "{} runs, of {} tubes above and {} below the curve, {}",
                    r.runs.runs,
                    r.runs.plus,
                    r.runs.minus,
                    p_words(r.p)
                )
            }),
    ));
    if let Some(cv) = s.cv {
        let far = if cv.remarkable() {
            if cv.distance > 0.0 {
                ": tubes scatter more than is usual here"
            } else {
                ": tubes scatter less than is usual here"
            }
        } else {
            ""
        };
        lines.push((
            "tube CV",
            format!(
                "found {} %, usual {} %{far}",
                significant(100.0 * cv.found, 2),
                short(100.0 * cv.usual, 3)
            ),
        ));
    }
    let off: Vec<String> = s
        .levels
        .iter()
        .filter(|l| l.off())
        .map(|l| level(t, l))
        .collect();
    lines.push((
        "levels",
        if s.levels.is_empty() {
            "not judged: the readings do not tell".into()
        } else if off.is_empty() {
            let far = s
                .levels
                .iter()
                .max_by(|a, b| a.distance.abs().total_cmp(&b.distance.abs()));
            far.map_or(String::new(), |l| {
                format!(
                    "none is off; farthest level {}, {} sd",
                    l.level.0,
                    fixed(l.distance.abs(), 1)
                )
            })
        } else {
            off.join("; ")
        },
    ));
    lines
}

/// How much of the label in tubes without receptor is found again where nothing is wrong with volumes and scale.
const FOUND_AGAIN: (f64, f64) = (0.8, 1.2);

/// What is remarkable, in short, that which would mislead most first.
pub fn remarks(t: &Titration, analysis: &Analysis) -> Vec<String> {
    let mut said = Vec::new();
    let label = analysis.label.as_ref();
    if label.and_then(|l| l.standards.as_ref()?.falling).is_some() {
        said.push(
            "standards fall where they should rise: are they in the protocol's order?".into(),
        );
    }
    if let Some(found) = label.and_then(|l| l.found)
        && !(FOUND_AGAIN.0..=FOUND_AGAIN.1).contains(&found.value)
        && found.told_from(1.0).is_some()
    {
        said.push(format!(
            "tubes without receptor show {} % of the label added: aliquot, activity, walls?",
            significant(100.0 * found.value, 2)
        ));
    }
    for s in &analysis.suspects.tubes {
        let side = if s.residual > 0.0 { "above" } else { "below" };
        let name = t.tube(s.tube).map_or(String::new(), |x| role_of(x.role));
        said.push(format!(
            "look at vial {}{name}: {} sd {side} what the others expect, {}",
            s.tube.0,
            fixed(s.residual.abs(), 1),
            p_words(s.p)
        ));
    }
    let disagree = analysis.suspects.groups.iter();
    for d in disagree.filter(|d| d.p < REMARKED_BELOW) {
        let numbers: Vec<String> = d.tubes.iter().map(|n| n.0.to_string()).collect();
        said.push(format!(
            "vials {} disagree with each other, {}",
            numbers.join(", "),
            p_words(d.p)
        ));
    }
    let Some(s) = &analysis.soundness else {
        return said;
    };
    for l in s.levels.iter().filter(|l| l.p < REMARKED_BELOW) {
        said.push(format!(
            "level {} ({}) is off as a whole, about {}{} %",
            l.level.0,
            added(t, l.level),
            if l.error > 0.0 { "+" } else { "" },
            significant(100.0 * l.error, 2)
        ));
    }
    for v in &analysis.choice.verdicts {
        // Against another law than one class the gain over one class says nothing.
        let from_one = analysis.choice.shown == Model::OneClass;
        let another = analysis.choice.offered() != Some(analysis.choice.shown);
        match &v.standing {
            Standing::Offered if another => said.push(format!(
                "the fit of {} is better, {}: m compares and chooses",
                v.model.words(),
                v.gain.map_or(String::new(), |g| p_words(g.p))
            )),
            Standing::Withheld(WhyWithheld::Other(_)) => {}
            Standing::Withheld(_) if from_one => said.push(format!(
                "the fit of {} is better and not offered: m says why",
                v.model.words()
            )),
            Standing::Offered | Standing::Withheld(_) => {}
            Standing::NotSupported | Standing::NoFit(_) => {}
        }
    }
    if s.lack_of_fit.is_some_and(|l| l.p < REMARKED_BELOW) {
        said.push("levels stray from the curve more than replicates do: lack of fit".into());
    }
    if let Some(cv) = s.cv.filter(|cv| cv.remarkable()) {
        let word = if cv.distance > 0.0 { "more" } else { "less" };
        said.push(format!(
            "tubes scatter {word} than is usual here: CV {} %",
            significant(100.0 * cv.found, 2)
        ));
    }
    said
}

fn role_of(role: Role) -> String {
    match role {
        Role::Background => String::new(),
        other => format!(" ({other})"),
    }
}

/// The estimates of a law on one line: `Kd 1 0.227, Kd 2 9.15 ...` with intervals where they were asked for.
pub fn in_short(outcome: &Outcome, of: impl Fn(&Fit) -> Vec<super::values::Named>) -> String {
    outcome.fit().map_or(String::new(), |fit| {
        let each = of(fit).into_iter().map(|n| {
            if n.shown.interval.is_empty() {
                format!("{} {}", n.name, n.shown.value)
            } else {
                format!("{} {} ({})", n.name, n.shown.value, n.shown.interval)
            }
        });
        each.collect::<Vec<_>>().join(", ")
    })
}
