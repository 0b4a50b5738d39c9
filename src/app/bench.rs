//! The bench: one tube at the prompt, a line being typed, and the keys of the reading loop.

mod entry;
mod marks;
mod time;

pub use entry::Begun;
pub(super) use entry::in_a_line;

use super::keys::{self, Command, Key};
use super::layers::{Layer, LineFor};
use super::{Desk, Effect, Message, Wide};
use crate::assay::{Field as Asked, ReadingId, Role, Stamp, Titration, Tube, TubeNo};
use crate::figure::Plot;
use crate::notebook::What;
use tui_input::{Input, InputRequest};

/// What is being typed.
#[derive(Debug, Clone, PartialEq)]
pub enum Field {
    /// The number on the printout.
    Value,
    /// A further field of the vial, after what was typed of it.
    More(Box<Begun>),
    /// A vial number to go to.
    Vial,
}

impl Field {
    /// Which further field is asked for.
    pub fn more(&self) -> Option<Asked> {
        match self {
            Field::More(begun) => Some(begun.asked),
            Field::Value | Field::Vial => None,
        }
    }
}

/// The state of the bench.
#[derive(Debug, Clone)]
pub struct Bench {
    /// The tube at the prompt.
    pub at: TubeNo,
    /// Its next reading is a recount.
    pub again: bool,
    /// What is being typed.
    pub field: Field,
    /// The line.
    pub line: Input,
    /// Minutes that were asked about and are kept if they are typed again.
    pub asked: Option<String>,
    /// The reading kept last, which `*` and `+` are about while nothing else was chosen.
    pub last: Option<(TubeNo, ReadingId)>,
}

/// The longest line: more than any number, less than anybody pastes by mistake.
const MOST_LINE: usize = 24;

impl Bench {
    /// At the first tube without a reading, or the last of a rack that has them all.
    pub fn at_first_unread(t: &Titration) -> Bench {
        let newest = t.tubes.last().map_or(TubeNo(1), |t| t.no);
        Bench {
            at: t.next_unread().unwrap_or(newest),
            again: false,
            field: Field::Value,
            line: Input::default(),
            asked: None,
            last: None,
        }
    }

    fn go(&mut self, to: TubeNo) {
        self.at = to;
        self.again = false;
        self.field = Field::Value;
        self.asked = None;
        self.line.reset();
    }
}

impl Desk {
    /// The tube at the prompt.
    pub fn tube(&self) -> Option<&Tube> {
        self.titration().tube(self.bench.at)
    }

    /// Minutes offered for the tube at the prompt.
    pub fn offered_minutes(&self) -> f64 {
        let role = self.tube().map_or(Role::Total, |t| t.role);
        self.titration().protocol.minutes_for(role)
    }

    pub(super) fn bench_key(&mut self, key: Key, now: Stamp) -> Vec<Effect> {
        // A number whose further fields are still wanted is on the line too, and no key may drop it unseen.
        let typing =
            !self.bench.line.value().is_empty() || matches!(self.bench.field, Field::More(_));
        match key {
            Key::Char(c) if c.is_ascii_digit() || matches!(c, '.' | ',' | ' ') => {
                return self.typed(c);
            }
            Key::Char(':') if self.bench.field.more() == Some(Asked::At) => return self.typed(':'),
            Key::Char('-') if self.may_turn_negative() => return self.turn_negative(),
            // A letter in a number is a slip that Enter has to stumble over: dropped, it would leave another number.
            Key::Char(c) if c.is_alphabetic() && !self.bench.line.value().is_empty() => {
                return self.typed(c);
            }
            Key::Backspace => return self.edit(InputRequest::DeletePrevChar),
            Key::Delete => return self.edit(InputRequest::DeleteNextChar),
            Key::Left => return self.edit(InputRequest::GoToPrevChar),
            Key::Right => return self.edit(InputRequest::GoToNextChar),
            Key::Home => return self.edit(InputRequest::GoToStart),
            Key::End => return self.edit(InputRequest::GoToEnd),
            Key::Esc => {
                self.clear();
                return Vec::new();
            }
            _ => {}
        }
        let Some(command) = keys::bench_command(key) else {
            if let Key::Char(c) = key {
                self.refuse(format!("`{c}` does nothing here; ? shows the keys"));
            }
            return Vec::new();
        };
        let anytime = matches!(command, Command::Keep | Command::Minus | Command::Help);
        if typing && !anytime && key != Key::Ctrl('c') {
            self.refuse("the line is not finished: Enter keeps it, - clears it");
            return Vec::new();
        }
        match command {
            Command::Keep => self.enter(now),
            Command::Minus => self.minus(now),
            Command::Suspect => self.suspect(now),
            Command::Recount => self.recount(),
            Command::GoTo => {
                self.bench.field = Field::Vial;
                self.message = Message::default();
                Vec::new()
            }
            Command::Previous => self.walk(-1),
            Command::Next => self.walk(1),
            Command::Unread => {
                match self.titration().next_unread() {
                    Some(to) => self.choose(to),
                    None => self.say("every tube has a reading or is lost"),
                }
                Vec::new()
            }
            Command::BringBack => self.bring_back(now),
            Command::Lose => self.lose(now),
            Command::Note => {
                self.layers.push(Layer::line(LineFor::Note(self.bench.at)));
                Vec::new()
            }
            Command::Axis => {
                if self.look.plot == Plot::Isotherm {
                    self.look.log_axis = !self.look.log_axis;
                } else {
                    self.refuse("only the isotherm has a choice of axis; d goes round to it");
                }
                Vec::new()
            }
            Command::Plot => {
                self.look.plot = self.look.plot.next();
                let hidden = match self.look.wide {
                    Wide::Tubes => "; v brings it into sight",
                    Wide::RackAndPlot | Wide::Plot => "",
                };
                self.say(format!(
                    "the plot shows: {}{hidden}",
                    self.look.plot.words()
                ));
                Vec::new()
            }
            Command::View => {
                self.look.wide = match self.look.wide {
                    Wide::RackAndPlot => Wide::Plot,
                    Wide::Plot => Wide::Tubes,
                    Wide::Tubes => Wide::RackAndPlot,
                };
                Vec::new()
            }
            Command::Laws => {
                if self.analysed.is_some() {
                    self.layers.push(Layer::Laws);
                } else {
                    self.refuse("fitting; a moment");
                }
                Vec::new()
            }
            Command::Working => {
                if self.analysed.is_some() {
                    let tube = self.bench.at;
                    self.layers.push(Layer::working(tube));
                } else {
                    self.refuse("fitting; a moment");
                }
                Vec::new()
            }
            Command::Glyphs => {
                self.look.fine = !self.look.fine;
                Vec::new()
            }
            Command::Help => {
                self.layers.push(Layer::Help { top: 0 });
                Vec::new()
            }
            Command::Quit => self.leave(),
            Command::Check => {
                if self.is_saved() {
                    self.layers.push(Layer::line(LineFor::Checker));
                } else {
                    self.refuse("not saved yet: a check is of what is in the file");
                }
                Vec::new()
            }
            Command::Close => {
                self.layers.push(Layer::Close);
                Vec::new()
            }
            Command::Elsewhere => {
                if self.saved.failed.is_some() {
                    self.layers.push(Layer::line(LineFor::Elsewhere));
                } else {
                    self.refuse("w is for a titration that cannot be saved where it is");
                }
                Vec::new()
            }
            Command::Operator => {
                self.layers.push(Layer::line(LineFor::Operator));
                Vec::new()
            }
            Command::Forward => self.go(self.step.next()),
            Command::Back => self.go(self.step.previous()),
        }
    }

    fn typed(&mut self, c: char) -> Vec<Effect> {
        if self.bench.field == Field::Vial && !c.is_ascii_digit() {
            self.refuse("a vial number is typed in digits");
            return Vec::new();
        }
        if self.bench.line.value().chars().count() >= MOST_LINE {
            self.refuse(format!(
                "a line holds at most {MOST_LINE} characters; - clears it"
            ));
            return vec![Effect::Bell];
        }
        self.edit(InputRequest::InsertChar(c))
    }

    fn edit(&mut self, request: InputRequest) -> Vec<Effect> {
        self.bench.line.handle(request);
        // What was said of an earlier line no longer holds for this one.
        if self.message.refusal {
            self.message = Message::default();
        }
        Vec::new()
    }

    /// Back to the first field of the tube at the prompt, nothing typed.
    fn clear(&mut self) {
        let at = self.bench.at;
        self.bench.go(at);
        self.message = Message::default();
    }

    fn enter(&mut self, now: Stamp) -> Vec<Effect> {
        let text = self.bench.line.value().trim().to_string();
        match self.bench.field.clone() {
            Field::Vial => self.go_to(&text),
            Field::Value if text.is_empty() => Vec::new(),
            Field::Value => self.value(text, now),
            Field::More(begun) => self.more(*begun, &text, now),
        }
    }

    fn go_to(&mut self, text: &str) -> Vec<Effect> {
        if text.is_empty() {
            self.clear();
            return Vec::new();
        }
        let found = text
            .parse()
            .ok()
            .map(TubeNo)
            .filter(|no| self.titration().tube(*no).is_some());
        match found {
            Some(no) => self.choose(no),
            None => {
                let numbers = self.titration().tubes.iter().map(|t| t.no.0);
                let (low, high) = (
                    numbers.clone().min().unwrap_or(0),
                    numbers.max().unwrap_or(0),
                );
                self.bench.line.reset();
                self.refuse(format!(
                    "there is no vial {text}: this rack has vials {low} to {high}"
                ));
            }
        }
        Vec::new()
    }

    /// Puts a tube at the prompt because the person chose it.
    fn choose(&mut self, no: TubeNo) {
        self.bench.go(no);
        self.bench.last = None;
        let kept = self.titration().kept(no);
        let text = match (kept.last(), self.titration().lost.get(&no)) {
            (Some(k), _) => {
                let flag = k
                    .suspect
                    .as_ref()
                    .map_or(String::new(), |s| format!(", suspect: {s}"));
                let times = if kept.len() > 1 {
                    format!(", {} counts in all", kept.len())
                } else {
                    String::new()
                };
                format!(
                    "vial {no} has {}{times}{flag}; + recounts it, * flags it",
                    crate::notebook::reading_in_words(&k.reading)
                )
            }
            (None, Some(lost)) => format!("vial {no} is lost: {}; l takes that back", lost.why),
            (None, None) => String::new(),
        };
        self.say(text);
    }

    fn walk(&mut self, by: isize) -> Vec<Effect> {
        let tubes = &self.titration().tubes;
        let here = tubes
            .iter()
            .position(|t| t.no == self.bench.at)
            .unwrap_or(0);
        let there = here
            .saturating_add_signed(by)
            .min(tubes.len().saturating_sub(1));
        if let Some(no) = tubes.get(there).map(|t| t.no) {
            self.choose(no);
        }
        Vec::new()
    }

    /// The next tube in counting order that wants a reading, from the one after `at` around to the start.
    fn after(&self, at: TubeNo) -> Option<TubeNo> {
        let t = self.titration();
        let here = t.tubes.iter().position(|x| x.no == at).map_or(0, |i| i + 1);
        let (before, behind) = t.tubes.split_at(here.min(t.tubes.len()));
        behind
            .iter()
            .chain(before)
            .map(|t| t.no)
            .find(|no| t.wants_reading(*no))
    }

    fn minus(&mut self, now: Stamp) -> Vec<Effect> {
        let untouched = self.bench.line.value().is_empty()
            && self.bench.field == Field::Value
            && !self.bench.again;
        if !untouched {
            self.clear();
            return Vec::new();
        }
        let Some(n) = self.notebook.last_takeable() else {
            self.say("nothing to take back");
            return Vec::new();
        };
        let what = self
            .notebook
            .entry(n)
            .map(|e| self.notebook.describe(e))
            .unwrap_or_default();
        let to = self.notebook.entry(n).and_then(|e| tube_of(&e.what));
        match self.record(What::TakenBack(n), now) {
            None => vec![Effect::Bell],
            Some((_, effects)) => {
                if let Some(to) = to {
                    self.bench.go(to);
                }
                self.bench.last = None;
                self.say(format!("taken back   {what}   b: undo"));
                effects
            }
        }
    }

    fn bring_back(&mut self, now: Stamp) -> Vec<Effect> {
        let Some(n) = self.notebook.last_taken_back() else {
            self.say("nothing to bring back");
            return Vec::new();
        };
        let target = match self.notebook.entry(n).map(|e| &e.what) {
            Some(What::TakenBack(target)) => *target,
            _ => n,
        };
        match self.record(What::TakenBack(n), now) {
            None => vec![Effect::Bell],
            Some((_, effects)) => {
                let what = self
                    .notebook
                    .entry(target)
                    .map(|e| self.notebook.describe(e))
                    .unwrap_or_default();
                let from = self.notebook.entry(target).and_then(|e| tube_of(&e.what));
                let next = from.map_or_else(|| self.titration().next_unread(), |at| self.after(at));
                if let Some(next) = next {
                    self.bench.go(next);
                }
                self.say(format!("back again   {what}"));
                effects
            }
        }
    }

    pub(super) fn moved_on(&mut self, from: TubeNo) {
        if let Some(next) = self.after(from) {
            self.bench.go(next);
        }
    }

    pub(super) fn leave(&mut self) -> Vec<Effect> {
        if self.is_saved() {
            return vec![Effect::Quit];
        }
        if self.saved.failed.is_some() {
            self.layers.push(Layer::LeaveUnsaved);
        } else {
            self.leaving = true;
            self.say("leaving when the last entry is in the file ...");
        }
        Vec::new()
    }
}

/// The tube an entry is about, if it is about one.
fn tube_of(what: &What) -> Option<TubeNo> {
    match what {
        What::Counted { readings } => match readings.as_slice() {
            [one] => Some(one.tube),
            _ => None,
        },
        What::Lost { tube, .. } => Some(*tube),
        _ => None,
    }
}
