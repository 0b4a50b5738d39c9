//! The terminal and the threads: events in, effects out. The only place that waits.

mod analyst;
mod terminal;

use crate::app::{Access, App, Effect, Event, Look, keys};
use crate::assay::Stamp;
use crate::notebook::Entry;
use crate::store::{self, Ended, SaveReport, Saver, Text};
use crate::view;
use analyst::Analyst;
use crossterm::event::{Event as TerminalEvent, read};
use jiff::Timestamp;
use jiff::tz::TimeZone;
use signal_hook::consts::{SIGHUP, SIGINT, SIGTERM};
use signal_hook::iterator::Signals;
use std::io;
use std::sync::Arc;
use std::sync::mpsc::{Receiver, Sender, channel};
use std::thread;
use std::time::Duration;
use terminal::Screen;

/// How long leaving waits for the last save.
const SAVE_PATIENCE: Duration = Duration::from_secs(20);
/// How long a program that was hung up on may take to end.
const HANG_UP_PATIENCE: Duration = Duration::from_secs(25);

/// What reaches the loop.
enum Incoming {
    Event(Event),
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

/// One sitting at the bench, from opening to leaving.
///
/// # Errors
/// The terminal cannot be used, or the newest entries could not be saved.
pub fn sit(
    opened: store::Opened,
    who: String,
    notices: Vec<String>,
    look: Look,
) -> Result<(), ShellError> {
    crossterm::style::force_color_output(true);
    let file = opened.path.display().to_string();
    let (send, receive) = channel();
    let (saver, access, text) = match opened.access {
        store::Access::Write(target) => {
            let reports = send.clone();
            let saver = Saver::spawn(target, move |report| report_save(&reports, report))?;
            (Some(saver), Access::Writing, opened.text)
        }
        store::Access::Read => (None, Access::ReadOnly(read_only(&notices)), opened.text),
    };
    let notices = if matches!(access, Access::ReadOnly(_)) {
        Vec::new()
    } else {
        notices
    };
    let (app, first) = App::open(opened.notebook, file.clone(), access, who, notices, look);
    let analyst = Analyst::spawn({
        let send = send.clone();
        move |rev, analysis| drop(send.send(Incoming::Event(Event::Analysed(rev, analysis))))
    })?;
    let mut sitting = Sitting {
        app,
        analyst,
        saver,
        text,
        screen: Screen::enter()?,
        gone: false,
    };
    watch_signals(send.clone())?;
    watch_terminal(send)?;
    let ran = sitting.run(first, &receive);
    sitting.screen.leave();
    let ended = sitting.saver.map(|s| s.finish(SAVE_PATIENCE));
    match ended {
        Some(Ended::Unsaved { rev, error }) => Err(ShellError::Unsaved {
            file,
            rev,
            why: error.to_string(),
        }),
        Some(Ended::StillWriting) => {
            let rev = sitting.app.notebook.revision();
            Err(ShellError::Unsaved {
                file,
                rev,
                why: "the disk did not answer in time".into(),
            })
        }
        // A terminal that went away is how a dropped link looks: everything is kept, so nothing failed.
        _ if sitting.gone => Ok(()),
        _ => ran.map_err(ShellError::Terminal),
    }
}

fn read_only(notices: &[String]) -> String {
    notices
        .first()
        .cloned()
        .unwrap_or_else(|| "opened for reading".into())
}

fn report_save(send: &Sender<Incoming>, report: SaveReport) {
    let event = match report {
        SaveReport::Saved { rev } => Event::Saved(rev),
        SaveReport::Failed { rev, error } => Event::SaveFailed(rev, error.to_string()),
    };
    drop(send.send(Incoming::Event(event)));
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
            match read() {
                Ok(event) => {
                    if send.send(translated(event)).is_err() {
                        return;
                    }
                }
                Err(_) => {
                    hang_up(&send);
                    return;
                }
            }
        }
    })?;
    Ok(())
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
    saver: Option<Saver>,
    text: Text,
    screen: Screen,
    /// The terminal went away.
    gone: bool,
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
                if self.take_in(incoming)? {
                    return Ok(());
                }
                waiting = receive.try_recv().ok();
            }
            self.draw()?;
        }
        Ok(())
    }

    /// True when it is time to leave.
    fn take_in(&mut self, incoming: Incoming) -> io::Result<bool> {
        let Incoming::Event(event) = incoming else {
            return Ok(false);
        };
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
                Effect::Save(revision, entries) => self.save(revision, &entries),
                Effect::Analyse(revision, titration) => self.analyst.analyse(revision, *titration),
                Effect::Bell => self.screen.bell()?,
                Effect::Suspend => self.screen.suspend()?,
                Effect::Quit => return Ok(true),
            }
        }
        Ok(false)
    }

    fn save(&mut self, revision: u32, entries: &[Arc<Entry>]) {
        let Some(saver) = &self.saver else { return };
        let written = self.text.entries() as usize;
        for entry in entries.iter().skip(written) {
            if let Err(fault) = self.text.append(entry) {
                self.app
                    .update(Event::SaveFailed(revision, fault.to_string()), now());
                return;
            }
        }
        saver.save(revision, self.text.clone());
    }
}
