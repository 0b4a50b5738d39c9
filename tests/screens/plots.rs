//! What the plots show, as numbers: points and curves against algebra and against independent balances and refits.

use crate::sitting::{Sitting, demo, example};
use rackside::analysis::{Analysis, analyse};
use rackside::assay::{Kept, Reading, ReadingId, Reason, Role, Titration, Tube};
use rackside::binding::{Hill, Law, OneClass, TwoClasses};
use rackside::figure::{
    Axis, Class, Figure, Frame, Glyphs, Mark, Plot, Point, PointGlyph, Scale, Style, isotherm,
    plot, plot_columns, render,
};
use rackside::fit::{Fit, Outcome};

pub const SIZE: (usize, usize) = (76, 20);

pub const ONE: Law = Law::OneClass(OneClass {
    kd: 0.5,
    sites: 0.04,
});
pub const TWO: Law = Law::TwoClasses(TwoClasses {
    first: OneClass {
        kd: 0.2,
        sites: 0.01,
    },
    second: OneClass {
        kd: 6.0,
        sites: 0.05,
    },
});
pub const STEEP: Law = Law::Hill(Hill {
    kh: 0.7,
    sites: 0.03,
    n: 1.6,
});
const NS: f64 = 0.02;
/// Background in cpm.
const BLANK: f64 = 26.0;

const TO_FILTER: (&str, &str) = ("sticks: ToPreparation", "sticks: ToFilter");

/// Counts of a tube without any error, by a balance solved here by halving.
fn exact(t: &Titration, tube: &Tube, law: &Law) -> f64 {
    let p = &t.protocol;
    let minutes = p.minutes_for(tube.role);
    let Some(added) = t.added_nm(tube) else {
        return BLANK * minutes;
    };
    let unlabelled = match tube.role {
        Role::Nonspecific => p.nonspecific.concentration.base(),
        _ => 0.0,
    };
    let all = added + unlabelled;
    let stuck = match p.nonspecific.sticks {
        rackside::assay::Sticks::ToPreparation => 1.0 + NS,
        rackside::assay::Sticks::ToFilter => 1.0,
    };
    let (mut low, mut high) = (0.0, all);
    for _ in 0..200 {
        let mid = 0.5 * (low + high);
        if stuck * mid + law.specific(mid) < all {
            low = mid;
        } else {
            high = mid;
        }
    }
    let bound = (law.specific(low) + NS * low) * added / all;
    minutes * (BLANK + p.counts_per_fmol() * 1000.0 * p.incubation.volume.base() * bound)
}

fn keep(t: &mut Titration, tube: &Tube, counts: f64, suspect: bool) {
    let kept = Kept {
        id: ReadingId(tube.no.0, 0),
        reading: Reading::counts(
            format!("{counts}"),
            counts,
            t.protocol.minutes_for(tube.role),
        ),
        suspect: suspect.then(|| Reason::NumbersAlone.into()),
    };
    t.kept.insert(tube.no, vec![kept]);
}

/// Keeps so many times the counts of a tube without any error.
fn times(t: &mut Titration, tube: &Tube, law: &Law, factor: f64, suspect: bool) {
    let counts = factor * exact(t, tube, law);
    keep(t, tube, counts, suspect);
}

/// A rack read without any error.
pub fn rack(law: &Law, changes: &[(&str, &str)]) -> Titration {
    let mut t = example(changes);
    for tube in t.tubes.clone() {
        let counts = exact(&t, &tube, law);
        keep(&mut t, &tube, counts, false);
    }
    t
}

/// An analysis whose fit has found exactly this law.
fn told(t: &Titration, law: Law) -> Analysis {
    let mut analysis = analyse(t);
    let Outcome::Fitted(fit) = &mut analysis.outcome else {
        panic!("no fit")
    };
    fit.law = law;
    fit.estimates
        .iter_mut()
        .filter(|e| e.name == "ns")
        .for_each(|e| e.value = NS);
    analysis
}

pub fn drawn(which: Plot, t: &Titration, analysis: &Analysis) -> Figure {
    plot(which, t, analysis, Scale::Log10, SIZE.0, SIZE.1).unwrap()
}

pub fn points(figure: &Figure) -> Vec<Point> {
    figure
        .series
        .iter()
        .flat_map(|s| s.points.clone())
        .collect()
}

#[track_caller]
pub fn near(what: &str, got: f64, want: f64, relative: f64) {
    let off = (got - want).abs();
    assert!(
        off <= relative * want.abs().max(1e-3),
        "{what}: got {got}, want {want}"
    );
}

fn logit(law: &Law, specific: f64) -> f64 {
    (specific / (law.sites() - specific)).log10()
}

#[test]
fn a_rack_without_error_lies_on_its_curve_in_every_view() {
    for law in [ONE, TWO, STEEP] {
        for changes in [&[][..], &[TO_FILTER][..]] {
            let t = rack(&law, changes);
            let analysis = told(&t, law);
            for scale in [Scale::Linear, Scale::Log10] {
                let figure = isotherm(&t, &analysis, scale, SIZE.0, SIZE.1);
                assert_eq!(points(&figure).len(), 16);
                let curve = figure.curves[0].points.iter().copied();
                for (x, y) in curve.chain(points(&figure).iter().map(|p| (p.x, p.y))) {
                    near("isotherm", y, law.specific(x), 1e-9);
                }
            }
            let figure = drawn(Plot::BoundOverFree, &t, &analysis);
            assert_eq!(points(&figure).len(), 16);
            let curve = figure.curves[0].points.iter().copied();
            for (x, y) in curve.chain(points(&figure).iter().map(|p| (p.x, p.y))) {
                near("bound/free", law.specific(x / y), x, 1e-9);
            }
            let figure = drawn(Plot::Hill, &t, &analysis);
            assert_eq!(points(&figure).len(), 16);
            let curve = figure.curves[0].points.iter().copied();
            for (x, y) in curve.chain(points(&figure).iter().map(|p| (p.x, p.y))) {
                near("Hill", y, logit(&law, law.specific(x)), 1e-9);
            }
        }
    }
}

/// As fitted, and not as told: the levels' dilution errors and the CV have their say, and there is nothing for them to say.
#[test]
fn the_residuals_of_a_rack_without_error_are_nothing() {
    let t = rack(&ONE, &[]);
    let analysis = analyse(&t);
    let figure = drawn(Plot::Residuals, &t, &analysis);
    assert_eq!(points(&figure).len(), 32);
    for p in points(&figure) {
        assert!(p.y.abs() < 0.05, "{p:?}");
    }
    // One tube is one and a half times what it should be.
    let mut t = t;
    let tube = t.tubes[9];
    times(&mut t, &tube, &ONE, 1.5, false);
    let analysis = analyse(&t);
    let fitted = analysis.fit().unwrap().tubes.clone();
    let figure = drawn(Plot::Residuals, &t, &analysis);
    let highest = points(&figure).iter().map(|p| p.y).fold(0.0, f64::max);
    let of_tube = fitted.iter().find(|f| f.tube == tube.no).unwrap();
    near(
        "residual",
        highest,
        (of_tube.counts - of_tube.expected) / of_tube.variance.sqrt(),
        1e-12,
    );
    // The lines are where they should be, and the roles can be told apart.
    let level = |n: usize| {
        figure.curves[n]
            .points
            .iter()
            .map(|p| p.1)
            .collect::<Vec<_>>()
    };
    assert_eq!(
        [level(0), level(1), level(2)],
        [[0.0; 2], [2.0; 2], [-2.0; 2]]
    );
    assert_eq!(figure.curves[0].style, Style::Solid);
    assert_eq!([1, 2].map(|n| figure.curves[n].style), [Style::Dashed; 2]);
    let glyphs: Vec<PointGlyph> = figure.series.iter().map(|s| s.glyph).collect();
    assert_eq!(glyphs, [PointGlyph::Filled, PointGlyph::Hollow]);
}

/// Tubes stand at their level, to two columns, and none of a level in the column of another of it.
#[test]
fn residuals_stand_side_by_side_at_their_level() {
    let t = demo("finished").titration().clone();
    let analysis = analyse(&t);
    let fit = analysis.fit().unwrap();
    for (columns, apart) in [(27, false), (76, true)] {
        let figure = plot(Plot::Residuals, &t, &analysis, Scale::Log10, columns, 20).unwrap();
        let room = plot_columns(columns, &figure.y) as f64;
        let column = |x: f64| figure.x.fraction(x).unwrap() * room;
        for (series, role) in figure.series.iter().zip([Role::Total, Role::Nonspecific]) {
            let tubes: Vec<_> = fit.tubes.iter().filter(|f| f.role == role).collect();
            assert_eq!(tubes.len(), series.points.len());
            for (f, p) in tubes.iter().zip(&series.points) {
                let added = t.level(f.level.unwrap()).unwrap().added.base();
                assert!((column(p.x) - column(added)).abs() < 2.0, "{f:?} {p:?}");
            }
        }
        for level in &t.levels {
            let middle = column(level.added.base());
            let here = points(&figure);
            let mut here: Vec<f64> = here.iter().map(|p| column(p.x)).collect();
            here.retain(|x| (x - middle).abs() < if apart { 2.0 } else { 0.6 });
            here.sort_by(f64::total_cmp);
            here.dedup_by(|a, b| (*a - *b).abs() < 0.5);
            assert_eq!(here.len(), if apart { 4 } else { 2 }, "level {}", level.no);
        }
    }
}

/// `S/F = (R - S)/Kd` (algebra).
#[test]
fn one_class_is_a_line_that_meets_the_axis_of_bound_at_the_sites() {
    let t = rack(&ONE, &[]);
    let figure = drawn(Plot::BoundOverFree, &t, &told(&t, ONE));
    let curve = &figure.curves[0].points;
    for w in curve.windows(60) {
        let slope = (w[59].1 - w[0].1) / (w[59].0 - w[0].0);
        near("slope", slope, -1.0 / 0.5, 1e-6);
    }
    let (first, last) = (curve[0], curve[curve.len() - 1]);
    let dot = |axis: &Axis, value: f64| axis.fraction(value).unwrap();
    assert!((dot(&figure.x, last.0) - dot(&figure.x, 0.04)).abs() < 0.001);
    assert!(dot(&figure.y, last.1) < 0.001);
    assert!(dot(&figure.x, first.0) < 0.001);
    near("without label", first.1, 0.04 / 0.5, 1e-3);
    // Both ends are on the axes.
    assert!(figure.x.high >= 0.04 && figure.y.high >= 0.04 / 0.5);
}

/// The logit of occupancy is `n (log10 F - log10 Kh)` for Hill's isotherm, and `n = 1` for one class (algebra).
#[test]
fn hill_coordinates_cross_zero_at_kd_with_slope_n() {
    for (law, half, n) in [(ONE, 0.5, 1.0), (STEEP, 0.7, 1.6)] {
        let t = rack(&law, &[]);
        let figure = drawn(Plot::Hill, &t, &told(&t, law));
        let curve = &figure.curves[0].points;
        let crossing = curve
            .windows(2)
            .find(|w| w[0].1 < 0.0 && w[1].1 >= 0.0)
            .unwrap();
        assert!(crossing[0].0 < half && half <= crossing[1].0 * (1.0 + 1e-9));
        for w in curve.windows(2) {
            let slope = (w[1].1 - w[0].1) / (w[1].0 / w[0].0).log10();
            near("slope", slope, n, 1e-6);
        }
        // The marks stand where 10 and 90 % of the sites are taken.
        let half_way = |occupancy: f64| half * (occupancy / (1.0 - occupancy)).powf(1.0 / n);
        for (mark, occupancy) in [(1, 0.9), (2, 0.1)] {
            let y = figure.curves[mark].points[0].1;
            near(
                "mark",
                y,
                logit(&law, law.specific(half_way(occupancy))),
                1e-9,
            );
            assert_eq!(figure.curves[mark].style, Style::Dashed);
            assert!(figure.y.low < y && y < figure.y.high);
        }
        assert_eq!(figure.words[0].text, "90 %");
        near("word", figure.words[0].y, 0.9542425094393249, 1e-12);
    }
}

pub fn frame(figure: &Figure) -> Frame {
    render(figure, SIZE.0, SIZE.1, Glyphs::Braille)
}

/// The glyph in the cell of a point, and whether it stands in the uppermost or the lowest row of the plot.
fn seen(figure: &Figure, p: &Point) -> (char, bool, bool) {
    let frame = frame(figure);
    let left = SIZE.0 - plot_columns(SIZE.0, &figure.y);
    let rows = frame
        .lines()
        .position(|l| l[left - 1].symbol == '└')
        .unwrap();
    let place = |axis: &Axis, v: f64| axis.fraction(v).unwrap().clamp(0.0, 1.0);
    let dot = |place: f64, n: usize| (place * (n - 1) as f64).round() as usize;
    let column = left + dot(place(&figure.x, p.x), 2 * (SIZE.0 - left)) / 2;
    let row = 1 + dot(1.0 - place(&figure.y, p.y), 4 * (rows - 1)) / 4;
    let cell = frame.cell(column, row).unwrap();
    assert!(
        matches!(cell.class, Class::Point(_) | Class::Suspect),
        "{}",
        frame.text()
    );
    (cell.symbol, row == 1, row == rows - 1)
}

#[test]
fn points_without_a_place_stand_at_the_edge_and_none_is_dropped() {
    let law = ONE;
    let mut t = rack(&law, &[]);
    let totals: Vec<Tube> = t
        .tubes
        .iter()
        .filter(|x| x.role == Role::Total)
        .copied()
        .collect();
    // At the top more than all sites, at the bottom less than the background, in the middle a suspect.
    times(&mut t, &totals[15], &law, 1.3, false);
    times(&mut t, &totals[0], &law, 0.2, false);
    times(&mut t, &totals[7], &law, 0.7, true);
    let analysis = told(&t, law);
    for which in [Plot::Isotherm, Plot::BoundOverFree, Plot::Hill] {
        let figure = drawn(which, &t, &analysis);
        assert_eq!(points(&figure).len(), 16);
        assert_eq!(figure.without_place(), 0);
    }
    let figure = drawn(Plot::Hill, &t, &analysis);
    let all = points(&figure);
    assert_eq!(all[15].y, f64::INFINITY);
    assert_eq!(seen(&figure, &all[15]), ('^', true, false));
    assert_eq!(all[0].y, f64::NEG_INFINITY);
    assert_eq!(seen(&figure, &all[0]), ('v', false, true));
    assert_eq!(all[7].mark, Mark::Suspect);
    assert_eq!(seen(&figure, &all[7]).0, 'x');
    assert_eq!(all.iter().filter(|p| p.mark == Mark::Suspect).count(), 1);

    let figure = drawn(Plot::BoundOverFree, &t, &analysis);
    let all = points(&figure);
    assert!(all[15].x > law.sites() && all[0].y < 0.0);
    assert_eq!(seen(&figure, &all[7]).0, 'x');

    // A tube that shows more than was added: no label is left free, and the ratio is beyond every axis.
    times(&mut t, &totals[2], &law, 20.0, false);
    let figure = drawn(Plot::BoundOverFree, &t, &told(&t, law));
    let all = points(&figure);
    assert_eq!(all[2].y, f64::INFINITY);
    assert_eq!(seen(&figure, &all[2]), ('^', true, false));
    assert!(
        figure.y.high < 0.3,
        "one tube does not press the others down"
    );

    let figure = drawn(Plot::Residuals, &t, &analyse(&t));
    assert_eq!(points(&figure).len(), 32);
}

/// Bars are one standard deviation of the fitted counts, brought to each view by the algebra of one tube; before
/// there is a fit, the counting error of gross counts and background.
#[test]
fn error_bars_are_those_of_the_fitted_counts() {
    let t = demo("finished").titration().clone();
    let analysis = analyse(&t);
    let fit = analysis.fit().unwrap();
    let ns = fit.value("ns");
    let nm = per_nm(&t);
    let blank = analysis.background.unwrap().cpm();
    let views = [Plot::Isotherm, Plot::BoundOverFree, Plot::Hill].map(|w| drawn(w, &t, &analysis));
    let totals: Vec<_> = fit_order(&t, fit);
    assert_eq!(totals.len(), 16);
    for (n, f) in totals.iter().enumerate() {
        let added = t.level(f.level.unwrap()).unwrap().added.base();
        let of = |counts: f64| {
            let bound = (counts / 2.0 - blank) / nm;
            let free = match t.protocol.nonspecific.sticks {
                rackside::assay::Sticks::ToPreparation => added - bound,
                rackside::assay::Sticks::ToFilter => (added - bound) / (1.0 - ns),
            };
            let specific = bound - ns * free;
            let logit = if specific <= 0.0 {
                f64::NEG_INFINITY
            } else if specific >= fit.law.sites() {
                f64::INFINITY
            } else {
                (specific / (fit.law.sites() - specific)).log10()
            };
            [specific, specific / free, logit]
        };
        let sd = f.variance.sqrt();
        let [low, mid, high] = [-sd, 0.0, sd].map(|d| of(f.counts + d));
        for (view, figure) in views.iter().enumerate() {
            let p = points(figure)[n];
            for (got, want) in [
                (p.y_low, low[view]),
                (p.y, mid[view]),
                (p.y_high, high[view]),
            ] {
                if want.is_finite() {
                    near("bar", got, want, 1e-9);
                } else {
                    assert_eq!(got, want);
                }
            }
        }
    }
    let mut early = Sitting::fresh(&[]);
    early.types("267\n227\n210\n56\n");
    let t = early.desk().titration().clone();
    let analysis = analyse(&t);
    assert!(analysis.fit().is_none());
    let p = points(&drawn(Plot::Isotherm, &t, &analysis))[0];
    let sd = (227.0_f64 / 4.0 + 267.0 / 100.0).sqrt() / per_nm(&t);
    near("counting error", p.y_high - p.y, sd, 1e-9);
    near("counting error", p.y - p.y_low, sd, 1e-9);
}

fn per_nm(t: &Titration) -> f64 {
    t.protocol.counts_per_fmol() * 1000.0 * t.protocol.incubation.volume.base()
}

/// The total tubes of a fit in counting order.
fn fit_order<'f>(t: &Titration, fit: &'f Fit) -> Vec<&'f rackside::fit::FittedTube> {
    t.tubes
        .iter()
        .filter(|x| x.role == Role::Total)
        .filter_map(|x| fit.tubes.iter().find(|f| f.tube == x.no))
        .collect()
}

#[test]
fn the_unit_of_the_protocol_is_that_of_every_axis() {
    let t = rack(&ONE, &[]);
    let mut pm = t.clone();
    pm.protocol.display.concentration = rackside::assay::DisplayUnit::pM;
    let (of_nm, of_pm) = (analyse(&t), analyse(&pm));
    for which in Plot::ALL {
        let [nm, pm] = [drawn(which, &t, &of_nm), drawn(which, &pm, &of_pm)];
        assert!(
            nm.x_label.contains("nM") && pm.x_label.contains("pM"),
            "{which:?}"
        );
        let by_y = if which == Plot::Isotherm { 1e3 } else { 1.0 };
        for (a, b) in points(&nm).iter().zip(points(&pm)) {
            near("x", b.x, 1e3 * a.x, 1e-9);
            near("y", b.y, by_y * a.y, 1e-9);
        }
        let ends = |f: &Figure| {
            let all = f.curves[0].points.iter().copied();
            all.filter(|p| p.0.is_finite() && p.1.is_finite())
                .collect::<Vec<_>>()
        };
        for (a, b) in ends(&nm).iter().zip(ends(&pm)) {
            near("curve x", b.0, 1e3 * a.0, 1e-6);
            near("curve y", b.1, by_y * a.1, 1e-6);
        }
    }
}

#[test]
fn a_suspect_near_the_others_is_in_sight() {
    let mut t = rack(&ONE, &[]);
    let top = *t.tubes.iter().rfind(|x| x.role == Role::Total).unwrap();
    times(&mut t, &top, &ONE, 1.06, true);
    let analysis = told(&t, ONE);
    for which in [Plot::Isotherm, Plot::BoundOverFree] {
        let figure = drawn(which, &t, &analysis);
        let p = points(&figure)[15];
        assert_eq!(
            (p.mark, seen(&figure, &p).0),
            (Mark::Suspect, 'x'),
            "{which:?}"
        );
    }
    // One far away does not press the others down.
    times(&mut t, &top, &ONE, 9.0, true);
    let figure = drawn(Plot::Isotherm, &t, &told(&t, ONE));
    assert!(figure.y.high < 0.06, "{}", figure.y.high);
    assert_eq!(seen(&figure, &points(&figure)[15]).0, '^');
}

#[test]
fn d_goes_round_the_plots_and_the_screen_says_which() {
    let mut s = Sitting::demo("finished");
    let labels = [
        "bound/free against bound",
        "Hill: log10 S/(R - S)",
        "residuals, sd",
        "profile: rise of -2 ln L",
        "specific, nM in the tube",
    ];
    for (label, which) in labels
        .into_iter()
        .zip(Plot::ALL.into_iter().cycle().skip(1))
    {
        s.types("d");
        assert_eq!(s.desk().look.plot, which);
        assert_eq!(s.said(), format!("the plot shows: {}", which.words()));
        assert!(s.text().contains(label), "{label}:\n{}", s.text());
        let linear = !s.desk().look.log_axis;
        s.types("a");
        assert_eq!(s.refused(), which != Plot::Isotherm);
        assert_eq!(s.desk().look.log_axis, linear == (which == Plot::Isotherm));
    }
    s.types("vvd");
    assert_eq!(
        s.said(),
        "the plot shows: bound/free against bound; v brings it into sight"
    );
    s.types("vdddd");
    // A letter in a number is a slip there too.
    s.types("12d");
    assert_eq!(s.desk().look.plot, Plot::Isotherm);
}

#[test]
fn too_early_is_said_in_words_and_nothing_is_drawn() {
    let mut s = Sitting::fresh(&[]);
    s.types("267\n227\n210\n56\n");
    let t = s.desk().titration().clone();
    let analysis = analyse(&t);
    for which in Plot::ALL {
        match plot(which, &t, &analysis, Scale::Log10, SIZE.0, SIZE.1) {
            Ok(_) => assert_eq!(which, Plot::Isotherm),
            Err(says) => {
                assert!(says.starts_with(which.words()), "{says}");
                assert!(says.contains("total tubes at 3 levels (now 1)"), "{says}");
            }
        }
    }
    for _ in 0..4 {
        s.types("d");
        let text = s.text();
        assert!(
            text.contains("too early, still wanted:") && text.contains("- total tubes at 3"),
            "{text}"
        );
        assert!(!text.contains('└'), "{text}");
    }
    // A fit whose intervals were not asked for has no profile.
    let t = demo("finished").titration().clone();
    let mut analysis = analyse(&t);
    if let Outcome::Fitted(fit) = &mut analysis.outcome {
        fit.profile.clear();
    }
    let says = plot(Plot::Profile, &t, &analysis, Scale::Log10, SIZE.0, SIZE.1).unwrap_err();
    assert!(says.contains("needs an interval"), "{says}");
    analysis.outcome = Outcome::NoConvergence;
    let says = plot(Plot::Hill, &t, &analysis, Scale::Log10, SIZE.0, SIZE.1).unwrap_err();
    assert!(says.contains("none was found"), "{says}");
}
