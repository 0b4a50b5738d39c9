//! What the program is at a moment, and how events change it: `Event -> update -> Effect`, no I/O.

mod bench;
pub mod keys;
mod layers;

pub use bench::{Bench, Field};
pub use layers::{Layer, LineFor, ReasonFor};

use crate::analysis::Analysis;
use crate::assay::{Stamp, Titration, TubeNo};
use crate::notebook::{Entry, Notebook, What};
use keys::Key;
use std::sync::Arc;

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
    /// The file holds everything up to a revision.
    Saved(u32),
    /// A save failed, and why; it is being tried again.
    SaveFailed(u32, String),
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

/// How far the file is.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Saved {
    /// The newest revision that is safely in the file.
    pub revision: u32,
    /// When that was known.
    pub at: Option<Stamp>,
    /// Why the newest save failed, while it has not succeeded since.
    pub failed: Option<String>,
}

/// What the wide part of the screen shows.
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
    /// Free on a log axis.
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

/// The newest finished analysis and the revision it is of.
#[derive(Debug, Clone)]
pub struct Analysed {
    /// The revision.
    pub revision: u32,
    /// What is said of it.
    pub analysis: Arc<Analysis>,
}

/// The program at a moment.
#[derive(Debug, Clone)]
pub struct App {
    /// The titration on the bench.
    pub notebook: Notebook,
    /// The file's name, as shown.
    pub file: String,
    /// Whether it may be changed.
    pub access: Access,
    /// Who is at the keyboard.
    pub who: String,
    /// Things to be said as long as they hold, e.g. that the file was changed outside.
    pub notices: Vec<String>,
    /// The bench.
    pub bench: Bench,
    /// What lies over the bench, the topmost last.
    pub layers: Vec<Layer>,
    /// The newest finished analysis.
    pub analysed: Option<Analysed>,
    /// How far the file is.
    pub saved: Saved,
    /// How things are shown.
    pub look: Look,
    /// The last thing said.
    pub message: Message,
}

impl App {
    /// A titration laid on the bench, at the first tube without a reading; and what to do first.
    pub fn open(
        notebook: Notebook,
        file: String,
        access: Access,
        who: String,
        notices: Vec<String>,
        look: Look,
    ) -> (App, Vec<Effect>) {
        let revision = notebook.revision();
        let titration = notebook.titration().clone();
        let bench = Bench::at_first_unread(&titration);
        let app = App {
            notebook,
            file,
            access,
            who,
            notices,
            bench,
            layers: Vec::new(),
            analysed: None,
            saved: Saved {
                revision,
                at: None,
                failed: None,
            },
            look,
            message: Message::default(),
        };
        (app, vec![Effect::Analyse(revision, Box::new(titration))])
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

    /// Takes in what happened and says what is to be done.
    pub fn update(&mut self, event: Event, now: Stamp) -> Vec<Effect> {
        match event {
            Event::Key(key) => self.key(key, now),
            Event::Paste(text) => self.paste(&text),
            Event::Resize(columns, rows) => {
                (self.look.columns, self.look.rows) = (columns, rows);
                Vec::new()
            }
            Event::Analysed(revision, analysis) => {
                // An analysis of an older state than the one shown says nothing new.
                if self.analysed.as_ref().is_none_or(|a| a.revision < revision) {
                    self.analysed = Some(Analysed { revision, analysis });
                }
                Vec::new()
            }
            Event::Saved(revision) => {
                if revision >= self.saved.revision {
                    self.saved = Saved {
                        revision,
                        at: Some(now),
                        failed: None,
                    };
                }
                Vec::new()
            }
            Event::SaveFailed(revision, why) => {
                if revision > self.saved.revision {
                    self.saved.failed = Some(why);
                }
                Vec::new()
            }
            Event::HangUp => vec![Effect::Quit],
        }
    }

    fn key(&mut self, key: Key, now: Stamp) -> Vec<Effect> {
        if self.layers.is_empty() {
            self.bench_key(key, now)
        } else {
            self.layer_key(key, now)
        }
    }

    fn paste(&mut self, text: &str) -> Vec<Effect> {
        self.refuse(format!(
            "{} characters pasted and not taken: type readings one by one, or take a table with `rackside take`",
            text.chars().count()
        ));
        vec![Effect::Bell]
    }

    fn say(&mut self, text: impl Into<String>) {
        self.message = Message {
            text: text.into(),
            refusal: false,
        };
    }

    fn refuse(&mut self, text: impl Into<String>) {
        self.message = Message {
            text: text.into(),
            refusal: true,
        };
    }

    /// Records an entry; on success says what was recorded and asks for a save and an analysis.
    ///
    /// `None` where the notebook refused: the refusal is the message then.
    fn record(&mut self, what: What, now: Stamp) -> Option<(Arc<Entry>, Vec<Effect>)> {
        if let Access::ReadOnly(why) = &self.access {
            self.refuse(format!("read only: {why}"));
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
                self.refuse(rejection.to_string());
                None
            }
        }
    }

    /// The tube's name in a sentence, by its number.
    fn tube_name(&self, no: TubeNo) -> String {
        let t = self.titration();
        t.tube(no)
            .map_or_else(|| format!("vial {no}"), |tube| t.name(tube))
    }
}
