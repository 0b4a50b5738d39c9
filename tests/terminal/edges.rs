//! The edges of a sitting: stopped and taken up again by the shell, left alone, a disk that fills up, a folder that
//! is not the same any more, a terminal that vanishes.

use super::form::{PAGE_DOWN, wait_step};
use super::harness::{Home, Shown, called, is_kept, one_at_a_time};
use super::rack::{FILE, InFile, counted, fresh};
use std::fs;
use std::process::Command;
use std::time::Duration;

#[test]
fn stopped_by_the_shell_and_taken_up_again() {
    let _one = one_at_a_time();
    let home = fresh();
    let mut bench = home.sit_in_shell(&["-c", "PS1='ready> ' exec sh -i"]);
    let ready = |s: &Shown| {
        let last = s.rows.iter().rfind(|r| !r.trim().is_empty());
        last.is_some_and(|r| r.trim() == "ready>")
    };
    bench.wait("the shell", ready);
    bench.keys(&called("rackside open rack.ron\r"));
    bench.wait_prompt(33, "background");
    bench.keypad("267\r");
    bench.wait_saved(33, 267);
    bench.keypad("22");
    bench.wait("22 on the line", |s| s.has_row(&["gross counts", "22"]));
    bench.keys("\x1a");
    // The shell has the terminal, in the state that a shell wants.
    bench.wait_text("Stopped");
    bench.wait("the shell's prompt", ready);
    bench.keys("echo $((6 * 7))\r");
    bench.wait("the shell's answer", |s| s.any(|r| r.trim() == "42"));
    // Meanwhile the window is drawn larger.
    bench.resize(100, 30);
    bench.keys("fg\r");
    bench.wait("the bench in its new size, the line as it was", |s| {
        let foot = &s.rows[s.rows.len() - 4..];
        foot.iter().any(|r| r.contains("vial 1 "))
            && foot
                .iter()
                .any(|r| r.contains("gross counts") && r.contains("> 22"))
    });
    bench.keypad("7\r");
    bench.wait_saved(1, 227);
    bench.keys("q");
    bench.wait("the shell once more", ready);
    bench.keys("exit\r");
    assert!(bench.end().success());
    let file = InFile::of(&home);
    assert_eq!(
        (file.of_vial(33), file.of_vial(1)),
        (vec![267.0], vec![227.0])
    );
}

/// How long nothing has to happen on a screen for it to have settled.
const SETTLED: Duration = Duration::from_millis(300);

#[test]
fn left_alone_nothing_is_written_to_the_terminal() {
    let _one = one_at_a_time();
    let home = counted(33);
    let alone = |line: &[&str], sign: &str, keys: &str| {
        let mut bench = home.sit(line);
        bench.wait("the screen", |s| s.has(sign) && !s.has("fitting"));
        if !keys.is_empty() {
            bench.keys(keys);
            wait_step(&bench, "result");
        }
        let before = bench.settled(SETTLED);
        let after = bench.settled(Duration::from_secs(1));
        assert_eq!(
            after, before,
            "bytes while {line:?} with {keys:?} was left alone"
        );
        bench.keys("q");
        assert!(bench.end().success());
    };
    alone(&["open", FILE], "pKd", "");
    alone(&["open", FILE], "pKd", PAGE_DOWN);
    alone(&[], "33 of 33", "");
}

#[test]
fn a_typed_digit_costs_few_bytes() {
    let _one = one_at_a_time();
    // Estimates and a curve are on the screen.
    let home = counted(25);
    let mut bench = home.sit(&["open", FILE]);
    bench.wait("the estimates", |s| s.has("pKd") && !s.has("fitting"));
    let mut typed = String::new();
    let mut costs = Vec::new();
    for digit in "1234567890".chars() {
        let before = bench.settled(SETTLED / 3);
        typed.push(digit);
        bench.keypad(&digit.to_string());
        bench.wait("the digit on the line", |s| {
            s.has_row(&["gross counts", &typed])
        });
        costs.push(bench.settled(SETTLED / 3) - before);
    }
    let most = costs.iter().max().unwrap();
    println!("bytes to the terminal for each typed digit at 80 x 24: {costs:?}");
    assert!(
        *most < 400,
        "bytes for each typed digit at 80 x 24: {costs:?}"
    );
}

/// A disk of 64 KiB in a folder, for as long as this lives.
struct SmallDisk<'h> {
    home: &'h Home,
}

const DISK: &str = "small";

impl SmallDisk<'_> {
    /// None where the machine does not allow it.
    fn mount(home: &Home) -> Option<SmallDisk<'_>> {
        fs::create_dir(home.path(DISK)).unwrap();
        let mounted = Command::new("mount")
            .args(["-t", "tmpfs", "-o", "size=64k", "tmpfs"])
            .arg(home.path(DISK))
            .output();
        mounted.ok()?.status.success().then_some(SmallDisk { home })
    }
}

impl Drop for SmallDisk<'_> {
    fn drop(&mut self) {
        // Lazily: whoever still has a file there keeps it until it ends.
        let _ = Command::new("umount")
            .arg("-l")
            .arg(self.home.path(DISK))
            .status();
    }
}

#[test]
fn a_full_disk_is_said_the_bench_goes_on_and_all_is_saved_once_there_is_room() {
    let _one = one_at_a_time();
    let home = fresh();
    let Some(disk) = SmallDisk::mount(&home) else {
        println!("not checked: a small disk cannot be mounted on this machine");
        return;
    };
    fs::copy(home.path(FILE), home.path("small/rack.ron")).unwrap();
    let mut bench = home.sit(&["open", "small/rack.ron"]);
    bench.wait_prompt(33, "background");
    bench.keypad("267\r");
    bench.wait_saved(33, 267);
    let _ = home.shell("head -c 1000000 /dev/zero >small/ballast");
    bench.keypad("227\r");
    bench.wait("that it is not saved, and why", |s| {
        is_kept(s, 1, 227) && s.has_row(&["NOT SAVED"]) && s.has("No space left")
    });
    bench.wait_prompt(2, "total");
    bench.keypad("210\r");
    bench.wait_kept(2, 210);
    assert!(bench.shown().has("NOT SAVED"));
    // The file is whole and as it was; nothing half written lies beside it.
    let checked = home.run(&["check", "small/rack.ron"]).done().out;
    assert!(checked.contains("1 of 33"), "{checked}");
    bench.wait("a pause between two attempts", |_| {
        home.names(DISK) == [".rack.ron.lock", "ballast", "rack.ron"]
    });
    fs::remove_file(home.path("small/ballast")).unwrap();
    bench.wait_saved(2, 210);
    bench.keys("q");
    assert!(bench.end().success());
    fs::copy(home.path("small/rack.ron"), home.path(FILE)).unwrap();
    drop(disk);
    let file = InFile::of(&home);
    let all = [33, 1, 2].map(|v| file.of_vial(v));
    assert_eq!(all, [[267.0], [227.0], [210.0]]);
}

#[test]
fn a_folder_replaced_by_an_empty_one_gets_the_whole_file() {
    let _one = one_at_a_time();
    let home = fresh();
    fs::create_dir(home.path("bench")).unwrap();
    fs::rename(home.path(FILE), home.path("bench/rack.ron")).unwrap();
    let mut bench = home.sit(&["open", "bench/rack.ron"]);
    bench.wait_prompt(33, "background");
    bench.keypad("267\r");
    bench.wait_saved(33, 267);
    fs::remove_dir_all(home.path("bench")).unwrap();
    bench.keypad("227\r");
    bench.wait("that it is not saved", |s| {
        is_kept(s, 1, 227) && s.has("NOT SAVED")
    });
    fs::create_dir(home.path("bench")).unwrap();
    bench.wait_saved(1, 227);
    bench.keys("q");
    assert!(bench.end().success());
    fs::rename(home.path("bench/rack.ron"), home.path(FILE)).unwrap();
    let file = InFile::of(&home);
    assert_eq!(
        (file.of_vial(33), file.of_vial(1)),
        (vec![267.0], vec![227.0])
    );
}

/// Seconds of a field of `times`: `0m1.25s`.
fn seconds(field: &str) -> f64 {
    let (minutes, rest) = field.split_once('m').unwrap();
    let rest = rest.trim_end_matches('s').replace(',', ".");
    60.0 * minutes.parse::<f64>().unwrap() + rest.parse::<f64>().unwrap()
}

#[test]
fn a_vanished_terminal_leaves_no_process_and_burns_nothing() {
    let _one = one_at_a_time();
    let home = counted(33);
    for (line, sign, keys, then) in [
        ("rackside open rack.ron", "pKd", "314", "314"),
        ("rackside", "33 of 33", "", "33 of 33"),
        ("rackside", "33 of 33", "n\rHalf typed", "Half typed"),
    ] {
        // The shell outlives the program, so that it can say how it ended and what it cost.
        let line = format!("trap : HUP; {line}; echo $? >code; times >times");
        let mut bench = home.sit_in_shell(&["-c", &line]);
        bench.wait(sign, |s| s.has(sign) && !s.has("fitting"));
        bench.keys(keys);
        bench.wait_text(then);
        bench.hang_up();
        bench.end();
        assert_eq!(home.bytes("code"), b"0\n", "{line}");
        let times = String::from_utf8(home.bytes("times")).unwrap();
        let children = times.lines().nth(1).unwrap();
        let burnt: f64 = children.split_whitespace().map(seconds).sum();
        // A program that waits for keys that never come would burn all the time it takes to end.
        assert!(burnt < 5.0, "{line}: {burnt} s of CPU");
        for name in ["code", "times"] {
            fs::remove_file(home.path(name)).unwrap();
        }
    }
}
