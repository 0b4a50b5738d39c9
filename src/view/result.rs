//! The result: the page as it would be printed.

use super::{prompt, style, walk};
use crate::app::{Desk, keys, page};
use crate::units::clean;
use ratatui::Frame;
use ratatui::layout::{Constraint, Layout, Rect};
use ratatui::text::{Line, Span};
use ratatui::widgets::Paragraph;

pub(super) fn draw(frame: &mut Frame, area: Rect, app: &Desk) {
    let bars = prompt::bars(app);
    let [title, body, rule, warnings, said, hints] = Layout::vertical([
        Constraint::Length(1),
        Constraint::Min(3),
        Constraint::Length(1),
        Constraint::Length(bars.len() as u16),
        Constraint::Length(1),
        Constraint::Length(1),
    ])
    .areas(area);
    walk::draw_title(frame, title, app);
    let text = page(app).unwrap_or_else(|| "fitting ...".into());
    let all = text.lines().count();
    let room = usize::from(body.height);
    let lines: Vec<Line> = text
        .lines()
        .skip(app.top)
        .take(room)
        .map(|l| Line::from(l.to_string()))
        .collect();
    frame.render_widget(Paragraph::new(lines), body);
    style::rule(frame, rule, app.look.fine);
    frame.render_widget(Paragraph::new(bars), warnings);
    frame.render_widget(
        Paragraph::new(style::shortened(
            &format!(" {}", clean(&app.message.text)),
            usize::from(said.width),
        )),
        said,
    );
    let words: Vec<String> = keys::RESULT
        .iter()
        .filter(|b| !b.hint.is_empty())
        .map(|b| format!("{} {}", b.shown, b.hint))
        .collect();
    let place = format!(" {} of {all} ", (app.top + room).min(all));
    let left = format!(" {}  PgUp tubes", words.join("  "));
    let gap = usize::from(hints.width).saturating_sub(left.chars().count() + place.chars().count());
    let line = Line::from(vec![
        Span::styled(left, style::quiet()),
        Span::raw(" ".repeat(gap)),
        Span::styled(place, style::quiet()),
    ]);
    frame.render_widget(Paragraph::new(line), hints);
}
