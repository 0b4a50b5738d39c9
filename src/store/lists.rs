//! Small files of the user's own: titrations used lately, and the lab's settings.

use super::error::StoreError;
use super::places::Places;
use crate::assay::Lab;
use serde::{Deserialize, Serialize};
use std::collections::BTreeMap;
use std::fs;
use std::io::{self, Write};
use std::path::{Path, PathBuf};

/// How many titrations are remembered.
const MOST_RECENTS: usize = 9;
/// A file of settings larger than this is not one.
const MOST_BYTES: u64 = 64 * 1024;

#[derive(Debug, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
struct Recents {
    files: Vec<PathBuf>,
}

fn recents_file(places: &Places) -> PathBuf {
    places.state.join("recents.ron")
}

fn lab_file(places: &Places) -> PathBuf {
    places.config.join("settings.ron")
}

/// The titrations used lately, newest first. A list that cannot be read is no list: nothing depends on it.
pub fn recents(places: &Places) -> Vec<PathBuf> {
    read(&recents_file(places))
        .ok()
        .and_then(|t| ron::from_str::<Recents>(&t).ok())
        .unwrap_or_default()
        .files
}

/// Puts a titration at the head of the list.
///
/// # Errors
/// The list cannot be written.
pub fn remember(places: &Places, path: &Path) -> Result<(), StoreError> {
    let whole = fs::canonicalize(path).unwrap_or_else(|_| path.to_path_buf());
    let mut files = recents(places);
    files.retain(|f| *f != whole);
    files.insert(0, whole);
    files.truncate(MOST_RECENTS);
    write(&recents_file(places), &Recents { files })
}

/// The lab's settings; the usual ones where there are none yet.
///
/// # Errors
/// The file is there and cannot be read, or does not hold settings.
pub fn lab(places: &Places) -> Result<Lab, StoreError> {
    let path = lab_file(places);
    match read(&path) {
        Err(e) if e.kind() == io::ErrorKind::NotFound => Ok(Lab::default()),
        Err(e) => Err(StoreError::io(&path, "read")(e)),
        Ok(text) => ron::from_str(&text).map_err(|e| StoreError::Damaged {
            path,
            line: e.span.start.line,
            cause: e.code.to_string(),
        }),
    }
}

/// Keeps the lab's settings.
///
/// # Errors
/// They cannot be written.
pub fn keep_lab(places: &Places, lab: &Lab) -> Result<(), StoreError> {
    write(&lab_file(places), lab)
}

fn draft_file(places: &Places) -> PathBuf {
    places.state.join("draft.ron")
}

/// What was being typed of a new titration when the terminal went away, by the name of its field.
pub fn draft(places: &Places) -> Option<BTreeMap<String, String>> {
    read(&draft_file(places))
        .ok()
        .and_then(|text| ron::from_str(&text).ok())
}

/// Keeps what is being typed of a new titration.
///
/// # Errors
/// It cannot be written.
pub fn keep_draft(places: &Places, typed: &BTreeMap<String, String>) -> Result<(), StoreError> {
    write(&draft_file(places), typed)
}

/// Forgets what was being typed.
pub fn drop_draft(places: &Places) {
    // There may be none, which is as good.
    let _ = fs::remove_file(draft_file(places));
}

fn read(path: &Path) -> io::Result<String> {
    if fs::metadata(path)?.len() > MOST_BYTES {
        return Err(io::Error::new(
            io::ErrorKind::InvalidData,
            "too large to be one of ours",
        ));
    }
    fs::read_to_string(path)
}

/// Written beside and put in place in one step, so that a reader never meets half of it.
fn write(path: &Path, value: &impl Serialize) -> Result<(), StoreError> {
    let fault = StoreError::io(path, "write");
    let pretty = ron::ser::PrettyConfig::default();
    let text = ron::ser::to_string_pretty(value, pretty).map_err(io::Error::other);
    let written = text.and_then(|text| {
        if let Some(folder) = path.parent() {
            fs::create_dir_all(folder)?;
        }
        let beside = path.with_extension(format!("{}.tmp", std::process::id()));
        let mut file = fs::File::create(&beside)?;
        file.write_all(text.as_bytes())?;
        file.sync_all()?;
        fs::rename(&beside, path)
    });
    written.map_err(fault)
}
