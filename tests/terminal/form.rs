//! The forms of the walk, filled in at the keyboard.

use super::harness::{Shown, Terminal};

pub const PAGE_UP: &str = "\x1b[5~";
pub const PAGE_DOWN: &str = "\x1b[6~";
pub const DOWN: &str = "\x1b[B";
pub const ESC: &str = "\x1b";

/// More fields than any form has.
const MOST_FIELDS: usize = 60;

/// The row with the cursor, if the cursor is on that field.
fn row<'s>(shown: &'s Shown, field: &str) -> Option<&'s str> {
    let here = format!("> {field}");
    let rows = shown.rows.iter();
    rows.map(String::as_str).find(|r| r.contains(&here))
}

/// Goes down to a field.
#[track_caller]
pub fn reach(bench: &mut Terminal, field: &str) {
    for _ in 0..MOST_FIELDS {
        let before = bench.shown();
        if row(&before, field).is_some() {
            return;
        }
        bench.keys(DOWN);
        bench.wait(&format!("a field further down, to `{field}`"), |s| {
            s.rows != before.rows
        });
    }
    panic!("there is no field `{field}`");
}

/// Goes down to a field and types a value in place of the one that is there.
#[track_caller]
pub fn fill(bench: &mut Terminal, field: &str, value: &str) {
    reach(bench, field);
    bench.keys(value);
    holds(bench, field, value);
}

/// Goes down to a field with a choice and chooses by a digit.
#[track_caller]
pub fn choose(bench: &mut Terminal, field: &str, digit: char, value: &str) {
    reach(bench, field);
    bench.keys(&digit.to_string());
    holds(bench, field, value);
}

/// Waits until the field with the cursor shows a value.
#[track_caller]
fn holds(bench: &Terminal, field: &str, value: &str) {
    bench.wait(&format!("`{value}` in `{field}`"), |s| {
        row(s, field).is_some_and(|r| r.contains(value))
    });
}

/// Waits until a step of the walk, in capitals, is the one in sight.
#[track_caller]
pub fn wait_step(bench: &Terminal, step: &str) -> Shown {
    let step = step.to_uppercase();
    bench.wait(&format!("the step {step}"), |s| {
        s.rows.first().is_some_and(|r| r.contains(&step))
    })
}

/// Fills in what is needed of a new titration: the rack of the tests, its levels in equal ratios. The decimal
/// mark is that of the form.
pub fn new_titration(bench: &mut Terminal, title: &str, mark: char) {
    wait_step(bench, "protocol");
    let volume = format!("0{mark}5 mL");
    for (field, value) in [
        ("title", title),
        ("ligand", "OB-31"),
        ("label", "H-3"),
        ("specific activity", "80 Ci/mmol"),
        ("preparation", "retina membranes"),
        ("amount per tube", "50 ug protein"),
        ("volume", &volume),
        ("unlabelled", "1 uM"),
    ] {
        fill(bench, field, value);
    }
    bench.keys(PAGE_DOWN);
    wait_step(bench, "ladder");
    fill(bench, "lowest", "50 pM");
    fill(bench, "highest", "10 nM");
    bench.wait("8 levels with 2 + 2 tubes and a background vial", |s| {
        s.has_row(&["number of levels", "8"])
            && s.has_row(&["total tubes", "2"])
            && s.has_row(&["nonspecific tubes", "2"])
            && s.has_row(&["33 vials"])
    });
    bench.keys(PAGE_DOWN);
    wait_step(bench, "counter");
    fill(bench, "efficiency", "45 %");
    bench.keys(PAGE_DOWN);
}
