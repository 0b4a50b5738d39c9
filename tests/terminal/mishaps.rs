//! Ends nobody planned: a killed program, a terminal that goes away, a machine that shuts down.

use super::harness::{Shown, Terminal, is_kept, one_at_a_time};
use super::rack::{COUNTS, FILE, InFile, counts_of, fresh, heavy, in_file, role};
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
    bench.kill();
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
        // In every other round a save takes so long that the end falls into one.
        let heavy_file = round % 2 == 1;
        let home = if heavy_file { heavy() } else { fresh() };
        let mut bench = home.sit(&["open", FILE]);
        bench.wait_prompt(33, "background");
        // Some readings that are waited for, more as fast as they can be sent, and the end somewhere in that.
        let waited = rng.random_range(1..5);
        let sent = rng.random_range(waited..COUNTS.len());
        acknowledged(&mut bench, waited);
        let mut most = waited;
        for (_, counts) in &COUNTS[waited..sent] {
            bench.keypad(&format!("{counts}\r"));
            most = most.max(promised(&bench.shown()));
        }
        let moment = Instant::now() + Duration::from_micros(rng.random_range(0..30_000));
        while Instant::now() < moment {
            most = most.max(promised(&bench.shown()));
            std::thread::yield_now();
        }
        bench.kill();
        assert_eq!(bench.end().signal(), Some("Killed"));
        most = most.max(promised(&bench.shown()));
        let file = InFile::of(&home);
        let there = |(v, c): &&(u32, u32)| file.of_vial(*v) == [f64::from(*c)];
        let kept = COUNTS.iter().take_while(there).count();
        assert!(
            most <= kept && kept <= sent,
            "round {round}, seed {SEED}: {sent} sent, {most} promised, {kept} in the file"
        );
        let _ = home.run(&["check", FILE]).done();
    }
}

#[test]
fn killed_the_moment_a_slow_save_is_promised_the_reading_is_there() {
    let _one = one_at_a_time();
    let home = heavy();
    for (vial, counts) in &COUNTS[..4] {
        let mut bench = home.sit(&["open", FILE]);
        bench.wait_prompt(*vial, role(*vial));
        bench.keypad(&format!("{counts}\r"));
        bench.wait_saved(*vial, *counts);
        bench.kill();
        bench.end();
        assert_eq!(in_file(&home, *vial), [f64::from(*counts)], "vial {vial}");
    }
}

#[test]
fn hung_up_in_the_middle_of_a_save_the_program_ends_and_keeps_everything() {
    let _one = one_at_a_time();
    let home = heavy();
    let mut bench = home.sit(&["open", FILE]);
    bench.wait_prompt(33, "background");
    bench.keypad("267\r");
    bench.wait_saved(33, 267);
    bench.keypad("227\r12");
    // Kept and not saved yet: what is still to be written is what the end has to wait for.
    bench.wait("227 kept, 12 on the line", |s| {
        is_kept(s, 1, 227) && s.has_row(&["gross counts", "12"])
    });
    bench.hang_up();
    let status = bench.end();
    assert!(status.success(), "{status:?}");
    let file = InFile::of(&home);
    assert_eq!(file.of_vial(33), [267.0]);
    assert_eq!(file.of_vial(1), [227.0]);
    // What was on the line was never kept.
    assert_eq!(file.of_vial(2), Vec::<f64>::new());
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
