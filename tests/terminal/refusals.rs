//! What is refused, and how: each refusal names the field, the value found and what is allowed, ends with its exit
//! code, and leaves everything as it was.

use super::harness::{Home, Ran};
use super::rack::{FILE, fresh};

/// That a run ended with a code, said nothing on stdout and every one of these on stderr.
#[track_caller]
fn refused(ran: &Ran, code: i32, said: &[&str]) {
    assert_eq!((ran.code, ran.out.as_str()), (code, ""), "{ran:?}");
    for text in said {
        assert!(ran.err.contains(text), "no `{text}`: {ran:?}");
    }
}

#[test]
fn protocols_that_cannot_be() {
    let long = format!("buffer: \"{}\"", "x".repeat(501));
    // What stands in the example, what stands there instead; the field, the value, what is allowed.
    let cases: &[(&str, &str, &[&str])] = &[
        (
            "\"0.05 nM\",",
            "\"1e999 nM\",",
            &["line 100", "levels", "`1e999` is too large", "finite"],
        ),
        (
            "\"80 Ci/mmol\"",
            "\"1e999 Ci/mmol\"",
            &["specific_activity", "`1e999` is too large", "finite"],
        ),
        (
            "confidence: 0.95",
            "confidence: 1e999",
            &["numbers.confidence", "inf", "0.5 to 0.999"],
        ),
        (
            "confidence: 0.95",
            "confidence: 95",
            &["numbers.confidence", "95", "0.5 to 0.999"],
        ),
        (
            "confidence: 0.95",
            "confidence: \"95 %\"",
            &["line 89", "confidence: \"95 %\"", "float"],
        ),
        (
            "\"0.05 nM\",",
            "\"-0.05 nM\",",
            &["ladder.levels", "`-0.05 nM`", "more than zero"],
        ),
        (
            "\"0.05 nM\",",
            "\"0 nM\",",
            &["ladder.levels", "`0 nM`", "more than zero and at most 1 M"],
        ),
        (
            "\"0.05 nM\",",
            "\"0,05 nM\",",
            &["ladder.levels", "`0,05 nM`", "comma", "uses a point"],
        ),
        (
            "\"0.05 nM\",",
            "\"0.05.1 nM\",",
            &["levels", "`0.05.1`", "more than one decimal mark"],
        ),
        (
            "\"0.05 nM\",",
            "\"0.05 mL\",",
            &["levels", "`0.05 mL`", "unit `mL`", "nM, pM"],
        ),
        (
            "\"0.05 nM\",",
            "\"0.05\",",
            &["levels", "`0.05`", "no unit", "nM, pM"],
        ),
        (
            "Protein(\"50 ug\")",
            "Protein(\"50 uL\")",
            &["amount", "`50 uL`", "mg, ug"],
        ),
        (
            "temperature: \"25 C\"",
            "temperature: \"25 nM\"",
            &["temperature", "`25 nM`", "C"],
        ),
        (
            "minutes: \"2 min\"",
            "minutes: \"0 min\"",
            &["counter.minutes", "`0 min`", "more than zero"],
        ),
        (
            "minutes: \"10 min\"",
            "minutes: \"-1 min\"",
            &["counter.background.minutes", "`-1 min`", "more than zero"],
        ),
        (
            "efficiency: \"45 %\"",
            "efficiency: \"145 %\"",
            &["counter.efficiency", "`145 %`", "at most 100 %"],
        ),
        (
            "fraction: \"100 %\"",
            "fraction: \"0 %\"",
            &["separation.fraction", "`0 %`", "more than zero"],
        ),
        (
            "dilution_error: \"2 %\"",
            "dilution_error: \"60 %\"",
            &["numbers.dilution_error", "60 %", "0 to 50 %"],
        ),
        (
            "centre: 0.06",
            "centre: 0",
            &["numbers.cv_prior.centre", "0", "more than 0"],
        ),
        (
            "sd_ln: 0.7",
            "sd_ln: 0",
            &["numbers.cv_prior.sd_ln", "0", "more than 0"],
        ),
        (
            "title: \"OB-31 binding to retina membranes, batch 9\"",
            "title: \"\"",
            &["protocol.title", "empty"],
        ),
        (
            "buffer: \"50 mM buffer, pH 7.4\"",
            &long,
            &["incubation.buffer", "501 characters", "at most 500"],
        ),
        (
            "mark: Point",
            "mark: Comma",
            &["incubation.volume", "`0.5 mL`", "uses a comma"],
        ),
        (
            "total: 2,",
            "total: 0,",
            &["ladder.total", "no total tubes", "16 nonspecific"],
        ),
        ("total: 2,", "total: -1,", &["line 102", "total: -1"]),
        ("total: 2,", "total: 65536,", &["line 102", "total: 65536"]),
        (
            "total: 2,",
            "total: 60000,",
            &["ladder.total", "480016", "at most 10000"],
        ),
        (
            "// except: [(level: 3, total: 3, nonspecific: 0)],",
            "except: [(level: 9, total: 3, nonspecific: 0)],",
            &["ladder.except", "level 9", "1 to 8"],
        ),
        (
            "// except: [(level: 3, total: 3, nonspecific: 0)],",
            "except: [(level: 0, total: 3, nonspecific: 0)],",
            &["ladder.except", "level 0", "1 to 8"],
        ),
        (
            "sticks: ToPreparation",
            "sticks: ToGlass",
            &["ToGlass", "ToPreparation", "ToFilter"],
        ),
        (
            "activity_date: \"2031-05-04\"",
            "activity_date: \"4.5.2031\"",
            &["line 14", "activity_date: \"4.5.2031\"", "2031-05-04 09:30"],
        ),
        ("operator:", "operatr:", &["operatr", "operator"]),
    ];
    let home = Home::new();
    let example = home.run(&["new", "--example"]).done().out;
    for (from, to, said) in cases {
        assert!(example.contains(from), "the example has no `{from}`");
        home.write("p.ron", example.replacen(from, to, 1));
        let ran = home.run(&["new", FILE, "--from", "p.ron"]);
        refused(&ran, 65, said);
        assert!(ran.err.contains("p.ron"), "{ran:?}");
        assert_eq!(home.names(""), ["p.ron"], "{to}");
    }
    // Two levels of one concentration are no mistake.
    home.write("p.ron", example.replacen("\"0.05 nM\",", "\"0.1 nM\",", 1));
    let made = home.run(&["new", FILE, "--from", "p.ron"]).done();
    assert!(made.err.contains("8 levels, 33 vials"), "{made:?}");
}

#[test]
fn readings_that_cannot_be() {
    let home = fresh();
    let _ = home
        .run_with(&["take", FILE, "-"], "vial,counts\n1,227\n")
        .done();
    let before = home.bytes(FILE);
    let cases: &[(&str, &[&str])] = &[
        (
            "vial,counts\n2,\"4,812\"\n",
            &["counts", "`4,812`", "whole numbers"],
        ),
        (
            "vial;counts\n2;4,812\n",
            &["counts", "`4,812`", "whole numbers"],
        ),
        (
            "vial,counts\n2,4.812\n",
            &["counts", "`4.812`", "whole numbers"],
        ),
        (
            "vial;counts;minutes\n2;210;1,5\n",
            &["minutes", "`1,5`", "comma", "uses a point"],
        ),
        (
            "vial,cpm\n2,1.2.3\n",
            &["cpm", "`1.2.3`", "more than one decimal mark"],
        ),
        (
            "vial,cpm\n2,1e999\n",
            &["cpm", "`1e999` is too large", "finite"],
        ),
        (
            "vial,counts\n2,9999999999999\n",
            &["counts", "`9999999999999` is too large", "at most 1e12"],
        ),
        ("vial,counts\n2,1e999\n", &["counts", "`1e999`", "digits"]),
        (
            "vial,counts\n2,-4\n",
            &["counts", "`-4` is negative", "zero or more"],
        ),
        ("vial,cpm\n2,-4\n", &["-4", "zero or more", "1e12"]),
        (
            "vial,counts,minutes\n2,210,0\n",
            &["0 minutes", "more than zero", "43200"],
        ),
        (
            "vial,counts,minutes\n2,210,1e999\n",
            &["minutes", "`1e999` is too large"],
        ),
        ("vial,counts\n99,4\n", &["vial", "no vial 99"]),
        (
            "vial,counts\n-1,4\n",
            &["vial", "`-1` is not a vial number"],
        ),
        (
            "vial,counts\n1,4\n",
            &["vial 1", "has a reading already", "--recount"],
        ),
        (
            "vial,beats\n2,4\n",
            &["no column `beats`", "vial, level", "counts"],
        ),
    ];
    for (text, said) in cases {
        let ran = home.run_with(&["take", FILE, "-"], text);
        refused(&ran, 65, said);
        for more in ["standard input line 2", "nothing was taken"] {
            // A fault of the header is one of line 1.
            let more = if text.contains("beats") {
                more.replace('2', "1")
            } else {
                more.into()
            };
            refused(&ran, 65, &[&more]);
        }
        assert_eq!(home.bytes(FILE), before, "{text:?}");
    }
}

#[test]
fn files_that_cannot_be() {
    const TOO_MANY: usize = 33 * 1024 * 1024;
    let home = fresh();
    let whole = String::from_utf8(home.bytes(FILE)).unwrap();
    let png = b"\x89PNG\r\n\x1a\n\x00\x00\x00\x0dIHDR";
    home.write("picture.ron", png);
    home.write("empty.ron", "");
    home.write("cut.ron", &whole[..whole.len() / 2]);
    home.write("newer.ron", whole.replacen("format: 3", "format: 7", 1));
    home.write("large.ron", vec![b' '; TOO_MANY]);
    std::fs::create_dir(home.path("folder.ron")).unwrap();
    let size = TOO_MANY.to_string();
    let cases: &[(&str, i32, &[&str])] = &[
        ("picture.ron", 65, &["not UTF-8"]),
        ("empty.ron", 65, &["empty"]),
        ("folder.ron", 65, &["not a file"]),
        ("cut.ron", 65, &["damaged at line 2", "cut short"]),
        (
            "newer.ron",
            65,
            &["format 7", "newer rackside", "reads formats up to 3"],
        ),
        ("large.ron", 65, &[&size, "at most 33554432"]),
        ("nowhere.ron", 74, &["No such file"]),
        ("nowhere/rack.ron", 74, &["No such file"]),
        ("rack.ron/rack.ron", 74, &["Not a directory"]),
    ];
    for (file, code, said) in cases {
        let before = std::fs::read(home.path(file)).ok();
        for command in ["summary", "check", "take"] {
            let ran = home.run_with(&[command, file], "vial,counts\n1,227\n");
            refused(&ran, *code, said);
            refused(&ran, *code, &[file]);
        }
        assert_eq!(std::fs::read(home.path(file)).ok(), before, "{file}");
    }

    // The same as a protocol and as a table.
    let cases: &[(&str, i32, &str)] = &[
        ("picture.ron", 65, "UTF-8"),
        ("empty.ron", 65, "line 1"),
        ("folder.ron", 65, "not a file"),
        ("large.ron", 65, "at most 33554432"),
        ("nowhere.ron", 74, "No such file"),
        ("rack.ron/rack.ron", 74, "Not a directory"),
    ];
    let names = home.names("");
    for (file, code, said) in cases {
        let ran = home.run(&["new", "other.ron", "--from", file]);
        refused(&ran, *code, &[file, said]);
        let ran = home.run(&["take", FILE, file]);
        refused(&ran, *code, &[file, said]);
        assert_eq!(home.names(""), names, "{file}");
    }
    // What never ends is not read to its end.
    let ran = home.run(&["new", "other.ron", "--from", "/dev/zero"]);
    refused(&ran, 65, &["/dev/zero", "at most 33554432"]);
    let endless = home.shell("rackside take rack.ron </dev/zero");
    refused(&endless, 65, &["standard input", "at most 33554432"]);

    // New files where none can be.
    home.write("p.ron", home.run(&["new", "--example"]).done().out);
    let cases: &[(&str, &str)] = &[
        ("nowhere/rack.ron", "No such file"),
        ("rack.ron/rack.ron", "Not a directory"),
        ("folder.ron", "there already"),
        (FILE, "there already"),
        (".", "there already"),
    ];
    for (file, said) in cases {
        let ran = home.run(&["new", file, "--from", "p.ron"]);
        refused(&ran, 73, &[file, said]);
    }
    assert_eq!(home.bytes(FILE), whole.as_bytes());
}
