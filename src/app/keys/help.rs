//! Help, read off the table of keys.

use super::{BENCH, Binding, FORM, RESULT, START};

/// How many lines of help have no room on a terminal of so many rows; the border takes two of them.
pub fn help_over(lines: usize, rows: u16) -> u16 {
    (lines as u16).saturating_sub(rows.saturating_sub(2))
}

/// The column where what a key does begins.
const BESIDE: usize = 9;

/// Lines of help: keys and what they do, broken at blanks to the width of a terminal; the border takes four columns.
fn help<'a>(rows: impl Iterator<Item = (&'a str, &'a str)>, columns: u16) -> Vec<String> {
    let most = usize::from(columns).saturating_sub(4);
    let mut lines = Vec::new();
    for (shown, help) in rows {
        let mut line = format!("{shown:<w$}", w = BESIDE - 1);
        for word in help.split(' ') {
            if line.len() + 1 + word.len() > most && line.len() > BESIDE {
                lines.push(std::mem::replace(&mut line, " ".repeat(BESIDE - 1)));
            }
            line.push(' ');
            line.push_str(word);
        }
        lines.push(line);
    }
    lines
}

fn of_table<C>(table: &[Binding<C>]) -> impl Iterator<Item = (&str, &str)> {
    table.iter().map(|b| (b.shown, b.help))
}

/// Help at the bench.
pub fn bench_help(columns: u16) -> Vec<String> {
    help(of_table(BENCH), columns)
}

/// Help at the result.
pub fn result_help(columns: u16) -> Vec<String> {
    help(
        of_table(RESULT).chain([("PgUp", "back to the tubes")]),
        columns,
    )
}

/// Help at the start, and for the forms: in a form a `?` is text like any other.
pub fn start_help(columns: u16) -> Vec<String> {
    let mut lines = help(of_table(START), columns);
    lines.push(String::new());
    lines.push("in the forms of a titration and of the settings:".into());
    lines.extend(help(FORM.iter().copied(), columns));
    lines
}
