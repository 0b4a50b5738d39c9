//! How long the fit of one class takes on four of the reference racks. `against_scipy.py` beside this file sets the times
//! against those of scipy on the same data.
#![allow(missing_docs, clippy::unwrap_used, clippy::panic, clippy::print_stdout)]

#[path = "../numbers/racks.rs"]
#[allow(dead_code)]
mod racks;
#[path = "../numbers/reference_racks.rs"]
#[allow(dead_code, unused_imports)]
mod reference_racks;

use criterion::{BenchmarkId, Criterion, criterion_group};
use rackside::assay::Titration;
use rackside::binding::OneClass;
use rackside::fit::{End, Fitting};
use std::hint::black_box;

/// What is timed: the fit from cold starts and the interval of Kd, from the titration on.
fn timed(t: &Titration) -> [End; 2] {
    Fitting::<OneClass>::new(t, true, &[])
        .unwrap()
        .first_interval()
}

const RACKS: [(&str, &str); 4] = [
    ("serial", include_str!("../numbers/data/racks/serial.json")),
    ("stock", include_str!("../numbers/data/racks/stock.json")),
    (
        "other_ki",
        include_str!("../numbers/data/racks/other_ki.json"),
    ),
    (
        "full_block",
        include_str!("../numbers/data/racks/full_block.json"),
    ),
];

fn rack(json: &str) -> Titration {
    reference_racks::titration(&serde_json::from_str(json).unwrap())
}

fn fits(c: &mut Criterion) {
    let mut group = c.benchmark_group("fit");
    for (name, json) in RACKS {
        let t = rack(json);
        assert!(timed(&t).iter().all(|end| end.value().is_some()));
        group.bench_with_input(BenchmarkId::from_parameter(name), &t, |b, t| {
            b.iter(|| timed(black_box(t)));
        });
    }
    group.finish();
}

/// Says the interval of Kd of a rack and repeats what is timed.
fn repeat(name: &str, times: usize) {
    let (_, json) = RACKS.iter().find(|r| r.0 == name).unwrap();
    let t = rack(json);
    let [low, high] = timed(&t).map(|end| end.value().unwrap());
    println!("{low:e} {high:e}");
    for _ in 0..times {
        black_box(timed(black_box(&t)));
    }
}

criterion_group!(benches, fits);

/// `repeat NAME TIMES` is for one who takes the time from outside; anything else is criterion's.
fn main() {
    let args: Vec<String> = std::env::args().collect();
    if let [_, word, name, times] = args.as_slice()
        && word == "repeat"
    {
        return repeat(name, times.parse().unwrap());
    }
    benches();
    Criterion::default().configure_from_args().final_summary();
}
