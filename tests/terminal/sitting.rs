//! A whole rack at the bench, from the example protocol to the summary.

use super::harness::{Home, Terminal, one_at_a_time};
use super::json::summary;
use super::rack::{COUNTS, FILE, SUSPECT, counts_of, fresh, role, type_through};
use rackside::units::significant;

fn first_half(bench: &mut Terminal) {
    bench.wait_prompt(33, "background");
    type_through(bench, [33, 1, 2, 3, 4]);

    // A slip that was kept is taken back, and the tube asks for its reading again.
    bench.wait_prompt(5, "total");
    bench.keypad("431\r");
    bench.wait_kept(5, 431);
    bench.wait_prompt(6, "total");
    bench.keypad("-");
    bench.wait("431 taken back", |s| {
        s.has_row(&["taken back", "431", "vial 5"])
    });
    bench.wait_prompt(5, "total");

    // A slip that is still on the line is cleared.
    bench.keypad("314");
    bench.wait("314 on the line", |s| s.has_row(&["gross counts", "314"]));
    bench.keypad("-");
    bench.wait("an empty line", |s| {
        s.has("gross counts") && !s.has_row(&["gross counts", "314"])
    });
    type_through(bench, 5..=10);

    // The tube just kept is counted once more: its counts and minutes add up.
    bench.keypad("+");
    bench.wait("the recount of vial 10", |s| {
        s.has_row(&["RECOUNT", "vial 10"])
    });
    bench.keypad("530\r");
    bench.wait_kept(10, 530);
    type_through(bench, [11, 12]);

    // Out of turn and back.
    bench.wait_prompt(13, "total");
    bench.keypad("/27\r");
    type_through(bench, [27]);
    bench.wait_prompt(28, "nonspecific");
    bench.keypad("/13\r");
    type_through(bench, [13, 14]);

    // The tube just kept is flagged with a digit.
    bench.keypad("*");
    bench.wait_text("filter torn");
    bench.keypad("2");
    bench.wait("vial 14 flagged", |s| {
        s.has_row(&["suspect", "filter torn", "vial 14"])
    });
    type_through(bench, [15, 16]);
}

/// Kd as the summary has it stands on the screen.
fn same_kd(bench: &Terminal, home: &Home) {
    let kd = &summary(home)["fit"]["parameters"][0];
    assert_eq!(kd["name"], "kd_nm");
    let kd = significant(kd["estimate"].as_f64().unwrap(), 3);
    bench.wait(&format!("Kd {kd} on the screen"), |s| {
        s.has_row(&["Kd", &kd])
    });
}

#[test]
fn a_rack_is_typed_on_the_keypad_left_resumed_and_summed_up() {
    let _one = one_at_a_time();
    let home = fresh();
    let mut bench = home.sit(&["open", FILE]);
    first_half(&mut bench);
    bench.wait_saved(16, counts_of(16));
    bench.keys("q");
    assert!(bench.end().success());
    assert!(bench.by_lines());

    let mut bench = home.sit(&["open", FILE]);
    bench.wait_prompt(17, "total");
    assert!(bench.shown().has("18 of 33"));
    // Vial 27 has its reading and is passed over.
    type_through(&mut bench, (17..=26).chain(28..=32));
    bench.wait_saved(32, counts_of(32));
    assert!(bench.shown().has("33 of 33"));
    same_kd(&bench, &home);
    bench.keys("q");
    assert!(bench.end().success());

    let result = summary(&home);
    let tubes = result["tubes"].as_array().unwrap();
    assert_eq!(tubes.len(), COUNTS.len());
    for (tube, (vial, counts)) in tubes.iter().zip(COUNTS) {
        assert_eq!(tube["vial"], vial);
        assert_eq!(tube["role"], role(vial));
        let (counts, minutes) = match vial {
            10 => (counts + 530, 4.0),
            33 => (counts, 10.0),
            _ => (counts, 2.0),
        };
        assert_eq!(tube["counts"].as_f64(), Some(f64::from(counts)), "{vial}");
        assert_eq!(tube["minutes"].as_f64(), Some(minutes), "vial {vial}");
        assert_eq!(tube["suspect"], vial == SUSPECT, "vial {vial}");
    }
    assert_eq!(tubes[14]["suspect_reason"], "filter torn");
    let kd = |fit: &str| {
        let p = &result[fit]["parameters"][0];
        let ends = ["low", "estimate", "high"].map(|k| p[k].as_f64().unwrap());
        assert!(ends[0] < ends[1] && ends[1] < ends[2], "{fit}: {ends:?}");
        ends[1]
    };
    // 32 tubes have a level; the flagged one is left out of one fit and not of the other.
    assert_eq!(result["fit"]["tubes_used"], 31);
    assert_eq!(result["without_flags"]["tubes_used"], 32);
    assert!((kd("fit") / kd("without_flags")).ln().abs() > 1e-3);
}

#[test]
fn a_screen_too_small_keeps_what_is_typed() {
    let _one = one_at_a_time();
    let home = fresh();
    let mut bench = home.sit(&["open", FILE]);
    bench.wait_prompt(33, "background");
    bench.keypad("26");
    bench.wait("26 on the line", |s| s.has_row(&["gross counts", "26"]));
    bench.resize(40, 10);
    bench.wait_text("too small");
    bench.resize(20, 3);
    bench.wait("too small", |s| s.has("too small") && s.rows.len() == 3);
    bench.resize(120, 40);
    bench.wait("the line once more", |s| s.has_row(&["gross counts", "26"]));
    bench.keypad("7\r");
    bench.wait_saved(33, 267);
    bench.resize(80, 24);
    bench.wait_prompt(1, "total");
    bench.keypad("227\r");
    bench.wait_saved(1, 227);
    bench.keys("q");
    assert!(bench.end().success());
}
