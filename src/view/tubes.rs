//! Every tube with its amounts: counts, bound, free, specific.

use super::style;
use crate::app::Desk;
use crate::assay::observed;
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
    let head = format!(
        " vial  added {:<13} counts    min     bound       sd    free  specific",
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
            .map_or("-".into(), |nm| short(unit.from_nm(nm), 3));
        let role = format!("{} {}", tube.role, tube.letter());
        // The newest analysis may be of a moment ago; the readings themselves are always of now.
        let counts = observed(t, tube.no, true).or_else(|| observed(t, tube.no, false));
        let r = results
            .iter()
            .find(|r| r.tube.no == tube.no && counts.is_some());
        let m = r.and_then(|r| r.measured);
        let lost = t.lost.contains_key(&tube.no);
        let text = format!(
            "{}{}{:>3} {:>6} {:<13} {:>6} {:>6} {:>9} {:>8} {:>7} {:>9}",
            if at { ">" } else { " " },
            t.mark_of(tube.no),
            tube.no,
            added,
            role,
            counts.map_or(if lost { "lost" } else { "." }.into(), |o| fixed(
                o.counts, 0
            )),
            counts.map_or(String::new(), |o| fixed(o.minutes, 2)),
            amount(m.map(|m| m.bound_nm)),
            amount(m.map(|m| m.bound_sd_nm)),
            number(r.and_then(|r| r.free_nm)),
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
