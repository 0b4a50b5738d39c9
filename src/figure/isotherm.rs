//! The isotherm: specific binding against free, with the fitted curve.

use super::seen::{Seen, fitting, seen, suspects, used};
use super::{
    Axis, Curve, Figure, Glyphs, PointGlyph, Room, Scale, Series, Style, plot_columns, plot_rows,
};
use crate::analysis::Analysis;
use crate::assay::{Role, Titration};

/// How far beyond the tubes used, as a share of what they reach, a suspect may stretch the vertical axis.
const SUSPECT_BELOW: f64 = -0.25;
const SUSPECT_ABOVE: f64 = 1.5;

/// The isotherm of a titration for a plot of this many columns and rows.
///
/// With a fit: specific binding of every total tube, `bound - ns x free`, with the error that the fit gives it (counting
/// and tube-to-tube scatter), and the fitted curve. Before there is one: bound as measured with its counting error, totals filled
/// and nonspecific hollow, and no curve.
pub fn isotherm(
    titration: &Titration,
    analysis: &Analysis,
    scale: Scale,
    columns: usize,
    rows: usize,
) -> Figure {
    let unit = titration.protocol.display.concentration;
    let shown = |nm: f64| unit.from_nm(nm);
    let fit = analysis.fit();
    let seen = seen(titration, analysis);
    let of = |glyph, role| Series {
        glyph,
        points: seen
            .iter()
            .filter(|s| s.role == role)
            .map(|s: &Seen| s.point(shown(s.at(0.0).0), |_, bound| shown(bound)))
            .collect(),
    };
    let mut series = vec![of(PointGlyph::Filled, Role::Total)];
    if fit.is_none() {
        series.push(of(PointGlyph::Hollow, Role::Nonspecific));
    }
    let heights = || used(&series).flat_map(|p| [p.y, p.y_high]);
    let most = heights().fold(0.0, f64::max);
    let near = SUSPECT_BELOW * most..=SUSPECT_ABOVE * most;
    let y = Axis::linear_from_zero(
        heights().chain(suspects(&series).map(|p| p.y).filter(|y| near.contains(y))),
        Room::Rows(plot_rows(rows)),
    );
    let room = Room::Columns(plot_columns(columns, &y));
    let free = || {
        let left = titration.protocol.concentration_left();
        let ladder = titration
            .levels
            .iter()
            .map(move |l| shown(l.added.base() * left));
        let empty = used(&series).next().is_none();
        used(&series)
            .map(|p| p.x)
            .chain(ladder.take(if empty { usize::MAX } else { 0 }))
    };
    let x = match scale {
        Scale::Linear => Axis::linear_from_zero(free(), room),
        Scale::Log10 => Axis::log(free(), room),
    };
    let curve = fit.map(|f| {
        let at = |x: f64| (x, shown(f.law.specific(x / shown(1.0))));
        Curve {
            // Counting may leave a tube with less free than none, where no law says anything.
            points: x
                .spread(4 * columns.max(8))
                .into_iter()
                .filter(|x| *x >= 0.0)
                .map(at)
                .collect(),
            style: Style::Solid,
        }
    });
    let y_label = match fit {
        Some(_) => format!("specific, {} in the tube", unit.word()),
        None => {
            let bound = format!("bound, {} in the tube", unit.word());
            let key = format!(
                "{bound}   {} total  {} nonspecific",
                PointGlyph::Filled.symbol(Glyphs::Braille),
                PointGlyph::Hollow.symbol(Glyphs::Braille),
            );
            fitting(columns, [key, bound])
        }
    };
    Figure {
        x,
        y,
        x_label: format!("free {}", unit.word()),
        y_label,
        series,
        curves: curve.into_iter().collect(),
        words: vec![],
    }
}
