//! Opening, making, locking.

use crate::common::{book, counted, everything, holder, opened};
use rackside::store::{Access, Seen, StoreError, create, open, open_for_writing};
use std::fs;
use std::path::{Path, PathBuf};

fn names(folder: &Path) -> Vec<String> {
    let mut all: Vec<String> = fs::read_dir(folder)
        .unwrap()
        .map(|f| f.unwrap().file_name().into_string().unwrap())
        .collect();
    all.sort();
    all
}

fn made(folder: &Path) -> PathBuf {
    let path = folder.join("OB-31.ron");
    create(&path, everything(), &holder()).unwrap();
    path
}

#[test]
fn what_was_made_is_opened() {
    let folder = tempfile::tempdir().unwrap();
    let path = made(folder.path());
    let back = open(&path).unwrap();
    assert_eq!(back.notebook.entries(), everything().entries());
    assert!(back.changed.is_empty() && matches!(back.access, Access::Read));
    assert_eq!(back.path, path);
    let back = open_for_writing(&path, &holder()).unwrap();
    assert!(matches!(back.access, Access::Write(_)));
    assert_eq!(names(folder.path()), [".OB-31.ron.lock", "OB-31.ron"]);
}

#[test]
fn the_same_notebook_gives_the_same_bytes() {
    let folder = tempfile::tempdir().unwrap();
    let (a, b) = (folder.path().join("a.ron"), folder.path().join("b.ron"));
    create(&a, everything(), &holder()).unwrap();
    create(&b, everything(), &holder()).unwrap();
    assert_eq!(fs::read(&a).unwrap(), fs::read(&b).unwrap());
    assert_eq!(Seen::at(&a).unwrap(), Seen::at(&b).unwrap());
    assert_eq!(open(&a).unwrap().seen, Seen::at(&a).unwrap());
}

#[test]
fn reading_writes_nothing() {
    let folder = tempfile::tempdir().unwrap();
    let path = made(folder.path());
    fs::remove_file(folder.path().join(".OB-31.ron.lock")).unwrap();
    let before = fs::metadata(&path).unwrap().modified().unwrap();
    open(&path).unwrap();
    assert_eq!(names(folder.path()), ["OB-31.ron"]);
    assert_eq!(fs::metadata(&path).unwrap().modified().unwrap(), before);
}

#[test]
fn a_file_is_not_made_over_another() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("there.ron");
    fs::write(&path, "something else").unwrap();
    let e = create(&path, opened(), &holder()).unwrap_err();
    assert!(matches!(&e, StoreError::Exists { path: p } if *p == path));
    assert!(e.to_string().contains("there.ron"));
    assert_eq!(e.exit_code(), 73);
    assert_eq!(fs::read_to_string(&path).unwrap(), "something else");
    assert_eq!(names(folder.path()), ["there.ron"]);
}

#[cfg(unix)]
#[test]
fn nor_through_a_link_to_nothing() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("link.ron");
    std::os::unix::fs::symlink(folder.path().join("nothing.ron"), &path).unwrap();
    let e = create(&path, opened(), &holder()).unwrap_err();
    assert!(matches!(e, StoreError::Exists { .. }));
    assert_eq!(names(folder.path()), ["link.ron"]);
}

#[test]
fn where_nothing_can_be_made() {
    let folder = tempfile::tempdir().unwrap();
    let file = folder.path().join("file");
    fs::write(&file, "").unwrap();
    for path in [folder.path().join("no/folder.ron"), file.join("x.ron")] {
        let e = create(&path, opened(), &holder()).unwrap_err();
        assert!(matches!(e, StoreError::CannotCreate { .. }), "{e}");
        assert_eq!(e.exit_code(), 73);
    }
    let long = folder.path().join("x".repeat(300));
    let e = create(&long, opened(), &holder()).unwrap_err();
    assert_eq!(e.exit_code(), 73);
    assert_eq!(names(folder.path()), ["file"]);
}

#[test]
fn what_is_no_file_is_no_notebook() {
    let folder = tempfile::tempdir().unwrap();
    let inner = folder.path().join("folder.ron");
    fs::create_dir(&inner).unwrap();
    for e in [
        open(&inner).unwrap_err(),
        open_for_writing(&inner, &holder()).unwrap_err(),
    ] {
        assert!(matches!(e, StoreError::NotAFile { .. }), "{e}");
        assert_eq!(e.exit_code(), 65);
    }
    let missing = folder.path().join("missing.ron");
    for e in [
        open(&missing).unwrap_err(),
        open_for_writing(&missing, &holder()).unwrap_err(),
    ] {
        assert!(matches!(e, StoreError::Io { .. }), "{e}");
        assert_eq!(e.exit_code(), 74);
    }
    assert_eq!(names(folder.path()), ["folder.ron"]);
}

#[test]
fn one_writes_and_the_others_read() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("shared.ron");
    let first = create(&path, book([counted(1, 5.0)]), &holder()).unwrap();
    let e = open_for_writing(&path, &holder()).unwrap_err();
    let StoreError::Locked { holder: said, .. } = &e else {
        panic!("{e}");
    };
    let pid = std::process::id();
    assert_eq!(said, &format!("process {pid}, ann, since 2031-05-04 10:14"));
    assert_eq!(e.exit_code(), 75);
    assert_eq!(open(&path).unwrap().notebook.revision(), 2);
    // The text is only for the message: without the file's words the lock holds all the same.
    fs::write(folder.path().join(".shared.ron.lock"), "\u{1b}[2J\n").unwrap();
    let e = open_for_writing(&path, &holder()).unwrap_err();
    assert!(matches!(&e, StoreError::Locked { holder, .. } if holder == "[2J"));
    drop(first);
    open_for_writing(&path, &holder()).unwrap();
    assert!(folder.path().join(".shared.ron.lock").exists());
}

#[cfg(unix)]
#[test]
fn two_names_of_a_file_have_one_lock() {
    let folder = tempfile::tempdir().unwrap();
    let path = made(folder.path());
    let link = folder.path().join("link.ron");
    std::os::unix::fs::symlink(&path, &link).unwrap();
    let _held = open_for_writing(&link, &holder()).unwrap();
    let e = open_for_writing(&path, &holder()).unwrap_err();
    assert!(matches!(e, StoreError::Locked { .. }));
}

#[test]
fn a_name_that_somebody_is_about_to_make_is_locked() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("new.ron");
    let _held = rackside::store::Target::fresh(&path, &holder()).unwrap();
    let e = create(&path, opened(), &holder()).unwrap_err();
    assert!(matches!(e, StoreError::Locked { .. }), "{e}");
    assert!(!path.exists());
}

#[cfg(unix)]
#[test]
fn the_name_of_a_file_does_not_drive_a_terminal() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("a\u{1b}[2J.ron");
    fs::write(&path, "x\n").unwrap();
    for e in [
        open(&path).unwrap_err(),
        create(&path, opened(), &holder()).unwrap_err(),
    ] {
        assert!(!e.to_string().chars().any(char::is_control), "{e:?}");
    }
}
