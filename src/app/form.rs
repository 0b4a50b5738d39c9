//! A form: fields one below the other, each a line of text or a choice, with one line of help.

use super::keys::Key;
use crate::units::clean;
use tui_input::{Input, InputRequest};

/// What a field holds.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Kind {
    /// Text that may be left out.
    Text,
    /// Text that is needed.
    Needed,
    /// One of these.
    Choice(&'static [&'static str]),
}

/// One field of a form.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Spec {
    /// Its name on the screen, unique in its form.
    pub name: &'static str,
    /// Its path in the protocol or the ladder, for errors that name it.
    pub path: &'static str,
    /// What it holds.
    pub kind: Kind,
    /// One line of help.
    pub help: &'static str,
    /// One line of help for each option of a choice, in its place; empty where `help` is for all.
    pub each: &'static [&'static str],
}

/// A field with what is typed in it.
#[derive(Debug, Clone)]
pub struct FieldState {
    /// Which field.
    pub spec: &'static Spec,
    /// The line.
    pub input: Input,
    /// What is wrong with it, if anything.
    pub error: Option<String>,
    /// It may be looked at and not changed here.
    pub fixed: bool,
    /// The value as a whole was just reached: typing puts another in its place, an arrow begins to edit it.
    pub whole: bool,
    /// It does not apply to what is typed elsewhere: it is not shown, and nothing is read from it.
    pub hidden: bool,
}

impl FieldState {
    /// What is typed.
    pub fn value(&self) -> &str {
        self.input.value()
    }

    /// The line of help for it as it stands.
    pub fn help(&self) -> &'static str {
        let Kind::Choice(options) = self.spec.kind else {
            return self.spec.help;
        };
        let at = options.iter().position(|o| *o == self.value()).unwrap_or(0);
        self.spec.each.get(at).unwrap_or(&self.spec.help)
    }
}

/// Fields and the place of the cursor.
#[derive(Debug, Clone)]
pub struct Form {
    /// The fields.
    pub fields: Vec<FieldState>,
    /// Which one has the cursor.
    pub at: usize,
}

/// What a key did to a form.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Did {
    /// The value of a field changed.
    Changed,
    /// The cursor moved.
    Moved,
    /// Enter on the last field.
    Through,
    /// Nothing of the form's.
    Nothing,
}

/// The longest value, in characters.
const MOST: usize = 300;

impl Form {
    /// A form with the values that `value` gives its fields.
    pub fn new(specs: &'static [Spec], value: impl Fn(&Spec) -> String) -> Form {
        let fields = specs
            .iter()
            .map(|spec| FieldState {
                spec,
                input: Input::new(value(spec)),
                error: None,
                fixed: false,
                whole: false,
                hidden: false,
            })
            .collect();
        Form { fields, at: 0 }
    }

    /// What a field says: what is typed in it, nothing where it does not apply.
    pub fn says(&self, name: &str) -> &str {
        if self.shows(name) {
            self.value(name)
        } else {
            ""
        }
    }

    /// Whether a field of this name is in sight.
    pub fn shows(&self, name: &str) -> bool {
        self.fields.iter().any(|f| f.spec.name == name && !f.hidden)
    }

    /// Hides the fields that `hidden` says, and moves the cursor off one of them.
    pub(super) fn hide(&mut self, hidden: impl Fn(&FieldState) -> bool) {
        for f in &mut self.fields {
            f.hidden = hidden(f);
        }
        if self.current().is_some_and(|f| f.hidden) {
            let next = self.next().or_else(|| self.previous());
            self.at = next.unwrap_or(self.at);
        }
    }

    /// The fields in sight with their places.
    pub fn visible(&self) -> impl DoubleEndedIterator<Item = (usize, &FieldState)> {
        self.fields.iter().enumerate().filter(|(_, f)| !f.hidden)
    }

    fn next(&self) -> Option<usize> {
        self.visible().map(|(i, _)| i).find(|i| *i > self.at)
    }

    fn previous(&self) -> Option<usize> {
        self.visible().map(|(i, _)| i).rev().find(|i| *i < self.at)
    }

    /// What is typed in a field, without blanks at its ends; empty for a name the form does not have.
    pub fn value(&self, name: &str) -> &str {
        self.fields
            .iter()
            .find(|f| f.spec.name == name)
            .map_or("", |f| f.value().trim())
    }

    /// Makes every field one that is only looked at.
    pub fn fix(&mut self) {
        self.fields.iter_mut().for_each(|f| f.fixed = true);
    }

    /// The field with the cursor.
    pub fn current(&self) -> Option<&FieldState> {
        self.fields.get(self.at)
    }

    /// Forgets all errors and sets these, each `(name or path, what)`. An error belongs to the field of that name, or to the one whose path
    /// is the longest that it lies at; the first of several is shown.
    pub fn set_errors(&mut self, errors: &[(String, String)]) {
        for f in &mut self.fields {
            f.error = None;
        }
        for (at, what) in errors {
            let named = self.fields.iter().position(|f| f.spec.name == at);
            let lies = || {
                let all = self.fields.iter().enumerate();
                all.filter(|(_, f)| lies_at(at, f.spec.path))
                    .max_by_key(|(_, f)| f.spec.path.len())
                    .map(|(i, _)| i)
            };
            if let Some(f) = named.or_else(lies).and_then(|i| self.fields.get_mut(i)) {
                // What stands in the way has to be seen.
                f.hidden = false;
                f.error.get_or_insert_with(|| what.clone());
            }
        }
    }

    /// How many fields are in error.
    pub fn errors(&self) -> usize {
        self.fields.iter().filter(|f| f.error.is_some()).count()
    }

    /// Puts the cursor on the first field in error.
    pub fn go_to_error(&mut self) {
        if let Some(i) = self.fields.iter().position(|f| f.error.is_some()) {
            self.at = i;
        }
    }

    /// Takes a key.
    pub fn key(&mut self, key: Key) -> Did {
        let before = self.at;
        let did = self.take(key);
        if self.at != before
            && let Some(f) = self.fields.get_mut(self.at)
        {
            // What is wrong is mended rather than typed anew.
            let sound = f.error.is_none() && !f.value().is_empty();
            f.whole = sound && !matches!(f.spec.kind, Kind::Choice(_));
        }
        did
    }

    fn take(&mut self, key: Key) -> Did {
        match (key, self.next()) {
            (Key::Up | Key::BackTab, _) => {
                self.at = self.previous().unwrap_or(self.at);
                return Did::Moved;
            }
            (Key::Down | Key::Tab, next) => {
                self.at = next.unwrap_or(self.at);
                return Did::Moved;
            }
            (Key::Enter, None) => return Did::Through,
            (Key::Enter, Some(next)) => {
                self.at = next;
                return Did::Moved;
            }
            _ => {}
        }
        let Some(field) = self.fields.get_mut(self.at) else {
            return Did::Nothing;
        };
        if field.fixed {
            return Did::Nothing;
        }
        match field.spec.kind {
            Kind::Choice(options) => choose(field, options, key),
            Kind::Text | Kind::Needed => {
                let whole = std::mem::take(&mut field.whole);
                if whole && matches!(key, Key::Char(_) | Key::Backspace | Key::Delete) {
                    field.input.reset();
                    edit(&mut field.input, key, MOST);
                    return Did::Changed;
                }
                edit(&mut field.input, key, MOST)
            }
        }
    }
}

fn choose(field: &mut FieldState, options: &[&str], key: Key) -> Did {
    let n = options.len();
    let here = options
        .iter()
        .position(|o| *o == field.value())
        .unwrap_or(0);
    let next = match key {
        Key::Right | Key::Char(' ') => (here + 1) % n,
        Key::Left => (here + n - 1) % n,
        // A digit or a first letter chooses directly.
        Key::Char(c) => match c.to_digit(10) {
            Some(d) if (1..=n as u32).contains(&d) => d as usize - 1,
            _ => match options
                .iter()
                .position(|o| o.to_lowercase().starts_with(c.to_ascii_lowercase()))
            {
                Some(i) => i,
                None => return Did::Nothing,
            },
        },
        _ => return Did::Nothing,
    };
    field.input = Input::new(options[next].into());
    Did::Changed
}

/// A key in a line of text.
pub(super) fn edit(input: &mut Input, key: Key, most: usize) -> Did {
    let request = match key {
        // What no screen would show is not taken either: the cursor stands where one sees it.
        Key::Char(c) if clean(c.encode_utf8(&mut [0; 4])).is_empty() => return Did::Nothing,
        Key::Char(_) if input.value().chars().count() >= most => return Did::Nothing,
        Key::Char(c) => InputRequest::InsertChar(c),
        Key::Backspace => InputRequest::DeletePrevChar,
        Key::Delete => InputRequest::DeleteNextChar,
        Key::Left => InputRequest::GoToPrevChar,
        Key::Right => InputRequest::GoToNextChar,
        Key::Home => InputRequest::GoToStart,
        Key::End => InputRequest::GoToEnd,
        Key::Ctrl('u') => InputRequest::DeleteLine,
        _ => return Did::Nothing,
    };
    match input.handle(request) {
        Some(changed) if changed.value => Did::Changed,
        _ => Did::Moved,
    }
}

/// Whether an error at `at` is one of the field at `path`, or of a part of it.
fn lies_at(at: &str, path: &str) -> bool {
    at.strip_prefix(path)
        .is_some_and(|rest| !path.is_empty() && (rest.is_empty() || rest.starts_with('.')))
}
