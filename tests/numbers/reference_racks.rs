//! Racks of many kinds against an independent implementation of the same likelihood, `reference.py` beside this
//! file: bracketed balances, a general minimiser from many starts, derivatives by the complex step, intervals by
//! re-minimised profiles, every figure certified in 40-digit arithmetic. The racks are simulated; what they were
//! simulated from stands in `data/racks/*.json` with what the reference found.

use crate::racks::{find, keep};
use rackside::assay::{
    CvPrior, Dilution, Except, Levels, Loss, Reason, Role, Sheet, Sticks, Titration, Unlabelled,
};
use rackside::binding::OneClass;
use rackside::fit::{Columns, End, Fit, fit_rack};
use rackside::units::{Dimension, Mark, Measure, Typed};
use serde::Deserialize;
use std::collections::BTreeMap;

#[derive(Deserialize)]
pub struct Rack {
    settings: Settings,
    tubes: Vec<Vial>,
    background: Vec<Blank>,
    /// What the reference found.
    pub expected: Expected,
}

#[derive(Deserialize)]
struct Settings {
    volume_ml: f64,
    efficiency: f64,
    sa_ci_per_mmol: f64,
    fraction_counted: f64,
    unlabelled: Blocker,
    sticks: String,
    s_d: f64,
    dilution: String,
    cv_prior: Option<Prior>,
    scale_errors: Option<BTreeMap<String, f64>>,
}

#[derive(Deserialize)]
struct Blocker {
    kind: String,
    concentration_nm: f64,
    ki_nm: Option<f64>,
}

#[derive(Deserialize)]
struct Prior {
    centre: f64,
    sd_ln: f64,
}

#[derive(Deserialize)]
struct Vial {
    level: u16,
    role: String,
    replicate: u16,
    added_nm: f64,
    counts: Option<f64>,
    minutes: Option<f64>,
    lost: bool,
    suspect: bool,
}

#[derive(Deserialize)]
struct Blank {
    counts: f64,
    minutes: f64,
}

#[derive(Deserialize)]
pub struct Expected {
    fit: Found,
    fit_all: Found,
    /// What it found for each law of binding, where it was asked.
    pub models: Option<BTreeMap<String, serde_json::Value>>,
}

#[derive(Deserialize)]
pub struct Found {
    pub n: usize,
    pub minus2lnl: f64,
    pub prior_term: f64,
    pub aicc: f64,
    pub estimates: BTreeMap<String, f64>,
    pub se_ln: BTreeMap<String, Option<f64>>,
    pub intervals: BTreeMap<String, Ends>,
    pub at_floor: Vec<String>,
    pub dilution_d: Option<BTreeMap<u16, f64>>,
    pub scale_e: Option<BTreeMap<String, f64>>,
}

#[derive(Deserialize)]
pub struct Ends {
    pub low: Option<f64>,
    pub high: Option<f64>,
}

fn typed<D: Dimension>(value: f64, unit: &str) -> Typed<Measure<D>> {
    Typed::parse(&format!("{value} {unit}"), Mark::Point).unwrap()
}

/// The titration a rack file describes.
pub fn titration(rack: &Rack) -> Titration {
    let s = &rack.settings;
    let mut sheet = Sheet::parse(Sheet::EXAMPLE).unwrap();
    let p = &mut sheet.protocol;
    p.incubation.volume = typed(s.volume_ml, "mL");
    p.counter.efficiency = typed(s.efficiency, "");
    p.ligand.specific_activity = typed(s.sa_ci_per_mmol, "Ci/mmol");
    // No more of H-3 than ten atoms give: what is hotter is labelled with iodine.
    if s.sa_ci_per_mmol > 290.0 {
        p.ligand.label = "I-125".into();
    }
    p.separation.fraction = typed(s.fraction_counted, "");
    p.nonspecific.concentration = typed(s.unlabelled.concentration_nm, "nM");
    p.nonspecific.unlabelled = match s.unlabelled.kind.as_str() {
        "same_ligand" => Unlabelled::SameLigand,
        "other_ligand" => Unlabelled::Other {
            name: "another".into(),
            ki: s.unlabelled.ki_nm.map(|ki| typed(ki, "nM")),
        },
        other => panic!("{other}"),
    };
    p.nonspecific.sticks = match s.sticks.as_str() {
        "preparation" => Sticks::ToPreparation,
        "filter" => Sticks::ToFilter,
        other => panic!("{other}"),
    };
    p.numbers.dilution_error = typed(s.s_d, "");
    p.numbers.cv_prior = s.cv_prior.as_ref().map(|c| CvPrior {
        centre: c.centre,
        sd_ln: c.sd_ln,
    });
    for (name, sd) in s.scale_errors.iter().flatten() {
        let errors = &mut p.numbers.scale_errors;
        *match name.as_str() {
            "stock" => &mut errors.stock,
            "specific_activity" => &mut errors.specific_activity,
            "efficiency" => &mut errors.efficiency,
            "volume" => &mut errors.volume,
            other => panic!("{other}"),
        } = Some(typed(*sd, ""));
    }
    let mut levels: BTreeMap<u16, (f64, u16, u16)> = BTreeMap::new();
    for t in &rack.tubes {
        let (nm, totals, nonspecifics) = levels.entry(t.level).or_insert((t.added_nm, 0, 0));
        assert_eq!(*nm, t.added_nm);
        *(if t.role == "total" {
            totals
        } else {
            nonspecifics
        }) += 1;
    }
    let l = &mut sheet.ladder;
    l.levels = Levels::List(levels.values().map(|v| typed(v.0, "nM")).collect());
    l.dilution = match s.dilution.as_str() {
        "serial" => Dilution::Serial,
        "from_stock" => Dilution::EachFromStock,
        other => panic!("{other}"),
    };
    l.except = levels
        .iter()
        .map(|(level, (_, total, nonspecific))| Except {
            level: *level,
            total: *total,
            nonspecific: *nonspecific,
        })
        .collect();
    l.background = rack.background.len() as u16;
    let mut t = sheet.titration().unwrap();
    for v in &rack.tubes {
        let role = Role::from_word(&v.role).unwrap();
        let tube = find(&t, role, Some(v.level), v.replicate);
        match (v.lost, v.counts, v.minutes) {
            (true, None, None) => {
                let loss = Loss {
                    entry: 2,
                    why: Reason::Spilled.into(),
                };
                t.lost.insert(tube.no, loss);
            }
            (false, Some(counts), Some(minutes)) => {
                let flag = v.suspect.then_some(Reason::NumbersAlone);
                keep(&mut t, &tube, counts, minutes, flag);
            }
            _ => panic!("level {} replicate {}", v.level, v.replicate),
        }
    }
    for (b, replicate) in rack.background.iter().zip(1..) {
        let tube = find(&t, Role::Background, None, replicate);
        keep(&mut t, &tube, b.counts, b.minutes, None);
    }
    t
}

/// To eight digits: both sides are far closer than that to the true optimum.
const RELATIVE: f64 = 1e-8;

#[track_caller]
fn near(what: &str, got: f64, want: f64) {
    assert!(
        (got - want).abs() <= RELATIVE * want.abs(),
        "{what}: got {got}, want {want}"
    );
}

/// An end that stands, or none where it is open.
#[track_caller]
fn end(what: &str, got: End, want: Option<f64>) {
    match (got, want) {
        (End::At(got), Some(want)) => near(what, got, want),
        (End::Open, None) => {}
        other => panic!("{what}: {other:?}"),
    }
}

/// Where our interval may differ from the reference's by a rule of our own, which must be an open end.
type OpenByRule = Option<(&'static str, &'static str)>;

fn agrees(fit: &Fit, want: &Found, open: OpenByRule) {
    let at = Columns::of::<OneClass>();
    assert_eq!(fit.tubes_used, want.n);
    assert!((fit.minus2lnl - want.minus2lnl).abs() < 1e-8);
    assert!((fit.prior_term - want.prior_term).abs() < 1e-8);
    assert!((fit.aicc.unwrap() - want.aicc).abs() < 1e-8);
    near("cv", fit.cv, want.estimates["cv"]);
    let se_cv = fit.cov[(at.cv(), at.cv())].sqrt();
    near("se of ln cv", se_cv, want.se_ln["cv"].unwrap());
    for e in &fit.estimates {
        near(e.name, e.value, want.estimates[e.name]);
        assert_eq!(e.at_floor, want.at_floor.iter().any(|f| f == e.name));
        match (e.se_ln, want.se_ln[e.name]) {
            (Some(got), Some(want)) => near(&format!("se of ln {}", e.name), got, want),
            (got, want) => assert_eq!(got, want, "se of ln {}", e.name),
        }
    }
    // The reference has no interval of the background.
    assert_eq!(want.intervals.len(), 3);
    for (name, ends) in &want.intervals {
        let e = fit.estimate(name).unwrap();
        for (side, got, want) in [("low", e.low, ends.low), ("high", e.high, ends.high)] {
            if open == Some((name, side)) {
                assert_eq!((got, want.is_some()), (End::Open, true), "{name} {side}");
            } else {
                end(&format!("{name} {side}"), got, want);
            }
        }
    }
    let d = want.dilution_d.iter().flatten();
    assert_eq!(fit.theta.len(), at.dilutions() + d.clone().count());
    for ((level, want), got) in d.zip(&fit.theta[at.dilutions()..]) {
        assert!((got - want).abs() < 1e-8, "d of level {level}");
    }
}

fn held(json: &str, open: OpenByRule) {
    let rack: Rack = serde_json::from_str(json).unwrap();
    let t = titration(&rack);
    agrees(fit_rack(&t, true).fit().unwrap(), &rack.expected.fit, open);
    agrees(
        fit_rack(&t, false).fit().unwrap(),
        &rack.expected.fit_all,
        open,
    );
}

macro_rules! racks {
    ($($(#[$doc:meta])* $name:ident $open:expr;)*) => {$(
        $(#[$doc])*
        #[test]
        fn $name() {
            held(include_str!(concat!("data/racks/", stringify!($name), ".json")), $open);
        }
    )*};
}

racks! {
    /// Label on the filter, 30 % depletion, no CV prior.
    filter None;
    /// Serial dilution with 3 % per step.
    serial None;
    /// From stock, 80 % of the tube counted, uneven replicates and minutes, tubes lost, one suspect, three background vials.
    stock None;
    /// Another ligand of known Ki.
    other_ki None;
    /// Another ligand of unknown Ki: full block.
    full_block None;
    /// Kd far above the levels.
    ///
    /// The reference confines Kd only while it profiles Kd, and finds an upper end of the sites with Kd at 25 uM. Here Kd stays
    /// below 1000 times the highest level throughout, and a profile that Kd leaves through the top has an open end.
    unsaturated Some(("sites_nm", "high"));
    /// The same with too little unlabelled ligand to block such a Kd, which closes the intervals; their
    /// upper ends lie where nonspecific binding stands at its floor.
    unsaturated_lost_block None;
    /// No nonspecific binding: it stands at its floor.
    ns_zero None;
    /// Few counts, single tubes.
    low_counts None;
    /// Twelve levels of five tubes, sites above Kd, no CV prior.
    large None;
    /// Twenty-four levels of single tubes in a serial dilution.
    wide None;
}

/// A profile may have two branches: with nonspecific binding pinned below its estimate, Kd among the levels and Kd far
/// above them are both minima, and the second is lower. A profile that only ever warms up from its last
/// place stays on the first and closes the interval at 0.00086; the reference has it open.
#[test]
fn a_profile_finds_the_lower_of_two_branches() {
    let rack: Rack = serde_json::from_str(include_str!("data/racks/unsaturated.json")).unwrap();
    let outcome = fit_rack(&titration(&rack), true);
    assert_eq!(
        outcome.fit().unwrap().estimate("ns").unwrap().low,
        End::Open
    );
}
