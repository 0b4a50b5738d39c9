//! Every key of the tables does something, and help names every one of them.

use crate::scenes;
use crate::sitting::Sitting;
use rackside::app::keys::{BENCH, Binding, FORM, Key, RESULT, START};
use rackside::app::{Effect, Event, Scene};

/// Whether a key asks for anything but the bell, or changes anything without being refused.
fn acts(state: &Sitting, key: Key) -> bool {
    let mut after = state.clone();
    after.seen.clear();
    let before = format!("{:?}", state.app);
    after.press(key);
    let asked = after.seen.iter().any(|e| !matches!(e, Effect::Bell));
    asked || (format!("{:?}", after.app) != before && !after.refused())
}

/// A number is begun: there a letter is typed like any character, for Enter to stumble over.
fn begun(s: &Sitting) -> bool {
    matches!(&s.app.scene, Scene::Desk(desk) if !desk.bench.line.value().is_empty())
}

fn all_act<C: Copy + std::fmt::Debug>(table: &[Binding<C>], states: &[Sitting]) {
    for binding in table {
        for key in binding.keys {
            assert!(
                states.iter().any(|s| acts(s, *key)),
                "{key:?} does nothing: {binding:?}"
            );
        }
    }
    // The program binds none of these, so that no state may know them.
    for key in [
        Key::Char('x'),
        Key::Ctrl('a'),
        Key::Ctrl('b'),
        Key::Ctrl('s'),
    ] {
        assert!(
            !states.iter().filter(|s| !begun(s)).any(|s| acts(s, key)),
            "{key:?} does something"
        );
    }
}

fn after(mut sitting: Sitting, keys: &str) -> Sitting {
    sitting.types(keys);
    sitting
}

#[test]
fn every_key_of_the_bench_acts() {
    let half = || Sitting::demo("half-typed");
    let mut unsaved = half();
    let newest = unsaved.desk().notebook.revision() + 1;
    unsaved.happen(Event::SaveFailed(newest, "no room".into()));
    all_act(
        BENCH,
        &[
            half(),
            after(half(), "15"),
            after(half(), "1521\n"),
            after(half(), "1521\n-"),
            after(half(), "/14\n"),
            unsaved,
        ],
    );
}

#[test]
fn every_key_of_the_result_acts() {
    let mut top = Sitting::demo("finished");
    top.press(Key::PageDown);
    all_act(RESULT, &[top.clone(), after(top, " ")]);
}

#[test]
fn every_key_of_the_start_acts() {
    let top = Sitting::at_start(scenes::recents());
    let mut second = top.clone();
    second.press(Key::Down);
    all_act(START, &[top, second]);
}

/// The keys that a line of help about forms means.
fn meant(shown: &str) -> Vec<Key> {
    match shown {
        "Enter" => vec![Key::Enter],
        "Up Down" => vec![Key::Up, Key::Down],
        "arrows" => vec![Key::Left, Key::Right, Key::Char('2')],
        "PgDn" => vec![Key::PageDown],
        "PgUp" => vec![Key::PageUp],
        "Ctrl-U" => vec![Key::Ctrl('u')],
        "Esc" => vec![Key::Esc],
        other => panic!("`{other}` is not known to this test"),
    }
}

#[test]
fn every_key_of_the_forms_acts_in_each_of_them() {
    let mut draft = scenes::complete();
    draft.press(Key::Esc);
    let mut open = Sitting::demo("finished");
    open.press(Key::PageUp);
    let mut settings = Sitting::at_start(Vec::new());
    settings.types("l");
    for (name, form, has_steps) in [
        ("draft", draft, true),
        ("open", open, true),
        ("settings", settings, false),
    ] {
        // The middle of a form, a field with a text; and one with a choice, reached from its end or its beginning.
        let states: Vec<Sitting> = (0..8)
            .map(|n| {
                let mut s = form.clone();
                s.times(20, Key::Up).times(n, Key::Down);
                s
            })
            .collect();
        for (shown, help) in FORM {
            for key in meant(shown) {
                if matches!(key, Key::PageUp | Key::PageDown) && !has_steps {
                    continue;
                }
                assert!(
                    states.iter().any(|s| acts(s, key)),
                    "{name}: {key:?}, {help}"
                );
            }
        }
    }
}

/// The words that help shows, a text for each place it can be scrolled to, without border and line breaks.
fn help(mut sitting: Sitting, (columns, rows): (u16, u16)) -> Vec<String> {
    let words = |s: &mut Sitting| {
        let text = s.screen(columns, rows).text().replace('│', " ");
        let words: Vec<&str> = text.split_whitespace().collect();
        format!(" {} ", words.join(" "))
    };
    let mut shown = vec![words(&mut sitting)];
    if !shown[0].contains("Up and Down move") {
        return shown;
    }
    loop {
        sitting.press(Key::Down);
        let now = words(&mut sitting);
        if shown.last() == Some(&now) {
            // From the end, one Up moves: no Down was counted past it.
            sitting.press(Key::Up);
            assert_ne!(words(&mut sitting), now);
            break;
        }
        shown.push(now);
    }
    shown
}

fn named(texts: &[String], shown: &str, help: &str) {
    let line = format!(" {shown} {help} ");
    let found = texts.iter().any(|t| t.contains(&line));
    assert!(found, "`{line}` is not in help:\n{}", texts.join("\n"));
}

#[test]
fn help_names_every_command() {
    let mut result = Sitting::demo("finished");
    result.press(Key::PageDown);
    for size in [(80, 26), (80, 24), (80, 18), (60, 18)] {
        let bench = help(after(Sitting::demo("half-typed"), "?"), size);
        // Help is scrolled only where its lines, two of border among them, have no room.
        let lines = rackside::app::keys::bench_help(size.0).len();
        assert_eq!(
            bench.len(),
            (lines + 3).saturating_sub(size.1.into()).max(1),
            "{size:?}"
        );
        for b in BENCH {
            named(&bench, b.shown, b.help);
        }
        let start = help(after(Sitting::at_start(Vec::new()), "?"), size);
        for b in START {
            named(&start, b.shown, b.help);
        }
        for (shown, words) in FORM {
            named(&start, shown, words);
        }
        let result = help(after(result.clone(), "?"), size);
        for b in RESULT {
            named(&result, b.shown, b.help);
        }
    }
}

#[test]
fn the_bench_shows_the_keys_of_the_loop() {
    let mut sitting = Sitting::demo("half-typed");
    let text = sitting.text();
    for b in BENCH.iter().filter(|b| !b.hint.is_empty()) {
        assert!(
            text.contains(&format!("{} {}", b.shown, b.hint)),
            "{}",
            b.shown
        );
    }
    // Where not all have room, what shows them all stays.
    assert!(sitting.screen(60, 18).text().contains("? keys"));
}

#[test]
fn digits_of_the_start_open_the_titration_they_stand_before() {
    for (digit, recent) in ('1'..).zip(scenes::recents()) {
        let mut sitting = Sitting::at_start(scenes::recents());
        sitting.press(Key::Char(digit));
        assert_eq!(sitting.said(), format!("{}: no such file", recent.path));
    }
    let mut sitting = Sitting::at_start(scenes::recents());
    sitting.press(Key::Char('4'));
    assert!(sitting.seen.is_empty());
    // The demos are in a list of their own, and a hang-up ends the program wherever it is.
    sitting.types("d2");
    assert_eq!(sitting.desk().file, "finished.ron");
    sitting.happen(Event::HangUp);
    assert!(format!("{:?}", sitting.seen.last()).contains("Quit"));
}
