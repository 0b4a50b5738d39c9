//! `take`: readings from tables, all of a table or nothing of it.

use super::harness::{Home, Ran};
use super::json::summary;
use super::rack::{COUNTS, FILE, counts_of, fresh, in_file, table};

fn take(home: &Home, input: &str) -> Ran {
    home.run_with(&["take", FILE, "-"], input)
}

/// Whether the run said how much it took, and only that.
#[track_caller]
fn took(ran: &Ran, taken: &str, read: &str) {
    assert_eq!((ran.code, ran.out.as_str()), (0, ""), "{ran:?}");
    assert!(ran.err.contains(taken) && ran.err.contains(read), "{ran:?}");
}

fn minutes(home: &Home, vial: u32) -> f64 {
    let all = summary(home);
    let tubes = all["tubes"].as_array().unwrap();
    let tube = tubes.iter().find(|t| t["vial"] == vial).unwrap();
    tube["minutes"].as_f64().unwrap()
}

#[test]
fn a_table_by_vial_is_taken_as_one_entry() {
    let home = fresh();
    home.write("counts.csv", table(COUNTS.len()));
    took(
        &home.run(&["take", FILE, "counts.csv"]),
        "33 readings taken",
        "33 of 33",
    );
    for (vial, counts) in COUNTS {
        assert_eq!(in_file(&home, vial), [f64::from(counts)], "vial {vial}");
    }
    let checked = home.run(&["check", FILE]).done();
    assert!(checked.out.contains("2 entries"), "{checked:?}");
    // No minutes column: those of the protocol, for the background its own.
    assert_eq!((minutes(&home, 1), minutes(&home, 33)), (2.0, 10.0));
}

#[test]
fn a_table_by_level_role_and_replicate() {
    let home = fresh();
    let text = "level,role,replicate,counts,minutes\n\
                1,total,a,227,2.5\n1,Total,2,210,\n1,nonspecific,B,56,2\n,background,1,267,\n";
    took(&take(&home, text), "4 readings taken", "4 of 33");
    for (vial, counts) in [(1, 227.0), (2, 210.0), (4, 56.0), (33, 267.0)] {
        assert_eq!(in_file(&home, vial), [counts], "vial {vial}");
    }
    let all = [1, 2, 4, 33].map(|v| minutes(&home, v));
    assert_eq!(all, [2.5, 2.0, 2.0, 10.0]);
}

#[test]
fn a_table_from_standard_input_with_a_mark_and_comments() {
    let home = fresh();
    let text = "\u{feff}# counter 2\r\nVIAL , Counts\r\n 1 , 227 \r\n";
    took(
        &home.run_with(&["take", FILE], text),
        "1 reading taken",
        "1 of 33",
    );
    assert_eq!(in_file(&home, 1), [227.0]);
}

#[test]
fn a_table_of_cpm_carries_the_counts_behind_them() {
    let home = fresh();
    took(&take(&home, "vial,cpm\n1,113.5\n"), "1 reading", "1 of 33");
    let result = summary(&home);
    let tube = &result["tubes"][1];
    // 113.5 cpm in the 2 min of the protocol.
    assert_eq!(
        (&tube["vial"], tube["counts"].as_f64()),
        (&1.into(), Some(227.0))
    );
}

#[test]
fn a_recount_adds_up_and_has_to_be_meant() {
    let home = fresh();
    took(&take(&home, &table(3)), "3 readings", "3 of 33");
    let before = home.bytes(FILE);
    let again = "vial,counts,minutes\n3,56,2\n1,341,3\n";
    let refused = take(&home, again);
    assert_eq!(refused.code, 65, "{refused:?}");
    for text in ["line 3", "vial 1", "has a reading already", "--recount"] {
        assert!(refused.err.contains(text), "{refused:?}");
    }
    assert_eq!(home.bytes(FILE), before);
    let meant = home.run_with(&["take", FILE, "-", "--recount"], again);
    took(&meant, "2 readings taken", "4 of 33");
    assert_eq!(in_file(&home, 1), [227.0, 341.0]);
    assert_eq!(in_file(&home, 3), [56.0]);
    let tube = &summary(&home)["tubes"][1];
    let sums = ["counts", "minutes"].map(|k| tube[k].as_f64());
    assert_eq!(sums, [Some(568.0), Some(5.0)]);
}

#[test]
fn a_bad_row_names_its_line_and_nothing_is_taken() {
    let places = "level,role,replicate,counts\n";
    let both = "vial,level,role,replicate,counts\n";
    let vials = "vial,counts\n";
    let timed = "vial,counts,minutes\n";
    let cases = [
        (vials, "5,341\n6,3x9\n", "line 3", "`3x9` is not a number"),
        (vials, "5,\n", "line 2", "counts"),
        (vials, "5,-3\n", "line 2", "negative"),
        (vials, "5,NaN\n", "line 2", "`NaN`"),
        (vials, "5,1e999\n", "line 2", "counts"),
        (vials, "5,4.812\n", "line 2", "`4.812` has a mark in it"),
        (vials, "5,\"4,812\"\n", "line 2", "`4,812` has a mark in it"),
        (vials, "99,1\n", "line 2", "no vial 99"),
        (vials, "five,1\n", "line 2", "`five` is not a vial number"),
        (vials, "5\n", "line 2", "header has 2"),
        (vials, "5,1,1\n", "line 2", "header has 2"),
        (
            vials,
            "5,341\n6,1\n5,341\n",
            "line 4",
            "vial 5 is in line 2 already",
        ),
        (vials, "1,227\n", "line 2", "has a reading already"),
        (vials, "", "line 1", "no row"),
        (timed, "5,341,0\n", "line 2", "more than zero"),
        (timed, "5,341,-2\n", "line 2", "more than zero"),
        (timed, "5,341,\"2,5\"\n", "line 2", "decimal comma"),
        (timed, "5,341,soon\n", "line 2", "`soon`"),
        (places, "9,total,a,1\n", "line 2", "no level 9"),
        (
            places,
            ",total,a,1\n",
            "line 2",
            "not the number of a level",
        ),
        (
            places,
            "2,background,1,1\n",
            "line 2",
            "background has no level",
        ),
        (places, "2,blank,1,1\n", "line 2", "`blank` is not one of"),
        (places, "2,total,c,1\n", "line 2", "no total c at level 2"),
        (places, "2,total,0,1\n", "line 2", "`0` is not a letter"),
        (both, "5,1,total,a,1\n", "line 2", "vial 5"),
        (both, "5,2,nonspecific,a,1\n", "line 2", "vial 5"),
        (both, "5,2,total,b,1\n", "line 2", "vial 5"),
        (both, "5,99,total,a,1\n", "line 2", "vial 5"),
        (both, "5,2,,,1\n6,2,extra,,1\n", "line 3", "vial 6"),
        (
            "vial,role,counts\n",
            "5,nonspecific,1\n",
            "line 2",
            "vial 5",
        ),
        ("vial,count\n", "5,1\n", "line 1", "no column `count`"),
        ("vial\n", "5\n", "line 1", "counts"),
        ("counts\n", "5\n", "line 1", "vial"),
        ("level,role,counts\n", "1,total,5\n", "line 1", "replicate"),
        ("vial,counts,cpm\n", "5,1,1\n", "line 1", "both"),
        ("vial,vial,counts\n", "5,5,1\n", "line 1", "twice"),
    ];
    let home = fresh();
    let _ = take(&home, &table(2)).done();
    let before = home.bytes(FILE);
    for (header, rows, line, what) in cases {
        let text = format!("{header}{rows}");
        let ran = take(&home, &text);
        assert_eq!(ran.code, 65, "{text:?}: {ran:?}");
        for said in ["standard input", line, what, "nothing was taken"] {
            assert!(ran.err.contains(said), "{text:?}: no `{said}`: {ran:?}");
        }
        assert_eq!(ran.out, "");
        assert_eq!(home.bytes(FILE), before, "{text:?}");
    }
    // A file is called by its name.
    home.write("counts.csv", "vial,counts\n5,x\n");
    let named = home.run(&["take", FILE, "counts.csv"]);
    assert!(named.err.contains("counts.csv line 2"), "{named:?}");
    // And a row that says the vial and its place, or part of it, is taken where they agree.
    let agreed = take(
        &home,
        &format!("{both}5,2,total,a,341\n6,,,,339\n7,2,nonspecific,,69\n"),
    );
    took(&agreed, "3 readings", "5 of 33");
}

#[test]
fn files_that_are_not_there_or_no_text() {
    let home = fresh();
    let before = home.bytes(FILE);
    home.write("bytes.csv", [0xff, 0xfe, b'v', 0]);
    let cases = [
        (["take", FILE, "nowhere.csv"], 74, "nowhere.csv"),
        (["take", "nowhere.ron", "bytes.csv"], 65, "UTF-8"),
        (
            ["take", FILE, "bytes.csv"],
            65,
            "bytes.csv: not a text in UTF-8",
        ),
    ];
    for (line, code, said) in cases {
        let ran = home.run(&line);
        assert_eq!((ran.code, ran.out.as_str()), (code, ""), "{ran:?}");
        assert!(ran.err.contains(said), "{ran:?}");
    }
    let nowhere = home.run_with(&["take", "nowhere.ron", "-"], &table(1));
    assert_eq!(nowhere.code, 74, "{nowhere:?}");
    assert!(nowhere.err.contains("nowhere.ron"), "{nowhere:?}");
    assert!(!home.path("nowhere.ron").exists());
    assert_eq!(home.bytes(FILE), before);
}

#[test]
fn a_titration_in_decimal_comma_takes_no_point() {
    let home = Home::new();
    let example = home.run(&["new", "--example"]).done().out;
    let comma = example
        .replace("mark: Point", "mark: Comma")
        .replace("\"0.", "\"0,");
    home.write("p.ron", comma);
    let _ = home.run(&["new", FILE, "--from", "p.ron"]).done();
    let before = home.bytes(FILE);
    let refusals = [
        ("vial,counts\n5,4.812\n", "`4.812` has a mark in it"),
        ("vial,counts\n5,\"4,812\"\n", "`4,812` has a mark in it"),
        (
            "vial,counts,minutes\n5,4812,2.5\n",
            "`2.5` has a decimal point",
        ),
    ];
    for (text, said) in refusals {
        let ran = take(&home, text);
        assert_eq!(ran.code, 65, "{ran:?}");
        assert!(ran.err.contains(said), "{ran:?}");
        assert_eq!(home.bytes(FILE), before);
    }
    took(
        &take(&home, "vial,counts,minutes\n5,4812,\"2,5\"\n"),
        "1 reading",
        "1 of 33",
    );
    assert_eq!(minutes(&home, 5), 2.5);
    // Semicolons and tabs part the columns where the header has them.
    took(
        &take(&home, "vial;counts;minutes\n6;4812;2,5\n"),
        "1 reading",
        "2 of 33",
    );
    took(
        &take(&home, "vial\tcounts\tminutes\n7\t4812\t1,5\n"),
        "1 reading",
        "3 of 33",
    );
    assert_eq!((minutes(&home, 6), minutes(&home, 7)), (2.5, 1.5));
}

#[test]
fn a_file_changed_outside_is_taken_on_with_a_notice() {
    let home = fresh();
    let _ = take(&home, &table(3)).done();
    let text = String::from_utf8(home.bytes(FILE)).unwrap();
    let other = format!("raw:\"{0}\",value:{0}.0", counts_of(1) + 1);
    let changed = text.replacen("raw:\"227\",value:227.0", &other, 1);
    assert_ne!(changed, text);
    home.write(FILE, changed);
    let ran = take(&home, "vial,counts\n5,341\n");
    took(&ran, "1 reading taken", "4 of 33");
    assert!(
        ran.err.contains("changed outside rackside: entries 2"),
        "{ran:?}"
    );
    // Writing on does not wash the change away.
    assert_eq!(home.run(&["check", FILE]).code, 65);
}
