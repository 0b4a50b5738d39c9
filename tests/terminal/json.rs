//! The summary for programs: every promised key is there and of its kind.

use super::harness::{Home, project};
use super::rack::{FILE, counted, fresh};
use serde_json::Value;
use std::fs;

/// The summary of the rack of a home.
pub fn summary(home: &Home) -> Value {
    of(home, FILE)
}

fn of(home: &Home, file: &str) -> Value {
    let ran = home.run(&["summary", file, "--format", "json"]).done();
    assert_eq!(ran.err, "");
    serde_json::from_str(&ran.out).unwrap()
}

fn demo() -> Value {
    let home = Home::new();
    let text = fs::read(project("demo-sessions/finished.ron")).unwrap();
    home.write(FILE, text);
    summary(&home)
}

/// What a value may be.
#[derive(Debug, Clone, Copy)]
enum Kind {
    Number,
    Whole,
    Text,
    Truth,
    /// A number where there is one.
    MaybeNumber,
    MaybeText,
}

fn is(value: &Value, kind: Kind) -> bool {
    match kind {
        Kind::Number => value.is_number(),
        Kind::Whole => value.is_u64(),
        Kind::Text => value.is_string(),
        Kind::Truth => value.is_boolean(),
        Kind::MaybeNumber => value.is_number() || value.is_null(),
        Kind::MaybeText => value.is_string() || value.is_null(),
    }
}

#[track_caller]
fn keys(object: &Value, wanted: &[(&str, Kind)]) {
    for (key, kind) in wanted {
        let value = object.get(key).unwrap_or_else(|| panic!("no key `{key}`"));
        assert!(is(value, *kind), "`{key}` is {value}, not {kind:?}");
    }
}

fn tube_keys(tube: &Value) {
    use Kind::*;
    keys(
        tube,
        &[
            ("vial", Whole),
            ("level", MaybeNumber),
            ("role", Text),
            ("replicate", Text),
            ("added_nm", MaybeNumber),
            ("counts", MaybeNumber),
            ("minutes", MaybeNumber),
            ("side", MaybeText),
            ("standard", MaybeNumber),
            ("signal_minutes", MaybeNumber),
            ("counted_nm", MaybeNumber),
            ("counted_sd_nm", MaybeNumber),
            ("bound_nm", MaybeNumber),
            ("bound_sd_nm", MaybeNumber),
            ("free_nm", MaybeNumber),
            ("specific_nm", MaybeNumber),
            ("suspect", Truth),
            ("suspect_reason", MaybeText),
        ],
    );
}

fn fit_keys(fit: &Value) {
    use Kind::*;
    keys(
        fit,
        &[
            ("model", Text),
            ("tubes_used", Whole),
            ("minus2lnl", Number),
            ("prior_term", Number),
            ("aicc", Number),
            ("cv", Number),
        ],
    );
    let parameters = fit["parameters"].as_array().unwrap();
    let names: Vec<&str> = parameters
        .iter()
        .map(|p| p["name"].as_str().unwrap())
        .collect();
    for name in ["kd_nm", "sites_nm", "ns", "background_cpm"] {
        assert!(names.contains(&name), "no `{name}` in {names:?}");
    }
    for p in parameters {
        keys(
            p,
            &[
                ("name", Text),
                ("estimate", Number),
                ("se_ln", Number),
                ("low", Number),
                ("high", Number),
            ],
        );
        let [low, at, high] = ["low", "estimate", "high"].map(|k| p[k].as_f64().unwrap());
        assert!(0.0 < low && low < at && at < high, "{p}");
    }
}

#[test]
fn a_finished_rack_has_every_key() {
    let result = demo();
    keys(&result, &[("format", Kind::Whole), ("title", Kind::Text)]);
    assert_eq!(result["format"], 1);
    let tubes = result["tubes"].as_array().unwrap();
    assert_eq!(tubes.len(), 33);
    for tube in tubes {
        tube_keys(tube);
        let measured = ["counts", "minutes"];
        let amounts = [
            "level",
            "added_nm",
            "bound_nm",
            "bound_sd_nm",
            "free_nm",
            "specific_nm",
        ];
        let background = tube["role"] == "background";
        for key in measured {
            assert!(tube[key].is_number(), "{tube}");
        }
        for key in amounts {
            assert_eq!(tube[key].is_null(), background, "{key} of {tube}");
        }
    }
    let suspects: Vec<&Value> = tubes.iter().filter(|t| t["suspect"] == true).collect();
    assert_eq!(suspects.len(), 1);
    assert_eq!(suspects[0]["suspect_reason"], "filter torn");
    fit_keys(&result["fit"]);
    fit_keys(&result["without_flags"]);
    assert_ne!(result["fit"], result["without_flags"]);
    assert_eq!(result.get("too_early"), Some(&Value::Null));
    // One way of counting: the label in a vial is what is bound, and every minute of it counts.
    for tube in tubes.iter().filter(|t| t["role"] != "background") {
        assert_eq!(tube["counted_nm"], tube["bound_nm"]);
        assert_eq!(tube["signal_minutes"], tube["minutes"]);
    }
    let counting = &result["counting"];
    assert_eq!(counting["limits"][0]["seen"], "bound");
    // 26.7 cpm over ten minutes, two for a tube: by Currie's formula.
    let critical = counting["limits"][0]["cpm"]["critical"].as_f64().unwrap();
    let by_hand = 1.6448536269514722 * (26.7f64 / 2.0 + 26.7 / 10.0).sqrt();
    assert!((critical - by_hand).abs() < 1e-12, "{critical}");
    assert_eq!(counting["vials"].as_array().unwrap().len(), 32);
    assert_eq!(counting["specific"].as_array().unwrap().len(), 8);
    let label = &result["label"];
    assert_eq!(label["ligand_left"], 1.0);
    assert!(label["half_life_minutes"].is_null() && label["standards"].is_null());
    assert_eq!(label["proportional"][0]["role"], "nonspecific");
}

#[test]
fn the_numbers_of_a_tube_hang_together() {
    let result = demo();
    let ns = result["fit"]["parameters"]
        .as_array()
        .unwrap()
        .iter()
        .find(|p| p["name"] == "ns")
        .unwrap()["estimate"]
        .as_f64()
        .unwrap();
    let mut looked_at = 0;
    for tube in result["tubes"].as_array().unwrap() {
        let n = |k: &str| tube[k].as_f64();
        let (Some(added), Some(bound), Some(free)) = (n("added_nm"), n("bound_nm"), n("free_nm"))
        else {
            continue;
        };
        // From the definitions: by hand for the example's counter, 45 % of 80 Ci/mmol at 2.22 dpm/fmol and
        // 1 Ci/mmol, in 0.5 mL, background 267 counts in 10 min. The constant is the curie's definition
        // (3.7e10 decays a second), so 2.22 dpm/fmol is exact.
        let cpm = n("counts").unwrap() / n("minutes").unwrap() - 26.7;
        let by_hand = cpm / (0.45 * 80.0 * 2.22) / (1000.0 * 0.5);
        assert!((bound - by_hand).abs() <= 1e-12 * by_hand.abs(), "{tube}");
        assert!((free - (added - bound)).abs() <= 1e-12 * added, "{tube}");
        let specific = n("specific_nm").unwrap();
        assert!(
            (specific - (bound - ns * free)).abs() <= 1e-12 * added,
            "{tube}"
        );
        looked_at += 1;
    }
    assert_eq!(looked_at, 32);
}

#[test]
fn too_early_says_what_is_missing_and_gives_no_number() {
    for (home, read) in [(fresh(), 0), (counted(1), 1), (counted(6), 6)] {
        let result = summary(&home);
        assert_eq!(result.get("fit"), Some(&Value::Null));
        assert_eq!(result.get("without_flags"), Some(&Value::Null));
        let missing = result["too_early"].as_array().unwrap();
        assert!(!missing.is_empty() && missing.iter().all(Value::is_string));
        let tubes = result["tubes"].as_array().unwrap();
        assert_eq!(tubes.len(), 33);
        tubes.iter().for_each(tube_keys);
        let counted = tubes.iter().filter(|t| t["counts"].is_number());
        assert_eq!(counted.count(), read);
        assert!(tubes.iter().all(|t| t["specific_nm"].is_null()));
    }
}
