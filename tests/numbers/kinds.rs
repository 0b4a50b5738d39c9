//! Racks counted in every way against an independent implementation of the same likelihoods, `reference_kinds.py` beside this
//! file. The racks are simulated; what they were simulated from stands in `data/kinds/*.json` with what the reference found and how
//! well that is certified. For dialysis cells the reference also has a functional errors-in-variables fit, in which the true free
//! concentration of every cell is a parameter.

use rackside::assay::{
    Carrier, Counted, CvPrior, Fields, Kept, Level, LevelNo, Made, QuenchStandard, Reading,
    ReadingId, Role, Scale, Sheet, Side, Stamp, Sticks, Titration, Tube, TubeNo, Unlabelled, When,
    measured,
};
use rackside::fit::{End, Fit, fit_rack};
use rackside::units::{Dimension, Mark, Measure, Typed};
use serde::Deserialize;
use std::collections::BTreeMap;

#[derive(Deserialize)]
pub struct Rack {
    settings: Settings,
    vials: Vec<Vial>,
    simulated: Simulated,
    expected: Expected,
}

#[derive(Deserialize)]
struct Simulated {
    truth: BTreeMap<String, serde_json::Value>,
}

#[derive(Deserialize)]
struct Settings {
    kind: String,
    efficiency: Option<f64>,
    sa_ci_per_mmol: Option<f64>,
    volume_ml: Option<f64>,
    fraction_counted: Option<f64>,
    half_life_min: Option<f64>,
    dead_time_s: Option<f64>,
    added_share: Option<f64>,
    sticks: Option<String>,
    bindable_share: Option<f64>,
    s_d: f64,
    dilution: Option<String>,
    unlabelled: Blocker,
    cv_prior: Prior,
    aliquot_ml: Option<f64>,
    protein_side_aliquot_ml: Option<f64>,
    ligand_side_aliquot_ml: Option<f64>,
    protein_side_ml_before: Option<f64>,
    protein_side_ml_after: Option<f64>,
    read_volume_ml: Option<f64>,
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
    vial: u32,
    role: String,
    level: Option<u16>,
    replicate: u16,
    added_nm: Option<f64>,
    standard_nm: Option<f64>,
    side: Option<String>,
    readings: Vec<Shown>,
}

#[derive(Deserialize)]
struct Shown {
    minutes: Option<f64>,
    counts: Option<f64>,
    observed_counts: Option<f64>,
    signal: Option<f64>,
    quench: Option<f64>,
    efficiency: Option<f64>,
    start_min_after_reference: Option<f64>,
}

#[derive(Deserialize)]
struct Expected {
    n: usize,
    minus2lnl: f64,
    prior_term: f64,
    aicc: f64,
    parameters: Vec<Found>,
    at_fixed_cv: Option<FixedCv>,
    functional: Option<serde_json::Value>,
}

#[derive(Deserialize)]
struct FixedCv {
    cv: f64,
}

#[derive(Deserialize)]
struct Found {
    name: String,
    estimate: f64,
    se_ln: Option<f64>,
    low: Option<f64>,
    high: Option<f64>,
}

fn typed<D: Dimension>(value: f64, unit: &str) -> Typed<Measure<D>> {
    Typed::parse(&format!("{value} {unit}"), Mark::Point).unwrap()
}

/// The reference time of counts that decay.
const ASSAYED: &str = "2031-05-04 12:00";

fn stamp(minutes_after: f64) -> Stamp {
    let noon = Stamp::parse("2031-05-04T12:00:00+00:00").unwrap();
    let after = jiff::SignedDuration::from_secs_f64(60.0 * minutes_after);
    Stamp {
        at: noon.at + after,
        offset: noon.offset,
    }
}

/// The titration that a rack file describes.
pub fn titration(rack: &Rack) -> Titration {
    let s = &rack.settings;
    let mut p = Sheet::parse(Sheet::EXAMPLE).unwrap().protocol;
    let volume = s.volume_ml.or(s.protein_side_ml_before).unwrap();
    p.incubation.volume = typed(volume, "mL");
    if let Some(e) = s.efficiency {
        p.counter.efficiency = typed(e, "");
        p.ligand.specific_activity = typed(s.sa_ci_per_mmol.unwrap(), "Ci/mmol");
    }
    p.separation.fraction = typed(s.fraction_counted.unwrap_or(1.0), "");
    p.separation.added_counted = s.added_share.map(|v| typed(v, ""));
    if let Some(share) = s.bindable_share.filter(|v| *v != 1.0) {
        p.ligand.bindable = Some(typed(share, ""));
    }
    p.nonspecific.concentration = typed(s.unlabelled.concentration_nm, "nM");
    p.nonspecific.unlabelled = match s.unlabelled.kind.as_str() {
        "same_ligand" => Unlabelled::SameLigand,
        _ => Unlabelled::Other {
            name: "another".into(),
            ki: s.unlabelled.ki_nm.map(|ki| typed(ki, "nM")),
        },
    };
    p.nonspecific.sticks = match s.sticks.as_deref() {
        Some("filter") => Sticks::ToFilter,
        _ => Sticks::ToPreparation,
    };
    p.numbers.dilution_error = typed(s.s_d, "");
    p.numbers.cv_prior = Some(CvPrior {
        centre: s.cv_prior.centre,
        sd_ln: s.cv_prior.sd_ln,
    });
    let mut standards: Vec<f64> = rack.vials.iter().filter_map(|v| v.standard_nm).collect();
    standards.retain(|c| *c > 0.0);
    standards.dedup();
    p.separation.counted = match s.kind.as_str() {
        "bound_counted" => Counted::Bound,
        "free_counted" => Counted::Free {
            aliquot: typed(s.aliquot_ml.unwrap(), "mL"),
        },
        "dialysis" => Counted::BothSides {
            protein_aliquot: typed(s.protein_side_aliquot_ml.unwrap(), "mL"),
            ligand_aliquot: typed(s.ligand_side_aliquot_ml.unwrap(), "mL"),
            protein_after: s.protein_side_ml_after.map(|v| typed(v, "mL")),
            ligand_volume: None,
        },
        "reader" => Counted::Signal {
            read_volume: s.read_volume_ml.map(|v| typed(v, "mL")),
            standards: standards.iter().map(|c| typed(*c, "nM")).collect(),
            noise: None,
        },
        other => panic!("{other}"),
    };
    if s.kind == "reader" {
        p.counter.fields = Fields::just(Scale::Signal);
    }
    if let Some(half_life) = s.half_life_min {
        p.ligand.label = "F-18".into();
        p.ligand.half_life = Some(typed(half_life, "min"));
        p.ligand.decay = Some(Carrier::ProductBinds);
        p.ligand.activity_date = Some(When::parse(ASSAYED).unwrap());
        p.incubation.assayed = Some(When::parse(ASSAYED).unwrap());
    } else if s.sa_ci_per_mmol.is_some_and(|sa| sa > 200.0) {
        p.ligand.label = "I-125".into();
    }
    let mut curve: Vec<(f64, f64)> = rack
        .vials
        .iter()
        .flat_map(|v| &v.readings)
        .filter_map(|r| r.quench.zip(r.efficiency))
        .collect();
    curve.sort_by(|a, b| a.0.total_cmp(&b.0));
    curve.dedup();
    if !curve.is_empty() {
        // Every vial's indicator is a standard here, so that the curve between them, which is another one in the
        // reference, does not enter.
        p.counter.quench = curve
            .iter()
            .map(|(indicator, e)| QuenchStandard {
                indicator: *indicator,
                efficiency: typed(*e, ""),
            })
            .collect();
        p.counter.fields = Fields::parse("counts, quench").unwrap();
    }
    p.counter.dead_time = s.dead_time_s.map(|v| typed(v, "s"));
    p.check_new().unwrap();

    let added: BTreeMap<u16, f64> = rack
        .vials
        .iter()
        .filter_map(|v| v.level.zip(v.added_nm))
        .collect();
    let last = *added.keys().last().unwrap();
    let serial = s.dilution.as_deref() == Some("serial");
    let levels: Vec<Level> = added
        .iter()
        .map(|(no, nm)| Level {
            no: LevelNo(*no),
            added: typed(*nm, "nM"),
            made: if serial && *no < last {
                Made::FromLevel(LevelNo(no + 1))
            } else {
                Made::FromStock
            },
        })
        .collect();
    let mut tubes = Vec::new();
    for v in &rack.vials {
        let blank = v.standard_nm == Some(0.0);
        let role = match v.role.as_str() {
            "no_receptor" => Role::NoReceptor,
            _ if blank => Role::Background,
            word => Role::from_word(word).unwrap(),
        };
        let standard = standards.iter().position(|c| Some(*c) == v.standard_nm);
        tubes.push(Tube {
            side: v.side.as_deref().map(|s| match s {
                "protein" => Side::Protein,
                "ligand" => Side::Ligand,
                other => panic!("{other}"),
            }),
            standard: standard.map(|i| i as u16 + 1),
            ..Tube::new(TubeNo(v.vial), role, v.level.map(LevelNo), v.replicate)
        });
    }
    Titration::check_rack(&levels, &tubes).unwrap();
    let mut t = Titration::new(p, levels, tubes);
    let mut n = 1;
    for v in &rack.vials {
        for r in &v.readings {
            let value = r.signal.or(r.observed_counts).or(r.counts).unwrap();
            n += 1;
            let reading = Reading {
                scale: if r.signal.is_some() {
                    Scale::Signal
                } else {
                    Scale::Counts
                },
                quench: r.quench,
                counted: r.start_min_after_reference.map(stamp),
                ..Reading::counts(value.to_string(), value, r.minutes.unwrap_or(1.0))
            };
            t.kept.entry(TubeNo(v.vial)).or_default().push(Kept {
                id: ReadingId(n, 0),
                reading,
                suspect: None,
            });
        }
    }
    t
}

/// What the reference calls a parameter, by our name.
fn theirs(name: &str) -> &str {
    match name {
        "gain" => "signal_per_nm",
        other => other,
    }
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

fn agrees(fit: &Fit, want: &Expected) {
    assert_eq!(fit.tubes_used, want.n);
    near("-2 ln L", fit.minus2lnl, want.minus2lnl);
    assert!((fit.prior_term - want.prior_term).abs() < 1e-8);
    assert!((fit.aicc.unwrap() - want.aicc).abs() < 1e-7);
    let of = |name: &str| {
        want.parameters
            .iter()
            .find(|p| p.name == theirs(name))
            .unwrap()
    };
    near("cv", fit.cv, of("cv").estimate);
    for e in &fit.estimates {
        let want = of(e.name);
        near(e.name, e.value, want.estimate);
        near(
            &format!("se of {}", e.name),
            e.se_ln.unwrap(),
            want.se_ln.unwrap(),
        );
        // The reference has no interval of a counter's background.
        if e.name == "background_cpm" {
            continue;
        }
        for (side, got, want) in [("low", e.low, want.low), ("high", e.high, want.high)] {
            match (got, want) {
                (End::At(got), Some(want)) => near(&format!("{} {side}", e.name), got, want),
                (End::Open, None) => {}
                other => panic!("{} {side}: {other:?}", e.name),
            }
        }
    }
}

fn read(json: &str) -> Rack {
    serde_json::from_str(json).unwrap()
}

fn held(json: &str) {
    let rack = read(json);
    agrees(
        fit_rack(&titration(&rack), true).fit().unwrap(),
        &rack.expected,
    );
}

macro_rules! racks {
    ($($(#[$doc:meta])* $name:ident;)*) => {$(
        $(#[$doc])*
        #[test]
        fn $name() {
            held(include_str!(concat!("data/kinds/", stringify!($name), ".json")));
        }
    )*};
}

racks! {
    /// Free counted.
    free;
    /// Free counted behind a filter that holds label, a share that never binds, another ligand of known Ki, serial.
    free_filter;
    /// Dialysis without a volume shift, blocked by the same ligand.
    dialysis;
    /// Dialysis with a volume shift, blocked by another ligand.
    dialysis_shift;
    /// A reader with blanks and standards.
    reader;
    /// Aliquots of every level's solution.
    added;
    /// Aliquots of some levels of a serial dilution, label on the filter, a share that never binds.
    added_serial;
    /// Tubes without receptor, bound counted, with aliquots.
    no_receptor;
    /// Tubes without receptor, free counted; one end open.
    no_receptor_free;
    /// F-18 counted over three half-lives, some tubes twice.
    decay;
    /// An efficiency for every vial and a dead time.
    quench;
    /// Background vials that scatter.
    background;
}

/// The functional errors-in-variables fit of the reference at the true CV, and ours with the CV held there: within 1 %.
#[test]
fn dialysis_beside_a_functional_fit() {
    let rack = read(include_str!("data/kinds/dialysis.json"));
    let mut t = titration(&rack);
    let cv = rack.expected.at_fixed_cv.as_ref().unwrap().cv;
    t.protocol.numbers.cv_prior = Some(CvPrior {
        centre: cv,
        sd_ln: 1e-5,
    });
    let outcome = fit_rack(&t, true);
    let fit = outcome.fit().unwrap();
    let functional = rack.expected.functional.as_ref().unwrap();
    for name in ["kd_nm", "sites_nm", "ns"] {
        let want = find_number(functional, name);
        let got = fit.value(name);
        assert!(
            (got / want - 1.0).abs() < 0.01,
            "{name}: {got}, functional {want}"
        );
        // Not the same number, which would show that one was copied from the other.
        assert!((got / want - 1.0).abs() > 1e-6, "{name}");
    }
}

/// A number by its name, wherever it stands.
fn find_number(value: &serde_json::Value, name: &str) -> f64 {
    fn look(value: &serde_json::Value, name: &str) -> Option<f64> {
        match value {
            serde_json::Value::Object(map) => {
                let named = map.get("name").and_then(|n| n.as_str()) == Some(name);
                let own = if named {
                    map.get("estimate")
                } else {
                    map.get(name)
                };
                own.and_then(serde_json::Value::as_f64)
                    .or_else(|| map.values().find_map(|v| look(v, name)))
            }
            serde_json::Value::Array(list) => list.iter().find_map(|v| look(v, name)),
            _ => None,
        }
    }
    look(value, name).unwrap()
}

/// 80 nM on a protein side of 1.15 mL that was filled with 1.00, 50 nM on the ligand side, 100 nM protein: 0.345 bound for one of
/// protein, and not the 0.300 of the concentrations as they stand (algebra).
#[test]
fn a_volume_shift() {
    let rack = read(include_str!("data/kinds/dialysis_shift.json"));
    let mut t = titration(&rack);
    t.protocol.incubation.volume = typed(1.0, "mL");
    if let Counted::BothSides { protein_after, .. } = &mut t.protocol.separation.counted {
        *protein_after = Some(typed(1.15, "mL"));
    }
    let protein = *t
        .tubes
        .iter()
        .find(|t| t.side == Some(Side::Protein))
        .unwrap();
    let ligand = *t.other_side(&protein).unwrap();
    let per = |tube: &Tube| {
        let seen = rackside::assay::seen_as(&t.protocol, tube).unwrap();
        rackside::assay::per_nm(&t.protocol, seen)
    };
    let background = rackside::assay::background(&t, true).unwrap();
    for (tube, nm) in [(protein, 80.0), (ligand, 50.0)] {
        let counts = 10.0 * (background.cpm() + nm * per(&tube));
        let reading = Reading::counts("", counts, 10.0);
        t.kept.get_mut(&tube.no).unwrap()[0].reading = reading;
    }
    let observed = rackside::assay::observed(&t, protein.no, true).unwrap();
    let m = measured(&t, &protein, observed, background).unwrap();
    assert!((m.bound_nm / 100.0 - 0.345).abs() < 1e-12, "{}", m.bound_nm);
    assert!((m.free_nm - 50.0).abs() < 1e-9);
}

/// What each rack was simulated from lies where its estimates say, as far as a single rack can tell: within four standard errors.
#[test]
fn the_truth_is_near() {
    for json in [
        include_str!("data/kinds/free.json"),
        include_str!("data/kinds/dialysis.json"),
        include_str!("data/kinds/dialysis_shift.json"),
        include_str!("data/kinds/reader.json"),
        include_str!("data/kinds/decay.json"),
        include_str!("data/kinds/quench.json"),
        include_str!("data/kinds/no_receptor.json"),
    ] {
        let rack = read(json);
        let outcome = fit_rack(&titration(&rack), true);
        let fit = outcome.fit().unwrap();
        for name in ["kd_nm", "sites_nm"] {
            let truth = rack.simulated.truth[name].as_f64().unwrap();
            let e = fit.estimate(name).unwrap();
            let off = (e.value / truth).ln() / e.se_ln.unwrap();
            assert!(off.abs() < 4.0, "{name}: {off}");
        }
    }
}

/// A cell with a flag on one side is left out as a whole, and both of its vials say so.
#[test]
fn a_cell_with_one_side_flagged() {
    use rackside::assay::Reason;
    let rack = read(include_str!("data/kinds/dialysis.json"));
    let mut t = titration(&rack);
    let ligand = *t
        .tubes
        .iter()
        .find(|t| t.side == Some(Side::Ligand))
        .unwrap();
    let protein = t.other_side(&ligand).unwrap().no;
    let all = rackside::analysis::analyse(&t).fit().unwrap().tubes_used;
    t.kept.get_mut(&ligand.no).unwrap()[0].suspect = Some(Reason::Spilled.into());
    let a = rackside::analysis::analyse(&t);
    assert_eq!(a.fit().unwrap().tubes_used, all - 1);
    for no in [ligand.no, protein] {
        let of = a.tubes.iter().find(|x| x.tube.no == no).unwrap();
        assert!(of.suspect.is_some(), "vial {no}");
    }
}

/// Standards in the wrong order are said to fall, and those of the reference rack are not.
#[test]
fn standards_that_fall() {
    let rack = read(include_str!("data/kinds/reader.json"));
    let t = titration(&rack);
    let falling = |t: &Titration| {
        let label = rackside::analysis::analyse(t).label.unwrap();
        label.standards.unwrap().falling
    };
    assert_eq!(falling(&t), None);
    let mut turned = t.clone();
    if let Counted::Signal { standards, .. } = &mut turned.protocol.separation.counted {
        standards.reverse();
    }
    assert!(falling(&turned).is_some());
    let remarks = rackside::report::judged::remarks(&turned, &rackside::analysis::analyse(&turned));
    assert!(remarks[0].contains("standards fall"), "{remarks:?}");
}
