//! Runs the program, in a pseudo-terminal or without one, in a home of its own and with nothing of the
//! environment of whoever runs the tests.

use portable_pty::{Child, CommandBuilder, ExitStatus, MasterPty, PtySize, native_pty_system};
use std::fs;
use std::io::{Read, Write};
use std::num::NonZero;
use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};
use std::sync::{Arc, Condvar, Mutex, MutexGuard, PoisonError};
use std::thread::{self, JoinHandle};
use std::time::{Duration, Instant};
use tempfile::TempDir;

/// How long anything may take before it counts as never.
pub const PATIENCE: Duration = Duration::from_secs(30);

const PROGRAM: &str = env!("CARGO_BIN_EXE_rackside");

/// A line of the shell in which `rackside` is the program.
pub fn called(line: &str) -> String {
    line.replace("rackside", PROGRAM)
}

/// What ends a synchronised update: the screen is whole then, and only then.
const UPDATE_BEGINS: &[u8] = b"\x1b[?2026h";
const UPDATE_ENDS: &[u8] = b"\x1b[?2026l";

/// One test at a time has pseudo-terminals.
pub fn one_at_a_time() -> MutexGuard<'static, ()> {
    static ONE: Mutex<()> = Mutex::new(());
    // A test that failed while it had them left nothing behind.
    ONE.lock().unwrap_or_else(PoisonError::into_inner)
}

/// A home with nothing in it; the program runs in it, so files go by their bare names.
pub struct Home {
    folder: TempDir,
}

impl Home {
    pub fn new() -> Home {
        Home {
            folder: tempfile::tempdir().unwrap(),
        }
    }

    pub fn path(&self, name: &str) -> PathBuf {
        self.folder.path().join(name)
    }

    pub fn write(&self, name: &str, text: impl AsRef<[u8]>) {
        fs::write(self.path(name), text).unwrap();
    }

    pub fn bytes(&self, name: &str) -> Vec<u8> {
        fs::read(self.path(name)).unwrap()
    }

    /// The names in a folder of the home, sorted.
    pub fn names(&self, folder: &str) -> Vec<String> {
        let mut names: Vec<String> = fs::read_dir(self.path(folder))
            .unwrap()
            .map(|f| f.unwrap().file_name().into_string().unwrap())
            .collect();
        names.sort();
        names
    }

    /// The whole environment of the program.
    fn environment(&self) -> Vec<(&'static str, PathBuf)> {
        let said = |text: &str| PathBuf::from(text);
        vec![
            ("HOME", self.path("")),
            ("XDG_DATA_HOME", self.path("data")),
            ("XDG_STATE_HOME", self.path("state")),
            ("XDG_CONFIG_HOME", self.path("config")),
            ("TERM", said("xterm-256color")),
            ("LC_ALL", said("C.UTF-8")),
            ("TZ", said("UTC")),
            ("USER", said("tester")),
            ("PATH", said("/usr/local/bin:/usr/bin:/bin")),
        ]
    }

    /// Runs the program without a terminal and with nothing on standard input.
    pub fn run(&self, args: &[&str]) -> Ran {
        self.run_with(args, "")
    }

    /// Runs the program without a terminal and with a text on standard input.
    pub fn run_with(&self, args: &[&str], input: &str) -> Ran {
        let mut command = Command::new(PROGRAM);
        command.args(args);
        self.ran(command, input)
    }

    /// Runs a line of the shell in which `rackside` is the program.
    pub fn shell(&self, line: &str) -> Ran {
        let mut command = Command::new("sh");
        command.args(["-c", &called(line)]);
        self.ran(command, "")
    }

    fn ran(&self, mut command: Command, input: &str) -> Ran {
        let mut child = command
            .env_clear()
            .envs(self.environment())
            .current_dir(self.folder.path())
            .stdin(Stdio::piped())
            .stdout(Stdio::piped())
            .stderr(Stdio::piped())
            .spawn()
            .unwrap();
        // A program that reads nothing may be gone before all is written.
        let _ = child.stdin.take().unwrap().write_all(input.as_bytes());
        let done = child.wait_with_output().unwrap();
        Ran {
            code: done.status.code().expect("ended by a signal"),
            out: String::from_utf8(done.stdout).unwrap(),
            err: String::from_utf8(done.stderr).unwrap(),
        }
    }

    /// Starts the program in a pseudo-terminal of 80 columns and 24 rows.
    pub fn sit(&self, args: &[&str]) -> Terminal {
        Terminal::start(self, PROGRAM, args, 80, 24)
    }

    /// Starts a shell in such a pseudo-terminal; `rackside` in its arguments is the program.
    pub fn sit_in_shell(&self, args: &[&str]) -> Terminal {
        let args: Vec<String> = args.iter().map(|a| called(a)).collect();
        let args: Vec<&str> = args.iter().map(String::as_str).collect();
        Terminal::start(self, "sh", &args, 80, 24)
    }
}

/// What a run without a terminal gave.
#[derive(Debug)]
#[must_use]
pub struct Ran {
    pub code: i32,
    pub out: String,
    pub err: String,
}

impl Ran {
    /// The run, if it ended well and said nothing on stderr that begins like a failure.
    #[track_caller]
    pub fn done(self) -> Ran {
        assert_eq!(self.code, 0, "{self:?}");
        self
    }
}

/// The screen between two updates.
#[derive(Debug, Clone, Default)]
pub struct Shown {
    pub rows: Vec<String>,
}

impl Shown {
    /// Whether a row satisfies a question.
    pub fn any(&self, question: impl Fn(&str) -> bool) -> bool {
        self.rows.iter().any(|r| question(r))
    }

    /// Whether a text stands in a row.
    pub fn has(&self, text: &str) -> bool {
        self.any(|r| r.contains(text))
    }

    /// Whether a row holds every one of some texts; a digit next to a text makes it another one.
    pub fn has_row(&self, texts: &[&str]) -> bool {
        self.any(|r| texts.iter().all(|t| mentions(r, t)))
    }

    /// Whether everything is in the file, as the screen has it.
    pub fn says_saved(&self) -> bool {
        self.any(|r| r.contains("saved ")) && !self.has("saving") && !self.has("NOT SAVED")
    }
}

/// Whether a text stands in a row with no further digit at either end: `vial 1` is not `vial 12`.
pub fn mentions(row: &str, text: &str) -> bool {
    row.match_indices(text).any(|(at, _)| {
        let digit = |c: Option<char>| c.is_some_and(|c| c.is_ascii_digit());
        let (before, behind) = (&row[..at], &row[at + text.len()..]);
        let starts = text.starts_with(|c: char| c.is_ascii_digit());
        let ends = text.ends_with(|c: char| c.is_ascii_digit());
        let longer = starts && digit(before.chars().last()) || ends && digit(behind.chars().next());
        !longer
    })
}

struct State {
    parser: vt100::Parser,
    /// The last bytes, in case a mark is cut in two by the end of a read.
    tail: Vec<u8>,
    updating: bool,
    shown: Shown,
    raw: Vec<u8>,
    hang_up: bool,
    over: bool,
}

impl State {
    /// Takes in what the program wrote; the screen is looked at where an update ends.
    fn take(&mut self, bytes: &[u8]) {
        self.raw.extend_from_slice(bytes);
        for byte in bytes {
            self.parser.process(&[*byte]);
            self.tail.push(*byte);
            if self.tail.ends_with(UPDATE_BEGINS) {
                self.updating = true;
            } else if self.tail.ends_with(UPDATE_ENDS) {
                self.updating = false;
                self.look();
            }
            if self.tail.len() > 64 {
                self.tail.drain(..32);
            }
        }
        if !self.updating {
            self.look();
        }
    }

    fn look(&mut self) {
        let screen = self.parser.screen();
        let rows = screen.rows(0, screen.size().1.get()).collect();
        self.shown = Shown { rows };
    }
}

struct Shared {
    state: Mutex<State>,
    changed: Condvar,
}

impl Shared {
    fn state(&self) -> MutexGuard<'_, State> {
        self.state.lock().unwrap_or_else(PoisonError::into_inner)
    }
}

/// The program in a pseudo-terminal.
pub struct Terminal {
    master: Option<Box<dyn MasterPty + Send>>,
    keys: Option<Box<dyn Write + Send>>,
    child: Box<dyn Child + Send + Sync>,
    shared: Arc<Shared>,
    reader: Option<JoinHandle<()>>,
    size: (u16, u16),
    ended: bool,
    /// A shell that kills the program when it is given a line; started beforehand, since starting one takes
    /// longer than a save.
    trigger: Option<std::process::Child>,
}

fn size(columns: u16, rows: u16) -> PtySize {
    PtySize {
        rows,
        cols: columns,
        pixel_width: 0,
        pixel_height: 0,
    }
}

fn some(n: u16) -> NonZero<u16> {
    NonZero::new(n).unwrap()
}

impl Terminal {
    fn start(home: &Home, program: &str, args: &[&str], columns: u16, rows: u16) -> Terminal {
        let pair = native_pty_system().openpty(size(columns, rows)).unwrap();
        let mut command = CommandBuilder::new(program);
        command.args(args);
        command.env_clear();
        for (name, value) in home.environment() {
            command.env(name, value);
        }
        command.cwd(home.folder.path());
        let child = pair.slave.spawn_command(command).unwrap();
        drop(pair.slave);
        let id = child.process_id().unwrap();
        let trigger = Command::new("sh")
            .args(["-c", &format!("read line && kill -KILL {id}")])
            .stdin(Stdio::piped())
            .spawn()
            .unwrap();
        let shared = Arc::new(Shared {
            state: Mutex::new(State {
                parser: vt100::Parser::new(some(rows), some(columns), 0),
                tail: Vec::new(),
                updating: false,
                shown: Shown::default(),
                raw: Vec::new(),
                hang_up: false,
                over: false,
            }),
            changed: Condvar::new(),
        });
        let reader = pair.master.try_clone_reader().unwrap();
        let ours = Arc::clone(&shared);
        let reader = thread::spawn(move || follow(reader, &ours));
        Terminal {
            keys: Some(pair.master.take_writer().unwrap()),
            master: Some(pair.master),
            child,
            shared,
            reader: Some(reader),
            size: (columns, rows),
            ended: false,
            trigger: Some(trigger),
        }
    }

    /// Sends keys as the terminal does.
    pub fn keys(&mut self, keys: &str) {
        let to = self.keys.as_mut().expect("the terminal is gone");
        to.write_all(keys.as_bytes()).unwrap();
        to.flush().unwrap();
    }

    /// Sends keys of the keypad, and nothing else.
    pub fn keypad(&mut self, keys: &str) {
        let there = |c: char| c.is_ascii_digit() || matches!(c, '.' | '*' | '-' | '+' | '/' | '\r');
        assert!(
            keys.chars().all(there),
            "{keys:?} is more than the keypad has"
        );
        self.keys(keys);
    }

    /// The screen as it is.
    pub fn shown(&self) -> Shown {
        self.shared.state().shown.clone()
    }

    /// Waits until the screen satisfies a question, and gives that screen.
    #[track_caller]
    pub fn wait(&self, what: &str, question: impl Fn(&Shown) -> bool) -> Shown {
        let by = Instant::now() + PATIENCE;
        let mut state = self.shared.state();
        loop {
            if question(&state.shown) {
                return state.shown.clone();
            }
            let left = by.saturating_duration_since(Instant::now());
            if left.is_zero() || state.over {
                let why = if state.over {
                    "the program ended"
                } else {
                    "time is over"
                };
                panic!(
                    "waited for {what}; {why}. The screen:\n{}",
                    state.shown.rows.join("\n")
                );
            }
            state = self
                .shared
                .changed
                .wait_timeout(state, left)
                .unwrap_or_else(PoisonError::into_inner)
                .0;
        }
    }

    /// Waits for a text anywhere.
    #[track_caller]
    pub fn wait_text(&self, text: &str) -> Shown {
        self.wait(&format!("`{text}`"), |s| s.has(text))
    }

    /// Waits for the prompt to ask for a vial; its role stands there in capitals.
    #[track_caller]
    pub fn wait_prompt(&self, vial: u32, role: &str) -> Shown {
        let (vial, role) = (format!("vial {vial}"), role.to_uppercase());
        self.wait(&format!("the prompt of {vial}, {role}"), |s| {
            s.has_row(&[&vial, &role])
        })
    }

    /// Waits until a reading of a vial was read back.
    #[track_caller]
    pub fn wait_kept(&self, vial: u32, counts: u32) -> Shown {
        self.wait(&format!("{counts} kept for vial {vial}"), |s| {
            is_kept(s, vial, counts)
        })
    }

    /// Waits until a reading of a vial was read back and is in the file.
    #[track_caller]
    pub fn wait_saved(&self, vial: u32, counts: u32) -> Shown {
        self.wait(&format!("{counts} saved for vial {vial}"), |s| {
            is_kept(s, vial, counts) && s.says_saved()
        })
    }

    /// Gives the terminal another size.
    pub fn resize(&mut self, columns: u16, rows: u16) {
        let master = self.master.as_ref().expect("the terminal is gone");
        let mut state = self.shared.state();
        state
            .parser
            .screen_mut()
            .set_size(some(rows), some(columns));
        master.resize(size(columns, rows)).unwrap();
        self.size = (columns, rows);
    }

    /// Everything the program wrote.
    pub fn raw(&self) -> Vec<u8> {
        self.shared.state().raw.clone()
    }

    /// Waits until nothing was written for a while, and gives how many bytes there are by then.
    #[track_caller]
    pub fn settled(&self, quiet: Duration) -> usize {
        let by = Instant::now() + PATIENCE;
        let mut state = self.shared.state();
        let (mut bytes, mut since) = (state.raw.len(), Instant::now());
        loop {
            assert!(Instant::now() < by, "the terminal is never still");
            let left = quiet.saturating_sub(since.elapsed());
            if left.is_zero() {
                return bytes;
            }
            state = self
                .shared
                .changed
                .wait_timeout(state, left)
                .unwrap_or_else(PoisonError::into_inner)
                .0;
            if state.raw.len() != bytes {
                (bytes, since) = (state.raw.len(), Instant::now());
            }
        }
    }

    /// Whether the terminal hands lines on as a shell has it, rather than key by key.
    pub fn by_lines(&self) -> bool {
        let master = self.master.as_ref().expect("the terminal is gone");
        let flags = master.get_termios().expect("no settings").local_flags;
        let flags = format!("{flags:?}");
        flags.contains("ICANON") && flags.contains("ECHO")
    }

    /// Sends a signal, by the name the shell has for it.
    pub fn signal(&self, name: &str) {
        let id = self.child.process_id().expect("the program has ended");
        let sent = Command::new("sh")
            .args(["-c", &format!("kill -{name} {id}")])
            .status()
            .unwrap();
        assert!(sent.success(), "kill -{name}");
    }

    /// Kills the program, which cannot know of it, within a fraction of a millisecond.
    pub fn kill(&mut self) {
        let mut trigger = self.trigger.take().expect("killed twice");
        let mut line = trigger.stdin.take().unwrap();
        line.write_all(b"now\n").unwrap();
        assert!(trigger.wait().unwrap().success(), "kill -KILL");
    }

    /// Takes the terminal away: the master and every copy of it are closed.
    pub fn hang_up(&mut self) {
        self.shared.state().hang_up = true;
        // The copy waits in a read. A change of size makes the program draw, so the copy comes back and goes.
        let (columns, rows) = self.size;
        self.resize(columns + 1, rows);
        let reader = self.reader.take().expect("hung up twice");
        reader.join().unwrap();
        // The writer says good-bye in a line feed and an end of text, which mean nothing at the bench.
        self.keys = None;
        self.master = None;
    }

    /// Waits for the end of the program and takes in what it wrote until then.
    #[track_caller]
    pub fn end(&mut self) -> ExitStatus {
        let by = Instant::now() + PATIENCE;
        loop {
            if let Some(status) = self.child.try_wait().unwrap() {
                self.ended = true;
                if let Some(reader) = self.reader.take() {
                    reader.join().unwrap();
                }
                return status;
            }
            assert!(
                Instant::now() < by,
                "the program does not end. The screen:\n{}",
                self.shown().rows.join("\n")
            );
            thread::sleep(Duration::from_millis(2));
        }
    }
}

impl Drop for Terminal {
    fn drop(&mut self) {
        if let Some(mut trigger) = self.trigger.take() {
            // Without a line it goes away.
            drop(trigger.stdin.take());
            let _ = trigger.wait();
        }
        if !self.ended {
            let _ = self.child.kill();
            let _ = self.child.wait();
        }
    }
}

/// Whether a reading of a vial stands there as kept, its digits grouped or not.
pub fn is_kept(shown: &Shown, vial: u32, counts: u32) -> bool {
    let (vial, counts) = (format!("vial {vial}"), counts.to_string());
    shown.any(|r| {
        let closed: String = r.chars().filter(|c| !c.is_whitespace()).collect();
        r.contains("kept") && mentions(r, &vial) && mentions(&closed, &counts)
    })
}

/// Reads what the program writes until it ends or the terminal is to be taken away.
fn follow(mut reader: Box<dyn Read + Send>, shared: &Shared) {
    let mut buffer = [0u8; 16 * 1024];
    loop {
        // The end of a pseudo-terminal is an error in Linux.
        let n = reader.read(&mut buffer).unwrap_or(0);
        let mut state = shared.state();
        if n == 0 || state.hang_up {
            state.over = n == 0;
            shared.changed.notify_all();
            return;
        }
        state.take(&buffer[..n]);
        shared.changed.notify_all();
    }
}

/// A file of the project.
pub fn project(path: &str) -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join(path)
}
