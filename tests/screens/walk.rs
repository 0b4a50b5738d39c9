//! The walk: a titration typed through its forms, and an open one corrected.

use crate::scenes::{self, COUNTER, LADDER, PROTOCOL, fill};
use crate::sitting::{Sitting, WHO, example, look, opened};
use proptest::prelude::*;
use rackside::app::keys::Key;
use rackside::app::{Access, App, Effect, Layer, LineFor, Scene, Step, page};
use rackside::assay::{Lab, Protocol, Titration, Unlabelled};
use rackside::notebook::What;
use rackside::units::Mark;

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
fn keys_alone_give_the_titration_of_the_sheet() {
    let mut s = scenes::complete();
    assert_eq!(
        s.draft().path.as_ref().map(|p| p.value()),
        Some("ob-31-binding-to-retina-membranes-batch-9.ron")
    );
    s.types("\n");
    // Without decay to compute, no activity date is asked for.
    let undated = example(&[("activity_date: \"2031-05-04\",", "")]);
    assert_eq!(*created(&s), undated);
    assert_eq!((s.desk().step, s.entries()), (Step::Tubes, 1));
    assert_eq!(s.desk().notebook.entries()[0].who, WHO);
    // Leaving leads back to where it began.
    s.types("q");
    assert!(matches!(s.app.scene, Scene::Start(_)));
}

#[test]
fn a_ladder_of_equal_ratios_with_exceptions() {
    let mut s = scenes::drafted();
    fill(
        &mut s,
        &[
            "", "50 pM", "5 nM", "5", "2", "3", "1", "3: 3+0", "", "", "2",
        ],
    );
    fill(&mut s, &COUNTER);
    s.types("\n");
    let sheet = example(&[
        ("activity_date: \"2031-05-04\",", ""),
        (
            r#"List(["0.05 nM", "0.1 nM", "0.2 nM", "0.5 nM", "1 nM", "2 nM", "5 nM", "10 nM"])"#,
            r#"Geometric(lowest: "50 pM", highest: "5 nM", number: 5)"#,
        ),
        ("EachFromStock,  ", "Serial,  "),
        ("total: 2, ", "total: 3, "),
        ("nonspecific: 2,", "nonspecific: 1,"),
        ("// except: [(level: 3,", "except: [(level: 3,"),
        ("background: 1,  ", "background: 2,  "),
    ]);
    assert_eq!(*created(&s), sheet);
}

#[test]
fn errors_stand_beside_their_fields() {
    let mut s = Sitting::at_start(Vec::new());
    s.types("n");
    fill(&mut s, &PROTOCOL[..5]);
    s.types("80 Ci\n2\n2031-5-4\n");
    let text = s.text();
    let line = |name: &str| text.lines().find(|l| l.contains(name)).unwrap().to_string();
    assert!(
        line("specific activity").contains("has the unit `Ci`"),
        "{text}"
    );
    assert!(line("activity date").contains("2031-05-04"), "{text}");
    assert!(line("volume").contains("needed"), "{text}");
    assert!(!line("  ligand").contains("needed"), "{text}");
}

#[test]
fn an_incomplete_step_is_gone_back_to() {
    let mut s = Sitting::at_start(Vec::new());
    s.types("n").times(3, Key::PageDown);
    let field = |s: &Sitting| s.draft().form().current().unwrap().spec.name;
    assert_eq!((s.draft().step, field(&s)), (Step::Protocol, "title"));
    assert!(s.refused() && s.said().contains("protocol is not complete: title"));
    let mut s = scenes::drafted();
    s.times(2, Key::PageDown);
    assert_eq!((s.draft().step, field(&s)), (Step::Ladder, "lowest"));
    let mut s = scenes::drafted();
    fill(&mut s, &LADDER);
    s.press(Key::PageDown);
    assert_eq!((s.draft().step, field(&s)), (Step::Counter, "efficiency"));
    assert!(s.draft().path.is_none());
}

#[test]
fn an_untouched_draft_is_left_at_once_and_another_after_a_question() {
    let mut s = Sitting::at_start(Vec::new());
    s.types("n").press(Key::Esc);
    assert!(matches!(s.app.scene, Scene::Start(_)));
    s.types("n\nX").press(Key::Esc);
    assert!(s.draft().leaving);
    s.types("n");
    assert_eq!(s.draft().forms.protocol.value("title"), "X");
    s.press(Key::Esc);
    s.types("y");
    assert!(matches!(s.app.scene, Scene::Start(_)));
}

#[test]
fn numbers_follow_the_decimal_mark() {
    let mut s = scenes::drafted();
    fill(&mut s, &LADDER);
    fill(&mut s, &COUNTER[..8]);
    s.types("2");
    let value = |s: &Sitting| s.draft().forms.counter.value("its factor").to_string();
    assert_eq!(value(&s), "0,7");
    s.types("1");
    assert_eq!(value(&s), "0.7");
    // The lab's own mark is in the forms from the start.
    let lab = Lab {
        mark: Mark::Comma,
        ..Lab::default()
    };
    let (mut app, _) = App::start(lab, WHO.into(), look(80, 24));
    app.update(
        rackside::app::Event::Key(Key::Char('n')),
        crate::sitting::noon(),
    );
    let Scene::Draft(draft) = &app.scene else {
        panic!("no draft")
    };
    assert_eq!(draft.forms.counter.value("its factor"), "0,7");
    assert_eq!(
        draft.forms.counter.errors(),
        1,
        "the efficiency alone is wanted"
    );
}

/// To the forms of an open titration, through all three, and on to a step.
fn there_and_back(s: &mut Sitting, keys: &[Key]) {
    for key in keys {
        s.press(*key);
    }
}

const ROUND: [Key; 7] = [
    Key::PageUp,
    Key::PageUp,
    Key::PageUp,
    Key::PageDown,
    Key::PageDown,
    Key::PageDown,
    Key::PageDown,
];

fn nothing_new(what: &str, mut s: Sitting) {
    let before = s.entries();
    there_and_back(&mut s, &ROUND);
    assert_eq!(s.desk().step, Step::Result, "{what}: {}", s.said());
    assert!(
        s.desk().layers.is_empty() && s.desk().forms.is_none(),
        "{what}"
    );
    assert_eq!(s.entries(), before, "{what}");
    s.times(1, Key::PageUp)
        .times(1, Key::PageUp)
        .press(Key::Esc);
    assert_eq!(
        (s.desk().step, s.entries()),
        (Step::Tubes, before),
        "{what}"
    );
    assert!(!s.said().contains("dropped"), "{what}: {}", s.said());
}

#[test]
fn looking_at_the_forms_is_no_correction() {
    for (name, _) in rackside::app::DEMOS {
        nothing_new(name, Sitting::demo(name));
    }
    nothing_new("the example", Sitting::fresh(&[]));
    nothing_new(
        "commas",
        Sitting::fresh(&[
            ("\"0.", "\"0,"),
            ("mark: Point,", "mark: Comma,"),
            ("0.95", "0.995"),
        ]),
    );
    // What a sheet may hold and a form would write more plainly.
    nothing_new(
        "a sheet of its own mind",
        Sitting::fresh(&[
            ("title: \"OB-31", "title: \"  OB-31"),
            ("\"0.5 mL\"", "\" 500uL \""),
            ("\"0.1 nM\"", "\"100pM\""),
            ("0.95", "0.9544997361036416"),
            ("sd_ln: 0.7", "sd_ln: 0.6931471805599453"),
            ("centre: 0.06", "centre: 0.0612345678901"),
            (
                "unlabelled: SameLigand",
                "unlabelled: Other(name: \"same\")",
            ),
        ]),
    );
    let read_only = scenes::finished_with(
        Access::ReadOnly("open elsewhere".into()),
        Vec::new(),
        Vec::new(),
    );
    nothing_new("read only", read_only);
    let mut closed = Sitting::demo("finished");
    closed.types("cy");
    nothing_new("closed", closed);
}

#[test]
fn a_change_typed_back_is_no_correction() {
    let mut s = Sitting::demo("finished");
    let before = s.entries();
    s.times(3, Key::PageUp).press(Key::Down);
    s.press(Key::End);
    s.types("!");
    s.press(Key::Backspace);
    there_and_back(&mut s, &[Key::PageDown; 3]);
    assert_eq!((s.desk().step, s.entries()), (Step::Tubes, before));
}

/// At the efficiency of the finished demo.
fn at_efficiency() -> Sitting {
    let mut s = Sitting::demo("finished");
    s.times(1, Key::PageUp).press(Key::Down);
    assert_eq!(
        s.desk().form().unwrap().current().unwrap().spec.name,
        "efficiency"
    );
    s
}

#[test]
fn a_correction_is_recorded_with_its_reason() {
    let mut s = at_efficiency();
    let (before, kd) = (s.entries(), s.desk().titration().protocol.clone());
    s.types("44 %").press(Key::PageDown);
    assert!(matches!(
        s.desk().layers.last(),
        Some(Layer::Line {
            what: LineFor::Amend,
            ..
        })
    ));
    s.types("\n");
    assert!(
        s.refused() && s.said().contains("needs its reason"),
        "{}",
        s.said()
    );
    assert!(matches!(
        s.desk().layers.last(),
        Some(Layer::Line {
            what: LineFor::Amend,
            ..
        })
    ));
    assert_eq!(s.entries(), before);
    s.types("the quench standard was recounted\n");
    assert_eq!((s.desk().step, s.entries()), (Step::Tubes, before + 1));
    let What::Amended {
        protocol, reason, ..
    } = s.newest()
    else {
        panic!("{:?}", s.newest())
    };
    assert_eq!(reason, "the quench standard was recounted");
    let wanted = Protocol {
        counter: rackside::assay::Counter {
            efficiency: example(&[("45 %", "44 %")]).protocol.counter.efficiency,
            ..kd.counter.clone()
        },
        ..kd
    };
    assert_eq!(**protocol, wanted);
    assert!(s.desk().is_saved() && s.desk().is_current());
    let page = page(s.desk()).unwrap();
    let line = page
        .lines()
        .find(|l| l.contains('>') && l.contains("44 %"))
        .unwrap();
    assert!(line.contains("45 % > 44 %"), "{line}");
    assert!(page.contains("A. Sample: the quench standard was recounted"));
    // And it may be taken back like anything else.
    s.types("-");
    assert_eq!(
        s.desk().titration().protocol.counter.efficiency.text,
        "45 %"
    );
}

#[test]
fn a_level_is_corrected_and_keeps_its_number() {
    let mut s = Sitting::demo("finished");
    s.times(2, Key::PageUp).press(Key::Ctrl('u'));
    s.types("0.05 0.1 0.2 0.5 1 2 5 nM").times(2, Key::PageDown);
    assert_eq!(
        s.desk().step,
        Step::Ladder,
        "seven concentrations for eight levels"
    );
    assert!(s.refused());
    s.types(" 12 nM").times(2, Key::PageDown);
    s.types("the stock was diluted less\n");
    let levels = &s.desk().titration().levels;
    assert_eq!((levels[7].no.0, levels[7].added.base()), (8, 12.0));
    assert_eq!(levels[0].added.text, "0.05 nM");
    assert!(
        page(s.desk())
            .unwrap()
            .contains("10 nM, from stock > 12 nM, from stock")
    );
}

#[test]
fn a_wrong_value_keeps_one_there() {
    let mut s = at_efficiency();
    let before = s.entries();
    s.types("145 %").press(Key::PageDown);
    assert_eq!((s.desk().step, s.entries()), (Step::Counter, before));
    assert!(s.refused() && s.desk().layers.is_empty());
    assert!(s.said().contains("stands in the way"), "{}", s.said());
    // From another step one is led back to it.
    s.times(2, Key::PageUp).times(3, Key::PageDown);
    assert_eq!(s.desk().step, Step::Counter);
    assert_eq!(
        s.desk().form().unwrap().current().unwrap().spec.name,
        "efficiency"
    );
    assert_eq!(s.entries(), before);
}

#[test]
fn esc_drops_a_correction() {
    let mut s = at_efficiency();
    let before = s.entries();
    s.types("44 %").press(Key::PageDown);
    s.types("for no reas").press(Key::Esc);
    // The question is gone, what was typed is still there.
    assert_eq!(s.desk().step, Step::Counter);
    assert_eq!(
        s.desk().forms.as_ref().unwrap().counter.value("efficiency"),
        "44 %"
    );
    s.press(Key::Esc);
    assert_eq!(
        (s.desk().step, s.said()),
        (Step::Tubes, "the correction was dropped")
    );
    assert_eq!(s.entries(), before);
    assert_eq!(
        s.desk().titration().protocol.counter.efficiency.text,
        "45 %"
    );
    // A wrong value is dropped the same way.
    let mut s = at_efficiency();
    s.types("145 %").press(Key::Esc);
    assert_eq!((s.desk().step, s.entries()), (Step::Tubes, before));
}

#[test]
fn what_may_not_be_changed_takes_no_key() {
    let mut s = scenes::finished_with(
        Access::ReadOnly("open elsewhere".into()),
        Vec::new(),
        Vec::new(),
    );
    s.times(1, Key::PageUp).times(1, Key::Down).types("44 %");
    assert_eq!(
        s.desk().forms.as_ref().unwrap().counter.value("efficiency"),
        "45 %"
    );
}

#[test]
fn another_decimal_mark_is_one_correction_among_others() {
    // A titration without a decimal in it can change its mark; its numbers in the form follow.
    let t = example(&[
        ("\"0.5 mL\"", "\"500 uL\""),
        ("\"0.5 %\"", "\"1 %\""),
        (
            r#"["0.05 nM", "0.1 nM", "0.2 nM", "0.5 nM", "1 nM", "2 nM", "5 nM", "10 nM"]"#,
            r#"["50 pM", "1 nM", "2 nM", "5 nM", "10 nM"]"#,
        ),
    ]);
    let mut s = Sitting::at(opened(t));
    s.times(1, Key::PageUp).times(8, Key::Down).types("2");
    s.press(Key::PageDown);
    s.types("the printouts have commas\n");
    let p = &s.desk().titration().protocol;
    assert_eq!(p.counter.mark, Mark::Comma);
    assert_eq!(p.numbers.cv_prior.unwrap().sd_ln, 0.7);
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 64, failure_persistence: None, ..ProptestConfig::default() })]

    /// A correction of one field leaves every number of the others as it was, to the last bit.
    #[test]
    fn a_correction_changes_what_was_changed(
        confidence in 0.5f64..0.999,
        centre in 0.001f64..0.9,
        sd_ln in 0.01f64..9.0,
        comma in any::<bool>(),
        ki in any::<bool>(),
    ) {
        let mut t = if comma {
            example(&[("\"0.", "\"0,"), ("mark: Point,", "mark: Comma,")])
        } else {
            example(&[])
        };
        let numbers = &mut t.protocol.numbers;
        numbers.confidence = confidence;
        let prior = numbers.cv_prior.as_mut().unwrap();
        (prior.centre, prior.sd_ln) = (centre, sd_ln);
        if ki {
            t.protocol.nonspecific.unlabelled = Unlabelled::Other { name: "blocker".into(), ki: None };
        }
        let mut wanted = t.protocol.clone();
        wanted.title = "another".into();
        let mut s = Sitting::at(opened(t));
        s.times(3, Key::PageUp).times(1, Key::Down).press(Key::Ctrl('u'));
        s.types("another").times(3, Key::PageDown);
        s.types("a better name\n");
        let What::Amended { protocol, .. } = s.newest() else {
            panic!("{:?}: {}", s.newest(), s.said())
        };
        prop_assert_eq!(&**protocol, &wanted);
    }
}
