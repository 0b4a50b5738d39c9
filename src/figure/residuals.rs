//! Residuals of the fitted counts model.

use super::seen::{fitting, mark};
use super::{
    Axis, Curve, Figure, Glyphs, Point, PointGlyph, Room, Series, Style, plot_columns, plot_rows,
};
use crate::assay::{LevelNo, Role, Titration};
use crate::fit::{Fit, FittedTube};
use crate::units::fixed;
use std::collections::BTreeMap;

/// The axis holds residuals up to this, so that those about two keep their places; the others are named.
const IN_SIGHT: f64 = 6.0;
/// The least that it holds.
const LEAST: f64 = 2.5;
/// Where the dashed lines stand: about 95 of 100 residuals lie between them.
const TWO: f64 = 2.0;
/// Columns from level to level that let the two roles of a level stand side by side.
const ROLES_APART: f64 = 2.5;

/// `(counts - expected) / sqrt(variance)` of every tube with a reading against the label added, totals filled and all others
/// hollow; a residual is in standard deviations, so that a bar would say nothing.
///
/// Tubes of one level stand side by side, a column apart, as far as levels are far enough from each other.
pub(super) fn residuals(titration: &Titration, fit: &Fit, columns: usize, rows: usize) -> Figure {
    let unit = titration.protocol.display.concentration;
    let added: BTreeMap<LevelNo, f64> = titration
        .levels
        .iter()
        .filter_map(|l| Some((l.no, unit.from_nm(titration.level_nm(l.no)?))))
        .collect();
    let inside = fit.tubes.iter().map(|t| t.residual().abs());
    let reach = inside.filter(|r| *r <= IN_SIGHT).fold(LEAST, f64::max);
    let y = Axis::linear([-reach, reach], Room::Rows(plot_rows(rows)));
    let room = plot_columns(columns, &y);
    let x = Axis::log(widened(&fit.tubes, &added), Room::Columns(room));
    let places = side_by_side(&fit.tubes, &added, &x, room);
    let of = |glyph, totals| Series {
        glyph,
        points: fit
            .tubes
            .iter()
            .zip(&places)
            .filter(|(t, x)| (t.role == Role::Total) == totals && x.is_finite())
            .map(|(t, x)| Point {
                x: *x,
                y: t.residual(),
                y_low: f64::NAN,
                y_high: f64::NAN,
                mark: mark(t.used),
            })
            .collect(),
    };
    let series = vec![of(PointGlyph::Filled, true), of(PointGlyph::Hollow, false)];
    let level = |y, style| Curve {
        points: vec![(x.low, y), (x.high, y)],
        style,
    };
    let curves = vec![
        level(0.0, Style::Solid),
        level(TWO, Style::Dashed),
        level(-TWO, Style::Dashed),
    ];
    let [filled, hollow] =
        [PointGlyph::Filled, PointGlyph::Hollow].map(|g| g.symbol(Glyphs::Braille));
    let x_label = format!("added {}", unit.word());
    let more = |t: &FittedTube| !matches!(t.role, Role::Total | Role::Nonspecific);
    let (others, short) = if fit.tubes.iter().any(more) {
        ("others", "others")
    } else {
        ("nonspecific", "nonsp")
    };
    let x_label = fitting(
        columns,
        [
            format!("{x_label}   {filled} total  {hollow} {others}"),
            format!("{x_label}  {filled}total {hollow}{short}"),
            x_label,
        ],
    );
    let y_label = outside(&fit.tubes, &y, columns);
    Figure {
        x,
        y,
        x_label,
        y_label,
        series,
        curves,
        words: vec![],
    }
}

/// The levels with half a step more at either end, which the tubes side by side need.
fn widened(tubes: &[FittedTube], added: &BTreeMap<LevelNo, f64>) -> Vec<f64> {
    let mut levels: Vec<f64> = tubes
        .iter()
        .filter_map(|t| added.get(&t.level?).copied())
        .collect();
    levels.sort_by(f64::total_cmp);
    levels.dedup();
    if let [low, .., high] = levels[..] {
        let steps = (levels.len() - 1) as f64;
        let half = (high / low).powf(0.5 / steps);
        levels.extend([low / half, high * half]);
    }
    levels
}

/// What the vertical axis shows, and which tubes lie outside it.
fn outside(tubes: &[FittedTube], y: &Axis, columns: usize) -> String {
    let name = "residuals, sd".to_string();
    let beyond: Vec<&FittedTube> = tubes
        .iter()
        .filter(|t| !(y.low..=y.high).contains(&t.residual()))
        .collect();
    if beyond.is_empty() {
        return name;
    }
    let each = |between: &str| {
        let each = beyond.iter().map(|t| {
            let residual = fixed(t.residual(), 0);
            format!("vial {}{between}{residual}", t.tube)
        });
        each.collect::<Vec<_>>().join(", ")
    };
    let texts = [
        format!("{name}   outside: {}", each(" at ")),
        format!("{name}; {}", each(": ")),
        format!("{name}; {} outside", beyond.len()),
        name,
    ];
    fitting(columns, texts)
}

/// Where each tube stands along the axis: at its level, and a column from its neighbours of the same level as far as
/// levels are apart, for each tube or at least for each role.
fn side_by_side(
    tubes: &[FittedTube],
    added: &BTreeMap<LevelNo, f64>,
    x: &Axis,
    columns: usize,
) -> Vec<f64> {
    let mut places = vec![f64::NAN; tubes.len()];
    let mut order: Vec<usize> = (0..tubes.len()).collect();
    order.sort_by_key(|i| (tubes[*i].level, tubes[*i].role, tubes[*i].tube));
    let levels: Vec<(f64, &[usize])> = order
        .chunk_by(|a, b| tubes[*a].level == tubes[*b].level)
        .filter_map(|here| {
            let level = here.first().and_then(|i| added.get(&tubes[*i].level?))?;
            Some((x.fraction(*level)?, here))
        })
        .collect();
    let mut middles: Vec<f64> = levels.iter().map(|l| l.0).collect();
    middles.sort_by(f64::total_cmp);
    let nearest = middles.windows(2).map(|w| w[1] - w[0]).fold(1.0, f64::min);
    let most = levels.iter().map(|l| l.1.len()).max().unwrap_or(0);
    let column = 1.0 / columns.max(1) as f64;
    // A column more than tubes keeps levels apart.
    let each = nearest >= (most + 1) as f64 * column;
    let roles = nearest >= ROLES_APART * column;
    for (middle, here) in levels {
        for (n, i) in here.iter().enumerate() {
            let off = match (each, roles, tubes[*i].role) {
                (true, _, _) => n as f64 - (here.len() as f64 - 1.0) / 2.0,
                (_, true, Role::Total) => -0.5,
                (_, true, _) => 0.5,
                _ => 0.0,
            };
            places[*i] = x.at(middle + off * column);
        }
    }
    places
}
