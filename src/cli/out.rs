//! The one writer to stdout and the one to stderr.

use super::failure::Failure;
use crate::units::clean;
use std::io::{self, ErrorKind, Write};

/// Writes a result to stdout. A reader that has gone away is a quiet end, as with `| head`.
pub(super) fn result(text: &str) -> Result<(), Failure> {
    let mut out = io::stdout().lock();
    match out.write_all(text.as_bytes()).and_then(|()| out.flush()) {
        Err(e) if e.kind() != ErrorKind::BrokenPipe => {
            Err(Failure::new(Failure::IO, format!("standard output: {e}")))
        }
        _ => Ok(()),
    }
}

/// Says something on stderr; nobody listening is no failure.
pub(super) fn talk(text: &str) {
    let cleaned: Vec<String> = text.lines().map(clean).collect();
    drop(writeln!(io::stderr(), "{}", cleaned.join("\n")));
}
