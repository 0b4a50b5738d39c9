//! Racks that must not break the analysis: whatever was counted, the outcome is an honest one. No published values: what is
//! held here is that every number is finite, every interval holds its estimate, and the same rack gives the same bits.

use crate::racks::{LEVELS, find, keep, levels, sheet};
use proptest::prelude::*;
use rackside::analysis::{Analysis, analyse, analyse_with};
use rackside::assay::{Loss, Reason, Role, Titration, Tube};
use rackside::fit::{End, Fit, Missing, Model, Outcome};
use rackside::units::{Mark, Typed};

/// A rack with its counts from a rule: role, label added in nM (zero for background), replicate.
fn rack(t: Titration, counts: impl Fn(&Tube, f64) -> f64) -> Titration {
    let mut t = t;
    for tube in t.tubes.clone() {
        let added = t.added_nm(&tube).unwrap_or(0.0);
        let minutes = t.protocol.minutes_for(tube.role);
        let n = counts(&tube, added);
        keep(&mut t, &tube, n, minutes, None);
    }
    t
}

/// The example's rack: eight levels, two total and two nonspecific tubes each, dilution errors.
fn example() -> Titration {
    sheet(&[])
}

/// What a sound rack would count, with a little of the unevenness of real tubes.
fn sound(tube: &Tube, added: f64) -> f64 {
    let uneven = 1.0 + 0.03 * ((tube.no.0 * 7919 % 13) as f64 - 6.0) / 6.0;
    match tube.role {
        Role::Background => 250.0,
        Role::Nonspecific => (50.0 + 160.0 * added * uneven).round(),
        _ => (50.0 + (160.0 * added + 1600.0 * added / (0.5 + added)) * uneven).round(),
    }
}

#[track_caller]
fn honest_fit(fit: &Fit) {
    for v in fit.theta.iter().chain(fit.cov.iter()) {
        assert!(v.is_finite(), "{fit:?}");
    }
    assert!(fit.minus2lnl.is_finite() && fit.prior_term.is_finite() && fit.cv.is_finite());
    assert!(fit.aicc.is_none_or(f64::is_finite));
    for e in &fit.estimates {
        assert!(e.value.is_finite() && e.value > 0.0, "{e:?}");
        assert!(e.se_ln.is_none_or(|se| se.is_finite() && se > 0.0), "{e:?}");
        for end in [e.low, e.high] {
            assert!(
                end.value().is_none_or(|v| v.is_finite() && v >= 0.0),
                "{e:?}"
            );
        }
        assert!(e.low.value().is_none_or(|low| low <= e.value), "{e:?}");
        assert!(e.high.value().is_none_or(|high| e.value <= high), "{e:?}");
        assert!(!e.at_floor || e.low == End::Open, "{e:?}");
    }
}

#[track_caller]
fn honest_outcome(outcome: &Outcome) {
    match outcome {
        Outcome::Fitted(fit) => honest_fit(fit),
        Outcome::TooEarly(missing) => assert!(!missing.is_empty()),
        Outcome::NoConvergence => {}
    }
}

/// What is said of the fit is made of numbers, of tubes that are there, and flags nothing.
#[track_caller]
fn honest_judgement(t: &Titration, a: &Analysis) {
    for s in &a.suspects.tubes {
        assert!(
            s.residual.is_finite() && (0.0..=1.0).contains(&s.p),
            "{s:?}"
        );
        assert!(!t.is_suspect(s.tube) && t.tube(s.tube).is_some(), "{s:?}");
    }
    for g in &a.suspects.groups {
        assert!(!g.f.is_nan() && (0.0..=1.0).contains(&g.p), "{g:?}");
    }
    for v in &a.choice.verdicts {
        let gain = v.gain.map_or([0.0; 3], |g| [g.drop, g.f, g.p]);
        assert!(gain.iter().all(|g| g.is_finite()), "{v:?}");
        let closed = a.fit_of(v.model).is_some_and(Fit::closed);
        assert!(!v.offered() || closed, "{v:?}");
    }
    assert_eq!(a.soundness.is_some(), a.fit().is_some());
    let Some(s) = &a.soundness else { return };
    let p = s.lack_of_fit.iter().map(|l| l.p);
    let p = p.chain(s.runs.iter().map(|r| r.p));
    let p = p.chain(s.levels.iter().map(|l| l.p));
    assert!(p.into_iter().all(|p| (0.0..=1.0).contains(&p)), "{s:?}");
    assert!(
        s.levels
            .iter()
            .all(|l| l.error.is_finite() && l.distance.is_finite())
    );
}

/// The law chosen is the one shown, and has a fit or says what it lacks.
#[track_caller]
fn honest_pins(t: &Titration) {
    for model in Model::ALL {
        let mut pinned = t.clone();
        pinned.protocol.numbers.model = Some(model);
        let a = honest(&pinned);
        assert_eq!((a.choice.shown, a.choice.pinned), (model, true));
        assert!(a.fit().is_none_or(|f| f.model == model));
    }
}

/// Every number of an analysis, as bits.
fn bits(a: &Analysis) -> Vec<u64> {
    let mut all = Vec::new();
    for t in &a.tubes {
        all.extend(t.added_nm.into_iter().chain(t.specific_nm));
        all.extend(t.observed.iter().flat_map(|o| [o.counts, o.minutes]));
        let of = |m: &rackside::assay::Measured| [m.bound_nm, m.bound_sd_nm, m.free_nm];
        all.extend(t.measured.iter().flat_map(of));
    }
    all.extend(a.background.iter().flat_map(|b| [b.counts, b.minutes]));
    for fit in [a.outcome.fit(), a.without_flags().fit()]
        .into_iter()
        .flatten()
    {
        all.extend(fit.theta.iter().chain(fit.cov.iter()));
        all.extend([fit.minus2lnl, fit.prior_term, fit.cv]);
        all.extend(fit.aicc);
        for e in &fit.estimates {
            all.push(e.value);
            all.extend(
                e.se_ln
                    .into_iter()
                    .chain(e.low.value())
                    .chain(e.high.value()),
            );
        }
    }
    assert!(all.iter().all(|v| !v.is_nan()), "{a:?}");
    all.into_iter().map(f64::to_bits).collect()
}

/// The analysis of a rack, looked through.
#[track_caller]
fn honest(t: &Titration) -> Analysis {
    // Intervals of every law, but on racks that are hard by their size alone.
    let a = analyse_with(t, t.tubes.len() < 200);
    honest_outcome(&a.outcome);
    honest_outcome(a.without_flags());
    Model::ALL
        .iter()
        .for_each(|m| honest_outcome(a.compared.outcome(*m)));
    honest_judgement(t, &a);
    assert!(
        a.tubes
            .iter()
            .all(|r| r.measured.is_none_or(|m| m.bound_sd_nm > 0.0))
    );
    bits(&a);
    a
}

#[track_caller]
fn too_early(t: &Titration, because: Missing) {
    match honest(t).outcome {
        Outcome::TooEarly(missing) => assert!(missing.contains(&because), "{missing:?}"),
        other => panic!("{other:?}"),
    }
}

#[track_caller]
fn fitted(t: &Titration) -> Fit {
    let a = honest(t);
    a.fit().unwrap_or_else(|| panic!("{:?}", a.outcome)).clone()
}

/// No end may be one that the search failed to find.
#[track_caller]
fn no_end_failed(fit: &Fit) {
    for e in &fit.estimates {
        assert!(e.low != End::Failed && e.high != End::Failed, "{e:?}");
    }
}

#[test]
fn the_sound_rack_is_sound() {
    let fit = fitted(&rack(example(), sound));
    no_end_failed(&fit);
    assert!(
        fit.estimates
            .iter()
            .all(|e| e.low.value().is_some() && e.high.value().is_some())
    );
}

#[test]
fn all_zero_counts() {
    too_early(
        &rack(example(), |_, _| 0.0),
        Missing::NothingAboveBackground,
    );
}

#[test]
fn nothing_counted() {
    too_early(&example(), Missing::Background);
}

#[test]
fn zero_counts_in_the_background() {
    let fit = fitted(&rack(example(), |t, added| {
        if t.role == Role::Background {
            0.0
        } else {
            sound(t, added)
        }
    }));
    no_end_failed(&fit);
}

#[test]
fn zero_counts_at_the_lowest_levels() {
    let fit = fitted(&rack(example(), |t, added| {
        if added < 0.15 && t.role != Role::Background {
            0.0
        } else {
            sound(t, added)
        }
    }));
    no_end_failed(&fit);
}

#[test]
fn nonspecific_at_background() {
    let fit = fitted(&rack(example(), |t, added| {
        if t.role == Role::Nonspecific {
            50.0
        } else {
            sound(t, added)
        }
    }));
    no_end_failed(&fit);
}

#[test]
fn nonspecific_below_background() {
    let fit = fitted(&rack(example(), |t, added| {
        if t.role == Role::Nonspecific {
            3.0
        } else {
            sound(t, added)
        }
    }));
    no_end_failed(&fit);
}

#[test]
fn total_and_nonspecific_alike() {
    honest(&rack(example(), |t, added| {
        if t.role == Role::Background {
            250.0
        } else {
            (50.0 + 160.0 * added).round()
        }
    }));
}

#[test]
fn total_below_nonspecific() {
    honest(&rack(example(), |t, added| match t.role {
        Role::Background => 250.0,
        Role::Nonspecific => (50.0 + 160.0 * added).round(),
        _ => (50.0 + 100.0 * added).round(),
    }));
}

#[test]
fn one_level() {
    let t = sheet(&[(LEVELS, "List([\"1 nM\"])")]);
    too_early(&rack(t, sound), Missing::Levels { have: 1, want: 3 });
}

#[test]
fn one_tube() {
    let t = sheet(&[
        (LEVELS, "List([\"1 nM\"])"),
        ("total: 2,", "total: 1,"),
        ("nonspecific: 2,", "nonspecific: 0,"),
    ]);
    too_early(&rack(t, sound), Missing::Tubes { have: 1, want: 5 });
}

#[test]
fn no_nonspecific_tubes() {
    let t = sheet(&[("nonspecific: 2,", "nonspecific: 0,")]);
    too_early(&rack(t, sound), Missing::NonspecificAbove);
}

#[test]
fn everything_lost() {
    let mut t = example();
    for tube in t.tubes.clone() {
        let why = Reason::Spilled.into();
        t.lost.insert(tube.no, Loss { entry: 2, why });
    }
    too_early(&t, Missing::Background);
}

#[test]
fn everything_suspect() {
    let mut t = rack(example(), sound);
    for k in t.kept.values_mut().flatten() {
        k.suspect = Some(Reason::NumbersAlone.into());
    }
    too_early(&t, Missing::Background);
    let all = analyse(&t).all_readings.unwrap();
    no_end_failed(all.fit().unwrap());
}

/// A thousand million times the counts: far beyond any counter, and counting errors vanish beside the tube CV.
#[test]
fn huge_counts() {
    for (times, activity) in [
        (1e4, "800 Ci/mmol"),
        (1e6, "80000 Ci/mmol"),
        (1e9, "8e7 Ci/mmol"),
    ] {
        // More label bound than was added: no law of binding fits it.
        honest(&rack(example(), |t, added| times * sound(t, added)));
        // With an activity and a volume to match it is the sound rack, only counted better.
        let mut t = sheet(&[("\"0.5 mL\"", "\"500 mL\"")]);
        t.protocol.ligand.specific_activity = Typed::parse(activity, Mark::Point).unwrap();
        let fit = fitted(&rack(t, |t, added| times * sound(t, added)));
        no_end_failed(&fit);
        assert!((fit.value("kd_nm") - 0.5).abs() < 0.05, "{fit:?}");
        assert!((fit.value("sites_nm") - 0.02).abs() < 0.002, "{fit:?}");
    }
}

#[test]
fn one_wild_tube() {
    for wild in [0.0, 1e6, 1e9] {
        for (role, level) in [
            (Role::Total, 8),
            (Role::Total, 1),
            (Role::Nonspecific, 8),
            (Role::Nonspecific, 2),
        ] {
            let mut t = rack(example(), sound);
            let tube = find(&t, role, Some(level), 2);
            t.kept.remove(&tube.no);
            keep(&mut t, &tube, wild, 2.0, None);
            honest(&t);
            // Flagged, it does no harm, and what it did is still shown.
            t.kept.get_mut(&tube.no).unwrap()[0].suspect = Some(Reason::NumbersAlone.into());
            let a = honest(&t);
            no_end_failed(a.fit().unwrap());
            assert!(a.all_readings.is_some());
        }
    }
}

#[test]
fn identical_counts_everywhere() {
    for n in [1.0, 250.0, 1e6] {
        honest(&rack(example(), |_, _| n));
        let above = rack(
            example(),
            |t, _| if t.role == Role::Background { 10.0 } else { n },
        );
        honest(&above);
    }
}

#[test]
fn counts_falling_with_concentration() {
    honest(&rack(example(), |t, added| match t.role {
        Role::Background => 250.0,
        Role::Nonspecific => (50.0 + 100.0 / added).round(),
        _ => (50.0 + 1000.0 / added).round(),
    }));
}

#[test]
fn background_above_everything() {
    let t = rack(example(), |t, added| {
        if t.role == Role::Background {
            1e6
        } else {
            sound(t, added)
        }
    });
    too_early(&t, Missing::NothingAboveBackground);
}

#[test]
fn levels_over_twelve_powers_of_ten() {
    let nm: Vec<f64> = (-6..=6).map(|e| 10f64.powi(e)).collect();
    let ladder = levels(&nm);
    for error in ["dilution_error: \"0\"", "dilution_error: \"2 %\""] {
        let t = sheet(&[
            (LEVELS, &ladder),
            ("\"1 uM\"", "\"1 M\""),
            ("dilution_error: \"2 %\"", error),
        ]);
        let fit = fitted(&rack(t, sound));
        no_end_failed(&fit);
        assert!((fit.value("kd_nm") - 0.5).abs() < 0.2, "{fit:?}");
    }
}

/// A thousand tubes at eight levels.
#[test]
fn a_thousand_tubes() {
    for error in ["0", "2 %"] {
        let error = format!("dilution_error: \"{error}\"");
        let t = sheet(&[
            ("total: 2,", "total: 63,"),
            ("nonspecific: 2,", "nonspecific: 62,"),
            ("dilution_error: \"2 %\"", &error),
        ]);
        assert_eq!(t.tubes.len(), 1001);
        let fit = fitted(&rack(t, sound));
        no_end_failed(&fit);
        assert_eq!(fit.tubes_used, 1000);
    }
}

/// A thousand tubes at two hundred and fifty levels, with a dilution error for each of them or none.
#[test]
fn two_hundred_and_fifty_levels() {
    for (error, columns) in [("0", 0), ("2 %", 250)] {
        let error = format!("dilution_error: \"{error}\"");
        let ladder = "Geometric(lowest: \"0.05 nM\", highest: \"10 nM\", number: 250)";
        let t = sheet(&[(LEVELS, ladder), ("dilution_error: \"2 %\"", &error)]);
        assert_eq!(t.tubes.len(), 1001);
        let fit = fitted(&rack(t, sound));
        no_end_failed(&fit);
        assert_eq!(fit.theta.len(), 5 + columns);
    }
}

/// The same titration gives the same bits, whatever was analysed before.
#[test]
fn the_same_titration_gives_the_same_bits() {
    let mut flagged = rack(example(), sound);
    flagged.kept.values_mut().nth(5).unwrap()[0].suspect = Some(Reason::Spilled.into());
    let racks = [
        rack(example(), sound),
        flagged,
        rack(
            sheet(&[("dilution: EachFromStock", "dilution: Serial")]),
            sound,
        ),
        rack(
            sheet(&[("dilution_error: \"2 %\"", "dilution_error: \"0\"")]),
            sound,
        ),
    ];
    let first: Vec<Analysis> = racks.iter().map(analyse).collect();
    for (t, first) in racks.iter().zip(&first).rev() {
        let again = analyse(&t.clone());
        assert_eq!(&again, first);
        assert_eq!(bits(&again), bits(first));
        assert!(bits(&again).len() > 100);
    }
}

/// A small rack of any counts.
fn any_rack() -> impl Strategy<Value = Titration> {
    let counts = prop_oneof![
        Just(0.0),
        (0.0..7.0f64).prop_map(|e| 10f64.powf(e).round()),
        (0u32..2000).prop_map(f64::from),
    ];
    let ladder = prop::collection::btree_set(1u32..10_000, 1..6);
    (
        ladder,
        (1u16..3, 0u16..3, 1u16..3),
        prop::collection::vec((counts, 0.1..20.0f64, 0u8..12), 40),
        prop_oneof![Just("0"), Just("2 %"), Just("50 %")],
        (any::<bool>(), any::<bool>(), any::<bool>()),
        prop_oneof![
            Just("SameLigand"),
            Just("Other(name: \"x\")"),
            Just("Other(name: \"x\", ki: \"1 nM\")")
        ],
    )
        .prop_map(
            |(
                ladder,
                (total, nonspecific, blanks),
                readings,
                error,
                (serial, filter, prior),
                blocker,
            )| {
                let nm: Vec<f64> = ladder.iter().map(|l| f64::from(*l) / 100.0).collect();
                let changes = [
                    (LEVELS, levels(&nm)),
                    ("total: 2,", format!("total: {total},")),
                    ("nonspecific: 2,", format!("nonspecific: {nonspecific},")),
                    ("background: 1,", format!("background: {blanks},")),
                    (
                        "dilution_error: \"2 %\"",
                        format!("dilution_error: \"{error}\""),
                    ),
                    (
                        "dilution: EachFromStock",
                        format!(
                            "dilution: {}",
                            if serial { "Serial" } else { "EachFromStock" }
                        ),
                    ),
                    (
                        "sticks: ToPreparation",
                        format!(
                            "sticks: {}",
                            if filter { "ToFilter" } else { "ToPreparation" }
                        ),
                    ),
                    ("unlabelled: SameLigand", format!("unlabelled: {blocker}")),
                    (
                        "cv_prior: Some((centre: 0.06, sd_ln: 0.7))",
                        if prior {
                            "cv_prior: Some((centre: 0.06, sd_ln: 0.7))"
                        } else {
                            "cv_prior: None"
                        }
                        .into(),
                    ),
                ];
                let changes: Vec<(&str, &str)> =
                    changes.iter().map(|(a, b)| (*a, b.as_str())).collect();
                let mut t = sheet(&changes);
                for (tube, (n, minutes, fate)) in t.tubes.clone().iter().zip(readings) {
                    match fate {
                        0 => {}
                        1 => keep(&mut t, tube, n, minutes, Some(Reason::Other)),
                        _ => keep(&mut t, tube, n, minutes, None),
                    }
                }
                t
            },
        )
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 300, failure_persistence: None, ..ProptestConfig::default() })]

    /// Any counts at all in any small rack.
    #[test]
    fn any_small_rack(t in any_rack()) {
        honest(&t);
    }

}

proptest! {
    #![proptest_config(ProptestConfig { cases: 60, failure_persistence: None, ..ProptestConfig::default() })]

    /// The same with each law chosen to be shown.
    #[test]
    fn any_small_rack_with_a_law_chosen(t in any_rack()) {
        honest_pins(&t);
    }
}
