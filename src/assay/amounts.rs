//! Counts turned into amounts: rates, femtomoles, concentrations, each with its counting error.

use super::blanks::{Background, calibration};
use super::counts::{Counting, Observed, Turn};
use super::protocol::{Counted, Protocol};
use super::rack::{Kept, Role, Side, Titration, Tube, TubeNo};
use super::reading::{Reading, ReadingError};
use super::working::{Silent, Step, Value, Work};
use crate::units::FMOL_PER_NM_ML;

/// What a vial's counts are of.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Seen {
    /// What is bound in a tube.
    Bound,
    /// What is free in a tube, an aliquot of it.
    Unbound,
    /// What a tube gets, an aliquot of it.
    Added,
    /// A side of a dialysis cell, an aliquot of it.
    Side(Side),
    /// A standard of a reader.
    Standard,
}

/// What a tube's counts are of; none for background.
pub fn seen_as(protocol: &Protocol, tube: &Tube) -> Option<Seen> {
    match (tube.role, tube.side) {
        (Role::Background, _) => None,
        (Role::Added, _) => Some(Seen::Added),
        (Role::Standard, _) => Some(Seen::Standard),
        (_, Some(side)) => Some(Seen::Side(side)),
        _ => Some(match protocol.separation.counted {
            Counted::Free { .. } => Seen::Unbound,
            _ => Seen::Bound,
        }),
    }
}

/// The volume whose label is counted, in mL: where one nM in the tube stands for `1000 x volume` fmol on the counter.
fn counted_volume(protocol: &Protocol, seen: Seen) -> f64 {
    let s = &protocol.separation;
    let v = protocol.incubation.volume.base();
    match (seen, &s.counted) {
        (Seen::Added, _) => v * s.added_counted.as_ref().map_or(1.0, |a| a.base()),
        (Seen::Unbound, Counted::Free { aliquot }) => aliquot.base(),
        (
            Seen::Side(Side::Protein),
            Counted::BothSides {
                protein_aliquot: a, ..
            },
        )
        | (
            Seen::Side(Side::Ligand),
            Counted::BothSides {
                ligand_aliquot: a, ..
            },
        ) => a.base(),
        _ => v * s.fraction.base(),
    }
}

/// What one nM of label shows in a minute: counts at the nominal efficiency and at the time of the assay,
/// `efficiency x specific activity x 1000 x volume counted` (1 nM in 1 mL is 1000 fmol). Of a reader, how many nM in the volume that is
/// read one nM in the tube makes; the gain of the standards comes on top.
pub fn per_nm(protocol: &Protocol, seen: Seen) -> f64 {
    per_nm_with(protocol, seen, &mut Silent)
}

fn per_nm_with<W: Work>(protocol: &Protocol, seen: Seen, work: &mut W) -> f64 {
    let volume = counted_volume(protocol, seen);
    if let Counted::Signal { read_volume, .. } = &protocol.separation.counted {
        if seen == Seen::Standard {
            return 1.0;
        }
        let read = read_volume.as_ref().unwrap_or(&protocol.incubation.volume);
        let q = volume / read.base();
        work.step(|| {
            Step::new(
                "nM in the volume read for one nM in the tube",
                Value::new("q", q, ""),
                "v / u",
                [
                    Value::new("v", volume, "mL separated"),
                    Value::new("u", read.base(), "mL read"),
                ],
            )
        });
        return q;
    }
    let (e, a) = (protocol.counter.nominal_efficiency(), protocol.activity());
    let k = e * a * FMOL_PER_NM_ML * volume;
    work.step(|| {
        Step::new(
            "counts a minute for one nM",
            Value::new("k", k, "cpm/nM"),
            "E * A * 1000 * v",
            [
                Value::new("E", e, ""),
                Value::new("A", a, "dpm/fmol"),
                Value::new("v", volume, "mL counted"),
            ],
        )
    });
    k
}

/// Counts per minute for 1 nM bound in the tube; of a reader, before its gain.
pub fn counts_per_nm(protocol: &Protocol) -> f64 {
    per_nm(protocol, Seen::Bound)
}

/// The label's own story, for the working of a tube: decay from the activity date to the assay.
fn label_with<W: Work>(titration: &Titration, tube: &Tube, work: &mut W) -> Option<f64> {
    let p = &titration.protocol;
    let written = titration.level(tube.level?)?.added.base();
    let added = titration.added_nm(tube)?;
    if let (Some(d), Some(half_life), Some(aged)) = (
        p.label_decayed(),
        p.ligand.half_life_minutes(),
        p.aged_minutes(),
    ) {
        work.step(|| {
            Step::new(
                "label left since the activity date",
                Value::new("D", d.left, ""),
                "2 ^ (-dt / T)",
                [
                    Value::new("dt", aged, "min"),
                    Value::new("T", half_life, "min half-life"),
                ],
            )
        });
        decayed_steps(p, &d, work);
        work.step(|| {
            Step::new(
                "label added, at the time of the assay",
                Value::new("LT", added, "nM"),
                "L0 * c",
                [
                    Value::new("L0", written, "nM as written"),
                    Value::new("c", d.concentration, ""),
                ],
            )
        });
    } else {
        work.step(|| {
            let of = [Value::new("LT", added, "nM")];
            Step::new("label added", Value::new("LT", added, "nM"), "LT", of)
        });
    }
    Some(added)
}

/// Specific activity and concentration at the time of the assay, by what the label becomes.
fn decayed_steps<W: Work>(p: &Protocol, d: &super::decayed::Decayed, work: &mut W) {
    use super::decayed::Carrier;
    let atoms = f64::from(p.ligand.atoms());
    let then = Value::new("A0", p.ligand.specific_activity.base(), "dpm/fmol");
    let left = || Value::new("D", d.left, "");
    let n = || Value::new("n", atoms, "atoms of label");
    let f = || Value::new("f", d.labelled, "labelled");
    let (activity, of_activity, factor, of_factor) = match p.ligand.decay {
        None => return,
        Some(Carrier::CarrierFree) => ("A0", vec![then], "D ^ n", vec![left(), n()]),
        Some(Carrier::ProductInert) => (
            "A0 * D ^ n / (1 - f + f * D ^ n)",
            vec![then, left(), n(), f()],
            "1 - f + f * D ^ n",
            vec![f(), left(), n()],
        ),
        Some(Carrier::ProductBinds) => ("A0 * D", vec![then, left()], "1", vec![]),
    };
    work.step(|| {
        Step::new(
            "specific activity at the time of the assay",
            Value::new("A", d.activity, "dpm/fmol"),
            activity,
            of_activity,
        )
    });
    work.step(|| {
        Step::new(
            "ligand left of every level",
            Value::new("c", d.concentration, ""),
            factor,
            of_factor,
        )
    });
}

/// When a vial's turn comes in the run, in minutes from its start; none where the protocol has no run.
fn turn(titration: &Titration, tube: &Tube) -> Turn {
    let p = &titration.protocol;
    let since_start = p.counter.run.as_ref().map(|run| {
        let before = titration.tubes.iter().take_while(|t| t.no != tube.no);
        before
            .map(|t| p.minutes_for(t.role) + run.changer.base())
            .sum()
    });
    Turn {
        since_start,
        labelled: tube.role.labelled(),
    }
}

/// Whether the counts behind a reading of a tube can be known; `again` for a further one, whose time no run tells.
///
/// # Errors
/// What is missing, or what cannot be.
pub fn check_reading(
    titration: &Titration,
    tube: &Tube,
    reading: &Reading,
    again: bool,
) -> Result<(), ReadingError> {
    reading.check()?;
    let turn = turn(titration, tube);
    let counting = Counting::of(&titration.protocol);
    let known = again && titration.protocol.short_lived();
    let turn = Turn {
        since_start: turn.since_start.filter(|_| !known),
        ..turn
    };
    counting.observed(reading, turn, &mut Silent).map(|_| ())
}

/// The counts of a tube by a [`Counting`] that serves for many; with `flags`, readings that are flagged are left out.
pub fn observed_in(
    counting: &Counting,
    titration: &Titration,
    tube: &Tube,
    flags: bool,
) -> Option<Observed> {
    summed(counting, titration, tube, flags, &mut Silent)
}

fn summed<W: Work>(
    counting: &Counting,
    titration: &Titration,
    tube: &Tube,
    flags: bool,
    work: &mut W,
) -> Option<Observed> {
    let used = |k: &&Kept| !(flags && k.suspect.is_some());
    let kept = titration.kept(tube.no);
    if kept.is_empty() {
        return None;
    }
    let turn = turn(titration, tube);
    let (mut sum, mut n) = (Observed::default(), 0);
    for k in kept.iter().filter(used) {
        if let Ok(one) = counting.observed(&k.reading, turn, work) {
            sum = sum.plus(one);
            n += 1;
        }
    }
    if n > 1 {
        work.step(|| {
            let of = [Value::new("N", sum.counts, "counts")];
            let what = format!("{n} counts added up, and their minutes");
            Step::new(what, Value::new("N", sum.counts, "counts"), "N", of)
        });
    }
    (sum.minutes > 0.0).then_some(sum)
}

/// The counts of a tube; with `flags`, readings that are flagged are left out.
pub fn observed(titration: &Titration, tube: TubeNo, flags: bool) -> Option<Observed> {
    // Most tubes have no reading yet, or one that is simply counts.
    if titration.kept(tube).is_empty() {
        return None;
    }
    let counting = Counting::of(&titration.protocol);
    observed_in(&counting, titration, titration.tube(tube)?, flags)
}

/// The counts of a tube: those in use, or where every reading is flagged, all of them.
pub fn in_use(titration: &Titration, tube: TubeNo) -> Option<Observed> {
    observed(titration, tube, true).or_else(|| observed(titration, tube, false))
}

/// A concentration of label as counted.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Label {
    /// In nM.
    pub nm: f64,
    /// Its counting error (one standard deviation), background included, in nM.
    pub sd_nm: f64,
}

/// What a tube shows before any fit.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Measured {
    /// Bound label, nonspecific included, in nM in the tube.
    pub bound_nm: f64,
    /// Its counting error (one standard deviation) in nM.
    pub bound_sd_nm: f64,
    /// Free label in nM: label that can bind less label bound; where free is counted, as counted.
    pub free_nm: f64,
}

/// The label that a vial holds, as a concentration: in the tube for what is bound, what is added; in its own liquid for an aliquot.
///
/// The error is that of counting, sample and background: `sqrt(N/t^2 + N_b/t_b^2)` (Currie 1968,
/// Anal Chem 40:586; formula from memory). A vial of zero counts is given the error of one count,
/// since an error bar of no length would claim to know the rate. Of a reader, the error is that of the blank on both.
pub fn label(
    titration: &Titration,
    tube: &Tube,
    observed: Observed,
    background: Background,
) -> Option<Label> {
    label_of(titration, tube, observed, background, &mut Silent)
}

fn label_of<W: Work>(
    titration: &Titration,
    tube: &Tube,
    o: Observed,
    background: Background,
    work: &mut W,
) -> Option<Label> {
    let p = &titration.protocol;
    let seen = seen_as(p, tube)?;
    let signal = p.separation.counted.is_signal();
    let (b, w) = (background.cpm(), o.signal_minutes);
    let gain = if signal {
        calibration(titration, true)?.gain
    } else {
        1.0
    };
    let k = per_nm_with(p, seen, work) * gain;
    let net = (o.counts - b * o.minutes) / w;
    let unit = if signal { "signal" } else { "cpm" };
    let tau = p.counter.dead_minutes();
    let own = if signal {
        background.between * o.minutes
    } else {
        // Of counts corrected for dead time the variance is that much larger.
        let counts = o.counts.max(1.0);
        counts * (1.0 + tau * counts / o.minutes) + background.between * o.minutes.powi(2)
    };
    let sd = (own + background.variance * o.minutes.powi(2)).sqrt() / w;
    work.step(|| {
        Step::new(
            if signal {
                "signal less blank"
            } else {
                "net rate"
            },
            Value::new("R", net, unit).give_or_take(sd),
            "(N - b * t) / w",
            [
                Value::new("N", o.counts, if signal { "signal" } else { "counts" }),
                Value::new("b", b, unit).give_or_take(background.variance.sqrt()),
                Value::new("t", o.minutes, if signal { "readings" } else { "min" }),
                Value::new("w", w, if signal { "readings" } else { "min" }),
            ],
        )
    });
    work.step(|| error_step(background, o, (signal, tau, unit), sd));
    let nm = net / k;
    let found = Label { nm, sd_nm: sd / k };
    work.step(|| {
        let x = Value::new("x", nm, "nM").give_or_take(found.sd_nm);
        let what = match seen {
            Seen::Bound => "label bound, in the tube",
            Seen::Unbound => "label not bound, in the aliquot",
            Seen::Added => "label added, as counted",
            Seen::Side(Side::Protein) => "label on the protein side",
            Seen::Side(Side::Ligand) => "label on the ligand side",
            Seen::Standard => "label in the standard, as read",
        };
        if signal {
            let of = [
                Value::new("R", net, unit),
                Value::new("g", gain, "signal/nM"),
                Value::new("q", k / gain, ""),
            ];
            Step::new(what, x, "R / (g * q)", of)
        } else {
            let of = [Value::new("R", net, unit), Value::new("k", k, "cpm/nM")];
            Step::new(what, x, "R / k", of)
        }
    });
    Some(found)
}

/// The counting error of a net rate, with no more in its formula than there is to it.
fn error_step(
    background: Background,
    o: Observed,
    (signal, tau, unit): (bool, f64, &'static str),
    sd: f64,
) -> Step {
    let between = background.between > 0.0;
    let time = if signal { "readings" } else { "min" };
    let mut of = vec![
        Value::new("t", o.minutes, time),
        Value::new("eb", background.variance.sqrt(), unit),
        Value::new("w", o.signal_minutes, time),
    ];
    let counts = Value::new("n", o.counts.max(1.0), "counts, one at least");
    let dead = Value::new("d", tau, "min dead");
    let of_scatter = if signal {
        "of a blank"
    } else {
        "cpm^2 between vials"
    };
    let scatter = Value::new("s2", background.between, of_scatter);
    let formula = match (signal, tau > 0.0, between) {
        (true, ..) => {
            of.push(scatter);
            "sqrt(s2 * t + (t * eb) ^ 2) / w"
        }
        (_, false, false) => {
            of.push(counts);
            "sqrt(n + (t * eb) ^ 2) / w"
        }
        (_, true, false) => {
            of.extend([counts, dead]);
            "sqrt(n * (1 + d * n / t) + (t * eb) ^ 2) / w"
        }
        (_, false, true) => {
            of.extend([counts, scatter]);
            "sqrt(n + s2 * t ^ 2 + (t * eb) ^ 2) / w"
        }
        (_, true, true) => {
            of.extend([counts, dead, scatter]);
            "sqrt(n * (1 + d * n / t) + s2 * t ^ 2 + (t * eb) ^ 2) / w"
        }
    };
    let what = "error of that, of counting, one standard deviation";
    Step::new(what, Value::new("eR", sd, unit), formula, of)
}

/// The volume of a dialysis cell's protein side as filled over that at the end; one where no shift was measured.
pub fn volume_shift(protocol: &Protocol) -> f64 {
    match &protocol.separation.counted {
        Counted::BothSides {
            protein_after: Some(after),
            ..
        } => protocol.incubation.volume.base() / after.base(),
        _ => 1.0,
    }
}

/// Bound and free of a tube; none for vials that show neither.
///
/// Bound counted: bound is what was counted, free is the label that can bind less that. Free counted: the other way round. Both
/// sides counted: free is the ligand side, bound what the protein side has more, brought back to the volume it was filled with; it
/// stands with the protein side's vial.
pub fn measured(
    titration: &Titration,
    tube: &Tube,
    observed: Observed,
    background: Background,
) -> Option<Measured> {
    measured_with(titration, tube, observed, background, &mut Silent)
}

fn measured_with<W: Work>(
    titration: &Titration,
    tube: &Tube,
    observed: Observed,
    background: Background,
    work: &mut W,
) -> Option<Measured> {
    let p = &titration.protocol;
    let seen = seen_as(p, tube)?;
    if matches!(seen, Seen::Standard) {
        label_of(titration, tube, observed, background, work)?;
        return None;
    }
    let added = label_with(titration, tube, work)?;
    let x = label_of(titration, tube, observed, background, work)?;
    let (share, can_bind) = (p.ligand.bindable(), p.ligand.bindable() * added);
    let inputs = |rest: &[Value]| {
        let mut of = vec![
            Value::new("LT", added, "nM"),
            Value::new("p", share, "bindable"),
        ];
        of.extend_from_slice(rest);
        of
    };
    match seen {
        Seen::Standard | Seen::Added | Seen::Side(Side::Ligand) => None,
        Seen::Bound => {
            let free_nm = can_bind - x.nm;
            work.step(|| {
                let of = inputs(&[Value::new("x", x.nm, "nM bound")]);
                Step::new("free", Value::new("F", free_nm, "nM"), "LT * p - x", of)
            });
            Some(Measured {
                bound_nm: x.nm,
                bound_sd_nm: x.sd_nm,
                free_nm,
            })
        }
        Seen::Unbound => {
            let free_nm = x.nm - (added - can_bind);
            work.step(|| {
                let of = inputs(&[Value::new("x", x.nm, "nM")]);
                let what = "free, less the label that never binds";
                Step::new(what, Value::new("F", free_nm, "nM"), "x - LT * (1 - p)", of)
            });
            let bound_nm = can_bind - free_nm;
            work.step(|| {
                let of = inputs(&[Value::new("F", free_nm, "nM")]);
                let gives = Value::new("B", bound_nm, "nM").give_or_take(x.sd_nm);
                Step::new("bound", gives, "LT * p - F", of)
            });
            Some(Measured {
                bound_nm,
                bound_sd_nm: x.sd_nm,
                free_nm,
            })
        }
        Seen::Side(Side::Protein) => {
            let other = titration.other_side(tube)?;
            let free = label_of(
                titration,
                other,
                in_use(titration, other.no)?,
                background,
                work,
            )?;
            let shift = volume_shift(p);
            let bound_nm = (x.nm - free.nm) / shift;
            let bound_sd_nm = x.sd_nm.hypot(free.sd_nm) / shift;
            work.step(|| {
                Step::new(
                    "bound, in the protein side as filled",
                    Value::new("B", bound_nm, "nM").give_or_take(bound_sd_nm),
                    "(P - F) / s",
                    [
                        Value::new("P", x.nm, "nM").give_or_take(x.sd_nm),
                        Value::new("F", free.nm, "nM").give_or_take(free.sd_nm),
                        Value::new("s", shift, "filled/end"),
                    ],
                )
            });
            Some(Measured {
                bound_nm,
                bound_sd_nm,
                free_nm: free.nm,
            })
        }
    }
}

/// Every step from the readings of a tube to bound and free, as [`observed`] and [`measured`] take them; readings that are flagged are
/// taken only where there is no other.
pub fn working(titration: &Titration, tube: &Tube, background: Option<Background>) -> Vec<Step> {
    let mut steps = Vec::new();
    let counting = Counting::of(&titration.protocol);
    let flags = observed(titration, tube.no, true).is_some();
    let Some(o) = summed(&counting, titration, tube, flags, &mut steps) else {
        return steps;
    };
    if let Some(background) = background {
        steps.extend(super::blanks::steps(titration, &background));
        measured_with(titration, tube, o, background, &mut steps);
    }
    steps
}
