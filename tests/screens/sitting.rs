//! A sitting without a terminal: keys go in, effects are carried out on the spot, screens come out.

use rackside::analysis::{Analysis, analyse};
use rackside::app::keys::Key;
use rackside::app::{Access, App, Desk, Draft, Effect, Event, Laid, Look, Recent, Scene, Wide};
use rackside::assay::{Lab, Sheet, Stamp, Titration};
use rackside::figure::Plot;
use rackside::notebook::{Entry, Notebook, What};
use rackside::store::{self, Text};
use rackside::view;
use ratatui::Terminal;
use ratatui::backend::TestBackend;
use ratatui::buffer::Buffer;
use std::sync::{Arc, Mutex, PoisonError};

/// The clock, which stands still.
pub fn noon() -> Stamp {
    Stamp::parse("2031-05-04T12:00:00+02:00").unwrap()
}

/// Who is at the keyboard.
pub const WHO: &str = "A. Sample";

pub fn look(columns: u16, rows: u16) -> Look {
    Look {
        fine: true,
        plot: Plot::default(),
        log_axis: false,
        wide: Wide::default(),
        columns,
        rows,
    }
}

/// The notebook of a demo.
pub fn demo(name: &str) -> Notebook {
    let demo = rackside::shell::demos::find(Some(name)).unwrap();
    store::carried(name, demo.text).unwrap().notebook
}

/// A notebook with nothing but its opening.
pub fn opened(t: Titration) -> Notebook {
    Notebook::open(t.protocol, t.levels, t.tubes, noon(), WHO).unwrap()
}

/// The titration of the example sheet with changes made to its text.
pub fn example(changes: &[(&str, &str)]) -> Titration {
    let mut text = Sheet::EXAMPLE.to_string();
    for (from, to) in changes {
        assert!(text.contains(from), "{from}");
        text = text.replace(from, to);
    }
    Sheet::parse(&text).unwrap().titration().unwrap()
}

/// The digest a file of these entries would have.
pub fn digest(entries: &[Arc<Entry>]) -> String {
    Text::of(entries).unwrap().digest().into()
}

/// An analysis is a pure function of a titration, so one of the same titration need not be made twice.
fn analysed(t: &Titration) -> Arc<Analysis> {
    static KNOWN: Mutex<Vec<(Titration, Arc<Analysis>)>> = Mutex::new(Vec::new());
    let find = || {
        let known = KNOWN.lock().unwrap_or_else(PoisonError::into_inner);
        let found = known.iter().find(|(of, _)| of == t);
        found.map(|(_, analysis)| Arc::clone(analysis))
    };
    find().unwrap_or_else(|| {
        let analysis = Arc::new(analyse(t));
        let mut known = KNOWN.lock().unwrap_or_else(PoisonError::into_inner);
        known.push((t.clone(), Arc::clone(&analysis)));
        analysis
    })
}

/// A sitting.
#[derive(Clone)]
pub struct Sitting {
    pub app: App,
    /// Effects that a terminal, a disk or a leaving would see.
    pub seen: Vec<Effect>,
    /// What is known of titrations used lately.
    pub recents: Vec<Recent>,
    /// Whether analyses are made.
    pub analysing: bool,
    /// Whether the disk takes what is saved; otherwise it says this.
    pub disk: Result<(), &'static str>,
}

impl Sitting {
    fn with((app, effects): (App, Vec<Effect>)) -> Sitting {
        let mut sitting = Sitting {
            app,
            seen: Vec::new(),
            recents: Vec::new(),
            analysing: true,
            disk: Ok(()),
        };
        sitting.carry_out(effects);
        sitting
    }

    /// At the start screen, with these titrations used lately.
    pub fn at_start(recents: Vec<Recent>) -> Sitting {
        let mut sitting = Sitting::with(App::start(Lab::default(), WHO.into(), look(80, 24)));
        sitting.recents = recents;
        sitting.carry_out(vec![Effect::Survey]);
        sitting
    }

    /// With a notebook on the bench.
    pub fn at(notebook: Notebook) -> Sitting {
        Sitting::laid(Laid {
            digest: digest(notebook.entries()),
            notebook,
            file: "/data/ob-31.ron".into(),
            access: Access::Writing,
            notices: Vec::new(),
            changed: Vec::new(),
        })
    }

    pub fn laid(laid: Laid) -> Sitting {
        Sitting::with(App::at_desk(laid, Lab::default(), WHO.into(), look(80, 24)))
    }

    pub fn demo(name: &str) -> Sitting {
        Sitting::at(demo(name))
    }

    /// A titration with nothing read yet, from the example sheet with changes.
    pub fn fresh(changes: &[(&str, &str)]) -> Sitting {
        Sitting::at(opened(example(changes)))
    }

    pub fn happen(&mut self, event: Event) {
        let effects = self.app.update(event, noon());
        self.carry_out(effects);
    }

    fn carry_out(&mut self, effects: Vec<Effect>) {
        for effect in effects {
            match effect {
                Effect::Analyse(revision, titration) if self.analysing => {
                    self.happen(Event::Analysed(revision, analysed(&titration)));
                }
                Effect::Save(revision, ref entries) => {
                    let said = match self.disk {
                        Ok(()) => Event::Saved(revision, digest(entries)),
                        Err(why) => Event::SaveFailed(revision, why.into()),
                    };
                    self.seen.push(effect);
                    self.happen(said);
                }
                Effect::Create {
                    ref path,
                    ref titration,
                    ref who,
                } => {
                    let t = (**titration).clone();
                    let notebook =
                        Notebook::open(t.protocol, t.levels, t.tubes, noon(), who).unwrap();
                    let laid = Laid {
                        digest: digest(notebook.entries()),
                        notebook,
                        file: path.clone(),
                        access: Access::Writing,
                        notices: Vec::new(),
                        changed: Vec::new(),
                    };
                    self.seen.push(effect);
                    self.happen(Event::Opened(Box::new(laid)));
                }
                Effect::Demo(ref name) => {
                    let there = Sitting::demo(name).app;
                    let Scene::Desk(desk) = there.scene else {
                        panic!("a demo is on the bench")
                    };
                    let laid = Laid {
                        digest: desk.saved.digest,
                        notebook: desk.notebook,
                        file: format!("{name}.ron"),
                        access: Access::Writing,
                        notices: Vec::new(),
                        changed: Vec::new(),
                    };
                    self.seen.push(effect);
                    self.happen(Event::Opened(Box::new(laid)));
                }
                Effect::Open(ref path) => {
                    let said = format!("{path}: no such file");
                    self.seen.push(effect);
                    self.happen(Event::Refused(said));
                }
                Effect::Survey => self.happen(Event::Recents(self.recents.clone())),
                Effect::WritePage(_) => {
                    self.seen.push(effect);
                    self.happen(Event::Done("the page is in /data/ob-31.txt".into()));
                }
                other => self.seen.push(other),
            }
        }
    }

    pub fn press(&mut self, key: Key) {
        self.happen(Event::Key(key));
    }

    /// Types characters; a line feed is Enter.
    pub fn types(&mut self, text: &str) -> &mut Sitting {
        for c in text.chars() {
            self.press(if c == '\n' { Key::Enter } else { Key::Char(c) });
        }
        self
    }

    /// Presses a key a number of times.
    pub fn times(&mut self, n: usize, key: Key) -> &mut Sitting {
        for _ in 0..n {
            self.press(key);
        }
        self
    }

    pub fn desk(&self) -> &Desk {
        match &self.app.scene {
            Scene::Desk(desk) => desk,
            _ => panic!("not at a desk"),
        }
    }

    pub fn draft(&self) -> &Draft {
        match &self.app.scene {
            Scene::Draft(draft) => draft,
            _ => panic!("no draft"),
        }
    }

    /// What the last entry of the notebook says.
    pub fn newest(&self) -> &What {
        &self.desk().notebook.entries().last().unwrap().what
    }

    /// How many entries there are.
    pub fn entries(&self) -> u32 {
        self.desk().notebook.revision()
    }

    /// The last thing said.
    pub fn said(&self) -> &str {
        let message = match &self.app.scene {
            Scene::Start(x) => &x.message,
            Scene::Draft(x) => &x.message,
            Scene::Desk(x) => &x.message,
        };
        &message.text
    }

    /// Whether the last thing said is a refusal.
    pub fn refused(&self) -> bool {
        match &self.app.scene {
            Scene::Start(x) => x.message.refusal,
            Scene::Draft(x) => x.message.refusal,
            Scene::Desk(x) => x.message.refusal,
        }
    }

    /// Plain or fine characters, as a person chooses with a key at the bench.
    pub fn set_fine(&mut self, fine: bool) {
        self.app.look.fine = fine;
        if let Scene::Desk(desk) = &mut self.app.scene {
            desk.look.fine = fine;
        }
    }

    /// The screen at a size, told to the program first.
    pub fn screen(&mut self, columns: u16, rows: u16) -> Screen {
        self.happen(Event::Resize(columns, rows));
        draw(&self.app, columns, rows)
    }

    /// The text at 80 by 24.
    pub fn text(&mut self) -> String {
        self.screen(80, 24).text()
    }
}

/// A screen as it was drawn.
pub struct Screen {
    pub buffer: Buffer,
    /// Where the cursor is, if it is to be seen.
    pub cursor: Option<(u16, u16)>,
}

/// Draws whatever the program believes of the size.
pub fn draw(app: &App, columns: u16, rows: u16) -> Screen {
    let mut terminal = Terminal::new(TestBackend::new(columns, rows)).unwrap();
    terminal.draw(|frame| view::draw(frame, app)).unwrap();
    let backend = terminal.backend();
    let at = backend.cursor_position();
    Screen {
        buffer: backend.buffer().clone(),
        cursor: backend.cursor_visible().then_some((at.x, at.y)),
    }
}

impl Screen {
    /// Its lines without the blanks at their ends.
    pub fn lines(&self) -> Vec<String> {
        let width = usize::from(self.buffer.area.width).max(1);
        self.buffer
            .content
            .chunks(width)
            .map(|row| {
                let line: String = row.iter().map(|cell| cell.symbol()).collect();
                line.trim_end().to_string()
            })
            .collect()
    }

    pub fn text(&self) -> String {
        self.lines().join("\n")
    }

    /// The text with the cursor's place below it.
    pub fn with_cursor(&self) -> String {
        let cursor = match self.cursor {
            Some((x, y)) => format!("cursor: column {x}, row {y}"),
            None => "no cursor".into(),
        };
        format!("{}\n[{cursor}]", self.text())
    }
}
