//! A notebook with every kind of entry; all of it invented.

use rackside::assay::{
    Level, LevelNo, Made, Reading, ReadingId, Reason, Role, Scale, Sheet, Stamp, Suspicion, Tube,
    TubeNo,
};
use rackside::notebook::{Count, Notebook, What};
use rackside::store::Holder;
use rackside::units::{Amount, Mark};

const SHEET: &str = r#"(
    protocol: (
        title: "retina batch 9 (invented)",
        operator: "ann",
        ligand: (name: "ligand 31", label: "H-3", specific_activity: "3.1 TBq/mmol"),
        receptor: (preparation: "membranes", amount: Protein("40 ug")),
        incubation: (volume: "0.5 mL", time: Some("60 min")),
        nonspecific: (sticks: ToPreparation, concentration: "10 uM"),
        counter: (efficiency: "45 %", minutes: "2 min", background: (minutes: "10 min")),
    ),
    ladder: (levels: List(["0.5 nM", "5.0 nM"]), total: 2, nonspecific: 1),
)"#;

pub fn at() -> Stamp {
    Stamp::parse("2031-05-04T10:14:03+02:00").unwrap()
}

pub fn holder() -> Holder {
    Holder {
        who: "ann".into(),
        since: at(),
    }
}

/// Vials 1 to 6 in two levels, vial 7 background.
pub fn opened() -> Notebook {
    let sheet: Sheet = ron::from_str(SHEET).unwrap();
    let t = sheet.titration().unwrap();
    Notebook::open(t.protocol, t.levels, t.tubes, at(), "ann").unwrap()
}

pub fn note(text: &str) -> What {
    What::Noted {
        tube: None,
        text: text.into(),
    }
}

pub fn counted(vial: u32, counts: f64) -> What {
    let reading = Reading::counts(counts.to_string(), counts, 2.0);
    let readings = vec![Count::first(TubeNo(vial), reading)];
    What::Counted { readings }
}

pub fn book(all: impl IntoIterator<Item = What>) -> Notebook {
    let mut b = opened();
    for what in all {
        b.record(what, at(), "ann").unwrap();
    }
    b
}

/// Every kind of entry once at least.
pub fn everything() -> Notebook {
    let b = opened();
    let protocol = Box::new(b.titration().protocol.clone());
    let levels = b.titration().levels.clone();
    let printed = Reading {
        raw: "1203.5 cpm".into(),
        value: 1203.5,
        scale: Scale::Cpm,
        minutes: 0.1 + 0.2,
        counted: Some(at()),
        quench: Some(412.25),
        own_minutes: true,
        own_scale: true,
        pass: 1,
        confirmed: true,
    };
    let plain = |raw: &str, value| Reading::counts(raw, value, 10.0);
    book([
        What::Counted {
            readings: vec![
                Count::first(TubeNo(7), plain("0", 0.0)),
                Count::first(TubeNo(1), plain("2 258", 2258.0)),
                Count::again(TubeNo(1), printed),
            ],
        },
        What::Flagged {
            reading: ReadingId(2, 1),
            why: Suspicion {
                reason: Reason::Other,
                words: "smoke, \"blue\"\n// and more\r\u{1b}[2J".into(),
            },
        },
        What::Unflagged {
            reading: ReadingId(2, 1),
        },
        What::Lost {
            tube: TubeNo(2),
            why: Reason::FilterTorn.into(),
        },
        note("filter 2 cloudy"),
        What::Noted {
            tube: Some(TubeNo(1)),
            text: "µ \\ ' ]) // 3 entries, last".into(),
        },
        What::TakenBack(6),
        What::Extended {
            levels: vec![Level {
                no: LevelNo(3),
                added: Amount::parse("20 nM", Mark::Point).unwrap(),
                made: Made::FromLevel(LevelNo(2)),
            }],
            tubes: vec![Tube::new(TubeNo(8), Role::Total, Some(LevelNo(3)), 1)],
        },
        What::TakenBack(9),
        What::Amended {
            protocol,
            levels,
            reason: "title".into(),
        },
        What::Rescued {
            from: "0123456789abcdef".into(),
            kept: 4,
            said: "line 6 cut".into(),
        },
        What::Closed,
        What::Checked {
            by: "bo".into(),
            digest: "fedcba9876543210".into(),
        },
        What::Reopened,
    ])
}
