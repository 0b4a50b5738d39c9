//! Tubes as the figures see them: measured, with the error that the fit gives them.

use super::{Mark, Point, PointGlyph, Series};
use crate::analysis::{Analysis, free, specific};
use crate::assay::{Measured, Role, Titration, TubeNo, volume_shift};
use crate::binding::Sticking;
use crate::fit::{Fit, FittedTube};
use std::collections::BTreeMap;

/// A tube that has an amount to show.
pub(super) struct Seen {
    /// What it is for.
    pub(super) role: Role,
    /// Whether the fit uses it.
    pub(super) mark: Mark,
    measured: Measured,
    /// One standard deviation of bound, in nM.
    sd: f64,
    sticking: Option<Sticking>,
    /// What is not bound is free: so it is but where both were counted.
    balance: bool,
}

impl Seen {
    /// Free and bound in nM as measured, and as they would be had the tube shown `sds` standard deviations more.
    ///
    /// With a fit, bound is specific binding, `bound - ns x free`; before there is one, nonspecific binding is included.
    pub(super) fn at(&self, sds: f64) -> (f64, f64) {
        let more = sds * self.sd;
        let moved = Measured {
            bound_nm: self.measured.bound_nm + more,
            free_nm: self.measured.free_nm - if self.balance { more } else { 0.0 },
            ..self.measured
        };
        let free = free(moved, self.sticking);
        let bound = match self.sticking {
            Some(sticking) => specific(moved, self.role, sticking),
            None => moved.bound_nm,
        };
        (free, bound)
    }

    /// A point whose height and error bar are `y` of free and bound one standard deviation down, as measured, and one up.
    pub(super) fn point(&self, x: f64, y: impl Fn(f64, f64) -> f64) -> Point {
        let [y_low, y, y_high] = [-1.0, 0.0, 1.0].map(|sds| {
            let (free, bound) = self.at(sds);
            y(free, bound)
        });
        Point {
            x,
            y,
            y_low,
            y_high,
            mark: self.mark,
        }
    }
}

/// Every tube of the rack with a reading, once a background is counted, in counting order.
///
/// With a fit the error is of its variance, counting and tube-to-tube scatter together, brought from counts to nM; before
/// that it is the counting error. The background's own error, which all tubes share, is not in the former.
pub(super) fn seen(titration: &Titration, analysis: &Analysis) -> Vec<Seen> {
    let fit = analysis.fit();
    let cells = titration.protocol.separation.counted.is_cell();
    let shift = volume_shift(&titration.protocol);
    let expected: BTreeMap<TubeNo, &FittedTube> = fit
        .into_iter()
        .flat_map(|f| &f.tubes)
        .map(|t| (t.tube, t))
        .collect();
    let sticks = titration.protocol.nonspecific.sticks;
    let sticking = fit.map(|f| f.sticking(sticks));
    let tubes = analysis.tubes.iter();
    tubes
        .filter_map(|t| {
            let measured = t.measured?;
            let fitted = expected.get(&t.tube.no);
            Some(Seen {
                role: t.tube.role,
                mark: mark(t.suspect.is_none()),
                measured,
                sd: fitted.map_or(measured.bound_sd_nm, |f| {
                    f.variance.sqrt() / (f.per_nm * shift)
                }),
                sticking,
                balance: !cells,
            })
        })
        .collect()
}

/// How a tube is marked.
pub(super) fn mark(used: bool) -> Mark {
    if used { Mark::Used } else { Mark::Suspect }
}

/// The points of the total tubes of a rack that has a fit.
pub(super) fn totals(seen: &[Seen], point: impl Fn(&Seen) -> Point) -> Series {
    let totals = seen.iter().filter(|s| s.role == Role::Total);
    Series {
        glyph: PointGlyph::Filled,
        points: totals.map(point).collect(),
    }
}

/// The points that the fit uses.
pub(super) fn used(series: &[Series]) -> impl Iterator<Item = &Point> {
    let points = series.iter().flat_map(|s| &s.points);
    points.filter(|p| p.mark == Mark::Used)
}

/// The points that the fit leaves out.
pub(super) fn suspects(series: &[Series]) -> impl Iterator<Item = &Point> {
    let points = series.iter().flat_map(|s| &s.points);
    points.filter(|p| p.mark == Mark::Suspect)
}

/// The lowest and the highest free concentration of the total tubes used, in nM; those without any are left out.
pub(super) fn free_range(seen: &[Seen]) -> Option<(f64, f64)> {
    seen.iter()
        .filter(|s| s.role == Role::Total && s.mark == Mark::Used)
        .map(|s| s.at(0.0).0)
        .filter(|f| *f > 0.0 && f.is_finite())
        .fold(None, |range, f| match range {
            None => Some((f, f)),
            Some((low, high)) => Some((f64::min(low, f), f64::max(high, f))),
        })
}

/// Free concentrations evenly spread on a log scale, `decades` below and above what was measured and half taken.
pub(super) fn free_spread(
    fit: &Fit,
    range: Option<(f64, f64)>,
    decades: i32,
    n: usize,
) -> Vec<f64> {
    let half = fit.law.half_taken();
    let (low, high) = range.map_or((half, half), |(l, h)| (l.min(half), h.max(half)));
    let (low, high) = (
        low.log10() - f64::from(decades),
        high.log10() + f64::from(decades),
    );
    let last = n.saturating_sub(1).max(1) as f64;
    (0..n)
        .map(|i| 10f64.powf(low + (high - low) * i as f64 / last))
        .collect()
}

/// The first of some texts that fits a number of columns, or the last of them.
pub(super) fn fitting<const N: usize>(columns: usize, texts: [String; N]) -> String {
    let shortest = texts.last().cloned().unwrap_or_default();
    let mut texts = texts.into_iter();
    texts
        .find(|t| t.chars().count() <= columns)
        .unwrap_or(shortest)
}
