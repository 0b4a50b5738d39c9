//! Ends nobody planned: a killed program, a terminal that goes away, a machine that shuts down.

use super::harness::{Shown, Terminal, is_kept, one_at_a_time};
use super::rack::{COUNTS, FILE, counted, counts_of, fresh, in_file, role};
use rand::RngExt;
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use std::time::{Duration, Instant};

/// Types the first readings; the last one is known to be in the file, as the screen has it.
fn acknowledged(bench: &mut Terminal, first: usize) {
    for (vial, counts) in &COUNTS[..first] {
        bench.wait_prompt(*vial, role(*vial));
        bench.keypad(&format!("{counts}\r"));
        bench.wait_kept(*vial, *counts);
    }
    let (vial, counts) = COUNTS[first - 1];
    bench.wait_saved(vial, counts);
}

#[test]
fn killed_right_after_saved_the_reading_is_there() {
    let _one = one_at_a_time();
    let home = fresh();
    let mut bench = home.sit(&["open", FILE]);
    acknowledged(&mut bench, 4);
    bench.signal("KILL");
    assert_eq!(bench.end().signal(), Some("Killed"));
    for (vial, counts) in &COUNTS[..4] {
        assert_eq!(in_file(&home, *vial), [f64::from(*counts)]);
    }
    // The lock went with the one who held it: the next sitting may write, and goes on where it stopped.
    let mut bench = home.sit(&["open", FILE]);
    let shown = bench.wait_prompt(COUNTS[4].0, role(COUNTS[4].0));
    assert!(!shown.has("READ ONLY"));
    bench.keypad(&format!("{}\r", COUNTS[4].1));
    bench.wait_saved(COUNTS[4].0, COUNTS[4].1);
    bench.keys("q");
    assert!(bench.end().success());
}

/// How many of the readings the screen says are in the file.
fn promised(shown: &Shown) -> usize {
    let last = COUNTS.iter().position(|(v, c)| is_kept(shown, *v, *c));
    match last {
        Some(at) if shown.says_saved() => at + 1,
        _ => 0,
    }
}

#[test]
fn killed_at_any_moment_nothing_promised_is_lost() {
    const SEED: u64 = 3;
    let _one = one_at_a_time();
    let mut rng = ChaCha8Rng::seed_from_u64(SEED);
    for round in 0..20 {
        let home = fresh();
        let mut bench = home.sit(&["open", FILE]);
        bench.wait_prompt(33, "background");
        // Some readings that are waited for, more as fast as they can be sent, and the end somewhere in that.
        let waited = rng.random_range(1..16);
        let sent = rng.random_range(waited..COUNTS.len());
        acknowledged(&mut bench, waited);
        let mut most = waited;
        for (_, counts) in &COUNTS[waited..sent] {
            bench.keypad(&format!("{counts}\r"));
            most = most.max(promised(&bench.shown()));
        }
        let moment = Instant::now() + Duration::from_micros(rng.random_range(0..20_000));
        while Instant::now() < moment {
            most = most.max(promised(&bench.shown()));
            std::thread::yield_now();
        }
        bench.signal("KILL");
        assert_eq!(bench.end().signal(), Some("Killed"));
        most = most.max(promised(&bench.shown()));
        let kept = COUNTS
            .iter()
            .take_while(|(v, c)| in_file(&home, *v) == [f64::from(*c)])
            .count();
        assert!(
            most <= kept && kept <= sent,
            "round {round}, seed {SEED}: {sent} sent, {most} promised, {kept} in the file"
        );
        let checked = home.run(&["check", FILE]).done();
        assert!(checked.out.contains("as rackside wrote it"), "{checked:?}");
    }
}

#[test]
fn hung_up_the_program_ends_and_keeps_everything() {
    let _one = one_at_a_time();
    let home = counted(10);
    let mut bench = home.sit(&["open", FILE]);
    let (vial, counts) = COUNTS[10];
    bench.wait_prompt(vial, role(vial));
    bench.keypad(&format!("{counts}\r"));
    // Kept, perhaps not saved yet: that is what the wait at the end is for.
    bench.wait_kept(vial, counts);
    bench.keypad("12");
    bench.hang_up();
    let status = bench.end();
    assert!(status.success(), "{status:?}");
    assert_eq!(in_file(&home, vial), [f64::from(counts)]);
    // What was on the line was never kept.
    assert_eq!(in_file(&home, COUNTS[11].0), Vec::<f64>::new());
}

fn told_to_end(signal: &str) {
    let _one = one_at_a_time();
    let home = fresh();
    let mut bench = home.sit(&["open", FILE]);
    bench.wait_prompt(33, "background");
    assert!(!bench.by_lines(), "the bench gets key by key");
    bench.keypad("267\r");
    bench.wait_kept(33, counts_of(33));
    bench.signal(signal);
    let status = bench.end();
    assert!(status.success(), "{status:?}");
    assert!(
        bench.raw().windows(8).any(|w| w == b"\x1b[?1049l"),
        "the screen is not given back"
    );
    assert!(
        bench.by_lines(),
        "the terminal is left as a shell cannot use it"
    );
    assert_eq!(in_file(&home, 33), [267.0]);
}

#[test]
fn told_to_end_the_terminal_is_given_back() {
    told_to_end("TERM");
}

#[test]
fn told_of_a_hang_up_the_terminal_is_given_back() {
    told_to_end("HUP");
}
