//! Dilution errors as rows: tubes of one level share a solution, and in a serial dilution levels share steps.

use crate::racks::{find, keep};
use crate::simulate::cells::{H, H_TOLD_NONE, KD};
use crate::simulate::rack::Cell;
use crate::simulate::tally::{Tally, fitted};
use rackside::assay::{Dilution, Role, Titration};
use rackside::binding::OneClass;
use rackside::fit::{Columns, Evidence, RackEvidence, RowOf, Rows, fit_rack};
use statrs::distribution::{Binomial, DiscreteCDF};

/// Eight levels over 0.1 to 10 Kd, two total and two nonspecific tubes each, whose analysis is told of this error.
fn told(step: f64, serial: bool) -> Cell {
    Cell {
        told_step: step,
        dilution: if serial {
            Dilution::Serial
        } else {
            Dilution::EachFromStock
        },
        ..H
    }
}

fn filled(cell: &Cell, number: u64) -> Titration {
    cell.rack(&cell.empty(), number)
}

fn evidence(t: &Titration) -> RackEvidence<OneClass> {
    RackEvidence::new(t, true).unwrap()
}

#[test]
fn without_an_error_there_are_no_columns() {
    let first = Columns::of::<OneClass>().dilutions();
    assert_eq!(first, 5);
    for (error, serial, columns) in [
        (0.0, true, 0),
        (0.0, false, 0),
        (0.03, true, 8),
        (0.03, false, 8),
    ] {
        let t = filled(&told(error, serial), 1);
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
        let mut t = told(0.03, serial).empty();
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
    for (error, serial) in [(0.0, false), (0.03, true), (0.03, false)] {
        let t = filled(&told(error, serial), 2);
        let e = evidence(&t);
        let [_, sites] = H.law.pair();
        let mut theta = vec![KD.ln() + 0.3, sites.ln() - 0.2, H.ns.ln() + 0.1, 3.3, -2.5];
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

/// Racks with 3 % error per serial step, analysed with and without the dilution rows.
///
/// Bounds: the number of intervals that cover is binomial. With the rows it has to lie within the central 99.9 % for
/// a coverage of 0.95; without them below that range, and within the central 99.9 % for the 0.775
/// that an independent simulation of 4000 such racks gave.
#[test]
fn coverage_with_a_serial_dilution_error() {
    const RACKS: u64 = 300;
    let [with, without] = [H, H_TOLD_NONE].map(|cell| {
        let tally = Tally::of(&cell, RACKS, fitted);
        [0, 1].map(|k| tally.covered(k))
    });
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
