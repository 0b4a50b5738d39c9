//! The rules of typing at the bench.

use crate::scenes::finished_with;
use crate::sitting::Sitting;
use rackside::app::keys::Key;
use rackside::app::{Access, Event, Layer, LineFor};
use rackside::assay::{Reason, Scale, TubeNo};
use rackside::notebook::What;

/// One rule: what is typed where, what is said, and how many entries are recorded.
struct Rule {
    what: &'static str,
    at: Sitting,
    keys: &'static str,
    says: &'static str,
    refused: bool,
    records: u32,
}

fn refused(what: &'static str, at: Sitting, keys: &'static str, says: &'static str) -> Rule {
    Rule {
        what,
        at,
        keys,
        says,
        refused: true,
        records: 0,
    }
}

fn taken(
    what: &'static str,
    at: Sitting,
    keys: &'static str,
    says: &'static str,
    records: u32,
) -> Rule {
    Rule {
        what,
        at,
        keys,
        says,
        refused: false,
        records,
    }
}

fn half() -> Sitting {
    Sitting::demo("half-typed")
}

fn fresh() -> Sitting {
    Sitting::fresh(&[])
}

fn cpm() -> Sitting {
    Sitting::fresh(&[("fields: Counts,", "fields: Cpm,")])
}

fn with_minutes() -> Sitting {
    Sitting::fresh(&[("fields: Counts,", "fields: CountsMinutes,")])
}

/// A titration in decimal commas that takes cpm.
fn comma() -> Sitting {
    Sitting::fresh(&[
        ("\"0.", "\"0,"),
        ("mark: Point,", "mark: Comma,"),
        ("fields: Counts,", "fields: Cpm,"),
    ])
}

fn read_only() -> Sitting {
    finished_with(
        Access::ReadOnly("open elsewhere".into()),
        Vec::new(),
        Vec::new(),
    )
}

fn closed() -> Sitting {
    let mut s = half();
    s.types("cy");
    s
}

fn rules() -> Vec<Rule> {
    vec![
        refused(
            "a comma in counts",
            half(),
            "1,5\n",
            "`1,5` has a mark in it",
        ),
        refused(
            "a comma in a point titration",
            cpm(),
            "1,5\n",
            "`1,5` has a decimal comma, and this titration uses a point",
        ),
        refused(
            "a thousands comma",
            half(),
            "4,812\n",
            "counts are whole numbers",
        ),
        refused(
            "a thousands point",
            half(),
            "4.812\n",
            "counts are whole numbers",
        ),
        refused("two marks in counts", half(), "1.2.3\n", "has a mark in it"),
        refused(
            "two marks in cpm",
            cpm(),
            "1.2.3\n",
            "more than one decimal mark",
        ),
        refused(
            "a point in a comma titration",
            comma(),
            "2406.5\n",
            "`2406.5` has a decimal point, and this titration uses a comma",
        ),
        refused("a mark alone", cpm(), ".\n", "is not a number"),
        refused(
            "more than a counter gives",
            half(),
            "9999999999999\n",
            "too large",
        ),
        refused(
            "a letter without a meaning",
            half(),
            "x",
            "`x` does nothing here; ? shows the keys",
        ),
        refused(
            "a letter in a number",
            half(),
            "12a6\n",
            "`12a6` is not a number",
        ),
        refused(
            "leaving with a line begun",
            half(),
            "12q\n",
            "`12q` is not a number",
        ),
        refused(
            "no such vial",
            half(),
            "/99\n",
            "there is no vial 99: this rack has vials 1 to 33",
        ),
        refused("vial nought", half(), "/0\n", "there is no vial 0"),
        refused(
            "a vial with a mark",
            half(),
            "/1.",
            "a vial number is typed in digits",
        ),
        refused(
            "a second reading",
            half(),
            "/1\n230\n",
            "already has 227 counts; + adds a recount",
        ),
        refused("a recount of nothing", fresh(), "+", "no reading to add to"),
        refused("a flag on nothing", fresh(), "*", "no reading to flag"),
        refused(
            "a reading of a lost tube",
            half(),
            "l1/21\n1521\n",
            "vial 21 was given up",
        )
        .recording(1),
        refused(
            "a read tube given up",
            half(),
            "/14\nl",
            "vial 14 has a reading and cannot be lost; * flags it",
        ),
        refused(
            "no minutes",
            with_minutes(),
            "267\n0\n",
            "0 minutes: allowed is more than zero",
        ),
        refused(
            "minutes beyond sense",
            with_minutes(),
            "267\n99999\n99999\n",
            "at most 43200",
        ),
        refused(
            "the next tube's counts typed for minutes",
            with_minutes(),
            "267\n227\n",
            "227 minutes is far from 10.00; type it again to keep it",
        ),
        refused(
            "the other mark in minutes",
            with_minutes(),
            "267\n1,5\n",
            "minutes: `1,5` has a decimal comma",
        ),
        refused(
            "two marks in minutes",
            with_minutes(),
            "267\n1.2.3\n",
            "minutes: `1.2.3` has more than one",
        ),
        refused(
            "a letter in minutes",
            with_minutes(),
            "267\nx",
            "`x` does nothing here",
        ),
        refused(
            "a flag while minutes are wanted",
            with_minutes(),
            "267\n10\n227\n*",
            "not finished",
        )
        .recording(1),
        refused(
            "a recount while minutes are wanted",
            with_minutes(),
            "267\n+",
            "not finished",
        ),
        refused(
            "a vial while minutes are wanted",
            with_minutes(),
            "267\n/",
            "not finished",
        ),
        refused(
            "nothing is written read only",
            read_only(),
            "-",
            "read only: open elsewhere",
        ),
        refused(
            "nothing is read read only",
            read_only(),
            "/1\n+5\n",
            "read only: open elsewhere",
        ),
        refused(
            "closed",
            closed(),
            "1521\n",
            "the titration was closed at 2031-05-04 12:00; c opens it again",
        ),
        refused(
            "a line without end",
            half(),
            "1111111111111111111111111",
            "at most 24 characters",
        ),
        refused(
            "a reason that is none",
            half(),
            "1521\n*8",
            "a reason is one of the digits shown",
        )
        .recording(1),
        taken(
            "nothing to take back",
            fresh(),
            "-",
            "nothing to take back",
            0,
        ),
        taken(
            "nothing to bring back",
            fresh(),
            "b",
            "nothing to bring back",
            0,
        ),
        taken(
            "no counts are counts",
            fresh(),
            "0\n",
            "kept   0 counts, vial 33, background a",
            1,
        ),
        taken(
            "blanks between digits",
            half(),
            "1 521\n",
            "kept   1 521 counts, vial 21",
            1,
        ),
        taken(
            "minutes as offered",
            with_minutes(),
            "267\n\n",
            "kept   267 counts, vial 33",
            1,
        ),
        taken(
            "minutes typed",
            with_minutes(),
            "267\n12.5\n",
            "kept   267 counts, vial 33",
            1,
        ),
        taken(
            "a minus drops the number too",
            with_minutes(),
            "267\n-",
            "",
            0,
        ),
        taken("a minus clears a line", half(), "15-", "", 0),
        taken(
            "a minus takes back and reads back",
            half(),
            "1521\n-",
            "taken back   1 521 counts, vial 21, 2 nM, total a   b: undo",
            2,
        ),
        taken(
            "b brings back",
            half(),
            "1521\n-b",
            "back again   1 521 counts, vial 21",
            3,
        ),
        taken("a vial by its number", half(), "/27\n", "", 0),
        taken("nothing after the stroke", half(), "/\n", "", 0),
        taken(
            "a recount",
            half(),
            "/1\n+230\n",
            "kept   recount 230 counts, vial 1",
            1,
        ),
        taken(
            "a flag",
            half(),
            "1521\n*2",
            "suspect, filter torn: 1 521 counts, vial 21, 2 nM, total a",
            2,
        ),
        taken("a flag off", half(), "1521\n*2*", "flag off   vial 21", 3),
        taken(
            "a reason in words",
            half(),
            "1521\n*7tip\n",
            "suspect, other",
            2,
        ),
        taken(
            "no reason after all",
            half(),
            "1521\n*0",
            "kept   1 521 counts",
            1,
        ),
        taken("lost", half(), "l2", "lost, filter torn: vial 21", 1),
        taken(
            "cpm in a comma titration",
            comma(),
            "2406,5\n",
            "kept   2406.50 cpm, vial 33",
            1,
        ),
    ]
}

impl Rule {
    /// The rule needs so many entries before it comes to what it is about.
    fn recording(mut self, records: u32) -> Rule {
        self.records = records;
        self
    }
}

#[test]
fn rules_of_the_line() {
    for mut rule in rules() {
        let before = rule.at.entries();
        rule.at.types(rule.keys);
        let said = rule.at.said().to_string();
        assert!(said.contains(rule.says), "{}: {said}", rule.what);
        assert_eq!(rule.at.refused(), rule.refused, "{}: {said}", rule.what);
        assert_eq!(
            rule.at.entries() - before,
            rule.records,
            "{}: {said}",
            rule.what
        );
        // What is said can be read whole at 80 columns.
        let line = if rule.says.is_empty() {
            ""
        } else {
            said.as_str()
        };
        assert!(rule.at.text().contains(line), "{}: cut: {said}", rule.what);
    }
}

#[test]
fn an_empty_enter_does_nothing() {
    let mut s = half();
    let before = format!("{:?}", s.app);
    s.types("\n\n");
    assert_eq!(format!("{:?}", s.app), before);
}

#[test]
fn a_refused_line_stays_to_be_mended() {
    let mut s = half();
    s.types("1.5\n");
    assert_eq!(s.desk().bench.line.value(), "1.5");
    assert_eq!(s.desk().bench.at, TubeNo(21));
    s.times(2, Key::Backspace).types("521\n");
    assert!(
        matches!(s.newest(), What::Counted { readings } if readings[0].reading.value == 1521.0)
    );
}

#[test]
fn the_prompt_follows() {
    let mut s = half();
    s.types("1521\n");
    assert_eq!(s.desk().bench.at, TubeNo(22), "to the next tube");
    s.types("-");
    assert_eq!(s.desk().bench.at, TubeNo(21), "back at what was taken back");
    s.types("b");
    assert_eq!(s.desk().bench.at, TubeNo(22), "on again");
    s.types("/27\n");
    assert_eq!(s.desk().bench.at, TubeNo(27));
    s.types("900\n");
    assert_eq!(s.desk().bench.at, TubeNo(28), "from there onwards");
    s.types("g");
    assert_eq!(s.desk().bench.at, TubeNo(22), "the first without a reading");
    s.types("l1");
    assert_eq!(s.desk().bench.at, TubeNo(23), "a lost tube is left");
    s.types("/32\n1700\n");
    assert_eq!(
        s.desk().bench.at,
        TubeNo(23),
        "around to the first that wants one"
    );
}

#[test]
fn flags_are_recorded_with_their_reasons() {
    let mut s = half();
    s.types("1521\n*");
    assert!(matches!(s.desk().layers.last(), Some(Layer::Reasons(_))));
    s.types("3");
    assert!(matches!(s.newest(), What::Flagged { why, .. } if why.reason == Reason::NotWashed));
    s.types("*");
    assert!(matches!(s.newest(), What::Unflagged { .. }));
    s.types("*7");
    assert!(matches!(
        s.desk().layers.last(),
        Some(Layer::Line {
            what: LineFor::OtherReason(_),
            ..
        })
    ));
    let before = s.entries();
    s.types("tip touched the rim");
    assert_eq!(s.entries(), before, "nothing before Enter");
    s.types("\n");
    assert!(matches!(
        s.newest(),
        What::Flagged { why, .. } if why.reason == Reason::Other && why.words == "tip touched the rim"
    ));
    // The flag is on the tube just kept, and the prompt has long been at the next.
    assert!(s.desk().titration().has_flag(TubeNo(21)) && s.desk().bench.at == TubeNo(22));
}

#[test]
fn a_number_waits_for_its_minutes() {
    let mut s = with_minutes();
    s.types("267\n");
    let wanted = s.desk().bench.field.clone();
    assert_eq!(wanted.more(), Some(rackside::assay::Field::Minutes));
    assert_eq!(s.desk().bench.field, wanted);
    for key in ["*", "+", "/", "g", "v", "q"] {
        s.types(key);
        assert_eq!(
            s.desk().bench.field,
            wanted,
            "{key} must not drop the number"
        );
    }
    for key in [Key::Up, Key::Down] {
        s.press(key);
        assert_eq!(
            s.desk().bench.field,
            wanted,
            "{key:?} must not drop the number"
        );
    }
    s.types("12.5\n");
    let What::Counted { readings } = s.newest() else {
        panic!("{:?}", s.newest())
    };
    assert_eq!(
        (readings[0].reading.value, readings[0].reading.minutes),
        (267.0, 12.5)
    );
    assert_eq!(readings[0].reading.raw, "267 / 12.5");
}

#[test]
fn cpm_are_kept_as_cpm() {
    let mut s = comma();
    s.types("2406,5\n");
    let What::Counted { readings } = s.newest() else {
        panic!("{:?}", s.newest())
    };
    let reading = &readings[0].reading;
    assert_eq!((reading.scale, reading.value), (Scale::Cpm, 2406.5));
    assert_eq!(reading.raw, "2406,5");
    // The background of the example is counted for 10 min.
    assert!((reading.value * reading.minutes - 24065.0).abs() < 1e-9);
}

#[test]
fn a_recount_adds_up() {
    let mut s = half();
    s.types("/1\n+230\n");
    let kept = s.desk().titration().kept(TubeNo(1));
    let counts: Vec<f64> = kept.iter().map(|k| k.reading.value).collect();
    assert_eq!(counts, [227.0, 230.0]);
    s.types("/1\n");
    assert!(s.said().contains("2 counts in all"), "{}", s.said());
}

#[test]
fn paste_is_refused_with_advice() {
    let mut s = half();
    let before = s.entries();
    s.happen(Event::Paste("1521\n1596\n".into()));
    assert!(
        s.refused() && s.said().contains("`rackside take`"),
        "{}",
        s.said()
    );
    assert_eq!((s.entries(), s.desk().bench.line.value()), (before, ""));
    let said = s.said().to_string();
    assert!(s.text().contains(&said), "cut: {said}");
}

#[test]
fn a_disk_that_is_full_stops_nobody() {
    let mut s = half();
    s.disk = Err("no space left on the disk");
    s.types("1521\n1596\n");
    assert_eq!(s.desk().bench.at, TubeNo(23));
    assert!(s.text().contains("NOT SAVED"));
    s.types("q");
    assert!(matches!(s.desk().layers.last(), Some(Layer::LeaveUnsaved)));
    // A later save holds everything, and the bar goes.
    s.types("n");
    s.disk = Ok(());
    s.types("375\n");
    assert!(s.desk().is_saved() && !s.text().contains("NOT SAVED"));
}
