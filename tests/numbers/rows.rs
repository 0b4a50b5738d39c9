//! Rows of every law of binding against the cost they are the rows of, and what errors that all tubes share do to the
//! expected information.

use crate::racks::{LEVELS, keep, levels, sheet};
use nalgebra::DMatrix;
use rackside::assay::{Role, ScaleErrors, Titration, counts_per_nm};
use rackside::binding::{Block, Hill, Isotherm, Kind, OneClass, Stuck, TwoClasses, bound};
use rackside::fit::{
    Columns, End, Ended, Estimate, Evidence, RackEvidence, Rows, Solution, covariance, fit_rack,
    solve,
};
use rackside::units::{Measure, Typed};

fn share(v: f64) -> rackside::units::Amount<rackside::units::Share> {
    Typed {
        text: format!("{v}"),
        value: Measure::of(v),
    }
}

/// A rack with uneven but fixed counts about what `law` and `ns` expect: eight levels over two powers of ten.
fn rack<I: Isotherm>(law: &I, ns: f64, changes: &[(&str, &str)]) -> Titration {
    let ratio = 200f64.powf(1.0 / 7.0);
    let nm: Vec<f64> = (0..8).map(|i| 0.05 * ratio.powi(i)).collect();
    let ladder = levels(&nm);
    let mut all = vec![(LEVELS, ladder.as_str())];
    all.extend(changes);
    let mut t = sheet(&all);
    let per_nm = counts_per_nm(&t.protocol);
    let stuck = if changes.iter().any(|c| c.1 == "sticks: ToFilter") {
        Stuck::AfterSeparation
    } else {
        Stuck::DuringIncubation
    };
    for tube in t.tubes.clone() {
        let uneven = 1.0 + 0.04 * ((tube.no.0 * 7919 % 13) as f64 - 6.0) / 6.0;
        let minutes = t.protocol.minutes_for(tube.role);
        let signal = t.added_nm(&tube).map_or(0.0, |added| {
            let block = match tube.role {
                Role::Nonspecific => Block::Full,
                _ => Block::None,
            };
            per_nm * bound(law, ns, stuck, added, block, &mut [0.0; 4]).value
        });
        let n = (minutes * (25.0 + signal * uneven)).round();
        keep(&mut t, &tube, n, minutes, None);
    }
    t
}

const ONE: OneClass = OneClass {
    kd: 0.5,
    sites: 0.1,
};
const TWO: TwoClasses = TwoClasses {
    first: OneClass {
        kd: 0.1,
        sites: 0.05,
    },
    second: OneClass {
        kd: 4.0,
        sites: 0.3,
    },
};
const HILL: Hill = Hill {
    kh: 0.5,
    sites: 0.1,
    n: 1.6,
};
const NS: f64 = 0.02;

/// Parameters off the best ones, all columns among them.
fn theta<I: Isotherm>(of_law: &[f64], ns: f64, evidence: &RackEvidence<I>) -> Vec<f64> {
    let mut theta: Vec<f64> = of_law.to_vec();
    theta.extend([ns.ln() + 0.1, 3.3, -2.5]);
    let more = evidence.dim() - theta.len();
    theta.extend((0..more).map(|i| 0.01 * (i as f64 - 3.0)));
    theta
}

const EVERY: [f64; 4] = [0.05, 0.03, 0.02, 0.04];

fn errors([stock, activity, efficiency, volume]: [f64; 4]) -> ScaleErrors {
    let given = |v: f64| (v > 0.0).then(|| share(v));
    ScaleErrors {
        stock: given(stock),
        specific_activity: given(activity),
        efficiency: given(efficiency),
        volume: given(volume),
        protein: None,
    }
}

fn gradient<I: Isotherm>(law: &I, of_law: &[f64]) {
    let blockers = [
        "unlabelled: SameLigand",
        "unlabelled: Other(name: \"x\")",
        "unlabelled: Other(name: \"x\", ki: \"5 nM\")",
    ];
    for sticks in ["sticks: ToPreparation", "sticks: ToFilter"] {
        for dilution in ["dilution: EachFromStock", "dilution: Serial"] {
            for (blocker, error) in blockers.iter().zip(["2 %", "3 %", "0"]) {
                let error = format!("dilution_error: \"{error}\"");
                let mut t = rack(
                    law,
                    NS,
                    &[
                        ("sticks: ToPreparation", sticks),
                        ("dilution: EachFromStock", dilution),
                        ("unlabelled: SameLigand", blocker),
                        ("dilution_error: \"2 %\"", &error),
                    ],
                );
                t.protocol.numbers.scale_errors = errors(EVERY);
                let e = RackEvidence::<I>::new(&t, true).unwrap();
                let theta = theta(of_law, NS, &e);
                let wanted =
                    Columns::of::<I>().dilutions() + if error.contains("\"0\"") { 4 } else { 12 };
                assert_eq!(e.dim(), wanted);
                let mut rows = Rows::default();
                e.rows(&theta, &mut rows);
                for j in 0..e.dim() {
                    let h = 1e-3;
                    let at = |s: f64| {
                        let mut moved = theta.clone();
                        moved[j] += s * h;
                        e.cost(&moved)
                    };
                    let slope = (8.0 * (at(1.0) - at(-1.0)) - (at(2.0) - at(-2.0))) / (12.0 * h);
                    let exact = -2.0 * rows.downhill(j);
                    assert!(
                        (slope - exact).abs() <= 1e-6 * (1.0 + exact.abs()),
                        "{sticks} {dilution} {blocker} {error} column {j}: {slope} {exact}"
                    );
                }
            }
        }
    }
}

/// The rows' product with the right-hand side is minus half the gradient of the cost, by five-point differences, for every column:
/// the law's own, nonspecific binding, background, CV, dilution steps and all four scale errors.
#[test]
fn rows_are_the_gradient_of_the_cost_for_one_class() {
    gradient(&ONE, &[0.5f64.ln() + 0.3, 0.1f64.ln() - 0.2]);
}

#[test]
fn rows_are_the_gradient_of_the_cost_for_two_classes() {
    gradient(
        &TWO,
        &[
            0.1f64.ln() + 0.2,
            0.05f64.ln() - 0.2,
            4f64.ln() - 0.3,
            0.3f64.ln() + 0.1,
        ],
    );
    // Off their order, as the solver may meet them.
    gradient(
        &TWO,
        &[
            4f64.ln() - 0.3,
            0.3f64.ln() + 0.1,
            0.1f64.ln() + 0.2,
            0.05f64.ln() - 0.2,
        ],
    );
}

#[test]
fn rows_are_the_gradient_of_the_cost_for_hill() {
    gradient(
        &HILL,
        &[0.5f64.ln() + 0.3, 0.1f64.ln() - 0.2, 1.6f64.ln() + 0.2],
    );
    gradient(&HILL, &[0.5f64.ln() - 0.3, 0.1f64.ln() + 0.2, 0.6f64.ln()]);
}

/// The variances of the law's parameters and of `ln ns`, `ln b`, `ln cv`, from the expected information at given parameters.
fn variances<I: Isotherm>(
    t: &Titration,
    of_law: &[f64],
    ns: f64,
    scale_errors: [f64; 4],
) -> Vec<f64> {
    let mut t = t.clone();
    t.protocol.numbers.scale_errors = errors(scale_errors);
    let e = RackEvidence::<I>::new(&t, true).unwrap();
    let mut theta = theta(of_law, ns, &e);
    let first = Columns::of::<I>().dilutions();
    theta[first..].fill(0.0);
    let at = Solution {
        cost: e.cost(&theta),
        at_limit: vec![false; theta.len()],
        theta,
        ended: Ended::Converged,
    };
    let cov: DMatrix<f64> = covariance(&e, &at).unwrap();
    (0..first).map(|j| cov[(j, j)]).collect()
}

/// The growth of every variance, in units of `sd^2`.
fn growth<I: Isotherm>(
    t: &Titration,
    of_law: &[f64],
    ns: f64,
    scale_errors: [f64; 4],
    sd: f64,
) -> Vec<f64> {
    let none = variances::<I>(t, of_law, ns, [0.0; 4]);
    let with = variances::<I>(t, of_law, ns, scale_errors);
    let by = |(w, n): (&f64, &f64)| (w - n) / (sd * sd);
    with.iter().zip(&none).map(by).collect()
}

#[track_caller]
fn all_close(got: &[f64], want: &[f64], within: f64) {
    let close = |(g, w): (&f64, &f64)| (g - w).abs() <= within;
    assert!(
        got.len() == want.len() && got.iter().zip(want).all(close),
        "{got:?} {want:?}"
    );
}

fn each<I: Isotherm>(of_constants: f64, of_sites: f64, rest: [f64; 3]) -> Vec<f64> {
    let of_law = I::KINDS.iter().map(|k| match k {
        Kind::Constant => of_constants,
        Kind::Sites => of_sites,
        Kind::Exponent => 0.0,
    });
    of_law.chain(rest).collect()
}

fn volume<I: Isotherm>(law: &I, of_law: &[f64]) {
    for sticks in ["sticks: ToPreparation", "sticks: ToFilter"] {
        for error in ["0", "2 %"] {
            let error = format!("dilution_error: \"{error}\"");
            let t = rack(
                law,
                NS,
                &[
                    ("sticks: ToPreparation", sticks),
                    ("unlabelled: SameLigand", "unlabelled: Other(name: \"x\")"),
                    ("dilution_error: \"2 %\"", &error),
                ],
            );
            let sd = 0.1;
            let got = growth::<I>(&t, of_law, NS, [0.0, 0.0, 0.0, sd], sd);
            all_close(&got, &each::<I>(1.0, 1.0, [0.0; 3]), 1e-7);
        }
    }
}

/// An error `e` of the volume leaves amounts as they are: with full block, counts at `LT exp(-e)`, `exp(e)` counts for one nM and `(Kd, R)`
/// are those at `LT` and `(Kd exp(e), R exp(e))`, since concentrations scale together (algebra). So the error is no more than
/// another name for that direction: the variance of every `ln Kd` and of all `ln` sites grows by exactly its square, and
/// no other does.
#[test]
fn a_volume_error_adds_its_square_to_constants_and_sites() {
    volume(&ONE, &[0.5f64.ln(), 0.1f64.ln()]);
    volume(&TWO, &[0.1f64.ln(), 0.05f64.ln(), 4f64.ln(), 0.3f64.ln()]);
    volume(&HILL, &[0.5f64.ln(), 0.1f64.ln(), 1.6f64.ln()]);
}

fn scarce<I: Isotherm>(of_law: &[f64]) {
    // Sites and nonspecific binding a millionth of what they were, and a million times the counts for each nM: no label is used up.
    let (scale, ns) = (1e6f64.ln(), NS * 1e-6);
    let of_law: Vec<f64> = of_law
        .iter()
        .zip(I::KINDS)
        .map(|(v, k)| if *k == Kind::Sites { v - scale } else { *v })
        .collect();
    let t = rack(
        &I::from_ln(&of_law),
        ns,
        &[
            ("\"0.5 mL\"", "\"500 L\""),
            ("sticks: ToPreparation", "sticks: ToFilter"),
            ("unlabelled: SameLigand", "unlabelled: Other(name: \"x\")"),
            ("dilution_error: \"2 %\"", "dilution_error: \"0\""),
        ],
    );
    let sd = 0.1;
    let grown = |errors| growth::<I>(&t, &of_law, ns, errors, sd);
    all_close(
        &grown([sd, 0.0, 0.0, 0.0]),
        &each::<I>(1.0, 0.0, [1.0, 0.0, 0.0]),
        1e-5,
    );
    all_close(
        &grown([0.0, sd, 0.0, 0.0]),
        &each::<I>(0.0, 1.0, [1.0, 0.0, 0.0]),
        1e-5,
    );
    all_close(
        &grown([0.0, 0.0, sd, 0.0]),
        &each::<I>(0.0, 1.0, [1.0, 0.0, 0.0]),
        1e-5,
    );
}

/// Where sites are so scarce that no label is used up and nonspecific label sticks to the filter, free is added: an error `e` of the stock is
/// another name for `Kd exp(-e)` and `ns exp(e)`, and one of activity or efficiency for `R exp(e)` and `ns exp(e)` (algebra).
#[test]
fn stock_and_counting_errors_where_no_label_is_used_up() {
    scarce::<OneClass>(&[0.5f64.ln(), 0.1f64.ln()]);
    scarce::<TwoClasses>(&[0.1f64.ln(), 0.05f64.ln(), 4f64.ln(), 0.3f64.ln()]);
    scarce::<Hill>(&[0.5f64.ln(), 0.1f64.ln(), 1.6f64.ln()]);
}

/// Activity and efficiency are one factor: two independent errors of it are one of the root of their squares.
#[test]
fn errors_of_activity_and_efficiency_are_one() {
    let of_law = [0.5f64.ln(), 0.1f64.ln()];
    let t = rack(&ONE, NS, &[]);
    let of = |errors| variances::<OneClass>(&t, &of_law, NS, errors);
    let (both, one) = (of([0.0, 0.03, 0.04, 0.0]), of([0.0, 0.0, 0.05, 0.0]));
    let ratios: Vec<f64> = both.iter().zip(&one).map(|(b, o)| b / o).collect();
    all_close(&ratios, &[1.0; 5], 1e-9);
}

/// The lowest value of a function that falls and then rises, between two places, by the golden section.
fn lowest(mut low: f64, mut high: f64, f: impl Fn(f64) -> f64) -> f64 {
    let share = (5f64.sqrt() - 1.0) / 2.0;
    let (mut x, mut y) = (high - share * (high - low), low + share * (high - low));
    let (mut at_x, mut at_y) = (f(x), f(y));
    while high - low > 1e-7 * (1.0 + low.abs()) {
        if at_x < at_y {
            (high, y, at_y) = (y, x, at_x);
            x = high - share * (high - low);
            at_x = f(x);
        } else {
            (low, x, at_x) = (x, y, at_y);
            y = low + share * (high - low);
            at_y = f(y);
        }
    }
    at_x.min(at_y)
}

/// A fit with a volume error against one without, whose profile together with the error is minimised directly: the estimates are the
/// same, and the interval of Kd ends where `min over e of profile(ln Kd - e) + (e / sd)^2` reaches the cut.
#[test]
fn an_interval_with_a_volume_error() {
    let sd = 0.08;
    let without = rack(
        &ONE,
        NS,
        &[("unlabelled: SameLigand", "unlabelled: Other(name: \"x\")")],
    );
    let mut with = without.clone();
    with.protocol.numbers.scale_errors = errors([0.0, 0.0, 0.0, sd]);
    let (plain, wide) = (fit_rack(&without, true), fit_rack(&with, true));
    let (plain, wide) = (plain.fit().unwrap(), wide.fit().unwrap());
    for (p, w) in plain.estimates.iter().zip(&wide.estimates) {
        assert!((p.value / w.value).ln().abs() < 1e-7, "{p:?} {w:?}");
    }
    let evidence = RackEvidence::<OneClass>::new(&without, true).unwrap();
    let profile = |ln_kd: f64| {
        let mut start = plain.theta.clone();
        start[0] = ln_kd;
        let done = solve(&evidence, &start, Some(0));
        assert_eq!(done.ended, Ended::Converged);
        done.cost - plain.cost()
    };
    let (kd, old) = (
        wide.estimate("kd_nm").unwrap(),
        plain.estimate("kd_nm").unwrap(),
    );
    for (end, old) in [(kd.low, old.low), (kd.high, old.high)] {
        let (end, old) = (end.value().unwrap().ln(), old.value().unwrap().ln());
        let reach = end - plain.theta[0];
        assert!(
            reach.abs() > (old - plain.theta[0]).abs() * 1.05,
            "the error shows"
        );
        let (low, high) = (f64::min(0.0, reach), f64::max(0.0, reach));
        let best = lowest(low, high, |e| profile(end - e) + (e / sd).powi(2));
        assert!(
            (best - wide.cut).abs() < 1e-6 * wide.cut,
            "{best} {}",
            wide.cut
        );
    }
}

/// [`Estimate::widened`] on a parabola of different halves, against direct minimisation of profile and error together.
#[test]
fn widened_is_the_profile_with_one_more_error() {
    let (value, cut) = (3.0f64, 4.4);
    let halves = [-0.2, 0.35];
    let e = Estimate {
        name: "sites_nm",
        value,
        se_ln: Some(0.12),
        at_floor: false,
        low: End::At(value * f64::exp(halves[0])),
        high: End::At(value * f64::exp(halves[1])),
    };
    for sd in [0.01, 0.1, 0.5] {
        let wide = e.widened(sd, cut);
        assert_eq!(
            (wide.value, wide.name, wide.at_floor),
            (e.value, e.name, false)
        );
        // Independent errors add their squares.
        assert!((wide.se_ln.unwrap() - (0.12f64 * 0.12 + sd * sd).sqrt()).abs() < 1e-15);
        for (end, half) in [wide.low, wide.high].iter().zip(halves) {
            let reach = (end.value().unwrap() / value).ln();
            assert!(reach * half > 0.0 && reach.abs() > half.abs());
            let profile = |x: f64| cut * (x / half).powi(2);
            let (low, high) = (f64::min(0.0, reach), f64::max(0.0, reach));
            let best = lowest(low, high, |e| profile(reach - e) + (e / sd).powi(2));
            assert!((best - cut).abs() < 1e-9 * cut, "{sd} {half}: {best}");
        }
    }
    // What is open stays open, and what has no standard error gets none.
    let open = Estimate {
        se_ln: None,
        low: End::Open,
        high: End::Failed,
        ..e
    };
    let wide = open.widened(0.1, cut);
    assert_eq!(
        (wide.se_ln, wide.low, wide.high),
        (None, End::Open, End::Failed)
    );
}
