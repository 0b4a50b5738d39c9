//! Hill coordinates: the logit of occupancy against free on a log axis.

use super::seen::{fitting, free_range, seen, suspects, totals, used};
use super::{Axis, Curve, Figure, Room, Side, Style, Word, plot_columns, plot_rows};
use crate::analysis::Analysis;
use crate::assay::Titration;
use crate::fit::{End, Fit};

/// How far from the law, in decades, a point may stretch the vertical axis.
const POINT_IN_SIGHT: f64 = 1.0;
/// Room above and below the marks.
const MARK_ROOM: f64 = 0.15;

/// `log10(S / (R - S))` of every total tube against its free label, and the law, with R all sites of the fitted law.
///
/// It crosses zero where half of the sites are taken; Hill's isotherm and one class are lines of slope `n` (algebra). What is
/// bound beyond the sites stands at the upper edge, nothing bound or less at the lower one. Dashed: 10 and 90 % of the sites.
pub(super) fn hill(
    titration: &Titration,
    analysis: &Analysis,
    fit: &Fit,
    columns: usize,
    rows: usize,
) -> Figure {
    let unit = titration.protocol.display.concentration;
    let shown = |nm: f64| unit.from_nm(nm);
    let sites = fit.law.sites();
    let logit = |_: f64, bound: f64| {
        if bound <= 0.0 {
            f64::NEG_INFINITY
        } else if bound >= sites {
            f64::INFINITY
        } else {
            (bound / (sites - bound)).log10()
        }
    };
    let law = |free: f64| logit(free, fit.law.specific(free));
    let seen = seen(titration, analysis);
    let series = vec![totals(&seen, |s| s.point(shown(s.at(0.0).0), logit))];

    let mark = 9f64.log10();
    let ends = free_range(&seen).map_or([-mark, mark], |(low, high)| [law(low), law(high)]);
    let [low, high] = [
        ends[0].min(-mark - MARK_ROOM),
        ends[1].max(mark + MARK_ROOM),
    ];
    let sight = low - POINT_IN_SIGHT..=high + POINT_IN_SIGHT;
    let points = used(&series).chain(suspects(&series));
    let y = Axis::linear(
        points
            .map(|p| p.y)
            .filter(|y| sight.contains(y))
            .chain([low, high]),
        Room::Rows(plot_rows(rows)),
    );
    let x = Axis::log(
        used(&series).map(|p| p.x),
        Room::Columns(plot_columns(columns, &y)),
    );
    let level = |y: f64| Curve {
        points: vec![(x.low, y), (x.high, y)],
        style: Style::Dashed,
    };
    let curves = vec![
        Curve {
            points: x
                .spread(4 * columns.max(8))
                .into_iter()
                .map(|x| (x, law(x / shown(1.0))))
                .collect(),
            style: Style::Solid,
        },
        level(mark),
        level(-mark),
    ];
    // The law rises from the lower left to the upper right, which leaves these ends of the marks free.
    let word = |y, text: &str, side| Word {
        y,
        text: text.into(),
        side,
    };
    let words = vec![
        word(mark, "90 %", Side::Left),
        word(-mark, "10 %", Side::Right),
    ];
    let name = "Hill: log10 S/(R - S)".to_string();
    let open = fit
        .of_isotherm()
        .iter()
        .any(|e| e.name.starts_with("sites") && e.high == End::Open);
    let y_label = if open {
        let long = format!("{name}   sites R have no upper end");
        fitting(columns, [long, "log10 S/(R - S), R open".into()])
    } else {
        name
    };
    Figure {
        x,
        y,
        x_label: format!("free {}", unit.word()),
        y_label,
        series,
        curves,
        words,
    }
}
