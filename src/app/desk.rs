//! A titration on the bench: the notebook, the walk around it, and what is said of it.

use super::bench::{Bench, in_a_line};
use super::form::{Did, Form};
use super::keys::{self, Key, ResultCommand};
use super::layers::{Layer, LineFor};
use super::{Access, Effect, Event, Forms, Look, Message, Step, page};
use crate::analysis::Analysis;
use crate::assay::{Level, Protocol, Stamp, Titration, TubeNo};
use crate::notebook::{Entry, Notebook, Rejection, What};
use std::sync::Arc;

/// How far the file is.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Saved {
    /// The newest revision that is safely in the file.
    pub revision: u32,
    /// When that was known.
    pub at: Option<Stamp>,
    /// Why the newest save failed, while it has not succeeded since.
    pub failed: Option<String>,
    /// The digest of the file at that revision.
    pub digest: String,
}

/// The newest finished analysis and the revision it is of.
#[derive(Debug, Clone)]
pub struct Analysed {
    /// The revision.
    pub revision: u32,
    /// What is said of it.
    pub analysis: Arc<Analysis>,
}

/// A titration as it comes from its file.
#[derive(Debug, Clone)]
pub struct Laid {
    /// Its notebook.
    pub notebook: Notebook,
    /// The file's path.
    pub file: String,
    /// Whether it may be changed.
    pub access: Access,
    /// Things to be said as long as they hold.
    pub notices: Vec<String>,
    /// Entries that were changed outside the program.
    pub changed: Vec<u32>,
    /// The digest of the file.
    pub digest: String,
}

/// A titration on the bench.
#[derive(Debug, Clone)]
pub struct Desk {
    /// Its notebook.
    pub notebook: Notebook,
    /// The file's path, as shown.
    pub file: String,
    /// Whether it may be changed.
    pub access: Access,
    /// Who is at the keyboard.
    pub who: String,
    /// Things to be said as long as they hold, e.g. that the file was changed outside.
    pub notices: Vec<String>,
    /// Entries that were changed outside the program.
    pub changed: Vec<u32>,
    /// The step of the walk.
    pub step: Step,
    /// The forms, while one of them is in sight.
    pub forms: Option<Forms>,
    /// The first line of the result in sight.
    pub top: usize,
    /// The bench.
    pub bench: Bench,
    /// What lies over it, the topmost last.
    pub layers: Vec<Layer>,
    /// The newest finished analysis.
    pub analysed: Option<Analysed>,
    /// How far the file is.
    pub saved: Saved,
    /// How things are shown.
    pub look: Look,
    /// The last thing said.
    pub message: Message,
    /// Leaving as soon as the last entry is in the file.
    pub(super) leaving: bool,
}

impl Desk {
    /// A titration laid on the bench, at the first tube without a reading; and what to do first.
    pub fn lay(laid: Laid, who: String, look: Look) -> (Desk, Vec<Effect>) {
        let revision = laid.notebook.revision();
        let titration = laid.notebook.titration().clone();
        let desk = Desk {
            bench: Bench::at_first_unread(&titration),
            notebook: laid.notebook,
            file: laid.file,
            access: laid.access,
            who,
            notices: laid.notices,
            changed: laid.changed,
            step: Step::Tubes,
            forms: None,
            top: 0,
            layers: Vec::new(),
            analysed: None,
            saved: Saved {
                revision,
                at: None,
                failed: None,
                digest: laid.digest,
            },
            look,
            message: Message::default(),
            leaving: false,
        };
        (desk, vec![Effect::Analyse(revision, Box::new(titration))])
    }

    /// The titration as it stands.
    pub fn titration(&self) -> &Titration {
        self.notebook.titration()
    }

    /// The last part of the file's path.
    pub fn file_name(&self) -> &str {
        self.file.rsplit(['/', '\\']).next().unwrap_or(&self.file)
    }

    /// Whether the newest analysis is of the newest entry.
    pub fn is_current(&self) -> bool {
        self.analysed
            .as_ref()
            .is_some_and(|a| a.revision == self.notebook.revision())
    }

    /// Whether everything is safely in the file.
    pub fn is_saved(&self) -> bool {
        self.saved.revision >= self.notebook.revision()
    }

    /// What has to be said as long as it holds, a line each; its first words say most, should the line be cut.
    pub fn standing(&self) -> Vec<String> {
        let mut bars = Vec::new();
        if let (Some(why), false) = (&self.saved.failed, self.is_saved()) {
            bars.push(format!("NOT SAVED   w saves to another file   {why}"));
        }
        if let Access::ReadOnly(why) = &self.access {
            bars.push(format!("READ ONLY   {why}"));
        }
        bars.extend(self.notices.iter().cloned());
        bars
    }

    /// What helps a person at their first readings; nothing once they know.
    pub fn hint(&self) -> Option<&'static str> {
        if self.titration().closed.is_some() {
            return Some("closed; c opens it again");
        }
        match self.titration().progress().0 {
            0 => Some("type what the printout shows for this vial, then Enter; ? shows all keys"),
            1..=3 => Some("a slip is taken back with -   a reading you doubt is flagged with *"),
            _ => None,
        }
    }

    /// Takes in what happened and says what is to be done.
    pub(super) fn update(&mut self, event: Event, now: Stamp) -> Vec<Effect> {
        match event {
            Event::Key(key) => return self.key(key, now),
            Event::Paste(text) => return self.paste(&text),
            // An analysis of an older state than the one shown says nothing new.
            Event::Analysed(revision, analysis)
                if self.analysed.as_ref().is_none_or(|a| a.revision < revision) =>
            {
                self.analysed = Some(Analysed { revision, analysis });
            }
            Event::Moved(file) => {
                self.say(format!("saving to {file} from now on"));
                self.file = file;
            }
            Event::Saved(revision, digest) if revision >= self.saved.revision => {
                self.saved = Saved {
                    revision,
                    at: Some(now),
                    failed: None,
                    digest,
                };
                if self.leaving && self.is_saved() {
                    return vec![Effect::Quit];
                }
            }
            Event::SaveFailed(revision, why) if revision > self.saved.revision => {
                self.saved.failed = Some(why);
                if std::mem::take(&mut self.leaving) {
                    self.message = Message::default();
                    self.layers.push(Layer::LeaveUnsaved);
                }
            }
            Event::Refused(what) => self.refuse(what),
            Event::Done(what) => self.say(what),
            _ => {}
        }
        Vec::new()
    }

    fn key(&mut self, key: Key, now: Stamp) -> Vec<Effect> {
        self.leaving = false;
        if !self.layers.is_empty() {
            return self.layer_key(key, now);
        }
        match key {
            Key::PageDown => return self.go(self.step.next()),
            Key::PageUp => return self.go(self.step.previous()),
            _ => {}
        }
        match self.step {
            Step::Tubes => self.bench_key(key, now),
            Step::Result => self.result_key(key),
            Step::Protocol | Step::Ladder | Step::Counter => self.form_key(key),
        }
    }

    /// To another step. Forms that say something new are not left before it is recorded or dropped.
    pub(super) fn go(&mut self, to: Step) -> Vec<Effect> {
        self.message = Message::default();
        if to >= Step::Tubes {
            if self
                .forms
                .as_ref()
                .is_some_and(|f| self.amended(f).is_none_or(|new| new.is_some()))
            {
                return self.ask_reason();
            }
            self.forms = None;
        } else if self.forms.is_none() {
            let t = self.titration();
            let mut forms = Forms::of(&t.protocol, &t.levels);
            let fixed = match (&self.access, &t.closed) {
                (Access::ReadOnly(_), _) => Some("read only: this can be looked at, not corrected"),
                (_, Some(_)) => {
                    Some("closed: this can be looked at; c at the tubes opens it again")
                }
                _ => None,
            };
            if fixed.is_some() {
                forms.fix();
            }
            self.forms = Some(forms);
            self.say(fixed.unwrap_or(
                "a correction is recorded with its reason when you leave; Esc drops it",
            ));
        }
        self.step = to;
        self.top = 0;
        Vec::new()
    }

    /// The form in sight.
    pub fn form(&self) -> Option<&Form> {
        self.forms.as_ref().map(|f| f.of_step(self.step))
    }

    fn form_key(&mut self, key: Key) -> Vec<Effect> {
        if matches!(key, Key::Esc | Key::Ctrl('c')) {
            let dropped = self
                .forms
                .as_ref()
                .is_some_and(|f| !matches!(self.amended(f), Some(None)));
            self.forms = None;
            self.step = Step::Tubes;
            self.message = Message::default();
            if dropped {
                self.say("the correction was dropped");
            }
            return Vec::new();
        }
        let step = self.step;
        let levels = self.titration().levels.clone();
        let Some(forms) = &mut self.forms else {
            return Vec::new();
        };
        match forms.key(step, key) {
            Did::Through => return self.go(step.next()),
            Did::Changed => forms.check(Some(&levels)),
            Did::Moved | Did::Nothing => {}
        }
        self.message = Message::default();
        Vec::new()
    }

    /// What the forms say: `None` where they are wrong, `Some(None)` where they say nothing new.
    fn amended(&self, forms: &Forms) -> Option<Option<(Protocol, Vec<Level>)>> {
        let t = self.titration();
        // A form may show a number or a text more plainly than the notebook has it; that is no correction.
        if forms.say_the_same(&Forms::of(&t.protocol, &t.levels)) {
            return Some(None);
        }
        let protocol = forms.protocol().ok()?;
        let levels = forms.levels(&t.levels).ok()?;
        Some((protocol != t.protocol || levels != t.levels).then_some((protocol, levels)))
    }

    /// Asks why the protocol is corrected, or shows what is wrong with the correction.
    fn ask_reason(&mut self) -> Vec<Effect> {
        let Some(forms) = &mut self.forms else {
            return Vec::new();
        };
        for step in [Step::Protocol, Step::Ladder, Step::Counter] {
            let form = forms.of_step_mut(step);
            if form.errors() > 0 {
                form.go_to_error();
                self.step = step;
                self.refuse("this field stands in the way; mend it, or Esc drops the correction");
                return Vec::new();
            }
        }
        self.layers.push(Layer::line(LineFor::Amend));
        Vec::new()
    }

    pub(super) fn amend(&mut self, reason: String, now: Stamp) -> Vec<Effect> {
        let new = self.forms.as_ref().and_then(|f| self.amended(f)).flatten();
        let Some((protocol, levels)) = new else {
            return Vec::new();
        };
        let what = What::Amended {
            protocol: Box::new(protocol),
            levels,
            reason,
        };
        match self.record(what, now) {
            None => vec![Effect::Bell],
            Some((entry, effects)) => {
                self.forms = None;
                self.step = Step::Tubes;
                self.say(self.notebook.describe(&entry));
                effects
            }
        }
    }

    fn result_key(&mut self, key: Key) -> Vec<Effect> {
        // Title, rule, message and keys take four rows, and one line of a page is seen again on the next.
        let page_rows = usize::from(self.look.rows)
            .saturating_sub(5 + self.standing().len())
            .max(1);
        let Some(command) = keys::result_command(key) else {
            return Vec::new();
        };
        let lines = page(self).map_or(0, |p| p.lines().count());
        let last = lines.saturating_sub(page_rows);
        match command {
            ResultCommand::Up => self.top = self.top.saturating_sub(1),
            ResultCommand::Down => self.top = (self.top + 1).min(last),
            ResultCommand::Page => {
                self.top = if self.top >= last {
                    0
                } else {
                    (self.top + page_rows).min(last)
                }
            }
            ResultCommand::Save | ResultCommand::Print
                if !(self.is_current() && self.is_saved()) =>
            {
                self.refuse("not yet: the page is of what is in the file, fitted anew");
            }
            ResultCommand::Save => {
                return page(self).map_or(Vec::new(), |p| vec![Effect::WritePage(p)]);
            }
            ResultCommand::Print => {
                let Some(page) = page(self) else {
                    return Vec::new();
                };
                self.say("the page as it is now will be printed when you have left with q");
                return vec![Effect::PrintAfter(page)];
            }
            ResultCommand::Help => self.layers.push(Layer::Help { top: 0 }),
            ResultCommand::Quit => return self.leave(),
        }
        Vec::new()
    }

    fn paste(&mut self, text: &str) -> Vec<Effect> {
        match (self.step, self.layers.is_empty()) {
            (Step::Protocol | Step::Ladder | Step::Counter, true) => {
                for c in text.trim().chars() {
                    self.form_key(Key::Char(c));
                }
                Vec::new()
            }
            _ => {
                self.refuse(format!(
                    "{} characters pasted, not taken; type readings, or use `rackside take`",
                    text.chars().count()
                ));
                vec![Effect::Bell]
            }
        }
    }

    pub(super) fn say(&mut self, text: impl Into<String>) {
        self.message = Message::said(text);
    }

    pub(super) fn refuse(&mut self, text: impl Into<String>) {
        self.message = Message::refused(text);
    }

    /// Records an entry; on success gives it back and asks for a save and an analysis.
    ///
    /// `None` where it was refused: the refusal is the message then.
    pub(super) fn record(&mut self, what: What, now: Stamp) -> Option<(Arc<Entry>, Vec<Effect>)> {
        if let Access::ReadOnly(why) = &self.access {
            self.message = Message::refused(format!("read only: {why}"));
            return None;
        }
        let who = self.who.clone();
        match self.notebook.record(what, now, &who) {
            Ok(entry) => {
                let revision = self.notebook.revision();
                let effects = vec![
                    Effect::Save(revision, self.notebook.entries().to_vec()),
                    Effect::Analyse(revision, Box::new(self.titration().clone())),
                ];
                Some((entry, effects))
            }
            Err(rejection) => {
                self.refuse(match &rejection {
                    // At the bench the key that helps is known.
                    Rejection::Closed { at, .. } => {
                        format!("the titration was closed at {at}; c opens it again")
                    }
                    Rejection::Reading { cause, .. } => in_a_line(cause),
                    other => other.to_string(),
                });
                None
            }
        }
    }

    /// The tube's name in a sentence, by its number.
    pub(super) fn tube_name(&self, no: TubeNo) -> String {
        let t = self.titration();
        t.tube(no)
            .map_or_else(|| format!("vial {no}"), |tube| t.name(tube))
    }
}
