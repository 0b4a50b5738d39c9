//! The text of a notebook: one RON document, one entry to a line, each line chained to the one before.
//!
//! ```text
//! (format: 3, entries: [
//! (n:1,at:"2031-05-04T10:14:03+02:00",who:"ann",what:Opened(...)), // 9f3c0a...
//! (n:2,at:"2031-05-04T10:15:40+02:00",who:"ann",what:Counted(...)), // 71d2e4...
//! ])
//! // 2 entries, last 71d2e4...
//! ```
//!
//! The link that ends a line is the first 16 hex digits of SHA-256 over the link of the line before
//! (the first line of the file, for the first) and the line up to and with its comma. It shows damage and careless
//! editing; who sets out to forge a notebook can compute it too.
//!
//! Formats: 1 as first released; 2 knows scale errors and a chosen law of binding in the protocol; 3 all ways of counting. Lines of an older
//! format are lines of the newer ones too, so that it is enough to link them anew.

use crate::notebook::{Entry, Notebook, Rejection};
use crate::units::clean;
use serde::Deserialize;
use sha2::{Digest, Sha256};
use std::fmt::Write;
use std::sync::Arc;

/// The format written here, and the newest one read.
pub const FORMAT: u32 = 3;

/// The largest notebook read or written, in bytes: 32 MiB.
pub const MOST_BYTES: usize = 32 * 1024 * 1024;

const CLOSING: &str = "])";
const LINK_DIGITS: usize = 16;

/// The first line of a notebook of this format.
fn header(format: u32) -> String {
    format!("(format: {format}, entries: [")
}

/// A text that is not a notebook, or cannot become one.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[non_exhaustive]
pub enum Fault {
    /// Larger than a notebook may be.
    #[error("{bytes} bytes; a notebook has at most {MOST_BYTES}")]
    TooLarge {
        /// Its size.
        bytes: usize,
    },
    /// Of a newer format.
    #[error("format {found}; this rackside reads formats up to {FORMAT}")]
    Newer {
        /// The format found.
        found: u32,
    },
    /// Not whole.
    #[error("line {line}: {cause}")]
    Damaged {
        /// The line, from 1.
        line: usize,
        /// What is wrong there.
        cause: String,
    },
}

fn damaged(line: usize, cause: impl Into<String>) -> Fault {
    // The cause may quote the file.
    let cause = clean(&cause.into());
    Fault::Damaged { line, cause }
}

/// The lines of a notebook as they are or will be on disk. Lines are added, never touched.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Text {
    format: u32,
    /// Header and entries, each line with its end.
    body: String,
    entries: u32,
    /// The link that the next line goes on from.
    link: String,
    /// The link that the last line has if every line before it is taken as it is.
    digest: String,
}

impl Default for Text {
    fn default() -> Self {
        let header = header(FORMAT);
        Text {
            format: FORMAT,
            body: format!("{header}\n"),
            entries: 0,
            link: header.clone(),
            digest: header,
        }
    }
}

impl Text {
    /// The text of entries that were never written before.
    ///
    /// # Errors
    /// [`Fault::TooLarge`].
    pub fn of(entries: &[Arc<Entry>]) -> Result<Text, Fault> {
        let mut text = Text::default();
        entries.iter().try_for_each(|e| text.append(e))?;
        Ok(text)
    }

    /// Adds the line of the next entry.
    ///
    /// # Errors
    /// [`Fault::TooLarge`] if the text could not be read again; nothing is added then.
    pub fn append(&mut self, entry: &Entry) -> Result<(), Fault> {
        let line = self.entries as usize + 2;
        let mut written = ron::to_string(entry).map_err(|e| damaged(line, e.to_string()))?;
        written.push(',');
        let link = link_of(&self.link, &written);
        let digest = link_of(&self.digest, &written);
        // The footer is at most a line of 60 characters.
        let bytes = self.body.len() + written.len() + 100;
        if bytes > MOST_BYTES {
            return Err(Fault::TooLarge { bytes });
        }
        self.body.push_str(&written);
        self.body.push_str(" // ");
        self.body.push_str(&link);
        self.body.push('\n');
        (self.link, self.digest) = (link, digest);
        self.entries += 1;
        Ok(())
    }

    /// The format that its lines are linked under.
    pub fn format(&self) -> u32 {
        self.format
    }

    /// The same lines, linked anew under the newest format; entries that were changed still do not fit their links.
    pub fn renewed(&self, changed: &[u32]) -> Text {
        let mut new = Text::default();
        let first = self.body.find('\n').map_or(self.body.len(), |at| at + 1);
        for (n, line) in (1..).zip(self.body[first..].lines()) {
            let Ok(Line { linked, link, .. }) = read_line(line) else {
                continue;
            };
            let next = if changed.contains(&n) {
                link.to_string()
            } else {
                link_of(&new.link, linked)
            };
            new.digest = link_of(&new.digest, linked);
            new.body.push_str(&format!("{linked} // {next}\n"));
            new.link = next;
            new.entries += 1;
        }
        new
    }

    /// How many entries it holds.
    pub fn entries(&self) -> u32 {
        self.entries
    }

    /// What stands for the whole of it: 16 hex digits that change with any entry.
    ///
    /// For a text that nobody changed it is the last link, as the footer has it.
    pub fn digest(&self) -> &str {
        &self.digest
    }

    /// The whole file.
    pub fn to_bytes(&self) -> Vec<u8> {
        let mut all = String::with_capacity(self.body.len() + 100);
        all.push_str(&self.body);
        all.push_str(CLOSING);
        all.push('\n');
        all.push_str(&footer(self.entries, &self.link));
        all.push('\n');
        all.into_bytes()
    }
}

fn footer(entries: u32, link: &str) -> String {
    format!("// {entries} entries, last {link}")
}

fn link_of(previous: &str, line: &str) -> String {
    let digest = Sha256::new()
        .chain_update(previous.as_bytes())
        .chain_update(line.as_bytes())
        .finalize();
    digest
        .iter()
        .take(LINK_DIGITS / 2)
        .fold(String::new(), |mut s, b| {
            // Writing to a string cannot fail.
            let _ = write!(s, "{b:02x}");
            s
        })
}

/// A notebook read from its text.
#[derive(Debug, Clone)]
pub struct Read {
    /// The notebook.
    pub notebook: Notebook,
    /// Its lines.
    pub text: Text,
    /// The entries whose line and link do not fit together, lowest first; empty if none was changed.
    pub changed: Vec<u32>,
}

/// The one field that every format has.
#[derive(Deserialize)]
struct Head {
    format: u32,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct Document {
    format: u32,
    entries: Vec<Arc<Entry>>,
}

/// Reads a notebook.
///
/// # Errors
/// [`Fault::TooLarge`], [`Fault::Newer`], or [`Fault::Damaged`] for anything that is not a whole
/// notebook: a text cut short anywhere, another layout, entries that do not add up.
pub fn read(bytes: &[u8]) -> Result<Read, Fault> {
    if bytes.len() > MOST_BYTES {
        let bytes = bytes.len();
        return Err(Fault::TooLarge { bytes });
    }
    let line_at = |at: usize| 1 + bytes[..at].iter().filter(|b| **b == b'\n').count();
    let text = std::str::from_utf8(bytes)
        .map_err(|e| damaged(line_at(e.valid_up_to()), "not UTF-8 text"))?;
    if text.is_empty() {
        return Err(damaged(1, "the file is empty"));
    }
    match format_of(text) {
        Some(found) if found > FORMAT => return Err(Fault::Newer { found }),
        _ => {}
    }
    if let Some(at) = text.find('\r') {
        let cause = "a carriage return; the lines of a notebook end in a line feed alone";
        return Err(damaged(line_at(at), cause));
    }
    let layout = Layout::of(text)?;
    let entries = parse(text, &layout)?;
    let (text, changed) = layout.chained(text);
    let notebook = Notebook::replay(entries).map_err(|e| {
        let line = match &e {
            Rejection::Entry { n, .. } => *n as usize + 1,
            _ => 1,
        };
        damaged(line, e.to_string())
    })?;
    Ok(Read {
        notebook,
        text,
        changed,
    })
}

/// The format number: from the first line, which may be all that is left of a file, or from the whole.
fn format_of(text: &str) -> Option<u32> {
    let first = text.lines().next()?;
    let head = first.split(',').next().unwrap_or(first);
    ron::from_str::<Head>(&format!("{head})"))
        .or_else(|_| ron::from_str::<Head>(text))
        .ok()
        .map(|h| h.format)
}

/// One line of an entry.
struct Line<'a> {
    /// The entry without its comma.
    entry: &'a str,
    /// The entry with its comma: what the link is over.
    linked: &'a str,
    link: &'a str,
}

/// The lines of a notebook, found to be where they belong.
struct Layout<'a> {
    format: u32,
    lines: Vec<Line<'a>>,
    /// Where the entries end in the text.
    body: usize,
    footer_entries: u32,
    footer_link: &'a str,
}

impl<'a> Layout<'a> {
    fn of(text: &'a str) -> Result<Self, Fault> {
        let count = text.split('\n').count();
        let Some(lines) = text.strip_suffix('\n') else {
            return Err(damaged(count, "cut short: the last line has no end"));
        };
        let all: Vec<&str> = lines.split('\n').collect();
        let last = all.len();
        let Some((&header, rest)) = all.split_first() else {
            return Err(damaged(1, "the file is empty"));
        };
        let Some(format) = (1..=FORMAT).find(|f| header == self::header(*f)) else {
            let cause = format!(
                "not a notebook: the first line is not `{}`",
                self::header(FORMAT)
            );
            return Err(damaged(1, cause));
        };
        let Some((&foot, rest)) = rest.split_last() else {
            return Err(damaged(1, "cut short after the first line"));
        };
        let Some((footer_entries, footer_link)) = read_footer(foot) else {
            let cause = "cut short: the last line is not `// N entries, last ...`";
            return Err(damaged(last, cause));
        };
        let Some((&closing, entries)) = rest.split_last() else {
            return Err(damaged(last, format!("the line `{CLOSING}` is missing")));
        };
        if closing != CLOSING {
            let cause = format!("the line before the last is not `{CLOSING}`");
            return Err(damaged(last - 1, cause));
        }
        let lines = (2..)
            .zip(entries)
            .map(|(no, line)| read_line(line).map_err(|cause| damaged(no, cause)))
            .collect::<Result<Vec<_>, _>>()?;
        Ok(Layout {
            format,
            lines,
            body: text.len() - foot.len() - closing.len() - 2,
            footer_entries,
            footer_link,
        })
    }

    /// The text as it will be gone on with, and the entries whose line or link does not fit.
    ///
    /// The chain goes on from the link as written, so that a changed entry does not drag those after
    /// it along. If it is the link that was changed, the next line fits the one it should have been.
    fn chained(&self, text: &str) -> (Text, Vec<u32>) {
        let mut changed = Vec::new();
        // The first link is over the first line too, which holds the number of the format.
        let head = || header(self.format);
        let (mut written, mut due, mut digest) = (head(), head(), head());
        for (n, line) in (1..).zip(&self.lines) {
            let by_written = link_of(&written, line.linked);
            let by_due = link_of(&due, line.linked);
            if line.link != by_written && line.link != by_due {
                changed.push(n);
            }
            due = if line.link == by_due {
                by_due
            } else {
                by_written
            };
            written = line.link.to_string();
            digest = link_of(&digest, line.linked);
        }
        let entries = self.lines.len() as u32;
        let fits = self.footer_link == written || self.footer_link == due;
        if self.footer_entries != entries || !fits {
            // Lines were lost after the last one, or put there: the footer knows of others.
            let first = entries.min(self.footer_entries) + 1;
            let named = if self.footer_entries == entries {
                entries
            } else {
                first
            };
            changed.push(named);
            changed.sort_unstable();
            changed.dedup();
        }
        let text = Text {
            format: self.format,
            body: text[..self.body].to_string(),
            entries,
            // From the footer: if that does not fit the last line, the next one will show it for ever.
            link: self.footer_link.to_string(),
            digest,
        };
        (text, changed)
    }
}

fn read_footer(line: &str) -> Option<(u32, &str)> {
    let (count, link) = line.strip_prefix("// ")?.split_once(" entries, last ")?;
    let entries: u32 = count.parse().ok()?;
    // `007` and `+7` are numbers too, and were not written here.
    (entries.to_string() == count && is_link(link)).then_some((entries, link))
}

fn is_link(text: &str) -> bool {
    text.len() == LINK_DIGITS && text.bytes().all(|b| matches!(b, b'0'..=b'9' | b'a'..=b'f'))
}

fn read_line(line: &str) -> Result<Line<'_>, &'static str> {
    let (linked, link) = line
        .rsplit_once(" // ")
        .filter(|(_, link)| is_link(link))
        .ok_or("the line does not end in its link, `// ` and 16 hex digits")?;
    let entry = linked
        .strip_suffix(',')
        .ok_or("no comma between the entry and its link")?;
    Ok(Line {
        entry,
        linked,
        link,
    })
}

/// The entries: the document as a whole, and one entry to each line.
fn parse(text: &str, layout: &Layout<'_>) -> Result<Vec<Arc<Entry>>, Fault> {
    for (no, line) in (2..).zip(&layout.lines) {
        ron::from_str::<Entry>(line.entry)
            .map_err(|e| damaged(no, format!("column {}: {}", e.span.start.col, e.code)))?;
    }
    let whole: Document =
        ron::from_str(text).map_err(|e| damaged(e.span.start.line, e.code.to_string()))?;
    if whole.format != layout.format || whole.entries.len() != layout.lines.len() {
        return Err(damaged(1, "the lines and the document do not agree"));
    }
    Ok(whole.entries)
}
