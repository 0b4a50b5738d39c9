//! A failure at the edge: what to say, how to end, what to try.

use crate::shell::ShellError;
use crate::store::StoreError;
use std::fmt;

/// Done badly: a sentence, an exit code, perhaps a hint.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Failure {
    /// The exit code.
    pub code: u8,
    /// What happened, where, what is allowed.
    pub what: String,
    /// What to try.
    pub hint: Option<String>,
}

impl Failure {
    /// Wrong call.
    pub const USAGE: u8 = 2;
    /// Bad file or data.
    pub const DATA: u8 = 65;
    /// Cannot read or write.
    pub const IO: u8 = 74;

    pub(super) fn new(code: u8, what: impl Into<String>) -> Failure {
        Failure {
            code,
            what: what.into(),
            hint: None,
        }
    }

    pub(super) fn hint(self, hint: impl Into<String>) -> Failure {
        Failure {
            hint: Some(hint.into()),
            ..self
        }
    }
}

impl fmt::Display for Failure {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "rackside: {}", self.what)?;
        match &self.hint {
            Some(hint) => write!(f, "\n  {hint}"),
            None => Ok(()),
        }
    }
}

impl From<StoreError> for Failure {
    fn from(e: StoreError) -> Self {
        Failure::new(e.exit_code(), e.to_string())
    }
}

impl From<ShellError> for Failure {
    fn from(e: ShellError) -> Self {
        let code = match e {
            ShellError::CannotCreate { .. } => 73,
            _ => Failure::IO,
        };
        Failure::new(code, e.to_string())
    }
}
