//! How long one analysis takes, at the bench's usual sizes and beyond.
#![allow(missing_docs, clippy::unwrap_used)]

use criterion::{BenchmarkId, Criterion, criterion_group, criterion_main};
use rackside::analysis::analyse;
use rackside::assay::{Kept, Reading, ReadingId, Role, Sheet, Titration, counts_per_nm};
use rackside::binding::{Block, OneClass, Stuck, bound};
use rackside::fit::{Fitting, fit_rack};
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;
use std::hint::black_box;

/// An invented rack of eight levels with this many tubes, scattered by a fixed seed.
fn rack(tubes: usize) -> Titration {
    let each = tubes / 16;
    let text = Sheet::EXAMPLE
        .replacen("total: 2,", &format!("total: {each},"), 1)
        .replacen("nonspecific: 2,", &format!("nonspecific: {each},"), 1);
    let mut t = Sheet::parse(&text).unwrap().titration().unwrap();
    let mut rng = ChaCha8Rng::seed_from_u64(tubes as u64);
    let truth = OneClass {
        kd: 0.5,
        sites: 0.02,
    };
    for (n, tube) in t.tubes.clone().iter().enumerate() {
        let minutes = t.protocol.minutes_for(tube.role);
        let signal = t.added_nm(tube).map_or(0.0, |added| {
            let block = match tube.role {
                Role::Nonspecific => Block::SameLigand(1000.0),
                _ => Block::None,
            };
            bound(
                &truth,
                0.002,
                Stuck::DuringIncubation,
                added,
                block,
                &mut [0.0; 2],
            )
            .value
        });
        let expected = minutes * (25.0 + counts_per_nm(&t.protocol) * signal);
        let counts = (expected * rng.random_range(0.92..1.08)).round();
        let id = ReadingId(n as u32 + 2, 0);
        let reading = Reading::counts(format!("{counts}"), counts, minutes);
        t.kept.insert(
            tube.no,
            vec![Kept {
                id,
                reading,
                suspect: None,
            }],
        );
    }
    t
}

const TUBES: [usize; 5] = [16, 32, 48, 208, 1008];

/// One class alone: the fit, the fit with the interval of Kd, and all that is said of a rack.
fn analyses(c: &mut Criterion) {
    for (name, call) in [
        ("fit", fit as fn(&Titration)),
        ("fit and interval of Kd", kd),
        ("analysis", whole),
    ] {
        let mut group = c.benchmark_group(name);
        for tubes in TUBES {
            let t = rack(tubes);
            assert!(fit_rack(&t, true).fit().is_some());
            group.bench_with_input(BenchmarkId::from_parameter(tubes), &t, |b, t| {
                b.iter(|| call(black_box(t)));
            });
        }
        group.finish();
    }
}

fn one(t: &Titration) -> Fitting<OneClass> {
    Fitting::new(t, true, &[]).unwrap()
}

fn fit(t: &Titration) {
    black_box(one(t).bare());
}

fn kd(t: &Titration) {
    black_box(one(t).first_interval());
}

fn whole(t: &Titration) {
    black_box(analyse(t));
}

criterion_group!(benches, analyses);
criterion_main!(benches);
