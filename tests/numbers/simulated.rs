//! The simulation itself: that racks are what they are said to be, and that other ways of analysis are done as published.

use crate::simulate::cells::*;
use crate::simulate::law::{Law, bound};
use crate::simulate::rack::{BACKGROUND_CPM, Cell, SEED, each};
use crate::simulate::subtracted::{Free, Points, hyperbola, line, line_delta};
use crate::simulate::tally::share;
use rackside::assay::{LevelNo, Role, Sticks, Titration, counts_per_nm, observed};
use rackside::binding::{Block, OneClass, Stuck};
use rackside::fit::fit_rack;
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;

#[track_caller]
fn near(got: f64, want: f64, relative: f64) {
    assert!(
        (got - want).abs() <= relative * want.abs(),
        "got {got}, want {want}"
    );
}

/// Balances with a solution by hand (quadratic, or free chosen and added computed from it).
#[test]
fn the_balance_of_the_truth_by_hand() {
    let unit = Law::OneClass {
        kd: 1.0,
        sites: 1.0,
    };
    near(
        unit.specific(unit.free(1.0, 1.0)),
        0.5 * (3.0 - 5f64.sqrt()),
        1e-14,
    );
    let five = Law::OneClass {
        kd: 1.0,
        sites: 5.0,
    };
    near(five.free(10.0, 1.5), 4.0, 1e-14);
    near(
        bound(&five, 0.5, Sticks::ToPreparation, 10.0, 0.0),
        6.0,
        1e-14,
    );
    let hill = Law::Hill {
        kh: 1.0,
        sites: 1.0,
        n: 1.6,
    };
    near(hill.specific(2.0), 0.7519492530, 1e-10);
    let taken = hill.specific(2.0);
    near(hill.free(2.0 + taken, 1.0), 2.0, 1e-14);
    let two = Law::TwoClasses([(1.0, 2.0), (3.0, 8.0)]);
    // S(1) = 2/2 + 8/4.
    near(two.free(4.0, 1.0), 1.0, 1e-14);
    near(
        bound(&two, 0.0, Sticks::ToFilter, 1.0, 3.0),
        3.0 / 4.0,
        1e-14,
    );
}

/// Two solutions of the balance that share no code.
#[test]
fn the_truth_is_what_the_program_computes() {
    for cell in CELLS {
        let [kd, sites] = cell.law.pair();
        let law = OneClass { kd, sites };
        let stuck = match cell.sticks {
            Sticks::ToPreparation => Stuck::DuringIncubation,
            Sticks::ToFilter => Stuck::AfterSeparation,
        };
        for label in cell.added() {
            for (c, block) in [
                (0.0, Block::None),
                (cell.unlabelled, Block::SameLigand(cell.unlabelled)),
            ] {
                let b = rackside::binding::bound(&law, cell.ns, stuck, label, block, &mut [0.0; 2]);
                let truth = bound(&cell.law, cell.ns, cell.sticks, label, c);
                near(b.value, truth, 1e-13);
            }
        }
        near(counts_per_nm(&cell.empty().protocol), cell.per_nm(), 1e-14);
    }
}

/// Mean and variance of a tube's counts over many racks: `t (b + k B)` and the mean plus `(cv k B)^2`.
#[test]
fn counts_have_the_mean_and_the_variance_of_the_model() {
    const RACKS: u64 = 4000;
    for (cell, role, level) in [
        (A, Role::Total, 8),
        (A15, Role::Nonspecific, 6),
        (C, Role::Total, 1),
        (TWO, Role::Total, 14),
        (HILL, Role::Total, 3),
    ] {
        let unlabelled = match role {
            Role::Nonspecific => cell.unlabelled,
            _ => 0.0,
        };
        let label = cell.added()[level as usize - 1];
        let signal = cell.minutes
            * cell.per_nm()
            * bound(&cell.law, cell.ns, cell.sticks, label, unlabelled);
        let mean = cell.minutes * BACKGROUND_CPM + signal;
        let variance = mean + (cell.cv * signal).powi(2);
        let counts = each(&cell, RACKS, |t| {
            let tube = t
                .tubes
                .iter()
                .find(|x| x.role == role && x.level == Some(LevelNo(level)))
                .unwrap();
            observed(t, tube.no, true).unwrap().counts
        });
        let n = RACKS as f64;
        let found = counts.iter().sum::<f64>() / n;
        let spread = counts.iter().map(|c| (c - mean).powi(2)).sum::<f64>() / n;
        let off = (found - mean) / (variance / n).sqrt();
        assert!(off.abs() < 4.0, "{} mean {found}, not {mean}", cell.name);
        // The standard error of a variance is sqrt(2 / n) of it, 2.2 %.
        near(spread, variance, 0.09);
    }
}

/// A serial dilution hands its errors down: the lowest of eight levels has those of eight steps, and shares seven with
/// the one above.
#[test]
fn a_serial_dilution_hands_its_errors_down() {
    const RACKS: usize = 4000;
    let nominal = H.added();
    let mut rng = ChaCha8Rng::seed_from_u64(SEED);
    let (mut lowest, mut step, mut both) = (0.0, 0.0, 0.0);
    for _ in 0..RACKS {
        let made = H.made(&mut rng);
        let off = |i: usize| (made[i] / nominal[i]).ln();
        lowest += off(0).powi(2);
        step += (off(0) - off(1)).powi(2);
        both += (off(0) - off(1)) * off(1);
    }
    let n = RACKS as f64;
    near(lowest / n, 8.0 * 0.03f64.powi(2), 0.09);
    near(step / n, 0.03f64.powi(2), 0.09);
    let correlation = both / n / (0.03f64.powi(2) * 7f64.sqrt());
    assert!(correlation.abs() < 4.0 / n.sqrt(), "{correlation}");
}

/// The same number is the same rack, in whatever order and beside whatever other; another number is another.
#[test]
fn a_rack_is_named_by_its_number() {
    let empty = A.empty();
    let in_turn = each(&A, 5, Titration::clone);
    for (n, t) in in_turn.iter().enumerate() {
        assert_eq!(*t, A.rack(&empty, n as u64));
    }
    assert_ne!(in_turn[0].kept, in_turn[1].kept);
    assert_eq!(
        H.rack(&H.empty(), 3).kept,
        H_TOLD_NONE.rack(&H_TOLD_NONE.empty(), 3).kept
    );
}

/// Student's t on 10 degrees of freedom, two-sided 95 % (NIST/SEMATECH e-Handbook of Statistical Methods, 1.3.6.7.2).
const T10: f64 = 2.228139;

/// Treated cells (Treloar 1974; Bates & Watts 1988, Nonlinear Regression Analysis; in the `datasets` of R).
fn puromycin() -> Points {
    Points {
        free: vec![
            0.02, 0.02, 0.06, 0.06, 0.11, 0.11, 0.22, 0.22, 0.56, 0.56, 1.10, 1.10,
        ],
        bound: vec![
            76.0, 47.0, 97.0, 107.0, 123.0, 139.0, 159.0, 152.0, 191.0, 201.0, 207.0, 200.0,
        ],
    }
}

/// Estimates and standard errors computed independently with R's nls and in 50 digits.
#[test]
fn puromycin_by_an_unweighted_hyperbola() {
    let [k, v] = hyperbola(&puromycin()).unwrap();
    for (got, value, se) in [
        (k, 0.06412128168157, 0.00828094950),
        (v, 212.6837431425, 6.947155160),
    ] {
        near(got.value, value, 1e-11);
        near(got.low, value - T10 * se, 1e-6);
        near(got.high, value + T10 * se, 1e-6);
    }
}

/// Estimates computed independently. Fieller's ends by what defines them: there the slope `-1/Kd` is t standard errors
/// from the one found, and the line, written with its origin there, has an intercept t standard errors from zero.
#[test]
fn puromycin_by_a_straight_line() {
    let points = puromycin();
    let n = points.free.len() as f64;
    // Intercept and slope about an origin, each with its standard error, from the normal equations.
    let about = |origin: f64| {
        let (mut x1, mut x2, mut y1, mut xy, mut y2) = (0.0, 0.0, 0.0, 0.0, 0.0);
        for (b, f) in points.bound.iter().zip(&points.free) {
            let (x, y) = (b - origin, b / f);
            x1 += x;
            x2 += x * x;
            y1 += y;
            xy += x * y;
            y2 += y * y;
        }
        let d = n * x2 - x1 * x1;
        let (intercept, slope) = ((x2 * y1 - x1 * xy) / d, (n * xy - x1 * y1) / d);
        let variance = (y2 - intercept * y1 - slope * xy) / (n - 2.0);
        let se = [x2, n].map(|v| (variance * v / d).sqrt());
        ([intercept, slope], se)
    };
    let (line_at_zero, se) = about(0.0);
    let slope = line_at_zero[1];
    let [k, v] = line(&points).unwrap();
    for way in [line, line_delta] {
        let [k, v] = way(&points).unwrap();
        near(k.value, 0.0562724, 1e-6);
        near(v.value, 209.182687, 1e-8);
    }
    near(slope + 1.0 / k.low, T10 * se[1], 1e-6);
    near(slope + 1.0 / k.high, -T10 * se[1], 1e-6);
    for (end, sign) in [(v.low, 1.0), (v.high, -1.0)] {
        let (l, se) = about(end);
        near(l[0], sign * T10 * se[0], 1e-6);
    }
    let [k, v] = line_delta(&points).unwrap();
    near(k.high - k.value, T10 * se[1] / slope.powi(2), 1e-6);
    near(k.value - k.low, T10 * se[1] / slope.powi(2), 1e-6);
    let (_, se) = about(v.value);
    near(v.high - v.value, T10 * se[0] / -slope, 1e-6);
    near(v.value - v.low, T10 * se[0] / -slope, 1e-6);
}

/// Points on a curve of one class; the same with so much scatter that the slope may be zero; a line that does not fall.
#[test]
fn a_line_without_scatter_and_one_with_much() {
    let law = Law::OneClass {
        kd: 0.5,
        sites: 0.02,
    };
    let free = vec![0.05, 0.1, 0.2, 0.5, 1.0, 2.0, 5.0];
    let bound: Vec<f64> = free.iter().map(|f| law.specific(*f)).collect();
    let exact = Points { free, bound };
    for way in [line, line_delta, hyperbola] {
        let [kd, sites] = way(&exact).unwrap();
        near(kd.value, 0.5, 1e-9);
        near(sites.value, 0.02, 1e-9);
        assert!(kd.high - kd.low < 1e-6 && sites.high - sites.low < 1e-8);
    }
    let mut coarse = exact.clone();
    let off = [1.5, 0.6, 1.4, 0.5, 1.3, 0.7, 1.1];
    coarse.bound.iter_mut().zip(off).for_each(|(b, o)| *b *= o);
    let [kd, sites] = line(&coarse).unwrap();
    assert!(kd.high.is_infinite() && sites.high.is_infinite(), "{kd:?}");
    let [by_delta, _] = line_delta(&coarse).unwrap();
    assert!(by_delta.high.is_finite() && by_delta.value == kd.value);
    let rising = Points {
        free: vec![1.0, 2.0, 3.0, 4.0],
        bound: vec![1.0, 3.0, 6.0, 10.0],
    };
    assert_eq!(line(&rising), None);
}

/// Depletion: free taken as added makes Kd of the line too large, and more so the more sites there are.
#[test]
fn free_taken_as_added_makes_kd_too_large() {
    let kd = |cell: &Cell, free| {
        let answers = each(cell, 50, |t| line(&Points::of(t, free)).unwrap()[0].value);
        answers.iter().sum::<f64>() / 50.0
    };
    assert!(kd(&B, Free::Added) > 1.3 * KD);
    near(kd(&B, Free::LessBound), KD, 0.05);
}

/// Laws that are not of one class leave more scatter about a fit of one class than there is between tubes.
#[test]
fn other_laws_show_as_scatter_about_one_class() {
    let scattered = |cell: &Cell| share(cell, 40, |t| fit_rack(t, true).fit().unwrap().cv > 0.09);
    let found = [A, TWO, HILL].map(|cell| scattered(&cell));
    assert_eq!(found, [0, 40, 40]);
}
