//! Saving: the whole file anew beside the old one, then in its place in one step.

use super::error::StoreError;
use super::format::Text;
use super::lock::{Holder, Lock};
use std::fs::{self, File, OpenOptions, Permissions};
use std::io::{self, Read, Seek, SeekFrom, Write};
use std::path::{Path, PathBuf};
use std::sync::atomic::{AtomicU32, Ordering};

/// What a file was when it was last looked at: enough to see whether another wrote to it.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Seen {
    bytes: u64,
    /// The last line, or its last 200 bytes.
    footer: Vec<u8>,
}

const FOOTER_BYTES: u64 = 200;

fn last_line(tail: &[u8]) -> Vec<u8> {
    let line = tail.strip_suffix(b"\n").unwrap_or(tail);
    let start = line.iter().rposition(|b| *b == b'\n').map_or(0, |i| i + 1);
    tail[start..].to_vec()
}

impl Seen {
    pub(super) fn of(bytes: &[u8]) -> Seen {
        let from = bytes.len().saturating_sub(FOOTER_BYTES as usize);
        Seen {
            bytes: bytes.len() as u64,
            footer: last_line(&bytes[from..]),
        }
    }

    /// Looks at a file: its size and its footer. A reader that follows a notebook compares two looks.
    ///
    /// # Errors
    /// The file is not there or cannot be read.
    pub fn at(path: &Path) -> Result<Seen, StoreError> {
        Self::look(path).map_err(StoreError::io(path, "read"))
    }

    fn look(path: &Path) -> io::Result<Seen> {
        let mut file = File::open(path)?;
        let bytes = file.metadata()?.len();
        file.seek(SeekFrom::Start(bytes.saturating_sub(FOOTER_BYTES)))?;
        let mut tail = Vec::new();
        file.take(FOOTER_BYTES).read_to_end(&mut tail)?;
        Ok(Seen {
            bytes,
            footer: last_line(&tail),
        })
    }
}

/// A notebook's file with the right to write it.
///
/// The path is resolved once, so a link keeps being one and two names of a file share its lock.
#[derive(Debug)]
pub struct Target {
    path: PathBuf,
    /// What is there: nothing yet, or the file as it was last read or written here.
    seen: Option<Seen>,
    /// The file in an older format, to be kept beside before it is written anew.
    older: Option<(u32, Vec<u8>)>,
    _lock: Lock,
}

impl Target {
    /// A file that is there, locked and looked at before it is read.
    pub(super) fn existing(path: &Path, holder: &Holder) -> Result<Target, StoreError> {
        let path = fs::canonicalize(path).map_err(StoreError::io(path, "open"))?;
        // A rename would take the place of a write-protected file without asking it.
        OpenOptions::new()
            .append(true)
            .open(&path)
            .map_err(StoreError::io(&path, "write"))?;
        let lock = Lock::take(&path, holder)?;
        Ok(Target {
            path,
            seen: None,
            older: None,
            _lock: lock,
        })
    }

    pub(super) fn read_as(&mut self, seen: Seen) {
        self.seen = Some(seen);
    }

    /// Keeps `bytes`, the file in an older format, beside it before the first save.
    pub(super) fn keep_first(&mut self, format: u32, bytes: Vec<u8>) {
        self.older = Some((format, bytes));
    }

    /// Writes the file in its older format beside it, under a name that nothing has yet.
    fn keep_older(&self, format: u32, bytes: &[u8]) -> Result<(), StoreError> {
        let stem = self.path.file_stem().unwrap_or_default().to_string_lossy();
        for n in 1.. {
            let again = if n == 1 {
                String::new()
            } else {
                format!("-{n}")
            };
            let copy = self
                .path
                .with_file_name(format!("{stem}.format-{format}{again}.ron"));
            let mode = fs::metadata(&self.path).ok().map(|m| m.permissions());
            match Temporary::write(&copy, bytes, mode)?.make(&copy) {
                Err(StoreError::Exists { .. }) => {}
                done => return done,
            }
        }
        Ok(())
    }

    /// A file that is to be made; the first save makes it, and never in the place of another.
    ///
    /// # Errors
    /// [`StoreError::Exists`], [`StoreError::CannotCreate`] if the folder is not there,
    /// [`StoreError::Locked`] if another is about to make it.
    pub fn fresh(path: &Path, holder: &Holder) -> Result<Target, StoreError> {
        let shown = path.to_path_buf();
        // A dangling link is something too.
        if fs::symlink_metadata(path).is_ok() {
            return Err(StoreError::Exists { path: shown });
        }
        let cannot = |cause| StoreError::CannotCreate {
            path: path.to_path_buf(),
            cause,
        };
        let Some(name) = path.file_name() else {
            return Err(cannot(io::Error::from(io::ErrorKind::InvalidFilename)));
        };
        let folder = fs::canonicalize(folder_of(path)).map_err(cannot)?;
        let path = folder.join(name);
        let lock = Lock::take(&path, holder).map_err(|e| match e {
            StoreError::Io { cause, .. } => cannot(cause),
            other => other,
        })?;
        Ok(Target {
            path,
            seen: None,
            older: None,
            _lock: lock,
        })
    }

    /// The file, links resolved.
    pub fn path(&self) -> &Path {
        &self.path
    }

    /// Writes the whole file anew.
    ///
    /// The bytes go to a temporary file beside it and are on disk before they take its place in one
    /// step, so that at any moment the file is either the old or the new one.
    ///
    /// # Errors
    /// [`StoreError::WrittenByOther`] or [`StoreError::Exists`] if something else is there,
    /// [`StoreError::Io`] and [`StoreError::CannotCreate`] from the system. What is there stays.
    pub fn save(&mut self, text: &Text) -> Result<(), StoreError> {
        let bytes = text.to_bytes();
        let new = Seen::of(&bytes);
        let mode = self.still_ours(&new)?;
        if let Some((format, bytes)) = &self.older {
            self.keep_older(*format, bytes)?;
            self.older = None;
        }
        let temporary = Temporary::write(&self.path, &bytes, mode)?;
        if self.seen.is_none() {
            temporary.make(&self.path)?;
        } else {
            // Looked at once more, since writing takes its time.
            self.still_ours(&new)?;
            temporary.replace(&self.path)?;
        }
        self.seen = Some(new);
        sync_folder(&self.path).map_err(StoreError::io(&self.path, "save"))
    }

    /// That the file is the one last seen here, and the mode it has.
    fn still_ours(&self, new: &Seen) -> Result<Option<Permissions>, StoreError> {
        let Some(seen) = &self.seen else {
            return Ok(None);
        };
        let path = &self.path;
        match Seen::look(path) {
            // The new one is there if a save got as far as its last step and then failed.
            Ok(found) if found == *seen || found == *new => {}
            Ok(_) => return Err(StoreError::WrittenByOther { path: path.clone() }),
            // Somebody removed it: writing it again takes nothing from anybody.
            Err(e) if e.kind() == io::ErrorKind::NotFound => return Ok(None),
            Err(e) => return Err(StoreError::io(path, "read")(e)),
        }
        let mode = fs::metadata(path).map_err(StoreError::io(path, "read"))?;
        Ok(Some(mode.permissions()))
    }
}

fn folder_of(path: &Path) -> &Path {
    match path.parent() {
        Some(p) if !p.as_os_str().is_empty() => p,
        _ => Path::new("."),
    }
}

fn sync_folder(path: &Path) -> io::Result<()> {
    if !cfg!(unix) {
        // Elsewhere a folder cannot be opened as a file; the rename is all there is.
        return Ok(());
    }
    match File::open(folder_of(path))?.sync_all() {
        // Some network file systems cannot; the file itself is on disk.
        Err(e)
            if matches!(
                e.kind(),
                io::ErrorKind::InvalidInput | io::ErrorKind::Unsupported
            ) =>
        {
            Ok(())
        }
        other => other,
    }
}

/// A file on its way, removed if it does not arrive.
struct Temporary {
    path: PathBuf,
    arrived: bool,
}

static NEXT: AtomicU32 = AtomicU32::new(0);

impl Temporary {
    fn write(
        target: &Path,
        bytes: &[u8],
        mode: Option<Permissions>,
    ) -> Result<Temporary, StoreError> {
        let write = || -> io::Result<Temporary> {
            let (mut file, temporary) = Self::create(target, mode.is_some())?;
            if let Some(mode) = mode {
                file.set_permissions(mode)?;
            }
            file.write_all(bytes)?;
            file.sync_all()?;
            Ok(temporary)
        };
        write().map_err(StoreError::io(target, "save"))
    }

    fn create(target: &Path, private: bool) -> io::Result<(File, Temporary)> {
        let mut options = OpenOptions::new();
        options.write(true).create_new(true);
        #[cfg(unix)]
        if private {
            // Until it has the mode of the old file, nobody else may look into it.
            std::os::unix::fs::OpenOptionsExt::mode(&mut options, 0o600);
        }
        #[cfg(not(unix))]
        let _ = private;
        loop {
            // Not made from the notebook's name, which may be as long as a name can be.
            let n = NEXT.fetch_add(1, Ordering::Relaxed);
            let path = target.with_file_name(format!(".rackside-{}-{n}.tmp", std::process::id()));
            match options.open(&path) {
                Ok(file) => {
                    let arrived = false;
                    return Ok((file, Temporary { path, arrived }));
                }
                // Left by an earlier process of the same number that was killed.
                Err(e) if e.kind() == io::ErrorKind::AlreadyExists => {}
                Err(e) => return Err(e),
            }
        }
    }

    fn replace(mut self, target: &Path) -> Result<(), StoreError> {
        fs::rename(&self.path, target).map_err(StoreError::io(target, "save"))?;
        self.arrived = true;
        Ok(())
    }

    /// Puts the file where nothing may be yet.
    fn make(self, target: &Path) -> Result<(), StoreError> {
        let path = || target.to_path_buf();
        match fs::hard_link(&self.path, target) {
            // The temporary name goes when this is dropped.
            Ok(()) => Ok(()),
            Err(e) if e.kind() == io::ErrorKind::AlreadyExists => {
                Err(StoreError::Exists { path: path() })
            }
            // Not every file system has hard links: the place is taken by an empty file first.
            Err(_) => match OpenOptions::new().write(true).create_new(true).open(target) {
                Ok(_) => self.replace(target).inspect_err(|_| {
                    let _ = fs::remove_file(target);
                }),
                Err(e) if e.kind() == io::ErrorKind::AlreadyExists => {
                    Err(StoreError::Exists { path: path() })
                }
                Err(cause) => Err(StoreError::CannotCreate {
                    path: path(),
                    cause,
                }),
            },
        }
    }
}

impl Drop for Temporary {
    fn drop(&mut self) {
        if !self.arrived {
            let _ = fs::remove_file(&self.path);
        }
    }
}
