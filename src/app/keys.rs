//! The one table of keys: it decides what a key does, and help and hints are read off it.

mod help;
mod key;

pub use help::{bench_help, help_over, result_help, start_help};
pub use key::Key;

/// What a key asks for at the bench.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub enum Command {
    /// Keeps what is typed and goes on.
    Keep,
    /// Flags the last reading, or takes the flag off.
    Suspect,
    /// Clears the line, or takes back the last entry.
    Minus,
    /// Counts a tube once more.
    Recount,
    /// Goes to a vial by its number.
    GoTo,
    /// Goes to the tube before.
    Previous,
    /// Goes to the tube after.
    Next,
    /// Goes to the first tube without a reading.
    Unread,
    /// Brings back what was taken back.
    BringBack,
    /// Gives a tube up.
    Lose,
    /// Writes a note.
    Note,
    /// Linear or log axis.
    Axis,
    /// Another plot.
    Plot,
    /// Rack and plot, plot alone, table of tubes.
    View,
    /// How the amounts of a tube are made, step by step.
    Working,
    /// Braille or plain characters.
    Glyphs,
    /// Shows the keys.
    Help,
    /// Leaves.
    Quit,
    /// Records that a second person checked the titration.
    Check,
    /// Closes the titration, or opens it again.
    Close,
    /// Compares the laws of binding and chooses the one shown.
    Laws,
    /// Another person takes the keyboard.
    Operator,
    /// Saves to another file.
    Elsewhere,
    /// To the next step of the walk.
    Forward,
    /// To the step before.
    Back,
}

/// One row of the table.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Binding<C> {
    /// The keys that do it.
    pub keys: &'static [Key],
    /// The keys as shown.
    pub shown: &'static str,
    /// What they do.
    pub command: C,
    /// In a word or two, for the line of hints; empty where it is not shown there.
    pub hint: &'static str,
    /// In a sentence, for help.
    pub help: &'static str,
    /// Whether it works with one hand on the keypad.
    pub keypad: bool,
}

const fn row<C: Copy>(
    keys: &'static [Key],
    shown: &'static str,
    command: C,
    hint: &'static str,
    help: &'static str,
    keypad: bool,
) -> Binding<C> {
    Binding {
        keys,
        shown,
        command,
        hint,
        help,
        keypad,
    }
}

/// The keys of the bench. Help texts fit beside their keys in 80 columns.
pub const BENCH: &[Binding<Command>] = &[
    row(
        &[Key::Enter],
        "Enter",
        Command::Keep,
        "keep",
        "keep the number typed and go on to the next tube",
        true,
    ),
    row(
        &[Key::Char('*')],
        "*",
        Command::Suspect,
        "suspect",
        "flag the reading just kept, or the one at the prompt; again: unflag",
        true,
    ),
    row(
        &[Key::Char('-')],
        "-",
        Command::Minus,
        "take back",
        "clear the line; empty: take back the newest entry; 0-: below zero",
        true,
    ),
    row(
        &[Key::Char('+')],
        "+",
        Command::Recount,
        "recount",
        "count the same tube once more; counts and minutes add up",
        true,
    ),
    row(
        &[Key::Char('/')],
        "/",
        Command::GoTo,
        "vial number",
        "go to a vial: / then its number, then Enter",
        true,
    ),
    row(
        &[Key::Up],
        "Up",
        Command::Previous,
        "",
        "go to the tube before",
        false,
    ),
    row(
        &[Key::Down, Key::Tab],
        "Down",
        Command::Next,
        "",
        "go to the tube after",
        false,
    ),
    row(
        &[Key::Char('g')],
        "g",
        Command::Unread,
        "",
        "go to the first tube without a reading",
        false,
    ),
    row(
        &[Key::Char('b')],
        "b",
        Command::BringBack,
        "",
        "bring back what was taken back last",
        false,
    ),
    row(
        &[Key::Char('l')],
        "l",
        Command::Lose,
        "",
        "give the tube at the prompt up as lost, with a reason",
        false,
    ),
    row(
        &[Key::Char('n')],
        "n",
        Command::Note,
        "",
        "write a note about the tube at the prompt",
        false,
    ),
    row(
        &[Key::Char('a')],
        "a",
        Command::Axis,
        "",
        "isotherm with free on a linear or a log axis",
        false,
    ),
    row(
        &[Key::Char('d')],
        "d",
        Command::Plot,
        "",
        "plot: isotherm, bound/free, Hill coordinates, residuals, profile",
        false,
    ),
    row(
        &[Key::Char('m')],
        "m",
        Command::Laws,
        "",
        "one class, two classes, Hill: compare them, choose which is shown",
        false,
    ),
    row(
        &[Key::Char('v')],
        "v",
        Command::View,
        "",
        "rack and plot, plot alone, table of all tubes",
        false,
    ),
    row(
        &[Key::Char('s')],
        "s",
        Command::Working,
        "",
        "the tube at the prompt step by step: formulas, numbers, units",
        false,
    ),
    row(
        &[Key::Char('i')],
        "i",
        Command::Glyphs,
        "",
        "fine or plain characters in the plot",
        false,
    ),
    row(
        &[Key::Char('o')],
        "o",
        Command::Operator,
        "",
        "another person takes the keyboard",
        false,
    ),
    row(
        &[Key::Char('w')],
        "w",
        Command::Elsewhere,
        "",
        "where the bar says NOT SAVED: save to another file",
        false,
    ),
    row(
        &[Key::Char('k')],
        "k",
        Command::Check,
        "",
        "a second person checked the titration",
        false,
    ),
    row(
        &[Key::Char('c')],
        "c",
        Command::Close,
        "",
        "close the titration, or open it again",
        false,
    ),
    row(
        &[Key::PageUp],
        "PgUp",
        Command::Back,
        "",
        "back to the counter, the ladder, the protocol: look or correct",
        false,
    ),
    row(
        &[Key::PageDown],
        "PgDn",
        Command::Forward,
        "",
        "on to the result, to read, save or print it",
        false,
    ),
    row(
        &[Key::Char('q'), Key::Ctrl('c')],
        "q",
        Command::Quit,
        "",
        "leave; everything is kept and resumes where it stopped",
        false,
    ),
    row(
        &[Key::Char('?'), Key::Char('h')],
        "?",
        Command::Help,
        "keys",
        "this page",
        false,
    ),
];

/// What a key asks for at the result.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub enum ResultCommand {
    /// A line up.
    Up,
    /// A line down.
    Down,
    /// A page down, or from the end to the top.
    Page,
    /// Saves the page beside the titration.
    Save,
    /// Prints the page after leaving.
    Print,
    /// Shows the keys.
    Help,
    /// Leaves.
    Quit,
}

/// The keys of the result.
pub const RESULT: &[Binding<ResultCommand>] = &[
    row(&[Key::Up], "Up", ResultCommand::Up, "", "a line up", false),
    row(
        &[Key::Down],
        "Down",
        ResultCommand::Down,
        "",
        "a line down",
        false,
    ),
    row(
        &[Key::Char(' '), Key::Enter],
        "Space",
        ResultCommand::Page,
        "on",
        "a page on, from the end to the top",
        false,
    ),
    row(
        &[Key::Char('s')],
        "s",
        ResultCommand::Save,
        "save",
        "save the page as a text file beside the titration",
        false,
    ),
    row(
        &[Key::Char('p')],
        "p",
        ResultCommand::Print,
        "print on leaving",
        "print the page on the terminal when you have left",
        false,
    ),
    row(
        &[Key::Char('?'), Key::Char('h')],
        "?",
        ResultCommand::Help,
        "keys",
        "this page",
        false,
    ),
    row(
        &[Key::Char('q'), Key::Ctrl('c')],
        "q",
        ResultCommand::Quit,
        "leave",
        "leave",
        false,
    ),
];

/// What a key asks for at the start.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub enum StartCommand {
    /// One up.
    Up,
    /// One down.
    Down,
    /// Opens the one chosen.
    Open,
    /// A new titration.
    New,
    /// A file by its path.
    Path,
    /// A demo.
    Demo,
    /// The lab's settings.
    Lab,
    /// Shows the keys.
    Help,
    /// Leaves.
    Quit,
}

/// The keys of the start; digits open a titration of the list.
pub const START: &[Binding<StartCommand>] = &[
    row(
        &[Key::Char('n')],
        "n",
        StartCommand::New,
        "",
        "a new titration",
        false,
    ),
    row(
        &[Key::Char('o')],
        "o",
        StartCommand::Path,
        "",
        "open a file by its path",
        false,
    ),
    row(
        &[Key::Char('d')],
        "d",
        StartCommand::Demo,
        "",
        "open a demo: an invented rack to play with",
        false,
    ),
    row(
        &[Key::Char('l')],
        "l",
        StartCommand::Lab,
        "",
        "the lab's settings: defaults for a new titration",
        false,
    ),
    row(
        &[Key::Up],
        "Up",
        StartCommand::Up,
        "",
        "one up in the list",
        false,
    ),
    row(
        &[Key::Down],
        "Down",
        StartCommand::Down,
        "",
        "one down in the list",
        false,
    ),
    row(
        &[Key::Enter],
        "Enter",
        StartCommand::Open,
        "",
        "open the titration chosen; its digit does too",
        false,
    ),
    row(
        &[Key::Char('?'), Key::Char('h')],
        "?",
        StartCommand::Help,
        "",
        "the keys",
        false,
    ),
    row(
        &[Key::Char('q'), Key::Ctrl('c'), Key::Esc],
        "q",
        StartCommand::Quit,
        "",
        "leave",
        false,
    ),
];

/// Keys that work in a form, for help; the form itself takes them.
pub const FORM: &[(&str, &str)] = &[
    ("Enter", "to the next field, from the last to the next step"),
    ("Up Down", "from field to field"),
    (
        "arrows",
        "left and right choose where there is a choice; a digit does too",
    ),
    ("PgDn", "to the next step"),
    ("PgUp", "to the step before"),
    ("Ctrl-U", "clears the field"),
    ("Esc", "leaves; what was typed and not recorded is dropped"),
];

/// What a key does at the bench.
pub fn bench_command(key: Key) -> Option<Command> {
    find(BENCH, key)
}

/// What a key does at the result.
pub fn result_command(key: Key) -> Option<ResultCommand> {
    find(RESULT, key)
}

/// What a key does at the start.
pub fn start_command(key: Key) -> Option<StartCommand> {
    find(START, key)
}

fn find<C: Copy>(table: &[Binding<C>], key: Key) -> Option<C> {
    table
        .iter()
        .find(|b| b.keys.contains(&key))
        .map(|b| b.command)
}

#[cfg(test)]
mod tests;
