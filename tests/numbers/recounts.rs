//! A recount adds counts and minutes to its tube; the tube's CV acts once, on the tube, however often it was
//! counted. (The variance of the design: `V = mu + cv^2 (mu - t b)^2` for the whole of a tube's counts; a tube
//! that was pipetted once errs once.)

use crate::racks::{find, keep, simulated};
use rackside::analysis::analyse;
use rackside::assay::{Kept, Reading, ReadingId, Role, Titration};
use rackside::fit::{Evidence, RackEvidence};
use rackside::{binding::OneClass, fit::fit_rack};

const EXP1: &str = include_str!("data/exp1_ideal.csv");

fn added_at_once(t: &Titration, counts: f64, minutes: f64) -> Titration {
    let mut t = t.clone();
    let tube = find(&t, Role::Total, Some(5), 1);
    let kept = t.kept.get_mut(&tube.no).unwrap();
    let sum = kept[0].reading.value + counts;
    let time = kept[0].reading.minutes + minutes;
    kept[0] = Kept {
        reading: Reading::counts(format!("{sum}"), sum, time),
        ..kept[0].clone()
    };
    t
}

#[test]
fn a_recount_is_the_same_as_having_counted_longer() {
    let once = simulated(EXP1, &[]);
    let mut twice = once.clone();
    let tube = find(&twice, Role::Total, Some(5), 1);
    keep(&mut twice, &tube, 2890.0, 5.0, None);
    assert_eq!(twice.kept(tube.no).len(), 2);
    let longer = added_at_once(&once, 2890.0, 5.0);
    assert_eq!(fit_rack(&twice, true), fit_rack(&longer, true));
    // It is one tube still, and says more than it did.
    let (before, after) = (fit_rack(&once, true), fit_rack(&twice, true));
    let (before, after) = (before.fit().unwrap(), after.fit().unwrap());
    assert_eq!(before.tubes_used, after.tubes_used);
    assert_ne!(before.minus2lnl, after.minus2lnl);
}

#[test]
fn the_cv_acts_once_however_long_a_tube_is_counted() {
    let t = simulated(EXP1, &[]);
    let theta = {
        let e = RackEvidence::<OneClass>::new(&t, true).unwrap();
        let mut theta = vec![
            0.5f64.ln(),
            0.02f64.ln(),
            0.002f64.ln(),
            25f64.ln(),
            0.04f64.ln(),
        ];
        theta.resize(e.dim(), 0.0);
        theta
    };
    let place = |t: &Titration| {
        let e = RackEvidence::<OneClass>::new(t, true).unwrap();
        let tube = find(t, Role::Total, Some(5), 1);
        let i = e.samples().iter().position(|s| s.tube == tube.no).unwrap();
        let of = e.expected(&e.samples()[i], &theta);
        (of.mean, of.variance)
    };
    let (mu, v) = place(&t);
    // Ten times the minutes: ten times the mean, and a tube part of the variance a hundred times as large, not ten.
    let (mu10, v10) = place(&added_at_once(&t, 9.0 * 1120.0, 18.0));
    assert!((mu10 / mu - 10.0).abs() < 1e-12);
    assert!(((v10 - mu10) / (v - mu) - 100.0).abs() < 1e-9);
}

#[test]
fn a_flag_on_one_count_leaves_the_others_in() {
    let mut t = simulated(EXP1, &[]);
    let tube = find(&t, Role::Total, Some(5), 1);
    let first = t.kept(tube.no)[0].reading.value;
    let kept = t.kept.get_mut(&tube.no).unwrap();
    kept.push(Kept {
        id: ReadingId(99, 0),
        reading: Reading::counts("3", 3.0, 2.0),
        suspect: Some(rackside::assay::Reason::CounterFault.into()),
    });
    let a = analyse(&t);
    let r = a.tubes.iter().find(|r| r.tube.no == tube.no).unwrap();
    assert_eq!(r.observed.unwrap().counts, first);
    assert!(r.suspect.is_none());
    assert_ne!(a.outcome, *a.without_flags());
}
