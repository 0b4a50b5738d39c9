//! A key as the program knows it.

use crossterm::event::{KeyCode, KeyEvent, KeyEventKind, KeyModifiers};

/// A key as the program knows it.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub enum Key {
    /// A character.
    Char(char),
    /// A character with the control key.
    Ctrl(char),
    /// Enter, on either side of the keyboard.
    Enter,
    /// Rubs out the character before the cursor.
    Backspace,
    /// Rubs out the character at the cursor.
    Delete,
    /// The arrows.
    Left,
    /// Right.
    Right,
    /// Up.
    Up,
    /// Down.
    Down,
    /// To the start.
    Home,
    /// To the end.
    End,
    /// A page up.
    PageUp,
    /// A page down.
    PageDown,
    /// Tab.
    Tab,
    /// Tab backwards.
    BackTab,
    /// Escape.
    Esc,
}

impl Key {
    /// A key press of the terminal; `None` for releases and for keys without a meaning here.
    pub fn from_terminal(e: &KeyEvent) -> Option<Key> {
        if e.kind == KeyEventKind::Release {
            return None;
        }
        let control = e.modifiers.contains(KeyModifiers::CONTROL);
        if e.modifiers
            .intersects(KeyModifiers::ALT | KeyModifiers::SUPER | KeyModifiers::META)
        {
            return None;
        }
        Some(match e.code {
            KeyCode::Char(c) if control => Key::Ctrl(c.to_ascii_lowercase()),
            KeyCode::Char(c) => Key::Char(c),
            KeyCode::Enter => Key::Enter,
            KeyCode::Backspace => Key::Backspace,
            KeyCode::Delete => Key::Delete,
            KeyCode::Left => Key::Left,
            KeyCode::Right => Key::Right,
            KeyCode::Up => Key::Up,
            KeyCode::Down => Key::Down,
            KeyCode::Home => Key::Home,
            KeyCode::End => Key::End,
            KeyCode::PageUp => Key::PageUp,
            KeyCode::PageDown => Key::PageDown,
            KeyCode::Tab => Key::Tab,
            KeyCode::BackTab => Key::BackTab,
            KeyCode::Esc => Key::Esc,
            _ => return None,
        })
    }
}
