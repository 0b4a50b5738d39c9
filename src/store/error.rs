//! What can go wrong with a file: the path, the line, the cause.

use super::format::MOST_BYTES;
use crate::units::clean;
use std::io;
use std::path::{Path, PathBuf};

/// A path fit for a terminal: a file may have any name.
fn shown(path: &Path) -> String {
    clean(&path.display().to_string())
}

/// A file cannot be read, made or written.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum StoreError {
    /// The system refuses.
    #[error("{}: cannot {doing}: {cause}", shown(path))]
    Io {
        /// The file.
        path: PathBuf,
        /// What was being done.
        doing: &'static str,
        /// What the system says.
        cause: io::Error,
    },
    /// Not a file, so not a notebook.
    #[error("{}: not a file", shown(path))]
    NotAFile {
        /// The path.
        path: PathBuf,
    },
    /// Larger than a notebook may be.
    #[error("{}: {bytes} bytes; a notebook has at most {MOST_BYTES}", shown(path))]
    TooLarge {
        /// The file.
        path: PathBuf,
        /// Its size.
        bytes: u64,
    },
    /// Written by a newer rackside.
    #[error(
        "{}: format {found}, written by a newer rackside; this one reads formats up to {known}. The file is left as it is",
        shown(path)
    )]
    Newer {
        /// The file.
        path: PathBuf,
        /// The format of the file.
        found: u32,
        /// The newest format known here.
        known: u32,
    },
    /// Not a whole notebook.
    #[error("{}: damaged at line {line}: {cause}", shown(path))]
    Damaged {
        /// The file.
        path: PathBuf,
        /// The line, from 1.
        line: usize,
        /// What is wrong there.
        cause: String,
    },
    /// A new notebook would take the place of a file.
    #[error("{}: there already; nothing is written over it", shown(path))]
    Exists {
        /// The path.
        path: PathBuf,
    },
    /// A new file cannot be made.
    #[error("{}: cannot be created: {cause}", shown(path))]
    CannotCreate {
        /// The path.
        path: PathBuf,
        /// What the system says.
        cause: io::Error,
    },
    /// Open for writing somewhere else.
    #[error("{}: open for writing elsewhere ({holder})", shown(path))]
    Locked {
        /// The file.
        path: PathBuf,
        /// What the other one says of itself; fit for a terminal.
        holder: String,
    },
    /// The file is not the one last read or written here.
    #[error(
        "{}: changed by another program since it was last read or saved here; it is left as it is, save to another name",
        shown(path)
    )]
    WrittenByOther {
        /// The file.
        path: PathBuf,
    },
}

impl StoreError {
    /// The exit code, after the BSD `sysexits.h`: 65 bad file, 73 cannot create, 74 input or output,
    /// 75 locked, try later.
    pub fn exit_code(&self) -> u8 {
        match self {
            StoreError::NotAFile { .. }
            | StoreError::TooLarge { .. }
            | StoreError::Newer { .. }
            | StoreError::Damaged { .. } => 65,
            StoreError::Exists { .. } | StoreError::CannotCreate { .. } => 73,
            StoreError::Io { .. } | StoreError::WrittenByOther { .. } => 74,
            StoreError::Locked { .. } => 75,
        }
    }

    /// What happened, without the file it happened to: for a place that shows the file already.
    pub fn in_short(&self) -> String {
        let whole = self.to_string();
        match whole.split_once(": ") {
            Some((_, rest)) => rest.to_string(),
            None => whole,
        }
    }

    /// Whether the file may be read and not written.
    pub fn write_protected(&self) -> bool {
        let kind = match self {
            StoreError::Io { cause, .. } => cause.kind(),
            _ => return false,
        };
        matches!(
            kind,
            io::ErrorKind::PermissionDenied | io::ErrorKind::ReadOnlyFilesystem
        )
    }

    /// Whether trying the same again may help.
    pub fn may_pass(&self) -> bool {
        matches!(
            self,
            StoreError::Io { .. } | StoreError::CannotCreate { .. } | StoreError::Locked { .. }
        )
    }

    pub(super) fn io(path: &Path, doing: &'static str) -> impl FnOnce(io::Error) -> StoreError {
        let path = path.to_path_buf();
        move |cause| StoreError::Io { path, doing, cause }
    }
}
