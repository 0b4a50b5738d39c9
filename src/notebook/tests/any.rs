//! What holds for any sequence of entries.

use super::*;
use proptest::prelude::*;

/// Any entry, right or wrong, about a small rack.
fn anything() -> impl Strategy<Value = What> {
    let vial = 0u32..10;
    let entry = 0u32..30;
    prop_oneof![
        6 => (vial.clone(), 0u32..5000, any::<bool>()).prop_map(|(v, c, again)| {
            let c = f64::from(c);
            if again { recount(v, c) } else { counted(v, c) }
        }),
        1 => prop::collection::vec((vial.clone(), any::<bool>()), 0..4).prop_map(|all| {
            let readings = all.into_iter().map(|(v, again)| Count {
                tube: TubeNo(v),
                reading: reading(9.0),
                again,
            });
            What::Counted { readings: readings.collect() }
        }),
        3 => entry.clone().prop_map(flagged),
        2 => entry.clone().prop_map(unflagged),
        2 => vial.clone().prop_map(lost),
        1 => (prop::option::of(vial.clone()), ".{0,8}").prop_map(|(v, t)| note(v, &t)),
        1 => "[0-9]{1,2}(\\.[0-9])? nM".prop_map(|top| amended(&top)),
        1 => (0u16..6, vial).prop_map(|(l, v)| extended(l, v)),
        8 => entry.prop_map(What::TakenBack),
        1 => Just(What::Checked { by: "bo".into(), digest: "0".into() }),
        1 => Just(What::Rescued { from: "0".into(), kept: 3, said: String::new() }),
        2 => Just(What::Closed),
        2 => Just(What::Reopened),
    ]
}

proptest! {
    #![proptest_config(ProptestConfig {
        failure_persistence: None,
        cases: 300,
        ..ProptestConfig::default()
    })]

    /// Any sequence: no panic, what is refused changes nothing, putting on top is replaying, taking
    /// back and redoing is nothing, and every state that ever was can be had again.
    #[test]
    fn any_sequence_of_entries(all in prop::collection::vec(anything(), 1..40)) {
        let mut b = opened();
        let mut states = vec![b.titration().clone()];
        for what in all {
            let before = b.clone();
            match b.record(what, at(), "ann") {
                Err(refusal) => {
                    prop_assert!(!refusal.to_string().is_empty());
                    prop_assert_eq!(before.entries(), b.entries());
                    prop_assert_eq!(before.titration(), b.titration());
                    continue;
                }
                Ok(entry) => {
                    prop_assert_eq!(entry.n, before.revision() + 1);
                    prop_assert!(b.is_live(entry.n));
                    prop_assert!(!b.describe(&entry).is_empty());
                }
            }
            states.push(b.titration().clone());
            let again = Notebook::replay(b.entries().to_vec()).unwrap();
            prop_assert_eq!(again.titration(), b.titration());
            prop_assert_eq!(&again.live, &b.live);

            if let Some(n) = b.last_takeable() {
                let mut walk = b.clone();
                if walk.record(What::TakenBack(n), at(), "ann").is_ok() {
                    let redo = walk.last_taken_back();
                    prop_assert_eq!(redo, Some(walk.revision()));
                    walk.record(What::TakenBack(redo.unwrap()), at(), "ann").unwrap();
                    prop_assert_eq!(walk.titration(), b.titration());
                    prop_assert_eq!(walk.last_taken_back(), b.last_taken_back());
                }
            }
        }
        for (n, state) in (1..).zip(&states) {
            prop_assert_eq!(&b.as_of(n).unwrap(), state);
        }
    }
}
