//! Files as a sitting uses them: opened, kept up, put away; the lists of the user's own.

use super::{Incoming, ShellError, now};
use crate::analysis::analyse;
use crate::app::{Access, Event, Laid, Recent, Typed, fit_line};
use crate::assay::{Lab, Titration};
use crate::notebook::{Entry, Notebook};
use crate::store::{self, Ended, Holder, SaveReport, Saver, StoreError, Target, Text};
use std::fs;
use std::io::{self, Write};
use std::path::{Path, PathBuf};
use std::sync::mpsc::Sender;
use std::sync::{Arc, Mutex, PoisonError};
use std::thread;
use std::time::Duration;

/// How long leaving waits for the last save.
const SAVE_PATIENCE: Duration = Duration::from_secs(20);

/// The digest of the newest text given to the saver, by its revision.
type Digests = Arc<Mutex<Vec<(u32, String)>>>;

/// A titration's file while it is on the bench.
pub(super) struct Open {
    path: PathBuf,
    saver: Option<Saver>,
    text: Text,
    digests: Digests,
    /// An entry that the file cannot take, and why.
    fault: Option<(u32, String)>,
}

/// Opens a titration for writing, or for reading where another has it; with what is to be said of it.
///
/// # Errors
/// Why it cannot be opened, in a sentence.
pub fn open(path: &Path, who: &str) -> Result<(store::Opened, Vec<String>), StoreError> {
    let holder = Holder {
        who: who.into(),
        since: now(),
    };
    let (opened, mut notices) = match store::open_for_writing(path, &holder) {
        Ok(opened) => (opened, Vec::new()),
        Err(StoreError::Locked { holder, .. }) => (
            store::open(path)?,
            vec![format!("open elsewhere: {holder}")],
        ),
        Err(e) if e.write_protected() => (
            store::open(path)?,
            vec![format!("it may not be written here: {}", e.in_short())],
        ),
        Err(e) => return Err(e),
    };
    notices.extend(opened.changed_in_words());
    Ok((opened, notices))
}

/// Makes the file of a new titration.
pub(super) fn create(
    path: &Path,
    t: Titration,
    who: &str,
) -> Result<(store::Opened, Vec<String>), String> {
    let since = now();
    let notebook =
        Notebook::open(t.protocol, t.levels, t.tubes, since, who).map_err(|e| e.to_string())?;
    let holder = Holder {
        who: who.into(),
        since,
    };
    let opened = store::create(path, notebook, &holder).map_err(|e| e.to_string())?;
    Ok((opened, Vec::new()))
}

/// What the bench gets of an opened titration, the n-th of the sitting, and what the shell keeps of it. It is
/// remembered as used lately.
pub(super) fn lay(
    opened: store::Opened,
    mut notices: Vec<String>,
    send: &Sender<Incoming>,
    n: u32,
) -> io::Result<(Laid, Open)> {
    if let Some(places) = store::places() {
        // A list that cannot be kept is no reason not to work.
        drop(store::remember(&places, &opened.path));
    }
    let digests = Digests::default();
    let (saver, access) = match opened.access {
        store::Access::Write(target) => {
            let (send, digests) = (send.clone(), Arc::clone(&digests));
            let saver = Saver::spawn(target, move |report| {
                drop(send.send(Incoming::Of(n, said(report, &digests))));
            })?;
            (Some(saver), Access::Writing)
        }
        store::Access::Read if notices.is_empty() => {
            (None, Access::ReadOnly("opened for reading".into()))
        }
        store::Access::Read => (None, Access::ReadOnly(notices.remove(0))),
    };
    let laid = Laid {
        notebook: opened.notebook,
        file: opened.path.display().to_string(),
        access,
        notices,
        changed: opened.changed,
        digest: opened.text.digest().into(),
    };
    Ok((
        laid,
        Open {
            path: opened.path,
            saver,
            text: opened.text,
            digests,
            fault: None,
        },
    ))
}

fn said(report: SaveReport, digests: &Digests) -> Event {
    match report {
        SaveReport::Failed { rev, error } => Event::SaveFailed(rev, error.in_short()),
        SaveReport::Saved { rev } => {
            let mut known = digests.lock().unwrap_or_else(PoisonError::into_inner);
            known.retain(|(r, _)| *r >= rev);
            let digest = known
                .iter()
                .find(|(r, _)| *r == rev)
                .map(|(_, d)| d.clone());
            Event::Saved(rev, digest.unwrap_or_default())
        }
    }
}

impl Open {
    /// Gives the entries that are not in the text yet to the saver.
    pub(super) fn save(&mut self, revision: u32, entries: &[Arc<Entry>]) -> Result<(), String> {
        let Some(saver) = &self.saver else {
            return Ok(());
        };
        let written = self.text.entries() as usize;
        for entry in entries.iter().skip(written) {
            if let Err(fault) = self.text.append(entry) {
                let why = fault.to_string();
                self.fault = Some((revision, why.clone()));
                return Err(why);
            }
        }
        self.note_digest(revision);
        saver.save(revision, self.text.clone());
        Ok(())
    }

    /// Saves to another file from now on; it must not be there yet.
    pub(super) fn redirect(&mut self, path: &Path, who: &str) -> Result<(), String> {
        let Some(saver) = &self.saver else {
            return Err("the titration is only looked at here".into());
        };
        let holder = Holder {
            who: who.into(),
            since: now(),
        };
        let target = Target::fresh(path, &holder).map_err(|e| e.to_string())?;
        let revision = self.text.entries();
        self.note_digest(revision);
        saver.redirect(target, revision, self.text.clone());
        self.path = path.to_path_buf();
        Ok(())
    }

    /// Remembers the digest of the text as it is for when the saver says that it is saved.
    fn note_digest(&self, revision: u32) {
        let digest = self.text.digest().to_string();
        let mut known = self.digests.lock().unwrap_or_else(PoisonError::into_inner);
        known.push((revision, digest));
    }

    /// Waits for the last save and lets go of the file.
    pub(super) fn put_away(self) -> Result<(), ShellError> {
        let file = self.path.display().to_string();
        let fault = self.fault;
        match self.saver.map(|s| s.finish(SAVE_PATIENCE)) {
            None | Some(Ended::Saved) => fault.map_or(Ok(()), |(rev, why)| {
                Err(ShellError::Unsaved { file, rev, why })
            }),
            Some(Ended::Unsaved { rev, error }) => Err(ShellError::Unsaved {
                file,
                rev,
                why: error.to_string(),
            }),
            Some(Ended::StillWriting) => {
                let rev = self.text.entries();
                Err(ShellError::Unsaved {
                    file,
                    rev,
                    why: "the disk did not answer in time".into(),
                })
            }
        }
    }

    /// Writes a page beside the titration, never over another file; says where.
    pub(super) fn write_page(&self, page: &str) -> Result<String, String> {
        let stem = self
            .path
            .file_stem()
            .map_or("summary".into(), |s| s.to_string_lossy().into_owned());
        for n in 1..1000 {
            let name = if n == 1 {
                format!("{stem}.txt")
            } else {
                format!("{stem}-{n}.txt")
            };
            let path = self.path.with_file_name(name);
            let said = |e: io::Error| format!("{}: {e}", path.display());
            match fs::OpenOptions::new()
                .write(true)
                .create_new(true)
                .open(&path)
            {
                Err(e) if e.kind() == io::ErrorKind::AlreadyExists => {}
                Err(e) => return Err(said(e)),
                Ok(mut file) => {
                    file.write_all(page.as_bytes())
                        .and_then(|()| file.sync_all())
                        .map_err(said)?;
                    return Ok(format!("the page is in {}", path.display()));
                }
            }
        }
        Err(format!(
            "{stem}.txt: too many pages beside the titration; remove some of them"
        ))
    }
}

/// Looks up the titrations used lately on a thread of its own: a disk that is slow keeps nobody waiting.
pub(super) fn survey(send: Sender<Incoming>) -> io::Result<()> {
    thread::Builder::new()
        .name("survey".into())
        .spawn(move || {
            let places = store::places();
            if let Some(typed) = places.as_ref().and_then(store::draft) {
                drop(send.send(Incoming::Event(Event::KeptDraft(typed))));
            }
            let files = places.map_or(Vec::new(), |p| store::recents(&p));
            let recents = files
                .iter()
                .filter(|f| f.exists())
                .map(|f| recent(f))
                .collect();
            drop(send.send(Incoming::Event(Event::Recents(recents))));
        })?;
    Ok(())
}

fn recent(path: &Path) -> Recent {
    let shown = path.display().to_string();
    match store::open(path) {
        Ok(opened) => {
            let t = opened.notebook.titration();
            let state = fit_line(t, &analyse(t));
            Recent {
                path: shown,
                title: t.protocol.title.clone(),
                state,
            }
        }
        Err(e) => Recent {
            path: shown,
            title: "cannot be read".into(),
            state: e.to_string(),
        },
    }
}

/// Keeps what is being typed of a new titration. The terminal has gone: there is nobody to tell if it fails.
pub(super) fn keep_draft(typed: &Typed) {
    if let Some(places) = store::places() {
        drop(store::keep_draft(&places, typed));
    }
}

/// Forgets what was being typed of a new titration.
pub(super) fn drop_draft() {
    if let Some(places) = store::places() {
        store::drop_draft(&places);
    }
}

/// Keeps the lab's settings; says where.
pub(super) fn keep_lab(lab: &Lab) -> Result<String, String> {
    let places = store::places().ok_or("no home folder is known for the settings")?;
    store::keep_lab(&places, lab).map_err(|e| e.to_string())?;
    Ok(format!(
        "the settings are kept in {}",
        places.config.display()
    ))
}
