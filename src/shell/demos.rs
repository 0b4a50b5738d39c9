//! The demos: invented titrations, carried in the program.

use super::ShellError;
use crate::app::DEMOS;
use crate::store;
use std::fs;
use std::io::{ErrorKind, Write};
use std::path::{Path, PathBuf};

/// One demo.
pub struct Demo {
    /// Its name on the command line.
    pub name: &'static str,
    /// What it shows.
    pub about: &'static str,
    /// Its notebook.
    pub text: &'static str,
}

/// The notebooks, in the order of [`DEMOS`].
const TEXTS: [&str; DEMOS.len()] = [
    include_str!("../../demo-sessions/half-typed.ron"),
    include_str!("../../demo-sessions/finished.ron"),
    include_str!("../../demo-sessions/free-counted.ron"),
    include_str!("../../demo-sessions/dialysis.ron"),
    include_str!("../../demo-sessions/reader.ron"),
    include_str!("../../demo-sessions/short-lived.ron"),
    include_str!("../../demo-sessions/quenched.ron"),
];

/// All of them; the first is the one opened without a name.
pub fn all() -> impl Iterator<Item = Demo> {
    DEMOS
        .iter()
        .zip(TEXTS)
        .map(|((name, about), text)| Demo { name, about, text })
}

/// A demo by its name, or the first.
pub fn find(name: Option<&str>) -> Option<Demo> {
    let name = name.unwrap_or(DEMOS[0].0);
    all().find(|d| d.name == name)
}

/// A fresh numbered copy of a demo in the user's data folder.
///
/// # Errors
/// There is no such folder, or the copy cannot be made there.
pub fn copy(demo: &Demo) -> Result<PathBuf, ShellError> {
    let cannot = |path: &Path, e: &dyn std::fmt::Display| ShellError::CannotCreate {
        path: path.display().to_string(),
        why: e.to_string(),
    };
    let Some(places) = store::places() else {
        return Err(cannot(
            Path::new("the data folder"),
            &"no home folder is known; set HOME or XDG_DATA_HOME",
        ));
    };
    let folder = places.data.join("demos");
    fs::create_dir_all(&folder).map_err(|e| cannot(&folder, &e))?;
    for n in 1..10_000 {
        let path = folder.join(format!("{}-{n}.ron", demo.name));
        match fs::OpenOptions::new()
            .write(true)
            .create_new(true)
            .open(&path)
        {
            Ok(mut file) => {
                file.write_all(demo.text.as_bytes())
                    .map_err(|e| cannot(&path, &e))?;
                return Ok(path);
            }
            Err(e) if e.kind() == ErrorKind::AlreadyExists => {}
            Err(e) => return Err(cannot(&path, &e)),
        }
    }
    Err(cannot(
        &folder,
        &"too many copies of the demo; remove some of them",
    ))
}
