//! Estimates in words, the same on the screen and on paper.

use crate::analysis::Analysis;
use crate::assay::{DisplayUnit, Protocol, sites_shown};
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

/// Kd in the unit of the protocol.
///
/// While the interval has no upper end no estimate is shown: the readings only say what Kd is above.
pub fn kd(protocol: &Protocol, fit: &Fit) -> Shown {
    let unit = protocol.display.concentration;
    let Some(e) = fit.estimate("kd_nm") else {
        return nothing();
    };
    shown(e, |nm| unit.from_nm(nm), unit.word(), false)
}

/// pKd, the negative decadic logarithm of Kd in M; `None` while an end of Kd is open.
pub fn p_kd(fit: &Fit) -> Option<String> {
    let e = fit.estimate("kd_nm")?;
    e.low.value().and(e.high.value())?;
    Some(format!("{:.2}", 9.0 - e.value.log10()))
}

/// Sites in the unit of the protocol.
pub fn sites(protocol: &Protocol, fit: &Fit) -> Shown {
    let scale = sites_shown(protocol);
    let Some(e) = fit.estimate("sites_nm") else {
        return nothing();
    };
    shown(e, |nm| nm * scale.per_nm, scale.unit, false)
}

/// Sites as a concentration in the tube.
pub fn sites_in_tube(protocol: &Protocol, fit: &Fit) -> Shown {
    let unit = protocol.display.concentration;
    let Some(e) = fit.estimate("sites_nm") else {
        return nothing();
    };
    shown(
        e,
        |nm| unit.from_nm(nm),
        &format!("{} in the tube", unit.word()),
        false,
    )
}

/// Nonspecific bound per free, dimensionless.
pub fn ns(fit: &Fit) -> Shown {
    fit.estimate("ns")
        .map_or_else(nothing, |e| shown(e, |v| v, "", true))
}

/// Background in cpm.
pub fn background(fit: &Fit) -> Shown {
    fit.estimate("background_cpm")
        .map_or_else(nothing, |e| shown(e, |v| v, "cpm", true))
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

/// What the intervals leave out.
pub const TAKEN_AS_EXACT: &str =
    "stock (no decay computed), efficiency, volume, protein taken as exact";

/// The same in the room of a screen.
pub const TAKEN_AS_EXACT_SHORT: &str = "stock, efficiency, volume taken as exact";
