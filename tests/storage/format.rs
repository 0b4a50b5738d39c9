//! The text of a notebook: what goes in comes out, one entry to a line.

use crate::common::{at, book, counted, everything, note, opened};
use proptest::prelude::*;
use rackside::assay::{
    Carrier, Fields, LevelNo, Model, Protocol, Reading, Role, Run, Scale, ScaleErrors, Sheet,
    SitesUnit, Stamp, Subtracted, Tube, TubeNo, When,
};
use rackside::notebook::{Count, Entry, Notebook, What};
use rackside::store::format::{Fault, MOST_BYTES, read};
use rackside::store::{Access, Holder, Text, open_for_writing};
use rackside::units::{Mark, Typed};
use std::fs;
use std::sync::Arc;

fn bytes(b: &Notebook) -> Vec<u8> {
    Text::of(b.entries()).unwrap().to_bytes()
}

fn lines(b: &Notebook) -> Vec<String> {
    let text = String::from_utf8(bytes(b)).unwrap();
    text.split_terminator('\n').map(str::to_string).collect()
}

#[test]
fn there_and_back() {
    let b = everything();
    let written = bytes(&b);
    let back = read(&written).unwrap();
    assert_eq!(back.notebook.entries(), b.entries());
    assert_eq!(back.notebook.titration(), b.titration());
    assert!(back.changed.is_empty());
    assert_eq!(back.text.to_bytes(), written);
    assert_eq!(bytes(&back.notebook), written);
    assert_eq!(back.text.entries(), b.revision());
}

#[test]
fn the_layout_is_the_one_described() {
    let b = everything();
    let lines = lines(&b);
    let n = b.entries().len();
    assert_eq!(lines.len(), n + 3);
    assert_eq!(lines[0], "(format: 3, entries: [");
    assert_eq!(lines[n + 1], "])");
    let last = lines[n].rsplit_once(" // ").unwrap().1;
    assert_eq!(lines[n + 2], format!("// {n} entries, last {last}"));
    assert_eq!(Text::of(b.entries()).unwrap().digest(), last);
    for (entry, line) in b.entries().iter().zip(&lines[1..]) {
        let (text, link) = line.rsplit_once(", // ").unwrap();
        assert_eq!(&ron::from_str::<Entry>(text).unwrap(), entry.as_ref());
        assert!(link.len() == 16 && link.bytes().all(|c| c.is_ascii_hexdigit()));
    }
}

/// FIPS 180-4 through `sha256sum` of GNU coreutils:
/// `printf '%s' "$PREVIOUS_LINK$LINE_WITH_COMMA" | sha256sum | cut -c-16`.
#[cfg(target_os = "linux")]
#[test]
fn links_are_those_of_sha256sum() {
    use std::io::Write;
    use std::process::{Command, Stdio};
    let lines = lines(&everything());
    let mut previous = String::from("(format: 3, entries: [");
    for line in &lines[1..4] {
        let (text, link) = line.rsplit_once(" // ").unwrap();
        let mut sum = Command::new("sha256sum")
            .stdin(Stdio::piped())
            .stdout(Stdio::piped())
            .spawn()
            .unwrap();
        let mut input = sum.stdin.take().unwrap();
        input.write_all(previous.as_bytes()).unwrap();
        input.write_all(text.as_bytes()).unwrap();
        drop(input);
        let said = String::from_utf8(sum.wait_with_output().unwrap().stdout).unwrap();
        assert_eq!(&said[..16], link);
        previous = link.into();
    }
}

/// Files as they were first written in each format. They must read for ever; those of the newest format are
/// also what the same entries give today.
#[test]
fn the_golden_files() {
    let older = include_bytes!("golden/format-1.ron");
    let back = read(older).unwrap();
    assert!(back.changed.is_empty());
    assert_eq!(back.text.format(), 1);
    assert_eq!(back.text.to_bytes(), older);
    assert_eq!(back.notebook.entries(), everything().entries());
    let older = include_bytes!("golden/format-2.ron");
    let back = read(older).unwrap();
    assert!(back.changed.is_empty());
    assert_eq!(back.text.format(), 2);
    assert_eq!(back.text.to_bytes(), older);
    assert_eq!(back.notebook.entries(), second().entries());
    let golden: [(&[u8], Notebook); 3] = [
        (include_bytes!("golden/format-3.ron"), newest()),
        (include_bytes!("golden/format-3-cells.ron"), cells()),
        (include_bytes!("golden/format-3-reader.ron"), reader()),
    ];
    for (golden, book) in golden {
        let back = read(golden).unwrap();
        assert!(back.changed.is_empty());
        assert_eq!(back.text.format(), 3);
        assert_eq!(back.notebook.entries(), book.entries());
        assert_eq!(bytes(&back.notebook), golden);
    }
}

/// What format 3 added, on a rack whose bound label is counted: decay, dead time, what a counter takes off, a run, tubes without
/// receptor and aliquots, readings in every scale.
fn newest() -> Notebook {
    let mut book = second();
    let amended = |book: &Notebook, change: fn(&mut Protocol)| {
        let t = book.titration();
        let mut protocol = t.protocol.clone();
        change(&mut protocol);
        What::Amended {
            protocol: Box::new(protocol),
            levels: t.levels.clone(),
            reason: "ways of counting".into(),
        }
    };
    let what = amended(&book, |p| {
        let when = |text| Some(When::parse(text).unwrap());
        p.ligand.activity_date = when("2031-04-02");
        p.incubation.assayed = when("2031-05-04 09:30");
        p.ligand.decay = Some(Carrier::ProductInert);
        p.ligand.half_life = Some(Typed::parse("12.3 y", Mark::Point).unwrap());
        p.ligand.atoms = Some(3);
        p.ligand.bindable = Some(Typed::parse("92 %", Mark::Point).unwrap());
        p.separation.added_counted = Some(Typed::parse("10 %", Mark::Point).unwrap());
        p.counter.wanted_error = Some(Typed::parse("2 %", Mark::Point).unwrap());
        p.counter.dead_time = Some(Typed::parse("5 us", Mark::Point).unwrap());
        p.counter.subtracted = Some(Subtracted {
            rate: Typed::parse("24.5 cpm", Mark::Point).unwrap(),
            minutes: Some(Typed::parse("30 min", Mark::Point).unwrap()),
        });
        p.counter.run = Some(Run {
            start: When::parse("2031-05-04T10:00").unwrap(),
            changer: Typed::parse("10 s", Mark::Point).unwrap(),
        });
        p.counter.fields = Fields::parse("net cpm, at, minutes").unwrap();
        p.display.sites = SitesUnit::PerMillionCells;
    });
    book.record(what, at(), "ann").unwrap();
    let extra = What::Extended {
        levels: vec![],
        tubes: vec![
            Tube::new(TubeNo(9), Role::NoReceptor, Some(LevelNo(1)), 1),
            Tube::new(TubeNo(10), Role::Added, Some(LevelNo(2)), 1),
        ],
    };
    book.record(extra, at(), "ann").unwrap();
    let scales = [Scale::Dpm, Scale::NetCpm, Scale::NetDpm];
    let readings = [3, 9, 10].into_iter().zip(scales).map(|(vial, scale)| {
        let reading = Reading {
            scale,
            counted: Some(at()),
            ..Reading::counts("-3.5", if scale == Scale::Dpm { 3.5 } else { -3.5 }, 2.0)
        };
        Count::first(TubeNo(vial), reading)
    });
    let readings = readings.collect();
    book.record(What::Counted { readings }, at(), "ann")
        .unwrap();
    book
}

/// The example sheet with some of its lines changed, opened.
fn sheet(changes: &[(&str, &str)]) -> Notebook {
    let mut text = Sheet::EXAMPLE.to_string();
    for (from, to) in changes {
        assert!(text.contains(from), "the example does not hold `{from}`");
        text = text.replacen(from, to, 1);
    }
    let t = Sheet::parse(&text).unwrap().titration().unwrap();
    Notebook::open(t.protocol, t.levels, t.tubes, at(), "ann").unwrap()
}

/// The two sides of dialysis cells, with a quench curve.
fn cells() -> Notebook {
    let mut book = sheet(&[
        (
            "fraction: \"100 %\",",
            "counted: BothSides(protein_aliquot: \"0.1 mL\", ligand_aliquot: \"0.2 mL\", protein_after: \"0.55 mL\", \
             ligand_volume: \"0.5 mL\"),",
        ),
        (
            "fields: Counts,",
            "fields: Each([Counts, Quench]), quench: [(indicator: 300, efficiency: \"30 %\"), (indicator: 420.5, efficiency: \"45 %\")],",
        ),
        ("\"0.05 nM\", \"0.1 nM\", \"0.2 nM\", \"0.5 nM\", ", ""),
    ]);
    let reading = Reading {
        quench: Some(410.0),
        ..Reading::counts("2258 / 410", 2258.0, 2.0)
    };
    let readings = vec![Count::first(TubeNo(1), reading)];
    book.record(What::Counted { readings }, at(), "ann")
        .unwrap();
    book
}

/// A reader with standards.
fn reader() -> Notebook {
    let mut book = sheet(&[
        ("specific_activity: \"80 Ci/mmol\",", ""),
        (
            "fraction: \"100 %\",",
            "counted: Signal(read_volume: \"0.1 mL\", standards: [\"0.01 nM\", \"0.1 nM\"], noise: 12.5),",
        ),
        ("efficiency: \"45 %\",", ""),
        ("fields: Counts,", "fields: Each([Signal]),"),
        ("minutes: \"2 min\",", ""),
        ("background: (", "/* background: ("),
        ("mark: Point,", "*/"),
        ("\"0.05 nM\", \"0.1 nM\", \"0.2 nM\", \"0.5 nM\", ", ""),
        ("background: 1,", "background: 2, standards: 2,"),
    ]);
    let reading = Reading {
        scale: Scale::Signal,
        ..Reading::counts("-1.25", -1.25, 1.0)
    };
    let vial = book.titration().tubes[0].no;
    let readings = vec![Count::first(vial, reading)];
    book.record(What::Counted { readings }, at(), "ann")
        .unwrap();
    book
}

/// Everything, and what format 2 added: scale errors and a chosen law of binding.
fn second() -> Notebook {
    let mut book = everything();
    let t = book.titration();
    let mut protocol = t.protocol.clone();
    let share = |text: &str| Some(Typed::parse(text, Mark::Point).unwrap());
    protocol.numbers.scale_errors = ScaleErrors {
        stock: share("3 %"),
        specific_activity: share("4 %"),
        efficiency: share("2 %"),
        volume: share("1 %"),
        protein: share("10 %"),
    };
    protocol.numbers.model = Some(Model::TwoClasses);
    let what = What::Amended {
        protocol: Box::new(protocol),
        levels: t.levels.clone(),
        reason: "errors that all tubes share".into(),
    };
    book.record(what, at(), "ann").unwrap();
    book
}

/// A file of format 1 stays as it is until something is saved; then it is of the newest format, with all its lines, and
/// the old one is beside it.
#[test]
fn an_older_format_is_taken_on_with_a_copy_kept() {
    let older = include_bytes!("golden/format-1.ron");
    let changed = String::from_utf8(older.to_vec())
        .unwrap()
        .replacen("n:3,", "n: 3,", 1);
    for (bytes, marked) in [(older.to_vec(), vec![]), (changed.into_bytes(), vec![3])] {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("old.ron");
        let copy = folder.path().join("old.format-1.ron");
        fs::write(&path, &bytes).unwrap();
        let holder = Holder {
            who: "ann".into(),
            since: at(),
        };
        let mut opened = open_for_writing(&path, &holder).unwrap();
        assert_eq!(opened.changed, marked);
        assert_eq!(fs::read(&path).unwrap(), bytes);
        assert!(!copy.exists());
        let entry = opened.notebook.record(note("y"), at(), "ann").unwrap();
        opened.text.append(&entry).unwrap();
        let Access::Write(mut target) = opened.access else {
            panic!()
        };
        target.save(&opened.text).unwrap();
        assert_eq!(fs::read(&copy).unwrap(), bytes);
        let back = read(&fs::read(&path).unwrap()).unwrap();
        assert_eq!(back.text.format(), 3);
        assert_eq!(back.changed, marked);
        assert_eq!(back.notebook.entries(), opened.notebook.entries());
    }
}

#[test]
fn adding_keeps_every_written_line() {
    let b = everything();
    let mut text = Text::default();
    let mut before: Vec<u8> = text.to_bytes();
    for entry in b.entries() {
        text.append(entry).unwrap();
        let now = text.to_bytes();
        let kept = before.len() - tail(&before);
        assert_eq!(now[..kept], before[..kept]);
        before = now;
    }
    assert_eq!(before, bytes(&b));
}

/// The length of `])` and the footer.
fn tail(bytes: &[u8]) -> usize {
    let text = std::str::from_utf8(bytes).unwrap();
    text.len() - text.rfind("])\n").unwrap()
}

#[test]
fn lines_of_another_hand_are_kept_too() {
    // Spaces and a block comment that no rackside writes, with links that fit nothing.
    let text = String::from_utf8(bytes(&book([note("x")]))).unwrap();
    let other = text.replace("(n:2,at:", "( n: 2, /* by hand */ at:");
    assert_ne!(text, other);
    let back = read(other.as_bytes()).unwrap();
    assert_eq!(back.changed, [2]);
    assert_eq!(back.text.to_bytes(), other.as_bytes());
    let (mut book, mut lines) = (back.notebook, back.text);
    let entry = book.record(note("y"), at(), "ann").unwrap();
    lines.append(&entry).unwrap();
    let saved = lines.to_bytes();
    let kept = other.len() - tail(other.as_bytes());
    assert_eq!(saved[..kept], other.as_bytes()[..kept]);
    let again = read(&saved).unwrap();
    assert_eq!(again.changed, [2]);
    assert_eq!(again.notebook.revision(), 3);
    // The digest is of what is there now, not of what was linked.
    assert_eq!(
        again.text.digest(),
        Text::default().digest_after(again_lines(&saved))
    );
}

trait DigestAfter {
    fn digest_after(self, lines: Vec<String>) -> String;
}

impl DigestAfter for Text {
    /// The chain over lines as they are, links left aside.
    fn digest_after(self, lines: Vec<String>) -> String {
        use sha2::{Digest, Sha256};
        let first = String::from("(format: 3, entries: [");
        lines.iter().fold(first, |link, line| {
            let sum = Sha256::digest(format!("{link}{line}").as_bytes());
            sum[..8].iter().map(|b| format!("{b:02x}")).collect()
        })
    }
}

fn again_lines(bytes: &[u8]) -> Vec<String> {
    let text = std::str::from_utf8(bytes).unwrap();
    text.lines()
        .filter_map(|l| l.rsplit_once(", // "))
        .map(|(entry, _)| format!("{entry},"))
        .collect()
}

#[test]
fn hostile_strings_stay_on_their_line() {
    let hostile = [
        "a\nb",
        "a\r\nb",
        "\u{2028}\u{2029}\u{85}\u{b}\u{c}",
        "\0",
        "// 0123456789abcdef",
        "\", // 0123456789abcdef\n])\n// 1 entries, last 0123456789abcdef\n",
        "])",
        "/* */ /*",
        "r#\"raw\"#",
        "\\n\\u{41}\\",
        "\u{1b}]0;title\u{7}\u{9b}2J",
        "\u{202e}drow\u{feff}",
        "e\u{301}\u{301} \u{10ffff} 𝄞",
        "#![enable(implicit_some)]",
    ];
    for text in hostile {
        let text = &format!("x{text}");
        let b = book([note(text), counted(1, 5.0)]);
        let written = bytes(&b);
        assert_eq!(
            written.iter().filter(|c| **c == b'\n').count(),
            6,
            "{text:?}"
        );
        assert!(
            written.iter().all(|c| *c == b'\n' || *c >= b' '),
            "{text:?}"
        );
        let back = read(&written).unwrap();
        assert_eq!(back.notebook.entries(), b.entries(), "{text:?}");
        let shown = back.notebook.describe(&back.notebook.entries()[1]);
        assert!(!shown.chars().any(char::is_control), "{shown:?}");
    }
}

#[test]
fn numbers_come_back_to_the_last_bit() {
    let odd = [
        0.1 + 0.2,
        1.0 / 3.0,
        5e-324,
        2f64.powi(-1074) * 3.0,
        1e12,
        123_456_789.123_456_79,
        f64::EPSILON,
    ];
    for value in odd {
        let mut r = Reading::counts("x", value, 0.7);
        r.quench = Some(-value);
        let readings = vec![Count::first(TubeNo(1), r)];
        let b = book([What::Counted { readings }]);
        let back = read(&bytes(&b)).unwrap();
        let kept = &back.notebook.titration().kept(TubeNo(1))[0].reading;
        assert_eq!(kept.value.to_bits(), value.to_bits());
        assert_eq!(kept.quench.unwrap().to_bits(), (-value).to_bits());
    }
}

#[test]
fn what_could_not_be_read_again_is_not_added() {
    let mut text = Text::of(opened().entries()).unwrap();
    // One character of the longest escape, many times over in many readings.
    let raw = "\u{10ffff}".repeat(500);
    let readings = (1..=10_000)
        .map(|v| Count::first(TubeNo(v), Reading::counts(raw.clone(), 1.0, 1.0)))
        .collect();
    let entry = Entry {
        n: 2,
        at: at(),
        who: "ann".into(),
        what: What::Counted { readings },
    };
    let before = text.clone();
    let fault = text.append(&entry).unwrap_err();
    assert!(matches!(fault, Fault::TooLarge { bytes } if bytes > MOST_BYTES));
    assert_eq!(text, before);
}

fn stamps() -> impl Strategy<Value = Stamp> {
    (0i64..4_000_000_000, -12i32..=14, 0i32..4).prop_map(|(second, hours, quarters)| {
        let utc = jiff::Timestamp::from_second(second).unwrap();
        let seconds = hours * 3600 + quarters * 900 * hours.signum();
        Stamp::new(utc, jiff::tz::Offset::from_seconds(seconds).unwrap())
    })
}

proptest! {
    #![proptest_config(ProptestConfig {
        failure_persistence: None,
        cases: 200,
        ..ProptestConfig::default()
    })]

    /// Entries to text to entries, whatever people write and whenever.
    #[test]
    fn any_entries_come_back(
        texts in prop::collection::vec((any::<String>(), stamps(), "\\PC{1,20}"), 1..12),
        values in prop::collection::vec((0.0f64..1e12, 1e-6f64..1000.0), 1..7),
    ) {
        let mut b = opened();
        for (text, at, who) in texts {
            // Empty and overlong texts are refused, which is no matter here.
            let _ = b.record(note(&text), at, &who);
        }
        for (vial, (value, minutes)) in (1..).zip(values) {
            let readings = vec![Count::first(TubeNo(vial), Reading::counts("typed", value, minutes))];
            b.record(What::Counted { readings }, at(), "ann").unwrap();
        }
        let written = bytes(&b);
        let back = read(&written).unwrap();
        prop_assert_eq!(back.notebook.entries(), b.entries());
        prop_assert!(back.changed.is_empty());
        prop_assert_eq!(back.text.to_bytes(), written.clone());
        let again: Vec<Arc<Entry>> = back.notebook.entries().to_vec();
        prop_assert_eq!(Text::of(&again).unwrap().to_bytes(), written);
    }

    /// No bytes make the reader panic.
    #[test]
    fn any_bytes_are_read_or_refused(mut noise in prop::collection::vec(any::<u8>(), 0..200), at in any::<prop::sample::Index>()) {
        let _ = read(&noise);
        let whole = bytes(&everything());
        let at = at.index(whole.len());
        let mut mixed = whole[..at].to_vec();
        mixed.append(&mut noise);
        mixed.extend_from_slice(&whole[at..]);
        let _ = read(&mixed);
    }
}
