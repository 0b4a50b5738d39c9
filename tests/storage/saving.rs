//! Saving: nothing torn, nothing overwritten, nothing said to be saved that is not.

use crate::common::{at, book, counted, everything, holder, note, opened};
use rackside::notebook::Notebook;
use rackside::store::{
    Access, Ended, Opened, SaveReport, Saver, StoreError, Target, Text, create, open,
    open_for_writing,
};
use std::fs;
use std::io::{BufRead, BufReader, Write};
use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};
use std::sync::mpsc::{Receiver, channel};
use std::time::{Duration, Instant};

const PATIENCE: Duration = Duration::from_secs(30);

fn target(opened: Opened) -> (Notebook, Text, Target) {
    match opened.access {
        Access::Write(target) => (opened.notebook, opened.text, target),
        Access::Read => panic!("opened for reading"),
    }
}

/// Adds a note to a notebook and its lines.
fn add(notebook: &mut Notebook, text: &mut Text, words: &str) -> u32 {
    let entry = notebook.record(note(words), at(), "ann").unwrap();
    text.append(&entry).unwrap();
    entry.n
}

fn temporaries(folder: &Path) -> usize {
    fs::read_dir(folder)
        .unwrap()
        .filter(|f| {
            let name = f.as_ref().unwrap().file_name();
            name.to_string_lossy().ends_with(".tmp")
        })
        .count()
}

#[test]
fn a_save_adds_to_what_is_there() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("a.ron");
    let (mut book, mut text, mut target) = target(create(&path, everything(), &holder()).unwrap());
    let before = fs::read_to_string(&path).unwrap();
    add(&mut book, &mut text, "one more");
    target.save(&text).unwrap();
    let after = fs::read_to_string(&path).unwrap();
    let kept = before.rfind("])\n").unwrap();
    assert_eq!(before[..kept], after[..kept]);
    assert_eq!(open(&path).unwrap().notebook.entries(), book.entries());
    assert_eq!(temporaries(folder.path()), 0);
}

#[cfg(unix)]
#[test]
fn mode_and_link_are_kept() {
    use std::os::unix::fs::{PermissionsExt, symlink};
    let folder = tempfile::tempdir().unwrap();
    let inner = folder.path().join("inner");
    fs::create_dir(&inner).unwrap();
    let (path, link) = (inner.join("a.ron"), folder.path().join("link.ron"));
    create(&path, opened(), &holder()).unwrap();
    symlink("inner/a.ron", &link).unwrap();
    for mode in [0o640, 0o600, 0o664] {
        fs::set_permissions(&path, PermissionsExt::from_mode(mode)).unwrap();
        let (mut book, mut text, mut target) = target(open_for_writing(&link, &holder()).unwrap());
        let n = add(&mut book, &mut text, "through the link");
        target.save(&text).unwrap();
        assert!(fs::symlink_metadata(&link).unwrap().is_symlink());
        let found = fs::metadata(&path).unwrap().permissions().mode() & 0o777;
        assert_eq!(found, mode);
        assert_eq!(open(&path).unwrap().notebook.revision(), n);
    }
    assert_eq!(temporaries(&inner) + temporaries(folder.path()), 0);
}

#[test]
fn what_another_wrote_is_not_overwritten() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("a.ron");
    let (mut book, mut text, mut target) = target(create(&path, opened(), &holder()).unwrap());
    let theirs = Text::of(crate::common::book([counted(1, 5.0)]).entries()).unwrap();
    fs::write(&path, theirs.to_bytes()).unwrap();
    add(&mut book, &mut text, "ours");
    let e = target.save(&text).unwrap_err();
    assert!(matches!(e, StoreError::WrittenByOther { .. }), "{e}");
    assert_eq!(e.exit_code(), 74);
    assert_eq!(fs::read(&path).unwrap(), theirs.to_bytes());
    assert_eq!(temporaries(folder.path()), 0);
    // An edit before the footer changes the size at least.
    let (mut book, mut text, mut target) = {
        drop(target);
        self::target(open_for_writing(&path, &holder()).unwrap())
    };
    let edited = fs::read_to_string(&path).unwrap().replace("5.0", "55.0");
    fs::write(&path, &edited).unwrap();
    add(&mut book, &mut text, "ours");
    assert!(target.save(&text).is_err());
    assert_eq!(fs::read_to_string(&path).unwrap(), edited);
}

#[test]
fn what_was_removed_is_written_again() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("a.ron");
    let (mut book, mut text, mut target) = target(create(&path, opened(), &holder()).unwrap());
    fs::remove_file(&path).unwrap();
    let n = add(&mut book, &mut text, "x");
    target.save(&text).unwrap();
    assert_eq!(open(&path).unwrap().notebook.revision(), n);
}

#[test]
fn the_first_save_is_not_over_what_came_meanwhile() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("a.ron");
    let mut target = Target::fresh(&path, &holder()).unwrap();
    fs::write(&path, "theirs").unwrap();
    let text = Text::of(opened().entries()).unwrap();
    assert!(matches!(
        target.save(&text).unwrap_err(),
        StoreError::Exists { .. }
    ));
    assert_eq!(fs::read_to_string(&path).unwrap(), "theirs");
    assert_eq!(temporaries(folder.path()), 0);
}

struct Bench {
    folder: tempfile::TempDir,
    path: PathBuf,
    book: Notebook,
    text: Text,
    saver: Saver,
    reports: Receiver<SaveReport>,
}

fn bench() -> Bench {
    let folder = tempfile::tempdir().unwrap();
    let place = folder.path().join("rack");
    fs::create_dir(&place).unwrap();
    let path = place.join("a.ron");
    let (book, text, target) = target(create(&path, opened(), &holder()).unwrap());
    let (send, reports) = channel();
    let saver = Saver::spawn(target, move |r| drop(send.send(r))).unwrap();
    Bench {
        folder,
        path,
        book,
        text,
        saver,
        reports,
    }
}

impl Bench {
    fn add(&mut self) -> u32 {
        let n = add(&mut self.book, &mut self.text, "a note");
        self.saver.save(n, self.text.clone());
        n
    }

    fn saved(&self, rev: u32) {
        loop {
            match self.reports.recv_timeout(PATIENCE).unwrap() {
                SaveReport::Saved { rev: r } if r == rev => return,
                SaveReport::Saved { rev: r } => assert!(r < rev),
                SaveReport::Failed { error, .. } => panic!("{error}"),
            }
        }
    }

    fn failed(&self) -> (u32, String) {
        match self.reports.recv_timeout(PATIENCE).unwrap() {
            SaveReport::Failed { rev, error } => (rev, error.to_string()),
            SaveReport::Saved { rev } => panic!("saved {rev}"),
        }
    }
}

#[test]
fn the_newest_is_saved_in_the_end() {
    let mut b = bench();
    let mut last = 0;
    for _ in 0..200 {
        last = b.add();
    }
    b.saved(last);
    assert_eq!(open(&b.path).unwrap().notebook.entries(), b.book.entries());
    assert_eq!(fs::read(&b.path).unwrap(), b.text.to_bytes());
    assert!(matches!(b.saver.finish(PATIENCE), Ended::Saved));
}

#[test]
fn finishing_saves_what_still_waits() {
    let mut b = bench();
    for _ in 0..20 {
        b.add();
    }
    assert!(matches!(b.saver.finish(PATIENCE), Ended::Saved));
    assert_eq!(open(&b.path).unwrap().notebook.entries(), b.book.entries());
    // And so does a saver that is only dropped; the lock goes with it.
    let mut b = bench();
    b.add();
    drop(b.saver);
    let back = open_for_writing(&b.path, &holder()).unwrap();
    assert_eq!(back.notebook.entries(), b.book.entries());
}

/// The folder is gone, and comes back: the saver fails, goes on trying, and saves.
#[test]
fn what_fails_is_tried_again() {
    let mut b = bench();
    let (place, away) = (b.folder.path().join("rack"), b.folder.path().join("away"));
    fs::rename(&place, &away).unwrap();
    let n = b.add();
    let begun = Instant::now();
    let mut failures = 0;
    while failures < 3 {
        let (rev, said) = b.failed();
        assert_eq!(rev, n);
        assert!(said.contains("a.ron"), "{said}");
        failures += 1;
    }
    // 250 ms and 500 ms lie between the first three attempts.
    assert!(begun.elapsed() >= Duration::from_millis(700));
    fs::rename(&away, &place).unwrap();
    loop {
        match b.reports.recv_timeout(PATIENCE).unwrap() {
            SaveReport::Saved { rev } => break assert_eq!(rev, n),
            SaveReport::Failed { rev, .. } => assert_eq!(rev, n),
        }
    }
    assert_eq!(open(&b.path).unwrap().notebook.revision(), n);
}

#[test]
fn a_save_that_fails_to_the_end_says_so() {
    let mut b = bench();
    fs::rename(b.folder.path().join("rack"), b.folder.path().join("away")).unwrap();
    let n = b.add();
    let begun = Instant::now();
    let Ended::Unsaved { rev, error } = b.saver.finish(PATIENCE) else {
        panic!("ended otherwise");
    };
    assert_eq!((rev, error.exit_code()), (n, 74));
    // It does not sit out its pauses.
    assert!(begun.elapsed() < Duration::from_secs(10));
    let left = open(&b.folder.path().join("away/a.ron")).unwrap();
    assert_eq!(left.notebook.revision(), n - 1);
}

#[test]
fn saved_elsewhere() {
    let mut b = bench();
    fs::write(&b.path, "theirs").unwrap();
    let n = b.add();
    let (rev, said) = b.failed();
    assert!(
        rev == n && said.contains("changed by another program"),
        "{said}"
    );
    let other = b.folder.path().join("other.ron");
    b.saver
        .redirect(Target::fresh(&other, &holder()).unwrap(), n, b.text.clone());
    b.saved(n);
    assert_eq!(fs::read_to_string(&b.path).unwrap(), "theirs");
    assert_eq!(open(&other).unwrap().notebook.revision(), n);
    let n = b.add();
    b.saved(n);
    assert_eq!(open(&other).unwrap().notebook.revision(), n);
    assert!(matches!(
        open_for_writing(&other, &holder()).unwrap_err(),
        StoreError::Locked { .. }
    ));
    assert!(matches!(b.saver.finish(PATIENCE), Ended::Saved));
}

/// Notes saved one by one, each acknowledged on stdout once it is on disk. In a process of its own,
/// for the test below, it goes on until it is killed; as a test it looks at the file after each.
#[test]
fn writer() {
    let folder = tempfile::tempdir().unwrap();
    let (path, most) = match std::env::var_os("RACKSIDE_TEST_WRITER") {
        Some(path) => (PathBuf::from(path), usize::MAX),
        None => {
            let path = folder.path().join("a.ron");
            create(&path, opened(), &holder()).unwrap();
            (path, 20)
        }
    };
    let (mut book, mut text, mut target) = target(open_for_writing(&path, &holder()).unwrap());
    for _ in 0..most {
        let n = add(&mut book, &mut text, "a note");
        target.save(&text).unwrap();
        if most < usize::MAX {
            assert_eq!(open(&path).unwrap().notebook.entries(), book.entries());
            continue;
        }
        // One write, so that the line comes whole or not at all.
        let line = format!("acknowledged {n}\n");
        std::io::stdout().write_all(line.as_bytes()).unwrap();
    }
}

/// Killed at forty moments: what was acknowledged is there, nothing is torn, the lock is free; while
/// it lives, it is locked.
#[test]
fn a_killed_writer_loses_nothing_acknowledged() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("a.ron");
    create(&path, book([]), &holder()).unwrap();
    let mut highest = 1;
    for round in 0..40 {
        let mut child = Command::new(std::env::current_exe().unwrap())
            .args(["--exact", "saving::writer", "--nocapture"])
            .env("RACKSIDE_TEST_WRITER", &path)
            .stdout(Stdio::piped())
            .spawn()
            .unwrap();
        let mut lines = BufReader::new(child.stdout.take().unwrap()).lines();
        let acknowledged = |line: String| {
            let (_, n) = line.split_once("acknowledged ")?;
            n.parse::<u32>().ok()
        };
        // The first word of it shows that it has the lock.
        let first = lines.by_ref().map(Result::unwrap).find_map(acknowledged);
        let mut last = first.unwrap();
        if round == 0 {
            let e = open_for_writing(&path, &holder()).unwrap_err();
            assert!(matches!(e, StoreError::Locked { .. }), "{e}");
        }
        for line in lines.by_ref().take(round % 5) {
            last = acknowledged(line.unwrap()).unwrap_or(last);
        }
        std::thread::sleep(Duration::from_micros(37 * round as u64));
        child.kill().unwrap();
        child.wait().unwrap();
        for line in lines.map_while(Result::ok) {
            last = acknowledged(line).unwrap_or(last);
        }
        let back = open_for_writing(&path, &holder()).unwrap();
        assert!(back.changed.is_empty());
        let found = back.notebook.revision();
        assert!(found == last || found == last + 1, "{found} {last}");
        assert!(last > highest);
        highest = last;
    }
}
