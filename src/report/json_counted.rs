//! What the counts can tell and what became of the label, for programs.

use crate::analysis::Analysis;
use crate::assay::limits::Limits;
use crate::assay::{Seen, Side, Titration};
use crate::judge::{CountStanding, Mean};
use serde::Serialize;

#[derive(Serialize)]
pub(super) struct JsonCounting {
    limits: Vec<JsonLimits>,
    background: JsonBackground,
    blank_limit_nm: Option<f64>,
    vials: Vec<JsonVial>,
    specific: Vec<JsonSpecific>,
    times: Option<JsonTimes>,
}

#[derive(Serialize)]
struct JsonLimits {
    seen: &'static str,
    minutes: f64,
    cpm: JsonThree,
    nm: JsonThree,
}

#[derive(Serialize)]
struct JsonThree {
    critical: f64,
    detection: f64,
    determination: f64,
}

#[derive(Serialize)]
struct JsonBackground {
    rate: f64,
    sd: f64,
    vials: usize,
    chi2: Option<f64>,
    df: Option<usize>,
    p: Option<f64>,
    scattered: bool,
    between_sd: f64,
}

#[derive(Serialize)]
struct JsonVial {
    vial: u32,
    relative_error: Option<f64>,
    standing: &'static str,
}

#[derive(Serialize)]
struct JsonSpecific {
    level: u16,
    difference_nm: f64,
    critical_nm: f64,
    found: bool,
}

#[derive(Serialize)]
struct JsonTimes {
    level: u16,
    net_cpm: f64,
    wanted_error: f64,
    minutes_for_wanted: f64,
    of_it_tube: f64,
    spent: f64,
    best_tube: f64,
    best_background: f64,
    error_now: f64,
    error_best: f64,
}

#[derive(Serialize)]
pub(super) struct JsonLabel {
    activity_dpm_per_fmol: Option<f64>,
    label_left: Option<f64>,
    ligand_left: f64,
    half_life_minutes: Option<f64>,
    added: Vec<JsonAdded>,
    added_difference: Option<JsonMean>,
    without_receptor: Vec<JsonFound>,
    found: Option<JsonMean>,
    cells: Vec<JsonCell>,
    recovered: Option<JsonMean>,
    standards: Option<JsonStandards>,
    proportional: Vec<JsonProportional>,
}

#[derive(Serialize)]
struct JsonMean {
    mean: f64,
    sd: f64,
    of: usize,
}

#[derive(Serialize)]
struct JsonAdded {
    level: u16,
    nominal_nm: f64,
    counted_nm: f64,
    sd_nm: f64,
    difference: f64,
    distance: f64,
    fitted_nm: Option<f64>,
}

#[derive(Serialize)]
struct JsonFound {
    level: u16,
    over_added: f64,
    sd: f64,
    over_counted: Option<f64>,
}

#[derive(Serialize)]
struct JsonCell {
    vial: u32,
    share: f64,
    sd: f64,
}

#[derive(Serialize)]
struct JsonStandards {
    highest: f64,
    above: Vec<u32>,
    below: Vec<u32>,
    linearity: Option<JsonLinearity>,
}

#[derive(Serialize)]
struct JsonLinearity {
    f: f64,
    df: [usize; 2],
    p: f64,
    down: bool,
    from_nm: Option<f64>,
}

#[derive(Serialize)]
struct JsonProportional {
    role: &'static str,
    exponent: f64,
    se: f64,
    p: f64,
    levels: usize,
}

fn three(l: Limits) -> JsonThree {
    JsonThree {
        critical: l.critical,
        detection: l.detection,
        determination: l.determination,
    }
}

fn mean(m: Option<Mean>) -> Option<JsonMean> {
    m.map(|m| JsonMean {
        mean: m.value,
        sd: m.sd,
        of: m.of,
    })
}

/// What a side of a cell is called.
pub(super) fn side(side: Side) -> &'static str {
    match side {
        Side::Protein => "protein",
        Side::Ligand => "ligand",
    }
}

fn seen(seen: Seen) -> &'static str {
    match seen {
        Seen::Bound => "bound",
        Seen::Unbound => "free",
        Seen::Added => "added",
        Seen::Standard => "standard",
        Seen::Side(s) => side(s),
    }
}

pub(super) fn counting(analysis: &Analysis) -> Option<JsonCounting> {
    let (c, b) = (analysis.counting.as_ref()?, analysis.background?);
    let limits = c.limits.iter().map(|l| JsonLimits {
        seen: seen(l.seen),
        minutes: l.minutes,
        cpm: three(l.cpm),
        nm: three(l.nm),
    });
    let vials = c.vials.iter().map(|v| JsonVial {
        vial: v.tube.0,
        relative_error: v.relative_error,
        standing: match v.standing {
            CountStanding::Background => "background",
            CountStanding::Critical => "critical",
            CountStanding::Detected => "detected",
        },
    });
    let specific = c.levels.iter().map(|l| JsonSpecific {
        level: l.level.0,
        difference_nm: l.difference_nm,
        critical_nm: l.critical_nm,
        found: l.found(),
    });
    Some(JsonCounting {
        limits: limits.collect(),
        background: JsonBackground {
            rate: b.cpm(),
            sd: b.variance.sqrt(),
            vials: b.vials,
            chi2: b.dispersion.map(|d| d.chi2),
            df: b.dispersion.map(|d| d.df),
            p: b.dispersion.map(|d| d.p),
            scattered: b.scattered(),
            between_sd: b.between.sqrt(),
        },
        blank_limit_nm: c.reader.map(|r| r.nm),
        vials: vials.collect(),
        specific: specific.collect(),
        times: c.times.as_ref().map(|t| JsonTimes {
            level: t.level.0,
            net_cpm: t.net_cpm,
            wanted_error: t.aim,
            minutes_for_wanted: t.wanted,
            of_it_tube: t.wanted_tube,
            spent: t.spent,
            best_tube: t.best[0],
            best_background: t.best[1],
            error_now: t.errors[0],
            error_best: t.errors[1],
        }),
    })
}

pub(super) fn label(titration: &Titration, analysis: &Analysis) -> Option<JsonLabel> {
    let found = analysis.label.as_ref()?;
    let p = &titration.protocol;
    let signal = p.separation.counted.is_signal();
    let added = found.added.iter().map(|a| JsonAdded {
        level: a.level.0,
        nominal_nm: a.nominal_nm,
        counted_nm: a.counted_nm,
        sd_nm: a.sd_nm,
        difference: a.difference(),
        distance: a.distance(),
        fitted_nm: a.fitted_nm,
    });
    let without = found.without_receptor.iter().map(|l| JsonFound {
        level: l.level.0,
        over_added: l.over_added,
        sd: l.sd,
        over_counted: l.over_counted,
    });
    let cells = found.cells.iter().map(|c| JsonCell {
        vial: c.tube.0,
        share: c.share,
        sd: c.sd,
    });
    let proportional = found.proportional.iter().map(|p| JsonProportional {
        role: p.role.word(),
        exponent: p.exponent,
        se: p.se,
        p: p.p,
        levels: p.levels,
    });
    Some(JsonLabel {
        activity_dpm_per_fmol: (!signal).then(|| p.activity()),
        label_left: p.label_decayed().map(|d| d.left),
        ligand_left: p.concentration_left(),
        half_life_minutes: p.ligand.decay.and_then(|_| p.ligand.half_life_minutes()),
        added: added.collect(),
        added_difference: mean(found.added_difference),
        without_receptor: without.collect(),
        found: mean(found.found),
        cells: cells.collect(),
        recovered: mean(found.recovered),
        standards: found.standards.as_ref().map(|s| JsonStandards {
            highest: s.highest,
            above: s.above.iter().map(|t| t.0).collect(),
            below: s.below.iter().map(|t| t.0).collect(),
            linearity: s.linearity.map(|l| JsonLinearity {
                f: l.f,
                df: l.df,
                p: l.p,
                down: l.down,
                from_nm: l.from_nm,
            }),
        }),
        proportional: proportional.collect(),
    })
}
