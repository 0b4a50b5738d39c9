//! What holds of every screen: plain characters where they are asked for, no colour, no control characters, any size, any
//! key.

use crate::scenes;
use crate::sitting::{Screen, Sitting, WHO, demo, digest, draw, example, noon, opened};
use proptest::prelude::*;
use rackside::app::keys::Key;
use rackside::app::{Access, Effect, Event, Laid, Recent, Scene};
use rackside::assay::{Reading, Reason, Suspicion, TubeNo};
use rackside::notebook::{Count, Notebook, What};
use ratatui::style::Color;

fn plain(name: &str, screen: &Screen) {
    let text = screen.text();
    let odd: String = text.chars().filter(|c| !c.is_ascii()).collect();
    assert!(odd.is_empty(), "{name}: {odd:?} in\n{text}");
}

#[test]
fn plain_characters_are_ascii_alone() {
    let mut fine = 0;
    for (name, mut sitting) in scenes::all() {
        fine += usize::from(!sitting.text().is_ascii());
        sitting.set_fine(false);
        plain(name, &sitting.screen(80, 24));
        plain(name, &sitting.screen(120, 40));
    }
    assert!(
        fine > 40,
        "the fine screens must differ for this to say anything: {fine}"
    );
}

#[test]
fn no_screen_depends_on_a_colour() {
    for (name, mut sitting) in scenes::all() {
        for cell in sitting.screen(80, 24).buffer.content {
            let colours = [cell.fg, cell.bg, cell.underline_color];
            assert_eq!(colours, [Color::Reset; 3], "{name}: {cell:?}");
        }
    }
}

/// What nobody's notebook may bring to a terminal: an escape sequence, a bell, a line feed, marks of direction.
const HOSTILE: &str = "a\u{1b}[2J\u{1b}]0;x\u{7}b\n\u{9b}31mc\u{202e}d\u{2066}e\u{200f}f";

fn steers(c: char) -> bool {
    c.is_control()
        || matches!(c, '\u{200e}' | '\u{200f}' | '\u{061c}' | '\u{202a}'..='\u{202e}' | '\u{2066}'..='\u{2069}' | '\u{feff}')
}

fn tame(name: &str, text: &str) {
    let found = text.chars().find(|c| steers(*c) && *c != '\n');
    assert_eq!(found, None, "{name}: {text:?}");
}

/// A titration with the worst in every text that its notebook holds.
fn hostile() -> Notebook {
    let mut t = example(&[]);
    let p = &mut t.protocol;
    for text in [
        &mut p.title,
        &mut p.operator,
        &mut p.ligand.name,
        &mut p.ligand.label,
        &mut p.ligand.lot,
        &mut p.receptor.preparation,
        &mut p.receptor.batch,
        &mut p.receptor.method,
        &mut p.incubation.buffer,
        &mut p.separation.method,
        &mut p.separation.filter,
        &mut p.separation.washes,
        &mut p.counter.name,
    ] {
        *text = HOSTILE.into();
    }
    let mut amended = t.protocol.clone();
    amended.receptor.batch = format!("{HOSTILE} again");
    let levels = t.levels.clone();
    let why = || Suspicion {
        reason: Reason::Other,
        words: HOSTILE.into(),
    };
    let mut notebook = Notebook::open(t.protocol, t.levels, t.tubes, noon(), HOSTILE).unwrap();
    let count = |tube, n: f64| Count::first(TubeNo(tube), Reading::counts(HOSTILE, n, 2.0));
    for what in [
        What::Counted {
            readings: vec![count(33, 267.0), count(1, 227.0), count(2, 210.0)],
        },
        What::Flagged {
            reading: rackside::assay::ReadingId(2, 1),
            why: why(),
        },
        What::Lost {
            tube: TubeNo(3),
            why: why(),
        },
        What::Noted {
            tube: Some(TubeNo(4)),
            text: HOSTILE.into(),
        },
        What::Amended {
            protocol: Box::new(amended),
            levels,
            reason: HOSTILE.into(),
        },
        What::Rescued {
            from: HOSTILE.into(),
            kept: 3,
            said: HOSTILE.into(),
        },
        What::Checked {
            by: HOSTILE.into(),
            digest: HOSTILE.into(),
        },
    ] {
        notebook.record(what, noon(), HOSTILE).unwrap();
    }
    notebook
}

#[test]
fn nobodys_notebook_drives_a_terminal() {
    let notebook = hostile();
    let laid = |access| Laid {
        digest: digest(notebook.entries()),
        notebook: notebook.clone(),
        file: HOSTILE.into(),
        access,
        notices: vec![HOSTILE.into()],
        changed: vec![2, 3],
    };
    let mut bench = Sitting::laid(laid(Access::Writing));
    bench.app.who = HOSTILE.into();
    let read_only = Sitting::laid(laid(Access::ReadOnly(HOSTILE.into())));
    let mut shown: Vec<(String, Sitting)> = vec![("read only".into(), read_only)];
    let presses = [
        "", "/1\n", "/3\n", "/4\n", "v", "vv", "-", "--", "---", "b-b", "*", "/1\n*", "/1\n*7",
        "n", "o", "k", "c", "l", "?", "cy", "cyc", "cy-", "x",
    ];
    for keys in presses {
        let mut s = bench.clone();
        s.types(keys);
        shown.push((format!("bench {keys:?}"), s));
    }
    for back in 1..=3 {
        let mut s = bench.clone();
        s.times(back, Key::PageUp);
        for down in 0..27 {
            shown.push((format!("form {back}, field {down}"), s.clone()));
            s.press(Key::Down);
        }
        s.types("x").press(Key::PageDown);
        shown.push((format!("form {back}, changed"), s));
    }
    let mut unsaved = bench.clone();
    unsaved.disk = Err("no\u{1b}[2J\u{202e}");
    unsaved.types("n.\n");
    shown.push(("not saved".into(), unsaved));
    let mut result = bench.clone();
    result.press(Key::PageDown);
    result.types("sp");
    let pages: Vec<&String> = result
        .seen
        .iter()
        .filter_map(|e| match e {
            Effect::WritePage(page) | Effect::PrintAfter(page) => Some(page),
            _ => None,
        })
        .collect();
    assert_eq!(pages.len(), 2);
    for page in pages {
        tame("the page", page);
        assert!(
            page.contains("]0;xb"),
            "the page must hold the texts:\n{page}"
        );
    }
    for _ in 0..6 {
        shown.push(("result".into(), result.clone()));
        result.types(" ");
    }
    let recent = Recent {
        path: HOSTILE.into(),
        title: HOSTILE.into(),
        state: HOSTILE.into(),
    };
    let mut start = Sitting::at_start(vec![recent]);
    shown.push(("start".into(), start.clone()));
    start.app.lab.operator = HOSTILE.into();
    start.app.lab.counter = HOSTILE.into();
    for keys in ["l", "l\n", "n", "n\n", "\n", "o", "ox\n"] {
        let mut s = start.clone();
        s.types(keys);
        shown.push((format!("start {keys:?}"), s.clone()));
        s.happen(Event::Paste(HOSTILE.into()));
        shown.push((format!("start {keys:?}, pasted"), s.clone()));
        s.happen(Event::Refused(HOSTILE.into()));
        shown.push((format!("start {keys:?}, refused"), s));
    }
    let mut held = 0;
    for (name, mut sitting) in shown {
        for fine in [true, false] {
            sitting.set_fine(fine);
            for (columns, rows) in [(80, 24), (132, 50)] {
                let text = sitting.screen(columns, rows).text();
                tame(&name, &text);
                held += usize::from(text.contains("[2J"));
            }
        }
    }
    assert!(
        held > 100,
        "the texts must be on the screens, tamed: {held}"
    );
}

#[test]
fn what_is_typed_or_pasted_is_tamed_before_it_is_kept() {
    let mut s = Sitting::demo("half-typed");
    s.types("n").types("a\u{202e}b\u{1b}c\n");
    assert!(matches!(s.newest(), What::Noted { text, .. } if text == "abc"));
    let mut s = Sitting::at_start(Vec::new());
    s.types("n\n");
    s.happen(Event::Paste(HOSTILE.into()));
    let title = s.draft().forms.protocol.value("title");
    tame("the title", title);
    assert!(
        title.starts_with("a[2J") && title.ends_with("def"),
        "{title:?}"
    );
}

#[test]
fn any_size_is_drawn() {
    let sides = [1, 2, 3, 10, 33, 59, 60, 61, 76, 80, 100, 133, 200];
    let heights = [1, 2, 3, 17, 18, 19, 24, 40, 80];
    for (i, (_, mut sitting)) in scenes::all().into_iter().enumerate() {
        for (j, columns) in sides.into_iter().enumerate() {
            for (k, rows) in heights.into_iter().enumerate() {
                // Every scene sees a sample of the sizes, every size a sample of the scenes.
                if (i + 2 * j + 3 * k) % 7 != 0 {
                    continue;
                }
                // A terminal may be resized before the program is told so.
                draw(&sitting.app, columns, rows);
                let screen = sitting.screen(columns, rows);
                if let Some((x, y)) = screen.cursor {
                    assert!(
                        x < columns && y < rows,
                        "cursor {x}, {y} of {columns}, {rows}"
                    );
                }
            }
        }
    }
}

fn any_key() -> impl Strategy<Value = Key> {
    let known: Vec<char> = "0123456789.,-+*/ ?hgblnavikcoqdsypunM%:;=\u{b5}\u{e9}\u{6f22}\u{301}"
        .chars()
        .collect();
    prop_oneof![
        6 => proptest::sample::select(known).prop_map(Key::Char),
        1 => any::<char>().prop_map(Key::Char),
        1 => prop_oneof![Just('c'), Just('u'), Just('z'), Just('a')].prop_map(Key::Ctrl),
        3 => Just(Key::Enter),
        6 => proptest::sample::select(vec![
            Key::Backspace,
            Key::Delete,
            Key::Left,
            Key::Right,
            Key::Up,
            Key::Down,
            Key::Home,
            Key::End,
            Key::PageUp,
            Key::PageDown,
            Key::Tab,
            Key::BackTab,
            Key::Esc,
        ]),
    ]
}

/// Presses keys one by one, and looks at the screen after each.
fn press_all(mut sitting: Sitting, keys: &[Key]) {
    // The one analysis at the beginning will do: here screens and keys are asked about.
    sitting.analysing = false;
    for key in keys {
        sitting.press(*key);
        let text = draw(&sitting.app, 80, 24).text();
        tame("any keys", &text);
    }
    // Whatever was pressed, the notebook can be read again and says the same.
    if let Scene::Desk(desk) = &sitting.app.scene {
        let again = Notebook::replay(desk.notebook.entries().to_vec()).unwrap();
        assert_eq!(again.titration(), desk.titration());
    }
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 40, failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn any_keys_at_the_start(keys in proptest::collection::vec(any_key(), 60)) {
        press_all(Sitting::at_start(scenes::recents()), &keys);
    }

    #[test]
    fn any_keys_in_a_draft(keys in proptest::collection::vec(any_key(), 60)) {
        press_all(scenes::complete(), &keys);
    }

    #[test]
    fn any_keys_at_the_bench(keys in proptest::collection::vec(any_key(), 60)) {
        press_all(Sitting::demo("half-typed"), &keys);
    }

    #[test]
    fn any_keys_where_nothing_may_be_written(keys in proptest::collection::vec(any_key(), 60)) {
        let access = Access::ReadOnly("open elsewhere".into());
        let mut sitting = scenes::finished_with(access, Vec::new(), Vec::new());
        sitting.analysing = false;
        let before = sitting.entries();
        for key in keys {
            sitting.press(key);
            draw(&sitting.app, 80, 24);
        }
        prop_assert_eq!(sitting.entries(), before);
        prop_assert!(!sitting.seen.iter().any(|e| matches!(e, Effect::Save(..))));
    }
}

#[test]
fn a_fresh_rack_of_any_shape_is_drawn() {
    for (total, nonspecific, background) in [(1, 0, 1), (1, 1, 1), (9, 9, 9), (30, 30, 30)] {
        let t = example(&[
            ("total: 2", &format!("total: {total}")),
            ("nonspecific: 2", &format!("nonspecific: {nonspecific}")),
            ("background: 1,  ", &format!("background: {background},  ")),
        ]);
        let mut sitting = Sitting::at(opened(t));
        for keys in ["", "v", "v", "v"] {
            sitting.types(keys);
            for (columns, rows) in [(60, 18), (80, 24), (200, 60)] {
                sitting.screen(columns, rows);
            }
        }
        assert_eq!(sitting.app.who, WHO);
    }
    assert!(demo("finished").revision() > 1);
}

#[test]
fn every_line_of_the_result_comes_by_with_bars_standing() {
    for rows in [18, 24, 40] {
        let bars = vec!["changed outside rackside: entries 12".into(); 3];
        let access = Access::ReadOnly("open elsewhere".into());
        let mut s = scenes::finished_with(access, bars, vec![12]);
        s.screen(80, rows);
        s.press(Key::PageDown);
        let page = rackside::app::page(s.desk()).unwrap();
        let mut seen = Vec::new();
        loop {
            seen.extend(s.screen(80, rows).lines());
            s.types(" ");
            if s.desk().top == 0 {
                break;
            }
        }
        for line in page.lines() {
            assert!(seen.iter().any(|l| l == line), "{rows} rows: {line:?}");
        }
    }
}

#[test]
fn a_title_in_wide_characters_leaves_the_walk_in_sight() {
    let title = "\u{6f22}\u{5b57}".repeat(40);
    let t = example(&[("OB-31 binding to retina membranes, batch 9", &title)]);
    let mut s = Sitting::at(opened(t));
    for columns in [60, 80, 120] {
        let first = s.screen(columns, 24).lines().remove(0);
        assert!(first.ends_with("TUBES  result"), "{first}");
    }
    // The cursor stands behind what is typed, however wide it is.
    s.times(3, Key::PageUp)
        .times(1, Key::Down)
        .press(Key::Ctrl('u'));
    s.types("\u{6f22}\u{5b57}");
    assert_eq!(s.screen(80, 24).cursor, Some((24 + 4, 2)));
}
