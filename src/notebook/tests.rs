//! The rules of the notebook, one by one and then all together.

use super::*;
use crate::assay::{LevelNo, Made, Reading, ReadingId, Reason, Role, Sheet, Suspicion, TubeNo};
use crate::units::{Amount, Mark, NanoMolar};

mod any;

/// Two levels, two total and one nonspecific tube at each, one background vial: vials 1 to 7.
const SHEET: &str = r#"(
    protocol: (
        title: "retina batch 9 (invented)",
        ligand: (name: "ligand 31", label: "H-3", specific_activity: "80 Ci/mmol"),
        receptor: (preparation: "membranes"),
        incubation: (volume: "0.5 mL"),
        nonspecific: (sticks: ToFilter, concentration: "10 uM"),
        counter: (efficiency: "45 %", minutes: "2 min", background: (minutes: "10 min")),
    ),
    ladder: (levels: List(["0.5 nM", "5.0 nM"]), total: 2, nonspecific: 1),
)"#;

fn sheet() -> Sheet {
    ron::from_str(SHEET).unwrap()
}

fn at() -> Stamp {
    Stamp::parse("2031-05-04T10:14:03+02:00").unwrap()
}

fn opened() -> Notebook {
    let t = sheet().titration().unwrap();
    Notebook::open(t.protocol, t.levels, t.tubes, at(), "ann").unwrap()
}

fn reading(counts: f64) -> Reading {
    Reading::counts(counts.to_string(), counts, 2.0)
}

fn counted(vial: u32, counts: f64) -> What {
    let readings = vec![Count::first(TubeNo(vial), reading(counts))];
    What::Counted { readings }
}

fn recount(vial: u32, counts: f64) -> What {
    let readings = vec![Count::again(TubeNo(vial), reading(counts))];
    What::Counted { readings }
}

fn flagged(entry: u32) -> What {
    let why = Reason::Spilled.into();
    let reading = ReadingId(entry, 0);
    What::Flagged { reading, why }
}

fn unflagged(entry: u32) -> What {
    let reading = ReadingId(entry, 0);
    What::Unflagged { reading }
}

fn lost(vial: u32) -> What {
    let why = Reason::FilterTorn.into();
    let tube = TubeNo(vial);
    What::Lost { tube, why }
}

fn note(vial: Option<u32>, text: &str) -> What {
    What::Noted {
        tube: vial.map(TubeNo),
        text: text.into(),
    }
}

fn nm(text: &str) -> Amount<NanoMolar> {
    Amount::parse(text, Mark::Point).unwrap()
}

fn amended(top: &str) -> What {
    let t = sheet().titration().unwrap();
    let mut levels = t.levels;
    levels[1].added = nm(top);
    What::Amended {
        protocol: Box::new(t.protocol),
        levels,
        reason: "stock was weighed again".into(),
    }
}

/// A level and a tube at it.
fn extended(level: u16, vial: u32) -> What {
    What::Extended {
        levels: vec![Level {
            no: LevelNo(level),
            added: nm("20 nM"),
            made: Made::FromStock,
        }],
        tubes: vec![Tube::new(
            TubeNo(vial),
            Role::Total,
            Some(LevelNo(level)),
            1,
        )],
    }
}

/// Records what has to be taken.
fn book(all: impl IntoIterator<Item = What>) -> Notebook {
    let mut b = opened();
    for what in all {
        b.record(what, at(), "ann").unwrap();
    }
    b
}

/// What is refused changes nothing; gives the refusal in words.
fn refused(b: &Notebook, what: What) -> String {
    let mut after = b.clone();
    let refusal = after.record(what, at(), "ann").unwrap_err();
    assert_eq!(after.entries(), b.entries());
    assert_eq!(after.titration(), b.titration());
    refusal.to_string()
}

#[test]
fn a_reading_is_kept_under_its_entry() {
    let b = book([counted(2, 2258.0)]);
    let kept = b.titration().kept(TubeNo(2));
    assert_eq!((kept.len(), kept[0].id), (1, ReadingId(2, 0)));
    assert_eq!(
        b.describe(&b.entries()[1]),
        "2 258 counts, vial 2, 0.5 nM, total b"
    );
    assert_eq!(
        b.describe(&b.entries()[0]),
        "opened with 2 levels and 7 tubes"
    );
}

#[test]
fn a_second_reading_is_a_recount_and_says_so() {
    let b = book([counted(2, 2258.0)]);
    assert_eq!(
        refused(&b, counted(2, 2300.0)),
        "vial 2 already has 2 258 counts; + adds a recount"
    );
    assert_eq!(
        refused(&b, recount(3, 10.0)),
        "vial 3 has no reading to add a recount to"
    );
    let b = book([counted(2, 2258.0), recount(2, 2300.0)]);
    assert_eq!(b.titration().kept(TubeNo(2)).len(), 2);
    // One entry may hold a tube and its recount, in that order only.
    let both = |first: bool| What::Counted {
        readings: vec![
            Count {
                again: !first,
                ..Count::first(TubeNo(3), reading(1.0))
            },
            Count {
                again: first,
                ..Count::first(TubeNo(3), reading(2.0))
            },
        ],
    };
    book([both(true)]);
    refused(&opened(), both(false));
}

#[test]
fn one_bad_reading_refuses_the_whole_entry() {
    let b = opened();
    let with = |second: Count| What::Counted {
        readings: vec![Count::first(TubeNo(1), reading(5.0)), second],
    };
    let odd = |change: fn(&mut Reading)| {
        let mut r = reading(7.0);
        change(&mut r);
        with(Count::first(TubeNo(2), r))
    };
    assert_eq!(
        refused(&b, with(Count::first(TubeNo(99), reading(1.0)))),
        "there is no vial 99 in this rack"
    );
    for (change, words) in [
        (
            (|r| r.value = f64::INFINITY) as fn(&mut Reading),
            "inf: a reading is zero or more, and at most 1e12",
        ),
        (|r| r.value = f64::NAN, "NaN: a reading is zero or more"),
        (|r| r.value = -1.0, "-1: a reading is zero or more"),
        (|r| r.minutes = 0.0, "0 minutes"),
        (|r| r.quench = Some(f64::INFINITY), "quench"),
        (|r| r.pass = 0, "pass 0"),
        (|r| r.pass = 3, "pass 3"),
        (|r| r.raw = " ".into(), "is empty"),
        (|r| r.raw = "9".repeat(501), "501 characters: at most 500"),
    ] {
        let said = refused(&b, odd(change));
        assert!(said.contains(words), "{said}");
    }
    let none = What::Counted { readings: vec![] };
    assert!(refused(&b, none).contains("allowed is 1 to 10000"));
}

#[test]
fn a_lost_tube_has_no_reading_and_a_read_tube_is_not_lost() {
    let b = book([lost(3), counted(2, 5.0)]);
    assert_eq!(
        refused(&b, counted(3, 1.0)),
        "vial 3 was given up in entry 2 (filter torn); take that back to read it"
    );
    assert!(refused(&b, lost(3)).contains("given up in entry 2"));
    assert_eq!(
        refused(&b, lost(2)),
        "vial 2 has 5 counts and cannot be lost; flag the reading instead"
    );
    assert!(refused(&b, lost(99)).contains("no vial 99"));
    let b = book([lost(3), What::TakenBack(2), counted(3, 1.0)]);
    assert_eq!(
        refused(&b, What::TakenBack(3)),
        "entry 4 holds a reading of vial 3; take that back first"
    );
}

#[test]
fn flags_go_on_and_off_once() {
    let b = book([counted(2, 5.0), flagged(2)]);
    assert!(b.titration().is_suspect(TubeNo(2)));
    assert_eq!(
        refused(&b, flagged(2)),
        "this reading of vial 2 is flagged already (spilled)"
    );
    assert!(refused(&b, flagged(3)).contains("no reading 1 in entry 3"));
    let b = book([counted(2, 5.0), flagged(2), unflagged(2)]);
    assert!(!b.titration().has_flags());
    assert_eq!(
        refused(&b, unflagged(2)),
        "this reading of vial 2 is not flagged"
    );
    let b = book([counted(2, 5.0), flagged(2), unflagged(2), flagged(2)]);
    assert_eq!(
        refused(&b, What::TakenBack(4)),
        "entry 5 flags this reading too; take that back first"
    );
}

#[test]
fn the_entry_in_the_way_is_named() {
    let b = book([counted(2, 5.0), note(None, "so far well"), flagged(2)]);
    assert_eq!(
        refused(&b, What::TakenBack(2)),
        "entry 4 flags this reading; take that back first"
    );
    let b = book([counted(2, 5.0), recount(2, 6.0)]);
    assert_eq!(
        refused(&b, What::TakenBack(2)),
        "entry 3 is a recount of vial 2; take that back first"
    );
    let b = book([extended(3, 8), counted(8, 5.0)]);
    assert_eq!(
        refused(&b, What::TakenBack(2)),
        "entry 3 holds a reading of vial 8; take that back first"
    );
    let b = book([extended(3, 8), note(Some(8), "cloudy")]);
    assert_eq!(
        refused(&b, What::TakenBack(2)),
        "entry 3 is a note on vial 8; take that back first"
    );
    // Bringing back finds the place taken.
    let b = book([counted(2, 5.0), What::TakenBack(2), counted(2, 6.0)]);
    assert_eq!(
        refused(&b, What::TakenBack(3)),
        "entry 4 holds another reading of vial 2; take that back first"
    );
}

#[test]
fn what_can_be_taken_back() {
    let b = book([counted(2, 5.0), What::TakenBack(2)]);
    assert_eq!(
        refused(&b, What::TakenBack(2)),
        "entry 2 is taken back already, by entry 3"
    );
    assert!(refused(&b, What::TakenBack(1)).contains("opens the titration"));
    for not_earlier in [0, 4, 5, u32::MAX] {
        assert!(refused(&b, What::TakenBack(not_earlier)).contains("entries 2 to 3 can"));
    }
}

#[test]
fn undo_walks_back_and_redo_walks_forth() {
    let mut b = book([counted(1, 5.0), counted(2, 6.0)]);
    let full = b.titration().clone();
    assert_eq!((b.last_takeable(), b.last_taken_back()), (Some(3), None));
    b.record(What::TakenBack(3), at(), "ann").unwrap();
    assert_eq!((b.last_takeable(), b.last_taken_back()), (Some(2), Some(4)));
    b.record(What::TakenBack(2), at(), "ann").unwrap();
    assert_eq!((b.last_takeable(), b.last_taken_back()), (None, Some(5)));
    assert!(b.titration().kept.is_empty());
    b.record(What::TakenBack(5), at(), "ann").unwrap();
    assert_eq!((b.last_takeable(), b.last_taken_back()), (Some(2), Some(4)));
    b.record(What::TakenBack(4), at(), "ann").unwrap();
    assert_eq!((b.last_takeable(), b.last_taken_back()), (Some(3), None));
    assert_eq!(b.titration(), &full);
    let said = |n: u32| b.describe(b.entry(n).unwrap());
    assert_eq!(
        said(4),
        "taken back, entry 3: 6 counts, vial 2, 0.5 nM, total b"
    );
    assert_eq!(
        said(7),
        "brought back, entry 3: 6 counts, vial 2, 0.5 nM, total b"
    );
    // The one that was undone again may be undone by taking back its redo as well.
    b.record(What::TakenBack(7), at(), "ann").unwrap();
    assert!(!b.is_live(3));
    assert_eq!(b.last_taken_back(), Some(8));
}

#[test]
fn a_closed_titration_changes_only_by_reopening() {
    let b = book([counted(1, 5.0), flagged(2), What::Closed]);
    let closed = "the titration was closed by ann at 2031-05-04 10:14; reopen it to change it";
    for what in [
        counted(2, 1.0),
        unflagged(2),
        lost(2),
        note(None, "late"),
        amended("6.0 nM"),
        extended(3, 8),
        What::Closed,
        What::TakenBack(3),
        What::TakenBack(2),
    ] {
        assert_eq!(refused(&b, what), closed);
    }
    let checked = What::Checked {
        by: "bo".into(),
        digest: "0123456789abcdef".into(),
    };
    let mut c = b.clone();
    c.record(checked, at(), "ann").unwrap();
    assert_eq!(c.titration().checked.len(), 1);
    c.record(What::TakenBack(5), at(), "ann").unwrap();
    c.record(What::TakenBack(4), at(), "ann").unwrap();
    assert!(c.titration().closed.is_none() && c.titration().checked.is_empty());
    let mut d = b.clone();
    d.record(What::Reopened, at(), "bo").unwrap();
    assert_eq!(refused(&d, What::Reopened), "the titration is not closed");
    d.record(counted(2, 7.0), at(), "bo").unwrap();
    // Not by the back door either: with the reading in, the old closing cannot stand again.
    assert_eq!(
        refused(&d, What::TakenBack(5)),
        "entry 6 would no longer hold (the titration was closed by ann at 2031-05-04 10:14; reopen it to change it); take that back first"
    );
}

#[test]
fn nothing_slips_in_behind_a_closing() {
    // Reopened, an earlier reading taken back, and then the reopening taken back.
    let b = book([
        counted(1, 5.0),
        What::Closed,
        What::Reopened,
        What::TakenBack(2),
    ]);
    assert_eq!(
        refused(&b, What::TakenBack(4)),
        "the titration has changed since entry 3 closed it; close it again instead"
    );
    // With nothing changed in between it may go back to being closed.
    let b = book([
        counted(1, 5.0),
        What::Closed,
        What::Reopened,
        What::TakenBack(4),
    ]);
    assert!(b.titration().closed.is_some());
    // The same from a record.
    let mut entries = book([
        counted(1, 5.0),
        What::Closed,
        What::Reopened,
        What::TakenBack(2),
    ])
    .entries()
    .to_vec();
    entries.push(Arc::new(Entry {
        n: 6,
        at: at(),
        who: "ann".into(),
        what: What::TakenBack(4),
    }));
    assert!(Notebook::replay(entries).is_err());
}

#[test]
fn amending_keeps_the_levels_and_extending_adds_new_ones() {
    let b = book([counted(4, 5.0), amended("6.0 nM")]);
    assert_eq!(b.titration().levels[1].added.text, "6.0 nM");
    assert_eq!(b.titration().kept(TubeNo(4)).len(), 1);
    let What::Amended {
        protocol,
        levels,
        reason,
    } = amended("6.0 nM")
    else {
        unreachable!()
    };
    let with = |f: &dyn Fn(&mut Protocol, &mut Vec<Level>, &mut String)| {
        let (mut p, mut l, mut r) = ((*protocol).clone(), levels.clone(), reason.clone());
        f(&mut p, &mut l, &mut r);
        What::Amended {
            protocol: Box::new(p),
            levels: l,
            reason: r,
        }
    };
    for (what, words) in [
        (
            with(&|_, l, _| l.truncate(1)),
            "the levels that are there, 1, 2",
        ),
        (
            with(&|_, l, _| l.reverse()),
            "the levels that are there, 1, 2",
        ),
        (
            with(&|_, _, r| r.clear()),
            "the reason for the change is empty",
        ),
        (with(&|p, _, _| p.title.clear()), "protocol.title: empty"),
        (with(&|_, l, _| l[0].added = nm("0 nM")), "more than zero"),
        (
            with(&|_, l, _| l[0].added = Amount::parse("0,7 nM", Mark::Comma).unwrap()),
            "decimal comma, and this titration uses a point",
        ),
        (
            with(&|_, l, _| l[0].made = Made::FromLevel(LevelNo(1))),
            "circle",
        ),
    ] {
        let said = refused(&b, what);
        assert!(said.contains(words), "{said}");
    }

    let b = book([extended(3, 8)]);
    assert_eq!(b.titration().tubes.len(), 8);
    for (what, words) in [
        (extended(3, 9), "level 3 is there already"),
        (extended(4, 8), "vial 8 is there already"),
        (extended(4, 1), "vial 1 is there already"),
    ] {
        let said = refused(&b, what);
        assert!(said.contains(words), "{said}");
    }
    let nothing = What::Extended {
        levels: vec![],
        tubes: vec![],
    };
    assert!(refused(&b, nothing).contains("neither"));
    // An amendment after it holds the new level, so the extension cannot go from under it.
    let mut b = b;
    let protocol = Box::new(b.titration().protocol.clone());
    let levels = b.titration().levels.clone();
    let reason = "title".into();
    let what = What::Amended {
        protocol,
        levels,
        reason,
    };
    b.record(what, at(), "ann").unwrap();
    assert!(refused(&b, What::TakenBack(2)).starts_with("entry 3 would no longer hold"));
}

#[test]
fn texts_say_something_and_end() {
    let b = opened();
    assert!(refused(&b, note(None, " ")).contains("the note is empty"));
    assert!(refused(&b, note(None, &"é".repeat(501))).contains("501 characters"));
    book([note(None, &"é".repeat(500))]);
    assert!(refused(&b, note(Some(99), "x")).contains("no vial 99"));
    let mut c = b.clone();
    let e = c.record(note(None, "x"), at(), "").unwrap_err();
    assert_eq!(e.to_string(), "the name of who did it is empty");
    let t = sheet().titration().unwrap();
    let e = Notebook::open(t.protocol, t.levels, t.tubes, at(), " ").unwrap_err();
    assert_eq!(e.to_string(), "the name of who did it is empty");
    let words = Suspicion {
        reason: Reason::Spilled,
        words: "a\u{1b}[2Jb".into(),
    };
    let tube = TubeNo(1);
    let b = book([What::Lost { tube, why: words }]);
    assert_eq!(
        b.describe(&b.entries()[1]),
        "lost, spilled: a[2Jb: vial 1, 0.5 nM, total a"
    );
}

#[test]
fn a_record_is_numbered_from_its_opening() {
    assert_eq!(Notebook::replay(vec![]).unwrap_err(), Rejection::NoEntries);
    let whole = book([counted(1, 5.0), counted(2, 6.0)]);
    let said = |change: &dyn Fn(&mut Vec<Arc<Entry>>)| {
        let mut entries = whole.entries().to_vec();
        change(&mut entries);
        Notebook::replay(entries).unwrap_err().to_string()
    };
    assert_eq!(
        said(&|e| drop(e.remove(1))),
        "entry 2: entry 3 stands where entry 2 is due"
    );
    assert_eq!(
        said(&|e| drop(e.remove(0))),
        "entry 1: entry 2 stands where entry 1 is due"
    );
    assert_eq!(
        said(&|e| Arc::make_mut(&mut e[0]).what = What::Closed),
        "entry 1: the first entry does not open the titration"
    );
    assert_eq!(
        said(&|e| {
            let opening = e[0].what.clone();
            Arc::make_mut(&mut e[2]).what = opening;
        }),
        "entry 3: the titration is open already; only entry 1 opens it"
    );
    assert_eq!(
        said(&|e| Arc::make_mut(&mut e[1]).what = counted(2, 6.0)),
        "entry 3: vial 2 already has 6 counts; + adds a recount"
    );
}

#[test]
fn as_of_walks_the_history() {
    let b = book([counted(1, 5.0), What::TakenBack(2), What::TakenBack(3)]);
    let kept = |n| b.as_of(n).unwrap().kept.len();
    assert_eq!((kept(1), kept(2), kept(3), kept(4)), (0, 1, 0, 1));
    for n in [0, 5] {
        let said = b.as_of(n).unwrap_err().to_string();
        assert!(said.contains("entries 1 to 4"), "{said}");
    }
}

#[test]
fn a_chain_of_taking_back_as_long_as_a_notebook_is_walked() {
    let mut entries = book([counted(1, 5.0)]).entries().to_vec();
    for n in 3..=MOST_ENTRIES as u32 {
        entries.push(Arc::new(Entry {
            n,
            at: at(),
            who: "ann".into(),
            what: What::TakenBack(n - 1),
        }));
    }
    let mut b = Notebook::replay(entries).unwrap();
    let last = b.entries().last().unwrap();
    // An even number of them: the reading is there.
    assert_eq!(b.titration().kept(TubeNo(1)).len(), 1);
    assert!(
        b.describe(last)
            .starts_with("brought back, entry 2: 5 counts")
    );
    let full = b.record(note(None, "x"), at(), "ann").unwrap_err();
    assert_eq!(full, Rejection::Full);
}

/// Readings that have their minutes from the protocol follow a correction of it; their own stay.
#[test]
fn a_corrected_counting_time_corrects_the_readings_that_took_it() {
    let mut typed = reading(100.0);
    typed.own_minutes = true;
    let mut b = book([counted(1, 100.0)]);
    b.record(
        What::Counted {
            readings: vec![Count::first(TubeNo(2), typed.clone())],
        },
        at(),
        "ann",
    )
    .unwrap();
    let t = b.titration();
    let mut protocol = t.protocol.clone();
    protocol.counter.minutes = crate::units::Typed::parse("7 min", protocol.counter.mark).unwrap();
    let levels = t.levels.clone();
    let before = t.clone();
    let what = What::Amended {
        protocol: Box::new(protocol),
        levels,
        reason: "the counter was set to 7".into(),
    };
    b.record(what, at(), "ann").unwrap();
    let minutes = |t: &Titration, no| t.kept(TubeNo(no))[0].reading.minutes;
    assert_eq!(minutes(b.titration(), 1), 7.0);
    assert_eq!(minutes(b.titration(), 2), typed.minutes);
    // Taking the correction back brings the old minutes back.
    b.record(What::TakenBack(b.revision()), at(), "ann")
        .unwrap();
    assert_eq!(*b.titration(), before);
}
