//! Every tube with its amounts: counts, bound, free, specific.

use super::style;
use crate::app::Desk;
use crate::assay::{Role, Side, Titration, Tube, observed};
use crate::report::values;
use crate::units::{fixed, short, significant};
use ratatui::Frame;
use ratatui::layout::Rect;
use ratatui::style::Style;
use ratatui::text::Line;
use ratatui::widgets::Paragraph;

pub(super) fn draw(frame: &mut Frame, area: Rect, app: &Desk) {
    let t = app.titration();
    let unit = t.protocol.display.concentration;
    let signal = t.protocol.separation.counted.is_signal();
    let (read, over) = if signal {
        ("signal", "")
    } else {
        ("counts", "min")
    };
    let head = format!(
        " vial  added {:<13} {read:>6} {over:>6}     bound       sd    free  specific",
        unit.word()
    );
    let head = Line::styled(head, style::quiet());
    let mut here = 0;
    let mut lines = Vec::new();
    let number = |nm: Option<f64>| nm.map_or("-".into(), |nm| significant(unit.from_nm(nm), 3));
    let decimals = app
        .analysed
        .as_ref()
        .map_or(3, |a| values::decimals(&a.analysis, unit));
    let amount = |nm: Option<f64>| nm.map_or("-".into(), |nm| fixed(unit.from_nm(nm), decimals));
    let results = app
        .analysed
        .as_ref()
        .map(|a| a.analysis.tubes.as_slice())
        .unwrap_or_default();
    for (i, tube) in t.tubes.iter().enumerate() {
        let at = app.bench.at == tube.no;
        if at {
            here = i;
        }
        let added = t
            .added_nm(tube)
            .or_else(|| t.standard_nm(tube))
            .map_or("-".into(), |nm| short(unit.from_nm(nm), 3));
        let role = role(t, tube);
        // The newest analysis may be of a moment ago; the readings themselves are always of now.
        let counts = observed(t, tube.no, true).or_else(|| observed(t, tube.no, false));
        let r = results
            .iter()
            .find(|r| r.tube.no == tube.no && counts.is_some());
        let m = r.and_then(|r| r.measured);
        // What an aliquot of a level or a standard holds stands under bound, as counted.
        let held = r
            .filter(|_| matches!(tube.role, Role::Added | Role::Standard))
            .and_then(|r| r.label);
        let lost = t.lost.contains_key(&tube.no);
        let text = format!(
            "{}{}{:>3} {:>6} {:<13} {:>6} {:>6} {:>9} {:>8} {:>7} {:>9}",
            if at { ">" } else { " " },
            t.mark_of(tube.no),
            tube.no,
            added,
            role,
            counts.map_or(if lost { "lost" } else { "." }.into(), |o| {
                super::rack::shown(t, o)
            }),
            counts
                .filter(|_| !signal)
                .map_or(String::new(), |o| fixed(o.minutes, 2)),
            amount(m.map(|m| m.bound_nm).or(held.map(|l| l.nm))),
            amount(m.map(|m| m.bound_sd_nm).or(held.map(|l| l.sd_nm))),
            number(r.and_then(|r| match tube.side {
                // What the ligand side holds is free.
                Some(Side::Ligand) => r.label.map(|l| l.nm),
                _ => r.free_nm,
            })),
            amount(r.and_then(|r| r.specific_nm)),
        );
        lines.push(Line::styled(
            text,
            if at { style::strong() } else { Style::new() },
        ));
    }
    let room = usize::from(area.height).saturating_sub(1).max(1);
    let top = here
        .saturating_sub(room / 2)
        .min(lines.len().saturating_sub(room));
    let mut shown = vec![head];
    shown.extend(lines.into_iter().skip(top).take(room));
    frame.render_widget(Paragraph::new(shown), area);
}

/// Role, replicate and side in thirteen columns.
fn role(t: &Titration, tube: &Tube) -> String {
    let word = t.word_for(tube.role);
    match tube.side {
        None => format!("{word} {}", tube.letter()),
        Some(side) => {
            let short = if word.len() > 5 { "nonsp" } else { word };
            let side = match side {
                Side::Protein => "prot",
                Side::Ligand => "lig",
            };
            format!("{short} {} {side}", tube.letter())
        }
    }
}
