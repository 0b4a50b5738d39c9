//! Bound over free against bound: one class of sites is a straight line.

use super::seen::{free_range, free_spread, seen, suspects, totals, used};
use super::{Axis, Curve, Figure, Point, Room, Style, plot_columns, plot_rows};
use crate::analysis::Analysis;
use crate::assay::Titration;
use crate::fit::Fit;

/// Where the law's own curve is drawn, on the log scale of free.
const CURVE_PLACES: usize = 600;
/// How far beyond what was measured and half taken the curve goes, in decades: to both axes, as far as eyes can tell.
const CURVE_BEYOND: i32 = 4;
/// The sites are in sight where they are at most this many times what is bound at most.
const SITES_IN_SIGHT: f64 = 2.5;
/// The most that an error bar, and a point, may stretch the vertical axis over what the law reaches among the tubes.
const BAR_IN_SIGHT: f64 = 1.6;
const POINT_IN_SIGHT: f64 = 2.5;

/// Specific binding over free, dimensionless, against specific binding, of every total tube, and the law.
///
/// For one class `S/F = (R - S)/Kd`: a line of slope `-1/Kd` that meets the axis of bound at the sites (algebra). An
/// error bar shows the ratio had the tube shown one standard deviation less or more, its free label less or more by the same.
/// Where no label is left free the ratio is beyond every axis.
pub(super) fn bound_over_free(
    titration: &Titration,
    analysis: &Analysis,
    fit: &Fit,
    columns: usize,
    rows: usize,
) -> Figure {
    let unit = titration.protocol.display.concentration;
    let shown = |nm: f64| unit.from_nm(nm);
    let ratio = |free: f64, bound: f64| {
        if free > 0.0 {
            bound / free
        } else {
            f64::INFINITY
        }
    };
    let seen = seen(titration, analysis);
    let series = vec![totals(&seen, |s| s.point(shown(s.at(0.0).1), ratio))];

    let law = |free: f64| fit.law.specific(free);
    let range = free_range(&seen);
    let among: Vec<f64> = free_spread(fit, range, 0, 50)
        .into_iter()
        .filter(|f| range.is_none_or(|(low, high)| (low..=high).contains(f)))
        .chain(range.map(|(low, _)| low))
        .map(|f| ratio(f, law(f)))
        .collect();
    let reached = among.iter().copied().fold(0.0, f64::max);
    let curve: Vec<(f64, f64)> = free_spread(fit, range, CURVE_BEYOND, CURVE_PLACES)
        .into_iter()
        .map(|f| (shown(law(f)), ratio(f, law(f))))
        .collect();

    let most = used(&series).map(|p| p.x).fold(0.0, f64::max);
    let sites = shown(fit.law.sites());
    let in_sight = (sites <= SITES_IN_SIGHT * most).then_some(sites);
    // Where the curve comes to without any label.
    let start = curve.first().map(|c| c.1);
    let start = start.filter(|y| *y <= BAR_IN_SIGHT * reached);
    // What lies farther off stands at the edge, and does not press the others together.
    let within = move |y: f64, times: f64| (-reached..=times * reached).contains(&y).then_some(y);
    let heights = used(&series).flat_map(|p| {
        let bar = within(p.y_high, BAR_IN_SIGHT);
        within(p.y, POINT_IN_SIGHT).into_iter().chain(bar)
    });
    let near = |p: &&Point| {
        (-0.5 * reached..=POINT_IN_SIGHT * reached).contains(&p.y)
            && (-0.5 * most..=SITES_IN_SIGHT * most).contains(&p.x)
    };
    let beside = || suspects(&series).filter(near);
    let y = Axis::linear_from_zero(
        heights
            .chain(beside().map(|p| p.y))
            .chain(among.iter().copied())
            .chain(start),
        Room::Rows(plot_rows(rows)),
    );
    let x = Axis::linear_from_zero(
        used(&series).chain(beside()).map(|p| p.x).chain(in_sight),
        Room::Columns(plot_columns(columns, &y)),
    );
    Figure {
        x,
        y,
        x_label: format!("specific bound {}", unit.word()),
        y_label: "bound/free against bound".into(),
        series,
        curves: vec![Curve {
            points: curve,
            style: Style::Solid,
        }],
        words: vec![],
    }
}
