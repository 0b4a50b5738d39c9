//! Laws of binding, suspects and shared errors through the program itself.
//!
//! The rack is the simulated `exp3_twosite.csv` (its truth stands in its first line); what an independent minimiser found on it
//! is quoted beside the checks.

use super::harness::{Home, one_at_a_time, project};
use super::rack::{FILE, counted};
use serde_json::Value;
use std::fs;

const EXP3: &str = include_str!("../numbers/data/exp3_twosite.csv");

/// A home with the rack of the file, taken whole; changes are made to the example protocol.
fn exp3(changes: &[(&str, &str)]) -> Home {
    let rows: Vec<Vec<&str>> = EXP3
        .lines()
        .skip(2)
        .map(|l| l.split(',').collect())
        .collect();
    let mut added: Vec<f64> = rows.iter().map(|r| r[2].parse().unwrap()).collect();
    added.sort_by(f64::total_cmp);
    added.dedup();
    let home = Home::new();
    let mut protocol = home.run(&["new", "--example"]).done().out;
    let from = protocol.find("List([").unwrap();
    let to = from + protocol[from..].find("])").unwrap() + 2;
    let list: Vec<String> = added.iter().map(|a| format!("\"{a} nM\"")).collect();
    protocol.replace_range(from..to, &format!("List([{}])", list.join(", ")));
    let fixed = [
        ("\"1 uM\"", "\"10 uM\""),
        ("dilution_error: \"2 %\"", "dilution_error: \"0\""),
    ];
    for (old, new) in fixed.iter().chain(changes) {
        assert!(protocol.contains(old), "{old}");
        protocol = protocol.replacen(old, new, 1);
    }
    home.write("protocol.ron", &protocol);
    let _ = home.run(&["new", FILE, "--from", "protocol.ron"]).done();
    let mut table = String::from("level,role,replicate,counts,minutes\n,background,a,263,10\n");
    let mut seen: Vec<(&str, &str)> = Vec::new();
    for r in &rows {
        let replicate = 1 + seen.iter().filter(|s| **s == (r[1], r[2])).count();
        seen.push((r[1], r[2]));
        let level = 1 + added
            .iter()
            .position(|a| *a == r[2].parse::<f64>().unwrap())
            .unwrap();
        let role = if r[1] == "T" { "total" } else { "nonspecific" };
        table.push_str(&format!("{level},{role},{replicate},{},{}\n", r[4], r[3]));
    }
    let _ = home.run_with(&["take", FILE, "-"], &table).done();
    home
}

fn json(home: &Home, more: &[&str]) -> Value {
    let mut args = vec!["summary", FILE, "--format", "json"];
    args.extend(more);
    let ran = home.run(&args).done();
    serde_json::from_str(&ran.out).unwrap()
}

fn model<'a>(v: &'a Value, id: &str) -> &'a Value {
    let all = v["models"].as_array().unwrap();
    all.iter().find(|m| m["model"] == id).unwrap()
}

fn parameter<'a>(fit: &'a Value, name: &str) -> &'a Value {
    let all = fit["parameters"].as_array().unwrap();
    all.iter().find(|p| p["name"] == name).unwrap()
}

#[track_caller]
fn near(v: &Value, want: f64, relative: f64) {
    let got = v.as_f64().unwrap();
    assert!((got - want).abs() <= relative * want.abs(), "{got} {want}");
}

/// The figures are those of an independent fit of the same likelihood (a general minimiser, no shared code), to their digits.
#[test]
fn two_classes_are_offered_with_the_reference_figures() {
    let home = exp3(&[]);
    let v = json(&home, &[]);
    assert_eq!(v["model_chosen"], Value::Null);
    let (one, two) = (model(&v, "one_class"), model(&v, "two_classes"));
    assert_eq!(
        (&one["shown"], &two["shown"]),
        (&true.into(), &false.into())
    );
    assert_eq!(two["standing"], "offered");
    near(&one["fit"]["minus2lnl"], 634.812115, 1e-8);
    near(&one["fit"]["aicc"], 645.9886, 1e-7);
    near(&two["fit"]["minus2lnl"], 521.838270, 1e-8);
    near(&two["fit"]["aicc"], 538.1240, 1e-7);
    for (name, at, low, high) in [
        ("kd1_nm", 0.22705507, 0.172031, 0.291774),
        ("sites1_nm", 0.011876204, 0.00973153, 0.0142208),
        ("kd2_nm", 9.1507586, 7.20347, 11.7871),
        ("sites2_nm", 0.057603819, 0.053987, 0.0617049),
    ] {
        let p = parameter(&two["fit"], name);
        near(&p["estimate"], at, 1e-7);
        near(&p["low"], low, 4e-6);
        near(&p["high"], high, 4e-6);
    }
    let page = home.run(&["summary", FILE]).done().out;
    assert!(
        page.contains("OFFERED: two classes") && page.contains("offered; whether the lowest level"),
        "{page}"
    );
}

/// Intervals of every law on request, and none of an unsupported one otherwise.
#[test]
fn all_laws_on_request() {
    let home = Home::new();
    home.write(
        FILE,
        fs::read(project("demo-sessions/finished.ron")).unwrap(),
    );
    let few = json(&home, &[]);
    let hill = model(&few, "hill");
    assert_eq!(hill["standing"], "not_supported");
    assert_eq!(parameter(&hill["fit"], "n")["low_end"], "not_asked");
    let all = json(&home, &["--all-laws"]);
    let n = parameter(&model(&all, "hill")["fit"], "n").clone();
    let [low, at, high] = ["low", "estimate", "high"].map(|k| n[k].as_f64().unwrap());
    assert!(low < at && at < high, "{n}");
    // What is shown does not depend on what else was asked for.
    assert_eq!(few["fit"], all["fit"]);
    let page = home.run(&["summary", FILE, "--all-laws"]).done().out;
    assert!(
        page.lines()
            .any(|l| l.contains("Kh") && l.contains("sites")),
        "{page}"
    );
}

#[test]
fn a_law_is_chosen_at_the_bench_and_the_summary_says_so() {
    let _guard = one_at_a_time();
    let home = exp3(&[]);
    let mut bench = home.sit(&["open", FILE]);
    bench.wait_text("the fit of two classes is better");
    bench.keys("m");
    bench.wait_text("which law of binding is shown");
    bench.keys("7");
    bench.wait_text("a law is chosen by its digit");
    bench.keys("2");
    bench.wait("two classes on the bench", |s| {
        s.has("two classes, chosen") && s.has("Kd 2") && s.says_saved()
    });
    bench.kill();
    let v = json(&home, &[]);
    assert_eq!(
        (&v["model_chosen"], &v["fit"]["model"]),
        (&"two_classes".into(), &"two_classes".into())
    );
    let page = home.run(&["summary", FILE]).done().out;
    for said in [
        "two classes (chosen by hand)",
        "shown: chosen by hand",
        "two classes chosen to be shown",
    ] {
        assert!(page.contains(said), "{said}:\n{page}");
    }
    // And back: the choice is an entry like any other.
    let mut bench = home.sit(&["open", FILE]);
    bench.wait_text("two classes, chosen");
    bench.keys("m0");
    bench.wait("one class again", |s| {
        s.has("one class   CV") && s.says_saved()
    });
    bench.keys("q");
    assert!(bench.end().success());
    assert_eq!(json(&home, &[])["fit"]["model"], "one_class");
}

/// A law that the readings do not show has no number, and what is missing is said instead.
#[test]
fn a_chosen_law_without_a_result_says_what_it_lacks() {
    let home = counted(9);
    let text = String::from_utf8(home.bytes("protocol.ron")).unwrap();
    home.write(
        "two.ron",
        text.replacen(
            "confidence: 0.95",
            "confidence: 0.95, model: Some(TwoClasses)",
            1,
        ),
    );
    let _ = home
        .run(&["new", "two-classes.ron", "--from", "two.ron"])
        .done();
    let _ = home
        .run_with(&["take", "two-classes.ron", "-"], &super::rack::table(17))
        .done();
    let page = home.run(&["summary", "two-classes.ron"]).done().out;
    assert!(page.contains("total tubes at 5 levels (now 4)"), "{page}");
}

/// Vial 14 of the rack reads low. With it a Hill coefficient gains more than chance would; without it, nothing.
#[test]
fn a_law_that_only_one_tube_speaks_for_is_not_offered() {
    let v = json(&counted(33), &[]);
    let hill = model(&v, "hill");
    assert_eq!(hill["standing"], "withheld");
    assert!(
        hill["reason"].as_str().unwrap().contains("without vial 14"),
        "{hill}"
    );
    assert_eq!(v["suspects"]["tubes"][0]["vial"], 14);
}

/// Errors that all tubes share widen intervals, are named under them, and those out of their limits are refused.
#[test]
fn shared_errors_from_the_protocol() {
    let exact = exp3(&[]);
    let given = "confidence: 0.95, scale_errors: (stock: Some(\"3 %\"), protein: Some(\"10 %\"))";
    let wide = exp3(&[("confidence: 0.95", given)]);
    let [a, b] = [&exact, &wide].map(|h| json(h, &[]));
    let width = |v: &Value, name: &str| {
        let p = parameter(&v["fit"], name).clone();
        (p["high"].as_f64().unwrap() / p["low"].as_f64().unwrap()).ln()
    };
    assert!(width(&b, "kd_nm") > width(&a, "kd_nm"));
    // Protein enters the conversion alone: 10 % is far wider than the interval in the tube.
    let by_amount = |v: &Value| {
        let s = &v["fit"]["sites"];
        (s["high"].as_f64().unwrap() / s["low"].as_f64().unwrap()).ln()
    };
    assert!((by_amount(&a) - width(&a, "sites_nm")).abs() < 1e-12);
    assert!(by_amount(&b) > 1.2 * width(&b, "sites_nm"));
    let page = wide.run(&["summary", FILE]).done().out;
    assert!(
        page.contains("allowed for: stock 3 %, protein 10 %"),
        "{page}"
    );
    assert!(
        page.contains("taken as exact: specific activity, efficiency, volume"),
        "{page}"
    );
    let home = Home::new();
    let example = home.run(&["new", "--example"]).done().out;
    let bad = "confidence: 0.95, scale_errors: (volume: Some(\"60 %\"))";
    home.write("bad.ron", example.replacen("confidence: 0.95", bad, 1));
    let ran = home.run(&["new", "x.ron", "--from", "bad.ron"]);
    for said in ["numbers.scale_errors.volume", "60 %", "at most 50 %"] {
        assert!(ran.err.contains(said), "{ran:?}");
    }
    assert!(!home.path("x.ron").exists());
}

/// A tube that stands apart is named with the chance of it, on the page, in JSON and at the bench, and is not flagged.
#[test]
fn a_suspect_is_named_and_nothing_is_flagged() {
    let _guard = one_at_a_time();
    let home = counted(14);
    let rest: String = super::rack::COUNTS[14..]
        .iter()
        .map(|(v, c)| format!("{v},{}\n", if *v == 22 { 596 } else { *c }))
        .collect();
    let _ = home
        .run_with(&["take", FILE, "-"], &format!("vial,counts\n{rest}"))
        .done();
    let v = json(&home, &[]);
    let suspects = v["suspects"]["tubes"].as_array().unwrap();
    assert_eq!(suspects[0]["vial"], 22);
    assert!(suspects[0]["residual"].as_f64().unwrap() < -3.0);
    assert!(
        v["tubes"]
            .as_array()
            .unwrap()
            .iter()
            .all(|t| t["suspect"] == false)
    );
    let page = home.run(&["summary", FILE]).done().out;
    let named = page.lines().find(|l| l.contains("look at...")).unwrap();
    assert!(
        named.contains("vial 22, 2 nM, total b:") && named.contains("sd below"),
        "{page}"
    );
    let mut bench = home.sit(&["open", FILE]);
    bench.wait_text("look at vial 22 (total)");
    bench.keys("q");
    assert!(bench.end().success());
}
