//! Decay, quench, limits of detection, background vials and dead time against published figures, arithmetic by hand and
//! seeded simulation.

use rackside::assay::dead_time::{self, true_rate};
use rackside::assay::limits::{
    Limits, Z, best_split, critical_specific, exact_interval, for_rates, minutes_for, net_rate,
    paired, well_known,
};
use rackside::assay::vials::{dispersion, pooled};
use rackside::assay::{Carrier, QuenchCurve, QuenchError, decayed};
use rackside::units::{
    Mark, Minutes, Nuclide, SpecificActivity, carrier_free, during_count, left_after,
};
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, Exp, Normal, Poisson};

/// Within half a unit of the last of `digits` digits.
#[track_caller]
fn digits(got: f64, want: f64, digits: i32) {
    let unit = 10f64.powi(want.abs().log10().floor() as i32 + 1 - digits);
    assert!(
        (got - want).abs() <= 0.5 * unit * (1.0 + 1e-6),
        "got {got}, want {want} to {digits} digits"
    );
}

#[track_caller]
fn same(got: f64, want: f64, relative: f64) {
    assert!(
        (got - want).abs() <= relative * want.abs(),
        "got {got}, want {want}"
    );
}

/// Simulations of one test; each has a stream of its own.
fn random(stream: u64) -> ChaCha8Rng {
    let mut rng = ChaCha8Rng::seed_from_u64(1968);
    rng.set_stream(stream);
    rng
}

/// Mean and variance.
fn moments(values: &[f64]) -> (f64, f64) {
    let n = values.len() as f64;
    let mean = values.iter().sum::<f64>() / n;
    let squares: f64 = values.iter().map(|v| (v - mean).powi(2)).sum();
    (mean, squares / (n - 1.0))
}

/// Half-lives as ICRP Publication 107 prints them, and the activity computed from them with the Avogadro constant of the SI.
#[test]
fn nuclides_on_record() {
    let table = [
        ("H-3", "12.32 y", 64.420221, 8),
        ("C-14", "5700 y", 0.13923809, 8),
        ("P-32", "14.263 d", 20323.71, 7),
        ("P-33", "25.34 d", 11439.506, 8),
        ("S-35", "87.51 d", 3312.5023, 8),
        ("I-125", "59.400 d", 4880.0854, 8),
        ("I-131", "8.0207 d", 36141.119, 8),
        ("F-18", "109.77 min", 3802705.6, 8),
        ("C-11", "20.39 min", 20471946.0, 8),
        ("Tc-99m", "6.015 h", 1156616.8, 8),
        ("In-111", "2.8047 d", 103354.04, 8),
        ("Lu-177", "6.647 d", 43610.211, 8),
        ("Cu-64", "12.700 h", 547799.2, 7),
        ("Ga-68", "67.71 min", 6164864.7, 8),
        ("Zr-89", "78.41 h", 88726.563, 8),
    ];
    assert_eq!(Nuclide::ALL.len(), table.len());
    for ((name, half_life, dpm_per_fmol, known), n) in table.iter().zip(Nuclide::ALL) {
        assert_eq!(n.name(), *name);
        let typed = Minutes::parse(half_life, Mark::Point).unwrap();
        same(n.half_life_minutes(), typed.base(), 1e-15);
        digits(carrier_free(n.half_life_minutes()), *dpm_per_fmol, *known);
    }
    assert!(Nuclide::names().starts_with("H-3, C-14, P-32, "));
}

#[test]
fn nuclides_as_people_write_them() {
    for (name, ways) in [
        (
            "H-3",
            &["H-3", "3H", "[3H]", "h3", "(3h)", " 3-H ", "[³H]"][..],
        ),
        (
            "I-125",
            &[
                "I-125",
                "125I",
                "125-I",
                "i125",
                "I 125",
                "¹²⁵I",
                "I\u{2011}125",
                "[I-125]",
            ],
        ),
        (
            "Tc-99m",
            &["Tc-99m", "99mTc", "TC-99M", "tc99m", "⁹⁹ᵐTc", "[99mTc]"],
        ),
        ("C-14", &["14c", "C14"]),
        ("C-11", &["11C"]),
    ] {
        for way in ways {
            let found = Nuclide::find(way).map(Nuclide::name);
            assert_eq!(found, Some(name), "{way}");
        }
    }
    for n in Nuclide::ALL {
        assert_eq!(Nuclide::find(n.name()), Some(n));
    }
    for not in [
        "", "-", "[]", "3", "H", "H-4", "Tc-99", "99Tc", "I-12", "[125I", "125I]", "1-25I",
        "I--125", "125I-A", "33", "H3H",
    ] {
        assert_eq!(Nuclide::find(not), None, "{not}");
    }
}

/// Halves by definition; F-18 over 10 min computed in 50 digits; a series for the rest.
#[test]
fn what_is_left_and_what_decays_during_a_count() {
    same(left_after(10.0, 30.0), 0.125, 1e-15);
    same(left_after(10.0, -10.0), 2.0, 1e-15);
    assert_eq!(left_after(10.0, 0.0), 1.0);
    let f18 = Nuclide::find("F-18").unwrap().half_life_minutes();
    digits(during_count(f18, 10.0), 1.031904962, 10);
    assert_eq!(during_count(f18, 0.0), 1.0);
    // 1 + x / 2 + x^2 / 12 - ..., where the naive quotient has lost its digits.
    for x in [1e-3, 1e-8, 1e-15] {
        let got = during_count(1.0, x / std::f64::consts::LN_2);
        same(got, 1.0 + x / 2.0 + x * x / 12.0, 1e-13);
    }
    // Over many half-lives all atoms are counted: x.
    same(during_count(1.0, 1000.0), 693.147_180_559_945_3, 1e-14);
    // The mean of 2^(-s / T) over the count, by Simpson's rule.
    let (half_life, minutes, steps) = (20.39, 30.0, 2000);
    let sum: f64 = (0..=steps)
        .map(|i| {
            let weight = match i {
                0 => 1.0,
                i if i == steps => 1.0,
                i if i % 2 == 1 => 4.0,
                _ => 2.0,
            };
            weight * left_after(half_life, minutes * f64::from(i) / f64::from(steps))
        })
        .sum();
    let mean = sum / (3.0 * f64::from(steps));
    same(during_count(half_life, minutes), 1.0 / mean, 1e-12);
}

/// I-125 after 30 days, computed independently from the half-life of ICRP Publication 107.
#[test]
fn label_of_iodine_125_after_thirty_days() {
    let half_life = Nuclide::find("I-125").unwrap().half_life_minutes();
    let pure = carrier_free(half_life);
    let days = 30.0 * 1440.0;
    let after = |carrier, activity| decayed(carrier, activity, pure, 1, half_life, days);

    let d = after(Carrier::CarrierFree, pure);
    digits(d.left, 0.70463571, 8);
    digits(100.0 * d.concentration, 70.463571, 8);
    assert_eq!((d.activity, d.labelled), (pure, 1.0));

    let stated = SpecificActivity::parse("500 Ci/mmol", Mark::Point)
        .unwrap()
        .base();
    let d = after(Carrier::ProductInert, stated);
    digits(d.labelled, 0.227455, 6);
    digits(d.activity / 2.22, 377.691994, 9);
    digits(d.concentration, 0.93282, 5);

    let d = after(Carrier::ProductBinds, stated);
    digits(d.labelled, 0.227455, 6);
    digits(d.activity / 2.22, 352.317855, 9);
    assert_eq!(d.concentration, 1.0);
    digits(d.left, 0.70463571, 8);
}

/// 800 of 1000 molecules carry two atoms at 10 dpm/fmol each, one half-life on, counted out by hand: 200 of them have both atoms, 400 one,
/// 200 none.
#[test]
fn two_atoms_of_label_counted_out() {
    let after = |carrier, activity| decayed(carrier, activity, 10.0, 2, 60.0, 60.0);
    // 800 x 2 atoms on 1000 molecules.
    let d = after(Carrier::ProductInert, 16.0);
    same(d.labelled, 0.8, 1e-15);
    // 200 never labelled and 200 whole are ligand; the whole have 400 atoms.
    same(d.concentration, 0.4, 1e-15);
    same(d.activity, 10.0 * 400.0 / 400.0, 1e-15);
    // All molecules bind, with the 800 atoms left.
    let d = after(Carrier::ProductBinds, 16.0);
    same(d.activity, 8.0, 1e-15);
    assert_eq!(d.concentration, 1.0);
    let d = after(Carrier::CarrierFree, 20.0);
    assert_eq!((d.concentration, d.activity), (0.25, 20.0));
    // Stated above what the nuclide can give: every molecule was labelled.
    let d = after(Carrier::ProductInert, 30.0);
    assert_eq!((d.labelled, d.concentration, d.activity), (1.0, 0.25, 30.0));
}

#[test]
fn on_the_reference_date_nothing_has_changed() {
    for carrier in [
        Carrier::CarrierFree,
        Carrier::ProductInert,
        Carrier::ProductBinds,
    ] {
        for atoms in [0, 1, 3] {
            let d = decayed(carrier, 177.6, 4880.0, atoms, 85536.0, 0.0);
            assert_eq!((d.left, d.concentration, d.activity), (1.0, 1.0, 177.6));
        }
    }
}

/// Three standards by hand, in a mixed order: (0, 0.1), (1, 0.2), (3, 0.8). Widths 1 and 2, secants 1/10 and 3/10. Slope in the middle,
/// weights 2x2+1 = 5 and 2+2x1 = 4: 9 / (5/0.1 + 4/0.3) = 27/190. Left end ((2x1+2) 0.1 - 1x0.3) / 3 = 1/30, right end
/// ((2x2+1) 0.3 - 2x0.1) / 3 = 13/30. Halfway the cubic is the mean of the ends plus width / 8 of the difference of slopes: at 0.5
/// 0.15 + (1/30 - 27/190) / 8, at 2 0.5 + 2 (27/190 - 13/30) / 8.
#[test]
fn quench_by_hand() {
    let curve = QuenchCurve::new(&[(3.0, 0.8), (0.0, 0.1), (1.0, 0.2)]).unwrap();
    assert_eq!(curve.range(), (0.0, 3.0));
    let want = 0.15 + (1.0 / 30.0 - 27.0 / 190.0) / 8.0;
    same(curve.efficiency(0.5).unwrap(), want, 1e-14);
    let want = 0.5 + 2.0 * (27.0 / 190.0 - 13.0 / 30.0) / 8.0;
    same(curve.efficiency(2.0).unwrap(), want, 1e-14);
}

/// Rising, falling with a level stretch, and one whose end slope would point back.
const QUENCHED: [&[(f64, f64)]; 3] = [
    &[
        (100.0, 0.05),
        (150.0, 0.17),
        (230.0, 0.34),
        (300.0, 0.41),
        (420.0, 0.46),
        (500.0, 0.47),
    ],
    &[(1.0, 0.62), (2.0, 0.5), (4.0, 0.5), (5.0, 0.1)],
    &[(0.0, 0.1), (1.0, 0.11), (2.0, 0.5), (3.0, 0.9)],
];

/// Computed with scipy 1.17.1, `scipy.interpolate.PchipInterpolator`, which has the same slopes (Fritsch & Butland 1984, and the same
/// rule at the ends).
#[test]
fn quench_as_scipy_has_it() {
    let scipy: [&[(f64, f64)]; 3] = [
        &[
            (110.0, 0.0748933534783),
            (149.0, 0.167731985425),
            (190.0, 0.264155246499),
            (260.0, 0.376284057826),
            (333.3, 0.428782927449),
            (470.0, 0.468043587562),
            (499.0, 0.469989516798),
        ],
        &[
            (1.25, 0.57875),
            (1.9, 0.50192),
            (3.0, 0.5),
            (4.1, 0.4936),
            (4.75, 0.2375),
        ],
        &[
            (0.25, 0.1006484375),
            (0.5, 0.1025625),
            (1.5, 0.258070411392),
            (2.9, 0.85954943038),
        ],
    ];
    for (standards, values) in QUENCHED.iter().zip(scipy) {
        let curve = QuenchCurve::new(standards).unwrap();
        for (at, want) in values {
            same(curve.efficiency(*at).unwrap(), *want, 3e-12);
        }
    }
}

#[test]
fn quench_goes_through_its_standards_and_never_turns_back() {
    for standards in QUENCHED {
        let curve = QuenchCurve::new(standards).unwrap();
        for (at, efficiency) in standards {
            assert_eq!(curve.efficiency(*at), Ok(*efficiency));
        }
        let (low, high) = curve.range();
        let places = 5000;
        let drawn: Vec<f64> = (0..=places)
            .map(|i| {
                let share = f64::from(i) / f64::from(places);
                curve.efficiency(low + share * (high - low)).unwrap()
            })
            .collect();
        let direction = (drawn[drawn.len() - 1] - drawn[0]).signum();
        for pair in drawn.windows(2) {
            assert!((pair[1] - pair[0]) * direction >= -1e-15, "{pair:?}");
        }
    }
}

#[test]
fn standards_on_a_line_make_a_line() {
    let line = |x: f64| 0.9 - 0.002 * x;
    let curve =
        QuenchCurve::new(&[10.0, 370.0, 30.0, 45.0, 200.0].map(|x: f64| (x, line(x)))).unwrap();
    for x in [10.0, 11.5, 29.0, 33.3, 46.0, 199.0, 250.0, 369.9] {
        same(curve.efficiency(x).unwrap(), line(x), 1e-13);
    }
    let two = QuenchCurve::new(&[(2.0, 0.2), (5.0, 0.8)]).unwrap();
    same(two.efficiency(3.0).unwrap(), 0.4, 1e-14);
}

#[test]
fn what_is_no_quench_curve_is_refused_in_words() {
    let refused = |standards: &[(f64, f64)]| QuenchCurve::new(standards).unwrap_err().to_string();
    assert_eq!(
        refused(&[(1.0, 0.5)]),
        "a quench curve takes at least two standards, not 1"
    );
    assert_eq!(
        refused(&[]),
        "a quench curve takes at least two standards, not 0"
    );
    assert_eq!(
        refused(&[(100.0, 0.2), (300.0, 0.5), (200.0, 0.6), (400.0, 0.7)]),
        "the quench standards turn back: the efficiency goes from 0.6 at 200 to 0.5 at 300, against the direction of the others"
    );
    // It ends where it starts: the way back is named.
    assert!(refused(&[(1.0, 0.3), (2.0, 0.4), (3.0, 0.3)]).contains("0.4 at 2 to 0.3 at 3"));
    assert_eq!(
        refused(&[(100.0, 0.2), (250.0, 0.5), (100.0, 0.3)]),
        "two quench standards have the indicator 100; every standard needs its own"
    );
    for bad in [0.0, -0.1, 1.01, f64::NAN] {
        let e = refused(&[(100.0, 0.2), (250.0, bad)]);
        assert!(
            e.contains("standard at 250") && e.contains("at most 1"),
            "{e}"
        );
    }
    for bad in [f64::NAN, f64::INFINITY] {
        let e = QuenchCurve::new(&[(bad, 0.2), (250.0, 0.3)]);
        assert!(matches!(e, Err(QuenchError::Indicator { .. })));
    }
    for (low, high) in [(-1e308, 1e308), (0.0, 5e-324)] {
        let e = QuenchCurve::new(&[(low, 0.2), (high, 0.3)]);
        assert!(matches!(e, Err(QuenchError::Spacing { .. })));
    }
    assert!(QuenchCurve::new(&[(1.0, 1.0), (2.0, 1.0)]).is_ok());
    let curve = QuenchCurve::new(&[(100.0, 0.2), (250.5, 0.5)]).unwrap();
    assert_eq!(
        curve.efficiency(99.5).unwrap_err().to_string(),
        "the quench indicator 99.5 is outside the standards, which go from 100 to 250.5"
    );
    assert!(curve.efficiency(250.6).is_err() && curve.efficiency(f64::NAN).is_err());
}

#[track_caller]
fn are(l: Limits, critical: f64, detection: f64, determination: f64) {
    digits(l.critical, critical, 6);
    digits(l.detection, detection, 6);
    digits(l.determination, determination, 7);
}

/// Currie 1968, Anal Chem 40:586: formulas from memory, values computed.
#[test]
fn limits_of_detection() {
    are(paired(100.0), 23.2617, 49.2290, 200.0);
    are(well_known(100.0), 16.4485, 35.6026, 161.8034);
    for none in [paired(0.0), well_known(0.0)] {
        assert_eq!(none.critical, 0.0);
        digits(none.detection, 2.7055, 5);
        same(none.determination, 100.0, 1e-15);
    }
    let l = for_rates(25.0, 2.0, 10.0, 0.0);
    digits(l.critical, 6.370491, 7);
    digits(l.detection, 14.093753, 8);
    // Counts of a paired blank are rates over one minute.
    assert_eq!(for_rates(100.0, 1.0, 1.0, 0.0), paired(100.0));
}

/// What the limits mean, put back: at the limit of detection the sd is that of its own net rate.
#[test]
fn limits_are_what_they_say() {
    for (b, ts, tb, between) in [
        (25.0, 2.0, 10.0, 0.0),
        (25.0, 2.0, 10.0, 9.0),
        (0.0, 5.0, 1.0, 4.0),
        (300.0, 0.5, 60.0, 1.0),
    ] {
        let l = for_rates(b, ts, tb, between);
        let sd = |net: f64| ((net + b) / ts + b / tb + between).sqrt();
        same(l.critical, Z * sd(0.0), 1e-14);
        same(l.detection - Z * sd(l.detection), l.critical, 1e-12);
        same(l.determination, 10.0 * sd(l.determination), 1e-13);
    }
    // Scatter between vials counts once: 15 + 10 of counting and vials.
    same(for_rates(25.0, 2.0, 10.0, 10.0).critical, 5.0 * Z, 1e-14);
}

/// Computed: 2400 in 2 min over 250 in 10 min; gross 100 and background 25 cpm in 30 min; 1 % of 1000 over 25 cpm.
#[test]
fn net_rates_and_times() {
    let (net, sd) = net_rate(2400.0, 2.0, 250.0, 10.0);
    same(net, 1175.0, 1e-15);
    digits(sd, 24.545875, 8);
    let best = best_split(100.0, 25.0, 30.0);
    same(best.sample_minutes, 20.0, 1e-14);
    same(best.background_minutes, 10.0, 1e-14);
    digits(best.sd, 2.73861279, 9);
    let sd_at = |sample: f64| {
        net_rate(
            100.0 * sample,
            sample,
            25.0 * (30.0 - sample),
            30.0 - sample,
        )
        .1
    };
    same(sd_at(20.0), best.sd, 1e-14);
    digits(sd_at(15.0), 2.88675135, 9);
    assert!(sd_at(19.5) > best.sd && sd_at(20.5) > best.sd);
    digits(minutes_for(0.01, 1000.0, 25.0), 13.701562, 8);
    let split = best_split(1025.0, 25.0, minutes_for(0.01, 1000.0, 25.0));
    same(split.sd, 10.0, 1e-14);
    // Without background all the time is the sample's, and 10 000 counts are known to 1 %.
    assert_eq!(best_split(100.0, 0.0, 8.0).sample_minutes, 8.0);
    same(minutes_for(0.01, 1000.0, 0.0), 10.0, 1e-14);
    let idle = best_split(0.0, 0.0, 8.0);
    assert_eq!((idle.sample_minutes, idle.sd), (4.0, 0.0));
    assert_eq!(minutes_for(0.01, 0.0, 25.0), f64::INFINITY);
}

/// 95 % of 0 and 10 counts are in every table (Garwood 1936, Biometrika 28:437, from memory); digits and the others computed in 30 digits.
#[test]
fn exact_poisson_intervals() {
    let (low, high) = exact_interval(0.0, 0.95).unwrap();
    assert_eq!(low, 0.0);
    digits(high, 3.688879, 7);
    // -ln 0.025: no counts with probability 2.5 %.
    same(high, -0.025f64.ln(), 1e-8);
    for (counts, confidence, low, high) in [
        (10.0, 0.95, 4.795388696132434, 18.39035604201778),
        (1.0, 0.95, 0.025317807984289875, 5.571643390938899),
        (3.0, 0.99, 0.3378633887277333, 10.977477453295767),
        (1000.0, 0.9, 948.5598493836511, 1053.6031221333008),
    ] {
        let found = exact_interval(counts, confidence).unwrap();
        same(found.0, low, 1e-8);
        same(found.1, high, 1e-8);
    }
    // For many counts a chi-square is nearly the cube of a normal value (E. B. Wilson & M. M. Hilferty 1931, PNAS 17:684; from memory).
    let z = 1.959963984540054;
    for counts in [1e6, 1e9f64] {
        let cube = |n: f64, z: f64| n * (1.0 - 1.0 / (9.0 * n) + z / (3.0 * n.sqrt())).powi(3);
        let (low, high) = exact_interval(counts, 0.95).unwrap();
        same(counts - low, counts - cube(counts, -z), 1e-5);
        same(high - counts, cube(counts + 1.0, z) - counts, 1e-5);
    }
    for (counts, confidence) in [
        (-1.0, 0.95),
        (1e10, 0.95),
        (1.5, 0.95),
        (f64::NAN, 0.95),
        (3.0, 0.0),
        (3.0, 1.0),
    ] {
        assert_eq!(exact_interval(counts, confidence), None);
    }
}

/// By hand: variance 16, two and two tubes, 4 z; three and one, 4 z sqrt(4/3).
#[test]
fn critical_specific_binding() {
    same(
        critical_specific(16.0, 2, 2),
        4.0 * 1.6448536269514722,
        1e-15,
    );
    same(
        critical_specific(16.0, 3, 1),
        4.0 * 1.6448536269514722 * (4.0f64 / 3.0).sqrt(),
        1e-15,
    );
    assert_eq!(critical_specific(16.0, 0, 2), f64::INFINITY);
    // One tube of either, its variance that of counting: Currie's paired blank.
    same(
        critical_specific(100.0, 1, 1),
        paired(100.0).critical,
        1e-15,
    );
}

/// By hand: 180 in 10, 180 in 5 and 240 in 10 min, pooled 600 in 25 = 24 cpm; expected 240, 120, 240: index 15 + 30 + 0. On two degrees of
/// freedom the tail is exp(-index / 2). Between: 24 (45 - 2) / (25 - 225/25) = 64.5.
#[test]
fn vials_by_hand() {
    let vials = [(180.0, 10.0), (180.0, 5.0), (240.0, 10.0)];
    let d = dispersion(&vials).unwrap();
    same(d.chi2, 45.0, 1e-14);
    assert_eq!(d.df, 2);
    same(d.p, (-22.5f64).exp(), 1e-10);
    same(d.between, 64.5, 1e-14);
    // Two vials, pooled 24 cpm; counting variances 2.4 and 4.8. With 7.2 between vials 9.6 and 12, weights as 5 to 4:
    // (5 x 18 + 4 x 36) / 9, variance 9.6 x 12 / 21.6.
    let (mean, variance) = pooled(&vials[..2], 7.2).unwrap();
    same(mean, 26.0, 1e-14);
    same(variance, 16.0 / 3.0, 1e-14);
    // Without it, all counts over all minutes.
    let (mean, variance) = pooled(&vials[..2], 0.0).unwrap();
    same(mean, 24.0, 1e-15);
    same(variance, 24.0 / 15.0, 1e-15);
    // Vials closer than counting lets them be show no variance.
    let close = dispersion(&[(250.0, 10.0), (251.0, 10.0), (249.0, 10.0)]).unwrap();
    assert_eq!(close.between, 0.0);
    assert!(close.p > 0.99);
    let alike = dispersion(&[(250.0, 10.0), (125.0, 5.0)]).unwrap();
    assert_eq!((alike.chi2, alike.p, alike.between), (0.0, 1.0, 0.0));
    assert_eq!(dispersion(&[(250.0, 10.0)]), None);
    assert_eq!(dispersion(&[(0.0, 10.0), (0.0, 10.0)]), None);
    assert_eq!(dispersion(&[(5.0, 10.0), (5.0, 0.0)]), None);
    assert_eq!(pooled(&[], 1.0), None);
    assert_eq!(pooled(&[(5.0, f64::NAN)], 1.0), None);
    assert_eq!(pooled(&[(0.0, 10.0)], 0.0), Some((0.0, 0.0)));
}

const SIMULATED: usize = 4000;

/// 25 cpm counted for these minutes, the rate of every vial off by a normal error.
fn simulated_vials(minutes: &[f64], between_sd: f64, stream: u64) -> Vec<Vec<(f64, f64)>> {
    let mut rng = random(stream);
    let rate = Normal::new(25.0, between_sd).unwrap();
    (0..SIMULATED)
        .map(|_| {
            minutes
                .iter()
                .map(|t| {
                    let mean = rate.sample(&mut rng) * t;
                    (Poisson::new(mean).unwrap().sample(&mut rng), *t)
                })
                .collect()
        })
        .collect()
}

/// 4000 sets of five vials that differ by counting alone: 5 % and 1 % false alarms, within 3.5 of their own standard errors.
#[test]
fn vials_that_only_count_raise_few_alarms() {
    let sets = simulated_vials(&[10.0, 10.0, 5.0, 10.0, 20.0], 0.0, 1);
    for level in [0.05, 0.01] {
        let alarms = sets
            .iter()
            .filter(|v| dispersion(v).unwrap().p < level)
            .count();
        let share = alarms as f64 / SIMULATED as f64;
        let error = (level * (1.0 - level) / SIMULATED as f64).sqrt();
        println!("false alarms at {level}: {share}");
        assert!((share - level).abs() <= 3.5 * error, "{share} of {level}");
    }
}

/// 4000 sets of twelve vials with a variance of 9 cpm^2 between them, counted for unequal times: the estimate is unbiased within four of its standard
/// errors, and the variance of the pooled mean is what the means show.
#[test]
fn variance_between_vials_is_found() {
    let minutes = [
        10.0, 10.0, 5.0, 10.0, 20.0, 4.0, 10.0, 10.0, 15.0, 10.0, 5.0, 10.0,
    ];
    let sets = simulated_vials(&minutes, 3.0, 2);
    let found: Vec<f64> = sets
        .iter()
        .map(|v| dispersion(v).unwrap().between)
        .collect();
    let (mean, variance) = moments(&found);
    let error = (variance / SIMULATED as f64).sqrt();
    println!("between vials: {mean} +- {error}");
    assert!(
        error < 0.1 && (mean - 9.0).abs() <= 4.0 * error,
        "{mean} +- {error}"
    );

    let means: Vec<(f64, f64)> = sets.iter().map(|v| pooled(v, 9.0).unwrap()).collect();
    let (rate, seen) = moments(&means.iter().map(|m| m.0).collect::<Vec<_>>());
    let said = means.iter().map(|m| m.1).sum::<f64>() / SIMULATED as f64;
    println!("pooled: {rate}, variance {seen} seen, {said} said");
    assert!(
        (rate - 25.0).abs() <= 4.0 * (seen / SIMULATED as f64).sqrt(),
        "{rate}"
    );
    // The standard error of a variance of so many normal values is sqrt(2 / 4000) of it.
    same(said, seen, 4.0 * (2.0 / SIMULATED as f64).sqrt());
}

/// 1e6 cpm observed with 5 us: 1e6 / (1 - 1e6 / 60 x 5e-6) = 1e6 / (11/12).
#[test]
fn dead_time_of_a_known_rate() {
    digits(true_rate(1e6, 5e-6).unwrap(), 1090909.1, 8);
    same(true_rate(1e6, 5e-6).unwrap(), 12e6 / 11.0, 1e-14);
    assert_eq!(true_rate(1e6, 0.0), Ok(1e6));
    assert_eq!(true_rate(0.0, 5e-6), Ok(0.0));
    // There and back: m = n / (1 + n tau).
    for n in [10.0, 1e5, 1e8] {
        let m = n / (1.0 + n / 60.0 * 1e-5);
        same(true_rate(m, 1e-5).unwrap(), n, 1e-13);
    }
    for (m, tau) in [(60.0, 1.0), (6e6, 1e-5), (1e9, 1e-3), (f64::NAN, 1e-5)] {
        assert!(true_rate(m, tau).is_err(), "{m} {tau}");
    }
    assert_eq!(
        true_rate(60.0, 1.5).unwrap_err().to_string(),
        "60 cpm cannot be observed with a dead time of 1.5 s: the counter would be dead all the time"
    );
}

/// A counter that is dead for half the mean distance of what arrives: 4000 counts of 2 s at 1000 per second, arrival by arrival. The corrected
/// rate is the true one (but for some 20 cpm, the bias of a ratio on 1300 counts), and its variance the one given (1.5 times that of counts never missed) within four standard errors.
#[test]
fn dead_time_of_a_simulated_counter() {
    let (per_second, tau, seconds) = (1000.0, 5e-4, 2.0);
    let mut rng = random(3);
    let gap = Exp::new(per_second).unwrap();
    let rates: Vec<f64> = (0..SIMULATED)
        .map(|_| {
            let (mut now, mut live_from, mut counts) = (gap.sample(&mut rng), 0.0, 0.0);
            while now < seconds {
                if now >= live_from {
                    counts += 1.0;
                    live_from = now + tau;
                }
                now += gap.sample(&mut rng);
            }
            true_rate(counts / seconds * 60.0, tau).unwrap()
        })
        .collect();
    let (mean, seen) = moments(&rates);
    let said = dead_time::variance(60.0 * per_second, tau, seconds / 60.0);
    println!("dead time: {mean} cpm, variance {seen} seen, {said} said");
    same(said, 1.5 * 60000.0 * 30.0, 1e-14);
    let error = (seen / SIMULATED as f64).sqrt();
    assert!((mean - 60000.0).abs() <= 4.0 * error, "{mean} +- {error}");
    same(seen, said, 4.0 * (2.0 / SIMULATED as f64).sqrt());
}
