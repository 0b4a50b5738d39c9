//! More than one person at a titration, and what is recorded beside readings: corrections, notes, lost tubes, a
//! check by a second person, closing and opening again. Each by its keys, each seen in the summary.

use super::form::{ESC, PAGE_DOWN, PAGE_UP, fill, reach, wait_step};
use super::harness::{Home, Terminal, one_at_a_time};
use super::rack::{FILE, counted, counts_of, fresh, in_file, type_through};
use rackside::store;

fn page(home: &Home) -> String {
    home.run(&["summary", FILE]).done().out
}

/// The page with its line ends and indents as single blanks, so that a sentence is found wherever it is broken.
fn running(page: &str) -> String {
    page.split_whitespace().collect::<Vec<_>>().join(" ")
}

/// The digest of the file as it is.
fn digest(home: &Home) -> String {
    let said = home.run(&["check", FILE]).done().out;
    let rest = said.split("digest ").nth(1).unwrap();
    rest.split(';').next().unwrap().to_string()
}

fn leave(mut bench: Terminal) {
    bench.keys("q");
    assert!(bench.end().success());
}

/// Types words into the line that a question opened, and waits until it is gone.
fn answer(bench: &mut Terminal, question: &str, words: &str) {
    bench.wait_text(question);
    bench.keys(words);
    bench.wait_text(words);
    bench.keys("\r");
    bench.wait("the question answered", |s| !s.has("Enter keeps it"));
}

#[test]
fn every_hand_at_the_keyboard_signs_its_own_entries() {
    let _one = one_at_a_time();
    let home = fresh();
    let mut bench = home.sit(&["open", FILE]);
    type_through(&mut bench, [33, 1]);
    bench.wait_saved(1, counts_of(1));
    leave(bench);

    let mut bench = home.sit(&["open", FILE, "--operator", "B. Other"]);
    type_through(&mut bench, [2, 3]);
    bench.keys("o");
    answer(&mut bench, "who is at the keyboard", "C. Third");
    type_through(&mut bench, [4]);
    bench.wait_saved(4, counts_of(4));
    leave(bench);

    let opened = store::open(&home.path(FILE)).unwrap();
    let hands: Vec<&str> = opened
        .notebook
        .entries()
        .iter()
        .map(|e| e.who.as_str())
        .collect();
    let (a, b) = ("tester", "B. Other");
    assert_eq!(hands, [a, a, a, b, b, "C. Third"]);
    let page = running(&page(&home));
    assert!(
        page.contains("written by tester, B. Other, C. Third"),
        "{page}"
    );
}

/// Leaves the forms for the tubes with a reason for what was corrected.
fn correct(bench: &mut Terminal, reason: &str) {
    bench.keys(PAGE_DOWN);
    bench.wait_text("why the protocol is corrected");
    bench.keys("\r");
    bench.wait("that a reason is needed", |s| s.has("needs its reason"));
    answer(bench, "why the protocol is corrected", reason);
    wait_step(bench, "tubes");
    bench.wait("that it is amended and saved", |s| {
        s.has("amended") && s.says_saved()
    });
}

/// Sites in fmol/mg as the page has them.
fn sites(page: &str) -> f64 {
    let line = page.lines().find(|l| l.trim_start().starts_with("sites "));
    let value = line.expect("no sites").split_whitespace().nth(1).unwrap();
    value.parse().unwrap()
}

#[test]
fn a_protocol_corrected_later_shows_old_and_new_with_the_reason() {
    let _one = one_at_a_time();
    let home = counted(33);
    let before = page(&home);
    let mut bench = home.sit(&["open", FILE]);
    bench.wait_text("33 of 33");

    // What is dropped was never there.
    bench.keys(PAGE_UP);
    wait_step(&bench, "counter");
    fill(&mut bench, "efficiency", "30 %");
    bench.keys(ESC);
    wait_step(&bench, "tubes");
    // What cannot be is not taken.
    bench.keys(PAGE_UP);
    wait_step(&bench, "counter");
    fill(&mut bench, "efficiency", "145 %");
    bench.keys(PAGE_DOWN);
    bench.wait("that it stands in the way", |s| {
        s.has("> efficiency") && s.has("in the way")
    });
    bench.keys("\x15");
    fill(&mut bench, "efficiency", "40 %");
    correct(&mut bench, "quench curve of May");

    bench.keys(PAGE_UP);
    wait_step(&bench, "counter");
    bench.keys(PAGE_UP);
    wait_step(&bench, "ladder");
    reach(&mut bench, "list of levels");
    bench.keys("\x150.05 0.1 0.25 0.5 1 2 5 10 nM");
    bench.wait_text("0.25");
    bench.keys(PAGE_DOWN);
    wait_step(&bench, "counter");
    correct(&mut bench, "added counts of level 3");
    leave(bench);

    let after = page(&home);
    let text = running(&after);
    for said in [
        "efficiency: 45 % > 40 %",
        "quench curve of May",
        "added counts of level 3",
        "level 3: 0.2 nM",
        "> 0.25 nM",
    ] {
        assert!(text.contains(said), "no `{said}` in {after}");
    }
    assert!(!text.contains("30 %") && !text.contains("145 %"), "{after}");
    // Sites go with one over the efficiency; the level moves them a little besides.
    let ratio = sites(&after) / sites(&before);
    assert!((1.08..1.17).contains(&ratio), "{ratio}");
    // Readings are as they were.
    assert_eq!(in_file(&home, 1), [227.0]);
}

#[test]
fn notes_lost_tubes_checks_and_closing_are_recorded_and_shown() {
    let _one = one_at_a_time();
    let home = counted(5);
    let mut bench = home.sit(&["open", FILE]);
    bench.wait_prompt(5, "total");
    bench.keys("n");
    answer(&mut bench, "note on vial 5", "foam in the vial");
    bench.keys("l");
    bench.wait_text("lost: vial 5");
    bench.keys("1");
    // The next tube is asked for.
    bench.wait_prompt(6, "total");
    bench.keys("l");
    bench.wait_text("lost: vial 6");
    bench.keys("7");
    answer(&mut bench, "the reason, in words", "fell off the bench");
    bench.wait_prompt(7, "nonspecific");
    bench.wait("all of it in the file", |s| s.says_saved());

    let seen = digest(&home);
    bench.keys("k");
    assert!(bench.wait_text("checked by whom").has(&seen));
    answer(&mut bench, "checked by whom", "D. Second");
    bench.wait("the check in the file", |s| s.says_saved());
    let text = running(&page(&home));
    for said in [
        "vial 5: foam in the vial",
        "Lost tubes",
        "spilled",
        "other: fell off the bench",
        "2 lost",
    ] {
        assert!(text.contains(said), "no `{said}` in {text}");
    }
    let check = format!("by D. Second, digest {seen}");
    assert!(text.contains(&check), "{text}");
    assert!(!text.contains("of an earlier state"), "{text}");

    bench.keys("c");
    bench.wait_text("close the titration?");
    bench.keys("y");
    bench.wait("closed and saved", |s| {
        !s.has("close the titration?") && s.has("closed") && s.says_saved()
    });
    bench.keypad("69\r");
    bench.wait("the refusal", |s| s.has("the titration was closed at"));
    bench.keypad("-");
    let text = running(&page(&home));
    assert!(
        text.contains("closed 2") && text.contains("by tester"),
        "{text}"
    );
    // Closing changes nothing of what was checked.
    assert!(!text.contains("of an earlier state"), "{text}");
    assert_eq!(in_file(&home, 7), Vec::<f64>::new());

    bench.keys("c");
    bench.wait_text("open it again?");
    bench.keys("y");
    bench.wait("open again", |s| s.has("reopened") && s.says_saved());
    bench.keypad("69\r");
    bench.wait_saved(7, 69);
    leave(bench);
    let text = running(&page(&home));
    assert!(!text.contains("closed 2"), "{text}");
    assert!(text.contains(&check), "{text}");
    assert!(text.contains("of an earlier state"), "{text}");
    assert_eq!(in_file(&home, 7), [69.0]);
    let checked = home.run(&["check", FILE]).done().out;
    assert!(checked.contains("9 entries"), "{checked}");
}
