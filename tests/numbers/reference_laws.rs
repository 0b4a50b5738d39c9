//! Every law of binding against the independent implementation `reference.py`, on racks of two classes, of Hill's isotherm and with
//! errors that all tubes share; the figures stand in `data/racks/*.json` under `models`.

use crate::reference_racks::{Found, Rack, titration};
use rackside::fit::{End, Fit, Missing, Model, Outcome, fit_model};

/// To seven digits or better: the least sure figures of the reference are ends of long profiles.
const RELATIVE: f64 = 1e-7;

#[track_caller]
fn near(what: &str, got: f64, want: f64) {
    assert!(
        (got - want).abs() <= RELATIVE * want.abs(),
        "{what}: got {got}, want {want}"
    );
}

#[track_caller]
fn agrees(model: Model, fit: &Fit, want: &Found) {
    let name = model.id();
    assert_eq!((fit.model, fit.tubes_used), (model, want.n));
    near(&format!("{name} -2 ln L"), fit.minus2lnl, want.minus2lnl);
    near(
        &format!("{name} prior terms"),
        fit.prior_term,
        want.prior_term,
    );
    near(&format!("{name} AICc"), fit.aicc.unwrap(), want.aicc);
    near(&format!("{name} cv"), fit.cv, want.estimates["cv"]);
    // Shared errors come last, in the order of the protocol.
    let order = ["stock", "specific_activity", "efficiency", "volume"];
    let errors = want.scale_e.iter().flatten().count();
    let found = &fit.theta[fit.theta.len() - errors..];
    for (got, name) in found.iter().zip(order) {
        let want = want.scale_e.as_ref().unwrap()[name];
        assert!((got - want).abs() < 1e-8, "error of {name}: {got} {want}");
    }
    assert_eq!(want.intervals.len(), fit.estimates.len());
    for e in &fit.estimates {
        let what = format!("{name} {}", e.name);
        near(&what, e.value, want.estimates[e.name]);
        near(
            &format!("{what}, se"),
            e.se_ln.unwrap(),
            want.se_ln[e.name].unwrap(),
        );
        let ends = &want.intervals[e.name];
        for (side, got, want) in [("low", e.low, ends.low), ("high", e.high, ends.high)] {
            match (got, want) {
                (End::At(got), Some(want)) => near(&format!("{what} {side}"), got, want),
                (End::Open, None) => {}
                other => panic!("{what} {side}: {other:?}"),
            }
        }
    }
}

fn held(json: &str, models: &[Model]) {
    let rack: Rack = serde_json::from_str(json).unwrap();
    let t = titration(&rack);
    let all = rack.expected.models.unwrap();
    for model in models {
        let outcome = fit_model(&t, true, *model);
        let Some(fit) = outcome.fit() else {
            panic!("{}: {outcome:?}", model.id());
        };
        let want: Found = serde_json::from_value(all[model.id()].clone()).unwrap();
        agrees(*model, fit, &want);
    }
}

const ALL: [Model; 3] = Model::ALL;

/// Two classes, each level from stock with 2 % error.
#[test]
fn two_classes() {
    held(include_str!("data/racks/two_classes.json"), &ALL);
}

/// Two classes with an error that all tubes share.
#[test]
fn two_classes_with_a_scale_error() {
    held(
        include_str!("data/racks/two_classes_scale.json"),
        &[Model::OneClass, Model::TwoClasses],
    );
}

/// Hill with n = 1.6, each level from stock. The reference finds no second class there either.
#[test]
fn hill_steep() {
    let json = include_str!("data/racks/hill_steep.json");
    held(json, &[Model::OneClass, Model::Hill]);
    let rack: Rack = serde_json::from_str(json).unwrap();
    let none = rack.expected.models.as_ref().unwrap()["two_classes"].get("none");
    assert!(none.is_some_and(|n| !n.is_null()));
    let outcome = fit_model(&titration(&rack), true, Model::TwoClasses);
    let Outcome::TooEarly(missing) = &outcome else {
        panic!("{outcome:?}");
    };
    let said = [
        Missing::SecondClass,
        Missing::NotTellingApart(Model::TwoClasses),
    ];
    assert!(missing.iter().all(|m| said.contains(m)), "{missing:?}");
}

/// One class with errors of the stock, the specific activity, the efficiency and the volume.
#[test]
fn scale_errors() {
    held(
        include_str!("data/racks/scale_errors.json"),
        &[Model::OneClass, Model::Hill],
    );
}
