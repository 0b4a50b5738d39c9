//! Judgement held against simulated racks: how often it names something where nothing is wrong, and whether it finds
//! what is. No published values: racks are drawn from the law that is fitted, and the number named is binomial.

use crate::racks::{LEVELS, find, keep, levels, sheet};
use rackside::analysis::analyse;
use rackside::assay::{LevelNo, Role, Titration, Tube, counts_per_nm};
use rackside::binding::{Block, Hill, Isotherm, OneClass, Stuck, TwoClasses, bound};
use rackside::fit::Fitting;
use rackside::judge::{Disagreement, LevelError, Soundness, Suspects, soundness, suspects};
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, Normal, Poisson};
use statrs::distribution::{Binomial, DiscreteCDF};
use std::cell::RefCell;

/// What racks are drawn from: one class unless said otherwise, each level from stock, 80 Ci/mmol, 0.45, 0.5 mL, 2 minutes, background
/// 25 cpm counted 10 minutes, 1 uM of the unlabelled form.
#[derive(Clone, Copy)]
struct Drawn<I> {
    law: I,
    ns: f64,
    cv: f64,
    /// The error of every level, which is what the protocol says of it.
    s_d: f64,
    replicates: u16,
}

const PLAIN: Drawn<OneClass> = Drawn {
    law: OneClass {
        kd: 0.5,
        sites: 0.02,
    },
    ns: 0.002,
    cv: 0.04,
    s_d: 0.0,
    replicates: 2,
};

/// Eight levels from 0.05 to 5 nM.
fn empty<I>(d: &Drawn<I>) -> Titration {
    let ratio = 100f64.powf(1.0 / 7.0);
    let nm: Vec<f64> = (0..8).map(|i| 0.05 * ratio.powi(i)).collect();
    sheet(&[
        (LEVELS, &levels(&nm)),
        (
            "dilution_error: \"2 %\"",
            &format!("dilution_error: \"{} %\"", 100.0 * d.s_d),
        ),
        ("total: 2", &format!("total: {}", d.replicates)),
        ("nonspecific: 2", &format!("nonspecific: {}", d.replicates)),
    ])
}

/// What is wrong with a rack: times what a tube should bind, and times the label that a level should hold.
struct Wrong<'w> {
    tube: &'w dyn Fn(&Tube) -> f64,
    level: &'w dyn Fn(LevelNo) -> f64,
}

const NOTHING: Wrong<'static> = Wrong {
    tube: &|_| 1.0,
    level: &|_| 1.0,
};

fn tube_of(role: Role, level: u16, replicate: u16) -> impl Fn(&Tube) -> bool {
    move |t| t.role == role && t.level == Some(LevelNo(level)) && t.replicate == replicate
}

/// An error for every level, a normal error of every tube's bound label, Poisson counts.
fn counted<I: Isotherm>(
    d: &Drawn<I>,
    empty: &Titration,
    rng: &mut ChaCha8Rng,
    wrong: &Wrong<'_>,
) -> Titration {
    let mut t = empty.clone();
    let normal = Normal::new(0.0, 1.0).unwrap();
    let poisson = |mean: f64, rng: &mut ChaCha8Rng| {
        let mean = mean.max(1e-9);
        Poisson::new(mean).unwrap().sample(rng)
    };
    let blank = find(&t, Role::Background, None, 1);
    let n = poisson(250.0, rng);
    keep(&mut t, &blank, n, 10.0, None);
    let per_nm = counts_per_nm(&t.protocol);
    for level in (1..=8).map(LevelNo) {
        let off = f64::exp(d.s_d * normal.sample(rng)) * (wrong.level)(level);
        let added = t.level(level).unwrap().added.base() * off;
        for (role, block) in [
            (Role::Total, Block::None),
            (Role::Nonspecific, Block::SameLigand(1000.0)),
        ] {
            let stuck = Stuck::DuringIncubation;
            let b = bound(&d.law, d.ns, stuck, added, block, &mut [0.0; 4]).value;
            for replicate in 1..=d.replicates {
                let tube = find(&t, role, Some(level.0), replicate);
                let scatter = 1.0 + d.cv * normal.sample(rng);
                let net = per_nm * b * scatter * (wrong.tube)(&tube);
                let n = poisson(2.0 * (25.0 + net), rng);
                keep(&mut t, &tube, n, 2.0, None);
            }
        }
    }
    t
}

/// A rack judged by the fit of one class; judgement asks for no interval.
fn judged(t: &Titration) -> (Suspects, Soundness) {
    let fit = Fitting::<OneClass>::new(t, true, &[]).unwrap().bare();
    (suspects(t, true, &fit), soundness(t, true, &fit))
}

fn racks<I: Isotherm>(d: &Drawn<I>, seed: u64, n: usize, wrong: &Wrong<'_>) -> Vec<Titration> {
    let empty = empty(d);
    let mut rng = ChaCha8Rng::seed_from_u64(seed);
    (0..n)
        .map(|_| counted(d, &empty, &mut rng, wrong))
        .collect()
}

/// In how many racks each kind of judgement names something.
#[derive(Debug, Default)]
struct Named {
    racks: u64,
    tubes: u64,
    groups: u64,
    levels: u64,
    lack_of_fit: u64,
    runs: u64,
}

impl Named {
    fn of(racks: &[Titration]) -> Named {
        let mut n = Named::default();
        for t in racks {
            let (suspects, soundness) = judged(t);
            n.racks += 1;
            n.tubes += u64::from(!suspects.tubes.is_empty());
            n.groups += u64::from(!suspects.groups.is_empty());
            n.levels += u64::from(soundness.levels.iter().any(|l| l.off()));
            n.lack_of_fit += u64::from(soundness.lack_of_fit.is_some_and(|l| l.p < 0.05));
            n.runs += u64::from(soundness.runs.is_some_and(|r| r.p < 0.05));
        }
        n
    }

    fn each(&self) -> [(&'static str, u64); 5] {
        [
            ("tubes", self.tubes),
            ("replicates", self.groups),
            ("levels", self.levels),
            ("lack of fit", self.lack_of_fit),
            ("runs", self.runs),
        ]
    }

    fn print(&self, what: &str) {
        let share = |n: u64| 100.0 * n as f64 / self.racks as f64;
        let list: Vec<String> = (self.each().iter())
            .map(|(name, n)| format!("{name} {:.1} %", share(*n)))
            .collect();
        println!("{what}, {} racks: {}", self.racks, list.join(", "));
    }
}

/// Each judgement has a chance of 5 % to name something where nothing is wrong, all tubes, groups or levels taken together: the
/// number of racks in which it does has to lie within the central 99.9 % of a binomial of that chance, or below. Below, since Bonferroni's
/// allowance is generous, the CV prior is above the CV here, and the signs of residuals change more often than by chance.
#[track_caller]
fn named_by_chance<I: Isotherm>(what: &str, d: &Drawn<I>, seed: u64, n: usize) {
    let named = Named::of(&racks(d, seed, n, &NOTHING));
    named.print(what);
    let most = Binomial::new(0.05, n as u64).unwrap().inverse_cdf(0.9995);
    for (name, times) in named.each() {
        assert!(
            times <= most,
            "{what}: {name} in {times} of {n}, at most {most}"
        );
    }
}

#[test]
fn nothing_is_wrong() {
    named_by_chance("nothing wrong, levels exact", &PLAIN, 31, 600);
    let d = Drawn { s_d: 0.02, ..PLAIN };
    named_by_chance("nothing wrong, 2 % for each level", &d, 32, 600);
}

/// Tubes that scatter more than the lab's usual 6 %; five replicates; counts so many that the CV is all of the error.
#[test]
fn nothing_is_wrong_with_other_racks() {
    let d = Drawn { cv: 0.15, ..PLAIN };
    named_by_chance("nothing wrong, tube CV 15 %", &d, 33, 300);
    let d = Drawn {
        replicates: 5,
        ..PLAIN
    };
    named_by_chance("nothing wrong, five replicates", &d, 34, 150);
    let law = OneClass {
        kd: 0.5,
        sites: 0.215,
    };
    let d = Drawn {
        law,
        ns: 0.02,
        s_d: 0.02,
        ..PLAIN
    };
    named_by_chance(
        "nothing wrong, many counts, 2 % for each level",
        &d,
        35,
        300,
    );
}

/// In how many of `n` racks `hit` finds what is wrong, as the first and at all.
fn found<I: Isotherm>(
    d: &Drawn<I>,
    seed: u64,
    n: usize,
    wrong: &Wrong<'_>,
    hit: impl Fn(&Titration, &Suspects, &Soundness) -> [bool; 2],
) -> [usize; 2] {
    let mut times = [0; 2];
    for t in racks(d, seed, n, wrong) {
        let (suspects, soundness) = judged(&t);
        let hits = hit(&t, &suspects, &soundness);
        times
            .iter_mut()
            .zip(hits)
            .for_each(|(n, h)| *n += usize::from(h));
    }
    times
}

/// One tube 30 % too high, or too low, is named in most racks, and always before any other.
#[test]
fn a_tube_that_is_off_is_named_first() {
    const RACKS: usize = 40;
    for s_d in [0.0, 0.02] {
        let d = Drawn { s_d, ..PLAIN };
        for (role, level, factor) in [
            (Role::Total, 4, 1.3),
            (Role::Total, 5, 1.3),
            (Role::Total, 8, 1.3),
            (Role::Total, 6, 0.7),
            (Role::Nonspecific, 8, 1.3),
            (Role::Total, 2, 10.0),
            (Role::Nonspecific, 5, 10.0),
        ] {
            let off = tube_of(role, level, 2);
            let tube = |t: &Tube| if off(t) { factor } else { 1.0 };
            let wrong = Wrong {
                tube: &tube,
                ..NOTHING
            };
            let [first, named] = found(&d, 41, RACKS, &wrong, |t, suspects, _| {
                let is = |no| off(t.tube(no).unwrap());
                let tubes = &suspects.tubes;
                [
                    tubes.first().is_some_and(|s| is(s.tube)),
                    tubes.iter().any(|s| is(s.tube)),
                ]
            });
            println!(
                "{role} at level {level} times {factor}, s_d {s_d}: named in {named} of {RACKS} racks, first in {first}"
            );
            assert!(first > RACKS / 2, "{role} {level} {factor} {s_d}: {first}");
            assert!(first + 1 >= named, "{first} of {named}");
        }
    }
}

/// All tubes of a level 30 % too concentrated: named in most racks, first, by the error it has. With levels taken as exact it is the level
/// that is off; with an error for each it is the step that made it.
///
/// At 15 % duplicates cannot tell: the readings of one level alone leave its error a standard deviation of about 6 %, and two and a half
/// of them are common among eight levels. Five replicates can, at the levels where counts are many.
#[test]
fn a_level_that_is_off_is_named() {
    const RACKS: usize = 40;
    for s_d in [0.0, 0.02] {
        for (replicates, of, most) in [
            (2, 1.3, &[3u16, 5, 7, 8][..]),
            (5, 1.15, &[5, 7]),
            (2, 1.15, &[]),
        ] {
            let d = Drawn {
                s_d,
                replicates,
                ..PLAIN
            };
            for level in [3, 5, 7, 8] {
                if replicates == 5 && !most.contains(&level) {
                    continue;
                }
                let off = |l: LevelNo| if l.0 == level { of } else { 1.0 };
                let wrong = Wrong {
                    level: &off,
                    ..NOTHING
                };
                let errors = RefCell::new(Vec::new());
                let [first, named] = found(&d, 42, RACKS, &wrong, |_, _, soundness| {
                    let found = soundness.levels.iter().find(|l| l.level.0 == level);
                    errors.borrow_mut().push(found.unwrap().error);
                    let named = soundness.levels.iter().filter(|l| l.off());
                    let first = named.clone().min_by(|a, b| a.p.total_cmp(&b.p));
                    let is = |l: &LevelError| l.level.0 == level;
                    [first.is_some_and(is), named.clone().any(is)]
                });
                let mean = errors.borrow().iter().sum::<f64>() / RACKS as f64;
                println!(
                    "level {level} times {of}, s_d {s_d}, {replicates} replicates: named in {named} of {RACKS} racks, first in \
                     {first}; mean error found {:+.1} %",
                    100.0 * mean
                );
                if most.contains(&level) {
                    assert!(first > RACKS / 2, "{level} {of} {s_d}: {first}");
                }
                // Three standard errors of the mean of 40, each of 6 % and of the step's own 2 %.
                assert!(
                    (mean - (of - 1.0)).abs() < 0.03,
                    "{level} {of} {s_d}: {mean}"
                );
            }
        }
    }
}

/// Duplicates 25 % above and below what they should be are named in most racks, first.
#[test]
fn replicates_that_disagree_are_named() {
    const RACKS: usize = 40;
    for s_d in [0.0, 0.02] {
        let d = Drawn { s_d, ..PLAIN };
        for (role, level) in [(Role::Total, 3), (Role::Total, 7), (Role::Nonspecific, 8)] {
            let (up, down) = (tube_of(role, level, 1), tube_of(role, level, 2));
            let tube = |t: &Tube| match (up(t), down(t)) {
                (true, _) => 1.25,
                (_, true) => 0.8,
                _ => 1.0,
            };
            let wrong = Wrong {
                tube: &tube,
                ..NOTHING
            };
            let [first, named] = found(&d, 43, RACKS, &wrong, |_, suspects, _| {
                let is = |g: &Disagreement| g.role == role && g.level.0 == level;
                let groups = &suspects.groups;
                [groups.first().is_some_and(is), groups.iter().any(is)]
            });
            println!(
                "{role} tubes of level {level} 25 % apart from the mean, s_d {s_d}: first in {first} of {RACKS} racks"
            );
            assert!(
                first > RACKS / 2 && first + 1 >= named,
                "{role} {level}: {first} {named}"
            );
        }
    }
}

/// Of five replicates the one that is 50 % too high is set apart.
#[test]
fn one_of_five_replicates_stands_out() {
    const RACKS: usize = 20;
    let d = Drawn {
        replicates: 5,
        ..PLAIN
    };
    let off = tube_of(Role::Total, 6, 2);
    let tube = |t: &Tube| if off(t) { 1.5 } else { 1.0 };
    let wrong = Wrong {
        tube: &tube,
        ..NOTHING
    };
    let [set_apart, named] = found(&d, 45, RACKS, &wrong, |t, suspects, _| {
        let group = suspects.groups.first();
        let one = group.and_then(|g| g.one);
        [
            one.is_some_and(|no| off(t.tube(no).unwrap())),
            group.is_some_and(|g| g.level.0 == 6 && g.role == Role::Total && g.tubes.len() == 5),
        ]
    });
    assert!(
        set_apart > RACKS / 2 && named > RACKS / 2,
        "{set_apart} {named}"
    );
}

/// Where the law is not the one that is fitted, lack of fit and runs say so in most racks.
#[test]
fn another_law_shows() {
    for s_d in [0.0, 0.02] {
        let hill = Drawn {
            law: Hill {
                kh: 0.5,
                sites: 0.02,
                n: 1.5,
            },
            ns: PLAIN.ns,
            cv: PLAIN.cv,
            s_d,
            replicates: 2,
        };
        let two = Drawn {
            law: TwoClasses {
                first: OneClass {
                    kd: 0.1,
                    sites: 0.01,
                },
                second: OneClass {
                    kd: 5.0,
                    sites: 0.05,
                },
            },
            ns: PLAIN.ns,
            cv: PLAIN.cv,
            s_d,
            replicates: 2,
        };
        let named = [
            ("Hill, n = 1.5", Named::of(&racks(&hill, 44, 40, &NOTHING))),
            ("two classes", Named::of(&racks(&two, 44, 40, &NOTHING))),
        ];
        for (what, n) in named {
            n.print(&format!("{what} as one class, s_d {s_d}"));
            assert!(n.lack_of_fit > 20 && n.runs > 20, "{n:?}");
        }
    }
}

/// Whatever is named, nothing is flagged and nothing left out: a person decides.
#[test]
fn nothing_is_flagged_by_itself() {
    let off = tube_of(Role::Total, 5, 1);
    let (tube, level) = (
        |t: &Tube| if off(t) { 4.0 } else { 1.0 },
        |l: LevelNo| if l.0 == 7 { 2.0 } else { 1.0 },
    );
    let wrong = Wrong {
        tube: &tube,
        level: &level,
    };
    for t in racks(&PLAIN, 46, 5, &wrong) {
        let before = t.clone();
        let a = analyse(&t);
        assert_eq!(t, before);
        assert!(!a.suspects.tubes.is_empty(), "{:?}", a.suspects);
        assert!(a.tubes.iter().all(|r| r.suspect.is_none()));
        assert_eq!(a.all_readings, None);
        assert_eq!(a.fit().unwrap().tubes_used, 32);
        assert!(a.fit().unwrap().tubes.iter().all(|f| f.used));
        // The same fit as when nobody judges it.
        let alone = rackside::fit::fit_rack(&t, true);
        assert_eq!(&alone, &a.outcome);
    }
}
