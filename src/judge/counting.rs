//! What the counts themselves can tell: limits of detection, counting errors, how long to count.

use super::groups::Vial;
use crate::assay::limits::{Limits, best_split, critical_specific, for_rates, minutes_for};
use crate::assay::{
    Background, LevelNo, Role, Seen, Side, Titration, TubeNo, calibration, per_nm, seen_as,
    volume_shift,
};
use crate::fit::{Fit, FittedTube};
use std::collections::BTreeMap;

/// A reader's signal is told from the blank where it is as many standard deviations of a blank reading above it (common practice).
pub const BLANK_SDS: f64 = 3.0;

/// Currie's limits for vials of a kind, or what stands for them with a reader.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct VialLimits {
    /// What is counted in them.
    pub seen: Seen,
    /// How long they are counted in minutes: the median of those read, or as the protocol has it.
    pub minutes: f64,
    /// Net counts a minute.
    pub cpm: Limits,
    /// The same in nM in the tube (in its own liquid for an aliquot of a side), with what decay and quench left of the median vial's signal.
    pub nm: Limits,
}

/// What a reader can tell from its blanks.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ReaderLimit {
    /// The standard deviation of a blank reading.
    pub blank_sd: f64,
    /// [`BLANK_SDS`] of them, in nM in the tube.
    pub nm: f64,
}

/// Where a vial's counts stand.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub enum Standing {
    /// Not told from background.
    Background,
    /// Above the critical level, below that of detection: there, but a vial like it would often be missed.
    Critical,
    /// Above the level of detection.
    Detected,
}

/// The counting of one vial.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct VialCounting {
    /// Which vial.
    pub tube: TubeNo,
    /// The counting error of its net rate as a share of it, background included; none where nothing is above background.
    pub relative_error: Option<f64>,
    /// Where it stands, by the limits for its own minutes.
    pub standing: Standing,
}

/// Whether total tubes of a level are above its nonspecific ones.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct LevelSpecific {
    /// The level.
    pub level: LevelNo,
    /// The mean bound of its total tubes less that of its nonspecific ones, in nM.
    pub difference_nm: f64,
    /// What it has to exceed to be told from nothing specific, in nM.
    pub critical_nm: f64,
    /// How many total and nonspecific tubes there are.
    pub tubes: [usize; 2],
}

impl LevelSpecific {
    /// Whether something specific is there.
    pub fn found(self) -> bool {
        self.difference_nm > self.critical_nm
    }
}

/// How long to count, for the total tubes of the lowest level.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Times {
    /// The level.
    pub level: LevelNo,
    /// Its mean net rate in cpm.
    pub net_cpm: f64,
    /// The counting error that is wanted, as a share of the net rate.
    pub aim: f64,
    /// Minutes for one tube and background together, at their best split, that leave it.
    pub wanted: f64,
    /// Of them for the tube.
    pub wanted_tube: f64,
    /// Minutes of all tubes and the background as they were counted.
    pub spent: f64,
    /// The same minutes at their best split: for each tube, and for the background.
    pub best: [f64; 2],
    /// The counting error of one tube, as shares of the net rate: where all vials are counted alike in the minutes they had, and at the
    /// best split.
    pub errors: [f64; 2],
}

/// What the counts can tell.
#[derive(Debug, Clone, PartialEq)]
pub struct CountStatistics {
    /// Limits for every kind of vial that goes through the assay; empty for a reader.
    pub limits: Vec<VialLimits>,
    /// What a reader can tell from its blanks.
    pub reader: Option<ReaderLimit>,
    /// Every vial with label that has a reading, in counting order.
    pub vials: Vec<VialCounting>,
    /// Specific binding of every level with total and nonspecific tubes; empty without a fit.
    pub levels: Vec<LevelSpecific>,
    /// How long to count; none for a reader, and before a total tube is read.
    pub times: Option<Times>,
}

impl CountStatistics {
    /// The vials that stand below a limit.
    pub fn below(&self, standing: Standing) -> impl Iterator<Item = TubeNo> + '_ {
        let those = self.vials.iter().filter(move |v| v.standing == standing);
        those.map(|v| v.tube)
    }
}

/// What the counts can tell; vials of which every reading is flagged count for themselves and not in means.
///
/// Limits are those of Currie for the vial's own minutes, with the background's variance as it is known. The critical level of specific
/// binding has in it the variance of a nonspecific tube as the fit has it, tube CV included.
pub fn count_statistics(
    titration: &Titration,
    vials: &[Vial],
    background: Background,
    fit: Option<&Fit>,
) -> CountStatistics {
    let signal = titration.protocol.separation.counted.is_signal();
    let reader = signal
        .then(|| reader_limit(titration, background))
        .flatten();
    CountStatistics {
        limits: if signal {
            Vec::new()
        } else {
            vial_limits(titration, vials, background)
        },
        reader,
        vials: vials
            .iter()
            .filter(|v| v.tube.role.labelled())
            .map(|v| vial_counting(v, background, signal))
            .collect(),
        levels: fit.map_or_else(Vec::new, |f| specific(titration, vials, f)),
        times: (!signal)
            .then(|| times(titration, vials, background))
            .flatten(),
    }
}

/// Limits in net cpm for a vial counted for so many minutes.
///
/// The background's variance may be more than that of its counts, so it comes in as the minutes that would leave it.
pub fn limits_for(background: Background, minutes: f64) -> Limits {
    let cpm = background.cpm();
    let as_minutes = if background.variance > 0.0 {
        cpm / background.variance
    } else {
        background.minutes
    };
    for_rates(cpm, minutes, as_minutes, background.between)
}

fn median(mut of: Vec<f64>) -> Option<f64> {
    of.sort_by(f64::total_cmp);
    let n = of.len();
    let (low, high) = (of.get(n.checked_sub(1)? / 2)?, of.get(n / 2)?);
    Some(0.5 * (low + high))
}

fn vial_limits(t: &Titration, vials: &[Vial], background: Background) -> Vec<VialLimits> {
    let p = &t.protocol;
    let mut kinds: Vec<Seen> = Vec::new();
    for tube in t.tubes.iter().filter(|x| x.role.assayed()) {
        let seen = seen_as(p, tube);
        kinds.extend(seen.filter(|s| !kinds.contains(s)));
    }
    let limits = |seen: Seen| {
        let of = || {
            vials
                .iter()
                .filter(|v| v.tube.role.assayed() && seen_as(p, &v.tube) == Some(seen))
        };
        let minutes = median(of().map(|v| v.observed.minutes).collect());
        let minutes = minutes.unwrap_or_else(|| p.minutes_for(Role::Total));
        let kept = median(
            of().map(|v| v.observed.signal_minutes / v.observed.minutes)
                .collect(),
        );
        let k = per_nm(p, seen) * kept.unwrap_or(1.0);
        if !(minutes > 0.0 && k > 0.0) {
            return None;
        }
        let cpm = limits_for(background, minutes);
        let nm = Limits {
            critical: cpm.critical / k,
            detection: cpm.detection / k,
            determination: cpm.determination / k,
        };
        Some(VialLimits {
            seen,
            minutes,
            cpm,
            nm,
        })
    };
    kinds.into_iter().filter_map(limits).collect()
}

fn reader_limit(t: &Titration, background: Background) -> Option<ReaderLimit> {
    let blank_sd = background.between.sqrt();
    let gain = calibration(t, true)?.gain * per_nm(&t.protocol, Seen::Bound);
    (blank_sd > 0.0).then_some(ReaderLimit {
        blank_sd,
        nm: BLANK_SDS * blank_sd / gain,
    })
}

fn vial_counting(v: &Vial, background: Background, signal: bool) -> VialCounting {
    let o = v.observed;
    let net = o.counts / o.minutes - background.cpm();
    let above = v.label.filter(|l| l.nm > 0.0);
    let (critical, detection) = if signal {
        let sd = (background.between / o.minutes).sqrt();
        (BLANK_SDS * sd, BLANK_SDS * sd)
    } else {
        let l = limits_for(background, o.minutes);
        (l.critical, l.detection)
    };
    VialCounting {
        tube: v.tube.no,
        relative_error: above.map(|l| l.sd_nm / l.nm),
        standing: if net <= critical {
            Standing::Background
        } else if net < detection {
            Standing::Critical
        } else {
            Standing::Detected
        },
    }
}

fn mean(of: &[f64]) -> f64 {
    of.iter().sum::<f64>() / of.len() as f64
}

/// The variance of a tube's bound label in nM^2 as the fit has it; of a dialysis cell, of what is brought back to the volume it was
/// filled with.
pub(super) fn variance_nm(t: &Titration, tube: &FittedTube) -> f64 {
    tube.variance / (tube.per_nm * volume_shift(&t.protocol)).powi(2)
}

fn specific(t: &Titration, vials: &[Vial], fit: &Fit) -> Vec<LevelSpecific> {
    let fitted: BTreeMap<TubeNo, &FittedTube> = fit
        .tubes
        .iter()
        .filter(|x| x.used)
        .map(|x| (x.tube, x))
        .collect();
    let mut of: BTreeMap<(LevelNo, Role), (Vec<f64>, Vec<f64>)> = BTreeMap::new();
    for v in vials {
        let (level, m, x) = (v.tube.level, v.measured, fitted.get(&v.tube.no));
        if let (Some(level), Some(m), Some(x)) = (level, m, x) {
            let (bound, variance) = of.entry((level, v.tube.role)).or_default();
            bound.push(m.bound_nm);
            variance.push(variance_nm(t, x));
        }
    }
    let one = |level: LevelNo| {
        let (totals, _) = of.get(&(level, Role::Total))?;
        let (others, variance) = of.get(&(level, Role::Nonspecific))?;
        Some(LevelSpecific {
            level,
            difference_nm: mean(totals) - mean(others),
            critical_nm: critical_specific(mean(variance), totals.len(), others.len()),
            tubes: [totals.len(), others.len()],
        })
    };
    t.levels_by_concentration()
        .into_iter()
        .filter_map(|l| one(l.no))
        .collect()
}

/// How long to count, by the total tubes of the lowest level of which one is read.
///
/// With `n` vials that share one background, each of gross rate `R`, the variance of one net rate in `T` minutes in all is least where the
/// vials together have the share that one vial of rate `n R` had (algebra on `R / ts + b / tb` with `n ts + tb = T`).
fn times(t: &Titration, vials: &[Vial], background: Background) -> Option<Times> {
    let ligand = |v: &&Vial| v.tube.side == Some(Side::Ligand);
    let of = |level: LevelNo| -> Vec<&Vial> {
        let those = vials.iter().filter(|v| !v.suspect && !ligand(v));
        those
            .filter(|v| v.tube.role == Role::Total && v.tube.level == Some(level))
            .collect()
    };
    let levels = t.levels_by_concentration();
    let (level, lowest) = levels
        .iter()
        .map(|l| (l.no, of(l.no)))
        .find(|(_, v)| !v.is_empty())?;
    let b = background.cpm();
    let counts: f64 = lowest.iter().map(|v| v.observed.counts).sum();
    let minutes: f64 = lowest.iter().map(|v| v.observed.minutes).sum();
    let gross = counts / minutes;
    let net = gross - b;
    if net <= 0.0 {
        return None;
    }
    let all = vials.iter().filter(|v| v.tube.role.labelled());
    let (n, tubes) = all.fold((0.0, 0.0), |(n, sum), v| {
        (n + 1.0, sum + v.observed.minutes)
    });
    let spent = tubes + background.minutes;
    let aim = t.protocol.counter.aim();
    let wanted = minutes_for(aim, net, b);
    let best = best_split(n * gross, b, spent);
    let now = (gross * n / tubes + background.variance).sqrt();
    Some(Times {
        level,
        net_cpm: net,
        aim,
        wanted,
        wanted_tube: best_split(gross, b, wanted).sample_minutes,
        spent,
        best: [best.sample_minutes / n, best.background_minutes],
        errors: [now / net, best.sd / net],
    })
}
