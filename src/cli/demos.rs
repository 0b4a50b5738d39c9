//! The demos: invented titrations, carried in the program.

use super::failure::Failure;
use crate::store;
use std::fs;
use std::io::ErrorKind;
use std::path::PathBuf;

/// One demo.
pub(super) struct Demo {
    /// Its name on the command line.
    pub name: &'static str,
    /// What it shows.
    pub about: &'static str,
    /// Its notebook.
    pub text: &'static str,
}

/// All of them; the first is the one opened without a name.
pub(super) const DEMOS: [Demo; 2] = [
    Demo {
        name: "half-typed",
        about: "a rack half typed, to resume (invented)",
        text: include_str!("../../demo-sessions/half-typed.ron"),
    },
    Demo {
        name: "finished",
        about: "a finished rack with one suspect tube (invented)",
        text: include_str!("../../demo-sessions/finished.ron"),
    },
];

/// A demo by its name, or the first.
pub(super) fn find(name: Option<&str>) -> Result<&'static Demo, Failure> {
    let Some(name) = name else {
        return Ok(&DEMOS[0]);
    };
    DEMOS.iter().find(|d| d.name == name).ok_or_else(|| {
        let names: Vec<&str> = DEMOS.iter().map(|d| d.name).collect();
        Failure::new(
            Failure::USAGE,
            format!("there is no demo `{name}`; there are {}", names.join(", ")),
        )
    })
}

/// A fresh numbered copy of a demo in the user's data folder.
pub(super) fn copy(demo: &Demo) -> Result<PathBuf, Failure> {
    let cannot = |path: &std::path::Path, e: &std::io::Error| {
        Failure::new(73, format!("{}: cannot create: {e}", path.display()))
            .hint("the folder for data can be set with XDG_DATA_HOME")
    };
    let places = store::places().ok_or_else(|| {
        Failure::new(73, "no home folder is known for a copy of the demo")
            .hint("set HOME or XDG_DATA_HOME")
    })?;
    let folder = places.data.join("demos");
    fs::create_dir_all(&folder).map_err(|e| cannot(&folder, &e))?;
    for n in 1..10_000 {
        let path = folder.join(format!("{}-{n}.ron", demo.name));
        let made = fs::OpenOptions::new()
            .write(true)
            .create_new(true)
            .open(&path);
        match made {
            Ok(mut file) => {
                std::io::Write::write_all(&mut file, demo.text.as_bytes())
                    .map_err(|e| cannot(&path, &e))?;
                return Ok(path);
            }
            Err(e) if e.kind() == ErrorKind::AlreadyExists => {}
            Err(e) => return Err(cannot(&path, &e)),
        }
    }
    Err(Failure::new(
        73,
        format!("{}: too many copies of the demo", folder.display()),
    )
    .hint("remove some of them"))
}
