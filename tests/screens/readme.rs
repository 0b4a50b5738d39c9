//! README says what is true of the program.

use crate::sitting::Sitting;
use rackside::app::keys;
use std::fs;
use std::path::Path;

fn readme() -> String {
    fs::read_to_string(Path::new(env!("CARGO_MANIFEST_DIR")).join("README.md")).unwrap()
}

#[test]
fn the_table_of_keys_is_that_of_the_program() {
    let readme = readme();
    for b in keys::BENCH {
        let row = format!("| `{}` | {} |", b.shown, b.help);
        assert!(readme.contains(&row), "README has no row `{row}`");
    }
    let rows = readme
        .lines()
        .skip_while(|l| *l != "| key | what it does |")
        .skip(2);
    assert_eq!(
        rows.take_while(|l| l.starts_with('|')).count(),
        keys::BENCH.len()
    );
}

#[test]
fn every_json_key_is_documented() {
    let text = include_str!("../../demo-sessions/finished.ron");
    let opened = rackside::store::carried("demo", text).unwrap();
    let t = opened.notebook.titration();
    let json = rackside::report::json(t, &rackside::analysis::analyse(t)).unwrap();
    let value: serde_json::Value = serde_json::from_str(&json).unwrap();
    let readme = readme();
    let mut keys = Vec::new();
    gather(&value, &mut keys);
    assert!(keys.len() > 30);
    for key in keys {
        assert!(
            readme.contains(&format!("`{key}`")) || readme.contains(&format!(".{key}`")),
            "README does not name the key `{key}`"
        );
    }
}

fn gather(value: &serde_json::Value, keys: &mut Vec<String>) {
    match value {
        serde_json::Value::Object(map) => {
            for (key, value) in map {
                if !keys.contains(key) {
                    keys.push(key.clone());
                }
                gather(value, keys);
            }
        }
        serde_json::Value::Array(list) => list.iter().for_each(|v| gather(v, keys)),
        _ => {}
    }
}

#[test]
fn the_caution_is_in_the_readme() {
    let words = |t: &str| t.split_whitespace().collect::<Vec<_>>().join(" ");
    assert!(words(&readme()).contains(&words(rackside::report::CAUTION)));
}

#[test]
fn the_picture_is_the_program() {
    let mut sitting = Sitting::demo("half-typed");
    // The program opens with free on a log axis, the tests without.
    sitting.types("a1521\n1596");
    let drawn = sitting.screen(80, 24).lines();
    let readme = readme();
    let picture = readme
        .split("```text\n")
        .nth(1)
        .unwrap()
        .split("\n```")
        .next()
        .unwrap();
    let picture: Vec<&str> = picture.lines().collect();
    assert_eq!(picture.len(), 24);
    // The clock is that of the day the picture was taken.
    let timeless = |line: &str| line.split("saved ").next().unwrap().trim_end().to_string();
    for (shown, drawn) in picture.iter().zip(&drawn) {
        assert_eq!(timeless(shown), timeless(drawn));
    }
}
