//! The start: titrations used lately, a new one, a file by its path, the demos, the lab's settings.

use super::form::{Did, Form, edit};
use super::keys::{self, Key, StartCommand};
use super::sheet::{lab_form, lab_key, read_lab};
use super::{Effect, Event, Look, Message, Typed};
use crate::assay::Lab;
use tui_input::Input;

/// The demos by name, with what each shows; a digit chooses one.
pub const DEMOS: [(&str, &str); 7] = [
    ("half-typed", "a rack half typed, to resume"),
    ("finished", "a finished rack with one suspect tube"),
    (
        "free-counted",
        "the free side counted, with tubes without receptor and aliquots",
    ),
    ("dialysis", "dialysis cells, half typed: both sides counted"),
    ("reader", "a plate reader with blanks and standards"),
    (
        "short-lived",
        "an F-18 label, half typed: counts brought back to the assay",
    ),
    (
        "quenched",
        "a quench curve, several background vials, tubes without receptor",
    ),
];

/// A titration used lately.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Recent {
    /// Its file.
    pub path: String,
    /// What it is called.
    pub title: String,
    /// How far it is: `24 of 32, Kd 0.49 nM`, or why it cannot be read.
    pub state: String,
}

/// What lies over the start.
#[derive(Debug, Clone)]
pub enum Ask {
    /// The path of a file.
    Path(Input),
    /// Which demo.
    Demo,
    /// The lab's settings.
    Lab(Box<Form>),
    /// The keys, here and in the forms, from a line down.
    Help {
        /// The first line shown.
        top: u16,
    },
}

/// The start screen.
#[derive(Debug, Clone, Default)]
pub struct Start {
    /// Titrations used lately, newest first; `None` until they are looked up.
    pub recents: Option<Vec<Recent>>,
    /// Which one the cursor is on.
    pub at: usize,
    /// What lies over it.
    pub ask: Option<Ask>,
    /// The last thing said.
    pub message: Message,
    /// What was being typed when the terminal went away.
    pub kept: Option<Typed>,
    /// A new titration is wanted.
    pub(super) wants_draft: bool,
}

impl Start {
    pub(super) fn update(&mut self, event: Event, lab: &mut Lab, look: Look) -> Vec<Effect> {
        match event {
            Event::Key(key) => self.key(key, lab, look),
            Event::Paste(text) => {
                if let Some(Ask::Path(input)) = &mut self.ask {
                    for c in text.trim().chars() {
                        edit(input, Key::Char(c), 1000);
                    }
                }
                Vec::new()
            }
            Event::Recents(list) => {
                self.at = self.at.min(list.len().saturating_sub(1));
                self.recents = Some(list);
                Vec::new()
            }
            Event::KeptDraft(typed) => {
                self.kept = Some(typed);
                self.message = Message::said(
                    "a titration was being typed when the terminal went away; n goes on with it",
                );
                Vec::new()
            }
            Event::Refused(what) => {
                self.message = Message::refused(what);
                vec![Effect::Bell]
            }
            Event::Done(what) => {
                self.message = Message::said(what);
                Vec::new()
            }
            _ => Vec::new(),
        }
    }

    fn key(&mut self, key: Key, lab: &mut Lab, look: Look) -> Vec<Effect> {
        match self.ask.take() {
            None => self.choose(key, lab),
            Some(Ask::Help { top }) => {
                match key {
                    Key::Down => {
                        let most = keys::help_over(keys::start_help(look.columns).len(), look.rows);
                        let top = (top + 1).min(most);
                        self.ask = Some(Ask::Help { top });
                    }
                    Key::Up => {
                        let top = top.saturating_sub(1);
                        self.ask = Some(Ask::Help { top });
                    }
                    _ => {}
                }
                Vec::new()
            }
            Some(Ask::Path(mut input)) => match key {
                Key::Esc => Vec::new(),
                Key::Enter if input.value().trim().is_empty() => Vec::new(),
                Key::Enter => vec![Effect::Open(input.value().trim().into())],
                key => {
                    edit(&mut input, key, 1000);
                    self.ask = Some(Ask::Path(input));
                    Vec::new()
                }
            },
            Some(Ask::Demo) => match key {
                Key::Char(c) => c
                    .to_digit(10)
                    .and_then(|d| DEMOS.get((d as usize).checked_sub(1)?))
                    .map_or(Vec::new(), |(name, _)| vec![Effect::Demo((*name).into())]),
                _ => Vec::new(),
            },
            Some(Ask::Lab(form)) => self.lab_key(form, key, lab),
        }
    }

    fn lab_key(&mut self, mut form: Box<Form>, key: Key, lab: &mut Lab) -> Vec<Effect> {
        if key == Key::Esc {
            self.message = Message::said("the settings are as they were");
            return Vec::new();
        }
        let did = lab_key(&mut form, key);
        match read_lab(&form) {
            Err(errors) => {
                form.set_errors(&errors);
                if did == Did::Through {
                    form.go_to_error();
                }
            }
            Ok(read) => {
                form.set_errors(&[]);
                if did == Did::Through {
                    *lab = read.clone();
                    return vec![Effect::KeepLab(Box::new(read))];
                }
            }
        }
        self.ask = Some(Ask::Lab(form));
        Vec::new()
    }

    fn choose(&mut self, key: Key, lab: &Lab) -> Vec<Effect> {
        let recents = self.recents.as_deref().unwrap_or_default();
        let last = recents.len().saturating_sub(1);
        if let Key::Char(c @ '1'..='9') = key {
            let i = c as usize - '1' as usize;
            return recents
                .get(i)
                .map_or(Vec::new(), |r| vec![Effect::Open(r.path.clone())]);
        }
        let Some(command) = keys::start_command(key) else {
            if let Key::Char(c) = key {
                self.message =
                    Message::refused(format!("`{c}` does nothing here; ? shows the keys"));
            }
            return Vec::new();
        };
        self.message = Message::default();
        match command {
            StartCommand::Up => self.at = self.at.saturating_sub(1),
            StartCommand::Down => self.at = (self.at + 1).min(last),
            StartCommand::Open => {
                return recents
                    .get(self.at)
                    .map_or(Vec::new(), |r| vec![Effect::Open(r.path.clone())]);
            }
            StartCommand::New => self.wants_draft = true,
            StartCommand::Path => self.ask = Some(Ask::Path(Input::default())),
            StartCommand::Demo => self.ask = Some(Ask::Demo),
            StartCommand::Lab => self.ask = Some(Ask::Lab(Box::new(lab_form(lab)))),
            StartCommand::Help => self.ask = Some(Ask::Help { top: 0 }),
            StartCommand::Quit => return vec![Effect::Quit],
        }
        Vec::new()
    }
}
