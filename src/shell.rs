//! The terminal and the threads: events in, effects out. The only place that waits.

mod analyst;
pub mod demos;
mod files;
mod terminal;

pub use files::open;

use crate::app::{App, Effect, Event, Look, keys};
use crate::assay::{Lab, Stamp};
use crate::store;
use crate::view;
use analyst::Analyst;
use crossterm::event::{Event as TerminalEvent, poll, read};
use files::Open;
use jiff::Timestamp;
use jiff::tz::TimeZone;
use signal_hook::consts::{SIGHUP, SIGINT, SIGTERM};
use signal_hook::iterator::Signals;
use std::io::{self, IsTerminal};
use std::path::Path;
use std::sync::mpsc::{Receiver, Sender, channel};
use std::thread;
use std::time::Duration;
use terminal::Screen;

/// How long a program that was hung up on may take to end.
const HANG_UP_PATIENCE: Duration = Duration::from_secs(25);

/// How often a terminal that gives no keys is asked whether it is still there.
const LOOK: Duration = Duration::from_secs(1);

/// What reaches the loop.
enum Incoming {
    Event(Event),
    /// What is said of the titration that was the n-th on the bench, and of no other.
    Of(u32, Event),
    /// The terminal gave a key or a size that means nothing here.
    Nothing,
}

/// The moment by the clock and the offset of this machine.
pub fn now() -> Stamp {
    let at = Timestamp::now();
    Stamp::new(at, TimeZone::system().to_offset(at))
}

/// Columns and rows of the terminal, or 80 by 24 where it does not say.
pub fn size() -> (u16, u16) {
    crossterm::terminal::size().unwrap_or((80, 24))
}

/// Why a sitting ended badly.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum ShellError {
    /// The terminal failed.
    #[error("the terminal: {0}")]
    Terminal(#[from] io::Error),
    /// A file could not be made.
    #[error("{path}: cannot create: {why}")]
    CannotCreate {
        /// The file.
        path: String,
        /// Why.
        why: String,
    },
    /// The newest entries are not in the file.
    #[error("{file}: entries up to {rev} are not saved: {why}")]
    Unsaved {
        /// The file.
        file: String,
        /// The newest entry.
        rev: u32,
        /// Why.
        why: String,
    },
}

/// What a sitting begins with.
#[derive(Debug)]
pub enum First {
    /// The start screen.
    Start,
    /// A titration, with what is to be said of it as long as it holds.
    Titration(Box<store::Opened>, Vec<String>),
}

/// One sitting, from the first screen to leaving. Gives back a page to be printed, if one was asked for.
///
/// # Errors
/// The terminal cannot be used, or the newest entries could not be saved.
pub fn sit(first: First, who: String, lab: Lab, look: Look) -> Result<Option<String>, ShellError> {
    crossterm::style::force_color_output(true);
    let (send, receive) = channel();
    let analyst = Analyst::spawn({
        let send = send.clone();
        move |laid, rev, analysis| {
            drop(send.send(Incoming::Of(laid, Event::Analysed(rev, analysis))));
        }
    })?;
    let (app, effects, open) = match first {
        First::Start => {
            let (app, effects) = App::start(lab, who, look);
            (app, effects, None)
        }
        First::Titration(opened, notices) => {
            let (laid, open) = files::lay(*opened, notices, &send, 0)?;
            let (app, effects) = App::at_desk(laid, lab, who, look);
            (app, effects, Some(open))
        }
    };
    let screen = Screen::enter()?;
    watch_signals(send.clone())?;
    watch_terminal(send.clone())?;
    let mut sitting = Sitting {
        app,
        analyst,
        open,
        laid: 0,
        send,
        screen,
        gone: false,
        print: None,
    };
    let ran = sitting.run(effects, &receive);
    sitting.screen.leave();
    let gone = sitting.gone;
    let print = sitting.print.take();
    if let Some(open) = sitting.open.take() {
        open.put_away()?;
    }
    match ran {
        // A terminal that went away is how a dropped link looks: everything is kept, so nothing failed.
        Err(e) if !gone => Err(e.into()),
        _ => Ok(print),
    }
}

fn watch_signals(send: Sender<Incoming>) -> io::Result<()> {
    let mut signals = Signals::new([SIGTERM, SIGHUP, SIGINT])?;
    thread::Builder::new()
        .name("signals".into())
        .spawn(move || {
            if signals.forever().next().is_some() {
                hang_up(&send);
            }
        })?;
    Ok(())
}

/// Asks the loop to end, and ends the program if it does not: a terminal that has gone may block a write for ever.
fn hang_up(send: &Sender<Incoming>) {
    drop(send.send(Incoming::Event(Event::HangUp)));
    let watchdog = thread::Builder::new().name("watchdog".into()).spawn(|| {
        thread::sleep(HANG_UP_PATIENCE);
        std::process::exit(1);
    });
    drop(watchdog);
}

fn watch_terminal(send: Sender<Incoming>) -> io::Result<()> {
    thread::Builder::new().name("keys".into()).spawn(move || {
        loop {
            match next_event() {
                Ok(Some(event)) => {
                    if send.send(translated(event)).is_err() {
                        return;
                    }
                }
                Ok(None) => {}
                Err(_) => {
                    hang_up(&send);
                    return;
                }
            }
        }
    })?;
    Ok(())
}

/// The next event; `None` where there is none for a while and the terminal is still there.
///
/// A terminal can vanish without a signal, where whoever started the program keeps the signal to itself. Reading
/// then finds the end again and again for ever, so it is never left to itself for long.
fn next_event() -> io::Result<Option<TerminalEvent>> {
    if poll(LOOK)? {
        return read().map(Some);
    }
    if io::stdin().is_terminal() {
        Ok(None)
    } else {
        Err(io::ErrorKind::UnexpectedEof.into())
    }
}

fn translated(event: TerminalEvent) -> Incoming {
    match event {
        TerminalEvent::Key(k) => keys::Key::from_terminal(&k)
            .map_or(Incoming::Nothing, |k| Incoming::Event(Event::Key(k))),
        TerminalEvent::Paste(text) => Incoming::Event(Event::Paste(text)),
        TerminalEvent::Resize(columns, rows) => Incoming::Event(Event::Resize(columns, rows)),
        _ => Incoming::Nothing,
    }
}

struct Sitting {
    app: App,
    analyst: Analyst,
    open: Option<Open>,
    /// Which titration is on the bench: the answers of threads that still worked for the one before are not taken.
    laid: u32,
    send: Sender<Incoming>,
    screen: Screen,
    /// The terminal went away.
    gone: bool,
    /// A page to be printed after leaving.
    print: Option<String>,
}

impl Sitting {
    fn run(&mut self, first: Vec<Effect>, receive: &Receiver<Incoming>) -> io::Result<()> {
        if self.carry_out(first)? {
            return Ok(());
        }
        self.draw()?;
        while let Ok(incoming) = receive.recv() {
            // All that is waiting is taken in before anything is drawn: typing never waits for a screen.
            let mut waiting = Some(incoming);
            while let Some(incoming) = waiting {
                let event = match incoming {
                    Incoming::Event(event) => Some(event),
                    Incoming::Of(laid, event) => (laid == self.laid).then_some(event),
                    Incoming::Nothing => None,
                };
                if let Some(event) = event
                    && self.take_in(event)?
                {
                    return Ok(());
                }
                waiting = receive.try_recv().ok();
            }
            if let Err(e) = self.draw() {
                // What cannot be drawn on has gone, and what goes with it may be news to the program.
                self.take_in(Event::HangUp)?;
                return Err(e);
            }
        }
        Ok(())
    }

    /// True when it is time to leave.
    fn take_in(&mut self, event: Event) -> io::Result<bool> {
        self.gone |= matches!(event, Event::HangUp);
        let effects = self.app.update(event, now());
        self.carry_out(effects)
    }

    fn draw(&mut self) -> io::Result<()> {
        let app = &self.app;
        let drawn = self.screen.draw(|frame| view::draw(frame, app));
        self.gone |= drawn.is_err();
        drawn
    }

    fn carry_out(&mut self, effects: Vec<Effect>) -> io::Result<bool> {
        for effect in effects {
            match effect {
                Effect::Save(revision, entries) => {
                    let fault = self
                        .open
                        .as_mut()
                        .and_then(|o| o.save(revision, &entries).err());
                    if let Some(why) = fault {
                        self.take_in(Event::SaveFailed(revision, why))?;
                    }
                }
                Effect::Analyse(revision, titration) => {
                    self.analyst.analyse(self.laid, revision, *titration);
                }
                Effect::Open(path) => {
                    let opened =
                        files::open(Path::new(&path), &self.app.who).map_err(|e| e.to_string());
                    self.lay(opened)?;
                }
                Effect::Create {
                    path,
                    titration,
                    who,
                } => {
                    let opened = files::create(Path::new(&path), *titration, &who);
                    self.lay(opened)?;
                }
                Effect::Demo(name) => {
                    let opened = match demos::find(Some(&name)).map(|d| demos::copy(&d)) {
                        Some(Ok(path)) => {
                            files::open(&path, &self.app.who).map_err(|e| e.to_string())
                        }
                        Some(Err(e)) => Err(e.to_string()),
                        None => Err(format!("there is no demo `{name}`")),
                    };
                    self.lay(opened)?;
                }
                Effect::PutAway => {
                    if let Some(Err(e)) = self.open.take().map(Open::put_away) {
                        self.take_in(Event::Refused(e.to_string()))?;
                    }
                }
                Effect::Survey => files::survey(self.send.clone())?,
                Effect::KeepDraft(typed) => files::keep_draft(&typed),
                Effect::DropDraft => files::drop_draft(),
                Effect::KeepLab(lab) => {
                    let said = files::keep_lab(&lab);
                    self.take_in(said.map_or_else(Event::Refused, Event::Done))?;
                }
                Effect::WritePage(page) => {
                    let said = self
                        .open
                        .as_ref()
                        .map_or(Err("no titration is open".into()), |o| o.write_page(&page));
                    self.take_in(said.map_or_else(Event::Refused, Event::Done))?;
                }
                Effect::SaveElsewhere(path) => {
                    let who = self.app.who.clone();
                    let moved = match &mut self.open {
                        Some(open) => open.redirect(Path::new(&path), &who),
                        None => Err("no titration is open".into()),
                    };
                    self.take_in(moved.map_or_else(Event::Refused, |()| Event::Moved(path)))?;
                }
                Effect::PrintAfter(page) => self.print = Some(page),
                Effect::Bell => self.screen.bell()?,
                Effect::Suspend => self.screen.suspend()?,
                Effect::Quit => return Ok(true),
            }
        }
        Ok(false)
    }

    /// Lays a titration that was opened on the bench, or says why it was not.
    fn lay(&mut self, opened: Result<(store::Opened, Vec<String>), String>) -> io::Result<()> {
        match opened {
            Err(why) => drop(self.take_in(Event::Refused(why))?),
            Ok((opened, notices)) => {
                self.laid += 1;
                let (laid, open) = files::lay(opened, notices, &self.send, self.laid)?;
                self.open = Some(open);
                self.take_in(Event::Opened(Box::new(laid)))?;
            }
        }
        Ok(())
    }
}
