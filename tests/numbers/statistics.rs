//! Critical values and tests against published tables, closed forms and counting.
//!
//! Tables: NIST/SEMATECH e-Handbook of Statistical Methods, 1.3.6.7 (t, F, chi-square) and 1.3.5.17.1 (Grubbs), from memory, with the further
//! digits computed independently; runs: F. S. Swed & C. Eisenhart 1943, Ann Math Stat 14:66, from memory.

use rackside::fit::{
    Runs, chi_square_upper_tail, f_upper_tail, grubbs_critical, lack_of_fit, runs_lower_tail,
    t_quantile, t_two_sided,
};

/// Within half a unit of the last decimal that is given.
#[track_caller]
fn decimals(got: f64, want: f64, decimals: i32) {
    let half = 0.5 * 10f64.powi(-decimals);
    assert!(
        (got - want).abs() <= half * (1.0 + 1e-6),
        "got {got}, want {want}"
    );
}

#[track_caller]
fn same(got: f64, want: f64, relative: f64) {
    assert!(
        (got / want - 1.0).abs() <= relative,
        "got {got}, want {want}"
    );
}

#[test]
fn students_t_of_the_tables() {
    for (df, t) in [
        (5.0, 2.570582),
        (10.0, 2.228139),
        (20.0, 2.085963),
        (30.0, 2.042272),
    ] {
        decimals(t_quantile(0.975, df).unwrap(), t, 6);
        decimals(-t_quantile(0.025, df).unwrap(), t, 6);
        same(t_two_sided(t, df).unwrap(), 0.05, 1e-6);
        assert_eq!(t_two_sided(-t, df), t_two_sided(t, df));
    }
    assert_eq!(t_two_sided(0.0, 3.0), Some(1.0));
}

/// On 1 degree of freedom the tail is that of the Cauchy distribution, on 2 it is algebraic: exact far out, where
/// corrections for many tubes look.
#[test]
fn students_t_far_out_is_the_closed_form() {
    for t in [0.01, 0.3, 1.0, 4.0, 30.0, 1e3, 1e5] {
        same(
            t_two_sided(t, 1.0).unwrap(),
            2.0 / std::f64::consts::PI * (1.0 / t).atan(),
            1e-12,
        );
        // 1 - t / sqrt(2 + t^2), without its cancellation.
        let root = (2.0 + t * t).sqrt();
        same(
            t_two_sided(t, 2.0).unwrap(),
            2.0 / (root * (root + t)),
            1e-12,
        );
    }
    for p in [1e-9f64, 1e-5, 0.01, 0.3, 0.5, 0.9, 0.99999] {
        let want = (2.0 * p - 1.0) / (2.0 * p * (1.0 - p)).sqrt();
        let got = t_quantile(p, 2.0).unwrap();
        assert!(
            (got - want).abs() <= 1e-9 * (1.0 + want.abs()),
            "{p}: {got} {want}"
        );
    }
}

#[test]
fn f_of_the_tables() {
    for (df, f) in [
        ([1.0, 10.0], 4.964603),
        ([2.0, 10.0], 4.102821),
        ([4.0, 6.0], 4.533677),
    ] {
        same(f_upper_tail(f, df).unwrap(), 0.05, 1e-6);
    }
    // On 2 degrees of freedom above, the tail is (1 + 2 f / df)^(-df / 2).
    for df in [1.0f64, 4.0, 7.0, 30.0, 500.0] {
        for f in [0.0, 0.2, 1.0, 5.0, 40.0, 1e4] {
            let want = (-0.5 * df * (2.0 * f / df).ln_1p()).exp();
            if want > 1e-200 {
                same(f_upper_tail(f, [2.0, df]).unwrap(), want, 1e-10);
            }
        }
    }
}

#[test]
fn chi_square_of_the_tables() {
    for (df, x) in [(1.0, 3.841459), (2.0, 5.991465), (10.0, 18.307038)] {
        same(chi_square_upper_tail(x, df).unwrap(), 0.05, 1e-6);
    }
    for x in [0.0, 0.3, 2.0, 20.0, 200.0] {
        same(
            chi_square_upper_tail(x, 2.0).unwrap(),
            (-x / 2.0f64).exp(),
            1e-11,
        );
    }
}

#[test]
fn what_is_no_test_has_no_probability() {
    for df in [0.0, -1.0, f64::NAN, f64::INFINITY] {
        assert_eq!(t_two_sided(1.0, df), None);
        assert_eq!(t_quantile(0.975, df), None);
        assert_eq!(chi_square_upper_tail(1.0, df), None);
        assert_eq!(f_upper_tail(1.0, [1.0, df]), None);
        assert_eq!(f_upper_tail(1.0, [df, 1.0]), None);
    }
    for bad in [-1.0, f64::NAN] {
        assert_eq!(chi_square_upper_tail(bad, 1.0), None);
        assert_eq!(f_upper_tail(bad, [1.0, 1.0]), None);
    }
    assert_eq!(t_two_sided(f64::NAN, 1.0), None);
    for p in [0.0, 1.0, -0.1, 1.1, f64::NAN] {
        assert_eq!(t_quantile(p, 3.0), None);
        assert_eq!(grubbs_critical(5, p), None);
    }
    assert_eq!(grubbs_critical(2, 0.05), None);
}

#[test]
fn grubbs_of_the_tables() {
    let table = [
        1.1543, 1.4813, 1.7150, 1.8871, 2.0200, 2.1266, 2.2150, 2.2900,
    ];
    for (n, want) in (3..).zip(table) {
        decimals(grubbs_critical(n, 0.05).unwrap(), want, 4);
    }
    // No value can be farther than (n - 1) / sqrt(n), which the critical value comes to as alpha goes to zero.
    for n in [3, 4, 10, 100] {
        let most = (n as f64 - 1.0) / (n as f64).sqrt();
        assert!(grubbs_critical(n, 1e-6).unwrap() <= most);
    }
    same(grubbs_critical(3, 1e-6).unwrap(), 2.0 / 3f64.sqrt(), 1e-10);
}

/// The largest number of runs that is rejected at 5 %.
#[test]
fn runs_of_the_tables() {
    for (n, most) in [(4, 2), (5, 3), (6, 3), (8, 5), (10, 6)] {
        assert!(runs_lower_tail(most, n, n) <= 0.05, "{n}");
        assert!(runs_lower_tail(most + 1, n, n) > 0.05, "{n}");
    }
}

/// Every order of the signs counted out.
#[test]
fn runs_counted_out() {
    for plus in 0..=6usize {
        for minus in 0..=5usize {
            let n = plus + minus;
            let orders: Vec<Runs> = (0u32..1 << n)
                .filter(|bits| bits.count_ones() as usize == plus)
                .map(|bits| {
                    let sign = |i: usize| if bits >> i & 1 == 1 { 2.0 } else { -0.5 };
                    Runs::of(&(0..n).map(sign).collect::<Vec<f64>>())
                })
                .collect();
            assert!(orders.iter().all(|o| (o.plus, o.minus) == (plus, minus)));
            for most in 0..=n + 1 {
                let few = orders.iter().filter(|o| o.runs <= most).count();
                let want = few as f64 / orders.len() as f64;
                let got = runs_lower_tail(most, plus, minus);
                assert!(
                    (got - want).abs() <= 1e-12,
                    "{most} {plus} {minus}: {got} {want}"
                );
            }
        }
    }
    // With a thousand signs as well: it grows to one, and is a half near the expected 501 runs.
    let middle = runs_lower_tail(500, 500, 500);
    assert!(middle > 0.45 && middle < 0.5, "{middle}");
    same(runs_lower_tail(1000, 500, 500), 1.0, 1e-9);
}

#[test]
fn runs_of_a_sequence() {
    let runs = |r: &[f64]| Runs::of(r);
    let counted = |runs, plus, minus| Runs { runs, plus, minus };
    assert_eq!(runs(&[]), counted(0, 0, 0));
    assert_eq!(runs(&[0.0, -0.0]), counted(0, 0, 0));
    assert_eq!(runs(&[1.0, 0.0, 2.0]), counted(1, 2, 0));
    assert_eq!(
        runs(&[1.0, -1.0, 0.0, -3.0, f64::NAN, 4.0]),
        counted(3, 2, 2)
    );
    assert_eq!(counted(0, 0, 0).lower_tail(), 1.0);
    assert_eq!(counted(1, 3, 0).lower_tail(), 1.0);
}

/// Worked by hand: two pairs and a single value, one parameter, and a row without replicates.
#[test]
fn lack_of_fit_by_hand() {
    let groups: [&[f64]; 4] = [&[1.0, 3.0], &[], &[-1.0, 0.0], &[2.0]];
    // Squares 1 + 9 + 1 + 0 + 4 and 0.5 more; about the means 2 and -1/2: 2 + 1/2.
    let found = lack_of_fit(&groups, 0.5, 1).unwrap();
    assert_eq!((found.df_lack, found.df_pure), (2, 2));
    same(found.f, (13.0 / 2.0) / (2.5 / 2.0), 1e-14);
    // On 2 and 2 degrees of freedom the tail is 1 / (1 + f).
    same(found.p, 1.0 / (1.0 + found.f), 1e-12);
    assert_eq!(lack_of_fit(&groups, 0.5, 3), None);
    assert_eq!(lack_of_fit(&groups, 0.5, 4), None);
    assert_eq!(lack_of_fit(&[&[1.0], &[2.0], &[0.5]], 0.0, 1), None);
    assert_eq!(lack_of_fit(&[&[1.0, 1.0], &[2.0, 2.0]], 0.0, 1), None);
    // The mean of three times 0.1 is not 0.1 in binary.
    assert_eq!(lack_of_fit(&[&[0.1, 0.1, 0.1], &[2.0, 2.0]], 0.0, 1), None);
    assert_eq!(lack_of_fit(&[&[1.0, f64::NAN], &[2.0, 2.0]], 0.0, 1), None);
}
