//! Whole fits against an independent implementation of the same likelihood (a general minimiser, no shared
//! code). The racks are simulated; what they were simulated from stands in their first line.

use crate::racks::simulated;
use rackside::fit::{Fit, fit_rack};

const EXP1: &str = include_str!("data/exp1_ideal.csv");
const EXP5: &str = include_str!("data/exp5_lowcounts.csv");
const FREE_CV: (&str, &str) = (
    "cv_prior: Some((centre: 0.06, sd_ln: 0.7))",
    "cv_prior: None",
);

/// Within half a unit of the last of `digits` digits.
#[track_caller]
fn agrees(got: f64, want: f64, digits: i32) {
    let unit = 10f64.powi(want.abs().log10().floor() as i32 + 1 - digits);
    assert!(
        (got - want).abs() <= 0.5 * unit * (1.0 + 1e-6),
        "got {got}, want {want} to {digits} digits"
    );
}

fn fitted(t: &rackside::assay::Titration) -> Fit {
    fit_rack(t, true).fit().unwrap().clone()
}

#[track_caller]
fn interval(fit: &Fit, name: &str, low: f64, high: f64) {
    let e = fit.estimate(name).unwrap();
    agrees(e.low.value().unwrap(), low, 6);
    agrees(e.high.value().unwrap(), high, 6);
}

#[test]
fn exp1_with_the_cv_left_to_the_readings() {
    let fit = fitted(&simulated(EXP1, &[FREE_CV]));
    assert!(
        (fit.minus2lnl - 296.485356).abs() < 1e-6,
        "{}",
        fit.minus2lnl
    );
    assert_eq!(fit.prior_term, 0.0);
    assert!((fit.aicc.unwrap() - 308.7076).abs() < 1e-4);
    agrees(fit.value("kd_nm"), 0.48648349, 7);
    agrees(fit.value("sites_nm"), 0.019805582, 7);
    agrees(fit.value("ns"), 0.0019256864, 7);
    agrees(fit.value("background_cpm"), 24.419057, 7);
    agrees(fit.cv, 0.038013014, 7);
    interval(&fit, "kd_nm", 0.423338, 0.563331);
    interval(&fit, "sites_nm", 0.0184477, 0.0213757);
    interval(&fit, "ns", 0.00182242, 0.00203775);
}

#[test]
fn exp1_with_the_cv_prior() {
    let fit = fitted(&simulated(EXP1, &[]));
    assert!(
        (fit.minus2lnl - 296.533660).abs() < 1e-6,
        "{}",
        fit.minus2lnl
    );
    assert!(
        (fit.prior_term - 0.320384).abs() < 1e-4,
        "{}",
        fit.prior_term
    );
    assert!((fit.aicc.unwrap() - 308.7559).abs() < 1e-4);
    agrees(fit.value("kd_nm"), 0.48733687, 7);
    agrees(fit.value("sites_nm"), 0.019814494, 7);
    agrees(fit.value("ns"), 0.0019262296, 7);
    agrees(fit.value("background_cpm"), 24.419035, 7);
    agrees(fit.cv, 0.040371632, 7);
    interval(&fit, "kd_nm", 0.422379, 0.565997);
    interval(&fit, "sites_nm", 0.0184103, 0.021433);
}

#[test]
fn exp5_with_few_counts() {
    let fit = fitted(&simulated(EXP5, &[]));
    assert!(
        (fit.minus2lnl - 217.975772).abs() < 1e-6,
        "{}",
        fit.minus2lnl
    );
    assert!(
        (fit.prior_term - 0.013368).abs() < 1e-4,
        "{}",
        fit.prior_term
    );
    assert!((fit.aicc.unwrap() - 230.1980).abs() < 1e-4);
    agrees(fit.value("kd_nm"), 0.43829757, 7);
    agrees(fit.value("sites_nm"), 0.0040311431, 7);
    agrees(fit.value("ns"), 0.00041025035, 7);
    agrees(fit.value("background_cpm"), 24.235742, 7);
    agrees(fit.cv, 0.065057958, 7);
    interval(&fit, "kd_nm", 0.210888, 0.893854);
    interval(&fit, "sites_nm", 0.00307863, 0.00539685);
}
