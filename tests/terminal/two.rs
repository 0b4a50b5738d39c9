//! Two at one file.

use super::harness::one_at_a_time;
use super::rack::{FILE, fresh, in_file};
use std::fs;

#[test]
fn the_second_to_open_a_file_may_only_look() {
    let _one = one_at_a_time();
    let home = fresh();
    let mut first = home.sit(&["open", FILE]);
    first.wait_prompt(33, "background");
    let before = home.bytes(FILE);

    let mut second = home.sit(&["open", FILE]);
    second.wait_text("READ ONLY");
    second.wait_prompt(33, "background");
    second.keypad("267\r");
    second.wait("the refusal", |s| s.has("read only:"));
    assert!(!second.shown().has("kept"), "{:?}", second.shown());
    assert_eq!(home.bytes(FILE), before);

    let took = home.run_with(&["take", FILE, "-"], "vial,counts\n33,267\n");
    assert_eq!(took.code, 75, "{took:?}");
    assert!(took.err.contains("open for writing elsewhere"), "{took:?}");
    assert!(took.err.contains("tester"), "{took:?}");
    assert_eq!(took.out, "");
    assert_eq!(home.bytes(FILE), before);

    // What was refused stays on the line to be looked at.
    second.keypad("-");
    second.keys("q");
    assert!(second.end().success());

    // The first one never noticed, and gives the file free when it goes.
    first.keypad("267\r");
    first.wait_saved(33, 267);
    first.keys("q");
    assert!(first.end().success());
    let _ = home
        .run_with(&["take", FILE, "-"], "vial,counts\n1,227\n")
        .done();
    assert_eq!(
        (in_file(&home, 33), in_file(&home, 1)),
        (vec![267.0], vec![227.0])
    );
}

#[test]
fn a_file_another_program_wrote_to_is_left_alone() {
    let _one = one_at_a_time();
    let home = fresh();
    let mut bench = home.sit(&["open", FILE]);
    bench.wait_prompt(33, "background");
    let foreign = "somebody else was here\n";
    home.write(FILE, foreign);
    bench.keypad("267\r");
    bench.wait_text("NOT SAVED");
    assert!(bench.shown().has("kept"), "the bench goes on");
    bench.keys("q");
    // Leaving would lose the reading, so it is asked about first.
    bench.wait_text("leave?");
    bench.keys("n");
    bench.wait("the bench once more", |s| !s.has("leave?"));
    bench.keys("q");
    bench.wait_text("leave?");
    bench.keys("y");
    assert_eq!(bench.end().exit_code(), 74);
    let said = String::from_utf8(bench.raw()).unwrap();
    let behind = said.rsplit("\u{1b}[?1049l").next().unwrap();
    assert!(behind.contains("not saved"), "{behind:?}");
    assert_eq!(home.bytes(FILE), foreign.as_bytes());
}

#[test]
fn a_failed_save_is_tried_until_it_succeeds() {
    let _one = one_at_a_time();
    let home = fresh();
    fs::create_dir(home.path("bench")).unwrap();
    fs::rename(home.path(FILE), home.path("bench/rack.ron")).unwrap();
    let mut bench = home.sit(&["open", "bench/rack.ron"]);
    bench.wait_prompt(33, "background");
    // As a share that goes away and comes back.
    fs::rename(home.path("bench"), home.path("away")).unwrap();
    bench.keypad("267\r");
    bench.wait_text("NOT SAVED");
    bench.wait_prompt(1, "total");
    bench.keypad("227\r");
    bench.wait_kept(1, 227);
    bench.wait_text("NOT SAVED");
    fs::rename(home.path("away"), home.path("bench")).unwrap();
    bench.wait_saved(1, 227);
    bench.keys("q");
    assert!(bench.end().success());
    fs::rename(home.path("bench/rack.ron"), home.path(FILE)).unwrap();
    assert_eq!(
        (in_file(&home, 33), in_file(&home, 1)),
        (vec![267.0], vec![227.0])
    );
}

#[test]
fn what_cannot_be_saved_where_it_is_is_saved_elsewhere() {
    let _one = one_at_a_time();
    let home = fresh();
    let mut bench = home.sit(&["open", FILE]);
    bench.wait_prompt(33, "background");
    let foreign = "somebody else was here\n";
    home.write(FILE, foreign);
    home.write("taken.ron", "there already\n");
    bench.keypad("267\r");
    bench.wait_text("NOT SAVED");
    // Never over another file.
    bench.keys("w");
    bench.wait_text("the file to save to");
    bench.keys("taken.ron\r");
    bench.wait("that it is there already", |s| s.has("there already"));
    bench.keys("w");
    bench.wait_text("the file to save to");
    bench.keys("elsewhere.ron\r");
    bench.wait("that it is saved elsewhere", |s| {
        s.has("saving to elsewhere.ron from now on") && !s.has("NOT SAVED")
    });
    bench.keypad("227\r");
    bench.wait_saved(1, 227);
    bench.keys("q");
    assert!(bench.end().success());
    assert_eq!(home.bytes(FILE), foreign.as_bytes());
    assert_eq!(home.bytes("taken.ron"), b"there already\n");
    let checked = home.run(&["check", "elsewhere.ron"]).done();
    assert!(checked.out.contains("2 of 33 vials read"), "{checked:?}");
}
