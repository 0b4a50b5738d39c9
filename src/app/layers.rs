//! What lies over the bench: a menu of reasons, a line of words, help, a question.

use super::form::edit;
use super::keys::{self, Key};
use super::{Desk, Effect, Step};
use crate::assay::{Model, ReadingId, Reason, Stamp, Suspicion, TubeNo};
use crate::notebook::{What, reading_in_words};
use tui_input::Input;

/// What a reason is chosen for.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum ReasonFor {
    /// A reading to be flagged.
    Suspect(TubeNo, ReadingId),
    /// A tube to be given up.
    Lost(TubeNo),
}

impl ReasonFor {
    /// Whether a reason can be one for this: a tube without a number is not lost on numbers alone.
    pub fn may_be(&self, reason: Reason) -> bool {
        reason != Reason::NumbersAlone || matches!(self, ReasonFor::Suspect(..))
    }
}

/// What a line of words is for.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum LineFor {
    /// The other reason, in words.
    OtherReason(ReasonFor),
    /// A note about a tube.
    Note(TubeNo),
    /// Why the protocol is corrected.
    Amend,
    /// Who checked the titration.
    Checker,
    /// Who is at the keyboard from now on.
    Operator,
    /// The file to save to instead.
    Elsewhere,
}

/// One layer; the topmost has the keys.
#[derive(Debug, Clone)]
pub enum Layer {
    /// The digit menu of reasons.
    Reasons(ReasonFor),
    /// A line of words.
    Line {
        /// What for.
        what: LineFor,
        /// The line.
        input: Input,
    },
    /// The laws of binding side by side, one to be chosen by its digit.
    Laws,
    /// How the amounts of a tube are made, step by step.
    Working {
        /// Which tube.
        tube: TubeNo,
        /// The first line shown.
        top: usize,
        /// A vial number being typed.
        vial: String,
    },
    /// The keys, from a line down.
    Help {
        /// The first line shown.
        top: u16,
    },
    /// Close the titration, or open it again?
    Close,
    /// The file does not hold everything: leave all the same?
    LeaveUnsaved,
}

/// Lines of a working that a terminal of so many rows shows: the border takes two.
pub fn working_room(rows: u16) -> usize {
    usize::from(rows).saturating_sub(2).max(1)
}

/// The working of a tube, in the width of the terminal: the border and its margin take six columns.
pub fn working_lines(desk: &Desk, tube: TubeNo) -> Vec<String> {
    let t = desk.titration();
    let (Some(done), Some(tube)) = (&desk.analysed, t.tube(tube)) else {
        return Vec::new();
    };
    let width = usize::from(desk.look.columns).saturating_sub(6);
    crate::report::working::lines(t, &done.analysis, tube, width)
}

/// The longest line of words.
const MOST_WORDS: usize = 200;

impl Layer {
    /// The working of a tube from its first step.
    pub fn working(tube: TubeNo) -> Layer {
        Layer::Working {
            tube,
            top: 0,
            vial: String::new(),
        }
    }

    /// An empty line of words.
    pub fn line(what: LineFor) -> Layer {
        Layer::Line {
            what,
            input: Input::default(),
        }
    }
}

impl Desk {
    pub(super) fn layer_key(&mut self, key: Key, now: Stamp) -> Vec<Effect> {
        match self.layers.last_mut() {
            None => Vec::new(),
            Some(Layer::Reasons(what)) => {
                let what = *what;
                self.reason_key(what, key, now)
            }
            Some(Layer::Line { what, input }) => match key {
                Key::Enter => {
                    let (what, words) = (*what, input.value().trim().to_string());
                    self.layers.pop();
                    self.line_done(what, words, now)
                }
                Key::Esc => {
                    self.layers.pop();
                    Vec::new()
                }
                key => {
                    edit(input, key, MOST_WORDS);
                    Vec::new()
                }
            },
            Some(Layer::Laws) => self.law_key(key, now),
            Some(Layer::Working { .. }) => {
                self.working_key(key);
                Vec::new()
            }
            Some(Layer::Help { top }) => {
                let lines = match self.step {
                    Step::Result => keys::result_help(self.look.columns),
                    _ => keys::bench_help(self.look.columns),
                };
                let most = keys::help_over(lines.len(), self.look.rows);
                match key {
                    Key::Down => *top = top.saturating_add(1).min(most),
                    Key::Up => *top = top.saturating_sub(1),
                    _ => {
                        self.layers.pop();
                    }
                }
                Vec::new()
            }
            Some(Layer::Close) => {
                self.layers.pop();
                match (key, self.titration().closed.is_some()) {
                    (Key::Char('y'), false) => self.recorded(What::Closed, now),
                    (Key::Char('y'), true) => self.recorded(What::Reopened, now),
                    _ => Vec::new(),
                }
            }
            Some(Layer::LeaveUnsaved) => match key {
                Key::Char('y') => vec![Effect::Quit],
                _ => {
                    self.layers.pop();
                    Vec::new()
                }
            },
        }
    }

    fn working_key(&mut self, key: Key) {
        let Some(Layer::Working { tube, .. }) = self.layers.last() else {
            return;
        };
        let room = working_room(self.look.rows);
        let last = working_lines(self, *tube).len().saturating_sub(room);
        let Some(Layer::Working { tube, top, vial }) = self.layers.last_mut() else {
            return;
        };
        match key {
            Key::Up => *top = top.saturating_sub(1),
            Key::Down => *top = (*top + 1).min(last),
            Key::Char(' ') => {
                *top = if *top >= last {
                    0
                } else {
                    (*top + room).min(last)
                }
            }
            Key::Char(c) if c.is_ascii_digit() && vial.len() < 6 => vial.push(c),
            Key::Backspace => {
                vial.pop();
            }
            Key::Enter if !vial.is_empty() => {
                let typed = std::mem::take(vial);
                let no = TubeNo(typed.parse().unwrap_or(0));
                if self.notebook.titration().tube(no).is_some() {
                    (*tube, *top) = (no, 0);
                    self.message = Default::default();
                } else {
                    self.refuse(format!("there is no vial {typed}"));
                }
            }
            Key::Esc | Key::Enter | Key::Char('-' | 's' | 'q') => {
                self.layers.pop();
                self.message = Default::default();
            }
            _ => {}
        }
    }

    fn reason_key(&mut self, what: ReasonFor, key: Key, now: Stamp) -> Vec<Effect> {
        match key {
            Key::Char(c) => match Reason::from_digit(c).filter(|r| what.may_be(*r)) {
                Some(Reason::Other) => {
                    self.layers.pop();
                    self.layers.push(Layer::line(LineFor::OtherReason(what)));
                    Vec::new()
                }
                Some(reason) => {
                    self.layers.pop();
                    self.reasoned(what, reason.into(), now)
                }
                None if matches!(c, '0' | '-' | 'q') => {
                    self.layers.pop();
                    Vec::new()
                }
                None => {
                    self.refuse("a reason is one of the digits shown; 0 leaves it");
                    Vec::new()
                }
            },
            Key::Esc => {
                self.layers.pop();
                Vec::new()
            }
            _ => Vec::new(),
        }
    }

    /// Chooses a law of binding: an amendment, since the summary depends on it.
    fn law_key(&mut self, key: Key, now: Stamp) -> Vec<Effect> {
        let chosen = match key {
            Key::Char('0') => None,
            Key::Char('1') => Some(Model::OneClass),
            Key::Char('2') => Some(Model::TwoClasses),
            Key::Char('3') => Some(Model::Hill),
            Key::Char('-' | 'q') | Key::Esc | Key::Enter => {
                self.layers.pop();
                return Vec::new();
            }
            _ => {
                self.refuse("a law is chosen by its digit; 0 chooses none, - leaves it");
                return Vec::new();
            }
        };
        self.layers.pop();
        let t = self.titration();
        if t.protocol.numbers.model == chosen {
            self.say("that is what is shown already");
            return Vec::new();
        }
        let (mut protocol, levels) = (t.protocol.clone(), t.levels.clone());
        protocol.numbers.model = chosen;
        let reason = match chosen {
            Some(model) => format!("{} chosen to be shown", model.words()),
            None => "no law of binding chosen: one class is shown".into(),
        };
        let what = What::Amended {
            protocol: Box::new(protocol),
            levels,
            reason,
        };
        self.recorded(what, now)
    }

    fn line_done(&mut self, what: LineFor, words: String, now: Stamp) -> Vec<Effect> {
        match what {
            LineFor::OtherReason(about) => self.reasoned(
                about,
                Suspicion {
                    reason: Reason::Other,
                    words,
                },
                now,
            ),
            LineFor::Amend if words.is_empty() => {
                self.layers.push(Layer::line(LineFor::Amend));
                self.refuse("a correction needs its reason; Esc goes back");
                Vec::new()
            }
            _ if words.is_empty() => Vec::new(),
            LineFor::Amend => self.amend(words, now),
            LineFor::Checker => {
                let digest = self.saved.digest.clone();
                self.recorded(What::Checked { by: words, digest }, now)
            }
            LineFor::Elsewhere => vec![Effect::SaveElsewhere(words)],
            LineFor::Operator => {
                self.say(format!("{words} is at the keyboard"));
                self.who = words;
                Vec::new()
            }
            LineFor::Note(tube) => {
                let what = What::Noted {
                    tube: Some(tube),
                    text: words,
                };
                self.recorded(what, now)
            }
        }
    }

    fn reasoned(&mut self, what: ReasonFor, why: Suspicion, now: Stamp) -> Vec<Effect> {
        match what {
            ReasonFor::Suspect(tube, reading) => {
                let kept = self.titration().kept(tube).iter();
                let number = kept
                    .filter(|k| k.id == reading)
                    .map(|k| reading_in_words(&k.reading))
                    .next()
                    .unwrap_or_default();
                let said = format!("suspect, {why}: {number}, {}", self.tube_name(tube));
                let effects = self.recorded(What::Flagged { reading, why }, now);
                if !self.message.refusal {
                    self.say(said);
                }
                effects
            }
            ReasonFor::Lost(tube) => {
                let effects = self.recorded(What::Lost { tube, why }, now);
                if self.titration().lost.contains_key(&tube) {
                    self.moved_on(tube);
                }
                effects
            }
        }
    }

    /// Records an entry and reads it back.
    fn recorded(&mut self, what: What, now: Stamp) -> Vec<Effect> {
        match self.record(what, now) {
            None => vec![Effect::Bell],
            Some((entry, effects)) => {
                self.say(self.notebook.describe(&entry));
                effects
            }
        }
    }
}
