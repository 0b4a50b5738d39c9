//! From the printout to the fit, whatever the printout shows: rows of every way of counting against the cost they are the rows of,
//! one rack written down in several scales, and a short-lived label counted long after the assay.

use crate::kinds::{Rack, titration};
use crate::simulate::cells::A;
use crate::simulate::law::bound;
use crate::simulate::rack::{BACKGROUND_CPM, SEED};
use rackside::assay::{
    Carrier, Fields, Kept, LevelNo, QuenchStandard, Reading, ReadingId, Role, Run, Scale,
    ScaleErrors, Sticks, Subtracted, Titration, When, check_reading, observed,
};
use rackside::binding::{Hill, OneClass, TwoClasses};
use rackside::fit::{Cold, Columns, End, Evidence, Fit, RackEvidence, Rows, fit_rack};
use rackside::units::{Dimension, Mark, Measure, Typed};
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, Normal, Poisson};

fn typed<D: Dimension>(text: &str) -> Typed<Measure<D>> {
    Typed::parse(text, Mark::Point).unwrap()
}

const KINDS: [(&str, &str); 8] = [
    ("free", include_str!("data/kinds/free.json")),
    ("free_filter", include_str!("data/kinds/free_filter.json")),
    ("dialysis", include_str!("data/kinds/dialysis.json")),
    (
        "dialysis_shift",
        include_str!("data/kinds/dialysis_shift.json"),
    ),
    ("reader", include_str!("data/kinds/reader.json")),
    ("no_receptor", include_str!("data/kinds/no_receptor.json")),
    (
        "no_receptor_free",
        include_str!("data/kinds/no_receptor_free.json"),
    ),
    ("quench", include_str!("data/kinds/quench.json")),
];

/// `A'y` is minus half the gradient of the cost: five-point differences of the cost itself at a place off its lowest.
fn gradient<I: Cold>(of_law: &[f64]) {
    for (name, json) in KINDS {
        let rack: Rack = serde_json::from_str(json).unwrap();
        let mut t = titration(&rack);
        let some = |text: &str| Some(typed(text));
        t.protocol.numbers.scale_errors = ScaleErrors {
            stock: some("5 %"),
            specific_activity: some("3 %"),
            efficiency: some("2 %"),
            volume: some("4 %"),
            protein: None,
        };
        let e = RackEvidence::<I>::new(&t, true).unwrap();
        let at = Columns::of::<I>();
        let mut theta = of_law.to_vec();
        theta.extend([-3.0, e.background().cpm().ln() + 0.05, -2.5]);
        let more = e.dim() - theta.len();
        theta.extend((0..more).map(|i| 0.01 * (i as f64 - 3.0)));
        if let Some(j) = e.filter_column() {
            theta[j] = -3.5;
        }
        if name == "reader" {
            // The last column is that of the noise of a blank.
            *theta.last_mut().unwrap() = 2.0;
        }
        assert_eq!(at.dilutions(), I::DIM + 3);
        let mut rows = Rows::default();
        let cost = e.cost_and_rows(&theta, &mut rows);
        assert!((cost - e.cost(&theta)).abs() <= 1e-12 * cost.abs());
        for j in 0..theta.len() {
            let h = 1e-4;
            let moved = |s: f64| {
                let mut q = theta.clone();
                q[j] += s * h;
                e.cost(&q)
            };
            let slope =
                (8.0 * (moved(1.0) - moved(-1.0)) - (moved(2.0) - moved(-2.0))) / (12.0 * h);
            let want = -2.0 * rows.downhill(j);
            let size = cost.abs().max(want.abs());
            assert!(
                (slope - want).abs() <= 1e-7 * size,
                "{name}, column {j} of {}: {slope} and {want}",
                theta.len()
            );
        }
    }
}

#[test]
fn gradient_of_one_class() {
    gradient::<OneClass>(&[-0.5, -0.4]);
}

#[test]
fn gradient_of_two_classes() {
    gradient::<TwoClasses>(&[-0.5, -0.4, 1.2, 0.3]);
}

#[test]
fn gradient_of_hill() {
    gradient::<Hill>(&[-0.5, -0.4, 0.3]);
}

/// The first rack of scenario A.
fn a() -> Titration {
    A.rack(&A.empty(), 0)
}

/// The same rack with every reading written down in another way.
fn rewritten(
    mut t: Titration,
    scale: Scale,
    change: impl FnOnce(&mut Titration),
    write: impl Fn(f64, f64) -> f64,
) -> Titration {
    change(&mut t);
    for kept in t.kept.values_mut().flatten() {
        let r = &mut kept.reading;
        r.value = write(r.value, r.minutes);
        r.raw = r.value.to_string();
        r.scale = scale;
    }
    for tube in &t.tubes {
        check_reading(&t, tube, &t.kept(tube.no)[0].reading, false).unwrap();
    }
    t
}

fn off(t: &mut Titration, minutes: Option<&str>) {
    t.protocol.counter.subtracted = Some(Subtracted {
        rate: typed("25 cpm"),
        minutes: minutes.map(typed),
    });
}

fn one(t: &Titration) -> Fit {
    fit_rack(t, true).fit().unwrap().clone()
}

/// How far two fits are apart, relative, in estimates and ends.
fn apart(a: &Fit, b: &Fit) -> f64 {
    let far = |x: f64, y: f64| (x / y - 1.0).abs();
    let mut most: f64 = 0.0;
    for (x, y) in a.estimates.iter().zip(&b.estimates) {
        most = most.max(far(x.value, y.value));
        for (x, y) in [(x.low, y.low), (x.high, y.high)] {
            match (x, y) {
                (End::At(x), End::At(y)) => most = most.max(far(x, y)),
                (x, y) => assert_eq!(x, y),
            }
        }
    }
    most
}

/// Counts, cpm, dpm and net readings of one rack are one rack: the counts behind them are the same.
#[test]
fn one_rack_in_every_scale() {
    let counts = one(&a());
    let nothing = |_: &mut Titration| {};
    let e = 0.45;
    for (name, t) in [
        ("cpm", rewritten(a(), Scale::Cpm, nothing, |n, t| n / t)),
        ("dpm", rewritten(a(), Scale::Dpm, nothing, |n, t| n / t / e)),
        (
            "net cpm",
            rewritten(a(), Scale::NetCpm, |t| off(t, None), |n, t| n / t - 25.0),
        ),
        (
            "net dpm",
            rewritten(
                a(),
                Scale::NetDpm,
                |t| off(t, None),
                |n, t| (n / t - 25.0) / e,
            ),
        ),
    ] {
        let far = apart(&one(&t), &counts);
        assert!(far < 1e-9, "{name}: {far}");
    }
    // Printed without decimals: what a cpm is rounded by is at most one count of 2 min, in 200 counts or more.
    let rounded = rewritten(a(), Scale::Cpm, nothing, |n, t| (n / t).round());
    let far = apart(&one(&rounded), &counts);
    assert!(far > 1e-9 && far < 0.01, "{far}");
}

/// A rack without background vials, where the counter had counted one for 10 min and taken it off.
#[test]
fn the_background_taken_off_stands_in() {
    let mut t = a();
    let blank = t
        .tubes
        .iter()
        .find(|x| x.role == Role::Background)
        .unwrap()
        .no;
    let counted = t.kept(blank)[0].reading.value;
    let rate = counted / 10.0;
    let with = one(&t);
    t.tubes.retain(|x| x.no != blank);
    t.kept.remove(&blank);
    assert!(fit_rack(&t, true).fit().is_none());
    let t = rewritten(
        t,
        Scale::NetCpm,
        |t| {
            t.protocol.counter.subtracted = Some(Subtracted {
                rate: typed(&format!("{rate} cpm")),
                minutes: Some(typed("10 min")),
            });
        },
        |n, t| n / t - rate,
    );
    let far = apart(&one(&t), &with);
    assert!(far < 1e-9, "{far}");
}

/// A label of F-18 (half-life 109.77 min, ICRP Publication 107), counted in turn over three half-lives: 33 vials, 2 min each, 8 min
/// for the changer.
fn short_lived(ci_per_mmol: f64) -> Titration {
    let mut t = A.empty();
    let p = &mut t.protocol;
    p.ligand.specific_activity = typed(&format!("{ci_per_mmol} Ci/mmol"));
    p.ligand.label = "F-18".into();
    p.ligand.decay = Some(Carrier::ProductInert);
    p.ligand.activity_date = Some(When::parse("2031-05-04 09:00").unwrap());
    p.incubation.assayed = Some(When::parse("2031-05-04 10:00").unwrap());
    p.counter.run = Some(Run {
        start: When::parse("2031-05-04 10:05").unwrap(),
        changer: typed("8 min"),
    });
    p.check_new().unwrap();
    t
}

/// Fills the rack: expected counts of vials counted in turn, decay during each count too, drawn where there is a generator.
fn counted_in_turn(
    empty: &Titration,
    ci_per_mmol: f64,
    mut draw: Option<&mut ChaCha8Rng>,
) -> Titration {
    const HALF_LIFE: f64 = 109.77;
    let lambda = std::f64::consts::LN_2 / HALF_LIFE;
    let mut t = empty.clone();
    // An hour before the assay the label was stated, and what has decayed since no longer binds: 1 712 930.4 Ci/mmol is a label in
    // every molecule.
    let left = (-lambda * 60.0).exp();
    let f = ci_per_mmol / 1_712_930.4;
    let rest = 1.0 - f + f * left;
    let activity = ci_per_mmol * left / rest;
    let per_nm = 0.45 * activity * 2.22 * 1000.0 * 0.5;
    let scatter = Normal::new(1.0, A.cv).unwrap();
    let mut clock = 5.0;
    for (tube, n) in empty.tubes.iter().zip(2u32..) {
        let minutes = if tube.role == Role::Background {
            10.0
        } else {
            2.0
        };
        let signal = tube.level.map_or(0.0, |LevelNo(l)| {
            let label = A.added()[usize::from(l) - 1] * rest;
            let c = if tube.role == Role::Nonspecific {
                A.unlabelled
            } else {
                0.0
            };
            let b = bound(&A.law, A.ns, Sticks::ToPreparation, label, c);
            let tube_error = draw.as_mut().map_or(1.0, |rng| scatter.sample(rng));
            // The integral of the decaying rate over the count.
            let from = (-lambda * clock).exp();
            per_nm * b * tube_error * from * (-(-lambda * minutes).exp_m1()) / lambda
        });
        let mean = minutes * BACKGROUND_CPM + signal;
        let counts = match draw.as_mut() {
            Some(rng) => Poisson::new(mean).unwrap().sample(*rng),
            None => mean,
        };
        t.kept.insert(
            tube.no,
            vec![Kept {
                id: ReadingId(n, 0),
                reading: Reading::counts(counts.to_string(), counts, minutes),
                suspect: None,
            }],
        );
        clock += minutes + 8.0;
    }
    assert!(clock > 3.0 * HALF_LIFE);
    t
}

/// Counts without noise, read over three half-lives, return the truth; without the correction they would not. The label is hot, since
/// with few counts the most likely parameters are not quite those that the expected counts came from.
#[test]
fn decay_of_counts_without_noise() {
    let mut t = counted_in_turn(&short_lived(1e6), 1e6, None);
    t.protocol.numbers.cv_prior = None;
    let fit = one(&t);
    assert!(
        (fit.value("kd_nm") / 0.5 - 1.0).abs() < 1e-6,
        "{}",
        fit.value("kd_nm")
    );
    assert!((fit.value("sites_nm") / 0.02 - 1.0).abs() < 1e-6);
    t.protocol.ligand.decay = None;
    let wrong = one(&t);
    assert!(
        (wrong.value("kd_nm") / 0.5 - 1.0).abs() > 0.2,
        "{}",
        wrong.value("kd_nm")
    );
}

/// Racks of scenario A read over three half-lives are covered as those of scenario A are: the bounds of the coverage of 400 racks.
#[test]
fn coverage_of_a_short_lived_label() {
    const RACKS: u64 = 400;
    let empty = short_lived(80.0);
    let (mut kd, mut sites) = (0, 0);
    let holds = |fit: &Fit, name: &str, truth: f64| {
        let e = fit.estimate(name).unwrap();
        e.low.value().is_none_or(|v| v <= truth) && e.high.value().is_none_or(|v| v >= truth)
    };
    for n in 0..RACKS {
        let mut rng = ChaCha8Rng::seed_from_u64(SEED);
        rng.set_stream((180 << 32) | n);
        let fit = one(&counted_in_turn(&empty, 80.0, Some(&mut rng)));
        kd += u32::from(holds(&fit, "kd_nm", 0.5));
        sites += u32::from(holds(&fit, "sites_nm", 0.02));
    }
    for (name, covered) in [("Kd", kd), ("sites", sites)] {
        let share = 100.0 * f64::from(covered) / RACKS as f64;
        println!("F-18 over three half-lives, {name}: {share} % covered");
        assert!((90.5..=99.0).contains(&share), "{name}: {share}");
    }
}

/// What a reading needs is asked for, and said in words where it is missing.
#[test]
fn readings_that_cannot_be() {
    let t = short_lived(80.0);
    let tube = *t.tubes.iter().find(|x| x.role == Role::Total).unwrap();
    let reading = Reading::counts("900", 900.0, 2.0);
    let says = |t: &Titration, r: &Reading, again: bool, want: &str| {
        let error = check_reading(t, &tube, r, again).unwrap_err().to_string();
        assert!(error.contains(want), "{error}");
    };
    check_reading(&t, &tube, &reading, false).unwrap();
    // No run tells when a recount was made.
    says(&t, &reading, true, "no time of counting");
    let mut no_run = t.clone();
    no_run.protocol.counter.run = None;
    says(&no_run, &reading, false, "no time of counting");
    let early = Reading {
        counted: Some(rackside::assay::Stamp::parse("2031-05-04T09:30:00+02:00").unwrap()),
        ..reading.clone()
    };
    says(
        &t,
        &early,
        false,
        "30 min before the assay of 2031-05-04 10:00",
    );
    // A clock time before the assay, taken for the day after: 13 half-lives.
    let late = Reading {
        counted: Some(rackside::assay::Stamp::parse("2031-05-05T09:30:00+02:00").unwrap()),
        ..reading.clone()
    };
    says(&t, &late, false, "is the day right?");
    let mut curve = t.clone();
    curve.protocol.counter.quench = [(300.0, "30 %"), (500.0, "50 %")]
        .map(|(indicator, e)| QuenchStandard {
            indicator,
            efficiency: typed(e),
        })
        .to_vec();
    curve.protocol.counter.fields = Fields::parse("counts, quench").unwrap();
    curve.protocol.check_new().unwrap();
    says(&curve, &reading, false, "no quench indicator");
    let outside = Reading {
        quench: Some(510.0),
        ..reading.clone()
    };
    says(&curve, &outside, false, "510");
    let inside = Reading {
        quench: Some(400.0),
        ..reading.clone()
    };
    check_reading(&curve, &tube, &inside, false).unwrap();
    let net = Reading {
        scale: Scale::NetCpm,
        value: -3.0,
        ..reading.clone()
    };
    says(&t, &net, false, "background that the counter took off");
    let mut subtracted = t.clone();
    off(&mut subtracted, None);
    check_reading(&subtracted, &tube, &net, false).unwrap();
    let below = Reading {
        value: -30.0,
        ..net
    };
    says(&subtracted, &below, false, "lower than the background");
    let mut dead = t.clone();
    dead.protocol.counter.dead_time = Some(typed("100 us"));
    let fast = Reading::counts("2e6", 2e6, 2.0);
    says(&dead, &fast, false, "dead time");
    let signal = Reading {
        scale: Scale::Signal,
        ..reading.clone()
    };
    says(&t, &signal, false, "counts, cpm or dpm are allowed");
}

/// A vial's turn in a run: 5 min after the assay begins the first, and each later one after all minutes and changes before it.
#[test]
fn the_turn_of_a_vial() {
    let t = counted_in_turn(&short_lived(80.0), 80.0, None);
    // Background first (10 min), then vial 1 at 5 + 18 = 23 min and vial 2 ten minutes later.
    let f = |start: f64, minutes: f64| {
        let lambda = std::f64::consts::LN_2 / 109.77;
        (-lambda * start).exp() * (1.0 - (-lambda * minutes).exp()) / (lambda * minutes)
    };
    for (place, start) in [(1, 23.0), (2, 33.0), (32, 333.0)] {
        let o = observed(&t, t.tubes[place].no, true).unwrap();
        let want = 2.0 * f(start, 2.0);
        assert!((o.signal_minutes / want - 1.0).abs() < 1e-12, "{place}");
    }
    let blank = observed(&t, t.tubes[0].no, true).unwrap();
    assert_eq!(blank.signal_minutes, blank.minutes);
}
