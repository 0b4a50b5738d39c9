//! The right to write a notebook: a lock on a file beside it.

use super::error::StoreError;
use crate::assay::Stamp;
use crate::units::clean;
use std::ffi::OsString;
use std::fs::{File, OpenOptions, TryLockError};
use std::io::{self, Read, Seek, Write};
use std::path::{Path, PathBuf};

/// Who opens a notebook for writing, and since when; for the message to the next one.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Holder {
    /// Who.
    pub who: String,
    /// Since when.
    pub since: Stamp,
}

/// A lock that is held as long as this lives, and that the system lets go of if the program dies.
///
/// The lock is the truth; the text in the file only feeds a message. The file is never deleted: who
/// waits for a deleted file would hold a lock that nobody else sees.
#[derive(Debug)]
pub(super) struct Lock {
    _file: File,
}

impl Lock {
    /// Takes the lock of a notebook at a resolved path.
    pub(super) fn take(notebook: &Path, holder: &Holder) -> Result<Lock, StoreError> {
        let path = beside(notebook);
        let mut file = OpenOptions::new()
            .read(true)
            .write(true)
            .create(true)
            .truncate(false)
            .open(&path)
            .or_else(|e| match e.kind() {
                // Made by another user of the folder: it locks as well, only the text stays theirs.
                io::ErrorKind::PermissionDenied => File::open(&path).map_err(|_| e),
                _ => Err(e),
            })
            .map_err(StoreError::io(&path, "open the lock"))?;
        match file.try_lock() {
            Ok(()) => {}
            Err(TryLockError::WouldBlock) => {
                return Err(StoreError::Locked {
                    path: notebook.to_path_buf(),
                    holder: said(&mut file),
                });
            }
            Err(TryLockError::Error(e)) => return Err(StoreError::io(&path, "lock")(e)),
        }
        // Without the text the lock is as good, so a full disk does not stand in the way.
        let text = format!(
            "process {}, {}, since {}",
            std::process::id(),
            clean(&holder.who),
            holder.since.minute()
        );
        let _ = file
            .set_len(0)
            .and_then(|()| file.rewind())
            .and_then(|()| writeln!(file, "{text}"));
        Ok(Lock { _file: file })
    }
}

/// `.NAME.ron.lock` beside `NAME.ron`.
fn beside(notebook: &Path) -> PathBuf {
    let mut name = OsString::from(".");
    name.push(notebook.file_name().unwrap_or_default());
    name.push(".lock");
    notebook.with_file_name(name)
}

fn said(file: &mut File) -> String {
    let mut bytes = Vec::new();
    let _ = file.take(300).read_to_end(&mut bytes);
    let text = clean(&String::from_utf8_lossy(&bytes));
    let text = text.trim();
    if text.is_empty() {
        "by another program".into()
    } else {
        text.into()
    }
}
