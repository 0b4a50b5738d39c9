//! What lies over the bench.

use super::style;
use crate::app::{App, Layer, LineFor, ReasonFor, keys};
use crate::assay::Reason;
use crate::units::clean;
use ratatui::Frame;
use ratatui::layout::{Position, Rect};
use ratatui::text::Line;
use ratatui::widgets::{Block, Clear, Paragraph};

pub(super) fn draw(frame: &mut Frame, area: Rect, app: &App) {
    match app.layers.last() {
        None => {}
        Some(Layer::Reasons(what)) => reasons(frame, area, app, *what),
        Some(Layer::Line { what, input }) => {
            let title = match what {
                LineFor::OtherReason(_) => {
                    "the reason, in words (Enter with none is kept as other)".to_string()
                }
                LineFor::Note(tube) => format!("note on vial {tube}"),
            };
            let inner = panel(
                frame,
                area,
                &title,
                vec![
                    Line::from(input.value().to_string()),
                    Line::styled("Enter keeps it   Esc leaves it", style::quiet()),
                ],
                app,
            );
            let x = inner.x + (input.visual_cursor() as u16).min(inner.width.saturating_sub(1));
            frame.set_cursor_position(Position::new(x, inner.y));
        }
        Some(Layer::Help { top }) => help(frame, area, app, *top),
        Some(Layer::LeaveUnsaved) => {
            let text = vec![
                Line::from("The newest entries are NOT in the file."),
                Line::from("y leaves and loses them; any other key goes back to the bench."),
            ];
            panel(frame, area, "leave?", text, app);
        }
    }
}

/// A box in the middle, above the prompt; returns what is inside.
fn panel(frame: &mut Frame, area: Rect, title: &str, lines: Vec<Line>, app: &App) -> Rect {
    let longest = lines
        .iter()
        .map(Line::width)
        .max()
        .unwrap_or(0)
        .max(title.chars().count() + 2);
    let width = (longest as u16 + 4).clamp(40.min(area.width), area.width);
    let height = (lines.len() as u16 + 2).min(area.height);
    let x = area.x + (area.width - width) / 2;
    let y = area.y + (area.height - height) / 2;
    let place = Rect::new(x, y, width, height);
    let mut block = Block::bordered().title(format!(" {title} "));
    if !app.look.fine {
        block = block.border_set(ASCII);
    }
    let inner = block.inner(place);
    let inner = Rect {
        x: inner.x + 1,
        width: inner.width.saturating_sub(2),
        ..inner
    };
    frame.render_widget(Clear, place);
    frame.render_widget(block, place);
    frame.render_widget(Paragraph::new(lines), inner);
    inner
}

/// A border for terminals without box drawing.
const ASCII: ratatui::symbols::border::Set = ratatui::symbols::border::Set {
    top_left: "+",
    top_right: "+",
    bottom_left: "+",
    bottom_right: "+",
    vertical_left: "|",
    vertical_right: "|",
    horizontal_top: "-",
    horizontal_bottom: "-",
};

fn reasons(frame: &mut Frame, area: Rect, app: &App, what: ReasonFor) {
    let t = app.titration();
    let (tube, verb) = match what {
        ReasonFor::Suspect(tube, _) => (tube, "suspect"),
        ReasonFor::Lost(tube) => (tube, "lost"),
    };
    let name = t.tube(tube).map_or(String::new(), |x| clean(&t.name(x)));
    let mut lines: Vec<Line> = Reason::MENU
        .iter()
        .map(|(d, r)| Line::from(format!("{d}  {r}")))
        .collect();
    lines.push(Line::styled("0  leave it", style::quiet()));
    panel(frame, area, &format!("{verb}: {name}"), lines, app);
}

fn help(frame: &mut Frame, area: Rect, app: &App, top: u16) {
    let room = usize::from(area.height).saturating_sub(4);
    let mut lines = vec![Line::from(
        "digits and the decimal mark type a reading; the unit stands before the line",
    )];
    lines.extend(
        keys::BENCH
            .iter()
            .map(|b| Line::from(format!("{:<7} {}", b.shown, b.help))),
    );
    let over = lines.len().saturating_sub(room);
    let lines: Vec<Line> = lines
        .into_iter()
        .skip(usize::from(top).min(over))
        .take(room)
        .collect();
    panel(frame, area, "keys   (any other key closes)", lines, app);
}
