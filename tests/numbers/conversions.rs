//! Counts to amounts and back: worked values, computed by hand or in 50 digits, through the project's own conversions.

use crate::racks::{find, keep, sheet};
use rackside::analysis::analyse;
use rackside::assay::{
    Protocol, Role, Titration, background, counts_per_nm, measured, observed, sites_by_amount,
};
use rackside::units::{
    AVOGADRO, FMOL_PER_NM_ML, Mark, SECONDS_PER_YEAR, SpecificActivity, carrier_free_dpm_per_fmol,
};

/// Within half a unit of the last of `digits` digits.
#[track_caller]
fn digits(got: f64, want: f64, digits: i32) {
    let unit = 10f64.powi(want.abs().log10().floor() as i32 + 1 - digits);
    assert!(
        (got - want).abs() <= 0.5 * unit * (1.0 + 1e-6),
        "got {got}, want {want} to {digits} digits"
    );
}

fn protocol(changes: &[(&str, &str)]) -> Protocol {
    sheet(changes).protocol
}

/// 1200 net cpm at an efficiency of 0.45 and 80 Ci/mmol, 0.05 mg protein in 0.5 mL (the example's values).
#[test]
fn net_cpm_to_fmol_to_protein_to_concentration() {
    let p = protocol(&[]);
    let fmol = 1200.0 / p.counts_per_fmol();
    digits(fmol, 15.01501502, 10);
    let nm = 1200.0 / counts_per_nm(&p);
    digits(1000.0 * nm, 30.03003, 7);
    let scale = sites_by_amount(&p).unwrap();
    assert_eq!(scale.unit, "fmol/mg");
    digits(nm * scale.per_nm, 300.3003, 7);
    // fmol/mg are pmol/g: the same number for wet tissue.
    let p = protocol(&[("Protein(\"50 ug\")", "Tissue(\"50 ug\")")]);
    let scale = sites_by_amount(&p).unwrap();
    assert_eq!(scale.unit, "pmol/g");
    digits(nm * scale.per_nm, 300.3003, 7);
}

/// The fraction counted stands beside the efficiency: half of the tube counted, half the counts.
#[test]
fn half_of_a_tube_gives_half_its_counts() {
    let half = protocol(&[("fraction: \"100 %\"", "fraction: \"50 %\"")]);
    let fmol = 600.0 / half.counts_per_fmol();
    digits(fmol, 15.01501502, 10);
}

/// 10 fmol on 2.5e5 cells, from the Avogadro constant.
#[test]
fn fmol_to_sites_per_cell() {
    let p = protocol(&[("Protein(\"50 ug\")", "Cells(\"2.5e5\")")]);
    let nm = 10.0 / (FMOL_PER_NM_ML * p.incubation.volume.base());
    let scale = sites_by_amount(&p).unwrap();
    assert_eq!(scale.unit, "sites/cell");
    digits(nm * scale.per_nm, 24088.563, 8);
    let p = protocol(&[("Protein(\"50 ug\")", "Unknown")]);
    assert_eq!(sites_by_amount(&p), None);
}

/// An aliquot of 88911 dpm at 80 Ci/mmol in 0.5 mL is 1.00125 nM.
#[test]
fn dpm_added_to_concentration() {
    let sa = SpecificActivity::parse("80 Ci/mmol", Mark::Point).unwrap();
    let p = protocol(&[]);
    let nm = 88911.0 / sa.base() / (FMOL_PER_NM_ML * p.incubation.volume.base());
    digits(nm, 1.00125, 6);
}

/// 1 mCi/mL at 80 Ci/mmol is 12.5 uM, and 4.0 uL of it in 10 mL is 5 nM. A curie is 3.7e10 per second by definition.
#[test]
fn activity_per_volume_to_concentration() {
    let sa = SpecificActivity::parse("80 Ci/mmol", Mark::Point).unwrap();
    let dpm_per_ml = 1e-3 * 3.7e10 * 60.0;
    let nm = dpm_per_ml / sa.base() / FMOL_PER_NM_ML;
    digits(nm, 12_500.0, 12);
    digits(nm * 0.004 / 10.0, 5.0, 12);
}

/// Units of specific activity that mean the same: 1 Ci/mmol = 2.22 dpm/fmol = 0.037 TBq/mmol.
#[test]
fn specific_activity_in_any_unit() {
    for same in [
        "80 Ci/mmol",
        "177.6 dpm/fmol",
        "2.96 TBq/mmol",
        "2960 GBq/mmol",
        "2.96 Bq/fmol",
        "0.08 Ci/umol",
        "80 mCi/umol",
        "80000 mCi/mmol",
        "80 uCi/nmol",
        "0.08 uCi/pmol",
        "2.96 kBq/pmol",
        "2.96 MBq/nmol",
        "2.96 GBq/umol",
    ] {
        let sa = SpecificActivity::parse(same, Mark::Point).unwrap();
        digits(sa.base(), 177.6, 12);
    }
}

const MINUTE: f64 = 60.0;
const HOUR: f64 = 3600.0;
const DAY: f64 = 86400.0;

/// Carrier-free activity from half-lives of ICRP Publication 107 and the Avogadro constant (exact in the SI): half-life in seconds, Ci/mmol,
/// dpm/fmol and how many digits of the latter two stand in the table.
#[test]
fn carrier_free_activity_of_the_nuclides() {
    assert_eq!(AVOGADRO, 6.02214076e23);
    assert_eq!(SECONDS_PER_YEAR, 31_556_926.08);
    let year = SECONDS_PER_YEAR;
    for (_, half_life, ci_per_mmol, dpm_per_fmol, ci_digits, dpm_digits) in [
        ("H-3", 12.32 * year, 29.018118, 64.420221, 8, 8),
        ("C-14", 5700.0 * year, 0.062719862, 0.13923809, 8, 8),
        ("P-32", 14.263 * DAY, 9154.8243, 20323.71, 8, 7),
        ("P-33", 25.34 * DAY, 5152.9305, 11439.506, 8, 8),
        ("S-35", 87.51 * DAY, 1492.1181, 3312.5023, 8, 8),
        ("I-125", 59.400 * DAY, 2198.2367, 4880.0854, 8, 8),
        ("I-131", 8.0207 * DAY, 16279.783, 36141.119, 8, 8),
        ("F-18", 109.77 * MINUTE, 1712930.4, 3802705.6, 8, 8),
        ("C-11", 20.39 * MINUTE, 9221597.5, 20471946.0, 8, 8),
        ("Tc-99m", 6.015 * HOUR, 520998.54, 1156616.8, 8, 8),
        ("In-111", 2.8047 * DAY, 46555.874, 103354.04, 8, 8),
        ("Lu-177", 6.647 * DAY, 19644.239, 43610.211, 8, 8),
        ("Cu-64", 12.700 * HOUR, 246756.4, 547799.2, 7, 7),
        ("Ga-68", 67.71 * MINUTE, 2776966.1, 6164864.7, 8, 8),
        ("Zr-89", 78.41 * HOUR, 39966.92, 88726.563, 7, 8),
    ] {
        let dpm = carrier_free_dpm_per_fmol(half_life);
        digits(dpm, dpm_per_fmol, dpm_digits);
        let one = SpecificActivity::parse("1 Ci/mmol", Mark::Point).unwrap();
        digits(dpm / one.base(), ci_per_mmol, ci_digits);
    }
}

/// A rack of one total tube counted 2400 in 2 min, its background vials 250 in 10 min all together.
fn counted(blanks: &[(f64, f64)]) -> Titration {
    let vials = format!("background: {}", blanks.len());
    let mut t = sheet(&[("background: 1", vials.as_str())]);
    let tube = find(&t, Role::Total, Some(1), 1);
    keep(&mut t, &tube, 2400.0, 2.0, None);
    for ((counts, minutes), n) in blanks.iter().zip(1..) {
        let vial = find(&t, Role::Background, None, n);
        keep(&mut t, &vial, *counts, *minutes, None);
    }
    t
}

/// 2400 in 2 min over 250 in 10 min: 1175.000 cpm net, standard deviation 24.545875 (Currie 1968, Anal Chem 40:586; formula from memory).
#[test]
fn net_rate_and_its_counting_error() {
    for blanks in [&[(250.0, 10.0)][..], &[(100.0, 4.0), (150.0, 6.0)]] {
        let t = counted(blanks);
        let tube = find(&t, Role::Total, Some(1), 1);
        let blank = background(&t, true).unwrap();
        assert_eq!(blank.cpm(), 25.0);
        let m = measured(&t, &tube, observed(&t, tube.no, true).unwrap(), blank).unwrap();
        let per_nm = counts_per_nm(&t.protocol);
        digits(m.bound_nm * per_nm, 1175.0, 12);
        digits(m.bound_sd_nm * per_nm, 24.545875, 8);
        digits(m.free_nm, 0.05 - 1175.0 / per_nm, 12);
        // The analysis shows the same for the tube, and nothing for a background vial.
        let shown = analyse(&t);
        let of = |no| shown.tubes.iter().find(|r| r.tube.no == no).unwrap();
        assert_eq!(of(tube.no).measured, Some(m));
        let vial = find(&t, Role::Background, None, 1);
        assert_eq!(of(vial.no).measured, None);
    }
}

/// Recounts add up: 1200 in 1 min twice is 2400 in 2 min.
#[test]
fn a_recount_adds_counts_and_minutes() {
    let mut t = counted(&[(250.0, 10.0)]);
    let tube = find(&t, Role::Total, Some(1), 1);
    let once = observed(&t, tube.no, true).unwrap();
    t.kept.clear();
    keep(&mut t, &tube, 1300.0, 1.0, None);
    keep(&mut t, &tube, 1100.0, 1.0, None);
    assert_eq!(observed(&t, tube.no, true).unwrap(), once);
}
