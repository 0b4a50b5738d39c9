//! The summary for programs. Its keys are stable and documented in the README.

use super::json_counted::{self, JsonCounting, JsonLabel};
use super::json_judged::{JsonModel, JsonSoundness, JsonSuspects, models, soundness, suspects};
use super::values;
use crate::analysis::{Analysis, TubeResult};
use crate::assay::{Titration, sites_by_amount};
use crate::fit::{End, Estimate, Fit, Outcome};
use serde::Serialize;

/// The number of this layout; raised when a key changes its meaning or goes.
const FORMAT: u32 = 1;

#[derive(Serialize)]
struct Summary<'a> {
    format: u32,
    title: &'a str,
    confidence: f64,
    tubes: Vec<JsonTube>,
    fit: Option<JsonFit>,
    without_flags: Option<JsonFit>,
    too_early: Option<Vec<String>>,
    no_convergence: bool,
    model_chosen: Option<&'static str>,
    models: Vec<JsonModel>,
    suspects: JsonSuspects,
    soundness: Option<JsonSoundness>,
    counting: Option<JsonCounting>,
    label: Option<JsonLabel>,
    left_out: Vec<String>,
}

#[derive(Serialize)]
struct JsonTube {
    vial: u32,
    level: Option<u16>,
    role: &'static str,
    replicate: String,
    side: Option<&'static str>,
    standard: Option<u16>,
    added_nm: Option<f64>,
    counts: Option<f64>,
    minutes: Option<f64>,
    signal_minutes: Option<f64>,
    counted_nm: Option<f64>,
    counted_sd_nm: Option<f64>,
    bound_nm: Option<f64>,
    bound_sd_nm: Option<f64>,
    free_nm: Option<f64>,
    free_in_tube_nm: Option<f64>,
    specific_nm: Option<f64>,
    expected_counts: Option<f64>,
    residual: Option<f64>,
    suspect: bool,
    suspect_reason: Option<String>,
    lost: Option<String>,
}

#[derive(Serialize)]
pub(super) struct JsonFit {
    model: &'static str,
    tubes_used: usize,
    minus2lnl: f64,
    prior_term: f64,
    aicc: Option<f64>,
    cv: f64,
    parameters: Vec<JsonParameter>,
    sites: Option<JsonSites>,
    sites_by_amount: Vec<JsonSites>,
}

#[derive(Serialize)]
struct JsonParameter {
    name: &'static str,
    estimate: f64,
    se_ln: Option<f64>,
    low: Option<f64>,
    high: Option<f64>,
    low_end: &'static str,
    high_end: &'static str,
    at_floor: bool,
}

#[derive(Serialize)]
struct JsonSites {
    name: &'static str,
    unit: &'static str,
    estimate: f64,
    low: Option<f64>,
    high: Option<f64>,
}

/// A titration and its analysis as JSON, ending in a line feed.
///
/// # Errors
/// Only if a number could not be written, which finite values rule out.
pub fn json(titration: &Titration, analysis: &Analysis) -> Result<String, serde_json::Error> {
    let (too_early, no_convergence) = match &analysis.outcome {
        Outcome::TooEarly(missing) => (
            Some(missing.iter().map(ToString::to_string).collect()),
            false,
        ),
        Outcome::NoConvergence => (None, true),
        Outcome::Fitted(_) => (None, false),
    };
    let summary = Summary {
        format: FORMAT,
        title: &titration.protocol.title,
        confidence: titration.protocol.numbers.confidence,
        tubes: analysis
            .tubes
            .iter()
            .map(|t| tube(titration, analysis, t))
            .collect(),
        fit: analysis.fit().map(|f| fit(titration, f)),
        without_flags: analysis.without_flags().fit().map(|f| fit(titration, f)),
        too_early,
        no_convergence,
        model_chosen: titration.protocol.numbers.model.map(|m| m.id()),
        models: models(titration, analysis),
        suspects: suspects(analysis),
        soundness: soundness(analysis),
        counting: json_counted::counting(analysis),
        label: json_counted::label(titration, analysis),
        left_out: values::left_out(&titration.protocol),
    };
    let mut text = serde_json::to_string_pretty(&summary)?;
    text.push('\n');
    Ok(text)
}

fn tube(titration: &Titration, analysis: &Analysis, t: &TubeResult) -> JsonTube {
    let fitted = analysis
        .fit()
        .and_then(|f| f.tubes.iter().find(|x| x.tube == t.tube.no));
    JsonTube {
        vial: t.tube.no.0,
        level: t.tube.level.map(|l| l.0),
        role: t.tube.role.word(),
        replicate: t.tube.letter(),
        side: t.tube.side.map(json_counted::side),
        standard: t.tube.standard,
        added_nm: t.added_nm,
        counts: t.observed.map(|o| o.counts),
        minutes: t.observed.map(|o| o.minutes),
        signal_minutes: t.observed.map(|o| o.signal_minutes),
        counted_nm: t.label.map(|l| l.nm),
        counted_sd_nm: t.label.map(|l| l.sd_nm),
        bound_nm: t.measured.map(|m| m.bound_nm),
        bound_sd_nm: t.measured.map(|m| m.bound_sd_nm),
        free_nm: t.measured.map(|m| m.free_nm),
        free_in_tube_nm: t.free_nm,
        specific_nm: t.specific_nm,
        expected_counts: fitted.map(|x| x.expected),
        residual: fitted.map(|x| x.residual()),
        suspect: t.suspect.is_some(),
        suspect_reason: t.suspect.as_ref().map(ToString::to_string),
        lost: titration.lost.get(&t.tube.no).map(|l| l.why.to_string()),
    }
}

/// What kind of end an interval has.
fn end(end: End) -> &'static str {
    match end {
        End::At(_) => "at",
        End::Open => "open",
        End::Failed => "failed",
        End::Unasked => "not_asked",
    }
}

pub(super) fn fit(titration: &Titration, f: &Fit) -> JsonFit {
    let parameters = f
        .estimates
        .iter()
        .map(|e| JsonParameter {
            name: e.name,
            estimate: e.value,
            se_ln: e.se_ln,
            low: e.low.value(),
            high: e.high.value(),
            low_end: end(e.low),
            high_end: end(e.high),
            at_floor: e.at_floor,
        })
        .collect();
    let by_amount = |e: &Estimate| {
        sites_by_amount(&titration.protocol).map(|scale| {
            let of = |nm: f64| nm * scale.per_nm;
            let e = values::by_amount(&titration.protocol, f, e);
            JsonSites {
                name: e.name,
                unit: scale.unit,
                estimate: of(e.value),
                low: e.low.value().map(of),
                high: e.high.value().map(of),
            }
        })
    };
    let all_sites = f
        .of_isotherm()
        .iter()
        .filter(|e| e.name.starts_with("sites"));
    JsonFit {
        model: f.model.id(),
        tubes_used: f.tubes_used,
        minus2lnl: f.minus2lnl,
        prior_term: f.prior_term,
        aicc: f.aicc,
        cv: f.cv,
        parameters,
        sites: f.estimate("sites_nm").and_then(by_amount),
        sites_by_amount: all_sites.filter_map(by_amount).collect(),
    }
}
