//! The profile of the first parameter of the isotherm.

use super::{
    Axis, Curve, Figure, Mark, Point, PointGlyph, Room, Series, Side, Style, Word, plot_columns,
    plot_rows,
};
use crate::assay::Titration;
use crate::fit::{End, Estimate, Fit};
use crate::units::short;

/// The height of the plot over the cut.
const ROOF: f64 = 1.5;
/// How finely the ends of the curve are looked for.
const FINE: usize = 2000;

/// How much `-2 ln L`, prior terms included, rises when Kd (of two classes the tighter one, of Hill's isotherm Kh) is held
/// at each value and all else is fitted anew; dashed the cut, which the curve meets at the ends of the interval.
///
/// `None` without a profile to draw.
pub(super) fn profile(
    titration: &Titration,
    fit: &Fit,
    columns: usize,
    rows: usize,
) -> Option<Figure> {
    let unit = titration.protocol.display.concentration;
    let shown = |nm: f64| unit.from_nm(nm);
    let first = fit.estimates.first()?;
    let line = Smooth::of(fit, first)?;
    let (low, high) = line.ends(ROOF * fit.cut)?;

    let y = Axis::linear_from_zero([ROOF * fit.cut], Room::Rows(plot_rows(rows)));
    let x = Axis::log(
        [low, high].map(|ln| shown(ln.exp())),
        Room::Columns(plot_columns(columns, &y)),
    );
    let points = x.spread(8 * columns.max(8)).into_iter();
    let points = points.map(|x| (x, line.excess((x / shown(1.0)).ln())));
    let curves = vec![
        Curve {
            points: points.collect(),
            style: Style::Solid,
        },
        Curve {
            points: vec![(x.low, fit.cut), (x.high, fit.cut)],
            style: Style::Dashed,
        },
    ];
    let at = |value: f64, y: f64| Point {
        x: shown(value),
        y,
        y_low: f64::NAN,
        y_high: f64::NAN,
        mark: Mark::Used,
    };
    let ends = [first.low, first.high].into_iter().filter_map(End::value);
    let series = vec![
        Series {
            glyph: PointGlyph::Filled,
            points: vec![at(first.value, 0.0)],
        },
        Series {
            glyph: PointGlyph::Cross,
            points: ends.map(|end| at(end, fit.cut)).collect(),
        },
    ];
    let confidence = short(100.0 * titration.protocol.numbers.confidence, 3);
    Some(Figure {
        x,
        y,
        x_label: format!("{} {}{}", name(first), unit.word(), open(first)),
        y_label: "profile: rise of -2 ln L".into(),
        series,
        curves,
        words: vec![Word {
            y: fit.cut,
            text: format!("{confidence} %"),
            side: Side::Left,
        }],
    })
}

fn name(first: &Estimate) -> &'static str {
    match first.name {
        "kd1_nm" => "tighter Kd",
        "kh_nm" => "Kh",
        _ => "Kd",
    }
}

/// What is to be said of an end that the curve does not show.
fn open(first: &Estimate) -> &'static str {
    match (first.low, first.high) {
        (End::Failed, _) | (_, End::Failed) => ", interval failed",
        (End::Open, End::Open) => ", no end either way",
        (End::Open, _) => ", no lower end",
        (_, End::Open) => ", no upper end",
        _ => "",
    }
}

/// The logarithm somewhat beyond the upper end of an interval, where it has one.
fn beyond(first: &Estimate) -> f64 {
    let best = first.value.ln();
    first
        .high
        .value()
        .map_or(best, |high| best + 1.25 * (high.ln() - best))
}

/// A profile between its places: the square root of the excess, with the sign of the side it is on, is nearly straight
/// in the logarithm of the value, so that is what is interpolated.
///
/// A piecewise cubic that rises wherever the places do and passes each of them (Fritsch & Butland 1984, SIAM J Sci Stat
/// Comput 5:300; formula from memory).
struct Smooth {
    /// Logarithm of the value, signed root of the excess, slope.
    knots: Vec<(f64, f64, f64)>,
    best: f64,
}

impl Smooth {
    /// `None` for fewer than three places, or none on either side of the best.
    fn of(fit: &Fit, first: &Estimate) -> Option<Smooth> {
        let best = first.value.ln();
        let farthest = fit
            .estimate("kd2_nm")
            .map(|other| other.value.ln().max(beyond(first)));
        let mut places: Vec<(f64, f64)> = fit
            .profile
            .iter()
            .map(|p| {
                let ln = p.value.ln();
                let root = p.excess.max(0.0).sqrt();
                (ln, if ln < best { -root } else { root })
            })
            .filter(|(ln, root)| ln.is_finite() && root.is_finite())
            // Two classes held in the order of each other are the same again: that says nothing of the tighter one.
            .filter(|(ln, _)| farthest.is_none_or(|most| *ln <= most))
            .collect();
        places.sort_by(|a, b| a.0.total_cmp(&b.0).then(a.1.abs().total_cmp(&b.1.abs())));
        places.dedup_by(|later, kept| later.0 - kept.0 <= 1e-9);
        if places.len() < 3 {
            return None;
        }
        let secants: Vec<(f64, f64)> = places
            .windows(2)
            .map(|w| (w[1].0 - w[0].0, (w[1].1 - w[0].1) / (w[1].0 - w[0].0)))
            .collect();
        let slope = |i: usize| {
            let before = i.checked_sub(1).and_then(|i| secants.get(i)).copied();
            match (before, secants.get(i).copied()) {
                (Some((h0, d0)), Some((h1, d1))) if d0 * d1 > 0.0 => {
                    let (w0, w1) = (2.0 * h1 + h0, h1 + 2.0 * h0);
                    (w0 + w1) / (w0 / d0 + w1 / d1)
                }
                (Some(_), Some(_)) | (None, None) => 0.0,
                (Some((_, d)), None) | (None, Some((_, d))) => d,
            }
        };
        let knots = places
            .iter()
            .enumerate()
            .map(|(i, (ln, root))| (*ln, *root, slope(i)))
            .collect();
        Some(Smooth { knots, best })
    }

    /// The excess at the logarithm of a value; not a number beyond the places.
    fn excess(&self, ln: f64) -> f64 {
        let after = self.knots.partition_point(|k| k.0 < ln);
        let Some(&(u1, r1, m1)) = self.knots.get(after) else {
            return f64::NAN;
        };
        let Some(&(u0, r0, m0)) = after.checked_sub(1).and_then(|i| self.knots.get(i)) else {
            return if ln == u1 { r1 * r1 } else { f64::NAN };
        };
        // The cubic of Hermite on the unit interval.
        let h = u1 - u0;
        let t = (ln - u0) / h;
        let s = 1.0 - t;
        let root = s * s * ((1.0 + 2.0 * t) * r0 + h * t * m0)
            + t * t * ((1.0 + 2.0 * s) * r1 - h * s * m1);
        root * root
    }

    /// The logarithms between which the excess stays under a roof at both ends, the best in between.
    fn ends(&self, roof: f64) -> Option<(f64, f64)> {
        let (first, last) = (self.knots.first()?.0, self.knots.last()?.0);
        let at = |i: usize| first + (last - first) * i as f64 / FINE as f64;
        let mut under = (0..=FINE).map(at).filter(|ln| self.excess(*ln) <= roof);
        let low = under.next().map_or(self.best, |ln| ln.min(self.best));
        let high = under.next_back().map_or(self.best, |ln| ln.max(self.best));
        (high > low).then_some((low, high))
    }
}
