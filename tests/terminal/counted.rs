//! Titrations counted in other ways than bound counts of a long-lived label, from protocol to summary through the program.

use super::harness::{Home, Ran};
use serde_json::Value;

/// The example with some of its lines changed, as `protocol.ron`.
fn protocol(home: &Home, changes: &[(&str, &str)]) {
    let mut text = home.run(&["new", "--example"]).done().out;
    for (from, to) in changes {
        assert!(text.contains(from), "the example does not hold `{from}`");
        text = text.replacen(from, to, 1);
    }
    home.write("protocol.ron", text);
}

fn opened(changes: &[(&str, &str)]) -> Home {
    let home = Home::new();
    protocol(&home, changes);
    made(&home.run(&["new", "rack.ron", "--from", "protocol.ron"]));
    home
}

/// A run that did what it was asked for.
#[track_caller]
fn made(ran: &Ran) {
    assert_eq!(ran.code, 0, "{ran:?}");
}

fn take(home: &Home, table: &str) -> Ran {
    home.run_with(&["take", "rack.ron", "-"], table)
}

fn tube(home: &Home, vial: u32) -> Value {
    let out = home
        .run(&["summary", "rack.ron", "--format", "json"])
        .done()
        .out;
    let all: Value = serde_json::from_str(&out).unwrap();
    let tubes = all["tubes"].as_array().unwrap();
    tubes.iter().find(|t| t["vial"] == vial).unwrap().clone()
}

const SHORT_LIVED: [(&str, &str); 4] = [
    ("label: \"H-3\"", "label: \"F-18\", decay: ProductInert"),
    (
        "activity_date: \"2031-05-04\"",
        "activity_date: \"2031-05-04 08:00\"",
    ),
    (
        "time: \"90 min\"",
        "time: \"90 min\", assayed: \"2031-05-04 10:00\"",
    ),
    (
        "fields: Counts",
        "fields: Each([Counts, Quench, At]), quench: [(indicator: 300, efficiency: \"30 %\"), \
         (indicator: 400, efficiency: \"42 %\"), (indicator: 500, efficiency: \"45 %\")]",
    ),
];

/// The columns `at` and `quench`: a time of day is the first after the assay, one with an offset stands as it is.
#[test]
fn a_table_with_times_and_quench() {
    let home = opened(&SHORT_LIVED);
    let table =
        "vial,counts,at,quench\n33,250,09:10,\n1,2000,11:49:46,300\n2,2000,2031-05-04 20:00,500\n";
    let ran = take(&home, table);
    assert_eq!(ran.code, 0, "{ran:?}");
    // One half-life (109.77 min, ICRP Publication 107) after the assay and at two thirds of the nominal efficiency (30 of 45 %): a third of
    // the signal, so that bound is three times as much as the same net counts would say, and a little more for decay while it is counted.
    let bound = |t: &Value| t["bound_nm"].as_f64().unwrap();
    let left = |minutes: f64| (-std::f64::consts::LN_2 * minutes / 109.77).exp();
    let k = |activity: f64| 0.45 * activity * 2.22 * 1000.0 * 0.5;
    // 80 Ci/mmol two hours before: what decays is hardly any of the ligand.
    let f = 80.0 / 1_712_930.4;
    let activity = 80.0 * left(120.0) / (1.0 - f + f * left(120.0));
    let net = 2000.0 / 2.0 - 25.0;
    let want = net
        / (k(activity) * (2.0 / 3.0) * left(109.0 + 46.0 / 60.0) * (1.0 - left(2.0))
            / (std::f64::consts::LN_2 * 2.0 / 109.77));
    let got = bound(&tube(&home, 1));
    assert!((got / want - 1.0).abs() < 1e-6, "{got} {want}");
    // Ten hours after the assay, at the full efficiency.
    let got = bound(&tube(&home, 2)) / got;
    let want = (2.0 / 3.0) * left(109.0 + 46.0 / 60.0) / left(600.0);
    assert!((got / want - 1.0).abs() < 1e-9, "{got} {want}");
}

/// What such a reading needs is asked for by its line and column, and nothing is taken.
#[test]
fn times_and_quench_that_cannot_be() {
    let home = opened(&SHORT_LIVED);
    for (row, says) in [
        ("1,2000,11:49,", "no quench indicator"),
        ("1,2000,11:49,512", "512"),
        ("1,2000,,300", "no time of counting"),
        (
            "1,2000,2031-05-04 09:30,300",
            "30 min before the assay of 2031-05-04 10:00",
        ),
        ("1,2000,half past,300", "`half past` is not a time"),
        ("1,2000,11:49,red", "quench: `red`"),
    ] {
        let ran = take(
            &home,
            &format!("vial,counts,at,quench\n33,250,12:00,\n{row}\n"),
        );
        assert_eq!(ran.code, 65, "{row}: {ran:?}");
        for part in [says, "line 3", "nothing was taken"] {
            assert!(ran.err.contains(part), "{row}: {ran:?}");
        }
    }
    assert_eq!(tube(&home, 33)["counts"], Value::Null);
}

/// Net readings, negative ones among them, are counts again once what was taken off is known.
#[test]
fn a_table_of_net_readings() {
    let net = (
        "fields: Counts",
        "fields: Each([NetCpm]), subtracted: (rate: \"25 cpm\")",
    );
    let home = opened(&[net]);
    made(&take(&home, "vial,net_cpm\n33,1.7\n1,90.5\n2,-1.5\n"));
    assert_eq!(tube(&home, 33)["counts"], 267.0);
    assert_eq!(
        (
            tube(&home, 1)["counts"].clone(),
            tube(&home, 2)["counts"].clone()
        ),
        (231.0.into(), 47.0.into())
    );
    let low = take(&home, "vial,net_cpm\n3,-26\n");
    assert_eq!(low.code, 65);
    assert!(low.err.contains("lower than the background"), "{low:?}");
    // dpm of the same vial: 45 % of them counted.
    made(&take(&home, "vial,dpm\n3,100\n"));
    assert_eq!(tube(&home, 3)["counts"], 90.0);
}

/// A dialysis cell is two vials, told by their side; a reader's standards by their number.
#[test]
fn sides_and_standards_in_a_table() {
    let cells = (
        "fraction: \"100 %\",",
        "counted: BothSides(protein_aliquot: \"0.1 mL\", ligand_aliquot: \"0.1 mL\"),",
    );
    let home = opened(&[cells]);
    let table = "level,role,replicate,side,counts\n,background,a,,250\n1,total,a,protein,900\n1,total,a,ligand,400\n";
    made(&take(&home, table));
    assert_eq!(tube(&home, 1)["counts"], 900.0);
    assert_eq!(tube(&home, 2)["counts"], 400.0);
    // Bound is the difference of the two sides: (450 - 25) less (200 - 25) cpm in 0.1 mL, at 0.45 x 177.6 cpm to the fmol.
    let bound = tube(&home, 1)["bound_nm"].as_f64().unwrap();
    assert!(
        (bound / (250.0 / (0.45 * 177.6 * 100.0)) - 1.0).abs() < 1e-9,
        "{bound}"
    );
    let no_side = take(&home, "level,role,replicate,counts\n1,total,b,5\n");
    assert!(no_side.err.contains("protein or ligand"), "{no_side:?}");
    let other = take(&home, "vial,side,counts\n3,ligand,5\n");
    assert!(
        other.err.contains("its side in the row is `ligand`"),
        "{other:?}"
    );

    let home = opened(&[
        ("specific_activity: \"80 Ci/mmol\",", ""),
        (
            "fraction: \"100 %\",",
            "counted: Signal(standards: [\"0.01 nM\", \"0.1 nM\"]),",
        ),
        ("efficiency: \"45 %\",", ""),
        ("fields: Counts,", "fields: Each([Signal]),"),
        ("background: 1,", "background: 3, standards: 2,"),
    ]);
    let table = "level,role,replicate,signal\n,background,a,100\n,background,b,104\n,background,c,96\n1,standard,a,150\n2,standard,b,600\n1,total,a,300\n";
    made(&take(&home, table));
    assert_eq!(tube(&home, 1)["counts"], 300.0);
    // Gain: (50 + 500) over (0.01 + 0.1) is 5000 to the nM.
    let bound = tube(&home, 1)["bound_nm"].as_f64().unwrap();
    assert!((bound - 0.04).abs() < 1e-12, "{bound}");
    let far = take(&home, "level,role,replicate,signal\n3,standard,a,100\n");
    assert!(far.err.contains("there is no standard 3"), "{far:?}");
    let minutes = take(&home, "vial,signal,minutes\n2,100,2\n");
    assert!(
        minutes.err.contains("a signal has no minutes"),
        "{minutes:?}"
    );
    let counts = take(&home, "vial,counts\n2,100\n");
    assert!(counts.err.contains("a signal is allowed"), "{counts:?}");
}

/// Protocols that cannot be: named by their field, explained, and no file made.
#[test]
fn protocols_that_cannot_be() {
    let decay = ("label: \"H-3\"", "label: \"I-125\", decay: CarrierFree");
    let assayed = (
        "time: \"90 min\"",
        "time: \"90 min\", assayed: \"2031-05-01 10:00\"",
    );
    let activity = |text: &'static str| ("\"80 Ci/mmol\"", text);
    let counted = |text: &'static str| ("fraction: \"100 %\",", text);
    let fields = |text: &'static str| ("fields: Counts", text);
    /// Lines changed, and what is said of them.
    type Case<'c> = (&'c [(&'c str, &'c str)], &'c [&'c str]);
    let cases: &[Case] = &[
        (
            &[decay, assayed],
            &[
                "ligand.activity_date",
                "2031-05-04 is after the assay of 2031-05-01 10:00",
            ],
        ),
        (
            &[decay],
            &["incubation.assayed", "needed where decay is computed"],
        ),
        (
            &[
                ("label: \"H-3\"", "label: \"I-125\""),
                activity("\"2400 Ci/mmol\""),
            ],
            &[
                "ligand.specific_activity",
                "2400 Ci/mmol",
                "at most 2198 Ci/mmol",
            ],
        ),
        (
            &[activity("\"310 Ci/mmol\"")],
            &["ligand.specific_activity", "10 atoms"],
        ),
        (
            &[("label: \"H-3\"", "label: \"Xx-99\"")],
            &["ligand.label", "`Xx-99`", "H-3, C-14", "half-life"],
        ),
        (
            &[("label: \"H-3\"", "label: \"F-18\"")],
            &["ligand.decay", "F-18", "1.83 h"],
        ),
        // 80 of 2198 Ci/mmol are a label in one molecule of 27.
        (
            &[
                decay,
                (
                    "time: \"90 min\"",
                    "time: \"90 min\", assayed: \"2031-05-05 10:00\"",
                ),
            ],
            &["ligand.decay", "3.6 % of molecules", "ProductInert"],
        ),
        // 0.5 mL less the 4.5 mL that went over.
        (
            &[counted(
                "counted: BothSides(protein_aliquot: \"0.1 mL\", ligand_aliquot: \"0.1 mL\", protein_after: \"5 mL\", ligand_volume: \"0.5 mL\"),",
            )],
            &["separation.counted.protein_after", "leaves -4 mL"],
        ),
        (
            &[("background: 1,", "background: 0,")],
            &["ladder.background", "0 vials"],
        ),
        (
            &[("\"45 %\"", "\"145 %\"")],
            &["counter.efficiency", "145 %", "at most 100 %"],
        ),
        (
            &[("\"45 %\"", "\"0 %\"")],
            &["counter.efficiency", "more than zero"],
        ),
        (
            &[("Protein(\"50 ug\")", "Protein(\"0 ug\")")],
            &["receptor.amount", "more than zero"],
        ),
        (
            &[counted("counted: Free(aliquot: \"0.6 mL\"),")],
            &[
                "separation.counted.aliquot",
                "0.6 mL",
                "more than the volume it is taken from, 0.5 mL",
            ],
        ),
        (
            &[counted(
                "counted: BothSides(protein_aliquot: \"0.1 mL\", ligand_aliquot: \"0.7 mL\", ligand_volume: \"0.5 mL\"),",
            )],
            &["separation.counted.ligand_aliquot", "0.7 mL"],
        ),
        (
            &[fields(
                "fields: Each([Counts, Quench]), quench: [(indicator: 1, efficiency: \"30 %\")]",
            )],
            &["counter.quench"],
        ),
        (
            &[fields(
                "fields: Counts, quench: [(indicator: 1, efficiency: \"30 %\"), (indicator: 2, efficiency: \"40 %\")]",
            )],
            &["counter.fields", "counts, quench"],
        ),
        (
            &[fields("fields: Each([NetCpm])")],
            &["counter.subtracted", "taken off"],
        ),
        (
            &[fields("fields: Each([Quench, Counts])")],
            &["first counts, cpm"],
        ),
        (
            &[fields("fields: Each([Signal])")],
            &["counter.fields", "a signal is of a reader"],
        ),
        (
            &[("lot:", "bindable: \"0 %\", lot:")],
            &["ligand.bindable", "more than zero"],
        ),
        (
            &[fields("fields: Counts, dead_time: \"2 s\"")],
            &["counter.dead_time", "0 to 1 s"],
        ),
        (
            &[(
                "background: 1,",
                "background: 1, added: (tubes: 1, levels: [9]),",
            )],
            &["ladder.added", "level 9", "1 to 8"],
        ),
    ];
    for (changes, says) in cases {
        let home = Home::new();
        protocol(&home, changes);
        let ran = home.run(&["new", "rack.ron", "--from", "protocol.ron"]);
        assert_eq!(ran.code, 65, "{changes:?}: {ran:?}");
        for part in *says {
            assert!(ran.err.contains(part), "{changes:?}: {part}: {}", ran.err);
        }
        assert!(!home.path("rack.ron").exists());
    }
}
