//! What lies over the bench.

use super::style;
use crate::app::{Desk, Layer, LineFor, ReasonFor, Step, keys};
use crate::assay::Reason;
use crate::units::clean;
use ratatui::Frame;
use ratatui::layout::{Position, Rect};
use ratatui::text::Line;
use ratatui::widgets::{Block, Clear, Paragraph};

pub(super) fn draw(frame: &mut Frame, area: Rect, app: &Desk) {
    let fine = app.look.fine;
    match app.layers.last() {
        None => {}
        Some(Layer::Reasons(what)) => reasons(frame, area, app, *what),
        Some(Layer::Line { what, input }) => {
            let title = match what {
                LineFor::OtherReason(_) => {
                    "the reason, in words; Enter with none is kept as other".to_string()
                }
                LineFor::Note(tube) => format!("note on vial {tube}"),
                LineFor::Amend => "why the protocol is corrected".into(),
                LineFor::Checker => format!("checked by whom? digest {}", app.saved.digest),
                LineFor::Operator => format!("who is at the keyboard? now {}", clean(&app.who)),
            };
            let lines = vec![
                Line::from(input.value().to_string()),
                Line::styled("Enter keeps it   Esc leaves it", style::quiet()),
            ];
            let inner = panel(frame, area, &title, lines, fine);
            cursor(frame, inner, input.visual_cursor());
        }
        Some(Layer::Help { top }) => help(frame, area, app, *top),
        Some(Layer::Close) => {
            let (title, text) = match app.titration().closed {
                None => (
                    "close the titration?",
                    "Nothing is added to a closed titration until it is opened again.",
                ),
                Some(_) => (
                    "open it again?",
                    "The titration is closed; readings and flags can be added again.",
                ),
            };
            let lines = vec![
                Line::from(text),
                Line::from("y does it; any other key leaves it."),
            ];
            panel(frame, area, title, lines, fine);
        }
        Some(Layer::LeaveUnsaved) => {
            let text = vec![
                Line::from("The newest entries are NOT in the file."),
                Line::from("y leaves and loses them; any other key goes back to the bench."),
            ];
            panel(frame, area, "leave?", text, fine);
        }
    }
}

/// Puts the cursor into the first line of a panel.
pub(super) fn cursor(frame: &mut Frame, inner: Rect, column: usize) {
    let x = inner.x + (column as u16).min(inner.width.saturating_sub(1));
    frame.set_cursor_position(Position::new(x, inner.y));
}

/// A box in the middle, above the prompt; returns what is inside.
pub(super) fn panel(
    frame: &mut Frame,
    area: Rect,
    title: &str,
    lines: Vec<Line>,
    fine: bool,
) -> Rect {
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
    if !fine {
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

fn reasons(frame: &mut Frame, area: Rect, app: &Desk, what: ReasonFor) {
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
    panel(
        frame,
        area,
        &format!("{verb}: {name}"),
        lines,
        app.look.fine,
    );
}

fn help(frame: &mut Frame, area: Rect, app: &Desk, top: u16) {
    let room = usize::from(area.height).saturating_sub(2);
    let mut lines = Vec::new();
    if app.step == Step::Result {
        lines.extend(
            keys::RESULT
                .iter()
                .map(|b| Line::from(format!("{:<7} {}", b.shown, b.help))),
        );
        lines.push(Line::from("PgUp    back to the tubes"));
    } else {
        lines.push(Line::from(
            "digits and the decimal mark type a reading; its unit stands before it",
        ));
        lines.extend(
            keys::BENCH
                .iter()
                .map(|b| Line::from(format!("{:<7} {}", b.shown, b.help))),
        );
    }
    let over = lines.len().saturating_sub(room);
    let lines: Vec<Line> = lines
        .into_iter()
        .skip(usize::from(top).min(over))
        .take(room)
        .collect();
    panel(
        frame,
        area,
        "keys   (Up and Down move; any other key closes)",
        lines,
        app.look.fine,
    );
}
