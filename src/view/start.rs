//! The start screen.

use super::{form, layers, style};
use crate::app::{Ask, DEMOS, Start, keys};
use crate::report::CAUTION;
use crate::units::clean;
use ratatui::Frame;
use ratatui::layout::{Constraint, Layout, Rect};
use ratatui::style::Style;
use ratatui::text::{Line, Span};
use ratatui::widgets::{Paragraph, Wrap};

/// Columns of the state of a titration used lately.
const STATE: usize = 38;

pub(super) fn draw(frame: &mut Frame, area: Rect, start: &Start, fine: bool) {
    let [title, list, keys_area, said, rule, caution] = Layout::vertical([
        Constraint::Length(2),
        Constraint::Min(4),
        Constraint::Length(5),
        Constraint::Length(2),
        Constraint::Length(1),
        Constraint::Length(3),
    ])
    .areas(area);
    let head = Line::from(vec![
        Span::styled(" rackside", style::strong()),
        Span::styled(
            "   a ligand-binding titration, tube by tube",
            style::quiet(),
        ),
    ]);
    frame.render_widget(Paragraph::new(head), title);
    frame.render_widget(
        Paragraph::new(recents(start, usize::from(list.width))),
        list,
    );
    let rows: Vec<Line> = keys::START
        .iter()
        .take(4)
        .map(|b| Line::from(format!("  {}  {}", b.shown, b.help)))
        .collect();
    let mut rows = rows;
    rows.push(Line::styled("  ?  keys   q  leave", style::quiet()));
    frame.render_widget(Paragraph::new(rows), keys_area);
    let message = clean(&start.message.text);
    let message = Paragraph::new(format!(" {message}"))
        .style(if start.message.refusal {
            style::strong()
        } else {
            Style::new()
        })
        .wrap(Wrap { trim: false });
    frame.render_widget(message, said);
    style::rule(frame, rule, fine);
    frame.render_widget(Paragraph::new(CAUTION).wrap(Wrap { trim: true }), caution);
    match &start.ask {
        None => {}
        Some(Ask::Path(input)) => {
            let below = vec![Line::styled(
                "Enter opens it   Esc leaves it",
                style::quiet(),
            )];
            layers::ask(frame, area, "the path of a titration", input, below, fine);
        }
        Some(Ask::Demo) => {
            let each = DEMOS.iter().zip(1..);
            let mut lines: Vec<Line> = each
                .map(|((_, about), n)| Line::from(format!("{n}  {about}")))
                .collect();
            lines.push(Line::styled("any other key leaves it", style::quiet()));
            layers::panel(frame, area, "a demo (all invented)", lines, fine);
        }
        Some(Ask::Lab(form)) => lab(frame, area, form, fine),
        Some(Ask::Help { top }) => {
            let lines = keys::start_help(area.width);
            layers::scrolled(frame, area, &lines, *top, fine);
        }
    }
}

fn recents(start: &Start, width: usize) -> Vec<Line<'static>> {
    let mut lines = Vec::new();
    match &start.recents {
        None => lines.push(Line::styled(
            "  looking up the titrations used lately ...",
            style::quiet(),
        )),
        Some(list) if list.is_empty() => {
            lines.push(Line::from(
                "  no titration used lately; n begins one, d shows one",
            ));
        }
        Some(list) => {
            let room = width.saturating_sub(STATE + 6);
            for (i, r) in list.iter().enumerate() {
                let here = i == start.at;
                let title = style::shortened(&clean(&r.title), room);
                let text = format!(
                    "{}{}  {title:<room$}  {}",
                    if here { ">" } else { " " },
                    i + 1,
                    style::shortened(&clean(&r.state), STATE),
                );
                lines.push(Line::styled(
                    text,
                    if here { style::strong() } else { Style::new() },
                ));
                if here && clean(&r.state).chars().count() > STATE {
                    // What is wrong with a file stands at the end of what is said, behind its path.
                    lines.push(Line::from(format!(
                        "    {}",
                        style::ending(&clean(&r.state), width.saturating_sub(5))
                    )));
                } else if here {
                    lines.push(Line::styled(
                        format!(
                            "    {}",
                            style::ending(&clean(&r.path), width.saturating_sub(5))
                        ),
                        style::quiet(),
                    ));
                }
            }
        }
    }
    lines
}

fn lab(frame: &mut Frame, area: Rect, form: &crate::app::Form, fine: bool) {
    let width = usize::from(area.width).saturating_sub(4);
    let mut lines: Vec<Line> = form
        .fields
        .iter()
        .enumerate()
        .map(|(i, f)| form::field(f, i == form.at, width))
        .collect();
    let current = form.current();
    lines.push(Line::default());
    lines.push(Line::from(current.map_or("", crate::app::FieldState::help)));
    let wrong = current.and_then(|f| f.error.as_deref()).unwrap_or_default();
    lines.push(Line::styled(clean(wrong), style::strong()));
    lines.push(Line::styled(
        "Enter next, and keeps them from the last   Esc leaves them as they were",
        style::quiet(),
    ));
    let inner = layers::panel(frame, area, "the lab's settings", lines, fine);
    if let Some(column) = current.and_then(|f| form::cursor(f, width)) {
        let y = inner.y + form.at as u16;
        layers::cursor(frame, Rect { y, ..inner }, column);
    }
}
