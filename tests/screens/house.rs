//! The plan of the house: which room may use which, and what pure rooms do without.

use std::collections::{BTreeMap, BTreeSet};
use std::fs;
use std::path::{Path, PathBuf};

/// Rooms from the ground up; each may use those named after it, and itself.
const PLAN: &[(&str, &[&str])] = &[
    ("units", &[]),
    ("assay", &["units"]),
    ("notebook", &["units", "assay"]),
    ("store", &["units", "assay", "notebook"]),
    ("binding", &["units"]),
    ("fit", &["units", "assay", "binding"]),
    ("judge", &["units", "assay", "binding", "fit"]),
    ("advise", &["units", "assay", "binding", "fit"]),
    (
        "analysis",
        &["units", "assay", "binding", "fit", "judge", "advise"],
    ),
    (
        "figure",
        &[
            "units", "assay", "binding", "fit", "judge", "advise", "analysis",
        ],
    ),
    (
        "report",
        &[
            "units", "assay", "binding", "fit", "judge", "advise", "analysis", "figure", "notebook",
        ],
    ),
    (
        "app",
        &[
            "units", "assay", "binding", "fit", "judge", "advise", "analysis", "figure",
            "notebook", "report",
        ],
    ),
    (
        "view",
        &[
            "units", "assay", "binding", "fit", "judge", "advise", "analysis", "figure",
            "notebook", "report", "app",
        ],
    ),
    (
        "shell",
        &[
            "units", "assay", "notebook", "analysis", "report", "app", "view", "store",
        ],
    ),
];

/// Rooms that may reach outside.
const OUTSIDE: &[&str] = &["store", "shell", "cli", "main", "lib"];

/// What a pure room does without.
const REACHING_OUT: &[&str] = &[
    "std::fs",
    "std::env",
    "std::thread",
    "std::process",
    "std::net",
    "std::time",
    "std::io",
    "Instant::now",
    "SystemTime",
    "Timestamp::now",
    "Zoned::now",
    "println!",
    "eprintln!",
    "print!(",
    "eprint!(",
    "dbg!(",
];

fn source() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("src")
}

/// Every source file with the room it is in.
fn files() -> Vec<(String, PathBuf, String)> {
    let mut found = Vec::new();
    let mut folders = vec![source()];
    while let Some(folder) = folders.pop() {
        for item in fs::read_dir(folder).unwrap() {
            let path = item.unwrap().path();
            if path.is_dir() {
                folders.push(path);
            } else if path.extension().is_some_and(|e| e == "rs") {
                let inside = path.strip_prefix(source()).unwrap().to_path_buf();
                let first = inside
                    .components()
                    .next()
                    .unwrap()
                    .as_os_str()
                    .to_string_lossy();
                let room = first.trim_end_matches(".rs").to_string();
                found.push((room, inside, fs::read_to_string(&path).unwrap()));
            }
        }
    }
    assert!(found.len() > 40, "only {} files found", found.len());
    found
}

/// The text with every `a::{b, c::{d}}` written out as `a::b`, `a::c::d`, one to a line, after the text itself.
fn written_out(text: &str) -> String {
    let mut all = text.to_string();
    let mut from = 0;
    while let Some(at) = text[from..].find("::{").map(|i| from + i) {
        let head = text[..at]
            .rsplit(|c: char| !(c.is_alphanumeric() || c == '_' || c == ':'))
            .next();
        let head = head.unwrap_or_default();
        for item in group(&text[at + 3..]) {
            let path = format!("{head}::{}", item.trim());
            all.push('\n');
            all.push_str(&if path.contains("::{") {
                written_out(&path)
            } else {
                path
            });
        }
        from = at + 3;
    }
    all
}

/// The items of a group up to the brace that closes it.
fn group(text: &str) -> Vec<&str> {
    let (mut depth, mut start, mut items) = (0, 0, Vec::new());
    for (i, c) in text.char_indices() {
        match c {
            '{' => depth += 1,
            '}' if depth == 0 => {
                items.push(&text[start..i]);
                break;
            }
            '}' => depth -= 1,
            ',' if depth == 0 => {
                items.push(&text[start..i]);
                start = i + 1;
            }
            _ => {}
        }
    }
    items
}

/// The rooms a text names as `crate::room`, in a group or by itself.
fn named(text: &str) -> BTreeSet<String> {
    let all = written_out(text);
    all.match_indices("crate::")
        .filter_map(|(at, _)| first_name(&all[at + "crate::".len()..]))
        .collect()
}

fn first_name(text: &str) -> Option<String> {
    let name: String = text
        .chars()
        .take_while(|c| c.is_ascii_alphanumeric() || *c == '_')
        .collect();
    name.chars().next().filter(char::is_ascii_lowercase)?;
    Some(name)
}

/// Lines that are code: comments talk about whatever they like. What follows `//` in a string is left out too, which can hide
/// nothing but a name inside that string.
fn code(text: &str) -> String {
    text.lines()
        .map(|l| l.split("//").next().unwrap())
        .collect::<Vec<_>>()
        .join("\n")
}

#[test]
fn every_room_uses_only_the_rooms_below_it() {
    let plan: BTreeMap<&str, &[&str]> = PLAN.iter().copied().collect();
    let mut wrong = Vec::new();
    for (room, path, text) in files() {
        if matches!(room.as_str(), "main" | "lib" | "cli") {
            continue;
        }
        let allowed = plan
            .get(room.as_str())
            .unwrap_or_else(|| panic!("`{room}` is not on the plan"));
        for used in named(&code(&text)) {
            if used != room && !allowed.contains(&used.as_str()) {
                wrong.push(format!("{} uses {used}", path.display()));
            }
        }
    }
    assert!(wrong.is_empty(), "{wrong:#?}");
}

#[test]
fn the_plan_has_no_way_up() {
    let order: Vec<&str> = PLAN.iter().map(|(room, _)| *room).collect();
    for (i, (room, below)) in PLAN.iter().enumerate() {
        for used in *below {
            let j = order
                .iter()
                .position(|r| r == used)
                .unwrap_or_else(|| panic!("{used}?"));
            assert!(j < i, "{room} uses {used}, which stands above it");
        }
    }
}

#[test]
fn pure_rooms_do_not_reach_out() {
    let mut wrong = Vec::new();
    for (room, path, text) in files() {
        if OUTSIDE.contains(&room.as_str()) {
            continue;
        }
        let code = written_out(&code(&text));
        for banned in REACHING_OUT.iter().filter(|b| code.contains(**b)) {
            wrong.push(format!("{} has {banned}", path.display()));
        }
    }
    assert!(wrong.is_empty(), "{wrong:#?}");
}

#[test]
fn the_terminal_is_named_in_three_places() {
    let mut wrong = Vec::new();
    for (room, path, text) in files() {
        let may = matches!(room.as_str(), "view" | "shell")
            || path == Path::new("app/keys.rs")
            || path == Path::new("app/keys/key.rs");
        let code = code(&text);
        if !may && (code.contains("crossterm") || code.contains("ratatui")) {
            wrong.push(path.display().to_string());
        }
    }
    assert!(wrong.is_empty(), "{wrong:#?}");
}

#[test]
fn no_file_outgrows_its_room() {
    let long: Vec<String> = files()
        .iter()
        .map(|(_, path, text)| (path, text.lines().count()))
        .filter(|(_, lines)| *lines > 600)
        .map(|(path, lines)| format!("{} has {lines} lines", path.display()))
        .collect();
    assert!(long.is_empty(), "{long:#?}");
}

#[test]
fn the_test_reads_what_it_should() {
    let names = |t: &str| named(&code(t)).into_iter().collect::<Vec<_>>();
    assert_eq!(names("use crate::units::Mark; // crate::store"), ["units"]);
    assert_eq!(names("let x = crate::store::open(p);"), ["store"]);
    assert_eq!(
        names("use crate::{fit::{Rows, End}, view, Other};"),
        ["fit", "view"]
    );
    let outside =
        written_out("use std::{collections::{BTreeMap, BTreeSet}, fs, io::{self, Read}};");
    for name in ["std::fs", "std::io", "std::collections::BTreeSet"] {
        assert!(outside.contains(name), "{outside}");
    }
}
