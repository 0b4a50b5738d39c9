//! Styles without colour: default foreground and background, bold, dim, reversed.

use ratatui::style::{Modifier, Style};

/// What the eye should find first.
pub(super) fn strong() -> Style {
    Style::new().add_modifier(Modifier::BOLD)
}

/// What may stay in the background.
pub(super) fn quiet() -> Style {
    Style::new().add_modifier(Modifier::DIM)
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
