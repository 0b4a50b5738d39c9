//! Racks of every kind typed at the bench: fields after the number, numbers below zero, cells, readers, and the working of a tube.

use crate::scenes::{
    self, CELLS, COUNTER, DECAYS, FREE, LADDER, NET, QUENCH, READER, ROLES, fill, printed, put,
    typed_in,
};
use crate::sitting::Sitting;
use rackside::app::keys::Key;
use rackside::app::{Effect, Layer, working_lines};
use rackside::assay::{Counted, Field, Reading, Role, Scale, Side, Titration, TubeNo};
use rackside::notebook::What;

/// The reading kept last.
fn kept(s: &Sitting) -> &Reading {
    match s.newest() {
        What::Counted { readings } => &readings[0].reading,
        other => panic!("{other:?}: {}", s.said()),
    }
}

fn asked(s: &Sitting) -> Option<Field> {
    s.desk().bench.field.more()
}

fn line(s: &Sitting) -> &str {
    s.desk().bench.line.value()
}

/// The example with other fields per vial.
fn with_fields(fields: &str, more: &[(&'static str, &'static str)]) -> Sitting {
    let mut t = crate::sitting::example(more);
    t.protocol.counter.fields = rackside::assay::Fields::parse(fields).unwrap();
    t.protocol.check().unwrap();
    Sitting::at(crate::sitting::opened(t))
}

#[test]
fn every_field_is_walked_by_enter() {
    let mut s = with_fields("cpm, quench, minutes", &QUENCH);
    s.types("30.5\n");
    assert_eq!(asked(&s), Some(Field::Quench));
    s.types("395,\n");
    assert!(
        s.refused() && s.said().contains("decimal comma"),
        "{}",
        s.said()
    );
    s.press(Key::Backspace);
    s.types("\n");
    assert_eq!(asked(&s), Some(Field::Minutes));
    assert!(
        s.text()
            .contains("gross cpm 30.5, quench 395, minutes (Enter for 10.00) >")
    );
    s.types("\n");
    let r = kept(&s);
    assert_eq!(
        (r.raw.as_str(), r.value, r.scale),
        ("30.5 / 395 / 10.00", 30.5, Scale::Cpm)
    );
    assert_eq!(
        (r.quench, r.minutes, r.own_minutes),
        (Some(395.0), 10.0, false)
    );
    s.types("200\n400\n4.5\n");
    let r = kept(&s);
    assert_eq!(r.raw, "200 / 400 / 4.5");
    assert_eq!(
        (r.quench, r.minutes, r.own_minutes),
        (Some(400.0), 4.5, true)
    );
}

#[test]
fn a_refusal_is_said_at_its_field_and_loses_nothing() {
    let mut s = with_fields("cpm, quench, minutes", &QUENCH);
    s.types("30.5\n400\n\n30.5\n\n");
    assert!(
        s.refused() && s.said().contains("indicator is wanted"),
        "{}",
        s.said()
    );
    s.types("450\n");
    assert!(
        s.refused() && s.said().contains("outside the standards"),
        "{}",
        s.said()
    );
    // All of it is to be seen.
    assert!(s.text().contains("which go from 380 to 410"));
    // Not yet on to the minutes, and both numbers still there.
    assert_eq!((asked(&s), line(&s)), (Some(Field::Quench), "450"));
    s.times(3, Key::Backspace).types("400\n2000\n");
    assert!(
        s.refused() && s.said().contains("far from 2.00"),
        "{}",
        s.said()
    );
    s.types("12\n");
    assert_eq!((kept(&s).raw.as_str(), s.entries()), ("30.5 / 400 / 12", 3));
    // The same with the quench last.
    let mut s = typed_in(&QUENCH, 2);
    s.types("200\n500\n");
    assert!(
        s.refused() && s.said().contains("outside the standards"),
        "{}",
        s.said()
    );
    assert_eq!((asked(&s), line(&s)), (Some(Field::Quench), "500"));
    s.times(3, Key::Backspace).types("410\n");
    assert_eq!(kept(&s).raw, "200 / 410");
}

#[test]
fn without_a_time_a_short_lived_label_is_refused_at_the_number() {
    let changes = &DECAYS[..2];
    let mut s = with_fields("counts, minutes", &[changes, &DECAYS[3..]].concat());
    // Background has no label to decay.
    s.types("260\n\n");
    assert_eq!(kept(&s).value, 260.0);
    s.types("1203\n");
    assert!(
        s.refused() && s.said().contains("short-lived label, no time"),
        "{}",
        s.said()
    );
    assert_eq!((asked(&s), line(&s)), (None, "1203"));
}

#[test]
fn the_time_a_count_began() {
    let at = |typed: &str| {
        let mut s = typed_in(&DECAYS, 1);
        s.types("1203\n").types(typed).types("\n\n");
        kept(&s)
            .counted
            .unwrap_or_else(|| panic!("{}", s.said()))
            .to_string()
    };
    assert_eq!(at("1403"), "2031-05-04T14:03:00+02:00");
    assert_eq!(at("140325"), "2031-05-04T14:03:25+02:00");
    assert_eq!(at("14:03"), "2031-05-04T14:03:00+02:00");
    assert_eq!(at("14:03:25"), "2031-05-04T14:03:25+02:00");
    // The first such time that is not before the assay at 14:00.
    assert_eq!(at("0130"), "2031-05-05T01:30:00+02:00");
    assert_eq!(at("203105050403"), "2031-05-05T04:03:00+02:00");
    assert_eq!(at("20310505 040325"), "2031-05-05T04:03:25+02:00");
    // The raw text has what was typed, and the day is read back.
    let mut s = typed_in(&DECAYS, 1);
    s.types("1203\n1403\n\n");
    assert_eq!(kept(&s).raw, "1203 / 1403 / 2.00");
    assert!(
        s.said().ends_with("at 14:03:00, vial 1, 0.05 nM, total a"),
        "{}",
        s.said()
    );
    // A recount comes after the count that is there.
    s.types("+1190\n1430\n\n");
    assert_eq!(
        kept(&s).counted.unwrap().to_string(),
        "2031-05-04T14:30:00+02:00"
    );
    // A time before it would be that of the day after, when nothing is left of such a label.
    s.types("+1180\n1401\n");
    assert!(
        s.refused() && s.said().contains("is the day right?"),
        "{}",
        s.said()
    );
}

#[test]
fn a_time_that_cannot_be_is_said_before_the_minutes() {
    let mut s = typed_in(&DECAYS, 1);
    s.types("1203\n");
    for (typed, says) in [
        ("203105041330", "before the assay"),
        ("2560", "a time is typed as 1403"),
        ("14", "a time is typed as 1403"),
        ("", "is wanted"),
    ] {
        s.types(typed).types("\n");
        assert!(
            s.refused() && s.said().contains(says),
            "{typed}: {}",
            s.said()
        );
        assert_eq!((asked(&s), line(&s)), (Some(Field::At), typed));
        s.times(14, Key::Backspace);
    }
    s.types("1403\n");
    assert_eq!(asked(&s), Some(Field::Minutes));
}

#[test]
fn what_is_typed_stays_in_sight() {
    let mut s = with_fields("cpm, quench, minutes", &QUENCH);
    s.types("123456789.25\n400.125\n12.5");
    for (columns, so_far) in [
        (120, "quench 400.125"),
        (80, "gross cpm 123456789.25"),
        (60, ""),
    ] {
        let text = s.screen(columns, 24).text();
        let prompt = text.lines().find(|l| l.contains("(Enter for")).unwrap();
        assert!(
            prompt.contains(" > 12.5") && prompt.contains(so_far),
            "{prompt}"
        );
    }
}

#[test]
fn keys_in_the_middle_drop_nothing_and_minus_drops_all() {
    let mut s = typed_in(&DECAYS, 1);
    s.types("1203\n1403\n");
    let field = s.desk().bench.field.clone();
    for key in ["*", "+", "/", "s", "g"] {
        s.types(key);
        assert!(s.refused(), "{key}");
        assert_eq!(s.desk().bench.field, field, "{key}");
    }
    let before = s.entries();
    s.types("-");
    assert_eq!((asked(&s), line(&s), s.entries()), (None, "", before));
    // A colon is of a time alone.
    s.types("12:03\n");
    assert_eq!(line(&s), "");
}

#[test]
fn numbers_below_zero() {
    // 25 cpm were taken off: 0- turns the sign, on a net reading alone.
    let mut s = typed_in(&NET, 1);
    s.types("0-3.2\n");
    assert_eq!((kept(&s).value, kept(&s).raw.as_str()), (-3.2, "-3.2"));
    s.types("0-30\n");
    assert!(
        s.refused() && s.said().contains("lower than the background"),
        "{}",
        s.said()
    );
    assert_eq!(line(&s), "-30");
    s.types("-");
    assert_eq!(line(&s), "", "- clears a number below zero too");
    let before = s.entries();
    s.types("0--");
    assert_eq!((line(&s), s.entries()), ("", before));
    s.types("12-");
    assert_eq!(
        (line(&s), s.entries()),
        ("", before),
        "any other line is cleared"
    );
    s.types("0.0-");
    assert_eq!((line(&s), s.entries()), ("", before));
    s.types("-");
    assert!(
        matches!(s.newest(), What::TakenBack(_)),
        "on an empty line - takes back"
    );
    // Zero is still a reading.
    s.types("0\n");
    assert_eq!(kept(&s).value, 0.0);
    // Gross counts are never below zero.
    let mut s = Sitting::fresh(&[]);
    s.types("0-");
    assert_eq!((line(&s), s.entries()), ("", 1));
    // A reader's blank may be.
    let mut s = Sitting::fresh(&READER);
    s.types("0-0.4\n");
    assert_eq!((kept(&s).value, kept(&s).scale), (-0.4, Scale::Signal));
}

#[test]
fn the_prompt_says_what_the_vial_is() {
    for (changes, vials, says) in [
        (
            &CELLS[..],
            1,
            ["TOTAL a   PROTEIN SIDE", "gross counts in 2.00 min >"],
        ),
        (
            &CELLS[..],
            2,
            ["TOTAL a   LIGAND SIDE", "gross counts in 2.00 min >"],
        ),
        (&READER[..], 0, ["BLANK a", "signal >"]),
        (&READER[..], 3, ["0.01 nM   STANDARD a", "signal >"]),
        (
            &ROLES[..],
            5,
            ["0.05 nM   NO RECEPTOR a", "gross counts in 2.00 min >"],
        ),
        (&NET[..], 1, ["TOTAL a", "net cpm over 2.00 min >"]),
    ] {
        let text = typed_in(changes, vials).text();
        for part in says {
            assert!(text.contains(part), "{part}\n{text}");
        }
    }
}

/// Types a rack to its end, as the printout says it.
fn to_the_end(s: &mut Sitting) {
    let t = s.desk().titration().clone();
    for tube in 0..t.tubes.len() {
        for field in printed(&t, tube) {
            s.types(&field).types("\n");
        }
        assert!(!s.refused(), "vial {}: {}", t.tubes[tube].no, s.said());
    }
    assert_eq!(s.desk().titration().progress().0, t.tubes.len());
}

fn created(s: &Sitting) -> &Titration {
    s.seen
        .iter()
        .find_map(|e| match e {
            Effect::Create { titration, .. } => Some(&**titration),
            _ => None,
        })
        .unwrap()
}

#[test]
fn a_dialysis_rack_from_nothing() {
    let aliquots = [("protein aliquot", "100 uL"), ("ligand aliquot", "100 uL")];
    let mut s = scenes::drafted_kind("3", &aliquots);
    s.press(Key::PageDown);
    fill(&mut s, &LADDER[..5]);
    s.press(Key::PageDown);
    fill(&mut s, &COUNTER);
    s.types("\n");
    let t = created(&s).clone();
    assert!(matches!(
        t.protocol.separation.counted,
        Counted::BothSides { .. }
    ));
    assert_eq!(t.tubes.len(), 65);
    assert_eq!(
        (t.tubes[1].side, t.tubes[2].side),
        (Some(Side::Protein), Some(Side::Ligand))
    );
    to_the_end(&mut s);
    let analysis = &s.desk().analysed.as_ref().unwrap().analysis;
    assert!(analysis.fit().is_some(), "{}", s.text());
}

#[test]
fn a_rack_of_cpm_and_quench_from_nothing() {
    let mut s = scenes::drafted();
    fill(&mut s, &LADDER);
    put(&mut s, "typed per vial", "cpm, quench");
    put(&mut s, "quench standards", "410 42 %; 380 38 %");
    s.press(Key::PageDown);
    s.types("\n");
    let p = &created(&s).protocol;
    assert!(p.counter.efficiency.is_unset() && p.counter.quench.len() == 2);
    to_the_end(&mut s);
    assert!(
        s.desk().analysed.as_ref().unwrap().analysis.fit().is_some(),
        "{}",
        s.text()
    );
}

#[test]
fn a_reader_from_nothing() {
    let reader = [("standards", "0.01 0.05 0.1 nM"), ("label", "dye 7")];
    let mut s = scenes::drafted_kind("4", &reader);
    s.press(Key::PageDown);
    fill(&mut s, &LADDER[..5]);
    put(&mut s, "background vials", "3");
    put(&mut s, "of each standard", "2");
    s.times(2, Key::PageDown).types("\n");
    let t = created(&s).clone();
    let of = |role| t.tubes.iter().filter(|x| x.role == role).count();
    assert_eq!((of(Role::Background), of(Role::Standard)), (3, 6));
    assert!(
        t.protocol.counter.efficiency.is_unset() && t.protocol.ligand.specific_activity.is_unset()
    );
    to_the_end(&mut s);
    assert!(
        s.desk().analysed.as_ref().unwrap().analysis.fit().is_some(),
        "{}",
        s.text()
    );
}

#[test]
fn what_is_typed_of_another_kind_is_not_kept_hidden() {
    // From a counter to a reader and back: what no longer applies is not read.
    let mut s = scenes::drafted();
    s.press(Key::PageUp);
    put(&mut s, "what is counted", "4");
    put(&mut s, "standards", "1 nM");
    assert_eq!(s.draft().forms.counter.value("typed per vial"), "signal");
    let p = s
        .draft()
        .forms
        .protocol()
        .unwrap_or_else(|e| panic!("{e:?}"));
    assert!(p.ligand.specific_activity.is_unset() && p.counter.minutes.is_unset());
    put(&mut s, "what is counted", "1");
    assert_eq!(s.draft().forms.counter.value("typed per vial"), "counts");
    fill(&mut s, &[""]);
    put(&mut s, "label", "H-3");
    let mut forms = s.draft().forms.clone();
    let efficiency = forms
        .counter
        .fields
        .iter_mut()
        .find(|f| f.spec.name == "efficiency");
    efficiency.unwrap().input = tui_input::Input::new("45 %".into());
    assert_eq!(forms.protocol().unwrap().separation.counted, Counted::Bound);
}

#[test]
fn a_correction_keeps_what_the_forms_of_another_kind_hold() {
    for changes in [
        &CELLS[..],
        &READER[..],
        &FREE[..],
        &QUENCH[..],
        &NET[..],
        &DECAYS[..],
        &ROLES[..],
    ] {
        let mut s = typed_in(changes, 6);
        let before = s.desk().titration().protocol.clone();
        s.times(3, Key::PageUp).press(Key::Down);
        s.press(Key::Ctrl('u'));
        s.types("another").times(3, Key::PageDown);
        s.types("a better name\n");
        let mut wanted = before;
        wanted.title = "another".into();
        match s.newest() {
            What::Amended { protocol, .. } => assert_eq!(**protocol, wanted),
            other => panic!("{changes:?} {other:?}: {}", s.said()),
        }
    }
}

#[test]
fn the_working_of_a_tube() {
    let mut s = typed_in(&CELLS, 30);
    s.types("/7\ns");
    let layer = |s: &Sitting| match s.desk().layers.last() {
        Some(Layer::Working { tube, top, .. }) => Some((tube.0, *top)),
        _ => None,
    };
    assert_eq!(layer(&s), Some((7, 0)));
    assert!(s.text().contains("vial 7, 0.1 nM, total a, protein side"));
    s.press(Key::Down);
    assert_eq!(layer(&s), Some((7, 1)));
    s.press(Key::Up);
    s.press(Key::Up);
    assert_eq!(layer(&s), Some((7, 0)));
    // Space goes through to the last line, then to the top.
    let all = working_lines(s.desk(), TubeNo(7));
    let mut seen = Vec::new();
    loop {
        let text = s.text();
        seen.extend(all.iter().filter(|l| text.contains(l.as_str())));
        s.types(" ");
        if layer(&s) == Some((7, 0)) {
            break;
        }
    }
    assert!(all.len() > 22 && all.iter().all(|l| seen.contains(&l)));
    // A vial number goes to another tube, one that is not there is said.
    s.types("13\n");
    assert_eq!(layer(&s), Some((13, 0)));
    s.types("999\n");
    assert!(s.refused() && s.text().contains("there is no vial 999"));
    let before = s.entries();
    s.press(Key::Esc);
    assert_eq!(
        (layer(&s), s.entries(), s.desk().bench.at),
        (None, before, TubeNo(7))
    );
    // One without a reading says so.
    s.types("/40\ns");
    assert!(s.text().contains("no reading yet"));
}

/// No run tells when a recount was made: its time is asked for, though none is typed of other vials.
#[test]
fn a_recount_of_a_short_lived_label_is_asked_its_time() {
    let run = (
        "fields: Counts",
        "fields: Counts, run: (start: \"2031-05-04 14:05\", changer: \"10 s\")",
    );
    let mut s = Sitting::fresh(&[&DECAYS[..2], &DECAYS[3..], &[run]].concat());
    s.types("260\n1203\n");
    assert_eq!(kept(&s).counted, None);
    s.types("+1150\n");
    assert_eq!(asked(&s), Some(Field::At), "{}", s.said());
    s.types("1630\n");
    assert_eq!(
        kept(&s).counted.unwrap().to_string(),
        "2031-05-04T16:30:00+02:00"
    );
}
