//! Styles without colour: default foreground and background, bold, dim, reversed.

use crate::units::clean;
use ratatui::Frame;
use ratatui::layout::Rect;
use ratatui::style::{Modifier, Style};
use ratatui::text::Line;
use ratatui::widgets::Paragraph;
use tui_input::Input;
use unicode_width::{UnicodeWidthChar, UnicodeWidthStr};

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

/// As many characters as fill a number of columns.
fn fitting(chars: impl Iterator<Item = char>, columns: usize) -> Vec<char> {
    let mut left = columns;
    chars
        .take_while(|c| {
            let width = c.width().unwrap_or(0);
            let fits = width <= left;
            left = left.saturating_sub(width);
            fits
        })
        .collect()
}

/// A text cut to a number of columns, two points at its end.
pub(super) fn shortened(text: &str, most: usize) -> String {
    if text.width() <= most {
        return text.into();
    }
    let cut = fitting(text.chars(), most.saturating_sub(2));
    cut.into_iter().chain("..".chars()).take(most).collect()
}

/// A text cut to its last columns, two points before them: of a path the end says most.
pub(super) fn ending(text: &str, most: usize) -> String {
    if text.width() <= most {
        return text.into();
    }
    let cut = fitting(text.chars().rev(), most.saturating_sub(2));
    "..".chars().chain(cut.into_iter().rev()).collect()
}

/// The part around the cursor of a line that is being typed, and the column of the cursor in it. `<` and `>` stand where
/// the line goes on: a number cut in half would be read as another one.
pub(super) fn window(input: &Input, columns: usize) -> (String, usize) {
    let columns = columns.max(2);
    let chars = input.value().chars();
    let before: String = chars.clone().take(input.cursor()).collect();
    let after: String = chars.skip(input.cursor()).collect();
    let (before, after) = (clean(&before), clean(&after));
    let text = if before.width() < columns {
        before
    } else {
        let end = fitting(before.chars().rev(), columns - 2);
        "<".chars().chain(end.into_iter().rev()).collect()
    };
    let column = text.width();
    let rest = if after.width() <= columns - column {
        after
    } else {
        let cut = fitting(after.chars(), columns - column - 1);
        cut.into_iter().chain(['>']).collect()
    };
    (text + &rest, column)
}

/// A line across.
pub(super) fn rule(frame: &mut Frame, area: Rect, fine: bool) {
    let glyph = if fine { "─" } else { "-" };
    let line = Line::styled(glyph.repeat(usize::from(area.width)), quiet());
    frame.render_widget(Paragraph::new(line), area);
}

/// Words broken into lines of at most this width; no line where there are none.
pub(super) fn wrapped(text: &str, most: usize) -> Vec<String> {
    let mut lines: Vec<String> = Vec::new();
    for word in text.split_whitespace() {
        match lines.last_mut() {
            Some(line) if line.width() + 1 + word.width() <= most => {
                line.push(' ');
                line.push_str(word);
            }
            _ => lines.push(word.to_string()),
        }
    }
    lines
}
