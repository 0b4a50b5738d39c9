//! The isotherm: specific binding against free, with the fitted curve.

use super::{
    Axis, Curve, Figure, Mark, Point, PointGlyph, Room, Scale, Series, Style, plot_columns,
    plot_rows,
};
use crate::analysis::Analysis;
use crate::assay::{Role, Titration};

/// The isotherm of a titration for a plot of this many columns and rows.
///
/// With a fit: specific binding of every total tube with its counting error, `bound - ns x free`, and the fitted
/// curve. Before there is one: bound as measured, totals filled and nonspecific hollow, and no curve.
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
    let points = |role: Role| -> Vec<Point> {
        analysis
            .tubes
            .iter()
            .filter(|t| t.tube.role == role)
            .filter_map(|t| {
                let m = t.measured?;
                let y = if fit.is_some() {
                    t.specific_nm?
                } else {
                    m.bound_nm
                };
                let mark = if t.suspect.is_some() {
                    Mark::Suspect
                } else {
                    Mark::Used
                };
                let (y, sd) = (shown(y), shown(m.bound_sd_nm));
                Some(Point {
                    x: shown(t.free_nm?),
                    y,
                    y_low: y - sd,
                    y_high: y + sd,
                    mark,
                })
            })
            .collect()
    };
    let mut series = vec![Series {
        glyph: PointGlyph::Filled,
        points: points(Role::Total),
    }];
    if fit.is_none() {
        series.push(Series {
            glyph: PointGlyph::Hollow,
            points: points(Role::Nonspecific),
        });
    }
    let used = || {
        series
            .iter()
            .flat_map(|s| &s.points)
            .filter(|p| p.mark == Mark::Used)
    };
    let y = Axis::linear_from_zero(
        used().flat_map(|p| [p.y, p.y_high]),
        Room::Rows(plot_rows(rows)),
    );
    let room = Room::Columns(plot_columns(columns, &y));
    let free = || {
        let ladder = titration.levels.iter().map(|l| shown(l.added.base()));
        used()
            .map(|p| p.x)
            .chain(ladder.take(if used().next().is_some() {
                0
            } else {
                usize::MAX
            }))
    };
    let x = match scale {
        Scale::Linear => Axis::linear_from_zero(free(), room),
        Scale::Log10 => Axis::log(free(), room),
    };
    let curves = fit.map(|f| {
        let at = |x: f64| {
            let nm = x / shown(1.0);
            (x, shown(f.law.specific(nm)))
        };
        Curve {
            points: x.spread(4 * columns.max(8)).into_iter().map(at).collect(),
            style: Style::Solid,
        }
    });
    Figure {
        x,
        y,
        x_label: format!("free {}", unit.word()),
        y_label: format!(
            "{}, {} in the tube",
            if fit.is_some() { "specific" } else { "bound" },
            unit.word()
        ),
        series,
        curves: curves.into_iter().collect(),
    }
}
