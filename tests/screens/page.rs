//! The printed page keeps to 80 columns, whatever the rack, and its amounts agree with its curve.

use rackside::analysis::analyse;
use rackside::assay::{Kept, Reading, ReadingId, Role, Sheet, Titration, counts_per_nm};
use rackside::binding::{Block, Isotherm, Law, OneClass, Stuck, bound};
use rackside::figure::Glyphs;
use rackside::notebook::{Count, Notebook, What};
use rackside::report::{Page, text};

/// A rack without noise, from a changed example sheet.
fn rack(changes: &[(&str, &str)], one: OneClass, ns: f64, stuck: Stuck) -> Titration {
    let mut sheet = Sheet::EXAMPLE.to_string();
    for (from, to) in changes {
        assert!(sheet.contains(from), "{from}");
        sheet = sheet.replacen(from, to, 1);
    }
    let mut t = Sheet::parse(&sheet).unwrap().titration().unwrap();
    for (n, tube) in t.tubes.clone().iter().enumerate() {
        let minutes = t.protocol.minutes_for(tube.role);
        let block = match tube.role {
            Role::Nonspecific => Block::SameLigand(1000.0),
            _ => Block::None,
        };
        let nm = t.added_nm(tube).map_or(0.0, |added| {
            bound(&one, ns, stuck, added, block, &mut [0.0; 2]).value
        });
        let counts = minutes * (25.0 + counts_per_nm(&t.protocol) * nm);
        let reading = Reading::counts("simulated", counts, minutes);
        let id = ReadingId(n as u32 + 2, 0);
        t.kept.insert(
            tube.no,
            vec![Kept {
                id,
                reading,
                suspect: None,
            }],
        );
    }
    t
}

#[test]
fn no_line_is_wider_than_80_columns() {
    let small = OneClass {
        kd: 0.12,
        sites: 0.0021,
    };
    let serial = [
        ("dilution: EachFromStock", "dilution: Serial"),
        ("label: \"H-3\"", "label: \"I-125\""),
        ("80 Ci/mmol", "2000 Ci/mmol"),
        ("\"0.05 nM\"", "\"0.01234 nM\""),
        ("\"10 nM\"", "\"7.768 nM\""),
    ];
    for changes in [&serial[..], &[]] {
        let t = rack(changes, small, 0.0005, Stuck::DuringIncubation);
        let at = rackside::assay::Stamp::parse("2031-05-04T10:14:00+02:00").unwrap();
        let mut book = Notebook::open(
            t.protocol.clone(),
            t.levels.clone(),
            t.tubes.clone(),
            at,
            "A. Sample",
        )
        .unwrap();
        let readings = t
            .kept
            .iter()
            .map(|(no, k)| Count::first(*no, k[0].reading.clone()))
            .collect();
        book.record(What::Counted { readings }, at, "A. Sample")
            .unwrap();
        let analysis = analyse(book.titration());
        assert!(analysis.fit().is_some());
        let page = text(&Page {
            notebook: &book,
            analysis: &analysis,
            digest: "0123456789abcdef",
            changed: &[2],
            version: "0",
            glyphs: Glyphs::Braille,
        });
        for line in page.lines() {
            assert!(
                line.chars().count() <= 80,
                "{} columns: {line}",
                line.chars().count()
            );
        }
    }
}

/// Without noise, specific binding and free of every total tube lie on the fitted curve, wherever nonspecific
/// label sticks (the mass balance itself: `LT = F + S` for the filter, `LT = (1 + ns) F + S` for the preparation).
#[test]
fn amounts_lie_on_the_curve_for_either_place_of_sticking() {
    let one = OneClass {
        kd: 1.0,
        sites: 0.2,
    };
    for (stuck, word) in [
        (Stuck::DuringIncubation, "ToPreparation"),
        (Stuck::AfterSeparation, "ToFilter"),
    ] {
        let sticks = format!("sticks: {word}");
        let changes = [
            ("sticks: ToPreparation,", format!("{sticks},")),
            ("dilution_error: \"2 %\"", "dilution_error: \"0\"".into()),
        ];
        let changes: Vec<(&str, &str)> = changes.iter().map(|(a, b)| (*a, b.as_str())).collect();
        let t = rack(&changes, one, 0.1, stuck);
        let a = analyse(&t);
        let Law::OneClass(fit) = a.fit().unwrap().law else {
            panic!("{:?}", a.fit());
        };
        assert!(
            (fit.kd - 1.0).abs() < 1e-3 && (fit.sites - 0.2).abs() < 1e-3,
            "{fit:?}"
        );
        for r in a.tubes.iter().filter(|r| r.tube.role == Role::Total) {
            let (free, specific) = (r.free_nm.unwrap(), r.specific_nm.unwrap());
            let curve = one.specific(free);
            assert!(
                (specific - curve).abs() < 2e-3 * curve,
                "{word}: {specific} at {free}, curve {curve}"
            );
        }
    }
}
