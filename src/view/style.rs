//! Styles without colour: default foreground and background, bold, dim, reversed.

use ratatui::Frame;
use ratatui::layout::Rect;
use ratatui::style::{Modifier, Style};
use ratatui::text::Line;
use ratatui::widgets::Paragraph;

/// What the eye should find first.
pub(super) fn strong() -> Style {
    Style::new().add_modifier(Modifier::BOLD)
}

/// What may stay in the background.
pub(super) fn quiet() -> Style {
    Style::new().add_modifier(Modifier::DIM)
}

/// What the next key replaces.
pub(super) fn chosen() -> Style {
    Style::new().add_modifier(Modifier::REVERSED)
}

/// What must not be missed.
pub(super) fn alarm() -> Style {
    Style::new()
        .add_modifier(Modifier::REVERSED)
        .add_modifier(Modifier::BOLD)
}

/// A text cut to a number of characters, an ellipsis at its end.
pub(super) fn shortened(text: &str, most: usize) -> String {
    if text.chars().count() <= most {
        return text.into();
    }
    let mut cut: String = text.chars().take(most.saturating_sub(2)).collect();
    cut.push_str("..");
    cut
}

/// A line across.
pub(super) fn rule(frame: &mut Frame, area: Rect, fine: bool) {
    let glyph = if fine { "─" } else { "-" };
    let line = Line::styled(glyph.repeat(usize::from(area.width)), quiet());
    frame.render_widget(Paragraph::new(line), area);
}
