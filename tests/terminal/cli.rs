//! Every command without a terminal: how it ends, what it says, and on which of its two voices.

use super::harness::{Home, project};
use super::rack::{FILE, counted, fresh};
use std::fs;

/// One call.
struct Case {
    line: &'static [&'static str],
    code: i32,
    /// Every one of these is in stdout; with none of them stdout is empty.
    out: &'static [&'static str],
    /// The same of stderr.
    err: &'static [&'static str],
}

const fn case(
    line: &'static [&'static str],
    code: i32,
    out: &'static [&'static str],
    err: &'static [&'static str],
) -> Case {
    Case {
        line,
        code,
        out,
        err,
    }
}

fn check(home: &Home, cases: &[Case]) {
    for c in cases {
        let ran = home.run(c.line);
        assert_eq!(ran.code, c.code, "{:?}: {ran:?}", c.line);
        for (voice, wanted) in [(&ran.out, c.out), (&ran.err, c.err)] {
            if wanted.is_empty() {
                assert_eq!(voice, "", "{:?}: {ran:?}", c.line);
            }
            for text in wanted {
                assert!(voice.contains(text), "{:?}: no `{text}`: {ran:?}", c.line);
            }
        }
    }
}

const CAUTION: &str = "Research use only, not for diagnosis or treatment";
const SAFETY: &str = "radiation-safety or safety officer";

#[test]
fn help_and_wrong_calls() {
    let home = Home::new();
    let cases = [
        case(&["--help"], 0, &["Usage", "Examples", CAUTION, SAFETY], &[]),
        case(&["-h"], 0, &["Usage", CAUTION], &[]),
        case(&["help", "take"], 0, &["--recount", "Examples"], &[]),
        case(&["new", "--help"], 0, &["--from", "Examples"], &[]),
        case(&["open", "--help"], 0, &["Examples"], &[]),
        case(&["summary", "--help"], 0, &["--format", "Examples"], &[]),
        case(&["check", "--help"], 0, &["Example"], &[]),
        case(&["demo", "--help"], 0, &["--list", "Examples"], &[]),
        case(&["--version"], 0, &[env!("CARGO_PKG_VERSION")], &[]),
        case(&[], 2, &[], &["terminal", "Usage", "--help"]),
        case(&["titrate"], 2, &[], &["titrate", "--help"]),
        case(&["--frobnicate"], 2, &[], &["--frobnicate"]),
        case(&["new"], 2, &[], &["--from"]),
        case(&["new", "rack.ron"], 2, &[], &["--from"]),
        case(&["new", "--from", "p.ron"], 2, &[], &["FILE"]),
        case(
            &["new", "--example", "--from", "p.ron"],
            2,
            &[],
            &["--from"],
        ),
        case(&["open"], 2, &[], &["FILE"]),
        case(&["take"], 2, &[], &["FILE"]),
        case(&["summary"], 2, &[], &["FILE"]),
        case(
            &["summary", "x.ron", "--format", "xml"],
            2,
            &[],
            &["xml", "json"],
        ),
        case(&["check"], 2, &[], &["FILE"]),
        case(
            &["demo", "nowhere"],
            2,
            &[],
            &["no demo `nowhere`", "finished"],
        ),
        case(&["demo", "--list", "finished"], 2, &[], &["--list"]),
    ];
    check(&home, &cases);
    assert_eq!(home.names(""), Vec::<String>::new());
}

#[test]
fn new_makes_a_file_once_and_where_there_is_a_folder() {
    let home = Home::new();
    let example = home.run(&["new", "--example"]).done();
    assert!(example.out.contains("specific_activity") && example.err.is_empty());
    home.write("p.ron", &example.out);
    let cases = [
        case(
            &["new", "rack.ron", "--from", "p.ron"],
            0,
            &[],
            &["rack.ron", "8 levels", "33 vials", "rackside open"],
        ),
        case(
            &["check", "rack.ron"],
            0,
            &["as rackside wrote it", "1 entries", "0 of 33"],
            &[],
        ),
    ];
    check(&home, &cases);
    let before = home.bytes("rack.ron");
    let cases = [
        case(
            &["new", "rack.ron", "--from", "p.ron"],
            73,
            &[],
            &["rack.ron", "there already"],
        ),
        case(
            &["new", "no/rack.ron", "--from", "p.ron"],
            73,
            &[],
            &["no/rack.ron", "cannot be created"],
        ),
        case(
            &["new", "other.ron", "--from", "nowhere.ron"],
            74,
            &[],
            &["nowhere.ron"],
        ),
        // A notebook is no protocol.
        case(
            &["new", "other.ron", "--from", "rack.ron"],
            65,
            &[],
            &["rack.ron", "--example"],
        ),
    ];
    check(&home, &cases);
    assert_eq!(home.bytes("rack.ron"), before);
    assert!(!home.path("other.ron").exists());
    // The name of who made it: as given, else the user's.
    let named = [
        "new",
        "named.ron",
        "--from",
        "p.ron",
        "--operator",
        "M. Example",
    ];
    let _ = home.run(&named).done();
    let text = |name: &str| String::from_utf8(home.bytes(name)).unwrap();
    assert!(text("named.ron").contains("who:\"M. Example\""));
    assert!(text("rack.ron").contains("who:\"tester\""));
}

#[test]
fn new_refuses_a_bad_protocol_and_names_the_field() {
    let home = Home::new();
    let example = home.run(&["new", "--example"]).done().out;
    let changes = [
        (
            "efficiency: \"45 %\"",
            "efficiency: \"450 %\"",
            "counter.efficiency",
        ),
        ("efficiency: \"45 %\"", "efficiency: \"fine\"", "fine"),
        (
            "volume: \"0.5 mL\"",
            "volume: \"0 mL\"",
            "incubation.volume",
        ),
        (
            "volume: \"0.5 mL\"",
            "volume: \"0,5 mL\"",
            "incubation.volume",
        ),
        ("volume: \"0.5 mL\"", "volume: \"0.5 nM\"", "0.5 nM"),
        ("sticks: ToPreparation", "sticks: ToGlass", "ToGlass"),
        ("operator:", "operatr:", "operatr"),
        (
            "concentration: \"1 uM\"",
            "concentration: \"-1 uM\"",
            "concentration",
        ),
        (
            "minutes: \"2 min\"",
            "minutes: \"0 min\"",
            "counter.minutes",
        ),
        ("confidence: 0.95", "confidence: 1.5", "numbers.confidence"),
        ("\"0.05 nM\",", "\"0 nM\",", "levels"),
    ];
    for (from, to, named) in changes {
        assert!(example.contains(from), "the example has no `{from}`");
        home.write("p.ron", example.replacen(from, to, 1));
        let ran = home.run(&["new", "rack.ron", "--from", "p.ron"]);
        assert_eq!(ran.code, 65, "{to}: {ran:?}");
        assert!(ran.err.contains(named), "{to}: no `{named}`: {ran:?}");
        assert!(ran.err.contains("p.ron") && ran.out.is_empty(), "{ran:?}");
        assert_eq!(home.names(""), ["p.ron"], "{to}");
    }
}

/// A home with demo copies: whole, changed, cut short, of a newer format, no notebook.
fn files() -> Home {
    let home = Home::new();
    let whole = fs::read_to_string(project("demo-sessions/finished.ron")).unwrap();
    home.write("whole.ron", &whole);
    let changed = whole.replacen("raw:\"227\",value:227.0", "raw:\"228\",value:228.0", 1);
    assert_ne!(changed, whole);
    home.write("changed.ron", changed);
    home.write("cut.ron", &whole[..whole.len() / 2]);
    home.write("newer.ron", whole.replacen("format: 3", "format: 4", 1));
    home.write("other.ron", "(a: 1)\n");
    home.write("empty.ron", "");
    home.write("bytes.ron", [0xff, 0xfe, 0x00]);
    home
}

#[test]
fn summary_of_files_good_and_bad() {
    let home = files();
    let cases = [
        case(
            &["summary", "whole.ron"],
            0,
            &[
                "OB-31",
                "Kd",
                "fmol/mg",
                "33 of 33",
                "filter torn",
                "esearch use only",
            ],
            &[],
        ),
        case(
            &["summary", "whole.ron", "--format", "json"],
            0,
            &["\"kd_nm\"", "\"tubes\""],
            &[],
        ),
        case(
            &["summary", "whole.ron", "--working", "3"],
            0,
            &[
                "esearch use only",
                "vial 3, 0.05 nM, nonspecific a",
                "R = (N - b * t) / w",
                "specific binding",
            ],
            &[],
        ),
        case(
            &["summary", "whole.ron", "--working"],
            0,
            &["vial 1, 0.05 nM, total a", "vial 33, background a"],
            &[],
        ),
        case(
            &["summary", "whole.ron", "--working", "34"],
            2,
            &[],
            &["there is no vial 34"],
        ),
        case(
            &["summary", "whole.ron", "--working", "--format", "json"],
            2,
            &[],
            &["--working is of the page"],
        ),
        case(
            &["summary", "changed.ron"],
            0,
            &["CHANGED OUTSIDE RACKSIDE", "Kd"],
            &["changed outside rackside", "entries 3"],
        ),
        case(&["summary", "nowhere.ron"], 74, &[], &["nowhere.ron"]),
        case(
            &["summary", "cut.ron"],
            65,
            &[],
            &["cut.ron", "damaged at line"],
        ),
        case(
            &["summary", "newer.ron"],
            65,
            &[],
            &["newer.ron", "format 4", "newer rackside"],
        ),
        case(&["summary", "other.ron"], 65, &[], &["not a notebook"]),
        case(&["summary", "empty.ron"], 65, &[], &["empty"]),
        case(&["summary", "bytes.ron"], 65, &[], &["UTF-8"]),
        case(&["summary", "."], 65, &[], &["not a file"]),
    ];
    let before = home.names("");
    check(&home, &cases);
    // Nothing is written, not even a lock.
    assert_eq!(home.names(""), before);
    let page = home.run(&["summary", "whole.ron"]).done().out;
    let worked = home.run(&["summary", "whole.ron", "--working"]).done().out;
    assert!(worked.starts_with(&page), "the page first, as it is");
    let wide = worked.lines().find(|l| l.chars().count() > 80);
    assert_eq!(wide, None, "a line past 80 columns");
    let plain = home.run(&["summary", "whole.ron", "--ascii"]).done().out;
    assert!(plain.is_ascii());
    assert!(!page.is_ascii(), "C.UTF-8 has the finer plot");
}

#[test]
fn check_says_whether_a_file_is_as_it_was_written() {
    let home = files();
    let cases = [
        case(
            &["check", "whole.ron"],
            0,
            &["whole.ron", "as rackside wrote it", "33 of 33"],
            &[],
        ),
        case(
            &["check", "changed.ron"],
            65,
            &["CHANGED OUTSIDE RACKSIDE"],
            &["changed outside rackside: entries 3"],
        ),
        case(&["check", "cut.ron"], 65, &[], &["damaged at line"]),
        case(&["check", "newer.ron"], 65, &[], &["newer rackside"]),
        case(&["check", "other.ron"], 65, &[], &["not a notebook"]),
        case(&["check", "nowhere.ron"], 74, &[], &["nowhere.ron"]),
    ];
    let before = home.names("");
    check(&home, &cases);
    assert_eq!(home.names(""), before);
}

#[test]
fn a_rack_with_too_little_is_summed_up_without_a_number() {
    let home = counted(5);
    let page = home.run(&["summary", FILE]).done();
    assert!(!page.out.contains("pKd"), "{}", page.out);
    assert!(page.out.contains("3 levels"), "{}", page.out);
    let blank = fresh();
    let _ = blank.run(&["summary", FILE]).done();
}

#[test]
fn a_reader_that_goes_away_is_a_quiet_end() {
    let home = files();
    // The reader has gone before the first byte in the second and third.
    let lines = [
        "rackside summary whole.ron | head -1",
        "{ rackside summary whole.ron; echo $? >code; } | :",
        "{ rackside --help; echo $? >code; } | :",
    ];
    for line in lines {
        let ran = home.shell(line);
        assert_eq!((ran.code, ran.err.as_str()), (0, ""), "{line}");
    }
    let head = home.shell(lines[0]).done().out;
    let page = home.run(&["summary", "whole.ron"]).done().out;
    assert_eq!(head.lines().next(), page.lines().next());
    for line in &lines[1..] {
        let _ = home.shell(line).done();
        assert_eq!(home.bytes("code"), b"0\n", "{line}");
    }
    let full = home.shell("rackside summary whole.ron >/dev/full");
    assert_eq!(full.code, 74, "{full:?}");
    assert!(full.err.contains("standard output"), "{full:?}");
}

#[test]
fn demo_without_a_terminal_prints_and_makes_nothing() {
    let home = Home::new();
    let cases = [
        case(
            &["demo"],
            0,
            &["OB-31", "21 of 33", "esearch use only", "nvented"],
            &[],
        ),
        case(&["demo", "finished"], 0, &["33 of 33", "nvented"], &[]),
        case(
            &["demo", "--list"],
            0,
            &["half-typed", "finished", "invented"],
            &[],
        ),
    ];
    check(&home, &cases);
    assert_eq!(home.names(""), Vec::<String>::new());
}

#[test]
fn open_without_a_terminal_says_what_works_without_one() {
    let home = fresh();
    let before = home.names("");
    let cases = [
        case(&["open", FILE], 2, &[], &["terminal", "rackside take"]),
        case(&["open", "nowhere.ron"], 2, &[], &["terminal"]),
    ];
    check(&home, &cases);
    assert_eq!(home.names(""), before);
}
