//! The profile of Kd as it is drawn, against the ends of the interval and against independent refits.

use crate::plots::{STEEP, TWO, drawn, frame, near, points, rack};
use crate::sitting::demo;
use rackside::analysis::analyse;
use rackside::assay::Model;
use rackside::binding::{Law, OneClass};
use rackside::figure::{Plot, Scale, Style, plot, plot_columns};
use rackside::fit::{End, Ended, Evidence, Outcome, ProfilePlace, RackEvidence, solve};

/// Where a curve crosses a height, by its neighbouring places.
fn crossings(curve: &[(f64, f64)], height: f64) -> Vec<f64> {
    let sides = curve
        .windows(2)
        .filter(|w| (w[0].1 < height) != (w[1].1 < height));
    sides
        .map(|w| w[0].0 + (w[1].0 - w[0].0) * (height - w[0].1) / (w[1].1 - w[0].1))
        .collect()
}

#[test]
fn the_profile_crosses_the_cut_where_the_interval_ends() {
    let t = demo("finished").titration().clone();
    let analysis = analyse(&t);
    let fit = analysis.fit().unwrap();
    let kd = fit.estimate("kd_nm").unwrap();
    let (Some(low), Some(high)) = (kd.low.value(), kd.high.value()) else {
        panic!("open")
    };
    for columns in [27, 76, 200] {
        let figure = plot(Plot::Profile, &t, &analysis, Scale::Log10, columns, 20).unwrap();
        let curve = &figure.curves[0].points;
        let found = crossings(curve, fit.cut);
        assert_eq!(found.len(), 2, "{found:?}");
        let room = plot_columns(columns, &figure.y) as f64;
        for (got, want) in found.iter().zip([low, high]) {
            let column = |x: f64| figure.x.fraction(x).unwrap() * room;
            assert!((column(*got) - column(want)).abs() < 0.1, "{got} {want}");
        }
        // The cut is drawn where it is, the ends on it, the estimate below.
        assert_eq!(
            figure.curves[1]
                .points
                .iter()
                .map(|p| p.1)
                .collect::<Vec<_>>(),
            [fit.cut; 2]
        );
        assert_eq!(figure.curves[1].style, Style::Dashed);
        let marks: Vec<(f64, f64)> = points(&figure).iter().map(|p| (p.x, p.y)).collect();
        assert_eq!(marks, [(kd.value, 0.0), (low, fit.cut), (high, fit.cut)]);
        // Down to the estimate and up from there, without a bend on the way.
        let finite = || curve.iter().filter(|p| p.1.is_finite());
        let aside = |w: &&[&(f64, f64)]| (w[0].0 < kd.value) == (w[1].0 < kd.value);
        for w in finite().collect::<Vec<_>>().windows(2).filter(aside) {
            assert_eq!(w[1].1 < w[0].1, w[1].0 < kd.value, "{w:?} {}", kd.value);
        }
        assert!(finite().count() > curve.len() * 9 / 10);
    }
}

/// Between its places the curve is what a refit finds there: fits with Kd held, started from the estimate.
#[test]
fn the_profile_between_its_places_is_that_of_refits() {
    let t = demo("finished").titration().clone();
    let analysis = analyse(&t);
    let fit = analysis.fit().unwrap();
    let evidence = RackEvidence::<OneClass>::new(&t, true).unwrap();
    let best = evidence.cost(&fit.theta);
    let figure = drawn(Plot::Profile, &t, &analysis);
    let mut looked_at = 0;
    for (x, y) in figure.curves[0]
        .points
        .iter()
        .step_by(23)
        .filter(|p| p.1.is_finite())
    {
        let mut start = fit.theta.clone();
        start[0] = x.ln();
        let held = solve(&evidence, &start, Some(0));
        assert_eq!(held.ended, Ended::Converged);
        let excess = held.cost - best;
        assert!(
            (y - excess).abs() < 0.01 * fit.cut,
            "at {x}: drawn {y}, refit {excess}"
        );
        looked_at += 1;
    }
    assert!(looked_at > 20, "{looked_at}");
}

/// Levels far below Kd: the readings say what Kd is above and nothing more.
#[test]
fn where_an_interval_is_open_the_profile_stays_under_the_cut() {
    let far = Law::OneClass(OneClass {
        kd: 400.0,
        sites: 20.0,
    });
    let t = rack(
        &far,
        &[(r#"concentration: "1 uM""#, r#"concentration: "300 uM""#)],
    );
    let analysis = analyse(&t);
    let fit = analysis.fit().unwrap();
    let kd = fit.estimate("kd_nm").unwrap();
    assert_eq!(kd.high, End::Open, "{kd:?}");
    let figure = drawn(Plot::Profile, &t, &analysis);
    let above = figure.curves[0]
        .points
        .iter()
        .filter(|p| p.0 > kd.value && p.1.is_finite());
    let above: Vec<f64> = above.map(|p| p.1).collect();
    assert!(above.len() > 50, "{}", above.len());
    assert!(above.iter().all(|y| *y < 0.9 * fit.cut), "{above:?}");
    assert!(
        figure.x_label.ends_with("no upper end"),
        "{}",
        figure.x_label
    );
    assert_eq!(
        points(&figure).len(),
        1 + usize::from(kd.low.value().is_some())
    );
    // What is read off the sites hangs in the air then, and Hill coordinates say so.
    let open = fit.estimate("sites_nm").unwrap().high == End::Open;
    let figure = drawn(Plot::Hill, &t, &analysis);
    assert_eq!(
        figure.y_label.contains("no upper end"),
        open,
        "{}",
        figure.y_label
    );
}

/// Two classes and Hill's isotherm as they are fitted: the same rules hold for the first of their parameters.
#[test]
fn the_other_laws_are_drawn_by_their_own_parameters() {
    let pins = [
        (Model::TwoClasses, TWO, "kd1_nm", "tighter Kd nM"),
        (Model::Hill, STEEP, "kh_nm", "Kh nM"),
    ];
    for (model, law, first, label) in pins {
        let mut t = rack(&law, &[]);
        t.protocol.numbers.model = Some(model);
        let analysis = analyse(&t);
        let fit = analysis.fit().unwrap();
        assert_eq!((fit.model, fit.estimates[0].name), (model, first));
        let figure = drawn(Plot::Profile, &t, &analysis);
        assert!(figure.x_label.starts_with(label), "{}", figure.x_label);
        let e = &fit.estimates[0];
        let ends: Vec<f64> = [e.low, e.high].into_iter().filter_map(End::value).collect();
        assert!(!ends.is_empty());
        let found = crossings(&figure.curves[0].points, fit.cut);
        assert_eq!(found.len(), ends.len());
        for (got, want) in found.iter().zip(&ends) {
            near("end", *got, *want, 1e-3);
        }
        // A place where the classes have changed places says nothing of the tighter one.
        if model == Model::TwoClasses {
            let mut swapped = analysis.clone();
            let Outcome::Fitted(fit) = &mut swapped.outcome else {
                panic!("no fit")
            };
            fit.profile.push(ProfilePlace {
                value: 7000.0,
                excess: 0.9 * fit.cut,
            });
            let again = drawn(Plot::Profile, &t, &swapped);
            assert_eq!(frame(&again), frame(&figure));
        }
        // As fitted the points are a hair off the curve: the variance has its say too.
        let figure = drawn(Plot::Isotherm, &t, &analysis);
        for p in points(&figure) {
            near("isotherm", p.y, fit.law.specific(p.x), 0.02);
        }
    }
}
