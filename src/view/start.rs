//! The start screen.

use super::{layers, style};
use crate::app::{Ask, Start, keys};
use crate::report::CAUTION;
use crate::units::clean;
use ratatui::Frame;
use ratatui::layout::{Constraint, Layout, Rect};
use ratatui::style::Style;
use ratatui::text::{Line, Span};
use ratatui::widgets::{Paragraph, Wrap};

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
            let lines = vec![
                Line::from(input.value().to_string()),
                Line::styled("Enter opens it   Esc leaves it", style::quiet()),
            ];
            let inner = layers::panel(frame, area, "the path of a titration", lines, fine);
            layers::cursor(frame, inner, input.visual_cursor());
        }
        Some(Ask::Demo) => {
            let lines = vec![
                Line::from("1  a rack half typed, to resume (invented)"),
                Line::from("2  a finished rack with one suspect tube (invented)"),
                Line::styled("any other key leaves it", style::quiet()),
            ];
            layers::panel(frame, area, "a demo", lines, fine);
        }
        Some(Ask::Lab(form)) => lab(frame, area, form, fine),
        Some(Ask::Help) => {
            let lines: Vec<Line> = keys::START
                .iter()
                .map(|b| Line::from(format!("{:<6} {}", b.shown, b.help)))
                .collect();
            layers::panel(frame, area, "keys   (any key closes)", lines, fine);
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
            for (i, r) in list.iter().enumerate() {
                let here = i == start.at;
                let title = style::shortened(&clean(&r.title), width.saturating_sub(44));
                let text = format!(
                    "{}{}  {title:<w$}  {}",
                    if here { ">" } else { " " },
                    i + 1,
                    clean(&r.state),
                    w = width.saturating_sub(44)
                );
                lines.push(Line::styled(
                    text,
                    if here { style::strong() } else { Style::new() },
                ));
                if here {
                    lines.push(Line::styled(
                        format!("     {}", clean(&r.path)),
                        style::quiet(),
                    ));
                }
            }
        }
    }
    lines
}

fn lab(frame: &mut Frame, area: Rect, form: &crate::app::Form, fine: bool) {
    let mut lines: Vec<Line> = form
        .fields
        .iter()
        .enumerate()
        .map(|(i, f)| {
            let mark = if i == form.at { ">" } else { " " };
            let error = f
                .error
                .as_deref()
                .map(|e| format!("  {}", clean(e)))
                .unwrap_or_default();
            Line::styled(
                format!("{mark} {:<18} {}{error}", f.spec.name, clean(f.value())),
                if i == form.at {
                    style::strong()
                } else {
                    Style::new()
                },
            )
        })
        .collect();
    lines.push(Line::default());
    lines.push(Line::from(form.current().map_or("", |f| f.spec.help)));
    lines.push(Line::styled(
        "Enter next, and keeps them from the last   Esc leaves them as they were",
        style::quiet(),
    ));
    let inner = layers::panel(frame, area, "the lab's settings", lines, fine);
    if let Some(f) = form.current() {
        layers::cursor(
            frame,
            Rect {
                y: inner.y + form.at as u16,
                ..inner
            },
            21 + f.input.visual_cursor(),
        );
    }
}
