//! The whole walk, by a person who has never seen the program: from the start screen to the page on paper.

use super::form::{PAGE_DOWN, fill, new_titration, wait_step};
use super::harness::{Home, one_at_a_time};
use super::rack::{COUNTS, FILE, heavy, type_through};

/// Kd with its unit, as the page has it.
fn kd(page: &str) -> String {
    let line = page.lines().find(|l| l.trim_start().starts_with("Kd "));
    let words: Vec<&str> = line.expect("no Kd").split_whitespace().collect();
    words[1..3].join(" ")
}

#[test]
fn a_newcomer_gets_from_the_start_screen_to_the_page_on_paper() {
    let _one = one_at_a_time();
    let home = Home::new();
    let mut bench = home.sit(&[]);
    bench.wait("the start screen with its caution", |s| {
        s.has("a new titration") && s.has("esearch use only") && s.has("no titration used lately")
    });
    bench.keys("n");
    new_titration(&mut bench, "Walk rack 1", '.');
    bench.wait_text("walk-rack-1.ron");
    bench.keys("\r");

    // At the tubes, nothing but the keypad.
    bench.wait_prompt(33, "background");
    type_through(&mut bench, COUNTS.map(|(vial, _)| vial));
    let (vial, counts) = COUNTS[32];
    bench.wait_saved(vial, counts);
    bench.wait("the estimates of all of it", |s| {
        s.has("33 of 33") && s.has_row(&["Kd", "nM", "pKd"]) && !s.has("fitting")
    });

    bench.keys(PAGE_DOWN);
    let shown = wait_step(&bench, "result");
    assert!(shown.has("33 of 33 vials read"), "{:?}", shown.rows);
    bench.keys("s");
    bench.wait("where the page is", |s| s.has("walk-rack-1.txt"));
    // A page is never written over another.
    bench.keys("s");
    bench.wait("where the second page is", |s| s.has("walk-rack-1-2.txt"));
    bench.keys("p");
    bench.wait("that it will be printed", |s| s.has("printed when"));
    bench.keys("q");

    let file = "walk-rack-1.ron";
    let page = home.run(&["summary", file]).done().out;
    let kd = kd(&page);
    bench.wait("the titration with its state on the start screen", |s| {
        s.has("a new titration")
            && s.has_row(&["Walk rack 1", "33 of 33"])
            && s.any(|r| r.contains(&format!("Kd {kd}")))
    });
    bench.keys("q");
    assert!(bench.end().success());
    assert!(bench.by_lines());

    let raw = String::from_utf8(bench.raw()).unwrap();
    let after = raw.rsplit("\u{1b}[?1049l").next().unwrap();
    assert!(
        after.replace("\r\n", "\n").contains(&page),
        "printed after leaving:\n{after}"
    );
    for saved in ["walk-rack-1.txt", "walk-rack-1-2.txt"] {
        assert_eq!(String::from_utf8(home.bytes(saved)).unwrap(), page);
    }
    let checked = home.run(&["check", file]).done().out;
    assert!(
        checked.contains("34 entries") && checked.contains("33 of 33"),
        "{checked}"
    );
}

#[test]
fn what_is_not_complete_is_said_and_nothing_is_made() {
    let _one = one_at_a_time();
    let home = Home::new();
    let mut bench = home.sit(&[]);
    bench.wait_text("a new titration");
    bench.keys("n");
    wait_step(&bench, "protocol");
    for step in ["ladder", "counter"] {
        bench.keys(PAGE_DOWN);
        wait_step(&bench, step);
    }
    bench.keys(PAGE_DOWN);
    wait_step(&bench, "protocol");
    bench.wait("the first field that is missing", |s| {
        s.has("not complete") && s.has("> title")
    });
    bench.keys("Left behind");
    bench.wait_text("Left behind");
    // What is typed has no file yet: leaving asks.
    bench.keys("\x1b");
    bench.wait_text("leave?");
    bench.keys("n");
    bench.wait("the form once more", |s| !s.has("leave?"));
    bench.keys("\x1b");
    bench.wait_text("leave?");
    bench.keys("y");
    bench.wait_text("no titration used lately");
    bench.keys("q");
    assert!(bench.end().success());
    assert!(!home.names("").iter().any(|n| n.ends_with(".ron")));
}

#[test]
fn a_titration_opened_next_knows_nothing_of_the_one_before() {
    let _one = one_at_a_time();
    let home = heavy();
    let mut bench = home.sit(&[]);
    bench.wait_text("a new titration");
    bench.keys("o");
    bench.wait_text("the path of a titration");
    bench.keys(FILE);
    bench.wait_text(FILE);
    bench.keys("\r");
    bench.wait_prompt(33, "background");
    // A save that takes its time, and the next titration asked for before it is done.
    bench.keys("267\rqd1");
    bench.wait_text("21 of 33");
    let demo = home.path("data/rackside/demos/half-typed-1.ron");
    let said = home.run(&["check", demo.to_str().unwrap()]).done().out;
    let digest = said.split("digest ").nth(1).unwrap();
    let digest = digest.split(';').next().unwrap();
    bench.wait("its own estimates", |s| s.has_row(&["Kd", "nM"]));
    bench.keys("k");
    let shown = bench.wait_text("checked by whom?");
    assert!(shown.has(digest), "{digest}: {:?}", shown.rows);
    bench.keys("\x1b");
    bench.wait("the bench once more", |s| !s.has("checked by whom?"));
    bench.keys("q");
    bench.wait("both on the start screen", |s| {
        s.has_row(&["21 of 33"]) && s.has_row(&["1 of 33"])
    });
    bench.keys("q");
    assert!(bench.end().success());
}

#[test]
fn what_was_being_typed_when_the_link_went_is_there_again() {
    let _one = one_at_a_time();
    let home = Home::new();
    let mut bench = home.sit(&[]);
    bench.wait_text("a new titration");
    bench.keys("n");
    wait_step(&bench, "protocol");
    fill(&mut bench, "title", "Dropped link");
    fill(&mut bench, "specific activity", "80 Ci/mmol");
    bench.hang_up();
    bench.end();

    let mut bench = home.sit(&[]);
    bench.wait_text("when the terminal went away");
    bench.keys("n");
    bench.wait("what was typed", |s| {
        s.has_row(&["title", "Dropped link"]) && s.has_row(&["specific activity", "80 Ci/mmol"])
    });
    // Given up on purpose, it is gone.
    bench.keys("\u{3}");
    bench.wait_text("leave?");
    bench.keys("y");
    bench.wait_text("a new titration");
    bench.keys("q");
    assert!(bench.end().success());
    let mut bench = home.sit(&[]);
    bench.wait_text("no titration used lately");
    bench.keys("n");
    bench.wait("empty forms", |s| s.has_row(&["title", "needed"]));
    bench.keys("\u{3}");
    bench.wait_text("a new titration");
    bench.keys("q");
    assert!(bench.end().success());
}
