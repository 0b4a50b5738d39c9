//! The terminal: raw mode, the alternate screen, and that it is whole again whatever happens.

use crossterm::cursor::Show;
use crossterm::event::{DisableBracketedPaste, EnableBracketedPaste};
use crossterm::execute;
use crossterm::style::Print;
use crossterm::terminal::{
    BeginSynchronizedUpdate, Clear, ClearType, EndSynchronizedUpdate, EnterAlternateScreen,
    LeaveAlternateScreen, disable_raw_mode, enable_raw_mode,
};
use ratatui::backend::CrosstermBackend;
use ratatui::{Frame, Terminal};
use std::io::{self, BufWriter, Stdout, Write, stdout};
use std::mem::ManuallyDrop;
use std::sync::Once;
use std::sync::atomic::{AtomicBool, Ordering};

type Out = BufWriter<Stdout>;

/// Room for a whole screen, so that one frame is one write.
const BUFFER: usize = 64 * 1024;

/// Whether the terminal is ours at the moment.
static OURS: AtomicBool = AtomicBool::new(false);

/// The terminal while it is ours; given back on drop, and by a panic.
pub(super) struct Screen {
    /// Never dropped: on its way out it would show the cursor, which [`release`] does already, and complain on
    /// standard error where it cannot, which panics if that has gone together with the terminal.
    terminal: ManuallyDrop<Terminal<CrosstermBackend<Out>>>,
}

fn seize() -> io::Result<()> {
    enable_raw_mode()?;
    OURS.store(true, Ordering::SeqCst);
    execute!(
        stdout(),
        EnterAlternateScreen,
        EnableBracketedPaste,
        Clear(ClearType::All)
    )
}

/// Gives the terminal back; a second call does nothing.
fn release() {
    if OURS.swap(false, Ordering::SeqCst) {
        // Each step is tried whatever became of the one before it.
        drop(execute!(
            stdout(),
            DisableBracketedPaste,
            LeaveAlternateScreen,
            Show
        ));
        drop(disable_raw_mode());
    }
}

fn terminal() -> io::Result<ManuallyDrop<Terminal<CrosstermBackend<Out>>>> {
    let out = BufWriter::with_capacity(BUFFER, stdout());
    Terminal::new(CrosstermBackend::new(out)).map(ManuallyDrop::new)
}

impl Screen {
    pub(super) fn enter() -> io::Result<Screen> {
        static HOOK: Once = Once::new();
        HOOK.call_once(|| {
            let before = std::panic::take_hook();
            std::panic::set_hook(Box::new(move |info| {
                // A thread at the side takes nothing with it; only the main one gives the terminal back and speaks.
                if std::thread::current().name() == Some("main") {
                    release();
                    before(info);
                }
            }));
        });
        let entered = seize().and_then(|()| terminal());
        match entered {
            Ok(terminal) => Ok(Screen { terminal }),
            Err(e) => {
                release();
                Err(e)
            }
        }
    }

    pub(super) fn draw(&mut self, draw: impl FnOnce(&mut Frame)) -> io::Result<()> {
        crossterm::queue!(self.terminal.backend_mut(), BeginSynchronizedUpdate)?;
        self.terminal.draw(draw)?;
        crossterm::queue!(self.terminal.backend_mut(), EndSynchronizedUpdate)?;
        io::Write::flush(self.terminal.backend_mut())
    }

    pub(super) fn bell(&mut self) -> io::Result<()> {
        let out = self.terminal.backend_mut();
        crossterm::queue!(out, Print('\u{7}'))?;
        out.flush()
    }

    /// Stops the program as the shell would, and takes the terminal again when it goes on.
    ///
    /// The terminal is built anew rather than cleared: clearing asks the terminal where its cursor is, and
    /// the answer may never come.
    pub(super) fn suspend(&mut self) -> io::Result<()> {
        release();
        signal_hook::low_level::emulate_default_handler(signal_hook::consts::SIGTSTP)?;
        seize()?;
        self.terminal = terminal()?;
        Ok(())
    }

    pub(super) fn leave(&mut self) {
        release();
    }
}

impl Drop for Screen {
    fn drop(&mut self) {
        release();
    }
}
