//! What shows without label: background vials of a counter, blanks of a reader; and the standards of a reader.

use super::amounts::observed_in;
use super::counts::{Counting, Observed};
use super::rack::{Role, Titration};
use super::vials::{Dispersion, dispersion, pooled};
use super::working::{Step, Value};

/// The chance below which background vials scatter more than counting alone allows.
const SCATTERED_BELOW: f64 = 0.05;

/// The background vials taken together; of a reader, its blanks.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Background {
    /// Gross counts of all of them; of a reader, the sum of its signals.
    pub counts: f64,
    /// Minutes counted, all together; of a reader, how many readings.
    pub minutes: f64,
    /// How many vials.
    pub vials: usize,
    /// Counts per minute; of a reader, the mean signal.
    pub cpm: f64,
    /// The variance of that.
    pub variance: f64,
    /// How the vials scatter, where there are several.
    pub dispersion: Option<Dispersion>,
    /// The variance between vials in cpm^2, where they scatter more than counting alone allows, else zero; of a reader, the
    /// variance of one blank reading.
    pub between: f64,
}

impl Background {
    /// Counts per minute.
    pub fn cpm(&self) -> f64 {
        self.cpm
    }

    /// Whether the vials scatter more than counting alone allows.
    pub fn scattered(&self) -> bool {
        self.dispersion.is_some_and(|d| d.p < SCATTERED_BELOW) && self.between > 0.0
    }
}

/// The background vials taken together; with `flags`, readings that are flagged are left out.
///
/// Poisson counts of the same rate add up, so the sum carries all that the vials say of it. Where they scatter more than
/// that (index of dispersion), they are weighed with a variance between vials, which every tube has then too. Where the rack has no
/// background vial, the background that the counter had counted and taken off stands in.
pub fn background(titration: &Titration, flags: bool) -> Option<Background> {
    let counting = Counting::of(&titration.protocol);
    let vials: Vec<Observed> = titration
        .tubes
        .iter()
        .filter(|t| t.role == Role::Background)
        .filter_map(|t| observed_in(&counting, titration, t, flags))
        .collect();
    let sum = vials
        .iter()
        .fold(Observed::default(), |sum, o| sum.plus(*o));
    if titration.protocol.separation.counted.is_signal() {
        return blanks(titration, &vials, sum);
    }
    if vials.is_empty() {
        return taken_off(titration);
    }
    let (counts, minutes) = (sum.counts, sum.minutes);
    let pairs: Vec<(f64, f64)> = vials.iter().map(|o| (o.counts, o.minutes)).collect();
    let dispersion = dispersion(&pairs);
    let plain = Background {
        counts,
        minutes,
        vials: vials.len(),
        cpm: counts / minutes,
        variance: counts / minutes.powi(2),
        dispersion,
        between: 0.0,
    };
    let between = dispersion.map_or(0.0, |d| {
        if d.p < SCATTERED_BELOW {
            d.between
        } else {
            0.0
        }
    });
    if between <= 0.0 {
        return Some(plain);
    }
    let (cpm, variance) = pooled(&pairs, between)?;
    Some(Background {
        cpm,
        variance,
        between,
        ..plain
    })
}

/// How the background is reckoned, for the working of a tube.
pub(super) fn steps(titration: &Titration, background: &Background) -> Vec<Step> {
    let signal = titration.protocol.separation.counted.is_signal();
    let (unit, of) = if signal {
        ("signal", ["signal", "readings"])
    } else {
        ("cpm", ["counts", "min"])
    };
    let error = background.variance.sqrt();
    let sum = |symbol, what| {
        let (n, t) = (background.counts, background.minutes);
        let of = [Value::new("Nb", n, of[0]), Value::new("tb", t, of[1])];
        Step::new(what, Value::new(symbol, n / t, unit), "Nb / tb", of)
    };
    if !background.scattered() {
        let what = if signal {
            "mean of the blanks"
        } else {
            "background"
        };
        let plain = sum("b", what);
        let gives = plain.gives.clone().give_or_take(error);
        let of_error = if signal {
            let of = [
                Value::new("s2", background.between, "of a blank"),
                Value::new("tb", background.minutes, of[1]),
            ];
            let what = "its error, from the scatter of the blanks";
            Step::new(what, Value::new("eb", error, unit), "sqrt(s2 / tb)", of)
        } else {
            let what = "its error, of counting";
            let of = plain.of.clone();
            Step::new(what, Value::new("eb", error, unit), "sqrt(Nb) / tb", of)
        };
        return vec![Step { gives, ..plain }, of_error];
    }
    weighed(
        titration,
        background,
        sum("b0", "background, all vials alike"),
    )
}

/// The same where vials scatter: the index of their dispersion, the variance between them, and their mean by weight.
fn weighed(titration: &Titration, background: &Background, plain: Step) -> Vec<Step> {
    let rate = plain.gives.value;
    let mut steps = vec![plain];
    let counting = Counting::of(&titration.protocol);
    let of_vials = titration
        .tubes
        .iter()
        .filter(|t| t.role == Role::Background);
    let vials: Vec<_> = of_vials
        .filter_map(|t| Some((t.no, observed_in(&counting, titration, t, true)?)))
        .collect();
    let (mut index, mut squares) = (0.0, 0.0);
    for (no, o) in &vials {
        let before = index;
        index += (o.counts - o.minutes * rate).powi(2) / (o.minutes * rate);
        squares += o.minutes * o.minutes;
        steps.push(Step::new(
            format!("index of dispersion, vial {no} added"),
            Value::new("X", index, ""),
            "Y + (N - t * b0) ^ 2 / (t * b0)",
            [
                Value::new("Y", before, "so far"),
                Value::new("N", o.counts, "counts"),
                Value::new("t", o.minutes, "min"),
                Value::new("b0", rate, "cpm"),
            ],
        ));
    }
    steps.push(Step::new(
        "variance between vials",
        Value::new("s2", background.between, "cpm^2"),
        "b0 * (X - d) / (tb - Q / tb)",
        [
            Value::new("b0", rate, "cpm"),
            Value::new("X", index, ""),
            Value::new("d", vials.len() as f64 - 1.0, "vials less one"),
            Value::new("tb", background.minutes, "min"),
            Value::new("Q", squares, "sum of t^2"),
        ],
    ));
    let (mut weights, mut sum) = (0.0, 0.0);
    for (no, o) in &vials {
        let (before, so_far) = (weights, sum);
        let weight = 1.0 / (rate / o.minutes + background.between);
        weights += weight;
        sum += weight * o.counts / o.minutes;
        let of = |first, value, unit| {
            [
                Value::new(first, value, unit),
                Value::new("b0", rate, "cpm"),
                Value::new("t", o.minutes, "min"),
                Value::new("s2", background.between, "cpm^2"),
            ]
        };
        steps.push(Step::new(
            format!("weights, vial {no} added"),
            Value::new("W", weights, ""),
            "V + 1 / (b0 / t + s2)",
            of("V", before, "so far"),
        ));
        let counts = [Value::new("N", o.counts, "counts")];
        steps.push(Step::new(
            format!("weighed rates, vial {no} added"),
            Value::new("R", sum, ""),
            "P + N / t / (b0 / t + s2)",
            of("P", so_far, "so far").into_iter().chain(counts),
        ));
    }
    steps.push(Step::new(
        "background, vials weighed with their own scatter",
        Value::new("b", background.cpm, "cpm").give_or_take(background.variance.sqrt()),
        "R / W",
        [Value::new("R", sum, ""), Value::new("W", weights, "")],
    ));
    steps.push(Step::new(
        "its error",
        Value::new("eb", background.variance.sqrt(), "cpm"),
        "1 / sqrt(W)",
        [Value::new("W", weights, "")],
    ));
    steps
}

/// The background that the counter took off, as counts in the minutes it was counted for.
fn taken_off(titration: &Titration) -> Option<Background> {
    let off = titration.protocol.counter.subtracted.as_ref()?;
    let minutes = off.minutes.as_ref()?.base();
    let cpm = off.rate.base();
    Some(Background {
        counts: cpm * minutes,
        minutes,
        vials: 0,
        cpm,
        variance: cpm / minutes,
        dispersion: None,
        between: 0.0,
    })
}

/// The blanks of a reader. The variance of one is that among them, or as the protocol has it where there is only one.
fn blanks(titration: &Titration, vials: &[Observed], sum: Observed) -> Option<Background> {
    if vials.is_empty() {
        return None;
    }
    let mean = sum.counts / sum.minutes;
    let n = vials.len() as f64;
    let squares: f64 = vials
        .iter()
        .map(|o| o.minutes * (o.counts / o.minutes - mean).powi(2))
        .sum();
    let noise = noise_known(titration);
    let between = if vials.len() > 1 {
        squares / (n - 1.0)
    } else {
        noise.map_or(0.0, |s| s * s)
    };
    Some(Background {
        counts: sum.counts,
        minutes: sum.minutes,
        vials: vials.len(),
        cpm: mean,
        variance: between / sum.minutes,
        dispersion: None,
        between,
    })
}

/// What is known of the standard deviation of a blank reading.
pub fn noise_known(titration: &Titration) -> Option<f64> {
    match titration.protocol.separation.counted {
        super::protocol::Counted::Signal { noise, .. } => noise,
        _ => None,
    }
}

/// The standards of a reader taken together.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Calibration {
    /// Signal for one nM in the volume that is read.
    pub gain: f64,
    /// The highest mean signal of a standard; what lies above was never shown to be in line.
    pub highest: f64,
}

/// The gain that the standards show: their signals less the blank, over their concentrations, sums of both. Good enough to show amounts
/// before there is a fit, which has the standards as evidence of its own.
pub fn calibration(titration: &Titration, flags: bool) -> Option<Calibration> {
    let blank = background(titration, flags)?.cpm();
    let counting = Counting::of(&titration.protocol);
    let (mut above, mut held, mut highest) = (0.0, 0.0, f64::NEG_INFINITY);
    let mut by_standard: std::collections::BTreeMap<u16, Observed> = Default::default();
    for tube in titration.tubes.iter().filter(|t| t.role == Role::Standard) {
        let Some(o) = observed_in(&counting, titration, tube, flags) else {
            continue;
        };
        above += o.counts - blank * o.minutes;
        held += titration.standard_nm(tube)? * o.minutes;
        let all = by_standard.entry(tube.standard?).or_default();
        *all = all.plus(o);
    }
    for o in by_standard.values() {
        highest = f64::max(highest, o.counts / o.minutes);
    }
    (above > 0.0 && held > 0.0).then_some(Calibration {
        gain: above / held,
        highest,
    })
}
