//! In how many simulated racks two classes of sites or a Hill coefficient are offered, where they are true and where they
//! are not. What it prints is kept beside it: `cargo bench --bench models > tests/benches/models.txt`.
#![allow(clippy::unwrap_used, clippy::print_stdout)]

#[path = "../simulate/mod.rs"]
mod simulate;

use rackside::assay::{Model, Titration};
use rackside::fit::compare;
use rackside::judge::{Standing, WhyWithheld, choose, supported_at};
use simulate::cells::{A, H, HILL, TWO};
use simulate::rack::{Cell, SEED, each};

/// Racks in a cell.
const RACKS: u64 = 2000;
/// Chances of a gain at which racks are counted.
const CHANCES: [f64; 6] = [0.001, 0.005, 0.01, 0.02, 0.03, 0.05];

/// What is said of one law on one rack.
struct Said {
    /// The chance of its gain; not a number without a fit.
    p: f64,
    standing: Standing,
}

fn said(t: &Titration) -> Vec<(Model, Said)> {
    let choice = choose(t, &compare(t, true, |_| false, supported_at));
    let of = |v: rackside::judge::Verdict| {
        let p = v.gain.map_or(f64::NAN, |g| g.p);
        let standing = v.standing;
        (v.model, Said { p, standing })
    };
    choice.verdicts.into_iter().map(of).collect()
}

fn main() {
    println!(
        "Simulated racks, {RACKS} a cell, seed {SEED} (ChaCha8); cells as in tests/simulate/cells.rs."
    );
    println!(
        "Per cent of racks. withheld: supported, and not offered for an open end, depletion, the other law's lower AICc, its own"
    );
    println!("AICc. p <= x: the chance of the gain over one class, by the F distribution.");
    println!();
    print!(
        "{:12} {:11} {:>7}   {:>6} {:>6} {:>6} {:>6}   {:>6}  ",
        "cell", "law", "offered", "open", "depl.", "other", "aicc", "no fit"
    );
    CHANCES
        .iter()
        .for_each(|c| print!(" {:>6}", format!("<={c}")));
    println!();
    for cell in [A, H, TWO, HILL] {
        table(&cell);
    }
}

fn table(cell: &Cell) {
    let racks = each(cell, RACKS, said);
    let percent = |n: usize| 100.0 * n as f64 / racks.len() as f64;
    let any = racks
        .iter()
        .filter(|r| r.iter().any(|(_, s)| s.standing == Standing::Offered));
    println!(
        "{:12} {:11} {:>7.2}",
        cell.name,
        "either",
        percent(any.count())
    );
    for model in [Model::TwoClasses, Model::Hill] {
        let of: Vec<&Said> = racks
            .iter()
            .flatten()
            .filter(|(m, _)| *m == model)
            .map(|(_, s)| s)
            .collect();
        let share =
            |is: fn(&Standing) -> bool| percent(of.iter().filter(|s| is(&s.standing)).count());
        print!(
            "{:12} {:11} {:>7.2}   {:>6.2} {:>6.2} {:>6.2} {:>6.2}   {:>6.2}  ",
            "",
            model.words(),
            share(|s| *s == Standing::Offered),
            share(|s| matches!(s, Standing::Withheld(WhyWithheld::OpenEnd(_)))),
            share(|s| matches!(s, Standing::Withheld(WhyWithheld::Depletion(_)))),
            share(|s| matches!(s, Standing::Withheld(WhyWithheld::Other(_)))),
            share(|s| matches!(s, Standing::Withheld(WhyWithheld::Aicc))),
            share(|s| matches!(s, Standing::NoFit(_))),
        );
        for c in CHANCES {
            print!(" {:>6.2}", percent(of.iter().filter(|s| s.p <= c).count()));
        }
        println!();
    }
}
