//! What the counts can tell and what became of the label, against published values, hand-worked ones and simulated racks.

use crate::kinds::{Rack, titration};
use crate::racks::{find, keep, sheet};
use crate::simulate::cells;
use crate::simulate::rack::{BACKGROUND_CPM, each};
use rackside::analysis::{Analysis, analyse};
use rackside::assay::{
    Background, Counted, Kept, Reading, ReadingId, Role, Scale, Seen, Side, Stamp, Titration, Tube,
    background, label, measured, observed_in, per_nm,
};
use rackside::figure::Glyphs;
use rackside::fit::{Fit, fit_rack, t_quantile};
use rackside::judge::{CountStanding, LabelFound, Vial, count_statistics, label_found, limits_for};
use rackside::notebook::{Count, Notebook, What};
use rackside::report::{Page, text};
use rackside::units::{Dimension, Mark, Measure, Typed};
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, Normal, Poisson};

#[track_caller]
fn near(got: f64, want: f64, relative: f64) {
    assert!(
        (got - want).abs() <= relative * want.abs(),
        "got {got}, want {want}"
    );
}

fn typed<D: Dimension>(text: &str) -> Typed<Measure<D>> {
    Typed::parse(text, Mark::Point).unwrap()
}

fn kind(json: &str) -> Titration {
    titration(&serde_json::from_str::<Rack>(json).unwrap())
}

/// The vials that are read, as the analysis hands them on.
fn vials(t: &Titration, b: Background) -> Vec<Vial> {
    let counting = rackside::assay::Counting::of(&t.protocol);
    let one = |tube: &Tube| {
        let observed = observed_in(&counting, t, tube, true)?;
        Some(Vial {
            tube: *tube,
            added_nm: t.added_nm(tube),
            observed,
            label: label(t, tube, observed, b),
            measured: measured(t, tube, observed, b),
            suspect: false,
        })
    };
    t.tubes.iter().filter_map(one).collect()
}

/// What became of the label, by one class alone: quicker than a whole analysis.
fn found(t: &Titration) -> LabelFound {
    let b = background(t, true).unwrap();
    let outcome = fit_rack(t, true);
    label_found(t, &vials(t, b), b, outcome.fit())
}

/// A rack of the example with 250 counts of background in ten minutes.
fn example(changes: &[(&str, &str)]) -> Titration {
    let mut t = sheet(changes);
    let blank = find(&t, Role::Background, None, 1);
    keep(&mut t, &blank, 250.0, 10.0, None);
    t
}

/// L. A. Currie 1968, Anal Chem 40:586, values computed from its formulas (from memory): background 25 cpm counted ten minutes, a
/// sample of two: critical 6.370491, detection 14.093753 net cpm. In nM by hand: 45 % of 80 Ci/mmol at 2.22 dpm/fmol in 0.5 mL is
/// 39960 cpm for one nM.
#[test]
fn limits_of_a_tube() {
    let t = example(&[]);
    let a = analyse(&t);
    let c = a.counting.unwrap();
    let [l] = c.limits[..] else { panic!() };
    assert_eq!((l.seen, l.minutes), (Seen::Bound, 2.0));
    near(l.cpm.critical, 6.370491, 1e-7);
    near(l.cpm.detection, 14.093753, 1e-7);
    near(l.nm.critical, 6.370491 / 39960.0, 1e-7);
    near(l.nm.detection, 14.093753 / 39960.0, 1e-7);
    // Determination: the net rate whose sd is a tenth of it, by trying.
    let sd = |net: f64| ((net + 25.0) / 2.0 + 25.0 / 10.0f64).sqrt();
    near(l.cpm.determination, 10.0 * sd(l.cpm.determination), 1e-12);
    assert!(c.vials.is_empty() && c.levels.is_empty() && c.times.is_none());
}

/// The same, of an aliquot of what is free: 0.1 mL of it is 7992 cpm for one nM; and what quench and decay take of the signal makes
/// a limit in nM that much higher.
#[test]
fn limits_of_an_aliquot_and_with_decay() {
    let t = kind(include_str!("data/kinds/free.json"));
    let c = analyse(&t).counting.unwrap();
    assert_eq!(c.limits[0].seen, Seen::Unbound);
    near(
        c.limits[0].cpm.critical / c.limits[0].nm.critical,
        7992.0,
        1e-12,
    );
    let cells = analyse(&kind(include_str!("data/kinds/dialysis_shift.json")));
    let seen: Vec<Seen> = cells
        .counting
        .unwrap()
        .limits
        .iter()
        .map(|l| l.seen)
        .collect();
    assert_eq!(seen, [Seen::Side(Side::Protein), Seen::Side(Side::Ligand)]);
    let t = kind(include_str!("data/kinds/decay.json"));
    let a = analyse(&t);
    let l = a.counting.as_ref().unwrap().limits[0];
    let mut kept: Vec<f64> = a
        .tubes
        .iter()
        .filter(|x| x.tube.role != Role::Background)
        .map(|x| x.observed.map(|o| o.signal_minutes / o.minutes).unwrap())
        .collect();
    kept.sort_by(f64::total_cmp);
    let half = kept.len() / 2;
    let median = (kept[half - 1] + kept[half]) / 2.0;
    assert!(median < 0.9);
    let k = per_nm(&t.protocol, Seen::Bound);
    near(l.cpm.critical / l.nm.critical, k * median, 1e-12);
}

/// Currie's limits for 25 cpm, two minutes over ten: 63 counts are 6.5 net cpm, above the critical level; 62 are 6.0, below it.
/// 79 counts are 14.5, above detection; 78 are 14.0, below it. Of 2400 counts over 250 in ten minutes the net is 1175.000 cpm with
/// sd 24.545875 (computed from Poisson counts).
#[test]
fn where_a_vial_stands() {
    for (counts, standing) in [
        (0.0, CountStanding::Background),
        (62.0, CountStanding::Background),
        (63.0, CountStanding::Critical),
        (78.0, CountStanding::Critical),
        (79.0, CountStanding::Detected),
        (2400.0, CountStanding::Detected),
    ] {
        let mut t = example(&[]);
        let tube = find(&t, Role::Total, Some(1), 1);
        keep(&mut t, &tube, counts, 2.0, None);
        let c = analyse(&t).counting.unwrap();
        let [v] = c.vials[..] else { panic!() };
        assert_eq!(v.standing, standing, "{counts}");
        if counts == 2400.0 {
            near(v.relative_error.unwrap(), 24.545875 / 1175.0, 1e-7);
        }
        if counts == 0.0 {
            assert_eq!(v.relative_error, None);
        }
    }
}

/// Background vials that scatter: the vial's own background varies between vials, and so does their mean. By hand from the two
/// variances.
#[test]
fn limits_where_background_scatters() {
    let t = kind(include_str!("data/kinds/background.json"));
    let b = background(&t, true).unwrap();
    assert!(b.scattered());
    let zero = b.cpm() / 2.0 + b.between + b.variance;
    near(
        limits_for(b, 2.0).critical,
        1.6448536269514722 * zero.sqrt(),
        1e-12,
    );
    assert!(
        limits_for(b, 2.0).critical
            > 1.05 * limits_for(Background { between: 0.0, ..b }, 2.0).critical
    );
}

/// No counts at all in the background: Currie's detection of 2.7055 counts (computed), and a critical level of none.
#[test]
fn limits_without_background_counts() {
    let mut t = sheet(&[]);
    let blank = find(&t, Role::Background, None, 1);
    keep(&mut t, &blank, 0.0, 10.0, None);
    let b = background(&t, true).unwrap();
    let l = limits_for(b, 2.0);
    assert_eq!(l.critical, 0.0);
    near(2.0 * l.detection, 2.7055, 1e-4);
    near(2.0 * l.determination, 100.0, 1e-12);
}

/// 1 % of a net 1000 cpm over 25 takes 13.701562 min (computed); one tube and a background in 30 min at gross 100 over 25 cpm are
/// best parted 20 to 10, sd 2.73861279, against 2.88675135 for halves (Currie 1968, from memory; computed). For several tubes that
/// share a background every split near the best is worse (by trying).
#[test]
fn how_long_to_count() {
    let mut t = example(&[]);
    let tube = find(&t, Role::Total, Some(1), 1);
    keep(&mut t, &tube, 2050.0, 2.0, None);
    let times = analyse(&t).counting.unwrap().times.unwrap();
    near(times.wanted, 13.701562, 1e-6);
    near(times.net_cpm, 1000.0, 1e-12);
    // Twice the error in a quarter of the time (algebra).
    t.protocol.counter.wanted_error = Some(Typed::parse("2 %", Mark::Point).unwrap());
    let coarser = analyse(&t).counting.unwrap().times.unwrap();
    near(coarser.wanted, 13.701562 / 4.0, 1e-6);
    assert_eq!(coarser.aim, 0.02);

    let mut t = sheet(&[]);
    let blank = find(&t, Role::Background, None, 1);
    keep(&mut t, &blank, 25.0 * 15.0, 15.0, None);
    let tube = find(&t, Role::Total, Some(1), 1);
    keep(&mut t, &tube, 1500.0, 15.0, None);
    let times = analyse(&t).counting.unwrap().times.unwrap();
    near(times.best[0], 20.0, 1e-12);
    near(times.best[1], 10.0, 1e-12);
    near(times.errors[0] * 75.0, 2.88675135, 1e-8);
    near(times.errors[1] * 75.0, 2.73861279, 1e-8);

    let others: Vec<Tube> = t
        .tubes
        .iter()
        .copied()
        .filter(|x| x.role == Role::Nonspecific)
        .collect();
    for tube in &others {
        keep(&mut t, tube, 600.0, 15.0, None);
    }
    let times = analyse(&t).counting.unwrap().times.unwrap();
    let n = others.len() as f64 + 1.0;
    near(n * times.best[0] + times.best[1], times.spent, 1e-12);
    let sd = |tube: f64| (100.0 / tube + 25.0 / (times.spent - n * tube)).sqrt() / 75.0;
    near(sd(times.best[0]), times.errors[1], 1e-12);
    for off in [0.99, 1.01] {
        assert!(sd(off * times.best[0]) > times.errors[1]);
    }
}

/// Every level of the simulated rack whose nonspecific tubes have the variance the fit gives them: by hand from the counts of one level.
#[test]
fn the_critical_level_of_specific_binding() {
    let t = kind(include_str!("data/kinds/background.json"));
    let a = analyse(&t);
    let fit = a.fit().unwrap();
    let c = a.counting.as_ref().unwrap();
    assert_eq!(c.levels.len(), t.levels.len());
    for l in &c.levels {
        let of = |role| -> Vec<&rackside::analysis::TubeResult> {
            let is = |x: &&rackside::analysis::TubeResult| {
                x.tube.role == role && x.tube.level == Some(l.level)
            };
            a.tubes.iter().filter(is).collect()
        };
        let mean = |role| {
            let those = of(role);
            those
                .iter()
                .map(|x| x.measured.unwrap().bound_nm)
                .sum::<f64>()
                / those.len() as f64
        };
        let variances: Vec<f64> = of(Role::Nonspecific)
            .iter()
            .map(|x| {
                let f = fit.tubes.iter().find(|f| f.tube == x.tube.no).unwrap();
                // mu = t b + k t bound: the variance with the CV, and the scatter of background between vials.
                let signal = f.expected - x.observed.unwrap().minutes * fit.value("background_cpm");
                let b = a.background.unwrap();
                let v = f.expected
                    + (fit.cv * signal).powi(2)
                    + b.between * x.observed.unwrap().minutes.powi(2);
                v / (39960.0 * x.observed.unwrap().minutes).powi(2)
            })
            .collect();
        let v = variances.iter().sum::<f64>() / variances.len() as f64;
        near(
            l.difference_nm,
            mean(Role::Total) - mean(Role::Nonspecific),
            1e-12,
        );
        near(
            l.critical_nm,
            1.6448536269514722 * (v * (0.5 + 0.5)).sqrt(),
            1e-9,
        );
        assert_eq!(l.found(), l.difference_nm > l.critical_nm);
    }
}

/// Racks of which the total tubes of a level have only nonspecific binding: told to hold something specific in about 5 %.
#[test]
fn specific_binding_is_seldom_found_where_there_is_none() {
    let cell = cells::A;
    let racks = 400;
    let level = 8;
    let told: Vec<bool> = each(&cell, racks, |t| {
        let b = background(t, true).unwrap();
        let outcome = fit_rack(t, true);
        let fit = outcome.fit().unwrap();
        let of = |role| [1, 2].map(|r| find(t, role, Some(level), r));
        let pair = of(Role::Nonspecific);
        // All four are drawn from what a nonspecific tube is: 0.2 % of free with 4 % between tubes, and Poisson counts.
        let mut rng = ChaCha8Rng::seed_from_u64(t.kept(pair[0].no)[0].reading.value as u64);
        let bound = 0.002 * t.added_nm(&pair[0]).unwrap();
        let mut t = t.clone();
        for tube in pair.into_iter().chain(of(Role::Total)) {
            let one = bound * Normal::new(1.0, cell.cv).unwrap().sample(&mut rng);
            let mean = cell.minutes * (BACKGROUND_CPM + cell.per_nm() * one);
            let counts = Poisson::new(mean).unwrap().sample(&mut rng);
            t.kept.get_mut(&tube.no).unwrap()[0].reading =
                Reading::counts("", counts, cell.minutes);
        }
        let c = count_statistics(&t, &vials(&t, b), b, Some(fit));
        c.levels
            .iter()
            .find(|l| l.level.0 == level)
            .unwrap()
            .found()
    });
    let share = told.iter().filter(|x| **x).count() as f64 / racks as f64;
    println!(
        "specific binding where there is none: {:.1} %",
        100.0 * share
    );
    // 5 % give or take 2.6 sd of 400 racks.
    assert!((0.022..0.078).contains(&share), "{share}");
}

/// An aliquot of 88911 dpm at 80 Ci/mmol in 0.5 mL is 1.00125 nM (computed). Its error is that of 80000 counts, since 45 % of
/// 88911 dpm over two minutes is 80019.9.
#[test]
fn an_aliquot_of_what_is_added() {
    let mut t = example(&[
        (
            "fraction: \"100 %\"",
            "added_counted: \"100 %\", fraction: \"100 %\"",
        ),
        ("background: 1, ", "added: (tubes: 1), background: 1, "),
    ]);
    let tube = find(&t, Role::Added, Some(5), 1);
    let counts = (88911.0 * 0.45 + 25.0) * 2.0;
    keep(&mut t, &tube, counts, 2.0, None);
    let found = analyse(&t).label.unwrap();
    let [a] = found.added[..] else { panic!() };
    near(a.counted_nm, 1.00125, 1e-6);
    near(a.nominal_nm, 1.0, 1e-15);
    near(a.difference(), 0.00125, 1e-3);
    let sd = (counts / 4.0 + 2.5).sqrt() / 39960.0;
    near(a.sd_nm, sd, 1e-12);
    near(a.distance(), (a.counted_nm - 1.0) / sd, 1e-9);
    assert_eq!(a.fitted_nm, None);
    near(found.added_difference.unwrap().value, 0.00125, 1e-3);
}

/// With a fit: the level as fitted lies between what is written and what the aliquots say, the nearer to them the better they are
/// counted; simulated steps of 3 %.
#[test]
fn added_beside_the_fit() {
    let t = kind(include_str!("data/kinds/added.json"));
    let found = found(&t);
    assert_eq!(found.added.len(), t.levels.len());
    for a in &found.added {
        let fitted = a.fitted_nm.unwrap();
        let (low, high) = (
            a.nominal_nm.min(a.counted_nm),
            a.nominal_nm.max(a.counted_nm),
        );
        // Tubes tell of the level too, so it may lie a little outside.
        assert!(fitted > 0.98 * low && fitted < 1.02 * high, "{a:?}");
    }
    let mean = found.added_difference.unwrap();
    assert_eq!(mean.of, t.levels.len());
    let by_hand: f64 = found.added.iter().map(|a| a.difference()).sum();
    near(mean.value, by_hand / found.added.len() as f64, 1e-12);
}

/// Free label in tubes without receptor: what the simulation let stick to the filter (`ns_filter` 0.06) is missing.
#[test]
fn label_lost_without_receptor() {
    let t = kind(include_str!("data/kinds/no_receptor_free.json"));
    let found = found(&t);
    let mean = found.found.unwrap();
    assert_eq!(found.without_receptor.len(), t.levels.len());
    // Steps of 1 % and a CV of 2 %, on 8 levels of two tubes.
    let sd = (0.01f64.powi(2) / 8.0 + 0.02f64.powi(2) / 16.0).sqrt();
    assert!((mean.value - 0.94).abs() < 3.0 * sd, "{mean:?}");
    assert_eq!(mean.told_from(1.0), Some(false));
    // With bound counted the free label is not seen, and nothing is said.
    let bound = kind(include_str!("data/kinds/no_receptor.json"));
    assert_eq!(self::found(&bound).found, None);
}

/// A protein side of 1.15 mL filled with 1.00 at 80 nM, a ligand side of 1.00 mL at 50 nM: 0.85 mL are left of it, and
/// 80 x 1.15 + 50 x 0.85 = 134.5 pmol of 134.5 in 1 mL (algebra).
#[test]
fn label_recovered_in_a_cell() {
    let mut t = kind(include_str!("data/kinds/dialysis_shift.json"));
    t.protocol.incubation.volume = typed("1.00 mL");
    let Counted::BothSides {
        protein_after,
        ligand_volume,
        ..
    } = &mut t.protocol.separation.counted
    else {
        panic!()
    };
    *protein_after = Some(typed("1.15 mL"));
    *ligand_volume = Some(typed("1.00 mL"));
    t.levels[0].added = typed("134.5 nM");
    let b = background(&t, true).unwrap();
    let protein = *t
        .tubes
        .iter()
        .find(|x| x.side == Some(Side::Protein))
        .unwrap();
    let ligand = *t.other_side(&protein).unwrap();
    for (tube, nm) in [(protein, 80.0), (ligand, 50.0)] {
        let k = per_nm(&t.protocol, Seen::Side(tube.side.unwrap()));
        let counts = 10.0 * (b.cpm() + nm * k);
        t.kept.get_mut(&tube.no).unwrap()[0].reading = Reading::counts("", counts, 10.0);
    }
    let found = label_found(&t, &vials(&t, b), b, None);
    let cell = found.cells.iter().find(|c| c.tube == protein.no).unwrap();
    near(cell.share, 1.0, 1e-12);
    let m = measured(
        &t,
        &protein,
        vials(&t, b)
            .iter()
            .find(|v| v.tube.no == protein.no)
            .unwrap()
            .observed,
        b,
    );
    near(m.unwrap().bound_nm / 100.0, 0.345, 1e-12);
    assert_eq!(found.cells.len(), found.recovered.unwrap().of);
    // Without the ligand side's volume nothing is said.
    if let Counted::BothSides { ligand_volume, .. } = &mut t.protocol.separation.counted {
        *ligand_volume = None;
    }
    assert_eq!(label_found(&t, &vials(&t, b), b, None).recovered, None);
}

/// A reader with every reading drawn anew, 5 % between vials and a noise of 15: standards by `signal(nM)`, tubes about what `fit` has.
fn reader(
    rng: &mut ChaCha8Rng,
    t: &Titration,
    fit: &Fit,
    signal: impl Fn(f64) -> f64,
) -> Titration {
    let mut t = t.clone();
    let (noise, scatter) = (
        Normal::new(0.0, 15.0).unwrap(),
        Normal::new(1.0, 0.05).unwrap(),
    );
    for tube in t.tubes.clone() {
        let above = match tube.role {
            Role::Background => 0.0,
            Role::Standard => signal(t.standard_nm(&tube).unwrap()),
            _ => {
                let of = fit.tubes.iter().find(|f| f.tube == tube.no).unwrap();
                of.expected - fit.value("blank_signal")
            }
        };
        let y = 120.0 + above * scatter.sample(rng) + noise.sample(rng);
        t.kept.get_mut(&tube.no).unwrap()[0].reading = Reading {
            scale: Scale::Signal,
            ..Reading::counts("", y, 1.0)
        };
    }
    t
}

/// Standards in line are said not to be in about 5 % of seeded racks, each fitted anew; those of a reader that saturates (a third lost
/// at the highest standard) nearly always.
#[test]
fn standards_in_line_and_not() {
    let t = kind(include_str!("data/kinds/reader.json"));
    let outcome = fit_rack(&t, true);
    let fit = outcome.fit().unwrap();
    let standards = t.tubes.iter().filter_map(|x| t.standard_nm(x));
    let highest = standards.fold(0.0, f64::max);
    let mut rng = ChaCha8Rng::seed_from_u64(7);
    let mut told = |signal: &dyn Fn(f64) -> f64| {
        let drawn = reader(&mut rng, &t, fit, signal);
        found(&drawn).standards.unwrap().linearity.unwrap()
    };
    let racks = 600;
    let off = (0..racks).filter(|_| !told(&|nm| 5000.0 * nm).holds());
    let share = off.count() as f64 / f64::from(racks);
    println!("standards in line doubted: {:.1} %", 100.0 * share);
    // 5 % give or take 2.8 sd of 600 racks.
    assert!((0.025..0.075).contains(&share), "{share}");
    let bends = |nm: f64| 5000.0 * nm / (1.0 + 0.5 * nm / highest);
    let bent: Vec<_> = (0..100).map(|_| told(&bends)).collect();
    let seen = bent.iter().filter(|l| !l.holds() && l.down).count();
    println!("standards a third short at the top seen: {seen} %");
    assert!(seen >= 90, "{seen}");
    let from = bent.iter().filter_map(|l| l.from_nm);
    assert!(from.fold(0.0, f64::max) <= highest);
}

/// A tube just above the highest standard and one just more than three sd below the blank, and both just inside.
#[test]
fn outside_the_standards() {
    let t = kind(include_str!("data/kinds/reader.json"));
    let b = background(&t, true).unwrap();
    let mut t = t.clone();
    let high = find(&t, Role::Total, Some(1), 1);
    let low = find(&t, Role::Nonspecific, Some(1), 1);
    let s = found(&t).standards.unwrap();
    let put = |t: &mut Titration, tube: &Tube, signal: f64| {
        t.kept.get_mut(&tube.no).unwrap()[0].reading = Reading {
            scale: Scale::Signal,
            ..Reading::counts("", signal, 1.0)
        };
    };
    put(&mut t, &high, s.highest + 1.0);
    put(&mut t, &low, b.cpm() - 3.01 * b.between.sqrt());
    let now = label_found(&t, &vials(&t, b), b, None).standards.unwrap();
    assert!(now.above.contains(&high.no) && !s.above.contains(&high.no));
    assert!(now.below.contains(&low.no) && s.below.is_empty());
    put(&mut t, &high, s.highest - 1.0);
    put(&mut t, &low, b.cpm() - 2.99 * b.between.sqrt());
    let now = label_found(&t, &vials(&t, b), b, None).standards.unwrap();
    assert!(!now.above.contains(&high.no) && now.below.is_empty());
    assert_eq!(now.linearity, None);
}

/// Racks of which nonspecific binding is in proportion to free are said not to be in about 5 %, with the dilution errors that
/// the protocol tells of, fresh or handed down.
#[test]
fn proportional_nonspecific_is_seldom_doubted() {
    for cell in [cells::A, cells::D, cells::H] {
        let name = cell.name;
        let racks = 600;
        let of = each(&cell, racks, |t| {
            let found = found(t).proportional;
            found.iter().find(|p| p.role == Role::Nonspecific).copied()
        });
        let judged: Vec<_> = of.into_iter().flatten().collect();
        let doubted = judged.iter().filter(|p| !p.holds()).count() as f64;
        let share = doubted / judged.len() as f64;
        println!(
            "{name}: {} judged, {:.1} % doubted",
            judged.len(),
            100.0 * share
        );
        assert!(judged.len() > 590, "{name}: {}", judged.len());
        assert!((0.02..0.085).contains(&share), "{name}: {share}");
    }
}

/// Counts without noise of nonspecific tubes that bind with free to the power 1.2 give that power; and the chance is Student's.
#[test]
fn a_power_is_found() {
    let cell = cells::D;
    let mut t = cell.rack(&cell.empty(), 0);
    let b = background(&t, true).unwrap();
    let outcome = fit_rack(&t, true);
    let tubes: Vec<Tube> = t
        .tubes
        .iter()
        .copied()
        .filter(|x| x.role == Role::Nonspecific)
        .collect();
    for tube in tubes {
        let added = t.added_nm(&tube).unwrap();
        // bound = 0.02 free^1.2 with free = added - bound, by repeated putting in.
        let bound = (0..200).fold(0.0, |x: f64, _| 0.02 * (added - x).powf(1.2));
        let counts = 2.0 * (b.cpm() + cell.per_nm() * bound);
        let kept = Kept {
            id: ReadingId(900 + tube.no.0, 0),
            reading: Reading::counts("", counts, 2.0),
            suspect: None,
        };
        t.kept.insert(tube.no, vec![kept]);
    }
    let found = label_found(&t, &vials(&t, b), b, outcome.fit());
    let p = found.proportional[0];
    near(p.exponent, 0.2, 1e-6);
    assert!(!p.holds());
    // Two levels are too few to tell.
    let two = t.levels[1].no;
    let few: Vec<Vial> = vials(&t, b)
        .into_iter()
        .filter(|v| v.tube.level.is_none_or(|l| l <= two))
        .collect();
    assert!(
        label_found(&t, &few, b, outcome.fit())
            .proportional
            .is_empty()
    );
    assert!(t_quantile(0.975, 6.0).unwrap() < p.exponent / p.se);
}

/// Conversions to fmol for a million cells: 10 fmol on 2.5e5 cells are 24088.563 sites for a cell (computed), 40 fmol for 10^6.
#[test]
fn fmol_for_a_million_cells() {
    let t = sheet(&[
        ("Protein(\"50 ug\")", "Cells(\"2.5e5\")"),
        ("sites: PerAmount", "sites: PerMillionCells"),
    ]);
    let shown = rackside::assay::sites_shown(&t.protocol);
    // 10 fmol in 0.5 mL are 0.02 nM.
    near(shown.per_nm * 0.02, 40.0, 1e-12);
    assert_eq!(shown.unit, "fmol/10^6 cells");
}

/// Every kind of rack has something to say, and nothing in it is not a number.
#[test]
fn every_kind_is_judged() {
    for json in [
        include_str!("data/kinds/free.json"),
        include_str!("data/kinds/free_filter.json"),
        include_str!("data/kinds/dialysis.json"),
        include_str!("data/kinds/reader.json"),
        include_str!("data/kinds/added_serial.json"),
        include_str!("data/kinds/no_receptor.json"),
        include_str!("data/kinds/quench.json"),
        include_str!("data/kinds/decay.json"),
    ] {
        let t = kind(json);
        let a: Analysis = analyse(&t);
        let said = [
            rackside::report::counted::counting(&t, &a),
            rackside::report::counted::label(&t, &a),
        ];
        for (name, sentence) in said.iter().flatten() {
            println!("{name}: {sentence}");
            assert!(
                !sentence.contains("NaN") && !sentence.contains("inf"),
                "{sentence}"
            );
        }
        let text = rackside::report::json(&t, &a).unwrap();
        let value: serde_json::Value = serde_json::from_str(&text).unwrap();
        assert!(value["counting"].is_object() && value["label"].is_object());
        println!();
    }
}

/// The page of every kind: no wider than 80 columns, its heads and units those of the instrument, every parameter of the fit on it.
#[test]
fn pages_of_every_kind() {
    let at = Stamp::parse("2031-05-04T10:14:00+00:00").unwrap();
    for (name, json, wanted, unwanted) in [
        (
            "free",
            include_str!("data/kinds/free.json"),
            &["bound: added less free as counted", "aliquot"][..],
            &["signal"][..],
        ),
        (
            "dialysis",
            include_str!("data/kinds/dialysis_shift.json"),
            &[
                "total a P",
                "total a F",
                "28 of 28 cells used",
                "volume shift",
            ],
            &["tubes used"],
        ),
        (
            "reader",
            include_str!("data/kinds/reader.json"),
            &[
                "signal reads",
                "blank a",
                "gain",
                "fitted to signals",
                "standards",
            ],
            &["cpm", "gross counts", "decay", "efficiency"],
        ),
        (
            "no_receptor",
            include_str!("data/kinds/no_receptor.json"),
            &["on filter", "no recept. a", "added a", " counted "],
            &["signal"],
        ),
        (
            "decay",
            include_str!("data/kinds/decay.json"),
            &[
                "half-life 109.77 min",
                "brought to the assay by the time that each was counted",
            ],
            &["no decay"],
        ),
        (
            "quench",
            include_str!("data/kinds/quench.json"),
            &["quench curve", "dead time"],
            &[],
        ),
    ] {
        let t = kind(json);
        let mut book = Notebook::open(
            t.protocol.clone(),
            t.levels.clone(),
            t.tubes.clone(),
            at,
            "nobody",
        )
        .unwrap();
        let each = t.tubes.iter().flat_map(|x| {
            t.kept(x.no).iter().enumerate().map(|(i, k)| Count {
                tube: x.no,
                reading: k.reading.clone(),
                again: i > 0,
            })
        });
        let readings = each.collect();
        book.record(What::Counted { readings }, at, "nobody")
            .unwrap();
        let a = analyse(book.titration());
        let page = text(&Page {
            notebook: &book,
            analysis: &a,
            digest: "0123456789abcdef",
            changed: &[],
            version: "0",
            glyphs: Glyphs::Ascii,
        });
        println!("{page}");
        for line in page.lines() {
            assert!(line.chars().count() <= 80, "{name}: {line}");
        }
        let flat = page.split_whitespace().collect::<Vec<_>>().join(" ");
        for words in wanted {
            assert!(
                page.contains(words) || flat.contains(words),
                "{name}: no `{words}`\n{page}"
            );
        }
        // The protocol's own lines may name what this rack has not.
        let head = page.split("\nProtocol -").next().unwrap();
        for words in unwanted {
            assert!(!head.contains(words), "{name}: `{words}`\n{page}");
        }
    }
}
