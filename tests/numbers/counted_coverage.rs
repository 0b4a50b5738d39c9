//! How often nominal 95 % intervals cover the truth where something else than bound counts is read, over 400 simulated racks each.
//! Nothing of the program's binding is in what is simulated: balances are solved by halving.

use crate::simulate::law::Law;
use crate::simulate::rack::SEED;
use rackside::assay::{Kept, Reading, ReadingId, Role, Scale, Sheet, Side, Titration, Tube};
use rackside::fit::{Fit, fit_rack};
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, Normal, Poisson};
use std::collections::BTreeMap;
use std::ops::RangeInclusive;

const RACKS: u64 = 400;
/// Per cent of racks: four standard errors below 95 %, and narrow enough for a mistake.
const USUAL: RangeInclusive<f64> = 90.5..=99.0;
const BACKGROUND_CPM: f64 = 25.0;
const UNLABELLED: f64 = 20_000.0;

fn empty(changes: &[(&str, &str)]) -> Titration {
    let mut text = Sheet::EXAMPLE.to_string();
    for (from, to) in [
        ("concentration: \"1 uM\"", "concentration: \"20 uM\""),
        ("dilution_error: \"2 %\"", "dilution_error: \"0\""),
    ]
    .iter()
    .chain(changes)
    {
        assert!(text.contains(from), "the example does not hold `{from}`");
        text = text.replacen(from, to, 1);
    }
    Sheet::parse(&text).unwrap().titration().unwrap()
}

fn keep(t: &mut Titration, tube: &Tube, reading: Reading) {
    let n = t.kept.len() as u32 + 2;
    let kept = Kept {
        id: ReadingId(n, 0),
        reading,
        suspect: None,
    };
    t.kept.insert(tube.no, vec![kept]);
}

fn counts(rng: &mut ChaCha8Rng, minutes: f64, cpm: f64) -> Reading {
    let mean = minutes * (BACKGROUND_CPM + cpm);
    let n: f64 = Poisson::new(mean).unwrap().sample(rng);
    Reading::counts(n.to_string(), n, minutes)
}

fn unlabelled(tube: &Tube) -> f64 {
    if tube.role == Role::Nonspecific {
        UNLABELLED
    } else {
        0.0
    }
}

fn covered(
    name: &str,
    stream: u64,
    truth: (f64, f64),
    rack: impl Fn(&mut ChaCha8Rng) -> Titration,
) {
    let holds = |fit: &Fit, name: &str, truth: f64| {
        let e = fit.estimate(name).unwrap();
        e.low.value().is_none_or(|v| v <= truth) && e.high.value().is_none_or(|v| v >= truth)
    };
    let (mut kd, mut sites, mut ln) = (0, 0, 0.0);
    for n in 0..RACKS {
        let mut rng = ChaCha8Rng::seed_from_u64(SEED);
        rng.set_stream((stream << 32) | n);
        let outcome = fit_rack(&rack(&mut rng), true);
        let fit = outcome.fit().unwrap();
        kd += u32::from(holds(fit, "kd_nm", truth.0));
        sites += u32::from(holds(fit, "sites_nm", truth.1));
        ln += (fit.value("kd_nm") / truth.0).ln() / RACKS as f64;
    }
    let share = |n: u32| 100.0 * f64::from(n) / RACKS as f64;
    println!(
        "{name}: Kd {} %, sites {} % covered; Kd off by {:.2} % (mean ln)",
        share(kd),
        share(sites),
        100.0 * ln
    );
    assert!(USUAL.contains(&share(kd)), "{name} Kd: {}", share(kd));
    assert!(
        USUAL.contains(&share(sites)),
        "{name} sites: {}",
        share(sites)
    );
    assert!(ln.abs() < 0.03, "{name}: bias {ln}");
}

/// An aliquot of the supernatant, 94 % of the label able to bind.
#[test]
fn coverage_of_free_counted() {
    let law = Law::OneClass {
        kd: 0.5,
        sites: 0.6,
    };
    let (ns, share) = (0.05, 0.94);
    let empty = empty(&[
        (
            "fraction: \"100 %\",",
            "counted: Free(aliquot: \"0.1 mL\"),",
        ),
        ("lot:", "bindable: \"94 %\", lot:"),
    ]);
    let k = 0.45 * 80.0 * 2.22 * 1000.0 * 0.1;
    let error = Normal::new(1.0, 0.03).unwrap();
    covered("free counted", 190, (0.5, 0.6), |rng| {
        let mut t = empty.clone();
        for tube in &empty.tubes {
            let added = empty.added_nm(tube).unwrap_or(0.0);
            let all = share * added + unlabelled(tube);
            let free = law.free(all, 1.0 + ns) * share * added / all.max(1e-300);
            let seen = (free + (1.0 - share) * added) * error.sample(rng);
            let minutes = empty.protocol.minutes_for(tube.role);
            let reading = counts(
                rng,
                minutes,
                if tube.level.is_some() { k * seen } else { 0.0 },
            );
            keep(&mut t, tube, reading);
        }
        t
    });
}

/// Both sides of dialysis cells, the protein side swollen from 1 to 1.1 mL.
#[test]
fn coverage_of_dialysis() {
    let law = Law::OneClass {
        kd: 40.0,
        sites: 90.0,
    };
    let ns = 0.05;
    let empty = empty(&[
        ("80 Ci/mmol", "4 Ci/mmol"),
        ("volume: \"0.5 mL\"", "volume: \"1 mL\""),
        (
            "fraction: \"100 %\",",
            "counted: BothSides(protein_aliquot: \"0.1 mL\", ligand_aliquot: \"0.1 mL\", protein_after: \"1.1 mL\"),",
        ),
        (
            r#"["0.05 nM", "0.1 nM", "0.2 nM", "0.5 nM", "1 nM", "2 nM", "5 nM", "10 nM"]"#,
            r#"["10 nM", "20 nM", "50 nM", "100 nM", "200 nM", "400 nM", "800 nM"]"#,
        ),
        ("nonspecific: 2,", "nonspecific: 1,"),
    ]);
    let k = 0.45 * 4.0 * 2.22 * 1000.0 * 0.1;
    let error = Normal::new(1.0, 0.03).unwrap();
    covered("dialysis", 191, (40.0, 90.0), |rng| {
        let mut t = empty.clone();
        let mut free: BTreeMap<_, f64> = BTreeMap::new();
        for tube in &empty.tubes {
            let minutes = empty.protocol.minutes_for(tube.role);
            let cpm = tube.side.map_or(0.0, |side| {
                let (added, other) = (empty.added_nm(tube).unwrap(), unlabelled(tube));
                // Two mL hold what one of them was filled with; all the ligand is at equilibrium.
                let f = *free
                    .entry((tube.role, tube.level, tube.replicate))
                    .or_insert_with(|| {
                        let all = added + other;
                        let (mut low, mut high) = (0.0, all);
                        for _ in 0..100 {
                            let x = 0.5 * (low + high);
                            if 2.0 * x + law.specific(x) + ns * x < all {
                                low = x
                            } else {
                                high = x
                            }
                        }
                        low
                    });
                let label = added / (added + other);
                let bound = (law.specific(f) + ns * f) * label;
                let side = match side {
                    Side::Ligand => f * label,
                    Side::Protein => f * label + bound / 1.1,
                };
                k * side * error.sample(rng)
            });
            let reading = counts(rng, minutes, cpm);
            keep(&mut t, tube, reading);
        }
        t
    });
}

/// A reader with six blanks and five standards twice.
#[test]
fn coverage_of_a_reader() {
    let law = Law::OneClass {
        kd: 0.9,
        sites: 0.3,
    };
    let ns = 0.004;
    let empty = empty(&[
        ("specific_activity: \"80 Ci/mmol\",", ""),
        (
            "fraction: \"100 %\",",
            "counted: Signal(read_volume: \"0.25 mL\", standards: [\"0.02 nM\", \"0.05 nM\", \"0.1 nM\", \"0.2 nM\", \"0.5 nM\"]),",
        ),
        ("efficiency: \"45 %\",", ""),
        ("fields: Counts,", "fields: Each([Signal]),"),
        ("background: 1,", "background: 6, standards: 2,"),
    ]);
    let error = Normal::new(1.0, 0.04).unwrap();
    let noise = Normal::new(0.0, 9.0).unwrap();
    covered("reader", 192, (0.9, 0.3), |rng| {
        let mut t = empty.clone();
        for tube in &empty.tubes {
            let held = match empty.standard_nm(tube) {
                Some(nm) => nm,
                None => empty.added_nm(tube).map_or(0.0, |added| {
                    let all = added + unlabelled(tube);
                    let x = law.free(all, 1.0 + ns);
                    // From the tube's 0.5 mL into 0.25 mL.
                    2.0 * (law.specific(x) + ns * x) * added / all
                }),
            };
            let signal = 130.0 + 9000.0 * held * error.sample(rng) + noise.sample(rng);
            let reading = Reading {
                scale: Scale::Signal,
                ..Reading::counts(signal.to_string(), signal, 1.0)
            };
            keep(&mut t, tube, reading);
        }
        t
    });
}
