//! Which law of binding is offered, on simulated racks: seldom another than one class where there is one, nearly always where
//! there is more. `cargo bench --bench models` does the same with 2000 racks a cell and made `tests/benches/models.txt`.

use crate::simulate::cells::{A, H, HILL, TWO};
use crate::simulate::rack::Cell;
use crate::simulate::tally::share;
use rackside::assay::Model;
use rackside::fit::compare;
use rackside::judge::{choose, supported_at};
use statrs::distribution::{Binomial, DiscreteCDF};

/// In how many racks a law is offered that `is` one looked for.
fn offered(cell: &Cell, racks: u64, is: impl Fn(Model) -> bool + Sync) -> u64 {
    let n = share(cell, racks, |t| {
        let choice = choose(t, &compare(t, true, |_| false, supported_at));
        choice.offered().is_some_and(&is)
    });
    n as u64
}

/// At most 5 % are to be offered another law; more than the 99.9 % point of that in 150 racks is no chance.
#[test]
fn coverage_of_one_class_by_one_class() {
    let most = Binomial::new(0.05, 150).unwrap().inverse_cdf(0.999);
    for cell in [A, H] {
        let n = offered(&cell, 150, |_| true);
        println!("{}: another law offered in {n} of 150 racks", cell.name);
        assert!(n <= most, "{}: {n} of 150", cell.name);
    }
}

/// At least 90 % are to be offered what is there; fewer than the 0.1 % point of that in 40 racks is no chance.
#[test]
fn more_than_one_class_is_offered_where_it_is() {
    let least = Binomial::new(0.9, 40).unwrap().inverse_cdf(0.001);
    for (cell, there) in [(TWO, Model::TwoClasses), (HILL, Model::Hill)] {
        let n = offered(&cell, 40, |m| m == there);
        println!("{}: offered in {n} of 40 racks", cell.name);
        assert!(n >= least, "{}: {n} of 40", cell.name);
    }
}

/// The table that was kept: at most 5 % and by its upper 95 % bound (Wilson 1927, J Am Stat Assoc 22:209; from memory) at most 7 %
/// where there is one class, at least 90 % where there is more.
#[test]
fn the_table_of_offers_is_within_its_limits() {
    let table = include_str!("../benches/models.txt");
    assert!(table.contains("2000 a cell"));
    let either = |cell: &str| -> f64 {
        let line = table
            .lines()
            .find(|l| l.starts_with(cell) && l.contains(" either "))
            .unwrap();
        line.split_whitespace().last().unwrap().parse().unwrap()
    };
    let upper = |percent: f64| {
        let (p, n, z) = (percent / 100.0, 2000.0, 1.959_964);
        let centre = p + z * z / (2.0 * n);
        let half = z * f64::sqrt(p * (1.0 - p) / n + z * z / (4.0 * n * n));
        100.0 * (centre + half) / (1.0 + z * z / n)
    };
    for cell in ["A ", "H "] {
        let found = either(cell);
        assert!(found <= 5.0 && upper(found) <= 7.0, "{cell}: {found}");
    }
    for cell in ["two classes ", "Hill n 1.6 "] {
        assert!(either(cell) >= 90.0, "{cell}");
    }
}
