//! The lab's settings: typed once, kept, and the defaults of the next new titration; a broken file of them stops
//! nothing.

use super::form::{ESC, PAGE_DOWN, choose, fill, new_titration, reach, wait_step};
use super::harness::{Home, Shown, one_at_a_time};
use super::rack::{FILE, fresh};
use rackside::store;
use std::fs;

const SETTINGS: &str = "config/rackside/settings.ron";

/// The names of who wrote the entries of a file.
fn hands(home: &Home, file: &str) -> Vec<String> {
    let opened = store::open(&home.path(file)).unwrap();
    let entries = opened.notebook.entries();
    entries.iter().map(|e| e.who.clone()).collect()
}

#[test]
fn settings_typed_are_kept_and_are_defaults_of_the_next_titration() {
    let _one = one_at_a_time();
    let home = Home::new();
    let mut bench = home.sit(&[]);
    bench.wait_text("a new titration");
    bench.keys("l");
    bench.wait_text("> operator");
    fill(&mut bench, "operator", "A. Lab");
    fill(&mut bench, "counter", "counter 9");
    choose(&mut bench, "decimal mark", '2', "comma");
    fill(&mut bench, "tube CV", "4,5 %");
    // A value that cannot be is named and keeps the settings open.
    fill(&mut bench, "its factor", "12");
    bench.wait_text("at most 10");
    reach(&mut bench, "plot characters");
    bench.keys("\r");
    bench.wait("the field at fault", |s| s.has("> its factor"));
    bench.keys("\x150,5");
    bench.wait("0,5 in its place", |s| {
        s.has_row(&["its factor", "0,5"]) && !s.has("at most 10")
    });
    fill(&mut bench, "dilution error", "3 %");
    choose(&mut bench, "plot characters", '3', "plain");
    bench.keys("\r");
    bench.wait_text("settings are kept");
    let kept = String::from_utf8(home.bytes(SETTINGS)).unwrap();
    for word in [
        "A. Lab",
        "counter 9",
        "Comma",
        "0.045",
        "0.5",
        "3 %",
        "Plain",
    ] {
        assert!(kept.contains(word), "no {word} in {kept}");
    }

    // In the same sitting and in the next one they are what a new titration begins with.
    let defaults = |s: &Shown| {
        s.has_row(&["counter", "counter 9"])
            && s.has_row(&["decimal mark", "comma"])
            && s.has_row(&["tube CV", "4,5 %"])
            && s.has_row(&["its factor", "0,5"])
            && s.has_row(&["dilution error", "3 %"])
    };
    bench.keys("n");
    bench.wait("the operator", |s| s.has_row(&["operator", "A. Lab"]));
    new_titration(&mut bench, "Comma rack", ',');
    bench.wait_text("comma-rack.ron");
    bench.keys("\r");
    bench.wait_prompt(33, "background");
    bench.keypad("267\r");
    bench.wait_saved(33, 267);
    bench.keys("q");
    bench.wait_text("a new titration");
    bench.keys("q");
    assert!(bench.end().success());
    assert_eq!(hands(&home, "comma-rack.ron"), ["A. Lab", "A. Lab"]);

    let mut bench = home.sit(&[]);
    bench.wait_text("a new titration");
    bench.keys("n");
    wait_step(&bench, "protocol");
    bench.keys(PAGE_DOWN);
    wait_step(&bench, "ladder");
    bench.keys(PAGE_DOWN);
    wait_step(&bench, "counter");
    let shown = bench.wait("the defaults", defaults);
    // Of all there only the efficiency is wanted.
    assert!(
        shown.has("counter (1)") || shown.has("COUNTER (1)"),
        "{shown:?}"
    );
    bench.keys(ESC);
    bench.wait_text("a new titration");
    bench.keys("q");
    assert!(bench.end().success());
    // Plain characters were chosen.
    assert!(bench.raw().is_ascii());

    // A titration has its own settings from its opening on: the forms show them and find no fault in them.
    let before = home.bytes("comma-rack.ron");
    fs::remove_file(home.path(SETTINGS)).unwrap();
    let mut bench = home.sit(&["open", "comma-rack.ron"]);
    bench.wait_prompt(1, "total");
    bench.keys("\x1b[5~");
    wait_step(&bench, "counter");
    bench.wait("its settings", defaults);
    bench.keys(PAGE_DOWN);
    bench.wait_prompt(1, "total");
    bench.keys("q");
    assert!(bench.end().success());
    assert_eq!(home.bytes("comma-rack.ron"), before);
}

#[test]
fn settings_that_cannot_be_read_are_said_and_stop_nothing() {
    let _one = one_at_a_time();
    let home = fresh();
    fs::create_dir_all(home.path("config/rackside")).unwrap();
    let broken: [&[u8]; 5] = [
        b"(operator: \"A. Lab\"",
        b"(operator: 3)",
        b"(operater: \"A. Lab\")",
        b"\x89PNG\r\n\x1a\n",
        b"",
    ];
    for (vial, text) in (1..).zip(broken) {
        home.write(SETTINGS, text);
        let took = home
            .run_with(&["take", FILE, "-"], &format!("vial,counts\n{vial},227\n"))
            .done();
        assert!(
            took.err.contains("settings.ron") && took.err.contains("usual settings are used"),
            "{took:?}"
        );
        assert!(took.err.contains("1 reading taken"), "{took:?}");
        assert_eq!(took.out, "");
        assert_eq!(home.bytes(SETTINGS), text);
    }
    assert_eq!(hands(&home, FILE), ["tester"; 6]);

    // A folder where the file should be.
    fs::remove_file(home.path(SETTINGS)).unwrap();
    fs::create_dir(home.path(SETTINGS)).unwrap();
    for line in [&["open", FILE][..], &[]] {
        let mut bench = home.sit(line);
        bench.wait("bench or start", |s| {
            s.has("gross counts") || s.has("a new titration")
        });
        bench.keys("q");
        assert!(bench.end().success());
        let raw = String::from_utf8(bench.raw()).unwrap();
        let before = raw.split("\u{1b}[?1049h").next().unwrap();
        assert!(before.contains("settings.ron"), "{line:?}: {before:?}");
    }
}
