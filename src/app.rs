//! What the program is at a moment, and how events change it: `Event -> update -> Effect`, no I/O.

mod bench;
mod desk;
mod draft;
mod fields;
mod form;
pub mod keys;
mod layers;
mod result;
mod sheet;
mod start;

pub use bench::{Begun, Bench, Field};
pub use desk::{Analysed, Desk, Laid, Saved};
pub use draft::Draft;
pub use form::{FieldState, Form, Kind};
pub use layers::{Layer, LineFor, ReasonFor, working_lines, working_room};
pub use result::{fit_line, page};
pub use sheet::Forms;
pub use start::{Ask, DEMOS, Recent, Start};

use crate::analysis::Analysis;
use crate::assay::{Lab, Stamp, Titration};
use crate::figure::Plot;
use crate::notebook::Entry;
use keys::Key;
use std::collections::BTreeMap;
use std::sync::Arc;

/// What is typed in the forms of a titration that is not open yet, by the name of its field.
pub type Typed = BTreeMap<String, String>;

/// Something that happened.
#[derive(Debug, Clone)]
pub enum Event {
    /// A key was pressed.
    Key(Key),
    /// Text was pasted.
    Paste(String),
    /// The terminal has this many columns and rows.
    Resize(u16, u16),
    /// The analysis of a revision is done.
    Analysed(u32, Arc<Analysis>),
    /// The file holds everything up to a revision, and this is its digest.
    Saved(u32, String),
    /// A save failed, and why; it is being tried again.
    SaveFailed(u32, String),
    /// A titration was laid on the bench.
    Opened(Box<Laid>),
    /// The titration is saved to this file from now on.
    Moved(String),
    /// Something that was asked for could not be done, and why.
    Refused(String),
    /// Something that was asked for was done.
    Done(String),
    /// What is known of the titrations used lately.
    Recents(Vec<Recent>),
    /// A titration was being typed when the terminal went away.
    KeptDraft(Typed),
    /// The terminal is gone or the program is asked to end.
    HangUp,
}

/// Something the shell is to do.
#[derive(Debug, Clone)]
pub enum Effect {
    /// Save these entries as a revision.
    Save(u32, Vec<Arc<Entry>>),
    /// Analyse a revision.
    Analyse(u32, Box<Titration>),
    /// Open a file for writing.
    Open(String),
    /// Make a new file and open it.
    Create {
        /// The file.
        path: String,
        /// What it begins with.
        titration: Box<Titration>,
        /// Who makes it.
        who: String,
    },
    /// Open a fresh copy of a demo.
    Demo(String),
    /// Put the titration away: wait for its last save, and let go of the file.
    PutAway,
    /// Look up the titrations used lately.
    Survey,
    /// Keep what is typed of a titration that is not open yet, for the next start.
    KeepDraft(Typed),
    /// Forget it: the titration is open, or given up.
    DropDraft,
    /// Keep the lab's settings.
    KeepLab(Box<Lab>),
    /// Write a page beside the titration.
    WritePage(String),
    /// Save to another file from now on.
    SaveElsewhere(String),
    /// Print a page on standard output after leaving.
    PrintAfter(String),
    /// Sound the bell.
    Bell,
    /// Stop for the shell.
    Suspend,
    /// End.
    Quit,
}

/// Whether the titration may be changed here.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Access {
    /// It may.
    Writing,
    /// It may only be looked at, and why.
    ReadOnly(String),
}

/// What the wide part of the bench shows.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum Wide {
    /// The rack, and the plot beside it where there is room.
    #[default]
    RackAndPlot,
    /// The plot alone.
    Plot,
    /// A table of all tubes with their amounts.
    Tubes,
}

/// How things are shown; nothing here is kept in the notebook.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Look {
    /// Braille rather than plain characters.
    pub fine: bool,
    /// What the plot shows.
    pub plot: Plot,
    /// Free on a log axis in the isotherm.
    pub log_axis: bool,
    /// What the wide part shows.
    pub wide: Wide,
    /// Columns of the terminal.
    pub columns: u16,
    /// Rows of the terminal.
    pub rows: u16,
}

/// A sentence to the person, and whether it is a refusal.
#[derive(Debug, Clone, PartialEq, Eq, Default)]
pub struct Message {
    /// What it says.
    pub text: String,
    /// Something was refused.
    pub refusal: bool,
}

impl Message {
    /// A plain sentence.
    pub fn said(text: impl Into<String>) -> Message {
        Message {
            text: text.into(),
            refusal: false,
        }
    }

    /// A refusal.
    pub fn refused(text: impl Into<String>) -> Message {
        Message {
            text: text.into(),
            refusal: true,
        }
    }
}

/// The steps of the walk.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub enum Step {
    /// What happened before the rack.
    Protocol,
    /// The rack.
    Ladder,
    /// The counter.
    Counter,
    /// The tubes, at the bench.
    Tubes,
    /// The result.
    Result,
}

impl Step {
    /// All of them in order.
    pub const ALL: [Step; 5] = [
        Step::Protocol,
        Step::Ladder,
        Step::Counter,
        Step::Tubes,
        Step::Result,
    ];

    /// Its word.
    pub fn word(self) -> &'static str {
        match self {
            Step::Protocol => "protocol",
            Step::Ladder => "ladder",
            Step::Counter => "counter",
            Step::Tubes => "tubes",
            Step::Result => "result",
        }
    }

    /// The step after, or this if it is the last.
    pub fn next(self) -> Step {
        Self::ALL.into_iter().find(|s| *s > self).unwrap_or(self)
    }

    /// The step before, or this if it is the first.
    pub fn previous(self) -> Step {
        Self::ALL
            .into_iter()
            .rev()
            .find(|s| *s < self)
            .unwrap_or(self)
    }
}

/// Where one is.
#[derive(Debug, Clone)]
pub enum Scene {
    /// The start.
    Start(Box<Start>),
    /// A titration that is not open yet.
    Draft(Box<Draft>),
    /// A titration on the bench.
    Desk(Box<Desk>),
}

/// The program at a moment.
#[derive(Debug, Clone)]
pub struct App {
    /// Where one is.
    pub scene: Scene,
    /// How things are shown.
    pub look: Look,
    /// The lab's settings.
    pub lab: Lab,
    /// Who is at the keyboard.
    pub who: String,
    /// Whether leaving a titration leads back to the start.
    pub from_start: bool,
    /// Keys typed while a titration waits for its last save before it is left.
    ahead: Vec<Key>,
}

impl App {
    /// At the start screen; and what to do first.
    pub fn start(lab: Lab, who: String, look: Look) -> (App, Vec<Effect>) {
        let scene = Scene::Start(Box::default());
        (
            App {
                scene,
                look,
                lab,
                who,
                from_start: true,
                ahead: Vec::new(),
            },
            vec![Effect::Survey],
        )
    }

    /// With a titration on the bench; and what to do first.
    pub fn at_desk(laid: Laid, lab: Lab, who: String, look: Look) -> (App, Vec<Effect>) {
        let (desk, effects) = Desk::lay(laid, who.clone(), look);
        (
            App {
                scene: Scene::Desk(Box::new(desk)),
                look,
                lab,
                who,
                from_start: false,
                ahead: Vec::new(),
            },
            effects,
        )
    }

    /// Takes in what happened and says what is to be done.
    pub fn update(&mut self, event: Event, now: Stamp) -> Vec<Effect> {
        match event {
            Event::HangUp => {
                let kept = match &self.scene {
                    Scene::Draft(draft) => draft.typed().map(Effect::KeepDraft),
                    _ => None,
                };
                return kept.into_iter().chain([Effect::Quit]).collect();
            }
            Event::Resize(columns, rows) => {
                (self.look.columns, self.look.rows) = (columns, rows);
                if let Scene::Desk(desk) = &mut self.scene {
                    (desk.look.columns, desk.look.rows) = (columns, rows);
                }
                return Vec::new();
            }
            Event::Key(Key::Ctrl('z')) => return vec![Effect::Suspend],
            Event::Key(key) if key != Key::Esc && self.is_leaving() => {
                // Typed ahead, for where leaving leads.
                self.ahead.push(key);
                return Vec::new();
            }
            Event::Opened(laid) => {
                let drafted = matches!(self.scene, Scene::Draft(_));
                let (desk, mut effects) = Desk::lay(*laid, self.who.clone(), self.look);
                self.scene = Scene::Desk(Box::new(desk));
                effects.extend(drafted.then_some(Effect::DropDraft));
                return effects;
            }
            _ => {}
        }
        let mut effects = match &mut self.scene {
            Scene::Start(start) => {
                let before = self.lab.operator.clone();
                let effects = start.update(event, &mut self.lab, self.look);
                // Who says in the settings who is usually at the keyboard is at it.
                if self.lab.operator != before && !self.lab.operator.is_empty() {
                    self.who.clone_from(&self.lab.operator);
                }
                effects
            }
            Scene::Draft(draft) => draft.update(event, &self.who),
            Scene::Desk(desk) => desk.update(event, now),
        };
        if let Scene::Desk(desk) = &self.scene {
            self.who.clone_from(&desk.who);
            self.look = desk.look;
        }
        // Where nothing tells who is at the keyboard, it is who is named in the protocol of a new titration.
        for effect in &mut effects {
            if let Effect::Create { titration, who, .. } = effect {
                let named = titration.protocol.operator.trim();
                if !named.is_empty() && self.who == Lab::NOBODY {
                    self.who = named.into();
                    who.clone_from(&self.who);
                }
            }
        }
        self.moved(&mut effects);
        if !self.is_leaving() && !self.ahead.is_empty() {
            let ahead = std::mem::take(&mut self.ahead);
            // A question that came up instead is not answered by keys that were not meant for it.
            if matches!(self.scene, Scene::Start(_)) {
                for key in ahead {
                    effects.extend(self.update(Event::Key(key), now));
                }
            }
        }
        effects
    }

    fn is_leaving(&self) -> bool {
        matches!(&self.scene, Scene::Desk(desk) if desk.leaving)
    }

    /// Leads from one scene to the next where an effect asks for it.
    fn moved(&mut self, effects: &mut Vec<Effect>) {
        let leaving = effects.iter().any(|e| matches!(e, Effect::Quit));
        match &mut self.scene {
            Scene::Start(start) if start.wants_draft => {
                let draft = match start.kept.take() {
                    Some(typed) => Draft::resumed(&self.lab, &typed),
                    None => Draft::fresh(&self.lab),
                };
                self.scene = Scene::Draft(Box::new(draft));
            }
            Scene::Draft(draft) if draft.left => {
                self.scene = Scene::Start(Box::default());
                effects.extend([Effect::DropDraft, Effect::Survey]);
            }
            Scene::Desk(_) if leaving && self.from_start => {
                effects.retain(|e| !matches!(e, Effect::Quit));
                effects.extend([Effect::PutAway, Effect::Survey]);
                self.scene = Scene::Start(Box::default());
            }
            _ => {}
        }
    }
}
