//! What became of the label: what was really added, what was lost, whether a reader is in line, whether nonspecific binding is in
//! proportion.

use super::counting::{BLANK_SDS, variance_nm};
use super::groups::Vial;
use super::line::{Line, quadratic, weighted_line};
use crate::assay::{
    Background, Counted, LevelNo, Made, Role, Side, Titration, TubeNo, calibration, per_nm,
    seen_as, volume_shift,
};
use crate::binding::{Hill, OneClass, TwoClasses};
use crate::fit::{Fit, FittedTube, Model, RackEvidence, f_upper_tail, t_quantile, t_two_sided};
use std::collections::BTreeMap;

/// The chance below which something is remarked on.
const REMARKED_BELOW: f64 = 0.05;
/// The least power of free that matters: over two powers of ten of free it makes a tenth of nonspecific binding.
const MATTERS: f64 = 0.02;
/// Where a single value is told from another, in standard deviations: the normal distribution's 2.5 %.
const ONE_FAR: f64 = 1.959963984540054;

/// A mean and its standard deviation.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Mean {
    /// The mean.
    pub value: f64,
    /// The standard deviation of the mean.
    pub sd: f64,
    /// Of how many.
    pub of: usize,
}

impl Mean {
    /// Of values, each with a standard deviation of its own. That of the mean is from their scatter, or from their own where that is more:
    /// a few values may agree by chance.
    fn of(values: &[(f64, f64)]) -> Option<Mean> {
        let n = values.len() as f64;
        if values.is_empty() {
            return None;
        }
        let value = values.iter().map(|v| v.0).sum::<f64>() / n;
        let squares: f64 = values.iter().map(|v| (v.0 - value).powi(2)).sum();
        let own = values.iter().map(|v| v.1 * v.1).sum::<f64>().sqrt() / n;
        let scatter = (squares / (n - 1.0).max(1.0) / n).sqrt();
        Some(Mean {
            value,
            sd: own.max(scatter),
            of: values.len(),
        })
    }

    /// Whether the mean is above (true) or below (false) a value by more than chance, two-sided at 5 % by Student's t; `None` where
    /// it is not told from it.
    pub fn told_from(self, value: f64) -> Option<bool> {
        let df = (self.of as f64 - 1.0).max(1.0);
        let far = if self.of == 1 {
            ONE_FAR
        } else {
            t_quantile(0.975, df)?
        };
        ((self.value - value).abs() > far * self.sd).then_some(self.value > value)
    }
}

/// Counted aliquots of a level's solution beside what is written.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct AddedLevel {
    /// The level.
    pub level: LevelNo,
    /// As written, at the time of the assay, in nM.
    pub nominal_nm: f64,
    /// As counted, the mean of its aliquots, in nM.
    pub counted_nm: f64,
    /// Its standard deviation: of counting, and once there is a fit of the tube CV too.
    pub sd_nm: f64,
    /// How many aliquots.
    pub aliquots: usize,
    /// As the fit has it, errors that all tubes share left out; none without a fit or a dilution error.
    pub fitted_nm: Option<f64>,
}

impl AddedLevel {
    /// Counted over nominal less one.
    pub fn difference(&self) -> f64 {
        self.counted_nm / self.nominal_nm - 1.0
    }

    /// Counted less nominal in standard deviations.
    pub fn distance(&self) -> f64 {
        (self.counted_nm - self.nominal_nm) / self.sd_nm
    }
}

/// Label found in tubes without receptor, of which the free label is counted.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct FoundLevel {
    /// The level.
    pub level: LevelNo,
    /// Found over what is written as added.
    pub over_added: f64,
    /// Its counting error.
    pub sd: f64,
    /// Found over what counted aliquots say was added.
    pub over_counted: Option<f64>,
}

/// Label found on both sides of a dialysis cell.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct CellFound {
    /// The vial of its protein side.
    pub tube: TubeNo,
    /// Found over added.
    pub share: f64,
    /// Its counting error.
    pub sd: f64,
}

/// Whether the standards of a reader are in line.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Linearity {
    /// The F ratio of a quadratic term.
    pub f: f64,
    /// Its degrees of freedom.
    pub df: [usize; 2],
    /// The chance of one as large.
    pub p: f64,
    /// The line bends down: high standards fall short.
    pub down: bool,
    /// The lowest standard, in nM, that has to go before the others are in line; where they bend down.
    pub from_nm: Option<f64>,
}

impl Linearity {
    /// Whether nothing speaks against a line.
    pub fn holds(self) -> bool {
        self.p >= REMARKED_BELOW
    }
}

/// What the standards of a reader say of it and of the tubes.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Standards {
    /// The highest mean signal of a standard.
    pub highest: f64,
    /// Vials that read above it.
    pub above: Vec<TubeNo>,
    /// Vials that read below the blank by more than [`BLANK_SDS`] standard deviations of a blank reading.
    pub below: Vec<TubeNo>,
    /// The first two neighbours of which the stronger standard reads less by more than chance: concentrations in nM. Standards in the
    /// wrong order do.
    pub falling: Option<[f64; 2]>,
    /// Whether they are in line; none without a fit, or with too few standards to tell.
    pub linearity: Option<Linearity>,
}

/// Whether nonspecific binding is in proportion to free label.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Proportional {
    /// Nonspecific tubes, or tubes without receptor.
    pub role: Role,
    /// Bound goes with free to the power of one more than this.
    pub exponent: f64,
    /// Its standard error.
    pub se: f64,
    /// The chance of one as far from zero, by Student's t on levels less two.
    pub p: f64,
    /// How many levels.
    pub levels: usize,
}

impl Proportional {
    /// Whether nothing speaks against it.
    pub fn holds(self) -> bool {
        self.p >= REMARKED_BELOW || self.exponent.abs() < MATTERS
    }
}

/// What became of the label.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct LabelFound {
    /// Counted aliquots of the levels' solutions.
    pub added: Vec<AddedLevel>,
    /// Their mean difference from what is written, as a share.
    pub added_difference: Option<Mean>,
    /// Label found in tubes without receptor.
    pub without_receptor: Vec<FoundLevel>,
    /// Its mean over what is written.
    pub found: Option<Mean>,
    /// Label found in dialysis cells.
    pub cells: Vec<CellFound>,
    /// Its mean over what was added.
    pub recovered: Option<Mean>,
    /// What the standards of a reader say.
    pub standards: Option<Standards>,
    /// Whether nonspecific binding is in proportion to free label, in nonspecific tubes and in tubes without receptor.
    pub proportional: Vec<Proportional>,
}

/// What became of the label; vials of which every reading is flagged are left out.
pub fn label_found(
    titration: &Titration,
    vials: &[Vial],
    background: Background,
    fit: Option<&Fit>,
) -> LabelFound {
    let used: Vec<&Vial> = vials.iter().filter(|v| !v.suspect).collect();
    let added = added(titration, &used, fit);
    let differences: Vec<(f64, f64)> = added
        .iter()
        .map(|a| (a.difference(), a.sd_nm / a.nominal_nm))
        .collect();
    let without_receptor = without_receptor(titration, &used, &added);
    let found: Vec<(f64, f64)> = without_receptor
        .iter()
        .map(|l| (l.over_added, l.sd))
        .collect();
    let cells = cells(titration, &used);
    let shares: Vec<(f64, f64)> = cells.iter().map(|c| (c.share, c.sd)).collect();
    let proportional = [Role::Nonspecific, Role::NoReceptor]
        .into_iter()
        .filter_map(|role| proportional(titration, &used, background, fit?, role));
    LabelFound {
        added_difference: Mean::of(&differences),
        added,
        found: Mean::of(&found),
        without_receptor,
        recovered: Mean::of(&shares),
        cells,
        standards: standards(titration, vials, background, fit),
        proportional: proportional.collect(),
    }
}

/// Vials of a role by their level, from the lowest concentration up.
fn by_level<'a>(t: &Titration, used: &[&'a Vial], role: Role) -> Vec<(LevelNo, Vec<&'a Vial>)> {
    let mut of: BTreeMap<LevelNo, Vec<&'a Vial>> = BTreeMap::new();
    for v in used.iter().copied().filter(|v| v.tube.role == role) {
        if let Some(level) = v.tube.level {
            of.entry(level).or_default().push(v);
        }
    }
    let levels = t.levels_by_concentration().into_iter();
    levels
        .filter_map(|l| Some((l.no, of.remove(&l.no)?)))
        .collect()
}

/// The tubes that a fit uses, by their number.
fn fitted_tubes(fit: &Fit) -> BTreeMap<TubeNo, &FittedTube> {
    let used = fit.tubes.iter().filter(|x| x.used);
    used.map(|x| (x.tube, x)).collect()
}

fn added(t: &Titration, used: &[&Vial], fit: Option<&Fit>) -> Vec<AddedLevel> {
    let levels = by_level(t, used, Role::Added);
    let errors = fit
        .filter(|_| !levels.is_empty())
        .map_or_else(BTreeMap::new, |f| dilution_errors(t, f));
    let one = |(level, vials): (LevelNo, Vec<&Vial>)| {
        let nominal_nm = t.level_nm(level)?;
        let (mut sum, mut variance, mut n) = (0.0, 0.0, 0.0);
        for v in &vials {
            let label = v.label?;
            let fitted = fit.and_then(|f| f.tubes.iter().find(|x| x.tube == v.tube.no));
            sum += label.nm;
            variance += fitted.map_or(label.sd_nm.powi(2), |x| x.variance / x.per_nm.powi(2));
            n += 1.0;
        }
        Some(AddedLevel {
            level,
            nominal_nm,
            counted_nm: sum / n,
            sd_nm: variance.sqrt() / n,
            aliquots: vials.len(),
            fitted_nm: errors.get(&level).map(|d| nominal_nm * d.exp()),
        })
    };
    levels.into_iter().filter_map(one).collect()
}

/// The errors of the levels' concentrations as fitted, logarithms.
fn dilution_errors(t: &Titration, fit: &Fit) -> BTreeMap<LevelNo, f64> {
    let columns = match fit.model {
        Model::OneClass => RackEvidence::<OneClass>::new(t, true).map(|e| e.dilution_columns()),
        Model::TwoClasses => RackEvidence::<TwoClasses>::new(t, true).map(|e| e.dilution_columns()),
        Model::Hill => RackEvidence::<Hill>::new(t, true).map(|e| e.dilution_columns()),
    };
    let columns = columns.map_or_else(Vec::new, |(_, columns)| columns);
    let at = |column: usize| fit.theta.get(column).copied();
    columns
        .into_iter()
        .filter_map(|c| Some((c.level, at(c.column)?)))
        .collect()
}

fn without_receptor(t: &Titration, used: &[&Vial], added: &[AddedLevel]) -> Vec<FoundLevel> {
    if !matches!(t.protocol.separation.counted, Counted::Free { .. }) {
        return Vec::new();
    }
    let one = |(level, vials): (LevelNo, Vec<&Vial>)| {
        let nominal = t.level_nm(level)?;
        let labels: Option<Vec<_>> = vials.iter().map(|v| v.label).collect();
        let labels = labels?;
        let n = labels.len() as f64;
        let found = labels.iter().map(|l| l.nm).sum::<f64>() / n;
        let variance: f64 = labels.iter().map(|l| l.sd_nm.powi(2)).sum();
        let counted = added.iter().find(|a| a.level == level);
        Some(FoundLevel {
            level,
            over_added: found / nominal,
            sd: variance.sqrt() / n / nominal,
            over_counted: counted.map(|a| found / a.counted_nm),
        })
    };
    by_level(t, used, Role::NoReceptor)
        .into_iter()
        .filter_map(one)
        .collect()
}

/// Label found in every cell, `(P v1 + F (vl - (v1 - v0))) / (LT vl)`: what the protein side gained in volume the ligand side lost.
fn cells(t: &Titration, used: &[&Vial]) -> Vec<CellFound> {
    let Counted::BothSides {
        protein_after,
        ligand_volume: Some(ligand),
        ..
    } = &t.protocol.separation.counted
    else {
        return Vec::new();
    };
    let (before, ligand) = (t.protocol.incubation.volume.base(), ligand.base());
    let after = protein_after.as_ref().map_or(before, |v| v.base());
    let rest = ligand - (after - before);
    let one = |v: &&Vial| {
        if v.tube.side != Some(Side::Protein) {
            return None;
        }
        let other = t.other_side(&v.tube)?;
        let free = used.iter().find(|o| o.tube.no == other.no)?.label?;
        let (protein, all) = (v.label?, v.added_nm? * ligand);
        Some(CellFound {
            tube: v.tube.no,
            share: (protein.nm * after + free.nm * rest) / all,
            sd: (protein.sd_nm * after).hypot(free.sd_nm * rest) / all,
        })
    };
    used.iter().filter_map(one).collect()
}

fn standards(
    t: &Titration,
    vials: &[Vial],
    background: Background,
    fit: Option<&Fit>,
) -> Option<Standards> {
    if !t.protocol.separation.counted.is_signal() {
        return None;
    }
    let highest = calibration(t, true)?.highest;
    let sd = background.between.sqrt();
    let outside = |is: &dyn Fn(f64, f64) -> bool| -> Vec<TubeNo> {
        let assayed = vials.iter().filter(|v| v.tube.role.assayed());
        assayed
            .filter(|v| {
                let n = v.observed.minutes;
                is(v.observed.counts / n, n)
            })
            .map(|v| v.tube.no)
            .collect()
    };
    Some(Standards {
        highest,
        above: outside(&|signal, _| signal > highest),
        below: outside(&|signal, n| {
            sd > 0.0 && signal < background.cpm() - BLANK_SDS * sd / n.sqrt()
        }),
        falling: falling(t, vials, sd),
        linearity: fit.and_then(|f| linearity(t, vials, f)),
    })
}

/// Neighbouring standards that fall where they should rise, by more than three standard deviations of blanks and a tenth of the
/// signal, more than tubes scatter.
fn falling(t: &Titration, vials: &[Vial], sd: f64) -> Option<[f64; 2]> {
    let mut means: BTreeMap<u16, (f64, f64, f64)> = BTreeMap::new();
    for v in vials.iter().filter(|v| !v.suspect) {
        let (Some(n), Some(nm)) = (v.tube.standard, t.standard_nm(&v.tube)) else {
            continue;
        };
        let of = means.entry(n).or_insert((nm, 0.0, 0.0));
        of.1 += v.observed.counts;
        of.2 += v.observed.minutes;
    }
    let mut all: Vec<[f64; 2]> = means.values().map(|(nm, sum, n)| [*nm, sum / n]).collect();
    all.sort_by(|a, b| a[0].total_cmp(&b[0]));
    all.windows(2)
        .find(|w| w[0][1] - w[1][1] > BLANK_SDS * sd + 0.1 * w[0][1].abs())
        .map(|w| [w[0][0], w[1][0]])
}

/// Whether a quadratic term in the standards' signals, blanks among them, is more than chance: its F ratio in a fit weighted by the
/// variances that the whole fit has.
fn linearity(t: &Titration, vials: &[Vial], fit: &Fit) -> Option<Linearity> {
    let mut points: Vec<[f64; 3]> = Vec::new();
    for v in vials.iter().filter(|v| !v.suspect) {
        let x = match v.tube.role {
            Role::Standard => t.standard_nm(&v.tube)?,
            Role::Background => 0.0,
            _ => continue,
        };
        let fitted = fit.tubes.iter().find(|f| f.tube == v.tube.no)?;
        let n = v.observed.minutes;
        points.push([x, v.observed.counts / n, n * n / fitted.variance]);
    }
    points.sort_by(|a, b| a[0].total_cmp(&b[0]));
    let whole = bent(&points)?;
    let mut found = Linearity {
        f: whole.0,
        df: [1, points.len() - 3],
        p: whole.1,
        down: whole.2 < 0.0,
        from_nm: None,
    };
    if found.holds() || !found.down {
        return Some(found);
    }
    while let Some(top) = points.last().map(|p| p[0]) {
        points.retain(|p| p[0] < top);
        found.from_nm = Some(top);
        match bent(&points) {
            Some((_, p, c)) if p < REMARKED_BELOW && c < 0.0 => {}
            _ => break,
        }
    }
    Some(found)
}

/// The F ratio of a quadratic term, its chance, and the term; `None` where there are too few concentrations to tell.
fn bent(points: &[[f64; 3]]) -> Option<(f64, f64, f64)> {
    let line = weighted_line(points)?;
    let (curve, term) = quadratic(points)?;
    let df = points.len().checked_sub(3).filter(|df| *df > 0)?;
    let f = ((line - curve) / (curve / df as f64)).max(0.0);
    Some((f, f_upper_tail(f, [1.0, df as f64])?, term))
}

/// Whether bound goes with free to the first power: `bound = a free^(1 + g)`, with the chance of `g`.
///
/// Means of levels are fitted as they are, not their logarithms, which few counts would bias and none would not have. Their
/// covariance is that of the tubes as the whole fit has it, that of the background, which all have in common, and that of the dilution
/// steps, which the tubes of a level, and in a serial dilution the levels, have in common; known but for a factor, which the
/// residuals give.
fn proportional(
    t: &Titration,
    used: &[&Vial],
    background: Background,
    fit: &Fit,
    role: Role,
) -> Option<Proportional> {
    let counted = &t.protocol.separation.counted;
    let (mut free, mut bound, mut variance, mut levels) = (vec![], vec![], vec![], vec![]);
    let mut by_background = vec![];
    let fitted = fitted_tubes(fit);
    for (level, vials) in by_level(t, used, role) {
        let (mut f, mut b, mut v2, mut g, mut n) = (0.0, 0.0, 0.0, 0.0, 0.0);
        for v in vials {
            if let (Some(m), Some(x)) = (v.measured, fitted.get(&v.tube.no)) {
                f += m.free_nm;
                b += m.bound_nm;
                v2 += variance_nm(t, x);
                g += leans_on_background(t, used, fit, v);
                n += 1.0;
            }
        }
        if n > 0.0 && f > 0.0 {
            free.push(f / n);
            bound.push(b / n);
            variance.push(v2 / (n * n));
            by_background.push(g / n);
            levels.push(level);
        }
    }
    let s_d = if counted.is_cell() {
        0.0
    } else {
        t.protocol.numbers.dilution_error.base()
    };
    let ways = ways(t, &levels);
    let shared = |i: usize, j: usize| shared_steps(&ways[i], &ways[j]) as f64;
    let by_label = |i: usize, expected: f64| match counted {
        Counted::Free { .. } => free[i],
        _ => expected,
    };
    let line = Line::power(&free, &bound, |expected| {
        let n = free.len();
        nalgebra::DMatrix::from_fn(n, n, |i, j| {
            let own = if i == j { variance[i] } else { 0.0 };
            let leans = by_label(i, expected[i]) * by_label(j, expected[j]);
            let common = background.variance * by_background[i] * by_background[j];
            own + common + s_d * s_d * leans * shared(i, j)
        })
    })?;
    let df = (free.len() - 2) as f64;
    Some(Proportional {
        role,
        exponent: line.exponent,
        se: line.se,
        p: t_two_sided(line.exponent / line.se, df)?,
        levels: free.len(),
    })
}

/// How much more bound a vial, or a cell, would show were the background one less, in nM.
fn leans_on_background(t: &Titration, used: &[&Vial], fit: &Fit, v: &Vial) -> f64 {
    let gain = fit.estimate("gain").map_or(1.0, |e| e.value);
    let of = |v: &Vial| {
        let k = seen_as(&t.protocol, &v.tube).map_or(f64::INFINITY, |s| per_nm(&t.protocol, s));
        v.observed.minutes / (v.observed.signal_minutes * k * gain)
    };
    let other = t.other_side(&v.tube).map(|o| o.no);
    let other = used.iter().find(|x| Some(x.tube.no) == other);
    (of(v) - other.map_or(0.0, |x| of(x))) / volume_shift(&t.protocol)
}

/// The steps that made the solutions of levels: for each, the levels on its way from the stock, the first from it first.
fn ways(t: &Titration, levels: &[LevelNo]) -> Vec<Vec<LevelNo>> {
    let made: BTreeMap<LevelNo, Made> = t.levels.iter().map(|l| (l.no, l.made)).collect();
    let way = |level: &LevelNo| {
        let mut way = vec![*level];
        // A ladder that goes in a circle is refused when it is laid; no way is longer than it has levels.
        while let (Some(Made::FromLevel(from)), true) = (
            way.last().and_then(|at| made.get(at)),
            way.len() < made.len(),
        ) {
            way.push(*from);
        }
        way.reverse();
        way
    };
    levels.iter().map(way).collect()
}

/// How many dilution steps two solutions have in common: ways from the stock part once.
fn shared_steps(a: &[LevelNo], b: &[LevelNo]) -> usize {
    a.iter().zip(b).take_while(|(x, y)| x == y).count()
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Means 0.5, 1.5 and 4.5 of two values each that are one apart: within the pairs 1.5 is left on three degrees of freedom, and the
    /// contrast 1, -2, 1 of the means brings 2 x 2^2 / 6 = 4/3, so that F is 8/3 (by hand). Weights of all points together and the
    /// unit of x do not matter.
    #[test]
    fn a_quadratic_term_by_hand() {
        for (unit, weight) in [(1.0, 1.0), (0.02, 1.0), (1.0, 7.0)] {
            let at = |x: f64, y: f64| [x * unit, y, weight];
            let points = [
                at(0.0, 0.0),
                at(0.0, 1.0),
                at(1.0, 1.0),
                at(1.0, 2.0),
                at(2.0, 4.0),
                at(2.0, 5.0),
            ];
            let (f, p, term) = bent(&points).unwrap();
            assert!((f - 8.0 / 3.0).abs() < 1e-12, "{f}");
            assert_eq!(p, f_upper_tail(f, [1.0, 3.0]).unwrap());
            // y = 0.5 + x^2 goes through the means.
            assert!((term * unit * unit - 1.0).abs() < 1e-12, "{term}");
            assert!(bent(&points[..4]).is_none());
        }
    }
}
