//! Damage is refused or named, never read past.

use crate::common::{at, book, counted, everything, note};
use rackside::assay::TubeNo;
use rackside::notebook::Notebook;
use rackside::store::format::{Fault, MOST_BYTES, read};
use rackside::store::{StoreError, Text, open};
use std::fs;

fn text(b: &Notebook) -> String {
    String::from_utf8(Text::of(b.entries()).unwrap().to_bytes()).unwrap()
}

fn cause(bytes: &[u8]) -> (usize, String) {
    match read(bytes).unwrap_err() {
        Fault::Damaged { line, cause } => (line, cause),
        other => panic!("{other}"),
    }
}

#[test]
fn a_file_cut_at_any_byte_is_refused_and_left_alone() {
    let whole = text(&everything()).into_bytes();
    for end in 0..whole.len() {
        assert!(
            matches!(read(&whole[..end]), Err(Fault::Damaged { .. })),
            "cut at {end}"
        );
    }
    read(&whole).unwrap();
    // The same through files, at some of them.
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("cut.ron");
    for end in (0..whole.len()).step_by(97) {
        fs::write(&path, &whole[..end]).unwrap();
        let e = open(&path).unwrap_err();
        assert!(matches!(&e, StoreError::Damaged { path: p, .. } if *p == path));
        assert_eq!(e.exit_code(), 65);
        assert_eq!(fs::read(&path).unwrap(), &whole[..end]);
    }
    assert_eq!(fs::read_dir(folder.path()).unwrap().count(), 1);
}

/// One flipped bit is refused, or the entry it is in is named.
#[test]
fn one_flipped_bit_is_refused_or_named() {
    let b = everything();
    let whole = text(&b).into_bytes();
    let (mut refused, mut named) = (0, 0);
    for (at, bit) in (0..whole.len()).flat_map(|at| (0..8).map(move |bit| (at, bit))) {
        let mut bytes = whole.clone();
        bytes[at] ^= 1 << bit;
        let line = 1 + whole[..at].iter().filter(|c| **c == b'\n').count();
        match read(&bytes) {
            Err(_) => refused += 1,
            Ok(back) => {
                let last = b.revision();
                // A flip in the footer is a disagreement about the last entry, or about the one after. The first link is over the
                // first line too, where a flip may make an older format of it.
                let entry = (line as u32 - 1).clamp(1, last);
                let due = if line as u32 > last + 1 {
                    back.changed.iter().all(|n| (1..=last + 1).contains(n))
                        && back.changed.len() == 1
                } else {
                    back.changed == [entry]
                };
                assert!(due, "byte {at}, bit {bit}, line {line}: {:?}", back.changed);
                named += 1;
            }
        }
    }
    assert!(refused > 500 && named > 500, "{refused} {named}");
}

#[test]
fn only_the_changed_entry_is_named() {
    let b = book([counted(1, 2258.0), counted(2, 300.0), note("x")]);
    let whole = text(&b);
    let edited = whole.replace("2258", "2259");
    let back = read(edited.as_bytes()).unwrap();
    assert_eq!(back.changed, [2]);
    assert_eq!(
        back.notebook.titration().kept(TubeNo(1))[0].reading.value,
        2259.0
    );
    // A link in place of another.
    let link = |n: usize| whole.lines().nth(n).unwrap().rsplit_once(' ').unwrap().1;
    let edited = whole.replacen(link(2), link(3), 1);
    assert_eq!(read(edited.as_bytes()).unwrap().changed, [2]);
    // The last link, in the line alone and in the footer alone.
    let edited = whole.replacen(link(4), link(3), 1);
    assert_eq!(read(edited.as_bytes()).unwrap().changed, [4]);
    let at = whole.rfind(link(4)).unwrap();
    let edited = format!("{}{}\n", &whole[..at], link(3));
    assert_eq!(read(edited.as_bytes()).unwrap().changed, [4]);
}

#[test]
fn a_line_taken_from_the_end_shows_for_ever() {
    let b = book([counted(1, 2258.0), counted(2, 300.0), note("x")]);
    let whole = text(&b);
    let last = whole.lines().nth(4).unwrap();
    let edited = whole.replace(&format!("{last}\n"), "");
    let back = read(edited.as_bytes()).unwrap();
    assert_eq!(back.changed, [4]);
    let (mut notebook, mut lines) = (back.notebook, back.text);
    for words in ["y", "z"] {
        let entry = notebook.record(note(words), at(), "ann").unwrap();
        lines.append(&entry).unwrap();
    }
    assert_eq!(read(&lines.to_bytes()).unwrap().changed, [4]);
    // And one put at the end, beyond what the footer knows.
    let more = text(&book([
        counted(1, 2258.0),
        counted(2, 300.0),
        note("x"),
        note("y"),
    ]));
    let extra = more.lines().nth(5).unwrap();
    let edited = whole.replace("\n])\n", &format!("\n{extra}\n])\n"));
    assert_eq!(read(edited.as_bytes()).unwrap().changed, [5]);
}

#[test]
fn lines_left_out_doubled_or_swapped_do_not_add_up() {
    let whole = text(&book([counted(1, 5.0), counted(2, 6.0), note("x")]));
    let lines: Vec<&str> = whole.lines().collect();
    let with = |order: &[usize]| {
        let mut all: String = order.iter().map(|i| format!("{}\n", lines[*i])).collect();
        all.push_str("])\n");
        all.push_str(lines[6]);
        all.push('\n');
        cause(all.as_bytes())
    };
    assert_eq!(
        with(&[0, 1, 3, 4]),
        (3, "entry 2: entry 3 stands where entry 2 is due".into())
    );
    assert_eq!(with(&[0, 1, 2, 2, 3, 4]).0, 4);
    assert_eq!(with(&[0, 1, 3, 2, 4]).0, 3);
    assert_eq!(with(&[0, 2, 3, 4]).0, 2);
    assert_eq!(with(&[0]).0, 1);
    // An entry that another one does not allow.
    let again = whole.replace("tube:2,", "tube:1,");
    let (line, cause) = cause(again.as_bytes());
    assert_eq!(line, 4);
    assert_eq!(
        cause,
        "entry 3: vial 1 already has 5 counts; + adds a recount"
    );
}

#[test]
fn the_layout_is_held_to() {
    let whole = text(&book([counted(1, 5.0)]));
    for (from, to, line, words) in [
        ("(format: 3, ", "(format:1, ", 1, "first line"),
        ("(format: 3, ", "(format: 0, ", 1, "first line"),
        ("(format: 3, ", "\u{feff}(format: 1, ", 1, "first line"),
        ("\n])\n", "\n\n])\n", 4, "does not end in its link"),
        ("\n])\n", "\n]) \n", 4, "not `])`"),
        ("])\n// 2 entries", "// 2 entries", 3, "not `])`"),
        ("// 2 entries", "// two entries", 5, "cut short"),
        ("// 2 entries", "// 02 entries", 5, "cut short"),
        ("\n", "\r\n", 1, "carriage return"),
        (",what:Counted", ",waht:Counted", 3, "Unexpected field"),
        (
            ",what:Counted",
            ",more:1,what:Counted",
            3,
            "Unexpected field",
        ),
        ("what:Counted", "what:Guessed", 3, "Guessed"),
        ("(n:2", "// (n:2", 3, ""),
        ("(n:2", "/* (n:2", 3, "comment"),
        ("(n:2", "#![enable(implicit_some)](n:2", 3, ""),
        ("5.0 nM", "5.0\\u{1b}[2J nM", 2, "unit"),
        ("04T10", "04\\u{9b}2JT10", 2, "not a date"),
        (",what:Counted", ",\u{1b}[2J:1,what:Counted", 3, ""),
        (
            "value:5.0",
            "value:1e999",
            3,
            "inf: a reading is zero or more",
        ),
        (
            "value:5.0",
            "value:inf",
            3,
            "inf: a reading is zero or more",
        ),
        (
            "value:5.0",
            "value:NaN",
            3,
            "NaN: a reading is zero or more",
        ),
        ("minutes:2.0", "minutes:1e999", 3, "minutes"),
    ] {
        let edited = whole.replace(from, to);
        assert_ne!(edited, whole, "{from}");
        let (at, said) = cause(edited.as_bytes());
        assert_eq!(at, line, "{to}: {said}");
        assert!(said.contains(words), "{to}: {said}");
        assert!(!said.chars().any(char::is_control), "{said:?}");
    }
    let two = whole.replacen(
        "(n:2",
        "(n:1,at:\"2031-05-04T10:14:03+02:00\",who:\"a\",what:Closed), (n:2",
        1,
    );
    assert_eq!(cause(two.as_bytes()).0, 3);
    let mut latin = whole.into_bytes();
    latin[40] = 0xe9;
    assert_eq!(cause(&latin), (2, "not UTF-8 text".into()));
}

#[test]
fn a_newer_format_is_refused_by_its_number() {
    let whole = text(&book([counted(1, 5.0)]));
    let newer = [
        whole.replace("(format: 3,", "(format: 4,"),
        "(format: 4, entries: [\n(n:1, colour: Blue), // 3\n])\n".into(),
        "(\n  format: 4,\n  things: {\"a\": [1, 2.5, None]},\n)\n".into(),
        // Cut short, which does not matter: it is not ours to judge.
        "(format: 4, entries: [\n(n:".into(),
    ];
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("newer.ron");
    for text in newer {
        fs::write(&path, &text).unwrap();
        let e = open(&path).unwrap_err();
        let StoreError::Newer { found, known, .. } = &e else {
            panic!("{e}");
        };
        assert_eq!((*found, *known, e.exit_code()), (4, 3, 65));
        assert!(e.to_string().contains("format 4") && e.to_string().contains("formats up to 3"));
        assert_eq!(fs::read_to_string(&path).unwrap(), text);
    }
}

#[test]
fn too_large_is_refused_before_it_is_read() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("large.ron");
    // A file with a hole: it has the size and takes no room.
    let file = fs::File::create(&path).unwrap();
    file.set_len(1 << 40).unwrap();
    let e = open(&path).unwrap_err();
    assert!(matches!(e, StoreError::TooLarge { bytes, .. } if bytes == 1 << 40));
    assert_eq!(e.exit_code(), 65);
    file.set_len(MOST_BYTES as u64 + 1).unwrap();
    assert!(matches!(
        open(&path).unwrap_err(),
        StoreError::TooLarge { .. }
    ));
    file.set_len(MOST_BYTES as u64).unwrap();
    assert!(matches!(
        open(&path).unwrap_err(),
        StoreError::Damaged { line: 1, .. }
    ));
}

#[test]
fn what_is_nested_without_end_is_refused() {
    let whole = text(&book([counted(1, 5.0)]));
    let deep = whole.replacen("(n:2", &format!("{}n:2", "(".repeat(200_000)), 1);
    assert_eq!(cause(deep.as_bytes()).0, 3);
    let head = format!("{}\n", "(format:[".repeat(200_000));
    assert_eq!(cause(head.as_bytes()).0, 1);
}
