//! There and back through the forms.

use super::*;
use crate::assay::{
    BlankKind, Carrier, CvPrior, DisplayUnit, Fields, Model, QuenchStandard, Run, SitesUnit,
    Sticks, Subtracted, Titration, Unlabelled, When,
};
use crate::units::{Amount, Dimension};

fn example() -> Titration {
    Sheet::parse(Sheet::EXAMPLE).unwrap().titration().unwrap()
}

fn amount<D: Dimension>(text: &str) -> Amount<D> {
    let mark = if text.contains(',') {
        Mark::Comma
    } else {
        Mark::Point
    };
    Amount::parse(text, mark).unwrap()
}

fn fields(text: &str) -> Fields {
    Fields::parse(text).unwrap()
}

fn when(text: &str) -> Option<When> {
    Some(When::parse(text).unwrap())
}

/// Every setting that a protocol can have beside those of the example, for a counter.
fn full(counted: Counted) -> Protocol {
    let mut p = example().protocol;
    p.separation.counted = counted;
    p.separation.added_counted = Some(amount("10 %"));
    p.ligand.label = "Xx-9".into();
    p.ligand.decay = Some(Carrier::ProductInert);
    p.ligand.half_life = Some(amount("59.4 d"));
    p.ligand.atoms = Some(2);
    p.ligand.bindable = Some(amount("92 %"));
    p.ligand.activity_date = when("2031-05-04");
    p.incubation.assayed = when("2031-05-20 09:30");
    p.nonspecific.unlabelled = Unlabelled::Other {
        name: "B-7".into(),
        ki: Some(amount("2 nM")),
    };
    p.counter.fields = fields("net dpm, quench, minutes, at");
    p.counter.quench = [("410.5", "42 %"), ("380", "38.5 %")]
        .map(|(indicator, efficiency)| QuenchStandard {
            indicator: indicator.parse().unwrap(),
            efficiency: amount(efficiency),
        })
        .into();
    p.counter.dead_time = Some(amount("5 us"));
    p.counter.wanted_error = Some(amount("2 %"));
    p.counter.subtracted = Some(Subtracted {
        rate: amount("25 cpm"),
        minutes: Some(amount("10 min")),
    });
    p.counter.run = Some(Run {
        start: when("2031-05-20 14:05").unwrap(),
        changer: amount("10 s"),
    });
    p.counter.background.blank = BlankKind::EmptyCounter;
    p.numbers.cv_prior = Some(CvPrior {
        centre: 0.04,
        sd_ln: 0.5,
    });
    p.numbers.scale_errors.stock = Some(amount("3 %"));
    p.numbers.model = Some(Model::Hill);
    p.display.concentration = DisplayUnit::pM;
    p.display.sites = SitesUnit::PerMillionCells;
    p.check().unwrap();
    p
}

fn cell() -> Counted {
    Counted::BothSides {
        protein_aliquot: amount("100 uL"),
        ligand_aliquot: amount("200 uL"),
        protein_after: Some(amount("0.52 mL")),
        ligand_volume: Some(amount("0.5 mL")),
    }
}

/// A reader has no counter, and no decay.
fn reader() -> Protocol {
    let mut p = example().protocol;
    p.separation.counted = Counted::Signal {
        read_volume: Some(amount("200 uL")),
        standards: vec![amount("0.1 nM"), amount("500 pM"), amount("1 nM")],
        noise: Some(0.25),
    };
    p.ligand.specific_activity = Amount::unset();
    p.ligand.activity_date = None;
    p.counter.efficiency = Amount::unset();
    p.counter.minutes = Amount::unset();
    p.counter.background.minutes = Amount::unset();
    p.counter.fields = fields("signal");
    p.check().unwrap();
    p
}

/// Protocols of all four kinds, with every option.
fn of_every_kind() -> Vec<Protocol> {
    let aliquot = Counted::Free {
        aliquot: amount("100 uL"),
    };
    let mut filter = full(Counted::Bound);
    filter.nonspecific.sticks = Sticks::ToFilter;
    filter.counter.efficiency = Amount::unset();
    let mut told = reader();
    // Settings that do not apply and are there all the same.
    told.ligand.specific_activity = amount("80 Ci/mmol");
    told.counter.minutes = amount("2 min");
    told.counter.fields = fields("signal, at");
    told.counter.background.blank = BlankKind::ScintillantAndFilter;
    told.incubation.assayed = when("2031-05-20 09:30");
    vec![
        full(Counted::Bound),
        filter,
        full(aliquot),
        full(cell()),
        reader(),
        told,
    ]
}

#[test]
fn protocols_of_every_kind_survive_their_forms() {
    let levels = example().levels;
    for p in of_every_kind() {
        p.check().unwrap();
        let mut forms = Forms::of(&p, &levels);
        assert_eq!(forms.protocol().unwrap(), p);
        forms.check(Some(&levels));
        assert_eq!(forms.protocol().unwrap(), p);
    }
}

#[test]
fn a_protocol_in_decimal_commas_survives_its_forms() {
    let text = Sheet::EXAMPLE
        .replace("\"0.", "\"0,")
        .replace("mark: Point,", "mark: Comma,");
    let mut p = Sheet::parse(&text).unwrap().titration().unwrap().protocol;
    p.counter.fields = fields("cpm, quench");
    p.counter.quench = vec![
        QuenchStandard {
            indicator: 410.25,
            efficiency: amount("42,5 %"),
        },
        QuenchStandard {
            indicator: 380.0,
            efficiency: amount("38 %"),
        },
    ];
    p.check().unwrap();
    let forms = Forms::of(&p, &example().levels);
    assert_eq!(
        forms.counter.value("quench standards"),
        "410,25 42,5 %; 380 38 %"
    );
    assert_eq!(forms.protocol().unwrap(), p);
}

/// The form, the field and what is typed there, and the field that is then in error with a part of what is said.
#[test]
fn errors_land_at_their_fields() {
    let levels = example().levels;
    let [bound, _, free, cell, reader, _] = &of_every_kind()[..] else {
        panic!("six protocols")
    };
    for (p, field, typed, at, says) in [
        (
            free,
            "aliquot counted",
            "600 uL",
            "aliquot counted",
            "more than the volume",
        ),
        (
            cell,
            "protein aliquot",
            "0.6 mL",
            "protein aliquot",
            "more than the volume",
        ),
        (cell, "ligand aliquot", "", "ligand aliquot", "needed"),
        (
            cell,
            "ligand side filled",
            "50 uL",
            "ligand aliquot",
            "more than the volume",
        ),
        (
            cell,
            "protein side at end",
            "0 mL",
            "protein side at end",
            "more than zero",
        ),
        (reader, "standards", "0.1", "standards", "no unit"),
        (reader, "standards", "0 nM", "standards", "more than zero"),
        (
            reader,
            "noise of a blank",
            "-1",
            "noise of a blank",
            "more than zero",
        ),
        (
            reader,
            "volume read",
            "0 uL",
            "volume read",
            "more than zero",
        ),
        (
            reader,
            "typed per vial",
            "counts",
            "typed per vial",
            "signal",
        ),
        (
            bound,
            "half-life",
            "",
            "label",
            "not a nuclide of the table",
        ),
        (bound, "activity date", "", "activity date", "needed"),
        (
            bound,
            "tubes separated",
            "2030-01-01",
            "activity date",
            "after the assay",
        ),
        (
            bound,
            "atoms of label",
            "0",
            "atoms of label",
            "at least one",
        ),
        (
            bound,
            "share that can bind",
            "0 %",
            "share that can bind",
            "more than zero",
        ),
        (bound, "its Ki", "0 nM", "its Ki", "more than zero"),
        (bound, "unlabelled", "0 nM", "unlabelled", "more than zero"),
        (
            bound,
            "aliquot of added",
            "200 %",
            "aliquot of added",
            "at most 100 %",
        ),
        (bound, "efficiency", "145 %", "efficiency", "at most 100 %"),
        (
            bound,
            "quench standards",
            "410 42 %; 380 50 %; 350 45 %",
            "quench standards",
            "turn back",
        ),
        (
            bound,
            "quench standards",
            "410 142 %; 380 50 %",
            "quench standards",
            "at most 100 %",
        ),
        (
            bound,
            "taken off",
            "",
            "taken off",
            "needed for net readings",
        ),
        (
            bound,
            "taken off",
            "25 cpm counted 0 min",
            "taken off",
            "more than zero",
        ),
        (
            bound,
            "run",
            "2031-05-19 14:05, changer 10 s",
            "run",
            "before the assay",
        ),
        (
            bound,
            "run",
            "2031-05-20 14:05, changer 2 h",
            "run",
            "0 to 60 min",
        ),
        (bound, "dead time", "5 s", "dead time", "a few us"),
        (
            bound,
            "counting error",
            "0 %",
            "counting error",
            "more than zero",
        ),
        (
            bound,
            "typed per vial",
            "net cpm",
            "typed per vial",
            "needs the indicator",
        ),
        (
            bound,
            "what is counted",
            "both sides",
            "what is counted",
            "begin a new titration",
        ),
    ] {
        let mut forms = Forms::of(p, &levels);
        let all = forms
            .protocol
            .fields
            .iter_mut()
            .chain(&mut forms.counter.fields);
        let found = all.into_iter().find(|f| f.spec.name == field);
        found.unwrap().input = tui_input::Input::new(typed.into());
        forms.check(Some(&levels));
        let all = forms.protocol.fields.iter().chain(&forms.counter.fields);
        let wrong: Vec<(&str, &str)> = all
            .filter_map(|f| Some((f.spec.name, f.error.as_deref()?)))
            .collect();
        let found = wrong.iter().find(|(name, _)| *name == at);
        assert!(
            found.is_some_and(|(_, what)| what.contains(says)),
            "{field} `{typed}`: {wrong:?}"
        );
        assert!(
            !forms.ladder.fields.iter().any(|f| f.error.is_some()),
            "{field} `{typed}`"
        );
    }
}

/// What is typed in fresh forms, and the names of the fields in sight after `from`.
fn in_sight(forms: &Forms) -> Vec<&'static str> {
    [&forms.protocol, &forms.ladder, &forms.counter]
        .into_iter()
        .flat_map(|f| f.visible().map(|(_, f)| f.spec.name))
        .collect()
}

fn typed(forms: &mut Forms, field: &str, text: &str) {
    let all = forms
        .protocol
        .fields
        .iter_mut()
        .chain(&mut forms.counter.fields);
    let found = all.into_iter().find(|f| f.spec.name == field).unwrap();
    found.input = tui_input::Input::new(text.into());
    forms.check(None);
}

#[test]
fn what_does_not_apply_is_hidden() {
    let mut forms = Forms::fresh(&Lab::default());
    let of_decay = [
        "activity date",
        "tubes separated",
        "half-life",
        "atoms of label",
        "run",
    ];
    let of_counter = [
        "specific activity",
        "decay",
        "efficiency",
        "minutes per tube",
        "dead time",
        "counting error",
    ];
    let of_cell = ["protein aliquot", "ligand aliquot", "protein side at end"];
    let of_reader = [
        "standards",
        "volume read",
        "noise of a blank",
        "of each standard",
    ];
    let has = |forms: &Forms, names: &[&str]| {
        let seen = in_sight(forms);
        let n = names.iter().filter(|n| seen.contains(n)).count();
        assert!(n == 0 || n == names.len(), "{names:?} {seen:?}");
        n > 0
    };
    assert!(has(&forms, &of_counter) && !has(&forms, &of_decay));
    assert!(!has(&forms, &of_cell) && !has(&forms, &of_reader));
    typed(&mut forms, "decay", DECAY[1]);
    assert!(has(&forms, &of_decay));
    typed(&mut forms, "what is counted", COUNTED[2]);
    assert!(has(&forms, &of_cell) && has(&forms, &of_decay));
    assert!(!has(
        &forms,
        &[
            "fraction counted",
            "receptor-free tubes",
            "nonspecific sticks to"
        ]
    ));
    typed(&mut forms, "what is counted", COUNTED[3]);
    assert!(has(&forms, &of_reader) && !has(&forms, &of_counter) && !has(&forms, &of_decay));
    typed(&mut forms, "what is counted", COUNTED[1]);
    assert!(has(
        &forms,
        &["aliquot counted", "added counted", "receptor-free tubes"]
    ));
    // A label that is not in the table needs its half-life, and much activity its number of atoms.
    typed(&mut forms, "decay", DECAY[0]);
    typed(&mut forms, "label", "Xx-9");
    assert!(has(&forms, &["half-life"]));
    typed(&mut forms, "label", "I-125");
    typed(&mut forms, "specific activity", "4000 Ci/mmol");
    assert!(has(&forms, &["atoms of label"]) && !has(&forms, &["half-life"]));
}

#[test]
fn a_protocol_survives_its_forms() {
    let t = Sheet::parse(Sheet::EXAMPLE).unwrap().titration().unwrap();
    let forms = Forms::of(&t.protocol, &t.levels);
    assert_eq!(forms.protocol().unwrap(), t.protocol);
    assert_eq!(forms.levels(&t.levels).unwrap(), t.levels);
}

#[test]
fn a_value_out_of_its_limits_is_said_while_others_are_missing() {
    let mut forms = Forms::fresh(&Lab::default());
    let field = forms
        .counter
        .fields
        .iter_mut()
        .find(|f| f.spec.name == "efficiency")
        .unwrap();
    field.input = tui_input::Input::new("72".into());
    forms.check(None);
    let field = forms
        .counter
        .fields
        .iter()
        .find(|f| f.spec.name == "efficiency")
        .unwrap();
    let error = field.error.clone().unwrap();
    assert!(error.contains("`72`") && error.contains("100 %"), "{error}");
}

#[test]
fn fresh_forms_say_what_is_needed() {
    let mut forms = Forms::fresh(&Lab::default());
    forms.check(None);
    let needed: Vec<&str> = forms
        .protocol
        .fields
        .iter()
        .filter(|f| f.error.is_some())
        .map(|f| f.spec.name)
        .collect();
    assert_eq!(
        needed,
        [
            "title",
            "ligand",
            "label",
            "specific activity",
            "preparation",
            "volume",
            "unlabelled"
        ]
    );
    assert_eq!(forms.counter.errors(), 1);
    assert_eq!(forms.ladder.errors(), 2);
}
