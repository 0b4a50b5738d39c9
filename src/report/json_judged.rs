//! The laws of binding and the judgement of a fit, for programs.

use super::json::{JsonFit, fit};
use crate::analysis::Analysis;
use crate::assay::{Model, Titration};
use crate::judge::Standing;
use serde::Serialize;

#[derive(Serialize)]
pub(super) struct JsonModel {
    model: &'static str,
    shown: bool,
    standing: &'static str,
    reason: String,
    drop: Option<f64>,
    f: Option<f64>,
    df: Option<[f64; 2]>,
    p: Option<f64>,
    delta_aicc: Option<f64>,
    fit: Option<JsonFit>,
}

#[derive(Serialize)]
pub(super) struct JsonSuspects {
    tubes: Vec<JsonSuspect>,
    groups: Vec<JsonGroup>,
}

#[derive(Serialize)]
struct JsonSuspect {
    vial: u32,
    residual: f64,
    p: f64,
}

#[derive(Serialize)]
struct JsonGroup {
    level: u16,
    role: &'static str,
    vials: Vec<u32>,
    f: f64,
    p: f64,
    apart: Option<u32>,
}

#[derive(Serialize)]
pub(super) struct JsonSoundness {
    lack_of_fit: Option<JsonLack>,
    runs: Option<JsonRuns>,
    cv: Option<JsonCv>,
    levels: Vec<JsonLevel>,
}

#[derive(Serialize)]
struct JsonLack {
    f: f64,
    df: [usize; 2],
    p: f64,
}

#[derive(Serialize)]
struct JsonRuns {
    runs: usize,
    above: usize,
    below: usize,
    p: f64,
}

#[derive(Serialize)]
struct JsonCv {
    found: f64,
    usual: f64,
    distance: f64,
}

#[derive(Serialize)]
struct JsonLevel {
    level: u16,
    error: f64,
    distance: f64,
    p: f64,
    off: bool,
}

pub(super) fn models(titration: &Titration, analysis: &Analysis) -> Vec<JsonModel> {
    let one = |model: Model| {
        let verdict = analysis.choice.verdicts.iter().find(|v| v.model == model);
        let gain = verdict.and_then(|v| v.gain);
        let (standing, reason) = match verdict.map(|v| &v.standing) {
            None => ("base", String::new()),
            Some(s) => (
                match s {
                    Standing::Offered => "offered",
                    Standing::Withheld(_) => "withheld",
                    Standing::NotSupported => "not_supported",
                    Standing::NoFit(_) => "no_fit",
                },
                s.to_string(),
            ),
        };
        JsonModel {
            model: model.id(),
            shown: analysis.choice.shown == model,
            standing,
            reason,
            drop: gain.map(|g| g.drop),
            f: gain.map(|g| g.f),
            df: gain.map(|g| g.df),
            p: gain.map(|g| g.p),
            delta_aicc: gain.and_then(|g| g.delta_aicc),
            fit: analysis.fit_of(model).map(|f| fit(titration, f)),
        }
    };
    Model::ALL.into_iter().map(one).collect()
}

pub(super) fn suspects(analysis: &Analysis) -> JsonSuspects {
    let tubes = analysis.suspects.tubes.iter().map(|s| JsonSuspect {
        vial: s.tube.0,
        residual: s.residual,
        p: s.p,
    });
    let groups = analysis.suspects.groups.iter().map(|d| JsonGroup {
        level: d.level.0,
        role: d.role.word(),
        vials: d.tubes.iter().map(|t| t.0).collect(),
        f: d.f,
        p: d.p,
        apart: d.one.map(|t| t.0),
    });
    JsonSuspects {
        tubes: tubes.collect(),
        groups: groups.collect(),
    }
}

pub(super) fn soundness(analysis: &Analysis) -> Option<JsonSoundness> {
    let s = analysis.soundness.as_ref()?;
    let levels = s.levels.iter().map(|l| JsonLevel {
        level: l.level.0,
        error: l.error,
        distance: l.distance,
        p: l.p,
        off: l.off(),
    });
    Some(JsonSoundness {
        lack_of_fit: s.lack_of_fit.map(|l| JsonLack {
            f: l.f,
            df: [l.df_lack, l.df_pure],
            p: l.p,
        }),
        runs: s.runs.map(|r| JsonRuns {
            runs: r.runs.runs,
            above: r.runs.plus,
            below: r.runs.minus,
            p: r.p,
        }),
        cv: s.cv.map(|c| JsonCv {
            found: c.found,
            usual: c.usual,
            distance: c.distance,
        }),
        levels: levels.collect(),
    })
}
