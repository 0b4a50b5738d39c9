//! The store: notebooks in files, and the care that none of them is lost.
//!
//! [`open`] and [`Seen::at`] only read. Who has a [`Target`] holds the lock of a file and may write it;
//! a [`Saver`] does so on a thread of its own.

mod error;
pub mod format;
mod lists;
mod lock;
mod places;
mod save;
mod saver;

pub use error::StoreError;
pub use format::Text;
pub use lists::{draft, drop_draft, keep_draft, keep_lab, lab, recents, remember};
pub use lock::Holder;
pub use places::{Places, places};
pub use save::{Seen, Target};
pub use saver::{Ended, SaveReport, Saver};

use crate::notebook::Notebook;
use format::Fault;
use std::fs::File;
use std::io::Read;
use std::path::{Path, PathBuf};

/// A notebook from its file.
#[derive(Debug)]
pub struct Opened {
    /// The path it was asked for by.
    pub path: PathBuf,
    /// The notebook.
    pub notebook: Notebook,
    /// Its lines, to which new ones are added.
    pub text: Text,
    /// Entries changed outside rackside: their line and its link do not fit together.
    pub changed: Vec<u32>,
    /// What the file was when it was read.
    pub seen: Seen,
    /// Whether it may be written.
    pub access: Access,
}

impl Opened {
    /// What is to be said of a file that was changed; nothing of one that is as it was written.
    pub fn changed_in_words(&self) -> Option<String> {
        let list: Vec<String> = self.changed.iter().map(ToString::to_string).collect();
        let said = format!("changed outside rackside: entries {}", list.join(", "));
        (!list.is_empty()).then_some(said)
    }
}

/// Whether a notebook may be written.
#[derive(Debug)]
pub enum Access {
    /// It was opened for reading.
    Read,
    /// It is locked for writing.
    Write(Target),
}

/// Opens a notebook for reading: no lock, nothing written.
///
/// # Errors
/// The file cannot be read ([`StoreError::Io`]) or is not a notebook of a format known here.
pub fn open(path: &Path) -> Result<Opened, StoreError> {
    let bytes = read(path)?;
    opened(path, &bytes, Access::Read)
}

/// A notebook from text that is in no file yet, under the name it is to be called by; for reading.
///
/// # Errors
/// The text is not a notebook of a format known here.
pub fn carried(name: &str, text: &str) -> Result<Opened, StoreError> {
    opened(Path::new(name), text.as_bytes(), Access::Read)
}

/// Opens a notebook for writing: locked first, then read.
///
/// A notebook of an older format gets the newest one with the first save, and a copy of it as it was is kept beside it.
///
/// # Errors
/// As [`open`], and [`StoreError::Locked`] while another has it; it may still be opened for reading.
pub fn open_for_writing(path: &Path, holder: &Holder) -> Result<Opened, StoreError> {
    regular(path)?;
    let mut target = Target::existing(path, holder)?;
    let bytes = read(target.path())?;
    target.read_as(Seen::of(&bytes));
    let mut opened = opened(path, &bytes, Access::Read)?;
    if opened.text.format() < format::FORMAT {
        target.keep_first(opened.text.format(), bytes);
        opened.text = opened.text.renewed(&opened.changed);
    }
    opened.access = Access::Write(target);
    Ok(opened)
}

/// Makes the file of a new notebook, and keeps it locked.
///
/// # Errors
/// [`StoreError::Exists`] where something is there already, [`StoreError::CannotCreate`],
/// [`StoreError::Locked`], or the error of the first save.
pub fn create(path: &Path, notebook: Notebook, holder: &Holder) -> Result<Opened, StoreError> {
    let text = Text::of(notebook.entries()).map_err(|e| at(path, e))?;
    let mut target = Target::fresh(path, holder)?;
    target.save(&text).map_err(|e| match e {
        StoreError::Io { path, cause, .. } => StoreError::CannotCreate { path, cause },
        other => other,
    })?;
    Ok(Opened {
        path: path.to_path_buf(),
        notebook,
        changed: Vec::new(),
        seen: Seen::of(&text.to_bytes()),
        text,
        access: Access::Write(target),
    })
}

fn opened(path: &Path, bytes: &[u8], access: Access) -> Result<Opened, StoreError> {
    let format::Read {
        notebook,
        text,
        changed,
    } = format::read(bytes).map_err(|e| at(path, e))?;
    Ok(Opened {
        path: path.to_path_buf(),
        notebook,
        text,
        changed,
        seen: Seen::of(bytes),
        access,
    })
}

/// The size of a file, if it is one.
fn regular(path: &Path) -> Result<u64, StoreError> {
    let about = std::fs::metadata(path).map_err(StoreError::io(path, "open"))?;
    if about.is_file() {
        Ok(about.len())
    } else {
        let path = path.to_path_buf();
        Err(StoreError::NotAFile { path })
    }
}

/// A whole file, if it is one and not too large.
fn read(path: &Path) -> Result<Vec<u8>, StoreError> {
    let most = format::MOST_BYTES as u64;
    // Asked before it is opened: opening a pipe would wait for a writer.
    let mut size = regular(path)?;
    let mut bytes = Vec::new();
    if size <= most {
        // The size may be another by now, so the reading ends by itself just past the most.
        let file = File::open(path).map_err(StoreError::io(path, "open"))?;
        file.take(most + 1)
            .read_to_end(&mut bytes)
            .map_err(StoreError::io(path, "read"))?;
        size = bytes.len() as u64;
    }
    if size > most {
        let path = path.to_path_buf();
        return Err(StoreError::TooLarge { path, bytes: size });
    }
    Ok(bytes)
}

fn at(path: &Path, fault: Fault) -> StoreError {
    let path = path.to_path_buf();
    match fault {
        Fault::TooLarge { bytes } => {
            let bytes = bytes as u64;
            StoreError::TooLarge { path, bytes }
        }
        Fault::Newer { found } => StoreError::Newer {
            path,
            found,
            known: format::FORMAT,
        },
        Fault::Damaged { line, cause } => StoreError::Damaged { path, line, cause },
    }
}
