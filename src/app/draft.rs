//! A titration that is not open yet: protocol, ladder and counter, back and forth, until its file is made.

use super::form::{Did, Form, edit};
use super::keys::Key;
use super::{Effect, Event, Forms, Message, Step, Typed};
use crate::assay::Lab;
use tui_input::Input;

/// The walk before the first tube.
#[derive(Debug, Clone)]
pub struct Draft {
    /// What is typed.
    pub forms: Forms,
    /// Which step is in sight: protocol, ladder or counter.
    pub step: Step,
    /// The path of the file to be made, while it is asked for.
    pub path: Option<Input>,
    /// Whether leaving without a file is being asked about.
    pub leaving: bool,
    /// The last thing said.
    pub message: Message,
    /// Nothing was typed yet.
    untouched: bool,
    /// The draft was given up.
    pub(super) left: bool,
}

impl Draft {
    /// Empty forms with the lab's defaults.
    pub fn fresh(lab: &Lab) -> Draft {
        let mut forms = Forms::fresh(lab);
        forms.check(None);
        Draft {
            forms,
            step: Step::Protocol,
            path: None,
            leaving: false,
            message: Message::said(
                "Enter goes to the next field; PageDown and PageUp to the next step and back",
            ),
            untouched: true,
            left: false,
        }
    }

    /// Forms as they were typed before the terminal went away.
    pub(super) fn resumed(lab: &Lab, typed: &Typed) -> Draft {
        let mut draft = Draft::fresh(lab);
        draft.forms.fill(typed);
        draft.untouched = false;
        draft.message = Message::said("here is what was typed before the terminal went away");
        draft
    }

    /// What is typed, to be kept when the terminal goes away; nothing where nobody typed.
    pub(super) fn typed(&self) -> Option<Typed> {
        (!self.untouched).then(|| self.forms.typed())
    }

    /// The form in sight.
    pub fn form(&self) -> &Form {
        self.forms.of_step(self.step)
    }

    fn form_mut(&mut self) -> &mut Form {
        self.forms.of_step_mut(self.step)
    }

    pub(super) fn update(&mut self, event: Event, who: &str) -> Vec<Effect> {
        match event {
            Event::Key(key) => self.key(key, who),
            Event::Paste(text) => {
                for c in text.trim().chars() {
                    let key = Key::Char(c);
                    let _ = match &mut self.path {
                        Some(input) => edit(input, key, 1000),
                        None => self.forms.key(self.step, key),
                    };
                }
                self.untouched = false;
                self.forms.check(None);
                Vec::new()
            }
            Event::Refused(what) => {
                self.message = Message::refused(what);
                vec![Effect::Bell]
            }
            _ => Vec::new(),
        }
    }

    fn key(&mut self, key: Key, who: &str) -> Vec<Effect> {
        if self.leaving {
            self.leaving = false;
            self.left = key == Key::Char('y');
            return Vec::new();
        }
        if self.path.is_some() {
            return self.path_key(key, who);
        }
        match key {
            Key::Esc | Key::Ctrl('c') if self.untouched => self.left = true,
            Key::Esc | Key::Ctrl('c') => self.leaving = true,
            Key::PageDown => self.go(true),
            Key::PageUp => self.go(false),
            key => match self.forms.key(self.step, key) {
                Did::Changed => {
                    self.untouched = false;
                    self.forms.check(None);
                    self.message = Message::default();
                }
                Did::Through => self.go(true),
                Did::Moved => self.message = Message::default(),
                Did::Nothing => {}
            },
        }
        Vec::new()
    }

    /// To the next step or back. Past the counter the file is asked for, once everything is there.
    fn go(&mut self, forward: bool) {
        self.message = Message::default();
        if !forward {
            self.step = self.step.previous();
            return;
        }
        if self.step < Step::Counter {
            self.step = self.step.next();
            return;
        }
        for step in [Step::Protocol, Step::Ladder, Step::Counter] {
            self.step = step;
            let n = self.form().errors();
            if n > 0 {
                self.form_mut().go_to_error();
                let name = self.form().current().map_or("", |f| f.spec.name);
                self.message = Message::refused(format!("{} is not complete: {name}", step.word()));
                return;
            }
        }
        self.path = Some(Input::new(file_name(self.forms.protocol.value("title"))));
    }

    fn path_key(&mut self, key: Key, who: &str) -> Vec<Effect> {
        let Some(input) = &mut self.path else {
            return Vec::new();
        };
        match key {
            Key::Esc => self.path = None,
            Key::Enter if input.value().trim().is_empty() => {
                self.message = Message::refused("a file name is needed");
            }
            Key::Enter => {
                let path = input.value().trim().to_string();
                match self.forms.sheet().map(|s| s.titration()) {
                    Ok(Ok(t)) => {
                        return vec![Effect::Create {
                            path,
                            titration: Box::new(t),
                            who: who.into(),
                        }];
                    }
                    Ok(Err(e)) => self.message = Message::refused(e.to_string()),
                    Err(errors) => {
                        let first = errors
                            .first()
                            .map_or(String::new(), |(f, w)| format!("{f}: {w}"));
                        self.message = Message::refused(first);
                    }
                }
            }
            key => {
                edit(input, key, 1000);
            }
        }
        Vec::new()
    }
}

/// A file name from a title: small letters, digits and dashes.
fn file_name(title: &str) -> String {
    let mut name = String::new();
    for c in title.to_lowercase().chars() {
        if c.is_ascii_alphanumeric() {
            name.push(c);
        } else if !name.ends_with('-') && !name.is_empty() {
            name.push('-');
        }
    }
    let name: String = name.trim_end_matches('-').chars().take(60).collect();
    format!("{}.ron", if name.is_empty() { "titration" } else { &name })
}
