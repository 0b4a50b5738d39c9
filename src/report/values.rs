//! Estimates in words, the same on the screen and on paper.

use crate::analysis::Analysis;
use crate::assay::{
    Counted, DisplayUnit, Protocol, ReceptorAmount, Side, SitesScale, Titration, sites_by_amount,
    sites_shown,
};
use crate::fit::{End, Estimate, Fit};
use crate::units::significant;

/// An estimate as it is shown.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Shown {
    /// The estimate with its unit, or what can be said instead of one.
    pub value: String,
    /// The interval, or what is known of it; may be empty.
    pub interval: String,
}

/// Significant digits of an estimate and of the ends of its interval.
const DIGITS: usize = 3;

/// A parameter of the isotherm as it is shown.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Named {
    /// What it is called: `Kd`, `sites`; with a number where there are two classes; `Kh` and `n` for Hill.
    pub name: String,
    /// Its estimate and interval.
    pub shown: Shown,
    /// pKd of a constant whose interval has both ends.
    pub p_kd: Option<String>,
    /// Sites in the tube, where `shown` has them by the amount of preparation.
    pub in_tube: Option<Shown>,
}

/// The parameters of the isotherm in the units of the protocol.
///
/// While the interval of a constant has no upper end no estimate is shown: the readings only say what it is above.
pub fn isotherm(protocol: &Protocol, fit: &Fit) -> Vec<Named> {
    let unit = protocol.display.concentration;
    let scale = sites_shown(protocol);
    fit.of_isotherm()
        .iter()
        .map(|e| {
            let name = called(e.name);
            let concentration =
                |unit_words: &str| shown(e, |nm| unit.from_nm(nm), unit_words, false);
            let (shown, p_kd, in_tube) = if e.name == "n" {
                (shown(e, |n| n, "", true), None, None)
            } else if e.name.starts_with('k') {
                let closed = e.low.value().and(e.high.value()).is_some();
                let p_kd = closed.then(|| format!("{:.2}", 9.0 - e.value.log10()));
                (concentration(unit.word()), p_kd, None)
            } else if scale == SitesScale::IN_TUBE {
                (shown(e, |nm| nm, scale.unit, false), None, None)
            } else {
                let by_amount = by_amount(protocol, fit, e);
                let shown = shown(&by_amount, |nm| nm * scale.per_nm, scale.unit, false);
                let in_tube = concentration(&format!("{} in the tube", unit.word()));
                (shown, None, Some(in_tube))
            };
            Named {
                name,
                shown,
                p_kd,
                in_tube,
            }
        })
        .collect()
}

/// What a parameter of an isotherm is called on screen and paper: `Kd 2` for `kd2_nm`.
pub fn called(name: &str) -> String {
    let bare = name.trim_end_matches("_nm");
    let (word, no) = match bare.find(|c: char| c.is_ascii_digit()) {
        Some(at) => bare.split_at(at),
        None => (bare, ""),
    };
    let word = match word {
        "kd" => "Kd",
        "kh" => "Kh",
        other => other,
    };
    if no.is_empty() {
        word.into()
    } else {
        format!("{word} {no}")
    }
}

/// Sites with what is not known of the amount of preparation that they are divided by.
pub fn by_amount(protocol: &Protocol, fit: &Fit, sites: &Estimate) -> Estimate {
    match &protocol.numbers.scale_errors.protein {
        Some(error) => sites.widened(error.base(), fit.cut),
        None => sites.clone(),
    }
}

/// The first constant of the isotherm in the unit of the protocol.
pub fn kd(protocol: &Protocol, fit: &Fit) -> Named {
    isotherm(protocol, fit).swap_remove(0)
}

/// A parameter beside those of the isotherm.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Beside {
    /// What it is called.
    pub name: &'static str,
    /// Its estimate and interval.
    pub shown: Shown,
    /// What it is, in a word or two.
    pub after: &'static str,
}

/// The parameters of a fit that are not of the isotherm, those that it has.
pub fn beside_isotherm(fit: &Fit) -> Vec<Beside> {
    let one = |of: &'static str, name: &'static str, unit: &str, after: &'static str| {
        let e = fit.estimate(of)?;
        let shown = shown(e, |v| v, unit, true);
        Some(Beside { name, shown, after })
    };
    let apart = fit.estimate("ns_filter").is_some();
    let of_ns = if apart {
        "(to the preparation)"
    } else {
        "of free label"
    };
    [
        one("ns", "nonspecific", "", of_ns),
        one("ns_filter", "on filter", "", "(after separation)"),
        one("background_cpm", "background", "cpm", ""),
        one("blank_signal", "blank", "signal", ""),
        one("gain", "gain", "signal/nM", "in the volume read"),
    ]
    .into_iter()
    .flatten()
    .collect()
}

/// Nonspecific bound per free, dimensionless.
pub fn ns(fit: &Fit) -> Shown {
    fit.estimate("ns")
        .map_or_else(nothing, |e| shown(e, |v| v, "", true))
}

/// How many tubes go through the assay; a dialysis cell is one.
pub fn through_assay(t: &Titration) -> usize {
    let assayed = t.tubes.iter().filter(|x| x.role.assayed());
    assayed.filter(|x| x.side != Some(Side::Ligand)).count()
}

/// What those are called.
pub fn tubes_word(protocol: &Protocol) -> &'static str {
    if protocol.separation.counted.is_cell() {
        "cells"
    } else {
        "tubes"
    }
}

fn nothing() -> Shown {
    Shown {
        value: "-".into(),
        interval: String::new(),
    }
}

/// `bare` keeps the estimate in sight where its interval is open above.
fn shown(e: &Estimate, scale: impl Fn(f64) -> f64, unit: &str, bare: bool) -> Shown {
    let number = |v: f64| significant(scale(v), DIGITS);
    let with_unit = |text: String| {
        if unit.is_empty() {
            text
        } else {
            format!("{text} {unit}")
        }
    };
    let value = with_unit(number(e.value));
    let only = |value: String| Shown {
        value,
        interval: String::new(),
    };
    match (e.at_floor, e.low, e.high) {
        (true, _, End::At(high)) => only(format!("below {}", with_unit(number(high)))),
        (true, _, _) => only("at its floor, no upper end".into()),
        (_, End::Failed, _) | (_, _, End::Failed) => Shown {
            value,
            interval: "interval failed".into(),
        },
        (_, End::Unasked, _) | (_, _, End::Unasked) => only(value),
        (_, End::At(low), End::At(high)) => Shown {
            value,
            interval: format!("{} to {}", number(low), number(high)),
        },
        (_, End::Open, End::At(high)) if bare => Shown {
            value,
            interval: format!("below {}, no lower end", number(high)),
        },
        (_, End::Open, End::At(high)) => Shown {
            value: format!("below {}", with_unit(number(high))),
            interval: "no lower end".into(),
        },
        (_, End::At(low), End::Open) if bare => Shown {
            value,
            interval: format!("above {}, no upper end", number(low)),
        },
        (_, End::At(low), End::Open) => Shown {
            value: format!("above {}", with_unit(number(low))),
            interval: "no upper end".into(),
        },
        (_, End::Open, End::Open) => Shown {
            value: "not determined".into(),
            interval: "no end either way".into(),
        },
    }
}

/// How many decimals show bound amounts so that the smallest counting error has two digits.
pub fn decimals(analysis: &Analysis, unit: DisplayUnit) -> usize {
    let smallest = analysis
        .tubes
        .iter()
        .filter_map(|t| t.measured.map(|m| unit.from_nm(m.bound_sd_nm)))
        .filter(|sd| *sd > 0.0)
        .fold(f64::INFINITY, f64::min);
    if smallest.is_finite() {
        (1.0 - smallest.log10().floor()).clamp(0.0, 6.0) as usize
    } else {
        3
    }
}

/// What the intervals allow for beyond the readings, and what they leave out.
pub fn left_out(protocol: &Protocol) -> Vec<String> {
    let (given, mut exact) = shared_errors(protocol);
    exact.extend(also_exact(protocol));
    let mut said = Vec::new();
    if !given.is_empty() {
        said.push(format!("allowed for: {}", given.join(", ")));
    }
    if !exact.is_empty() {
        said.push(format!("taken as exact: {}", exact.join(", ")));
    }
    if !protocol.separation.counted.is_signal() {
        let decay = if protocol.label_decayed().is_some() {
            "decay of the label computed from the activity date to the assay"
        } else if protocol.count_half_life().is_some() {
            "decay of the label computed from the assay on; specific activity and levels are taken as those of the assay"
        } else {
            "no decay computed"
        };
        said.push(decay.into());
    }
    said
}

/// What numbers rest on beside the errors that can be given, and what has none.
fn also_exact(protocol: &Protocol) -> Vec<&'static str> {
    let counter = &protocol.counter;
    let kind: &[&str] = match &protocol.separation.counted {
        Counted::Bound => &[],
        Counted::Free { .. } => &["aliquot"],
        Counted::BothSides {
            protein_after: Some(_),
            ..
        } => &["aliquots", "volume shift"],
        Counted::BothSides { .. } => &["aliquots", "no volume shift"],
        Counted::Signal { .. } => &["standards", "volume read"],
    };
    let mut exact = kind.to_vec();
    let some = [
        (
            protocol.separation.added_counted.is_some(),
            "share of the added aliquot",
        ),
        (protocol.ligand.bindable.is_some(), "bindable share"),
        (counter.dead_time.is_some(), "dead time"),
        (counter.subtracted.is_some(), "rate taken off"),
        (protocol.count_half_life().is_some(), "half-life and times"),
    ];
    exact.extend(some.iter().filter(|(has, _)| *has).map(|(_, word)| *word));
    exact
}

/// The same in the room of a screen.
pub fn left_out_in_short(protocol: &Protocol) -> String {
    let (given, exact) = shared_errors(protocol);
    match (given.len(), exact.as_slice()) {
        (0, _) if protocol.separation.counted.is_signal() => {
            "stock, standards, volume taken as exact".into()
        }
        (0, _) => "stock, efficiency, volume taken as exact".into(),
        (_, []) => "errors of scale allowed for".into(),
        (_, exact) => format!("{} exact", exact.join(", ")),
    }
}

/// The errors that all tubes share: those that are known, with their size, and those that are taken as none.
fn shared_errors(protocol: &Protocol) -> (Vec<String>, Vec<&'static str>) {
    let amount = sites_by_amount(protocol).is_some();
    let (mut given, mut exact) = (Vec::new(), Vec::new());
    let signal = protocol.separation.counted.is_signal();
    for (name, error) in protocol.numbers.scale_errors.all() {
        // A reader's gain takes the place of both.
        if signal && matches!(name, "specific activity" | "efficiency") {
            continue;
        }
        match error {
            Some(e) => given.push(format!("{name} {e}")),
            None if name == "protein" && !amount => {}
            None => exact.push(match name {
                "protein" => amount_word(protocol),
                "efficiency" if !protocol.counter.quench.is_empty() => "quench curve",
                other => other,
            }),
        }
    }
    (given, exact)
}

/// What sites are divided by.
fn amount_word(protocol: &Protocol) -> &'static str {
    match protocol.receptor.amount {
        ReceptorAmount::Cells(_) => "number of cells",
        ReceptorAmount::Tissue(_) => "tissue weight",
        _ => "protein",
    }
}
