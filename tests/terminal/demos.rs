//! The demos, each with what it says of itself.

use super::harness::{Home, one_at_a_time, project};
use rackside::analysis::analyse;
use rackside::notebook::{Notebook, What};
use rackside::report;
use rackside::store::{self, Text, format};
use std::fs;
use std::path::PathBuf;

fn files() -> Vec<PathBuf> {
    let mut files: Vec<PathBuf> = fs::read_dir(project("demo-sessions"))
        .unwrap()
        .map(|f| f.unwrap().path())
        .collect();
    files.sort();
    assert!(files.len() >= 2, "{files:?}");
    files
}

#[test]
fn every_demo_file_is_whole_replays_and_says_it_is_invented() {
    let home = Home::new();
    let listed = home.run(&["demo", "--list"]).done().out;
    for path in files() {
        let name = path.file_stem().unwrap().to_str().unwrap();
        let opened = store::open(&path).unwrap();
        assert_eq!(opened.changed, Vec::<u32>::new(), "{name}");
        let again = Notebook::replay(opened.notebook.entries().to_vec()).unwrap();
        assert_eq!(again.titration(), opened.notebook.titration(), "{name}");
        let invented =
            |e: &What| matches!(e, What::Noted { text, .. } if text.contains("invented"));
        assert!(
            opened.notebook.entries().iter().any(|e| invented(&e.what)),
            "{name} does not say that it is invented"
        );
        let checked = home.run(&["check", path.to_str().unwrap()]).done();
        assert!(checked.out.contains("as rackside wrote it"), "{checked:?}");
        assert_eq!(checked.err, "");
        assert!(
            listed.lines().any(|l| l.starts_with(name)),
            "{name} is not listed"
        );
        // Carried in the program, byte for byte.
        let carried = home.run(&["demo", name]).done();
        let read = home.run(&["summary", path.to_str().unwrap()]).done();
        assert_eq!(carried.out, read.out, "{name}");
    }
    assert_eq!(listed.lines().count(), files().len());
}

/// Recorded entry by entry, then written, read and analysed once more: the same numbers to the last bit,
/// at every length of the notebook.
#[test]
fn the_analysis_live_is_the_analysis_reloaded_bit_for_bit() {
    for path in files() {
        let file = store::open(&path).unwrap().notebook;
        let (opening, rest) = file.entries().split_first().unwrap();
        let What::Opened {
            protocol,
            levels,
            tubes,
        } = &opening.what
        else {
            panic!("{}: not opened", path.display());
        };
        let mut live = Notebook::open(
            (**protocol).clone(),
            levels.clone(),
            tubes.clone(),
            opening.at,
            &opening.who,
        )
        .unwrap();
        let mut text = Text::of(live.entries()).unwrap();
        let mut fits = 0;
        for entry in rest {
            let recorded = live
                .record(entry.what.clone(), entry.at, &entry.who)
                .unwrap();
            text.append(&recorded).unwrap();
            let reloaded = format::read(&text.to_bytes()).unwrap();
            assert_eq!(reloaded.changed, Vec::<u32>::new());
            let reloaded = reloaded.notebook;
            let (now, then) = (analyse(live.titration()), analyse(reloaded.titration()));
            let in_text = |a, n: &Notebook| report::json(n.titration(), a).unwrap();
            assert_eq!(
                in_text(&now, &live),
                in_text(&then, &reloaded),
                "{} after entry {}",
                path.display(),
                entry.n
            );
            assert_eq!(now, then);
            fits += usize::from(now.fit().is_some());
        }
        assert_eq!(text.to_bytes(), fs::read(&path).unwrap());
        assert!(fits > 0, "{}: no fit to compare", path.display());
    }
}

#[test]
fn a_demo_at_the_terminal_is_a_fresh_copy_each_time() {
    let _one = one_at_a_time();
    let home = Home::new();
    for n in 1..=2 {
        let mut bench = home.sit(&["demo", "half-typed"]);
        let shown = bench.wait_text("gross counts");
        assert!(!shown.has("READ ONLY"));
        bench.keypad("777\r");
        bench.wait("777 in the file", |s| {
            s.has_row(&["kept", "777"]) && s.says_saved()
        });
        bench.keys("q");
        assert!(bench.end().success());
        let copies = home.names("data/rackside/demos");
        let copies: Vec<&String> = copies.iter().filter(|c| !c.starts_with('.')).collect();
        assert_eq!(copies.len(), n, "{copies:?}");
    }
}
