//! How often nominal 95 % intervals cover the truth, over simulated racks: the program's own, and those of common
//! ways of analysing a rack. What it prints is kept beside it:
//! `cargo bench --bench coverage > tests/benches/coverage.txt`.
#![allow(clippy::unwrap_used, clippy::print_stdout)]

#[path = "../simulate/mod.rs"]
mod simulate;

use simulate::cells::*;
use simulate::rack::{Cell, SEED};
use simulate::subtracted::{Free, Points, hyperbola, line, line_delta};
use simulate::tally::{Answers, Tally, fitted};

/// Racks in a cell.
const RACKS: u64 = 4000;

fn main() {
    println!(
        "Simulated racks, {RACKS} a cell, seed {SEED} (ChaCha8); cells as in tests/simulate/cells.rs."
    );
    println!(
        "The standard error of a coverage of 95 % is {:.2}.",
        se(95.0)
    );
    println!();
    println!("1. The program's own intervals, nominal 95 %, default CV prior");
    println!();
    println!(
        "{:11} {:>22}   {:>22}   {:>22}   {:>10}",
        "", "bias of Kd, %", "Kd, % of racks", "sites, % of racks", "racks"
    );
    println!(
        "{:11} {:>7} {:>6} {:>7}   {:>8} {:>6} {:>6}   {:>8} {:>6} {:>6}   {:>4} {:>4} {:>4}",
        "cell",
        "mean ln",
        "(se)",
        "median",
        "covered",
        "below",
        "above",
        "covered",
        "below",
        "above",
        "open",
        "lost",
        "none"
    );
    let own: Vec<(Cell, Tally)> = CELLS.into_iter().map(|cell| (cell, print(&cell))).collect();
    println!("analysed as something else than they are");
    MISTOLD.iter().for_each(|cell| {
        print(cell);
    });
    for line in [
        "",
        "mean ln: of the logarithm of the estimate, with its standard error; that of the median is 1.25 times as large.",
        "below, above: the whole interval lies there. open: racks with an open end, which covers; lost: racks with an end that",
        "could not be found, which does not; none: racks without a fit, which count as not covered.",
        "",
        "2. Common ways of analysing the same racks",
        "",
        "Nonspecific binding is subtracted level by level (mean of the totals less mean of the nonspecific tubes); eight points.",
        "line: bound/free against bound, ordinary least squares, Fieller's intervals; delta: the same line, intervals by the delta",
        "method. hyperbola: bound against free, unweighted, asymptotic t intervals. Free is what was added; or that less all",
        "that is bound in the totals; or, where nonspecific label sticks to the filter, that less specific. Bias: of the median.",
        "none: racks without an estimate (the line does not fall), left out of the bias and counted as not covered.",
        "",
    ] {
        println!("{line}");
    }
    println!("{:37} {:>7} {:>18}", "", "Kd", "sites");
    println!(
        "{:6} {:10} {:19} {:>7} {:>8}   {:>7} {:>8}   {:>5}",
        "cell", "way", "free", "bias %", "covered", "bias %", "covered", "none"
    );
    for (cell, tally) in own.iter().filter(|(c, _)| COMPARED.contains(c)) {
        row(cell.name, "counts", "by the balance", tally);
        let filter = cell.sticks == rackside::assay::Sticks::ToFilter;
        for (name, way) in WAYS {
            for (free, words) in [
                (Free::Added, "added"),
                (Free::LessBound, "added - bound"),
                (Free::LessSpecific, "added - specific"),
            ] {
                if free == Free::LessSpecific && !filter {
                    continue;
                }
                let tally = Tally::of(cell, RACKS, |t| way(&Points::of(t, free)));
                row("", name, words, &tally);
            }
        }
    }
}

/// The standard error of a coverage, in per cent.
fn se(coverage: f64) -> f64 {
    (coverage * (100.0 - coverage) / RACKS as f64).sqrt()
}

/// Rounded, and no minus before a zero.
fn plain(v: f64, digits: i32) -> f64 {
    let unit = 10f64.powi(digits);
    (v * unit).round() / unit + 0.0
}

/// The program's intervals in one cell, as a line of the first table.
fn print(cell: &Cell) -> Tally {
    let tally = Tally::of(cell, RACKS, fitted);
    let [mean, se] = tally.mean_ln_bias(0);
    let [kd, sites] = [tally.missed(0), tally.missed(1)];
    println!(
        "{:11} {:>7.2} {:>6.2} {:>7.2}   {:>8.2} {:>6.2} {:>6.2}   {:>8.2} {:>6.2} {:>6.2}   {:>4} {:>4} {:>4}",
        cell.name,
        plain(mean, 2),
        se,
        plain(tally.median_bias(0), 2),
        tally.coverage(0),
        kd[0],
        kd[1],
        tally.coverage(1),
        sites[0],
        sites[1],
        tally.open(),
        tally.lost(),
        tally.without(),
    );
    tally
}

/// The cells in which other ways are tried.
const COMPARED: [Cell; 7] = [A, B, C, D, F, G, I];

type Way = fn(&Points) -> Option<Answers>;

const WAYS: [(&str, Way); 3] = [
    ("line", line),
    ("line delta", line_delta),
    ("hyperbola", hyperbola),
];

/// A line of the second table.
fn row(cell: &str, way: &str, free: &str, tally: &Tally) {
    println!(
        "{:6} {:10} {:19} {:>7.1} {:>8.1}   {:>7.1} {:>8.1}   {:>5}",
        cell,
        way,
        free,
        plain(tally.median_bias(0), 1),
        tally.coverage(0),
        plain(tally.median_bias(1), 1),
        tally.coverage(1),
        tally.without(),
    );
}
