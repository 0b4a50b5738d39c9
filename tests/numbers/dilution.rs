//! Dilution errors as rows: tubes of one level share a solution, and in a serial dilution levels share steps.

use crate::racks::{LEVELS, find, keep, levels, sheet};
use rackside::assay::{LevelNo, Role, Titration};
use rackside::binding::{Block, OneClass, Stuck, bound};
use rackside::fit::{Columns, Evidence, Fit, RackEvidence, RowOf, Rows, fit_rack};
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, Normal, Poisson};
use statrs::distribution::{Binomial, DiscreteCDF};

/// The rack the racks are simulated from.
const KD: f64 = 0.5;
const SITES: f64 = 0.02;
const NS: f64 = 0.002;
const BACKGROUND: f64 = 25.0;
const TUBE_CV: f64 = 0.04;
const STEP: f64 = 0.03;

/// Eight levels over 0.1 to 10 Kd, two total and two nonspecific tubes each, 80 Ci/mmol, 0.45, 0.5 mL, 1 uM unlabelled.
fn empty(dilution_error: &str, serial: bool) -> Titration {
    let ratio = 100f64.powf(1.0 / 7.0);
    let nm: Vec<f64> = (0..8).map(|i| 0.1 * KD * ratio.powi(i)).collect();
    let ladder = levels(&nm);
    let error = format!("dilution_error: \"{dilution_error}\"");
    let made = if serial {
        "dilution: Serial"
    } else {
        "dilution: EachFromStock"
    };
    sheet(&[
        (LEVELS, &ladder),
        ("dilution_error: \"2 %\"", &error),
        ("dilution: EachFromStock", made),
    ])
}

/// Counts for an empty rack: an error for every serial step, a normal error of every tube's bound label, Poisson counts.
fn simulate(t: &mut Titration, rng: &mut ChaCha8Rng) {
    let step = Normal::new(0.0, STEP).unwrap();
    let scatter = Normal::new(1.0, TUBE_CV).unwrap();
    let counts = |mean: f64, rng: &mut ChaCha8Rng| {
        if mean > 0.0 {
            Poisson::new(mean).unwrap().sample(rng)
        } else {
            0.0
        }
    };
    let blank = find(t, Role::Background, None, 1);
    let n = counts(10.0 * BACKGROUND, rng);
    keep(t, &blank, n, 10.0, None);
    let per_nm = rackside::assay::counts_per_nm(&t.protocol);
    let law = OneClass {
        kd: KD,
        sites: SITES,
    };
    let mut off = 0.0;
    for level in (1..=8).rev() {
        off += step.sample(rng);
        let added = t.level(LevelNo(level)).unwrap().added.base() * f64::exp(off);
        for (role, block) in [
            (Role::Total, Block::None),
            (Role::Nonspecific, Block::SameLigand(1000.0)),
        ] {
            for replicate in 1..=2 {
                let b = bound(
                    &law,
                    NS,
                    Stuck::DuringIncubation,
                    added,
                    block,
                    &mut [0.0; 2],
                );
                let mean = 2.0 * (BACKGROUND + per_nm * b.value * scatter.sample(rng));
                let n = counts(mean, rng);
                let tube = find(t, role, Some(level), replicate);
                keep(t, &tube, n, 2.0, None);
            }
        }
    }
}

fn evidence(t: &Titration) -> RackEvidence<OneClass> {
    RackEvidence::new(t, true).unwrap()
}

#[test]
fn without_an_error_there_are_no_columns() {
    let mut rng = ChaCha8Rng::seed_from_u64(1);
    let first = Columns::of::<OneClass>().dilutions();
    assert_eq!(first, 5);
    for (error, serial, columns) in [
        ("0", true, 0),
        ("0", false, 0),
        ("3 %", true, 8),
        ("3 %", false, 8),
    ] {
        let mut t = empty(error, serial);
        simulate(&mut t, &mut rng);
        let e = evidence(&t);
        assert_eq!(e.dim(), first + columns, "{error} {serial}");
        let mut rows = Rows::default();
        e.rows(&vec![-1.0; e.dim()], &mut rows);
        let steps = rows.of().iter().filter(|r| matches!(r, RowOf::Dilution(_)));
        assert_eq!(steps.count(), columns);
        let fit = fit_rack(&t, true).fit().unwrap().clone();
        assert_eq!(fit.theta.len(), first + columns);
    }
}

/// Levels without a reading bear on nothing, unless one with a reading was diluted from them.
#[test]
fn a_column_for_every_level_that_bears_on_a_reading() {
    for (serial, columns) in [(true, 6), (false, 1)] {
        let mut t = empty("3 %", serial);
        for (role, level) in [(Role::Background, None), (Role::Total, Some(3))] {
            let tube = find(&t, role, level, 1);
            keep(&mut t, &tube, 500.0, 2.0, None);
        }
        assert_eq!(evidence(&t).dim(), 5 + columns, "serial {serial}");
    }
}

/// The rows' product with the right-hand side is minus half the gradient of the cost, for every column.
#[test]
fn rows_are_the_gradient_of_the_cost() {
    let mut rng = ChaCha8Rng::seed_from_u64(2);
    for (error, serial) in [("0", false), ("3 %", true), ("3 %", false)] {
        let mut t = empty(error, serial);
        simulate(&mut t, &mut rng);
        let e = evidence(&t);
        let mut theta = vec![KD.ln() + 0.3, SITES.ln() - 0.2, NS.ln() + 0.1, 3.3, -2.5];
        theta.extend((0..e.dim() - 5).map(|i| 0.01 * (i as f64 - 3.0)));
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
                "{error} {serial} column {j}: {slope} {exact}"
            );
        }
    }
}

fn covers(fit: &Fit, name: &str, truth: f64) -> bool {
    let e = fit.estimate(name).unwrap();
    e.low.value().is_none_or(|low| low <= truth) && e.high.value().is_none_or(|high| truth <= high)
}

/// Racks with 3 % error per serial step, analysed with and without the dilution rows.
///
/// Bounds: the number of intervals that cover is binomial. With the rows it has to lie within the central 99.9 % for
/// a coverage of 0.95; without them below that range, and within the central 99.9 % for the 0.775
/// that an independent simulation of 4000 such racks gave.
#[test]
fn coverage_with_a_serial_dilution_error() {
    const RACKS: u64 = 300;
    let mut rng = ChaCha8Rng::seed_from_u64(20);
    let mut hits = [[0u64; 2]; 2];
    for _ in 0..RACKS {
        let mut with = empty("3 %", true);
        simulate(&mut with, &mut rng);
        let mut without = with.clone();
        without.protocol.numbers.dilution_error = empty("0", true).protocol.numbers.dilution_error;
        for (t, hits) in [with, without].iter().zip(&mut hits) {
            let outcome = fit_rack(t, true);
            let fit = outcome.fit().unwrap();
            hits[0] += u64::from(covers(fit, "kd_nm", KD));
            hits[1] += u64::from(covers(fit, "sites_nm", SITES));
        }
    }
    let [with, without] = hits;
    let percent = |n: u64| 100.0 * n as f64 / RACKS as f64;
    println!(
        "coverage of nominal 95 %: with dilution rows Kd {:.1}, sites {:.1}; without Kd {:.1}, sites {:.1}",
        percent(with[0]),
        percent(with[1]),
        percent(without[0]),
        percent(without[1]),
    );
    let range = |p: f64| {
        let b = Binomial::new(p, RACKS).unwrap();
        b.inverse_cdf(0.0005)..=b.inverse_cdf(0.9995)
    };
    assert!(range(0.95).contains(&with[0]), "{with:?} {:?}", range(0.95));
    assert!(range(0.95).contains(&with[1]), "{with:?} {:?}", range(0.95));
    assert!(without[0] < *range(0.95).start(), "{without:?}");
    assert!(
        range(0.775).contains(&without[0]),
        "{without:?} {:?}",
        range(0.775)
    );
}
