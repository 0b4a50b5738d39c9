use super::*;
use std::collections::HashSet;

fn sound<C>(table: &[Binding<C>]) {
    let mut seen = HashSet::new();
    for b in table {
        for k in b.keys {
            assert!(seen.insert(*k), "{k:?}");
        }
        assert!(!b.help.is_empty() && !b.shown.is_empty());
        assert!(b.help.len() <= 67, "{} is too long beside its key", b.help);
    }
}

#[test]
fn no_key_is_there_twice_and_help_fits() {
    sound(BENCH);
    sound(RESULT);
    sound(START);
}

#[test]
fn the_reading_loop_needs_the_keypad_alone() {
    let loops = [
        Command::Keep,
        Command::Suspect,
        Command::Minus,
        Command::Recount,
        Command::GoTo,
    ];
    for c in loops {
        assert!(BENCH.iter().any(|b| b.command == c && b.keypad), "{c:?}");
    }
    for b in BENCH.iter().filter(|b| b.keypad) {
        for k in b.keys {
            assert!(
                matches!(k, Key::Enter | Key::Char('*' | '-' | '+' | '/')),
                "{k:?}"
            );
        }
    }
}
