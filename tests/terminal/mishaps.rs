//! Ends nobody planned: a killed program, a terminal that goes away, a machine that shuts down.

use super::harness::{Home, Shown, Terminal, is_kept, one_at_a_time};
use super::rack::{COUNTS, FILE, InFile, fresh, heavy, in_file, role};
use rand::RngExt;
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use std::fs;
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

/// A bench with two readings: one in the file and one kept that could not be saved, since the folder is away.
/// The next attempt is a while off.
fn behind_with_saving(home: &Home) -> Terminal {
    fs::create_dir(home.path("bench")).unwrap();
    fs::rename(home.path(FILE), home.path("bench/rack.ron")).unwrap();
    let mut bench = home.sit(&["open", "bench/rack.ron"]);
    bench.wait_prompt(33, "background");
    bench.keypad("267\r");
    bench.wait_saved(33, 267);
    fs::rename(home.path("bench"), home.path("away")).unwrap();
    bench.keypad("227\r12");
    bench.wait("227 kept and not saved, 12 on the line", |s| {
        is_kept(s, 1, 227) && s.has("NOT SAVED") && s.has_row(&["gross counts", "12"])
    });
    bench
}

fn folder_back(home: &Home) {
    fs::rename(home.path("away"), home.path("bench")).unwrap();
}

/// Everything that was kept is in the file; what was on the line never was.
fn caught_up(home: &Home) {
    fs::rename(home.path("bench/rack.ron"), home.path(FILE)).unwrap();
    let file = InFile::of(home);
    assert_eq!(file.of_vial(33), [267.0]);
    assert_eq!(file.of_vial(1), [227.0]);
    assert_eq!(file.of_vial(2), Vec::<f64>::new());
}

#[test]
fn hung_up_the_program_ends_and_keeps_everything() {
    let _one = one_at_a_time();
    let home = fresh();
    let mut bench = behind_with_saving(&home);
    folder_back(&home);
    bench.hang_up();
    let status = bench.end();
    assert!(status.success(), "{status:?}");
    caught_up(&home);
}

fn told_to_end(signal: &str) {
    let _one = one_at_a_time();
    let home = fresh();
    let mut bench = behind_with_saving(&home);
    assert!(!bench.by_lines(), "the bench gets key by key");
    folder_back(&home);
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
    caught_up(&home);
}

#[test]
fn told_to_end_the_terminal_is_given_back() {
    told_to_end("TERM");
}

#[test]
fn told_of_a_hang_up_the_terminal_is_given_back() {
    told_to_end("HUP");
}

#[test]
fn hung_up_while_the_file_cannot_be_written_the_program_still_ends() {
    let _one = one_at_a_time();
    let home = fresh();
    let mut bench = behind_with_saving(&home);
    bench.hang_up();
    // Nothing to see it, but whoever started it is told.
    assert_eq!(bench.end().exit_code(), 74);
    folder_back(&home);
    fs::rename(home.path("bench/rack.ron"), home.path(FILE)).unwrap();
    assert_eq!(in_file(&home, 33), [267.0]);
}
